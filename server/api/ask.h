/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files that answer questions share: a question on its way from the request to the reply.
 * Included by ask*.c only. */
#ifndef LWD_API_ASK_H
#define LWD_API_ASK_H

#include "api.h"

typedef struct lwd_asking {
    lwd_app *app;
    lwd_lane *lane;
    const lwd_request *request;
    lwd_asked kind;
    const char *name;
    bool plain;        /* the PLC's form */
    bool table;        /* path: the answer as CSV */
    int outcome;       /* of the last question answered */
    char served_at[LWD_TIME_SIZE];
} lwd_asking;

typedef enum lwd_step {
    LWD_STEP_ANSWERED,
    LWD_STEP_REFUSED, /* the reply given holds a problem */
    LWD_STEP_DEFER
} lwd_step;

/* ---- ask.c ---- */

/* False if the request is refused already. */
bool lwd_ask_begin(lwd_asking *a, lwd_app *app, lwd_asked kind, const lwd_request *request,
                   lwd_reply *reply);
/* A question as a JSON body, from the request to the reply. */
void lwd_ask_post(lwd_app *app, lwd_asked kind, const lwd_request *request, lwd_reply *reply);
void lwd_ask_finish(const lwd_asking *a, lwd_reply *reply);
void lwd_ask_defer(lwd_reply *reply);
void lwd_ask_refuse(const lwd_request *request, lwd_reply *out, const lwd_findings *findings);
/* The core's refusal, its place put behind that of the question; `parts` NULL: no body. */
void lwd_ask_refuse_core(const lwd_request *request, lwd_reply *out,
                         const lwd_question_parts *parts, const lw_err *err);
/* Finds the revision a question is about; the caller drops it. */
lwd_step lwd_ask_look_up(lwd_asking *a, const lwd_question_head *head, lwd_reply *problem,
                         lwd_held **held);
/* Closes a reply whose body was written: JSON, the PLC's lines or a table. */
lwd_step lwd_ask_close(const lwd_asking *a, const lwd_held *held, lwd_json *json,
                       lwd_reply *reply);
/* Room for the moves of a path in the lane's question; false without memory. */
bool lwd_ask_room(lwd_asking *a);

/* ---- ask_core.c ---- */

/* Asks the core about the lane's question and writes the answer; LW_OK or a refusal in `err`. */
lw_code lwd_ask_core(lwd_asking *a, lwd_json *json, lwd_held *held, lw_err *err);

#endif
