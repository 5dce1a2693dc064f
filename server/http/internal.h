/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of this room share: the service, its connections, one request under way.
 *
 * Who touches what. The acceptor thread makes connections and reaps them; the event thread marks
 * what a connection does; the stopping thread looks. So the list has a lock and what a connection
 * does is one atomic word. A request belongs to the event thread, but for the time between
 * suspension and resumption, when it belongs to a worker; a second reference keeps it alive where
 * the event thread had to give up on the worker. */
#ifndef LWD_HTTP_INTERNAL_H
#define LWD_HTTP_INTERNAL_H

#include <microhttpd.h>
#include <netinet/in.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>
#include <sys/socket.h>

#include "guard.h"
#include "http.h"
#include "pool.h"
#include "router.h"
#include "trace.h"
#include "uri.h"

/* What a connection does, in lwd_conn.doing: IDLE, BUSY, REAPED, or one of the phases with the
 * time (monotonic milliseconds) at which patience ends: time << 2 | phase. */
enum { LWD_DOING_IDLE = 0, LWD_DOING_BUSY = 1, LWD_DOING_REAPED = 2 };
enum { LWD_PHASE_HEAD = 1, LWD_PHASE_BODY = 2, LWD_PHASE_SEND = 3 };

typedef struct lwd_conn {
    struct lwd_conn *next;
    struct lwd_conn *prev;
    int fd;
    bool is_unix;
    struct sockaddr_storage address; /* of the client */
    _Atomic int64_t doing;
    _Atomic unsigned served; /* requests completed */
    bool late_body;          /* event thread: this client sends head and body apart */
    /* acceptor thread only: what it saw while the connection was idle */
    unsigned seen_served;
    bool seen;
    uint64_t seen_bytes;
    int64_t idle_since_ms;
    int64_t head_since_ms;
    bool read_shut;
} lwd_conn;

struct lwd_http {
    lwd_http_options options;
    lwd_listeners *listeners;
    lwd_router *router;
    void *context;
    lwd_auth *auth;
    lwd_pool *pool;
    struct MHD_Daemon *daemon;

    pthread_t acceptor;
    int wake_fd;
    _Atomic bool stop_accepting;
    _Atomic bool accepting_stopped;
    _Atomic bool shut_idle; /* ask the acceptor to end reading on idle connections */
    _Atomic bool end;

    pthread_mutex_t lock; /* of the list */
    lwd_conn *conns;
    unsigned n_conns;

    _Atomic(struct lwd_call *) spare; /* of the last request, for the next one */

    _Atomic bool draining;
    _Atomic int active; /* requests begun and not completed */
    _Atomic int64_t last_begin_ms;

    /* rate limit for lines of the HTTP library; event and acceptor thread */
    _Atomic int64_t log_window_ms;
    _Atomic int log_in_window;
};

typedef struct lwd_call {
    lwd_job job;
    _Atomic int refs;
    lwd_http *http;
    lwd_conn *conn;
    struct MHD_Connection *mhd;

    bool begun;
    bool refused;
    bool discard;     /* the body is read and thrown away */
    bool answered;    /* a response is queued */
    bool dispatched;  /* given to the pool */
    _Atomic int done; /* 1: the worker is through, 2: abandoned */
    int status;
    int log_code;
    size_t bytes_out;
    int64_t begin_us;
    int64_t head_ms; /* when the head was complete, for late bodies */

    lwd_head head;
    lwd_hit hit;
    lwd_refusal refusal;
    lwd_request request;
    lwd_reply reply;
    char *owned;           /* copies of borrowed header values, for a worker */
    char *joined[3];       /* list headers that came more than once */
    char *body;
    size_t body_len;
    size_t body_cap;
    uint64_t discarded;
    char id[LWD_ID_SIZE];
    char token_name[LWD_TOKEN_NAME_SIZE];
    const char *raw_at; /* where the library keeps the request target; compared, never read */
    size_t raw_len;     /* over LWD_URL_MAX: longer than that */
    char raw[LWD_URL_MAX + 1];
    lwd_uri uri;
} lwd_call;

int64_t lwd_now_ms(void); /* monotonic, coarse (4 ms) */
int64_t lwd_now_us(void); /* monotonic */

/* conn.c */
lwd_conn *lwd_conn_new(lwd_http *http, int fd, const struct sockaddr *address, socklen_t len);
void lwd_conn_free(lwd_http *http, lwd_conn *conn);
unsigned lwd_conn_count(lwd_http *http);
unsigned lwd_conn_count_address(lwd_http *http, const struct sockaddr *address);
void lwd_conn_notify(void *cls, struct MHD_Connection *mhd, void **socket_context,
                     enum MHD_ConnectionNotificationCode code);
/* The event thread's marks. False: the acceptor has reaped the connection. */
bool lwd_conn_phase(lwd_conn *conn, int phase, int64_t patience_ms);
bool lwd_conn_busy(lwd_conn *conn);
void lwd_conn_idle(lwd_conn *conn);
/* The acceptor's rounds. */
void lwd_conn_reap(lwd_http *http);
void lwd_conn_shut_idle(lwd_http *http);
/* Cure for clients that send head and body apart with Nagle's algorithm on. */
void lwd_conn_quick_ack(lwd_conn *conn);

/* acceptor.c */
bool lwd_acceptor_start(lwd_http *http);
void lwd_acceptor_wake(lwd_http *http);

/* request.c: the callbacks */
void *lwd_call_uri(void *cls, const char *uri, struct MHD_Connection *mhd);
enum MHD_Result lwd_call_access(void *cls, struct MHD_Connection *mhd, const char *url,
                                const char *method, const char *version, const char *upload_data,
                                size_t *upload_size, void **req_cls);
void lwd_call_completed(void *cls, struct MHD_Connection *mhd, void **req_cls,
                        enum MHD_RequestTerminationCode why);

/* reply.c */
/* Queues call->reply (or, where its body failed, a plain 503). */
enum MHD_Result lwd_reply_send(lwd_call *call);
/* Fills call->reply from call->refusal, with the headers that go with it. */
void lwd_reply_refusal(lwd_call *call);
/* Writes a whole answer to a socket the HTTP library is not answering on. */
void lwd_reply_raw(int fd, lwd_http_problem problem, const char *detail, int retry_after_s);

#endif
