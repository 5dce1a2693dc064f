/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solution sets of models: made when a document comes in, kept in the catalog with its revision,
 * checked when they are loaded and made anew where they are missing or damaged. Seconds of work:
 * never called on the event thread. */
#ifndef LWD_API_SETS_H
#define LWD_API_SETS_H

#include <stdint.h>

#include <stdatomic.h>

#include <leeway/model.h>

#include "../catalog/catalog.h"
#include "../codec/findings.h"

/* Paths tracked at most while preparing one set: work is counted, so that the outcome is the same
 * on every machine. Builds with sanitizers, ten times slower, are given fewer by the build. */
#ifndef LWD_PREPARE_PATHS
#define LWD_PREPARE_PATHS 24000
#endif

/* How much work a set may take, and the flag that ends it (NULL: none). */
typedef struct lwd_preparing {
    unsigned long paths;
    const atomic_bool *stop;
} lwd_preparing;

/* Makes the sets of a fresh model. LW_E_MEMORY or LW_E_ABORTED at worst; a mechanism that is not
 * served has none. */
lw_code lwd_sets_make(lw_model *model, const char *digest, const lwd_preparing *preparing,
                      lw_err *err);

/* Keeps them with a revision; a failure is logged, the sets can be made again. */
void lwd_sets_keep(lwd_catalog *catalog, const lw_model *model, const char *name, int64_t number);

/* For a fresh model of a stored revision: loads what is kept, or makes it and keeps it. */
lw_code lwd_sets_open(lwd_catalog *catalog, const lwd_preparing *preparing, lw_model *model,
                      const char *name, int64_t number, const char *digest, lw_err *err);

/* For a document that comes in: takes over the sets of a revision that is not withdrawn and has
 * the same digest, else makes them. Nothing is kept yet. */
lw_code lwd_sets_take(lwd_catalog *catalog, const lwd_preparing *preparing, lw_model *model,
                      const char *name, const char *digest, lw_err *err);

/* Notes on sets that are missing or could not be closed. */
void lwd_sets_judge(lwd_findings *findings, const lw_model *model);

#endif
