/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The daemon's inside as main.c sees it: what it opens at the start (catalog, models, scratch for
 * each lane) and the table of routes it answers. Called by main.c only, from the main thread. */
#ifndef LWD_API_APP_H
#define LWD_API_APP_H

#include <stddef.h>

#include "../exchange.h"

typedef struct lwd_app lwd_app;

typedef struct lwd_app_options {
    const char *data_dir; /* directory that holds the catalog; must exist */
    unsigned lanes;       /* lwd_request.lane is below this: 0 the event thread, the rest workers */
    unsigned prepare_paths; /* tracked at most while preparing a solution set; 0: the default */
} lwd_app_options;

/* NULL on failure, with one sentence for the operator in `why`. */
lwd_app *lwd_app_start(const lwd_app_options *options, char *why, size_t why_size);

/* Loads the published mechanisms, before the service says that it is ready; questions are answered
 * meanwhile. Ends early when `stop` says so. */
void lwd_app_load(lwd_app *app, bool (*stop)(void));

/* Without an app: a checked copy of the catalog in a data directory, beside whatever serves it. */
bool lwd_app_backup(const char *data_dir, const char *file, char *why, size_t why_size);

/* The routes; static, valid for ever. Handlers are called with the lwd_app as their context. */
const lwd_route *lwd_app_routes(size_t *n);

/* The service is about to stop: questions about moves get at most so long from now, and say so. */
void lwd_app_hurry(lwd_app *app, unsigned ms);

/* Waits for writes under way and frees everything. No handler may run any more. */
void lwd_app_stop(lwd_app *app);

#endif
