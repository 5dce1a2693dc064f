/* SPDX-License-Identifier: GPL-3.0-or-later */
/* KDL's side of bench_serial: one chain, its pose and Jacobian. */
#ifndef LWT_SERIAL_KDL_H
#define LWT_SERIAL_KDL_H

#include <stdbool.h>
#include <stddef.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Joints by point and unit axis (3 n numbers each) in the reference posture; the tool's frame
 * there. */
void kdl_chain(size_t n, const double *at_m, const double *axis, const bool *slides,
               const double rot[9], const double pos_m[3]);
/* Rotation row by row, then position. */
void kdl_pose(const double *q, double tool[12]);
/* The same, and 6 x n: rows vx vy vz wx wy wz at the tool point, fixed frame. */
void kdl_both(const double *q, double tool[12], double *jacobian);
void kdl_end(void);

#ifdef __cplusplus
}
#endif

#endif
