/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One move from its start as far as it can be proved: intervals from the left on, twice as long
 * after each success, half as long after each failure; where one fails its middle is looked at, and
 * what is wrong there is a witness. Called by query/path.c and travel.c. */
#ifndef LWI_ADVANCE_H
#define LWI_ADVANCE_H

#include "../query/margin.h"
#include "prove.h"

#include <leeway/path.h>

typedef struct lwi_advance_ask {
    const lw_spec_tool *tool;
    const lw_margin_min *min;
    size_t budget;
    const atomic_bool *abort;
    lw_proof_piece *piece; /* room for piece_room; NULL none */
    size_t piece_room;
    bool by_readings;      /* a move by readings */
    bool close_up;         /* prove up to a witness, not only find it */
} lwi_advance_ask;

/* p stands at the start (lwi_prove_begin). sol: room for postures looked at; at the end it holds
 * the end of the move where that was reached, else the witness. Fills outcome, reason, stop, at,
 * open interval, limb, drive, margin, limits, least, boxes, pieces. proved: how far the proof came,
 * 0..1. */
void lwi_advance(lw_move_answer *out, double *proved, lwi_prove *p,
                 const lwi_advance_ask *ask, lw_solution *sol, lw_work *work);

#endif
