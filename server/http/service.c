/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Starts and stops the service. The order of stopping is what keeps answers from being lost: no
 * new connections; requests begun are answered, each answer closing its connection; then idle
 * connections are asked to close; whatever still runs after drain_ms is answered with 503; only
 * then, with nothing suspended, is the HTTP library stopped. */
#include <errno.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/eventfd.h>
#include <time.h>
#include <unistd.h>

#include "../log.h"
#include "../metrics.h"
#include "internal.h"

enum {
    CONNECTION_MEMORY = 16 * 1024,
    SPARE_CONNECTIONS = 32, /* the library frees a connection a little after telling us */
    QUIET_MS = 250,         /* without a new request before idle connections are closed */
    CLOSE_MS = 1000,        /* for idle connections to go */
    WORKER_WAIT_MS = 5000,
    LOG_LINES_A_SECOND = 5
};

/* Lines of the HTTP library, one for each broken peer: at most a few a second. */
static void library_log(void *cls, const char *format, va_list args)
{
    lwd_http *http = cls;
    int64_t now_ms = lwd_now_ms();
    char text[256];
    size_t len;

    if (now_ms - atomic_load(&http->log_window_ms) >= 1000) {
        atomic_store(&http->log_window_ms, now_ms);
        atomic_store(&http->log_in_window, 0);
    }
    if (atomic_fetch_add(&http->log_in_window, 1) >= LOG_LINES_A_SECOND) {
        return;
    }
    vsnprintf(text, sizeof text, format, args);
    len = strcspn(text, "\r\n");
    text[len] = '\0';
    lwd_log(LWD_LOG_DEBUG, "http_library", "%s", text);
}

static struct MHD_Daemon *start_library(lwd_http *http)
{
    const unsigned flags = MHD_USE_EPOLL_INTERNAL_THREAD | MHD_ALLOW_SUSPEND_RESUME |
                           MHD_USE_NO_LISTEN_SOCKET | MHD_USE_ERROR_LOG | MHD_USE_ITC;

    /* The logger comes first, since options behind it may already have something to say. */
    return MHD_start_daemon(
        flags, 0, NULL, NULL, lwd_call_access, http, MHD_OPTION_EXTERNAL_LOGGER, library_log, http,
        MHD_OPTION_CONNECTION_MEMORY_LIMIT, (size_t)CONNECTION_MEMORY, MHD_OPTION_CONNECTION_LIMIT,
        http->options.connections_max + SPARE_CONNECTIONS, MHD_OPTION_CONNECTION_TIMEOUT,
        http->options.idle_s, MHD_OPTION_STRICT_FOR_CLIENT, 1, MHD_OPTION_URI_LOG_CALLBACK,
        lwd_call_uri, http, MHD_OPTION_NOTIFY_COMPLETED, lwd_call_completed, http,
        MHD_OPTION_NOTIFY_CONNECTION, lwd_conn_notify, http, MHD_OPTION_END);
}

static void free_all(lwd_http *http)
{
    while (http->conns != NULL) {
        lwd_conn_free(http, http->conns);
    }
    if (http->wake_fd >= 0) {
        close(http->wake_fd);
    }
    free(atomic_load(&http->spare));
    lwd_router_free(http->router);
    pthread_mutex_destroy(&http->lock);
    free(http);
}

lwd_http *lwd_http_start(const lwd_http_options *options, lwd_listeners *listeners,
                         const lwd_route *routes, size_t n_routes, void *context, lwd_auth *auth,
                         char *why, size_t why_size)
{
    lwd_http *http = calloc(1, sizeof *http);

    if (http == NULL) {
        snprintf(why, why_size, "out of memory");
        return NULL;
    }
    http->options = *options;
    http->listeners = listeners;
    http->context = context;
    http->auth = auth;
    pthread_mutex_init(&http->lock, NULL);
    http->wake_fd = eventfd(0, EFD_CLOEXEC | EFD_NONBLOCK);
    if (http->wake_fd < 0) {
        snprintf(why, why_size, "no event descriptor: %s", strerror(errno));
        free_all(http);
        return NULL;
    }
    http->router = lwd_router_new(routes, n_routes, why, why_size);
    if (http->router == NULL) {
        free_all(http);
        return NULL;
    }
    lwd_metrics_routes(routes, n_routes);
    http->pool = lwd_pool_new(options->workers, options->queue_max, 1);
    if (http->pool == NULL) {
        snprintf(why, why_size, "can not start %u worker threads", options->workers);
        free_all(http);
        return NULL;
    }
    http->daemon = start_library(http);
    if (http->daemon == NULL || !lwd_acceptor_start(http)) {
        snprintf(why, why_size, "can not start the HTTP threads: %s", strerror(errno));
        if (http->daemon != NULL) {
            MHD_stop_daemon(http->daemon);
        }
        (void)lwd_pool_stop(http->pool, WORKER_WAIT_MS);
        free_all(http);
        return NULL;
    }
    return http;
}

static void nap(void)
{
    const struct timespec rest = {.tv_sec = 0, .tv_nsec = 5 * 1000 * 1000};
    nanosleep(&rest, NULL);
}

/* Until no request is under way and none has begun for a moment; false at the deadline. */
static bool drain(lwd_http *http, int64_t until_ms)
{
    int64_t start_ms = lwd_now_ms();

    for (;;) {
        int64_t now_ms = lwd_now_ms();
        int64_t quiet_from = atomic_load(&http->last_begin_ms);
        if (quiet_from < start_ms) {
            quiet_from = start_ms;
        }
        if (atomic_load(&http->active) == 0 &&
            (now_ms - quiet_from >= QUIET_MS || lwd_conn_count(http) == 0)) {
            return true;
        }
        if (now_ms >= until_ms) {
            return atomic_load(&http->active) == 0;
        }
        nap();
    }
}

/* Asks idle connections to go and waits until all are gone; answers what they had sent before. */
static bool close_idle(lwd_http *http, int64_t until_ms)
{
    int64_t close_until_ms = lwd_now_ms() + CLOSE_MS;

    atomic_store(&http->shut_idle, true);
    for (;;) {
        int64_t now_ms = lwd_now_ms();
        int active = atomic_load(&http->active);
        if (active == 0 && (lwd_conn_count(http) == 0 || now_ms >= close_until_ms)) {
            return true;
        }
        if (now_ms >= until_ms) {
            return active == 0;
        }
        lwd_acceptor_wake(http);
        nap();
    }
}

bool lwd_http_stop(lwd_http *http)
{
    int64_t start_ms = lwd_now_ms();
    int64_t until_ms = start_ms + http->options.drain_ms;
    bool clean;

    atomic_store(&http->draining, true);
    atomic_store(&http->stop_accepting, true);
    lwd_acceptor_wake(http);
    while (!atomic_load(&http->accepting_stopped)) {
        nap();
    }
    clean = drain(http, until_ms) && close_idle(http, until_ms);
    if (!clean) {
        lwd_log(LWD_LOG_WARN, "stop", "%d requests were not answered in time and get a 503",
                atomic_load(&http->active));
    }
    /* From here on nothing can be suspended, and nothing may be when the library stops. */
    lwd_pool_abandon(http->pool);
    for (int64_t last_ms = lwd_now_ms() + CLOSE_MS;
         atomic_load(&http->active) != 0 && lwd_now_ms() < last_ms;) {
        nap();
    }
    MHD_stop_daemon(http->daemon);
    atomic_store(&http->end, true);
    lwd_acceptor_wake(http);
    pthread_join(http->acceptor, NULL);
    lwd_log(LWD_LOG_INFO, "stop", "all connections closed after %lld ms",
            (long long)(lwd_now_ms() - start_ms));
    if (!lwd_pool_stop(http->pool, WORKER_WAIT_MS)) {
        return false;
    }
    free_all(http);
    return true;
}
