/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the harness itself costs, to be held against the other figures: an empty call, one sine and
 * cosine, one allocation (which must be counted). */
#include "bench.h"

#include <math.h>
#include <stdlib.h>

static void empty(void *context, size_t turn)
{
    (void)context;
    (void)turn;
}

static void sine_and_cosine(void *context, size_t turn)
{
    double angle_rad = *(const double *)context + 1e-3 * (double)(turn % 1000);
    lwt_bench_keep(sin(angle_rad));
    lwt_bench_keep(cos(angle_rad));
}

static void one_allocation(void *context, size_t turn)
{
    (void)context;
    char *room = malloc(64 + turn % 2);
    lwt_bench_keep(room == NULL ? 0.0 : 1.0);
    free(room);
}

int main(void)
{
    lwt_bench bench = lwt_bench_begin("floor: what the harness itself costs");
    double angle_rad = 0.1;
    (void)lwt_bench_case(&bench, "empty call", empty, NULL, 0.0);
    (void)lwt_bench_pair(&bench, "sine and cosine", sine_and_cosine, &angle_rad, "empty call again",
                         empty, NULL, 0.0);
    lwt_bench_times times = lwt_bench_case(&bench, "one allocation", one_allocation, NULL, 0.0);
    return times.allocations == 1 ? lwt_bench_end(&bench) : 1;
}
