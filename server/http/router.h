/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The table of routes, prepared for look-up by path segments. Knows nothing of models and nothing
 * of sockets. Built once, then read by any thread. */
#ifndef LWD_HTTP_ROUTER_H
#define LWD_HTTP_ROUTER_H

#include "../exchange.h"

typedef struct lwd_router lwd_router;

typedef enum lwd_match {
    LWD_MATCH_FOUND,
    LWD_MATCH_NO_METHOD, /* the path is known, the method is not among its own */
    LWD_MATCH_NO_PATH
} lwd_match;

typedef struct lwd_hit {
    const lwd_route *route;
    const char *param[LWD_PARAM_MAX];
    size_t n_param;
    char allow[40]; /* "GET, HEAD, PUT": methods of the path, for the Allow header */
} lwd_hit;

/* NULL with a sentence in `why` if the table contradicts itself (two routes for the same
 * requests, a pattern that is no path, too many captures). Borrows `routes`. */
lwd_router *lwd_router_new(const lwd_route *routes, size_t n, char *why, size_t why_size);
void lwd_router_free(lwd_router *router);

/* Finds the route; HEAD finds GET's. Where a written segment and a capture both match, the
 * written one wins, decided at the first segment that differs. The captures are borrowed from
 * `segment`. Fills hit->allow for NO_METHOD only. */
lwd_match lwd_router_find(lwd_hit *hit, const lwd_router *router, bool method_known,
                          lwd_method method, const char *const *segment, size_t n_segment);

/* "GET" and so on; false where we serve no such method anywhere. Methods are case-sensitive. */
bool lwd_method_parse(lwd_method *out, const char *text);
const char *lwd_method_text(lwd_method method);

#endif
