/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What fuzz_question.c, fuzz_query_string.c and fuzz_csv.c share: the daemon's inside with one
 * small closed machine (a five-bar with a spare drive and a turning gripper), and what every reply
 * must be. */
#ifndef LWT_FUZZ_API_H
#define LWT_FUZZ_API_H

#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <leeway/leeway.h>

#include "api/api.h"
#include "log.h"

static const char machine[] =
    "{\"format\":\"leeway-mechanism/1\",\"name\":\"f\",\"units\":{\"length\":\"mm\",\"angle\":"
    "\"deg\"},\"frame\":\"bed\",\"bodies\":[\"bed\",\"c1\",\"c2\",\"l1\",\"l2\",\"g\"],\"joints\":["
    "{\"name\":\"a1\",\"type\":\"revolute\",\"between\":[\"bed\",\"c1\"],\"at\":[0,0,0],\"axis\":"
    "[0,0,1],\"range\":[-90,90]},{\"name\":\"a2\",\"type\":\"revolute\",\"between\":[\"bed\","
    "\"c2\"],\"at\":[200,0,0],\"axis\":[0,0,1]},{\"name\":\"e1\",\"type\":\"revolute\","
    "\"between\":[\"c1\",\"l1\"],\"at\":[-50,150,0],\"axis\":[0,0,1]},{\"name\":\"e2\",\"type\":"
    "\"revolute\",\"between\":[\"c2\",\"l2\"],\"at\":[250,150,0],\"axis\":[0,0,1]},{\"name\":"
    "\"t\",\"type\":\"revolute\",\"between\":[\"l1\",\"l2\"],\"at\":[100,280,0],\"axis\":[0,0,1]},"
    "{\"name\":\"grip\",\"type\":\"revolute\",\"between\":[\"l1\",\"g\"],\"at\":[100,280,0],"
    "\"axis\":[0,0,1]}],\"drives\":[{\"name\":\"m1\",\"moves\":\"a1\",\"reading\":{\"unit\":"
    "\"deg\"},\"range\":[-80,80],\"speed\":90,\"torque\":5,\"resolution\":0.01,\"backlash\":0.02},"
    "{\"name\":\"m2\",\"moves\":\"a2\",\"reading\":{\"unit\":\"deg\",\"per_unit\":-1},\"speed\":90,"
    "\"torque\":5,\"resolution\":0.01,\"backlash\":0.02},{\"name\":\"m3\",\"moves\":\"e1\","
    "\"speed\":90,\"torque\":5,\"resolution\":0.01},{\"name\":\"m4\",\"moves\":\"grip\","
    "\"speed\":90,\"torque\":1,\"resolution\":0.1}],\"tools\":[{\"name\":\"tip\",\"body\":\"l1\","
    "\"at\":[100,280,0]}],\"outputs\":[\"x\",\"y\",\"grip\"],\"needs\":{\"position_tolerance\":0.1,"
    "\"force\":10,\"speed\":100},\"modes\":{\"out\":{\"example\":{\"drives\":{\"m1\":0,\"m2\":0,"
    "\"m3\":0,\"m4\":0}}}}}";

static inline void must(bool holds, const char *what, const lwd_reply *reply)
{
    if (!holds) {
        (void)fprintf(stderr, "%s: %d %s\n", what, reply->status,
                      reply->body.len > 0 ? reply->body.data : "");
        abort();
    }
}

/* The app, made at the first call; kept for the process. */
static inline lwd_app *fuzz_app(lwd_reply *reply)
{
    static lwd_app *app;
    if (app == NULL) {
        char why[200];
        const lwd_app_options options = {.data_dir = ":memory:", .lanes = 1};
        lw_init();
        lwd_log_level_set(LWD_LOG_ERROR);
        lwd_buf_init(&reply->body, 0);
        app = lwd_app_start(&options, why, sizeof why);
        must(app != NULL, why, reply);
        const lwd_request put = {.method = LWD_PUT, .path = "", .param = {"f"}, .n_param = 1,
                                 .body = machine, .body_len = sizeof machine - 1,
                                 .token_name = "f", .request_id = "f"};
        lwd_put_mechanism(app, &put, reply);
        must(reply->status == 201, "the machine is refused", reply);
    }
    lwd_buf_reset(&reply->body);
    reply->n_header = 0;
    reply->status = -1;
    return app;
}

/* An answer or a refusal of the client's, never a fault of ours; JSON that a strict reader takes,
 * or short printable text. */
static inline void fuzz_check(const lwd_reply *reply, bool plain)
{
    must(reply->status == 200 || (reply->status >= 400 && reply->status < 500), "status", reply);
    must(!reply->body.failed && reply->body.len > 0, "body", reply);
    if (plain) {
        must(reply->body.len <= 255, "length", reply);
        for (size_t i = 0; i < reply->body.len; i++) {
            unsigned char c = (unsigned char)reply->body.data[i];
            must(c == '\n' || (c >= 0x20 && c < 0x7f), "text", reply);
        }
        return;
    }
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    lwd_scan_fault fault;
    must(lwd_json_scan(reply->body.data, reply->body.len, &limits, &fault), "not JSON", reply);
}

/* "a=1&b=2" cut into pairs in place; their number. */
static inline size_t fuzz_pairs(char *text, lwd_pair *pair)
{
    size_t n = 0;
    for (char *at = text; at != NULL && *at != '\0' && n < LWD_QUERY_MAX;) {
        char *next = strchr(at, '&');
        if (next != NULL) {
            *next++ = '\0';
        }
        char *value = strchr(at, '=');
        if (value != NULL) {
            *value++ = '\0';
        }
        pair[n++] = (lwd_pair){.name = at, .value = value != NULL ? value : ""};
        at = next;
    }
    return n;
}

#endif
