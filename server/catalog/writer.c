/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The writer thread: takes what is queued, runs it in one transaction, commits, checkpoints, and
 * only then wakes the callers.
 *
 * One connection writes and checkpoints, and nobody else: the library has a fault (fixed after
 * 3.51.2) by which a checkpoint on one connection during a commit on another can damage the file,
 * and several writers would starve one another besides.
 *
 * A job that is refused is rolled back to its savepoint; its neighbours in the batch are not
 * touched. If the whole transaction fails (disk full, error), every job is tried once more alone,
 * so that one large document does not fail a small one. */
#include "internal.h"

#include <signal.h>
#include <string.h>

const char *const lwd_catalog_write_sql[LWD_CATALOG_W_COUNT] = {
    [LWD_CATALOG_W_BEGIN] = "BEGIN IMMEDIATE",
    [LWD_CATALOG_W_COMMIT] = "COMMIT",
    [LWD_CATALOG_W_ROLLBACK] = "ROLLBACK",
    [LWD_CATALOG_W_SAVEPOINT] = "SAVEPOINT job",
    [LWD_CATALOG_W_RELEASE] = "RELEASE job",
    [LWD_CATALOG_W_BACK] = "ROLLBACK TO job",
    [LWD_CATALOG_W_MECHANISM] =
        "SELECT id, tag, latest, answering FROM mechanism_state WHERE name = ?1",
    [LWD_CATALOG_W_COUNT_MECHANISMS] = "SELECT COUNT(*) FROM mechanism",
    [LWD_CATALOG_W_ADD_MECHANISM] = "INSERT INTO mechanism (name, created_ms) VALUES (?1, ?2)",
    [LWD_CATALOG_W_BY_DIGEST] =
        "SELECT r.number, s.state FROM revision r JOIN revision_state s ON s.id = r.id"
        " WHERE r.mechanism_id = ?1 AND r.digest = ?2 AND s.state < 2"
        " ORDER BY r.number DESC LIMIT 1",
    [LWD_CATALOG_W_NEWEST_DIGEST] =
        "SELECT r.digest FROM revision r JOIN revision_state s ON s.id = r.id"
        " WHERE r.mechanism_id = ?1 AND s.state < 2 ORDER BY r.number DESC LIMIT 1",
    [LWD_CATALOG_W_ADD_REVISION] =
        "INSERT INTO revision (mechanism_id, number, digest, created_ms, created_by, checksum,"
        " report, document) VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8)",
    [LWD_CATALOG_W_STATE] =
        "SELECT state FROM revision_state WHERE mechanism_id = ?1 AND number = ?2",
    [LWD_CATALOG_W_ADD_EVENT] =
        "INSERT INTO state_event (mechanism_id, serial, number, action, at_ms, who, reason,"
        " accepted) VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8)",
    [LWD_CATALOG_W_SAVE_SOLUTIONS] =
        "INSERT INTO solution_set (mechanism_id, number, created_ms, checksum, content)"
        " VALUES (?1, ?2, ?3, ?4, ?5) ON CONFLICT (mechanism_id, number) DO UPDATE SET"
        " created_ms = excluded.created_ms, checksum = excluded.checksum,"
        " content = excluded.content",
};

/* Checkpoint also when the log has grown to this many pages of 4096 bytes. */
enum { LOG_PAGES_MAX = 1024 };

static int run(lwd_catalog *c, int which)
{
    int rc = sqlite3_step(c->write[which]);
    (void)sqlite3_reset(c->write[which]);
    return rc == SQLITE_DONE ? SQLITE_OK : rc;
}

static int count_log_pages(void *context, sqlite3 *db, const char *schema, int pages)
{
    (void)db;
    (void)schema;
    lwd_catalog *c = context;
    atomic_store(&c->log_pages, (uint64_t)(pages < 0 ? 0 : pages));
    return SQLITE_OK;
}

static void checkpoint_if_due(lwd_catalog *c)
{
    if (c->memory)
        return;
    if (c->commits_since_checkpoint < c->options.checkpoint_commits &&
        atomic_load(&c->log_pages) < LOG_PAGES_MAX)
        return;
    /* PASSIVE never waits for readers. What it leaves behind, the next one takes; a failure costs
     * nothing but a longer log. */
    c->commits_since_checkpoint = 0;
    if (sqlite3_wal_checkpoint_v2(c->db, NULL, SQLITE_CHECKPOINT_PASSIVE, NULL, NULL) == SQLITE_OK)
        atomic_fetch_add(&c->checkpoints, 1);
}

static void roll_back(lwd_catalog *c)
{
    /* A full disk has rolled the transaction back already. */
    if (!sqlite3_get_autocommit(c->db))
        (void)run(c, LWD_CATALOG_W_ROLLBACK);
}

/* Runs one job between savepoints; false if the whole transaction is lost. */
static bool run_job(lwd_catalog *c, lwd_catalog_job *job)
{
    lwd_catalog_succeed(&job->err);
    job->changed = false;
    int rc = run(c, LWD_CATALOG_W_SAVEPOINT);
    if (rc != SQLITE_OK) {
        lwd_catalog_fail_db(&job->err, c->db, rc, "write to the catalog");
        return false;
    }
    lwd_catalog_result result = lwd_catalog_apply(c, job);
    if (sqlite3_get_autocommit(c->db))
        return false;
    if (result != LWD_CATALOG_OK) {
        job->changed = false;
        if (run(c, LWD_CATALOG_W_BACK) != SQLITE_OK)
            return false;
    }
    rc = run(c, LWD_CATALOG_W_RELEASE);
    if (rc != SQLITE_OK && result == LWD_CATALOG_OK)
        lwd_catalog_fail_db(&job->err, c->db, rc, "write to the catalog");
    return rc == SQLITE_OK;
}

static void run_batch(lwd_catalog *c, lwd_catalog_job **jobs, size_t n)
{
    bool whole = true;
    int rc = run(c, LWD_CATALOG_W_BEGIN);
    const char *doing = "begin a transaction";
    if (rc == SQLITE_OK) {
        for (size_t i = 0; whole && i < n; i++)
            whole = run_job(c, jobs[i]);
        if (whole) {
            doing = "commit to the catalog";
            rc = run(c, LWD_CATALOG_W_COMMIT);
        }
    }
    if (whole && rc == SQLITE_OK) {
        atomic_fetch_add(&c->commits, 1);
        c->commits_since_checkpoint++;
        for (size_t i = 0; i < n; i++) {
            if (!jobs[i]->changed)
                continue;
            atomic_fetch_add(&c->changes, 1);
            if (c->options.changed)
                c->options.changed(c->options.changed_context, &jobs[i]->change);
        }
        return;
    }
    if (n == 1) {
        /* A lost job has said why, unless the transaction did not begin or did not commit. */
        if (jobs[0]->err.result == LWD_CATALOG_OK || rc != SQLITE_OK)
            lwd_catalog_fail_db(&jobs[0]->err, c->db, rc == SQLITE_OK ? SQLITE_ERROR : rc, doing);
        jobs[0]->changed = false;
        roll_back(c);
        return;
    }
    roll_back(c);
    for (size_t i = 0; i < n; i++)
        run_batch(c, &jobs[i], 1);
}

/* Did the machine fail, rather than the question? */
static bool is_failure(lwd_catalog_result result)
{
    switch (result) {
    case LWD_CATALOG_FULL:
    case LWD_CATALOG_STORAGE:
    case LWD_CATALOG_DAMAGED:
    case LWD_CATALOG_LOCKED:
    case LWD_CATALOG_MEMORY:
    case LWD_CATALOG_INTERNAL:
        return true;
    default:
        return false;
    }
}

static void *writer_main(void *context)
{
    lwd_catalog *c = context;
    (void)pthread_mutex_lock(&c->queue_lock);
    for (;;) {
        while (c->queue_n == 0 && !c->stop)
            (void)pthread_cond_wait(&c->work, &c->queue_lock);
        if (c->queue_n == 0)
            break;
        size_t n = 0;
        while (n < c->options.batch_max && c->queue_n > 0) {
            c->batch[n++] = c->queue[c->queue_head];
            c->queue_head = (c->queue_head + 1) % c->options.queue_max;
            c->queue_n--;
        }
        (void)pthread_mutex_unlock(&c->queue_lock);
        run_batch(c, c->batch, n);
        for (size_t i = 0; i < n; i++)
            if (is_failure(c->batch[i]->err.result))
                atomic_fetch_add(&c->failures, 1);
        (void)pthread_mutex_lock(&c->queue_lock);
        for (size_t i = 0; i < n; i++)
            c->batch[i]->done = true;
        atomic_fetch_add(&c->writes, n);
        (void)pthread_cond_broadcast(&c->done);
        (void)pthread_mutex_unlock(&c->queue_lock);
        /* After the answers, so that no caller waits for it. */
        checkpoint_if_due(c);
        (void)pthread_mutex_lock(&c->queue_lock);
    }
    (void)pthread_mutex_unlock(&c->queue_lock);
    return NULL;
}

lwd_catalog_result lwd_catalog_writer_start(lwd_catalog *c, lwd_catalog_error *err)
{
    (void)sqlite3_wal_hook(c->db, count_log_pages, c);
    /* Signals are the main thread's business. */
    sigset_t all;
    sigset_t before;
    (void)sigfillset(&all);
    (void)pthread_sigmask(SIG_SETMASK, &all, &before);
    int rc = pthread_create(&c->writer, NULL, writer_main, c);
    (void)pthread_sigmask(SIG_SETMASK, &before, NULL);
    if (rc != 0)
        return lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "could not start the writer thread: %s",
                                strerror(rc));
    c->writer_started = true;
    return LWD_CATALOG_OK;
}

void lwd_catalog_writer_stop(lwd_catalog *c)
{
    if (!c->writer_started)
        return;
    (void)pthread_mutex_lock(&c->queue_lock);
    c->stop = true;
    (void)pthread_cond_signal(&c->work);
    (void)pthread_mutex_unlock(&c->queue_lock);
    (void)pthread_join(c->writer, NULL);
    c->writer_started = false;
}

lwd_catalog_result lwd_catalog_submit(lwd_catalog *c, lwd_catalog_job *job, lwd_catalog_error *err)
{
    job->done = false;
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (pthread_equal(pthread_self(), c->writer))
        return lwd_catalog_fail(err, LWD_CATALOG_INTERNAL,
                                "the change callback must not write to the catalog");
    (void)pthread_mutex_lock(&c->queue_lock);
    if (c->stop)
        result = LWD_CATALOG_CLOSING;
    else if (c->queue_n == c->options.queue_max)
        result = LWD_CATALOG_BUSY;
    if (result != LWD_CATALOG_OK) {
        (void)pthread_mutex_unlock(&c->queue_lock);
        if (result == LWD_CATALOG_BUSY)
            atomic_fetch_add(&c->refused, 1);
        return lwd_catalog_fail(err, result, "%s", lwd_catalog_result_text(result));
    }
    c->queue[(c->queue_head + c->queue_n) % c->options.queue_max] = job;
    c->queue_n++;
    (void)pthread_cond_signal(&c->work);
    while (!job->done)
        (void)pthread_cond_wait(&c->done, &c->queue_lock);
    (void)pthread_mutex_unlock(&c->queue_lock);
    if (err)
        *err = job->err;
    return job->err.result;
}
