/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Constrained Gauss-Newton on the configuration manifold. One QR with column pivoting of the
 * transposed closure rows gives the least-norm correction and the null space in one go (Golub & Van
 * Loan, Matrix Computations, 5.5 and 12.1); goals are solved in that null space. */
#include "newton.h"

#include "../math/tol.h"
#include "../math/vec3.h"

static double wrap_pi(double x)
{
    return x - 6.283185307179586476925 * round(x / 6.283185307179586476925);
}

static double goal_body(double f[3], double m[3], double p[3], const lwi_goal *goal,
                        const lw_frame *x)
{
    double rest[9];
    double v[3];
    double tool[9];
    switch (goal->kind) {
    case LWI_GOAL_POINT:
        f[goal->axis] = 1.0;
        lwi_frame_apply(p, x, goal->point_m);
        return goal->value - p[goal->axis];
    case LWI_GOAL_ROT: {
        double back[9];
        for (size_t i = 0; i < 3; i++) {
            for (size_t j = 0; j < 3; j++) {
                back[3 * i + j] = x->rot[3 * j + i];
            }
        }
        lwi_rot_mul(rest, goal->rot, back);
        lwi_rot_log(v, rest);
        m[goal->axis] = 1.0;
        return v[goal->axis];
    }
    case LWI_GOAL_ZYX:
        lwi_rot_mul(tool, x->rot, goal->rot0);
        lw_zyx_from_rot(v, tool);
        lwi_zyx_axis(m, v, goal->axis);
        return wrap_pi(goal->value - v[goal->axis]);
    default: {
        /* Direction: rotate z onto dir; components of the rotation across dir. */
        double e[2][3];
        double z0[3] = {goal->rot0[2], goal->rot0[5], goal->rot0[8]};
        double z[3];
        lwi_rot_apply(z, x->rot, z0);
        lwi_perpendicular(e[0], e[1], goal->dir);
        lwi_cross(v, z, goal->dir);
        lwi_copy3(m, e[goal->axis]);
        double s = lwi_norm(v);
        double angle = atan2(s, lwi_dot(z, goal->dir));
        double scale = s > 1e-9 ? angle / s : 1.0;
        return scale * lwi_dot(v, e[goal->axis]);
    }
    }
}

bool lwi_goal_eval(double *residual, double *row, const lwi_goal *goal, const lwi_system *sys,
                   const lwi_state *state, const lwi_eval *ev)
{
    if (goal->kind == LWI_GOAL_TERMS) {
        double value;
        if (!lwi_terms(&value, row, sys, state, ev, goal->term, goal->n_term)) {
            return false;
        }
        *residual = goal->weight * (goal->value - value);
    } else if (goal->kind == LWI_GOAL_BALL) {
        int k = sys->ball_element[goal->ball];
        if (k < 0) {
            return false;
        }
        const lwi_element *el = &sys->element[k];
        double have[4];
        double rest[4];
        double back[4];
        memcpy(have, state->quat[el->quat], sizeof have);
        for (int i = 0; i < 4; i++) {
            back[i] = i > 0 ? -have[i] : have[i];
        }
        /* rest = wanted * have^-1 in the parent's axes (mirrored for reversed balls) */
        if (el->sign > 0.0) {
            lwi_quat_mul(rest, goal->quat, back);
        } else {
            lwi_quat_mul(rest, back, goal->quat);
        }
        double side = rest[0] < 0.0 ? -2.0 : 2.0;
        *residual = goal->weight * el->sign * side * rest[1 + goal->axis];
        if (row != NULL) {
            memset(row, 0, sys->n_var * sizeof *row);
            if (el->var >= 0) {
                row[(size_t)el->var + goal->axis] = 1.0;
            }
        }
    } else {
        double f[3] = {0, 0, 0};
        double m[3] = {0, 0, 0};
        double p[3] = {0, 0, 0};
        size_t node = sys->body_node[goal->body];
        *residual = goal->weight * goal_body(f, m, p, goal, &ev->node[node]);
        if (row != NULL) {
            lwi_twist_row(row, sys, ev, node, p, f, m);
        }
    }
    for (size_t i = 0; row != NULL && i < sys->n_var; i++) {
        row[i] *= goal->weight;
    }
    return true;
}

static double norm_of(const double *x, size_t n)
{
    double s = 0.0;
    for (size_t i = 0; i < n; i++) {
        s += x[i] * x[i];
    }
    return sqrt(s);
}

/* Factors the transposed closure rows: nw->qr becomes n_var x n_row reflectors. Returns the rank
 * used: `rank`, or less where pivots vanish. */
static size_t factor_rows(const lwi_system *sys, size_t rank, lwi_newton_work *nw)
{
    size_t n = sys->n_var;
    size_t m = sys->n_row;
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j < n; j++) {
            nw->qr[j * m + i] = nw->rows[i * n + j];
        }
    }
    size_t steps = lwi_qrp(nw->qr, n, m, m, nw->tau, nw->perm);
    rank = rank < steps ? rank : steps;
    double first = steps > 0 ? fabs(nw->qr[0]) : 0.0;
    size_t r = 0;
    while (r < rank && fabs(nw->qr[r * m + r]) > 1e-11 * first) {
        r++;
    }
    return r;
}

/* Scaled step: least-norm closure correction plus the goals' share in the null space. */
static void make_step(const lwi_system *sys, size_t rank, size_t n_goal, lwi_newton_work *nw,
                      size_t *free_left)
{
    size_t n = sys->n_var;
    size_t m = sys->n_row;
    double *w = nw->vec; /* Q^T y */
    memset(w, 0, n * sizeof *w);
    size_t r = m > 0 ? factor_rows(sys, rank, nw) : 0;
    for (size_t i = 0; i < r; i++) { /* R^T w = -res */
        double s = -nw->res[nw->perm[i]];
        for (size_t j = 0; j < i; j++) {
            s -= nw->qr[j * m + i] * w[j];
        }
        w[i] = s / nw->qr[i * m + i];
    }
    size_t left = n - r;
    *free_left = left;
    if (n_goal > 0 && left > 0) {
        for (size_t g = 0; g < n_goal; g++) {
            double *row = nw->goals + g * n;
            if (r > 0) {
                lwi_qrp_qt(nw->qr, n, r, m, nw->tau, row);
            }
            double s = nw->goal_res[g];
            for (size_t i = 0; i < r; i++) {
                s -= row[i] * w[i];
            }
            nw->vec[n + g] = s;
            memcpy(nw->reduced + g * left, row + r, left * sizeof *row);
        }
        size_t got = lwi_lsq(nw->reduced, n_goal, left, left, nw->vec + n, w + r, 1e-11, nw->tau2,
                             nw->perm2);
        *free_left = left - got;
    }
    memcpy(nw->step, w, n * sizeof *w);
    if (r > 0) {
        lwi_qrp_q(nw->qr, n, r, m, nw->tau, nw->step);
    }
}

static double curved_size(const lwi_system *sys, const double *y)
{
    double s = 0.0;
    for (size_t i = 0; i < sys->n_var; i++) {
        s += sys->var_curved[i] ? y[i] * y[i] : 0.0;
    }
    return sqrt(s);
}

/* Share of a step that stays where the linearisation means something: 0.7 rad of all turns
 * together, three characteristic lengths of slides and screws, which are straighter. */
static double trust(const lwi_system *sys, const double *y)
{
    double turn = 0.0;
    double slide = 0.0;
    for (size_t i = 0; i < sys->n_var; i++) {
        bool length = sys->var_scale[i] != 1.0;
        if (sys->var_curved[i]) {
            *(length ? &slide : &turn) += y[i] * y[i];
        }
    }
    double share = 1.0;
    if (turn > 0.49) {
        share = 0.7 / sqrt(turn);
    }
    if (slide > 9.0) {
        share = fmin(share, 3.0 / sqrt(slide));
    }
    return share;
}

void lwi_newton(lwi_newton_info *info, const lwi_system *sys, size_t rank, const lwi_goal *goal,
                size_t n_goal, int max_iterations, lwi_state *state, lwi_eval *ev,
                lwi_newton_work *nw)
{
    size_t n = sys->n_var;
    memset(info, 0, sizeof *info);
    lwi_eval_nodes(ev, sys, state);
    double last = 0.0;
    for (int it = 0; it < max_iterations; it++) {
        (void)lwi_eval_rows(nw->res, nw->rows, n, sys, state, ev);
        for (size_t g = 0; g < n_goal; g++) {
            (void)lwi_goal_eval(&nw->goal_res[g], nw->goals + g * n, &goal[g], sys, state, ev);
        }
        make_step(sys, rank, n_goal, nw, &info->free_left);
        double size = norm_of(nw->step, n);
        if (!(size < 1e6)) {
            break;
        }
        double share = trust(sys, nw->step);
        if (share < 1.0) {
            for (size_t i = 0; i < n; i++) {
                nw->step[i] *= share;
            }
            size *= share;
        }
        lwi_state_step(state, sys, nw->step);
        lwi_eval_nodes(ev, sys, state);
        info->iterations = it + 1;
        info->moved += curved_size(sys, nw->step);
        if (it == 0) {
            info->first_step = size;
        } else if (last > 1e-6 && size / last > info->contraction) {
            info->contraction = size / last;
        }
        info->last_step = size;
        /* Quadratic convergence: the next step would be of the order size^2. */
        bool small = size <= LWI_NEWTON_STEP ||
                     (size <= 1e-8 && it > 0 && size <= 1e-3 * last) || (it > 8 && size < 1e-11);
        last = size;
        if (small) {
            info->converged = true;
            break;
        }
    }
    double worst = 0.0;
    for (size_t i = 0; i < sys->n_row; i++) {
        double r = fabs(lwi_row_residual(sys, &sys->row[i], state, ev));
        worst = r <= worst ? worst : r;
    }
    double sum = 0.0;
    for (size_t g = 0; g < n_goal; g++) {
        double r = 0.0;
        (void)lwi_goal_eval(&r, NULL, &goal[g], sys, state, ev);
        sum += r * r;
    }
    info->residual = worst;
    info->goal = sqrt(sum);
    if (!(worst <= LWI_CLOSED)) {
        info->converged = false;
    }
}

double lwi_null_space(double *k, const lwi_system *sys, size_t rank, const lwi_state *state,
                      const lwi_eval *ev, lwi_newton_work *nw)
{
    size_t n = sys->n_var;
    size_t m = sys->n_row;
    size_t left = n - rank;
    double ratio = 1.0;
    if (m > 0) {
        (void)lwi_eval_rows(nw->res, nw->rows, n, sys, state, ev);
        size_t r = factor_rows(sys, rank, nw);
        ratio = rank == 0 ? 1.0
                : r < rank
                    ? 0.0
                    : fabs(nw->qr[(rank - 1) * m + rank - 1]) / fabs(nw->qr[0]);
    }
    for (size_t c = 0; c < left; c++) {
        memset(nw->step, 0, n * sizeof *nw->step);
        nw->step[rank + c] = 1.0;
        if (rank > 0 && m > 0) {
            lwi_qrp_q(nw->qr, n, rank, m, nw->tau, nw->step);
        }
        for (size_t i = 0; i < n; i++) {
            k[i * left + c] = nw->step[i];
        }
    }
    return ratio;
}

size_t lwi_null_space_here(double *k, const lwi_system *sys, size_t rank, double threshold,
                           const lwi_newton_work *nw)
{
    size_t n = sys->n_var;
    size_t m = sys->n_row;
    size_t r = 0;
    while (r < rank && m > 0 && fabs(nw->qr[r * m + r]) > threshold * fabs(nw->qr[0])) {
        r++;
    }
    size_t left = n - r;
    double *column = nw->step;
    for (size_t c = 0; c < left; c++) {
        memset(column, 0, n * sizeof *column);
        column[r + c] = 1.0;
        if (r > 0) {
            lwi_qrp_q(nw->qr, n, r, m, nw->tau, column);
        }
        for (size_t i = 0; i < n; i++) {
            k[i * left + c] = column[i];
        }
    }
    return left;
}

bool lwi_row_multipliers(double *multiplier, double *r, const lwi_system *sys, size_t rank,
                         const lwi_newton_work *nw)
{
    size_t m = sys->n_row;
    for (size_t i = 0; i < m; i++) {
        multiplier[i] = 0.0;
    }
    if (m == 0 || rank == 0) {
        return true;
    }
    lwi_qrp_qt(nw->qr, sys->n_var, rank, m, nw->tau, r);
    for (size_t i = rank; i-- > 0;) {
        double pivot = nw->qr[i * m + i];
        if (!(fabs(pivot) > 1e-11 * fabs(nw->qr[0]))) {
            return false;
        }
        double s = r[i];
        for (size_t j = i + 1; j < rank; j++) {
            s -= nw->qr[i * m + j] * multiplier[nw->perm[j]];
        }
        multiplier[nw->perm[i]] = s / pivot;
    }
    return true;
}
