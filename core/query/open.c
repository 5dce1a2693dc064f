/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solutions that are not isolated: postures from which the mechanism can go on while everything
 * that was asked for stays met. A double root loses rank too, but nothing leads away from it: so
 * random steps are taken along the null space and brought back onto the goals, and only where they
 * arrive elsewhere, with rank still missing there, is it a motion. */
#include "../math/tol.h"
#include "all.h"

#include <math.h>
#include <string.h>

/* Scaled size of a try, how far off it must end, what its goals may miss. */
#define TRY 0.1
#define AWAY 0.004
#define MET 1e-10

enum { TRIES = 8, ENOUGH = 2 };

/* Freedoms that the goals do not see at a state, from singular values over the null space there,
 * which goes to work->matrix[1] with *n_free columns: where the closure itself loses rank it is
 * larger than elsewhere. */
static size_t unseen(size_t *n_free, const lw_model *m, const lwi_goal *goal, size_t n_goal,
                     const lwi_state *state, const lwi_eval *ev, lw_work *work)
{
    const lwi_system *sys = m->whole;
    double *k = work->matrix[1];
    double *row = work->vector[0];
    double *sv = work->vector[1];
    double *rate = work->matrix[0];
    (void)lwi_null_space(work->k, sys, m->rank, state, ev, &work->newton);
    size_t left = lwi_null_space_here(k, sys, m->rank, LWI_RANK_POSTURE, &work->newton);
    *n_free = left;
    for (size_t i = 0; i < n_goal; i++) {
        double unused;
        (void)lwi_goal_eval(&unused, row, &goal[i], sys, state, ev);
        for (size_t j = 0; j < left; j++) {
            double s = 0.0;
            for (size_t v = 0; v < sys->n_var; v++) {
                s += row[v] * k[v * left + j];
            }
            rate[i * left + j] = s;
        }
    }
    size_t n = n_goal < left ? n_goal : left;
    lwi_svd(rate, n_goal, left, left, sv, NULL);
    size_t rank = 0;
    while (rank < n && sv[rank] > LWI_RANK_POSTURE * sv[0]) {
        rank++;
    }
    return left - rank;
}

/* A step at random along the null space in work->matrix[1]. */
static void random_step(double *y, const lw_model *m, size_t left, lwi_random *random,
                        const lw_work *work)
{
    double size = 0.0;
    memset(y, 0, m->whole->n_var * sizeof *y);
    for (size_t j = 0; j < left; j++) {
        double c = lwi_random_normal(random);
        size += c * c;
        for (size_t v = 0; v < m->whole->n_var; v++) {
            y[v] += c * work->matrix[1][v * left + j];
        }
    }
    for (size_t v = 0; v < m->whole->n_var; v++) {
        y[v] *= TRY / sqrt(size);
    }
}

size_t lwi_open_dimension(const lw_model *m, const lwi_goal *goal, size_t n_goal, lw_work *work)
{
    const lwi_system *sys = m->whole;
    double y[TRIES][LWI_MAX_VARS];
    lwi_newton_info info;
    lwi_random random;
    size_t arrived = 0;
    lwi_eval_nodes(&work->ev, sys, &work->state);
    size_t left;
    size_t least = unseen(&left, m, goal, n_goal, &work->state, &work->ev, work);
    if (least == 0) {
        return 0;
    }
    lwi_config_from_eval(&work->scratch, sys, &work->state, &work->ev, &m->home);
    lwi_random_seed(&random, 20261201ULL);
    for (size_t k = 0; k < TRIES; k++) {
        random_step(y[k], m, left, &random, work);
    }
    for (size_t k = 0; k < TRIES && least > 0; k++) {
        work->trial = work->state;
        lwi_state_step(&work->trial, sys, y[k]);
        lwi_newton(&info, sys, m->rank, goal, n_goal, 60, &work->trial, &work->ev, &work->newton);
        if (!info.converged || !(info.goal <= MET)) {
            continue;
        }
        lwi_config_from_eval(&work->scratch2, sys, &work->trial, &work->ev, &work->scratch);
        if (!(lwi_config_distance(m, &work->scratch, &work->scratch2) > AWAY)) {
            continue;
        }
        size_t there = unseen(&left, m, goal, n_goal, &work->trial, &work->ev, work);
        least = there < least ? there : least;
        arrived++;
    }
    lwi_eval_nodes(&work->ev, sys, &work->state);
    return arrived >= ENOUGH ? least : 0;
}
