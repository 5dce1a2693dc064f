/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solution sets: all isolated solutions of a parametrised closure system at one generic complex
 * parameter point, found by monodromy and closed by a trace test. Deterministic in the seed;
 * work is counted in paths, never in time. */
#ifndef LWI_FIBRE_H
#define LWI_FIBRE_H

#include "track.h"

#include <leeway/err.h>

#include <stdatomic.h>

typedef struct lwi_fibre {
    lwi_hom hom;
    lwi_cx p[LWI_HOM_PARAMS];  /* the generic point, turns as angles */
    size_t n_solution;
    size_t pack;               /* numbers per solution */
    lwi_cx *solution;          /* n_solution * pack */
    bool trace_closed;
    size_t open;               /* dimension of solutions that are not isolated, 0 = none was met */
    size_t degree;             /* points of the witness set behind the trace test */
    unsigned long paths, lost; /* work of preparing */
    double trace_error;
} lwi_fibre;

typedef struct lwi_fibre_limits {
    unsigned long paths; /* most paths tracked while preparing */
    size_t solutions;    /* most solutions kept */
    const atomic_bool *abort; /* NULL, or raised by the caller: LW_E_ABORTED */
} lwi_fibre_limits;

/* NULL out->solution and LW_E_MODEL if the system is not served (screws, too large,
 * not square in rank). */
lw_code lwi_fibre_find(lwi_fibre *out, const lwi_system *sys, size_t rank, unsigned long long seed,
                       const lwi_fibre_limits *limits, lw_err *err);
void lwi_fibre_clear(lwi_fibre *fibre);

#endif
