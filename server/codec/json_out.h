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
#include <string.h>

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
void lwd_json_key_text(lwd_json *json, const char *key);
/* The same; a key that is a literal in the source is written by moves of constant length. Such a
 * key must need no escape: tests/lint/banned.sh looks. */
static inline void lwd_json_key(lwd_json *json, const char *key)
{
    lwd_buf *buf = json->buf;
    if (__builtin_constant_p(strlen(key)) && !json->failed && !json->keyed
        && json->kind[json->depth] == '{' && buf->cap - buf->len > strlen(key) + 4
        && !buf->failed) {
        const size_t n = strlen(key);
        const bool comma = json->filled[json->depth];
        char *at = buf->data + buf->len - (comma ? 0 : 1);
        at[0] = comma ? ',' : '{'; /* behind the brace, that is written once more */
        at[1] = '"';
        memcpy(at + 2, key, n);
        memcpy(at + 2 + n, "\":", 3);
        buf->len = (size_t)(at + 4 + n - buf->data);
        json->keyed = true;
    } else {
        lwd_json_key_text(json, key);
    }
}

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
static inline void lwd_json_put_object(lwd_json *json, const char *key)
{
    lwd_json_key(json, key);
    lwd_json_object(json);
}

static inline void lwd_json_put_array(lwd_json *json, const char *key)
{
    lwd_json_key(json, key);
    lwd_json_array(json);
}

static inline void lwd_json_put_string(lwd_json *json, const char *key, const char *text)
{
    lwd_json_key(json, key);
    lwd_json_string(json, text);
}

static inline void lwd_json_put_number(lwd_json *json, const char *key, double value)
{
    lwd_json_key(json, key);
    lwd_json_number(json, value);
}

static inline void lwd_json_put_int(lwd_json *json, const char *key, int64_t value)
{
    lwd_json_key(json, key);
    lwd_json_int(json, value);
}

static inline void lwd_json_put_bool(lwd_json *json, const char *key, bool value)
{
    lwd_json_key(json, key);
    lwd_json_bool(json, value);
}

static inline void lwd_json_put_null(lwd_json *json, const char *key)
{
    lwd_json_key(json, key);
    lwd_json_null(json);
}

static inline void lwd_json_put_numbers(lwd_json *json, const char *key, const double *value,
                                        size_t n)
{
    lwd_json_key(json, key);
    lwd_json_numbers(json, value, n);
}

#endif
