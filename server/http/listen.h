/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The sockets the daemon listens on: TCP addresses, a Unix socket, sockets handed over by a
 * supervisor (LISTEN_FDS). Opened and closed by main; the acceptor thread uses them between. */
#ifndef LWD_HTTP_LISTEN_H
#define LWD_HTTP_LISTEN_H

#include <stdbool.h>
#include <stddef.h>

enum { LWD_LISTEN_MAX = 8, LWD_LISTEN_TEXT_SIZE = 128 };

typedef struct lwd_listener {
    int fd;
    bool is_unix;
    bool loopback;                   /* reachable from this machine only */
    int port;                        /* TCP port really bound, 0 for a Unix socket */
    char text[LWD_LISTEN_TEXT_SIZE]; /* "127.0.0.1:8470" or "unix:/run/leeway.sock" */
    unsigned long inode;             /* of a Unix socket we made, to remove no other; 0 = none */
} lwd_listener;

typedef struct lwd_listeners {
    lwd_listener item[LWD_LISTEN_MAX];
    size_t n;
} lwd_listeners;

/* Each adds one socket, listening and non-blocking; false with a sentence in `why`. */
bool lwd_listen_tcp(lwd_listeners *list, const char *address, char *why, size_t why_size);
bool lwd_listen_unix(lwd_listeners *list, const char *path, char *why, size_t why_size);
/* Takes over the sockets of LISTEN_FDS where LISTEN_PID is this process; *count says how many. */
bool lwd_listen_inherited(lwd_listeners *list, size_t *count, char *why, size_t why_size);
/* Whether all of them are reachable from this machine only. */
bool lwd_listen_loopback_only(const lwd_listeners *list);
/* Whether the host part of "ADDR:PORT" is a loopback address; false with `why` if unreadable. */
bool lwd_listen_is_loopback(const char *address, bool *loopback, char *why, size_t why_size);
/* Closes all and removes the Unix sockets that were made here. */
void lwd_listen_close(lwd_listeners *list);

#endif
