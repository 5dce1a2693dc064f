/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The catalog: mechanisms, their immutable revisions, what happened to them, kept on disk.
 *
 * It stores texts, blobs, digests and states; it knows no geometry and no JSON. It is the only room
 * that includes sqlite3.h. One handle owns one directory (a lock file keeps a second daemon out).
 *
 * Threads. Every function may be called from any thread. Writes are queued to one writer thread,
 * the only one that writes and checkpoints; it commits waiting writes together and the caller
 * returns after the commit is on the disk (synchronous=FULL), so LWD_CATALOG_OK means: a crash at
 * any later instant does not lose it. Reads use a small pool of read-only connections and never
 * wait for the writer. Write calls block for a disk flush: call them from a worker, not from an
 * event thread. The change callback runs on the writer thread: it may read, it must not write.
 *
 * Memory. Inputs are borrowed until the call returns. Listings fill the caller's array. Only
 * lwd_catalog_revision and lwd_catalog_blob own heap memory; their _clear frees it. On any result
 * but LWD_CATALOG_OK outputs hold no heap memory.
 *
 * Answering. A revision is a draft, then published, then withdrawn (a draft may be withdrawn too).
 * Publishing withdraws nothing: earlier published revisions stay published and can be named, but
 * the one published last answers by default. Going back is publishing the earlier one again.
 * When the answering revision is withdrawn, none answers until somebody publishes one: an older
 * geometry never comes back by itself. */
#ifndef LWD_CATALOG_H
#define LWD_CATALOG_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Bounds in bytes, without the closing NUL where the text is a string. The schema repeats them. */
enum {
    LWD_CATALOG_NAME_MAX = 32,   /* mechanism: [a-z0-9-] */
    LWD_CATALOG_DIGEST_LEN = 64, /* SHA-256 as lower-case hex */
    LWD_CATALOG_WHO_MAX = 64,    /* token name, at least 1 */
    LWD_CATALOG_REASON_MAX = 511,
    LWD_CATALOG_ACCEPTED_MAX = 1023,            /* accepted warning codes, caller's format */
    LWD_CATALOG_DOCUMENT_MAX = 4 * 1024 * 1024, /* at least 1 */
    LWD_CATALOG_REPORT_MAX = 1024 * 1024,
    LWD_CATALOG_SOLUTIONS_MAX = 16 * 1024 * 1024, /* at least 1 */
    LWD_CATALOG_MECHANISMS_MAX = 10000,           /* in one catalog */
    LWD_CATALOG_REVISIONS_MAX = 10000,            /* of one mechanism */
    LWD_CATALOG_PAGE_MAX = 500                    /* rows of one listing call */
};

/* Code, and the sentence used where there is nothing more precise to say. */
#define LWD_CATALOG_RESULT_LIST(X)                                                                 \
    X(LWD_CATALOG_OK, "done")                                                                      \
    X(LWD_CATALOG_NOT_FOUND, "no such mechanism or revision")                                      \
    X(LWD_CATALOG_NONE_PUBLISHED, "no revision of this mechanism is published")                    \
    X(LWD_CATALOG_NO_SOLUTIONS, "no solution set is stored for this revision")                     \
    X(LWD_CATALOG_CONFLICT, "the state has changed since it was read")                             \
    X(LWD_CATALOG_NOT_ALLOWED, "the state of the revision does not allow this")                    \
    X(LWD_CATALOG_ARGUMENT, "a value is outside its bounds")                                       \
    X(LWD_CATALOG_LIMIT, "the catalog holds as many as it may")                                    \
    X(LWD_CATALOG_BUSY, "too many writes are waiting, try again shortly")                          \
    X(LWD_CATALOG_CLOSING, "the catalog is being closed")                                          \
    X(LWD_CATALOG_FULL, "the disk is full, nothing was stored")                                    \
    X(LWD_CATALOG_STORAGE, "the disk reported an error")                                           \
    X(LWD_CATALOG_DAMAGED, "stored data is damaged")                                               \
    X(LWD_CATALOG_NEWER, "the catalog was written by a newer program")                             \
    X(LWD_CATALOG_LOCKED, "another process uses this catalog")                                     \
    X(LWD_CATALOG_MEMORY, "out of memory")                                                         \
    X(LWD_CATALOG_INTERNAL, "internal error of the catalog")

typedef enum lwd_catalog_result {
#define LWD_CATALOG_RESULT_CODE(code, text) code,
    LWD_CATALOG_RESULT_LIST(LWD_CATALOG_RESULT_CODE)
#undef LWD_CATALOG_RESULT_CODE
        LWD_CATALOG_RESULT_COUNT
} lwd_catalog_result;

/* Borrowed for ever; the fallback sentence for a number out of range. */
const char *lwd_catalog_result_text(lwd_catalog_result result);

/* Caller-owned; may be NULL everywhere. Filled on failure, `why` emptied on success. `why` is one
 * sentence for a person; it may name a path of this machine, so send it to administrators and to
 * the log, not to every client. For NOT_FOUND, NONE_PUBLISHED, NO_SOLUTIONS, CONFLICT, NOT_ALLOWED,
 * ARGUMENT, LIMIT, BUSY and CLOSING it names no path and may be sent to anybody (but for the
 * ARGUMENT of open and backup, which may name theirs). */
typedef struct lwd_catalog_error {
    lwd_catalog_result result;
    int storage_code; /* extended code of the database library, 0 if it was not involved */
    char why[200];
} lwd_catalog_error;

typedef enum lwd_catalog_state {
    LWD_CATALOG_DRAFT,
    LWD_CATALOG_PUBLISHED,
    LWD_CATALOG_WITHDRAWN
} lwd_catalog_state;

/* "draft", "published", "withdrawn"; borrowed for ever. */
const char *lwd_catalog_state_name(lwd_catalog_state state);

typedef enum lwd_catalog_action {
    LWD_CATALOG_PUT, /* only in changes: a new draft revision */
    LWD_CATALOG_PUBLISH,
    LWD_CATALOG_WITHDRAW
} lwd_catalog_action;

/* "put", "publish", "withdraw"; borrowed for ever. */
const char *lwd_catalog_action_name(lwd_catalog_action action);

/* One committed change, told to the model store. */
typedef struct lwd_catalog_change {
    lwd_catalog_action action;
    char name[LWD_CATALOG_NAME_MAX + 1];
    int64_t number;    /* the revision acted on */
    int64_t answering; /* the revision that answers by default now, 0 = none */
    int64_t tag;       /* state tag of the mechanism now */
} lwd_catalog_change;

typedef void (*lwd_catalog_changed)(void *context, const lwd_catalog_change *change);

/* Zero means "the default" for every number. */
typedef struct lwd_catalog_options {
    bool skip_check;    /* do not verify the file at start (it costs about 10 ms per MB) */
    unsigned readers;   /* read-only connections, 1 to 16; default 2 */
    unsigned queue_max; /* writes that may wait, 1 to 1024; default 64; more get BUSY */
    unsigned batch_max; /* writes committed together, 1 to 256; default 32 */
    unsigned
        checkpoint_commits;  /* checkpoint after so many commits; default 256 (or 4 MB of log) */
    unsigned mechanisms_max; /* at most LWD_CATALOG_MECHANISMS_MAX, the default */
    unsigned revisions_max;  /* of one mechanism, at most LWD_CATALOG_REVISIONS_MAX, the default */
    unsigned pages_max;      /* largest size of the file in 4096-byte pages; default: no bound */
    lwd_catalog_changed changed; /* called on the writer thread after each committed change and
                                  * before the writing call returns; may be NULL */
    void *changed_context;
} lwd_catalog_options;

#define LWD_CATALOG_OPTIONS_DEFAULT ((lwd_catalog_options){.readers = 0})

typedef struct lwd_catalog lwd_catalog;

/* Opens, and if need be makes, the catalog in directory `dir`; the directory itself is made with
 * mode 0750 if its parent exists. ":memory:" gives an empty catalog that vanishes on close, for
 * tests. `options` may be NULL. *out is NULL on failure.
 * Fails with LOCKED (in use), NEWER (written by a newer program), DAMAGED, STORAGE, FULL,
 * ARGUMENT (path too long, directory writable by everybody, a foreign file). */
lwd_catalog_result lwd_catalog_open(lwd_catalog **out, const char *dir,
                                    const lwd_catalog_options *options, lwd_catalog_error *err);

/* Commits what is queued, checkpoints, closes, frees. No other call may be running or follow, so
 * stop the threads that use it first. NULL is fine. */
void lwd_catalog_close(lwd_catalog *catalog);

/* ---- writing ---- */

typedef struct lwd_catalog_put {
    const char *name;
    const char *document; /* exactly as it was sent; without NUL bytes */
    size_t document_len;
    const char *digest; /* of the canonical form, computed by the caller */
    const char *report; /* validation report, may be "" */
    size_t report_len;
    const char *who; /* token name */
    int64_t when_ms; /* UTC */
    /* Compare-and-set on the newest revision that is not withdrawn: NULL = do not compare,
     * "" = there must be none yet, else its digest. */
    const char *expect_digest;
} lwd_catalog_put;

typedef struct lwd_catalog_put_result {
    int64_t number;
    bool created;            /* false: a revision that is not withdrawn has this content already */
    lwd_catalog_state state; /* of that revision */
    int64_t tag;             /* state tag of the mechanism */
} lwd_catalog_put_result;

/* Stores a new draft revision, numbered from 1 without gaps, or finds the one with the same digest
 * that is not withdrawn (its document text then stays as first sent).
 * Fails with ARGUMENT, LIMIT, CONFLICT, BUSY, CLOSING, FULL, STORAGE, MEMORY. After STORAGE it is
 * unknown whether the revision is there; putting the same content again settles it. */
lwd_catalog_result lwd_catalog_put_revision(lwd_catalog *catalog, const lwd_catalog_put *in,
                                            lwd_catalog_put_result *out, lwd_catalog_error *err);

typedef struct lwd_catalog_set_state_request {
    const char *name;
    int64_t number;
    lwd_catalog_action action; /* PUBLISH or WITHDRAW */
    const char *who;
    int64_t when_ms;
    const char *reason;        /* may be "" */
    const char *accepted;      /* warning codes accepted by the publisher, may be "" */
    const int64_t *expect_tag; /* compare-and-set; NULL = do not compare */
} lwd_catalog_set_state_request;

typedef struct lwd_catalog_state_result {
    bool changed;            /* false: it was so already, no event was written */
    lwd_catalog_state state; /* of the revision, now */
    int64_t answering;       /* of the mechanism, now; 0 = none */
    int64_t tag;             /* of the mechanism, now */
} lwd_catalog_state_result;

/* Publishes or withdraws. Publishing the answering revision, or withdrawing a withdrawn one,
 * changes nothing and is OK. *out is filled on OK, CONFLICT and NOT_ALLOWED (as things stand).
 * Fails with NOT_FOUND, CONFLICT (tag differs), NOT_ALLOWED (publishing a withdrawn revision),
 * ARGUMENT, BUSY, CLOSING, FULL, STORAGE, MEMORY. */
lwd_catalog_result lwd_catalog_set_state(lwd_catalog *catalog,
                                         const lwd_catalog_set_state_request *in,
                                         lwd_catalog_state_result *out, lwd_catalog_error *err);

/* Stores, or replaces, the prepared solution sets of a revision. */
lwd_catalog_result lwd_catalog_save_solutions(lwd_catalog *catalog, const char *name,
                                              int64_t number, const void *data, size_t len,
                                              int64_t when_ms, lwd_catalog_error *err);

/* ---- reading ---- */

typedef struct lwd_catalog_mechanism {
    char name[LWD_CATALOG_NAME_MAX + 1];
    int64_t created_ms;
    int64_t tag;       /* number of state events so far: the state's entity tag */
    int64_t revisions; /* also the number of the latest one, since there are no gaps */
    int64_t drafts;
    int64_t published;
    int64_t withdrawn;
    int64_t answering;                                 /* 0 = none */
    char answering_digest[LWD_CATALOG_DIGEST_LEN + 1]; /* "" if none answers */
} lwd_catalog_mechanism;

/* Fills items[cap] in the order of names (bytes), after `after` (NULL or "" = from the start).
 * cap is 1 to LWD_CATALOG_PAGE_MAX. *more says whether a further call would find some. */
lwd_catalog_result lwd_catalog_list_mechanisms(lwd_catalog *catalog, const char *after,
                                               lwd_catalog_mechanism *items, size_t cap, size_t *n,
                                               bool *more, lwd_catalog_error *err);

lwd_catalog_result lwd_catalog_get_mechanism(lwd_catalog *catalog, const char *name,
                                             lwd_catalog_mechanism *out, lwd_catalog_error *err);

lwd_catalog_result lwd_catalog_count_mechanisms(lwd_catalog *catalog, int64_t *out,
                                                lwd_catalog_error *err);

typedef struct lwd_catalog_revision_info {
    int64_t number;
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lwd_catalog_state state;
    bool answers; /* this one answers by default */
    int64_t tag;  /* state tag of the mechanism at the time of reading */
    int64_t created_ms;
    char created_by[LWD_CATALOG_WHO_MAX + 1];
    bool has_solutions;
} lwd_catalog_revision_info;

/* Revisions above number `after` (0 = from the start), ascending. */
lwd_catalog_result lwd_catalog_list_revisions(lwd_catalog *catalog, const char *name, int64_t after,
                                              lwd_catalog_revision_info *items, size_t cap,
                                              size_t *n, bool *more, lwd_catalog_error *err);

typedef struct lwd_catalog_revision {
    lwd_catalog_revision_info info;
    char *document; /* NUL-terminated one past its length; owned */
    size_t document_len;
    char *report; /* likewise */
    size_t report_len;
} lwd_catalog_revision;

/* One revision with its texts; number 0 = the answering one (NONE_PUBLISHED if there is none).
 * DAMAGED if the stored texts do not match their checksum. Clear *out after OK. */
lwd_catalog_result lwd_catalog_get_revision(lwd_catalog *catalog, const char *name, int64_t number,
                                            lwd_catalog_revision *out, lwd_catalog_error *err);

/* The same without texts, and without allocation. */
lwd_catalog_result lwd_catalog_get_revision_info(lwd_catalog *catalog, const char *name,
                                                 int64_t number, lwd_catalog_revision_info *out,
                                                 lwd_catalog_error *err);

/* Frees the texts and zeroes; fine on a zeroed or cleared one. */
void lwd_catalog_revision_clear(lwd_catalog_revision *revision);

typedef struct lwd_catalog_event {
    int64_t serial;            /* from 1 within the mechanism */
    int64_t number;            /* the revision acted on */
    lwd_catalog_action action; /* PUBLISH or WITHDRAW */
    int64_t at_ms;
    char who[LWD_CATALOG_WHO_MAX + 1];
    char reason[LWD_CATALOG_REASON_MAX + 1];
    char accepted[LWD_CATALOG_ACCEPTED_MAX + 1];
} lwd_catalog_event;

/* Events of a mechanism above serial `after`, ascending; those of one revision if number > 0. */
lwd_catalog_result lwd_catalog_list_events(lwd_catalog *catalog, const char *name, int64_t number,
                                           int64_t after, lwd_catalog_event *items, size_t cap,
                                           size_t *n, bool *more, lwd_catalog_error *err);

typedef struct lwd_catalog_blob {
    void *data; /* owned */
    size_t len;
    int64_t created_ms;
} lwd_catalog_blob;

/* NO_SOLUTIONS if none is stored, DAMAGED if the checksum fails (save it anew). */
lwd_catalog_result lwd_catalog_load_solutions(lwd_catalog *catalog, const char *name,
                                              int64_t number, lwd_catalog_blob *out,
                                              lwd_catalog_error *err);
void lwd_catalog_blob_clear(lwd_catalog_blob *blob);

/* ---- keeping house ---- */

/* Counts committed changes (put, publish, withdraw) since open; cheap, one atomic load. */
uint64_t lwd_catalog_changes(const lwd_catalog *catalog);

/* Writes a consistent copy to `path` while the service goes on: to a temporary name beside it,
 * verified, flushed, then renamed over `path`. Relative paths are relative to the working
 * directory. Refuses to replace the catalog's own file. To restore: stop the daemon and copy the
 * file into an empty data directory under the name catalog.sqlite. */
lwd_catalog_result lwd_catalog_backup(lwd_catalog *catalog, const char *path,
                                      lwd_catalog_error *err);

/* The same for the catalog in a data directory that another process may be serving, or none: takes
 * no lock, changes nothing. NOT_FOUND where the directory holds no catalog. */
lwd_catalog_result lwd_catalog_backup_of(const char *dir, const char *path,
                                         lwd_catalog_error *err);

/* Verifies the file; `thorough` also compares every index with its table. */
lwd_catalog_result lwd_catalog_verify(lwd_catalog *catalog, bool thorough, lwd_catalog_error *err);

typedef struct lwd_catalog_stats {
    uint64_t writes;   /* calls answered by the writer, whatever the result */
    uint64_t commits;  /* transactions committed */
    uint64_t refused;  /* calls answered BUSY */
    uint64_t failures; /* writes that failed for the machine's sake: disk, memory, damage */
    uint64_t checkpoints;
    uint64_t queued;    /* waiting now */
    uint64_t log_pages; /* pages in the write-ahead log after the last commit */
} lwd_catalog_stats;
void lwd_catalog_get_stats(lwd_catalog *catalog, lwd_catalog_stats *out);

/* Number of migrations built in: the format version this program writes. */
int lwd_catalog_format(void);

#endif
