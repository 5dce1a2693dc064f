/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The judges of guard.h. Framing follows RFC 9112 section 6, made stricter. */
#include "guard.h"

#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <strings.h>

#include "../negotiate.h"

static const struct {
    int code;
    int status;
    const char *slug;
    const char *title;
} table[] = {
#define X(id, code, status, slug, title) {code, status, slug, title},
    LWD_HTTP_PROBLEM_LIST(X)
#undef X
};

void lwd_http_problem_fill(lwd_problem *out, lwd_http_problem problem)
{
    memset(out, 0, sizeof *out);
    out->status = table[problem].status;
    out->code = table[problem].code;
    out->slug = table[problem].slug;
    out->title = table[problem].title;
}

bool lwd_refuse(lwd_refusal *refusal, lwd_http_problem problem, lwd_refused reason,
                const char *format, ...)
{
    va_list args;

    refusal->problem = problem;
    refusal->reason = reason;
    refusal->at_once = false;
    refusal->expected[0] = '\0';
    refusal->got[0] = '\0';
    va_start(args, format);
    vsnprintf(refusal->detail, sizeof refusal->detail, format, args);
    va_end(args);
    return false;
}

/* A refusal after which nothing more can be read from the connection. */
static bool refuse_framing(lwd_refusal *refusal, const char *detail)
{
    (void)lwd_refuse(refusal, LWD_P_FRAMING, LWD_REFUSED_FRAMING, "%s", detail);
    refusal->at_once = true;
    return false;
}

/* Copies foreign text into a problem's member: printable ASCII only, cut where too long. */
static void quote(char *out, size_t size, const char *text)
{
    size_t i = 0;
    for (; text[i] != '\0' && i + 1 < size; i++) {
        out[i] = text[i] >= 0x20 && text[i] < 0x7f ? text[i] : '?';
    }
    out[i] = '\0';
}

/* RFC 9110 section 5.6.2. */
static bool token_char(char c)
{
    return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') ||
           (c != '\0' && strchr("!#$%&'*+-.^_`|~", c) != NULL);
}

static bool name_ok(const char *name, size_t len)
{
    for (size_t i = 0; i < len; i++) {
        if (!token_char(name[i])) {
            return false;
        }
    }
    return len > 0;
}

static bool value_ok(const char *value, size_t len)
{
    for (size_t i = 0; i < len; i++) {
        unsigned char c = (unsigned char)value[i];
        if ((c < 0x20 && c != '\t') || c == 0x7f) {
            return false;
        }
    }
    return true;
}

static bool name_is(const char *name, size_t len, const char *wanted)
{
    return len == strlen(wanted) && strncasecmp(name, wanted, len) == 0;
}

void lwd_head_add(lwd_head *head, const char *name, size_t name_len, const char *value,
                  size_t value_len)
{
    const char **slot = NULL;
    unsigned *count = NULL;

    if (!name_ok(name, name_len)) {
        head->bad_name = true;
        return;
    }
    if (!value_ok(value, value_len)) {
        head->bad_value = true;
        return;
    }
    switch (name[0] | 0x20) {
    case 'h':
        if (name_is(name, name_len, "host")) {
            slot = &head->host;
            count = &head->n_host;
        }
        break;
    case 'c':
        if (name_is(name, name_len, "content-length")) {
            slot = &head->content_length;
            count = &head->n_content_length;
        } else if (name_is(name, name_len, "content-type")) {
            slot = &head->content_type;
            count = &head->n_content_type;
        }
        break;
    case 't':
        if (name_is(name, name_len, "transfer-encoding")) {
            slot = &head->transfer_encoding;
            count = &head->n_transfer_encoding;
        } else if (name_is(name, name_len, "traceparent")) {
            head->traceparent = value;
        }
        break;
    case 'e':
        if (name_is(name, name_len, "expect")) {
            slot = &head->expect;
            count = &head->n_expect;
        }
        break;
    case 'a':
        if (name_is(name, name_len, "authorization")) {
            slot = &head->authorization;
            count = &head->n_authorization;
        }
        break;
    default:
        break;
    }
    if (slot != NULL) {
        *slot = value;
        (*count)++;
    }
}

static bool length_parse(uint64_t *out, const char *text)
{
    uint64_t value = 0;
    size_t len = strlen(text);

    if (len == 0 || len > 18 || strspn(text, "0123456789") != len) {
        return false;
    }
    for (size_t i = 0; i < len; i++) {
        value = value * 10 + (uint64_t)(text[i] - '0');
    }
    *out = value;
    return true;
}

bool lwd_guard_framing(lwd_refusal *refusal, lwd_head *head)
{
    head->body_len = 0;
    head->chunked = false;
    if (head->bad_name) {
        return refuse_framing(refusal, "A header name holds a blank or another character that no "
                                       "header name may have.");
    }
    if (head->bad_value) {
        return refuse_framing(refusal, "A header value holds a control character.");
    }
    if (head->n_content_length > 1) {
        return refuse_framing(refusal, "Content-Length is given more than once.");
    }
    if (head->n_transfer_encoding > 0 && head->n_content_length > 0) {
        return refuse_framing(refusal, "Content-Length and Transfer-Encoding are both given; send "
                                       "one of them.");
    }
    if (head->n_transfer_encoding > 1 ||
        (head->n_transfer_encoding == 1 && strcasecmp(head->transfer_encoding, "chunked") != 0)) {
        return refuse_framing(refusal, "Transfer-Encoding must be exactly \"chunked\".");
    }
    if (head->n_transfer_encoding == 1 && head->http_1_0) {
        return refuse_framing(refusal, "HTTP/1.0 knows no Transfer-Encoding.");
    }
    if (head->n_content_length == 1 && !length_parse(&head->body_len, head->content_length)) {
        return refuse_framing(refusal, "Content-Length must be a plain decimal number.");
    }
    if (head->n_host > 1) {
        return refuse_framing(refusal, "Host is given more than once.");
    }
    head->chunked = head->n_transfer_encoding == 1;
    if (head->n_authorization > 1 || head->n_content_type > 1) {
        return lwd_refuse(refusal, LWD_P_HEADER, LWD_REFUSED_MALFORMED,
                          "%s is given more than once.",
                          head->n_authorization > 1 ? "Authorization" : "Content-Type");
    }
    if (head->n_expect > 1 ||
        (head->n_expect == 1 && strcasecmp(head->expect, "100-continue") != 0)) {
        (void)lwd_refuse(refusal, LWD_P_EXPECT, LWD_REFUSED_MALFORMED,
                         "The only expectation that is understood is 100-continue.");
        refusal->at_once = true;
        return false;
    }
    return true;
}

bool lwd_guard_uri(lwd_refusal *refusal, const lwd_uri *uri, lwd_uri_fault fault)
{
    static const char *const detail[] = {
        [LWD_URI_OK] = "",
        [LWD_URI_TOO_LONG] = "",
        [LWD_URI_FORM] = "The URL must begin with a slash.",
        [LWD_URI_PATH_NUL] = "The path holds %00; no name has a NUL in it.",
        [LWD_URI_PATH_CHAR] = ("Each part of the path may hold A-Z, a-z, 0-9, '.', '_' and '-' "
                               "only, and may not be \".\" or \"..\"."),
        [LWD_URI_DEPTH] = "The path has too many parts.",
        [LWD_URI_QUERY_NUL] = "The query holds %00; no member has a NUL in it.",
        [LWD_URI_QUERY_ESCAPE] = "In the query a '%' must be followed by two hexadecimal digits.",
        [LWD_URI_QUERY_CHAR] = "The query holds a control character or text that is not UTF-8.",
        [LWD_URI_QUERY_COUNT] = "The query has too many members."};

    if (fault == LWD_URI_OK) {
        for (size_t i = 0; i < uri->n_query; i++) {
            if (strcmp(uri->query[i].name, "access_token") == 0) {
                return lwd_refuse(refusal, LWD_P_TOKEN_IN_URL, LWD_REFUSED_TOKEN,
                                  "URLs end up in logs: send the token in an Authorization header "
                                  "as \"Bearer TOKEN\", and replace this one.");
            }
        }
        return true;
    }
    if (fault == LWD_URI_TOO_LONG) {
        return lwd_refuse(refusal, LWD_P_URL_LONG, LWD_REFUSED_URL,
                          "A URL may have %d bytes; ask a longer question by POST.", LWD_URL_MAX);
    }
    return lwd_refuse(refusal, LWD_P_URL, LWD_REFUSED_URL, "%s", detail[fault]);
}

/* Whether the text before an optional ":port" is a loopback name or address. */
static bool host_is_loopback(const char *host)
{
    const char *end;
    size_t len;

    if (host[0] == '[') {
        return strncmp(host, "[::1]", 5) == 0 && (host[5] == '\0' || host[5] == ':');
    }
    end = strchr(host, ':');
    len = end != NULL ? (size_t)(end - host) : strlen(host);
    if (len == 9 && strncasecmp(host, "localhost", 9) == 0) {
        return true;
    }
    /* 127.0.0.0/8, written as four numbers */
    if (len < 9 || len > 15 || strncmp(host, "127.", 4) != 0) {
        return false;
    }
    for (size_t i = 0; i < len; i++) {
        if (host[i] != '.' && (host[i] < '0' || host[i] > '9')) {
            return false;
        }
    }
    return true;
}

bool lwd_guard_host(lwd_refusal *refusal, const lwd_head *head)
{
    if (head->host == NULL || host_is_loopback(head->host)) {
        return true;
    }
    (void)lwd_refuse(refusal, LWD_P_HOST, LWD_REFUSED_HOST,
                     "This service knows no tokens, so it answers under loopback names only. Start "
                     "it with a token file to serve it under other names.");
    (void)snprintf(refusal->expected, sizeof refusal->expected, "localhost, 127.x.x.x or [::1]");
    quote(refusal->got, sizeof refusal->got, head->host);
    return false;
}

bool lwd_guard_accept(lwd_refusal *refusal, const lwd_head *head)
{
    static const char *const sent[] = {"application/json",
                                       "application/problem+json",
                                       "text/plain",
                                       "application/openmetrics-text",
                                       "text/event-stream",
                                       "text/csv",
                                       "image/svg+xml",
                                       "image/png"};

    for (size_t i = 0; i < sizeof sent / sizeof sent[0]; i++) {
        if (lwd_accept_quality(head->accept, sent[i]) > 0) {
            return true;
        }
    }
    (void)lwd_refuse(refusal, LWD_P_ACCEPT, LWD_REFUSED_MEDIA,
                     "The Accept header rules out every form of answer there is.");
    (void)snprintf(refusal->expected, sizeof refusal->expected,
                   "application/json, or text/plain for the short form");
    quote(refusal->got, sizeof refusal->got, head->accept);
    return false;
}

bool lwd_guard_body(lwd_refusal *refusal, const lwd_head *head, const lwd_route *route)
{
    if (route->body_max == 0 && (head->body_len > 0 || head->chunked)) {
        return lwd_refuse(refusal, LWD_P_SIZE, LWD_REFUSED_SIZE,
                          "This path and method take no body.");
    }
    if (head->body_len > route->body_max) {
        (void)lwd_refuse(refusal, LWD_P_SIZE, LWD_REFUSED_SIZE,
                         "The body may have %zu bytes here.", route->body_max);
        (void)snprintf(refusal->expected, sizeof refusal->expected, "at most %zu bytes",
                       route->body_max);
        (void)snprintf(refusal->got, sizeof refusal->got, "%" PRIu64 " bytes", head->body_len);
        return false;
    }
    if ((head->body_len > 0 || head->chunked) &&
        (head->content_type == NULL ||
         !(lwd_content_type_is(head->content_type, "application/json") ||
           (route->csv && lwd_content_type_is(head->content_type, "text/csv"))))) {
        (void)lwd_refuse(refusal, LWD_P_MEDIA, LWD_REFUSED_MEDIA, "Send the body as %s, in UTF-8.",
                         route->csv ? "application/json or text/csv" : "application/json");
        (void)snprintf(refusal->expected, sizeof refusal->expected, "Content-Type: %s",
                       route->csv ? "application/json, text/csv" : "application/json");
        if (head->content_type != NULL) {
            quote(refusal->got, sizeof refusal->got, head->content_type);
        }
        return false;
    }
    return true;
}
