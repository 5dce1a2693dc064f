/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The timing harness; see bench.h. */
#define _POSIX_C_SOURCE 200809L /* clock_gettime */

#include "bench.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "lwt.h"

#ifndef LWT_BENCH_FLAGS
#define LWT_BENCH_FLAGS "unknown"
#endif
#ifndef LWT_BENCH_COMMIT
#define LWT_BENCH_COMMIT "unknown"
#endif

typedef struct subject {
    lwt_bench_call call;
    void *context;
    size_t turn;
    size_t per_round;
    size_t allocations;
    double us[LWT_BENCH_ROUNDS_MAX];
} subject;

static double now_us(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_MONOTONIC, &t);
    return 1e6 * (double)t.tv_sec + 1e-3 * (double)t.tv_nsec;
}

/* A number from the environment, or the default where it is missing or out of range. */
static double setting(const char *name, double fallback, double low, double high)
{
    const char *text = getenv(name);
    if (text == NULL) {
        return fallback;
    }
    char *end = NULL;
    double value = strtod(text, &end);
    if (end == text || *end != '\0' || !(value >= low && value <= high)) {
        (void)fprintf(stderr, "%s must be a number from %g to %g, got \"%s\"; taking %g\n", name,
                      low, high, text, fallback);
        return fallback;
    }
    return value;
}

/* The processor's name as the kernel tells it, without commas that would upset the CSV. */
static void processor(char *out, size_t size)
{
    (void)snprintf(out, size, "unknown");
    FILE *stream = fopen("/proc/cpuinfo", "r");
    if (stream == NULL) {
        return;
    }
    char line[256];
    while (fgets(line, sizeof line, stream) != NULL) {
        const char *colon = strchr(line, ':');
        if (strncmp(line, "model name", 10) == 0 && colon != NULL) {
            size_t len = strcspn(colon + 2, ",\n");
            (void)snprintf(out, size, "%.*s", (int)len, colon + 2);
            break;
        }
    }
    (void)fclose(stream);
}

lwt_bench lwt_bench_begin(const char *title)
{
    lwt_bench bench = {.title = title};
    bench.rounds = (size_t)setting("LW_BENCH_ROUNDS", 25.0, 1.0, (double)LWT_BENCH_ROUNDS_MAX);
    bench.round_us = setting("LW_BENCH_ROUND_US", 2000.0, 1.0, 1e7);
    bench.check = setting("LW_BENCH_CHECK", 0.0, 0.0, 1.0) > 0.5;
    char cpu[128];
    processor(cpu, sizeof cpu);
    (void)printf("# %s\n# compiler: %s\n# flags: %s\n# cpu: %s\n# commit: %s\n", title, __VERSION__,
                 LWT_BENCH_FLAGS, cpu, LWT_BENCH_COMMIT);
    (void)printf("case,rounds,calls_per_round,min_us,median_us,max_us,allocations,bar_us,within\n");
    return bench;
}

static double one_round(subject *it, size_t calls)
{
    double began = now_us();
    for (size_t i = 0; i < calls; i++) {
        it->call(it->context, it->turn++);
    }
    return now_us() - began;
}

/* Finds how many calls make a round of the wanted length; this is the warm-up too. */
static void warm_up(subject *it, double round_us)
{
    it->per_round = 1;
    (void)one_round(it, 1);
    while (one_round(it, it->per_round) < round_us && it->per_round < (size_t)1 << 30) {
        it->per_round *= 2;
    }
    /* Allocations are counted in calls of their own, outside the clock. */
    enum { COUNTED = 16 };
    lwt_alloc_reset();
    (void)one_round(it, COUNTED);
    it->allocations = (lwt_alloc_calls() + COUNTED - 1) / COUNTED;
    it->turn = 0;
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a;
    double y = *(const double *)b;
    return (x > y) - (x < y);
}

static lwt_bench_times judge(lwt_bench *bench, const char *name, subject *it, double bar_us)
{
    size_t n = bench->rounds;
    qsort(it->us, n, sizeof it->us[0], by_size);
    lwt_bench_times times = {
        .min_us = it->us[0],
        .median_us = n % 2 == 1 ? it->us[n / 2] : 0.5 * (it->us[n / 2 - 1] + it->us[n / 2]),
        .max_us = it->us[n - 1],
        .allocations = it->allocations,
    };
    bool barred = bar_us > 0.0;
    bool within = !barred || (times.min_us <= bar_us && times.allocations == 0);
    bench->cases++;
    bench->over += within ? 0u : 1u;
    (void)printf("%s,%zu,%zu,%.4f,%.4f,%.4f,%zu,", name, n, it->per_round, times.min_us,
                 times.median_us, times.max_us, times.allocations);
    if (barred) {
        (void)printf("%g,%s\n", bar_us, within ? "yes" : "no");
    } else {
        (void)printf(",\n");
    }
    (void)fflush(stdout);
    return times;
}

static subject *new_subject(lwt_bench_call call, void *context)
{
    subject *it = malloc(sizeof *it);
    if (it == NULL) {
        (void)fprintf(stderr, "out of memory\n");
        abort();
    }
    memset(it, 0, sizeof *it);
    it->call = call;
    it->context = context;
    return it;
}

static void take_round(subject *it, size_t round)
{
    it->us[round] = one_round(it, it->per_round) / (double)it->per_round;
}

lwt_bench_times lwt_bench_case(lwt_bench *bench, const char *name, lwt_bench_call call,
                               void *context, double bar_us)
{
    subject *it = new_subject(call, context);
    warm_up(it, bench->round_us);
    for (size_t r = 0; r < bench->rounds; r++) {
        take_round(it, r);
    }
    lwt_bench_times times = judge(bench, name, it, bar_us);
    free(it);
    return times;
}

double lwt_bench_pair(lwt_bench *bench, const char *first_name, lwt_bench_call first,
                      void *first_context, const char *second_name, lwt_bench_call second,
                      void *second_context, double ratio_bar)
{
    subject *a = new_subject(first, first_context);
    subject *b = new_subject(second, second_context);
    warm_up(a, bench->round_us);
    warm_up(b, bench->round_us);
    for (size_t r = 0; r < bench->rounds; r++) {
        take_round(a, r);
        take_round(b, r);
    }
    double of_a = judge(bench, first_name, a, 0.0).min_us;
    double of_b = judge(bench, second_name, b, 0.0).min_us;
    double ratio = of_a / of_b;
    bool within = !(ratio_bar > 0.0) || ratio <= ratio_bar;
    bench->over += within ? 0u : 1u;
    (void)printf("# %s / %s: ratio of the least times %.3f", first_name, second_name, ratio);
    if (ratio_bar > 0.0) {
        (void)printf(", bar %g, %s", ratio_bar, within ? "within" : "above");
    }
    (void)printf("\n");
    free(a);
    free(b);
    return ratio;
}

int lwt_bench_end(const lwt_bench *bench)
{
    if (bench->cases == 0) {
        (void)fprintf(stderr, "%s: nothing was measured\n", bench->title);
        return 1;
    }
    if (bench->over > 0) {
        (void)printf("# %zu of %zu above the bar%s\n", bench->over, bench->cases,
                     bench->check ? "" : " (told only; LW_BENCH_CHECK=1 makes it count)");
    }
    return bench->check && bench->over > 0 ? 1 : 0;
}
