/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One request from its first line to its log line. The HTTP library calls lwd_call_uri with the
 * raw target, lwd_call_access once for the head, then for each piece of the body, then once more
 * (and again after a resumption), and lwd_call_completed at the end, all on the event thread. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "../log.h"
#include "../metrics.h"
#include "internal.h"

enum {
    DISCARD_MAX = 1 << 20, /* of a refused body; beyond it the connection is closed instead */
    LATE_BODY_MS = 15,     /* a body this late was held back by Nagle's algorithm and our own
                            * delayed acknowledgement (40 ms); the clock has a grain of 4 ms */
    CHUNKED_FIRST = 4096,
    LARGE_BODY = 2048, /* a single question is shorter: this is a batch, milliseconds of work, and
                        * goes to a worker even where the route is a fast one */
    LIST_HEADER_MAX = 4096
};

void *lwd_call_uri(void *cls, const char *uri, struct MHD_Connection *mhd)
{
    lwd_http *http = cls;
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(mhd, MHD_CONNECTION_INFO_SOCKET_CONTEXT);
    lwd_conn *conn = info != NULL ? info->socket_context : NULL;
    lwd_call *call;

    if (conn == NULL || !lwd_conn_phase(conn, LWD_PHASE_HEAD, http->options.head_ms)) {
        return NULL;
    }
    call = atomic_exchange(&http->spare, NULL);
    if (call == NULL) {
        call = malloc(sizeof *call);
    }
    if (call == NULL) {
        lwd_metrics_refused(LWD_REFUSED_MEMORY);
        return NULL;
    }
    /* All but the large members at the end, which are filled before they are read. */
    memset(call, 0, offsetof(lwd_call, raw));
    atomic_init(&call->refs, 1);
    call->http = http;
    call->conn = conn;
    call->mhd = mhd;
    call->raw_at = uri;
    call->raw_len = strnlen(uri, LWD_URL_MAX + 1);
    memcpy(call->raw, uri, call->raw_len <= LWD_URL_MAX ? call->raw_len : 0);
    return call;
}

static void call_release(lwd_call *call)
{
    if (atomic_fetch_sub(&call->refs, 1) != 1) {
        return;
    }
    lwd_buf_clear(&call->reply.body);
    for (size_t i = 0; i < sizeof call->joined / sizeof call->joined[0]; i++) {
        free(call->joined[i]);
    }
    free(call->owned);
    free(call->body);
    if (call->http != NULL) {
        call = atomic_exchange(&call->http->spare, call);
    }
    free(call);
}

/* A list header may come several times; the values then form one list. */
static void list_add(lwd_call *call, size_t which, const char **slot, const char *value)
{
    size_t old_len;
    size_t len = strlen(value);
    char *text;

    if (*slot == NULL) {
        *slot = value;
        return;
    }
    old_len = strlen(*slot);
    if (old_len + len + 3 > LIST_HEADER_MAX || (text = malloc(old_len + len + 3)) == NULL) {
        call->head.bad_value = true;
        return;
    }
    memcpy(text, *slot, old_len);
    memcpy(text + old_len, ", ", 2);
    memcpy(text + old_len + 2, value, len + 1);
    free(call->joined[which]);
    call->joined[which] = text;
    *slot = text;
}

static enum MHD_Result take_header(void *cls, enum MHD_ValueKind kind, const char *name,
                                   size_t name_len, const char *value, size_t value_len)
{
    lwd_call *call = cls;
    lwd_head *head = &call->head;

    (void)kind;
    if (value == NULL) {
        value = "";
        value_len = 0;
    }
    lwd_head_add(head, name, name_len, value, value_len);
    if (head->bad_name || head->bad_value) {
        return MHD_NO;
    }
    if (name_len == 6 && strcasecmp(name, "accept") == 0) {
        list_add(call, 0, &head->accept, value);
    } else if (name_len == 8 && strcasecmp(name, "if-match") == 0) {
        list_add(call, 1, &head->if_match, value);
    } else if (name_len == 13 && strcasecmp(name, "if-none-match") == 0) {
        list_add(call, 2, &head->if_none_match, value);
    }
    return MHD_YES;
}

static bool check_token(lwd_call *call)
{
    lwd_http *http = call->http;
    lwd_role needed = call->hit.route->role;
    lwd_auth_result result;

    if (http->auth == NULL) {
        call->request.role = LWD_ROLE_ADMIN;
        memcpy(call->token_name, "local", sizeof "local");
        return true;
    }
    result = lwd_auth_check(http->auth, call->head.authorization, &call->request.role,
                            call->token_name);
    if (result == LWD_AUTH_OK) {
        if (call->request.role >= needed) {
            return true;
        }
        return lwd_refuse(&call->refusal, LWD_P_ROLE, LWD_REFUSED_ROLE,
                          "This needs the role %s; the token \"%s\" has the role %s.",
                          lwd_role_text(needed), call->token_name,
                          lwd_role_text(call->request.role));
    }
    call->request.role = LWD_ROLE_NONE;
    memcpy(call->token_name, "-", sizeof "-");
    if (needed == LWD_ROLE_NONE) {
        return true; /* open to all, so a bad token does no harm either */
    }
    if (result == LWD_AUTH_ABSENT) {
        return lwd_refuse(&call->refusal, LWD_P_NO_TOKEN, LWD_REFUSED_TOKEN,
                          "Send a token in the header: Authorization: Bearer TOKEN.");
    }
    return lwd_refuse(&call->refusal, LWD_P_BAD_TOKEN, LWD_REFUSED_TOKEN, "%s",
                      result == LWD_AUTH_MALFORMED
                          ? "The header must read: Authorization: Bearer TOKEN."
                          : "No such token; ask for one, or check that it was copied whole.");
}

static bool check_route(lwd_call *call, const char *method)
{
    lwd_method parsed = LWD_GET;
    bool known = lwd_method_parse(&parsed, method);

    call->request.method = parsed;
    switch (lwd_router_find(&call->hit, call->http->router, known, parsed, call->uri.segment,
                            call->uri.n_segment)) {
    case LWD_MATCH_FOUND:
        return true;
    case LWD_MATCH_NO_METHOD:
        (void)lwd_refuse(&call->refusal, LWD_P_METHOD, LWD_REFUSED_METHOD,
                         "This path takes %s.", call->hit.allow);
        return false;
    default:
        return lwd_refuse(&call->refusal, LWD_P_NO_PATH, LWD_REFUSED_ROUTE,
                          "No resource has this path; /openapi.json lists all.");
    }
}

/* The library hands a target over that ends at a raw NUL. In 0.9.75 the version stands right
 * behind the target, so a gap between them shows one; later releases refuse it by themselves. */
static bool target_whole(const lwd_call *call, const char *version)
{
#if MHD_VERSION < 0x00097600
    return call->raw_len > LWD_URL_MAX || version == NULL ||
           (uintptr_t)version == (uintptr_t)call->raw_at + call->raw_len + 1;
#else
    (void)call;
    (void)version;
    return true;
#endif
}

static bool check_head(lwd_call *call, const char *method, const char *version)
{
    lwd_uri_fault fault;

    if (!lwd_guard_framing(&call->refusal, &call->head)) {
        return false;
    }
    if (!target_whole(call, version)) {
        (void)lwd_refuse(&call->refusal, LWD_P_URL, LWD_REFUSED_URL, "The URL holds a NUL.");
        call->refusal.at_once = true;
        return false;
    }
    fault = lwd_uri_parse(&call->uri, call->raw, call->raw_len);
    call->request.path = call->uri.path;
    if (!lwd_guard_uri(&call->refusal, &call->uri, fault)) {
        return false;
    }
    if (call->http->auth == NULL && !call->conn->is_unix &&
        !lwd_guard_host(&call->refusal, &call->head)) {
        return false;
    }
    return check_route(call, method) && check_token(call) &&
           lwd_guard_accept(&call->refusal, &call->head) &&
           lwd_guard_body(&call->refusal, &call->head, call->hit.route);
}

/* Fills what handlers (and problem replies) see of the request. */
static void fill_request(lwd_call *call)
{
    lwd_request *request = &call->request;

    for (size_t i = 0; i < call->hit.n_param; i++) {
        request->param[i] = call->hit.param[i];
    }
    request->n_param = call->hit.n_param;
    request->query = call->uri.query;
    request->n_query = call->uri.n_query;
    request->body = "";
    request->accept = call->head.accept;
    request->content_type = call->head.content_type;
    request->if_match = call->head.if_match;
    request->if_none_match = call->head.if_none_match;
    request->token_name = call->token_name;
    request->request_id = call->id;
}

static bool body_room(lwd_call *call, size_t more)
{
    size_t body_max = call->hit.route->body_max;
    size_t want = call->body_len + more;
    size_t cap = call->body_cap != 0 ? call->body_cap : CHUNKED_FIRST;
    char *body;

    if (want > body_max) {
        (void)lwd_refuse(&call->refusal, LWD_P_SIZE, LWD_REFUSED_SIZE,
                         "The body may have %zu bytes here.", body_max);
        return false;
    }
    if (want <= call->body_cap) {
        return true;
    }
    while (cap < want) {
        cap *= 2;
    }
    cap = cap < body_max ? cap : body_max;
    body = realloc(call->body, cap + 1);
    if (body == NULL) {
        return lwd_refuse(&call->refusal, LWD_P_MEMORY, LWD_REFUSED_MEMORY,
                          "No memory for the body; try again soon.");
    }
    call->body = body;
    call->body_cap = cap;
    return true;
}

/* The refused request's body is read and thrown away where that is cheap, so that the client,
 * which may not read before it has sent all, gets the answer; else the answer goes out at once. */
static enum MHD_Result refuse_at_head(lwd_call *call)
{
    const lwd_head *head = &call->head;

    call->refused = true;
    lwd_metrics_refused(call->refusal.reason);
    lwd_trace_new(call->id);
    if (head->traceparent != NULL) {
        (void)lwd_trace_parse(call->id, head->traceparent);
    }
    if (!call->refusal.at_once && head->n_expect == 0 && head->body_len <= DISCARD_MAX) {
        call->discard = true;
        return lwd_conn_phase(call->conn, LWD_PHASE_BODY, call->http->options.body_ms) ? MHD_YES
                                                                                       : MHD_NO;
    }
    call->refusal.at_once = call->refusal.at_once || head->body_len > 0 || head->chunked;
    lwd_reply_refusal(call);
    return lwd_reply_send(call);
}

static enum MHD_Result begin(lwd_call *call, const char *method, const char *version)
{
    lwd_http *http = call->http;
    bool ok;

    call->begun = true;
    call->begin_us = lwd_now_us();
    atomic_fetch_add(&http->active, 1);
    atomic_store_explicit(&http->last_begin_ms, lwd_now_ms(), memory_order_relaxed);
    lwd_metrics_in_flight(1);
    call->head.http_1_0 = strcmp(version, "HTTP/1.0") == 0;
    memcpy(call->token_name, "-", sizeof "-");
    call->request.path = "";
    lwd_buf_init(&call->reply.body, 0);
    (void)MHD_get_connection_values_n(call->mhd, MHD_HEADER_KIND, take_header, call);
    ok = check_head(call, method, version);
    fill_request(call);
    if (ok && call->head.body_len > 0) {
        /* One allocation for the whole body; never more than the route allows. */
        ok = body_room(call, (size_t)call->head.body_len);
    }
    if (!ok) {
        return refuse_at_head(call);
    }
    lwd_trace_new(call->id);
    if (call->head.traceparent != NULL) {
        (void)lwd_trace_parse(call->id, call->head.traceparent);
    }
    if (call->head.body_len == 0 && !call->head.chunked) {
        return lwd_conn_busy(call->conn) ? MHD_YES : MHD_NO;
    }
    if (call->conn->late_body) {
        lwd_conn_quick_ack(call->conn);
    }
    call->head_ms = call->begin_us / 1000;
    return lwd_conn_phase(call->conn, LWD_PHASE_BODY, http->options.body_ms) ? MHD_YES : MHD_NO;
}

/* A body that grows past all bounds while it is thrown away: answer over the library's head. */
static enum MHD_Result cut_off(lwd_call *call)
{
    if (lwd_conn_busy(call->conn)) {
        lwd_reply_raw(call->conn->fd, call->refusal.problem, call->refusal.detail, 0);
        call->answered = true;
        call->status = 413;
    }
    return MHD_NO;
}

static enum MHD_Result take_body(lwd_call *call, const char *data, size_t *size)
{
    size_t n = *size;

    *size = 0;
    if (call->head_ms != 0 && call->body_len == 0 && !call->discard) {
        if (lwd_now_us() / 1000 - call->head_ms >= LATE_BODY_MS) {
            call->conn->late_body = true;
        }
        call->head_ms = 0;
    }
    if (!call->discard && !body_room(call, n)) {
        call->refused = true;
        call->discard = true;
        lwd_metrics_refused(call->refusal.reason);
    }
    if (call->discard) {
        call->discarded += n;
        return call->discarded <= DISCARD_MAX ? MHD_YES : cut_off(call);
    }
    memcpy(call->body + call->body_len, data, n);
    call->body_len += n;
    return MHD_YES;
}

static void job_run(lwd_job *job, unsigned lane)
{
    lwd_call *call = (lwd_call *)(void *)job;
    call->request.lane = lane;
    call->hit.route->handler(call->http->context, &call->request, &call->reply);
}

static void job_finish(lwd_job *job, bool abandoned)
{
    lwd_call *call = (lwd_call *)(void *)job;
    atomic_store(&call->done, abandoned ? 2 : 1);
    MHD_resume_connection(call->mhd);
}

static void job_release(lwd_job *job)
{
    call_release((lwd_call *)(void *)job);
}

static void job_accepted(lwd_job *job)
{
    lwd_call *call = (lwd_call *)(void *)job;
    atomic_fetch_add(&call->refs, 1);
    call->dispatched = true;
    MHD_suspend_connection(call->mhd);
}

/* Copies what the request borrows from the library: a worker may outlive the connection. */
static bool own_headers(lwd_call *call)
{
    lwd_request *request = &call->request;
    const char **slot[] = {&request->accept, &request->content_type, &request->if_match,
                           &request->if_none_match};
    size_t total = 0;
    char *at;

    for (size_t i = 0; i < sizeof slot / sizeof slot[0]; i++) {
        total += *slot[i] != NULL ? strlen(*slot[i]) + 1 : 0;
    }
    if (total == 0) {
        return true;
    }
    at = call->owned = malloc(total);
    if (at == NULL) {
        return false;
    }
    for (size_t i = 0; i < sizeof slot / sizeof slot[0]; i++) {
        if (*slot[i] != NULL) {
            size_t len = strlen(*slot[i]) + 1;
            memcpy(at, *slot[i], len);
            *slot[i] = at;
            at += len;
        }
    }
    return true;
}

static enum MHD_Result send_refusal(lwd_call *call)
{
    call->refused = true;
    lwd_reply_refusal(call);
    return lwd_reply_send(call);
}

static enum MHD_Result dispatch(lwd_call *call)
{
    call->job.run = job_run;
    call->job.finish = job_finish;
    call->job.release = job_release;
    if (!own_headers(call)) {
        (void)lwd_refuse(&call->refusal, LWD_P_MEMORY, LWD_REFUSED_MEMORY,
                         "No memory for the question; try again soon.");
    } else if (lwd_pool_push(call->http->pool, &call->job, job_accepted)) {
        return MHD_YES;
    } else {
        (void)lwd_refuse(&call->refusal, LWD_P_BUSY, LWD_REFUSED_QUEUE,
                         "The queue of long questions is full; this one was not tried.");
    }
    lwd_metrics_refused(call->refusal.reason);
    return send_refusal(call);
}

/* The worker still writes into call->reply, so another reply is made beside it. */
static enum MHD_Result send_stopping(lwd_call *call)
{
    lwd_call *stand_in = calloc(1, sizeof *stand_in);
    enum MHD_Result result;

    if (stand_in == NULL) {
        return MHD_NO;
    }
    stand_in->http = call->http;
    stand_in->conn = call->conn;
    stand_in->mhd = call->mhd;
    stand_in->head = call->head;
    memcpy(stand_in->id, call->id, sizeof stand_in->id);
    stand_in->request.path = "";
    stand_in->request.body = "";
    stand_in->request.accept = call->head.accept;
    stand_in->request.token_name = call->token_name;
    stand_in->request.request_id = stand_in->id;
    lwd_buf_init(&stand_in->reply.body, 0);
    atomic_init(&stand_in->refs, 1);
    lwd_metrics_refused(LWD_REFUSED_STOPPING);
    (void)lwd_refuse(&stand_in->refusal, LWD_P_STOPPING, LWD_REFUSED_STOPPING,
                     "The service stopped before this question was answered.");
    result = send_refusal(stand_in);
    call->answered = true;
    call->status = stand_in->status;
    call->log_code = stand_in->log_code;
    call->bytes_out = stand_in->bytes_out;
    call_release(stand_in);
    return result;
}

static enum MHD_Result finish(lwd_call *call)
{
    if (call->dispatched) {
        switch (atomic_load(&call->done)) {
        case 0:
            return MHD_YES; /* not yet; the library calls again after the resumption */
        case 1:
            return lwd_reply_send(call);
        default:
            return send_stopping(call);
        }
    }
    if (!lwd_conn_busy(call->conn)) {
        return MHD_NO;
    }
    if (call->refused) {
        return send_refusal(call);
    }
    if (call->body != NULL) {
        call->body[call->body_len] = '\0';
        call->request.body = call->body;
        call->request.body_len = call->body_len;
    }
    if (call->request.method == LWD_HEAD) {
        call->request.method = LWD_GET;
    }
    if (call->hit.route->slow || call->body_len > LARGE_BODY) {
        return dispatch(call);
    }
    call->request.may_defer = true;
    job_run(&call->job, 0);
    call->request.may_defer = false;
    if (call->reply.status == LWD_DEFER) { /* slow this once: a mechanism has to be loaded */
        return dispatch(call);
    }
    return lwd_reply_send(call);
}

enum MHD_Result lwd_call_access(void *cls, struct MHD_Connection *mhd, const char *url,
                                const char *method, const char *version, const char *upload_data,
                                size_t *upload_size, void **req_cls)
{
    lwd_call *call = *req_cls;

    (void)cls;
    (void)mhd;
    (void)url; /* decoded by the library, and cut at %00: ours is decoded from the raw target */
    if (call == NULL) {
        return MHD_NO;
    }
    if (!call->begun) {
        call->head.method = method;
        return begin(call, method, version);
    }
    if (*upload_size != 0) {
        return take_body(call, upload_data, upload_size);
    }
    return finish(call);
}

static void log_call(const lwd_call *call, enum MHD_RequestTerminationCode why, int64_t us)
{
    lwd_log_level level = call->status >= 500 ? LWD_LOG_WARN : LWD_LOG_INFO;
    const lwd_route *route = call->hit.route;
    lwd_method method;
    lwd_log_line line;

    if (!lwd_log_wanted(level)) {
        return;
    }
    lwd_log_begin(&line, level, "request");
    lwd_log_str(&line, "id", call->id);
    lwd_log_str(&line, "method",
                lwd_method_parse(&method, call->head.method) ? lwd_method_text(method) : "other");
    lwd_log_str(&line, "route", route != NULL ? route->name : "none");
    lwd_log_int(&line, "status", call->status);
    lwd_log_int(&line, "code", call->log_code);
    lwd_log_int(&line, "bytes", (int64_t)call->bytes_out);
    lwd_log_int(&line, "us", us);
    lwd_log_str(&line, "token", call->token_name);
    if (why != MHD_REQUEST_TERMINATED_COMPLETED_OK) {
        lwd_log_str(&line, "end", call->answered ? "answer_not_taken" : "request_not_complete");
    }
    lwd_log_end(&line);
}

void lwd_call_completed(void *cls, struct MHD_Connection *mhd, void **req_cls,
                        enum MHD_RequestTerminationCode why)
{
    lwd_http *http = cls;
    lwd_call *call = *req_cls;

    (void)mhd;
    *req_cls = NULL;
    if (call == NULL) {
        return;
    }
    lwd_conn_idle(call->conn);
    if (call->begun) {
        int64_t us = lwd_now_us() - call->begin_us;
        if (call->answered) {
            lwd_metrics_request(call->hit.route, call->status, us);
        }
        log_call(call, why, us);
        lwd_metrics_in_flight(-1);
        atomic_fetch_sub(&http->active, 1);
    } else {
        /* The library answered by itself: the head was malformed or too large. */
        lwd_metrics_refused(LWD_REFUSED_MALFORMED);
    }
    call_release(call);
}
