/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The clock of watch.h. The thread sleeps until the earliest deadline it has seen; a lane wakes it
 * only for an earlier one, so that questions with the usual patience cost no wake-up each. */
#include "watch.h"

#include <pthread.h>
#include <stdlib.h>
#include <time.h>

typedef struct slot {
    atomic_bool up;
    bool armed;
    int64_t deadline_ms;
} slot;

struct lwd_watch {
    pthread_mutex_t lock;
    pthread_cond_t earlier;
    pthread_t thread;
    bool stop;
    int64_t wake_ms;  /* when the thread looks next */
    int64_t least_ms; /* no deadline later than this: INT64_MAX but when the service stops */
    unsigned n;       /* slots: the lanes, and one more for the stop */
    slot lane[];
};

static int64_t now_ms(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_MONOTONIC, &t);
    return (int64_t)t.tv_sec * 1000 + t.tv_nsec / 1000000;
}

/* Raises the flags whose time is up; the next time to look. */
static int64_t look(lwd_watch *watch, int64_t now)
{
    int64_t next = INT64_MAX;
    for (unsigned i = 0; i < watch->n; i++) {
        slot *s = &watch->lane[i];
        if (s->armed && s->deadline_ms <= now) {
            s->armed = false;
            atomic_store(&s->up, true);
        } else if (s->armed && s->deadline_ms < next) {
            next = s->deadline_ms;
        }
    }
    return next;
}

static void *watch_main(void *arg)
{
    lwd_watch *watch = arg;
    pthread_mutex_lock(&watch->lock);
    while (!watch->stop) {
        watch->wake_ms = look(watch, now_ms());
        if (watch->wake_ms == INT64_MAX) {
            pthread_cond_wait(&watch->earlier, &watch->lock);
        } else {
            const struct timespec until = {.tv_sec = (time_t)(watch->wake_ms / 1000),
                                           .tv_nsec = (long)(watch->wake_ms % 1000) * 1000000};
            (void)pthread_cond_timedwait(&watch->earlier, &watch->lock, &until);
        }
    }
    pthread_mutex_unlock(&watch->lock);
    return NULL;
}

lwd_watch *lwd_watch_new(unsigned lanes)
{
    pthread_condattr_t attributes;
    lwd_watch *watch = calloc(1, sizeof *watch + (lanes + 1) * sizeof watch->lane[0]);
    if (watch == NULL) {
        return NULL;
    }
    watch->n = lanes + 1;
    watch->wake_ms = INT64_MAX;
    watch->least_ms = INT64_MAX;
    for (unsigned i = 0; i < watch->n; i++) {
        atomic_init(&watch->lane[i].up, false);
    }
    pthread_mutex_init(&watch->lock, NULL);
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&watch->earlier, &attributes);
    pthread_condattr_destroy(&attributes);
    if (pthread_create(&watch->thread, NULL, watch_main, watch) != 0) {
        pthread_cond_destroy(&watch->earlier);
        pthread_mutex_destroy(&watch->lock);
        free(watch);
        return NULL;
    }
    return watch;
}

void lwd_watch_free(lwd_watch *watch)
{
    if (watch == NULL) {
        return;
    }
    pthread_mutex_lock(&watch->lock);
    watch->stop = true;
    pthread_cond_signal(&watch->earlier);
    pthread_mutex_unlock(&watch->lock);
    pthread_join(watch->thread, NULL);
    pthread_cond_destroy(&watch->earlier);
    pthread_mutex_destroy(&watch->lock);
    free(watch);
}

const atomic_bool *lwd_watch_arm(lwd_watch *watch, unsigned lane, int64_t ms)
{
    slot *s = &watch->lane[lane];
    pthread_mutex_lock(&watch->lock);
    int64_t deadline = now_ms() + ms;
    s->deadline_ms = deadline < watch->least_ms ? deadline : watch->least_ms;
    s->armed = true;
    atomic_store(&s->up, false);
    if (s->deadline_ms < watch->wake_ms) {
        pthread_cond_signal(&watch->earlier);
    }
    pthread_mutex_unlock(&watch->lock);
    return &s->up;
}

void lwd_watch_disarm(lwd_watch *watch, unsigned lane)
{
    pthread_mutex_lock(&watch->lock);
    watch->lane[lane].armed = false;
    pthread_mutex_unlock(&watch->lock);
}

const atomic_bool *lwd_watch_stop_flag(const lwd_watch *watch)
{
    return &watch->lane[watch->n - 1].up;
}

void lwd_watch_hurry(lwd_watch *watch, int64_t ms)
{
    pthread_mutex_lock(&watch->lock);
    int64_t now = now_ms();
    watch->least_ms = now + ms;
    watch->lane[watch->n - 1].deadline_ms = now + 2 * ms;
    watch->lane[watch->n - 1].armed = true;
    for (unsigned i = 0; i + 1 < watch->n; i++) {
        slot *s = &watch->lane[i];
        if (s->armed && s->deadline_ms > watch->least_ms) {
            s->deadline_ms = watch->least_ms;
        }
    }
    pthread_cond_signal(&watch->earlier);
    pthread_mutex_unlock(&watch->lock);
}
