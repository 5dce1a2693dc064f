/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Path question: moves one after another from a posture, each proved or broken by a witness; the
 * move after a break is not examined, so that the first break is the worst there is and names the
 * whole answer. */
#include "../math/vec3.h"
#include "../proof/advance.h"
#include "moves.h"

#include <stdint.h>
#include <stdio.h>

/* A threshold on a margin that the document gives no figures for can not be judged. */
static bool min_judged(const lw_model *m, const lw_margin_min *min)
{
    const bool asked[LW_MARGIN_COUNT] = {
        [LW_MARGIN_ACCURACY] = lwi_accuracy_asked(m), [LW_MARGIN_LOAD] = lwi_load_asked(m),
        [LW_MARGIN_SPEED] = lwi_speed_asked(m),       [LW_MARGIN_SPARE] = lwi_accuracy_asked(m),
        [LW_MARGIN_TRAVEL] = true,                    [LW_MARGIN_HOLD] = true};
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        if (min->asked[i] && !asked[i]) {
            return false;
        }
    }
    return true;
}

void lwi_move_answer_open(lw_move_answer *a)
{
    memset(a, 0, sizeof *a);
    a->limb = SIZE_MAX;
    a->drive = -1;
    a->margin = -1;
    a->outcome = LW_OUTCOME_NONE;
}

static void undecided(lw_move_answer *a, const char *reason)
{
    a->examined = true;
    a->outcome = LW_OUTCOME_UNDECIDED;
    a->stop = LW_STOP_UNSUPPORTED;
    a->reason = reason;
    a->open_high = 1.0;
}

static bool given_contradicts(const lw_model *m, const lwi_pose_known *pose)
{
    double tolerance = 1e-5 * m->length_m;
    double angle = 1e-5;
    if (m->spec->needs.position_tolerance_m.asked) {
        tolerance = fmax(tolerance, m->spec->needs.position_tolerance_m.value);
    }
    if (m->spec->needs.angle_tolerance_rad.asked) {
        angle = fmax(angle, m->spec->needs.angle_tolerance_rad.value);
    }
    return pose->off_by_position_m > tolerance || pose->off_by_angle_rad > angle;
}

/* Joint coordinates given with the end pose that are no outputs, against where they came to. */
bool lwi_move_joints_agree(const lw_model *m, const lw_pose_ask *pose, const lw_config *end)
{
    for (size_t i = 0; i < pose->n_joint; i++) {
        size_t coord = pose->joint_coord[i];
        double d = fabs(end->coord[coord] - pose->joint_value[i]);
        lwi_pose_known off = {.off_by_position_m = d};
        if (lw_spec_coord_turning(m->spec, coord)) {
            off.off_by_position_m = 0.0;
            off.off_by_angle_rad = d;
        }
        if (given_contradicts(m, &off)) {
            return false;
        }
    }
    return true;
}

void lwi_move_run(lw_move_answer *a, double *proved, const lw_model *m,
                  const lwi_advance_ask *ask, const lwi_move *move, const lw_config *start,
                  lw_solution *sol, lw_work *work)
{
    a->examined = true;
    a->length_m = move->length_m;
    a->turn_rad = fabs(move->turn_rad);
    lwi_solution_copy(sol, m, lwi_slot(work, LWI_SLOT_MOVE_START));
    lwi_config_copy(&sol->config, m, start);
    lwi_prove_begin(work->prove, move, ask->tool, ask->min, start);
    lwi_advance(a, proved, work->prove, ask, sol, work);
    if (a->outcome == LW_OUTCOME_OK) {
        a->has_end = true;
        memcpy(a->end_drive, sol->drive, sizeof a->end_drive);
        a->end_tool = sol->tool;
    }
}

bool lwi_move_supported(lw_move_answer *a, const lw_model *m, const lwi_advance_ask *ask,
                        const lw_work *work)
{
    if (!min_judged(m, ask->min)) {
        undecided(a, "a threshold names a margin that the document does not ask for (\"asked\": "
                     "false): state the need in the document, or leave the threshold out");
        return false;
    }
    bool other = m->fused[ask->tool->body] != m->fused[m->spec->tool[0].body];
    if (ask->by_readings ? !work->prove_joints->usable : !work->prove->usable || other) {
        undecided(a, "moves of this mechanism are not proved by this version: its pose does not "
                     "follow from its outputs without iteration, or a part of it is not supported");
        return false;
    }
    return true;
}

static lw_code via_point(double via[3], bool *beside, const lw_model *m, const lw_spec_tool *tool,
                         const lw_pose_ask *pose, const lw_config *start, lw_err *err)
{
    static const char *const where[3] = {"/via/x", "/via/y", "/via/z"};
    lwi_frame_apply(via, &start->body[tool->body], tool->frame.pos_m);
    for (int i = 0; i < 3; i++) {
        if (!m->completion.pos_output[i]) {
            lwi_pose_known off = {.off_by_position_m = fabs(pose->position_m[i] - via[i])};
            *beside = *beside || (pose->has_position[i] && given_contradicts(m, &off));
            continue;
        }
        if (!pose->has_position[i]) {
            return LW_FAIL(err, LW_E_POSTURE, where[i], "%s of the point in between is needed",
                           where[i] + 5);
        }
        via[i] = pose->position_m[i];
    }
    return LW_OK;
}

lw_code lwi_move_line(lw_move_answer *a, double *proved, const lw_model *m,
                      const lwi_advance_ask *ask, const lw_move *move, const lw_config *start,
                      lw_solution *sol, lw_work *work, lw_err *err)
{
    lwi_pose_known end;
    lwi_move along;
    double via[3];
    bool arc = move->kind == LW_MOVE_CIRCLE;
    bool beside = false; /* the point in between asks for what the mechanism cannot change */
    *proved = 0.0;
    if (!lwi_move_supported(a, m, ask, work)) {
        return LW_OK;
    }
    lw_code rc = lwi_pose_complete(&end, m, ask->tool, &move->pose, err);
    if (rc == LW_OK && arc) {
        rc = via_point(via, &beside, m, ask->tool, &move->via, start, err);
    }
    if (rc == LW_OK) {
        rc = lwi_move_make(&along, m, ask->tool, start, &end, arc ? via : NULL, err);
    }
    if (rc != LW_OK) {
        return rc;
    }
    if (beside || given_contradicts(m, &end)) {
        a->examined = true;
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->stop = LW_STOP_REACH;
        a->at = beside ? 0.0 : 1.0;
        a->reason = beside ? "the point in between asks for components that this mechanism cannot "
                             "change"
                           : "the end asks for components that this mechanism cannot change";
        return LW_OK;
    }
    lwi_move_run(a, proved, m, ask, &along, start, sol, work);
    if (a->has_end && !lwi_move_joints_agree(m, &move->pose, &sol->config)) {
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->stop = LW_STOP_REACH;
        a->reason = "a joint given with the end stands elsewhere there";
    }
    return LW_OK;
}

/* Places of failures inside a move: /pose/... and /via/... behind /through/N. */
static void place(lw_err *err, size_t i)
{
    char where[32];
    (void)snprintf(where, sizeof where, "/through/%zu", i);
    lwi_err_under(err, where);
}

static lw_code run_moves(lw_path_answer *a, const lw_model *m, const lw_path_ask *ask,
                         const lw_spec_tool *tool, lw_work *work, lw_err *err)
{
    lw_solution *sol = lwi_slot(work, LWI_SLOT_MOVE);
    lw_solution *start = lwi_slot(work, LWI_SLOT_MOVE_START);
    const lw_config *at = &start->config;
    a->outcome = LW_OUTCOME_OK;
    for (size_t i = 0; i < ask->n_move; i++) {
        lw_move_answer *move = &ask->store[i];
        double proved;
        size_t left = a->n_piece < ask->piece_room ? ask->piece_room - a->n_piece : 0;
        lwi_advance_ask how = {.tool = tool,
                               .min = &ask->margin_min,
                               .budget = ask->budget > 0 ? ask->budget : LW_PATH_BUDGET,
                               .abort = ask->abort,
                               .by_readings = ask->move[i].kind == LW_MOVE_JOINTS,
                               .piece = left > 0 ? ask->piece + a->n_piece : NULL,
                               .piece_room = left};
        lw_code rc = LW_OK;
        move->first_piece = a->n_piece;
        if (ask->move[i].kind == LW_MOVE_JOINTS) {
            rc = lwi_move_joints(move, &proved, m, &how, &ask->move[i], at, sol, work, err);
        } else {
            rc = lwi_move_line(move, &proved, m, &how, &ask->move[i], at, sol, work, err);
        }
        if (rc != LW_OK) {
            place(err, i);
            return rc;
        }
        a->boxes += move->boxes;
        a->truncated = a->truncated || (ask->piece_room > 0 && move->n_piece > left);
        move->n_piece = move->n_piece < left ? move->n_piece : left;
        a->n_piece += move->n_piece;
        if (move->outcome != LW_OUTCOME_OK) {
            a->outcome = move->outcome;
            a->reason = move->reason;
            return LW_OK;
        }
        /* The end is where the next begins. */
        lw_solution *next = lwi_slot(work, LWI_SLOT_MOVE_AT);
        lwi_config_copy(&next->config, m, &sol->config);
        at = &next->config;
    }
    return LW_OK;
}

lw_code lw_path(const lw_path_answer **out, const lw_model *m, const lw_path_ask *ask,
                lw_work *work, lw_err *err)
{
    lw_path_answer *a = &work->path;
    const lw_posture_answer *from;
    *out = NULL;
    memset(a, 0, sizeof *a);
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->n_move > LW_MAX_MOVES || (ask->n_move > 0 && ask->store == NULL)) {
        return LW_FAIL(err, LW_E_ARGUMENT, "/through", "at most %d moves are taken", LW_MAX_MOVES);
    }
    if (ask->from == NULL) {
        return LW_FAIL(err, LW_E_ARGUMENT, "/from", "a posture to start from is needed");
    }
    lw_code rc = lw_posture(&from, m, ask->tool, ask->tool_written, ask->from, work, err);
    if (rc != LW_OK) {
        lwi_err_under(err, "/from");
        return rc;
    }
    a->from = ask->from->kind == LW_BY_DRIVES ? &work->forward : NULL;
    a->n_move = ask->n_move;
    a->move = ask->store;
    a->piece = ask->piece;
    for (size_t i = 0; i < ask->n_move; i++) {
        lwi_move_answer_open(&ask->store[i]);
    }
    *out = a;
    if (from->outcome == LW_OUTCOME_INCONSISTENT || from->solution == NULL) {
        a->outcome = from->outcome != LW_OUTCOME_OK ? from->outcome : LW_OUTCOME_UNDECIDED;
        a->reason = from->reason != NULL ? from->reason : "\"from\" names no posture";
        return LW_OK;
    }
    lw_solution *start = lwi_slot(work, LWI_SLOT_MOVE_START);
    lwi_solution_copy(start, m, from->solution);
    a->start = start;
    rc = run_moves(a, m, ask, tool, work, err);
    if (rc != LW_OK) {
        *out = NULL;
    }
    return rc;
}
