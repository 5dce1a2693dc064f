/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Problem documents (RFC 9457), or two lines of text for a PLC. Any thread. */
#include "problem.h"

#include <stdio.h>
#include <string.h>

#include "../codec/json_out.h"
#include "../negotiate.h"

enum { PLAIN_MAX = 255, FINDINGS_MAX = 16 };

/* ---- the list -------------------------------------------------------------------------------- */

lwd_problem lwd_problem_of(lwd_problem_id id)
{
    static const lwd_problem list[LWD_PROBLEM_COUNT] = {
#define LWD_PROBLEM_ROW(name, number, http, word, sentence)                                        \
    [name] = {.status = http, .code = number, .slug = word, .title = sentence},
        LWD_PROBLEM_LIST(LWD_PROBLEM_ROW)
#undef LWD_PROBLEM_ROW
    };
    return id < LWD_PROBLEM_COUNT ? list[id] : list[LWD_PROBLEM_INTERNAL];
}

lwd_problem_id lwd_problem_of_finding(const lwd_finding *finding)
{
    static const struct {
        const char *word;
        lwd_problem_id id;
    } table[] = {
        {"malformed-json", LWD_PROBLEM_JSON},        {"malformed-number", LWD_PROBLEM_JSON},
        {"malformed-text", LWD_PROBLEM_JSON},        {"doubled-member", LWD_PROBLEM_DOUBLED},
        {"too-large", LWD_PROBLEM_BODY_LIMIT},       {"no-memory", LWD_PROBLEM_MEMORY},
        {"unknown-member", LWD_PROBLEM_MEMBER_UNKNOWN},
        {"missing-member", LWD_PROBLEM_MEMBER_MISSING},
        {"wrong-type", LWD_PROBLEM_TYPE},            {"out-of-range", LWD_PROBLEM_RANGE},
        {"bad-name", LWD_PROBLEM_NAME},              {"unknown-name", LWD_PROBLEM_NO_NAME},
        {"fixed-body", LWD_PROBLEM_QUESTION},
        {"malformed-csv", LWD_PROBLEM_CSV},
        {"too-many", LWD_PROBLEM_RANGE},             {"too-few", LWD_PROBLEM_RANGE},
        {"too-long", LWD_PROBLEM_RANGE},             {"no-posture", LWD_PROBLEM_POSTURE},
    };
    for (size_t i = 0; i < sizeof table / sizeof table[0]; i++) {
        if (strcmp(finding->code, table[i].word) == 0) {
            return table[i].id;
        }
    }
    return LWD_PROBLEM_VALUE;
}

/* ---- which form ------------------------------------------------------------------------------ */

bool lwd_prefers_plain(const char *accept)
{
    if (accept == NULL) {
        return false;
    }
    int plain = lwd_accept_quality(accept, "text/plain");
    return plain > lwd_accept_quality(accept, "application/json") &&
           plain > lwd_accept_quality(accept, "application/problem+json");
}

bool lwd_prefers_csv(const char *accept)
{
    int table = accept != NULL ? lwd_accept_quality(accept, "text/csv") : 0;
    return table > 0 && table > lwd_accept_quality(accept, "application/json");
}

/* ---- writing --------------------------------------------------------------------------------- */

static void put_if(lwd_json *json, const char *key, const char *text)
{
    if (text != NULL) {
        lwd_json_put_string(json, key, text);
    }
}

static void put_findings(lwd_json *json, const lwd_findings *findings)
{
    size_t n = 0;
    lwd_json_put_array(json, "findings");
    for (size_t i = 0; i < findings->n && n < FINDINGS_MAX; i++) {
        const lwd_finding *f = &findings->item[i];
        if (f->severity == LW_ERROR) {
            lwd_json_object(json);
            lwd_json_put_string(json, "finding", f->code);
            lwd_json_put_string(json, "pointer", f->pointer);
            lwd_json_put_string(json, "text", f->text);
            lwd_json_put_string(json, "expected", f->expected);
            lwd_json_put_string(json, "got", f->got);
            lwd_json_end(json);
            n++;
        }
    }
    lwd_json_end(json);
    lwd_json_put_int(json, "errors", (int64_t)findings->n_error);
}

static void write_json(lwd_reply *reply, const lwd_request *request, const lwd_problem *problem,
                       const lwd_findings *findings)
{
    char text[160];
    lwd_json json;
    lwd_json_init(&json, &reply->body);
    lwd_json_object(&json);
    if (problem->slug != NULL) {
        (void)snprintf(text, sizeof text, "/problems/%s", problem->slug);
    } else {
        (void)snprintf(text, sizeof text, "about:blank");
    }
    lwd_json_put_string(&json, "type", text);
    lwd_json_put_string(&json, "title", problem->title);
    lwd_json_put_int(&json, "status", problem->status);
    put_if(&json, "detail", problem->detail);
    if (request->request_id != NULL && request->request_id[0] != '\0') {
        (void)snprintf(text, sizeof text, "urn:leeway:request:%s", request->request_id);
        lwd_json_put_string(&json, "instance", text);
    }
    if (problem->code != 0) {
        lwd_json_put_int(&json, "code", problem->code);
    }
    put_if(&json, "pointer", problem->pointer);
    put_if(&json, "expected", problem->expected);
    put_if(&json, "got", problem->got);
    if (findings != NULL) {
        put_findings(&json, findings);
    }
    lwd_json_end(&json);
}

/* One line a PLC can store: printable ASCII only. */
static void write_plain(lwd_reply *reply, const lwd_problem *problem)
{
    char text[PLAIN_MAX + 1];
    const char *what = problem->detail != NULL && problem->detail[0] != '\0' ? problem->detail
                                                                             : problem->title;
    bool placed = problem->pointer != NULL && problem->pointer[0] != '\0';
    /* One byte is kept for the line end, whatever had to be cut. */
    (void)snprintf(text, sizeof text - 1, "code=%d\nwhat=%s%s%s", problem->code, what,
                   placed ? " At " : "", placed ? problem->pointer : "");
    size_t lines = 0;
    size_t n = 0;
    for (const char *p = text; *p != '\0'; p++) {
        unsigned char c = (unsigned char)*p;
        if (c == '\n' && lines == 0) {
            lines++;
            text[n++] = '\n';
        } else if ((c & 0xc0) != 0x80) {
            text[n++] = c >= 0x20 && c < 0x7f ? (char)c : c < 0x20 ? ' ' : '?';
        }
    }
    text[n++] = '\n';
    (void)lwd_buf_put(&reply->body, text, n);
}

static void write_reply(lwd_reply *reply, const lwd_request *request, const lwd_problem *problem,
                        const lwd_findings *findings)
{
    lwd_buf_reset(&reply->body);
    reply->status = problem->status;
    reply->log_code = problem->code;
    if (lwd_prefers_plain(request->accept)) {
        reply->content_type = "text/plain; charset=us-ascii";
        write_plain(reply, problem);
    } else {
        reply->content_type = "application/problem+json";
        write_json(reply, request, problem, findings);
    }
}

void lwd_problem_reply(lwd_reply *reply, const lwd_request *request, const lwd_problem *problem)
{
    write_reply(reply, request, problem, NULL);
}

void lwd_problem_reply_refused(lwd_reply *reply, const lwd_request *request, lwd_problem_id id,
                               const lwd_findings *findings)
{
    const lwd_finding *first = lwd_findings_first_error(findings);
    lwd_problem problem = lwd_problem_of(findings->no_memory ? LWD_PROBLEM_MEMORY : id);
    if (first != NULL) {
        problem.detail = first->text;
        problem.pointer = first->pointer;
        problem.expected = first->expected[0] != '\0' ? first->expected : NULL;
        problem.got = first->got[0] != '\0' ? first->got : NULL;
    }
    write_reply(reply, request, &problem, findings->n_error > 0 ? findings : NULL);
}

void lwd_problem_reply_findings(lwd_reply *reply, const lwd_request *request,
                                const lwd_findings *findings)
{
    const lwd_finding *first = lwd_findings_first_error(findings);
    lwd_problem_id id = first != NULL ? lwd_problem_of_finding(first) : LWD_PROBLEM_INTERNAL;
    lwd_problem_reply_refused(reply, request, id, findings);
}
