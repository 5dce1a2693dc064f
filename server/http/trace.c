/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Request ids, see trace.h. Ids need to be different, not secret: a random start and a counter. */
#include "trace.h"

#include <pthread.h>
#include <stdatomic.h>
#include <stdint.h>
#include <string.h>
#include <sys/random.h>
#include <time.h>

static pthread_once_t once = PTHREAD_ONCE_INIT;
static uint64_t seed[2];
static _Atomic uint64_t counter;

static void seed_make(void)
{
    if (getrandom(seed, sizeof seed, 0) != (ssize_t)sizeof seed) {
        struct timespec now;
        clock_gettime(CLOCK_REALTIME, &now);
        seed[0] = (uint64_t)now.tv_sec;
        seed[1] = (uint64_t)now.tv_nsec;
    }
}

static bool lower_hex(char c)
{
    return (c >= '0' && c <= '9') || (c >= 'a' && c <= 'f');
}

static bool all_hex(const char *text, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        if (!lower_hex(text[i])) {
            return false;
        }
    }
    return true;
}

static bool all_zero(const char *text, size_t n)
{
    return strspn(text, "0") >= n;
}

/* version "-" trace-id "-" parent-id "-" flags: 2, 32, 16 and 2 digits. A later version may go on
 * behind another "-". */
bool lwd_trace_parse(char out[LWD_ID_SIZE], const char *traceparent)
{
    size_t len = strlen(traceparent);

    if (len < 55 || !all_hex(traceparent, 2) || memcmp(traceparent, "ff", 2) == 0 ||
        traceparent[2] != '-' || !all_hex(traceparent + 3, 32) || all_zero(traceparent + 3, 32) ||
        traceparent[35] != '-' || !all_hex(traceparent + 36, 16) ||
        all_zero(traceparent + 36, 16) || traceparent[52] != '-' || !all_hex(traceparent + 53, 2)) {
        return false;
    }
    if (len > 55 && (memcmp(traceparent, "00", 2) == 0 || traceparent[55] != '-')) {
        return false;
    }
    memcpy(out, traceparent + 3, 32);
    out[32] = '\0';
    return true;
}

/* A bijection on 64 bits (the finalizer of a multiply-xorshift generator): different counters give
 * different ids. */
static uint64_t mix(uint64_t x)
{
    x = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9u;
    x = (x ^ (x >> 27)) * 0x94d049bb133111ebu;
    return x ^ (x >> 31);
}

void lwd_trace_new(char out[LWD_ID_SIZE])
{
    static const char hex[] = "0123456789abcdef";
    uint64_t half[2];

    pthread_once(&once, seed_make);
    half[0] = seed[0];
    half[1] = mix(seed[1] + atomic_fetch_add_explicit(&counter, 1, memory_order_relaxed));
    for (int i = 0; i < 32; i++) {
        out[i] = hex[(half[i / 16] >> (60 - 4 * (i % 16))) & 15];
    }
    out[32] = '\0';
}
