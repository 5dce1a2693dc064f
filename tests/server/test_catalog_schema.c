/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The schema by itself: what its bounds and triggers refuse, also to a tool that opens the file
 * without our code, and how a file is brought from one format to the next. */
#define _DEFAULT_SOURCE
#include "catalog/internal.h"
#include "catalog_lab.h"

#include <math.h>

static sqlite3 *fresh(void)
{
    sqlite3 *db = NULL;
    assert_int_equal(lwd_catalog_connect(&db, ":memory:", false, true, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(
        lwd_catalog_migrate(db, lwd_catalog_migrations, lwd_catalog_n_migrations, &lab_err),
        LWD_CATALOG_OK);
    return db;
}

static void runs(sqlite3 *db, const char *sql)
{
    char *why = NULL;
    if (sqlite3_exec(db, sql, NULL, NULL, &why) != SQLITE_OK)
        lwt_fail("%s: %s", sql, why);
}

/* The statement fails as a violated constraint whose text holds `part`. */
static void refuses(sqlite3 *db, const char *sql, const char *part)
{
    char *why = NULL;
    int rc = sqlite3_exec(db, sql, NULL, NULL, &why);
    if ((rc & 0xff) != SQLITE_CONSTRAINT)
        lwt_fail("%.200s: got %d (%s), expected a constraint", sql, rc, why ? why : "");
    lwt_holds(why, part);
    sqlite3_free(why);
}

#define DIGEST_A "aaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaa"
#define DIGEST_B "bbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbbb"
#define DIGEST_C "cccccccccccccccccccccccccccccccccccccccccccccccccccccccccccccccc" /* not there */

static sqlite3 *filled(void)
{
    sqlite3 *db = fresh();
    runs(db, "INSERT INTO mechanism (id, name, created_ms) VALUES (1, 'stage', 5);"
             "INSERT INTO revision VALUES (1, 1, 1, '" DIGEST_A "', 5, 'w', 0, '', '{}');"
             "INSERT INTO revision VALUES (2, 1, 2, '" DIGEST_B "', 5, 'w', 0, '', '{}');"
             "INSERT INTO state_event VALUES (1, 1, 1, 1, 'publish', 6, 'w', 'r', '');"
             "INSERT INTO solution_set VALUES (1, 1, 5, 0, x'00');");
    return db;
}

static void revisions_and_events_are_never_changed_or_deleted(void **state)
{
    (void)state;
    static const struct {
        const char *sql;
        const char *part;
    } cases[] = {
        {"UPDATE revision SET document = 'x'", "never changed"},
        {"UPDATE revision SET digest = digest WHERE number = 1", "never changed"},
        {"DELETE FROM revision", "never deleted"},
        {"DELETE FROM revision WHERE number = 2", "never deleted"},
        {"UPDATE state_event SET at_ms = 7", "never changed"},
        {"DELETE FROM state_event", "never deleted"},
        {"UPDATE mechanism SET name = 'x'", "never changed"},
        {"DELETE FROM mechanism", "never deleted"},
        {"INSERT OR REPLACE INTO mechanism VALUES (1, 'x', 5)", "never replaced"},
        {"INSERT OR REPLACE INTO mechanism (name, created_ms) VALUES ('stage', 6)",
         "never replaced"},
        {"INSERT OR REPLACE INTO revision VALUES (2, 1, 3, '" DIGEST_C "', 5, 'w', 0, '', 'x')",
         "never replaced"},
        {"INSERT OR REPLACE INTO revision (mechanism_id, number, digest, created_ms, created_by,"
         " checksum, report, document) VALUES (1, 2, '" DIGEST_C "', 5, 'w', 0, '', 'x')",
         "no gaps"},
        {"INSERT OR REPLACE INTO state_event VALUES (1, 1, 2, 2, 'publish', 6, 'w', 'r', '')",
         "never replaced"},
        {"INSERT OR REPLACE INTO state_event (mechanism_id, serial, number, action, at_ms, who,"
         " reason, accepted) VALUES (1, 1, 2, 'publish', 6, 'w', 'r', '')",
         "no gaps"},
        {"INSERT INTO revision VALUES (3, 1, 2, '" DIGEST_C "', 5, 'w', 0, '', 'x')", "no gaps"},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_B "', 5, 'w', 0, '', 'x')",
         "a revision already"},
        {"INSERT INTO state_event VALUES (2, 1, 3, 1, 'publish', 6, 'w', 'r', '')", "no gaps"},
    };
    /* Twice: as our connections are set up, and as a tool's plain connection is. */
    for (int plain = 0; plain < 2; plain++) {
        sqlite3 *db = filled();
        if (plain)
            runs(db, "PRAGMA recursive_triggers = OFF; PRAGMA foreign_keys = OFF");
        for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++)
            refuses(db, cases[i].sql, cases[i].part);
        int64_t whole = 0;
        assert_int_equal(
            lwd_catalog_query_int(db,
                                  "SELECT (SELECT COUNT(*) FROM revision WHERE document = '{}')"
                                  " + 10 * (SELECT COUNT(*) FROM state_event WHERE number = 1)"
                                  " + 100 * (SELECT COUNT(*) FROM mechanism WHERE id = 1)",
                                  &whole, NULL),
            LWD_CATALOG_OK);
        assert_int_equal(whole, 112);
        assert_int_equal(sqlite3_close(db), SQLITE_OK);
    }
}

static void nothing_happens_to_a_withdrawn_revision(void **state)
{
    (void)state;
    sqlite3 *db = filled();
    runs(db, "INSERT INTO state_event VALUES (2, 1, 2, 1, 'withdraw', 6, 'w', 'r', '')");
    refuses(db, "INSERT INTO state_event VALUES (3, 1, 3, 1, 'publish', 6, 'w', 'r', '')",
            "withdrawn revision");
    refuses(db, "INSERT INTO state_event VALUES (3, 1, 3, 1, 'withdraw', 6, 'w', 'r', '')",
            "withdrawn revision");
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void rows_need_their_parents(void **state)
{
    (void)state;
    sqlite3 *db = filled();
    refuses(db, "INSERT INTO revision VALUES (3, 9, 1, '" DIGEST_A "', 5, 'w', 0, '', 'x')",
            "FOREIGN KEY");
    refuses(db, "INSERT INTO state_event VALUES (2, 1, 2, 3, 'publish', 6, 'w', 'r', '')",
            "FOREIGN KEY");
    refuses(db, "INSERT INTO solution_set VALUES (1, 3, 5, 0, x'00')", "FOREIGN KEY");
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

/* Binds every kind of bad number to a column of integers. */
static void numbers_are_finite_integers_within_bounds(void **state)
{
    (void)state;
    static const struct {
        const char *sql;
        int64_t good;
    } columns[] = {
        {"INSERT INTO mechanism (name, created_ms) VALUES ('x', ?1)", 5},
        {"INSERT INTO revision VALUES (3, 1, ?1, '" DIGEST_C "', 5, 'w', 0, '', 'x')", 3},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_C "', ?1, 'w', 0, '', 'x')", 0},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_C "', 5, 'w', ?1, '', 'x')", INT64_MIN},
        {"INSERT INTO state_event VALUES (2, 1, ?1, 2, 'publish', 6, 'w', 'r', '')", 2},
        {"INSERT INTO state_event VALUES (2, 1, 2, ?1, 'publish', 6, 'w', 'r', '')", 2},
        {"INSERT INTO state_event VALUES (2, 1, 2, 2, 'publish', ?1, 'w', 'r', '')",
         LWD_CATALOG_TIME_MAX_MS},
        {"INSERT INTO solution_set VALUES (1, ?1, 5, 0, x'00')", 2},
        {"INSERT INTO solution_set VALUES (1, 2, ?1, 0, x'00')", 6},
        {"INSERT INTO solution_set VALUES (1, 2, 5, ?1, x'00')", INT64_MAX},
    };
    /* NaN is stored as NULL by the library; infinity would pass a one-sided bound. */
    const double bad[] = {INFINITY, -INFINITY, (double)NAN, 1.5, 1e300};
    sqlite3 *db = filled();
    for (size_t i = 0; i < sizeof columns / sizeof columns[0]; i++) {
        sqlite3_stmt *s = NULL;
        assert_int_equal(sqlite3_prepare_v2(db, columns[i].sql, -1, &s, NULL), SQLITE_OK);
        for (size_t j = 0; j < 7; j++) {
            if (j < 5)
                assert_int_equal(sqlite3_bind_double(s, 1, bad[j]), SQLITE_OK);
            else if (j == 5)
                assert_int_equal(sqlite3_bind_text(s, 1, "", -1, SQLITE_STATIC), SQLITE_OK);
            else
                assert_int_equal(sqlite3_bind_null(s, 1), SQLITE_OK);
            int rc = sqlite3_step(s);
            if ((rc & 0xff) != SQLITE_CONSTRAINT)
                lwt_fail("%s with bad value %zu: got %d", columns[i].sql, j, rc);
            (void)sqlite3_reset(s);
        }
        /* It was the value: a good one passes. */
        runs(db, "SAVEPOINT g");
        assert_int_equal(sqlite3_bind_int64(s, 1, columns[i].good), SQLITE_OK);
        if (sqlite3_step(s) != SQLITE_DONE)
            lwt_fail("%s with a good value: %s", columns[i].sql, sqlite3_errmsg(db));
        sqlite3_finalize(s);
        runs(db, "ROLLBACK TO g; RELEASE g");
    }
    refuses(db, "INSERT INTO mechanism (name, created_ms) VALUES ('x', -1)", "CHECK");
    refuses(db, "INSERT INTO mechanism (name, created_ms) VALUES ('x', 253402300800000)", "CHECK");
    refuses(db, "INSERT INTO mechanism (id, name, created_ms) VALUES (0, 'x', 1)", "CHECK");
    refuses(db, "INSERT INTO state_event VALUES (2, 1, 2, 2, 'delete', 6, 'w', 'r', '')", "CHECK");
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

/* Tries a text or blob of `len` letters in the place of ?1. */
static int try_length(sqlite3 *db, const char *sql, size_t len, bool blob)
{
    char *text = malloc(len + 1);
    assert_non_null(text);
    memset(text, 'a', len);
    sqlite3_stmt *s = NULL;
    runs(db, "SAVEPOINT t");
    assert_int_equal(sqlite3_prepare_v2(db, sql, -1, &s, NULL), SQLITE_OK);
    if (blob)
        assert_int_equal(sqlite3_bind_blob64(s, 1, text, len, SQLITE_STATIC), SQLITE_OK);
    else
        assert_int_equal(sqlite3_bind_text64(s, 1, text, len, SQLITE_STATIC, SQLITE_UTF8),
                         SQLITE_OK);
    int rc = sqlite3_step(s);
    sqlite3_finalize(s);
    runs(db, "ROLLBACK TO t; RELEASE t");
    free(text);
    return rc & 0xff;
}

static void the_bounds_are_those_of_the_header(void **state)
{
    (void)state;
    static const struct {
        const char *sql;
        size_t min;
        size_t max;
        bool blob;
    } cases[] = {
        {"INSERT INTO mechanism (name, created_ms) VALUES (?1, 1)", 1, LWD_CATALOG_NAME_MAX, false},
        {"INSERT INTO revision VALUES (3, 1, 3, ?1 || '', 5, 'w', 0, '', 'x')",
         LWD_CATALOG_DIGEST_LEN, LWD_CATALOG_DIGEST_LEN, false},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_C "', 5, ?1, 0, '', 'x')", 1,
         LWD_CATALOG_WHO_MAX, false},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_C "', 5, 'w', 0, ?1, 'x')", 0,
         LWD_CATALOG_REPORT_MAX, false},
        {"INSERT INTO revision VALUES (3, 1, 3, '" DIGEST_C "', 5, 'w', 0, '', ?1)", 1,
         LWD_CATALOG_DOCUMENT_MAX, false},
        {"INSERT INTO state_event VALUES (2, 1, 2, 2, 'publish', 6, ?1, 'r', '')", 1,
         LWD_CATALOG_WHO_MAX, false},
        {"INSERT INTO state_event VALUES (2, 1, 2, 2, 'publish', 6, 'w', ?1, '')", 0,
         LWD_CATALOG_REASON_MAX, false},
        {"INSERT INTO state_event VALUES (2, 1, 2, 2, 'publish', 6, 'w', 'r', ?1)", 0,
         LWD_CATALOG_ACCEPTED_MAX, false},
        {"INSERT INTO solution_set VALUES (1, 2, 5, 0, ?1)", 1, LWD_CATALOG_SOLUTIONS_MAX, true},
    };
    sqlite3 *db = filled();
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        const char *sql = cases[i].sql;
        runs(db, "SAVEPOINT c");
        /* A digest of 64 a's is there already; withdrawn, it may come again. */
        if (cases[i].min == LWD_CATALOG_DIGEST_LEN)
            runs(db, "INSERT INTO state_event VALUES (2, 1, 2, 1, 'withdraw', 6, 'w', 'r', '')");
        if (cases[i].min > 0)
            assert_int_equal(try_length(db, sql, cases[i].min - 1, cases[i].blob),
                             SQLITE_CONSTRAINT);
        assert_int_equal(try_length(db, sql, cases[i].min, cases[i].blob), SQLITE_DONE);
        assert_int_equal(try_length(db, sql, cases[i].max, cases[i].blob), SQLITE_DONE);
        assert_int_equal(try_length(db, sql, cases[i].max + 1, cases[i].blob), SQLITE_CONSTRAINT);
        runs(db, "ROLLBACK TO c; RELEASE c");
    }
    char sql[160];
    refuses(db, "INSERT INTO mechanism (name, created_ms) VALUES ('A', 1)", "CHECK");
    refuses(db, "INSERT INTO mechanism (name, created_ms) VALUES ('a b', 1)", "CHECK");
    (void)snprintf(sql, sizeof sql, "INSERT INTO solution_set VALUES (1, %d, 5, 0, x'00')",
                   LWD_CATALOG_REVISIONS_MAX + 1);
    refuses(db, sql, "CHECK");
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void an_unknown_name_in_double_quotes_is_no_text(void **state)
{
    (void)state;
    sqlite3 *db = filled();
    assert_int_equal(sqlite3_exec(db, "SELECT \"nosuch\" FROM mechanism", NULL, NULL, NULL),
                     SQLITE_ERROR);
    assert_int_equal(sqlite3_exec(db, "SELECT load_extension('x')", NULL, NULL, NULL),
                     SQLITE_ERROR);
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void migrates_from_an_empty_file_step_by_step(void **state)
{
    (void)state;
    static const lwd_catalog_migration list[] = {
        {1, "0001_a", "CREATE TABLE a (x INTEGER NOT NULL) STRICT; INSERT INTO a VALUES (1);"},
        {2, "0002_b", "ALTER TABLE a ADD COLUMN y INTEGER NOT NULL DEFAULT 4;"},
        {3, "0003_c", "CREATE TABLE c (x INTEGER) STRICT; INSERT INTO nosuch VALUES (1);"},
        {5, "0005_e", "SELECT 1;"},
    };
    sqlite3 *db = NULL;
    int64_t v = -1;
    assert_int_equal(lwd_catalog_connect(&db, ":memory:", false, true, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(lwd_catalog_migrate(db, list, 1, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(lwd_catalog_query_int(db, "PRAGMA user_version", &v, NULL), LWD_CATALOG_OK);
    assert_int_equal(v, 1);
    assert_int_equal(lwd_catalog_migrate(db, list, 2, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(lwd_catalog_query_int(db, "SELECT x + y FROM a", &v, NULL), LWD_CATALOG_OK);
    assert_int_equal(v, 5);
    /* Again: nothing to do, nothing done twice. */
    assert_int_equal(lwd_catalog_migrate(db, list, 2, &lab_err), LWD_CATALOG_OK);
    /* A step that fails half-way leaves the whole step out. */
    assert_int_equal(lwd_catalog_migrate(db, list, 3, &lab_err), LWD_CATALOG_INTERNAL);
    lwt_holds(lab_err.why, "format 3");
    assert_int_equal(lwd_catalog_query_int(db, "PRAGMA user_version", &v, NULL), LWD_CATALOG_OK);
    assert_int_equal(v, 2);
    assert_int_equal(lwd_catalog_query_int(db, "SELECT COUNT(*) FROM sqlite_schema", &v, NULL),
                     LWD_CATALOG_OK);
    assert_int_equal(v, 1);
    assert_true(sqlite3_get_autocommit(db));
    /* An older program refuses it. */
    assert_int_equal(lwd_catalog_migrate(db, list, 1, &lab_err), LWD_CATALOG_NEWER);
    lwt_holds(lab_err.why, "format 2");
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
    /* A gap in the numbers is our own mistake. */
    assert_int_equal(lwd_catalog_connect(&db, ":memory:", false, true, &lab_err), LWD_CATALOG_OK);
    const lwd_catalog_migration gap[] = {list[0], list[3]};
    assert_int_equal(lwd_catalog_migrate(db, gap, 2, &lab_err), LWD_CATALOG_INTERNAL);
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void a_migration_that_orphans_rows_is_undone(void **state)
{
    (void)state;
    static const lwd_catalog_migration list[] = {
        {1, "0001_a",
         "CREATE TABLE p (x INTEGER PRIMARY KEY) STRICT;"
         "CREATE TABLE q (x INTEGER REFERENCES p (x)) STRICT; INSERT INTO q VALUES (1);"}};
    sqlite3 *db = NULL;
    int64_t n = -1;
    assert_int_equal(lwd_catalog_connect(&db, ":memory:", false, true, &lab_err), LWD_CATALOG_OK);
    runs(db, "PRAGMA foreign_keys = OFF");
    assert_int_equal(lwd_catalog_migrate(db, list, 1, &lab_err), LWD_CATALOG_INTERNAL);
    lwt_holds(lab_err.why, "without their parent");
    assert_int_equal(lwd_catalog_query_int(db, "SELECT COUNT(*) FROM sqlite_schema", &n, NULL),
                     LWD_CATALOG_OK);
    assert_int_equal(n, 0);
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

/* Check value of CRC-64/XZ: 0x995dc9bbdf1939fa over "123456789" (catalogue of parametrised CRC
 * algorithms, reveng.sourceforge.io; value from memory, and computed here bit by bit besides). */
static void the_checksum_is_the_reflected_ecma_182_one(void **state)
{
    (void)state;
    const char text[] = "123456789";
    assert_true(lwd_catalog_crc64(0, text, 9) == UINT64_C(0x995dc9bbdf1939fa));
    assert_true(lwd_catalog_crc64(lwd_catalog_crc64(0, text, 4), text + 4, 5) ==
                UINT64_C(0x995dc9bbdf1939fa));
    /* Most significant bit first, polynomial as printed in ECMA-182, bytes and result mirrored. */
    uint64_t reg = UINT64_MAX;
    for (size_t i = 0; i < 9; i++)
        for (int bit = 0; bit < 8; bit++) {
            uint64_t in = ((unsigned)text[i] >> bit) & 1u;
            uint64_t top = (reg >> 63) ^ in;
            reg = (reg << 1) ^ (top ? UINT64_C(0x42f0e1eba9ea3693) : 0);
        }
    uint64_t mirrored = 0;
    for (int bit = 0; bit < 64; bit++)
        mirrored |= ((reg >> bit) & 1) << (63 - bit);
    assert_true(lwd_catalog_crc64(0, text, 9) == ~mirrored);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(revisions_and_events_are_never_changed_or_deleted),
        cmocka_unit_test(nothing_happens_to_a_withdrawn_revision),
        cmocka_unit_test(rows_need_their_parents),
        cmocka_unit_test(numbers_are_finite_integers_within_bounds),
        cmocka_unit_test(the_bounds_are_those_of_the_header),
        cmocka_unit_test(an_unknown_name_in_double_quotes_is_no_text),
        cmocka_unit_test(migrates_from_an_empty_file_step_by_step),
        cmocka_unit_test(a_migration_that_orphans_rows_is_undone),
        cmocka_unit_test(the_checksum_is_the_reflected_ecma_182_one),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
