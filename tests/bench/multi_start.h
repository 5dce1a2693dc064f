/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A multi-start local solver for platforms on rods, written in plain coordinates over GSL's
 * multiroots and apart from the core: for bench_solutions, beside the list of all solutions. */
#ifndef LWT_MULTI_START_H
#define LWT_MULTI_START_H

#include <stdbool.h>
#include <stddef.h>

/* Rods from ground points to points of one platform. `planar`: three rods, all z are zero. */
typedef struct lwt_rods {
    bool planar;
    size_t n;           /* 6, or 3 where planar */
    double base[6][3];  /* m */
    double plate[6][3]; /* m, from the centre of the platform's points */
    double length_m[6];
} lwt_rods;

typedef enum lwt_local { LWT_HYBRIDSJ, LWT_GNEWTON } lwt_local; /* GSL's names of the methods */

typedef struct lwt_starts {
    size_t starts;
    size_t roots;     /* starts that reached a root */
    size_t seen;      /* different members of `known` among the roots */
    size_t strangers; /* roots that are not in `known` */
} lwt_starts;

/* Starts from uniform random poses until `enough` members of `known` were seen or `most` starts
 * were made. known[k][i] is the end of rod i in solution k (m). The box of the starts follows from
 * the rod lengths alone: no platform centre can lie outside. */
lwt_starts lwt_multi_start(const lwt_rods *rods, lwt_local method, const double known[][6][3],
                           size_t n_known, size_t enough, size_t most,
                           unsigned long long seed);

#endif
