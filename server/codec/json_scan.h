/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One pass over JSON text before the parser sees it. The parser behind it is lax (it takes 01, 1.,
 * 1e999, raw control characters, bytes that are no UTF-8, doubled keys, and recurses as deep as the
 * text); this scan is strict (RFC 8259, and the I-JSON rules of RFC 7493 on keys and characters),
 * bounded, and names the place of the first fault. Callable from any thread. */
#ifndef LWD_JSON_SCAN_H
#define LWD_JSON_SCAN_H

#include <stdbool.h>
#include <stddef.h>

typedef struct lwd_scan_limits {
    size_t size;     /* bytes of text */
    unsigned depth;  /* nested arrays and objects, at most LWD_SCAN_DEPTH */
    size_t values;   /* values of every kind together */
} lwd_scan_limits;

enum { LWD_SCAN_DEPTH = 32, LWD_SCAN_NUMBER_SIZE = 60, LWD_POINTER_SIZE = 160 };

#define LWD_SCAN_QUESTION                                                                          \
    ((lwd_scan_limits){.size = 65536, .depth = LWD_SCAN_DEPTH, .values = 16384})
#define LWD_SCAN_DOCUMENT                                                                          \
    ((lwd_scan_limits){.size = 4194304, .depth = LWD_SCAN_DEPTH, .values = 131072})

typedef enum lwd_scan_kind {
    LWD_SCAN_OK,
    LWD_SCAN_SYNTAX,      /* not JSON */
    LWD_SCAN_NUMBER,      /* a number that is written wrongly, too long or not finite */
    LWD_SCAN_TEXT,        /* a string with what no string may hold */
    LWD_SCAN_DOUBLED,     /* a key twice in one object */
    LWD_SCAN_BOUND,       /* too large, too deep, too many values */
    LWD_SCAN_MEMORY
} lwd_scan_kind;

typedef struct lwd_scan_fault {
    lwd_scan_kind kind;
    size_t offset;   /* bytes from the start */
    size_t line;     /* from 1 */
    size_t column;   /* characters from 1 */
    char pointer[LWD_POINTER_SIZE]; /* RFC 6901, of the value or member at fault */
    char text[200];     /* what is wrong, one sentence without the place */
    char expected[80];
    char got[80];
} lwd_scan_fault;

/* True if the text may go to the parser; else the fault is filled. `fault` must not be NULL. */
bool lwd_json_scan(const char *text, size_t len, const lwd_scan_limits *limits,
                   lwd_scan_fault *fault);

#endif
