/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shared by the questions: from states and bodies to finished solutions. */
#ifndef LWI_FINISH_H
#define LWI_FINISH_H

#include "../solve/newton.h"

void lwi_solution_from_state(lw_solution *sol, const lw_model *model, const lw_spec_tool *tool,
                             const lwi_state *state, const lwi_eval *ev, const lw_config *hint);
double lwi_config_distance(const lw_model *model, const lw_config *a, const lw_config *b);

/* Same places of tool, rods and joints; idle spins and whole turns do not count. */
bool lwi_same_posture(const lw_model *model, const lw_config *a, const lw_config *b);

/* A tool pose as asked, completed to the displacement of the tool body and the output coordinates.
 * off_by tells how far given members that are no outputs contradict. */
typedef struct lwi_pose_known {
    lw_frame body;
    double output_coord[LW_MAX_OUTPUTS]; /* by output index */
    double off_by_position_m, off_by_angle_rad;
} lwi_pose_known;
lw_code lwi_pose_complete(lwi_pose_known *out, const lw_model *model, const lw_spec_tool *tool,
                          const lw_pose_ask *pose, lw_err *err);
/* Goals for the outputs as given, for mechanisms whose pose does not complete. */
lw_code lwi_pose_goals(lwi_goal *goal, size_t *n_goal, const lw_model *model,
                       const lw_spec_tool *tool, const lw_pose_ask *pose, lw_err *err);

/* Puts `member` before the place of a failure that lies inside that member of the question. */
void lwi_err_under(lw_err *err, const char *member);

/* The configuration `near` names, or home. Fills slot LWI_SLOT_START and returns its config; NULL
 * with *outcome and *reason where near itself has no posture. Where near is a bare pose, `readings`
 * (may be NULL) pick among its working modes. */
const lw_config *lwi_near_config(const lw_model *model, const lw_posture_ask *near,
                                 const lw_posture_ask *readings, lw_work *work,
                                 lw_outcome *outcome, const char **reason, lw_code *rc,
                                 lw_err *err);

/* Follows straight readings from the configuration `start` to the target coordinates. */
typedef struct lwi_track_info {
    bool arrived;
    bool wall;        /* stopped where the drives lose hold, or a turning point */
    double at;        /* share of the way */
    int iterations;
    size_t free_left;
} lwi_track_info;
void lwi_track(lwi_track_info *info, const lw_model *model, const lw_config *start,
               const lwi_goal *goal, size_t n_goal, lw_work *work);

/* Solves the goals from work->state by one Newton run and stores the solution; false if it does not
 * converge onto the goals. */
bool lwi_settle(lw_solution *sol, lwi_newton_info *info, const lw_model *model,
                const lw_spec_tool *tool, const lwi_goal *goal, size_t n_goal,
                const lw_config *hint, lw_work *work);

double lwi_drive_sigma(const lw_model *model, size_t drive);

#endif
