/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Balls of tool poses for any mechanism, from its closure rows alone: sound everywhere, and small.
 * Callers: core/query/distance.c. */
#ifndef LWI_BALL_ANY_H
#define LWI_BALL_ANY_H

#include "../query/rates.h"

enum { LWI_BALL_ANY_VARS = 64 };

typedef struct lwi_ball_any {
    bool forward, inverse, limit; /* something was proved */
    bool forward_none;            /* there is no forward singularity anywhere */
    double forward_m, inverse_m, limit_m;
} lwi_ball_any;

/* After lwi_rates_at at the solution, which left state and evaluation in the work object. */
void lwi_ball_any_at(lwi_ball_any *out, const lw_model *model, const lw_spec_tool *tool,
                     const lw_solution *sol, lw_work *work);

#endif
