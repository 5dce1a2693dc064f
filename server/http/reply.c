/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sends replies: through the HTTP library where it asks for an answer, or straight to a socket
 * where there is no request to answer (too many connections, a head that never ended). */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../log.h"
#include "../metrics.h"
#include "internal.h"

enum { SEND_PATIENCE_MS = 60000 };

/* Sent when there is no memory for anything better. */
static const char memory_body[] =
    "{\"type\":\"/problems/memory\",\"title\":\"Out of memory\",\"status\":503,\"code\":1018}";

static enum MHD_Result queue(lwd_call *call, struct MHD_Response *response, unsigned status)
{
    enum MHD_Result result;

    (void)MHD_add_response_header(response, "X-Request-Id", call->id);
    if (atomic_load_explicit(&call->http->draining, memory_order_relaxed) ||
        (call->refused && call->refusal.at_once)) {
        (void)MHD_add_response_header(response, MHD_HTTP_HEADER_CONNECTION, "close");
    }
    call->status = (int)status;
    call->answered = true;
    result = MHD_queue_response(call->mhd, status, response);
    MHD_destroy_response(response);
    return result;
}

static enum MHD_Result send_memory(lwd_call *call)
{
    struct MHD_Response *response = MHD_create_response_from_buffer(
        sizeof memory_body - 1, (void *)(uintptr_t)memory_body, MHD_RESPMEM_PERSISTENT);

    lwd_metrics_refused(LWD_REFUSED_MEMORY);
    call->log_code = 1018;
    if (response == NULL) {
        return MHD_NO;
    }
    (void)MHD_add_response_header(response, MHD_HTTP_HEADER_CONTENT_TYPE,
                                  "application/problem+json");
    (void)MHD_add_response_header(response, MHD_HTTP_HEADER_RETRY_AFTER, "1");
    (void)MHD_add_response_header(response, MHD_HTTP_HEADER_CACHE_CONTROL, "no-store");
    call->bytes_out = sizeof memory_body - 1;
    return queue(call, response, 503);
}

enum MHD_Result lwd_reply_send(lwd_call *call)
{
    lwd_reply *reply = &call->reply;
    struct MHD_Response *response;
    bool stored = false;

    if (!lwd_conn_phase(call->conn, LWD_PHASE_SEND, SEND_PATIENCE_MS)) {
        return MHD_NO;
    }
    if (reply->body.failed || reply->status < 200 || reply->status > 599) {
        lwd_buf_clear(&reply->body);
        return send_memory(call);
    }
    response = MHD_create_response_from_buffer(reply->body.len, reply->body.data,
                                               MHD_RESPMEM_MUST_FREE);
    if (response == NULL) {
        lwd_buf_clear(&reply->body);
        return send_memory(call);
    }
    call->bytes_out = reply->body.len;
    call->log_code = reply->log_code;
    lwd_buf_init(&reply->body, 0); /* the response owns the text now */
    if (reply->content_type != NULL) {
        (void)MHD_add_response_header(response, MHD_HTTP_HEADER_CONTENT_TYPE, reply->content_type);
    }
    for (size_t i = 0; i < reply->n_header; i++) {
        stored = stored || strcmp(reply->header[i].name, "Cache-Control") == 0;
        if (MHD_add_response_header(response, reply->header[i].name, reply->header[i].value) !=
            MHD_YES) {
            lwd_log(LWD_LOG_ERROR, "header", "the header %s can not be sent",
                    reply->header[i].name);
        }
    }
    if (!stored) {
        (void)MHD_add_response_header(response, MHD_HTTP_HEADER_CACHE_CONTROL, "no-store");
    }
    return queue(call, response, (unsigned)reply->status);
}

/* The headers that RFC 9110 asks for with some refusals. */
static void refusal_headers(lwd_call *call)
{
    char value[128];
    lwd_reply *reply = &call->reply;

    switch (call->refusal.problem) {
    case LWD_P_METHOD:
        (void)lwd_reply_header(reply, "Allow", call->hit.allow);
        break;
    case LWD_P_NO_TOKEN:
        (void)lwd_reply_header(reply, "WWW-Authenticate", "Bearer realm=\"leeway\"");
        break;
    case LWD_P_BAD_TOKEN:
        (void)lwd_reply_header(reply, "WWW-Authenticate",
                               "Bearer realm=\"leeway\", error=\"invalid_token\"");
        break;
    case LWD_P_ROLE:
        (void)snprintf(value, sizeof value,
                       "Bearer realm=\"leeway\", error=\"insufficient_scope\", scope=\"%s\"",
                       lwd_role_text(call->hit.route->role));
        (void)lwd_reply_header(reply, "WWW-Authenticate", value);
        break;
    case LWD_P_BUSY:
    case LWD_P_STOPPING:
    case LWD_P_MEMORY:
        (void)lwd_reply_header(reply, "Retry-After", "1");
        break;
    default:
        break;
    }
}

void lwd_reply_refusal(lwd_call *call)
{
    const lwd_refusal *refusal = &call->refusal;
    lwd_problem problem;

    lwd_http_problem_fill(&problem, refusal->problem);
    problem.detail = refusal->detail;
    problem.expected = refusal->expected[0] != '\0' ? refusal->expected : NULL;
    problem.got = refusal->got[0] != '\0' ? refusal->got : NULL;
    lwd_problem_reply(&call->reply, &call->request, &problem);
    refusal_headers(call);
}

void lwd_reply_raw(int fd, lwd_http_problem problem, const char *detail, int retry_after_s)
{
    lwd_problem fixed;
    char body[384];
    char text[768];
    char retry[40] = "";
    int body_len;
    int len;

    lwd_http_problem_fill(&fixed, problem);
    body_len = snprintf(body, sizeof body,
                        "{\"type\":\"/problems/%s\",\"title\":\"%s\",\"status\":%d,\"code\":%d,"
                        "\"detail\":\"%s\"}",
                        fixed.slug, fixed.title, fixed.status, fixed.code, detail);
    if (retry_after_s > 0) {
        (void)snprintf(retry, sizeof retry, "Retry-After: %d\r\n", retry_after_s);
    }
    len = snprintf(text, sizeof text,
                   "HTTP/1.1 %d %s\r\nContent-Type: application/problem+json\r\n"
                   "Content-Length: %d\r\n%sCache-Control: no-store\r\nConnection: close\r\n\r\n%s",
                   fixed.status, MHD_get_reason_phrase_for((unsigned)fixed.status), body_len, retry,
                   body);
    if (len > 0 && (size_t)len < sizeof text) {
        (void)!send(fd, text, (size_t)len, MSG_DONTWAIT | MSG_NOSIGNAL);
    }
}
