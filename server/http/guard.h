/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Judges the head of a request before a handler sees it. The HTTP library reads laxly (it takes
 * the first of two lengths, ignores codings it does not know); behind a proxy that reads otherwise
 * such a request can hide a second one, so everything ambiguous is refused here. No sockets. */
#ifndef LWD_HTTP_GUARD_H
#define LWD_HTTP_GUARD_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "../exchange.h"
#include "../metrics.h"
#include "problems.h"
#include "uri.h"

/* The head as sent: the headers we look at, how often each came. Strings are borrowed. */
typedef struct lwd_head {
    const char *method;
    bool http_1_0;
    const char *host;
    const char *content_length;
    const char *transfer_encoding;
    const char *content_type;
    const char *expect;
    const char *authorization;
    const char *traceparent;
    const char *accept;
    const char *if_match;
    const char *if_none_match;
    unsigned n_host;
    unsigned n_content_length;
    unsigned n_transfer_encoding;
    unsigned n_content_type;
    unsigned n_expect;
    unsigned n_authorization;
    bool bad_name;  /* a header name that is no token: "Content-Length :" */
    bool bad_value; /* a control character in a header value */
    uint64_t body_len; /* set by lwd_guard_framing; 0 where chunked */
    bool chunked;
} lwd_head;

/* Notes one header; `value_len` as read from the wire, so that a NUL inside is seen. The three
 * list headers (accept, if_match, if_none_match) are left to the caller, who joins them. */
void lwd_head_add(lwd_head *head, const char *name, size_t name_len, const char *value,
                  size_t value_len);

typedef struct lwd_refusal {
    lwd_http_problem problem;
    lwd_refused reason;
    bool at_once; /* where the body ends is not certain: answer now and close */
    char detail[224];
    char expected[96];
    char got[96];
} lwd_refusal;

/* Each returns true if all is well, else false with the refusal filled. */
bool lwd_guard_framing(lwd_refusal *refusal, lwd_head *head);
bool lwd_guard_uri(lwd_refusal *refusal, const lwd_uri *uri, lwd_uri_fault fault);
/* Only loopback names; against pages in a browser that resolve their own name to us. */
bool lwd_guard_host(lwd_refusal *refusal, const lwd_head *head);
bool lwd_guard_accept(lwd_refusal *refusal, const lwd_head *head);
bool lwd_guard_body(lwd_refusal *refusal, const lwd_head *head, const lwd_route *route);

/* Fills a refusal; detail is a printf format. Returns false, for use in a return. */
bool lwd_refuse(lwd_refusal *refusal, lwd_http_problem problem, lwd_refused reason,
                const char *format, ...) __attribute__((format(printf, 4, 5)));

/* The fixed parts of a problem of this room. */
void lwd_http_problem_fill(lwd_problem *out, lwd_http_problem problem);

#endif
