/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The daemon with other routes: main.c and the whole HTTP room as they are, and behind them, in
 * place of the catalog and its handlers, a few that say what they were asked. For the checks of
 * tests/http, which look at what HTTP itself does. */
#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "api/app.h"
#include "metrics.h"

struct lwd_app {
    unsigned lanes;
};

static void put(lwd_buf *out, const char *format, ...) __attribute__((format(printf, 2, 3)));

static void put(lwd_buf *out, const char *format, ...)
{
    char text[256];
    va_list args;

    va_start(args, format);
    (void)vsnprintf(text, sizeof text, format, args);
    va_end(args);
    lwd_buf_puts(out, text);
}

/* ASCII only, which is all the checks send. */
static void put_text(lwd_buf *out, const char *name, const char *text)
{
    put(out, "%s\"%s\":", out->data[out->len - 1] == '{' ? "" : ",", name);
    if (text == NULL) {
        lwd_buf_puts(out, "null");
        return;
    }
    lwd_buf_puts(out, "\"");
    for (; *text != '\0'; text++) {
        if (*text == '"' || *text == '\\') {
            lwd_buf_puts(out, "\\");
        }
        lwd_buf_put(out, text, 1);
    }
    lwd_buf_puts(out, "\"");
}

static const char *query(const lwd_request *request, const char *name)
{
    for (size_t i = 0; i < request->n_query; i++) {
        if (strcmp(request->query[i].name, name) == 0) {
            return request->query[i].value;
        }
    }
    return NULL;
}

/* What the handler was given, all of it. */
static void describe(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_buf *out = &reply->body;
    (void)context;

    lwd_buf_puts(out, "{");
    put_text(out, "path", request->path);
    put_text(out, "accept", request->accept);
    put_text(out, "content_type", request->content_type);
    put_text(out, "if_match", request->if_match);
    put_text(out, "if_none_match", request->if_none_match);
    put_text(out, "token", request->token_name);
    put_text(out, "id", request->request_id);
    put(out, ",\"method\":%d,\"role\":%d,\"lane\":%u,\"body_len\":%zu,\"body_end\":%d,\"param\":[",
        (int)request->method, (int)request->role, request->lane, request->body_len,
        (int)request->body[request->body_len]);
    for (size_t i = 0; i < request->n_param; i++) {
        put(out, "%s\"%s\"", i == 0 ? "" : ",", request->param[i]);
    }
    lwd_buf_puts(out, "],\"query\":[");
    for (size_t i = 0; i < request->n_query; i++) {
        lwd_buf_puts(out, i == 0 ? "{" : ",{");
        put_text(out, "name", request->query[i].name);
        put_text(out, "value", request->query[i].value);
        lwd_buf_puts(out, "}");
    }
    lwd_buf_puts(out, "]}");
    reply->status = 200;
    reply->content_type = "application/json";
}

static void echo(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    lwd_buf_put(&reply->body, request->body, request->body_len);
    reply->status = 200;
    reply->content_type = "application/json";
    reply->log_code = 1;
}

static void slow_echo(void *context, const lwd_request *request, lwd_reply *reply)
{
    const char *ms = query(request, "ms");
    long n = ms != NULL ? strtol(ms, NULL, 10) : 50;
    const struct timespec rest = {.tv_sec = n / 1000, .tv_nsec = n % 1000 * 1000000};

    nanosleep(&rest, NULL);
    if (request->body_len != 0) {
        echo(context, request, reply);
    } else {
        describe(context, request, reply);
    }
}

static void big(void *context, const lwd_request *request, lwd_reply *reply)
{
    static const char line[] = "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcde\n";
    const char *bytes = query(request, "bytes");
    long left = bytes != NULL ? strtol(bytes, NULL, 10) : 1024;

    (void)context;
    while (left > 0) {
        size_t n = left < 64 ? (size_t)left : 64;
        lwd_buf_put(&reply->body, line, n);
        left -= (long)n;
    }
    reply->status = 200;
    reply->content_type = "text/plain; charset=utf-8";
}

/* As many bytes as the path says, ready made: what an answer costs that needs no thought. */
static void still(void *context, const lwd_request *request, lwd_reply *reply)
{
    static char bytes[16384];
    long n = strtol(request->param[0], NULL, 10);

    (void)context;
    n = n < 1 ? 1 : n > (long)sizeof bytes ? (long)sizeof bytes : n;
    if (bytes[0] == '\0') {
        memset(bytes, '.', sizeof bytes); /* on the event thread, which is one */
    }
    lwd_buf_put(&reply->body, bytes, (size_t)n);
    reply->status = 200;
    reply->content_type = "text/plain; charset=utf-8";
}

static void about(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    lwd_buf_puts(&reply->body, "{\"name\":\"echo\",\"safety_function\":false}");
    reply->status = 200;
    reply->content_type = "application/json";
}

static void ready(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    lwd_buf_puts(&reply->body, lwd_ready_get() ? "{\"ready\":true}" : "{\"ready\":false}");
    reply->status = lwd_ready_get() ? 200 : 503;
    reply->content_type = "application/json";
}

static void metrics(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    lwd_metrics_write(&reply->body);
    reply->status = 200;
    reply->content_type = LWD_METRICS_TYPE;
}

/* A problem, and a header that no answer may carry: the reply must not be split. */
static void faulty(void *context, const lwd_request *request, lwd_reply *reply)
{
    const lwd_problem problem = {
        .status = 422, .code = 1999, .slug = "test", .title = "For the check", .pointer = "/pose"};

    (void)context;
    lwd_problem_reply(reply, request, &problem);
    if (lwd_reply_header(reply, "X-Split", "a\r\nX-Injected: b")) {
        abort();
    }
    (void)lwd_reply_header(reply, "ETag", "\"abc\"");
}

/* An answer that could not be written for want of memory. */
static void out_of_memory(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    lwd_buf_puts(&reply->body, "{\"half\":");
    reply->body.failed = true;
    reply->status = 200;
    reply->content_type = "application/json";
}

enum { KB = 1024, MB = 1024 * 1024 };

static const lwd_route routes[] = {
    {LWD_GET, "/about", about, LWD_ROLE_NONE, false, 0, "about", false},
    {LWD_GET, "/readyz", ready, LWD_ROLE_NONE, false, 0, "readyz", false},
    {LWD_GET, "/metrics", metrics, LWD_ROLE_NONE, false, 0, "metrics", false},
    {LWD_GET, "/big", big, LWD_ROLE_QUERY, false, 0, "big", false},
    {LWD_GET, "/still/{}", still, LWD_ROLE_QUERY, false, 0, "still", false},
    {LWD_POST, "/echo", echo, LWD_ROLE_QUERY, false, 64 * KB, "echo", false},
    {LWD_POST, "/slow", slow_echo, LWD_ROLE_QUERY, true, 64 * KB, "slow", false},
    {LWD_GET, "/slow", slow_echo, LWD_ROLE_QUERY, true, 0, "slow", false},
    {LWD_GET, "/faulty", faulty, LWD_ROLE_QUERY, false, 0, "faulty", false},
    {LWD_GET, "/memory", out_of_memory, LWD_ROLE_QUERY, false, 0, "memory", false},
    {LWD_GET, "/v1/things", describe, LWD_ROLE_QUERY, false, 0, "list", false},
    {LWD_GET, "/v1/things/{}", describe, LWD_ROLE_QUERY, false, 0, "thing", false},
    {LWD_PUT, "/v1/things/{}", describe, LWD_ROLE_AUTHOR, false, 4 * MB, "put", false},
    {LWD_POST, "/v1/things/{}/ask", describe, LWD_ROLE_QUERY, false, 64 * KB, "ask", false},
    {LWD_GET, "/v1/things/{}/ask", describe, LWD_ROLE_QUERY, false, 0, "ask", false},
    {LWD_POST, "/v1/things/{}/parts/{}/publish", describe, LWD_ROLE_ADMIN, false, KB, "publish",
     false},
};

lwd_app *lwd_app_start(const lwd_app_options *options, char *why, size_t why_size)
{
    lwd_app *app = malloc(sizeof *app);

    if (app == NULL) {
        (void)snprintf(why, why_size, "out of memory");
        return NULL;
    }
    app->lanes = options->lanes;
    return app;
}

void lwd_app_load(lwd_app *app, bool (*stop)(void))
{
    (void)app;
    (void)stop();
}

bool lwd_app_backup(const char *data_dir, const char *file, char *why, size_t why_size)
{
    (void)data_dir;
    (void)file;
    (void)snprintf(why, why_size, "this daemon has no catalog");
    return false;
}

const lwd_route *lwd_app_routes(size_t *n)
{
    *n = sizeof routes / sizeof routes[0];
    return routes;
}

void lwd_app_hurry(lwd_app *app, unsigned ms)
{
    (void)app;
    (void)ms;
}

void lwd_app_stop(lwd_app *app)
{
    free(app);
}
