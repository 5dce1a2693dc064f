/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The daemon's log: one line an event on standard error, key=value, first the time (RFC 3339, UTC,
 * milliseconds) and the level. After lwd_log_start() lines pass through a bounded ring that a
 * thread of its own empties, so that a reader of our standard error who has stopped reading can
 * not stop the daemon; lines that find the ring full are counted and the count is logged.
 * Never logged: tokens, query text, bodies. Any thread may log. */
#ifndef LWD_LOG_H
#define LWD_LOG_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef enum lwd_log_level {
    LWD_LOG_ERROR,
    LWD_LOG_WARN,
    LWD_LOG_INFO,
    LWD_LOG_DEBUG
} lwd_log_level;

/* Lines above this level are dropped; default LWD_LOG_INFO. */
void lwd_log_level_set(lwd_log_level level);
bool lwd_log_wanted(lwd_log_level level);
/* "error", "warn", "info" or "debug"; false for anything else. */
bool lwd_log_level_parse(lwd_log_level *out, const char *text);

/* Starts the writing thread; false if it can not be had (lines are then written directly). */
bool lwd_log_start(void);
/* Writes what is left and ends the thread; later lines are written directly. */
void lwd_log_stop(void);
/* Lines lost since the start because the ring was full. */
uint64_t lwd_log_dropped(void);

/* A line being put together. Values with blanks, quotes or control characters are quoted and
 * escaped; a line that grows too long is cut and ends in cut=yes. */
typedef struct lwd_log_line {
    lwd_log_level level;
    size_t len;
    bool cut;
    char text[896];
} lwd_log_line;

void lwd_log_begin(lwd_log_line *line, lwd_log_level level, const char *event);
void lwd_log_str(lwd_log_line *line, const char *key, const char *value); /* NULL: left out */
void lwd_log_int(lwd_log_line *line, const char *key, int64_t value);
void lwd_log_end(lwd_log_line *line);

/* One event with a sentence: event=... msg="...". */
void lwd_log(lwd_log_level level, const char *event, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* The present time as 2026-01-31T23:59:59.123Z into out[25]. */
enum { LWD_TIME_TEXT = 25 };
void lwd_time_text(char out[LWD_TIME_TEXT]);

#endif
