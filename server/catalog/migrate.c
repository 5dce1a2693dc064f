/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Recognises a catalog file and brings it to the format of this program. Runs on the opening
 * thread before the writer thread exists. A step is one transaction that ends with its number in
 * user_version: a crash leaves the file at a whole step. */
#include "internal.h"

#include <stdio.h>

int lwd_catalog_format(void)
{
    return (int)lwd_catalog_n_migrations;
}

lwd_catalog_result lwd_catalog_recognise(sqlite3 *db, int newest, int *version,
                                         lwd_catalog_error *err)
{
    int64_t id = 0;
    int64_t format = 0;
    int64_t objects = 0;
    lwd_catalog_result result = lwd_catalog_query_int(db, "PRAGMA application_id", &id, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_query_int(db, "PRAGMA user_version", &format, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_query_int(db, "SELECT COUNT(*) FROM sqlite_schema", &objects, err);
    if (result != LWD_CATALOG_OK)
        return result;
    bool empty = id == 0 && format == 0 && objects == 0;
    if (!empty && (id != LWD_CATALOG_APPLICATION_ID || format < 1))
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "catalog.sqlite is a database of some other program; "
                                "choose another data directory");
    if (format > newest)
        return lwd_catalog_fail(err, LWD_CATALOG_NEWER,
                                "the catalog has format %lld, this program knows formats up to %d; "
                                "start the newer program, or restore a backup made before it",
                                (long long)format, newest);
    *version = (int)format;
    return LWD_CATALOG_OK;
}

static lwd_catalog_result step(sqlite3 *db, const lwd_catalog_migration *m, lwd_catalog_error *err)
{
    char stamp[96];
    (void)snprintf(stamp, sizeof stamp, "PRAGMA application_id = %d; PRAGMA user_version = %d;",
                   LWD_CATALOG_APPLICATION_ID, m->number);
    char doing[64];
    (void)snprintf(doing, sizeof doing, "migrate the catalog to format %d", m->number);
    lwd_catalog_result result = lwd_catalog_exec(db, "BEGIN IMMEDIATE", doing, err);
    if (result != LWD_CATALOG_OK)
        return result;
    result = lwd_catalog_exec(db, m->sql, doing, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_exec(db, stamp, doing, err);
    int64_t orphans = 0;
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_query_int(db, "SELECT COUNT(*) FROM pragma_foreign_key_check",
                                       &orphans, err);
    if (result == LWD_CATALOG_OK && orphans != 0)
        result =
            lwd_catalog_fail(err, LWD_CATALOG_INTERNAL,
                             "the migration to format %d leaves %lld rows without their parent",
                             m->number, (long long)orphans);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_exec(db, "COMMIT", doing, err);
    if (result != LWD_CATALOG_OK && !sqlite3_get_autocommit(db))
        (void)sqlite3_exec(db, "ROLLBACK", NULL, NULL, NULL);
    return result;
}

lwd_catalog_result lwd_catalog_migrate(sqlite3 *db, const lwd_catalog_migration *list, size_t n,
                                       lwd_catalog_error *err)
{
    int version = 0;
    lwd_catalog_result result = lwd_catalog_recognise(db, (int)n, &version, err);
    for (size_t i = 0; result == LWD_CATALOG_OK && i < n; i++) {
        if (list[i].number != (int)i + 1)
            return lwd_catalog_fail(err, LWD_CATALOG_INTERNAL, "migration %zu is numbered %d",
                                    i + 1, list[i].number);
        if (list[i].number > version)
            result = step(db, &list[i], err);
    }
    return result;
}
