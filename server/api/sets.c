/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Making, keeping and loading solution sets. */
#include "sets.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../log.h"
#include "api.h"

lw_code lwd_sets_make(lw_model *model, const char *digest, const lwd_preparing *preparing,
                      lw_err *err)
{
    return lw_model_prepare(model, lwd_seed_of(digest), preparing->paths, preparing->stop, err);
}

void lwd_sets_keep(lwd_catalog *catalog, const lw_model *model, const char *name, int64_t number)
{
    lwd_catalog_error err;
    size_t size = lw_model_sets_size(model);
    if (size == 0) {
        return;
    }
    void *data = malloc(size);
    if (data == NULL) {
        lwd_log(LWD_LOG_WARN, "sets_not_kept", "%s revision %lld: out of memory", name,
                (long long)number);
        return;
    }
    lw_model_sets_save(data, model);
    if (lwd_catalog_save_solutions(catalog, name, number, data, size, lwd_now_utc_ms(), &err)
        != LWD_CATALOG_OK) {
        lwd_log(LWD_LOG_WARN, "sets_not_kept", "%s revision %lld: %s", name, (long long)number,
                err.why);
    }
    free(data);
}

/* Loads what is kept. True if `*code` settles the matter; else the sets have to be made. */
static bool load_kept(lwd_catalog *catalog, lw_model *model, const char *name, int64_t number,
                      const char *digest, lw_code *code)
{
    lwd_catalog_error catalog_err;
    lwd_catalog_blob blob = {.data = NULL};
    lw_err err = {.code = LW_OK};
    lwd_catalog_result found =
        lwd_catalog_load_solutions(catalog, name, number, &blob, &catalog_err);
    const char *why = found == LWD_CATALOG_OK ? err.msg : catalog_err.why;
    if (found == LWD_CATALOG_NO_SOLUTIONS) {
        return false;
    }
    if (found == LWD_CATALOG_OK) {
        *code = lw_model_sets_load(model, lwd_seed_of(digest), blob.data, blob.len, &err);
        lwd_catalog_blob_clear(&blob);
        if (*code == LW_OK || *code == LW_E_MEMORY) {
            return true;
        }
    }
    lwd_log(LWD_LOG_WARN, "sets_damaged", "%s revision %lld: %s; the solution sets are made anew",
            name, (long long)number, why);
    return false;
}

lw_code lwd_sets_open(lwd_catalog *catalog, const lwd_preparing *preparing, lw_model *model,
                      const char *name, int64_t number, const char *digest, lw_err *err)
{
    lw_code code = LW_OK;
    if (load_kept(catalog, model, name, number, digest, &code)) {
        return code;
    }
    code = lwd_sets_make(model, digest, preparing, err);
    if (code == LW_OK) {
        lwd_sets_keep(catalog, model, name, number);
    }
    return code;
}

/* The newest revision that is not withdrawn and has this digest; 0 if there is none. */
static int64_t same_content(lwd_catalog *catalog, const char *name, const char *digest)
{
    lwd_catalog_mechanism row;
    if (lwd_catalog_get_mechanism(catalog, name, &row, NULL) != LWD_CATALOG_OK) {
        return 0;
    }
    for (int64_t n = row.revisions; n > 0; n--) {
        lwd_catalog_revision_info info;
        if (lwd_catalog_get_revision_info(catalog, name, n, &info, NULL) == LWD_CATALOG_OK
            && info.state != LWD_CATALOG_WITHDRAWN && strcmp(info.digest, digest) == 0) {
            return info.has_solutions ? n : 0;
        }
    }
    return 0;
}

lw_code lwd_sets_take(lwd_catalog *catalog, const lwd_preparing *preparing, lw_model *model,
                      const char *name, const char *digest, lw_err *err)
{
    lw_code code = LW_OK;
    int64_t number = same_content(catalog, name, digest);
    if (number > 0 && load_kept(catalog, model, name, number, digest, &code)) {
        return code;
    }
    return lwd_sets_make(model, digest, preparing, err);
}

static void judge(lwd_findings *findings, const lw_set_info *set, const char *code,
                  const char *question)
{
    if (set->present && set->closed) {
        return;
    }
    lwd_finding *f = lwd_findings_add(findings, LW_NOTE, code, "");
    if (f == NULL) {
        return;
    }
    if (set->present) {
        (void)snprintf(f->text, sizeof f->text,
                       "%zu solutions were found with %lu paths, but the trace test did not show "
                       "that none is missing: %s answers \"complete\": false.",
                       set->solutions, set->paths, question);
    } else {
        (void)snprintf(f->text, sizeof f->text,
                       "No solution set could be prepared for this mechanism: %s answers from "
                       "known postures only, with \"complete\": false.",
                       question);
    }
}

void lwd_sets_judge(lwd_findings *findings, const lw_model *model)
{
    const lw_report *report = lw_model_report(model);
    /* The readings of a serial chain name one posture; a rod closes a loop. */
    if (report->closure_rows > 0 || lw_model_spec(model)->n_rod > 0) {
        judge(findings, &report->forward_set, "forward-set-open", "forward with \"all\"");
    }
    if (!report->explicit_inverse) {
        judge(findings, &report->inverse_set, "inverse-set-open", "inverse");
    }
}
