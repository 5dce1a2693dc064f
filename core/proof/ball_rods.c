/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rods at a pose, their derivatives along motions, and bounds of those.
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
 * along straight lines. */
#include "ball.h"

#include "../math/vec3.h"

#include <stdint.h>

#define UP LWI_BALL_UP

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
    double k =
        (height * height + r * r + reach * reach - rod->length_m * rod->length_m) / (2.0 * r);
    double cosine = reach > 0.0 ? k / reach : 2.0;
    /* Distances to the nearest and farthest point of the circle, each changing by no more than
     * the end moves. */
    at->slack_m =
        fmin(rod->length_m - hypot(reach - r, height), hypot(reach + r, height) - rod->length_m);
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
double lwi_ball_spread(const double (*v)[3], size_t n)
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
double lwi_ball_lever(const lwi_ball *b, const double arm[3])
{
    double v[LWI_BALL_DIRS][3];
    if (b->n_turn == 0) {
        return 0.0;
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        lwi_cross(v[k], b->turn[k], arm);
    }
    if (b->n_turn == 1) {
        return lwi_ball_spread((const double(*)[3])v, b->n_dir);
    }
    return lwi_norm(arm) / b->length_m * UP;
}

double lwi_ball_reach(const lwi_ball *b, const lwi_ball_rod *rod)
{
    return hypot(lwi_ball_spread((const double(*)[3])rod->shift, b->n_dir),
                 lwi_ball_lever(b, rod->arm)) *
           UP;
}

/* ---- matrices ------------------------------------------------------------------------------- */

/* A wrench on the columns, from the derivative of a rod: u and arm x u / length, any order. */
void lwi_ball_wrench(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const double u[3],
                     const double moment[3])
{
    for (size_t c = 0; c < b->n_twist; c++) {
        out[c] = lwi_dot(b->col[c], u) + lwi_dot(b->col[c] + 3, moment);
    }
    for (size_t c = b->n_twist; c < b->n_col; c++) {
        out[c] = (int)c == rod->slide ? lwi_dot(rod->slide_axis, u) : 0.0;
    }
}

void lwi_ball_rates(lwi_rod_rates *r, const lwi_ball *b, const lwi_ball_rod *rod,
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

void lwi_ball_moment(double out[3], const double a[3], const double u[3], double length_m)
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
        lwi_ball_moment(p, at->arm, at->u, b->length_m);
        lwi_ball_wrench(matrix + n * b->n_col, b, &b->rod[i], at->u, p);
        if (rate != NULL) {
            lwi_rod_rates r;
            lwi_ball_rates(&r, b, &b->rod[i], at);
            for (size_t k = 0; k < b->n_dir; k++) {
                lwi_ball_moment(p, r.arm[k], at->u, b->length_m);
                lwi_ball_moment(q, at->arm, r.u[k], b->length_m);
                lwi_add(p, p, q);
                lwi_ball_wrench(rate[k] + n * b->n_col, b, &b->rod[i], r.u[k], p);
            }
        }
        n++;
    }
    return n;
}

/* Second derivative of one wrench along directions k and l. */
void lwi_ball_bend(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const lwi_rod_at *at,
                   const lwi_rod_rates *r, size_t k, size_t l)
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
    lwi_ball_moment(m, turned, at->u, b->length_m);
    lwi_ball_moment(q, r->arm[k], r->u[l], b->length_m);
    lwi_add(m, m, q);
    lwi_ball_moment(q, r->arm[l], r->u[k], b->length_m);
    lwi_add(m, m, q);
    lwi_ball_moment(q, at->arm, u, b->length_m);
    lwi_add(m, m, q);
    lwi_ball_wrench(out, b, rod, u, m);
}

/* ---- bounds ---------------------------------------------------------------------------------- */

/* Lower bound of s over all places of the end within d of where it is; 0 where it may vanish. */
double lwi_ball_along(const lwi_ball_rod *rod, const lwi_rod_at *at, double d)
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

/* From bounds of P', P'', P''' and s. */
void lwi_ball_unit(lwi_unit_bounds *out, const lwi_ball_rod *rod, double length, double s,
                   double p1, double p2, double p3)
{
    const double two = 1.1547005383792517;
    double over = 1.0 / length;
    if (rod->foot == LWI_FOOT_POINT) {
        out->u1 = p1 * over;
        out->u2 = p2 * over + two * p1 * p1 * over * over;
        out->u3 =
            p3 * over + 3.0 * two * p1 * p2 * over * over + 3.0 * p1 * p1 * p1 * over * over * over;
        return;
    }
    double r = rod->foot == LWI_FOOT_CIRCLE ? rod->radius_m : 0.0;
    double q1 = r > 0.0 ? p1 / (r * s) : 0.0;
    out->u1 = p1 * over / s;
    double sum = p2 + r * q1 * q1 + length * out->u1 * out->u1;
    out->u2 = sum * over / s;
    double q2 = r > 0.0 ? sum / (r * s) : 0.0;
    out->u3 =
        (p3 + 3.0 * r * q1 * q2 + r * q1 * q1 * q1 + 3.0 * length * out->u1 * out->u2) * over / s;
}

void lwi_ball_bounds(lwi_rod_bounds *out, const lwi_ball *b, const lwi_ball_rod *rod,
                     const lwi_rod_at *at, double r)
{
    lwi_unit_bounds v;
    out->p1 = lwi_ball_reach(b, rod);
    out->p2 = b->n_turn > 0 ? lwi_ball_lever(b, at->arm) / b->length_m : 0.0;
    double moved = r * out->p1;
    double s = rod->foot == LWI_FOOT_POINT ? 1.0 : lwi_ball_along(rod, at, moved);
    double length = rod->foot == LWI_FOOT_POINT ? at->length_m - moved : rod->length_m;
    out->holds = length > 0.0 && s > 0.0;
    if (!out->holds) {
        return;
    }
    lwi_ball_unit(&v, rod, length, s, out->p1, out->p2, out->p2 / b->length_m);
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

/* ---- dead points and ways -------------------------------------------------------------------- */

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
