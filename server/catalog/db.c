/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Connections and their settings, errors of the library as sentences, the checksum of stored
 * texts. No state of its own but the checksum table, made once; callable from any thread. */
#include "internal.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

static const char *const result_text[] = {
#define TEXT(code, text) [code] = text,
    LWD_CATALOG_RESULT_LIST(TEXT)
#undef TEXT
};

const char *lwd_catalog_result_text(lwd_catalog_result result)
{
    if ((unsigned)result >= LWD_CATALOG_RESULT_COUNT)
        result = LWD_CATALOG_INTERNAL;
    return result_text[result];
}

const char *lwd_catalog_state_name(lwd_catalog_state state)
{
    switch (state) {
    case LWD_CATALOG_DRAFT:
        return "draft";
    case LWD_CATALOG_PUBLISHED:
        return "published";
    case LWD_CATALOG_WITHDRAWN:
        return "withdrawn";
    }
    return "unknown";
}

const char *lwd_catalog_action_name(lwd_catalog_action action)
{
    switch (action) {
    case LWD_CATALOG_PUT:
        return "put";
    case LWD_CATALOG_PUBLISH:
        return "publish";
    case LWD_CATALOG_WITHDRAW:
        return "withdraw";
    }
    return "unknown";
}

lwd_catalog_result lwd_catalog_fail(lwd_catalog_error *err, lwd_catalog_result result,
                                    const char *format, ...)
{
    if (err) {
        err->result = result;
        err->storage_code = 0;
        va_list args;
        va_start(args, format);
        (void)vsnprintf(err->why, sizeof err->why, format, args);
        va_end(args);
    }
    return result;
}

lwd_catalog_result lwd_catalog_succeed(lwd_catalog_error *err)
{
    if (err)
        *err = (lwd_catalog_error){.result = LWD_CATALOG_OK};
    return LWD_CATALOG_OK;
}

static lwd_catalog_result result_of(int rc)
{
    switch (rc & 0xff) {
    case SQLITE_FULL:
        return LWD_CATALOG_FULL;
    case SQLITE_NOMEM:
        return LWD_CATALOG_MEMORY;
    case SQLITE_CORRUPT:
    case SQLITE_NOTADB:
    case SQLITE_FORMAT:
        return LWD_CATALOG_DAMAGED;
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
        return LWD_CATALOG_LOCKED;
    case SQLITE_TOOBIG:
        return LWD_CATALOG_ARGUMENT;
    case SQLITE_IOERR:
        return rc == SQLITE_IOERR_NOMEM ? LWD_CATALOG_MEMORY : LWD_CATALOG_STORAGE;
    case SQLITE_CANTOPEN:
    case SQLITE_READONLY:
    case SQLITE_PERM:
    case SQLITE_AUTH:
    case SQLITE_NOLFS:
        return LWD_CATALOG_STORAGE;
    default:
        return LWD_CATALOG_INTERNAL;
    }
}

static const char *advice(lwd_catalog_result result)
{
    switch (result) {
    case LWD_CATALOG_FULL:
        return "; nothing was stored: make room on the disk";
    case LWD_CATALOG_DAMAGED:
        return "; restore the catalog from a backup";
    case LWD_CATALOG_LOCKED:
        return "; close other tools that have the catalog open";
    case LWD_CATALOG_STORAGE:
        return "; look at the disk and the rights of its files";
    default:
        return "";
    }
}

lwd_catalog_result lwd_catalog_fail_db(lwd_catalog_error *err, sqlite3 *db, int rc,
                                       const char *doing)
{
    lwd_catalog_result result = result_of(rc);
    int extended = db ? sqlite3_extended_errcode(db) : rc;
    /* The connection's text belongs to rc only if nothing else failed on it since. */
    bool same = db && (extended & 0xff) == (rc & 0xff);
    const char *text = same ? sqlite3_errmsg(db) : sqlite3_errstr(rc);
    lwd_catalog_fail(err, result, "could not %s: %.90s%s", doing, text, advice(result));
    if (err)
        err->storage_code = same ? extended : rc;
    return result;
}

static uint64_t crc_table[256];
static pthread_once_t crc_once = PTHREAD_ONCE_INIT;

static void crc_init(void)
{
    for (unsigned i = 0; i < 256; i++) {
        uint64_t c = i;
        for (int bit = 0; bit < 8; bit++)
            c = (c >> 1) ^ ((c & 1) ? UINT64_C(0xc96c5795d7870f42) : 0);
        crc_table[i] = c;
    }
}

uint64_t lwd_catalog_crc64(uint64_t crc, const void *data, size_t len)
{
    (void)pthread_once(&crc_once, crc_init);
    const unsigned char *p = data;
    crc = ~crc;
    for (size_t i = 0; i < len; i++)
        crc = crc_table[(crc ^ p[i]) & 0xff] ^ (crc >> 8);
    return ~crc;
}

lwd_catalog_result lwd_catalog_query_int(sqlite3 *db, const char *sql, int64_t *out,
                                         lwd_catalog_error *err)
{
    sqlite3_stmt *stmt = NULL;
    int rc = sqlite3_prepare_v2(db, sql, -1, &stmt, NULL);
    if (rc == SQLITE_OK)
        rc = sqlite3_step(stmt);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc == SQLITE_ROW)
        *out = sqlite3_column_int64(stmt, 0);
    else
        result = lwd_catalog_fail_db(err, db, rc, "read the settings of the catalog");
    sqlite3_finalize(stmt);
    return result;
}

lwd_catalog_result lwd_catalog_exec(sqlite3 *db, const char *sql, const char *doing,
                                    lwd_catalog_error *err)
{
    int rc = sqlite3_exec(db, sql, NULL, NULL, NULL);
    return rc == SQLITE_OK ? LWD_CATALOG_OK : lwd_catalog_fail_db(err, db, rc, doing);
}

lwd_catalog_result lwd_catalog_prepare(sqlite3 *db, const char *const *sql, sqlite3_stmt **stmt,
                                       size_t n, lwd_catalog_error *err)
{
    for (size_t i = 0; i < n; i++) {
        int rc = sqlite3_prepare_v3(db, sql[i], -1, SQLITE_PREPARE_PERSISTENT, &stmt[i], NULL);
        if (rc != SQLITE_OK)
            return lwd_catalog_fail_db(err, db, rc, "prepare a statement");
    }
    return LWD_CATALOG_OK;
}

void lwd_catalog_finalize(sqlite3_stmt **stmt, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        sqlite3_finalize(stmt[i]);
        stmt[i] = NULL;
    }
}

bool lwd_catalog_copy_text(char *dst, size_t size, sqlite3_stmt *stmt, int column)
{
    const unsigned char *text = sqlite3_column_text(stmt, column);
    int len = sqlite3_column_bytes(stmt, column);
    if (!text || len < 0 || (size_t)len >= size)
        return false;
    memcpy(dst, text, (size_t)len);
    dst[len] = '\0';
    return true;
}

void lwd_catalog_reset(sqlite3_stmt *stmt)
{
    (void)sqlite3_reset(stmt); /* repeats the error of the last step, which is known already */
    (void)sqlite3_clear_bindings(stmt);
}

/* Switches that the library has for connections that meet hostile files. */
static int harden(sqlite3 *db, bool writer)
{
    static const struct {
        int option;
        int on;
    } set[] = {{SQLITE_DBCONFIG_DQS_DML, 0},        {SQLITE_DBCONFIG_DQS_DDL, 0},
               {SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0}, {SQLITE_DBCONFIG_ENABLE_LOAD_EXTENSION, 0},
               {SQLITE_DBCONFIG_DEFENSIVE, 1},      {SQLITE_DBCONFIG_ENABLE_FKEY, 1},
               {SQLITE_DBCONFIG_ENABLE_TRIGGER, 1}};
    for (size_t i = 0; i < sizeof set / sizeof set[0]; i++) {
        int now = -1;
        int rc = sqlite3_db_config(db, set[i].option, set[i].on, &now);
        if (rc != SQLITE_OK)
            return rc;
        if (now != set[i].on)
            return SQLITE_MISUSE;
    }
    if (!writer) {
        int rc = sqlite3_db_config(db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1, NULL);
        if (rc != SQLITE_OK)
            return rc;
    }
    (void)sqlite3_limit(db, SQLITE_LIMIT_LENGTH, 2 * LWD_CATALOG_SOLUTIONS_MAX);
    (void)sqlite3_limit(db, SQLITE_LIMIT_ATTACHED, 1); /* VACUUM INTO needs one */
    return SQLITE_OK;
}

static lwd_catalog_result read_back(sqlite3 *db, const char *pragma, int64_t want,
                                    lwd_catalog_error *err)
{
    int64_t got = -1;
    lwd_catalog_result result = lwd_catalog_query_int(db, pragma, &got, err);
    if (result == LWD_CATALOG_OK && got != want)
        result = lwd_catalog_fail(err, LWD_CATALOG_INTERNAL, "%s reads back %lld instead of %lld",
                                  pragma, (long long)got, (long long)want);
    return result;
}

lwd_catalog_result lwd_catalog_connect(sqlite3 **out, const char *path, bool memory, bool writer,
                                       lwd_catalog_error *err)
{
    sqlite3 *db = NULL;
    int flags = SQLITE_OPEN_NOMUTEX | SQLITE_OPEN_EXRESCODE;
    flags |= writer ? SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE : SQLITE_OPEN_READONLY;
    if (memory)
        flags |= SQLITE_OPEN_URI;
    *out = NULL;
    int rc = sqlite3_open_v2(path, &db, flags, NULL);
    if (rc == SQLITE_OK)
        rc = sqlite3_busy_timeout(db, 5000);
    if (rc == SQLITE_OK)
        rc = harden(db, writer);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc != SQLITE_OK)
        result = lwd_catalog_fail_db(err, db, rc, "open the catalog file");
    /* Readers keep 512 KiB of pages each: the kernel caches the file, the daemon stays small.
     * recursive_triggers: else a replacing insert would delete rows past the triggers. */
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_exec(db,
                                  "PRAGMA foreign_keys = ON; PRAGMA recursive_triggers = ON;"
                                  "PRAGMA cell_size_check = ON; PRAGMA mmap_size = 0;"
                                  "PRAGMA wal_autocheckpoint = 0; PRAGMA synchronous = FULL;",
                                  "set up the catalog file", err);
    if (result == LWD_CATALOG_OK && !writer)
        result = lwd_catalog_exec(db, "PRAGMA query_only = ON; PRAGMA cache_size = -512;",
                                  "set up a reader", err);
    static const struct {
        const char *pragma;
        int64_t want;
    } settings[] = {{"PRAGMA foreign_keys", 1},
                    {"PRAGMA synchronous", 2},
                    {"PRAGMA trusted_schema", 0},
                    {"PRAGMA recursive_triggers", 1},
                    {"PRAGMA wal_autocheckpoint", 0}};
    for (size_t i = 0; result == LWD_CATALOG_OK && i < sizeof settings / sizeof settings[0]; i++)
        result = read_back(db, settings[i].pragma, settings[i].want, err);
    if (result == LWD_CATALOG_OK)
        result = read_back(db, "PRAGMA query_only", writer ? 0 : 1, err);
    if (result != LWD_CATALOG_OK) {
        sqlite3_close(db);
        return result;
    }
    *out = db;
    return LWD_CATALOG_OK;
}

static lwd_catalog_result check_with(sqlite3 *db, const char *sql, bool rows_are_faults,
                                     lwd_catalog_error *err)
{
    sqlite3_stmt *stmt = NULL;
    lwd_catalog_result result = LWD_CATALOG_OK;
    int rc = sqlite3_prepare_v2(db, sql, -1, &stmt, NULL);
    if (rc == SQLITE_OK)
        rc = sqlite3_step(stmt);
    if (rc == SQLITE_ROW) {
        const char *text = (const char *)sqlite3_column_text(stmt, 0);
        if (rows_are_faults || !text || strcmp(text, "ok") != 0)
            result = lwd_catalog_fail(err, LWD_CATALOG_DAMAGED,
                                      "the catalog file is damaged (%.100s); "
                                      "restore it from a backup",
                                      text ? text : "no text");
    } else if (rc != SQLITE_DONE) {
        result = lwd_catalog_fail_db(err, db, rc, "check the catalog file");
    }
    sqlite3_finalize(stmt);
    return result;
}

lwd_catalog_result lwd_catalog_check_db(sqlite3 *db, bool thorough, lwd_catalog_error *err)
{
    const char *sql = thorough ? "PRAGMA integrity_check(1)" : "PRAGMA quick_check(1)";
    lwd_catalog_result result = check_with(db, sql, false, err);
    if (result == LWD_CATALOG_OK)
        result = check_with(db, "PRAGMA foreign_key_check", true, err);
    return result;
}
