/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Do the drives hold the tool on a whole interval? Where the inverse system solves every row and
 * the tool moves in six directions, that is the rank of the drive rates by output rates. Else the
 * closure rows of the whole mechanism are stacked on its drives: full column rank says that with
 * all drives locked nothing moves, freedoms gained at a constraint singularity included. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "../query/margin.h"
#include "prove.h"

#include <stdint.h>

/* Displacements of all nodes of the whole system from the bodies, screws from the side of a joint
 * whose body is known: an axis stands still in both. False where a node in between is no body. */
static bool place_whole(lwi_prove *p)
{
    const lwi_system *whole = p->model->whole;
    bool known[LWI_MAX_NODES] = {false};
    bool turned[LWI_MAX_NODES]; /* its orientation is known: slides keep it */
    lwi_pm_eval *ev = p->whole_eval;
    for (size_t i = 0; i < p->model->spec->n_body; i++) {
        size_t n = whole->body_node[i];
        if (!known[n]) {
            ev->node[n] = p->eval->node[p->sys->body_node[i]];
            known[n] = true;
        }
    }
    memcpy(turned, known, sizeof turned);
    for (size_t round = 0; round < 2 * whole->n_element; round++) { /* down the tree, then up */
        bool down = round < whole->n_element;
        size_t k = down ? round : 2 * whole->n_element - 1 - round;
        size_t from = down ? whole->element[k].parent : whole->element[k].child;
        size_t to = down ? whole->element[k].child : whole->element[k].parent;
        if (whole->element[k].kind == LWI_SLIDE && turned[from] && !turned[to]) {
            memcpy(ev->node[to].rot, ev->node[from].rot, sizeof ev->node[to].rot);
            turned[to] = true;
        }
    }
    for (size_t k = 0; k < whole->n_element; k++) {
        const lwi_element *el = &whole->element[k];
        bool at_parent = el->kind == LWI_SLIDE ? turned[el->parent] : known[el->parent];
        size_t from = el->kind == LWI_FREE || !at_parent ? el->child : el->parent;
        bool enough = el->kind == LWI_SLIDE ? turned[from] : known[from];
        if (!enough || (el->kind == LWI_BALL && !at_parent)) {
            return false;
        }
        if (el->kind != LWI_SLIDE) {
            lwi_pm_place(ev->p[k], &ev->node[from], el->at);
        }
        if (el->kind < LWI_BALL) {
            lwi_pm_rotate(ev->w[k], ev->node[from].rot, el->axis);
            for (int i = 0; i < 3 && el->sign != 1.0; i++) {
                ev->w[k][i] = lwi_pm_scale(ev->w[k][i], el->sign);
            }
        }
    }
    for (size_t i = 0; i < whole->n_row; i++) {
        const lwi_row *row = &whole->row[i];
        if (row->kind != LWI_ROW_LINEAR && !(known[row->a] && known[row->b])) {
            return false;
        }
    }
    return true;
}

/* Closure rows times `weight`, then scaled drives, in p->big[2]; returns the number of rows. */
static size_t stack(lwi_prove *p, double weight)
{
    const lwi_system *whole = p->model->whole;
    const lw_spec *spec = p->model->spec;
    const lwi_pm_point *point = p->joints ? p->point : p->whole_point;
    const lwi_pm_eval *ev = p->joints ? p->eval : p->whole_eval;
    size_t n = whole->n_var;
    lwi_pm *a = p->big[2];
    for (size_t i = 0; i < (whole->n_row + spec->n_drive) * n; i++) {
        a[i] = lwi_pm_const(0.0);
    }
    for (size_t i = 0; i < whole->n_row; i++) {
        lwi_pm *row = a + i * n;
        (void)lwi_pm_row(row, NULL, whole, &whole->row[i], point, ev, &p->inputs);
        for (size_t j = 0; j < n && weight != 1.0; j++) {
            row[j] = lwi_pm_scale(row[j], weight);
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        lwi_pm *row = a + (whole->n_row + d) * n;
        lwi_pm value;
        (void)lwi_pm_terms(&value, row, NULL, whole, point, ev, spec->drive[d].term,
                           spec->drive[d].n_term, &p->inputs);
        for (size_t j = 0; j < n && !spec->drive[d].turning; j++) {
            row[j] = lwi_pm_scale(row[j], 1.0 / p->model->length_m);
        }
    }
    return whole->n_row + spec->n_drive;
}

static double largest(const lwi_pm *a, size_t n)
{
    double sum = 0.0;
    for (size_t i = 0; i < n; i++) {
        double m = lwi_pm_mag(a[i]);
        sum += m * m;
    }
    return sqrt(sum);
}

/* The least singular value against the threshold of postures; where it is asked for, the largest
 * bound that can be proved. */
static bool judge(lwi_prove *p, const lwi_pm *a, size_t rows, size_t cols, bool asked)
{
    double least = LWI_RANK_POSTURE * largest(a, rows * cols);
    if (!lwi_rank_prepare(p->rank, a, rows, cols, cols)) {
        return false;
    }
    if (asked) {
        p->hold = lwi_rank_most(p->rank);
        return p->hold > least;
    }
    p->hold = least;
    return lwi_rank_at_least(p->rank, least);
}

static bool hold_of_rates(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    size_t m = p->inputs.m;
    lwi_pm *a = p->big[2];
    for (size_t d = 0; d < spec->n_drive; d++) {
        for (size_t o = 0; o < m; o++) {
            double s = (spec->drive[d].turning ? 1.0 : 1.0 / p->model->length_m) /
                       lwi_output_scale(p->model, o);
            a[d * m + o] = lwi_pm_scale(p->rates[d * m + o], s);
        }
    }
    return judge(p, a, spec->n_drive, m, false);
}

/* With more drives than freedoms these could hold a freedom gained at a constraint singularity, and
 * the rates of the tool would not be all there are: the closure rows keep their rank. */
static bool constraints_hold(lwi_prove *p, size_t drives)
{
    const lwi_system *whole = p->model->whole;
    size_t n = whole->n_var;
    size_t rank = p->model->rank;
    double *qr = p->square;
    if (drives == p->model->mobility || rank == 0) {
        return true; /* a stack of full rank has no room for one */
    }
    for (size_t i = 0; i < whole->n_row; i++) {
        p->perm[i] = i;
        for (size_t j = 0; j < n; j++) {
            qr[j * whole->n_row + i] = lwi_pm_value(p->big[2][i * n + j], 0.0);
        }
    }
    if (whole->n_row > rank) {
        (void)lwi_qrp(qr, n, whole->n_row, whole->n_row, p->tau, p->perm);
    }
    lwi_pm *a = p->big[1];
    for (size_t i = 0; i < rank; i++) {
        for (size_t j = 0; j < n; j++) {
            a[j * rank + i] = p->big[2][p->perm[i] * n + j];
        }
    }
    return lwi_rank_prepare(p->rank, a, n, rank, rank) &&
           lwi_rank_at_least(p->rank, LWI_RANK_POSTURE * largest(a, n * rank));
}

/* Without closure rows and rods the drives see the joints through constants: judged once. */
void lwi_hold_constant(lwi_prove *p)
{
    const lwi_system *whole = p->model->whole;
    const lw_spec *spec = p->model->spec;
    size_t n = whole->n_var;
    size_t n_scalar = lw_spec_coord_count(spec) - spec->n_rod;
    double sv[LWI_MAX_VARS];
    double *a = p->square;
    p->hold_constant = 0.0;
    if (whole->n_row > 0 || n == 0 || spec->n_drive < n || n > 24) {
        return;
    }
    memset(a, 0, spec->n_drive * n * sizeof *a);
    for (size_t d = 0; d < spec->n_drive; d++) {
        double scale = spec->drive[d].turning ? 1.0 : 1.0 / p->model->length_m;
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            const lw_term *term = &spec->drive[d].term[t];
            int k = term->coord < n_scalar ? whole->coord_element[term->coord] : -1;
            if (k < 0) {
                return;
            }
            int var = whole->element[k].var;
            a[d * n + (size_t)var] += scale * term->factor * whole->var_scale[var];
        }
    }
    lwi_svd(a, spec->n_drive, n, n, sv, NULL);
    /* A part in 1e12 for the roundings of a decomposition of this size. */
    p->hold_constant = sv[n - 1] > LWI_RANK_POSTURE * sv[0] ? sv[n - 1] * (1.0 - 1e-12) : 0.0;
}

bool lwi_hold_model(lwi_prove *p)
{
    const lwi_system *whole = p->model->whole;
    bool asked = p->min->asked[LW_MARGIN_HOLD];
    if (p->hold_constant > 0.0) {
        p->hold = p->hold_constant;
        p->low[LW_MARGIN_HOLD] = fmin(p->low[LW_MARGIN_HOLD], p->hold);
        p->met[LW_MARGIN_HOLD] = fmin(p->met[LW_MARGIN_HOLD], p->hold * (1.0 + 4e-12));
        return true;
    }
    if (p->joints && !asked) {
        /* The leading readings and the closure rows are regular: with them locked nothing moves. */
        p->hold = p->sigma;
        return p->hold > LWI_RANK_POSTURE * largest(p->jac, p->block[0].n * p->block[0].n);
    }
    if (!p->whole_needed && !asked) {
        return hold_of_rates(p);
    }
    if (!p->joints && !place_whole(p)) {
        p->stage = LWI_STAGE_UNSUPPORTED;
        return false;
    }
    /* Along the freedoms the closure rows vanish: times anything they leave the hold as it is, and
     * the larger the factor the nearer the least singular value of the stack comes to it. */
    size_t rows = stack(p, asked ? 16.0 : 1.0);
    bool held = constraints_hold(p, p->model->spec->n_drive) &&
                judge(p, p->big[2], rows, whole->n_var, asked);
    if (asked) {
        p->low[LW_MARGIN_HOLD] = p->hold;
    }
    return held;
}
