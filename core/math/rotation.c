/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rotations: axis-angle, quaternions, zyx angles. Pure functions, any thread. */
#include "vec3.h"

#include <leeway/query.h>

void lwi_perpendicular(double e1[3], double e2[3], const double u[3])
{
    /* Start from the coordinate axis least along u, so that axis-parallel joints get axis-parallel
     * frames and closure rows that vanish in planar loops vanish exactly. */
    int k = 0;
    for (int i = 1; i < 3; i++) {
        if (fabs(u[i]) < fabs(u[k]) - 1e-12) {
            k = i;
        }
    }
    double a[3] = {0, 0, 0};
    a[k] = 1.0;
    double along = lwi_dot(a, u);
    lwi_axpy(a, a, -along, u);
    if (!lwi_unit(e1, a)) {
        e1[0] = 1.0;
        e1[1] = e1[2] = 0.0;
    }
    lwi_cross(e2, u, e1);
}

void lwi_rot_axis(double out[9], const double u[3], double angle_rad)
{
    double c = cos(angle_rad);
    double s = sin(angle_rad);
    double v = 1.0 - c;
    if (c > 0.5) {
        /* 1 - cos without cancellation */
        double h = sin(0.5 * angle_rad);
        v = 2.0 * h * h;
    }
    out[0] = c + v * u[0] * u[0];
    out[1] = v * u[0] * u[1] - s * u[2];
    out[2] = v * u[0] * u[2] + s * u[1];
    out[3] = v * u[1] * u[0] + s * u[2];
    out[4] = c + v * u[1] * u[1];
    out[5] = v * u[1] * u[2] - s * u[0];
    out[6] = v * u[2] * u[0] - s * u[1];
    out[7] = v * u[2] * u[1] + s * u[0];
    out[8] = c + v * u[2] * u[2];
}

void lwi_frame_turn(lw_frame *to, const lw_frame *from, const double u[3], const double at[3],
                    double angle)
{
    lw_frame e;
    double moved[3];
    lwi_rot_axis(e.rot, u, angle);
    lwi_rot_apply(moved, e.rot, at);
    lwi_sub(e.pos_m, at, moved);
    lwi_frame_mul(to, from, &e);
}

void lwi_rot_log(double out[3], const double r[9])
{
    double q[4];
    lw_quat_from_rot(q, r);
    double n = lwi_norm(q + 1);
    double angle = 2.0 * atan2(n, q[0]);
    double scale = n > 1e-150 ? angle / n : 2.0;
    for (int i = 0; i < 3; i++) {
        out[i] = scale * q[i + 1];
    }
}

double lwi_rot_angle_about(const double r[9], const double u[3])
{
    double e1[3];
    double e2[3];
    double t[3];
    lwi_perpendicular(e1, e2, u);
    lwi_rot_apply(t, r, e1);
    double a = atan2(lwi_dot(t, e2), lwi_dot(t, e1));
    return a;
}

void lwi_quat_mul(double out[4], const double a[4], const double b[4])
{
    out[0] = a[0] * b[0] - a[1] * b[1] - a[2] * b[2] - a[3] * b[3];
    out[1] = a[0] * b[1] + a[1] * b[0] + a[2] * b[3] - a[3] * b[2];
    out[2] = a[0] * b[2] - a[1] * b[3] + a[2] * b[0] + a[3] * b[1];
    out[3] = a[0] * b[3] + a[1] * b[2] - a[2] * b[1] + a[3] * b[0];
}

void lwi_quat_unit(double q[4])
{
    double n = sqrt(q[0] * q[0] + q[1] * q[1] + q[2] * q[2] + q[3] * q[3]);
    for (int i = 0; i < 4; i++) {
        q[i] = n > 0.0 ? q[i] / n : (i == 0 ? 1.0 : 0.0);
    }
}

void lwi_quat_cayley(double out[4], const double d[3])
{
    out[0] = 1.0;
    for (int i = 0; i < 3; i++) {
        out[i + 1] = 0.5 * d[i];
    }
    lwi_quat_unit(out);
}

void lw_rot_from_quat(double rot[9], const double q[4])
{
    double w = q[0];
    double x = q[1];
    double y = q[2];
    double z = q[3];
    rot[0] = w * w + x * x - y * y - z * z;
    rot[1] = 2.0 * (x * y - w * z);
    rot[2] = 2.0 * (x * z + w * y);
    rot[3] = 2.0 * (x * y + w * z);
    rot[4] = w * w - x * x + y * y - z * z;
    rot[5] = 2.0 * (y * z - w * x);
    rot[6] = 2.0 * (x * z - w * y);
    rot[7] = 2.0 * (y * z + w * x);
    rot[8] = w * w - x * x - y * y + z * z;
}

/* The largest of the four squares decides the branch (Shepperd 1978), so nothing cancels. */
void lw_quat_from_rot(double quat[4], const double r[9])
{
    double trace = r[0] + r[4] + r[8];
    double pick[4] = {trace, r[0], r[4], r[8]};
    int k = 0;
    for (int i = 1; i < 4; i++) {
        if (pick[i] > pick[k]) {
            k = i;
        }
    }
    if (k == 0) {
        quat[0] = 1.0 + trace;
        quat[1] = r[7] - r[5];
        quat[2] = r[2] - r[6];
        quat[3] = r[3] - r[1];
    } else if (k == 1) {
        quat[0] = r[7] - r[5];
        quat[1] = 1.0 + r[0] - r[4] - r[8];
        quat[2] = r[1] + r[3];
        quat[3] = r[2] + r[6];
    } else if (k == 2) {
        quat[0] = r[2] - r[6];
        quat[1] = r[1] + r[3];
        quat[2] = 1.0 - r[0] + r[4] - r[8];
        quat[3] = r[5] + r[7];
    } else {
        quat[0] = r[3] - r[1];
        quat[1] = r[2] + r[6];
        quat[2] = r[5] + r[7];
        quat[3] = 1.0 - r[0] - r[4] + r[8];
    }
    lwi_quat_unit(quat);
    if (quat[0] < 0.0) {
        for (int i = 0; i < 4; i++) {
            quat[i] = -quat[i];
        }
    }
}

void lw_zyx_from_rot(double zyx_rad[3], const double r[9])
{
    double cp = hypot(r[0], r[3]);
    zyx_rad[1] = atan2(-r[6], cp);
    if (cp > 1e-12) {
        zyx_rad[0] = atan2(r[3], r[0]);
        zyx_rad[2] = atan2(r[7], r[8]);
    } else {
        /* Pitch at a right angle: yaw and roll turn about one axis; all of it is told as yaw. */
        zyx_rad[0] = atan2(-r[1], r[4]);
        zyx_rad[2] = 0.0;
    }
}

void lwi_zyx_axis(double axis[3], const double zyx_rad[3], size_t which)
{
    double cy = cos(zyx_rad[0]);
    double sy = sin(zyx_rad[0]);
    double cp = cos(zyx_rad[1]);
    cp = fabs(cp) < 1e-9 ? (cp < 0.0 ? -1e-9 : 1e-9) : cp;
    if (which == 0) {
        axis[0] = cy * sin(zyx_rad[1]) / cp;
        axis[1] = sy * sin(zyx_rad[1]) / cp;
        axis[2] = 1.0;
    } else if (which == 1) {
        axis[0] = -sy;
        axis[1] = cy;
        axis[2] = 0.0;
    } else {
        axis[0] = cy / cp;
        axis[1] = sy / cp;
        axis[2] = 0.0;
    }
}

void lw_rot_from_zyx(double rot[9], const double zyx_rad[3])
{
    double cy = cos(zyx_rad[0]);
    double sy = sin(zyx_rad[0]);
    double cp = cos(zyx_rad[1]);
    double sp = sin(zyx_rad[1]);
    double cr = cos(zyx_rad[2]);
    double sr = sin(zyx_rad[2]);
    rot[0] = cy * cp;
    rot[1] = cy * sp * sr - sy * cr;
    rot[2] = cy * sp * cr + sy * sr;
    rot[3] = sy * cp;
    rot[4] = sy * sp * sr + cy * cr;
    rot[5] = sy * sp * cr - cy * sr;
    rot[6] = -sp;
    rot[7] = cp * sr;
    rot[8] = cp * cr;
}
