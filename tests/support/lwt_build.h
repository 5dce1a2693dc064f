/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mechanisms for tests, built in a few calls from simple geometry, and the questions that tests ask
 * of them. Everything fails the running cmocka case where the core says no unexpectedly. SI units.
 *
 * Order of building: bodies and joints first, then rods, then couplings, drives and outputs, since
 * the numbers of scalar coordinates run through all joints before the rods. A call out of order
 * fails the case. Body 0 is the fixed body, "ground". */
#ifndef LWT_BUILD_H
#define LWT_BUILD_H

#include <leeway/leeway.h>

#include "lwt_geom.h"

enum { LWT_RING = 8 };

typedef struct lwt_machine {
    lw_spec *spec;
    lw_report *report;
    lw_model *model;
    lw_work *work;
    lw_err err;
    lw_posture_ask *ring; /* the postures handed out last, reused after LWT_RING of them */
    size_t ring_next;
} lwt_machine;

lwt_machine *lwt_machine_new(const char *name);
void lwt_machine_free(lwt_machine *m); /* NULL is fine */

/* ---- geometry -------------------------------------------------------------------------------- */

size_t lwt_add_body(lwt_machine *m);
size_t lwt_add_revolute(lwt_machine *m, size_t a, size_t b, const double at[3],
                        const double axis[3]);
size_t lwt_add_prismatic(lwt_machine *m, size_t a, size_t b, const double axis[3]);
size_t lwt_add_helical(lwt_machine *m, size_t a, size_t b, const double at[3],
                       const double axis[3], double lead_m);
size_t lwt_add_cylindrical(lwt_machine *m, size_t a, size_t b, const double at[3],
                           const double axis[3]);
size_t lwt_add_universal(lwt_machine *m, size_t a, size_t b, const double at[3],
                         const double axis[3], const double second[3]);
size_t lwt_add_spherical(lwt_machine *m, size_t a, size_t b, const double at[3]);
size_t lwt_add_planar(lwt_machine *m, size_t a, size_t b, const double at[3],
                      const double normal[3], const double x_axis[3]);
size_t lwt_add_fixed(lwt_machine *m, size_t a, size_t b);
/* Ball-ended member between a point of body a and a point of body b. */
size_t lwt_add_rod(lwt_machine *m, size_t a, const double end_a[3], size_t b,
                   const double end_b[3]);

/* Serial chain of n revolutes from body `base`, link frames from a table; theta_ref is the
 * reference posture, so that a coordinate is theta - theta_ref. `base_frame` NULL is the identity.
 * Returns the last body; its link frame in the reference posture goes to *end unless NULL. */
size_t lwt_add_chain_distal(lwt_machine *m, size_t base, const lw_frame *base_frame, size_t n,
                            const double *a, const double *alpha, const double *d,
                            const double *theta_ref, lw_frame *end);
size_t lwt_add_chain_proximal(lwt_machine *m, size_t base, const lw_frame *base_frame, size_t n,
                              const double *a, const double *alpha, const double *d,
                              const double *theta_ref, lw_frame *end);
/* Closed loop of n revolutes from a distal table whose product is the identity at theta_ref. */
void lwt_add_loop_distal(lwt_machine *m, size_t n, const double *a, const double *alpha,
                         const double *d, const double *theta_ref);

/* ---- drives, tools, outputs ------------------------------------------------------------------ */

size_t lwt_add_coupling(lwt_machine *m, size_t coord_a, double factor_a, size_t coord_b,
                        double factor_b);
size_t lwt_add_drive(lwt_machine *m, size_t coord); /* turning is taken from the coordinate */
size_t lwt_drive_joint(lwt_machine *m, size_t joint);
size_t lwt_drive_rod(lwt_machine *m, size_t rod);
size_t lwt_add_tool(lwt_machine *m, size_t body, const lw_frame *frame); /* NULL: identity */
/* Words from x y z rx ry rz, blanks between. */
void lwt_add_outputs(lwt_machine *m, const char *words);
void lwt_add_output_coord(lwt_machine *m, size_t coord);
size_t lwt_coord(const lwt_machine *m, size_t joint, size_t part);

/* ---- loading --------------------------------------------------------------------------------- */

/* Builds the model and its work; a mechanism that is refused fails the case with its findings. */
void lwt_machine_load(lwt_machine *m);
/* The report alone, whether the mechanism is accepted or not; returns what lw_model_new said. */
lw_code lwt_machine_report(lwt_machine *m);
/* A finding of the report by its code, NULL if there is none. */
const lw_finding *lwt_finding(const lwt_machine *m, const char *code);

/* ---- naming postures ------------------------------------------------------------------------- */

/* Each returns a posture from the ring: good for the next LWT_RING - 1 calls. */
lw_posture_ask *lwt_posture(lwt_machine *m);
lw_posture_ask *lwt_by_drives(lwt_machine *m, const double *drive, const lw_posture_ask *near);
/* As much of the tool frame as the outputs name; coord (may be NULL) gives joint outputs. */
void lwt_pose_of(const lwt_machine *m, const lw_frame *tool, const double *coord,
                 lw_pose_ask *out);
lw_posture_ask *lwt_by_pose(lwt_machine *m, const lw_frame *tool, const double *coord,
                            const lw_mode *mode, const lw_posture_ask *near);
/* The very configuration: by joints where joints determine it, by bodies where rods alone hold
 * one. */
lw_posture_ask *lwt_by_config(lwt_machine *m, const lw_config *config);

/* ---- asking ---------------------------------------------------------------------------------- */

/* All inverse solutions, or with `mode` those of it; outcome and counts are left to the caller. */
const lw_inverse_answer *lwt_inverse(lwt_machine *m, const lw_frame *tool, const double *coord,
                                     const lw_mode *mode, const lw_posture_ask *near);
/* Tracked forward; fails the case unless exactly one solution comes back ok. */
const lw_forward_answer *lwt_forward(lwt_machine *m, const double *drive,
                                     const lw_posture_ask *near);
const lw_jacobian_answer *lwt_jacobian(lwt_machine *m, const lw_posture_ask *posture);
const lw_margin_answer *lwt_margin(lwt_machine *m, const lw_posture_ask *posture);
/* Own copy of a configuration, so that it outlives the next question. */
typedef struct lwt_copy {
    double coord[LW_MAX_COORDS];
    double ball[LW_MAX_BALLS][4];
    lw_frame body[LW_MAX_BODIES];
    double drive[LW_MAX_DRIVES];
    lw_frame tool;
    lw_mode mode;
    bool mode_known;
} lwt_copy;
void lwt_keep(lwt_copy *out, const lwt_machine *m, const lw_solution *solution);
lw_config lwt_config_of(lwt_copy *copy);

/* ---- checking without the core --------------------------------------------------------------- */

/* Worst closure error of a configuration, from the definition of each joint and rod: how far a
 * joint's two halves are apart at its point, and turned against its coordinates. Couplings count
 * as position errors in their own unit. */
void lwt_closure(const lw_spec *spec, const lw_config *config, double *position_m,
                 double *angle_rad);
/* The whole mechanism carried to another place: every point, axis and tool. */
void lwt_spec_move(lw_spec *spec, const lw_frame *by);

#endif
