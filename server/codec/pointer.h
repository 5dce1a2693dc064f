/* SPDX-License-Identifier: GPL-3.0-or-later */
/* JSON pointers (RFC 6901) put together part by part: ~ and / are escaped, and a pointer that does
 * not fit ends at the last part that does. */
#ifndef LWD_POINTER_H
#define LWD_POINTER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>

typedef struct lwd_pointer {
    char *text;
    size_t size;
    size_t len;
    bool full;
} lwd_pointer;

static inline void lwd_pointer_init(lwd_pointer *p, char *text, size_t size)
{
    *p = (lwd_pointer){.text = text, .size = size};
    text[0] = '\0';
}

static inline void lwd_pointer_name(lwd_pointer *p, const char *name)
{
    size_t start = p->len;
    size_t at = start;
    if (p->full) {
        return;
    }
    p->text[at++] = '/';
    for (const char *c = name; *c != '\0'; c++) {
        bool escaped = *c == '~' || *c == '/';
        if (at + (escaped ? 2 : 1) >= p->size) {
            p->full = true;
            p->text[start] = '\0';
            return;
        }
        if (escaped) {
            p->text[at++] = '~';
            p->text[at++] = *c == '~' ? '0' : '1';
        } else {
            p->text[at++] = *c;
        }
    }
    if (at >= p->size) {
        p->full = true;
        at = start;
    }
    p->text[at] = '\0';
    p->len = at;
}

static inline void lwd_pointer_index(lwd_pointer *p, size_t index)
{
    char text[24];
    (void)snprintf(text, sizeof text, "%zu", index);
    lwd_pointer_name(p, text);
}

#endif
