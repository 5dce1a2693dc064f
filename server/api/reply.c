/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Making replies: problems with a sentence, JSON bodies, pages of listings, entity tags. Any
 * thread, no state. */
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "../negotiate.h"
#include "../log.h"
#include "api.h"

void lwd_fail(lwd_reply *reply, const lwd_request *request, lwd_problem_id id, const char *pointer,
              const char *expected, const char *got, const char *format, ...)
{
    char detail[320];
    lwd_problem problem = lwd_problem_of(id);
    va_list args;
    va_start(args, format);
    (void)vsnprintf(detail, sizeof detail, format, args);
    va_end(args);
    problem.detail = detail;
    problem.pointer = pointer;
    problem.expected = expected;
    problem.got = got;
    reply->n_header = 0;
    lwd_problem_reply(reply, request, &problem);
}

void lwd_fail_memory(lwd_reply *reply, const lwd_request *request)
{
    lwd_fail(reply, request, LWD_PROBLEM_MEMORY, NULL, NULL, NULL,
             "The service ran out of memory before this was tried; ask again.");
    (void)lwd_reply_header(reply, "Retry-After", "1");
}

void lwd_fail_catalog(lwd_reply *reply, const lwd_request *request, const lwd_catalog_error *err)
{
    lwd_problem_id id = LWD_PROBLEM_CATALOG;
    switch (err->result) {
    case LWD_CATALOG_NOT_FOUND:
        id = request->n_param > 1 ? LWD_PROBLEM_NO_REVISION : LWD_PROBLEM_NO_MECHANISM;
        break;
    case LWD_CATALOG_NONE_PUBLISHED:
        id = LWD_PROBLEM_NONE_PUBLISHED;
        break;
    case LWD_CATALOG_CONFLICT:
        id = LWD_PROBLEM_PRECONDITION;
        break;
    case LWD_CATALOG_NOT_ALLOWED:
        id = LWD_PROBLEM_STATE;
        break;
    case LWD_CATALOG_ARGUMENT:
        id = LWD_PROBLEM_RANGE;
        break;
    case LWD_CATALOG_LIMIT:
    case LWD_CATALOG_FULL:
        id = LWD_PROBLEM_CATALOG_FULL;
        break;
    case LWD_CATALOG_BUSY:
        id = LWD_PROBLEM_OVERLOADED;
        break;
    case LWD_CATALOG_MEMORY:
        id = LWD_PROBLEM_MEMORY;
        break;
    case LWD_CATALOG_INTERNAL:
    case LWD_CATALOG_RESULT_COUNT:
        id = LWD_PROBLEM_INTERNAL;
        break;
    default:
        break;
    }
    /* Sentences that may name a path of the machine stay in the log. */
    bool for_log = id == LWD_PROBLEM_CATALOG || id == LWD_PROBLEM_INTERNAL
                   || err->result == LWD_CATALOG_FULL || id == LWD_PROBLEM_MEMORY;
    if (for_log) {
        lwd_log(LWD_LOG_ERROR, "catalog", "%s", err->why);
    }
    bool sentence = !for_log && err->why[0] != '\0';
    lwd_fail(reply, request, id, NULL, NULL, NULL, "%s",
             sentence ? err->why : lwd_catalog_result_text(err->result));
    if (reply->status == 503) {
        (void)lwd_reply_header(reply, "Retry-After", "1");
    }
}

void lwd_fail_store(lwd_reply *reply, const lwd_request *request, lwd_store_result result,
                    const lwd_catalog_error *err)
{
    const char *name = request->n_param > 0 ? request->param[0] : "";
    switch (result) {
    case LWD_STORE_NO_MECHANISM:
        lwd_fail(reply, request, LWD_PROBLEM_NO_MECHANISM, NULL, NULL, NULL,
                 "There is no mechanism \"%.32s\"; GET /v1/mechanisms lists those there are.",
                 name);
        return;
    case LWD_STORE_NO_REVISION:
        lwd_fail(reply, request, LWD_PROBLEM_NO_REVISION, NULL, NULL, NULL,
                 "The mechanism \"%.32s\" has no such revision; GET "
                 "/v1/mechanisms/%.32s/revisions lists those there are.", name, name);
        return;
    case LWD_STORE_NONE_PUBLISHED:
        lwd_fail(reply, request, LWD_PROBLEM_NONE_PUBLISHED, NULL, NULL, NULL,
                 "No revision of \"%.32s\" is published: publish one, or name one with "
                 "\"revision\".", name);
        return;
    case LWD_STORE_UNUSABLE:
        lwd_fail(reply, request, LWD_PROBLEM_UNUSABLE, NULL, NULL, NULL,
                 "The stored revision of \"%.32s\" does not load in this program; put the document "
                 "again to see why.", name);
        return;
    case LWD_STORE_CATALOG:
        lwd_fail_catalog(reply, request, err);
        return;
    case LWD_STORE_OK:
    case LWD_STORE_NOT_LOADED:
    case LWD_STORE_MEMORY:
        break;
    }
    lwd_fail_memory(reply, request);
}

/* ---- bodies ---------------------------------------------------------------------------------- */

bool lwd_takes_json(lwd_reply *reply, const lwd_request *request)
{
    if (request->accept == NULL || lwd_accept_quality(request->accept, "application/json") > 0) {
        return true;
    }
    lwd_fail(reply, request, LWD_PROBLEM_ACCEPT, NULL, "application/json", request->accept,
             "This path answers with JSON only; send Accept: application/json.");
    return false;
}

void lwd_reply_open(lwd_reply *reply, lwd_json *json, int status)
{
    reply->status = status;
    reply->content_type = "application/json";
    lwd_buf_reset(&reply->body);
    lwd_json_init(json, &reply->body);
}

void lwd_reply_close(lwd_reply *reply, const lwd_request *request, lwd_json *json)
{
    if (lwd_json_done(json)) {
        return;
    }
    bool memory = reply->body.failed;
    lwd_buf_clear(&reply->body);
    lwd_buf_init(&reply->body, 0);
    reply->n_header = 0;
    if (memory) {
        lwd_fail_memory(reply, request);
        return;
    }
    lwd_log(LWD_LOG_ERROR, "answer_not_written", "path=%s: a number was not finite", request->path);
    lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
             "The answer could not be written; please report the request with its id.");
}

void lwd_reply_text(lwd_reply *reply, const lwd_request *request, int status, const char *type,
                    const char *text, size_t len)
{
    lwd_buf_reset(&reply->body);
    reply->status = status;
    reply->content_type = type;
    if (!lwd_buf_put(&reply->body, text, len)) {
        lwd_buf_clear(&reply->body);
        lwd_buf_init(&reply->body, 0);
        lwd_fail_memory(reply, request);
    }
}

/* ---- paths and queries ----------------------------------------------------------------------- */

bool lwd_query_members(lwd_reply *reply, const lwd_request *request, const char *const *name,
                       const char **value, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        value[i] = NULL;
    }
    for (size_t k = 0; k < request->n_query; k++) {
        const lwd_pair *pair = &request->query[k];
        size_t i = 0;
        while (i < n && strcmp(pair->name, name[i]) != 0) {
            i++;
        }
        if (i == n) {
            char known[80] = "none";
            size_t len = 0;
            for (size_t j = 0; j < n && len < sizeof known; j++) {
                len += (size_t)snprintf(known + len, sizeof known - len, "%s%s",
                                        j > 0 ? ", " : "", name[j]);
            }
            lwd_fail(reply, request, LWD_PROBLEM_MEMBER_UNKNOWN, NULL, known, pair->name,
                     "This path takes no query member \"%.60s\".", pair->name);
            return false;
        }
        if (value[i] != NULL) {
            lwd_fail(reply, request, LWD_PROBLEM_DOUBLED, NULL, NULL, NULL,
                     "The query member \"%.60s\" stands twice.", pair->name);
            return false;
        }
        value[i] = pair->value;
    }
    return true;
}

int64_t lwd_count_of(const char *text)
{
    size_t n = strspn(text, "0123456789");
    if (n == 0 || n > 9 || text[n] != '\0' || text[0] == '0') {
        return 0;
    }
    return strtol(text, NULL, 10);
}

bool lwd_path_name(lwd_reply *reply, const lwd_request *request, const char **name)
{
    const char *text = request->n_param > 0 ? request->param[0] : "";
    size_t n = strspn(text, "abcdefghijklmnopqrstuvwxyz0123456789-");
    if (n == 0 || n > LWD_CATALOG_NAME_MAX || text[n] != '\0') {
        lwd_fail(reply, request, LWD_PROBLEM_NO_MECHANISM, NULL,
                 "1 to 32 of a-z, 0-9 and hyphen", NULL,
                 "\"%.60s\" can not be the name of a mechanism.", text);
        return false;
    }
    *name = text;
    return true;
}

bool lwd_path_revision(lwd_reply *reply, const lwd_request *request, size_t param,
                       int64_t *revision)
{
    const char *text = param < request->n_param ? request->param[param] : "";
    *revision = lwd_count_of(text);
    if (*revision == 0) {
        lwd_fail(reply, request, LWD_PROBLEM_NO_REVISION, NULL, "a whole number from 1", NULL,
                 "\"%.40s\" can not be the number of a revision.", text);
        return false;
    }
    return true;
}

bool lwd_page_read(lwd_reply *reply, const lwd_request *request, lwd_page *page)
{
    static const char *const name[] = {"limit", "cursor"};
    const char *value[2];
    if (!lwd_query_members(reply, request, name, value, 2)) {
        return false;
    }
    page->limit = LWD_PAGE_DEFAULT;
    page->cursor = value[1] != NULL ? value[1] : "";
    if (value[0] != NULL) {
        int64_t limit = lwd_count_of(value[0]);
        if (limit < 1 || limit > LWD_PAGE_MAX) {
            lwd_fail(reply, request, LWD_PROBLEM_QUERY, NULL, "1 to 200", value[0],
                     "limit takes a whole number from 1 to %d.", LWD_PAGE_MAX);
            return false;
        }
        page->limit = (size_t)limit;
    }
    if (strspn(page->cursor, "abcdefghijklmnopqrstuvwxyz0123456789-") != strlen(page->cursor)) {
        lwd_fail(reply, request, LWD_PROBLEM_QUERY, NULL, "the cursor of the page before", NULL,
                 "This is no cursor; follow the link to the next page instead of making one.");
        return false;
    }
    return true;
}

void lwd_page_next(lwd_reply *reply, const lwd_request *request, lwd_json *json,
                   const lwd_page *page, bool more, const char *cursor)
{
    char link[128];
    if (!more) {
        lwd_json_put_null(json, "next");
        return;
    }
    lwd_json_put_string(json, "next", cursor);
    int n = snprintf(link, sizeof link, "<%s?limit=%zu&cursor=%s>; rel=\"next\"", request->path,
                     page->limit, cursor);
    if (n > 0 && (size_t)n < sizeof link) {
        (void)lwd_reply_header(reply, "Link", link);
    }
}

/* ---- entity tags ----------------------------------------------------------------------------- */

void lwd_reply_etag(lwd_reply *reply, const char *tag)
{
    char value[LWD_DIGEST_SIZE + 8];
    (void)snprintf(value, sizeof value, "\"%s\"", tag);
    (void)lwd_reply_header(reply, "ETag", value);
}

bool lwd_tag_listed(const char *list, const char *tag, bool weak)
{
    size_t len = strlen(tag);
    const char *p = list + strspn(list, " \t,");
    while (*p != '\0') {
        bool is_weak = p[0] == 'W' && p[1] == '/';
        p += is_weak ? 2 : 0;
        if (*p == '*') {
            return true;
        }
        if (*p != '"') {
            return false; /* not a list of tags: it names nothing */
        }
        const char *end = strchr(p + 1, '"');
        if (end == NULL) {
            return false;
        }
        if ((size_t)(end - p - 1) == len && memcmp(p + 1, tag, len) == 0 && (weak || !is_weak)) {
            return true;
        }
        p = end + 1;
        p += strspn(p, " \t,");
    }
    return false;
}

bool lwd_not_modified(lwd_reply *reply, const lwd_request *request, const char *tag)
{
    if (request->if_none_match == NULL || !lwd_tag_listed(request->if_none_match, tag, true)) {
        return false;
    }
    lwd_buf_reset(&reply->body);
    reply->status = 304;
    reply->content_type = NULL;
    lwd_reply_etag(reply, tag);
    return true;
}

/* ---- time ------------------------------------------------------------------------------------ */

int64_t lwd_now_utc_ms(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_REALTIME, &now);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

void lwd_put_time(lwd_json *json, const char *key, int64_t utc_ms)
{
    char text[48];
    struct tm tm;
    time_t seconds = (time_t)(utc_ms / 1000);
    if (gmtime_r(&seconds, &tm) == NULL) {
        lwd_json_put_null(json, key);
        return;
    }
    size_t n = strftime(text, sizeof text - 8, "%Y-%m-%dT%H:%M:%S", &tm);
    (void)snprintf(text + n, sizeof text - n, ".%03dZ", (int)(utc_ms % 1000));
    lwd_json_put_string(json, key, text);
}
