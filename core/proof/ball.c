/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rods at a pose, their derivatives along motions, and the ball test.
 *
 * Let P be a rod's end, E its foot, L its length, u = (P - E) / L, and the foot moves by t per unit
 * of its coordinate q (t = 0: a fixed foot, L not constant). Along a motion of the tool
 *
 *     q' = u.P' / u.t,    L u' = P' - t q',
 *     q'' = (u.P'' - u.t' q'^2 + L u'.u') / u.t,    L u'' = P'' - t q'' - t' q'^2,
 *
 * and with s = |u.t| / |t| the oblique projection 1 - t u^T / (u.t) has norm 1 / s, so |u'| <= |P'|
 * / (L s), |q'| <= |P'| / (|t| s), and so on for the higher ones. A fixed foot gives |u'| <= |P'|
 * / L, |D2 u| <= 2 / sqrt 3 / L^2, |D3 u| <= 3 / L^3: the greatest of the unit vector's derivatives
 * along straight lines.
 *
 * The test. N(y) is the matrix of wrenches at the pose y, Q any matrix of its size. If the
 * symmetric part of Q^T N(y) is positive definite, N(y) has full column rank. With N = N0 + sum y_k
 * N_k + sum y_k y_l N_kl / 2 + R3 and T = the symmetric parts of Q^T N, whitened so that that of N0
 * is the identity,
 *
 *     sum y_k T_k >= -c/2 - (sum y_k T_k)^2 / (2 c) >= -c/2 - |y|^2 sum T_k^2 / (2 c)
 *
 * for any c > 0 (Cauchy-Schwarz for symmetric matrices), likewise for the second order with |y|^4
 * sum T_kl^2 / 4, and the third order is bounded by its Frobenius norm over the ball. One Cholesky
 * factorisation of a matrix of the tool's size then judges the whole ball. Q is the polar factor of
 * N0. Rounding of point values is covered by SLACK (true errors are below 1e-13); the factorisation
 * is that of the matrix less a margin (Demmel 1989; Higham 2002, theorem 10.7; from memory). */
#include "ball.h"

#include "../math/vec3.h"

#include <stdint.h>

#define SLACK 1e-11
#define UP (1.0 + 1e-9)

/* ---- poses ---------------------------------------------------------------------------------- */

static void turn_of(double rot[9], double w[3], const lwi_ball *b, const double *y)
{
    double unit[3];
    w[0] = w[1] = w[2] = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_axpy(w, w, y[k], b->turn[k]);
    }
    double angle = lwi_norm(w);
    if (!lwi_unit(unit, w)) {
        unit[0] = 1.0;
        unit[1] = unit[2] = 0.0;
    }
    lwi_rot_axis(rot, unit, angle);
}

void lwi_ball_pose(lw_frame *tool, const lwi_ball *b, const double *y)
{
    double rot[9];
    double w[3];
    turn_of(rot, w, b, y);
    lwi_rot_mul(tool->rot, rot, b->tool.rot);
    lwi_copy3(tool->pos_m, b->tool_m);
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_axpy(tool->pos_m, tool->pos_m, y[k], b->shift[k]);
    }
}

/* ---- rods ----------------------------------------------------------------------------------- */

static void line_foot(lwi_rod_at *at, const lwi_ball_rod *rod)
{
    double d[3];
    double h[3];
    lwi_sub(d, at->end, rod->at);
    double along = lwi_dot(d, rod->axis);
    lwi_axpy(h, d, -along, rod->axis);
    double across = lwi_norm(h);
    double root = rod->length_m * rod->length_m - across * across;
    at->real = root > 0.0;
    at->slack_m = rod->length_m - across;
    root = at->real ? sqrt(root) : 0.0;
    at->length_m = rod->length_m;
    if (!at->real && across > 0.0) {
        at->length_m = across; /* clipped: the rod square to the rail, as long as it takes */
    }
    for (int i = 0; i < 3; i++) {
        at->u[i] = (h[i] + rod->sign * root * rod->axis[i]) / at->length_m;
        at->foot[i] = rod->at[i] + (along - rod->sign * root) * rod->axis[i];
    }
    lwi_copy3(at->tau, rod->axis);
    at->along = lwi_dot(at->u, at->tau);
}

static void circle_foot(lwi_rod_at *at, const lwi_ball_rod *rod)
{
    double d[3];
    double g[3];
    double t[3];
    double e[3];
    lwi_sub(d, at->end, rod->at);
    double height = lwi_dot(d, rod->axis);
    lwi_axpy(g, d, -height, rod->axis);
    double reach = lwi_norm(g);
    double r = rod->radius_m;
    double k = (height * height + r * r + reach * reach - rod->length_m * rod->length_m) /
               (2.0 * r);
    double cosine = reach > 0.0 ? k / reach : 2.0;
    /* Distances to the nearest and farthest point of the circle, each changing by no more than
     * the end moves. */
    at->slack_m = fmin(rod->length_m - hypot(reach - r, height),
                       hypot(reach + r, height) - rod->length_m);
    at->real = fabs(cosine) < 1.0;
    cosine = cosine > 1.0 ? 1.0 : cosine < -1.0 ? -1.0 : cosine;
    double sine = -rod->sign * sqrt(1.0 - cosine * cosine);
    if (!lwi_unit(g, g)) {
        double unused[3];
        lwi_perpendicular(g, unused, rod->axis);
    }
    lwi_cross(t, rod->axis, g);
    for (int i = 0; i < 3; i++) {
        e[i] = r * (cosine * g[i] + sine * t[i]);
        at->foot[i] = rod->at[i] + e[i];
        at->tau[i] = r * (cosine * t[i] - sine * g[i]);
    }
    lwi_sub(d, at->end, at->foot);
    at->length_m = lwi_norm(d);
    for (int i = 0; i < 3; i++) {
        at->u[i] = d[i] / at->length_m;
    }
    at->along = lwi_dot(at->u, at->tau) / r;
}

static void foot_of(lwi_rod_at *at, const lwi_ball_rod *rod)
{
    if (rod->foot == LWI_FOOT_LINE) {
        line_foot(at, rod);
    } else if (rod->foot == LWI_FOOT_CIRCLE) {
        circle_foot(at, rod);
    } else {
        double d[3];
        lwi_copy3(at->foot, rod->at);
        lwi_sub(d, at->end, at->foot);
        at->length_m = lwi_norm(d);
        at->real = at->length_m > 0.0;
        at->slack_m = at->length_m;
        memset(at->tau, 0, sizeof at->tau);
        at->along = 1.0;
        for (int i = 0; i < 3; i++) {
            at->u[i] = at->real ? d[i] / at->length_m : 0.0;
        }
    }
}

bool lwi_ball_rods(lwi_rod_at *out, const lwi_ball *b, const double *y)
{
    double rot[9];
    double w[3];
    double point[3];
    bool real = true;
    turn_of(rot, w, b, y);
    lwi_copy3(point, b->tool_m);
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_axpy(point, point, y[k], b->shift[k]);
    }
    for (size_t i = 0; i < b->n_rod; i++) {
        const lwi_ball_rod *rod = &b->rod[i];
        lwi_rod_at *at = &out[i];
        lwi_rot_apply(at->arm, rot, rod->arm);
        for (size_t k = 0; k < b->n_dir; k++) {
            for (int j = 0; j < 3; j++) {
                at->arm[j] += y[k] * (rod->shift[k][j] - b->shift[k][j]);
            }
        }
        lwi_add(at->end, point, at->arm);
        foot_of(at, rod);
        real = real && at->real;
    }
    return real;
}

/* Greatest norm of sum y_k v_k over unit y, from above: the Frobenius norm where the vectors are
 * not a frame already. */
static double spread(const double (*v)[3], size_t n)
{
    double gram[9] = {0};
    double sum = 0.0;
    for (size_t k = 0; k < n; k++) {
        for (int i = 0; i < 3; i++) {
            for (int j = 0; j < 3; j++) {
                gram[3 * i + j] += v[k][i] * v[k][j];
            }
        }
    }
    /* The largest eigenvalue is at most the largest absolute row sum. */
    for (int i = 0; i < 3; i++) {
        sum = fmax(sum, fabs(gram[3 * i]) + fabs(gram[3 * i + 1]) + fabs(gram[3 * i + 2]));
    }
    return sqrt(fmin(sum, gram[0] + gram[4] + gram[8])) * UP;
}

/* What turns can move an end by, per unit of the metric. */
static double lever(const lwi_ball *b, const double arm[3])
{
    double v[LWI_BALL_DIRS][3];
    if (b->n_turn == 0) {
        return 0.0;
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_cross(v[k], b->turn[k], arm);
    }
    if (b->n_turn == 1) {
        return spread((const double (*)[3])v, b->n_dir);
    }
    return lwi_norm(arm) / b->length_m * UP;
}

double lwi_ball_reach(const lwi_ball *b, const lwi_ball_rod *rod)
{
    return hypot(spread((const double (*)[3])rod->shift, b->n_dir), lever(b, rod->arm)) * UP;
}

/* ---- matrices ------------------------------------------------------------------------------- */

/* A wrench on the columns, from the derivative of a rod: u and arm x u / length, any order. */
static void wrench(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const double u[3],
                   const double moment[3])
{
    for (size_t c = 0; c < b->n_twist; c++) {
        out[c] = lwi_dot(b->col[c], u) + lwi_dot(b->col[c] + 3, moment);
    }
    for (size_t c = b->n_twist; c < b->n_col; c++) {
        out[c] = (int)c == rod->slide ? lwi_dot(rod->slide_axis, u) : 0.0;
    }
}

typedef struct rod_rates {
    double end[LWI_BALL_DIRS][3];  /* P' */
    double arm[LWI_BALL_DIRS][3];
    double turned[LWI_BALL_DIRS][3]; /* the part by turning: w x arm */
    double u[LWI_BALL_DIRS][3];
    double foot[LWI_BALL_DIRS];    /* q' */
} rod_rates;

static void rates_of(rod_rates *r, const lwi_ball *b, const lwi_ball_rod *rod,
                     const lwi_rod_at *at)
{
    double slope = lwi_dot(at->u, at->tau);
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_cross(r->turned[k], b->turn[k], at->arm);
        for (int j = 0; j < 3; j++) {
            r->arm[k][j] = r->turned[k][j] + rod->shift[k][j] - b->shift[k][j];
            r->end[k][j] = r->turned[k][j] + rod->shift[k][j];
        }
        double along = lwi_dot(at->u, r->end[k]);
        r->foot[k] = rod->foot == LWI_FOOT_POINT ? along : along / slope;
        const double *off = rod->foot == LWI_FOOT_POINT ? at->u : at->tau;
        for (int j = 0; j < 3; j++) {
            r->u[k][j] = (r->end[k][j] - off[j] * r->foot[k]) / at->length_m;
        }
    }
}

static void moment_of(double out[3], const double a[3], const double u[3], double length_m)
{
    lwi_cross(out, a, u);
    for (int j = 0; j < 3; j++) {
        out[j] /= length_m;
    }
}

size_t lwi_ball_matrix(double *matrix, double (*rate)[LWI_BALL_RODS * LWI_BALL_COLS],
                       const lwi_ball *b, const lwi_rod_at *rod)
{
    size_t n = 0;
    double p[3];
    double q[3];
    for (size_t i = 0; i < b->n_rod; i++) {
        const lwi_rod_at *at = &rod[i];
        if (!b->rod[i].holds) {
            continue;
        }
        moment_of(p, at->arm, at->u, b->length_m);
        wrench(matrix + n * b->n_col, b, &b->rod[i], at->u, p);
        if (rate != NULL) {
            rod_rates r;
            rates_of(&r, b, &b->rod[i], at);
            for (size_t k = 0; k < b->n_dir; k++) {
                moment_of(p, r.arm[k], at->u, b->length_m);
                moment_of(q, at->arm, r.u[k], b->length_m);
                lwi_add(p, p, q);
                wrench(rate[k] + n * b->n_col, b, &b->rod[i], r.u[k], p);
            }
        }
        n++;
    }
    return n;
}

/* Second derivative of one wrench along directions k and l. */
static void bend_of(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const lwi_rod_at *at,
                    const rod_rates *r, size_t k, size_t l)
{
    double turned[3];
    double q[3];
    double u[3];
    double m[3];
    /* The second derivative along a motion of constant turn rate is w x (w x arm); half the sum
     * of both orders is its bilinear form. */
    lwi_cross(turned, b->turn[k], r->turned[l]);
    lwi_cross(q, b->turn[l], r->turned[k]);
    for (int j = 0; j < 3; j++) {
        turned[j] = 0.5 * (turned[j] + q[j]);
    }
    double both = lwi_dot(r->u[k], r->u[l]);
    double length = at->length_m;
    if (rod->foot == LWI_FOOT_POINT) {
        double along = lwi_dot(at->u, turned);
        for (int j = 0; j < 3; j++) {
            u[j] = (turned[j] - along * at->u[j]) / length - at->u[j] * both -
                   (r->foot[k] * r->u[l][j] + r->foot[l] * r->u[k][j]) / length;
        }
    } else {
        double curve[3] = {0, 0, 0}; /* t' */
        if (rod->foot == LWI_FOOT_CIRCLE) {
            lwi_sub(curve, rod->at, at->foot);
        }
        double qq = r->foot[k] * r->foot[l];
        double second = (lwi_dot(at->u, turned) - lwi_dot(at->u, curve) * qq + length * both) /
                        lwi_dot(at->u, at->tau);
        for (int j = 0; j < 3; j++) {
            u[j] = (turned[j] - at->tau[j] * second - curve[j] * qq) / length;
        }
    }
    moment_of(m, turned, at->u, b->length_m);
    moment_of(q, r->arm[k], r->u[l], b->length_m);
    lwi_add(m, m, q);
    moment_of(q, r->arm[l], r->u[k], b->length_m);
    lwi_add(m, m, q);
    moment_of(q, at->arm, u, b->length_m);
    lwi_add(m, m, q);
    wrench(out, b, rod, u, m);
}

/* ---- the third order, bounded over a ball ---------------------------------------------------- */

/* Lower bound of s over all places of the end within d of where it is; 0 where it may vanish. */
static double along_least(const lwi_ball_rod *rod, const lwi_rod_at *at, double d)
{
    if (rod->foot == LWI_FOOT_LINE) {
        double across = (rod->length_m - at->slack_m) + d;
        double root = rod->length_m * rod->length_m - across * across;
        return root > 0.0 ? sqrt(root) / rod->length_m : 0.0;
    }
    double v[3];
    lwi_sub(v, at->end, rod->at);
    double height = fabs(lwi_dot(v, rod->axis));
    lwi_axpy(v, v, -lwi_dot(v, rod->axis), rod->axis);
    double reach = lwi_norm(v);
    double most = rod->flat ? height : height + d;
    double least = rod->flat ? height : fmax(height - d, 0.0);
    double length = rod->length_m * rod->length_m;
    double low = fmax(reach - d, 0.0);
    double high = reach + d;
    double inner = fmax((low - rod->radius_m) * (low - rod->radius_m),
                        (high - rod->radius_m) * (high - rod->radius_m));
    double near = length - most * most - inner;
    double far = (low + rod->radius_m) * (low + rod->radius_m) + least * least - length;
    if (!(near > 0.0) || !(far > 0.0)) {
        return 0.0;
    }
    return sqrt(near * far) / (2.0 * rod->radius_m * rod->length_m);
}

typedef struct unit_bounds {
    double u1, u2, u3;
} unit_bounds;

/* From bounds of P', P'', P''' and s. */
static void bound_unit(unit_bounds *out, const lwi_ball_rod *rod, double length, double s,
                       double p1, double p2, double p3)
{
    const double two = 1.1547005383792517;
    double over = 1.0 / length;
    if (rod->foot == LWI_FOOT_POINT) {
        out->u1 = p1 * over;
        out->u2 = p2 * over + two * p1 * p1 * over * over;
        out->u3 = p3 * over + 3.0 * two * p1 * p2 * over * over + 3.0 * p1 * p1 * p1 * over * over *
                                                                      over;
        return;
    }
    double r = rod->foot == LWI_FOOT_CIRCLE ? rod->radius_m : 0.0;
    double q1 = r > 0.0 ? p1 / (r * s) : 0.0;
    out->u1 = p1 * over / s;
    double sum = p2 + r * q1 * q1 + length * out->u1 * out->u1;
    out->u2 = sum * over / s;
    double q2 = r > 0.0 ? sum / (r * s) : 0.0;
    out->u3 = (p3 + 3.0 * r * q1 * q2 + r * q1 * q1 * q1 + 3.0 * length * out->u1 * out->u2) *
              over / s;
}

/* Frobenius norm of the third derivative of the wrenches along any unit motion within r of the
 * pose; infinite where a rod may come to its dead point. */
static double third_of(const lwi_ball *b, const lwi_rod_at *rod, double radius)
{
    enum { SLICES = 8 };
    double total = 0.0;
    size_t slices = b->n_turn > 0 ? SLICES : 1;
    for (size_t i = 0; i < b->n_rod; i++) {
        const lwi_ball_rod *own = &b->rod[i];
        if (!own->holds) {
            continue;
        }
        double straight = spread((const double (*)[3])own->shift, b->n_dir);
        double extra[LWI_BALL_DIRS][3];
        for (size_t k = 0; k < b->n_dir; k++) {
            lwi_sub(extra[k], own->shift[k], b->shift[k]);
        }
        double drift = spread((const double (*)[3])extra, b->n_dir) / b->length_m;
        double rho = lever(b, rod[i].arm) + (b->n_turn > 0 ? drift * radius : 0.0);
        double arm = lwi_norm(rod[i].arm) / b->length_m + drift * radius;
        double moved = radius * hypot(straight, rho);
        double s = 1.0;
        double length = own->length_m;
        if (own->foot == LWI_FOOT_POINT) {
            length = rod[i].length_m - moved;
        } else {
            s = along_least(own, &rod[i], moved);
        }
        if (!(length > 0.0) || !(s > 0.0)) {
            return INFINITY;
        }
        double most = 0.0;
        for (size_t q = 0; q < slices; q++) {
            /* share of turning between low and high, of shifting at most what is left */
            double low = (double)q / SLICES;
            double high = b->n_turn > 0 ? (double)(q + 1) / SLICES : 0.0;
            double w = high / b->length_m;
            double p1 = straight * sqrt(1.0 - low * low) + high * rho;
            double p2 = w * high * rho;
            double p3 = w * p2;
            unit_bounds v;
            bound_unit(&v, own, length, s, p1, p2, p3);
            double a1 = high * rho / b->length_m + drift;
            double a2 = p2 / b->length_m;
            double a3 = p3 / b->length_m;
            double moment = a3 + 3.0 * a2 * v.u1 + 3.0 * a1 * v.u2 + arm * v.u3;
            double slide = own->slide >= 0 ? v.u3 * v.u3 : 0.0;
            most = fmax(most, v.u3 * v.u3 + moment * moment + slide);
        }
        total += most;
    }
    return sqrt(total) * UP;
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

static void add_square(double *sum, const double *t, size_t m, double factor)
{
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j <= i; j++) {
            double s = 0.0;
            for (size_t k = 0; k < m; k++) {
                s += t[i * m + k] * t[k * m + j];
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

/* Adds the squares of n symmetric matrices. In a ball each counts as it is; in a box, where the
 * coefficient of matrix j is at most a_j, (sum a_j T_j)^2 <= (sum a_j t_j) sum a_j T_j^2 / t_j for
 * any t_j > 0, best near their norms. */
static void add_squares(double *sum, double (*t)[LWI_BALL_COLS * LWI_BALL_COLS], size_t n,
                        const double *a, bool box, size_t m)
{
    double norm[LWI_BALL_PAIRS];
    double total = 0.0;
    for (size_t j = 0; j < n && box; j++) {
        double square = 0.0;
        for (size_t i = 0; i < m * m; i++) {
            square += t[j][i] * t[j][i];
        }
        norm[j] = sqrt(square) + 1e-300;
        total += a[j] * norm[j];
    }
    for (size_t j = 0; j < n; j++) {
        add_square(sum, t[j], m, box ? UP * total * a[j] / norm[j] : a[j]);
    }
}

/* Everything of the test that does not depend on the radius. `width`: half widths of a box, NULL: a
 * ball. */
static bool local_at(lwi_ball_local *l, const lwi_ball *b, const double *y, const double *width)
{
    double bend[LWI_BALL_RODS * LWI_BALL_COLS];
    double t[LWI_BALL_PAIRS][LWI_BALL_COLS * LWI_BALL_COLS];
    double a[LWI_BALL_PAIRS] = {0};
    rod_rates rates[LWI_BALL_RODS];
    l->regular = false;
    if (!lwi_ball_rods(l->rod, b, y)) {
        return false;
    }
    l->m = b->n_col;
    l->n = lwi_ball_matrix(l->matrix, l->rate, b, l->rod);
    if (!factor(l)) {
        return false;
    }
    memset(l->first, 0, sizeof l->first);
    memset(l->second, 0, sizeof l->second);
    for (size_t k = 0; k < b->n_dir; k++) {
        whiten(t[k], l, l->rate[k]);
        a[k] = width != NULL ? width[k] : 1.0;
    }
    add_squares(l->first, t, b->n_dir, a, width != NULL, l->m);
    for (size_t i = 0; i < b->n_rod; i++) {
        rates_of(&rates[i], b, &b->rod[i], &l->rod[i]);
    }
    size_t pair = 0;
    for (size_t k = 0; k < b->n_dir; k++) {
        for (size_t j = 0; j <= k; j++) {
            size_t n = 0;
            for (size_t i = 0; i < b->n_rod; i++) {
                if (b->rod[i].holds) {
                    bend_of(bend + n++ * l->m, b, &b->rod[i], &l->rod[i], &rates[i], k, j);
                }
            }
            whiten(t[pair], l, bend);
            /* y_k y_l T_kl, half of it on the diagonal; squared in a ball, |y|^4 in all */
            double part = j == k ? 0.25 : 0.5;
            a[pair++] = width == NULL ? part : (j == k ? 0.5 : 1.0) * width[k] * width[j];
        }
    }
    add_squares(l->second, t, pair, a, width != NULL, l->m);
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
    double rest = third_of(b, l->rod, r) * r * r * r / 6.0;
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
        size += l->second[i] * l->second[i];
    }
    double c2 = sqrt(two * sqrt(size)) + 1e-12;
    for (int way = 0; way < 3; way++) {
        double c1 = way == 0 ? 1.0 : way == 1 ? 0.75 : 0.55;
        for (size_t i = 0; i < m; i++) {
            for (size_t j = 0; j <= i; j++) {
                a[i * m + j] = -one * l->first[i * m + j] / (2.0 * c1) -
                               two * l->second[i * m + j] / (2.0 * c2);
            }
            a[i * m + i] += 1.0 - 0.5 * c1 - 0.5 * c2 - UP * rest / l->sigma[i];
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
    if (!local_at(l, b, zero, NULL)) {
        return 0.0;
    }
    for (size_t i = 0; i < l->m; i++) { /* farther out the first order alone fails */
        high = fmin(high, sqrt(2.0 / l->first[i * l->m + i]));
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
        moment_of(p, l->rod[i].arm, range[n].u, b->length_m);
        wrench(l->matrix + n * l->m, b, rod, range[n].u, p);
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
        moment_of(p, l->rod[i].arm, range[n].t, b->length_m);
        wrench(row, b, &b->rod[i], range[n].t, p);
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
                               const double *y, const double *width)
{
    double r = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        r += width[k] * width[k];
    }
    r = sqrt(r) * UP;
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
    if (real && all && local_at(l, b, y, width) && test_radius(l, b, r, true)) {
        return LWI_BALL_PROVED;
    }
    if (!all) {
        l->regular = false;
        return test_rough(l, b, r) ? LWI_BALL_PROVED : LWI_BALL_OPEN;
    }
    return LWI_BALL_OPEN;
}

double lwi_ball_inverse_once(const lwi_ball *b, size_t *limb)
{
    const double zero[LWI_BALL_DIRS] = {0};
    lwi_rod_at at[LWI_BALL_RODS];
    double least = INFINITY;
    *limb = SIZE_MAX;
    (void)lwi_ball_rods(at, b, zero);
    for (size_t i = 0; i < b->n_rod; i++) {
        double r = at[i].slack_m / lwi_ball_reach(b, &b->rod[i]);
        if (b->rod[i].foot != LWI_FOOT_POINT && r < least) {
            least = fmax(r * (1.0 - 1e-12), 0.0);
            *limb = b->rod[i].limb;
        }
    }
    return least;
}

bool lwi_ball_way(const lwi_ball *b, const double *y)
{
    enum { STEPS = 400 };
    lwi_rod_at at[LWI_BALL_RODS];
    double reach[LWI_BALL_RODS];
    double z[LWI_BALL_DIRS];
    double whole = 0.0;
    double gone = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        whole += y[k] * y[k];
    }
    whole = sqrt(whole);
    for (size_t i = 0; i < b->n_rod; i++) {
        reach[i] = lwi_ball_reach(b, &b->rod[i]);
    }
    for (int s = 0; s < STEPS; s++) {
        double step = INFINITY;
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = whole > 0.0 ? y[k] * (gone / whole) : 0.0;
        }
        if (!lwi_ball_rods(at, b, z)) {
            return false;
        }
        for (size_t i = 0; i < b->n_rod; i++) {
            step = fmin(step, at[i].slack_m / reach[i]);
        }
        if (gone + step * (1.0 - 1e-9) >= whole) {
            return true;
        }
        if (!(step > 1e-7 * b->length_m)) {
            return false;
        }
        gone += 0.999 * step;
    }
    return false;
}

void lwi_ball_bounds(lwi_rod_bounds *out, const lwi_ball *b, const lwi_ball_rod *rod,
                     const lwi_rod_at *at, double r)
{
    unit_bounds v;
    out->p1 = lwi_ball_reach(b, rod);
    out->p2 = b->n_turn > 0 ? lever(b, at->arm) / b->length_m : 0.0;
    double moved = r * out->p1;
    double s = rod->foot == LWI_FOOT_POINT ? 1.0 : along_least(rod, at, moved);
    double length = rod->foot == LWI_FOOT_POINT ? at->length_m - moved : rod->length_m;
    out->holds = length > 0.0 && s > 0.0;
    if (!out->holds) {
        return;
    }
    bound_unit(&v, rod, length, s, out->p1, out->p2, out->p2 / b->length_m);
    double radius = rod->foot == LWI_FOOT_CIRCLE ? rod->radius_m : 0.0;
    double tau = radius > 0.0 ? radius : 1.0;
    out->u1 = v.u1;
    out->u2 = v.u2;
    out->length_m = length;
    out->q1 = out->p1 / (tau * s);
    out->q2 = (out->p2 + radius * out->q1 * out->q1 + length * v.u1 * v.u1) / (tau * s);
}

void lwi_ball_norms(double *first, double *second, const lwi_ball *b, const lwi_rod_at *at,
                    double r)
{
    double sum1 = 0.0;
    double sum2 = 0.0;
    for (size_t i = 0; i < b->n_rod; i++) {
        lwi_rod_bounds v;
        if (!b->rod[i].holds) {
            continue;
        }
        lwi_ball_bounds(&v, b, &b->rod[i], &at[i], r);
        if (!v.holds) {
            *first = *second = INFINITY;
            return;
        }
        double a1 = (v.p1 + 1.0) / b->length_m;
        double arm = lwi_norm(at[i].arm) / b->length_m + a1 * r;
        double a2 = v.p2 / b->length_m;
        double m1 = a1 + arm * v.u1;
        double m2 = a2 + 2.0 * a1 * v.u1 + arm * v.u2;
        sum1 += 2.0 * v.u1 * v.u1 + m1 * m1;
        sum2 += 2.0 * v.u2 * v.u2 + m2 * m2;
    }
    *first = sqrt(sum1) * UP;
    *second = sqrt(sum2) * UP;
}
