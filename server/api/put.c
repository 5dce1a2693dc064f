/* SPDX-License-Identifier: GPL-3.0-or-later */
/* PUT of a mechanism document: decode, build and validate, store as a draft. A document with an
 * error is refused whole; nothing of it is stored. Runs in a worker. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../log.h"
#include "api.h"
#include "sets.h"

/* What one upload needs; on the heap, since findings and report are large. */
typedef struct upload {
    const char *name;
    lwd_findings findings;
    lw_report report;
    lwd_document *document;
    lw_model *model;
    lwd_buf report_text;
    char digest[LWD_DIGEST_SIZE];
    char expect[LWD_DIGEST_SIZE];
    bool has_expect;
} upload;

static upload *upload_new(const char *name)
{
    upload *up = calloc(1, sizeof *up);
    if (up != NULL) {
        up->name = name;
        lwd_findings_init(&up->findings);
        lwd_buf_init(&up->report_text, LWD_CATALOG_REPORT_MAX);
    }
    return up;
}

static void upload_free(upload *up)
{
    lwd_buf_clear(&up->report_text);
    lw_model_free(up->model);
    lwd_document_free(up->document);
    free(up);
}

static bool decode(upload *up, const lwd_request *request, lwd_reply *reply)
{
    up->document = lwd_document_read_text(request->body, request->body_len, &up->findings,
                                          up->digest, NULL);
    if (up->document != NULL) {
        if (strcmp(up->document->spec.name, up->name) != 0) {
            lwd_fail(reply, request, LWD_PROBLEM_NAME_DIFFERS, "/name", up->name,
                     up->document->spec.name,
                     "The document is named \"%.32s\", the URL says \"%.32s\".",
                     up->document->spec.name, up->name);
            return false;
        }
        return true;
    }
    if (up->findings.no_memory) {
        lwd_fail_memory(reply, request);
    } else if (up->digest[0] == '\0') {
        lwd_problem_reply_findings(reply, request, &up->findings); /* no JSON at all */
    } else {
        lwd_problem_reply_refused(reply, request, LWD_PROBLEM_DOCUMENT, &up->findings);
    }
    return false;
}

/* Builds the model to see whether it can be built, and its solution sets. */
static bool validate(lwd_app *app, upload *up, const lwd_request *request, lwd_reply *reply)
{
    lw_err err = {.code = LW_OK};
    lw_code code =
        lw_model_new(&up->model, &up->document->spec, lwd_seed_of(up->digest), &up->report, &err);
    if (code == LW_OK) {
        code = lwd_sets_take(app->catalog, &app->preparing, up->model, up->name, up->digest,
                             &err);
    }
    if (code == LW_OK) {
        up->report = *lw_model_report(up->model);
        lwd_sets_judge(&up->findings, up->model);
        return true;
    }
    if (code == LW_E_MODEL) {
        lwd_findings_join(&up->findings, &up->report, LW_ERROR, LW_ERROR);
        if (up->findings.n_error > 0) {
            lwd_problem_reply_refused(reply, request, LWD_PROBLEM_DOCUMENT, &up->findings);
        } else {
            lwd_fail(reply, request, LWD_PROBLEM_DOCUMENT, err.where, NULL, NULL, "%s", err.msg);
        }
    } else if (code == LW_E_MEMORY || code == LW_E_ABORTED) {
        /* Where the stop has ended it, the client has been told of the stop already. */
        lwd_fail_memory(reply, request);
    } else if (code == LW_E_LIMIT || code == LW_E_ARGUMENT) {
        lwd_fail(reply, request, LWD_PROBLEM_DOCUMENT, err.where, NULL, NULL, "%s", err.msg);
    } else {
        lwd_log(LWD_LOG_ERROR, "model_failed", "%s:%d %s", err.file != NULL ? err.file : "?",
                err.line, err.msg);
        lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "Validation met a fault of the program; please report the document.");
    }
    return false;
}

/* Digest of the newest revision that is not withdrawn, "" if there is none. */
static lwd_catalog_result newest(lwd_app *app, const char *name, char digest[LWD_DIGEST_SIZE],
                                 lwd_catalog_error *err)
{
    lwd_catalog_mechanism row;
    lwd_catalog_result result = lwd_catalog_get_mechanism(app->catalog, name, &row, err);
    digest[0] = '\0';
    if (result == LWD_CATALOG_NOT_FOUND) {
        return LWD_CATALOG_OK;
    }
    for (int64_t n = row.revisions; result == LWD_CATALOG_OK && n > 0 && digest[0] == '\0'; n--) {
        lwd_catalog_revision_info info;
        result = lwd_catalog_get_revision_info(app->catalog, name, n, &info, err);
        if (result == LWD_CATALOG_OK && info.state != LWD_CATALOG_WITHDRAWN) {
            lwd_text_copy(digest, LWD_DIGEST_SIZE, info.digest);
        }
    }
    return result;
}

/* If-Match and If-None-Match become the catalog's compare-and-set. */
static bool precondition(lwd_app *app, upload *up, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_error err;
    if (request->if_match == NULL && request->if_none_match == NULL) {
        return true;
    }
    if (newest(app, up->name, up->expect, &err) != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
        return false;
    }
    bool there = up->expect[0] != '\0';
    up->has_expect = true;
    if (request->if_match != NULL
        && !(there && lwd_tag_listed(request->if_match, up->expect, false))) {
        lwd_fail(reply, request, LWD_PROBLEM_PRECONDITION, NULL, NULL,
                 there ? up->expect : "no revision",
                 "If-Match does not name the newest revision; read it, then decide anew.");
        return false;
    }
    if (request->if_none_match != NULL && there
        && lwd_tag_listed(request->if_none_match, up->expect, true)) {
        lwd_fail(reply, request, LWD_PROBLEM_PRECONDITION, NULL, NULL, up->expect,
                 "If-None-Match rules this out: the mechanism has a revision already.");
        return false;
    }
    return true;
}

static void answer(const upload *up, const lwd_request *request, lwd_reply *reply,
                   const lwd_catalog_put_result *put)
{
    char location[128];
    lwd_json json;
    lwd_reply_open(reply, &json, put->created ? 201 : 200);
    (void)snprintf(location, sizeof location, "/v1/mechanisms/%s/revisions/%lld", up->name,
                   (long long)put->number);
    (void)lwd_reply_header(reply, "Location", location);
    lwd_reply_etag(reply, up->digest);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", up->name);
    lwd_json_put_int(&json, "revision", put->number);
    lwd_json_put_string(&json, "state", lwd_catalog_state_name(put->state));
    lwd_json_put_string(&json, "digest", up->digest);
    lwd_json_put_bool(&json, "created", put->created);
    lwd_findings_write(&json, &up->findings, &up->report);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

static void store(lwd_app *app, upload *up, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_error err;
    lwd_catalog_put_result out;
    if (!lwd_report_write(&up->report_text, &up->findings, &up->report, up->document,
                          up->digest)) {
        if (up->report_text.failed) {
            lwd_fail_memory(reply, request);
        } else {
            lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                     "The validation report could not be written; nothing was stored.");
        }
        return;
    }
    lwd_catalog_put in = {.name = up->name,
                          .document = request->body,
                          .document_len = request->body_len,
                          .digest = up->digest,
                          .report = up->report_text.data,
                          .report_len = up->report_text.len,
                          .who = request->token_name,
                          .when_ms = lwd_now_utc_ms(),
                          .expect_digest = up->has_expect ? up->expect : NULL};
    if (lwd_catalog_put_revision(app->catalog, &in, &out, &err) != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
        return;
    }
    if (out.created) {
        lwd_sets_keep(app->catalog, up->model, up->name, out.number);
    }
    lwd_log_line line;
    lwd_log_begin(&line, LWD_LOG_INFO, "revision_put");
    lwd_log_str(&line, "mechanism", up->name);
    lwd_log_int(&line, "revision", out.number);
    lwd_log_str(&line, "digest", up->digest);
    lwd_log_str(&line, "created", out.created ? "yes" : "no");
    lwd_log_str(&line, "by", request->token_name);
    lwd_log_end(&line);
    answer(up, request, reply, &out);
}

void lwd_put_mechanism(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    const char *name = NULL;
    if (!lwd_query_members(reply, request, NULL, NULL, 0) || !lwd_takes_json(reply, request)
        || !lwd_path_name(reply, request, &name)) {
        return;
    }
    upload *up = upload_new(name);
    if (up == NULL) {
        lwd_fail_memory(reply, request);
        return;
    }
    if (decode(up, request, reply) && precondition(app, up, request, reply)
        && validate(app, up, request, reply)) {
        store(app, up, request, reply);
    }
    upload_free(up);
}
