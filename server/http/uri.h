/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Takes a request target apart: path segments and query members, decoded and checked. Works on
 * the raw text, since the HTTP library's own decoding lets "%00" cut the path and "%2F" split it.
 * Pure functions. */
#ifndef LWD_HTTP_URI_H
#define LWD_HTTP_URI_H

#include <stdbool.h>
#include <stddef.h>

#include "../exchange.h"

enum { LWD_URL_MAX = 1024, LWD_SEGMENT_MAX = 12 };

typedef enum lwd_uri_fault {
    LWD_URI_OK,
    LWD_URI_TOO_LONG,  /* over LWD_URL_MAX bytes */
    LWD_URI_FORM,      /* neither "/path" nor "http://host/path" */
    LWD_URI_PATH_NUL,  /* %00 anywhere in the path */
    LWD_URI_PATH_CHAR, /* a segment with a character outside [A-Za-z0-9._-], or "." or ".." */
    LWD_URI_DEPTH,     /* more than LWD_SEGMENT_MAX segments */
    LWD_URI_QUERY_NUL,
    LWD_URI_QUERY_ESCAPE, /* '%' without two hexadecimal digits */
    LWD_URI_QUERY_CHAR,   /* control character or text that is no UTF-8 */
    LWD_URI_QUERY_COUNT   /* more than LWD_QUERY_MAX members */
} lwd_uri_fault;

typedef struct lwd_uri {
    char path[LWD_URL_MAX + 1];     /* decoded; "/a/b" */
    char segments[LWD_URL_MAX + 1]; /* decoded, each ended by a NUL */
    const char *segment[LWD_SEGMENT_MAX];
    size_t n_segment;
    char members[LWD_URL_MAX + 2];
    lwd_pair query[LWD_QUERY_MAX];
    size_t n_query;
} lwd_uri;

/* Fills uri from raw[len]; pointers in it point into itself. */
lwd_uri_fault lwd_uri_parse(lwd_uri *uri, const char *raw, size_t len);

/* Whether every byte sequence is well-formed UTF-8 (RFC 3629). */
bool lwd_utf8_ok(const char *text, size_t len);

#endif
