/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The store of loaded mechanisms. One lock guards the tables; loading (catalog, decoding, building
 * the model) happens outside it, so two threads may load the same revision at once and the second
 * throws its copy away. A count of catalog changes tells a loader that what it read is old. */
#include "store.h"

#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../log.h"
#include "sets.h"

enum { BUCKETS = 1024, TRIES = 8 };

typedef struct mechanism {
    char name[LWD_CATALOG_NAME_MAX + 1];
    int64_t answering; /* 0 = none */
    lwd_held *held;    /* its loaded revisions */
    struct mechanism *next;
} mechanism;

struct lwd_store {
    pthread_mutex_t lock;
    lwd_catalog *catalog;
    lwd_preparing preparing; /* for sets that have to be made */
    mechanism *bucket[BUCKETS];
    size_t n_held;
    uint64_t tick;
    uint64_t serial;
    uint64_t changes;
};

lwd_store *lwd_store_new(lwd_catalog *catalog, lwd_preparing preparing)
{
    lwd_store *store = calloc(1, sizeof *store);
    if (store != NULL && pthread_mutex_init(&store->lock, NULL) != 0) {
        free(store);
        return NULL;
    }
    if (store != NULL) {
        store->catalog = catalog;
        store->preparing = preparing;
    }
    return store;
}

void lwd_store_catalog(lwd_store *store, lwd_catalog *catalog)
{
    store->catalog = catalog;
}

lwd_held *lwd_held_keep(lwd_held *held)
{
    (void)atomic_fetch_add_explicit(&held->references, 1, memory_order_relaxed);
    return held;
}

void lwd_held_drop(lwd_held *held)
{
    if (held != NULL
        && atomic_fetch_sub_explicit(&held->references, 1, memory_order_acq_rel) == 1) {
        lwd_buf *modes = atomic_load(&held->modes);
        if (modes != NULL) {
            lwd_buf_clear(modes);
            free(modes);
        }
        lw_model_free(held->model);
        lwd_document_free(held->document);
        free(held);
    }
}

void lwd_store_free(lwd_store *store)
{
    if (store == NULL) {
        return;
    }
    for (size_t i = 0; i < BUCKETS; i++) {
        while (store->bucket[i] != NULL) {
            mechanism *m = store->bucket[i];
            store->bucket[i] = m->next;
            while (m->held != NULL) {
                lwd_held *held = m->held;
                m->held = held->next;
                lwd_held_drop(held);
            }
            free(m);
        }
    }
    (void)pthread_mutex_destroy(&store->lock);
    free(store);
}

/* ---- tables, the lock is held ---------------------------------------------------------------- */

/* FNV-1a. */
static size_t bucket_of(const char *name)
{
    uint32_t h = 2166136261U;
    for (const char *p = name; *p != '\0'; p++) {
        h = (h ^ (unsigned char)*p) * 16777619U;
    }
    return h % BUCKETS;
}

static mechanism *find(const lwd_store *store, const char *name)
{
    mechanism *m = store->bucket[bucket_of(name)];
    while (m != NULL && strcmp(m->name, name) != 0) {
        m = m->next;
    }
    return m;
}

static mechanism *find_or_add(lwd_store *store, const char *name)
{
    mechanism *m = find(store, name);
    if (m == NULL && (m = calloc(1, sizeof *m)) != NULL) {
        size_t i = bucket_of(name);
        (void)snprintf(m->name, sizeof m->name, "%s", name);
        m->next = store->bucket[i];
        store->bucket[i] = m;
    }
    return m;
}

static lwd_held *find_held(const mechanism *m, int64_t number)
{
    lwd_held *held = m->held;
    while (held != NULL && held->number != number) {
        held = held->next;
    }
    return held;
}

/* Takes the least recently used out of the tables; the caller drops it when the lock is off. */
static lwd_held *unlink_oldest(lwd_store *store)
{
    lwd_held **oldest = NULL;
    for (size_t i = 0; i < BUCKETS; i++) {
        for (mechanism *m = store->bucket[i]; m != NULL; m = m->next) {
            for (lwd_held **at = &m->held; *at != NULL; at = &(*at)->next) {
                if (oldest == NULL || (*at)->used < (*oldest)->used) {
                    oldest = at;
                }
            }
        }
    }
    if (oldest == NULL) {
        return NULL;
    }
    lwd_held *held = *oldest;
    *oldest = held->next;
    held->next = NULL;
    store->n_held--;
    return held;
}

void lwd_store_changed(void *context, const lwd_catalog_change *change)
{
    lwd_store *store = context;
    (void)pthread_mutex_lock(&store->lock);
    store->changes++;
    mechanism *m = find(store, change->name);
    if (m != NULL) {
        m->answering = change->answering;
        lwd_held *held = find_held(m, change->number);
        if (held != NULL && change->action != LWD_CATALOG_PUT) {
            atomic_store(&held->state, change->action == LWD_CATALOG_PUBLISH
                                           ? (int)LWD_CATALOG_PUBLISHED
                                           : (int)LWD_CATALOG_WITHDRAWN);
        }
    }
    (void)pthread_mutex_unlock(&store->lock);
}

/* ---- loading --------------------------------------------------------------------------------- */

unsigned long long lwd_seed_of(const char *digest)
{
    char head[17];
    (void)snprintf(head, sizeof head, "%.16s", digest);
    return strtoull(head, NULL, 16);
}

static lwd_store_result result_of(const lwd_catalog_error *err)
{
    switch (err->result) {
    case LWD_CATALOG_NOT_FOUND:
        return LWD_STORE_NO_REVISION;
    case LWD_CATALOG_NONE_PUBLISHED:
        return LWD_STORE_NONE_PUBLISHED;
    case LWD_CATALOG_MEMORY:
        return LWD_STORE_MEMORY;
    default:
        return LWD_STORE_CATALOG;
    }
}

/* Decodes a stored text, builds its model and opens its solution sets. */
static lwd_store_result build(const lwd_store *store, lwd_held *held,
                              const lwd_catalog_revision *revision)
{
    lwd_store_result result = LWD_STORE_MEMORY;
    char digest[LWD_DIGEST_SIZE];
    lwd_findings *findings = malloc(sizeof *findings);
    lw_report *report = malloc(sizeof *report);
    lw_err err = {.code = LW_OK};
    if (findings == NULL || report == NULL) {
        goto done;
    }
    lwd_findings_init(findings);
    held->document = lwd_document_read_text(revision->document, revision->document_len, findings,
                                            digest, NULL);
    if (held->document == NULL) {
        result = findings->no_memory ? LWD_STORE_MEMORY : LWD_STORE_UNUSABLE;
        goto done;
    }
    lw_code code = lw_model_new(&held->model, &held->document->spec,
                                lwd_seed_of(revision->info.digest), report, &err);
    if (code == LW_OK) {
        code = lwd_sets_open(store->catalog, &store->preparing, held->model, held->name,
                             revision->info.number, revision->info.digest, &err);
    }
    if (code != LW_OK) {
        /* Ended by the stop: nobody waits for the answer any more. */
        result = code == LW_E_MEMORY || code == LW_E_ABORTED ? LWD_STORE_MEMORY
                                                              : LWD_STORE_UNUSABLE;
        goto done;
    }
    held->number = revision->info.number;
    atomic_init(&held->state, (int)revision->info.state);
    lwd_edge_init(&held->edge, held->document, held->model, held->name, held->number,
                  revision->info.digest);
    result = LWD_STORE_OK;
done:
    if (result == LWD_STORE_UNUSABLE) {
        lwd_log(LWD_LOG_ERROR, "model_unusable", "%s revision %lld does not load: %s", held->name,
                (long long)revision->info.number, err.msg);
    }
    free(report);
    free(findings);
    return result;
}

/* One revision from the catalog, with one reference. */
static lwd_store_result load(lwd_store *store, const char *name, int64_t number, lwd_held **out,
                             lwd_catalog_error *err)
{
    lwd_catalog_revision revision;
    if (lwd_catalog_get_revision(store->catalog, name, number, &revision, err) != LWD_CATALOG_OK) {
        return result_of(err);
    }
    lwd_store_result result = LWD_STORE_MEMORY;
    lwd_held *held = calloc(1, sizeof *held);
    if (held != NULL) {
        atomic_init(&held->references, 1);
        atomic_init(&held->modes, NULL);
        (void)snprintf(held->name, sizeof held->name, "%s", name);
        result = build(store, held, &revision);
    }
    lwd_catalog_revision_clear(&revision);
    if (result != LWD_STORE_OK) {
        lwd_held_drop(held);
        held = NULL;
    }
    *out = held;
    return result;
}

/* Puts a loaded revision into the tables, or finds that another thread was faster. Returns the one
 * that counts, with a reference for the caller; the given reference is used up. */
static lwd_held *enter(lwd_store *store, mechanism *m, lwd_held *held, lwd_held *dropped[2])
{
    lwd_held *there = find_held(m, held->number);
    if (there != NULL) {
        dropped[0] = held;
        held = there;
    } else {
        held->serial = ++store->serial;
        held->next = m->held;
        m->held = held;
        store->n_held++;
    }
    held->used = ++store->tick;
    if (store->n_held > LWD_STORE_MODELS) {
        dropped[1] = unlink_oldest(store);
    }
    return lwd_held_keep(held);
}

/* Reads what the catalog says now and enters `held` if nothing changed meanwhile. */
static lwd_store_result settle(lwd_store *store, lwd_held *held, uint64_t seen, bool *settled,
                               lwd_held **out, lwd_catalog_error *err)
{
    lwd_catalog_mechanism row;
    lwd_catalog_revision_info info;
    if (lwd_catalog_get_mechanism(store->catalog, held->name, &row, err) != LWD_CATALOG_OK
        || lwd_catalog_get_revision_info(store->catalog, held->name, held->number, &info, err)
               != LWD_CATALOG_OK) {
        return result_of(err);
    }
    lwd_held *dropped[2] = {NULL, NULL};
    lwd_store_result result = LWD_STORE_OK;
    (void)pthread_mutex_lock(&store->lock);
    if (store->changes == seen) {
        mechanism *m = find_or_add(store, held->name);
        *settled = true;
        if (m == NULL) {
            result = LWD_STORE_MEMORY;
        } else {
            m->answering = row.answering;
            atomic_store(&held->state, (int)info.state);
            *out = enter(store, m, held, dropped);
        }
    }
    (void)pthread_mutex_unlock(&store->lock);
    lwd_held_drop(dropped[0]);
    lwd_held_drop(dropped[1]);
    return result;
}

static uint64_t changes_now(lwd_store *store)
{
    (void)pthread_mutex_lock(&store->lock);
    uint64_t changes = store->changes;
    (void)pthread_mutex_unlock(&store->lock);
    return changes;
}

static lwd_store_result get_slow(lwd_store *store, const char *name, int64_t revision,
                                 lwd_held **out, lwd_catalog_error *err)
{
    lwd_held *held = NULL;
    lwd_store_result result = load(store, name, revision, &held, err);
    bool settled = false;
    if (result == LWD_STORE_NO_REVISION) {
        lwd_catalog_mechanism row;
        if (lwd_catalog_get_mechanism(store->catalog, name, &row, err) == LWD_CATALOG_NOT_FOUND) {
            return LWD_STORE_NO_MECHANISM;
        }
    }
    for (int i = 0; i < TRIES && result == LWD_STORE_OK && !settled; i++) {
        uint64_t seen = changes_now(store);
        result = settle(store, held, seen, &settled, out, err);
    }
    if (result == LWD_STORE_OK && !settled) {
        /* The catalog changes faster than it can be read: serve this one, enter it another time. */
        (void)pthread_mutex_lock(&store->lock);
        held->serial = ++store->serial;
        (void)pthread_mutex_unlock(&store->lock);
        *out = held;
        return LWD_STORE_OK;
    }
    if (result != LWD_STORE_OK) {
        lwd_held_drop(held);
    }
    return result;
}

lwd_store_result lwd_store_get(lwd_store *store, const char *name, int64_t revision, bool may_load,
                               lwd_held **out, lwd_catalog_error *err)
{
    lwd_store_result result = LWD_STORE_NOT_LOADED;
    *out = NULL;
    (void)pthread_mutex_lock(&store->lock);
    const mechanism *m = find(store, name);
    if (m != NULL) {
        int64_t number = revision != 0 ? revision : m->answering;
        lwd_held *held = number != 0 ? find_held(m, number) : NULL;
        if (held != NULL) {
            held->used = ++store->tick;
            *out = lwd_held_keep(held);
            result = LWD_STORE_OK;
        } else if (number == 0) {
            result = LWD_STORE_NONE_PUBLISHED;
        }
    }
    (void)pthread_mutex_unlock(&store->lock);
    if (result != LWD_STORE_NOT_LOADED || !may_load) {
        return result;
    }
    return get_slow(store, name, revision, out, err);
}

size_t lwd_store_load_answering(lwd_store *store, bool (*stop)(void))
{
    enum { PAGE = 64 };
    lwd_catalog_mechanism *page = calloc(PAGE, sizeof *page);
    char after[LWD_CATALOG_NAME_MAX + 1] = "";
    lwd_catalog_error err;
    size_t loaded = 0;
    bool more = page != NULL;
    while (more) {
        size_t n = 0;
        if (lwd_catalog_list_mechanisms(store->catalog, after, page, PAGE, &n, &more, &err)
            != LWD_CATALOG_OK) {
            lwd_log(LWD_LOG_WARN, "models_not_loaded", "%s", err.why);
            break;
        }
        for (size_t i = 0; i < n; i++) {
            lwd_held *held = NULL;
            if (loaded >= LWD_STORE_MODELS || stop()) {
                more = false;
                break;
            }
            if (page[i].answering > 0
                && lwd_store_get(store, page[i].name, page[i].answering, true, &held, &err)
                       == LWD_STORE_OK) {
                loaded++;
                lwd_held_drop(held);
            }
        }
        if (n > 0) {
            (void)snprintf(after, sizeof after, "%s", page[n - 1].name);
        }
    }
    free(page);
    return loaded;
}

void lwd_store_counts(lwd_store *store, size_t *loaded, uint64_t *loads)
{
    (void)pthread_mutex_lock(&store->lock);
    *loaded = store->n_held;
    *loads = store->serial;
    (void)pthread_mutex_unlock(&store->lock);
}
