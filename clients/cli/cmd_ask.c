/* SPDX-License-Identifier: GPL-3.0-or-later */
/* leeway ask: one question (or a written one), its answer in words, and its record for replay. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "answer.h"
#include "commands.h"
#include "question.h"
#include "record.h"

enum { BODY_MAX = 4 * 1024 * 1024 };

/* Whole file as JSON; NULL after a complaint. */
static cJSON *read_json(const char *file)
{
    lwc_text text = {0};
    lwc_text why = {0};
    lwc_json_fault fault;
    cJSON *body = NULL;
    if (!lwc_read_file(&text, file, BODY_MAX, &why)) {
        lwc_complain("%s", lwc_text_string(&why));
    } else {
        body = lwc_json_parse(text.data, text.len, &fault);
        if (body == NULL) {
            lwc_complain("%s, line %zu, column %zu: %s", file, fault.line, fault.column,
                         fault.what);
        }
    }
    lwc_text_clear(&text);
    lwc_text_clear(&why);
    return body;
}

/* A question written down as JSON, from a file or standard input. */
static cJSON *read_body(const char *file)
{
    cJSON *body = read_json(file);
    if (body != NULL && !cJSON_IsObject(body)) {
        lwc_complain("%s: expected one question, an object like {\"pose\": {\"x\": 0}}", file);
        cJSON_Delete(body);
        body = NULL;
    }
    return body;
}

/* A written question stands as it is; nothing may be set beside it. */
static bool only_body(const lwc_args *args)
{
    const struct {
        const char *name;
        bool given;
    } others[] = {{"mode", args->mode != NULL},
                  {"near", args->near != NULL},
                  {"from", args->from != NULL},
                  {"tool", args->tool != NULL},
                  {"revision", args->revision != NULL},
                  {"margin-min", args->margin_min != NULL},
                  {"units", args->units != NULL},
                  {"orientation", args->orientation != NULL},
                  {"all", args->all},
                  {"point", args->point != NULL},
                  {"in", args->in != NULL},
                  {"distance", args->distance},
                  {"budget", args->budget != NULL},
                  {"timeout-ms", args->timeout_ms != NULL},
                  {"ref", args->ref != NULL},
                  {"expect", args->expect != NULL}};
    for (size_t i = 0; i < sizeof others / sizeof others[0]; i++) {
        if (others[i].given) {
            lwc_complain("--json-body sends a question as it stands; put \"%s\" into it instead of "
                         "giving --%s",
                         others[i].name, others[i].name);
            return false;
        }
    }
    if (args->n_words > 2) {
        lwc_complain("--json-body sends a question as it stands; leave out \"%s\"", args->words[2]);
        return false;
    }
    return true;
}

/* Statuses that say something about the question, not about the service or the token. */
static bool is_worth_recording(long status)
{
    return status == 200 || (status >= 400 && status < 500 && status != 401 && status != 403 &&
                             status != 408 && status != 429);
}

static int show(lwc_session *session, const char *kind, const lwc_reply *reply,
                const cJSON *answer)
{
    if (reply->status != 200 || answer == NULL) {
        return lwc_refused(session, "ask", reply, answer);
    }
    if (session->args->json) {
        lwc_print_raw(reply);
    } else {
        lwc_text text = {0};
        lwc_show_answer(&text, kind, answer, lwc_may_colour(stdout));
        lwc_print(&text);
        lwc_text_clear(&text);
    }
    int status = lwc_answer_exit(answer);
    return session->args->ok_any && status == LWC_EXIT_NO ? LWC_EXIT_YES : status;
}

/* The question as the service understood it, for a record of what was sent as a table. */
static cJSON *body_of_answer(const lwc_args *args, const cJSON *answer)
{
    const cJSON *asked = lwc_json_get(answer, "asked");
    const cJSON *units = lwc_json_get(answer, "units");
    cJSON *body = cJSON_IsObject(asked) ? lwc_json_copy(asked) : lwc_json_object();
    if (cJSON_IsObject(units)) {
        lwc_json_put(body, "units", lwc_json_copy(units));
    }
    if (args->tool != NULL) {
        lwc_json_put_string(body, "tool", args->tool);
    }
    if (args->ref != NULL) {
        lwc_json_put_string(body, "ref", args->ref);
    }
    return body;
}

int lwc_ask_and_show(lwc_session *session, const char *kind, const char *path,
                     const lwc_request *request, const cJSON *body)
{
    const lwc_args *args = session->args;
    lwc_reply reply = {0};
    lwc_contact contact = lwc_http_ask(session->http, request, &reply);
    int status = lwc_contact_exit(contact);
    if (contact == LWC_ANSWERED) {
        cJSON *answer = lwc_reply_json(&reply);
        status = show(session, kind, &reply, answer);
        bool known = body != NULL || reply.status == 200;
        if (args->record != NULL && answer != NULL && known && is_worth_recording(reply.status)) {
            cJSON *asked = body != NULL ? lwc_json_copy(body) : body_of_answer(args, answer);
            if (!lwc_record_append(args->record, path, asked, reply.status, answer)) {
                status = LWC_EXIT_ERROR;
            }
            cJSON_Delete(asked);
        }
        cJSON_Delete(answer);
    }
    lwc_text_clear(&reply.body);
    return status;
}

static int ask(lwc_session *session, lwc_kind kind, const char *name, size_t first)
{
    const lwc_args *args = session->args;
    char path[96];
    long revision = 0;
    if (!lwc_read_revision(args->revision, &revision) ||
        (args->json_body != NULL && !only_body(args)) ||
        (args->record != NULL && !lwc_record_check(args->record))) {
        return LWC_EXIT_ERROR;
    }
    cJSON *body = args->json_body != NULL ? read_body(args->json_body)
                                          : lwc_question_build(kind, args->words + first,
                                                               args->n_words - first, args);
    if (body == NULL) {
        return LWC_EXIT_ERROR;
    }
    lwc_text json = {0};
    lwc_json_write(&json, body);
    (void)snprintf(path, sizeof path, "/v1/mechanisms/%s/%s", name, lwc_kind_name(kind));
    lwc_request request = {.method = "POST", .path = path, .body = json.data,
                           .body_len = json.len};
    int status = lwc_ask_and_show(session, lwc_kind_name(kind), path, &request, body);
    lwc_text_clear(&json);
    cJSON_Delete(body);
    return status;
}

int lwc_cmd_ask(lwc_session *session)
{
    lwc_kind kind;
    const char *name = NULL;
    if (!lwc_word_count(session, 2, SIZE_MAX,
                        "ask inverse|forward|jacobian|margin|reach|free-travel NAME ...") ||
        !lwc_kind_find(&kind, session->args->words[0]) || !lwc_word_name(session, 1, &name)) {
        return LWC_EXIT_ERROR;
    }
    return ask(session, kind, name, 2);
}

int lwc_cmd_travel(lwc_session *session)
{
    const char *name = NULL;
    if (!lwc_word_count(session, 1, SIZE_MAX, "travel NAME VALUE...") ||
        !lwc_word_name(session, 0, &name)) {
        return LWC_EXIT_ERROR;
    }
    return ask(session, LWC_FREE_TRAVEL, name, 1);
}
