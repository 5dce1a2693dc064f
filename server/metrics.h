/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the daemon counts about itself, and whether it is ready. One registry a process; every
 * function may be called from any thread and none of them blocks or allocates (except write). */
#ifndef LWD_METRICS_H
#define LWD_METRICS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "exchange.h"

enum { LWD_METRICS_ROUTES_MAX = 96 };

/* Why a request or a connection was turned away before a handler saw it. */
#define LWD_REFUSED_LIST(X)                                                                        \
    X(LWD_REFUSED_MALFORMED, "malformed")                                                          \
    X(LWD_REFUSED_FRAMING, "framing")                                                              \
    X(LWD_REFUSED_URL, "url")                                                                      \
    X(LWD_REFUSED_ROUTE, "route")                                                                  \
    X(LWD_REFUSED_METHOD, "method")                                                                \
    X(LWD_REFUSED_MEDIA, "media_type")                                                             \
    X(LWD_REFUSED_SIZE, "size")                                                                    \
    X(LWD_REFUSED_TOKEN, "token")                                                                  \
    X(LWD_REFUSED_ROLE, "role")                                                                    \
    X(LWD_REFUSED_HOST, "host")                                                                    \
    X(LWD_REFUSED_QUEUE, "queue_full")                                                             \
    X(LWD_REFUSED_CONNECTIONS, "connections_full")                                                 \
    X(LWD_REFUSED_ADDRESS, "address_full")                                                         \
    X(LWD_REFUSED_DESCRIPTORS, "descriptors")                                                      \
    X(LWD_REFUSED_SLOW_HEAD, "slow_head")                                                          \
    X(LWD_REFUSED_SLOW_BODY, "slow_body")                                                          \
    X(LWD_REFUSED_SLOW_READER, "slow_reader")                                                      \
    X(LWD_REFUSED_MEMORY, "memory")                                                                \
    X(LWD_REFUSED_STOPPING, "stopping")

typedef enum lwd_refused {
#define X(id, text) id,
    LWD_REFUSED_LIST(X)
#undef X
    LWD_REFUSED_COUNT
} lwd_refused;

/* Names the routes; routes with the same name share their figures. Call once, before any thread.
 * `routes` must outlive the process's last count. */
void lwd_metrics_routes(const lwd_route *routes, size_t n);

/* One answered request. `route` NULL: no route was found. */
void lwd_metrics_request(const lwd_route *route, int status, int64_t duration_us);
void lwd_metrics_refused(lwd_refused reason);

/* Gauges: the change, +1 or -1. */
void lwd_metrics_in_flight(int change);
void lwd_metrics_connections(int change);
void lwd_metrics_queued(int change);
void lwd_metrics_connection_accepted(void);

/* Version shown in leeway_build_info; static string. */
void lwd_metrics_version(const char *version);

/* Appends everything in the Prometheus text format 0.0.4. Content type to send it with: */
#define LWD_METRICS_TYPE "text/plain; version=0.0.4; charset=utf-8"
void lwd_metrics_write(lwd_buf *out);

/* Whether questions can be answered: set by main when all is up, cleared when stopping begins.
 * GET /readyz reports it. */
void lwd_ready_set(bool ready);
bool lwd_ready_get(void);

#endif
