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

/* A question written down as JSON, from a file or standard input. */
static cJSON *read_body(const char *file)
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
        } else if (!cJSON_IsObject(body)) {
            lwc_complain("%s: expected one question, an object like {\"pose\": {\"x\": 0}}", file);
            cJSON_Delete(body);
            body = NULL;
        }
    }
    lwc_text_clear(&text);
    lwc_text_clear(&why);
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

static int show(lwc_session *session, lwc_kind kind, const lwc_reply *reply, const cJSON *answer)
{
    if (reply->status != 200 || answer == NULL) {
        return lwc_refused(session, "ask", reply, answer);
    }
    if (session->args->json) {
        lwc_print_raw(reply);
    } else {
        lwc_text text = {0};
        lwc_show_answer(&text, lwc_kind_name(kind), answer, lwc_may_colour(stdout));
        lwc_print(&text);
        lwc_text_clear(&text);
    }
    int status = lwc_answer_exit(answer);
    return session->args->ok_any && status == LWC_EXIT_NO ? LWC_EXIT_YES : status;
}

int lwc_cmd_ask(lwc_session *session)
{
    const lwc_args *args = session->args;
    lwc_kind kind;
    const char *name = NULL;
    char path[96];
    long revision = 0;
    if (!lwc_word_count(session, 2, SIZE_MAX,
                        "ask inverse|forward|jacobian|margin|reach NAME ...") ||
        !lwc_kind_find(&kind, args->words[0]) || !lwc_word_name(session, 1, &name) ||
        !lwc_read_revision(args->revision, &revision) ||
        (args->json_body != NULL && !only_body(args)) ||
        (args->record != NULL && !lwc_record_check(args->record))) {
        return LWC_EXIT_ERROR;
    }
    cJSON *body = args->json_body != NULL
                      ? read_body(args->json_body)
                      : lwc_question_build(kind, args->words + 2, args->n_words - 2, args);
    if (body == NULL) {
        return LWC_EXIT_ERROR;
    }
    lwc_text json = {0};
    lwc_reply reply = {0};
    lwc_json_write(&json, body);
    (void)snprintf(path, sizeof path, "/v1/mechanisms/%s/%s", name, lwc_kind_name(kind));
    lwc_request request = {.method = "POST", .path = path, .body = json.data,
                           .body_len = json.len};
    lwc_contact contact = lwc_http_ask(session->http, &request, &reply);
    int status = lwc_contact_exit(contact);
    if (contact == LWC_ANSWERED) {
        cJSON *answer = lwc_reply_json(&reply);
        status = show(session, kind, &reply, answer);
        if (args->record != NULL && answer != NULL && is_worth_recording(reply.status) &&
            !lwc_record_append(args->record, path, body, reply.status, answer)) {
            status = LWC_EXIT_ERROR;
        }
        cJSON_Delete(answer);
    }
    lwc_text_clear(&reply.body);
    lwc_text_clear(&json);
    cJSON_Delete(body);
    return status;
}
