/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The nearest postures beyond a singularity, from eight starts that are the same every time.
 *
 * Forward: least |y| with N(y) v = 0, |v| = 1 (N: wrenches, n x m). At an iterate v is the right
 * singular vector of the least singular value and W spans what N leaves out of all others (n - m +
 * 1 columns): to first order W^T (N v + sum dy_k N_k v) = 0, of which the point nearest to the
 * posture is taken (the iteration of Hasofer, Lind and Rackwitz, from memory), shortened until
 * |y|^2 / 2 + c sigma falls. Square N: proved by opposite signs of det N at the posture and just
 * beyond, on a straight way along which the branch exists. More wrenches than freedoms: by the
 * theorem of Newton and Kantorovich on the square system in v and the n - m + 1 combinations of y
 * that matter.
 *
 * Inverse: for each rod, least |y| where its end comes as near to, or as far from, its foot's line
 * or circle as the rod is long; proved by the rod not reaching just beyond. */
#include "distance.h"

#include "../math/tol.h"
#include "../math/vec3.h"

enum { STARTS = 8, STEPS = 40, Q = LWI_BALL_RODS };

/* A step this small, of the length, ends a search: what it leaves is its square. */
#define CLOSE 1e-6

static double length_of(const double *y, size_t n)
{
    double sum = 0.0;
    for (size_t k = 0; k < n; k++) {
        sum += y[k] * y[k];
    }
    return sqrt(sum);
}

/* Orthonormal columns of what the vectors in `have` (n_have of n) leave out. */
static size_t complement(double out[][Q], double have[][Q], size_t n_have, size_t n)
{
    size_t count = 0;
    bool used[Q] = {false};
    while (n_have + count < n) {
        double best[Q] = {0};
        double most = 0.0;
        size_t pick = 0;
        for (size_t e = 0; e < n; e++) {
            double x[Q] = {0};
            if (used[e]) {
                continue;
            }
            x[e] = 1.0;
            for (int pass = 0; pass < 2; pass++) {
                for (size_t j = 0; j < n_have + count; j++) {
                    const double *q = j < n_have ? have[j] : out[j - n_have];
                    double dot = 0.0;
                    for (size_t i = 0; i < n; i++) {
                        dot += q[i] * x[i];
                    }
                    for (size_t i = 0; i < n; i++) {
                        x[i] -= dot * q[i];
                    }
                }
            }
            double size = length_of(x, n);
            if (size > most) {
                most = size;
                pick = e;
                memcpy(best, x, sizeof best);
            }
        }
        if (!(most > 1e-6)) {
            break;
        }
        used[pick] = true;
        for (size_t i = 0; i < n; i++) {
            out[count][i] = best[i] / most;
        }
        count++;
    }
    return count;
}

/* Cholesky solution of a small positive definite system; false where it is not. */
static bool solve_small(double *a, double *x, size_t n)
{
    for (size_t j = 0; j < n; j++) {
        for (size_t i = j; i < n; i++) {
            double s = a[i * n + j];
            for (size_t k = 0; k < j; k++) {
                s -= a[i * n + k] * a[j * n + k];
            }
            if (i == j && !(s > 0.0)) {
                return false;
            }
            a[i * n + j] = i == j ? sqrt(s) : s / a[j * n + j];
        }
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t k = 0; k < i; k++) {
            x[i] -= a[i * n + k] * x[k];
        }
        x[i] /= a[i * n + i];
    }
    for (size_t i = n; i-- > 0;) {
        for (size_t k = i + 1; k < n; k++) {
            x[i] -= a[k * n + i] * x[k];
        }
        x[i] /= a[i * n + i];
    }
    return true;
}

double lwi_pace_stride(lwi_pace *p, const double *step, size_t n)
{
    double top = 0.0;
    double bottom = 0.0;
    for (size_t k = 0; k < n && p->known; k++) {
        double change = step[k] - p->last[k];
        top += p->last[k] * change;
        bottom += change * change;
    }
    p->share = p->known && bottom > 0.0 ? -p->share * top / bottom : 1.0;
    p->share = fmin(fmax(p->share, 0.15), 3.0);
    p->known = true;
    memcpy(p->last, step, n * sizeof *step);
    return p->share;
}

typedef struct iterate {
    size_t n, m, q;
    double sigma, top;
    double v[LWI_BALL_COLS];
    double w[LWI_BALL_COLS][Q]; /* up to n - m + 1 of them */
    double c[LWI_BALL_COLS];    /* W^T N v */
    double slope[LWI_BALL_COLS][LWI_BALL_DIRS];
} iterate;

static bool evaluate(iterate *it, const lwi_ball *b, lwi_ball_local *l, const double *y)
{
    double a[LWI_BALL_RODS * LWI_BALL_COLS];
    double v[LWI_BALL_COLS * LWI_BALL_COLS];
    double have[LWI_BALL_COLS][Q];
    if (!lwi_ball_rods(l->rod, b, y)) {
        return false;
    }
    size_t m = it->m = b->n_col;
    size_t n = it->n = lwi_ball_matrix(l->matrix, l->rate, b, l->rod);
    memcpy(a, l->matrix, n * m * sizeof *a);
    lwi_svd(a, n, m, m, l->sigma, v);
    it->sigma = l->sigma[m - 1];
    it->top = l->sigma[0];
    if (n - m + 1 > LWI_BALL_COLS || (m > 1 && !(l->sigma[m - 2] > 1e-9 * it->top))) {
        return false;
    }
    for (size_t j = 0; j < m; j++) {
        for (size_t i = 0; i < n; i++) {
            double s = 0.0;
            for (size_t k = 0; k < m; k++) {
                s += l->matrix[i * m + k] * v[k * m + j];
            }
            have[j][i] = s / l->sigma[j];
        }
        it->v[j] = v[j * m + m - 1];
    }
    it->q = complement(it->w, have, m - 1, n);
    if (it->q != n - m + 1 || it->q > b->n_dir) {
        return false;
    }
    for (size_t q = 0; q < it->q; q++) {
        it->c[q] = 0.0;
        memset(it->slope[q], 0, sizeof it->slope[q]);
        for (size_t i = 0; i < n; i++) {
            for (size_t j = 0; j < m; j++) {
                double wv = it->w[q][i] * it->v[j];
                it->c[q] += wv * l->matrix[i * m + j];
                for (size_t k = 0; k < b->n_dir; k++) {
                    it->slope[q][k] += wv * l->rate[k][i * m + j];
                }
            }
        }
    }
    return true;
}

/* The point nearest to the posture where the linearised condition holds. */
static bool nearest(double *y_new, const iterate *it, const double *y, size_t n_dir)
{
    double a[LWI_BALL_COLS * LWI_BALL_COLS];
    double x[LWI_BALL_COLS];
    for (size_t i = 0; i < it->q; i++) {
        x[i] = -it->c[i];
        for (size_t k = 0; k < n_dir; k++) {
            x[i] += it->slope[i][k] * y[k];
        }
        for (size_t j = 0; j < it->q; j++) {
            a[i * it->q + j] = 0.0;
            for (size_t k = 0; k < n_dir; k++) {
                a[i * it->q + j] += it->slope[i][k] * it->slope[j][k];
            }
        }
    }
    if (!solve_small(a, x, it->q)) {
        return false;
    }
    for (size_t k = 0; k < n_dir; k++) {
        y_new[k] = 0.0;
        for (size_t i = 0; i < it->q; i++) {
            y_new[k] += it->slope[i][k] * x[i];
        }
    }
    return true;
}

/* One start; y holds it and then where the iteration ended. */
static bool descend(double *y, const lwi_ball *b, lwi_ball_local *l, double most)
{
    iterate it;
    iterate next;
    lwi_pace own = {.known = false};
    double weight = 0.0;
    if (!evaluate(&it, b, l, y)) {
        return false;
    }
    for (int s = 0; s < STEPS; s++) {
        double to[LWI_BALL_DIRS] = {0};
        double z[LWI_BALL_DIRS] = {0};
        double way[LWI_BALL_DIRS] = {0};
        if (!nearest(to, &it, y, b->n_dir)) {
            return false;
        }
        double step = 0.0;
        double slope = 0.0;
        double steep = 0.0;
        for (size_t k = 0; k < b->n_dir; k++) {
            way[k] = to[k] - y[k];
            step += way[k] * way[k];
            slope += way[k] * y[k];
            steep += it.slope[0][k] * it.slope[0][k];
        }
        step = sqrt(step);
        double far = length_of(y, b->n_dir);
        if (step < CLOSE * b->length_m && it.sigma < CLOSE * it.top) {
            memcpy(y, to, b->n_dir * sizeof *y);
            return true;
        }
        weight = fmax(weight, 2.0 * far / sqrt(steep + 1e-300));
        slope -= weight * it.sigma;
        double share = fmin(lwi_pace_stride(&own, way, b->n_dir), 0.7 * b->length_m / step);
        double merit = 0.5 * far * far + weight * it.sigma;
        bool moved = false;
        for (int half = 0; half < 10 && !moved; half++, share *= 0.5) {
            for (size_t k = 0; k < b->n_dir; k++) {
                z[k] = y[k] + share * way[k];
            }
            double size = length_of(z, b->n_dir);
            moved = evaluate(&next, b, l, z) &&
                    (0.5 * size * size + weight * next.sigma <= merit + 1e-4 * share * slope ||
                     step < 1e-3 * b->length_m);
        }
        if (!moved || (s > 12 && length_of(z, b->n_dir) > most)) {
            return false;
        }
        memcpy(y, z, b->n_dir * sizeof *y);
        it = next;
    }
    return false;
}

/* Sign of a determinant, 0 where it is not sure: LU gives that of a matrix which differs from this
 * one by rounding, less than the least singular value asked for. */
static int sign_at(const lwi_ball *b, lwi_ball_local *l, const double *y)
{
    size_t piv[LWI_BALL_COLS];
    double a[LWI_BALL_RODS * LWI_BALL_COLS];
    double log2_abs;
    if (!lwi_ball_rods(l->rod, b, y)) {
        return 0;
    }
    size_t m = b->n_col;
    (void)lwi_ball_matrix(l->matrix, NULL, b, l->rod);
    memcpy(a, l->matrix, m * m * sizeof *a);
    lwi_svd(a, m, m, m, l->sigma, NULL);
    if (!(l->sigma[m - 1] > 1e-12 * l->sigma[0])) {
        return 0;
    }
    memcpy(a, l->matrix, m * m * sizeof *a);
    return lwi_lu(a, m, m, piv, &log2_abs);
}

/* Just beyond y the determinant has the other sign: y moves there. */
static bool sign_changes(double *y, const lwi_ball *b, lwi_ball_local *l)
{
    const double zero[LWI_BALL_DIRS] = {0};
    double z[LWI_BALL_DIRS];
    int before = sign_at(b, l, zero);
    for (double over = 1e-10; before != 0 && over < 2e-4; over *= 10.0) {
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = y[k] * (1.0 + over);
        }
        if (sign_at(b, l, z) == -before && lwi_ball_way(b, z)) {
            memcpy(y, z, b->n_dir * sizeof *y);
            return true;
        }
    }
    return false;
}

/* Newton-Kantorovich for N(y + B a) v = 0, (|v|^2 - 1) / 2 = 0; a in units of the length. Returns
 * how far the solution may be from y, INFINITY where none is proved. */
static double rank_lost_within(const double *y, const lwi_ball *b, lwi_ball_local *l)
{
    enum { SIDE = LWI_BALL_RODS + 1 };
    static const double room = 1e-3;
    iterate it;
    double basis[LWI_BALL_COLS][LWI_BALL_DIRS];
    double f[SIDE * SIDE];
    double a[SIDE * SIDE];
    double sv[SIDE];
    double x[SIDE];
    size_t piv[SIDE];
    double log2_abs;
    if (!evaluate(&it, b, l, y) || !lwi_ball_way(b, y)) {
        return INFINITY;
    }
    for (size_t q = 0; q < it.q; q++) {
        memcpy(basis[q], it.slope[q], sizeof basis[q]);
        for (size_t p = 0; p < q; p++) {
            double dot = 0.0;
            for (size_t k = 0; k < b->n_dir; k++) {
                dot += basis[q][k] * basis[p][k];
            }
            for (size_t k = 0; k < b->n_dir; k++) {
                basis[q][k] -= dot * basis[p][k];
            }
        }
        double size = length_of(basis[q], b->n_dir);
        for (size_t k = 0; k < b->n_dir; k++) {
            basis[q][k] /= size;
        }
    }
    size_t side = it.n + 1;
    memset(f, 0, sizeof f);
    for (size_t i = 0; i < it.n; i++) {
        double sum = 0.0;
        for (size_t j = 0; j < it.m; j++) {
            f[i * side + it.q + j] = l->matrix[i * it.m + j];
            sum += l->matrix[i * it.m + j] * it.v[j];
        }
        x[i] = sum;
        for (size_t q = 0; q < it.q; q++) {
            for (size_t k = 0; k < b->n_dir; k++) {
                for (size_t j = 0; j < it.m; j++) {
                    f[i * side + q] +=
                        b->length_m * basis[q][k] * l->rate[k][i * it.m + j] * it.v[j];
                }
            }
        }
    }
    double unit = 0.0;
    for (size_t j = 0; j < it.m; j++) {
        f[it.n * side + it.q + j] = it.v[j];
        unit += it.v[j] * it.v[j];
    }
    x[it.n] = 0.5 * (unit - 1.0);
    memcpy(a, f, side * side * sizeof *a);
    lwi_svd(a, side, side, side, sv, NULL);
    if (!(sv[side - 1] > 1e-9) || lwi_lu(f, side, side, piv, &log2_abs) == 0) {
        return INFINITY;
    }
    lwi_lu_solve(f, side, side, piv, x);
    double gamma = 1.01 / sv[side - 1];
    double beta = 1.01 * length_of(x, side) + gamma * 1e-13;
    double n1;
    double n2;
    lwi_ball_norms(&n1, &n2, b, l->rod, room * b->length_m);
    n1 *= b->length_m;
    n2 *= b->length_m * b->length_m;
    double h = beta * gamma * (1.01 * n2 + 2.0 * n1 + 1.0);
    double radius = 2.0 * beta;
    return h <= 0.5 && radius < room ? radius * b->length_m : INFINITY;
}

static void start_at(double *y, const lwi_ball *b, int s, double most, lwi_random *random)
{
    double size = 0.0;
    memset(y, 0, LWI_BALL_DIRS * sizeof *y);
    if (s == 0) {
        return;
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        y[k] = lwi_random_normal(random);
        size += y[k] * y[k];
    }
    double reach = fmin(most, 3.0 * b->length_m) * (0.2 + 0.8 * lwi_random_unit(random));
    for (size_t k = 0; k < b->n_dir; k++) {
        y[k] *= reach / sqrt(size);
    }
}

void lwi_distance_forward_most(lw_distance_side *out, const lw_model *m, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    const lwi_ball *b = w->ball;
    lwi_ball_local *l = &w->balls.local;
    double best[LWI_BALL_DIRS] = {0};
    double most = INFINITY;
    lwi_random random;
    if (!b->forward) {
        return;
    }
    size_t held = 0;
    for (size_t i = 0; i < b->n_rod; i++) {
        held += b->rod[i].holds;
    }
    lwi_random_seed(&random, 20261201ULL);
    for (int s = 0; s < STARTS; s++) {
        double y[LWI_BALL_DIRS];
        start_at(y, b, s, most, &random);
        if (!descend(y, b, l, fmin(most, 40.0 * b->length_m))) {
            continue;
        }
        double off = 0.0;
        double size = length_of(y, b->n_dir);
        if (!(size < most) || (b->n_turn > 1 && size > 3.0 * b->length_m)) {
            continue;
        }
        if (held == b->n_col ? !sign_changes(y, b, l)
                             : !((off = rank_lost_within(y, b, l)) < INFINITY)) {
            continue;
        }
        size = length_of(y, b->n_dir) * (1.0 + 1e-14) + off;
        if (size < most) {
            most = size;
            memcpy(best, y, sizeof best);
        }
    }
    memcpy(w->guide, best, sizeof w->guide);
    if (most < INFINITY) {
        lwi_distance_take(out, m, best, most, work);
    }
}

/* Distance of a rod's end to the nearest (sign < 0) or farthest point of its foot's path, and the
 * direction in which it grows. */
static double gap_of(double grows[3], const lwi_ball_rod *rod, const lwi_rod_at *at, double sign)
{
    double d[3];
    double g[3];
    lwi_sub(d, at->end, rod->at);
    double height = lwi_dot(d, rod->axis);
    lwi_axpy(d, d, -height, rod->axis);
    double reach = lwi_norm(d);
    if (!lwi_unit(g, d)) {
        lwi_perpendicular(g, d, rod->axis);
    }
    if (rod->foot == LWI_FOOT_LINE) {
        lwi_copy3(grows, g);
        return reach;
    }
    double flat = reach + sign * rod->radius_m;
    double gap = hypot(flat, height);
    for (int i = 0; i < 3; i++) {
        grows[i] = gap > 0.0 ? (flat * g[i] + height * rod->axis[i]) / gap : 0.0;
    }
    return gap;
}

/* Least |y| where rod i's gap is its length. */
static bool dead_point(double *y, const lwi_ball *b, lwi_rod_at *at, size_t i, double sign)
{
    const lwi_ball_rod *rod = &b->rod[i];
    lwi_pace own = {.known = false};
    memset(y, 0, LWI_BALL_DIRS * sizeof *y);
    for (int s = 0; s < STEPS; s++) {
        double grows[3];
        double slope[LWI_BALL_DIRS];
        double square = 0.0;
        double along = 0.0;
        (void)lwi_ball_rods(at, b, y);
        double off = gap_of(grows, rod, &at[i], sign) - rod->length_m;
        for (size_t k = 0; k < b->n_dir; k++) {
            double p[3];
            lwi_cross(p, b->turn[k], at[i].arm);
            lwi_add(p, p, rod->shift[k]);
            slope[k] = lwi_dot(grows, p);
            square += slope[k] * slope[k];
            along += slope[k] * y[k];
        }
        if (!(square > 1e-12)) {
            return false;
        }
        double step = 0.0;
        double t = (along - off) / square;
        for (size_t k = 0; k < b->n_dir; k++) {
            slope[k] = t * slope[k] - y[k];
            step += slope[k] * slope[k];
        }
        step = sqrt(step);
        bool close = step < CLOSE * b->length_m;
        double share =
            close ? 1.0 : fmin(lwi_pace_stride(&own, slope, b->n_dir), 0.7 * b->length_m / step);
        for (size_t k = 0; k < b->n_dir; k++) {
            y[k] += share * slope[k];
        }
        if (close) {
            return true;
        }
    }
    return false;
}

/* How far just beyond y the rod does not reach; y moves there. */
static double unreached(double *y, const lwi_ball *b, lwi_rod_at *at, size_t i)
{
    double z[LWI_BALL_DIRS];
    for (double over = 1e-10; over < 2e-5; over *= 10.0) {
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = y[k] * (1.0 + over);
        }
        (void)lwi_ball_rods(at, b, z);
        if (at[i].slack_m < -1e-13 * b->length_m) {
            memcpy(y, z, b->n_dir * sizeof *y);
            return length_of(y, b->n_dir);
        }
    }
    return INFINITY;
}

void lwi_distance_inverse_most(lw_distance_side *out, const lw_model *m, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    const lwi_ball *b = w->ball;
    double best[LWI_BALL_DIRS] = {0};
    const double zero[LWI_BALL_DIRS] = {0};
    double most = INFINITY;
    lwi_rod_at at[LWI_BALL_RODS];
    double slack[LWI_BALL_RODS];
    (void)lwi_ball_rods(at, b, zero);
    for (size_t i = 0; i < b->n_rod; i++) {
        slack[i] = at[i].slack_m / lwi_ball_reach(b, &b->rod[i]);
    }
    for (size_t i = 0; i < b->n_rod; i++) {
        for (int side = 0; side < 2; side++) {
            double y[LWI_BALL_DIRS];
            bool circle = b->rod[i].foot == LWI_FOOT_CIRCLE;
            if (b->rod[i].foot == LWI_FOOT_POINT || slack[i] > most || (side > 0 && !circle) ||
                !dead_point(y, b, at, i, side > 0 ? 1.0 : -1.0)) {
                continue;
            }
            double size = unreached(y, b, at, i);
            if (size < most && !(b->n_turn > 1 && size > 3.14 * b->length_m)) {
                most = size;
                out->limb = b->rod[i].limb;
                memcpy(best, y, sizeof best);
            }
        }
    }
    if (most < INFINITY) {
        /* The posture just before it, since there is none beyond. */
        for (size_t k = 0; k < b->n_dir; k++) {
            best[k] *= 1.0 - 1e-5;
        }
        lwi_distance_take(out, m, best, most, work);
    }
}
