/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Findings of a load and refusals of the service, in words, each with what to do next. Declared in
 * answer.h. */
#include <string.h>

#include "answer.h"
#include "table.h"

static void put_safe(lwc_text *out, const char *text)
{
    lwc_text_safe(out, text, strlen(text));
}

const cJSON *lwc_findings(const cJSON *answer)
{
    static const char *const NAMES[] = {"findings", "errors"};
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        const cJSON *array = lwc_json_get(answer, NAMES[i]);
        if (cJSON_IsArray(array)) {
            return array;
        }
        array = lwc_json_get(lwc_json_get(answer, "report"), NAMES[i]);
        if (cJSON_IsArray(array)) {
            return array;
        }
    }
    return NULL;
}

/* The sentence of a finding or a problem, under whichever of these names it stands. */
static const char *sentence(const cJSON *item)
{
    static const char *const NAMES[] = {"message", "sentence", "text", "detail", "title"};
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        const char *text = lwc_json_string(item, NAMES[i]);
        if (text != NULL && text[0] != '\0') {
            return text;
        }
    }
    return NULL;
}

static void show_place(lwc_text *out, const cJSON *item, const char *indent)
{
    static const char *const NAMES[][2] = {
        {"pointer", "at"}, {"expected", "expected"}, {"got", "got"}, {"hint", "next"},
        {"next", "next"}};
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        const cJSON *member = lwc_json_get(item, NAMES[i][0]);
        bool empty = cJSON_IsString(member) && member->valuestring[0] == '\0';
        if (member == NULL || cJSON_IsNull(member) || (empty && i > 0)) {
            continue;
        }
        lwc_text_printf(out, "%s%-10s", indent, NAMES[i][1]);
        if (empty) {
            lwc_text_puts(out, "the document as a whole");
        } else {
            lwc_value_line(out, member);
        }
        lwc_text_putc(out, '\n');
    }
}

/* 0 for errors, 1 for warnings, 2 for the rest. */
static int severity_rank(const cJSON *finding)
{
    const char *severity = lwc_json_string(finding, "severity");
    return severity == NULL || strcmp(severity, "error") == 0 ? 0
           : strcmp(severity, "warning") == 0                 ? 1
                                                              : 2;
}

static void show_finding(lwc_text *out, const cJSON *finding)
{
    const char *severity = lwc_json_string(finding, "severity");
    const cJSON *code = lwc_json_get(finding, "finding");
    code = code != NULL ? code : lwc_json_get(finding, "code");
    const char *text = sentence(finding);
    lwc_text_puts(out, "  ");
    if (severity != NULL) {
        put_safe(out, severity);
        lwc_text_putc(out, ' ');
    }
    if (code != NULL) {
        lwc_value_line(out, code);
        lwc_text_puts(out, ": ");
    }
    if (text != NULL) {
        put_safe(out, text);
    } else {
        lwc_value_line(out, finding);
    }
    lwc_text_putc(out, '\n');
    show_place(out, finding, "    ");
}

size_t lwc_show_findings(lwc_text *out, const cJSON *findings)
{
    size_t count = 0;
    for (int rank = 0; rank < 3; rank++) {
        const cJSON *finding = NULL;
        cJSON_ArrayForEach(finding, findings)
        {
            if (severity_rank(finding) == rank) {
                show_finding(out, finding);
                count++;
            }
        }
    }
    return count;
}

void lwc_finding_codes(lwc_text *out, const cJSON *findings, const char *severity)
{
    const cJSON *finding = NULL;
    cJSON_ArrayForEach(finding, findings)
    {
        const char *own = lwc_json_string(finding, "severity");
        const char *code = lwc_json_string(finding, "finding");
        code = code != NULL ? code : lwc_json_string(finding, "code");
        bool fits = severity == NULL || (own != NULL && strcmp(own, severity) == 0);
        if (fits && code != NULL && strstr(lwc_text_string(out), code) == NULL) {
            lwc_text_puts(out, out->len > 0 ? "," : "");
            put_safe(out, code);
        }
    }
}

/* What to do next where the status alone says it. */
static void show_next(lwc_text *out, const lwc_http *http, const char *asked, long status,
                      long retry_after_s)
{
    const char *next = NULL;
    switch (status) {
    case 401:
        next = lwc_http_has_token(http)
                   ? "the token is not known there; ask whoever keeps the tokens for a new one"
                   : "put your token alone into a file only you can read, and give "
                     "--token-file FILE or set LEEWAY_TOKEN_FILE";
        break;
    case 403:
        next = strcmp(asked, "load") == 0
                   ? "loading wants a token of role author or admin; give it with --token-file FILE"
               : strcmp(asked, "publish") == 0 || strcmp(asked, "withdraw") == 0
                   ? "this wants a token of role admin; give it with --token-file FILE"
                   : "the token's role does not allow this; give another with --token-file FILE";
        break;
    case 404:
        next = "see what is there: leeway list, leeway history NAME";
        break;
    case 409:
        next = "see which revision is published: leeway history NAME; "
               "publish one: leeway publish NAME REV; or name one: --revision N";
        break;
    case 412:
        next = "somebody changed it meanwhile; look again (leeway history NAME), then repeat";
        break;
    case 413:
        next = "send less at once: a smaller document, or a shorter batch";
        break;
    case 429:
    case 503:
        lwc_text_printf(out, "  %-10sthe service is busy; ask again in %ld s\n", "next",
                        retry_after_s > 0 ? retry_after_s : 5);
        return;
    default:
        next = status >= 500 ? "this is a fault of the service; its log tells more under the "
                               "request id"
                             : NULL;
        break;
    }
    if (next != NULL) {
        lwc_text_printf(out, "  %-10s%s\n", "next", next);
    }
}

/* A body that is no JSON: name what it is and show how it begins. */
static void show_foreign(lwc_text *out, const lwc_http *http, const lwc_reply *reply)
{
    enum { SHOWN = 80 };
    size_t len = reply->body.len < SHOWN ? reply->body.len : SHOWN;
    lwc_text_printf(out, "leeway: %s answered with status %ld and %s, which is no JSON\n",
                    lwc_http_server(http), reply->status,
                    reply->type[0] != '\0' ? reply->type : "no content type");
    if (reply->location[0] != '\0') {
        lwc_text_printf(out, "  %-10s%s; name that address with --server if it is yours\n",
                        "leads to", reply->location);
    } else if (len > 0) {
        lwc_text_printf(out, "  %-10s", "begins");
        lwc_text_safe(out, reply->body.data, len);
        lwc_text_puts(out, reply->body.len > SHOWN ? " ...\n" : "\n");
    }
    if (reply->status != 401 && reply->status != 403 && reply->status != 503) {
        lwc_text_printf(out, "  %-10sis this the address of a Leeway service? See --server\n",
                        "next");
    }
}

/* How the warnings that stand in the way of publishing are accepted. */
static void show_accept(lwc_text *out, const cJSON *findings)
{
    lwc_text codes = {0};
    lwc_finding_codes(&codes, findings, NULL);
    lwc_text_printf(out, "  %-10sif they may stand, publish with --accept %s\n", "next",
                    lwc_text_string(&codes));
    lwc_text_clear(&codes);
}

/* Whether one of the findings says this sentence already. */
static bool repeats(const cJSON *findings, const char *detail)
{
    const cJSON *finding = NULL;
    cJSON_ArrayForEach(finding, findings)
    {
        const char *text = sentence(finding);
        if (text != NULL && strcmp(text, detail) == 0) {
            return true;
        }
    }
    return false;
}

void lwc_show_problem(lwc_text *out, const cJSON *problem)
{
    const char *title = lwc_json_string(problem, "title");
    const char *detail = lwc_json_string(problem, "detail");
    const cJSON *findings = lwc_findings(problem);
    double status = 0.0;
    double code = 0.0;
    put_safe(out, title != NULL ? title : "the service refused");
    if (lwc_json_number(problem, "status", &status)) {
        lwc_text_printf(out, " (status %.0f", status);
        if (lwc_json_number(problem, "code", &code)) {
            lwc_text_printf(out, ", code %.0f", code);
        }
        lwc_text_putc(out, ')');
    }
    lwc_text_putc(out, '\n');
    if (detail != NULL && (title == NULL || strcmp(detail, title) != 0) &&
        !repeats(findings, detail)) {
        lwc_text_puts(out, "  ");
        put_safe(out, detail);
        lwc_text_putc(out, '\n');
    }
    /* A single finding says the same as the problem itself, with more: then it speaks alone. */
    if (cJSON_IsArray(findings) && cJSON_IsObject(findings->child)) {
        (void)lwc_show_findings(out, findings);
    } else {
        show_place(out, problem, "  ");
    }
}

void lwc_show_refusal(lwc_text *out, const lwc_http *http, const char *asked,
                      const lwc_reply *reply, const cJSON *problem)
{
    if (problem == NULL) {
        show_foreign(out, http, reply);
        show_next(out, http, asked, reply->status, reply->retry_after_s);
        return;
    }
    const cJSON *findings = lwc_findings(problem);
    lwc_text_puts(out, "leeway: ");
    lwc_show_problem(out, problem);
    if (lwc_json_get(problem, "status") == NULL) {
        lwc_text_printf(out, "  %-10s%ld\n", "status", reply->status);
    }
    if (strcmp(asked, "publish") == 0 && reply->status == 409 && cJSON_IsArray(findings)) {
        show_accept(out, findings);
    } else {
        show_next(out, http, asked, reply->status, reply->retry_after_s);
    }
}
