/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Small fixed-size vector and rotation arithmetic on doubles. Rotations are row-major 3 x 3. */
#ifndef LWI_VEC3_H
#define LWI_VEC3_H

#include <leeway/posture.h>
#include <math.h>
#include <string.h>

static inline double lwi_dot(const double a[3], const double b[3])
{
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

static inline void lwi_cross(double out[3], const double a[3], const double b[3])
{
    double x = a[1] * b[2] - a[2] * b[1];
    double y = a[2] * b[0] - a[0] * b[2];
    double z = a[0] * b[1] - a[1] * b[0];
    out[0] = x;
    out[1] = y;
    out[2] = z;
}

static inline double lwi_norm(const double a[3])
{
    return sqrt(lwi_dot(a, a));
}

static inline void lwi_sub(double out[3], const double a[3], const double b[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = a[i] - b[i];
    }
}

static inline void lwi_add(double out[3], const double a[3], const double b[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = a[i] + b[i];
    }
}

/* out = a + s * b */
static inline void lwi_axpy(double out[3], const double a[3], double s, const double b[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = a[i] + s * b[i];
    }
}

static inline void lwi_copy3(double out[3], const double a[3])
{
    memcpy(out, a, 3 * sizeof *out);
}

/* Unit vector; false for a vector too short to have a direction. */
static inline bool lwi_unit(double out[3], const double a[3])
{
    double n = lwi_norm(a);
    if (!(n > 1e-300)) {
        return false;
    }
    for (int i = 0; i < 3; i++) {
        out[i] = a[i] / n;
    }
    return true;
}

/* out = R a; out may not alias a. */
static inline void lwi_rot_apply(double out[3], const double r[9], const double a[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = r[3 * i] * a[0] + r[3 * i + 1] * a[1] + r[3 * i + 2] * a[2];
    }
}

/* out = R^T a */
static inline void lwi_rot_back(double out[3], const double r[9], const double a[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = r[i] * a[0] + r[3 + i] * a[1] + r[6 + i] * a[2];
    }
}

/* out = A B; out may not alias. */
static inline void lwi_rot_mul(double out[9], const double a[9], const double b[9])
{
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            out[3 * i + j] = a[3 * i] * b[j] + a[3 * i + 1] * b[3 + j] + a[3 * i + 2] * b[6 + j];
        }
    }
}

/* out = A^T B */
static inline void lwi_rot_mul_at(double out[9], const double a[9], const double b[9])
{
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            out[3 * i + j] = a[i] * b[j] + a[3 + i] * b[3 + j] + a[6 + i] * b[6 + j];
        }
    }
}

static inline void lwi_frame_identity(lw_frame *f)
{
    static const lw_frame one = {{1, 0, 0, 0, 1, 0, 0, 0, 1}, {0, 0, 0}};
    *f = one;
}

/* out = X p */
static inline void lwi_frame_apply(double out[3], const lw_frame *x, const double p[3])
{
    lwi_rot_apply(out, x->rot, p);
    lwi_add(out, out, x->pos_m);
}

/* out = A B; out may not alias. */
static inline void lwi_frame_mul(lw_frame *out, const lw_frame *a, const lw_frame *b)
{
    lwi_rot_mul(out->rot, a->rot, b->rot);
    lwi_frame_apply(out->pos_m, a, b->pos_m);
}

/* out = A^-1 B; out may not alias. */
static inline void lwi_frame_between(lw_frame *out, const lw_frame *a, const lw_frame *b)
{
    double d[3];
    lwi_rot_mul_at(out->rot, a->rot, b->rot);
    lwi_sub(d, b->pos_m, a->pos_m);
    lwi_rot_back(out->pos_m, a->rot, d);
}

static inline void lwi_frame_inverse(lw_frame *out, const lw_frame *a)
{
    lw_frame one;
    lwi_frame_identity(&one);
    lwi_frame_between(out, a, &one);
}

/* Two unit vectors that make (e1, e2, u) a right-handed frame. Deterministic in u. */
void lwi_perpendicular(double e1[3], double e2[3], const double u[3]);
/* Rotation about unit axis u. */
void lwi_rot_axis(double out[9], const double u[3], double angle_rad);
/* to = from, then a turn about unit axis u through the reference point at. */
void lwi_frame_turn(lw_frame *to, const lw_frame *from, const double u[3], const double at[3],
                    double angle);
/* Rotation vector (axis times angle, 0..pi) of a rotation matrix. */
void lwi_rot_log(double out[3], const double r[9]);
/* Angle of a rotation about unit axis u, (-pi, pi]; exact when the rotation is about u. */
double lwi_rot_angle_about(const double r[9], const double u[3]);
/* The turn that changes yaw (which = 0), pitch (1) or roll (2) alone: its product with an angular
 * velocity is the rate of that angle. Large, not infinite, where the pitch is a right angle. */
void lwi_zyx_axis(double axis[3], const double zyx_rad[3], size_t which);
/* Quaternion product out = a b (w x y z); out may not alias. */
void lwi_quat_mul(double out[4], const double a[4], const double b[4]);
/* Cayley map of a small rotation vector: unit quaternion (1, d/2) normalised. */
void lwi_quat_cayley(double out[4], const double d[3]);
void lwi_quat_unit(double q[4]);

#endif
