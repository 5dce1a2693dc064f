/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Writes answers as JSON: the members every answer carries, then what the question asked for, all
 * numbers in the units of the question. The order of members is fixed. Nothing here decides
 * anything: codes come from the core. Called by api/ask.c from any thread. */
#ifndef LWD_ANSWER_OUT_H
#define LWD_ANSWER_OUT_H

#include <leeway/path.h>

#include "edge.h"
#include "json_out.h"
#include "question.h"

typedef struct lwd_answer_head {
    const lwd_edge *edge;
    const lwd_question *question;
    const char *state;     /* of the revision: "draft", "published", "withdrawn" */
    const char *served_at; /* RFC 3339, UTC */
} lwd_answer_head;

/* Each writes one whole object. */
void lwd_answer_inverse(lwd_json *json, const lwd_answer_head *head,
                        const lw_inverse_answer *answer);
void lwd_answer_forward(lwd_json *json, const lwd_answer_head *head,
                        const lw_forward_answer *answer);
void lwd_answer_jacobian(lwd_json *json, const lwd_answer_head *head,
                         const lw_jacobian_answer *answer);
void lwd_answer_margin(lwd_json *json, const lwd_answer_head *head,
                       const lw_margin_answer *answer);
void lwd_answer_reach(lwd_json *json, const lwd_answer_head *head, const lw_reach_answer *answer);
void lwd_answer_path(lwd_json *json, const lwd_answer_head *head, const lw_path_answer *answer);
/* The same as a table (CSV), one row a move. */
void lwd_table_path(lwd_buf *buf, const lwd_answer_head *head, const lw_path_answer *answer);
void lwd_answer_travel(lwd_json *json, const lwd_answer_head *head,
                       const lw_travel_answer *answer);

/* The answer to margin in two steps, as the distance is asked between them: all members but the
 * last, perhaps "distance", then lwd_answer_end. */
void lwd_answer_margin_begin(lwd_json *json, const lwd_answer_head *head,
                             const lw_margin_answer *answer);
void lwd_answer_distance(lwd_json *json, const lwd_answer_head *head,
                         const lw_distance_answer *answer);

/* The verdict of reach as key=value lines for a PLC, at most LWD_PLC_MAX bytes in all. */
enum { LWD_PLC_MAX = 255 };
void lwd_plc_reach(lwd_buf *buf, const lwd_answer_head *head, const lw_reach_answer *answer);

/* ---- parts, shared by the files of the answer side ---- */

void lwd_answer_begin(lwd_json *json, const lwd_answer_head *head, lw_outcome outcome,
                      const char *reason);
void lwd_answer_end(lwd_json *json);
void lwd_answer_pose(lwd_json *json, const lwd_answer_head *head, const lw_frame *tool,
                     const double *coord);
void lwd_answer_solution(lwd_json *json, const lwd_answer_head *head, const lw_solution *solution);
void lwd_answer_limit(lwd_json *json, const lwd_answer_head *head, const lw_limit *limit);
void lwd_answer_mode(lwd_json *json, const lwd_answer_head *head, const lw_mode *mode);
void lwd_answer_found(lwd_json *json, const lw_found *found, bool complete, lw_basis basis);
void lwd_answer_off_by(lwd_json *json, const lwd_answer_head *head, double position_m,
                       double angle_rad, size_t limb, double limb_m);
/* "margins" and "least". */
void lwd_answer_margins(lwd_json *json, const lwd_answer_head *head,
                        const lw_margin_answer *margin);
/* All of a margin answer that belongs to its posture. */
void lwd_answer_room(lwd_json *json, const lwd_answer_head *head, const lw_margin_answer *answer);
/* Kind, what is lost or weakest, the way out; in "without_drive": with the drive stuck. */
void lwd_answer_singular(lwd_json *json, const lwd_answer_head *head,
                         const lw_margin_answer *answer);
void lwd_answer_braked(lwd_json *json, const lw_singular_answer *singular, size_t drive);
/* "from_readings", where a start has drives to spare. */
void lwd_answer_from_readings(lwd_json *json, const lwd_edge *edge, const lw_forward_answer *from);
/* "asked": the question as understood. */
void lwd_answer_asked(lwd_json *json, const lwd_answer_head *head);
/* Name of a limit's owner: "wrist.second", "strut-3", "m2". */
const char *lwd_limit_name(const lwd_edge *edge, const lw_limit *limit);
/* How far beyond, in the units of the answer. */
double lwd_limit_over(const lwd_edge *edge, lwd_units units, const lw_limit *limit);

#endif
