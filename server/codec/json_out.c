/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The JSON writer. Every value passes through begin(), which sets the comma and notices values that
 * stand where none may. */
#include "json_out.h"

#include <string.h>

#include "number.h"
#include "utf8.h"

void lwd_json_init(lwd_json *json, lwd_buf *buf)
{
    *json = (lwd_json){.buf = buf};
}

bool lwd_json_done(const lwd_json *json)
{
    return json->depth == 0 && json->filled[0] && !json->failed && !json->buf->failed;
}

static inline void put(lwd_json *json, const char *text, size_t len)
{
    lwd_buf *buf = json->buf;
    if (buf->cap - buf->len > len && !buf->failed) { /* the common case, without a call */
        memcpy(buf->data + buf->len, text, len);
        buf->len += len;
        buf->data[buf->len] = '\0';
    } else {
        (void)lwd_buf_put(buf, text, len);
    }
}

/* A value is about to be written; false if it must not be. */
static bool begin(lwd_json *json)
{
    if (json->failed) {
        return false;
    }
    bool *filled = &json->filled[json->depth];
    unsigned char kind = json->kind[json->depth];
    if ((kind == '{') != json->keyed || (kind == 0 && *filled)) {
        json->failed = true;
        return false;
    }
    if (kind == '[' && *filled) {
        put(json, ",", 1);
    }
    json->keyed = false;
    *filled = true;
    return true;
}

static void open_level(lwd_json *json, char kind)
{
    if (json->depth >= LWD_JSON_DEPTH) {
        json->failed = true;
    }
    if (!begin(json)) {
        return;
    }
    put(json, &kind, 1);
    json->depth++;
    json->kind[json->depth] = (unsigned char)kind;
    json->filled[json->depth] = false;
}

void lwd_json_object(lwd_json *json)
{
    open_level(json, '{');
}

void lwd_json_array(lwd_json *json)
{
    open_level(json, '[');
}

void lwd_json_end(lwd_json *json)
{
    if (json->failed) {
        return;
    }
    if (json->depth == 0 || json->keyed) {
        json->failed = true;
        return;
    }
    put(json, json->kind[json->depth] == '{' ? "}" : "]", 1);
    json->depth--;
}

/* \uXXXX of one UTF-16 unit. */
static void put_escape(lwd_json *json, uint32_t unit)
{
    static const char digit[] = "0123456789abcdef";
    char text[6] = {'\\', 'u', digit[unit >> 12 & 15], digit[unit >> 8 & 15], digit[unit >> 4 & 15],
                    digit[unit & 15]};
    put(json, text, sizeof text);
}

static void put_special(lwd_json *json, uint32_t c)
{
    static const char plain[] = "\"\\\b\f\n\r\t";
    static const char letter[] = "\"\\bfnrt";
    const char *at = c != 0 && c < 0x80 ? strchr(plain, (int)c) : NULL;
    if (at != NULL) {
        char text[2] = {'\\', letter[at - plain]};
        put(json, text, 2);
    } else if (c < 0x10000) {
        put_escape(json, c);
    } else {
        put_escape(json, 0xd800 + ((c - 0x10000) >> 10));
        put_escape(json, 0xdc00 + ((c - 0x10000) & 0x3ff));
    }
}

/* 1: the byte stands in quotes as it is: 0x20 to 0x7e without '"' and '\\'. */
#define EIGHT 1, 1, 1, 1, 1, 1, 1, 1
static const unsigned char unescaped[256] = {
    [0x20] = 1, 1, 0, 1, 1, 1, 1, 1, EIGHT, EIGHT, EIGHT, EIGHT, EIGHT, EIGHT,
    [0x58] = 1, 1, 1, 1, 0, 1, 1, 1, EIGHT, EIGHT, EIGHT, 1, 1, 1, 1, 1, 1, 1};
#undef EIGHT

/* Text without anything to escape, where there is room for it: nearly all words. */
static bool put_plain_text(lwd_buf *buf, const char *text, size_t len)
{
    if (buf->failed || buf->cap - buf->len <= len + 2) {
        return false;
    }
    char *out = buf->data + buf->len;
    unsigned all = 1;
    for (size_t i = 0; i < len; i++) {
        all &= unescaped[(unsigned char)text[i]];
        out[i + 1] = text[i];
    }
    if (all == 0) {
        out[0] = '\0';
        return false;
    }
    out[0] = '"';
    out[len + 1] = '"';
    out[len + 2] = '\0';
    buf->len += len + 2;
    return true;
}

/* Quoted text. A byte that is no UTF-8 becomes U+FFFD: text from outside must not spoil a reply. */
static void put_text(lwd_json *json, const char *text, size_t len)
{
    const unsigned char *p = (const unsigned char *)text;
    const unsigned char *end = p + len;
    if (put_plain_text(json->buf, text, len)) {
        return;
    }
    put(json, "\"", 1);
    while (p < end) {
        const unsigned char *run = p;
        while (p < end && unescaped[*p] != 0) {
            p++;
        }
        put(json, (const char *)run, (size_t)(p - run));
        if (p < end) {
            uint32_t c = 0xfffd;
            size_t n = lwd_utf8_next(p, (size_t)(end - p), &c);
            put_special(json, c);
            p += n == 0 ? 1 : n;
        }
    }
    put(json, "\"", 1);
}

enum { KEY_ROOM = 64 }; /* of the keys written in one go; longer ones go the long way */

/* Writes comma, quotes, key and colon at `at`, where KEY_ROOM + 4 bytes are free; the place behind
 * them, NULL for a key that is long or has something to escape. */
static inline char *plain_key(char *at, const char *key, bool comma)
{
    *at = ',';
    at += comma ? 1 : 0;
    *at++ = '"';
    const char *end = key + KEY_ROOM;
    while (key < end && unescaped[(unsigned char)*key] != 0) {
        *at++ = *key++;
    }
    if (*key != '\0') {
        return NULL;
    }
    *at++ = '"';
    *at++ = ':';
    return at;
}

/* Whether `more` bytes and a NUL fit without growing the buffer. */
static inline bool has_room(const lwd_buf *buf, size_t more)
{
    return buf->cap - buf->len > more && !buf->failed;
}

/* Whether a key may stand here; says that the writer failed otherwise. */
static inline bool key_may_stand(lwd_json *json)
{
    if (!json->failed && json->kind[json->depth] == '{' && !json->keyed) {
        return true;
    }
    json->failed = true;
    return false;
}

void lwd_json_key_text(lwd_json *json, const char *key)
{
    if (!key_may_stand(json)) {
        return;
    }
    lwd_buf *buf = json->buf;
    bool comma = json->filled[json->depth];
    char *at = has_room(buf, KEY_ROOM + 4) ? plain_key(buf->data + buf->len, key, comma) : NULL;
    if (at != NULL) {
        *at = '\0';
        buf->len = (size_t)(at - buf->data);
    } else {
        if (comma) {
            put(json, ",", 1);
        }
        put_text(json, key, strlen(key));
        put(json, ":", 1);
    }
    json->keyed = true;
}

void lwd_json_string_len(lwd_json *json, const char *text, size_t len)
{
    if (begin(json)) {
        put_text(json, text, len);
    }
}

void lwd_json_string(lwd_json *json, const char *text)
{
    if (text == NULL) {
        lwd_json_null(json);
    } else {
        lwd_json_string_len(json, text, strlen(text));
    }
}

void lwd_json_number(lwd_json *json, double value)
{
    char text[LWD_NUMBER_SIZE];
    lwd_buf *buf = json->buf;
    if (!begin(json)) {
        return;
    }
    if (has_room(buf, LWD_NUMBER_SIZE)) { /* in its place at once */
        size_t len = lwd_number_put(buf->data + buf->len, value);
        buf->len += len;
        buf->data[buf->len] = '\0';
        if (len != 0) {
            return;
        }
    }
    size_t n = lwd_number_put(text, value);
    if (n == 0) { /* not finite: the text stays JSON, the reply must not go out */
        put(json, "0", 1);
        json->failed = true;
        return;
    }
    put(json, text, n);
}

void lwd_json_int(lwd_json *json, int64_t value)
{
    char text[LWD_NUMBER_SIZE];
    if (begin(json)) {
        put(json, text, lwd_number_put_int(text, value));
    }
}

void lwd_json_bool(lwd_json *json, bool value)
{
    lwd_json_raw(json, value ? "true" : "false", value ? 4 : 5);
}

void lwd_json_null(lwd_json *json)
{
    lwd_json_raw(json, "null", 4);
}

void lwd_json_raw(lwd_json *json, const char *text, size_t len)
{
    if (begin(json)) {
        put(json, text, len);
    }
}

void lwd_json_numbers(lwd_json *json, const double *value, size_t n)
{
    lwd_json_array(json);
    for (size_t i = 0; i < n; i++) {
        lwd_json_number(json, value[i]);
    }
    lwd_json_end(json);
}
