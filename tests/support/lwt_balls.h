/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distances checked by sampling: what a ball of tool poses is said to hold is looked at by the
 * inverse, jacobian and margin questions, pose by pose. */
#ifndef LWT_BALLS_H
#define LWT_BALLS_H

#include <leeway/leeway.h>

#include "lwt.h"

/* Where a distance was asked for. */
typedef struct lwt_subject_at {
    const lw_model *model;
    lw_work *work;
    lw_frame tool; /* where the question was asked */
    double coord[LW_MAX_COORDS];
    lw_mode mode;
    double length;
} lwt_subject_at;

/* LWT_SHARE scales the number of samples: sanitizers and slow machines. */
size_t lwt_share_of(size_t n);

/* Keeps what the answer borrowed: the next question takes it away. */
lw_distance_answer lwt_distance_ask(lwt_subject_at *s, const lw_model *model, lw_work *work,
                                    const lw_posture_ask *posture, size_t budget);

void lwt_distance_bracket(const lw_distance_side *side);

/* A random pose within r of the subject's, as the outputs name it. */
void lwt_distance_sample(lw_pose_ask *out, const lwt_subject_at *s, double r, lwt_random *random);

const lw_inverse_answer *lwt_distance_solve(const lwt_subject_at *s, const lw_pose_ask *pose);

/* The very posture of a solution: by its bodies, so that limits and modes have no say. */
void lwt_by_bodies(lw_posture_ask *out, const lw_spec *spec, const lw_solution *at);

/* Sign of the rates' determinant where it is square, else 1 where they have full rank, 0 where
 * not. `inverse`: of the tool rates by the drive rates, else the other way round. */
int lwt_rates_sign(const lwt_subject_at *s, const lw_solution *at, bool inverse);

/* Samples in each proved ball: no change of sign, no dead point passed, no limit broken. */
void lwt_distance_balls(const lw_model *model, lw_work *work, const lw_posture_ask *posture,
                        size_t budget, size_t samples, lwt_random *random);

#endif
