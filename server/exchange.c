/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The growable text buffer and the reply's header list of exchange.h. No globals; a buffer belongs
 * to one thread at a time. */
#include "exchange.h"

#include <stdlib.h>
#include <string.h>

enum { BUF_FIRST = 512 };

void lwd_buf_init(lwd_buf *buf, size_t cap_max)
{
    buf->data = NULL;
    buf->len = 0;
    buf->cap = 0;
    buf->cap_max = cap_max;
    buf->failed = false;
}

void lwd_buf_clear(lwd_buf *buf)
{
    size_t cap_max = buf->cap_max;
    free(buf->data);
    lwd_buf_init(buf, cap_max);
}

void lwd_buf_reset(lwd_buf *buf)
{
    buf->len = 0;
    buf->failed = false;
    if (buf->data != NULL) {
        buf->data[0] = '\0';
    }
}

/* Makes room for `more` bytes and the NUL behind them. */
static bool buf_grow(lwd_buf *buf, size_t more)
{
    size_t want;
    size_t cap;
    char *data;

    if (more >= SIZE_MAX - buf->len) {
        return false;
    }
    want = buf->len + more + 1;
    if (want <= buf->cap) {
        return true;
    }
    if (buf->cap_max != 0 && want > buf->cap_max) {
        return false;
    }
    cap = buf->cap == 0 ? BUF_FIRST : buf->cap;
    while (cap < want) {
        cap = cap > SIZE_MAX / 2 ? want : cap * 2;
    }
    if (buf->cap_max != 0 && cap > buf->cap_max) {
        cap = buf->cap_max;
    }
    data = realloc(buf->data, cap);
    if (data == NULL) {
        return false;
    }
    buf->data = data;
    buf->cap = cap;
    return true;
}

bool lwd_buf_reserve(lwd_buf *buf, size_t more)
{
    return !buf->failed && buf_grow(buf, more);
}

bool lwd_buf_put(lwd_buf *buf, const char *text, size_t len)
{
    if (buf->failed) {
        return false;
    }
    if (!buf_grow(buf, len)) {
        buf->failed = true;
        return false;
    }
    if (len != 0) {
        memcpy(buf->data + buf->len, text, len);
    }
    buf->len += len;
    buf->data[buf->len] = '\0';
    return true;
}

bool lwd_buf_puts(lwd_buf *buf, const char *text)
{
    return lwd_buf_put(buf, text, strlen(text));
}

/* A header must not carry a line break or another control character into the answer's head. */
static bool header_text_ok(const char *text)
{
    for (; *text != '\0'; text++) {
        unsigned char c = (unsigned char)*text;
        if (c < 0x20 || c == 0x7f) {
            return false;
        }
    }
    return true;
}

bool lwd_reply_header(lwd_reply *reply, const char *name, const char *value)
{
    size_t name_len = strlen(name);
    size_t value_len = strlen(value);
    lwd_header *header;

    if (reply->n_header >= LWD_HEADER_MAX || name_len == 0 || name_len >= sizeof header->name ||
        value_len >= sizeof header->value || !header_text_ok(name) || !header_text_ok(value)) {
        return false;
    }
    header = &reply->header[reply->n_header];
    memcpy(header->name, name, name_len + 1);
    memcpy(header->value, value, value_len + 1);
    reply->n_header++;
    return true;
}
