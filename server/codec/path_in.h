/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The moves of a path: as JSON, or as a table (CSV, RFC 4180), to lwd_path. */
#ifndef LWD_PATH_IN_H
#define LWD_PATH_IN_H

#include "posture_in.h"
#include "question.h"

/* NULL without memory; free with lwd_path_room_free. */
lwd_path *lwd_path_room_new(void);
/* Room for the intervals of a certificate; false without memory. */
bool lwd_path_room_pieces(lwd_path *path);
void lwd_path_room_free(lwd_path *path);

/* "line", "circle", "joints". */
const char *lwd_move_word(lw_move_kind kind);

/* The array "through"; faults are told in the reader's findings. */
void lwd_path_in(const lwd_reader *through, const lwd_posture_scope *scope, lwd_path *path);

/* The table: a header row names the columns, each further row is one move. Pointers of faults are
 * "/ROW/COLUMN" with rows counted from 1, the header's. `q` has its units, names and start
 * already; its moves, and the form of its answer, are set. False if anything is wrong. */
bool lwd_path_table_in(const char *text, size_t len, const lwd_edge *edge, lwd_findings *findings,
                       lwd_question *q);

#endif
