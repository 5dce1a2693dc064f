/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What can be written: a revision, a state event, solution sets. The public calls check their
 * arguments on the caller's thread and queue a job; lwd_catalog_apply runs it on the writer thread
 * inside its transaction, so what it reads cannot change before the commit. */
#include "internal.h"

#include <string.h>

lwd_catalog_result lwd_catalog_check_name(const char *name, lwd_catalog_error *err)
{
    size_t len = name ? strnlen(name, LWD_CATALOG_NAME_MAX + 1) : 0;
    bool good = len >= 1 && len <= LWD_CATALOG_NAME_MAX;
    for (size_t i = 0; good && i < len; i++)
        good = (name[i] >= 'a' && name[i] <= 'z') || (name[i] >= '0' && name[i] <= '9') ||
               name[i] == '-';
    if (!good)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "a mechanism's name is 1 to %d of a-z, 0-9 and -",
                                LWD_CATALOG_NAME_MAX);
    return LWD_CATALOG_OK;
}

static lwd_catalog_result check_digest(const char *digest, lwd_catalog_error *err)
{
    size_t len = digest ? strnlen(digest, LWD_CATALOG_DIGEST_LEN + 1) : 0;
    if (len != LWD_CATALOG_DIGEST_LEN || strspn(digest, "0123456789abcdef") != len)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "a digest is %d lower-case hexadecimal digits",
                                LWD_CATALOG_DIGEST_LEN);
    return LWD_CATALOG_OK;
}

static lwd_catalog_result check_string(const char *what, const char *text, size_t min, size_t max,
                                       lwd_catalog_error *err)
{
    size_t len = text ? strnlen(text, max + 1) : 0;
    if (!text || len < min || len > max)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "the %s must have %zu to %zu bytes",
                                what, min, max);
    return LWD_CATALOG_OK;
}

static lwd_catalog_result check_text(const char *what, const char *text, size_t len, size_t min,
                                     size_t max, lwd_catalog_error *err)
{
    if (!text || len < min || len > max)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "the %s must have %zu to %zu bytes, got %zu", what, min, max, len);
    if (memchr(text, '\0', len))
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "the %s contains a NUL byte", what);
    return LWD_CATALOG_OK;
}

static lwd_catalog_result check_time(int64_t when_ms, lwd_catalog_error *err)
{
    if (when_ms < 0 || when_ms > LWD_CATALOG_TIME_MAX_MS)
        return lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                "the time must lie between the years 1970 and 9999");
    return LWD_CATALOG_OK;
}

static lwd_catalog_result no_revision(lwd_catalog_error *err, const char *name, int64_t number,
                                      int64_t latest)
{
    if (latest == 0)
        return lwd_catalog_fail(err, LWD_CATALOG_NOT_FOUND, "there is no mechanism %.32s", name);
    return lwd_catalog_fail(err, LWD_CATALOG_NOT_FOUND,
                            "%.32s has no revision %lld; it has 1 to %lld", name, (long long)number,
                            (long long)latest);
}

/* ---- on the writer thread ---- */

typedef struct found {
    int64_t id; /* 0: no such mechanism */
    int64_t tag;
    int64_t latest;
    int64_t answering;
} found;

static void bind_text(sqlite3_stmt *s, int at, const char *text, size_t len)
{
    /* Static: the texts outlive the step. A failed bind shows as a failed NOT NULL at the step. */
    (void)sqlite3_bind_text64(s, at, text, len, SQLITE_STATIC, SQLITE_UTF8);
}

static lwd_catalog_result find(lwd_catalog *c, const char *name, found *out, lwd_catalog_error *err)
{
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_MECHANISM];
    *out = (found){0};
    bind_text(s, 1, name, strlen(name));
    int rc = sqlite3_step(s);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc == SQLITE_ROW)
        *out = (found){sqlite3_column_int64(s, 0), sqlite3_column_int64(s, 1),
                       sqlite3_column_int64(s, 2), sqlite3_column_int64(s, 3)};
    else if (rc != SQLITE_DONE)
        result = lwd_catalog_fail_db(err, c->db, rc, "look up a mechanism");
    lwd_catalog_reset(s);
    return result;
}

/* Steps a statement that gives no row. */
static lwd_catalog_result finish(lwd_catalog *c, sqlite3_stmt *s, const char *doing,
                                 lwd_catalog_error *err)
{
    int rc = sqlite3_step(s);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc != SQLITE_DONE)
        result = lwd_catalog_fail_db(err, c->db, rc == SQLITE_ROW ? SQLITE_ERROR : rc, doing);
    lwd_catalog_reset(s);
    return result;
}

static lwd_catalog_result add_mechanism(lwd_catalog *c, const lwd_catalog_put *in, found *m,
                                        lwd_catalog_error *err)
{
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_COUNT_MECHANISMS];
    int rc = sqlite3_step(s);
    int64_t n = rc == SQLITE_ROW ? sqlite3_column_int64(s, 0) : 0;
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc != SQLITE_ROW)
        result = lwd_catalog_fail_db(err, c->db, rc, "count the mechanisms");
    lwd_catalog_reset(s);
    if (result != LWD_CATALOG_OK)
        return result;
    if (n >= c->options.mechanisms_max)
        return lwd_catalog_fail(err, LWD_CATALOG_LIMIT,
                                "the catalog holds %u mechanisms, as many as it may",
                                c->options.mechanisms_max);
    s = c->write[LWD_CATALOG_W_ADD_MECHANISM];
    bind_text(s, 1, in->name, strlen(in->name));
    (void)sqlite3_bind_int64(s, 2, in->when_ms);
    result = finish(c, s, "store a mechanism", err);
    m->id = sqlite3_last_insert_rowid(c->db);
    return result;
}

static lwd_catalog_result compare_digest(lwd_catalog *c, const found *m, const char *expect,
                                         lwd_catalog_error *err)
{
    char newest[LWD_CATALOG_DIGEST_LEN + 1] = "";
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_NEWEST_DIGEST];
    (void)sqlite3_bind_int64(s, 1, m->id);
    int rc = sqlite3_step(s);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc == SQLITE_ROW) {
        if (!lwd_catalog_copy_text(newest, sizeof newest, s, 0))
            result = lwd_catalog_fail(err, LWD_CATALOG_DAMAGED, "a stored digest is damaged");
    } else if (rc != SQLITE_DONE) {
        result = lwd_catalog_fail_db(err, c->db, rc, "look up a digest");
    }
    lwd_catalog_reset(s);
    if (result == LWD_CATALOG_OK && strcmp(newest, expect) != 0)
        result = newest[0] ? lwd_catalog_fail(err, LWD_CATALOG_CONFLICT,
                                              "the newest revision has digest %s", newest)
                           : lwd_catalog_fail(err, LWD_CATALOG_CONFLICT,
                                              "there is no revision yet, or all are withdrawn");
    return result;
}

static lwd_catalog_result add_revision(lwd_catalog *c, const lwd_catalog_put *in, int64_t id,
                                       int64_t number, lwd_catalog_error *err)
{
    uint64_t sum = lwd_catalog_crc64(0, in->document, in->document_len);
    sum = lwd_catalog_crc64(sum, in->report, in->report_len);
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_ADD_REVISION];
    (void)sqlite3_bind_int64(s, 1, id);
    (void)sqlite3_bind_int64(s, 2, number);
    bind_text(s, 3, in->digest, LWD_CATALOG_DIGEST_LEN);
    (void)sqlite3_bind_int64(s, 4, in->when_ms);
    bind_text(s, 5, in->who, strlen(in->who));
    (void)sqlite3_bind_int64(s, 6, (int64_t)sum);
    bind_text(s, 7, in->report, in->report_len);
    bind_text(s, 8, in->document, in->document_len);
    return finish(c, s, "store a revision", err);
}

static lwd_catalog_result apply_put(lwd_catalog *c, lwd_catalog_job *job)
{
    const lwd_catalog_put *in = job->in.put;
    lwd_catalog_error *err = &job->err;
    found m;
    lwd_catalog_result result = find(c, in->name, &m, err);
    if (result == LWD_CATALOG_OK && in->expect_digest)
        result = compare_digest(c, &m, in->expect_digest, err);
    if (result != LWD_CATALOG_OK)
        return result;
    if (m.id != 0) {
        sqlite3_stmt *s = c->write[LWD_CATALOG_W_BY_DIGEST];
        (void)sqlite3_bind_int64(s, 1, m.id);
        bind_text(s, 2, in->digest, LWD_CATALOG_DIGEST_LEN);
        int rc = sqlite3_step(s);
        if (rc == SQLITE_ROW)
            job->put = (lwd_catalog_put_result){
                .number = sqlite3_column_int64(s, 0),
                .created = false,
                .state = (lwd_catalog_state)sqlite3_column_int(s, 1),
                .tag = m.tag,
            };
        else if (rc != SQLITE_DONE)
            result = lwd_catalog_fail_db(err, c->db, rc, "look up a digest");
        lwd_catalog_reset(s);
        if (rc == SQLITE_ROW || result != LWD_CATALOG_OK)
            return result;
    }
    if (m.latest >= c->options.revisions_max)
        return lwd_catalog_fail(err, LWD_CATALOG_LIMIT,
                                "%.32s has %u revisions, as many as it may; use a new name",
                                in->name, c->options.revisions_max);
    if (m.id == 0)
        result = add_mechanism(c, in, &m, err);
    if (result == LWD_CATALOG_OK)
        result = add_revision(c, in, m.id, m.latest + 1, err);
    if (result != LWD_CATALOG_OK)
        return result;
    job->put = (lwd_catalog_put_result){
        .number = m.latest + 1, .created = true, .state = LWD_CATALOG_DRAFT, .tag = m.tag};
    job->changed = true;
    job->change = (lwd_catalog_change){
        .action = LWD_CATALOG_PUT, .number = m.latest + 1, .answering = m.answering, .tag = m.tag};
    memcpy(job->change.name, in->name, strlen(in->name) + 1);
    return LWD_CATALOG_OK;
}

/* *state is untouched and the result NOT_FOUND if the mechanism has no such revision. */
static lwd_catalog_result read_state(lwd_catalog *c, const found *m, const char *name,
                                     int64_t number, lwd_catalog_state *state,
                                     lwd_catalog_error *err)
{
    if (m->id == 0)
        return no_revision(err, name, number, 0);
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_STATE];
    (void)sqlite3_bind_int64(s, 1, m->id);
    (void)sqlite3_bind_int64(s, 2, number);
    int rc = sqlite3_step(s);
    lwd_catalog_result result = LWD_CATALOG_OK;
    if (rc == SQLITE_ROW)
        *state = (lwd_catalog_state)sqlite3_column_int(s, 0);
    else if (rc == SQLITE_DONE)
        result = no_revision(err, name, number, m->latest);
    else
        result = lwd_catalog_fail_db(err, c->db, rc, "look up a revision");
    lwd_catalog_reset(s);
    return result;
}

static lwd_catalog_result add_event(lwd_catalog *c, const lwd_catalog_set_state_request *in,
                                    const found *m, lwd_catalog_error *err)
{
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_ADD_EVENT];
    const char *action = lwd_catalog_action_name(in->action);
    (void)sqlite3_bind_int64(s, 1, m->id);
    (void)sqlite3_bind_int64(s, 2, m->tag + 1);
    (void)sqlite3_bind_int64(s, 3, in->number);
    bind_text(s, 4, action, strlen(action));
    (void)sqlite3_bind_int64(s, 5, in->when_ms);
    bind_text(s, 6, in->who, strlen(in->who));
    bind_text(s, 7, in->reason, strlen(in->reason));
    bind_text(s, 8, in->accepted, strlen(in->accepted));
    return finish(c, s, "store an event", err);
}

static lwd_catalog_result apply_state(lwd_catalog *c, lwd_catalog_job *job)
{
    const lwd_catalog_set_state_request *in = job->in.state;
    lwd_catalog_error *err = &job->err;
    lwd_catalog_state state = LWD_CATALOG_DRAFT;
    found m;
    lwd_catalog_result result = find(c, in->name, &m, err);
    if (result == LWD_CATALOG_OK)
        result = read_state(c, &m, in->name, in->number, &state, err);
    if (result != LWD_CATALOG_OK)
        return result;
    job->state = (lwd_catalog_state_result){
        .changed = false, .state = state, .answering = m.answering, .tag = m.tag};
    if (in->expect_tag && *in->expect_tag != m.tag)
        return lwd_catalog_fail(err, LWD_CATALOG_CONFLICT,
                                "the state of %.32s has tag %lld, not %lld; read it again",
                                in->name, (long long)m.tag, (long long)*in->expect_tag);
    bool publish = in->action == LWD_CATALOG_PUBLISH;
    if (state == LWD_CATALOG_WITHDRAWN && publish)
        return lwd_catalog_fail(err, LWD_CATALOG_NOT_ALLOWED,
                                "revision %lld of %.32s is withdrawn and stays so; "
                                "put the document again for a new revision",
                                (long long)in->number, in->name);
    if (state == LWD_CATALOG_WITHDRAWN || (publish && m.answering == in->number))
        return LWD_CATALOG_OK;
    result = add_event(c, in, &m, err);
    if (result != LWD_CATALOG_OK)
        return result;
    if (publish)
        m.answering = in->number;
    else if (m.answering == in->number)
        m.answering = 0;
    job->state = (lwd_catalog_state_result){
        .changed = true,
        .state = publish ? LWD_CATALOG_PUBLISHED : LWD_CATALOG_WITHDRAWN,
        .answering = m.answering,
        .tag = m.tag + 1,
    };
    job->changed = true;
    job->change = (lwd_catalog_change){
        .action = in->action, .number = in->number, .answering = m.answering, .tag = m.tag + 1};
    memcpy(job->change.name, in->name, strlen(in->name) + 1);
    return LWD_CATALOG_OK;
}

static lwd_catalog_result apply_solutions(lwd_catalog *c, lwd_catalog_job *job)
{
    const lwd_catalog_solutions *in = job->in.solutions;
    lwd_catalog_error *err = &job->err;
    lwd_catalog_state state;
    found m;
    lwd_catalog_result result = find(c, in->name, &m, err);
    if (result == LWD_CATALOG_OK)
        result = read_state(c, &m, in->name, in->number, &state, err);
    if (result != LWD_CATALOG_OK)
        return result;
    sqlite3_stmt *s = c->write[LWD_CATALOG_W_SAVE_SOLUTIONS];
    (void)sqlite3_bind_int64(s, 1, m.id);
    (void)sqlite3_bind_int64(s, 2, in->number);
    (void)sqlite3_bind_int64(s, 3, in->when_ms);
    (void)sqlite3_bind_int64(s, 4, (int64_t)lwd_catalog_crc64(0, in->data, in->len));
    (void)sqlite3_bind_blob64(s, 5, in->data, in->len, SQLITE_STATIC);
    return finish(c, s, "store solution sets", err);
}

lwd_catalog_result lwd_catalog_apply(lwd_catalog *c, lwd_catalog_job *job)
{
    switch (job->kind) {
    case LWD_CATALOG_JOB_PUT:
        return apply_put(c, job);
    case LWD_CATALOG_JOB_STATE:
        return apply_state(c, job);
    case LWD_CATALOG_JOB_SOLUTIONS:
        return apply_solutions(c, job);
    }
    return lwd_catalog_fail(&job->err, LWD_CATALOG_INTERNAL, "unknown kind of write");
}

/* ---- on the caller's thread ---- */

lwd_catalog_result lwd_catalog_put_revision(lwd_catalog *c, const lwd_catalog_put *in,
                                            lwd_catalog_put_result *out, lwd_catalog_error *err)
{
    lwd_catalog_result result = lwd_catalog_check_name(in->name, err);
    if (result == LWD_CATALOG_OK)
        result = check_text("document", in->document, in->document_len, 1, LWD_CATALOG_DOCUMENT_MAX,
                            err);
    if (result == LWD_CATALOG_OK)
        result = check_text("report", in->report, in->report_len, 0, LWD_CATALOG_REPORT_MAX, err);
    if (result == LWD_CATALOG_OK)
        result = check_digest(in->digest, err);
    if (result == LWD_CATALOG_OK && in->expect_digest && in->expect_digest[0])
        result = check_digest(in->expect_digest, err);
    if (result == LWD_CATALOG_OK)
        result = check_string("token name", in->who, 1, LWD_CATALOG_WHO_MAX, err);
    if (result == LWD_CATALOG_OK)
        result = check_time(in->when_ms, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_job job = {.kind = LWD_CATALOG_JOB_PUT, .in.put = in};
    result = lwd_catalog_submit(c, &job, err);
    if (result == LWD_CATALOG_OK)
        *out = job.put;
    return result;
}

lwd_catalog_result lwd_catalog_set_state(lwd_catalog *c, const lwd_catalog_set_state_request *in,
                                         lwd_catalog_state_result *out, lwd_catalog_error *err)
{
    lwd_catalog_result result = lwd_catalog_check_name(in->name, err);
    if (result == LWD_CATALOG_OK && in->action != LWD_CATALOG_PUBLISH &&
        in->action != LWD_CATALOG_WITHDRAW)
        result = lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT, "the action is publish or withdraw");
    if (result == LWD_CATALOG_OK)
        result = check_string("token name", in->who, 1, LWD_CATALOG_WHO_MAX, err);
    if (result == LWD_CATALOG_OK)
        result = check_string("reason", in->reason, 0, LWD_CATALOG_REASON_MAX, err);
    if (result == LWD_CATALOG_OK)
        result = check_string("list of accepted warnings", in->accepted, 0,
                              LWD_CATALOG_ACCEPTED_MAX, err);
    if (result == LWD_CATALOG_OK)
        result = check_time(in->when_ms, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_job job = {.kind = LWD_CATALOG_JOB_STATE, .in.state = in};
    result = lwd_catalog_submit(c, &job, err);
    if (result == LWD_CATALOG_OK || result == LWD_CATALOG_CONFLICT ||
        result == LWD_CATALOG_NOT_ALLOWED)
        *out = job.state;
    return result;
}

lwd_catalog_result lwd_catalog_save_solutions(lwd_catalog *c, const char *name, int64_t number,
                                              const void *data, size_t len, int64_t when_ms,
                                              lwd_catalog_error *err)
{
    lwd_catalog_result result = lwd_catalog_check_name(name, err);
    if (result == LWD_CATALOG_OK && (!data || len < 1 || len > LWD_CATALOG_SOLUTIONS_MAX))
        result = lwd_catalog_fail(err, LWD_CATALOG_ARGUMENT,
                                  "solution sets must have 1 to %d bytes, got %zu",
                                  LWD_CATALOG_SOLUTIONS_MAX, len);
    if (result == LWD_CATALOG_OK)
        result = check_time(when_ms, err);
    if (result != LWD_CATALOG_OK)
        return result;
    lwd_catalog_solutions in = {name, number, data, len, when_ms};
    lwd_catalog_job job = {.kind = LWD_CATALOG_JOB_SOLUTIONS, .in.solutions = &in};
    return lwd_catalog_submit(c, &job, err);
}
