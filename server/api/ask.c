/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The questions: request, decode, look up the model, ask the core, write the answer. One question
 * about a loaded mechanism allocates nothing but the parsed body and the reply, and reads no
 * catalog. Whatever is slower (loading a model, a long batch) leaves the event thread where the
 * listener allows it. */
#include <stdio.h>
#include <string.h>

#include "../log.h"
#include "api.h"

typedef struct asking {
    lwd_app *app;
    lwd_lane *lane;
    const lwd_request *request;
    lwd_asked kind;
    const char *name;
    bool plain;        /* the PLC's form */
    int outcome;       /* of the last question answered */
    char served_at[LWD_TIME_SIZE];
} asking;

enum { ANSWER_ROOM = 4000 }; /* bytes; most answers to one question fit without growing */

typedef enum step {
    STEP_ANSWERED,
    STEP_REFUSED, /* the reply given holds a problem */
    STEP_DEFER
} step;

static bool begin(asking *a, lwd_app *app, lwd_asked kind, const lwd_request *request,
                  lwd_reply *reply)
{
    *a = (asking){.app = app, .request = request, .kind = kind};
    if (request->lane >= app->n_lanes) {
        lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The service has too few lanes for its threads.");
        return false;
    }
    a->lane = &app->lane[request->lane];
    a->plain = kind == LWD_ASK_REACH && lwd_prefers_plain(request->accept);
    lwd_time_text(a->served_at);
    return (a->plain || lwd_takes_json(reply, request)) && lwd_path_name(reply, request, &a->name);
}

/* Not to be kept by anything on the way: an old verdict is worse than none. */
static void finish(const asking *a, lwd_reply *reply)
{
    if (reply->status == LWD_DEFER) {
        return;
    }
    (void)lwd_reply_header(reply, "Cache-Control", "no-store");
    if (a->kind == LWD_ASK_REACH) {
        (void)lwd_reply_header(reply, "Vary", "Accept");
    }
}

static void defer(lwd_reply *reply)
{
    lwd_buf_reset(&reply->body);
    reply->status = LWD_DEFER;
    reply->n_header = 0;
}

/* ---- problems -------------------------------------------------------------------------------- */

static void fail_findings(const lwd_request *request, lwd_reply *out, const lwd_findings *findings)
{
    const lwd_finding *first = lwd_findings_first_error(findings);
    if (findings->no_memory) {
        lwd_fail_memory(out, request);
    } else if (first != NULL && strcmp(first->code, "not-served-yet") == 0) {
        lwd_problem_reply_refused(out, request, LWD_PROBLEM_NOT_SERVED, findings);
    } else if (first != NULL && strcmp(first->code, "bad-query") == 0) {
        lwd_problem_reply_refused(out, request, LWD_PROBLEM_QUERY, findings);
    } else {
        lwd_problem_reply_findings(out, request, findings);
    }
}

/* Writes the place of a core's refusal as the question has it. The core knows postures only; a bare
 * pose may have been written as "near", and then its members stand there without "pose" between. */
static void put_place(char *out, size_t size, const lwd_reader *question, const char *where)
{
    static const char *const nears[] = {"/near/pose", "/from/near/pose"};
    lwd_reader from;
    lwd_reader near;
    lwd_reader pose;
    for (size_t i = 0; i < sizeof nears / sizeof nears[0]; i++) {
        size_t n = strlen(nears[i]);
        if (strncmp(where, nears[i], n) != 0 || (where[n] != '\0' && where[n] != '/')) {
            continue;
        }
        bool is_near = i == 0 ? lwd_find(question, "near", &near)
                              : lwd_find(question, "from", &from)
                                    && lwd_find(&from, "near", &near);
        if (is_near && !lwd_find(&near, "pose", &pose)) {
            (void)snprintf(out, size, "%.*s%s", (int)(n - strlen("/pose")), where, where + n);
            return;
        }
    }
    (void)snprintf(out, size, "%s", where);
}

/* The core's refusal of a question, its place put behind that of the question. */
static void fail_core(const lwd_request *request, lwd_reply *out, const lwd_question_parts *parts,
                      const lw_err *err)
{
    char pointer[LWD_POINTER_SIZE + sizeof err->where] = "";
    lwd_problem_id id = LWD_PROBLEM_QUESTION;
    if (parts != NULL) {
        lwd_reader_pointer(&parts->self, pointer);
        size_t n = strlen(pointer);
        put_place(pointer + n, sizeof pointer - n, &parts->self, err->where);
    }
    if (err->code == LW_E_MEMORY) {
        lwd_fail_memory(out, request);
        return;
    }
    if (err->code == LW_E_INTERNAL) {
        lwd_log(LWD_LOG_ERROR, "core_failed", "%s:%d %s", err->file != NULL ? err->file : "?",
                err->line, err->msg);
        lwd_fail(out, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The question met a fault of the program; please report it with the request id.");
        return;
    }
    if (err->code == LW_E_POSTURE) {
        id = LWD_PROBLEM_POSTURE;
    } else if (err->code == LW_E_NOT_CLOSED) {
        id = LWD_PROBLEM_NOT_CLOSED;
    }
    lwd_fail(out, request, id, parts != NULL ? pointer : NULL, NULL, NULL, "%s", err->msg);
}

static void fail_expect(const asking *a, lwd_reply *out, const lwd_held *held,
                        const lwd_question_head *head)
{
    lwd_fail(out, a->request, LWD_PROBLEM_DIGEST, NULL, head->expect, held->edge.digest,
             "Revision %lld of \"%.32s\" would answer, and its digest is not the one expected.",
             (long long)held->number, a->name);
}

/* ---- the core -------------------------------------------------------------------------------- */

static void reach_ask(lw_reach_ask *ask, const lwd_question *q, const lw_model *model)
{
    *ask = (lw_reach_ask){.tool = q->tool,
                          .tool_written = q->tool_is_written ? &q->tool_written : NULL,
                          .from = q->has_from ? &q->from : NULL,
                          .has_mode = q->posture.has_mode,
                          .any_mode = q->any_mode};
    ask->pose = q->posture.pose;
    if (ask->has_mode) {
        ask->mode = q->posture.mode;
    }
    lw_margin_min_default(&ask->margin_min, model, q->margin_min_is_number, q->margin_min_number);
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        if (q->margin_min.asked[i]) {
            ask->margin_min.asked[i] = true;
            ask->margin_min.value[i] = q->margin_min.value[i];
        }
    }
}

static lw_code ask_inverse(asking *a, lwd_json *json, const lwd_answer_head *head,
                           const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_inverse_answer *answer = NULL;
    lw_inverse_ask ask = {.tool = q->tool,
                          .tool_written = q->tool_is_written ? &q->tool_written : NULL,
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

static lw_code ask_forward(asking *a, lwd_json *json, const lwd_answer_head *head,
                           const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_forward_answer *answer = NULL;
    lw_forward_ask ask = {.tool = q->tool,
                          .tool_written = q->tool_is_written ? &q->tool_written : NULL,
                          .readings = &q->posture,
                          .all = q->all};
    lw_code code = lw_forward(&answer, model, &ask, work, err);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_forward(json, head, answer);
    }
    return code;
}

static lw_code ask_jacobian(asking *a, lwd_json *json, const lwd_answer_head *head,
                            const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_jacobian_answer *answer = NULL;
    lw_jacobian_ask ask = {.tool = q->tool,
                           .tool_written = q->tool_is_written ? &q->tool_written : NULL,
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

static lw_code ask_margin(asking *a, lwd_json *json, const lwd_answer_head *head,
                          const lw_model *model, lw_work *work, lw_err *err)
{
    const lwd_question *q = head->question;
    const lw_margin_answer *answer = NULL;
    lw_code code = lw_margin(&answer, model, q->tool,
                             q->tool_is_written ? &q->tool_written : NULL, &q->posture, work, err);
    if (code == LW_OK) {
        a->outcome = (int)answer->outcome;
        lwd_answer_margin(json, head, answer);
    }
    return code;
}

static lw_code ask_reach(asking *a, lwd_json *json, const lwd_answer_head *head,
                         const lw_model *model, lw_work *work, lw_err *err)
{
    const lw_reach_answer *answer = NULL;
    lw_reach_ask ask;
    reach_ask(&ask, head->question, model);
    lw_code code = lw_reach(&answer, model, &ask, work, err);
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

/* Asks the core and writes the answer; LW_OK or a refusal in `err`. */
static lw_code ask_core(asking *a, lwd_json *json, lwd_held *held, lw_err *err)
{
    static lw_code (*const ask[LWD_ASK_COUNT])(asking *, lwd_json *, const lwd_answer_head *,
                                               const lw_model *, lw_work *, lw_err *) = {
        ask_inverse, ask_forward, ask_jacobian, ask_margin, ask_reach};
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

/* Finds the revision a question is about; the caller drops it. */
static step look_up(asking *a, const lwd_question_head *head, lwd_reply *problem, lwd_held **held)
{
    lwd_catalog_error err;
    lwd_store_result result = lwd_store_get(a->app->store, a->name, head->revision,
                                            !a->request->may_defer, held, &err);
    if (result == LWD_STORE_NOT_LOADED) {
        return STEP_DEFER;
    }
    if (result != LWD_STORE_OK) {
        lwd_fail_store(problem, a->request, result, &err);
        return STEP_REFUSED;
    }
    if (!lwd_expect_holds(head, (*held)->edge.digest)) {
        fail_expect(a, problem, *held, head);
    } else if (atomic_load(&(*held)->state) == (int)LWD_CATALOG_WITHDRAWN) {
        lwd_fail(problem, a->request, LWD_PROBLEM_STATE, NULL, NULL, "withdrawn",
                 "Revision %lld of \"%.32s\" was withdrawn and answers no questions any more.",
                 (long long)(*held)->number, a->name);
    } else {
        return STEP_ANSWERED;
    }
    lwd_held_drop(*held);
    *held = NULL;
    return STEP_REFUSED;
}

static bool names_a_pose(const lw_posture_ask *posture)
{
    return posture != NULL && posture->kind == LW_BY_POSE;
}

/* Questions that track a solution set, or search from many starts, take milliseconds: they leave
 * the event thread. */
static bool takes_long(const asking *a, const lwd_held *held)
{
    const lwd_question *q = &a->lane->question;
    const lw_report *report = lw_model_report(held->model);
    if (a->kind == LWD_ASK_FORWARD && q->all && report->forward_set.present) {
        return true;
    }
    if (report->explicit_inverse) {
        return false;
    }
    return a->kind == LWD_ASK_INVERSE || a->kind == LWD_ASK_REACH || names_a_pose(&q->posture)
           || names_a_pose(q->posture.near);
}

/* One question from its members to its answer in `json`, or a problem in `problem`. */
static step answer_parts(asking *a, const lwd_question_parts *parts, lwd_json *json,
                         lwd_reply *problem)
{
    lwd_question *q = &a->lane->question;
    lwd_question_head head;
    lwd_held *held = NULL;
    lw_err err = {.code = LW_OK};
    if (!lwd_question_head_read(parts, &head)) {
        fail_findings(a->request, problem, &a->lane->findings);
        return STEP_REFUSED;
    }
    step result = look_up(a, &head, problem, &held);
    if (result != STEP_ANSWERED) {
        return result;
    }
    if (!lwd_question_read(parts, &head, &held->edge, q)) {
        fail_findings(a->request, problem, &a->lane->findings);
        result = STEP_REFUSED;
    } else if (a->request->may_defer && takes_long(a, held)) {
        result = STEP_DEFER;
    } else if (ask_core(a, json, held, &err) != LW_OK) {
        fail_core(a->request, problem, parts, &err);
        result = STEP_REFUSED;
    }
    lwd_held_drop(held);
    return result;
}

/* ---- batches --------------------------------------------------------------------------------- */

/* One member's answer, or its problem where the answer would stand. */
static step answer_member(asking *a, const lwd_reader *child, lwd_json *json)
{
    lwd_lane *lane = a->lane;
    const lwd_json before = *json;
    const size_t len = json->buf->len;
    step result = STEP_REFUSED;
    lwd_findings_init(&lane->findings);
    lwd_buf_reset(&lane->scrap.body);
    lane->scrap.n_header = 0;
    if (!lwd_question_member_read(child, &lane->body.single, &lane->member)) {
        fail_findings(a->request, &lane->scrap, &lane->findings);
    } else {
        result = answer_parts(a, &lane->member, json, &lane->scrap);
    }
    if (result == STEP_ANSWERED && json->failed && !json->buf->failed) {
        /* A number was not finite: this member has no answer, the others have. */
        lwd_fail(&lane->scrap, a->request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The answer could not be written; please report the request with its id.");
        result = STEP_REFUSED;
    }
    if (result == STEP_REFUSED) {
        *json = before;
        json->buf->len = len;
        lwd_json_raw(json, lane->scrap.body.data != NULL ? lane->scrap.body.data : "null",
                     lane->scrap.body.data != NULL ? lane->scrap.body.len : 4);
        json->failed = json->failed || lane->scrap.body.failed;
    }
    return result;
}

static step answer_batch(asking *a, lwd_reply *reply)
{
    lwd_lane *lane = a->lane;
    lwd_request request = *a->request;
    const lwd_request *outer = a->request;
    lwd_question_head head;
    lwd_reader child;
    lwd_json json;
    step result = STEP_ANSWERED;
    if (!lwd_question_head_read(&lane->body.single, &head)) {
        fail_findings(a->request, reply, &lane->findings);
        return STEP_REFUSED;
    }
    request.accept = NULL; /* problems inside the batch are JSON */
    a->request = &request;
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", a->name);
    if (head.has_ref) {
        lwd_json_put_string(&json, "ref", head.ref);
    }
    lwd_json_put_string(&json, "served_at", a->served_at);
    lwd_json_put_int(&json, "count", (int64_t)lane->body.n_batch);
    lwd_json_put_array(&json, "answers");
    for (bool more = lwd_first(&lane->body.batch, &child); more && result != STEP_DEFER;
         more = lwd_next(&child)) {
        result = answer_member(a, &child, &json);
    }
    lwd_json_end(&json);
    lwd_json_end(&json);
    a->request = outer;
    a->outcome = 0;
    if (result != STEP_DEFER) {
        lwd_reply_close(reply, a->request, &json);
        result = STEP_ANSWERED;
    }
    return result;
}

/* ---- bodies ---------------------------------------------------------------------------------- */

static step answer_single(asking *a, const lwd_question_parts *parts, lwd_reply *reply)
{
    lwd_json json;
    lwd_reply_open(reply, &json, 200);
    if (!a->plain) {
        (void)lwd_buf_reserve(&reply->body, ANSWER_ROOM);
    }
    step result = answer_parts(a, parts, &json, reply);
    if (result != STEP_ANSWERED) {
        return result;
    }
    if (a->plain) {
        reply->content_type = "text/plain; charset=us-ascii";
        if (reply->body.failed) {
            lwd_buf_clear(&reply->body);
            lwd_buf_init(&reply->body, 0);
            lwd_fail_memory(reply, a->request);
            return STEP_REFUSED;
        }
    } else {
        lwd_reply_close(reply, a->request, &json);
    }
    if (reply->status == 200) {
        reply->log_code = a->outcome;
    }
    return STEP_ANSWERED;
}

static step answer_body(asking *a, struct cJSON *tree, lwd_reply *reply)
{
    lwd_lane *lane = a->lane;
    lwd_reader root = lwd_reader_of(tree, &lane->findings);
    if (!lwd_question_body_read(&root, a->kind, &lane->body)) {
        fail_findings(a->request, reply, &lane->findings);
        return STEP_REFUSED;
    }
    if (!lane->body.is_batch) {
        return answer_single(a, &lane->body.single, reply);
    }
    if (a->plain) {
        lwd_fail(reply, a->request, LWD_PROBLEM_ACCEPT, "/batch", "application/json", "text/plain",
                 "A batch is answered with JSON only.");
        return STEP_REFUSED;
    }
    if (lane->body.n_batch > LWD_BATCH_QUICK && a->request->may_defer) {
        return STEP_DEFER;
    }
    return answer_batch(a, reply);
}

static void post(lwd_app *app, lwd_asked kind, const lwd_request *request, lwd_reply *reply)
{
    asking a;
    static const lwd_scan_limits limits = {
        .size = 65536, .depth = LWD_SCAN_DEPTH, .values = 16384};
    step result = STEP_REFUSED;
    if (begin(&a, app, kind, request, reply)
        && lwd_query_members(reply, request, NULL, NULL, 0)) {
        lwd_findings_init(&a.lane->findings);
        struct cJSON *tree =
            lwd_json_parse(request->body, request->body_len, &limits, &a.lane->findings);
        if (tree == NULL) {
            fail_findings(request, reply, &a.lane->findings);
        } else {
            result = answer_body(&a, tree, reply);
            lwd_json_free(tree);
        }
    }
    if (result == STEP_DEFER) {
        defer(reply);
    }
    finish(&a, reply);
}

void lwd_post_inverse(void *context, const lwd_request *request, lwd_reply *reply)
{
    post(context, LWD_ASK_INVERSE, request, reply);
}

void lwd_post_forward(void *context, const lwd_request *request, lwd_reply *reply)
{
    post(context, LWD_ASK_FORWARD, request, reply);
}

void lwd_post_jacobian(void *context, const lwd_request *request, lwd_reply *reply)
{
    post(context, LWD_ASK_JACOBIAN, request, reply);
}

void lwd_post_margin(void *context, const lwd_request *request, lwd_reply *reply)
{
    post(context, LWD_ASK_MARGIN, request, reply);
}

void lwd_post_reach(void *context, const lwd_request *request, lwd_reply *reply)
{
    post(context, LWD_ASK_REACH, request, reply);
}

/* ---- query strings --------------------------------------------------------------------------- */

static step answer_query(asking *a, lwd_reply *reply)
{
    const lwd_request *request = a->request;
    lwd_findings *findings = &a->lane->findings;
    lwd_question_head head;
    lwd_held *held = NULL;
    lw_err err = {.code = LW_OK};
    lwd_json json;
    lwd_findings_init(findings);
    if (!lwd_query_head_read(request->query, request->n_query, a->kind, findings, &head)) {
        fail_findings(request, reply, findings);
        return STEP_REFUSED;
    }
    step result = look_up(a, &head, reply, &held);
    if (result != STEP_ANSWERED) {
        return result;
    }
    lwd_reply_open(reply, &json, 200);
    if (!lwd_query_read(request->query, request->n_query, &head, &held->edge, a->kind, findings,
                        &a->lane->question)) {
        fail_findings(request, reply, findings);
    } else if (request->may_defer && takes_long(a, held)) {
        result = STEP_DEFER;
    } else if (ask_core(a, &json, held, &err) != LW_OK) {
        fail_core(request, reply, NULL, &err);
    } else if (a->plain && !reply->body.failed) {
        reply->content_type = "text/plain; charset=us-ascii";
        reply->log_code = a->outcome;
    } else {
        lwd_reply_close(reply, request, &json);
        reply->log_code = reply->status == 200 ? a->outcome : reply->log_code;
    }
    lwd_held_drop(held);
    return result;
}

static void get(lwd_app *app, lwd_asked kind, const lwd_request *request, lwd_reply *reply)
{
    asking a;
    step result = STEP_REFUSED;
    if (begin(&a, app, kind, request, reply)) {
        result = answer_query(&a, reply);
    }
    if (result == STEP_DEFER) {
        defer(reply);
    }
    finish(&a, reply);
}

void lwd_get_margin(void *context, const lwd_request *request, lwd_reply *reply)
{
    get(context, LWD_ASK_MARGIN, request, reply);
}

void lwd_get_reach(void *context, const lwd_request *request, lwd_reply *reply)
{
    get(context, LWD_ASK_REACH, request, reply);
}
