/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The workers behind the bounded queue: each job is finished exactly once, run or abandoned. */
#define _POSIX_C_SOURCE 200809L
#include "http/pool.h"

#include <pthread.h>
#include <stdatomic.h>
#include <time.h>

#include "lwt.h"

typedef struct task {
    lwd_job job;
    _Atomic int accepted;
    _Atomic int run;
    _Atomic int finished;
    _Atomic int abandoned;
    _Atomic int released;
    _Atomic unsigned lane;
} task;

static _Atomic bool gate; /* closed: jobs wait inside run */

static void nap(void)
{
    const struct timespec rest = {.tv_sec = 0, .tv_nsec = 1000000};
    nanosleep(&rest, NULL);
}

static void run(lwd_job *job, unsigned lane)
{
    task *t = (task *)(void *)job;
    atomic_store(&t->lane, lane);
    atomic_fetch_add(&t->run, 1);
    while (!atomic_load(&gate)) {
        nap();
    }
}

static void finish(lwd_job *job, bool abandoned)
{
    task *t = (task *)(void *)job;
    atomic_fetch_add(&t->finished, 1);
    atomic_fetch_add(&t->abandoned, abandoned ? 1 : 0);
}

static void release(lwd_job *job)
{
    atomic_fetch_add(&((task *)(void *)job)->released, 1);
}

static void accepted(lwd_job *job)
{
    atomic_fetch_add(&((task *)(void *)job)->accepted, 1);
}

static void prepare(task *tasks, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        tasks[i] = (task){.job = {.run = run, .finish = finish, .release = release}};
    }
}

/* Waits until the task has been run, for ten seconds at most. */
static void wait_run(task *t)
{
    for (int i = 0; i < 10000 && atomic_load(&t->run) == 0; i++) {
        nap();
    }
    assert_int_equal(atomic_load(&t->run), 1);
}

static void runs_each_job_once_on_a_lane_of_its_workers(void **state)
{
    static task tasks[2000];
    lwd_pool *pool = lwd_pool_new(4, 2000, 7);
    (void)state;

    assert_non_null(pool);
    atomic_store(&gate, true);
    prepare(tasks, 2000);
    for (size_t i = 0; i < 2000; i++) {
        assert_true(lwd_pool_push(pool, &tasks[i].job, accepted));
    }
    assert_true(lwd_pool_stop(pool, 20000)); /* only when the queue is empty */
    for (size_t i = 0; i < 2000; i++) {
        assert_int_equal(tasks[i].accepted, 1);
        assert_int_equal(tasks[i].run, 1);
        assert_int_equal(tasks[i].finished, 1);
        assert_int_equal(tasks[i].abandoned, 0);
        assert_int_equal(tasks[i].released, 1);
        assert_in_range(tasks[i].lane, 7, 10);
    }
}

static void takes_no_more_than_its_queue_holds(void **state)
{
    static task tasks[6];
    lwd_pool *pool = lwd_pool_new(1, 3, 1);
    (void)state;

    atomic_store(&gate, false);
    prepare(tasks, 6);
    assert_true(lwd_pool_push(pool, &tasks[0].job, accepted));
    wait_run(&tasks[0]);
    for (size_t i = 1; i < 4; i++) {
        assert_true(lwd_pool_push(pool, &tasks[i].job, accepted));
    }
    assert_false(lwd_pool_push(pool, &tasks[4].job, accepted));
    assert_int_equal(tasks[4].accepted, 0);
    atomic_store(&gate, true);
    assert_true(lwd_pool_stop(pool, 20000));
    assert_int_equal(tasks[3].finished, 1);
    assert_int_equal(tasks[4].finished, 0);
}

static void abandons_what_waits_and_what_runs(void **state)
{
    static task tasks[5];
    lwd_pool *pool = lwd_pool_new(2, 10, 1);
    (void)state;

    atomic_store(&gate, false);
    prepare(tasks, 5);
    for (size_t i = 0; i < 4; i++) {
        assert_true(lwd_pool_push(pool, &tasks[i].job, accepted));
    }
    wait_run(&tasks[0]);
    wait_run(&tasks[1]);
    lwd_pool_abandon(pool);
    for (size_t i = 0; i < 4; i++) {
        assert_int_equal(tasks[i].finished, 1);
        assert_int_equal(tasks[i].abandoned, 1);
    }
    assert_int_equal(tasks[0].released, 0); /* a worker still has it */
    assert_int_equal(tasks[2].released, 1);
    assert_int_equal(tasks[2].run, 0);
    assert_false(lwd_pool_push(pool, &tasks[4].job, accepted));
    assert_false(lwd_pool_stop(pool, 20)); /* and will not let go of it */
    atomic_store(&gate, true);
    assert_true(lwd_pool_stop(pool, 20000));
    for (size_t i = 0; i < 4; i++) {
        assert_int_equal(tasks[i].finished, 1);
        assert_int_equal(tasks[i].released, 1);
    }
}

/* Abandoning against workers that finish at the same moment, many times. */
static void finishes_once_however_the_race_goes(void **state)
{
    static task tasks[40];
    (void)state;

    atomic_store(&gate, true);
    for (int round = 0; round < 200; round++) {
        lwd_pool *pool = lwd_pool_new(3, 40, 1);
        assert_non_null(pool);
        prepare(tasks, 40);
        for (size_t i = 0; i < 40; i++) {
            assert_true(lwd_pool_push(pool, &tasks[i].job, accepted));
        }
        lwd_pool_abandon(pool);
        assert_true(lwd_pool_stop(pool, 20000));
        for (size_t i = 0; i < 40; i++) {
            assert_int_equal(tasks[i].finished, 1);
            assert_int_equal(tasks[i].released, 1);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(runs_each_job_once_on_a_lane_of_its_workers),
        cmocka_unit_test(takes_no_more_than_its_queue_holds),
        cmocka_unit_test(abandons_what_waits_and_what_runs),
        cmocka_unit_test(finishes_once_however_the_race_goes),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
