/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The list of connections and the patience with each. The HTTP library's own timeout starts anew
 * with every byte, so a client that drips could hold a connection for ever; here a request's head
 * and body each have a time of their own. A connection is never closed here, only shut down: the
 * library owns the descriptor and closes it after telling us, which takes the list's lock, so a
 * descriptor found in the list is always the connection's own. */
#include <linux/tcp.h>
#include <netinet/in.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "../metrics.h"
#include "internal.h"

int64_t lwd_now_ms(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC_COARSE, &now);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

int64_t lwd_now_us(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (int64_t)now.tv_sec * 1000000 + now.tv_nsec / 1000;
}

lwd_conn *lwd_conn_new(lwd_http *http, int fd, const struct sockaddr *address, socklen_t len)
{
    lwd_conn *conn = calloc(1, sizeof *conn);

    if (conn == NULL) {
        return NULL;
    }
    conn->fd = fd;
    conn->is_unix = address->sa_family == AF_UNIX;
    memcpy(&conn->address, address, len < sizeof conn->address ? len : sizeof conn->address);
    pthread_mutex_lock(&http->lock);
    conn->next = http->conns;
    if (conn->next != NULL) {
        conn->next->prev = conn;
    }
    http->conns = conn;
    http->n_conns++;
    pthread_mutex_unlock(&http->lock);
    lwd_metrics_connections(1);
    return conn;
}

void lwd_conn_free(lwd_http *http, lwd_conn *conn)
{
    pthread_mutex_lock(&http->lock);
    if (conn->prev != NULL) {
        conn->prev->next = conn->next;
    } else {
        http->conns = conn->next;
    }
    if (conn->next != NULL) {
        conn->next->prev = conn->prev;
    }
    http->n_conns--;
    pthread_mutex_unlock(&http->lock);
    lwd_metrics_connections(-1);
    free(conn);
}

unsigned lwd_conn_count(lwd_http *http)
{
    unsigned n;
    pthread_mutex_lock(&http->lock);
    n = http->n_conns;
    pthread_mutex_unlock(&http->lock);
    return n;
}

static bool same_address(const struct sockaddr *a, const struct sockaddr *b)
{
    if (a->sa_family != b->sa_family) {
        return false;
    }
    if (a->sa_family == AF_INET) {
        const struct sockaddr_in *x = (const struct sockaddr_in *)(const void *)a;
        const struct sockaddr_in *y = (const struct sockaddr_in *)(const void *)b;
        return x->sin_addr.s_addr == y->sin_addr.s_addr;
    }
    if (a->sa_family == AF_INET6) {
        /* One client commonly holds a whole /64. */
        const struct sockaddr_in6 *x = (const struct sockaddr_in6 *)(const void *)a;
        const struct sockaddr_in6 *y = (const struct sockaddr_in6 *)(const void *)b;
        return memcmp(&x->sin6_addr, &y->sin6_addr, 8) == 0;
    }
    return false;
}

unsigned lwd_conn_count_address(lwd_http *http, const struct sockaddr *address)
{
    unsigned n = 0;

    pthread_mutex_lock(&http->lock);
    for (const lwd_conn *c = http->conns; c != NULL; c = c->next) {
        n += same_address((const struct sockaddr *)(const void *)&c->address, address) ? 1u : 0u;
    }
    pthread_mutex_unlock(&http->lock);
    return n;
}

void lwd_conn_notify(void *cls, struct MHD_Connection *mhd, void **socket_context,
                     enum MHD_ConnectionNotificationCode code)
{
    lwd_http *http = cls;
    const union MHD_ConnectionInfo *info;

    if (code == MHD_CONNECTION_NOTIFY_CLOSED) {
        if (*socket_context != NULL) {
            lwd_conn_free(http, *socket_context);
            *socket_context = NULL;
        }
        return;
    }
    info = MHD_get_connection_info(mhd, MHD_CONNECTION_INFO_CONNECTION_FD);
    *socket_context = NULL;
    pthread_mutex_lock(&http->lock);
    for (lwd_conn *c = http->conns; info != NULL && c != NULL; c = c->next) {
        if (c->fd == info->connect_fd) {
            *socket_context = c;
            break;
        }
    }
    pthread_mutex_unlock(&http->lock);
}

/* Changes what the connection does unless it has been reaped. */
static bool doing_set(lwd_conn *conn, int64_t want)
{
    int64_t now = atomic_load(&conn->doing);
    do {
        if (now == LWD_DOING_REAPED) {
            return false;
        }
    } while (!atomic_compare_exchange_weak(&conn->doing, &now, want));
    return true;
}

bool lwd_conn_phase(lwd_conn *conn, int phase, int64_t patience_ms)
{
    return doing_set(conn, (lwd_now_ms() + patience_ms) << 2 | phase);
}

bool lwd_conn_busy(lwd_conn *conn)
{
    return doing_set(conn, LWD_DOING_BUSY);
}

void lwd_conn_idle(lwd_conn *conn)
{
    atomic_fetch_add(&conn->served, 1);
    (void)doing_set(conn, LWD_DOING_IDLE);
}

void lwd_conn_quick_ack(lwd_conn *conn)
{
    const int on = 1;
    if (!conn->is_unix) {
        (void)setsockopt(conn->fd, IPPROTO_TCP, TCP_QUICKACK, &on, sizeof on);
    }
}

/* Ends the connection if it still does `doing`. */
static void reap(lwd_conn *conn, int64_t doing, lwd_refused reason, const char *detail)
{
    if (!atomic_compare_exchange_strong(&conn->doing, &doing, LWD_DOING_REAPED)) {
        return; /* it went on just now */
    }
    lwd_metrics_refused(reason);
    if (detail != NULL) {
        lwd_reply_raw(conn->fd, LWD_P_TIMEOUT, detail, 0);
    }
    (void)shutdown(conn->fd, SHUT_RDWR);
}

/* Whether part of a request's head has come: bytes since the connection became idle. The library
 * tells us of a head only once its first line is whole. */
static bool idle_received(lwd_conn *conn, int64_t now_ms)
{
    struct tcp_info info;
    socklen_t len = sizeof info;
    unsigned served = atomic_load(&conn->served);

    memset(&info, 0, sizeof info);
    if (!conn->is_unix && getsockopt(conn->fd, IPPROTO_TCP, TCP_INFO, &info, &len) != 0) {
        return false;
    }
    if (!conn->seen || conn->seen_served != served) {
        /* What came for requests that are answered does not count; a new connection, seen for the
         * first time, has had none, so whatever has come is part of a head. */
        conn->seen_bytes = served != 0 ? info.tcpi_bytes_received : 0;
        conn->seen = true;
        conn->seen_served = served;
        conn->idle_since_ms = now_ms;
        conn->head_since_ms = 0;
    }
    return info.tcpi_bytes_received != conn->seen_bytes;
}

/* A client may have closed its side together with the last bytes it sent; the library's epoll loop
 * of 0.9.75 then hears of it no more (later releases do). Ending our reading side as well rouses
 * it: it reads the end, and closes. Answers under way are not touched. */
static void rouse_if_gone(lwd_conn *conn)
{
    char byte;

    if (!conn->read_shut && recv(conn->fd, &byte, 1, MSG_PEEK | MSG_DONTWAIT) == 0) {
        conn->read_shut = true;
        (void)shutdown(conn->fd, SHUT_RD);
    }
}

static void reap_idle(lwd_http *http, lwd_conn *conn, int64_t now_ms)
{
    const lwd_http_options *options = &http->options;
    const char *detail = "The head of the request did not come to its end in time.";

    if (idle_received(conn, now_ms)) {
        if (conn->head_since_ms == 0) {
            conn->head_since_ms = now_ms;
        }
        if (now_ms - conn->head_since_ms >= options->head_ms) {
            reap(conn, LWD_DOING_IDLE, LWD_REFUSED_SLOW_HEAD, detail);
        }
    } else if (now_ms - conn->idle_since_ms >
               (int64_t)options->idle_s * 1000 + options->head_ms) {
        /* A Unix socket does not count bytes; but an idle connection ends after idle_s, so one
         * that is still here has been sent something. */
        reap(conn, LWD_DOING_IDLE, LWD_REFUSED_SLOW_HEAD, detail);
    }
}

void lwd_conn_reap(lwd_http *http)
{
    int64_t now_ms = lwd_now_ms();

    pthread_mutex_lock(&http->lock);
    for (lwd_conn *c = http->conns; c != NULL; c = c->next) {
        int64_t doing = atomic_load(&c->doing);
        if (doing == LWD_DOING_IDLE || (doing & 3) == LWD_PHASE_HEAD ||
            (doing & 3) == LWD_PHASE_BODY) {
            rouse_if_gone(c);
        }
        if (doing == LWD_DOING_IDLE) {
            reap_idle(http, c, now_ms);
        } else if (doing > LWD_DOING_REAPED && now_ms >= doing >> 2) {
            switch (doing & 3) {
            case LWD_PHASE_HEAD:
                reap(c, doing, LWD_REFUSED_SLOW_HEAD,
                     "The head of the request did not come to its end in time.");
                break;
            case LWD_PHASE_BODY:
                reap(c, doing, LWD_REFUSED_SLOW_BODY,
                     "The body of the request did not come to its end in time.");
                break;
            default:
                reap(c, doing, LWD_REFUSED_SLOW_READER, NULL);
                break;
            }
        }
    }
    pthread_mutex_unlock(&http->lock);
}

void lwd_conn_shut_idle(lwd_http *http)
{
    pthread_mutex_lock(&http->lock);
    for (lwd_conn *c = http->conns; c != NULL; c = c->next) {
        /* What has come already is still read and answered. */
        if (!c->read_shut && atomic_load(&c->doing) == LWD_DOING_IDLE) {
            c->read_shut = true;
            (void)shutdown(c->fd, SHUT_RD);
        }
    }
    pthread_mutex_unlock(&http->lock);
}
