/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Worker threads behind a bounded queue, for handlers that would hold up the event thread. A job
 * is a member of the caller's own struct. Each job pushed is given back exactly once, by its
 * `finish`: run, or abandoned when the pool gave up on it. */
#ifndef LWD_HTTP_POOL_H
#define LWD_HTTP_POOL_H

#include <stdbool.h>

typedef struct lwd_pool lwd_pool;
typedef struct lwd_job lwd_job;

struct lwd_job {
    lwd_job *next;
    /* `finish` must not call the pool. `release` comes last, from the worker (or the abandoner, for
     * a job that never started); after it the pool forgets the job. An abandoned job that was
     * running is finished at once, while `run` is still going on. */
    void (*run)(lwd_job *job, unsigned lane);
    void (*finish)(lwd_job *job, bool abandoned);
    void (*release)(lwd_job *job);
};

/* Workers on lanes first_lane, first_lane + 1, ... NULL if threads or memory can not be had. */
lwd_pool *lwd_pool_new(unsigned workers, unsigned queue_max, unsigned first_lane);

/* Queues the job, after calling `accepted` (under the lock, so before any worker can see it).
 * False without any effect if the queue is full or the pool has given up. */
bool lwd_pool_push(lwd_pool *pool, lwd_job *job, void (*accepted)(lwd_job *job));

/* Gives up: every job queued or running is finished as abandoned; no more are taken. */
void lwd_pool_abandon(lwd_pool *pool);

/* Ends the workers once the queue is empty and frees the pool. False if a job still runs after
 * wait_ms: then the pool stays allocated. */
bool lwd_pool_stop(lwd_pool *pool, unsigned wait_ms);

#endif
