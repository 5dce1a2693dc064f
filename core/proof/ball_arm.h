/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Balls of tool poses for the arm with a spherical wrist (limb/wrist_arm.c), whose inverse
 * singularities are three: the wrist centre over the first axis (shoulder), the elbow stretched or
 * folded, the fourth and the sixth axis as near to or as far from being in line as the fifth lets
 * them. The first two depend on the wrist centre alone. Callers: core/query/distance*.c. */
#ifndef LWI_BALL_ARM_H
#define LWI_BALL_ARM_H

#include "../model/model.h"

typedef struct lwi_ball_arm {
    size_t limb;
    double length_m;       /* characteristic */
    bool all_driven;       /* each joint has a drive of its own: no forward singularity anywhere */
    double axis[3], at[3]; /* first axis */
    double aside_m;        /* of the wrist centre's plane from the first axis */
    double out_m;          /* of the second axis from the first, in that plane */
    double upper_m, fore_m;
    double wrist_m[3]; /* wrist centre, and from the tool point to it */
    double arm_m[3];
    double fourth[3], sixth[3];
    double least_rad, most_rad; /* range of the angle between fourth and sixth axis */
    double side;                /* shoulder branch: sign of the wrist centre's way out */
    double height_m;            /* of the second axis along the first */
    bool square;                /* wrist axes square to each other in turn */
    size_t joint[6];
} lwi_ball_arm;

bool lwi_ball_arm_make(lwi_ball_arm *out, const lw_model *model, const lw_spec_tool *tool,
                       const lw_solution *sol);

/* What the wrist centre's place says: distance from shoulder to wrist in the arm's plane, the wrist
 * centre's way out, and how these change with the place (gradients in the fixed frame). */
typedef struct lwi_arm_place {
    double radius_m; /* from the first axis */
    double out_m;    /* in the plane, from the first axis, signed */
    double reach_m;  /* from the second axis */
    double radius_grows[3], reach_grows[3];
    bool real;
} lwi_arm_place;
void lwi_ball_arm_place(lwi_arm_place *out, const lwi_ball_arm *arm, const double wrist_m[3]);

/* Largest radius proved free of inverse singularities; which of the three stops it. */
double lwi_ball_arm_once(const lwi_ball_arm *arm, double most_m);

/* Bounds of how far each joint turns while the tool moves by r; false where not bounded. */
bool lwi_ball_arm_turns(double turn_rad[6], const lwi_ball_arm *arm, double r);

#endif
