/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random closed configurations: a walk on the configuration manifold from the reference posture.
 * Generic ranks are read from many configurations, since the reference posture may be special. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "build.h"

#include <stdlib.h>

lw_code lwi_samples_open(lwi_samples **out, lw_model *model, unsigned long long seed, lw_err *err)
{
    size_t n = model->whole->n_var;
    size_t m = model->whole->n_row;
    *out = NULL;
    lwi_samples *s = calloc(1, sizeof *s);
    if (s == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_random_seed(&s->random, seed);
    s->svd = calloc(m * n + 1, sizeof *s->svd);
    s->k = calloc(n * n + 1, sizeof *s->k);
    if (s->svd == NULL || s->k == NULL ||
        lwi_newton_work_open(&s->nw, n, m, LWI_MAX_GOALS, err) != LW_OK) {
        lwi_samples_close(s);
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    *out = s;
    return LW_OK;
}

void lwi_samples_close(lwi_samples *s)
{
    if (s != NULL) {
        free(s->svd);
        free(s->k);
        lwi_newton_work_close(&s->nw);
        free(s);
    }
}

/* Singular values of the closure rows at a state, relative to the largest, into sv
 * (zero-filled). */
static void closure_profile(double *sv, lwi_samples *s, const lw_model *m, const lwi_state *state)
{
    const lwi_system *sys = m->whole;
    size_t n = sys->n_var;
    size_t rows = sys->n_row;
    lwi_eval_nodes(&s->ev, sys, state);
    (void)lwi_eval_rows(s->nw.res, s->nw.rows, n, sys, state, &s->ev);
    memcpy(s->svd, s->nw.rows, rows * n * sizeof *s->svd);
    lwi_svd(s->svd, rows, n, n, sv, NULL);
    size_t k = rows < n ? rows : n;
    for (size_t i = k; i-- > 0;) {
        sv[i] = sv[0] > 0.0 ? sv[i] / sv[0] : 0.0;
    }
}

static size_t count_above(const double *sv, size_t n, double level)
{
    size_t r = 0;
    while (r < n && sv[r] > level) {
        r++;
    }
    return r;
}

/* One random step of scaled length `size` along the manifold; false if Newton does not settle near
 * the predicted place. */
static bool walk_step(lwi_state *state, lwi_samples *s, const lw_model *m, size_t rank, double size)
{
    const lwi_system *sys = m->whole;
    size_t n = sys->n_var;
    size_t left = n - rank;
    double y[LWI_MAX_VARS] = {0};
    lwi_newton_info info;
    lwi_eval_nodes(&s->ev, sys, state);
    (void)lwi_null_space(s->k, sys, rank, state, &s->ev, &s->nw);
    double norm = 0.0;
    for (size_t c = 0; c < left; c++) {
        double g = lwi_random_normal(&s->random);
        norm += g * g;
        for (size_t i = 0; i < n; i++) {
            y[i] += g * s->k[i * left + c];
        }
    }
    norm = sqrt(norm);
    for (size_t i = 0; i < n; i++) {
        y[i] *= norm > 0.0 ? size / norm : 0.0;
    }
    lwi_state trial = *state;
    lwi_state_step(&trial, sys, y);
    lwi_newton(&info, sys, rank, NULL, 0, 20, &trial, &s->ev, &s->nw);
    if (!info.converged || info.moved > 2.0 * size || info.residual > LWI_CLOSED) {
        return false;
    }
    *state = trial;
    return true;
}

static void drop_idle_rows(lwi_samples *s, lw_model *m)
{
    lwi_system *sys = m->whole;
    double most[LWI_MAX_ROWS] = {0};
    double top = 0.0;
    for (size_t k = 0; k < s->n; k++) {
        lwi_eval_nodes(&s->ev, sys, &s->state[k]);
        (void)lwi_eval_rows(s->nw.res, s->nw.rows, sys->n_var, sys, &s->state[k], &s->ev);
        for (size_t i = 0; i < sys->n_row; i++) {
            double sum = 0.0;
            for (size_t j = 0; j < sys->n_var; j++) {
                sum += s->nw.rows[i * sys->n_var + j] * s->nw.rows[i * sys->n_var + j];
            }
            most[i] = fmax(most[i], sqrt(sum));
            top = fmax(top, most[i]);
        }
    }
    for (size_t i = sys->n_row; i-- > 0;) {
        if (most[i] < LWI_RANK_GENERIC * top) {
            lwi_system_drop_row(sys, i);
        }
    }
    lwi_system_blocks(sys);
}

lw_code lwi_samples_walk(lwi_samples *s, lw_model *m, lw_err *err)
{
    lwi_system *sys = m->whole;
    double profile[LWI_MAX_ROWS] = {0};
    double best[LWI_MAX_ROWS] = {0};
    size_t most = sys->n_row < sys->n_var ? sys->n_row : sys->n_var;
    lwi_state state;
    lwi_state_reference(&state, sys);
    closure_profile(best, s, m, &state);
    size_t rank = count_above(best, most, LWI_RANK_GENERIC);
    s->state[0] = state;
    s->n = 1;
    double size = 0.12;
    int failures = 0;
    for (int step = 0; s->n < LWI_SAMPLES && step < 400; step++) {
        bool moved = rank < sys->n_var && walk_step(&state, s, m, rank, size);
        if (!moved) {
            size = fmax(0.5 * size, 1e-3);
            if (++failures % 6 == 0) {
                lwi_state_reference(&state, sys);
            }
            if (failures > 60) {
                break;
            }
            continue;
        }
        size = fmin(size * 1.3, 0.12);
        closure_profile(profile, s, m, &state);
        for (size_t i = 0; i < most; i++) {
            best[i] = fmax(best[i], profile[i]);
        }
        rank = count_above(best, most, LWI_RANK_GENERIC);
        if (step % 6 == 5) {
            s->state[s->n++] = state;
            if (s->n % 6 == 0) {
                lwi_state_reference(&state, sys); /* several short walks stay on the assembly */
            }
        }
    }
    m->rank = rank;
    m->report.rank_kept = rank > 0 ? best[rank - 1] : 1.0;
    m->report.rank_dropped = rank < most ? best[rank] : 0.0;
    m->report.closure_rows = sys->n_row;
    m->report.closure_rank = rank;
    m->report.unknowns = sys->n_var;
    m->report.samples = s->n;
    drop_idle_rows(s, m);
    m->mobility = sys->n_var - rank;
    m->report.mobility = (int)m->mobility;
    m->report.assumes_exact_geometry = rank < most || sys->n_row_dropped > 0;
    if (m->mobility > 0 && s->n < 4) {
        return LW_FAIL(err, LW_E_MODEL, "",
                       "the mechanism could not be moved away from its reference posture");
    }
    return LW_OK;
}
