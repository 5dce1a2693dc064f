/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The clock that ends questions which may take long: one thread for all lanes sets a lane's flag
 * when its time is up, and the core, which looks at the flag as it works, answers "undecided".
 * Nothing else depends on time: a question that ends by itself gets the same answer everywhere. */
#ifndef LWD_API_WATCH_H
#define LWD_API_WATCH_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

typedef struct lwd_watch lwd_watch;

/* Starts the thread. NULL if memory or the thread can not be had. */
lwd_watch *lwd_watch_new(unsigned lanes);
void lwd_watch_free(lwd_watch *watch);

/* The lane's flag, lowered now and raised after so many milliseconds, unless it is disarmed
 * before. Called by the lane's thread. */
const atomic_bool *lwd_watch_arm(lwd_watch *watch, unsigned lane, int64_t ms);
void lwd_watch_disarm(lwd_watch *watch, unsigned lane);

/* Raised twice as long after lwd_watch_hurry as the lanes' flags, for work that no question waits
 * for any more. */
const atomic_bool *lwd_watch_stop_flag(const lwd_watch *watch);

/* The service stops: whatever works, or begins to, has at most so long. */
void lwd_watch_hurry(lwd_watch *watch, int64_t ms);

#endif
