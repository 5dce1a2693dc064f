/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the HTTP room and the API room hand to each other: a request as understood, a reply to be
 * sent. Neither includes libmicrohttpd nor cJSON. A request borrows all its strings until the
 * handler returns; a reply owns its body. */
#ifndef LWD_EXCHANGE_H
#define LWD_EXCHANGE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef enum lwd_method {
    LWD_GET,
    LWD_HEAD, /* handlers see GET; the listener strips the body */
    LWD_POST,
    LWD_PUT,
    LWD_DELETE
} lwd_method;

typedef enum lwd_role {
    LWD_ROLE_NONE,   /* no or no valid token while tokens are required */
    LWD_ROLE_QUERY,  /* ask questions, read documents */
    LWD_ROLE_AUTHOR, /* also store draft revisions */
    LWD_ROLE_ADMIN   /* also publish and withdraw */
} lwd_role;

typedef struct lwd_pair {
    const char *name;
    const char *value; /* "" where the client sent a name without a value */
} lwd_pair;

enum { LWD_PARAM_MAX = 4, LWD_QUERY_MAX = 64, LWD_HEADER_MAX = 8 };

typedef struct lwd_request {
    lwd_method method;
    const char *path;                  /* decoded, without the query */
    const char *param[LWD_PARAM_MAX];  /* path segments captured by the route, in order */
    size_t n_param;
    const lwd_pair *query;             /* decoded members in the order sent, duplicates kept */
    size_t n_query;
    const char *body;                  /* NUL-terminated one past body_len, never NULL */
    size_t body_len;
    const char *accept;                /* header values, NULL where absent */
    const char *content_type;
    const char *if_match;
    const char *if_none_match;
    lwd_role role;
    const char *token_name;            /* who asks: the token's name, "local" without tokens */
    const char *request_id;            /* for the log and for problem documents */
    unsigned lane;                     /* index of the thread that runs the handler: each lane owns
                                        * its own scratch; no two threads share a lane */
    bool may_defer;                    /* true on the event thread where the listener takes the
                                        * status LWD_DEFER: "run me again, in a worker" */
} lwd_request;

/* A reply's status with which a handler of a quick route says that this one request will be slow
 * (a mechanism has to be loaded first). Nothing was done; the listener calls the handler again with
 * the same request in a worker, with may_defer false. */
enum { LWD_DEFER = 0 };

/* Growable text buffer. A failed allocation sets `failed`; later writes are then ignored, so a
 * writer checks once at the end. */
typedef struct lwd_buf {
    char *data; /* NUL-terminated when len > 0 */
    size_t len;
    size_t cap;
    size_t cap_max; /* 0: no bound of its own */
    bool failed;
} lwd_buf;

void lwd_buf_init(lwd_buf *buf, size_t cap_max);
void lwd_buf_clear(lwd_buf *buf);
/* Forget the content, keep the memory. */
void lwd_buf_reset(lwd_buf *buf);
/* Makes room for `more` bytes at once where much is to come; false, and nothing spoilt, if there is
 * none: each later write tries again. */
bool lwd_buf_reserve(lwd_buf *buf, size_t more);
bool lwd_buf_put(lwd_buf *buf, const char *text, size_t len);
bool lwd_buf_puts(lwd_buf *buf, const char *text);

typedef struct lwd_header {
    char name[32];
    char value[128];
} lwd_header;

typedef struct lwd_reply {
    int status;               /* HTTP status */
    const char *content_type; /* static string */
    lwd_buf body;
    lwd_header header[LWD_HEADER_MAX]; /* ETag, Location, Retry-After, Allow ... */
    size_t n_header;
    int log_code;             /* verdict or problem code, for the log line; 0 = none */
} lwd_reply;

/* Adds a header; false if the table is full or the value does not fit. */
bool lwd_reply_header(lwd_reply *reply, const char *name, const char *value);

/* A handler fills the reply; it never fails otherwise. `context` is the daemon's (catalog,
 * models). */
typedef void (*lwd_handler)(void *context, const lwd_request *request, lwd_reply *reply);

typedef struct lwd_route {
    lwd_method method;
    const char *pattern;  /* "/v1/mechanisms/{}/inverse": each {} captures one segment */
    lwd_handler handler;
    lwd_role role;        /* the least role that may call it; LWD_ROLE_NONE = open to all */
    bool slow;            /* runs in a worker (suspended connection), not on the event thread; so
                           * does any request whose body exceeds 2 kB (a batch) */
    size_t body_max;      /* largest body in bytes; 0 = takes no body */
    const char *name;     /* for metrics and log: "inverse" */
    bool csv;             /* takes a table (text/csv) as well as JSON */
} lwd_route;

/* Builds an RFC 9457 problem reply; used by http for its own errors and by api for the rest.
 * Strings may be NULL except `title`. Lives in server/api/problem.c. */
typedef struct lwd_problem {
    int status;
    int code;             /* from 1001 on */
    const char *slug;     /* last part of "type": "/problems/<slug>" */
    const char *title;
    const char *detail;
    const char *pointer;  /* RFC 6901; "" is the whole body */
    const char *expected;
    const char *got;
} lwd_problem;
void lwd_problem_reply(lwd_reply *reply, const lwd_request *request, const lwd_problem *problem);

#endif
