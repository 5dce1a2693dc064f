/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lists of all solutions from a model's prepared sets. */
#ifndef LWI_ALL_H
#define LWI_ALL_H

#include "finish.h"

typedef struct lwi_all_info {
    size_t n;           /* solutions stored in work->solution from 0 on */
    size_t isolated;    /* of these */
    size_t finite;      /* isolated complex solutions that stayed finite */
    size_t unsettled;   /* paths lost or ended at a singular solution */
    size_t dimension;   /* of a motion that the inputs leave open, 0 = none was met; the solution
                         * behind the isolated ones is then one posture of it */
    bool closed;
} lwi_all_info;

/* True if the model has a forward set and every reading it needs is given. */
bool lwi_forward_all_ready(const lw_model *model, const lw_posture_ask *readings);
/* Real solutions for the set's readings, each settled onto all goals (weighted least squares). */
void lwi_forward_all(lwi_all_info *info, const lw_model *model, const lw_spec_tool *tool,
                     const lw_posture_ask *readings, const lwi_goal *goal, size_t n_goal,
                     const lw_config *hint, lw_work *work);
/* Real solutions for a completed tool pose. */
void lwi_inverse_all(lwi_all_info *info, const lw_model *model, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lwi_goal *goal, size_t n_goal,
                     const lw_config *hint, lw_work *work);
/* Freedoms of the motion on which work->state lies with all goals met, 0 where it is isolated.
 * Uses work->trial and both scratch configurations. */
size_t lwi_open_dimension(const lw_model *model, const lwi_goal *goal, size_t n_goal,
                          lw_work *work);

#endif
