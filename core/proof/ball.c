/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The ball test, and that of a box.
 *
 * N(y) is the matrix of wrenches at the pose y, Q any matrix of its size. If the
 * symmetric part of Q^T N(y) is positive definite, N(y) has full column rank. With N = N0 + sum y_k
 * N_k + sum y_k y_l N_kl / 2 + R3 and T = the symmetric parts of Q^T N, whitened so that that of N0
 * is the identity,
 *
 *     sum y_k T_k >= -c/2 - (sum y_k T_k)^2 / (2 c) >= -c/2 - |y|^2 sum T_k^2 / (2 c)
 *
 * for any c > 0 (Cauchy-Schwarz for symmetric matrices), and more generally
 *
 *     X >= -(P + X P^-1 X) / 2,    X P^-1 X <= |y|^2 sum T_k P^-1 T_k    for X = sum y_k T_k
 *
 * with any positive definite P, here c times a diagonal one, which is larger where the matrix is
 * strong; likewise for the second order with |y|^4
 * sum T_kl^2 / 4, and the third order is bounded by its Frobenius norm over the ball. One Cholesky
 * factorisation of a matrix of the tool's size then judges the whole ball. Q is the polar factor of
 * N0. Rounding of point values is covered by SLACK (true errors are below 1e-13); the factorisation
 * is that of the matrix less a margin (Demmel 1989; Higham 2002, theorem 10.7; from memory). */
#include "ball.h"

#include "../math/vec3.h"

#include <stdint.h>

#define SLACK 1e-11
#define UP    LWI_BALL_UP

/* ---- the third order, bounded over a ball ---------------------------------------------------- */

/* Frobenius norm of the third derivative of the wrenches along any unit motion within r of the
 * pose; infinite where a rod may come to its dead point. */
double lwi_ball_third(const lwi_ball *b, const lwi_rod_at *rod, double radius)
{
    enum { SLICES = 16 };
    double total[SLICES] = {0};
    double worst = 0.0;
    size_t slices = b->n_turn > 0 ? SLICES : 1;
    for (size_t i = 0; i < b->n_rod; i++) {
        const lwi_ball_rod *own = &b->rod[i];
        if (!own->holds) {
            continue;
        }
        double straight = lwi_ball_spread((const double(*)[3])own->shift, b->n_dir);
        double extra[LWI_BALL_DIRS][3];
        for (size_t k = 0; k < b->n_dir; k++) {
            lwi_sub(extra[k], own->shift[k], b->shift[k]);
        }
        double drift = lwi_ball_spread((const double(*)[3])extra, b->n_dir) / b->length_m;
        double rho = lwi_ball_lever(b, rod[i].arm) + (b->n_turn > 0 ? drift * radius : 0.0);
        double arm = lwi_norm(rod[i].arm) / b->length_m + drift * radius;
        double moved = radius * hypot(straight, rho);
        double s = 1.0;
        double length = own->length_m;
        if (own->foot == LWI_FOOT_POINT) {
            length = rod[i].length_m - moved;
        } else {
            s = lwi_ball_along(own, &rod[i], moved);
        }
        if (!(length > 0.0) || !(s > 0.0)) {
            return INFINITY;
        }
        for (size_t q = 0; q < slices; q++) {
            /* share of turning between low and high, of shifting at most what is left */
            double low = (double)q / SLICES;
            double high = b->n_turn > 0 ? (double)(q + 1) / SLICES : 0.0;
            double w = high / b->length_m;
            double p1 = straight * sqrt(1.0 - low * low) + high * rho;
            double p2 = w * high * rho;
            double p3 = w * p2;
            lwi_unit_bounds v;
            lwi_ball_unit(&v, own, length, s, p1, p2, p3);
            double a1 = high * rho / b->length_m + drift;
            double a2 = p2 / b->length_m;
            double a3 = p3 / b->length_m;
            double moment = a3 + 3.0 * a2 * v.u1 + 3.0 * a1 * v.u2 + arm * v.u3;
            double slide = own->slide >= 0 ? v.u3 * v.u3 : 0.0;
            total[q] += v.u3 * v.u3 + moment * moment + slide;
        }
    }
    for (size_t q = 0; q < slices; q++) {
        worst = fmax(worst, total[q]);
    }
    return sqrt(worst) * UP;
}

/* ---- the test -------------------------------------------------------------------------------- */

/* Cholesky of a, of which the lower triangle counts, less a margin on the diagonal. */
static bool positive(double *a, size_t m)
{
    for (size_t j = 0; j < m; j++) {
        double d = a[j * m + j] - SLACK;
        for (size_t k = 0; k < j; k++) {
            d -= a[j * m + k] * a[j * m + k];
        }
        if (!(d > 0.0)) {
            return false;
        }
        d = sqrt(d);
        a[j * m + j] = d;
        for (size_t i = j + 1; i < m; i++) {
            double s = a[i * m + j];
            for (size_t k = 0; k < j; k++) {
                s -= a[i * m + k] * a[j * m + k];
            }
            a[i * m + j] = s / d;
        }
    }
    return true;
}

/* t = the symmetric part of left^T d right, whitened. */
static void whiten(double *t, const lwi_ball_local *l, const double *d)
{
    size_t n = l->n;
    size_t m = l->m;
    double half[LWI_BALL_RODS * LWI_BALL_COLS];
    double full[LWI_BALL_COLS * LWI_BALL_COLS];
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < m; j++) {
            double s = 0.0;
            for (size_t k = 0; k < m; k++) {
                s += d[i * m + k] * l->right[k * m + j];
            }
            half[i * m + j] = s;
        }
    }
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j < m; j++) {
            double s = 0.0;
            for (size_t k = 0; k < n; k++) {
                s += l->left[k * m + i] * half[k * m + j];
            }
            full[i * m + j] = s;
        }
    }
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j <= i; j++) {
            t[i * m + j] = t[j * m + i] = 0.5 * (full[i * m + j] + full[j * m + i]);
        }
    }
}

/* sum += factor t P^-1 t for a diagonal P, given by its inverse. */
static void add_square(double *sum, const double *t, size_t m, double factor, const double *over)
{
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j <= i; j++) {
            double s = 0.0;
            for (size_t k = 0; k < m; k++) {
                s += t[i * m + k] * over[k] * t[k * m + j];
            }
            sum[i * m + j] += factor * s;
            if (i != j) {
                sum[j * m + i] += factor * s;
            }
        }
    }
}

/* Polar factor of the matrix: left = U s^-1/2, right = V s^-1/2. */
static bool factor(lwi_ball_local *l)
{
    size_t n = l->n;
    size_t m = l->m;
    double a[LWI_BALL_RODS * LWI_BALL_COLS];
    double v[LWI_BALL_COLS * LWI_BALL_COLS];
    if (n < m) {
        return false;
    }
    memcpy(a, l->matrix, n * m * sizeof *a);
    lwi_svd(a, n, m, m, l->sigma, v);
    if (!(l->sigma[m - 1] > 1e-8 * l->sigma[0])) {
        return false;
    }
    for (size_t j = 0; j < m; j++) {
        double root = 1.0 / sqrt(l->sigma[j]);
        for (size_t i = 0; i < m; i++) {
            l->right[i * m + j] = v[i * m + j] * root;
        }
        for (size_t i = 0; i < n; i++) {
            double s = 0.0;
            for (size_t k = 0; k < m; k++) {
                s += l->matrix[i * m + k] * v[k * m + j];
            }
            l->left[i * m + j] = s * root / l->sigma[j];
        }
    }
    return true;
}

/* The diagonal of P: strong directions have room to take over from weak ones. */
static double share_of(const lwi_ball_local *l, size_t way, size_t i)
{
    return 1.0 + 0.35 * (double)way * (1.0 - l->sigma[l->m - 1] / l->sigma[i]);
}

/* Adds the squares of n symmetric matrices, each with its factor. */
static void add_squares(double (*sum)[LWI_BALL_COLS * LWI_BALL_COLS], const lwi_ball_local *l,
                        double (*t)[LWI_BALL_COLS * LWI_BALL_COLS], size_t n, const double *a)
{
    for (int v = 0; v < LWI_BALL_WAYS; v++) {
        memset(sum[v], 0, sizeof sum[v]);
        for (size_t j = 0; j < n; j++) {
            add_square(sum[v], t[j], l->m, a[j], l->over[v]);
        }
    }
}

static double norm_of(const double *t, size_t m)
{
    double square = 0.0;
    for (size_t i = 0; i < m * m; i++) {
        square += t[i] * t[i];
    }
    return sqrt(square) + 1e-300;
}

/* Factors f with (sum y_k T_k)^2 <= sum f_k T_k^2 for |y_k| <= w_k and |y| <= reach. Some of the
 * y_k count each for itself, the others together as a ball: with t_k > 0, best near the norms,
 * S = sum w_k t_k + R t, R the reach of those together and t the norm of their t_k,
 * f_k = S w_k / t_k and S R / t. The narrow ones are counted alone, as many as is best. */
static void first_factors(double *f, const double *w, const double *t, size_t n, double reach)
{
    size_t order[LWI_BALL_DIRS];
    size_t best = 0;
    double least = INFINITY;
    for (size_t i = 0; i < n; i++) {
        size_t k = i;
        for (; k > 0 && w[order[k - 1]] > w[i]; k--) {
            order[k] = order[k - 1];
        }
        order[k] = i;
    }
    for (int pass = 0; pass < 2; pass++) {
        for (size_t alone = pass == 0 ? 0 : best; alone <= (pass == 0 ? n : best); alone++) {
            double sum = 0.0;
            double wide = 0.0;
            double norm = 0.0;
            for (size_t i = 0; i < n; i++) {
                size_t k = order[i];
                sum += i < alone ? w[k] * t[k] : 0.0;
                wide += i < alone ? 0.0 : w[k] * w[k];
                norm += i < alone ? 0.0 : t[k] * t[k];
            }
            wide = fmin(sqrt(wide), reach);
            norm = sqrt(norm) + 1e-300;
            sum += alone < n ? wide * norm : 0.0;
            if (pass == 0 && sum < least) {
                least = sum;
                best = alone;
            }
            for (size_t i = 0; i < n && pass == 1; i++) {
                size_t k = order[i];
                f[k] = UP * sum * (i < alone ? w[k] / t[k] : wide / norm);
            }
        }
    }
}

/* The same for sum a_j T_j with |a_j| up to a[j], or the sum of their squares over `part` up to
 * reach^4. */
static void second_factors(double *f, const double *a, const double *part, const double *t,
                           size_t n, double reach)
{
    double box = 0.0;
    double ball = 0.0;
    for (size_t j = 0; j < n; j++) {
        box += a[j] * t[j];
        ball += part[j] * t[j] * t[j];
    }
    ball = reach * reach * sqrt(ball);
    for (size_t j = 0; j < n; j++) {
        f[j] = UP * (box < ball ? box * a[j] / t[j] : reach * reach * reach * reach * part[j]);
    }
}

/* Everything of the test that does not depend on the radius. `width`: half widths of a box of which
 * what lies within reach of its centre counts, NULL: a ball of radius 1, to be scaled. */
static bool local_at(lwi_ball_local *l, const lwi_ball *b, const double *y, const double *width,
                     double reach)
{
    double bend[LWI_BALL_RODS * LWI_BALL_COLS];
    double t[LWI_BALL_PAIRS][LWI_BALL_COLS * LWI_BALL_COLS];
    double a[LWI_BALL_PAIRS] = {0};
    double part[LWI_BALL_PAIRS] = {0};
    double norm[LWI_BALL_PAIRS];
    double f[LWI_BALL_PAIRS];
    lwi_rod_rates rates[LWI_BALL_RODS];
    l->regular = false;
    if (!lwi_ball_rods(l->rod, b, y)) {
        return false;
    }
    l->m = b->n_col;
    l->n = lwi_ball_matrix(l->matrix, l->rate, b, l->rod);
    if (!factor(l)) {
        return false;
    }
    for (size_t v = 0; v < LWI_BALL_WAYS; v++) {
        for (size_t i = 0; i < l->m; i++) {
            l->over[v][i] = 1.0 / share_of(l, v, i);
        }
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        whiten(t[k], l, l->rate[k]);
        l->change[k] = norm[k] = norm_of(t[k], l->m);
        f[k] = 1.0;
    }
    if (width != NULL) {
        first_factors(f, width, norm, b->n_dir, reach);
    }
    add_squares(l->first, l, t, b->n_dir, f);
    for (size_t i = 0; i < b->n_rod; i++) {
        lwi_ball_rates(&rates[i], b, &b->rod[i], &l->rod[i]);
    }
    size_t pair = 0;
    for (size_t k = 0; k < b->n_dir; k++) {
        for (size_t j = 0; j <= k; j++) {
            size_t n = 0;
            for (size_t i = 0; i < b->n_rod; i++) {
                if (b->rod[i].holds) {
                    lwi_ball_bend(bend + n++ * l->m, b, &b->rod[i], &l->rod[i], &rates[i], k, j);
                }
            }
            whiten(t[pair], l, bend);
            /* y_k y_l T_kl, half of it on the diagonal; squared in a ball, |y|^4 in all */
            part[pair] = j == k ? 0.25 : 0.5;
            a[pair] = width == NULL ? 0.0 : (j == k ? 0.5 : 1.0) * width[k] * width[j];
            norm[pair] = norm_of(t[pair], l->m);
            f[pair] = part[pair];
            pair++;
        }
    }
    if (width != NULL) {
        second_factors(f, a, part, norm, pair, reach);
    }
    add_squares(l->second, l, t, pair, f);
    l->regular = true;
    return true;
}

/* True where every pose of the ball (r) or of the box that `l` was made for (reach r) is proved
 * regular. */
static bool test_radius(const lwi_ball_local *l, const lwi_ball *b, double r, bool box)
{
    size_t m = l->m;
    double a[LWI_BALL_COLS * LWI_BALL_COLS];
    double size = 0.0;
    double rest = lwi_ball_third(b, l->rod, r) * r * r * r / 6.0;
    double arm = 1.0;
    double one = box ? 1.0 : r * r;
    double two = box ? 1.0 : r * r * r * r;
    if (!(rest < 1e3)) {
        return false;
    }
    for (size_t i = 0; i < b->n_rod; i++) {
        arm = fmax(arm, lwi_norm(l->rod[i].arm) / b->length_m);
    }
    rest += SLACK * (double)l->n * arm;
    for (size_t i = 0; i < m * m; i++) {
        size += l->second[0][i] * l->second[0][i];
    }
    /* Which P are best depends on which directions are weak: a few are tried. */
    for (size_t way = 0; way < 8 * LWI_BALL_WAYS; way++) {
        static const double share[4] = {1.0, 0.9, 0.75, 0.55};
        size_t v = way % LWI_BALL_WAYS;
        double c1 = share[way / LWI_BALL_WAYS % 4];
        double c2 = (way < 4 * LWI_BALL_WAYS ? 0.5 : 1.0) * sqrt(two * sqrt(size)) + 1e-12;
        for (size_t i = 0; i < m; i++) {
            for (size_t j = 0; j <= i; j++) {
                a[i * m + j] = -one * l->first[v][i * m + j] / (2.0 * c1) -
                               two * l->second[v][i * m + j] / (2.0 * c2);
            }
            a[i * m + i] += 1.0 - 0.5 * (c1 + c2) * share_of(l, v, i) - UP * rest / l->sigma[i];
        }
        if (positive(a, m)) {
            return true;
        }
    }
    return false;
}

double lwi_ball_forward_once(const lwi_ball *b, lwi_ball_local *l, double most_m)
{
    const double zero[LWI_BALL_DIRS] = {0};
    double low = 0.0;
    double high = most_m;
    if (!local_at(l, b, zero, NULL, 0.0)) {
        return 0.0;
    }
    for (size_t i = 0; i < l->m; i++) { /* farther out the first order alone fails */
        high = fmin(high, sqrt(4.0 / l->first[0][i * l->m + i]));
    }
    for (int i = 0; i < 16; i++) {
        double r = 0.5 * (low + high);
        if (test_radius(l, b, r, false)) {
            low = r;
        } else {
            high = r;
        }
    }
    return low;
}

/* ---- cells that hold a dead point ------------------------------------------------------------ */

/* Near a dead point the rod's direction is continuous but not smooth. While the end moves by d it
 * stays within `rest` of u + h t, |h| <= half: t is the way the foot moves, which takes all that is
 * steep there. */
typedef struct unit_range {
    double u[3], t[3];
    double half, rest;
} unit_range;

static void line_range(unit_range *out, const lwi_ball_rod *rod, const lwi_rod_at *at, double d)
{
    double length = rod->length_m;
    double v[3];
    lwi_sub(v, at->end, rod->at);
    lwi_axpy(v, v, -lwi_dot(v, rod->axis), rod->axis);
    double across = lwi_norm(v);
    double low = fmin(fmax(across - d, 0.0), length);
    double high = fmin(across + d, length);
    double far = sqrt(length * length - low * low) / length;
    double near = sqrt(fmax(length * length - high * high, 0.0)) / length;
    /* u = (across, +-sqrt(L^2 - across^2)) / L */
    for (int i = 0; i < 3; i++) {
        out->t[i] = rod->axis[i];
        out->u[i] = v[i] / length + rod->sign * 0.5 * (far + near) * rod->axis[i];
    }
    out->half = 0.5 * (far - near);
    out->rest = d / length;
}

static void circle_range(unit_range *out, const lwi_ball_rod *rod, const lwi_rod_at *at, double d)
{
    double length = rod->length_m;
    double r = rod->radius_m;
    double v[3];
    double g[3];
    double t[3];
    lwi_sub(v, at->end, rod->at);
    double signed_height = lwi_dot(v, rod->axis);
    double height = fabs(signed_height);
    lwi_axpy(v, v, -signed_height, rod->axis);
    double reach = lwi_norm(v);
    double low = reach - d;
    double high = reach + d;
    memset(out, 0, sizeof *out);
    out->rest = INFINITY;
    if (!(low > 0.0) || !lwi_unit(g, v)) {
        return;
    }
    double tall = rod->flat ? height : height + d;
    double flat = rod->flat ? height : fmax(height - d, 0.0);
    /* The cosine at the centre is (h^2 + r^2 - L^2) / (2 r x) + x / (2 r), x the reach. */
    double c0 = flat * flat + r * r - length * length;
    double c1 = tall * tall + r * r - length * length;
    double least = (fmin(c0 / low, c0 / high) + low) / (2.0 * r);
    double most = (fmax(c1 / low, c1 / high) + high) / (2.0 * r);
    double wide = acos(fmin(fmax(least, -1.0), 1.0));
    double narrow = acos(fmin(fmax(most, -1.0), 1.0));
    double middle = 0.5 * (wide + narrow);
    double turn = 0.5 * (wide - narrow) + asin(fmin(d / reach, 1.0));
    double cosine = cos(middle);
    double sine = -rod->sign * sin(middle);
    lwi_cross(t, rod->axis, g);
    for (int i = 0; i < 3; i++) {
        double foot = r * (cosine * g[i] + sine * t[i]);
        out->u[i] = (v[i] + signed_height * rod->axis[i] - foot) / length;
        out->t[i] = cosine * t[i] - sine * g[i];
    }
    out->half = r * turn / length;
    out->rest = (d + 0.5 * r * turn * turn) / length;
}

static void range_of(unit_range *out, const lwi_ball_rod *rod, const lwi_rod_at *at, double d)
{
    if (rod->foot == LWI_FOOT_LINE) {
        line_range(out, rod, at, d);
    } else if (rod->foot == LWI_FOOT_CIRCLE) {
        circle_range(out, rod, at, d);
    } else {
        lwi_copy3(out->u, at->u);
        memset(out->t, 0, sizeof out->t);
        out->half = 0.0;
        out->rest = at->length_m > d ? d / (at->length_m - d) : INFINITY;
    }
}

/* Zero order: with the wrenches' middle values whitened to the identity, the steep parts, one row
 * each, change them by no more than half the sum of size and inner product, the rest by its
 * Frobenius norm. */
static bool test_rough(lwi_ball_local *l, const lwi_ball *b, double r)
{
    unit_range range[LWI_BALL_RODS];
    double p[3];
    double sum = 0.0;
    size_t n = 0;
    l->m = b->n_col;
    for (size_t i = 0; i < b->n_rod; i++) {
        const lwi_ball_rod *rod = &b->rod[i];
        if (!rod->holds) {
            continue;
        }
        double d = r * lwi_ball_reach(b, rod) * UP;
        range_of(&range[n], rod, &l->rod[i], d);
        lwi_ball_moment(p, l->rod[i].arm, range[n].u, b->length_m);
        lwi_ball_wrench(l->matrix + n * l->m, b, rod, range[n].u, p);
        double arm = lwi_norm(l->rod[i].arm) / b->length_m;
        double moved = (d + r) / b->length_m; /* of the arm: no more than both its ends */
        double rest = range[n].rest;
        double m = arm * rest + moved * (1.0 + rest + range[n].half);
        sum += rest * rest + m * m + (rod->slide >= 0 ? rest * rest : 0.0);
        n++;
    }
    l->n = n;
    if (!(sum < 1e6) || !factor(l)) {
        return false;
    }
    double taken = UP * (sqrt(sum) + SLACK * (double)n) / l->sigma[l->m - 1];
    n = 0;
    for (size_t i = 0; i < b->n_rod && taken < 1.0; i++) {
        double row[LWI_BALL_COLS];
        double dot = 0.0;
        double left = 0.0;
        double right = 0.0;
        if (!b->rod[i].holds) {
            continue;
        }
        lwi_ball_moment(p, l->rod[i].arm, range[n].t, b->length_m);
        lwi_ball_wrench(row, b, &b->rod[i], range[n].t, p);
        for (size_t j = 0; j < l->m; j++) {
            double s = 0.0;
            for (size_t k = 0; k < l->m; k++) {
                s += row[k] * l->right[k * l->m + j];
            }
            dot += s * l->left[n * l->m + j];
            left += l->left[n * l->m + j] * l->left[n * l->m + j];
            right += s * s;
        }
        taken += UP * range[n].half * 0.5 * (fabs(dot) + sqrt(left * right));
        n++;
    }
    return taken < 1.0;
}

lwi_ball_verdict lwi_ball_test(lwi_ball_local *l, const lwi_ball *b, lwi_ball_side side,
                               const double *y, const double *width, double reach)
{
    double r = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        r += width[k] * width[k];
    }
    r = fmin(sqrt(r), reach) * UP;
    bool real = lwi_ball_rods(l->rod, b, y);
    bool all = true;
    for (size_t i = 0; i < b->n_rod; i++) {
        double d = r * lwi_ball_reach(b, &b->rod[i]);
        if (b->rod[i].foot == LWI_FOOT_POINT) {
            continue;
        }
        if (l->rod[i].slack_m < -d * UP) {
            return LWI_BALL_EMPTY; /* no posture anywhere in the cell */
        }
        all = all && l->rod[i].slack_m > d * UP;
    }
    if (side == LWI_BALL_INVERSE) {
        return all ? LWI_BALL_PROVED : LWI_BALL_OPEN;
    }
    if (real && all && local_at(l, b, y, width, r) && test_radius(l, b, r, true)) {
        return LWI_BALL_PROVED;
    }
    if (!all) {
        l->regular = false;
        return test_rough(l, b, r) ? LWI_BALL_PROVED : LWI_BALL_OPEN;
    }
    return LWI_BALL_OPEN;
}
