/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The HTTP room's front door: start a service over open sockets and a table of routes, stop it
 * without losing an answer. Threads: one acceptor (which also ends connections that drip), one
 * event thread (lane 0), `workers` workers (lanes 1 to workers). */
#ifndef LWD_HTTP_HTTP_H
#define LWD_HTTP_HTTP_H

#include <stdbool.h>
#include <stddef.h>

#include "../auth.h"
#include "../exchange.h"
#include "listen.h"

typedef struct lwd_http lwd_http;

typedef struct lwd_http_options {
    unsigned workers;
    unsigned queue_max;       /* slow requests that may wait for a worker */
    unsigned connections_max; /* open connections in all */
    unsigned address_max;     /* open connections of one IP address */
    unsigned head_ms;         /* from a request's first byte to its complete head */
    unsigned body_ms;         /* from there to its complete body */
    unsigned idle_s;          /* without any byte */
    unsigned drain_ms;        /* for requests under way when stopping */
} lwd_http_options;

#define LWD_HTTP_OPTIONS_DEFAULT                                                                   \
    {                                                                                              \
        .workers = 2, .queue_max = 64, .connections_max = 256, .address_max = 64,                  \
        .head_ms = 5000, .body_ms = 15000, .idle_s = 30, .drain_ms = 10000                         \
    }

/* Starts answering. Borrows everything it is given until lwd_http_stop has returned; `auth` NULL
 * makes everyone an admin called "local" and lets only loopback names stand in Host. NULL on
 * failure with a sentence in `why`. */
lwd_http *lwd_http_start(const lwd_http_options *options, lwd_listeners *listeners,
                         const lwd_route *routes, size_t n_routes, void *context, lwd_auth *auth,
                         char *why, size_t why_size);

/* Stops: no new connections, requests begun are answered (for at most drain_ms, then 503), then
 * all threads end and `http` is freed. False if a handler still runs after all patience: then its
 * context must not be freed and the process should end. */
bool lwd_http_stop(lwd_http *http);

#endif
