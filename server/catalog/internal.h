/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the catalog room share. Included by server/catalog and its tests only.
 *
 * Who owns what. The writer connection and its statements belong to the writer thread from its
 * start to its end (to the opening and the closing thread before and after). A reader connection
 * belongs to the thread that took it from the pool. Jobs live on the stack of the calling thread;
 * the queue lock guards `done` and hands everything else over. */
#ifndef LWD_CATALOG_INTERNAL_H
#define LWD_CATALOG_INTERNAL_H

#include "catalog.h"

#include <pthread.h>
#include <sqlite3.h>
#include <stdatomic.h>

/* "Lway" in ASCII: marks the file as ours. */
enum { LWD_CATALOG_APPLICATION_ID = 0x4c776179, LWD_CATALOG_READERS_MAX = 16 };

#define LWD_CATALOG_TIME_MAX_MS INT64_C(253402300799999)

/* ---- db.c: connections, errors, checksum ---- */

#if defined(__GNUC__)
#define LWD_CATALOG_PRINTF(f, a) __attribute__((format(printf, f, a)))
#else
#define LWD_CATALOG_PRINTF(f, a)
#endif

/* Fills err (may be NULL) and returns `result`, so that "return ..._fail(...)" stays visible. */
lwd_catalog_result lwd_catalog_fail(lwd_catalog_error *err, lwd_catalog_result result,
                                    const char *format, ...) LWD_CATALOG_PRINTF(3, 4);
/* The same from a result code of the library; `doing` completes "could not ...". */
lwd_catalog_result lwd_catalog_fail_db(lwd_catalog_error *err, sqlite3 *db, int rc,
                                       const char *doing);
lwd_catalog_result lwd_catalog_succeed(lwd_catalog_error *err);

/* CRC-64 (polynomial of ECMA-182, reflected). Start with 0; chain by passing the last value. */
uint64_t lwd_catalog_crc64(uint64_t crc, const void *data, size_t len);

/* Opens and sets up one connection; the settings that matter are read back. */
lwd_catalog_result lwd_catalog_connect(sqlite3 **out, const char *path, bool memory, bool writer,
                                       lwd_catalog_error *err);
/* First column of the first row of a query as an integer. */
lwd_catalog_result lwd_catalog_query_int(sqlite3 *db, const char *sql, int64_t *out,
                                         lwd_catalog_error *err);
lwd_catalog_result lwd_catalog_exec(sqlite3 *db, const char *sql, const char *doing,
                                    lwd_catalog_error *err);
lwd_catalog_result lwd_catalog_prepare(sqlite3 *db, const char *const *sql, sqlite3_stmt **stmt,
                                       size_t n, lwd_catalog_error *err);
void lwd_catalog_finalize(sqlite3_stmt **stmt, size_t n);
/* quick_check or integrity_check, then foreign_key_check. */
lwd_catalog_result lwd_catalog_check_db(sqlite3 *db, bool thorough, lwd_catalog_error *err);
/* Copies a text column; false if it is NULL or does not fit. */
bool lwd_catalog_copy_text(char *dst, size_t size, sqlite3_stmt *stmt, int column);
/* Ends the use of a statement: resets it, forgets what was bound. */
void lwd_catalog_reset(sqlite3_stmt *stmt);

/* ---- migrate.c ---- */

typedef struct lwd_catalog_migration {
    int number; /* from 1, without gaps */
    const char *name;
    const char *sql;
} lwd_catalog_migration;

/* Generated from schema/ at build time, ascending. */
extern const lwd_catalog_migration lwd_catalog_migrations[];
extern const size_t lwd_catalog_n_migrations;

/* Brings the file from its user_version to list[n - 1].number, each step in one transaction. */
lwd_catalog_result lwd_catalog_migrate(sqlite3 *db, const lwd_catalog_migration *list, size_t n,
                                       lwd_catalog_error *err);
/* Refuses foreign files and newer formats; changes nothing. *version is 0 for an empty file. */
lwd_catalog_result lwd_catalog_recognise(sqlite3 *db, int newest, int *version,
                                         lwd_catalog_error *err);

/* ---- the handle ---- */

enum {
    LWD_CATALOG_W_BEGIN,
    LWD_CATALOG_W_COMMIT,
    LWD_CATALOG_W_ROLLBACK,
    LWD_CATALOG_W_SAVEPOINT,
    LWD_CATALOG_W_RELEASE,
    LWD_CATALOG_W_BACK,
    LWD_CATALOG_W_MECHANISM,
    LWD_CATALOG_W_COUNT_MECHANISMS,
    LWD_CATALOG_W_ADD_MECHANISM,
    LWD_CATALOG_W_BY_DIGEST,
    LWD_CATALOG_W_NEWEST_DIGEST,
    LWD_CATALOG_W_ADD_REVISION,
    LWD_CATALOG_W_STATE,
    LWD_CATALOG_W_ADD_EVENT,
    LWD_CATALOG_W_SAVE_SOLUTIONS,
    LWD_CATALOG_W_COUNT
};

enum {
    LWD_CATALOG_R_MECHANISMS,
    LWD_CATALOG_R_MECHANISM,
    LWD_CATALOG_R_COUNT_MECHANISMS,
    LWD_CATALOG_R_REVISIONS,
    LWD_CATALOG_R_INFO,
    LWD_CATALOG_R_REVISION,
    LWD_CATALOG_R_EVENTS,
    LWD_CATALOG_R_SOLUTIONS,
    LWD_CATALOG_R_COUNT
};

typedef struct lwd_catalog_reader {
    sqlite3 *db;
    sqlite3_stmt *stmt[LWD_CATALOG_R_COUNT];
    bool taken; /* guarded by pool_lock */
} lwd_catalog_reader;

typedef enum lwd_catalog_job_kind {
    LWD_CATALOG_JOB_PUT,
    LWD_CATALOG_JOB_STATE,
    LWD_CATALOG_JOB_SOLUTIONS
} lwd_catalog_job_kind;

typedef struct lwd_catalog_solutions {
    const char *name;
    int64_t number;
    const void *data;
    size_t len;
    int64_t when_ms;
} lwd_catalog_solutions;

/* One write, from its call to its answer. */
typedef struct lwd_catalog_job {
    lwd_catalog_job_kind kind;
    union {
        const lwd_catalog_put *put;
        const lwd_catalog_set_state_request *state;
        const lwd_catalog_solutions *solutions;
    } in;
    lwd_catalog_put_result put;
    lwd_catalog_state_result state;
    lwd_catalog_error err;
    bool changed; /* a row was written that the model store wants to hear of */
    lwd_catalog_change change;
    bool done; /* guarded by queue_lock */
} lwd_catalog_job;

struct lwd_catalog {
    lwd_catalog_options options;
    char path[4096]; /* of the database file, or its URI in memory */
    bool memory;
    int lock_fd;

    sqlite3 *db; /* the writer's */
    sqlite3_stmt *write[LWD_CATALOG_W_COUNT];
    unsigned commits_since_checkpoint;

    pthread_t writer;
    bool writer_started;
    pthread_mutex_t queue_lock;
    pthread_cond_t work;     /* something is queued, or stop */
    pthread_cond_t done;     /* some jobs are done */
    lwd_catalog_job **queue; /* ring of options.queue_max */
    size_t queue_head;
    size_t queue_n;
    lwd_catalog_job **batch; /* the writer's own, options.batch_max */
    bool stop;

    pthread_mutex_t pool_lock;
    pthread_cond_t pool_free;
    lwd_catalog_reader reader[LWD_CATALOG_READERS_MAX];
    unsigned n_readers;

    atomic_uint_fast64_t changes;
    atomic_uint_fast64_t writes;
    atomic_uint_fast64_t commits;
    atomic_uint_fast64_t refused;
    atomic_uint_fast64_t failures;
    atomic_uint_fast64_t checkpoints;
    atomic_uint_fast64_t log_pages;
};

/* ---- writer.c ---- */
extern const char *const lwd_catalog_write_sql[LWD_CATALOG_W_COUNT];
lwd_catalog_result lwd_catalog_writer_start(lwd_catalog *catalog, lwd_catalog_error *err);
/* Answers what is queued, then ends the thread. */
void lwd_catalog_writer_stop(lwd_catalog *catalog);
/* Queues the job and waits for its answer in job->err. */
lwd_catalog_result lwd_catalog_submit(lwd_catalog *catalog, lwd_catalog_job *job,
                                      lwd_catalog_error *err);

/* ---- write.c ---- */
/* Runs one job inside the open transaction of the writer. */
lwd_catalog_result lwd_catalog_apply(lwd_catalog *catalog, lwd_catalog_job *job);
lwd_catalog_result lwd_catalog_check_name(const char *name, lwd_catalog_error *err);

/* ---- read.c ---- */
extern const char *const lwd_catalog_read_sql[LWD_CATALOG_R_COUNT];
lwd_catalog_reader *lwd_catalog_reader_take(lwd_catalog *catalog);
void lwd_catalog_reader_give(lwd_catalog *catalog, lwd_catalog_reader *reader);

#endif
