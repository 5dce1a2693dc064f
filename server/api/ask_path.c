/* SPDX-License-Identifier: GPL-3.0-or-later */
/* POST .../path: as JSON like every question, or as a table (text/csv) whose start, thresholds and
 * other members stand in the query string. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../codec/path_in.h"
#include "../negotiate.h"
#include "ask.h"

/* The core names a move by its place in the list, "/through/3/via"; in a table it is a row. */
static void place_in_table(lw_err *err, const lwd_path *path)
{
    static const char start[] = "/through/";
    char rest[sizeof err->where];
    char *end = NULL;
    if (strncmp(err->where, start, sizeof start - 1) != 0) {
        return;
    }
    unsigned long i = strtoul(err->where + sizeof start - 1, &end, 10);
    if (i < path->n) {
        lwd_text_copy(rest, sizeof rest, end);
        (void)snprintf(err->where, sizeof err->where, "/%zu%.40s", path->row[i], rest);
    }
}

static lwd_step answer_table(lwd_asking *a, lwd_held *held, const lwd_question_head *head,
                             lwd_reply *reply)
{
    const lwd_request *request = a->request;
    lwd_question *q = &a->lane->question;
    lwd_findings *findings = &a->lane->findings;
    lw_err err = {.code = LW_OK};
    lwd_json json;
    lwd_reply_open(reply, &json, 200);
    if (!lwd_ask_room(a)) {
        lwd_fail_memory(reply, request);
        return LWD_STEP_REFUSED;
    }
    if (!lwd_query_read(request->query, request->n_query, head, &held->edge, a->kind, findings, q)
        || !lwd_path_table_in(request->body, request->body_len, &held->edge, findings, q)) {
        lwd_ask_refuse(request, reply, findings);
        return LWD_STEP_REFUSED;
    }
    if (lwd_ask_core(a, &json, held, &err) != LW_OK) {
        place_in_table(&err, q->path);
        lwd_ask_refuse_core(request, reply, NULL, &err);
        return LWD_STEP_REFUSED;
    }
    return lwd_ask_close(a, held, &json, reply);
}

static void post_table(lwd_app *app, const lwd_request *request, lwd_reply *reply)
{
    lwd_asking a;
    lwd_question_head head;
    lwd_held *held = NULL;
    lwd_step result = LWD_STEP_REFUSED;
    if (lwd_ask_begin(&a, app, LWD_ASK_PATH, request, reply)) {
        lwd_findings_init(&a.lane->findings);
        if (!lwd_query_head_read(request->query, request->n_query, a.kind, &a.lane->findings,
                                 &head)) {
            lwd_ask_refuse(request, reply, &a.lane->findings);
        } else {
            result = lwd_ask_look_up(&a, &head, reply, &held);
        }
        if (result == LWD_STEP_ANSWERED) {
            result = answer_table(&a, held, &head, reply);
            lwd_held_drop(held);
        }
    }
    if (result == LWD_STEP_DEFER) {
        lwd_ask_defer(reply);
    }
    lwd_ask_finish(&a, reply);
}

void lwd_post_path(void *context, const lwd_request *request, lwd_reply *reply)
{
    if (request->content_type != NULL && lwd_content_type_is(request->content_type, "text/csv")) {
        post_table(context, request, reply);
    } else {
        lwd_ask_post(context, LWD_ASK_PATH, request, reply);
    }
}
