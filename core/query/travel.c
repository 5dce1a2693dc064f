/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Travel question: straight moves along and turns about each axis of the tool, both ways, each
 * proved as far as it goes and closed up to what blocks it. */
#include "../math/vec3.h"
#include "moves.h"

#include <stdint.h>

/* The move of one way; false where the tool has no such freedom. */
static bool way_move(lwi_move *out, const lw_model *m, const lw_spec_tool *tool,
                     const lw_config *start, size_t axis, double reach)
{
    const lwi_completion *c = &m->completion;
    lwi_pose_known here;
    lw_frame pose;
    double along[3];
    double off[3];
    lw_err unused = {0};
    memset(&here, 0, sizeof here);
    here.body = start->body[tool->body];
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD) {
            here.output_coord[o] = start->coord[m->spec->output[o].coord];
        }
    }
    if (lwi_move_make(out, m, tool, start, &here, NULL, &unused) != LW_OK) {
        return false;
    }
    lwi_frame_mul(&pose, &here.body, &tool->frame);
    for (size_t i = 0; i < 3; i++) {
        along[i] = pose.rot[3 * i + axis % 3];
        out->along_m[i] = 0.0;
    }
    out->turn_rad = 0.0;
    if (axis < 3) {
        for (int i = 0; i < 3; i++) {
            if (!c->pos_output[i] && fabs(along[i]) > 1e-9) {
                return false;
            }
            out->along_m[i] = c->pos_output[i] ? reach * along[i] : 0.0;
        }
        out->length_m = fabs(reach);
        return true;
    }
    if (c->rot == LWI_ROT_FULL) {
        lwi_rot_back(out->axis, here.body.rot, along);
        out->turn_rad = reach;
        return true;
    }
    lwi_cross(off, along, c->axis);
    if ((c->rot != LWI_ROT_AXIS && c->rot != LWI_ROT_COORD) || !(lwi_norm(off) <= 1e-9)) {
        return false;
    }
    lwi_copy3(out->axis, c->axis);
    out->turn_rad = lwi_dot(along, c->axis) > 0.0 ? reach : -reach;
    if (c->rot == LWI_ROT_COORD) {
        out->coord_along[c->output] = out->turn_rad / c->factor;
    }
    return true;
}

static void take_way(lw_travel_way *way, const lw_move_answer *a, double proved, double reach)
{
    way->at_least = proved * reach;
    way->outcome = a->outcome;
    way->stop = a->stop;
    way->blocked = a->outcome != LW_OUTCOME_OK && a->outcome != LW_OUTCOME_UNDECIDED;
    way->blocked_at = way->blocked ? a->at * reach : 0.0;
    way->limb = a->limb;
    way->drive = a->drive;
    way->margin = a->margin;
    way->n_limit = a->n_limit;
    memcpy(way->limit, a->limit, sizeof way->limit);
}

static void travel_all(lw_travel_answer *a, const lw_model *m, const lw_travel_ask *ask,
                       const lw_spec_tool *tool, lw_work *work)
{
    lwi_advance_ask how = {.tool = tool,
                           .min = &ask->margin_min,
                           .budget = ask->budget > 0 ? ask->budget : LW_PATH_BUDGET,
                           .abort = ask->abort,
                           .close_up = true};
    double shift = ask->reach_m > 0.0 ? ask->reach_m : 2.0 * m->length_m;
    double turn = ask->reach_rad > 0.0 ? ask->reach_rad : 1.57079632679489662;
    a->outcome = LW_OUTCOME_OK;
    for (size_t axis = 0; axis < 6; axis++) {
        for (size_t k = 0; k < 2; k++) {
            lw_move_answer move;
            lwi_move along;
            double proved = 0.0;
            double reach = axis < 3 ? shift : turn;
            lw_travel_way *way = &a->way[axis][k];
            lwi_move_answer_open(&move);
            way->limb = SIZE_MAX;
            way->drive = way->margin = -1;
            if (!lwi_move_supported(&move, m, &how, work)) {
                a->outcome = LW_OUTCOME_UNDECIDED;
                a->reason = move.reason;
                way->possible = true;
                take_way(way, &move, 0.0, reach);
                continue;
            }
            way->possible = way_move(&along, m, tool, &a->start->config, axis,
                                     k == 0 ? -reach : reach);
            if (way->possible) {
                lwi_move_run(&move, &proved, m, &how, &along, &a->start->config,
                             lwi_slot(work, LWI_SLOT_MOVE), work);
                take_way(way, &move, proved, reach);
                a->boxes += move.boxes;
            }
        }
    }
}

lw_code lw_travel(const lw_travel_answer **out, const lw_model *m, const lw_travel_ask *ask,
                  lw_work *work, lw_err *err)
{
    lw_travel_answer *a = &work->travel;
    const lw_posture_answer *posture;
    *out = NULL;
    memset(a, 0, sizeof *a);
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->posture == NULL) {
        return LW_FAIL(err, LW_E_ARGUMENT, "", "a posture to start from is needed");
    }
    lw_code rc = lw_posture(&posture, m, ask->tool, ask->tool_written, ask->posture, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    *out = a;
    if (posture->outcome == LW_OUTCOME_INCONSISTENT || posture->solution == NULL) {
        a->outcome = posture->outcome;
        a->reason = posture->reason != NULL ? posture->reason : "there is no such posture";
        return LW_OK;
    }
    lw_solution *start = lwi_slot(work, LWI_SLOT_MOVE_START);
    lwi_solution_copy(start, m, posture->solution);
    a->start = start;
    travel_all(a, m, ask, tool, work);
    return LW_OK;
}
