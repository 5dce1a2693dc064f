/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Six revolutes of which the last three meet in one point (Pieper 1968), the second and third
 * parallel and square to the first: all eight solutions without iteration. Factors, one bit each:
 * shoulder (wrist centre on the first axis side), elbow (stretched or folded), wrist (axes four and
 * six in line). */
#include "../math/vec3.h"
#include "../model/model.h"

typedef struct arm {
    double u[6][3];   /* axes, pointing so that the turn is body 1 seen from the base side */
    double at[6][3];
    double wrist[3];  /* wrist centre */
    double x[3], y[3], z[3];
} arm;

static bool lines_meet(double at[3], const double p[3], const double u[3], const double q[3],
                       const double v[3])
{
    double n[3];
    double d[3];
    double t[3];
    lwi_cross(n, u, v);
    double s = lwi_dot(n, n);
    if (s < 1e-12) {
        return false;
    }
    lwi_sub(d, q, p);
    lwi_cross(t, d, v);
    lwi_axpy(at, p, lwi_dot(t, n) / s, u);
    return fabs(lwi_dot(d, n)) < 1e-9;
}

static bool setup(arm *a, const lw_model *m, const lwi_limb *limb)
{
    for (size_t k = 0; k < 6; k++) {
        const lw_spec_joint *joint = &m->spec->joint[limb->chain[k].joint];
        lwi_copy3(a->u[k], joint->axis);
        lwi_copy3(a->at[k], joint->at_m);
    }
    double other[3];
    double c[3];
    if (!lines_meet(a->wrist, a->at[3], a->u[3], a->at[4], a->u[4]) ||
        !lines_meet(other, a->at[5], a->u[5], a->at[4], a->u[4])) {
        return false;
    }
    lwi_sub(c, other, a->wrist);
    if (lwi_norm(c) > 1e-9) {
        return false;
    }
    lwi_cross(c, a->u[1], a->u[2]);
    if (lwi_norm(c) > 1e-9 || fabs(lwi_dot(a->u[0], a->u[1])) > 1e-9) {
        return false;
    }
    lwi_copy3(a->z, a->u[0]);
    lwi_copy3(a->y, a->u[1]);
    lwi_cross(a->x, a->y, a->z);
    return true;
}

/* Plane components (z, x): a positive turn about y goes from z to x. */
static void in_plane(double out[2], const arm *a, const double v[3])
{
    out[0] = lwi_dot(v, a->z);
    out[1] = lwi_dot(v, a->x);
}

bool lwi_wrist_arm_recognise(const lw_model *model, const lwi_limb *limb)
{
    arm a;
    double d[3];
    double l[2];
    if (!setup(&a, model, limb)) {
        return false;
    }
    lwi_sub(d, a.at[2], a.at[1]);
    in_plane(l, &a, d);
    double upper = hypot(l[0], l[1]);
    lwi_sub(d, a.wrist, a.at[2]);
    in_plane(l, &a, d);
    return upper > 1e-9 && hypot(l[0], l[1]) > 1e-9;
}

static double angle2(const double a[2], const double b[2])
{
    return atan2(a[0] * b[1] - a[1] * b[0], a[0] * b[0] + a[1] * b[1]);
}

static double angle_about(const double from[3], const double to[3], const double u[3])
{
    double c[3];
    double f[3];
    double t[3];
    lwi_axpy(f, from, -lwi_dot(from, u), u);
    lwi_axpy(t, to, -lwi_dot(to, u), u);
    lwi_cross(c, f, t);
    return atan2(lwi_dot(c, u), lwi_dot(f, t));
}

/* Turns of the first three joints about the axes as written; false when out of reach. */
static bool solve_position(double q[3], lwi_limb_result *result, const arm *a, unsigned bits,
                           const double p[3])
{
    double d[3];
    double base[2];
    double l1[2];
    double l2[2];
    lwi_sub(d, a->wrist, a->at[0]);
    double side = lwi_dot(d, a->y);
    lwi_sub(d, p, a->at[0]);
    double px = lwi_dot(d, a->x);
    double py = lwi_dot(d, a->y);
    double pz = lwi_dot(d, a->z);
    double out2 = px * px + py * py - side * side;
    if (out2 < 0.0) {
        if (out2 < -1e-18) {
            result->miss_m = hypot(px, py) - fabs(side);
            return false;
        }
        out2 = 0.0;
    }
    double out = bits & 1u ? sqrt(out2) : -sqrt(out2);
    q[0] = atan2(py, px) - atan2(side, out);
    lwi_sub(d, a->at[1], a->at[0]);
    in_plane(base, a, d);
    double t[2] = {pz - base[0], out - base[1]};
    lwi_sub(d, a->at[2], a->at[1]);
    in_plane(l1, a, d);
    lwi_sub(d, a->wrist, a->at[2]);
    in_plane(l2, a, d);
    double r1 = hypot(l1[0], l1[1]);
    double r2 = hypot(l2[0], l2[1]);
    double square = t[0] * t[0] + t[1] * t[1];
    double cosine = (square - r1 * r1 - r2 * r2) / (2.0 * r1 * r2);
    if (!(fabs(cosine) <= 1.0)) {
        if (!(fabs(cosine) < 1.0 + 1e-12)) {
            result->miss_m = cosine > 0.0 ? sqrt(square) - (r1 + r2) : sqrt(square) - fabs(r1 - r2);
            return false;
        }
        cosine = cosine > 0.0 ? 1.0 : -1.0;
    }
    double elbow = bits & 2u ? acos(cosine) : -acos(cosine);
    double sum[2] = {r1 + r2 * cos(elbow), r2 * sin(elbow)};
    q[1] = angle2(l1, t) - atan2(sum[1], sum[0]);
    /* Axis three may be written opposite to axis two. */
    /* Wrist on axis one, or upper arm and forearm folded onto one another: a turn is open. */
    result->open = hypot(px, py) < 1e-9 * (r1 + r2) || sqrt(square) < 1e-9 * (r1 + r2);
    q[2] = (elbow - angle2(l1, l2)) * (lwi_dot(a->u[1], a->u[2]) > 0.0 ? 1.0 : -1.0);
    return true;
}

static bool solve_wrist(double q[3], bool *open, const arm *a, unsigned bits,
                        const double rot[9])
{
    const double *u4 = a->u[3];
    const double *u5 = a->u[4];
    const double *u6 = a->u[5];
    double t[3];
    double r5[9];
    double v[3];
    double far[3];
    lwi_cross(t, u5, u6);
    double along = lwi_dot(u4, u5) * lwi_dot(u5, u6);
    double cos_part = lwi_dot(u4, u6) - along;
    double sin_part = lwi_dot(u4, t);
    double size = hypot(cos_part, sin_part);
    lwi_rot_apply(far, rot, u6);
    double c = (lwi_dot(u4, far) - along) / size;
    if (!(fabs(c) <= 1.0)) {
        if (!(fabs(c) < 1.0 + 1e-9)) {
            return false;
        }
        c = c > 0.0 ? 1.0 : -1.0;
    }
    double middle = atan2(sin_part, cos_part);
    q[1] = middle + (bits & 4u ? acos(c) : -acos(c));
    lwi_rot_axis(r5, u5, q[1]);
    lwi_rot_apply(v, r5, u6);
    double across[3];
    lwi_cross(across, v, u4);
    if (lwi_norm(across) < 1e-9) {
        /* Axes four and six in line: only their sum is determined; four stays where it is drawn. */
        double rest[9];
        *open = true;
        q[0] = 0.0;
        lwi_rot_mul_at(rest, r5, rot);
        q[2] = lwi_rot_angle_about(rest, u6);
        return true;
    }
    q[0] = angle_about(v, far, u4);
    double back[3];
    double from[3];
    lwi_rot_back(from, r5, u4);
    lwi_rot_back(back, rot, u4);
    q[2] = -angle_about(from, back, u6);
    return true;
}

void lwi_wrist_arm_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                         unsigned bits, const lw_config *config)
{
    arm a;
    double q[6];
    double p[3];
    lw_frame rel;
    lw_frame x[6];
    out->real = false;
    out->miss_m = 0.0;
    if (!setup(&a, m, limb)) {
        return;
    }
    const lw_frame *base = &config->body[limb->anchor[0]];
    lwi_frame_between(&rel, base, &config->body[limb->anchor[1]]);
    lwi_frame_apply(p, &rel, a.wrist);
    if (!solve_position(q, out, &a, bits, p)) {
        return;
    }
    const lw_frame *from = base;
    for (size_t k = 0; k < 3; k++) {
        lwi_frame_turn(&x[k], from, a.u[k], a.at[k], q[k]);
        from = &x[k];
    }
    double rest[9];
    lwi_rot_mul_at(rest, x[2].rot, config->body[limb->anchor[1]].rot);
    if (!solve_wrist(q + 3, &out->open, &a, bits, rest)) {
        return;
    }
    for (size_t k = 3; k < 5; k++) {
        lwi_frame_turn(&x[k], from, a.u[k], a.at[k], q[k]);
        from = &x[k];
    }
    out->real = true;
    for (size_t i = 0; i < limb->n_body; i++) {
        for (size_t k = 0; k < 5; k++) {
            if (m->fused[limb->body[i]] == m->fused[limb->chain[k].next]) {
                out->body[i] = x[k];
            }
        }
    }
}

unsigned lwi_wrist_arm_bits(double *value, const lw_model *m, const lwi_limb *limb,
                            const lw_config *config)
{
    arm a;
    *value = 0.0;
    if (!setup(&a, m, limb)) {
        return 0;
    }
    double w[3];
    double p[3];
    double d[3];
    double l1[2];
    double l2[2];
    /* Shoulder: the wrist centre's component along x of body 1. */
    const lw_frame *x1 = &config->body[limb->chain[0].next];
    const lw_frame *x3 = &config->body[limb->chain[2].next];
    lwi_frame_apply(p, x3, a.wrist);
    lw_frame back;
    lwi_frame_inverse(&back, x1);
    lwi_frame_apply(w, &back, p);
    lwi_sub(d, w, a.at[0]);
    double out = lwi_dot(d, a.x);
    /* Elbow in the plane of body 1. */
    const lw_frame *x2 = &config->body[limb->chain[1].next];
    double e[3];
    lwi_frame_apply(p, x2, a.at[2]);
    lwi_frame_apply(e, &back, p);
    lwi_sub(d, e, a.at[1]);
    in_plane(l1, &a, d);
    lwi_sub(d, w, e);
    in_plane(l2, &a, d);
    double elbow = (l1[0] * l2[1] - l1[1] * l2[0]) / (hypot(l1[0], l1[1]) * hypot(l2[0], l2[1]));
    /* Wrist: triple product of the three wrist axes, i.e. the slope of u4 . u6 in q5. */
    double u4[3];
    double u5[3];
    double u6[3];
    double t[3];
    lwi_rot_apply(u4, x3->rot, a.u[3]);
    lwi_rot_apply(u5, config->body[limb->chain[3].next].rot, a.u[4]);
    lwi_rot_apply(u6, config->body[limb->chain[4].next].rot, a.u[5]);
    lwi_cross(t, u5, u6);
    double wrist = lwi_dot(u4, t);
    double reach = hypot(hypot(out, 1e-300), lwi_norm(d));
    *value = (out / reach) * elbow * wrist;
    /* acos branch +: q5 beyond the middle, where u4 . u6 falls with q5 (slope negative). */
    return (out > 0.0 ? 1u : 0u) | (elbow > 0.0 ? 2u : 0u) | (wrist < 0.0 ? 4u : 0u);
}
