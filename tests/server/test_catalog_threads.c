/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Many threads on one catalog: numbers without gaps, writes committed together, a full queue, what
 * the change callback sees. Runs under the thread sanitizer too. */
#define _DEFAULT_SOURCE
#include "catalog_lab.h"

#include <pthread.h>
#include <sched.h>
#include <stdatomic.h>

enum { THREADS = 4, MECHANISMS = 8, EACH = 40 };

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

/* cmocka ends a case by a jump that must not leave a thread, so threads count their faults. */
static atomic_int faults;

static void expect(bool good, const char *what)
{
    if (!good) {
        atomic_fetch_add(&faults, 1);
        print_error("%s\n", what);
    }
}

static void name_of(char out[16], int m)
{
    (void)snprintf(out, 16, "m-%d", m);
}

/* ---- revisions ---- */

typedef struct seen {
    lwd_catalog *catalog;
    int thread;
    unsigned char count[MECHANISMS][THREADS * EACH + 2]; /* numbers this thread was given */
} seen;

static void *put_many(void *context)
{
    seen *me = context;
    lwd_catalog_error err;
    for (int i = 0; i < MECHANISMS * EACH; i++) {
        int m = (i + me->thread) % MECHANISMS;
        char name[16];
        char digest[LWD_CATALOG_DIGEST_LEN + 1];
        name_of(name, m);
        lab_digest(digest, (unsigned long)(me->thread * 100000 + i));
        lwd_catalog_put in = lab_put_of(name, "{\"some\": \"document\"}", digest);
        lwd_catalog_put_result put = {0};
        lwd_catalog_result result = lwd_catalog_put_revision(me->catalog, &in, &put, &err);
        if (result != LWD_CATALOG_OK)
            print_error("%s\n", err.why);
        expect(result == LWD_CATALOG_OK && put.created, "put");
        if (put.number >= 1 && put.number <= THREADS * EACH)
            me->count[m][put.number]++;
        /* What was acknowledged can be read at once, by anyone. */
        lwd_catalog_revision_info info;
        result = lwd_catalog_get_revision_info(me->catalog, name, put.number, &info, &err);
        expect(result == LWD_CATALOG_OK && strcmp(info.digest, digest) == 0, "read back");
        if (i % 16 == 0) {
            lwd_catalog_mechanism page[MECHANISMS];
            size_t n;
            bool more;
            result =
                lwd_catalog_list_mechanisms(me->catalog, NULL, page, MECHANISMS, &n, &more, &err);
            expect(result == LWD_CATALOG_OK && n >= 1, "list");
        }
    }
    return NULL;
}

static void put_from_four_threads(const char *dir)
{
    static seen threads[THREADS];
    pthread_t id[THREADS];
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.checkpoint_commits = 7;
    lwd_catalog *c = lab_open(dir, &o);
    atomic_store(&faults, 0);
    memset(threads, 0, sizeof threads);
    for (int t = 0; t < THREADS; t++) {
        threads[t].catalog = c;
        threads[t].thread = t;
        assert_int_equal(pthread_create(&id[t], NULL, put_many, &threads[t]), 0);
    }
    for (int t = 0; t < THREADS; t++)
        assert_int_equal(pthread_join(id[t], NULL), 0);
    assert_int_equal(atomic_load(&faults), 0);
    for (int m = 0; m < MECHANISMS; m++)
        for (int n = 1; n <= THREADS * EACH; n++) {
            int times = 0;
            for (int t = 0; t < THREADS; t++)
                times += threads[t].count[m][n];
            if (times != 1)
                lwt_fail("revision %d of m-%d was given %d times", n, m, times);
        }
    lwd_catalog_mechanism page[MECHANISMS + 1];
    size_t n;
    bool more;
    lab_is(lwd_catalog_list_mechanisms(c, NULL, page, MECHANISMS + 1, &n, &more, &lab_err),
           LWD_CATALOG_OK);
    assert_int_equal(n, MECHANISMS);
    for (size_t m = 0; m < n; m++)
        assert_int_equal(page[m].revisions, THREADS * EACH);
    assert_int_equal(lwd_catalog_changes(c), THREADS * EACH * MECHANISMS);
    lab_is(lwd_catalog_verify(c, true, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(c);
}

static void four_threads_number_eight_mechanisms_without_gaps(void **state)
{
    (void)state;
    put_from_four_threads(base);
}

static void the_same_in_memory(void **state)
{
    (void)state;
    put_from_four_threads(":memory:");
}

/* ---- compare and set ---- */

typedef struct racer {
    lwd_catalog *catalog;
    int64_t number;
    int won;
} racer;

static void *race(void *context)
{
    racer *me = context;
    lwd_catalog_error err;
    for (int64_t tag = 0; tag < 50;) {
        lwd_catalog_state_result s = {.tag = -1};
        lwd_catalog_set_state_request rq = {.name = "stage",
                                            .number = me->number,
                                            .action = LWD_CATALOG_PUBLISH,
                                            .who = "racer",
                                            .when_ms = 0,
                                            .reason = "",
                                            .accepted = "",
                                            .expect_tag = &tag};
        lwd_catalog_result result = lwd_catalog_set_state(me->catalog, &rq, &s, &err);
        expect(result == LWD_CATALOG_OK || result == LWD_CATALOG_CONFLICT, "race");
        expect(s.tag >= tag, "the tag goes up");
        me->won += result == LWD_CATALOG_OK && s.changed;
        if (result == LWD_CATALOG_OK && !s.changed)
            (void)sched_yield(); /* ours answers already: let another publish */
        tag = s.tag;
    }
    return NULL;
}

static void every_tag_is_won_once(void **state)
{
    (void)state;
    lwd_catalog *c = lab_open(":memory:", NULL);
    racer r[THREADS];
    pthread_t id[THREADS];
    atomic_store(&faults, 0);
    for (int t = 0; t < THREADS; t++) {
        int64_t number = lab_put(c, "stage", (unsigned long)t + 1);
        r[t] = (racer){.catalog = c, .number = number};
    }
    for (int t = 0; t < THREADS; t++)
        assert_int_equal(pthread_create(&id[t], NULL, race, &r[t]), 0);
    int won = 0;
    for (int t = 0; t < THREADS; t++) {
        assert_int_equal(pthread_join(id[t], NULL), 0);
        won += r[t].won;
    }
    assert_int_equal(atomic_load(&faults), 0);
    lwd_catalog_mechanism m;
    lab_is(lwd_catalog_get_mechanism(c, "stage", &m, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(m.tag, won);
    assert_true(won >= 50);
    lwd_catalog_close(c);
}

/* ---- the queue and the callback ---- */

/* The callback stops the writer at a gate, so that the queue fills behind it. */
static pthread_mutex_t gate = PTHREAD_MUTEX_INITIALIZER;
static atomic_int calls;
static atomic_int misuse;
static lwd_catalog *gated;
static lwd_catalog_change last_change;

static void wait_at_gate(void *context, const lwd_catalog_change *change)
{
    expect(context == &gate, "context");
    atomic_fetch_add(&calls, 1);
    (void)pthread_mutex_lock(&gate);
    last_change = *change;
    (void)pthread_mutex_unlock(&gate);
    /* May read, and sees the change; must not write. */
    lwd_catalog_mechanism m;
    lwd_catalog_error err;
    expect(lwd_catalog_get_mechanism(gated, change->name, &m, &err) == LWD_CATALOG_OK &&
               m.answering == change->answering && m.tag == change->tag,
           "the callback reads what it was told");
    lwd_catalog_put in = lab_put_of(change->name, "{}", "bad");
    in.digest = "dddddddddddddddddddddddddddddddddddddddddddddddddddddddddddddddd";
    lwd_catalog_put_result put;
    if (lwd_catalog_put_revision(gated, &in, &put, &err) == LWD_CATALOG_INTERNAL)
        atomic_fetch_add(&misuse, 1);
}

typedef struct putter {
    unsigned long n;
    size_t document_len; /* 0: a short document */
    lwd_catalog_result result;
    int64_t number;
} putter;

static void *put_one(void *context)
{
    putter *me = context;
    lwd_catalog_error err;
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lab_digest(digest, me->n);
    lwd_catalog_put in = lab_put_of("stage", "{}", digest);
    char *text = NULL;
    if (me->document_len) {
        text = malloc(me->document_len);
        expect(text != NULL, "memory");
        if (!text)
            return NULL;
        memset(text, 'x', me->document_len);
        in.document = text;
        in.document_len = me->document_len;
    }
    lwd_catalog_put_result put = {0};
    me->result = lwd_catalog_put_revision(gated, &in, &put, &err);
    me->number = put.number;
    free(text);
    return NULL;
}

static uint64_t queued(void)
{
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(gated, &stats);
    return stats.queued;
}

/* Waits, at most 20 s, until the value is reached. */
static void until(uint64_t (*value)(void), uint64_t want)
{
    for (int i = 0; i < 20000 && value() != want; i++)
        (void)usleep(1000);
    assert_int_equal(value(), want);
}

static uint64_t called(void)
{
    return (uint64_t)atomic_load(&calls);
}

static void open_gated(lwd_catalog_options o, const char *dir)
{
    atomic_store(&faults, 0);
    atomic_store(&calls, 0);
    atomic_store(&misuse, 0);
    o.changed = wait_at_gate;
    o.changed_context = &gate;
    gated = lab_open(dir, &o);
}

static void a_full_queue_answers_busy_and_the_rest_commit_together(void **state)
{
    (void)state;
    enum { QUEUE = 5 };
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.queue_max = QUEUE;
    open_gated(o, ":memory:");
    putter p[QUEUE + 1];
    pthread_t id[QUEUE + 1];
    (void)pthread_mutex_lock(&gate);
    for (size_t i = 0; i <= QUEUE; i++) {
        p[i] = (putter){.n = i + 1};
        assert_int_equal(pthread_create(&id[i], NULL, put_one, &p[i]), 0);
        if (i == 0)
            until(called, 1); /* the first is committed, the writer stands at the gate */
    }
    until(queued, QUEUE);
    putter extra = {.n = 99};
    (void)put_one(&extra);
    assert_int_equal(extra.result, LWD_CATALOG_BUSY);
    /* A read does not wait for the writer. */
    lwd_catalog_mechanism m;
    lab_is(lwd_catalog_get_mechanism(gated, "stage", &m, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(m.revisions, 1);
    (void)pthread_mutex_unlock(&gate);
    for (size_t i = 0; i <= QUEUE; i++) {
        assert_int_equal(pthread_join(id[i], NULL), 0);
        assert_int_equal(p[i].result, LWD_CATALOG_OK);
    }
    assert_int_equal(p[0].number, 1);
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(gated, &stats);
    assert_int_equal(stats.refused, 1);
    assert_int_equal(stats.writes, QUEUE + 1);
    assert_int_equal(stats.commits, 2);
    assert_int_equal(stats.failures, 0);
    assert_int_equal(called(), QUEUE + 1);
    assert_int_equal(atomic_load(&misuse), QUEUE + 1);
    assert_int_equal(atomic_load(&faults), 0);
    assert_int_equal(last_change.action, LWD_CATALOG_PUT);
    assert_int_equal(last_change.number, QUEUE + 1);

    lwd_catalog_state_result s;
    lab_is(lab_set(gated, "stage", 3, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(last_change.action, LWD_CATALOG_PUBLISH);
    assert_string_equal(last_change.name, "stage");
    assert_int_equal(last_change.answering, 3);
    assert_int_equal(last_change.tag, 1);
    lab_is(lab_set(gated, "stage", 3, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(last_change.action, LWD_CATALOG_WITHDRAW);
    assert_int_equal(last_change.answering, 0);
    assert_int_equal(lwd_catalog_changes(gated), QUEUE + 3);
    lwd_catalog_close(gated);
}

static void one_refused_write_does_not_fail_its_neighbours(void **state)
{
    (void)state;
    enum { N = 7 };
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.pages_max = 120; /* 480 KiB: the large one alone does not fit */
    open_gated(o, base);
    putter p[N];
    pthread_t id[N];
    (void)pthread_mutex_lock(&gate);
    for (size_t i = 0; i < N; i++) {
        p[i] = (putter){.n = i + 1, .document_len = i == 3 ? 1000000 : 0};
        assert_int_equal(pthread_create(&id[i], NULL, put_one, &p[i]), 0);
        if (i == 0)
            until(called, 1);
        else
            until(queued, i); /* in this order */
    }
    (void)pthread_mutex_unlock(&gate);
    for (size_t i = 0; i < N; i++) {
        assert_int_equal(pthread_join(id[i], NULL), 0);
        assert_int_equal(p[i].result, i == 3 ? LWD_CATALOG_FULL : LWD_CATALOG_OK);
        if (i != 3)
            assert_int_equal(p[i].number, i < 3 ? i + 1 : i);
    }
    lwd_catalog_stats stats;
    lwd_catalog_get_stats(gated, &stats);
    assert_int_equal(stats.failures, 1);
    assert_int_equal(atomic_load(&faults), 0);
    lab_is(lwd_catalog_verify(gated, true, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_close(gated);
}

/* ---- backup under load ---- */

static atomic_bool ending;

static void *put_until_told(void *context)
{
    (void)context;
    putter p = {.n = 0};
    while (!atomic_load(&ending)) {
        p.n++;
        (void)put_one(&p);
        expect(p.result == LWD_CATALOG_OK, "put during a backup");
    }
    return NULL;
}

static void a_backup_does_not_stop_the_writer(void **state)
{
    (void)state;
    char copy[600];
    pthread_t id;
    assert_true(snprintf(copy, sizeof copy, "%s/copy", base) < (int)sizeof copy);
    open_gated(LWD_CATALOG_OPTIONS_DEFAULT, base);
    atomic_store(&ending, false);
    assert_int_equal(pthread_create(&id, NULL, put_until_told, NULL), 0);
    for (int i = 0; i < 5; i++) {
        lab_is(lwd_catalog_backup(gated, copy, &lab_err), LWD_CATALOG_OK);
        (void)usleep(20000);
    }
    atomic_store(&ending, true);
    assert_int_equal(pthread_join(id, NULL), 0);
    assert_int_equal(atomic_load(&faults), 0);
    lwd_catalog_close(gated);
}

#define CASE(f) cmocka_unit_test_setup_teardown(f, make_base, drop_base)

int main(void)
{
    const struct CMUnitTest tests[] = {
        CASE(four_threads_number_eight_mechanisms_without_gaps),
        cmocka_unit_test(the_same_in_memory),
        cmocka_unit_test(every_tag_is_won_once),
        cmocka_unit_test(a_full_queue_answers_busy_and_the_rest_commit_together),
        CASE(one_refused_write_does_not_fail_its_neighbours),
        CASE(a_backup_does_not_stop_the_writer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
