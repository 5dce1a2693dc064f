/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The acceptor thread: takes connections from all listening sockets and hands them to the event
 * thread; turns clients away with a readable answer when there are too many; every quarter of a
 * second looks for connections that drip. Sleeps without a timer while there are none. */
#include <errno.h>
#include <poll.h>
#include <signal.h>
#include <string.h>
#include <sys/eventfd.h>
#include <unistd.h>

#include "../log.h"
#include "../metrics.h"
#include "internal.h"

enum {
    TICK_MS = 250,
    PAUSE_MS = 100,      /* before accepting again when out of descriptors */
    LINGER_MAX = 32,     /* refused clients whose answer must not be cut off by a reset */
    LINGER_MS = 1000,
    ACCEPT_BATCH = 64,
    BACKLOG_BATCHES = 5, /* enough for the 256 that a listening socket holds */
    RETRY_AFTER_S = 1
};

typedef struct refused {
    int fd;
    int64_t until_ms;
} refused;

typedef struct acceptor {
    lwd_http *http;
    refused linger[LINGER_MAX];
    size_t n_linger;
    int64_t pause_until_ms;
    int64_t last_reap_ms;
    bool listening;
} acceptor;

/* Answers 503 and keeps the socket until the client has closed its side: closing at once with its
 * request unread would send a reset that can overtake the answer. */
static void turn_away(acceptor *a, int fd, lwd_refused reason, const char *detail)
{
    lwd_metrics_refused(reason);
    lwd_reply_raw(fd, LWD_P_CONNECTIONS, detail, RETRY_AFTER_S);
    (void)shutdown(fd, SHUT_WR);
    if (a->n_linger >= LINGER_MAX) {
        close(fd);
        return;
    }
    a->linger[a->n_linger].fd = fd;
    a->linger[a->n_linger].until_ms = lwd_now_ms() + LINGER_MS;
    a->n_linger++;
}

/* Reads what refused clients still send; closes those that are through or out of time. */
static void linger_round(acceptor *a, bool all)
{
    int64_t now_ms = lwd_now_ms();

    for (size_t i = 0; i < a->n_linger;) {
        char waste[4096];
        ssize_t n = recv(a->linger[i].fd, waste, sizeof waste, MSG_DONTWAIT);
        bool open = n > 0 || (n < 0 && (errno == EAGAIN || errno == EINTR));
        if (open && !all && now_ms < a->linger[i].until_ms) {
            i++;
            continue;
        }
        close(a->linger[i].fd);
        a->linger[i] = a->linger[--a->n_linger];
    }
}

static void take_over(acceptor *a, int fd, const struct sockaddr *address, socklen_t len)
{
    lwd_http *http = a->http;
    const int on = 1;
    lwd_conn *conn;

    if (lwd_conn_count(http) >= http->options.connections_max) {
        turn_away(a, fd, LWD_REFUSED_CONNECTIONS, "All connections are taken; try again soon.");
        return;
    }
    if (address->sa_family != AF_UNIX &&
        lwd_conn_count_address(http, address) >= http->options.address_max) {
        turn_away(a, fd, LWD_REFUSED_ADDRESS,
                  "Your address holds all the connections it may have; keep and reuse them.");
        return;
    }
    if (address->sa_family != AF_UNIX) {
        (void)setsockopt(fd, SOL_SOCKET, SO_KEEPALIVE, &on, sizeof on);
    }
    conn = lwd_conn_new(http, fd, address, len);
    if (conn == NULL) {
        turn_away(a, fd, LWD_REFUSED_MEMORY, "Out of memory; try again soon.");
        return;
    }
    lwd_metrics_connection_accepted();
    if (MHD_add_connection(http->daemon, fd, address, len) != MHD_YES) {
        /* The library has closed the descriptor. */
        lwd_metrics_refused(LWD_REFUSED_MEMORY);
        lwd_conn_free(http, conn);
    }
}

static void accept_some(acceptor *a, int listen_fd)
{
    for (int i = 0; i < ACCEPT_BATCH; i++) {
        struct sockaddr_storage address;
        socklen_t len = sizeof address;
        int fd;

        memset(&address, 0, sizeof address);
        fd = accept4(listen_fd, (struct sockaddr *)&address, &len, SOCK_CLOEXEC | SOCK_NONBLOCK);
        if (fd >= 0) {
            take_over(a, fd, (struct sockaddr *)&address, len);
            continue;
        }
        if (errno == EINTR || errno == ECONNABORTED) {
            continue;
        }
        if (errno == EMFILE || errno == ENFILE || errno == ENOMEM || errno == ENOBUFS) {
            lwd_metrics_refused(LWD_REFUSED_DESCRIPTORS);
            lwd_log(LWD_LOG_WARN, "accept", "accepting pauses: %s", strerror(errno));
            a->pause_until_ms = lwd_now_ms() + PAUSE_MS;
        }
        return;
    }
}

/* Takes what the kernel has queued already, then closes the listening sockets. */
static void stop_listening(acceptor *a)
{
    lwd_listeners *list = a->http->listeners;

    a->pause_until_ms = 0;
    for (size_t i = 0; i < list->n; i++) {
        for (int batch = 0; batch < BACKLOG_BATCHES; batch++) {
            accept_some(a, list->item[i].fd);
        }
    }
    lwd_listen_close(list);
    a->listening = false;
    atomic_store(&a->http->accepting_stopped, true);
}

static int timeout_ms(const acceptor *a)
{
    if (a->n_linger > 0 || a->pause_until_ms != 0) {
        return PAUSE_MS;
    }
    return lwd_conn_count(a->http) > 0 ? TICK_MS : -1;
}

/* Waits; true for each listening socket in `ready` that has a connection. */
static void wait_ready(acceptor *a, bool ready[LWD_LISTEN_MAX])
{
    struct pollfd fds[1 + LWD_LISTEN_MAX + LINGER_MAX];
    const lwd_listeners *list = a->http->listeners;
    size_t n_listen = a->listening && a->pause_until_ms == 0 ? list->n : 0;
    nfds_t n = 0;
    uint64_t count;

    fds[n++] = (struct pollfd){.fd = a->http->wake_fd, .events = POLLIN};
    for (size_t i = 0; i < n_listen; i++) {
        fds[n++] = (struct pollfd){.fd = list->item[i].fd, .events = POLLIN};
    }
    for (size_t i = 0; i < a->n_linger; i++) {
        fds[n++] = (struct pollfd){.fd = a->linger[i].fd, .events = POLLIN};
    }
    for (size_t i = 0; i < LWD_LISTEN_MAX; i++) {
        ready[i] = false;
    }
    if (poll(fds, n, timeout_ms(a)) <= 0) {
        return;
    }
    if (fds[0].revents != 0) {
        (void)!read(a->http->wake_fd, &count, sizeof count);
    }
    for (size_t i = 0; i < n_listen; i++) {
        ready[i] = fds[1 + i].revents != 0;
    }
}

static void *acceptor_main(void *arg)
{
    acceptor self = {.http = arg, .listening = true};
    lwd_http *http = arg;

    while (!atomic_load(&http->end)) {
        bool ready[LWD_LISTEN_MAX];
        int64_t now_ms;

        wait_ready(&self, ready);
        now_ms = lwd_now_ms();
        if (self.pause_until_ms != 0 && now_ms >= self.pause_until_ms) {
            self.pause_until_ms = 0;
        }
        for (size_t i = 0; self.listening && i < http->listeners->n; i++) {
            if (ready[i]) {
                accept_some(&self, http->listeners->item[i].fd);
            }
        }
        if (self.listening && atomic_load(&http->stop_accepting)) {
            stop_listening(&self);
        }
        if (atomic_load(&http->shut_idle)) {
            lwd_conn_shut_idle(http);
        }
        if (now_ms - self.last_reap_ms >= TICK_MS) {
            self.last_reap_ms = now_ms;
            lwd_conn_reap(http);
        }
        linger_round(&self, false);
    }
    linger_round(&self, true);
    return NULL;
}

bool lwd_acceptor_start(lwd_http *http)
{
    return pthread_create(&http->acceptor, NULL, acceptor_main, http) == 0;
}

void lwd_acceptor_wake(lwd_http *http)
{
    const uint64_t one = 1;
    (void)!write(http->wake_fd, &one, sizeof one);
}
