/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Loaded mechanisms: (name, revision) to a decoded document with its model, immutable and
 * reference-counted. Revisions that answer by default are loaded at the start and when they are
 * published, others when they are first asked about, in a worker; they are kept until they are the
 * least recently used of too many. Which revision answers by default is kept in step with the
 * catalog by lwd_store_changed, so a question about a loaded mechanism never reads the catalog.
 * Any thread may call; the lock is held for look-ups only, never while loading. */
#ifndef LWD_API_STORE_H
#define LWD_API_STORE_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <leeway/model.h>

#include "../catalog/catalog.h"
#include "../codec/document.h"
#include "../codec/edge.h"
#include "../exchange.h"
#include "sets.h"

enum { LWD_STORE_MODELS = 64 }; /* kept loaded at most; users keep those in use alive */

typedef struct lwd_held {
    atomic_uint references;
    uint64_t serial;  /* different for every loaded model, ever */
    atomic_int state; /* lwd_catalog_state, follows the catalog */
    int64_t number;
    char name[LWD_CATALOG_NAME_MAX + 1];
    lwd_document *document;
    lw_model *model;
    lwd_edge edge;
    _Atomic(lwd_buf *) modes; /* the list of modes as JSON, NULL until somebody asks */
    struct lwd_held *next; /* the store's: other revisions of the same mechanism */
    uint64_t used;         /* the store's: when last asked for */
} lwd_held;

typedef enum lwd_store_result {
    LWD_STORE_OK,
    LWD_STORE_NO_MECHANISM,
    LWD_STORE_NO_REVISION,
    LWD_STORE_NONE_PUBLISHED,
    LWD_STORE_UNUSABLE, /* stored, but this program can not make a model of it */
    LWD_STORE_NOT_LOADED, /* only where loading was not allowed */
    LWD_STORE_CATALOG,  /* the catalog failed: err->result */
    LWD_STORE_MEMORY
} lwd_store_result;

typedef struct lwd_store lwd_store;

/* `preparing`: for a solution set that is missing. */
lwd_store *lwd_store_new(lwd_catalog *catalog, lwd_preparing preparing);
void lwd_store_free(lwd_store *store);

/* To be called once, before any other call, where the catalog could not be given at once (its
 * options want the callback first). */
void lwd_store_catalog(lwd_store *store, lwd_catalog *catalog);

/* The catalog's change callback; `context` is the store. */
void lwd_store_changed(void *context, const lwd_catalog_change *change);

/* Revision 0 is the one that answers by default. On LWD_STORE_OK *out is referenced; give it back
 * with lwd_held_drop. `may_load` false: LWD_STORE_NOT_LOADED instead of loading. */
lwd_store_result lwd_store_get(lwd_store *store, const char *name, int64_t revision, bool may_load,
                               lwd_held **out, lwd_catalog_error *err);

lwd_held *lwd_held_keep(lwd_held *held);
void lwd_held_drop(lwd_held *held);

/* Loads the revisions that answer by default, so that no first question has to wait, until `stop`
 * says so or LWD_STORE_MODELS are loaded. Sets that are missing or damaged are made anew. Returns
 * how many are loaded. */
size_t lwd_store_load_answering(lwd_store *store, bool (*stop)(void));

/* Models loaded now, and since the start. */
void lwd_store_counts(lwd_store *store, size_t *loaded, uint64_t *loads);

/* Seed of the random configurations of the checks, from a digest. */
unsigned long long lwd_seed_of(const char *digest);

#endif
