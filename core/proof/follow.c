/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The branch in doubles: every block solved by Newton's method from a neighbour. What is found here
 * is a guess; tube.c proves it. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "prove.h"

void lwi_point_from_state(lwi_prove_point *out, const lwi_prove *p, const lwi_state *state)
{
    memcpy(out->value, state->value, p->sys->n_element * sizeof *out->value);
    memcpy(out->quat, state->quat, p->sys->n_quat * sizeof *out->quat);
    memcpy(out->pos_m, state->pos_m, p->sys->n_quat * sizeof *out->pos_m);
}

void lwi_state_from_point(lwi_state *out, const lwi_prove *p, const lwi_prove_point *point)
{
    memcpy(out->value, point->value, p->sys->n_element * sizeof *out->value);
    memcpy(out->quat, point->quat, p->sys->n_quat * sizeof *out->quat);
    memcpy(out->pos_m, point->pos_m, p->sys->n_quat * sizeof *out->pos_m);
}

/* What is given at t. */
static void give(lwi_prove *p, double t)
{
    double coord[LW_MAX_OUTPUTS];
    p->t = t;
    if (p->joints) {
        return;
    }
    lwi_move_at(&p->state->given[p->tool_node], coord, p->move, p->model, t);
    for (size_t k = 0; k < p->sys->n_element; k++) {
        if (p->sys->element[k].given) {
            p->state->value[k] = p->given[k][0] + t * p->given[k][1];
        }
    }
}

/* Residual of a row or a reading that leads, and its derivative into p->rows. */
static double row_at(lwi_prove *p, size_t row)
{
    size_t d;
    double value;
    if (!lwi_row_is_drive(p, row, &d)) {
        lwi_row_derivative(p->rows, p->sys, &p->sys->row[row], p->state, p->ev);
        return lwi_row_residual(p->sys, &p->sys->row[row], p->state, p->ev);
    }
    const lw_spec_drive *drive = &p->model->spec->drive[d];
    double scale = drive->turning ? 1.0 : 1.0 / p->sys->length_m;
    (void)lwi_terms(&value, p->rows, p->sys, p->state, p->ev, drive->term, drive->n_term);
    for (size_t j = 0; j < p->sys->n_var; j++) {
        p->rows[j] *= scale;
    }
    return scale * (value - p->from[d] - p->t * p->along[d]);
}

/* Newton on all blocks from p->state as it stands; false where a block does not converge. The
 * first step is told in p->swing if it is the largest. */
static bool solve(lwi_prove *p)
{
    const lwi_system *sys = p->sys;
    double last = INFINITY;
    for (int iteration = 0; iteration < 12; iteration++) {
        double worst = 0.0;
        lwi_eval_nodes(p->ev, sys, p->state);
        for (size_t b = 0; b < p->n_block; b++) {
            const lwi_prove_block *block = &p->block[b];
            size_t n = block->n;
            double log2_abs;
            double size = 0.0;
            for (size_t i = 0; i < n; i++) {
                p->res[i] = -row_at(p, block->pick[i]);
                for (size_t j = 0; j < n; j++) {
                    p->square[i * n + j] = p->rows[block->var[j]];
                }
            }
            if (lwi_lu(p->square, n, n, p->perm, &log2_abs) == 0) {
                p->limb = block->limb;
                return false;
            }
            lwi_lu_solve(p->square, n, n, p->perm, p->res);
            for (size_t j = 0; j < n; j++) {
                p->step[block->var[j]] = p->res[j];
                size += p->res[j] * p->res[j];
            }
            size = sqrt(size);
            if (!(size <= 0.6)) {
                p->limb = block->limb;
                return false;
            }
            if (size > worst) {
                worst = size;
                p->limb = block->limb;
            }
        }
        lwi_state_step(p->state, sys, p->step);
        p->swing = iteration == 0 && worst > p->swing ? worst : p->swing;
        if (worst <= 1e-6) {
            return true; /* what is left is of the order of its square */
        }
        if (iteration > 2 && !(worst <= 0.5 * last)) {
            return false;
        }
        last = worst;
    }
    return false;
}

/* Rows that are not solved: closed as far as the document says. */
static bool rest_closes(lwi_prove *p)
{
    lwi_eval_nodes(p->ev, p->sys, p->state);
    for (size_t i = 0; i < p->sys->n_row; i++) {
        double r = lwi_row_residual(p->sys, &p->sys->row[i], p->state, p->ev);
        if (!(fabs(r) <= LWI_CLOSED)) {
            return false;
        }
    }
    for (size_t i = 0; i < p->sys->n_row_dropped; i++) {
        double r = lwi_row_residual(p->sys, &p->sys->row_dropped[i], p->state, p->ev);
        if (!(fabs(r) <= LWI_CLOSED)) {
            return false;
        }
    }
    return true;
}

static void extrapolate(lwi_prove *p, const lwi_prove_point *a, const lwi_prove_point *b,
                        double share)
{
    const lwi_system *sys = p->sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        p->state->value[k] = b->value[k] + share * (b->value[k] - a->value[k]);
    }
    for (size_t q = 0; q < sys->n_quat; q++) {
        for (int i = 0; i < 4; i++) {
            p->state->quat[q][i] = b->quat[q][i] + share * (b->quat[q][i] - a->quat[q][i]);
        }
        lwi_quat_unit(p->state->quat[q]);
        for (int i = 0; i < 3; i++) {
            p->state->pos_m[q][i] = b->pos_m[q][i] + share * (b->pos_m[q][i] - a->pos_m[q][i]);
        }
    }
}

bool lwi_follow_nodes(lwi_prove *p, double low, double high)
{
    double mid = 0.5 * (low + high);
    double half = 0.5 * (high - low);
    double before = low;
    double last = low;
    const lwi_prove_point *a = NULL;
    const lwi_prove_point *b = &p->left;
    p->swing = 0.0;
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        double t = mid + half * lwi_pm_node(k);
        if (a == NULL) {
            lwi_state_from_point(p->state, p, b);
        } else {
            extrapolate(p, a, b, (t - last) / (last - before));
        }
        give(p, t);
        if (p->n_block > 0 && !solve(p)) {
            return false;
        }
        bool looked = k == 0 || k == LWI_PM_SIZE - 1;
        if (looked && p->sys->n_row > 0 && !rest_closes(p)) {
            return false;
        }
        lwi_point_from_state(&p->node[k], p, p->state);
        /* Quaternions on one side, so that a polynomial may run through them. */
        for (size_t q = 0; q < p->sys->n_quat; q++) {
            double dot = 0.0;
            for (int i = 0; i < 4; i++) {
                dot += p->node[k].quat[q][i] * b->quat[q][i];
            }
            for (int i = 0; i < 4 && dot < 0.0; i++) {
                p->node[k].quat[q][i] = -p->node[k].quat[q][i];
            }
        }
        before = last;
        last = t;
        a = b;
        b = &p->node[k];
    }
    return true;
}

bool lwi_follow_to(lwi_prove *p, double low, double t, lw_config *config)
{
    lwi_state_from_point(p->state, p, &p->left);
    p->swing = 0.0;
    /* In steps, so that the branch is not jumped. */
    for (int k = t > low ? 1 : 4; k <= 4; k++) {
        give(p, low + 0.25 * k * (t - low));
        if (p->n_block > 0 && !solve(p)) {
            return false;
        }
    }
    if (!(p->swing <= 0.25) || (p->sys->n_row > 0 && !rest_closes(p))) {
        return false;
    }
    lwi_eval_nodes(p->ev, p->sys, p->state);
    if (config != NULL) {
        lwi_follow_config(p, config);
    }
    return true;
}

void lwi_follow_config(lwi_prove *p, lw_config *config)
{
    lw_config hint = *config;
    hint.coord = p->coord_left;
    lwi_config_from_eval(config, p->sys, p->state, p->ev, &hint);
}

void lwi_follow_take(lwi_prove *p, const lw_config *found, lw_config *config)
{
    const double whole = 6.283185307179586476925;
    lwi_state_from_config(p->state, p->sys, found);
    for (size_t k = 0; k < p->sys->n_element; k++) {
        const lwi_element *el = &p->sys->element[k];
        if (el->kind == LWI_TURN && !el->given) {
            double *value = &p->state->value[k];
            *value += whole * round((p->left.value[k] - *value) / whole);
        }
    }
    lwi_eval_nodes(p->ev, p->sys, p->state);
    lwi_follow_config(p, config);
}

/* Rows of every block that are solved: the best conditioned at the present state. */
void lwi_follow_pick(lwi_prove *p)
{
    const lwi_system *sys = p->sys;
    lwi_eval_nodes(p->ev, sys, p->state);
    for (size_t b = 0; b < p->n_block; b++) {
        lwi_prove_block *block = &p->block[b];
        size_t n = block->n;
        size_t m = block->n_row;
        size_t solved = n - p->n_lead;
        for (size_t l = 0; l < p->n_lead; l++) {
            block->pick[solved + l] = (unsigned short)(sys->n_row + p->lead[l]);
        }
        for (size_t i = 0; i < m; i++) {
            lwi_row_derivative(p->rows, sys, &sys->row[block->row[i]], p->state, p->ev);
            for (size_t j = 0; j < n; j++) {
                p->square[j * m + i] = p->rows[block->var[j]];
            }
        }
        if (m == solved) {
            memcpy(block->pick, block->row, m * sizeof *block->pick);
            continue;
        }
        (void)lwi_qrp(p->square, n, m, m, p->tau, p->perm);
        for (size_t i = 0; i < solved; i++) {
            block->pick[i] = block->row[p->perm[i]];
        }
    }
}
