/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Steps of building a model; each file of the room holds one. Runs at load. */
#ifndef LWI_BUILD_H
#define LWI_BUILD_H

#include "../solve/newton.h"
#include "model.h"

enum { LWI_SAMPLES = 24 };

typedef struct lwi_samples {
    size_t n;
    lwi_state state[LWI_SAMPLES];
    lwi_eval ev;          /* scratch */
    lwi_newton_work nw;
    lwi_random random;
    double *svd;          /* n_row x n_var scratch */
    double *k;            /* n_var x n_var scratch */
} lwi_samples;

/* Adds a finding to the report; `where` may be NULL. */
void lwi_find(lw_report *report, lw_severity severity, const char *code, const char *where,
              const char *expected, const char *got, const char *format, ...)
    __attribute__((format(printf, 7, 8)));
bool lwi_has_errors(const lw_report *report);

/* Bodies, connections, tools: what can be said without solving. */
void lwi_check_structure(const lw_model *model, lw_report *report);
double lwi_default_length(const lw_spec *spec);
void lwi_keep_coords(bool *keep, const lw_spec *spec);
/* Finds bodies held by two balls only and the axis they may idly spin about. */
size_t lwi_idle_spins(bool *lock, double (*axis)[3], const lw_spec *spec, const size_t *fused);
/* Couplings that repeat or contradict screw joints; needs the whole system. */
void lwi_check_couplings(lw_model *model);
int lwi_counted_mobility(const lw_spec *spec, const size_t *fused);

/* Random closed configurations reached from the reference posture; learns the generic rank on the
 * way and drops rows that never matter. */
lw_code lwi_samples_open(lwi_samples **out, lw_model *model, unsigned long long seed, lw_err *err);
void lwi_samples_close(lwi_samples *samples);
lw_code lwi_samples_walk(lwi_samples *samples, lw_model *model, lw_err *err);

/* Motion pattern, completion of the tool pose, coordinates that follow from outputs. */
void lwi_find_motion(lw_model *model, lwi_samples *samples);
void lwi_find_determined(lw_model *model);
lw_code lwi_find_inverse(lw_model *model, lw_err *err);

/* Everything that needs a work object: home, modes, checks, round trips. */
lw_code lwi_validate(lw_model *model, lwi_samples *samples, lw_err *err);

#endif
