/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Geometry for tests, written apart from the core so that a check never leans on the code it
 * checks: frames, Denavit-Hartenberg steps, determinants and singular values of small matrices.
 * Metres and radians. */
#ifndef LWT_GEOM_H
#define LWT_GEOM_H

#include <leeway/posture.h>

#define LWT_PI 3.14159265358979323846
#define LWT_DEG (LWT_PI / 180.0)

/* ---- frames: x -> rot x + pos ---------------------------------------------------------------- */

lw_frame lwt_frame_identity(void);
lw_frame lwt_frame_mul(const lw_frame *a, const lw_frame *b);
lw_frame lwt_frame_inverse(const lw_frame *a);
/* Turn by angle_rad about the line through at_m along axis (any length but zero). */
lw_frame lwt_frame_turn(const double axis[3], const double at_m[3], double angle_rad);
/* Shift by dist_m along axis. */
lw_frame lwt_frame_slide(const double axis[3], double dist_m);
lw_frame lwt_frame_planar(double x_m, double y_m, double rz_rad);
/* quat is (w, x, y, z), normalised here. */
lw_frame lwt_frame_quat(const double pos_m[3], const double quat[4]);
/* Intrinsic z-y'-x''. */
lw_frame lwt_frame_zyx(const double pos_m[3], double yaw_rad, double pitch_rad, double roll_rad);
void lwt_frame_point(double out[3], const lw_frame *frame, const double point[3]);
void lwt_frame_vector(double out[3], const lw_frame *frame, const double vector[3]);
void lwt_quat_of(double quat[4], const lw_frame *frame); /* w >= 0 */
/* How far two frames are apart: origins, and the angle of the turn between them. */
double lwt_frame_distance(const lw_frame *a, const lw_frame *b);
double lwt_frame_angle(const lw_frame *a, const lw_frame *b);
/* Rotation vector of a^T b seen in the fixed frame: b = turn(vector) a. */
void lwt_frame_turn_between(double out[3], const lw_frame *a, const lw_frame *b);

/* A_i of the distal ("standard") table: Rz(theta) Tz(d) Tx(a) Rx(alpha). */
lw_frame lwt_dh_distal(double a_m, double alpha_rad, double d_m, double theta_rad);
/* A_i of the proximal table (Craig; Khalil-Kleinfinger): Rx(alpha) Tx(a) Rz(theta) Tz(d). */
lw_frame lwt_dh_proximal(double a_m, double alpha_rad, double d_m, double theta_rad);

/* ---- small numbers --------------------------------------------------------------------------- */

double lwt_dot(const double a[3], const double b[3]);
void lwt_cross(double out[3], const double a[3], const double b[3]);
double lwt_norm(const double a[3]);
/* The same angle in (-pi, pi]. */
double lwt_wrap(double angle_rad);

/* Row-major matrices, n and cols at most 24. */
double lwt_det(const double *a, size_t n);
/* out = a b, a is rows x inner, b is inner x cols; out must not overlap. */
void lwt_mat_mul(double *out, const double *a, const double *b, size_t rows, size_t inner,
                 size_t cols);
/* min(rows, cols) singular values, descending, by one-sided Jacobi turns. */
void lwt_singular_values(double *out, const double *a, size_t rows, size_t cols);
/* Largest over smallest singular value; infinite where the smallest is zero. */
double lwt_condition(const double *a, size_t rows, size_t cols);

#endif
