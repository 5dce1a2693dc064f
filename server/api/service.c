/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The service about itself: health, readiness, metrics, versions, its description. None of these
 * reads the catalog or touches a model. */
#include <stdio.h>
#include <string.h>

#include "../metrics.h"
#include "../version.h"
#include "api.h"
#include "openapi.h"

static void reply_word(lwd_reply *reply, const lwd_request *request, int status, const char *key,
                       const char *word)
{
    lwd_json json;
    lwd_reply_open(reply, &json, status);
    lwd_json_object(&json);
    lwd_json_put_string(&json, key, word);
    lwd_json_end(&json);
    (void)lwd_reply_header(reply, "Cache-Control", "no-store");
    lwd_reply_close(reply, request, &json);
}

void lwd_get_healthz(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    if (lwd_query_members(reply, request, NULL, NULL, 0)) {
        reply_word(reply, request, 200, "health", "alive");
    }
}

void lwd_get_readyz(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    if (!lwd_query_members(reply, request, NULL, NULL, 0)) {
        return;
    }
    if (lwd_ready_get()) {
        reply_word(reply, request, 200, "ready", "yes");
        return;
    }
    lwd_fail(reply, request, LWD_PROBLEM_OVERLOADED, NULL, NULL, NULL,
             "The service is starting or stopping; ask again shortly.");
    (void)lwd_reply_header(reply, "Retry-After", "1");
}

void lwd_get_metrics(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    size_t loaded = 0;
    uint64_t loads = 0;
    char text[512];
    if (!lwd_query_members(reply, request, NULL, NULL, 0)) {
        return;
    }
    lwd_buf_reset(&reply->body);
    reply->status = 200;
    reply->content_type = LWD_METRICS_TYPE;
    lwd_metrics_write(&reply->body);
    lwd_store_counts(app->store, &loaded, &loads);
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(app->catalog, &stats);
    (void)snprintf(text, sizeof text,
                   "# HELP leeway_models_loaded Mechanism revisions kept ready.\n"
                   "# TYPE leeway_models_loaded gauge\n"
                   "leeway_models_loaded %zu\n"
                   "# HELP leeway_model_loads_total Mechanism revisions loaded since the start.\n"
                   "# TYPE leeway_model_loads_total counter\n"
                   "leeway_model_loads_total %llu\n"
                   "# HELP leeway_catalog_commits_total Transactions committed.\n"
                   "# TYPE leeway_catalog_commits_total counter\n"
                   "leeway_catalog_commits_total %llu\n",
                   loaded, (unsigned long long)loads, (unsigned long long)stats.commits);
    (void)lwd_buf_puts(&reply->body, text);
    (void)lwd_reply_header(reply, "Cache-Control", "no-store");
    if (reply->body.failed) {
        lwd_buf_clear(&reply->body);
        lwd_buf_init(&reply->body, 0);
        lwd_fail_memory(reply, request);
    }
}

/* ---- about ----------------------------------------------------------------------------------- */

bool lwd_about_write(lwd_buf *buf)
{
    static const char *const not_this[] = {
        "no safety function: no safety integrity or performance level, no part of an emergency "
        "stop, a guard or an interlock",
        "no motion controller: it moves nothing and closes no loop",
        "no collision check: answers are about joints, rods and drives, not about shapes",
        "no substitute for the risk assessment, the applicable standards, local codes and the "
        "judgement of licensed practice"};
    lwd_json json;
    lwd_json_init(&json, buf);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "name", "Leeway");
    lwd_json_put_string(&json, "version", LWD_VERSION);
    lwd_json_put_string(&json, "what_it_is",
                        "a service that answers kinematic questions about the mechanisms of a "
                        "cell: where the tool is, what it can reach, how much room is left");
    lwd_json_put_array(&json, "what_it_is_not");
    for (size_t i = 0; i < sizeof not_this / sizeof not_this[0]; i++) {
        lwd_json_string(&json, not_this[i]);
    }
    lwd_json_end(&json);
    lwd_json_put_object(&json, "formats");
    lwd_json_put_string(&json, "document", "leeway-mechanism/1");
    lwd_json_put_string(&json, "interface", "/v1");
    lwd_json_put_int(&json, "catalog", lwd_catalog_format());
    lwd_json_end(&json);
    lwd_json_put_object(&json, "built_with");
    lwd_json_put_string(&json, "libmicrohttpd", LWD_BUILT_MHD);
    lwd_json_put_string(&json, "cjson", LWD_BUILT_CJSON);
    lwd_json_put_string(&json, "gsl", LWD_BUILT_GSL);
    lwd_json_put_string(&json, "sqlite", LWD_BUILT_SQLITE);
    lwd_json_end(&json);
    lwd_json_put_string(&json, "licence", "GPL-3.0-or-later");
    lwd_json_put_string(&json, "description", "/openapi.json");
    lwd_json_end(&json);
    return lwd_json_done(&json);
}

void lwd_get_about(void *context, const lwd_request *request, lwd_reply *reply)
{
    const lwd_app *app = context;
    if (lwd_query_members(reply, request, NULL, NULL, 0) && lwd_takes_json(reply, request)) {
        lwd_reply_text(reply, request, 200, "application/json", app->about.data, app->about.len);
    }
}

void lwd_get_openapi(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    if (lwd_query_members(reply, request, NULL, NULL, 0) && lwd_takes_json(reply, request)) {
        lwd_reply_text(reply, request, 200, "application/json", lwd_openapi_text,
                       lwd_openapi_len);
    }
}
