/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Writes JSON text into a buffer: commas and nesting are kept by the writer, the text is ASCII, and
 * numbers read back to the same bits. What cannot be written (a number that is not finite, a value
 * without a key, nesting that does not close) leaves the text valid as far as possible and sets
 * `failed`; check lwd_json_done once at the end. A writer belongs to one thread. */
#ifndef LWD_JSON_OUT_H
#define LWD_JSON_OUT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "../exchange.h"

enum { LWD_JSON_DEPTH = 32 };

typedef struct lwd_json {
    lwd_buf *buf;
    unsigned depth;
    unsigned char kind[LWD_JSON_DEPTH + 1];  /* '{', '[' or 0 at the top */
    bool filled[LWD_JSON_DEPTH + 1];         /* something stands at this level already */
    bool keyed;                              /* a key was written and waits for its value */
    bool failed;
} lwd_json;

/* Appends to buf; one value at the top. */
void lwd_json_init(lwd_json *json, lwd_buf *buf);
/* True if one whole value was written and nothing failed, in the buffer either. */
bool lwd_json_done(const lwd_json *json);

void lwd_json_object(lwd_json *json);
void lwd_json_array(lwd_json *json);
void lwd_json_end(lwd_json *json); /* closes the innermost object or array */
void lwd_json_key(lwd_json *json, const char *key);

void lwd_json_string(lwd_json *json, const char *text); /* NULL is written as null */
void lwd_json_string_len(lwd_json *json, const char *text, size_t len);
void lwd_json_number(lwd_json *json, double value);
void lwd_json_int(lwd_json *json, int64_t value);
void lwd_json_bool(lwd_json *json, bool value);
void lwd_json_null(lwd_json *json);
/* A value that is JSON text already, such as a stored report. Not checked. */
void lwd_json_raw(lwd_json *json, const char *text, size_t len);
/* [a, b, c] in one call. */
void lwd_json_numbers(lwd_json *json, const double *value, size_t n);

/* Key and value in one call. */
void lwd_json_put_object(lwd_json *json, const char *key);
void lwd_json_put_array(lwd_json *json, const char *key);
void lwd_json_put_string(lwd_json *json, const char *key, const char *text);
void lwd_json_put_number(lwd_json *json, const char *key, double value);
void lwd_json_put_int(lwd_json *json, const char *key, int64_t value);
void lwd_json_put_bool(lwd_json *json, const char *key, bool value);
void lwd_json_put_null(lwd_json *json, const char *key);
void lwd_json_put_numbers(lwd_json *json, const char *key, const double *value, size_t n);

#endif
