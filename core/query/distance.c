/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distance question: how far the nearest forward singularity, the nearest dead point of a limb and
 * the nearest limit are, as brackets: no motion of the tool shorter than at_least comes to one
 * (proved), and a posture beyond one was found at at_most. The branch is that of the posture: what
 * lies in other modes does not count. */
#include "distance.h"

#include "../math/tol.h"
#include "../math/vec3.h"
#include "../proof/ball_any.h"

#include <stdint.h>

bool lwi_inverse_one(lw_solution **sol, bool *open, const lw_model *m, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lw_mode *mode, const lw_config *hint,
                     lw_work *work);

const lw_solution *lwi_distance_solve(const lw_model *m, const double *y, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    const lwi_ball *b = w->ball;
    lwi_pose_known pose;
    lw_frame tool;
    lw_frame back;
    lw_solution *sol;
    bool open;
    memset(&pose, 0, sizeof pose);
    lwi_ball_pose(&tool, b, y);
    lwi_frame_inverse(&back, &w->tool->frame);
    lwi_frame_mul(&pose.body, &tool, &back);
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD) {
            pose.output_coord[o] = w->start.coord[m->spec->output[o].coord];
        }
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        if (b->output[k] >= 0) {
            pose.output_coord[b->output[k]] += y[k] * b->output_rate[k];
        }
    }
    if (!lwi_inverse_one(&sol, &open, m, w->tool, &pose, &w->mode, &w->start, work) || open) {
        return NULL;
    }
    return sol;
}

void lwi_distance_take(lw_distance_side *out, const lw_model *m, const double *y, double distance_m,
                       lw_work *work)
{
    static const double back[6] = {0.0, 1e-9, 1e-7, 1e-5, 1e-4, 1e-3};
    const lwi_ball *b = work->distance_work->ball;
    out->known_most = false;
    /* On the edge itself a limb may not close by a rounding: the posture just before it is told. */
    for (size_t i = 0; i < 6 && !out->known_most; i++) {
        double z[LWI_BALL_DIRS] = {0};
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = y[k] * (1.0 - back[i]);
        }
        const lw_solution *sol = lwi_distance_solve(m, z, work);
        if (sol != NULL) {
            out->known_most = true;
            out->at_most_m = distance_m;
            lwi_ball_pose(&out->tool, b, z);
            memcpy(out->drive, sol->drive, sizeof out->drive);
        }
    }
}

/* The posture itself lies on it. */
static void here(lw_distance_side *out, const lw_solution *sol)
{
    out->known_least = out->known_most = true;
    out->at_least_m = out->at_most_m = 0.0;
    out->tool = sol->tool;
    memcpy(out->drive, sol->drive, sizeof out->drive);
}

static double bound_of(const lw_distance_side *side, const lwi_ball *b)
{
    /* Turns are told apart up to half a turn, which is what their coordinates reach. */
    double most = b->n_turn > 1 ? 3.14 * b->length_m : 1e3 * b->length_m;
    return side->known_most ? fmin(side->at_most_m, most) : most;
}

static void forward_side(lw_distance_answer *a, const lw_model *m, const lw_distance_ask *ask,
                         lw_work *work)
{
    lw_distance_side *side = &a->forward;
    lwi_ball_work *w = &work->distance_work->balls;
    if (work->distance_work->is_arm && work->distance_work->arm.all_driven) {
        side->none = true; /* drives locked, no joint moves */
        return;
    }
    if (!w->ball.forward) {
        return; /* what the closure rows told stands */
    }
    lwi_distance_forward_most(side, m, work);
    double most = bound_of(side, &w->ball);
    side->at_least_m = lwi_ball_forward_once(&w->ball, &w->local, most);
    side->known_least = side->at_least_m > 0.0;
    if (ask->budget > 0 && side->known_least) {
        double look = side->known_most ? most : fmin(most, 8.0 * m->length_m);
        side->at_least_m =
            fmax(side->at_least_m,
                 lwi_ball_cells(w, LWI_BALL_FORWARD, work->distance_work->guide, side->at_least_m,
                                look, ask->budget, &a->cells, ask->abort));
    }
}

static void inverse_side(lw_distance_answer *a, const lw_model *m, const lw_distance_ask *ask,
                         lw_work *work)
{
    lw_distance_side *side = &a->inverse;
    lwi_ball_work *w = &work->distance_work->balls;
    size_t limb;
    if (work->distance_work->is_arm) {
        lwi_distance_arm_most(side, m, work);
        side->at_least_m = lwi_ball_arm_once(&work->distance_work->arm, bound_of(side, &w->ball));
        side->known_least = side->at_least_m > 0.0;
        return;
    }
    if (!w->ball.inverse) {
        return;
    }
    side->at_least_m = lwi_ball_inverse_once(&w->ball, &limb);
    if (!(side->at_least_m < INFINITY)) {
        side->none = true; /* no limb has a dead point anywhere */
        side->at_least_m = 0.0;
        return;
    }
    side->limb = limb;
    lwi_distance_inverse_most(side, m, work);
    double most = bound_of(side, &w->ball);
    side->known_least = side->at_least_m > 0.0;
    side->at_least_m = fmin(side->at_least_m, most);
    if (ask->budget > 0 && side->known_least && side->known_most) {
        side->at_least_m =
            fmax(side->at_least_m, lwi_ball_cells(w, LWI_BALL_INVERSE, NULL, side->at_least_m, most,
                                                  ask->budget, &a->cells, ask->abort));
    }
}

static bool lost(const double *matrix, size_t rows, size_t cols, size_t need, lw_work *work)
{
    double sv[LWI_MAX_VARS];
    double *a = work->matrix[1];
    size_t n = rows < cols ? rows : cols;
    memcpy(a, matrix, rows * cols * sizeof *a);
    lwi_svd(a, rows, cols, cols, sv, NULL);
    return n < need || !(sv[need - 1] > LWI_RANK_POSTURE * sv[0]);
}

/* What the closure rows alone say, where rods and arms do not say more. */
static void any_side(lw_distance_answer *a, const lw_model *m, const lw_spec_tool *tool,
                     const lw_solution *sol, lw_work *work)
{
    const lwi_distance_work *w = work->distance_work;
    lwi_ball_any any;
    if ((w->ball->forward && w->ball->inverse) || w->is_arm) {
        return;
    }
    lwi_ball_any_at(&any, m, tool, sol, work);
    a->forward.none = any.forward_none;
    a->forward.known_least = any.forward && !any.forward_none;
    a->forward.at_least_m = a->forward.known_least ? any.forward_m : 0.0;
    a->inverse.known_least = any.inverse;
    a->inverse.at_least_m = any.inverse_m;
    a->limit.known_least = any.limit;
    a->limit.at_least_m = any.limit_m;
}

lw_code lw_distance(const lw_distance_answer **out, const lw_model *m, const lw_distance_ask *ask,
                    lw_work *work, lw_err *err)
{
    lw_distance_answer *a = &work->distance;
    lwi_distance_work *w = work->distance_work;
    const lw_posture_answer *posture;
    lwi_rates r;
    *out = NULL;
    memset(a, 0, sizeof *a);
    a->forward.limb = a->inverse.limb = a->limit.limb = SIZE_MAX;
    a->length_m = m->length_m;
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    lw_code rc = lw_posture(&posture, m, ask->tool, ask->tool_written, ask->posture, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    *out = a;
    a->outcome = posture->outcome;
    a->reason = posture->reason;
    a->solution = posture->solution;
    if (posture->solution == NULL) {
        return LW_OK;
    }
    const lw_solution *sol = posture->solution;
    w->ball = &w->balls.ball;
    w->tool = tool;
    w->start = sol->config;
    w->mode = sol->mode;
    w->explicit_inverse = m->explicit_inverse;
    bool posed = lwi_ball_make(w->ball, m, tool, sol);
    w->is_arm = posed && lwi_ball_arm_make(&w->arm, m, tool, sol);
    lwi_rates_at(&r, m, tool, &sol->config, sol->tool.pos_m, work);
    bool closed = m->rank == 0 || r.closure_ratio > LWI_RANK_POSTURE;
    double *scaled = work->matrix[3];
    lwi_scaled_drives(scaled, m, &r, work);
    bool forward = !closed || lost(scaled, r.n_drive, r.m, r.m, work);
    lwi_scaled_outputs(scaled, m, &r, work);
    bool inverse = lost(scaled, r.n_output, r.m, r.m, work);
    for (size_t i = 0; i < m->n_limb; i++) {
        double value;
        (void)lwi_limb_branch(&value, m, &m->limb[i], &sol->config);
        if (!(fabs(value) > LWI_SIGN_ZERO)) {
            inverse = true;
            a->inverse.limb = i;
        }
    }
    any_side(a, m, tool, sol, work);
    if (forward) {
        here(&a->forward, sol);
        a->outcome = a->outcome == LW_OUTCOME_OK ? LW_OUTCOME_SINGULAR : a->outcome;
    } else if (posed) {
        forward_side(a, m, ask, work);
    }
    if (inverse) {
        here(&a->inverse, sol);
    } else if (posed) {
        inverse_side(a, m, ask, work);
    }
    if (!sol->within_limits) {
        here(&a->limit, sol);
        a->limit.limit = sol->limit[0];
    } else if (posed) {
        lwi_distance_limits(&a->limit, m, sol, work);
    }
    return LW_OK;
}
