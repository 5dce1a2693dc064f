/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Points of a slice in long doubles. The trace test asks whether a sum over many points is linear;
 * points far out spoil it by their rounding, as if one were missing. A few Newton steps with wide
 * residuals, and double derivatives, mend that. Only while sets are made. */
#ifndef LWI_WIDE_H
#define LWI_WIDE_H

#include "track.h"

typedef long double complex lwi_wx;
LWI_EVAL_TYPES(lwi_w, lwi_wx);

typedef struct lwi_wide {
    lwi_w_point at;
    lwi_w_eval ev;
    lwi_wx quat[LWI_MAX_QUATS][4];
    lwi_wx s;
    lwi_wx value[LWI_HOM_OBSERVE]; /* observed coordinates, as lwi_cobserve */
} lwi_wide;

/* The point of slice h->slice[1] next to `at`, which lies there as well as doubles can tell: out->s
 * and out->value. False if the steps do not become small. */
bool lwi_wide_sharpen(lwi_wide *out, const lwi_homotopy *h, const lwi_hpoint *at,
                      lwi_track_work *w);

#endif
