/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a question as understood to the core's answer as written: one function a kind. Questions
 * about moves may take long, so the app's clock watches them. */
#include <string.h>

#include "../codec/path_in.h"
#include "ask.h"

/* What the question wants of the margins, over what the document and the defaults want. */
static void margin_min(lw_margin_min *out, const lwd_question *q, const lw_model *model)
{
    lw_margin_min_default(out, model, q->margin_min_is_number, q->margin_min_number);
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        if (q->margin_min.asked[i]) {
            out->asked[i] = true;
            out->value[i] = q->margin_min.value[i];
        }
    }
}

static const lw_spec_tool *tool_written(const lwd_question *q)
{
    return q->tool_is_written ? &q->tool_written : NULL;
}

/* The flag that goes up when the question has had its time. */
static const atomic_bool *arm(const lwd_asking *a, const lwd_question *q)
{
    return lwd_watch_arm(a->app->watch, a->request->lane,
                         q->timeout_ms != 0 ? q->timeout_ms : LWD_TIMEOUT_DEFAULT);
}

static void disarm(const lwd_asking *a)
{
    lwd_watch_disarm(a->app->watch, a->request->lane);
}

static void reach_ask(lw_reach_ask *ask, const lwd_question *q, const lw_model *model)
{
    *ask = (lw_reach_ask){.tool = q->tool,
                          .tool_written = tool_written(q),
                          .from = q->has_from ? &q->from : NULL,
                          .has_mode = q->posture.has_mode,
                          .any_mode = q->any_mode,
                          .budget = (size_t)q->budget};
    ask->pose = q->posture.pose;
    if (ask->has_mode) {
        ask->mode = q->posture.mode;
    }
    margin_min(&ask->margin_min, q, model);
}

static lw_code ask_inverse(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                           const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_inverse_answer *answer = NULL;
    lw_inverse_ask ask = {.tool = q->tool,
                          .tool_written = tool_written(q),
                          .pose = q->posture.pose,
                          .has_mode = q->posture.has_mode,
                          .near = q->posture.near};
    if (ask.has_mode) {
        ask.mode = q->posture.mode;
    }
    lw_code code = lw_inverse(&answer, model, &ask, work, err);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_inverse(json, head, answer);
    }
    return code;
}

static lw_code ask_forward(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                           const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_forward_answer *answer = NULL;
    lw_forward_ask ask = {.tool = q->tool,
                          .tool_written = tool_written(q),
                          .readings = &q->posture,
                          .all = q->all};
    lw_code code = lw_forward(&answer, model, &ask, work, err);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_forward(json, head, answer);
    }
    return code;
}

static lw_code ask_jacobian(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                            const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_jacobian_answer *answer = NULL;
    lw_jacobian_ask ask = {.tool = q->tool,
                           .tool_written = tool_written(q),
                           .posture = &q->posture,
                           .has_point = q->has_point,
                           .in_tool = q->in_tool};
    if (q->has_point) {
        memcpy(ask.point_m, q->point_m, sizeof ask.point_m);
    }
    lw_code code = lw_jacobian(&answer, model, &ask, work, err);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_jacobian(json, head, answer);
    }
    return code;
}

static lw_code ask_distance(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                            const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_distance_answer *answer = NULL;
    const lw_distance_ask ask = {.tool = q->tool,
                                 .tool_written = tool_written(q),
                                 .posture = &q->posture,
                                 .budget = (size_t)q->budget,
                                 .abort = arm(a, q)};
    lw_code code = lw_distance(&answer, model, &ask, work, err);
    disarm(a);
    if (code == LW_OK) {
        lwd_answer_distance(json, head, answer);
    }
    return code;
}

static lw_code ask_margin(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                          const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_margin_answer *answer = NULL;
    lw_code code =
        lw_margin(&answer, model, q->tool, tool_written(q), &q->posture, work, err);
    if (code != LW_OK) {
        return code;
    }
    a->outcome = (int)answer->outcome;
    bool placed = answer->solution != NULL;
    lwd_answer_margin_begin(json, head, answer);
    if (placed && q->has_distance) { /* the margin's answer ends with the next query */
        code = ask_distance(a, json, head, model, work, err);
    }
    lwd_answer_end(json);
    return code;
}

static lw_code ask_reach(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                         const lw_model *model, lw_work *work, lw_err *err)
{
    const lw_reach_answer *answer = NULL;
    lw_reach_ask ask;
    reach_ask(&ask, head->question, model);
    if (ask.from != NULL) {
        ask.abort = arm(a, head->question);
    }
    lw_code code = lw_reach(&answer, model, &ask, work, err);
    if (ask.from != NULL) {
        disarm(a);
    }
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        if (a->plain) {
            lwd_plc_reach(json->buf, head, answer);
        } else {
            lwd_answer_reach(json, head, answer);
        }
    }
    return code;
}

static lw_code ask_path(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                        const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_path_answer *answer = NULL;
    lw_path_ask ask = {.tool = q->tool,
                       .tool_written = tool_written(q),
                       .from = &q->from,
                       .n_move = q->path->n,
                       .move = q->path->move,
                       .budget = (size_t)q->budget,
                       .store = q->path->answer};
    if (q->certificate) {
        if (!lwd_path_room_pieces(q->path)) {
            return LW_FAIL(err, LW_E_MEMORY, "", "no memory for the certificate");
        }
        ask.piece_room = LWD_PIECES_MAX;
        ask.piece = q->path->piece;
    }
    margin_min(&ask.margin_min, q, model);
    ask.abort = arm(a, q);
    lw_code code = lw_path(&answer, model, &ask, work, err);
    disarm(a);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        if (a->table) {
            lwd_table_path(json->buf, head, answer);
        } else {
            lwd_answer_path(json, head, answer);
        }
    }
    return code;
}

static lw_code ask_travel(lwd_asking *a, lwd_json *json, const lwd_answer_head *head,
                          const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_travel_answer *answer = NULL;
    lw_travel_ask ask = {.tool = q->tool,
                         .tool_written = tool_written(q),
                         .posture = &q->posture,
                         .reach_m = q->travel_m,
                         .reach_rad = q->travel_rad,
                         .budget = (size_t)q->budget};
    margin_min(&ask.margin_min, q, model);
    ask.abort = arm(a, q);
    lw_code code = lw_travel(&answer, model, &ask, work, err);
    disarm(a);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_travel(json, head, answer);
    }
    return code;
}

lw_code lwd_ask_core(lwd_asking *a, lwd_json *json, lwd_held *held, lw_err *err)
{
    static lw_code (*const ask[LWD_ASK_COUNT])(lwd_asking *, lwd_json *, const lwd_answer_head *,
                                               const lw_model *, lw_work *, lw_err *) = {
        ask_inverse, ask_forward, ask_jacobian, ask_margin, ask_reach, ask_path, ask_travel};
    lw_work *work = lwd_lane_work_of(a->lane, held);
    if (work == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "no memory for the model's scratch");
    }
    lwd_answer_head head = {
        .edge = &held->edge,
        .question = &a->lane->question,
        .state = lwd_catalog_state_name((lwd_catalog_state)atomic_load(&held->state)),
        .served_at = a->served_at};
    return ask[a->kind](a, json, &head, held->model, work, err);
}
