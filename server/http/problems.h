/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The problem codes of the HTTP room: 1001 to 1049. The API room's start behind them. */
#ifndef LWD_HTTP_PROBLEMS_H
#define LWD_HTTP_PROBLEMS_H

/* code, HTTP status, slug, title */
#define LWD_HTTP_PROBLEM_LIST(X)                                                                   \
    X(LWD_P_FRAMING, 1001, 400, "bad-framing", "The request's length is not stated clearly")       \
    X(LWD_P_URL, 1002, 400, "bad-url", "The URL can not be understood")                            \
    X(LWD_P_URL_LONG, 1003, 414, "url-too-long", "The URL is too long")                            \
    X(LWD_P_HEADER, 1004, 400, "bad-header", "A header can not be understood")                     \
    X(LWD_P_EXPECT, 1005, 417, "expectation", "The expectation can not be met")                    \
    X(LWD_P_NO_PATH, 1006, 404, "not-found", "There is nothing at this path")                      \
    X(LWD_P_METHOD, 1007, 405, "method", "The path does not take this method")                     \
    X(LWD_P_ACCEPT, 1008, 406, "not-acceptable", "No acceptable form of answer")                   \
    X(LWD_P_SIZE, 1009, 413, "too-large", "The body is too large")                                 \
    X(LWD_P_MEDIA, 1010, 415, "media-type", "The body is of a type not taken")                     \
    X(LWD_P_NO_TOKEN, 1011, 401, "no-token", "A token is needed")                                  \
    X(LWD_P_BAD_TOKEN, 1012, 401, "bad-token", "The token is not valid")                           \
    X(LWD_P_ROLE, 1013, 403, "role", "The token's role does not allow this")                       \
    X(LWD_P_HOST, 1014, 421, "host", "The Host header names another service")                      \
    X(LWD_P_BUSY, 1015, 503, "busy", "Too many questions at once")                                 \
    X(LWD_P_STOPPING, 1016, 503, "stopping", "The service is stopping")                            \
    X(LWD_P_TIMEOUT, 1017, 408, "timeout", "The request took too long to arrive")                  \
    X(LWD_P_MEMORY, 1018, 503, "memory", "Out of memory")                                          \
    X(LWD_P_CONNECTIONS, 1019, 503, "connections", "Too many connections")                         \
    X(LWD_P_TOKEN_IN_URL, 1020, 400, "token-in-url", "A token must not stand in the URL")

typedef enum lwd_http_problem {
#define X(id, code, status, slug, title) id,
    LWD_HTTP_PROBLEM_LIST(X)
#undef X
    LWD_P_COUNT
} lwd_http_problem;

#endif
