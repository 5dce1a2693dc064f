/* SPDX-License-Identifier: GPL-3.0-or-later */
/* UTF-8 as RFC 3629 allows it: no overlong forms, no surrogates, nothing above U+10FFFF. */
#ifndef LWD_UTF8_H
#define LWD_UTF8_H

#include <stddef.h>
#include <stdint.h>

/* Bytes of the character at p (left >= 1 bytes are there) and its code point; 0 if it is none. */
static inline size_t lwd_utf8_next(const unsigned char *p, size_t left, uint32_t *code)
{
    if (p[0] < 0x80) {
        *code = p[0];
        return 1;
    }
    size_t n = p[0] >= 0xf0 ? 4 : p[0] >= 0xe0 ? 3 : 2;
    if (p[0] < 0xc2 || p[0] > 0xf4 || n > left) {
        return 0;
    }
    uint32_t c = p[0] & (0x7fu >> n);
    for (size_t i = 1; i < n; i++) {
        if ((p[i] & 0xc0) != 0x80) {
            return 0;
        }
        c = c << 6 | (p[i] & 0x3fu);
    }
    static const uint32_t least[5] = {0, 0, 0x80, 0x800, 0x10000};
    if (c < least[n] || c > 0x10ffff || (c >= 0xd800 && c <= 0xdfff)) {
        return 0;
    }
    *code = c;
    return n;
}

/* Writes a code point; returns the number of bytes (at most 4). */
static inline size_t lwd_utf8_put(char *out, uint32_t c)
{
    if (c < 0x80) {
        out[0] = (char)c;
        return 1;
    }
    if (c < 0x800) {
        out[0] = (char)(0xc0 | c >> 6);
        out[1] = (char)(0x80 | (c & 0x3f));
        return 2;
    }
    if (c < 0x10000) {
        out[0] = (char)(0xe0 | c >> 12);
        out[1] = (char)(0x80 | (c >> 6 & 0x3f));
        out[2] = (char)(0x80 | (c & 0x3f));
        return 3;
    }
    out[0] = (char)(0xf0 | c >> 18);
    out[1] = (char)(0x80 | (c >> 12 & 0x3f));
    out[2] = (char)(0x80 | (c >> 6 & 0x3f));
    out[3] = (char)(0x80 | (c & 0x3f));
    return 4;
}

#endif
