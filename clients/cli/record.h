/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Appending questions and their answers to a replay file. */
#ifndef LWC_RECORD_H
#define LWC_RECORD_H

#include "json.h"

/* Makes sure, before anything is asked, that `file` can be appended to: it is new, or empty, or a
 * replay file. False after a complaint. */
bool lwc_record_check(const char *file);
/* Appends one question; writes the head first into a new file. False after a complaint. */
bool lwc_record_append(const char *file, const char *path, const cJSON *body, long status,
                       const cJSON *answer);
/* Replaces a file in one step: written beside it, flushed, then renamed. False after a
 * complaint; the old file is then as it was. */
bool lwc_replace_file(const char *file, const lwc_text *content);

#endif
