/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the distance files share: distance.c judges, distance_most.c looks for the postures beyond,
 * distance_limit.c does the limits. */
#ifndef LWI_DISTANCE_H
#define LWI_DISTANCE_H

#include "../proof/ball.h"
#include "../proof/ball_arm.h"
#include "rates.h"

enum { LWI_DISTANCE_LIMITS = LW_MAX_COORDS + 2 * LW_MAX_RODS + LW_MAX_BALLS + LW_MAX_DRIVES };

/* How a limited quantity bends while the tool moves. */
typedef enum lwi_limit_bend {
    LWI_BEND_NONE,   /* follows the outputs linearly */
    LWI_BEND_LENGTH, /* a rod's length */
    LWI_BEND_FOOT,   /* a carriage or crank */
    LWI_BEND_ELBOW,  /* between crank and second link */
    LWI_BEND_UNIT,   /* between second link and tool */
    LWI_BEND_CONE,   /* a rod against an axis: its cosine */
    LWI_BEND_ARM,    /* joint `rod` of an arm with a spherical wrist */
    LWI_BEND_ANY     /* bounded by the configuration alone */
} lwi_limit_bend;

typedef struct lwi_limit_entry {
    lw_limit_of of;
    size_t index, part;
    lw_range range; /* cones: of the cosine */
    lwi_limit_bend bend;
    size_t rod;       /* of the ball */
    bool axis_turns;  /* CONE: the axis goes with the tool */
    bool axis_cranks; /* CONE: the axis goes with a crank */
    double factor;    /* of the quantity in the limited sum */
    double value, slope[LWI_BALL_DIRS], steep;
    double period; /* of a turn that is told up to whole turns, 0 else */
    bool tried;
} lwi_limit_entry;

typedef struct lwi_distance_work {
    lwi_ball_work balls;
    lwi_ball *ball;              /* = &balls.ball */
    double guide[LWI_BALL_DIRS]; /* way to the forward singularity found, 0 none */
    bool is_arm;
    lwi_ball_arm arm;
    const lw_spec_tool *tool;
    lw_config start; /* of the posture: borrowed */
    lw_mode mode;
    bool explicit_inverse;
    size_t n_entry;
    lwi_limit_entry entry[LWI_DISTANCE_LIMITS];
    double probe[2][LWI_BALL_DIRS];
    double plus[LWI_DISTANCE_LIMITS], minus[LWI_DISTANCE_LIMITS];
} lwi_distance_work;

/* The posture of the tool pose y in the mode of the start, NULL where there is none; lives in the
 * work's first list slot until the next one. */
const lw_solution *lwi_distance_solve(const lw_model *model, const double *y, lw_work *work);

/* Going to the nearest point of a curved surface by its tangents converges by a factor of distance
 * times curvature, which may be near one or beyond: steps are stretched or shortened by what two of
 * them in a row tell (Aitken's method for vectors; Irons & Tuck 1969, from memory). Returns the
 * share of the step to take. */
typedef struct lwi_pace {
    double share;
    bool known;
    double last[LWI_BALL_DIRS];
} lwi_pace;
double lwi_pace_stride(lwi_pace *pace, const double *step, size_t n);

/* Nearest postures beyond, by eight starts. */
void lwi_distance_forward_most(lw_distance_side *out, const lw_model *model, lw_work *work);
void lwi_distance_inverse_most(lw_distance_side *out, const lw_model *model, lw_work *work);
void lwi_distance_arm_most(lw_distance_side *out, const lw_model *model, lw_work *work);
/* Tool and drives at y, and its distance. */
void lwi_distance_take(lw_distance_side *out, const lw_model *model, const double *y,
                       double distance_m, lw_work *work);

void lwi_distance_limits(lw_distance_side *out, const lw_model *model, const lw_solution *sol,
                         lw_work *work);

#endif
