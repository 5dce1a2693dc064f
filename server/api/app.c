/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Start and stop of the daemon's inside, and the table of its routes. Main thread only. */
#include "app.h"

#include <malloc.h>
#include <stdio.h>
#include <stdlib.h>

#include "../log.h"
#include "api.h"
#include "sets.h"

enum {
    QUESTION_MAX = 65536,
    DOCUMENT_MAX = LWD_CATALOG_DOCUMENT_MAX,
    CHANGE_MAX = 16384
};

/* Quick routes answer on the event thread; a mechanism that must be loaded first, or a batch longer
 * than LWD_BATCH_QUICK, leaves it by LWD_DEFER. Proofs of moves run in workers always. Listings
 * read a page of the catalog (some tens of microseconds), documents up to 4 MB. */
static const lwd_route routes[] = {
    {LWD_GET, "/v1/mechanisms", lwd_get_mechanisms, LWD_ROLE_QUERY, true, 0, "mechanisms", false},
    {LWD_PUT, "/v1/mechanisms/{}", lwd_put_mechanism, LWD_ROLE_AUTHOR, true, DOCUMENT_MAX, "put",
     false},
    {LWD_GET, "/v1/mechanisms/{}", lwd_get_mechanism, LWD_ROLE_QUERY, false, 0, "mechanism", false},
    {LWD_GET, "/v1/mechanisms/{}/state", lwd_get_state, LWD_ROLE_QUERY, false, 0, "state", false},
    {LWD_GET, "/v1/mechanisms/{}/revisions", lwd_get_revisions, LWD_ROLE_QUERY, true, 0,
     "revisions", false},
    {LWD_GET, "/v1/mechanisms/{}/revisions/{}", lwd_get_revision, LWD_ROLE_QUERY, true, 0,
     "revision", false},
    {LWD_GET, "/v1/mechanisms/{}/revisions/{}/report", lwd_get_report, LWD_ROLE_QUERY, true, 0,
     "report", false},
    {LWD_POST, "/v1/mechanisms/{}/revisions/{}/publish", lwd_post_publish, LWD_ROLE_ADMIN, true,
     CHANGE_MAX, "publish", false},
    {LWD_POST, "/v1/mechanisms/{}/revisions/{}/withdraw", lwd_post_withdraw, LWD_ROLE_ADMIN, true,
     CHANGE_MAX, "withdraw", false},
    {LWD_GET, "/v1/mechanisms/{}/history", lwd_get_history, LWD_ROLE_QUERY, true, 0, "history",
     false},
    {LWD_GET, "/v1/mechanisms/{}/modes", lwd_get_modes, LWD_ROLE_QUERY, true, 0, "modes", false},
    {LWD_GET, "/v1/mechanisms/{}/difference", lwd_get_difference, LWD_ROLE_QUERY, true, 0,
     "difference", false},
    {LWD_POST, "/v1/mechanisms/{}/inverse", lwd_post_inverse, LWD_ROLE_QUERY, false, QUESTION_MAX,
     "inverse", false},
    {LWD_POST, "/v1/mechanisms/{}/forward", lwd_post_forward, LWD_ROLE_QUERY, false, QUESTION_MAX,
     "forward", false},
    {LWD_POST, "/v1/mechanisms/{}/jacobian", lwd_post_jacobian, LWD_ROLE_QUERY, false,
     QUESTION_MAX, "jacobian", false},
    {LWD_POST, "/v1/mechanisms/{}/margin", lwd_post_margin, LWD_ROLE_QUERY, false, QUESTION_MAX,
     "margin", false},
    {LWD_POST, "/v1/mechanisms/{}/reach", lwd_post_reach, LWD_ROLE_QUERY, false, QUESTION_MAX,
     "reach", false},
    {LWD_POST, "/v1/mechanisms/{}/path", lwd_post_path, LWD_ROLE_QUERY, true, QUESTION_MAX,
     "path", true},
    {LWD_POST, "/v1/mechanisms/{}/free-travel", lwd_post_free_travel, LWD_ROLE_QUERY, true,
     QUESTION_MAX, "free-travel", false},
    {LWD_GET, "/v1/mechanisms/{}/margin", lwd_get_margin, LWD_ROLE_QUERY, false, 0, "margin",
     false},
    {LWD_GET, "/v1/mechanisms/{}/reach", lwd_get_reach, LWD_ROLE_QUERY, false, 0, "reach", false},
    {LWD_GET, "/healthz", lwd_get_healthz, LWD_ROLE_NONE, false, 0, "healthz", false},
    {LWD_GET, "/readyz", lwd_get_readyz, LWD_ROLE_NONE, false, 0, "readyz", false},
    {LWD_GET, "/metrics", lwd_get_metrics, LWD_ROLE_QUERY, false, 0, "metrics", false},
    {LWD_GET, "/about", lwd_get_about, LWD_ROLE_NONE, false, 0, "about", false},
    {LWD_GET, "/openapi.json", lwd_get_openapi, LWD_ROLE_NONE, false, 0, "openapi", false},
    {LWD_GET, "/problems/{}", lwd_get_problem, LWD_ROLE_NONE, false, 0, "problem", false},
};

const lwd_route *lwd_app_routes(size_t *n)
{
    *n = sizeof routes / sizeof routes[0];
    return routes;
}

void lwd_app_load(lwd_app *app, bool (*stop)(void))
{
    size_t n = lwd_store_load_answering(app->store, stop);
    lwd_log(LWD_LOG_INFO, "models_loaded", "%zu published mechanisms are ready", n);
}

void lwd_app_hurry(lwd_app *app, unsigned ms)
{
    lwd_watch_hurry(app->watch, (int64_t)ms);
}

void lwd_app_stop(lwd_app *app)
{
    if (app == NULL) {
        return;
    }
    lwd_catalog_close(app->catalog); /* the change callback ends with it */
    for (unsigned i = 0; i < app->n_lanes && app->lane != NULL; i++) {
        lwd_lane_clear(&app->lane[i]);
    }
    lwd_watch_free(app->watch);
    lwd_store_free(app->store);
    lwd_buf_clear(&app->about);
    free(app->lane);
    free(app);
}

bool lwd_app_backup(const char *data_dir, const char *file, char *why, size_t why_size)
{
    lwd_catalog_error err;
    if (lwd_catalog_backup_of(data_dir, file, &err) == LWD_CATALOG_OK) {
        return true;
    }
    (void)snprintf(why, why_size, "%s", err.why);
    return false;
}

static bool open_catalog(lwd_app *app, const char *dir, char *why, size_t why_size)
{
    lwd_catalog_error err;
    lwd_catalog_options options = LWD_CATALOG_OPTIONS_DEFAULT;
    options.changed = lwd_store_changed;
    options.changed_context = app->store;
    if (lwd_catalog_open(&app->catalog, dir, &options, &err) != LWD_CATALOG_OK) {
        (void)snprintf(why, why_size, "The catalog in %s does not open: %s", dir,
                       err.why[0] != '\0' ? err.why : lwd_catalog_result_text(err.result));
        return false;
    }
    lwd_store_catalog(app->store, app->catalog);
    return true;
}

/* A document and its model reserve megabytes and touch little of them. The C library's heap would
 * keep and clear such blocks whole once one has been freed; mapped blocks cost what is touched and
 * go back when freed (the demo line loaded: 16 MB resident instead of 26). */
static void keep_large_blocks_mapped(void)
{
#ifdef M_MMAP_THRESHOLD
    (void)mallopt(M_MMAP_THRESHOLD, 128 * 1024);
#endif
}

lwd_app *lwd_app_start(const lwd_app_options *options, char *why, size_t why_size)
{
    keep_large_blocks_mapped();
    lwd_app *app = calloc(1, sizeof *app);
    (void)snprintf(why, why_size, "There is not enough memory to start.");
    if (app == NULL) {
        return NULL;
    }
    lwd_buf_init(&app->about, 0);
    app->n_lanes = options->lanes;
    app->watch = lwd_watch_new(options->lanes);
    app->preparing.paths =
        options->prepare_paths != 0 ? options->prepare_paths : LWD_PREPARE_PATHS;
    app->preparing.stop = app->watch != NULL ? lwd_watch_stop_flag(app->watch) : NULL;
    app->store = lwd_store_new(NULL, app->preparing);
    app->lane = calloc(options->lanes, sizeof *app->lane);
    for (unsigned i = 0; app->lane != NULL && i < options->lanes; i++) {
        lwd_buf_init(&app->lane[i].scrap.body, 0);
    }
    if (app->store == NULL || app->lane == NULL || app->watch == NULL
        || !lwd_about_write(&app->about) || !open_catalog(app, options->data_dir, why, why_size)) {
        lwd_app_stop(app);
        return NULL;
    }
    why[0] = '\0';
    return app;
}
