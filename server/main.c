/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The daemon's life: options, sockets, catalog, HTTP, wait for a signal, and all of it backwards.
 * Signals are blocked before the first thread is made, so that only sigwait here receives them. */
#include <errno.h>
#include <malloc.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#include <leeway/err.h>

#include "api/app.h"
#include "config.h"
#include "http/http.h"
#include "log.h"
#include "metrics.h"
#include "version.h"

enum { EXIT_USE = 2, WHY_SIZE = 512, ARENAS_MAX = 2 };

/* What has been started, in order; stopped in reverse. */
typedef struct daemon_state {
    lwd_config config;
    lwd_auth *auth;
    lwd_listeners listeners;
    lwd_app *app;
    lwd_http *http;
} daemon_state;

static int complain(int status, const char *why)
{
    fprintf(stderr, "leewayd: %s\n", why);
    return status;
}

static int make_token(const lwd_config *config)
{
    char token[LWD_TOKEN_TEXT_SIZE];
    char why[WHY_SIZE];
    lwd_buf line;
    int status = EXIT_SUCCESS;

    lwd_buf_init(&line, 0);
    if (lwd_token_make(token, &line, config->token_name, config->token_role, why, sizeof why)) {
        printf("token (shown once; give it to its holder):\n%s\n"
               "line to add to the token file:\n%s",
               token, line.data);
    } else {
        status = complain(EXIT_USE, why);
    }
    lwd_buf_clear(&line);
    return status;
}

static int make_backup(const lwd_config *config)
{
    char why[WHY_SIZE];

    if (!lwd_app_backup(config->data_dir, config->backup_file, why, sizeof why)) {
        return complain(EXIT_FAILURE, why);
    }
    printf("leewayd: %s holds a checked copy of the catalog\n", config->backup_file);
    return EXIT_SUCCESS;
}

/* Many connections and the catalog need more descriptors than some shells allow. */
static void raise_descriptors(const lwd_config *config)
{
    struct rlimit limit;
    rlim_t want = (rlim_t)config->http.connections_max + 256;

    if (getrlimit(RLIMIT_NOFILE, &limit) == 0 && limit.rlim_cur < want) {
        limit.rlim_cur = limit.rlim_max < want ? limit.rlim_max : want;
        if (setrlimit(RLIMIT_NOFILE, &limit) != 0 || limit.rlim_cur < want) {
            lwd_log(LWD_LOG_WARN, "limits", "only %llu descriptors for %u connections",
                    (unsigned long long)limit.rlim_cur, config->http.connections_max);
        }
    }
}

static bool unsafe(const char *address, char *why, size_t why_size)
{
    snprintf(why, why_size,
             "%s can be reached from other machines, and without tokens anyone there could change "
             "models. Make a token (leewayd --make-token NAME ROLE), put its line into a file and "
             "add --token-file FILE, or listen on 127.0.0.1",
             address);
    return false;
}

/* Before anything is bound: wrong options and unsafe addresses, exit status 2. */
static bool check_safe(const lwd_config *config, char *why, size_t why_size)
{
    for (size_t i = 0; i < config->n_listen; i++) {
        bool loopback;
        if (!lwd_listen_is_loopback(config->listen[i], &loopback, why, why_size)) {
            return false;
        }
        if (!loopback && config->token_file == NULL) {
            return unsafe(config->listen[i], why, why_size);
        }
    }
    return true;
}

static bool open_listeners(daemon_state *d, char *why, size_t why_size)
{
    const lwd_config *config = &d->config;
    size_t inherited;

    if (!lwd_listen_inherited(&d->listeners, &inherited, why, why_size)) {
        return false;
    }
    for (size_t i = 0; i < config->n_listen; i++) {
        if (!lwd_listen_tcp(&d->listeners, config->listen[i], why, why_size)) {
            return false;
        }
    }
    if (config->unix_path != NULL &&
        !lwd_listen_unix(&d->listeners, config->unix_path, why, why_size)) {
        return false;
    }
    return d->listeners.n > 0 ||
           lwd_listen_tcp(&d->listeners, LWD_DEFAULT_LISTEN, why, why_size);
}

/* Written beside and renamed, so that a reader sees the whole number or no file. */
static bool write_port(const daemon_state *d, char *why, size_t why_size)
{
    const char *path = d->config.port_file;
    char beside[4096];
    FILE *file;
    int port = 0;
    int n = snprintf(beside, sizeof beside, "%s.new", path);
    bool ok;

    for (size_t i = 0; i < d->listeners.n && port == 0; i++) {
        port = d->listeners.item[i].port;
    }
    file = n > 0 && (size_t)n < sizeof beside ? fopen(beside, "we") : NULL;
    ok = file != NULL && fprintf(file, "%d\n", port) > 0;
    if (file != NULL) {
        ok = fclose(file) == 0 && ok;
    }
    ok = ok && rename(beside, path) == 0;
    if (!ok) {
        snprintf(why, why_size, "the port file %s can not be written: %s", path, strerror(errno));
    }
    return ok;
}

/* The signals are blocked: a request to stop waits until sigwait takes it. */
static bool asked_to_stop(void)
{
    sigset_t waiting;

    return sigpending(&waiting) == 0 &&
           (sigismember(&waiting, SIGTERM) == 1 || sigismember(&waiting, SIGINT) == 1);
}

/* Starts everything; the exit status, 0 if all is well. */
static int start(daemon_state *d, char *why, size_t why_size)
{
    const lwd_config *config = &d->config;
    const bool checking = config->action == LWD_ACTION_QUICK_CHECK;
    const lwd_route *routes;
    lwd_app_options app;
    size_t n_routes;

    if (!check_safe(config, why, why_size)) {
        return EXIT_USE;
    }
    if (config->token_file != NULL) {
        d->auth = lwd_auth_load(config->token_file, why, why_size);
        if (d->auth == NULL) {
            return EXIT_USE;
        }
    }
    if (!open_listeners(d, why, why_size)) {
        return EXIT_FAILURE;
    }
    if (d->auth == NULL && !lwd_listen_loopback_only(&d->listeners)) {
        (void)unsafe("A socket that was handed over", why, why_size);
        return EXIT_USE;
    }
    app.data_dir = config->data_dir;
    app.lanes = config->http.workers + 1;
    app.prepare_paths = config->prepare_paths;
    d->app = lwd_app_start(&app, why, why_size);
    if (d->app == NULL) {
        return EXIT_FAILURE;
    }
    routes = lwd_app_routes(&n_routes);
    if (checking) {
        return EXIT_SUCCESS;
    }
    d->http = lwd_http_start(&config->http, &d->listeners, routes, n_routes, d->app, d->auth, why,
                             why_size);
    if (d->http == NULL) {
        return EXIT_FAILURE;
    }
    for (size_t i = 0; i < d->listeners.n; i++) {
        lwd_log(LWD_LOG_INFO, "listen", "%s", d->listeners.item[i].text);
    }
    lwd_app_load(d->app, asked_to_stop);
    lwd_ready_set(true);
    if (config->port_file != NULL && !write_port(d, why, why_size)) {
        return EXIT_FAILURE;
    }
    return EXIT_SUCCESS;
}

/* Stops what start has started, whole or in part. False: a handler would not end. */
static bool stop(daemon_state *d)
{
    lwd_ready_set(false);
    if (d->app != NULL && d->http != NULL) {
        lwd_app_hurry(d->app, d->config.http.drain_ms / 2);
    }
    if (d->http != NULL && !lwd_http_stop(d->http)) {
        lwd_log(LWD_LOG_ERROR, "stop", "a question is still being worked on; leaving without it");
        return false;
    }
    d->http = NULL;
    if (d->app != NULL) {
        lwd_app_stop(d->app);
    }
    lwd_listen_close(&d->listeners);
    lwd_auth_free(d->auth);
    return true;
}

static void reload_tokens(daemon_state *d)
{
    char why[WHY_SIZE];

    if (d->auth == NULL) {
        lwd_log(LWD_LOG_WARN, "tokens", "there is no token file to read again");
    } else if (lwd_auth_reload(d->auth, why, sizeof why)) {
        lwd_log(LWD_LOG_INFO, "tokens", "token file read again: %zu tokens",
                lwd_auth_count(d->auth));
    } else {
        lwd_log(LWD_LOG_ERROR, "tokens", "the old tokens stay in force: %s", why);
    }
}

/* The signals main waits for; blocked in every thread. */
static void block_signals(sigset_t *set)
{
    struct sigaction ignore;

    sigemptyset(set);
    sigaddset(set, SIGTERM);
    sigaddset(set, SIGINT);
    sigaddset(set, SIGHUP);
    pthread_sigmask(SIG_BLOCK, set, NULL);
    memset(&ignore, 0, sizeof ignore);
    ignore.sa_handler = SIG_IGN;
    sigaction(SIGPIPE, &ignore, NULL);
}

static int run(daemon_state *d)
{
    char why[WHY_SIZE] = "";
    sigset_t signals;
    int status;
    int got = 0;

    block_signals(&signals);
    /* Answers are short-lived blocks that threads hand to one another; an arena for each thread
     * only scatters them. */
    (void)mallopt(M_ARENA_MAX, ARENAS_MAX);
    lwd_log_level_set(d->config.log_level);
    raise_descriptors(&d->config);
    lwd_metrics_version(LWD_VERSION);
    lw_init();
    (void)lwd_log_start();
    status = start(d, why, sizeof why);
    if (status == EXIT_SUCCESS && d->config.action == LWD_ACTION_QUICK_CHECK) {
        printf("leewayd: everything a start needs is in order\n");
    } else if (status == EXIT_SUCCESS) {
        lwd_log(LWD_LOG_INFO, "start", "leewayd %s answers; %u workers", LWD_VERSION,
                d->config.http.workers);
        while (sigwait(&signals, &got) != 0 || got == SIGHUP) {
            reload_tokens(d);
        }
        lwd_log(LWD_LOG_INFO, "stop", "%s received", got == SIGTERM ? "SIGTERM" : "SIGINT");
    }
    if (!stop(d)) {
        lwd_log_stop();
        _exit(EXIT_FAILURE); /* everything acknowledged is on disk already */
    }
    lwd_log_stop();
    return status == EXIT_SUCCESS ? status : complain(status, why);
}

int main(int argc, char **argv)
{
    static daemon_state d;
    char why[WHY_SIZE];
    int status;

    if (!lwd_config_read(&d.config, argc, argv, why, sizeof why)) {
        status = complain(EXIT_USE, why);
    } else {
        switch (d.config.action) {
        case LWD_ACTION_HELP:
            lwd_config_help(stdout);
            status = EXIT_SUCCESS;
            break;
        case LWD_ACTION_VERSION:
            printf("leewayd %s\n", LWD_VERSION);
            status = EXIT_SUCCESS;
            break;
        case LWD_ACTION_MAKE_TOKEN:
            status = make_token(&d.config);
            break;
        case LWD_ACTION_BACKUP:
            status = make_backup(&d.config);
            break;
        default:
            status = run(&d);
            break;
        }
    }
    lwd_config_clear(&d.config);
    return status;
}
