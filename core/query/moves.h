/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the questions about moves share: path.c has it, travel.c and reach.c ask for it. */
#ifndef LWI_MOVES_H
#define LWI_MOVES_H

#include "../proof/advance.h"

void lwi_move_answer_open(lw_move_answer *out);
/* False where this version does not prove moves with this mechanism, tool and thresholds; the
 * answer says why. */
bool lwi_move_supported(lw_move_answer *out, const lw_model *model, const lwi_advance_ask *ask,
                        const lw_work *work);
/* A move from a configuration, proved as far as it goes. sol holds the end then, or the witness;
 * the slot of the start of all moves tells the mode. */
void lwi_move_run(lw_move_answer *out, double *proved, const lw_model *model,
                  const lwi_advance_ask *ask, const lwi_move *move, const lw_config *start,
                  lw_solution *sol, lw_work *work);
/* The same for a line or circle as a question gives it. Failures: places inside the move. */
lw_code lwi_move_line(lw_move_answer *out, double *proved, const lw_model *model,
                      const lwi_advance_ask *ask, const lw_move *move, const lw_config *start,
                      lw_solution *sol, lw_work *work, lw_err *err);

/* Joint coordinates given with the end pose that are no outputs stand there at the end. */
bool lwi_move_joints_agree(const lw_model *model, const lw_pose_ask *pose, const lw_config *end);

/* The same by readings, on the other prover: ask->by_readings is set. */
lw_code lwi_move_joints(lw_move_answer *out, double *proved, const lw_model *model,
                        const lwi_advance_ask *ask, const lw_move *move, const lw_config *start,
                        lw_solution *sol, lw_work *work, lw_err *err);

#endif
