/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The questions: request, decode, look up the model, ask the core, write the answer. One question
 * about a loaded mechanism allocates nothing but the parsed body and the reply, and reads no
 * catalog. Whatever is slower (loading a model, a long batch) leaves the event thread where the
 * listener allows it. */
#include <stdio.h>
#include <string.h>

#include "../codec/path_in.h"
#include "../log.h"
#include "ask.h"

enum { ANSWER_ROOM = 4000 }; /* bytes; most answers to one question fit without growing */

bool lwd_ask_begin(lwd_asking *a, lwd_app *app, lwd_asked kind, const lwd_request *request,
                   lwd_reply *reply)
{
    *a = (lwd_asking){.app = app, .request = request, .kind = kind};
    if (request->lane >= app->n_lanes) {
        lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The service has too few lanes for its threads.");
        return false;
    }
    a->lane = &app->lane[request->lane];
    a->plain = kind == LWD_ASK_REACH && lwd_prefers_plain(request->accept);
    a->table = kind == LWD_ASK_PATH && lwd_prefers_csv(request->accept);
    lwd_time_text(a->served_at);
    return (a->plain || a->table || lwd_takes_json(reply, request))
           && lwd_path_name(reply, request, &a->name);
}

/* Not to be kept by anything on the way: an old verdict is worse than none. */
void lwd_ask_finish(const lwd_asking *a, lwd_reply *reply)
{
    if (reply->status == LWD_DEFER) {
        return;
    }
    (void)lwd_reply_header(reply, "Cache-Control", "no-store");
    if (a->kind == LWD_ASK_REACH || a->kind == LWD_ASK_PATH) {
        (void)lwd_reply_header(reply, "Vary", "Accept");
    }
}

void lwd_ask_defer(lwd_reply *reply)
{
    lwd_buf_reset(&reply->body);
    reply->status = LWD_DEFER;
    reply->n_header = 0;
}

/* ---- problems -------------------------------------------------------------------------------- */

void lwd_ask_refuse(const lwd_request *request, lwd_reply *out, const lwd_findings *findings)
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
void lwd_ask_refuse_core(const lwd_request *request, lwd_reply *out,
                         const lwd_question_parts *parts, const lw_err *err)
{
    char pointer[LWD_POINTER_SIZE + sizeof err->where] = "";
    lwd_problem_id id = LWD_PROBLEM_QUESTION;
    if (parts != NULL) {
        lwd_reader_pointer(&parts->self, pointer);
        size_t n = strlen(pointer);
        put_place(pointer + n, sizeof pointer - n, &parts->self, err->where);
    } else {
        (void)snprintf(pointer, sizeof pointer, "%s", err->where);
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
    lwd_fail(out, request, id, parts != NULL || pointer[0] != '\0' ? pointer : NULL, NULL,
             NULL, "%s", err->msg);
}

static void fail_expect(const lwd_asking *a, lwd_reply *out, const lwd_held *held,
                        const lwd_question_head *head)
{
    lwd_fail(out, a->request, LWD_PROBLEM_DIGEST, NULL, head->expect, held->edge.digest,
             "Revision %lld of \"%.32s\" would answer, and its digest is not the one expected.",
             (long long)held->number, a->name);
}

/* Finds the revision a question is about; the caller drops it. */
lwd_step lwd_ask_look_up(lwd_asking *a, const lwd_question_head *head, lwd_reply *problem,
                         lwd_held **held)
{
    lwd_catalog_error err;
    lwd_store_result result = lwd_store_get(a->app->store, a->name, head->revision,
                                            !a->request->may_defer, held, &err);
    if (result == LWD_STORE_NOT_LOADED) {
        return LWD_STEP_DEFER;
    }
    if (result != LWD_STORE_OK) {
        lwd_fail_store(problem, a->request, result, &err);
        return LWD_STEP_REFUSED;
    }
    if (!lwd_expect_holds(head, (*held)->edge.digest)) {
        fail_expect(a, problem, *held, head);
    } else if (atomic_load(&(*held)->state) == (int)LWD_CATALOG_WITHDRAWN) {
        lwd_fail(problem, a->request, LWD_PROBLEM_STATE, NULL, NULL, "withdrawn",
                 "Revision %lld of \"%.32s\" was withdrawn and answers no questions any more.",
                 (long long)(*held)->number, a->name);
    } else {
        return LWD_STEP_ANSWERED;
    }
    lwd_held_drop(*held);
    *held = NULL;
    return LWD_STEP_REFUSED;
}

static bool names_a_pose(const lw_posture_ask *posture)
{
    return posture != NULL && posture->kind == LW_BY_POSE;
}

/* Questions that track a solution set, or search from many starts, take milliseconds: they leave
 * the event thread. */
static bool takes_long(const lwd_asking *a, const lwd_held *held)
{
    const lwd_question *q = &a->lane->question;
    const lw_report *report = lw_model_report(held->model);
    if (a->kind == LWD_ASK_FORWARD && q->all && report->forward_set.present) {
        return true;
    }
    if (q->has_distance || (a->kind == LWD_ASK_REACH && q->has_from)) {
        return true; /* proofs */
    }
    if (report->explicit_inverse) {
        return false;
    }
    return a->kind == LWD_ASK_INVERSE || a->kind == LWD_ASK_REACH || names_a_pose(&q->posture)
           || names_a_pose(q->posture.near);
}

bool lwd_ask_room(lwd_asking *a)
{
    lwd_lane *lane = a->lane;
    if (a->kind == LWD_ASK_PATH && lane->path == NULL) {
        lane->path = lwd_path_room_new();
    }
    lane->question.path = lane->path;
    return a->kind != LWD_ASK_PATH || lane->path != NULL;
}

/* One question from its members to its answer in `json`, closed as a reply of its own if `close`,
 * or a problem in `problem`. */
static lwd_step answer_parts(lwd_asking *a, const lwd_question_parts *parts, lwd_json *json,
                             lwd_reply *problem, bool close)
{
    lwd_question *q = &a->lane->question;
    lwd_question_head head;
    lwd_held *held = NULL;
    lw_err err = {.code = LW_OK};
    if (!lwd_question_head_read(parts, &head)) {
        lwd_ask_refuse(a->request, problem, &a->lane->findings);
        return LWD_STEP_REFUSED;
    }
    lwd_step result = lwd_ask_look_up(a, &head, problem, &held);
    if (result != LWD_STEP_ANSWERED) {
        return result;
    }
    if (!lwd_ask_room(a)) {
        lwd_fail_memory(problem, a->request);
        result = LWD_STEP_REFUSED;
    } else if (!lwd_question_read(parts, &head, &held->edge, q)) {
        lwd_ask_refuse(a->request, problem, &a->lane->findings);
        result = LWD_STEP_REFUSED;
    } else if (a->request->may_defer && takes_long(a, held)) {
        result = LWD_STEP_DEFER;
    } else if (lwd_ask_core(a, json, held, &err) != LW_OK) {
        lwd_ask_refuse_core(a->request, problem, parts, &err);
        result = LWD_STEP_REFUSED;
    } else if (close) {
        result = lwd_ask_close(a, held, json, problem);
    }
    lwd_held_drop(held);
    return result;
}

/* ---- batches --------------------------------------------------------------------------------- */

/* One member's answer, or its problem where the answer would stand. */
static lwd_step answer_member(lwd_asking *a, const lwd_reader *child, lwd_json *json)
{
    lwd_lane *lane = a->lane;
    const lwd_json before = *json;
    const size_t len = json->buf->len;
    lwd_step result = LWD_STEP_REFUSED;
    lwd_findings_init(&lane->findings);
    lwd_buf_reset(&lane->scrap.body);
    lane->scrap.n_header = 0;
    if (!lwd_question_member_read(child, &lane->body.single, &lane->member)) {
        lwd_ask_refuse(a->request, &lane->scrap, &lane->findings);
    } else {
        result = answer_parts(a, &lane->member, json, &lane->scrap, false);
    }
    if (result == LWD_STEP_ANSWERED && json->failed && !json->buf->failed) {
        /* A number was not finite: this member has no answer, the others have. */
        lwd_fail(&lane->scrap, a->request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The answer could not be written; please report the request with its id.");
        result = LWD_STEP_REFUSED;
    }
    if (result == LWD_STEP_REFUSED) {
        *json = before;
        json->buf->len = len;
        lwd_json_raw(json, lane->scrap.body.data != NULL ? lane->scrap.body.data : "null",
                     lane->scrap.body.data != NULL ? lane->scrap.body.len : 4);
        json->failed = json->failed || lane->scrap.body.failed;
    }
    return result;
}

static lwd_step answer_batch(lwd_asking *a, lwd_reply *reply)
{
    lwd_lane *lane = a->lane;
    lwd_request request = *a->request;
    const lwd_request *outer = a->request;
    lwd_question_head head;
    lwd_reader child;
    lwd_json json;
    lwd_step result = LWD_STEP_ANSWERED;
    if (!lwd_question_head_read(&lane->body.single, &head)) {
        lwd_ask_refuse(a->request, reply, &lane->findings);
        return LWD_STEP_REFUSED;
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
    for (bool more = lwd_first(&lane->body.batch, &child); more && result != LWD_STEP_DEFER;
         more = lwd_next(&child)) {
        result = answer_member(a, &child, &json);
    }
    lwd_json_end(&json);
    lwd_json_end(&json);
    a->request = outer;
    a->outcome = 0;
    if (result != LWD_STEP_DEFER) {
        lwd_reply_close(reply, a->request, &json);
        result = LWD_STEP_ANSWERED;
    }
    return result;
}

/* ---- bodies ---------------------------------------------------------------------------------- */

/* A body that is no JSON: the PLC's lines, a table with what all answers carry in its head. */
static lwd_step close_text(const lwd_asking *a, const lwd_held *held, lwd_reply *reply)
{
    const lwd_question_head *head = &a->lane->question.head;
    char number[24];
    reply->content_type = a->table ? "text/csv; charset=utf-8; header=present"
                                   : "text/plain; charset=us-ascii";
    if (reply->body.failed) {
        lwd_buf_clear(&reply->body);
        lwd_buf_init(&reply->body, 0);
        lwd_fail_memory(reply, a->request);
        return LWD_STEP_REFUSED;
    }
    if (a->table) {
        (void)snprintf(number, sizeof number, "%d", a->outcome);
        (void)lwd_reply_header(reply, "X-Code", number);
        (void)snprintf(number, sizeof number, "%lld", (long long)held->number);
        (void)lwd_reply_header(reply, "X-Revision", number);
        (void)lwd_reply_header(reply, "X-Digest", held->edge.digest);
    }
    if (a->table && head->has_ref) {
        (void)lwd_reply_header(reply, "X-Ref", head->ref);
    }
    return LWD_STEP_ANSWERED;
}

lwd_step lwd_ask_close(const lwd_asking *a, const lwd_held *held, lwd_json *json, lwd_reply *reply)
{
    lwd_step result = LWD_STEP_ANSWERED;
    if (a->plain || a->table) {
        result = close_text(a, held, reply);
    } else {
        lwd_reply_close(reply, a->request, json);
    }
    if (reply->status == 200) {
        reply->log_code = a->outcome;
    }
    return result;
}

static lwd_step answer_single(lwd_asking *a, const lwd_question_parts *parts, lwd_reply *reply)
{
    lwd_json json;
    lwd_reply_open(reply, &json, 200);
    if (!a->plain) {
        (void)lwd_buf_reserve(&reply->body, ANSWER_ROOM);
    }
    return answer_parts(a, parts, &json, reply, true);
}

static lwd_step answer_body(lwd_asking *a, struct cJSON *tree, lwd_reply *reply)
{
    lwd_lane *lane = a->lane;
    lwd_reader root = lwd_reader_of(tree, &lane->findings);
    if (!lwd_question_body_read(&root, a->kind, &lane->body)) {
        lwd_ask_refuse(a->request, reply, &lane->findings);
        return LWD_STEP_REFUSED;
    }
    if (!lane->body.is_batch) {
        return answer_single(a, &lane->body.single, reply);
    }
    if (a->plain) {
        lwd_fail(reply, a->request, LWD_PROBLEM_ACCEPT, "/batch", "application/json", "text/plain",
                 "A batch is answered with JSON only.");
        return LWD_STEP_REFUSED;
    }
    if (lane->body.n_batch > LWD_BATCH_QUICK && a->request->may_defer) {
        return LWD_STEP_DEFER;
    }
    return answer_batch(a, reply);
}

void lwd_ask_post(lwd_app *app, lwd_asked kind, const lwd_request *request, lwd_reply *reply)
{
    lwd_asking a;
    static const lwd_scan_limits limits = {
        .size = 65536, .depth = LWD_SCAN_DEPTH, .values = 16384};
    lwd_step result = LWD_STEP_REFUSED;
    if (lwd_ask_begin(&a, app, kind, request, reply)
        && lwd_query_members(reply, request, NULL, NULL, 0)) {
        lwd_findings_init(&a.lane->findings);
        struct cJSON *tree =
            lwd_json_parse(request->body, request->body_len, &limits, &a.lane->findings);
        if (tree == NULL) {
            lwd_ask_refuse(request, reply, &a.lane->findings);
        } else {
            result = answer_body(&a, tree, reply);
            lwd_json_free(tree);
        }
    }
    if (result == LWD_STEP_DEFER) {
        lwd_ask_defer(reply);
    }
    lwd_ask_finish(&a, reply);
}

void lwd_post_inverse(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_INVERSE, request, reply);
}

void lwd_post_forward(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_FORWARD, request, reply);
}

void lwd_post_jacobian(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_JACOBIAN, request, reply);
}

void lwd_post_margin(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_MARGIN, request, reply);
}

void lwd_post_reach(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_REACH, request, reply);
}

void lwd_post_free_travel(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_ask_post(context, LWD_ASK_TRAVEL, request, reply);
}

/* ---- query strings --------------------------------------------------------------------------- */

static lwd_step answer_query(lwd_asking *a, lwd_reply *reply)
{
    const lwd_request *request = a->request;
    lwd_findings *findings = &a->lane->findings;
    lwd_question_head head;
    lwd_held *held = NULL;
    lw_err err = {.code = LW_OK};
    lwd_json json;
    lwd_findings_init(findings);
    if (!lwd_query_head_read(request->query, request->n_query, a->kind, findings, &head)) {
        lwd_ask_refuse(request, reply, findings);
        return LWD_STEP_REFUSED;
    }
    lwd_step result = lwd_ask_look_up(a, &head, reply, &held);
    if (result != LWD_STEP_ANSWERED) {
        return result;
    }
    lwd_reply_open(reply, &json, 200);
    if (!lwd_query_read(request->query, request->n_query, &head, &held->edge, a->kind, findings,
                        &a->lane->question)) {
        lwd_ask_refuse(request, reply, findings);
    } else if (request->may_defer && takes_long(a, held)) {
        result = LWD_STEP_DEFER;
    } else if (lwd_ask_core(a, &json, held, &err) != LW_OK) {
        err.where[0] = '\0'; /* speaks of a body, and there is none */
        lwd_ask_refuse_core(request, reply, NULL, &err);
    } else {
        result = lwd_ask_close(a, held, &json, reply);
    }
    lwd_held_drop(held);
    return result;
}

static void get(lwd_app *app, lwd_asked kind, const lwd_request *request, lwd_reply *reply)
{
    lwd_asking a;
    lwd_step result = LWD_STEP_REFUSED;
    if (lwd_ask_begin(&a, app, kind, request, reply)) {
        result = answer_query(&a, reply);
    }
    if (result == LWD_STEP_DEFER) {
        lwd_ask_defer(reply);
    }
    lwd_ask_finish(&a, reply);
}

void lwd_get_margin(void *context, const lwd_request *request, lwd_reply *reply)
{
    get(context, LWD_ASK_MARGIN, request, reply);
}

void lwd_get_reach(void *context, const lwd_request *request, lwd_reply *reply)
{
    get(context, LWD_ASK_REACH, request, reply);
}
