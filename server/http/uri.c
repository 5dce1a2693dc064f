/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Request targets, see uri.h. RFC 3986 (generic syntax), RFC 9112 section 3.2 (forms); '+' for a
 * blank in a query follows the form encoding that browsers and PLC libraries send. */
#include "uri.h"

#include <string.h>
#include <strings.h>

static int hex_value(char c)
{
    if (c >= '0' && c <= '9') {
        return c - '0';
    }
    if (c >= 'a' && c <= 'f') {
        return c - 'a' + 10;
    }
    if (c >= 'A' && c <= 'F') {
        return c - 'A' + 10;
    }
    return -1;
}

bool lwd_utf8_ok(const char *text, size_t len)
{
    const unsigned char *s = (const unsigned char *)text;
    size_t i = 0;

    while (i < len) {
        unsigned char c = s[i];
        size_t more;
        unsigned low = 0x80;
        unsigned high = 0xbf;
        if (c < 0x80) {
            i++;
            continue;
        }
        if (c >= 0xc2 && c <= 0xdf) {
            more = 1;
        } else if (c >= 0xe0 && c <= 0xef) {
            more = 2;
            low = c == 0xe0 ? 0xa0u : 0x80u;  /* no overlong form */
            high = c == 0xed ? 0x9fu : 0xbfu; /* no surrogate */
        } else if (c >= 0xf0 && c <= 0xf4) {
            more = 3;
            low = c == 0xf0 ? 0x90u : 0x80u;
            high = c == 0xf4 ? 0x8fu : 0xbfu; /* not above U+10FFFF */
        } else {
            return false;
        }
        if (more >= len - i || s[i + 1] < low || s[i + 1] > high) {
            return false;
        }
        for (size_t k = 2; k <= more; k++) {
            if ((s[i + k] & 0xc0) != 0x80) {
                return false;
            }
        }
        i += more + 1;
    }
    return true;
}

static bool segment_char(char c)
{
    return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '.' ||
           c == '_' || c == '-';
}

/* One segment raw[len] decoded to *out, which moves on behind the ending NUL. */
static lwd_uri_fault take_segment(char **out, const char *raw, size_t len)
{
    char *start = *out;
    char *at = start;

    for (size_t i = 0; i < len; i++) {
        char c = raw[i];
        if (c == '%' && len - i >= 3 && hex_value(raw[i + 1]) >= 0 &&
            hex_value(raw[i + 2]) >= 0) {
            c = (char)(hex_value(raw[i + 1]) * 16 + hex_value(raw[i + 2]));
            i += 2;
            if (c == '\0') {
                return LWD_URI_PATH_NUL;
            }
        }
        if (!segment_char(c)) {
            return LWD_URI_PATH_CHAR;
        }
        *at++ = c;
    }
    *at++ = '\0';
    if (strcmp(start, ".") == 0 || strcmp(start, "..") == 0) {
        return LWD_URI_PATH_CHAR;
    }
    *out = at;
    return LWD_URI_OK;
}

static lwd_uri_fault parse_path(lwd_uri *uri, const char *raw, size_t len)
{
    char *out = uri->segments;
    char *path = uri->path;
    size_t start = 1; /* raw[0] is '/' */

    for (size_t i = 1; i <= len; i++) {
        lwd_uri_fault fault;
        size_t n;
        if (i < len && raw[i] != '/') {
            continue;
        }
        if (len == 1) {
            break; /* "/" has no segment */
        }
        if (uri->n_segment >= LWD_SEGMENT_MAX) {
            return LWD_URI_DEPTH;
        }
        uri->segment[uri->n_segment] = out;
        fault = take_segment(&out, raw + start, i - start);
        if (fault != LWD_URI_OK) {
            return fault;
        }
        n = (size_t)(out - uri->segment[uri->n_segment]) - 1;
        *path++ = '/';
        memcpy(path, uri->segment[uri->n_segment], n);
        path += n;
        uri->n_segment++;
        start = i + 1;
    }
    if (path == uri->path) {
        *path++ = '/';
    }
    *path = '\0';
    return LWD_URI_OK;
}

/* A name or a value decoded to *out, which moves on behind the ending NUL. */
static lwd_uri_fault take_text(char **out, const char *raw, size_t len)
{
    char *start = *out;
    char *at = start;

    for (size_t i = 0; i < len; i++) {
        char c = raw[i];
        if (c == '+') {
            c = ' ';
        } else if (c == '%') {
            if (len - i < 3 || hex_value(raw[i + 1]) < 0 || hex_value(raw[i + 2]) < 0) {
                return LWD_URI_QUERY_ESCAPE;
            }
            c = (char)(hex_value(raw[i + 1]) * 16 + hex_value(raw[i + 2]));
            i += 2;
            if (c == '\0') {
                return LWD_URI_QUERY_NUL;
            }
        }
        if ((unsigned char)c < 0x20 || c == 0x7f) {
            return LWD_URI_QUERY_CHAR;
        }
        *at++ = c;
    }
    if (!lwd_utf8_ok(start, (size_t)(at - start))) {
        return LWD_URI_QUERY_CHAR;
    }
    *at++ = '\0';
    *out = at;
    return LWD_URI_OK;
}

static lwd_uri_fault parse_member(lwd_uri *uri, char **out, const char *raw, size_t len)
{
    const char *equals = memchr(raw, '=', len);
    size_t name_len = equals != NULL ? (size_t)(equals - raw) : len;
    lwd_pair *pair = &uri->query[uri->n_query];
    lwd_uri_fault fault;

    pair->name = *out;
    fault = take_text(out, raw, name_len);
    if (fault != LWD_URI_OK) {
        return fault;
    }
    if (equals == NULL) {
        pair->value = "";
    } else {
        pair->value = *out;
        fault = take_text(out, equals + 1, len - name_len - 1);
    }
    uri->n_query++;
    return fault;
}

static lwd_uri_fault parse_query(lwd_uri *uri, const char *raw, size_t len)
{
    char *out = uri->members;
    size_t start = 0;

    for (size_t i = 0; i <= len; i++) {
        if (i < len && raw[i] != '&') {
            continue;
        }
        if (i > start) { /* nothing between two '&' is nothing */
            lwd_uri_fault fault;
            if (uri->n_query >= LWD_QUERY_MAX) {
                return LWD_URI_QUERY_COUNT;
            }
            fault = parse_member(uri, &out, raw + start, i - start);
            if (fault != LWD_URI_OK) {
                return fault;
            }
        }
        start = i + 1;
    }
    return LWD_URI_OK;
}

lwd_uri_fault lwd_uri_parse(lwd_uri *uri, const char *raw, size_t len)
{
    const char *query;
    size_t path_len;
    lwd_uri_fault fault;

    uri->n_segment = 0;
    uri->n_query = 0;
    uri->path[0] = '\0';
    if (len > LWD_URL_MAX) {
        return LWD_URI_TOO_LONG;
    }
    if (len >= 7 && strncasecmp(raw, "http://", 7) == 0) {
        /* The absolute form must be understood; which host it names makes no difference. */
        const char *slash = memchr(raw + 7, '/', len - 7);
        if (slash == NULL) {
            return LWD_URI_FORM;
        }
        len -= (size_t)(slash - raw);
        raw = slash;
    }
    if (len == 0 || raw[0] != '/') {
        return LWD_URI_FORM;
    }
    query = memchr(raw, '?', len);
    path_len = query != NULL ? (size_t)(query - raw) : len;
    fault = parse_path(uri, raw, path_len);
    if (fault == LWD_URI_OK && query != NULL) {
        fault = parse_query(uri, query + 1, len - path_len - 1);
    }
    return fault;
}
