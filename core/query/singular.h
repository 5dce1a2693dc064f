/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Singular values with what belongs to them: motions as screws, joints and limbs that move, and how
 * the values change along motions. Called by margin.c. */
#ifndef LWI_SINGULAR_H
#define LWI_SINGULAR_H

#include "rates.h"

/* Velocity of the point of a body that passes the origin of the fixed frame, and turn. */
typedef struct lwi_twist {
    double v[3];
    double w[3];
} lwi_twist;

/* A rate matrix decomposed: scaled A K or T K = U S V^T. */
typedef struct lwi_factors {
    size_t rows, cols;
    size_t rank, rank_generic;
    double sv[LWI_MAX_VARS]; /* cols of them; zeros where rows are fewer */
    double *u;               /* rows x cols */
    double *v;               /* cols x cols */
    size_t n_left;           /* rows - rank, the left null space: */
    double left[LW_MAX_DRIVES][LW_MAX_DRIVES];
} lwi_factors;

typedef enum lwi_of { LWI_OF_DRIVES, LWI_OF_TOOL } lwi_of;

typedef struct lwi_singular_work {
    lwi_factors of[2]; /* by lwi_of */
    lwi_twist y[LWI_MAX_NODES];  /* twists of the nodes along the motion looked at, */
    lwi_twist x[LWI_MAX_NODES];  /* along the motion that is to leave it, */
    lwi_twist dy[LWI_MAX_NODES]; /* and the change of y along x */
    double multiplier[LWI_MAX_ROWS];
    double motion[LWI_MAX_VARS];
    double row[LWI_MAX_VARS];
    double *store;
} lwi_singular_work;

/* Twists of all nodes for the scaled tangent step y. */
void lwi_node_twists(lwi_twist *out, const lwi_system *sys, const lwi_eval *ev, const double *y);

/* The same questions about one posture. */
typedef struct lwi_singular_place {
    const lw_model *model;
    const lw_spec_tool *tool;
    const lw_solution *solution;
    const lwi_rates *rates;
    lw_work *work;
} lwi_singular_place;

/* Derivative of u . (scaled rates) . v along each of the r->m motions of K, where v is a motion
 * (m entries) and u weighs the drives or the outputs: for a pair of singular vectors the derivative
 * of the singular value. The closure rows' own change is in it. False where it is not known. */
bool lwi_singular_slope(double *out, const lwi_singular_place *at, lwi_of of, const double *u,
                        const double *v);

/* The direction to leave by, from work's factors. */
void lwi_leave_by(lw_leave *out, const lwi_singular_place *at, lwi_of of);

/* Force and moment about the tool point that belong to weights of the scaled outputs. */
void lwi_output_wrench(double force[3], double moment[3], const lwi_singular_place *at,
                       const double *u);

/* f->u holds the matrix and becomes U. */
void lwi_decompose(lwi_factors *f, size_t rows, size_t cols, lw_work *work);

/* All of it, from the factors in work. */
void lwi_singular_at(lw_singular_answer *out, const lw_margin_answer *margin,
                     const lwi_singular_place *at);

lw_code lwi_singular_work_open(lwi_singular_work **out, size_t n_var, lw_err *err);
void lwi_singular_work_close(lwi_singular_work *work);

#endif
