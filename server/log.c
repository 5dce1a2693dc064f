/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The log of log.h: formatting, the ring and its writing thread. One ring a process, guarded by
 * one mutex that is held for a memcpy at most; the write to standard error happens outside it. */
#include "log.h"

#include <errno.h>
#include <inttypes.h>
#include <pthread.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

enum { RING_SIZE = 1 << 18, REST_NS = 20 * 1000 * 1000 };

static struct {
    pthread_mutex_t lock;
    pthread_cond_t filled;
    pthread_t thread;
    bool running;
    bool stop;
    size_t head; /* next byte to write out */
    size_t len;
    uint64_t dropped;
    uint64_t dropped_told;
    char data[RING_SIZE];
} ring = {.lock = PTHREAD_MUTEX_INITIALIZER, .filled = PTHREAD_COND_INITIALIZER};

static _Atomic int level_max = LWD_LOG_INFO;

static const char *const level_name[] = {"error", "warn", "info", "debug"};

void lwd_log_level_set(lwd_log_level level)
{
    atomic_store(&level_max, (int)level);
}

bool lwd_log_wanted(lwd_log_level level)
{
    return (int)level <= atomic_load_explicit(&level_max, memory_order_relaxed);
}

bool lwd_log_level_parse(lwd_log_level *out, const char *text)
{
    for (size_t i = 0; i < sizeof level_name / sizeof level_name[0]; i++) {
        if (strcmp(text, level_name[i]) == 0) {
            *out = (lwd_log_level)i;
            return true;
        }
    }
    return false;
}

/* Writes value as exactly `digits` decimal digits. */
static char *put_digits(char *at, int value, int digits)
{
    for (int i = digits - 1; i >= 0; i--) {
        at[i] = (char)('0' + value % 10);
        value /= 10;
    }
    return at + digits;
}

void lwd_time_text(char out[LWD_TIME_TEXT])
{
    /* The calendar part changes once a second; each thread keeps its own copy of it. */
    static _Thread_local time_t cached_s = -1;
    static _Thread_local char cached[20];
    struct timespec now;
    char *at;

    clock_gettime(CLOCK_REALTIME, &now);
    if (now.tv_sec != cached_s) {
        struct tm tm;
        gmtime_r(&now.tv_sec, &tm);
        at = put_digits(cached, tm.tm_year + 1900, 4);
        *at++ = '-';
        at = put_digits(at, tm.tm_mon + 1, 2);
        *at++ = '-';
        at = put_digits(at, tm.tm_mday, 2);
        *at++ = 'T';
        at = put_digits(at, tm.tm_hour, 2);
        *at++ = ':';
        at = put_digits(at, tm.tm_min, 2);
        *at++ = ':';
        (void)put_digits(at, tm.tm_sec, 2);
        cached_s = now.tv_sec;
    }
    memcpy(out, cached, 19);
    out[19] = '.';
    at = put_digits(out + 20, (int)(now.tv_nsec / 1000000), 3);
    *at++ = 'Z';
    *at = '\0';
}

static void write_all(const char *text, size_t len)
{
    while (len > 0) {
        ssize_t n = write(STDERR_FILENO, text, len);
        if (n > 0) {
            text += n;
            len -= (size_t)n;
        } else if (n < 0 && errno == EINTR) {
            continue;
        } else {
            return; /* nobody to tell */
        }
    }
}

/* Takes the longest contiguous piece out of the ring; the lock is held. */
static size_t ring_take(char *out, size_t cap)
{
    size_t n = ring.len < cap ? ring.len : cap;
    if (n > RING_SIZE - ring.head) {
        n = RING_SIZE - ring.head;
    }
    memcpy(out, ring.data + ring.head, n);
    ring.head = (ring.head + n) % RING_SIZE;
    ring.len -= n;
    return n;
}

static void tell_dropped(uint64_t lost)
{
    char now[LWD_TIME_TEXT];
    char text[128];
    int n;

    lwd_time_text(now);
    n = snprintf(text, sizeof text, "time=%s level=warn event=log_dropped lines=%" PRIu64 "\n", now,
                 lost);
    if (n > 0) {
        write_all(text, (size_t)n);
    }
}

static void *writer_main(void *unused)
{
    static char piece[1 << 15];
    (void)unused;

    pthread_mutex_lock(&ring.lock);
    for (;;) {
        while (ring.len == 0 && !ring.stop) {
            pthread_cond_wait(&ring.filled, &ring.lock);
        }
        if (ring.len == 0) {
            break;
        }
        if (!ring.stop) {
            /* Under load one wake-up serves many lines. */
            const struct timespec rest = {.tv_sec = 0, .tv_nsec = REST_NS};
            pthread_mutex_unlock(&ring.lock);
            nanosleep(&rest, NULL);
            pthread_mutex_lock(&ring.lock);
        }
        while (ring.len > 0) {
            size_t n = ring_take(piece, sizeof piece);
            pthread_mutex_unlock(&ring.lock);
            write_all(piece, n);
            pthread_mutex_lock(&ring.lock);
        }
        if (ring.dropped != ring.dropped_told) {
            /* Only here, where what was written ends with a line. */
            uint64_t lost = ring.dropped - ring.dropped_told;
            ring.dropped_told = ring.dropped;
            pthread_mutex_unlock(&ring.lock);
            tell_dropped(lost);
            pthread_mutex_lock(&ring.lock);
        }
    }
    pthread_mutex_unlock(&ring.lock);
    return NULL;
}

bool lwd_log_start(void)
{
    bool ok;
    pthread_mutex_lock(&ring.lock);
    ring.stop = false;
    if (!ring.running) {
        ring.running = pthread_create(&ring.thread, NULL, writer_main, NULL) == 0;
    }
    ok = ring.running;
    pthread_mutex_unlock(&ring.lock);
    return ok;
}

void lwd_log_stop(void)
{
    pthread_mutex_lock(&ring.lock);
    if (!ring.running) {
        pthread_mutex_unlock(&ring.lock);
        return;
    }
    ring.stop = true;
    pthread_cond_signal(&ring.filled);
    pthread_mutex_unlock(&ring.lock);
    pthread_join(ring.thread, NULL);
    pthread_mutex_lock(&ring.lock);
    ring.running = false;
    pthread_mutex_unlock(&ring.lock);
}

uint64_t lwd_log_dropped(void)
{
    uint64_t n;
    pthread_mutex_lock(&ring.lock);
    n = ring.dropped;
    pthread_mutex_unlock(&ring.lock);
    return n;
}

/* Puts a whole line into the ring; false if it is not running. */
static bool ring_put(const char *text, size_t len)
{
    bool taken = false;
    bool direct = false;

    pthread_mutex_lock(&ring.lock);
    if (!ring.running || ring.stop) {
        direct = true;
    } else if (len > RING_SIZE - ring.len) {
        ring.dropped++;
    } else {
        size_t tail = (ring.head + ring.len) % RING_SIZE;
        size_t first = len < RING_SIZE - tail ? len : RING_SIZE - tail;
        memcpy(ring.data + tail, text, first);
        memcpy(ring.data, text + first, len - first);
        taken = ring.len == 0;
        ring.len += len;
    }
    if (taken) {
        pthread_cond_signal(&ring.filled);
    }
    pthread_mutex_unlock(&ring.lock);
    return !direct;
}

static void line_put(lwd_log_line *line, const char *text, size_t len)
{
    /* Room is kept for the mark of a cut line and the line end. */
    const size_t room = sizeof line->text - sizeof " cut=yes\n";
    if (line->cut || len > room - line->len) {
        line->cut = true;
        return;
    }
    memcpy(line->text + line->len, text, len);
    line->len += len;
}

static void line_key(lwd_log_line *line, const char *key)
{
    line_put(line, " ", 1);
    line_put(line, key, strlen(key));
    line_put(line, "=", 1);
}

void lwd_log_begin(lwd_log_line *line, lwd_log_level level, const char *event)
{
    char now[LWD_TIME_TEXT];

    line->level = level;
    line->len = 0;
    line->cut = false;
    lwd_time_text(now);
    line_put(line, "time=", 5);
    line_put(line, now, LWD_TIME_TEXT - 1);
    line_key(line, "level");
    line_put(line, level_name[level], strlen(level_name[level]));
    lwd_log_str(line, "event", event);
}

static bool plain(const char *value)
{
    if (*value == '\0') {
        return false;
    }
    for (; *value != '\0'; value++) {
        unsigned char c = (unsigned char)*value;
        if (c <= 0x20 || c >= 0x7f || c == '"' || c == '=' || c == '\\') {
            return false;
        }
    }
    return true;
}

void lwd_log_str(lwd_log_line *line, const char *key, const char *value)
{
    static const char hex[] = "0123456789abcdef";
    const size_t before = line->len;

    if (value == NULL) {
        return;
    }
    line_key(line, key);
    if (plain(value)) {
        line_put(line, value, strlen(value));
        line->len = line->cut ? before : line->len;
        return;
    }
    line_put(line, "\"", 1);
    for (; *value != '\0'; value++) {
        unsigned char c = (unsigned char)*value;
        if (c == '"' || c == '\\') {
            char escaped[2] = {'\\', (char)c};
            line_put(line, escaped, 2);
        } else if (c < 0x20 || c >= 0x7f) {
            char escaped[4] = {'\\', 'x', hex[c >> 4], hex[c & 15]};
            line_put(line, escaped, 4);
        } else {
            line_put(line, value, 1);
        }
    }
    line_put(line, "\"", 1);
    if (line->cut) {
        line->len = before; /* never half a value */
    }
}

void lwd_log_int(lwd_log_line *line, const char *key, int64_t value)
{
    char text[24];
    char *at = text + sizeof text;
    uint64_t left = value < 0 ? 0 - (uint64_t)value : (uint64_t)value;

    do {
        *--at = (char)('0' + left % 10);
        left /= 10;
    } while (left != 0);
    if (value < 0) {
        *--at = '-';
    }
    line_key(line, key);
    line_put(line, at, (size_t)(text + sizeof text - at));
}

void lwd_log_end(lwd_log_line *line)
{
    if (!lwd_log_wanted(line->level)) {
        return;
    }
    if (line->cut) {
        memcpy(line->text + line->len, " cut=yes", 8);
        line->len += 8;
    }
    line->text[line->len++] = '\n';
    if (!ring_put(line->text, line->len)) {
        write_all(line->text, line->len);
    }
}

void lwd_log(lwd_log_level level, const char *event, const char *format, ...)
{
    lwd_log_line line;
    char text[512];
    va_list args;

    if (!lwd_log_wanted(level)) {
        return;
    }
    va_start(args, format);
    vsnprintf(text, sizeof text, format, args);
    va_end(args);
    lwd_log_begin(&line, level, event);
    lwd_log_str(&line, "msg", text);
    lwd_log_end(&line);
}
