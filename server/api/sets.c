/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Making, keeping and loading solution sets. */
#include "sets.h"

#include <stdlib.h>

#include "../log.h"
#include "api.h"

lw_code lwd_sets_make(lw_model *model, const char *digest, lw_err *err)
{
    return lw_model_prepare(model, lwd_seed_of(digest), LWD_PREPARE_PATHS, err);
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

lw_code lwd_sets_open(lwd_catalog *catalog, lw_model *model, const char *name, int64_t number,
                      const char *digest, lw_err *err)
{
    lwd_catalog_error catalog_err;
    lwd_catalog_blob blob = {.data = NULL};
    lw_err load_err = {.code = LW_OK};
    lwd_catalog_result found =
        lwd_catalog_load_solutions(catalog, name, number, &blob, &catalog_err);
    bool damaged = found == LWD_CATALOG_DAMAGED;
    if (found == LWD_CATALOG_OK) {
        lw_code code = lw_model_sets_load(model, lwd_seed_of(digest), blob.data, blob.len, &load_err);
        lwd_catalog_blob_clear(&blob);
        if (code == LW_OK || code == LW_E_MEMORY) {
            return code;
        }
        damaged = true;
    }
    if (damaged) {
        lwd_log(LWD_LOG_WARN, "sets_damaged",
                "%s revision %lld: the kept solution sets are damaged and are made anew", name,
                (long long)number);
    }
    lw_code code = lwd_sets_make(model, digest, err);
    if (code == LW_OK) {
        lwd_sets_keep(catalog, model, name, number);
    }
    return code;
}
