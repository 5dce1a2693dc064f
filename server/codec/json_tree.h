/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The tree of JSON text that has passed lwd_json_scan; used by json_in.c only. Callable from any
 * thread. */
#ifndef LWD_JSON_TREE_H
#define LWD_JSON_TREE_H

#include <stddef.h>

#include "json_scan.h"

struct cJSON;

/* `values`: how many the scan counted. One block, to be given back with lwd_json_tree_free and
 * never with the library's own call; NULL if there is no memory. The text is no longer needed. */
struct cJSON *lwd_json_tree_new(const char *text, size_t len, size_t values);
void lwd_json_tree_free(struct cJSON *tree);

#endif
