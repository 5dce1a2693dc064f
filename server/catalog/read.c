/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reading: a small pool of read-only connections, each used by one thread at a time, each with its
 * statements prepared once. One question is one statement, so it sees one state of the catalog.
 * Statements are reset before the connection goes back: an open one would hold the log. */
#include "internal.h"

#include <stdlib.h>
#include <string.h>

#define MECHANISM_COLUMNS                                                                          \
    "SELECT s.name, s.created_ms, s.tag, s.latest, s.published, s.withdrawn, s.answering,"         \
    " (SELECT r.digest FROM revision r WHERE r.mechanism_id = s.id AND r.number = s.answering)"    \
    " FROM mechanism_state s "

#define REVISION_COLUMNS                                                                           \
    "r.number, r.digest, (SELECT x.state FROM revision_state x WHERE x.id = r.id),"                \
    " (SELECT s.answering FROM mechanism_state s WHERE s.id = m.id),"                              \
    " (SELECT s.tag FROM mechanism_state s WHERE s.id = m.id), r.created_ms, r.created_by,"        \
    " EXISTS (SELECT 1 FROM solution_set q"                                                        \
    "         WHERE q.mechanism_id = r.mechanism_id AND q.number = r.number)"

#define REVISION_FROM                                                                              \
    " FROM mechanism m JOIN revision r ON r.mechanism_id = m.id WHERE m.name = ?1 "

/* Number 0 stands for the answering revision. */
#define REVISION_NUMBER                                                                            \
    "AND r.number = CASE ?2 WHEN 0 THEN"                                                           \
    " (SELECT s.answering FROM mechanism_state s WHERE s.id = m.id) ELSE ?2 END"

const char *const lwd_catalog_read_sql[LWD_CATALOG_R_COUNT] = {
    [LWD_CATALOG_R_MECHANISMS] = MECHANISM_COLUMNS "WHERE s.name > ?1 ORDER BY s.name LIMIT ?2",
    [LWD_CATALOG_R_MECHANISM] = MECHANISM_COLUMNS "WHERE s.name = ?1",
    [LWD_CATALOG_R_COUNT_MECHANISMS] = "SELECT COUNT(*) FROM mechanism",
    [LWD_CATALOG_R_REVISIONS] =
        "SELECT " REVISION_COLUMNS REVISION_FROM "AND r.number > ?2 ORDER BY r.number LIMIT ?3",
    [LWD_CATALOG_R_INFO] = "SELECT " REVISION_COLUMNS REVISION_FROM REVISION_NUMBER,
    [LWD_CATALOG_R_REVISION] = "SELECT " REVISION_COLUMNS
                               ", r.checksum, r.report, r.document" REVISION_FROM REVISION_NUMBER,
    [LWD_CATALOG_R_EVENTS] =
        ("SELECT e.serial, e.number, e.action, e.at_ms, e.who, e.reason, e.accepted"
         " FROM mechanism m JOIN state_event e ON e.mechanism_id = m.id"
         " WHERE m.name = ?1 AND e.serial > ?2 AND (?3 = 0 OR e.number = ?3)"
         " ORDER BY e.serial LIMIT ?4"),
    [LWD_CATALOG_R_SOLUTIONS] =
        ("SELECT q.created_ms, q.checksum, q.content FROM mechanism m"
         " JOIN solution_set q ON q.mechanism_id = m.id WHERE m.name = ?1 AND q.number = ?2"),
};

lwd_catalog_reader *lwd_catalog_reader_take(lwd_catalog *c)
{
    lwd_catalog_reader *found = NULL;
    (void)pthread_mutex_lock(&c->pool_lock);
    while (!found) {
        for (unsigned i = 0; !found && i < c->n_readers; i++)
            if (!c->reader[i].taken)
                found = &c->reader[i];
        if (!found)
            (void)pthread_cond_wait(&c->pool_free, &c->pool_lock);
    }
    found->taken = true;
    (void)pthread_mutex_unlock(&c->pool_lock);
    return found;
}

void lwd_catalog_reader_give(lwd_catalog *c, lwd_catalog_reader *reader)
{
    (void)pthread_mutex_lock(&c->pool_lock);
    reader->taken = false;
    (void)pthread_cond_signal(&c->pool_free);
    (void)pthread_mutex_unlock(&c->pool_lock);
}

static void bind_name(sqlite3_stmt *s, int at, const char *name)
{
    (void)sqlite3_bind_text64(s, at, name, strlen(name), SQLITE_STATIC, SQLITE_UTF8);
}

/* A row that breaks the schema's bounds can only be damage; a NULL text can also be memory. */
static lwd_catalog_result bad_row(lwd_catalog_reader *r, lwd_catalog_error *err)
{
    if (sqlite3_errcode(r->db) == SQLITE_NOMEM)
        return lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "out of memory");
    return lwd_catalog_fail(err, LWD_CATALOG_DAMAGED,
                            "a row of the catalog is damaged; restore it from a backup");
}

static lwd_catalog_result check_page(size_t cap, lwd_catalog_error *err)
{
    if (cap < 1 || cap > LWD_CATALOG_PAGE_MAX)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "a page has 1 to %d entries, got %zu",
                                LWD_CATALOG_PAGE_MAX, cap);
    return LWD_CATALOG_OK;
}

/* Where the rows of a page go: at most cap items of a size, each by `take`, which says whether the
 * row is sound. */
typedef struct page_rows {
    bool (*take)(void *item, sqlite3_stmt *s);
    void *items;
    size_t size, cap;
} page_rows;

/* Runs a statement that was told to give one row more than the page holds, and resets it. */
static lwd_catalog_result read_page(lwd_catalog_reader *r, sqlite3_stmt *s, const page_rows *to,
                                    size_t *n, bool *more, const char *doing,
                                    lwd_catalog_error *err)
{
    lwd_catalog_result result = LWD_CATALOG_OK;
    int rc = sqlite3_step(s);
    for (; rc == SQLITE_ROW && !*more && result == LWD_CATALOG_OK; rc = sqlite3_step(s)) {
        if (*n == to->cap)
            *more = true;
        else if (to->take((char *)to->items + *n * to->size, s))
            ++*n;
        else
            result = bad_row(r, err);
    }
    if (result == LWD_CATALOG_OK && rc != SQLITE_ROW && rc != SQLITE_DONE)
        result = lwd_catalog_fail_db(err, r->db, rc, doing);
    lwd_catalog_reset(s);
    return result;
}

/* ---- mechanisms ---- */

static bool mechanism_row(void *item, sqlite3_stmt *s)
{
    lwd_catalog_mechanism *m = item;
    *m = (lwd_catalog_mechanism){
        .created_ms = sqlite3_column_int64(s, 1),
        .tag = sqlite3_column_int64(s, 2),
        .revisions = sqlite3_column_int64(s, 3),
        .published = sqlite3_column_int64(s, 4),
        .withdrawn = sqlite3_column_int64(s, 5),
        .answering = sqlite3_column_int64(s, 6),
    };
    m->drafts = m->revisions - m->published - m->withdrawn;
    if (!lwd_catalog_copy_text(m->name, sizeof m->name, s, 0))
        return false;
    return m->answering == 0 ||
           lwd_catalog_copy_text(m->answering_digest, sizeof m->answering_digest, s, 7);
}

lwd_catalog_result lwd_catalog_list_mechanisms(lwd_catalog *c, const char *after,
                                               lwd_catalog_mechanism *items, size_t cap, size_t *n,
                                               bool *more, lwd_catalog_error *err)
{
    *n = 0;
    *more = false;
    lwd_catalog_result result = check_page(cap, err);
    if (result == LWD_CATALOG_OK && after && after[0])
        result = lwd_catalog_check_name(after, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_MECHANISMS];
    bind_name(s, 1, after ? after : "");
    (void)sqlite3_bind_int64(s, 2, (int64_t)cap + 1);
    const page_rows rows = {mechanism_row, items, sizeof *items, cap};
    result = read_page(r, s, &rows, n, more, "list the mechanisms", err);
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

static lwd_catalog_result get_mechanism(lwd_catalog_reader *r, const char *name,
                                        lwd_catalog_mechanism *out, lwd_catalog_error *err)
{
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_MECHANISM];
    lwd_catalog_mechanism m = {.revisions = 0};
    lwd_catalog_result result = LWD_CATALOG_OK;
    bind_name(s, 1, name);
    int rc = sqlite3_step(s);
    if (rc == SQLITE_ROW) {
        if (mechanism_row(&m, s))
            *out = m;
        else
            result = bad_row(r, err);
    } else if (rc == SQLITE_DONE) {
        result = lwd_catalog_fail(err, LWD_CATALOG_NOT_FOUND, "there is no mechanism %.32s", name);
    } else {
        result = lwd_catalog_fail_db(err, r->db, rc, "read a mechanism");
    }
    lwd_catalog_reset(s);
    return result;
}

lwd_catalog_result lwd_catalog_get_mechanism(lwd_catalog *c, const char *name,
                                             lwd_catalog_mechanism *out, lwd_catalog_error *err)
{
    lwd_catalog_result result = lwd_catalog_check_name(name, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    result = get_mechanism(r, name, out, err);
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

lwd_catalog_result lwd_catalog_count_mechanisms(lwd_catalog *c, int64_t *out,
                                                lwd_catalog_error *err)
{
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_COUNT_MECHANISMS];
    lwd_catalog_result result = LWD_CATALOG_OK;
    int rc = sqlite3_step(s);
    if (rc == SQLITE_ROW)
        *out = sqlite3_column_int64(s, 0);
    else
        result = lwd_catalog_fail_db(err, r->db, rc, "count the mechanisms");
    lwd_catalog_reset(s);
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

/* ---- revisions ---- */

/* Says why a revision, or its solution sets, gave no row. */
static lwd_catalog_result explain(lwd_catalog_reader *r, const char *name, int64_t number,
                                  lwd_catalog_result otherwise, lwd_catalog_error *err)
{
    lwd_catalog_mechanism m = {.revisions = 0};
    lwd_catalog_result result = get_mechanism(r, name, &m, err);
    if (result != LWD_CATALOG_OK)
        return result;
    if (number == 0)
        return lwd_catalog_fail(err, LWD_CATALOG_NONE_PUBLISHED,
                                "no revision of %.32s answers; publish one of 1 to %lld, "
                                "or name a revision",
                                name, (long long)m.revisions);
    if (number < 1 || number > m.revisions)
        return lwd_catalog_fail(err, LWD_CATALOG_NOT_FOUND,
                                "%.32s has no revision %lld; it has 1 to %lld", name,
                                (long long)number, (long long)m.revisions);
    return lwd_catalog_fail(err, otherwise, "%s", lwd_catalog_result_text(otherwise));
}

static bool revision_row(void *item, sqlite3_stmt *s)
{
    lwd_catalog_revision_info *info = item;
    *info = (lwd_catalog_revision_info){
        .number = sqlite3_column_int64(s, 0),
        .state = (lwd_catalog_state)sqlite3_column_int(s, 2),
        .answers = sqlite3_column_int64(s, 3) == sqlite3_column_int64(s, 0),
        .tag = sqlite3_column_int64(s, 4),
        .created_ms = sqlite3_column_int64(s, 5),
        .has_solutions = sqlite3_column_int(s, 7) != 0,
    };
    return lwd_catalog_copy_text(info->digest, sizeof info->digest, s, 1) &&
           lwd_catalog_copy_text(info->created_by, sizeof info->created_by, s, 6);
}

lwd_catalog_result lwd_catalog_list_revisions(lwd_catalog *c, const char *name, int64_t after,
                                              lwd_catalog_revision_info *items, size_t cap,
                                              size_t *n, bool *more, lwd_catalog_error *err)
{
    *n = 0;
    *more = false;
    lwd_catalog_result result = check_page(cap, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_check_name(name, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_REVISIONS];
    bind_name(s, 1, name);
    (void)sqlite3_bind_int64(s, 2, after);
    (void)sqlite3_bind_int64(s, 3, (int64_t)cap + 1);
    const page_rows rows = {revision_row, items, sizeof *items, cap};
    result = read_page(r, s, &rows, n, more, "list the revisions", err);
    lwd_catalog_mechanism m = {.revisions = 0};
    if (result == LWD_CATALOG_OK && *n == 0)
        result = get_mechanism(r, name, &m, err);
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

lwd_catalog_result lwd_catalog_get_revision_info(lwd_catalog *c, const char *name, int64_t number,
                                                 lwd_catalog_revision_info *out,
                                                 lwd_catalog_error *err)
{
    lwd_catalog_result result = lwd_catalog_check_name(name, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_revision_info info;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_INFO];
    bind_name(s, 1, name);
    (void)sqlite3_bind_int64(s, 2, number);
    int rc = sqlite3_step(s);
    if (rc == SQLITE_ROW) {
        if (revision_row(&info, s))
            *out = info;
        else
            result = bad_row(r, err);
    } else if (rc != SQLITE_DONE) {
        result = lwd_catalog_fail_db(err, r->db, rc, "read a revision");
    }
    lwd_catalog_reset(s);
    if (rc == SQLITE_DONE)
        result = explain(r, name, number, LWD_CATALOG_NOT_FOUND, err);
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

/* A column's bytes with a NUL behind them; NULL if memory is short. */
static char *copy_column(sqlite3_stmt *s, int column, size_t *len)
{
    const void *bytes = sqlite3_column_blob(s, column);
    int n = sqlite3_column_bytes(s, column);
    if (n < 0 || (n > 0 && !bytes))
        return NULL;
    char *copy = malloc((size_t)n + 1);
    if (!copy)
        return NULL;
    if (n > 0)
        memcpy(copy, bytes, (size_t)n);
    copy[n] = '\0';
    *len = (size_t)n;
    return copy;
}

static lwd_catalog_result revision_texts(lwd_catalog_revision *out, sqlite3_stmt *s,
                                         const char *name, lwd_catalog_error *err)
{
    uint64_t want = (uint64_t)sqlite3_column_int64(s, 8);
    out->report = copy_column(s, 9, &out->report_len);
    out->document = copy_column(s, 10, &out->document_len);
    if (!out->report || !out->document)
        return lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "out of memory");
    uint64_t sum = lwd_catalog_crc64(0, out->document, out->document_len);
    sum = lwd_catalog_crc64(sum, out->report, out->report_len);
    if (sum != want)
        return lwd_catalog_fail(err, LWD_CATALOG_DAMAGED,
                                "the stored text of revision %lld of %.32s is damaged; "
                                "restore the catalog from a backup",
                                (long long)out->info.number, name);
    return LWD_CATALOG_OK;
}

lwd_catalog_result lwd_catalog_get_revision(lwd_catalog *c, const char *name, int64_t number,
                                            lwd_catalog_revision *out, lwd_catalog_error *err)
{
    *out = (lwd_catalog_revision){.document = NULL};
    lwd_catalog_result result = lwd_catalog_check_name(name, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_REVISION];
    bind_name(s, 1, name);
    (void)sqlite3_bind_int64(s, 2, number);
    int rc = sqlite3_step(s);
    if (rc == SQLITE_ROW)
        result = revision_row(&out->info, s) ? revision_texts(out, s, name, err) : bad_row(r, err);
    else if (rc != SQLITE_DONE)
        result = lwd_catalog_fail_db(err, r->db, rc, "read a revision");
    lwd_catalog_reset(s);
    if (rc == SQLITE_DONE)
        result = explain(r, name, number, LWD_CATALOG_NOT_FOUND, err);
    lwd_catalog_reader_give(c, r);
    if (result != LWD_CATALOG_OK) {
        lwd_catalog_revision_clear(out);
        return result;
    }
    return lwd_catalog_succeed(err);
}

void lwd_catalog_revision_clear(lwd_catalog_revision *revision)
{
    free(revision->document);
    free(revision->report);
    *revision = (lwd_catalog_revision){.document = NULL};
}

/* ---- events ---- */

static bool event_row(void *item, sqlite3_stmt *s)
{
    lwd_catalog_event *e = item;
    char action[16];
    *e = (lwd_catalog_event){
        .serial = sqlite3_column_int64(s, 0),
        .number = sqlite3_column_int64(s, 1),
        .at_ms = sqlite3_column_int64(s, 3),
    };
    if (!lwd_catalog_copy_text(action, sizeof action, s, 2))
        return false;
    bool publish = strcmp(action, "publish") == 0;
    e->action = publish ? LWD_CATALOG_PUBLISH : LWD_CATALOG_WITHDRAW;
    return (publish || strcmp(action, "withdraw") == 0) &&
           lwd_catalog_copy_text(e->who, sizeof e->who, s, 4) &&
           lwd_catalog_copy_text(e->reason, sizeof e->reason, s, 5) &&
           lwd_catalog_copy_text(e->accepted, sizeof e->accepted, s, 6);
}

lwd_catalog_result lwd_catalog_list_events(lwd_catalog *c, const char *name, int64_t number,
                                           int64_t after, lwd_catalog_event *items, size_t cap,
                                           size_t *n, bool *more, lwd_catalog_error *err)
{
    *n = 0;
    *more = false;
    lwd_catalog_result result = check_page(cap, err);
    if (result == LWD_CATALOG_OK)
        result = lwd_catalog_check_name(name, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_EVENTS];
    bind_name(s, 1, name);
    (void)sqlite3_bind_int64(s, 2, after);
    (void)sqlite3_bind_int64(s, 3, number);
    (void)sqlite3_bind_int64(s, 4, (int64_t)cap + 1);
    const page_rows rows = {event_row, items, sizeof *items, cap};
    result = read_page(r, s, &rows, n, more, "list the events", err);
    lwd_catalog_mechanism m = {.revisions = 0};
    if (result == LWD_CATALOG_OK && *n == 0) {
        result = get_mechanism(r, name, &m, err);
        if (result == LWD_CATALOG_OK && (number < 0 || number > m.revisions))
            result = explain(r, name, number, LWD_CATALOG_NOT_FOUND, err);
    }
    lwd_catalog_reader_give(c, r);
    return result == LWD_CATALOG_OK ? lwd_catalog_succeed(err) : result;
}

/* ---- solution sets ---- */

lwd_catalog_result lwd_catalog_load_solutions(lwd_catalog *c, const char *name, int64_t number,
                                              lwd_catalog_blob *out, lwd_catalog_error *err)
{
    *out = (lwd_catalog_blob){.data = NULL};
    lwd_catalog_result result = lwd_catalog_check_name(name, err);
    if (result == LWD_CATALOG_OK && number < 1)
        result = lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                  "solution sets belong to a revision; name its number");
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_reader *r = lwd_catalog_reader_take(c);
    sqlite3_stmt *s = r->stmt[LWD_CATALOG_R_SOLUTIONS];
    bind_name(s, 1, name);
    (void)sqlite3_bind_int64(s, 2, number);
    int rc = sqlite3_step(s);
    if (rc == SQLITE_ROW) {
        uint64_t want = (uint64_t)sqlite3_column_int64(s, 1);
        out->created_ms = sqlite3_column_int64(s, 0);
        out->data = copy_column(s, 2, &out->len);
        if (!out->data)
            result = lwd_catalog_fail(err, LWD_CATALOG_MEMORY, "out of memory");
        else if (lwd_catalog_crc64(0, out->data, out->len) != want)
            result = lwd_catalog_fail(err, LWD_CATALOG_DAMAGED,
                                      "the solution sets of revision %lld of %.32s are damaged; "
                                      "prepare them again",
                                      (long long)number, name);
    } else if (rc != SQLITE_DONE) {
        result = lwd_catalog_fail_db(err, r->db, rc, "read solution sets");
    }
    lwd_catalog_reset(s);
    if (rc == SQLITE_DONE)
        result = explain(r, name, number, LWD_CATALOG_NO_SOLUTIONS, err);
    lwd_catalog_reader_give(c, r);
    if (result != LWD_CATALOG_OK) {
        lwd_catalog_blob_clear(out);
        return result;
    }
    return lwd_catalog_succeed(err);
}

void lwd_catalog_blob_clear(lwd_catalog_blob *blob)
{
    free(blob->data);
    *blob = (lwd_catalog_blob){.data = NULL};
}
