/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Timing of one call: warm-up, rounds of many calls, least, median and greatest microseconds a
 * call, one CSV line a case under a header that says how it was built and where it ran.
 *
 *   int main(void)
 *   {
 *       lwt_bench bench = lwt_bench_begin("inverse");
 *       lwt_bench_case(&bench, "tilt-table inverse", ask_inverse, &setup, 2.0);
 *       return lwt_bench_end(&bench);
 *   }
 *
 * Set up outside the call; the call does the thing once and hands what it computed to
 * lwt_bench_keep. Calls are also counted for allocations from our own code: a core question must
 * show 0. Environment: LW_BENCH_ROUNDS (default 25); LW_BENCH_ROUND_US (least length of a round,
 * default 2000); LW_BENCH_CHECK=1 makes a least time above its bar, or an allocation in a case with
 * a bar, an exit status of 1. On a shared machine only the least time is worth quoting. */
#ifndef LWT_BENCH_H
#define LWT_BENCH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

enum { LWT_BENCH_ROUNDS_MAX = 1000 };

typedef struct lwt_bench {
    const char *title;
    size_t rounds;
    double round_us;
    bool check;
    size_t cases;
    size_t over; /* cases above their bar */
} lwt_bench;

typedef struct lwt_bench_times {
    double min_us;
    double median_us;
    double max_us;
    size_t allocations; /* a call */
} lwt_bench_times;

/* One call of the thing measured. `turn` counts up from 0, so that a call may walk over inputs. */
typedef void (*lwt_bench_call)(void *context, size_t turn);

/* Prints the header. */
lwt_bench lwt_bench_begin(const char *title);
/* Measures and prints one line; bar_us 0 = no bar. Also returns the times, for comparisons. */
lwt_bench_times lwt_bench_case(lwt_bench *bench, const char *name, lwt_bench_call call,
                               void *context, double bar_us);
/* The same for two cases, their rounds taken in turn, so that a machine that changes its pace
 * slows both; prints a third line with the ratio first / second of the least times. */
double lwt_bench_pair(lwt_bench *bench, const char *first_name, lwt_bench_call first,
                      void *first_context, const char *second_name, lwt_bench_call second,
                      void *second_context, double ratio_bar);
/* Exit status for main; 1 if nothing was measured. */
int lwt_bench_end(const lwt_bench *bench);

/* Keeps the compiler from leaving out a computation whose value nobody reads. */
static inline void lwt_bench_keep(double value)
{
    __asm__ volatile("" : : "g"(value) : "memory");
}

#ifdef __cplusplus
}
#endif

#endif
