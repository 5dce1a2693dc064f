/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Opening and closing: the directory, the lock file, the connections, the writer thread, in this
 * order and back. Everything here runs on the opening or the closing thread. */
#include "internal.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

static unsigned bounded(unsigned value, unsigned fallback, unsigned max)
{
    if (value == 0)
        value = fallback;
    return value > max ? max : value;
}

static lwd_catalog_result prepare_directory(const char *dir, lwd_catalog_error *err)
{
    if (mkdir(dir, 0750) != 0 && errno != EEXIST)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not make the directory %.80s: %s",
                                dir, strerror(errno));
    struct stat st;
    if (stat(dir, &st) != 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not look at %.80s: %s", dir,
                                strerror(errno));
    if (!S_ISDIR(st.st_mode))
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "%.80s is not a directory; name the data directory", dir);
    if (st.st_mode & S_IWOTH)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "everybody may write to %.80s; take that right away "
                                "(chmod o-w) or choose another directory",
                                dir);
    return LWD_CATALOG_OK;
}

/* The lock is the kernel's, on an open file of our own: it goes when the process does, however it
 * ends, and closing the database file cannot drop it by accident. The file itself stays. */
static lwd_catalog_result take_lock(lwd_catalog *c, const char *dir, lwd_catalog_error *err)
{
    char path[sizeof c->path];
    (void)snprintf(path, sizeof path, "%s/catalog.lock", dir);
    int fd = open(path, O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0640);
    if (fd < 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not open %.90s: %s", path,
                                strerror(errno));
    if (flock(fd, LOCK_EX | LOCK_NB) != 0) {
        int why = errno;
        char holder[24] = "";
        ssize_t n = pread(fd, holder, sizeof holder - 1, 0);
        (void)close(fd);
        if (why != EWOULDBLOCK)
            return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not lock %.90s: %s", path,
                                    strerror(why));
        holder[n > 0 ? n : 0] = '\0';
        holder[strcspn(holder, "\n")] = '\0';
        return lwd_catalog_fail(err, LWD_CATALOG_LOCKED,
                                "another daemon (process %.20s) uses %.80s; "
                                "stop it or choose another directory",
                                holder[0] ? holder : "unknown", dir);
    }
    char pid[24];
    int len = snprintf(pid, sizeof pid, "%ld\n", (long)getpid());
    /* The number is for the sentence above only; failing to write it harms nothing. */
    if (ftruncate(fd, 0) == 0 && pwrite(fd, pid, (size_t)len, 0) != len && ftruncate(fd, 0) != 0)
        pid[0] = '\0';
    c->lock_fd = fd;
    return LWD_CATALOG_OK;
}

/* Makes the file before the library does, for its mode, and flushes its name. */
static lwd_catalog_result make_file(const lwd_catalog *c, const char *dir, lwd_catalog_error *err)
{
    int fd = open(c->path, O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0640);
    if (fd < 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not open %.90s: %s", c->path,
                                strerror(errno));
    (void)close(fd);
    fd = open(dir, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    int rc = fd < 0 ? -1 : fsync(fd);
    int why = errno;
    if (fd >= 0)
        (void)close(fd);
    if (rc != 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not flush the directory %.80s: %s",
                                dir, strerror(why));
    return LWD_CATALOG_OK;
}

static lwd_catalog_result prepare_files(lwd_catalog *c, const char *dir, lwd_catalog_error *err)
{
    static atomic_uint_fast64_t made;
    if (!dir || dir[0] == '\0')
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "the data directory has no name");
    if (strcmp(dir, ":memory:") == 0) {
        c->memory = true;
        (void)snprintf(c->path, sizeof c->path, "file:/leeway-%ld-%llu?vfs=memdb", (long)getpid(),
                       (unsigned long long)atomic_fetch_add(&made, 1));
        return LWD_CATALOG_OK;
    }
    /* Room for the longest name beside the file: "catalog.sqlite-journal". */
    if (strlen(dir) + 32 > sizeof c->path)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "the name of the data directory is too long");
    (void)snprintf(c->path, sizeof c->path, "%s/catalog.sqlite", dir);
    lwd_catalog_result result = prepare_directory(dir, err);
    if (result == LWD_CATALOG_OK)
        result = take_lock(c, dir, err);
    if (result == LWD_CATALOG_OK)
        result = make_file(c, dir, err);
    return result;
}

static lwd_catalog_result write_ahead_log(sqlite3 *db, lwd_catalog_error *err)
{
    sqlite3_stmt *stmt = NULL;
    lwd_catalog_result result = LWD_CATALOG_OK;
    int rc = sqlite3_prepare_v2(db, "PRAGMA journal_mode = WAL", -1, &stmt, NULL);
    if (rc == SQLITE_OK)
        rc = sqlite3_step(stmt);
    const char *mode = rc == SQLITE_ROW ? (const char *)sqlite3_column_text(stmt, 0) : NULL;
    if (rc != SQLITE_ROW)
        result = lwd_catalog_fail_db(err, db, rc, "switch the catalog to a write-ahead log");
    else if (!mode || strcmp(mode, "wal") != 0)
        result = lwd_catalog_fail(err, LWD_CATALOG_STORAGE,
                                  "this file system cannot keep a write-ahead log; "
                                  "choose a data directory on a local disk");
    sqlite3_finalize(stmt);
    return result;
}

static lwd_catalog_result open_writer(lwd_catalog *c, lwd_catalog_error *err)
{
    int version = 0;
    lwd_catalog_result result = lwd_catalog_connect(&c->db, c->path, c->memory, true, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_recognise(c->db, (int)lwd_catalog_n_migrations, &version, err);
    if (result == LWD_CATALOG_OK && !c->memory)
        result = write_ahead_log(c->db, err);
    /* The log file is cut back to 1 MiB after a checkpoint that made it longer. */
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_exec(c->db, "PRAGMA journal_size_limit = 1048576",
                                  "bound the log file", err);
    if (result == LWD_CATALOG_OK && c->options.pages_max) {
        char sql[64];
        (void)snprintf(sql, sizeof sql, "PRAGMA max_page_count = %u", c->options.pages_max);
        result = lwd_catalog_exec(c->db, sql, "bound the file", err);
    }
    if (result == LWD_CATALOG_OK && version > 0 && !c->options.skip_check)
        result = lwd_catalog_check_db(c->db, false, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_migrate(c->db, lwd_catalog_migrations, lwd_catalog_n_migrations, err);
    if (result == LWD_CATALOG_OK)
        result =
            lwd_catalog_prepare(c->db, lwd_catalog_write_sql, c->write, LWD_CATALOG_W_COUNT, err);
    return result;
}

static lwd_catalog_result open_readers(lwd_catalog *c, lwd_catalog_error *err)
{
    lwd_catalog_result result = LWD_CATALOG_OK;
    for (unsigned i = 0; result == LWD_CATALOG_OK && i < c->options.readers; i++) {
        lwd_catalog_reader *r = &c->reader[i];
        result = lwd_catalog_connect(&r->db, c->path, c->memory, false, err);
        if (result == LWD_CATALOG_OK)
            result =
                lwd_catalog_prepare(r->db, lwd_catalog_read_sql, r->stmt, LWD_CATALOG_R_COUNT, err);
        c->n_readers = i + 1;
    }
    return result;
}

static void init_locks(lwd_catalog *c)
{
    (void)pthread_mutex_init(&c->queue_lock, NULL);
    (void)pthread_cond_init(&c->work, NULL);
    (void)pthread_cond_init(&c->done, NULL);
    (void)pthread_mutex_init(&c->pool_lock, NULL);
    (void)pthread_cond_init(&c->pool_free, NULL);
}

lwd_catalog_result lwd_catalog_open(lwd_catalog **out, const char *dir,
                                    const lwd_catalog_options *options, lwd_catalog_error *err)
{
    *out = NULL;
    lwd_catalog *c = calloc(1, sizeof *c);
    if (!c)
        return lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "out of memory");
    if (options)
        c->options = *options;
    lwd_catalog_options *o = &c->options;
    o->readers = bounded(o->readers, 2, LWD_CATALOG_READERS_MAX);
    o->queue_max = bounded(o->queue_max, 64, 1024);
    o->batch_max = bounded(o->batch_max, 32, 256);
    o->checkpoint_commits = bounded(o->checkpoint_commits, 256, 1000000);
    o->mechanisms_max =
        bounded(o->mechanisms_max, LWD_CATALOG_MECHANISMS_MAX, LWD_CATALOG_MECHANISMS_MAX);
    o->revisions_max =
        bounded(o->revisions_max, LWD_CATALOG_REVISIONS_MAX, LWD_CATALOG_REVISIONS_MAX);
    c->lock_fd = -1;
    init_locks(c);
    c->queue = calloc(o->queue_max, sizeof(lwd_catalog_job *));
    c->batch = calloc(o->batch_max, sizeof(lwd_catalog_job *));
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (!c->queue || !c->batch)
        result = lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "out of memory");
    if (result == LWD_CATALOG_OK)
        result = prepare_files(c, dir, err);
    if (result == LWD_CATALOG_OK)
        result = open_writer(c, err);
    if (result == LWD_CATALOG_OK)
        result = open_readers(c, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_writer_start(c, err);
    if (result != LWD_CATALOG_OK) {
        lwd_catalog_close(c);
        return result;
    }
    *out = c;
    return lwd_catalog_succeed(err);
}

void lwd_catalog_close(lwd_catalog *c)
{
    if (!c)
        return;
    lwd_catalog_writer_stop(c);
    /* Readers first, so that nothing holds the log while it is moved into the file. */
    for (unsigned i = 0; i < c->n_readers; i++) {
        lwd_catalog_finalize(c->reader[i].stmt, LWD_CATALOG_R_COUNT);
        (void)sqlite3_close(c->reader[i].db);
    }
    lwd_catalog_finalize(c->write, LWD_CATALOG_W_COUNT);
    if (c->db) {
        /* A failure here loses nothing: the next start finds the log and goes on from it. */
        if (!c->memory)
            (void)sqlite3_wal_checkpoint_v2(c->db, NULL, SQLITE_CHECKPOINT_TRUNCATE, NULL, NULL);
        (void)sqlite3_close(c->db);
    }
    if (c->lock_fd >= 0)
        (void)close(c->lock_fd);
    (void)pthread_mutex_destroy(&c->queue_lock);
    (void)pthread_cond_destroy(&c->work);
    (void)pthread_cond_destroy(&c->done);
    (void)pthread_mutex_destroy(&c->pool_lock);
    (void)pthread_cond_destroy(&c->pool_free);
    free(c->queue);
    free(c->batch);
    free(c);
}

uint64_t lwd_catalog_changes(const lwd_catalog *c)
{
    return atomic_load(&c->changes);
}

void lwd_catalog_get_stats(lwd_catalog *c, lwd_catalog_stats *out)
{
    (void)pthread_mutex_lock(&c->queue_lock);
    uint64_t queued = c->queue_n;
    (void)pthread_mutex_unlock(&c->queue_lock);
    *out = (lwd_catalog_stats){
        .writes = atomic_load(&c->writes),
        .commits = atomic_load(&c->commits),
        .refused = atomic_load(&c->refused),
        .failures = atomic_load(&c->failures),
        .checkpoints = atomic_load(&c->checkpoints),
        .queued = queued,
        .log_pages = atomic_load(&c->log_pages),
    };
}
