/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All solutions, timed: every posture of a general six-strut platform, of a planar one and of a
 * general six-revolute arm over many random targets, the preparation of each, Newton's method from
 * random starts until 95 % of the real solutions were seen, and two independent solvers in the same
 * run: GSL's multiroots from random starts, every root of which must be among ours, and phc, whose
 * real solutions must be ours. One CSV line a case: least, median, 99th percentile. LWT_SHARE
 * scales the number of targets (100,000 at 100). */
#define _POSIX_C_SOURCE 200809L

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "bench.h"
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"
#include "lwt_phc.h"
#include "lwt_subjects.h"
#include "multi_start.h"

enum { TARGETS = 1000, SEED = 3, MOST_REAL = 64, MOST_STARTS = 20000, MOST_BESIDE = 25 };

typedef struct tally {
    size_t asked, paths, unsettled, odd;
} tally;

/* Processor time: other work on the machine does not count. */
static double now_us(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
    return 1e6 * (double)t.tv_sec + 1e-3 * (double)t.tv_nsec;
}

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a;
    double y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Prints a line; 1 if the median or the 99th percentile is above its bar (ms, 0 = none). */
static int report(const char *name, double *us, size_t n, double median_ms, double p99_ms)
{
    qsort(us, n, sizeof *us, ascending);
    double median = 1e-3 * us[n / 2];
    double p99 = 1e-3 * us[n - 1 - n / 100];
    bool over = (median_ms > 0.0 && median > median_ms) || (p99_ms > 0.0 && p99 > p99_ms);
    (void)printf("%s,%zu,%.3f,%.3f,%.3f,%.3f,%.3f%s\n", name, n, 1e-3 * us[0], median, p99,
                 median_ms, p99_ms, over ? ",OVER" : "");
    (void)fflush(stdout);
    return over;
}

static lwt_machine *prepared(const char *name, double *seconds)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            lwt_machine *m = lwt_subjects[i].make();
            double t = now_us();
            lwt_machine_load_prepared(m, SEED, LWT_PATHS);
            *seconds = 1e-6 * (now_us() - t);
            return m;
        }
    }
    (void)fprintf(stderr, "bench_solutions: no subject is called %s\n", name);
    exit(1);
}

/* The rods of a platform, apart from the core: its points from their centre at reference. */
static lwt_rods rods_of(const lwt_machine *m, const double *drive)
{
    lwt_rods out = {.planar = m->spec->n_drive == 3, .n = m->spec->n_drive};
    double centre[3] = {0, 0, 0};
    for (size_t i = 0; i < out.n; i++) {
        for (size_t c = 0; c < 3; c++) {
            centre[c] += m->spec->rod[i].end_m[1][c] / (double)out.n;
        }
    }
    for (size_t i = 0; i < out.n; i++) {
        double d[3];
        for (size_t c = 0; c < 3; c++) {
            out.base[i][c] = m->spec->rod[i].end_m[0][c];
            out.plate[i][c] = m->spec->rod[i].end_m[1][c] - centre[c];
            d[c] = m->spec->rod[i].end_m[1][c] - m->spec->rod[i].end_m[0][c];
        }
        out.length_m[i] = lwt_norm(d) + drive[i];
    }
    return out;
}

/* All solutions and GSL's multi-start to 95 % of the real ones, for targets within `span` of
 * `middle` (NULL for the reference), each with its own random numbers. The multi-start is told how
 * many there are, which it could not know by itself; one that gives up counts with the time it
 * took. Returns 2 if it finds a root that is not ours. */
static int beside_starts(const char *name, lwt_machine *m, const double *middle, double span,
                         size_t n, lwt_local method)
{
    double ours[MOST_BESIDE];
    double theirs[MOST_BESIDE];
    double ratio[MOST_BESIDE];
    double starts[MOST_BESIDE];
    static double known[MOST_REAL][6][3];
    size_t real = 0;
    size_t gave_up = 0;
    size_t roots = 0;
    size_t strangers = 0;
    lwt_random rng;
    lwt_random_init(&rng, 100);
    for (size_t k = 0; k < n; k++) {
        double drive[6];
        for (size_t d = 0; d < m->spec->n_drive; d++) {
            drive[d] = (middle != NULL ? middle[d] : 0.0) + lwt_random_in(&rng, -span, span);
        }
        double t = now_us();
        const lw_forward_answer *a = lwt_forward_all(m, drive);
        ours[k] = now_us() - t;
        lwt_rods rods = rods_of(m, drive);
        size_t count = a->n_solution < MOST_REAL ? a->n_solution : MOST_REAL;
        for (size_t s = 0; s < count; s++) {
            for (size_t i = 0; i < rods.n; i++) {
                const lw_spec_rod *rod = &m->spec->rod[i];
                lwt_frame_point(known[s][i], &a->solution[s].config.body[rod->body[1]],
                                rod->end_m[1]);
            }
        }
        size_t enough = (size_t)ceil(0.95 * (double)count);
        t = now_us();
        lwt_starts r = lwt_multi_start(&rods, method, (const double(*)[6][3])known, count, enough,
                                       MOST_STARTS, 77 + k);
        theirs[k] = now_us() - t;
        ratio[k] = theirs[k] / ours[k];
        starts[k] = (double)r.starts;
        real += count;
        gave_up += r.seen < enough;
        roots += r.roots;
        strangers += r.strangers;
    }
    qsort(ours, n, sizeof *ours, ascending);
    qsort(theirs, n, sizeof *theirs, ascending);
    qsort(ratio, n, sizeof *ratio, ascending);
    qsort(starts, n, sizeof *starts, ascending);
    (void)printf("# %s: all solutions (median) %.3f ms; multi-start by GSL %s to 95 %% of %.1f "
                 "real ones: %.3f ms, %.0f starts; ratio %.2f, least %.2f; %zu targets, "
                 "%zu given up, %zu roots, %zu not ours\n",
                 name, 1e-3 * ours[n / 2], method == LWT_HYBRIDSJ ? "hybridsj" : "gnewton",
                 (double)real / (double)n, 1e-3 * theirs[n / 2], starts[n / 2], ratio[n / 2],
                 ratio[0], n, gave_up, roots, strangers);
    (void)fflush(stdout);
    return strangers > 0 ? 2 : 0;
}

/* Random readings (or, for an arm, the pose of random readings) within `span`, all solutions. */
static int time_all(const char *name, double span, size_t n, double median_ms, double p99_ms,
                    tally *sum)
{
    double seconds = 0.0;
    lwt_machine *m = prepared(name, &seconds);
    bool inverse = lwt_inverse_set(m)->present;
    const lw_set_info *set = inverse ? lwt_inverse_set(m) : lwt_forward_set(m);
    double *us = calloc(n, sizeof *us);
    lwt_random rng;
    lwt_random_init(&rng, 100);
    for (size_t k = 0; k < n; k++) {
        double drive[LW_MAX_DRIVES];
        lw_found found;
        for (size_t d = 0; d < m->spec->n_drive; d++) {
            drive[d] = lwt_random_in(&rng, -span, span);
        }
        if (inverse) {
            lw_frame pose = lwt_forward(m, drive, NULL)->solution[0].tool;
            double t = now_us();
            found = lwt_inverse(m, &pose, NULL, NULL, NULL)->found;
            us[k] = now_us() - t;
        } else {
            double t = now_us();
            found = lwt_forward_all(m, drive)->found;
            us[k] = now_us() - t;
        }
        sum->asked++;
        sum->paths += set->solutions;
        sum->unsettled += (size_t)found.not_converged;
        sum->odd += (found.real ^ found.complex_count) & 1;
    }
    char line[96];
    (void)snprintf(line, sizeof line, "%s all %zu", name, set->solutions);
    int over = report(line, us, n, median_ms, p99_ms);
    (void)printf("%s prepare,1,%.0f,%.0f,%.0f,5000,0%s%s\n", name, 1e3 * seconds, 1e3 * seconds,
                 1e3 * seconds, seconds > 5.0 ? ",OVER" : "", set->closed ? "" : ",NOT CLOSED");
    over |= seconds > 5.0 || !set->closed;
    if (!inverse) { /* the two platforms */
        size_t few = n < MOST_BESIDE ? n : MOST_BESIDE;
        over |= beside_starts(name, m, NULL, span, few, LWT_HYBRIDSJ);
        over |= beside_starts(name, m, NULL, span, few, LWT_GNEWTON);
    }
    free(us);
    lwt_machine_free(m);
    return over;
}

/* Newton's method from random poses, by the question with `near`, until 95 % of the real solutions
 * were seen. */
static double time_starts(lwt_machine *m, const double *drive, const lwt_copy *all, size_t n)
{
    bool seen[64] = {false};
    size_t count = 0;
    lwt_random rng;
    lwt_random_init(&rng, 77);
    size_t enough = (size_t)ceil(0.95 * (double)n);
    double t = now_us();
    for (int start = 0; start < 20000 && count < enough; start++) {
        double quat[4];
        double pos[3];
        lwt_random_quaternion(&rng, quat);
        for (size_t i = 0; i < 3; i++) {
            pos[i] = lwt_random_in(&rng, -1.5, 1.5);
        }
        lw_frame at = lwt_frame_quat(pos, quat);
        lw_forward_ask ask = {
            .readings = lwt_by_drives(m, drive, lwt_by_pose(m, &at, NULL, NULL, NULL))};
        const lw_forward_answer *a = NULL;
        if (lw_forward(&a, m->model, &ask, m->work, &m->err) != LW_OK || a->n_solution == 0) {
            continue;
        }
        for (size_t i = 0; i < n; i++) {
            if (!seen[i] && lwt_frame_distance(&all[i].tool, &a->solution[0].tool) < 1e-7 &&
                lwt_frame_angle(&all[i].tool, &a->solution[0].tool) < 1e-7) {
                seen[i] = true;
                count++;
                break;
            }
        }
    }
    return count < enough ? INFINITY : now_us() - t;
}

/* Ours, starts and phc on one platform. Returns 1 where the real solutions differ. */
static int compare(const char *name, const double *base, const double *plate, const double *length,
                   unsigned seed)
{
    lw_frame ref = lwt_frame_zyx((const double[3]){0.4, 0.3, 0.8}, 0.3, -0.2, 0.4);
    lwt_machine *m = lwt_kit_struts(name, 6, base, plate, &ref);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    double drive[6];
    lwt_readings_of_lengths(drive, m, length);
    double best = INFINITY;
    const lw_forward_answer *a = NULL;
    for (int k = 0; k < 20; k++) {
        double t = now_us();
        a = lwt_forward_all(m, drive);
        best = fmin(best, now_us() - t);
    }
    size_t n = a->n_solution;
    int finite = a->found.complex_count;
    lwt_copy *all = calloc(64, sizeof *all);
    for (size_t i = 0; i < n && i < 64; i++) {
        lwt_keep(&all[i], m, &a->solution[i]);
    }
    double starts = time_starts(m, drive, all, n);
    lwt_phc phc;
    bool there = lwt_phc_struts(&phc, base, plate, length, seed);
    size_t common = 0;
    for (int k = 0; there && k < phc.n; k++) {
        for (size_t i = 0; i < n; i++) {
            common += lwt_frame_distance(&all[i].tool, &phc.real[k]) < 1e-6 &&
                      lwt_frame_angle(&all[i].tool, &phc.real[k]) < 1e-6;
        }
    }
    (void)printf("# %s: ours %d finite, %zu real in %.3f ms; random starts to 95 %%: %.3f ms "
                 "(%.0f times)\n",
                 name, finite, n, 1e-3 * best, 1e-3 * starts, starts / best);
    if (!there) {
        (void)printf("# %s: phc is not here or its answer cannot be read\n", name);
    } else {
        (void)printf("# %s: phc %d finite, %d real in %.3f s (%.0f times), %zu real ones in "
                     "common\n",
                     name, phc.finite, phc.n, phc.seconds, 1e6 * phc.seconds / best, common);
    }
    (void)fflush(stdout);
    int odd = beside_starts(name, m, drive, 0.0, MOST_BESIDE, LWT_HYBRIDSJ) |
              beside_starts(name, m, drive, 0.0, MOST_BESIDE, LWT_GNEWTON);
    bool same = !there || (common == n && (size_t)phc.n == n);
    free(all);
    lwt_machine_free(m);
    return !same || odd != 0;
}

int main(void)
{
    lw_init();
    const char *rounds = getenv("LW_BENCH_ROUNDS");
    bool quick = rounds != NULL && strtod(rounds, NULL) < 10.0;
    const char *check = getenv("LW_BENCH_CHECK");
    size_t n = quick ? 5 : (size_t)lwt_share(TARGETS);
    int over = 0;
    tally sum = {0, 0, 0, 0};
    (void)printf("case,targets,min_ms,median_ms,p99_ms,bar_median_ms,bar_p99_ms\n");
    over |= time_all("six-struts", 0.15, n, 6.0, 15.0, &sum);
    over |= time_all("planar-struts", 0.2, n, 0.5, 0.0, &sum);
    over |= time_all("skew-arm", 2.5, n, 10.0, 0.0, &sum);
    (void)printf("# %zu targets, %zu paths, %zu unsettled, %zu with odd parity\n", sum.asked,
                 sum.paths, sum.unsettled, sum.odd);
    if (!quick) {
        static const char *const file[] = {"mourrain-1993/cases.json",
                                           "dietmaier-1998/cases.json"};
        for (unsigned k = 0; k < 2; k++) {
            double base[18];
            double plate[18];
            double length[6];
            struct cJSON *set = lwt_case_file(file[k]);
            (void)lwt_numbers(set, "base", base, 18);
            (void)lwt_numbers(set, "platform", plate, 18);
            (void)lwt_numbers(set, "length", length, 6);
            over |= compare(file[k], base, plate, length, 7 + k) * 2;
        }
    }
    /* Two solvers that disagree are always a fault, figures above a bar where checked. */
    return (over & 2) != 0 || (check != NULL && over != 0);
}
