/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Local solving on the configuration manifold: closure rows hold exactly, goals (readings, pose
 * components, joint values) are met by weighted least squares within what the closure leaves.
 * Gauss-Newton in the null space, Cayley steps. */
#ifndef LWI_NEWTON_H
#define LWI_NEWTON_H

#include "../model/model.h"

typedef enum lwi_goal_kind {
    LWI_GOAL_TERMS,     /* sum of coordinates = value */
    LWI_GOAL_POINT,     /* component `axis` of a body point = value */
    LWI_GOAL_ROT,       /* component `axis` of the rotation that is left to `rot` = 0 */
    LWI_GOAL_ZYX,       /* yaw, pitch or roll (axis 0, 1, 2) of the tool = value */
    LWI_GOAL_DIRECTION, /* the tool's z axis along `dir`: component `axis` (0, 1) of what is left */
    LWI_GOAL_BALL       /* component of a spherical joint's rotation left to `quat` */
} lwi_goal_kind;

typedef struct lwi_goal {
    lwi_goal_kind kind;
    size_t axis;
    size_t body;
    double point_m[3];  /* reference posture */
    double rot0[9];     /* tool orientation in the reference posture */
    double rot[9];      /* wanted orientation of the body's displacement */
    double dir[3];
    double quat[4];
    size_t ball;        /* BALL: number of the spherical joint */
    size_t n_term;
    lw_term term[LW_MAX_TERMS];
    double value;
    double weight;      /* 1 / (what counts as one unit): lengths over the characteristic length */
} lwi_goal;

enum { LWI_MAX_GOALS = 96 };

typedef struct lwi_newton_info {
    bool converged;
    int iterations;
    double first_step;   /* scaled size of the first step */
    double last_step;
    double contraction;  /* worst ratio of successive steps while they mattered */
    double moved;        /* scaled size of all steps together, straight unknowns left out */
    double residual;     /* worst closure row at the end, relative */
    double goal;         /* norm of weighted goal residuals at the end */
    size_t free_left;    /* freedoms neither closure nor goals determine */
} lwi_newton_info;

/* Residual (wanted minus present, weighted) and derivative of a goal; false where the goal names a
 * coordinate that no element carries. row may be NULL. */
bool lwi_goal_eval(double *residual, double *row, const lwi_goal *goal, const lwi_system *sys,
                   const lwi_state *state, const lwi_eval *ev);

/* From *state, which is moved; ev is left at the result. */
void lwi_newton(lwi_newton_info *info, const lwi_system *sys, size_t rank, const lwi_goal *goal,
                size_t n_goal, int max_iterations, lwi_state *state, lwi_eval *ev,
                lwi_newton_work *nw);

lw_code lwi_newton_work_open(lwi_newton_work *nw, size_t n_var, size_t n_row, size_t n_goal,
                             lw_err *err);
void lwi_newton_work_close(lwi_newton_work *nw);

/* Null space of the closure rows at an evaluation: k (n_var x (n_var - rank), ld = n_var - rank),
 * orthonormal. Returns the ratio of the rank-th pivot to the largest one (0: rank lost). */
double lwi_null_space(double *k, const lwi_system *sys, size_t rank, const lwi_state *state,
                      const lwi_eval *ev, lwi_newton_work *nw);
/* Both read the factors that lwi_null_space left in nw. The whole null space at a posture where
 * pivots below `threshold` count as lost: k gets that many columns, which is returned. */
size_t lwi_null_space_here(double *k, const lwi_system *sys, size_t rank, double threshold,
                           const lwi_newton_work *nw);
/* Multipliers of the rows: rows^T multiplier = r for a vector r (n_var, destroyed) square to the
 * null space; rows that were not needed for the rank get 0. False where rank is lost. */
bool lwi_row_multipliers(double *multiplier, double *r, const lwi_system *sys, size_t rank,
                         const lwi_newton_work *nw);

#endif
