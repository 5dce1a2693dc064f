/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of this room share: the app, the lanes' scratch, helpers for replies, and the
 * handlers that the route table in app.c names. A handler runs on the event thread or on a worker;
 * the lane in the request says which scratch is its own. */
#ifndef LWD_API_API_H
#define LWD_API_API_H

#include "../catalog/catalog.h"
#include "../codec/answer_out.h"
#include "../codec/json_out.h"
#include "../codec/question_in.h"
#include "../exchange.h"
#include "app.h"
#include "problem.h"
#include "store.h"
#include "watch.h"

enum {
    LWD_LANE_WORKS = 32,    /* scratch of so many models is kept in a lane */
    LWD_BATCH_QUICK = 16,   /* longer batches leave the event thread */
    LWD_PAGE_DEFAULT = 50,
    LWD_PAGE_MAX = 200,
    LWD_TIME_SIZE = 25
};

typedef struct lwd_lane_work {
    lwd_held *held; /* keeps the model alive; NULL: free */
    lw_work *work;
    uint64_t used;
} lwd_lane_work;

/* Scratch of one thread: nothing here is shared. */
typedef struct lwd_lane {
    lwd_lane_work work[LWD_LANE_WORKS];
    size_t last; /* index of the work used last */
    uint64_t tick;
    lwd_question question;
    lwd_question_body body;
    lwd_question_parts member;
    lwd_path *path;  /* NULL until the first path is asked for */
    lwd_findings findings;
    lwd_reply scrap; /* problems of batch members are made here */
} lwd_lane;

struct lwd_app {
    lwd_catalog *catalog;
    lwd_store *store;
    unsigned n_lanes;
    lwd_preparing preparing;
    lwd_watch *watch;
    lwd_lane *lane;  /* [n_lanes] */
    lwd_buf about;   /* the answer of GET /about, made at the start */
};

/* ---- lane.c ---- */

/* The lane's scratch for a model, made if need be; NULL without memory. */
lw_work *lwd_lane_work_of(lwd_lane *lane, lwd_held *held);
void lwd_lane_clear(lwd_lane *lane);

/* ---- reply.c: every reply of this room is made with these ---- */

/* A problem of the list with a sentence; pointer, expected and got may be NULL. */
void lwd_fail(lwd_reply *reply, const lwd_request *request, lwd_problem_id id, const char *pointer,
              const char *expected, const char *got, const char *format, ...)
    __attribute__((format(printf, 7, 8)));
void lwd_fail_memory(lwd_reply *reply, const lwd_request *request);
void lwd_fail_catalog(lwd_reply *reply, const lwd_request *request, const lwd_catalog_error *err);
void lwd_fail_store(lwd_reply *reply, const lwd_request *request, lwd_store_result result,
                    const lwd_catalog_error *err);
/* False, with a 406, if the client takes no JSON. */
bool lwd_takes_json(lwd_reply *reply, const lwd_request *request);
/* Starts a JSON reply with this status; close makes it a problem if it could not be written. */
void lwd_reply_open(lwd_reply *reply, lwd_json *json, int status);
void lwd_reply_close(lwd_reply *reply, const lwd_request *request, lwd_json *json);
/* A reply whose whole body is a text that exists already. */
void lwd_reply_text(lwd_reply *reply, const lwd_request *request, int status, const char *type,
                    const char *text, size_t len);

/* Sorts the query into value[i] by name[i] (NULL: not given). False, with a 400, if a member is
 * unknown or stands twice. */
bool lwd_query_members(lwd_reply *reply, const lwd_request *request, const char *const *name,
                       const char **value, size_t n);
/* A whole number from 1, digits only; 0 if the text is none. */
int64_t lwd_count_of(const char *text);
/* The mechanism's name in the path; false, with a 404, if it can not be one. */
bool lwd_path_name(lwd_reply *reply, const lwd_request *request, const char **name);
/* The revision's number in the path. */
bool lwd_path_revision(lwd_reply *reply, const lwd_request *request, size_t param,
                       int64_t *revision);

/* One page of a listing: limit and what the cursor says. */
typedef struct lwd_page {
    size_t limit;
    const char *cursor; /* "" = from the start */
} lwd_page;
bool lwd_page_read(lwd_reply *reply, const lwd_request *request, lwd_page *page);
/* Link: <path?limit=..&cursor=..>; rel="next", and the member "next". */
void lwd_page_next(lwd_reply *reply, const lwd_request *request, lwd_json *json,
                   const lwd_page *page, bool more, const char *cursor);

/* Adds ETag: "tag". */
void lwd_reply_etag(lwd_reply *reply, const char *tag);
/* Whether an If-Match or If-None-Match value names the tag, or is "*". `weak`: W/ tags count too
 * (If-None-Match only). */
bool lwd_tag_listed(const char *list, const char *tag, bool weak);
/* Answers 304 and returns true if the client has this already. */
bool lwd_not_modified(lwd_reply *reply, const lwd_request *request, const char *tag);

int64_t lwd_now_utc_ms(void);
void lwd_put_time(lwd_json *json, const char *key, int64_t utc_ms);

/* ---- report.c ---- */

/* What validation found, as the JSON text kept with a revision. */
bool lwd_report_write(lwd_buf *buf, const lwd_findings *findings, const lw_report *report,
                      const lwd_document *document, const char *digest);
/* "findings": notes, warnings and errors of decoding and of the core, in this order. */
void lwd_findings_write(lwd_json *json, const lwd_findings *findings, const lw_report *report);
/* Appends the core's findings of one severity to a decoder's list, with another severity. */
void lwd_findings_join(lwd_findings *findings, const lw_report *report, lw_severity severity,
                       lw_severity as);
/* A limb's kind in a word. */
const char *lwd_limb_word(lw_limb_kind kind);
const char *lwd_motion_word(lw_motion motion);

/* ---- handlers, by file ---- */

/* mechanisms.c */
void lwd_get_mechanisms(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_mechanism(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_state(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_revisions(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_revision(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_report(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_history(void *context, const lwd_request *request, lwd_reply *reply);
/* modes.c */
void lwd_get_modes(void *context, const lwd_request *request, lwd_reply *reply);
/* put.c */
void lwd_put_mechanism(void *context, const lwd_request *request, lwd_reply *reply);
/* publish.c */
void lwd_post_publish(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_withdraw(void *context, const lwd_request *request, lwd_reply *reply);
/* difference.c */
void lwd_get_difference(void *context, const lwd_request *request, lwd_reply *reply);
/* ask.c */
void lwd_post_inverse(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_forward(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_jacobian(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_margin(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_reach(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_margin(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_reach(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_post_free_travel(void *context, const lwd_request *request, lwd_reply *reply);
/* ask_path.c */
void lwd_post_path(void *context, const lwd_request *request, lwd_reply *reply);
/* service.c */
void lwd_get_healthz(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_readyz(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_metrics(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_about(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_openapi(void *context, const lwd_request *request, lwd_reply *reply);
void lwd_get_problem(void *context, const lwd_request *request, lwd_reply *reply);
bool lwd_about_write(lwd_buf *buf);

#endif
