/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Publishing and withdrawing revisions. Publishing loads the revision first, so that what answers
 * from then on is known to load, and wants every warning accepted by its code. Runs in a worker. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../log.h"
#include "api.h"

enum { ACCEPT_MAX = 64, BODY_VALUES = 256 };

typedef struct change {
    const char *name;
    int64_t number;
    lwd_catalog_action action;
    char reason[LWD_CATALOG_REASON_MAX + 1];
    char accepted[LWD_CATALOG_ACCEPTED_MAX + 1]; /* codes, a blank between two */
    int64_t expect_tag;
    bool has_expect_tag;
    lwd_findings findings;
} change;

/* ---- the body -------------------------------------------------------------------------------- */

static void read_accept(const lwd_reader *r, change *c)
{
    lwd_reader child;
    size_t len = 0;
    if (!lwd_is_given(r) || !lwd_want_array(r, 0, ACCEPT_MAX, "codes of warnings")) {
        return;
    }
    for (bool more = lwd_first(r, &child); more; more = lwd_next(&child)) {
        const char *code = NULL;
        if (!lwd_read_text(&child, 39, &code)) {
            continue;
        }
        size_t n = strlen(code);
        if (n == 0 || strspn(code, "abcdefghijklmnopqrstuvwxyz0123456789-") != n) {
            LWD_TELL(&child, "wrong-type", "the code of a warning", NULL,
                     "A warning is accepted by its code, as the report shows it.");
        } else if (len + n + 2 > sizeof c->accepted) {
            LWD_TELL(&child, "too-many", "fewer codes", NULL, "These are too many codes.");
        } else {
            (void)snprintf(c->accepted + len, sizeof c->accepted - len, "%s%s",
                           len > 0 ? " " : "", code);
            len += n + (len > 0 ? 1 : 0);
        }
    }
}

static bool read_body(change *c, const lwd_request *request, lwd_reply *reply)
{
    static const lwd_member table[] = {{"reason", false}, {"accept", false}};
    lwd_reader m[2];
    const char *reason = NULL;
    if (request->body_len == 0) {
        return true;
    }
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    limits.values = BODY_VALUES;
    struct cJSON *tree =
        lwd_json_parse(request->body, request->body_len, &limits, &c->findings);
    if (tree != NULL) {
        lwd_reader root = lwd_reader_of(tree, &c->findings);
        if (lwd_read_members(&root, table, 2, m)) {
            if (lwd_read_text(&m[0], LWD_CATALOG_REASON_MAX, &reason)) {
                lwd_text_copy(c->reason, sizeof c->reason, reason);
            }
            if (c->action == LWD_CATALOG_PUBLISH) {
                read_accept(&m[1], c);
            } else if (lwd_is_given(&m[1])) {
                LWD_TELL(&m[1], "unknown-member", "reason", NULL,
                         "Withdrawing accepts no warnings; leave \"accept\" out.");
            }
        }
        lwd_json_free(tree);
    }
    if (tree == NULL || c->findings.n_error > 0) {
        lwd_problem_reply_findings(reply, request, &c->findings);
        return false;
    }
    return true;
}

/* If-Match holds the tag of the state resource. */
static bool read_tag(change *c, lwd_app *app, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_mechanism row;
    lwd_catalog_error err;
    char tag[40];
    if (request->if_match == NULL) {
        return true;
    }
    lwd_catalog_result result = lwd_catalog_get_mechanism(app->catalog, c->name, &row, &err);
    if (result != LWD_CATALOG_OK) {
        if (result == LWD_CATALOG_NOT_FOUND) {
            lwd_fail_store(reply, request, LWD_STORE_NO_MECHANISM, &err);
        } else {
            lwd_fail_catalog(reply, request, &err);
        }
        return false;
    }
    (void)snprintf(tag, sizeof tag, "state-%lld", (long long)row.tag);
    if (!lwd_tag_listed(request->if_match, tag, false)) {
        lwd_fail(reply, request, LWD_PROBLEM_PRECONDITION, NULL, NULL, tag,
                 "If-Match does not name the present state; read GET .../state, then decide anew.");
        return false;
    }
    c->expect_tag = row.tag;
    c->has_expect_tag = true;
    return true;
}

/* ---- warnings -------------------------------------------------------------------------------- */

static bool accepted(const change *c, const char *code)
{
    size_t n = strlen(code);
    for (const char *p = c->accepted; *p != '\0';) {
        size_t len = strcspn(p, " ");
        if (len == n && memcmp(p, code, n) == 0) {
            return true;
        }
        p += len;
        p += strspn(p, " ");
    }
    return false;
}

/* A name that means other signs than in the revision that answers now. */
static void warn_of_modes(change *c, const lwd_held *now, const lwd_held *next)
{
    const lw_report *a = now->edge.report;
    const lw_report *b = next->edge.report;
    for (size_t i = 0; i < b->n_mode_name; i++) {
        const char *name = next->edge.spec->mode[i].name;
        for (size_t k = 0; k < a->n_mode_name; k++) {
            char was[LW_MODE_TEXT_SIZE];
            char is[LW_MODE_TEXT_SIZE];
            char pointer[LW_NAME_SIZE + 8];
            if (strcmp(now->edge.spec->mode[k].name, name) != 0
                || lw_mode_same(&a->mode_name[k], &b->mode_name[i])) {
                continue;
            }
            lw_mode_text(was, &a->mode_name[k]);
            lw_mode_text(is, &b->mode_name[i]);
            (void)snprintf(pointer, sizeof pointer, "/modes/%s", name);
            lwd_finding *f =
                lwd_findings_add(&c->findings, LW_WARNING, "mode-signs-changed", pointer);
            if (f != NULL) {
                (void)snprintf(f->text, sizeof f->text,
                               "The mode \"%s\" was %.30s in revision %lld and is %.30s now: "
                               "programs that send signs would mean another mode.", name, was,
                               (long long)now->number, is);
                lwd_text_copy(f->expected, sizeof f->expected, was);
                lwd_text_copy(f->got, sizeof f->got, is);
            }
        }
    }
}

/* Leaves those warnings that were not accepted, as errors. */
static void keep_unaccepted(change *c)
{
    size_t n = 0;
    for (size_t i = 0; i < c->findings.n; i++) {
        lwd_finding *f = &c->findings.item[i];
        if (f->severity == LW_WARNING && !accepted(c, f->code)) {
            c->findings.item[n] = *f;
            c->findings.item[n].severity = LW_ERROR;
            n++;
        }
    }
    c->findings.n = n;
    c->findings.n_error = n;
    c->findings.n_warning = 0;
}

/* Collects the revision's warnings: those of the decoder, of the core, and of changed modes. */
static bool collect_warnings(lwd_app *app, change *c, lwd_held *held, lwd_catalog_error *err)
{
    lwd_catalog_revision revision;
    char digest[LWD_DIGEST_SIZE];
    if (lwd_catalog_get_revision(app->catalog, c->name, c->number, &revision, err)
        != LWD_CATALOG_OK) {
        return false;
    }
    lwd_findings_init(&c->findings);
    lwd_document *document = lwd_document_read_text(revision.document, revision.document_len,
                                                    &c->findings, digest, NULL);
    lwd_catalog_revision_clear(&revision);
    if (document == NULL) {
        err->result = LWD_CATALOG_MEMORY; /* it loaded a moment ago */
        return false;
    }
    lwd_document_free(document);
    lwd_findings_join(&c->findings, held->edge.report, LW_WARNING, LW_WARNING);
    lwd_held *now = NULL;
    if (lwd_store_get(app->store, c->name, 0, true, &now, err) == LWD_STORE_OK) {
        warn_of_modes(c, now, held);
        lwd_held_drop(now);
    }
    return true;
}

static bool warnings_accepted(lwd_app *app, change *c, const lwd_request *request,
                              lwd_reply *reply)
{
    lwd_catalog_error err;
    lwd_held *held = NULL;
    lwd_store_result result = lwd_store_get(app->store, c->name, c->number, true, &held, &err);
    if (result != LWD_STORE_OK) {
        lwd_fail_store(reply, request, result, &err);
        return false;
    }
    bool ok = collect_warnings(app, c, held, &err);
    lwd_held_drop(held);
    if (!ok) {
        lwd_fail_catalog(reply, request, &err);
        return false;
    }
    keep_unaccepted(c);
    if (c->findings.n > 0) {
        lwd_problem_reply_refused(reply, request, LWD_PROBLEM_WARNINGS, &c->findings);
        return false;
    }
    return true;
}

/* ---- both ------------------------------------------------------------------------------------ */

static void log_change(const change *c, const lwd_request *request)
{
    lwd_log_line line;
    lwd_log_begin(&line, LWD_LOG_INFO,
                  c->action == LWD_CATALOG_PUBLISH ? "revision_published" : "revision_withdrawn");
    lwd_log_str(&line, "mechanism", c->name);
    lwd_log_int(&line, "revision", c->number);
    lwd_log_str(&line, "by", request->token_name);
    lwd_log_end(&line);
}

static void answer(const change *c, const lwd_request *request, lwd_reply *reply,
                   const lwd_catalog_state_result *out)
{
    char tag[40];
    lwd_json json;
    (void)snprintf(tag, sizeof tag, "state-%lld", (long long)out->tag);
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", c->name);
    lwd_json_put_int(&json, "revision", c->number);
    lwd_json_put_string(&json, "state", lwd_catalog_state_name(out->state));
    if (out->answering > 0) {
        lwd_json_put_int(&json, "answering", out->answering);
    } else {
        lwd_json_put_null(&json, "answering");
    }
    lwd_json_put_bool(&json, "changed", out->changed);
    lwd_json_put_string(&json, "tag", tag);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

static void apply(lwd_app *app, change *c, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_error err;
    lwd_catalog_state_result out;
    lwd_catalog_set_state_request in = {.name = c->name,
                                        .number = c->number,
                                        .action = c->action,
                                        .who = request->token_name,
                                        .when_ms = lwd_now_utc_ms(),
                                        .reason = c->reason,
                                        .accepted = c->accepted,
                                        .expect_tag = c->has_expect_tag ? &c->expect_tag : NULL};
    lwd_catalog_result result = lwd_catalog_set_state(app->catalog, &in, &out, &err);
    if (result == LWD_CATALOG_NOT_FOUND) {
        lwd_catalog_mechanism row;
        bool known = lwd_catalog_get_mechanism(app->catalog, c->name, &row, NULL) == LWD_CATALOG_OK;
        lwd_fail_store(reply, request, known ? LWD_STORE_NO_REVISION : LWD_STORE_NO_MECHANISM,
                       &err);
    } else if (result != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
    } else {
        log_change(c, request);
        answer(c, request, reply, &out);
    }
}

static void change_state(lwd_app *app, lwd_catalog_action action, const lwd_request *request,
                         lwd_reply *reply)
{
    const char *name = NULL;
    int64_t number = 0;
    if (!lwd_query_members(reply, request, NULL, NULL, 0) || !lwd_takes_json(reply, request)
        || !lwd_path_name(reply, request, &name)
        || !lwd_path_revision(reply, request, 1, &number)) {
        return;
    }
    change *c = calloc(1, sizeof *c);
    if (c == NULL) {
        lwd_fail_memory(reply, request);
        return;
    }
    c->name = name;
    c->number = number;
    c->action = action;
    lwd_findings_init(&c->findings);
    if (read_body(c, request, reply) && read_tag(c, app, request, reply)
        && (action != LWD_CATALOG_PUBLISH || warnings_accepted(app, c, request, reply))) {
        apply(app, c, request, reply);
    }
    free(c);
}

void lwd_post_publish(void *context, const lwd_request *request, lwd_reply *reply)
{
    change_state(context, LWD_CATALOG_PUBLISH, request, reply);
}

void lwd_post_withdraw(void *context, const lwd_request *request, lwd_reply *reply)
{
    change_state(context, LWD_CATALOG_WITHDRAW, request, reply);
}
