/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One move of the tool, exact in its parameter t from 0 to 1: where the displacement of the tool
 * body stands and what the output joints read, as doubles at one t and as models on an interval.
 * Made by query/path.c from a completed pose; read by the prover. */
#ifndef LWI_MOVE_H
#define LWI_MOVE_H

#include "../query/finish.h"
#include "eval_pm.h"

typedef struct lwi_move {
    bool arc;            /* tool point on a circle, else on a straight line */
    double tool_m[3];    /* the tool point on its body, reference posture */
    double from_m[3];    /* tool point at the start */
    double along_m[3];   /* line: end minus start */
    double centre_m[3];  /* arc: centre + cos(sweep t) out + sin(sweep t) side */
    double out_m[3], side_m[3];
    double sweep_rad;
    bool follows[3];     /* the component of the tool point is an output and is moved as above; else
                          * that component of the displacement stands still */
    double still_m[3];
    double rot0[9];      /* orientation of the displacement at the start */
    double axis[3];      /* in the body: R(t) = R0 rot(axis, turn t) */
    double turn_rad;
    double coord[LW_MAX_OUTPUTS];      /* output joints at the start, by output index */
    double coord_along[LW_MAX_OUTPUTS];
    double length_m;     /* of the tool's way */
} lwi_move;

/* From the displacement of the tool body and output coordinates at the start to a completed pose.
 * via_m: the point in between, NULL for a line. LW_E_ARGUMENT where three points make no circle. */
lw_code lwi_move_make(lwi_move *out, const lw_model *model, const lw_spec_tool *tool,
                      const lw_config *start, const lwi_pose_known *end, const double *via_m,
                      lw_err *err);

void lwi_move_at(lw_frame *body, double coord[LW_MAX_OUTPUTS], const lwi_move *move,
                 const lw_model *model, double t);
/* On t = mid + half d. arm: the tool point as seen from the displacement's origin, turned. */
void lwi_move_models(lwi_pm_frame *body, lwi_pm arm[3], lwi_pm coord[LW_MAX_OUTPUTS],
                     const lwi_move *move, const lw_model *model, double mid, double half);

#endif
