/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the questions about moves share: path.c has it, travel.c and reach.c ask for it. */
#ifndef LWI_MOVES_H
#define LWI_MOVES_H

#include "../proof/advance.h"

/* True where every threshold is on a margin that the document has figures for. */
bool lwi_min_judged(const lw_model *model, const lw_margin_min *min);
void lwi_move_answer_open(lw_move_answer *out);
/* A line or circle from a configuration: proved as far as it goes. sol holds the start and then the
 * end, or the witness. */
lw_code lwi_move_line(lw_move_answer *out, double *proved, const lw_model *model,
                      const lwi_advance_ask *ask, const lw_move *move, const lw_config *start,
                      lw_solution *sol, lw_work *work, lw_err *err);

#endif
