/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A consistent copy beside the running service, and the check of the file. Both use a read-only
 * connection of their own, so they keep no reader from its work and do not stop the writer. Called
 * from any thread; takes seconds for a large catalog, so call it from a worker. */
#include "internal.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

typedef struct names {
    char temporary[4200];
    char directory[4096];
} names;

static lwd_catalog_result name_files(const lwd_catalog *c, const char *path, names *n,
                                     lwd_catalog_error *err)
{
    static atomic_uint_fast64_t made;
    size_t len = path ? strnlen(path, sizeof n->directory) : 0;
    if (len < 1 || len >= sizeof n->directory || path[len - 1] == '/')
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "name the file that the backup shall become");
    if (c->memory)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "a catalog in memory has no backup");
    (void)snprintf(n->temporary, sizeof n->temporary, "%s.part-%ld-%llu", path, (long)getpid(),
                   (unsigned long long)atomic_fetch_add(&made, 1));
    const char *slash = strrchr(path, '/');
    if (!slash)
        (void)snprintf(n->directory, sizeof n->directory, ".");
    else
        (void)snprintf(n->directory, sizeof n->directory, "%.*s",
                       slash == path ? 1 : (int)(slash - path), path);
    struct stat own;
    struct stat target;
    if (stat(c->path, &own) == 0 && stat(path, &target) == 0) {
        if (own.st_dev == target.st_dev && own.st_ino == target.st_ino)
            return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                    "the backup must not replace the catalog itself");
        if (!S_ISREG(target.st_mode))
            return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "%.100s exists and is not a file",
                                    path);
    }
    return LWD_CATALOG_OK;
}

static lwd_catalog_result copy_into(const lwd_catalog *c, const char *temporary,
                                    lwd_catalog_error *err)
{
    sqlite3 *db = NULL;
    sqlite3_stmt *s = NULL;
    lwd_catalog_result result = lwd_catalog_connect(&db, c->path, false, false, err);
    if (result != LWD_CATALOG_OK)
        return result;
    /* query_only would forbid it; the connection stays read-only towards the catalog. */
    result = lwd_catalog_exec(db, "PRAGMA query_only = OFF", "prepare the backup", err);
    if (result == LWD_CATALOG_OK) {
        int rc = sqlite3_prepare_v2(db, "VACUUM INTO ?1", -1, &s, NULL);
        if (rc == SQLITE_OK)
            rc = sqlite3_bind_text(s, 1, temporary, -1, SQLITE_STATIC);
        if (rc == SQLITE_OK)
            rc = sqlite3_step(s);
        if (rc != SQLITE_DONE)
            result = lwd_catalog_fail_db(err, db, rc, "copy the catalog");
    }
    sqlite3_finalize(s);
    (void)sqlite3_close(db);
    return result;
}

static lwd_catalog_result check_copy(const char *temporary, lwd_catalog_error *err)
{
    sqlite3 *db = NULL;
    int version = 0;
    lwd_catalog_result result = lwd_catalog_connect(&db, temporary, false, false, err);
    if (result != LWD_CATALOG_OK)
        return result;
    result = lwd_catalog_recognise(db, (int)lwd_catalog_n_migrations, &version, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_check_db(db, true, err);
    (void)sqlite3_close(db);
    return result;
}

static lwd_catalog_result flush(const char *path, int flags, lwd_catalog_error *err)
{
    int fd = open(path, flags | O_CLOEXEC);
    int rc = fd < 0 ? -1 : fsync(fd);
    int why = errno;
    if (fd >= 0)
        (void)close(fd);
    if (rc != 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not flush %.100s: %s", path,
                                strerror(why));
    return LWD_CATALOG_OK;
}

lwd_catalog_result lwd_catalog_backup(lwd_catalog *c, const char *path, lwd_catalog_error *err)
{
    names n;
    lwd_catalog_result result = name_files(c, path, &n, err);
    if (result != LWD_CATALOG_OK)
        return result;
    /* Made here for its mode and so that nobody else's file is ever taken. */
    int fd = open(n.temporary, O_RDWR | O_CREAT | O_EXCL | O_CLOEXEC | O_NOFOLLOW, 0640);
    if (fd < 0)
        return lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not make %.100s: %s", n.temporary,
                                strerror(errno));
    (void)close(fd);
    result = copy_into(c, n.temporary, err);
    if (result == LWD_CATALOG_OK)
        result = check_copy(n.temporary, err);
    if (result == LWD_CATALOG_OK)
        result = flush(n.temporary, O_RDWR, err);
    if (result == LWD_CATALOG_OK && rename(n.temporary, path) != 0)
        result = lwd_catalog_fail(err, LWD_CATALOG_STORAGE, "could not rename to %.100s: %s", path,
                                  strerror(errno));
    if (result != LWD_CATALOG_OK) {
        (void)unlink(n.temporary);
        return result;
    }
    result = flush(n.directory, O_RDONLY | O_DIRECTORY, err);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

lwd_catalog_result lwd_catalog_backup_of(const char *dir, const char *path,
                                         lwd_catalog_error *err)
{
    static const char file[] = "/catalog.sqlite";
    struct stat own;
    lwd_catalog *c = calloc(1, sizeof *c); /* its path is all that a backup looks at */
    if (!c)
        return lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "no memory for the backup");
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (strlen(dir) + 32 > sizeof c->path)
        result = lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                  "the name of the data directory is too long");
    else
        (void)snprintf(c->path, sizeof c->path, "%s%s", dir, file);
    if (result == LWD_CATALOG_OK && stat(c->path, &own) != 0)
        result = lwd_catalog_fail(err,
                                  errno == ENOENT || errno == ENOTDIR ? LWD_CATALOG_NOT_FOUND
                                                                      : LWD_CATALOG_STORAGE,
                                  "there is no catalog to copy: %.120s: %s", c->path,
                                  strerror(errno));
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_backup(c, path, err);
    free(c);
    return result;
}

lwd_catalog_result lwd_catalog_verify(lwd_catalog *c, bool thorough, lwd_catalog_error *err)
{
    sqlite3 *db = NULL;
    lwd_catalog_result result = lwd_catalog_connect(&db, c->path, c->memory, false, err);
    if (result != LWD_CATALOG_OK)
        return result;
    result = lwd_catalog_check_db(db, thorough, err);
    (void)sqlite3_close(db);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}
