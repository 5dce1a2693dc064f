/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The catalog on disk: its directory, its lock, other people's files, damage, a full disk, backup,
 * memory that runs out, and how long a start takes. */
#define _DEFAULT_SOURCE
#include "catalog/internal.h"
#include "catalog_lab.h"

#include <sys/stat.h>
#include <time.h>

static char base[256];

static int make_base(void **state)
{
    (void)state;
    lab_dir(base);
    return 0;
}

static int drop_base(void **state)
{
    (void)state;
    lab_remove(base);
    return 0;
}

static void path_in(char out[600], const char *dir, const char *name)
{
    if (snprintf(out, 600, "%s/%s", dir, name) >= 600)
        lwt_fail("%s is too long", dir);
}

/* Runs SQL on a closed catalog's file, as a person with a tool would. */
static void tamper(const char *dir, const char *sql)
{
    char path[600];
    char *why = NULL;
    sqlite3 *db = NULL;
    path_in(path, dir, "catalog.sqlite");
    assert_int_equal(sqlite3_open(path, &db), SQLITE_OK);
    if (sqlite3_exec(db, sql, NULL, NULL, &why) != SQLITE_OK)
        lwt_fail("%s: %s", sql, why);
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void makes_its_directory_and_files_for_the_owner(void **state)
{
    (void)state;
    char dir[600];
    char path[600];
    struct stat st;
    path_in(dir, base, "data");
    mode_t before = umask(0);
    lwd_catalog *c = lab_open(dir, NULL);
    (void)umask(before);
    assert_int_equal(stat(dir, &st), 0);
    assert_int_equal(st.st_mode & 07777, 0750);
    static const char *const files[] = {"catalog.sqlite", "catalog.lock", "catalog.sqlite-wal",
                                        "catalog.sqlite-shm"};
    for (size_t i = 0; i < 4; i++) {
        path_in(path, dir, files[i]);
        assert_int_equal(stat(path, &st), 0);
        assert_int_equal(st.st_mode & 07777, 0640);
    }
    assert_int_equal(lab_put(c, "stage", 1), 1);
    lwd_catalog_close(c);
    /* A clean close leaves no log behind. */
    assert_int_equal(lab_count_files(dir, "-wal"), 0);
    c = lab_open(dir, NULL);
    assert_int_equal(lab_put(c, "stage", 2), 2);
    lwd_catalog_close(c);
}

static void refuses_a_second_opener(void **state)
{
    (void)state;
    lwd_catalog *first = lab_open(base, NULL);
    lwd_catalog *second = NULL;
    lab_is(lwd_catalog_open(&second, base, NULL, &lab_err), LWD_CATALOG_LOCKED);
    assert_null(second);
    char pid[32];
    (void)snprintf(pid, sizeof pid, "process %ld", (long)getpid());
    lwt_holds(lab_err.why, pid);
    /* The first goes on. */
    assert_int_equal(lab_put(first, "stage", 1), 1);
    lwd_catalog_close(first);
    second = lab_open(base, NULL);
    assert_int_equal(lab_put(second, "stage", 1), 1);
    lwd_catalog_close(second);
}

static void refuses_directories_it_cannot_trust(void **state)
{
    (void)state;
    char path[600];
    char deep[600];
    lwd_catalog *c = NULL;
    path_in(path, base, "file");
    FILE *f = fopen(path, "w");
    assert_non_null(f);
    (void)fclose(f);
    lab_is(lwd_catalog_open(&c, path, NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    path_in(deep, base, "no/such");
    lab_is(lwd_catalog_open(&c, deep, NULL, &lab_err), LWD_CATALOG_STORAGE);
    lab_is(lwd_catalog_open(&c, "", NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    path_in(path, base, "open");
    assert_int_equal(mkdir(path, 0700), 0);
    assert_int_equal(chmod(path, 0777), 0);
    lab_is(lwd_catalog_open(&c, path, NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    lwt_holds(lab_err.why, "chmod o-w");
    char *huge = malloc(5000);
    assert_non_null(huge);
    memset(huge, 'd', 4999);
    huge[4999] = '\0';
    lab_is(lwd_catalog_open(&c, huge, NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    free(huge);
    assert_null(c);
}

static void refuses_files_of_others_and_newer_formats(void **state)
{
    (void)state;
    lwd_catalog *c = NULL;
    char path[600];
    /* Not a database at all. */
    path_in(path, base, "catalog.sqlite");
    FILE *f = fopen(path, "w");
    assert_non_null(f);
    for (int i = 0; i < 2000; i++)
        (void)fputs("this is no database ", f);
    (void)fclose(f);
    lab_is(lwd_catalog_open(&c, base, NULL, &lab_err), LWD_CATALOG_DAMAGED);
    /* Some other program's. */
    assert_int_equal(unlink(path), 0);
    tamper(base, "CREATE TABLE letters (x TEXT)");
    lab_is(lwd_catalog_open(&c, base, NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    lwt_holds(lab_err.why, "some other program");
    tamper(base, "PRAGMA user_version = 1");
    lab_is(lwd_catalog_open(&c, base, NULL, &lab_err), LWD_CATALOG_ARGUMENT);
    /* Ours, from the future: it is left as it is. */
    assert_int_equal(unlink(path), 0);
    c = lab_open(base, NULL);
    (void)lab_put(c, "stage", 1);
    lwd_catalog_close(c);
    char sql[64];
    (void)snprintf(sql, sizeof sql, "PRAGMA user_version = %d", lwd_catalog_format() + 1);
    tamper(base, sql);
    lab_is(lwd_catalog_open(&c, base, NULL, &lab_err), LWD_CATALOG_NEWER);
    lwt_holds(lab_err.why, "start the newer program");
    (void)snprintf(sql, sizeof sql, "PRAGMA user_version = %d", lwd_catalog_format());
    tamper(base, sql);
    c = lab_open(base, NULL);
    assert_int_equal(lab_put(c, "stage", 1), 1);
    lwd_catalog_close(c);
}

static void migrates_an_empty_file(void **state)
{
    (void)state;
    tamper(base, "VACUUM"); /* makes a file of format 0 without content */
    lwd_catalog *c = lab_open(base, NULL);
    assert_int_equal(lab_put(c, "stage", 1), 1);
    lwd_catalog_close(c);
    sqlite3 *db = NULL;
    char path[600];
    path_in(path, base, "catalog.sqlite");
    int64_t value = 0;
    assert_int_equal(sqlite3_open(path, &db), SQLITE_OK);
    assert_int_equal(lwd_catalog_query_int(db, "PRAGMA user_version", &value, NULL),
                     LWD_CATALOG_OK);
    assert_int_equal(value, lwd_catalog_format());
    assert_int_equal(lwd_catalog_query_int(db, "PRAGMA application_id", &value, NULL),
                     LWD_CATALOG_OK);
    assert_int_equal(value, LWD_CATALOG_APPLICATION_ID);
    assert_int_equal(sqlite3_close(db), SQLITE_OK);
}

static void reports_a_damaged_text_and_damaged_solution_sets(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(base, NULL);
    (void)lab_put(c, "stage", 1);
    (void)lab_put(c, "stage", 2);
    lab_is(lwd_catalog_save_solutions(c, "stage", 1, "abcdef", 6, 0, &lab_err), LWD_CATALOG_OK);
    lab_is(lwd_catalog_save_solutions(c, "stage", 2, "abcdef", 6, 0, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(c);
    tamper(base, "DROP TRIGGER revision_is_fixed;"
                 "UPDATE revision SET document = '{\"n\": 3}' WHERE number = 1;"
                 "UPDATE solution_set SET content = x'616263646567' WHERE number = 2");
    c = lab_open(base, NULL);
    lwd_catalog_revision rev;
    lwd_catalog_blob blob;
    lab_is(lwd_catalog_get_revision(c, "stage", 1, &rev, &lab_err), LWD_CATALOG_DAMAGED);
    lwt_holds(lab_err.why, "revision 1 of stage");
    assert_null(rev.document);
    lab_is(lwd_catalog_load_solutions(c, "stage", 2, &blob, &lab_err), LWD_CATALOG_DAMAGED);
    assert_null(blob.data);
    lwt_holds(lab_err.why, "prepare them again");
    /* The neighbours are whole. */
    lab_is(lwd_catalog_get_revision(c, "stage", 2, &rev, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_revision_clear(&rev);
    lab_is(lwd_catalog_load_solutions(c, "stage", 1, &blob, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_blob_clear(&blob);
    lab_is(lwd_catalog_save_solutions(c, "stage", 2, "abcdef", 6, 0, &lab_err), LWD_CATALOG_OK);
    lab_is(lwd_catalog_load_solutions(c, "stage", 2, &blob, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_blob_clear(&blob);
    lwd_catalog_close(c);
}

static void refuses_to_start_on_a_damaged_file(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(base, NULL);
    for (unsigned long n = 1; n <= 60; n++)
        (void)lab_put(c, "stage", n);
    lwd_catalog_close(c);
    char path[600];
    path_in(path, base, "catalog.sqlite");
    FILE *f = fopen(path, "r+");
    assert_non_null(f);
    /* Past the first page, which holds the schema: every second page gets a wrong head. */
    assert_int_equal(fseek(f, 0, SEEK_END), 0);
    long size = ftell(f);
    for (long at = 4096; at + 64 < size; at += 8192) {
        assert_int_equal(fseek(f, at, SEEK_SET), 0);
        for (int i = 0; i < 64; i++)
            (void)fputc(0x5a, f);
    }
    (void)fclose(f);
    c = NULL;
    lab_is(lwd_catalog_open(&c, base, NULL, &lab_err), LWD_CATALOG_DAMAGED);
    assert_null(c);
    lwt_holds(lab_err.why, "backup");
}

static void a_full_disk_is_reported_and_reads_go_on(void **state)
{
    (void)state;
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.pages_max = 100; /* 400 KiB */
    lwd_catalog *c = lab_open(base, &o);
    char *text = malloc(100000);
    assert_non_null(text);
    memset(text, 'x', 100000);
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lwd_catalog_put in = lab_put_of("large", "", digest);
    in.document = text;
    in.document_len = 100000;
    lwd_catalog_put_result put = {0};
    lwd_catalog_result result = LWD_CATALOG_OK;
    int stored = 0;
    for (unsigned long n = 1; n <= 10 && result == LWD_CATALOG_OK; n++) {
        lab_digest(digest, n);
        result = lwd_catalog_put_revision(c, &in, &put, &lab_err);
        stored += result == LWD_CATALOG_OK;
    }
    lab_is(result, LWD_CATALOG_FULL);
    lwt_holds(lab_err.why, "nothing was stored");
    assert_true(stored >= 2);
    /* Reading goes on, the failed one left nothing, and what still fits is still stored. */
    lwd_catalog_mechanism m;
    lwd_catalog_revision rev;
    lab_is(lwd_catalog_get_mechanism(c, "large", &m, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(m.revisions, stored);
    lab_is(lwd_catalog_get_revision(c, "large", stored, &rev, &lab_err), LWD_CATALOG_OK);
    assert_memory_equal(rev.document, text, 100000);
    lwd_catalog_revision_clear(&rev);
    assert_int_equal(lab_put(c, "large", 1000), stored + 1);
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(c, &stats);
    assert_true(stats.failures >= 1);
    lab_is(lwd_catalog_verify(c, true, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(c);
    /* With room again, it goes in. */
    c = lab_open(base, NULL);
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, stored + 2);
    lwd_catalog_close(c);
    free(text);
}

static void a_backup_is_whole_and_can_be_opened(void **state)
{
    (void)state;
    char data[600];
    char copy_dir[600];
    char copy[600];
    path_in(data, base, "data");
    path_in(copy_dir, base, "copy");
    path_in(copy, copy_dir, "catalog.sqlite");
    assert_int_equal(mkdir(copy_dir, 0750), 0);
    lwd_catalog *c = lab_open(data, NULL);
    lwd_catalog_state_result s;
    for (unsigned long n = 1; n <= 40; n++)
        (void)lab_put(c, n % 2 ? "odd" : "even", n);
    lab_is(lab_set(c, "odd", 3, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    lab_is(lwd_catalog_backup(c, copy, &lab_err), LWD_CATALOG_OK);
    struct stat st;
    assert_int_equal(stat(copy, &st), 0);
    assert_int_equal(st.st_mode & 0007, 0);
    assert_int_equal(lab_count_files(copy_dir, "part"), 0);
    (void)lab_put(c, "odd", 1000); /* after the copy: not in it */
    /* Over an older backup: replaced. */
    char other[600];
    path_in(other, base, "weekly");
    lab_is(lwd_catalog_backup(c, other, &lab_err), LWD_CATALOG_OK);
    lab_is(lwd_catalog_backup(c, other, &lab_err), LWD_CATALOG_OK);
    /* What must not be. */
    char own[600];
    path_in(own, data, "catalog.sqlite");
    lab_is(lwd_catalog_backup(c, own, &lab_err), LWD_CATALOG_ARGUMENT);
    lab_is(lwd_catalog_backup(c, copy_dir, &lab_err), LWD_CATALOG_ARGUMENT);
    lab_is(lwd_catalog_backup(c, "", &lab_err), LWD_CATALOG_ARGUMENT);
    path_in(own, base, "no/such/file");
    lab_is(lwd_catalog_backup(c, own, &lab_err), LWD_CATALOG_STORAGE);
    assert_int_equal(lab_put(c, "odd", 1001), 22);
    lwd_catalog_close(c);

    c = lab_open(copy_dir, NULL);
    lwd_catalog_mechanism m;
    lab_is(lwd_catalog_get_mechanism(c, "odd", &m, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(m.revisions, 20);
    assert_int_equal(m.answering, 3);
    assert_int_equal(lab_put(c, "odd", 1000), 21);
    lwd_catalog_close(c);

    c = lab_open(":memory:", NULL);
    lab_is(lwd_catalog_backup(c, other, &lab_err), LWD_CATALOG_ARGUMENT);
    lwd_catalog_close(c);
}

static void the_log_stays_short(void **state)
{
    (void)state;
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.checkpoint_commits = 10;
    lwd_catalog *c = lab_open(base, &o);
    struct stat st;
    char path[600];
    path_in(path, base, "catalog.sqlite-wal");
    off_t largest = 0;
    lwd_catalog_mechanism m;
    for (unsigned long n = 1; n <= 200; n++) {
        (void)lab_put(c, "stage", n);
        lab_is(lwd_catalog_get_mechanism(c, "stage", &m, &lab_err), LWD_CATALOG_OK);
        assert_int_equal(stat(path, &st), 0);
        largest = st.st_size > largest ? st.st_size : largest;
    }
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(c, &stats);
    assert_true(stats.checkpoints >= 10);
    assert_int_equal(stats.commits, 200);
    assert_int_equal(stats.writes, 200);
    /* 200 commits of about 5 pages would be 4 MB of log if a statement left open held it. */
    if (largest > 1200000)
        lwt_fail("the log grew to %ld bytes", (long)largest);
    lwd_catalog_close(c);
}

/* Allocation number n of our own code fails while a catalog is opened, used and closed. */
static void use_while_memory_fails(void *context, size_t n)
{
    (void)n;
    lwd_catalog *c = NULL;
    lwd_catalog_error err;
    lwd_catalog_result result = lwd_catalog_open(&c, context, NULL, &err);
    if (result == LWD_CATALOG_OK) {
        lwd_catalog_revision rev;
        lwd_catalog_blob blob;
        result = lwd_catalog_get_revision(c, "stage", 1, &rev, &err);
        if (result == LWD_CATALOG_OK)
            lwd_catalog_revision_clear(&rev);
        else if (rev.document || rev.report)
            lwt_fail("a failed read left memory behind");
        if (result == LWD_CATALOG_OK) {
            result = lwd_catalog_load_solutions(c, "stage", 1, &blob, &err);
            if (result == LWD_CATALOG_OK)
                lwd_catalog_blob_clear(&blob);
        }
    } else if (c) {
        lwt_fail("a failed open gave a handle");
    }
    lwd_catalog_close(c);
    if (result != (lwt_alloc_failed() ? LWD_CATALOG_MEMORY : LWD_CATALOG_OK))
        lwt_fail("got %d (%s)", (int)result, err.why);
}

static void memory_that_runs_out_is_an_error_and_no_leak(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(base, NULL);
    (void)lab_put(c, "stage", 1);
    lab_is(lwd_catalog_save_solutions(c, "stage", 1, "abc", 3, 0, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(c);
    size_t n = lwt_alloc_sweep(use_while_memory_fails, base, 50);
    assert_int_equal(n, 6); /* handle, queue, batch, report, document, solution sets */
}

/* The library's own allocations, failing from a countdown on. */
static sqlite3_mem_methods plain_memory;
static atomic_long memory_left = -1;

static void *scarce_malloc(int size)
{
    long left = atomic_load(&memory_left);
    if (left == 0)
        return NULL;
    if (left > 0)
        atomic_fetch_sub(&memory_left, 1);
    return plain_memory.xMalloc(size);
}

static void the_library_out_of_memory_is_an_error_and_nothing_is_lost(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(":memory:", NULL);
    (void)lab_put(c, "stage", 1);
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    char *text = malloc(20000);
    assert_non_null(text);
    memset(text, 'y', 20000);
    int failed = 0;
    int64_t stored = 1;
    for (long n = 0; n < 200; n++) {
        lab_digest(digest, (unsigned long)n + 2);
        lwd_catalog_put in = lab_put_of("stage", "", digest);
        in.document = text;
        in.document_len = 20000;
        lwd_catalog_put_result put = {0};
        atomic_store(&memory_left, n);
        lwd_catalog_result result = lwd_catalog_put_revision(c, &in, &put, &lab_err);
        atomic_store(&memory_left, -1);
        if (result == LWD_CATALOG_OK) {
            stored++;
            assert_int_equal(put.number, stored);
        } else {
            lab_is(result, LWD_CATALOG_MEMORY);
            failed++;
        }
        lwd_catalog_mechanism m;
        lab_is(lwd_catalog_get_mechanism(c, "stage", &m, &lab_err), LWD_CATALOG_OK);
        assert_int_equal(m.revisions, stored);
    }
    assert_true(failed > 0);
    assert_true(stored > 1);
    lab_is(lwd_catalog_verify(c, true, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(c);
    free(text);
}

static double seconds(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* What a start of the daemon asks of the catalog: open, list, read every answering revision. */
static void starts_with_200_mechanisms_in_less_than_a_second(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(base, NULL);
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    char *text = malloc(8000);
    assert_non_null(text);
    memset(text, 'd', 8000);
    lwd_catalog_state_result s;
    for (unsigned long n = 1; n <= 200; n++) {
        char name[16];
        lwd_catalog_put_result put;
        (void)snprintf(name, sizeof name, "m-%lu", n);
        lwd_catalog_put in = lab_put_of(name, "", digest);
        in.document = text;
        in.document_len = 8000;
        for (unsigned long r = 1; r <= 3; r++) {
            lab_digest(digest, r);
            lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
        }
        lab_is(lab_set(c, name, 2, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    }
    lwd_catalog_close(c);

    double start = seconds();
    c = lab_open(base, NULL);
    static lwd_catalog_mechanism page[LWD_CATALOG_PAGE_MAX];
    size_t n = 0;
    bool more = true;
    lab_is(lwd_catalog_list_mechanisms(c, NULL, page, LWD_CATALOG_PAGE_MAX, &n, &more, &lab_err),
           LWD_CATALOG_OK);
    assert_int_equal(n, 200);
    assert_false(more);
    for (size_t i = 0; i < n; i++) {
        lwd_catalog_revision rev;
        lab_is(lwd_catalog_get_revision(c, page[i].name, 0, &rev, &lab_err), LWD_CATALOG_OK);
        assert_int_equal(rev.info.number, 2);
        assert_int_equal(rev.document_len, 8000);
        lwd_catalog_revision_clear(&rev);
    }
    double taken = seconds() - start;
    lwd_catalog_close(c);
    free(text);
    print_message("opened and read 200 mechanisms in %.1f ms\n", 1e3 * taken);
    assert_true(taken < 1.0);
}

#define CASE(f) cmocka_unit_test_setup_teardown(f, make_base, drop_base)

int main(void)
{
    sqlite3_mem_methods scarce;
    if (sqlite3_config(SQLITE_CONFIG_GETMALLOC, &plain_memory) != SQLITE_OK)
        return 1;
    scarce = plain_memory;
    scarce.xMalloc = scarce_malloc;
    if (sqlite3_config(SQLITE_CONFIG_MALLOC, &scarce) != SQLITE_OK)
        return 1;
    const struct CMUnitTest tests[] = {
        CASE(makes_its_directory_and_files_for_the_owner),
        CASE(refuses_a_second_opener),
        CASE(refuses_directories_it_cannot_trust),
        CASE(refuses_files_of_others_and_newer_formats),
        CASE(migrates_an_empty_file),
        CASE(reports_a_damaged_text_and_damaged_solution_sets),
        CASE(refuses_to_start_on_a_damaged_file),
        CASE(a_full_disk_is_reported_and_reads_go_on),
        CASE(a_backup_is_whole_and_can_be_opened),
        CASE(the_log_stays_short),
        CASE(memory_that_runs_out_is_an_error_and_no_leak),
        cmocka_unit_test(the_library_out_of_memory_is_an_error_and_nothing_is_lost),
        CASE(starts_with_200_mechanisms_in_less_than_a_second),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
