/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Ready mechanisms for tests. Each comes unloaded, so that a test may still change limits, needs or
 * drive figures; then lwt_machine_load. SI units. */
#ifndef LWT_KIT_H
#define LWT_KIT_H

#include "lwt_build.h"

/* Platform on n driven struts between ground points base[3n] and platform points[3n] (the latter in
 * the tool frame). The reference posture is `ref`. Outputs x y z rx ry rz, lengths over 1 m. */
lwt_machine *lwt_kit_struts(const char *name, size_t n, const double *base, const double *platform,
                            const lw_frame *ref);
/* The same from members "base" and "platform" of a case. */
struct cJSON;
lwt_machine *lwt_kit_struts_case(const struct cJSON *layout, const lw_frame *ref);

/* Angle of the first link of a two-link arm from the origin to (x, y); elbow +1 turns it left of
 * the line to the point. NaN if the point is out of reach. */
double lwt_two_link(double x_m, double y_m, double first_m, double second_m, int elbow);

/* Planar platform on n arms of crank and link. base[2n], platform[2n] in the tool frame, pose
 * (x, y, rz), elbow[n] of the reference posture. Cranks are driven, outputs x y rz. theta_ref[n]
 * gets the crank angles of the reference posture. */
lwt_machine *lwt_kit_planar_rrr(const char *name, size_t n, const double *base,
                                const double *platform, double crank_m, double link_m,
                                const double pose[3], const int *elbow, double *theta_ref);

/* Planar platform guided by a planar joint and moved by three driven rods. */
lwt_machine *lwt_kit_planar_struts(const char *name, const double base[6],
                                   const double platform[6], const double pose[3]);

/* Two, three or more two-link arms that meet in one pin; outputs x y. Links first_m[n] and
 * second_m[n], elbow[n], reference point. Cranks driven. The tool sits on the first arm's outer
 * link. */
lwt_machine *lwt_kit_pin_arms(const char *name, size_t n, const double *base,
                              const double *first_m, const double *second_m, const double point[2],
                              const int *elbow, double *theta_ref);

/* Delta-type: three cranks about horizontal axes at base radius, leg i towards angle[i] (rad), a
 * crank's angle counted downward from the horizontal; two parallel rods from each crank to the
 * hand, half_m to either side. Outputs x y z. crank_ref[3] gets the crank angles at `point`. */
lwt_machine *lwt_kit_delta(const char *name, double base_m, double hand_m, double crank_m,
                           double rod_m, double half_m, const double angle_rad[3],
                           const double point[3], double *crank_ref);
/* Crank angle of one such leg, branch +1 or -1; NaN if out of reach. */
double lwt_delta_crank(double base_m, double hand_m, double crank_m, double rod_m,
                       double angle_rad, const double point[3], int branch);

/* Three legs of universal, driven slide, universal. Outer axes along the base tangent, inner axes
 * parallel: pure translation. Outputs x y z. */
lwt_machine *lwt_kit_three_upu(void);
/* Three legs of revolute, driven slide, ball, the first at turn_rad; hinge[3] gets the revolutes.
 * Without tool and outputs, which the caller adds to *plate. */
lwt_machine *lwt_kit_three_rps(double turn_rad, size_t *plate, size_t *hinge);

/* Serial arm from a table, every joint driven. */
typedef struct lwt_table {
    size_t n;
    bool proximal;
    double a[12];
    double alpha[12];
    double d[12];
} lwt_table;
/* Reads members a, d, alpha_deg; lengths times scale become metres. */
void lwt_table_read(lwt_table *out, const struct cJSON *set, double scale);
lw_frame lwt_table_forward(const lwt_table *table, const double *theta);
lwt_machine *lwt_kit_arm(const char *name, const lwt_table *table, const double *theta_ref,
                         const char *outputs);

/* The chain of seven links as it stands in one assembly, its ground link carried by a driven
 * crank: with the crank held the chain is a structure, and its assemblies are the solutions.
 * Bodies: 1 the carrier, 1 + i link i. `links` are the sides of a case, t[6] the angles of the
 * links in degrees. */
lwt_machine *lwt_kit_seven_links(const struct cJSON *links, const double *t);

#endif
