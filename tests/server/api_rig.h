/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A daemon's inside without sockets, for the tests of server/api: an app over a catalog in memory,
 * requests made of plain text, replies parsed. Included by test_api_*.c only. */
#ifndef LWT_API_RIG_H
#define LWT_API_RIG_H

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>
#include <leeway/leeway.h>

#include "api/app.h"
#include "exchange.h"
#include "log.h"
#include "lwt.h"

typedef struct rig {
    lwd_app *app;
    lwd_reply reply;
    cJSON *json;       /* of the last reply, NULL if it was none */
    const char *accept;
    const char *content_type;
    const char *if_match;
    const char *if_none_match;
    bool may_defer;
    unsigned lane;
} rig;

static inline void rig_start(rig *r)
{
    char why[200];
    const lwd_app_options options = {.data_dir = ":memory:", .lanes = 3};
    memset(r, 0, sizeof *r);
    lw_init();
    lwd_log_level_set(LWD_LOG_ERROR);
    lwd_buf_init(&r->reply.body, 0);
    r->app = lwd_app_start(&options, why, sizeof why);
    if (r->app == NULL) {
        lwt_fail("the app does not start: %s", why);
    }
}

static inline void rig_stop(rig *r)
{
    cJSON_Delete(r->json);
    r->json = NULL;
    lwd_buf_clear(&r->reply.body);
    lwd_app_stop(r->app);
}

/* Matches a path against a pattern, cutting `path` into parameters. */
static inline bool rig_match(const char *pattern, char *path, lwd_request *request)
{
    request->n_param = 0;
    while (*pattern != '\0' && *path != '\0') {
        if (pattern[0] == '{') {
            size_t n = strcspn(path, "/");
            if (n == 0) {
                return false;
            }
            request->param[request->n_param++] = path;
            pattern += 2;
            path += n;
            if (*path == '/' && *pattern == '/') {
                *path = '\0';
                path++;
                pattern++;
            }
        } else if (*pattern++ != *path++) {
            return false;
        }
    }
    return *pattern == '\0' && *path == '\0';
}

/* "a=1&b=2" to pairs; values stand as decoded, so they must hold no & or =. */
static inline size_t rig_query(char *text, lwd_pair *pair, size_t cap)
{
    size_t n = 0;
    while (text != NULL && *text != '\0' && n < cap) {
        char *end = text + strcspn(text, "&");
        char *next = *end == '&' ? end + 1 : NULL;
        *end = '\0';
        char *value = strchr(text, '=');
        if (value != NULL) {
            *value++ = '\0';
        }
        pair[n++] = (lwd_pair){.name = text, .value = value != NULL ? value : ""};
        text = next;
    }
    return n;
}

/* Sends a request to the route that takes it; returns the status. */
static inline int rig_send(rig *r, lwd_method method, const char *target, const char *body)
{
    size_t n_routes = 0;
    const lwd_route *route = lwd_app_routes(&n_routes);
    char whole[2048];
    lwd_pair pair[LWD_QUERY_MAX];
    lwd_request request = {.method = method,
                           .body = body != NULL ? body : "",
                           .body_len = body != NULL ? strlen(body) : 0,
                           .accept = r->accept,
                           .content_type = r->content_type,
                           .if_match = r->if_match,
                           .if_none_match = r->if_none_match,
                           .role = LWD_ROLE_ADMIN,
                           .token_name = "local",
                           .request_id = "0123456789abcdef0123456789abcdef",
                           .may_defer = r->may_defer,
                           .lane = r->lane};
    cJSON_Delete(r->json);
    r->json = NULL;
    (void)snprintf(whole, sizeof whole, "%s", target);
    char *query = strchr(whole, '?');
    if (query != NULL) {
        *query++ = '\0';
    }
    request.n_query = rig_query(query, pair, LWD_QUERY_MAX);
    request.query = pair;
    for (size_t i = 0; i < n_routes; i++) {
        char path[2048];
        (void)snprintf(path, sizeof path, "%s", whole);
        if (route[i].method == method && rig_match(route[i].pattern, path, &request)) {
            request.path = whole;
            lwd_buf_reset(&r->reply.body);
            r->reply.n_header = 0;
            r->reply.status = -1;
            r->reply.log_code = 0;
            r->reply.content_type = NULL;
            route[i].handler(r->app, &request, &r->reply);
            r->json = r->reply.body.len > 0 ? cJSON_Parse(r->reply.body.data) : NULL;
            return r->reply.status;
        }
    }
    lwt_fail("no route takes %s", target);
    return 0;
}

static inline int rig_get(rig *r, const char *target)
{
    return rig_send(r, LWD_GET, target, NULL);
}

static inline int rig_post(rig *r, const char *target, const char *body)
{
    return rig_send(r, LWD_POST, target, body);
}

/* Sends and wants a status; shows the reply if it is another. */
#define rig_wants(r, status, call)                                                                 \
    do {                                                                                           \
        int got_ = (call);                                                                         \
        if (got_ != (status)) {                                                                    \
            lwt_fail("status %d, wanted %d: %s", got_, (status),                                   \
                     (r)->reply.body.len > 0 ? (r)->reply.body.data : "");                         \
        }                                                                                          \
    } while (0)

static inline const char *rig_header(const rig *r, const char *name)
{
    for (size_t i = 0; i < r->reply.n_header; i++) {
        if (strcmp(r->reply.header[i].name, name) == 0) {
            return r->reply.header[i].value;
        }
    }
    return NULL;
}

/* "a/b/0/c" in the last reply; a missing step fails the case. */
static inline const cJSON *rig_at(const rig *r, const char *way)
{
    const cJSON *node = r->json;
    char step[64];
    while (*way != '\0' && node != NULL) {
        size_t n = strcspn(way, "/");
        (void)snprintf(step, sizeof step, "%.*s", (int)n, way);
        node = cJSON_IsArray(node) ? cJSON_GetArrayItem(node, (int)strtol(step, NULL, 10))
                                   : cJSON_GetObjectItemCaseSensitive(node, step);
        way += n + (way[n] == '/' ? 1 : 0);
    }
    return node;
}

static inline double rig_number(const rig *r, const char *way)
{
    const cJSON *node = rig_at(r, way);
    if (!cJSON_IsNumber(node)) {
        lwt_fail("no number at %s in %s", way, r->reply.body.data);
    }
    return node->valuedouble;
}

static inline const char *rig_text(const rig *r, const char *way)
{
    const cJSON *node = rig_at(r, way);
    if (!cJSON_IsString(node)) {
        lwt_fail("no text at %s in %s", way, r->reply.body.data);
    }
    return node->valuestring;
}

/* A problem of this status and code at this pointer (NULL: any). */
static inline void rig_problem(const rig *r, int status, int code, const char *pointer)
{
    if (r->reply.status != status || (int)rig_number(r, "code") != code) {
        lwt_fail("wanted %d with code %d: %d %s", status, code, r->reply.status,
                 r->reply.body.data);
    }
    if (pointer != NULL) {
        assert_string_equal(rig_text(r, "pointer"), pointer);
    }
}

/* The text of a file of the checkout; free it. */
static inline char *rig_file(const char *name)
{
    char path[512];
    (void)snprintf(path, sizeof path, "%s/%s", LWT_SOURCE_DIR, name);
    FILE *file = fopen(path, "rb");
    if (file == NULL) {
        lwt_fail("%s does not open", path);
    }
    char *text = calloc(1, 1 << 20);
    if (text == NULL || fread(text, 1, (1 << 20) - 1, file) == 0) {
        lwt_fail("%s does not read", path);
    }
    (void)fclose(file);
    return text;
}

/* Puts and publishes a document of the demo line, accepting what it warns of. */
static inline void rig_demo(rig *r, const char *name)
{
    char target[160];
    char body[1024] = "{\"accept\":[";
    char file[80];
    size_t len = strlen(body);
    const cJSON *f;
    (void)snprintf(file, sizeof file, "deploy/demo/%s.json", name);
    char *text = rig_file(file);
    (void)snprintf(target, sizeof target, "/v1/mechanisms/%s", name);
    int status = rig_send(r, LWD_PUT, target, text);
    free(text);
    if (status != 201 && status != 200) {
        lwt_fail("%s is refused: %s", name, r->reply.body.data);
    }
    cJSON_ArrayForEach(f, rig_at(r, "findings"))
    {
        const char *severity = cJSON_GetStringValue(cJSON_GetObjectItem(f, "severity"));
        const char *code = cJSON_GetStringValue(cJSON_GetObjectItem(f, "finding"));
        if (strcmp(severity, "warning") == 0 && len + strlen(code) + 8 < sizeof body) {
            len += (size_t)snprintf(body + len, sizeof body - len, "%s\"%s\"",
                                    body[len - 1] == '[' ? "" : ",", code);
        }
    }
    (void)snprintf(body + len, sizeof body - len, "],\"reason\":\"test\"}");
    (void)snprintf(target, sizeof target, "/v1/mechanisms/%s/revisions/%d/publish", name,
                   (int)rig_number(r, "revision"));
    rig_wants(r, 200, rig_post(r, target, body));
}

#endif
