/* SPDX-License-Identifier: GPL-3.0-or-later */
/* JSON for the command line: a strict look before parsing (grammar, UTF-8, depth, counts, doubled
 * names, finite numbers), parsing by cJSON, and an exact writer. cJSON alone accepts too much and
 * prints too little. */
#ifndef LWC_JSON_H
#define LWC_JSON_H

#include <cjson/cJSON.h>

#include "text.h"

enum {
    LWC_JSON_DEPTH_MAX = 64,
    LWC_JSON_VALUES_MAX = 2000000 /* about 200 MB of tree: far above any answer, still bounded */
};

typedef struct lwc_json_fault {
    size_t offset; /* bytes from the start */
    size_t line;   /* from 1 */
    size_t column; /* from 1, in bytes */
    char what[160];
} lwc_json_fault;

/* The tree (cJSON_Delete it), or NULL with the fault filled in. */
cJSON *lwc_json_parse(const char *data, size_t len, lwc_json_fault *fault);

/* Readers that accept NULL and anything else than an object: then there is nothing. */
const cJSON *lwc_json_get(const cJSON *object, const char *name);
const char *lwc_json_string(const cJSON *object, const char *name);
bool lwc_json_number(const cJSON *object, const char *name, double *out);
bool lwc_json_is_true(const cJSON *object, const char *name);
/* Takes the member out of the object and frees it. */
void lwc_json_drop(cJSON *object, const char *name);

/* Builders that end the program when memory runs out. `item` is taken. */
cJSON *lwc_json_object(void);
void lwc_json_put(cJSON *object, const char *name, cJSON *item);
void lwc_json_put_string(cJSON *object, const char *name, const char *string);
void lwc_json_put_number(cJSON *object, const char *name, double value);
cJSON *lwc_json_copy(const cJSON *item);
/* The object member of this name, made if it is not there. */
cJSON *lwc_json_room(cJSON *object, const char *name);

/* Compact text on one line; numbers read back to the same bits, the rest is ASCII-safe UTF-8. */
void lwc_json_write(lwc_text *out, const cJSON *item);
void lwc_json_write_string(lwc_text *out, const char *string);
/* Adds "/name" to a JSON pointer (RFC 6901), with ~ and / escaped. */
void lwc_pointer_add(lwc_text *pointer, const char *name);

#endif
