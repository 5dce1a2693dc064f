/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The pool of pool.h: one mutex, one list, one slot a worker for the job it runs. */
#include "pool.h"

#include <errno.h>
#include <pthread.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <sys/resource.h>
#include <sys/syscall.h>
#include <time.h>
#include <unistd.h>

#include "../metrics.h"

/* Workers yield to the event thread where cores are scarce. */
enum { NICE = 5 };

typedef struct worker {
    lwd_pool *pool;
    pthread_t thread;
    unsigned lane;
    lwd_job *running; /* NULL: none, or finished as abandoned by another thread */
} worker;

struct lwd_pool {
    pthread_mutex_t lock;
    pthread_cond_t filled;
    pthread_cond_t ended;
    lwd_job *first;
    lwd_job *last;
    unsigned queued;
    unsigned queue_max;
    unsigned alive;
    bool stop;
    bool given_up;
    unsigned n;
    worker worker[];
};

static lwd_job *take(lwd_pool *pool)
{
    lwd_job *job = pool->first;
    pool->first = job->next;
    if (pool->first == NULL) {
        pool->last = NULL;
    }
    pool->queued--;
    lwd_metrics_queued(-1);
    return job;
}

static void *worker_main(void *arg)
{
    worker *self = arg;
    lwd_pool *pool = self->pool;

    (void)setpriority(PRIO_PROCESS, (id_t)syscall(SYS_gettid), NICE);
    pthread_mutex_lock(&pool->lock);
    for (;;) {
        lwd_job *job;
        bool mine;
        while (pool->first == NULL && !pool->stop) {
            pthread_cond_wait(&pool->filled, &pool->lock);
        }
        if (pool->first == NULL) {
            break;
        }
        job = take(pool);
        self->running = job;
        pthread_mutex_unlock(&pool->lock);
        job->run(job, self->lane);
        pthread_mutex_lock(&pool->lock);
        mine = self->running == job;
        self->running = NULL;
        pthread_mutex_unlock(&pool->lock);
        if (mine) {
            job->finish(job, false);
        }
        job->release(job);
        pthread_mutex_lock(&pool->lock);
    }
    pool->alive--;
    pthread_cond_signal(&pool->ended);
    pthread_mutex_unlock(&pool->lock);
    return NULL;
}

lwd_pool *lwd_pool_new(unsigned workers, unsigned queue_max, unsigned first_lane)
{
    lwd_pool *pool = calloc(1, sizeof *pool + workers * sizeof pool->worker[0]);
    pthread_condattr_t attributes;

    if (pool == NULL) {
        return NULL;
    }
    pthread_mutex_init(&pool->lock, NULL);
    pthread_cond_init(&pool->filled, NULL);
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&pool->ended, &attributes);
    pthread_condattr_destroy(&attributes);
    pool->queue_max = queue_max;
    for (unsigned i = 0; i < workers; i++) {
        worker *w = &pool->worker[i];
        w->pool = pool;
        w->lane = first_lane + i;
        pthread_mutex_lock(&pool->lock);
        pool->alive++;
        pthread_mutex_unlock(&pool->lock);
        if (pthread_create(&w->thread, NULL, worker_main, w) != 0) {
            pthread_mutex_lock(&pool->lock);
            pool->alive--;
            pthread_mutex_unlock(&pool->lock);
            (void)lwd_pool_stop(pool, 1000);
            return NULL;
        }
        pool->n++;
    }
    return pool;
}

bool lwd_pool_push(lwd_pool *pool, lwd_job *job, void (*accepted)(lwd_job *job))
{
    bool ok;

    pthread_mutex_lock(&pool->lock);
    ok = !pool->given_up && pool->queued < pool->queue_max;
    if (ok) {
        job->next = NULL;
        accepted(job);
        if (pool->last != NULL) {
            pool->last->next = job;
        } else {
            pool->first = job;
        }
        pool->last = job;
        pool->queued++;
        lwd_metrics_queued(1);
        pthread_cond_signal(&pool->filled);
    }
    pthread_mutex_unlock(&pool->lock);
    return ok;
}

void lwd_pool_abandon(lwd_pool *pool)
{
    pthread_mutex_lock(&pool->lock);
    pool->given_up = true;
    while (pool->first != NULL) {
        lwd_job *job = take(pool);
        pthread_mutex_unlock(&pool->lock);
        job->finish(job, true);
        job->release(job);
        pthread_mutex_lock(&pool->lock);
    }
    for (unsigned i = 0; i < pool->n; i++) {
        lwd_job *job = pool->worker[i].running;
        if (job == NULL) {
            continue;
        }
        pool->worker[i].running = NULL;
        /* Under the lock: the worker can not release the job before it has taken the lock to see
         * that the job is no longer its own to finish. */
        job->finish(job, true);
    }
    pthread_mutex_unlock(&pool->lock);
}

bool lwd_pool_stop(lwd_pool *pool, unsigned wait_ms)
{
    struct timespec until;
    bool ended;

    clock_gettime(CLOCK_MONOTONIC, &until);
    until.tv_sec += wait_ms / 1000;
    until.tv_nsec += (long)(wait_ms % 1000) * 1000000;
    if (until.tv_nsec >= 1000000000) {
        until.tv_sec++;
        until.tv_nsec -= 1000000000;
    }
    pthread_mutex_lock(&pool->lock);
    pool->stop = true;
    pthread_cond_broadcast(&pool->filled);
    while (pool->alive > 0 &&
           pthread_cond_timedwait(&pool->ended, &pool->lock, &until) != ETIMEDOUT) {
    }
    ended = pool->alive == 0;
    pthread_mutex_unlock(&pool->lock);
    if (!ended) {
        return false;
    }
    for (unsigned i = 0; i < pool->n; i++) {
        pthread_join(pool->worker[i].thread, NULL);
    }
    pthread_cond_destroy(&pool->ended);
    pthread_cond_destroy(&pool->filled);
    pthread_mutex_destroy(&pool->lock);
    free(pool);
    return true;
}
