/* SPDX-License-Identifier: GPL-3.0-or-later */
/* GET /problems/{slug}: what a problem means and what to do about it. The lists of problems are
 * problem_codes.h here and http/problems.h; a test checks that every slug has a text. */
#include <string.h>

#include "../http/problems.h"
#include "api.h"

typedef struct help {
    const char *slug;
    const char *text;
} help;

static const help texts[] = {
    {"bad-framing", "Send one Content-Length, or chunked coding over HTTP/1.1, never both."},
    {"bad-url", "Use a plain path and decimal query members; %00 and broken escapes are refused."},
    {"url-too-long", "A URL may have 1024 bytes; ask the same question with POST."},
    {"bad-header", "A header name or value holds a character that none may hold."},
    {"expectation", "Only Expect: 100-continue is understood."},
    {"not-found", "See /openapi.json for the paths there are."},
    {"method", "The header Allow lists the methods this path takes."},
    {"not-acceptable", "Send Accept: application/json, or text/plain or text/csv where these "
                       "exist."},
    {"too-large", "Split the request; the limit stands in the detail."},
    {"media-type", "Send the body as application/json in UTF-8; a path may come as text/csv."},
    {"no-token", "Send Authorization: Bearer TOKEN; the operator hands tokens out."},
    {"bad-token", "The token is unknown or was withdrawn; ask the operator for a new one."},
    {"role", "The token may not do this: query asks, author stores drafts, admin publishes."},
    {"host", "Ask the service by the name or address it listens on."},
    {"busy", "Wait as long as Retry-After says, then ask again. Nothing was tried."},
    {"stopping", "The service is being stopped; ask again when it is back. Nothing was tried."},
    {"timeout", "The request came too slowly; send it in one piece."},
    {"memory", "Memory ran out before this was tried; ask again soon."},
    {"connections", "Too many connections are open; keep one and use it again."},
    {"token-in-url", "URLs end up in logs: send the token in the header Authorization."},
    {"malformed-json", "The body is not JSON; offset, line and column stand in the detail."},
    {"unknown-member", "Members that are not known are refused, so that none is ever ignored; "
                       "look for a slip of the pen."},
    {"missing-member", "Add the member that pointer names."},
    {"wrong-type", "The member takes another kind of value; see expected."},
    {"out-of-range", "The value is outside its bounds; see expected."},
    {"bad-query", "The query member takes another kind of value; see expected."},
    {"doubled-member", "Say it once: with two values nobody knows which one is meant."},
    {"bad-name", "Names are 1 to 32 of a-z, 0-9 and hyphen."},
    {"body-limit", "Too large, too deep or too many values; split the question."},
    {"bad-value", "The value can not be understood; see expected."},
    {"no-mechanism", "GET /v1/mechanisms lists the mechanisms there are."},
    {"no-revision", "GET /v1/mechanisms/{name}/revisions lists the revisions there are."},
    {"none-published", "Publish a revision, or name one in the question with \"revision\"."},
    {"other-revision", "The revision that would answer is not the one expected: check which model "
                       "the program was commissioned with."},
    {"state", "A withdrawn revision can not be published; put the document again instead."},
    {"warnings-not-accepted", "Read the findings; to publish all the same, send their codes as "
                              "{\"accept\": [\"...\"]}."},
    {"precondition-failed", "Somebody was faster: read the present state and decide anew."},
    {"precondition-required", "Send If-Match with the tag of what you have read."},
    {"no-job", "There is no job of this number; finished jobs are kept for a limited time."},
    {"unknown-name", "The mechanism has no body, joint, drive, tool or mode of this name."},
    {"no-sense", "Each member is well formed, but together they ask for nothing."},
    {"posture-undetermined", "Give more members: what was given does not determine a posture."},
    {"posture-not-closed", "The joints given do not fit together; check the values."},
    {"document-refused", "Nothing was stored. Mend what the findings name and put it again."},
    {"not-served-yet", "This edition does not answer this; leave the member out."},
    {"unusable-revision", "The revision was stored by another edition of the program; put the "
                          "document again to see what is wrong with it now."},
    {"name-differs", "The document's name and the name in the URL must be the same."},
    {"answer-form", "Send Accept: application/json, or text/plain or text/csv where these exist."},
    {"malformed-csv", "Commas between the fields, points in numbers, a header row, as many fields "
                      "in each row as in the header; row and column stand in the pointer."},
    {"internal", "A fault of the service; report it with the request id in \"instance\"."},
    {"not-enough-memory", "Memory ran out before this was tried; ask again soon."},
    {"overloaded", "Wait as long as Retry-After says, then ask again. Nothing was tried."},
    {"catalog", "The disk or the catalog's file has a fault; the log names it."},
    {"catalog-full", "The disk or the catalog is full; nothing was stored."},
};

typedef struct entry {
    const char *slug;
    const char *title;
    int code;
    int status;
} entry;

static const entry entries[] = {
#define LWD_ROW(id, code, status, slug, title) {slug, title, code, status},
    LWD_HTTP_PROBLEM_LIST(LWD_ROW) LWD_PROBLEM_LIST(LWD_ROW)
#undef LWD_ROW
};

static const char *text_of(const char *slug)
{
    for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
        if (strcmp(texts[i].slug, slug) == 0) {
            return texts[i].text;
        }
    }
    return NULL;
}

static void write(const entry *e, const lwd_request *request, lwd_reply *reply)
{
    lwd_json json;
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "slug", e->slug);
    lwd_json_put_int(&json, "code", e->code);
    lwd_json_put_int(&json, "status", e->status);
    lwd_json_put_string(&json, "title", e->title);
    lwd_json_put_string(&json, "what_to_do", text_of(e->slug));
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

void lwd_get_problem(void *context, const lwd_request *request, lwd_reply *reply)
{
    const char *slug = request->n_param > 0 ? request->param[0] : "";
    (void)context;
    if (!lwd_query_members(reply, request, NULL, NULL, 0) || !lwd_takes_json(reply, request)) {
        return;
    }
    for (size_t i = 0; i < sizeof entries / sizeof entries[0]; i++) {
        if (strcmp(entries[i].slug, slug) == 0) {
            write(&entries[i], request, reply);
            return;
        }
    }
    lwd_problem problem = {.status = 404,
                           .code = 1006,
                           .slug = "not-found",
                           .title = "There is nothing at this path",
                           .detail = "No problem has this name; /openapi.json lists all."};
    lwd_problem_reply(reply, request, &problem);
}
