/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The router of router.h. Patterns are cut into segments once; a look-up walks the few patterns
 * with the right number of segments. */
#include "router.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "uri.h"

typedef struct pattern {
    const lwd_route *route;
    const char *segment[LWD_SEGMENT_MAX]; /* NULL: a capture */
    size_t len[LWD_SEGMENT_MAX];
    size_t n_segment;
    struct pattern *next; /* with the same number of segments */
} pattern;

struct lwd_router {
    pattern *first[LWD_SEGMENT_MAX + 1]; /* by number of segments, best match first */
    pattern pattern[];
};

static const char *const method_text[] = {"GET", "HEAD", "POST", "PUT", "DELETE"};
enum { METHOD_COUNT = 5 };

bool lwd_method_parse(lwd_method *out, const char *text)
{
    for (size_t i = 0; i < METHOD_COUNT; i++) {
        if (strcmp(text, method_text[i]) == 0) {
            *out = (lwd_method)i;
            return true;
        }
    }
    return false;
}

const char *lwd_method_text(lwd_method method)
{
    return method_text[method];
}

static bool pattern_cut(pattern *p, const lwd_route *route)
{
    const char *at = route->pattern;
    size_t captures = 0;

    p->route = route;
    if (*at != '/') {
        return false;
    }
    while (*at == '/') {
        const char *start = ++at;
        at += strcspn(at, "/");
        if (at == start) {
            return *at == '\0' && p->n_segment == 0; /* only "/" itself may end in a slash */
        }
        if (p->n_segment >= LWD_SEGMENT_MAX) {
            return false;
        }
        if (at - start == 2 && memcmp(start, "{}", 2) == 0) {
            p->segment[p->n_segment] = NULL;
            captures++;
        } else if (memchr(start, '{', (size_t)(at - start)) != NULL) {
            return false;
        } else {
            p->segment[p->n_segment] = start;
        }
        p->len[p->n_segment++] = (size_t)(at - start);
    }
    return captures <= LWD_PARAM_MAX;
}

/* Below 0: a comes before b; 0: both match the same paths. The patterns have equally many
 * segments. */
static int pattern_order(const pattern *a, const pattern *b)
{
    for (size_t i = 0; i < a->n_segment; i++) {
        const char *x = a->segment[i];
        const char *y = b->segment[i];
        if ((x == NULL) != (y == NULL)) {
            return x != NULL ? -1 : 1;
        }
        if (x != NULL) {
            int c;
            if (a->len[i] != b->len[i]) {
                return a->len[i] < b->len[i] ? -1 : 1;
            }
            c = memcmp(x, y, a->len[i]);
            if (c != 0) {
                return c;
            }
        }
    }
    return 0;
}

/* Puts the pattern into its list; false if another route already serves the same requests. */
static bool pattern_insert(lwd_router *router, pattern *p)
{
    pattern **link = &router->first[p->n_segment];

    while (*link != NULL) {
        int order = pattern_order(p, *link);
        if (order == 0 && (*link)->route->method == p->route->method) {
            return false;
        }
        if (order < 0) {
            break;
        }
        link = &(*link)->next;
    }
    p->next = *link;
    *link = p;
    return true;
}

lwd_router *lwd_router_new(const lwd_route *routes, size_t n, char *why, size_t why_size)
{
    lwd_router *router = calloc(1, sizeof *router + n * sizeof router->pattern[0]);

    if (router == NULL) {
        snprintf(why, why_size, "out of memory for the table of routes");
        return NULL;
    }
    for (size_t i = 0; i < n; i++) {
        pattern *p = &router->pattern[i];
        if (routes[i].pattern == NULL || routes[i].handler == NULL || routes[i].name == NULL ||
            routes[i].method == LWD_HEAD || !pattern_cut(p, &routes[i])) {
            snprintf(why, why_size, "route %zu (%s) is not well formed", i,
                     routes[i].pattern != NULL ? routes[i].pattern : "without a pattern");
            lwd_router_free(router);
            return NULL;
        }
        if (!pattern_insert(router, p)) {
            snprintf(why, why_size, "two routes serve %s %s", method_text[routes[i].method],
                     routes[i].pattern);
            lwd_router_free(router);
            return NULL;
        }
    }
    return router;
}

void lwd_router_free(lwd_router *router)
{
    free(router);
}

static bool pattern_matches(const pattern *p, const char *const *segment)
{
    for (size_t i = 0; i < p->n_segment; i++) {
        if (p->segment[i] == NULL) {
            if (segment[i][0] == '\0') {
                return false;
            }
        } else if (strncmp(segment[i], p->segment[i], p->len[i]) != 0 ||
                   segment[i][p->len[i]] != '\0') {
            return false;
        }
    }
    return true;
}

static void allow_text(char *out, size_t size, unsigned methods)
{
    size_t len = 0;

    out[0] = '\0';
    for (size_t i = 0; i < METHOD_COUNT; i++) {
        int n;
        if ((methods & (1u << i)) == 0) {
            continue;
        }
        n = snprintf(out + len, size - len, "%s%s", len != 0 ? ", " : "", method_text[i]);
        len += n > 0 ? (size_t)n : 0;
    }
}

lwd_match lwd_router_find(lwd_hit *hit, const lwd_router *router, bool method_known,
                          lwd_method method, const char *const *segment, size_t n_segment)
{
    const pattern *best = NULL;
    unsigned methods = 0;

    hit->route = NULL;
    hit->n_param = 0;
    hit->allow[0] = '\0';
    if (n_segment > LWD_SEGMENT_MAX) {
        return LWD_MATCH_NO_PATH;
    }
    if (method == LWD_HEAD) {
        method = LWD_GET;
    }
    for (const pattern *p = router->first[n_segment]; p != NULL; p = p->next) {
        if (best != NULL && pattern_order(best, p) != 0) {
            break; /* the list is sorted: worse matches follow */
        }
        if (!pattern_matches(p, segment)) {
            continue;
        }
        best = p;
        methods |= 1u << p->route->method;
        if (p->route->method == LWD_GET) {
            methods |= 1u << LWD_HEAD;
        }
        if (method_known && p->route->method == method) {
            hit->route = p->route;
        }
    }
    if (best == NULL) {
        return LWD_MATCH_NO_PATH;
    }
    if (hit->route == NULL) {
        allow_text(hit->allow, sizeof hit->allow, methods);
        return LWD_MATCH_NO_METHOD;
    }
    for (size_t i = 0; i < n_segment; i++) {
        if (best->segment[i] == NULL) {
            hit->param[hit->n_param++] = segment[i];
        }
    }
    return LWD_MATCH_FOUND;
}
