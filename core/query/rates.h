/* SPDX-License-Identifier: GPL-3.0-or-later */
/* First-order facts at a configuration. K spans the null space of the closure rows (orthonormal
 * in scaled coordinates); A K are drive rates, T K output rates, W K tool twists, all per unit
 * of K. */
#ifndef LWI_RATES_H
#define LWI_RATES_H

#include "finish.h"

typedef struct lwi_rates {
    size_t m;            /* mobility: columns */
    size_t n_drive;
    size_t n_output;
    double closure_ratio;/* smallest kept pivot over the largest */
    /* in work: k (n_var x m), ak (n_drive x m, m or rad), tk (n_output x m, m or rad),
     * twist (6 x m: velocity of the reference point in m, turn in rad; fixed frame) */
} lwi_rates;

/* At the configuration of a solution; point_m is the reference point in the fixed frame. Leaves
 * work->state and work->ev at the configuration. */
void lwi_rates_at(lwi_rates *out, const lw_model *model, const lw_spec_tool *tool,
                  const lw_config *config, const double point_m[3], lw_work *work);

/* After lwi_rates_at where closure rows lost rank: the same with the whole null space of the
 * posture, which is wider than the mobility; r->m becomes its dimension. */
void lwi_rates_widen(lwi_rates *rates, const lw_model *model, const lw_spec_tool *tool,
                     const double point_m[3], double threshold, lw_work *work);

/* The turn of the tool body that changes yaw, pitch or roll alone, at an orientation. */
void lwi_output_axis(double rate[3], const double rot[9], lw_output_kind kind);

/* Scales rows of drives (lengths over the characteristic length) into out, n_drive x m. */
void lwi_scaled_drives(double *out, const lw_model *model, const lwi_rates *rates,
                       const lw_work *work);
/* What lwi_scaled_outputs multiplies an output's row with. */
double lwi_output_scale(const lw_model *model, size_t output);
void lwi_scaled_outputs(double *out, const lw_model *model, const lwi_rates *rates,
                        const lw_work *work);

/* x (rows n_out x n_in) = B A^+ where A (n_in x m) has full column rank: least squares with weights
 * 1/weight[i] on the rows of A. False if A loses rank. Scratch from work. */
bool lwi_solve_through(double *out, const double *a, size_t n_in, const double *b, size_t n_out,
                       size_t m, const double *weight, lw_work *work);
/* The same in steps. First the pivoted QR of the weighted A, kept in work->matrix[0], vector[0] and
 * index; returned is its last diagonal entry over its first, 0 where columns are missing. Then A^+
 * (m x n_in), which stands behind it in work->matrix[0] until that is used again; vector[1] is
 * scratch. Then B A^+ for one B after another. */
double lwi_factor(const double *a, size_t n_in, size_t m, const double *weight, lw_work *work);
const double *lwi_invert(size_t n_in, size_t m, const double *weight, lw_work *work);
void lwi_product(double *out, const double *b, size_t n_out, size_t m, const double *p,
                 size_t n_in);

#endif
