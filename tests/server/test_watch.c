/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The clock that ends long questions: flags go up when their time is over and not before, also for
 * an earlier deadline that comes later, and all at once when the service stops. */
#define _POSIX_C_SOURCE 200809L
#include <pthread.h>
#include <time.h>

#include "api/watch.h"
#include "lwt.h"

enum { LONG = 600000, PATIENCE_MS = 20000 }; /* a loaded machine may take its time */

static double now_ms(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_MONOTONIC, &t);
    return 1e3 * (double)t.tv_sec + 1e-6 * (double)t.tv_nsec;
}

static void nap(long ms)
{
    const struct timespec t = {.tv_sec = 0, .tv_nsec = ms * 1000000};
    (void)nanosleep(&t, NULL);
}

/* Milliseconds until the flag is up. */
static double wait_for(const atomic_bool *flag)
{
    double start = now_ms();
    while (!atomic_load(flag)) {
        if (now_ms() - start > PATIENCE_MS) {
            lwt_fail("the flag stays down");
        }
        nap(1);
    }
    return now_ms() - start;
}

static void a_flag_goes_up_in_time(void **state)
{
    lwd_watch *watch = lwd_watch_new(3);
    (void)state;
    assert_non_null(watch);
    const atomic_bool *slow = lwd_watch_arm(watch, 0, LONG);
    double start = now_ms();
    const atomic_bool *quick = lwd_watch_arm(watch, 2, 60);
    assert_false(atomic_load(quick));
    (void)wait_for(quick);
    assert_true(now_ms() - start >= 59.0);
    assert_false(atomic_load(slow));
    /* Armed anew it is down, and an earlier time than the one slept for counts. */
    quick = lwd_watch_arm(watch, 2, 1);
    (void)wait_for(quick);
    assert_false(atomic_load(slow));
    lwd_watch_free(watch);
}

static void disarmed_it_stays_down(void **state)
{
    lwd_watch *watch = lwd_watch_new(2);
    (void)state;
    assert_non_null(watch);
    const atomic_bool *first = lwd_watch_arm(watch, 0, 30);
    lwd_watch_disarm(watch, 0);
    const atomic_bool *second = lwd_watch_arm(watch, 1, 60);
    (void)wait_for(second);
    assert_false(atomic_load(first));
    lwd_watch_free(watch);
    lwd_watch_free(NULL);
}

static void a_stop_shortens_all(void **state)
{
    lwd_watch *watch = lwd_watch_new(2);
    (void)state;
    assert_non_null(watch);
    const atomic_bool *before = lwd_watch_arm(watch, 0, LONG);
    lwd_watch_hurry(watch, 30);
    const atomic_bool *after = lwd_watch_arm(watch, 1, LONG);
    assert_false(atomic_load(lwd_watch_stop_flag(watch)));
    (void)wait_for(before);
    (void)wait_for(after);
    (void)wait_for(lwd_watch_stop_flag(watch));
    lwd_watch_free(watch);
}

typedef struct worker {
    pthread_t thread;
    lwd_watch *watch;
    unsigned lane;
} worker;

static void *work(void *arg)
{
    worker *w = arg;
    for (int i = 0; i < 40; i++) {
        const atomic_bool *flag = lwd_watch_arm(w->watch, w->lane, i % 4 == 0 ? 2 : LONG);
        if (i % 4 == 0) {
            while (!atomic_load(flag)) {
                nap(1);
            }
        }
        lwd_watch_disarm(w->watch, w->lane);
    }
    return NULL;
}

/* Under the thread sanitizer: many lanes at once, and no flag of one is another's. */
static void many_lanes_at_once(void **state)
{
    worker w[4];
    lwd_watch *watch = lwd_watch_new(4);
    (void)state;
    assert_non_null(watch);
    for (unsigned i = 0; i < 4; i++) {
        w[i] = (worker){.watch = watch, .lane = i};
        assert_int_equal(pthread_create(&w[i].thread, NULL, work, &w[i]), 0);
    }
    for (unsigned i = 0; i < 4; i++) {
        assert_int_equal(pthread_join(w[i].thread, NULL), 0);
    }
    lwd_watch_free(watch);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_flag_goes_up_in_time),
        cmocka_unit_test(disarmed_it_stays_down),
        cmocka_unit_test(a_stop_shortens_all),
        cmocka_unit_test(many_lanes_at_once),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
