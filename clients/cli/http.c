/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Talking to the service; see http.h. No proxy is used and no redirect is followed: the token goes
 * to the server the user named and to no other. One thread. */
#include "http.h"

#include <curl/curl.h>
#include <signal.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#ifndef LEEWAY_VERSION
#define LEEWAY_VERSION "0"
#endif

enum { TOKEN_MAX = 1024, RETRY_WAIT_MAX_S = 30, POLL_MS = 100 };

struct lwc_http {
    CURL *curl;
    CURLM *multi;
    char *server;
    char *bearer; /* "Authorization: Bearer ..." or NULL */
    double timeout_s;
    char error[CURL_ERROR_SIZE];
};

static volatile sig_atomic_t interrupt_signal;

static void note_signal(int number)
{
    interrupt_signal = number;
}

void lwc_interrupt_watch(void)
{
    struct sigaction action = {0};
    action.sa_handler = note_signal; /* no SA_RESTART: sleeps and reads must end */
    (void)sigemptyset(&action.sa_mask);
    (void)sigaction(SIGINT, &action, NULL);
    (void)sigaction(SIGTERM, &action, NULL);
}

bool lwc_interrupted(void)
{
    return interrupt_signal != 0;
}

void lwc_interrupt_finish(void)
{
    int number = interrupt_signal;
    if (number != 0) {
        (void)fflush(NULL);
        (void)signal(number, SIG_DFL);
        (void)raise(number);
    }
}

/* Scheme and host, nothing that could hide a second address or a password. */
static bool is_server_url(const char *url)
{
    const char *host = lwc_starts(url, "http://")    ? url + 7
                       : lwc_starts(url, "https://") ? url + 8
                                                     : NULL;
    if (host == NULL || host[0] == '\0' || host[0] == '/' || host[0] == ':') {
        return false;
    }
    for (const char *p = host; *p != '\0'; p++) {
        if ((unsigned char)*p <= 0x20 || (unsigned char)*p >= 0x7f || strchr("@?#\\\"", *p)) {
            return false;
        }
    }
    return true;
}

static bool read_token(lwc_http *http, const char *path)
{
    lwc_text text = {0};
    lwc_text why = {0};
    bool ok = lwc_read_file(&text, path, TOKEN_MAX, &why);
    if (!ok) {
        lwc_complain("%s; give the file that holds your token with --token-file FILE",
                     lwc_text_string(&why));
    }
    while (text.len > 0 && strchr(" \t\r\n", text.data[text.len - 1]) != NULL) {
        text.data[--text.len] = '\0';
    }
    for (size_t i = 0; ok && i < text.len; i++) {
        if (text.data[i] <= 0x20 || text.data[i] >= 0x7f) {
            ok = false;
            lwc_complain("%s must hold the token alone, on one line, without blanks", path);
        }
    }
    if (ok && text.len == 0) {
        ok = false;
        lwc_complain("%s is empty; it must hold the token alone, on one line", path);
    }
    if (ok) {
        lwc_text header = {0};
        lwc_text_printf(&header, "Authorization: Bearer %s", text.data);
        http->bearer = header.data;
    }
    if (text.data != NULL) {
        memset(text.data, 0, text.cap);
    }
    lwc_text_clear(&text);
    lwc_text_clear(&why);
    return ok;
}

lwc_http *lwc_http_new(const lwc_http_settings *settings)
{
    if (!is_server_url(settings->server)) {
        lwc_complain("\"%s\" is no address of a service; write it like http://127.0.0.1:8470",
                     settings->server);
        return NULL;
    }
    lwc_http *http = lwc_grow(NULL, sizeof *http);
    *http = (lwc_http){.timeout_s = settings->timeout_s, .server = lwc_copy(settings->server)};
    size_t len = strlen(http->server);
    while (len > 0 && http->server[len - 1] == '/') {
        http->server[--len] = '\0';
    }
    if (settings->token_file != NULL && !read_token(http, settings->token_file)) {
        lwc_http_free(http);
        return NULL;
    }
    if (curl_global_init(CURL_GLOBAL_DEFAULT) == CURLE_OK) {
        http->curl = curl_easy_init();
        http->multi = curl_multi_init();
    }
    if (http->curl == NULL || http->multi == NULL) {
        lwc_complain("libcurl does not start; is memory short?");
        lwc_http_free(http);
        return NULL;
    }
    return http;
}

void lwc_http_free(lwc_http *http)
{
    if (http == NULL) {
        return;
    }
    if (http->multi != NULL) {
        curl_multi_cleanup(http->multi);
    }
    if (http->curl != NULL) {
        curl_easy_cleanup(http->curl);
    }
    curl_global_cleanup();
    if (http->bearer != NULL) {
        memset(http->bearer, 0, strlen(http->bearer));
    }
    free(http->bearer);
    free(http->server);
    free(http);
}

const char *lwc_http_server(const lwc_http *http)
{
    return http->server;
}

bool lwc_http_has_token(const lwc_http *http)
{
    return http->bearer != NULL;
}

static size_t take_bytes(char *bytes, size_t size, size_t count, void *context)
{
    lwc_reply *reply = context;
    size_t len = size * count;
    if (len > (size_t)LWC_ANSWER_MAX - reply->body.len) {
        return 0; /* ends the transfer with CURLE_WRITE_ERROR */
    }
    lwc_text_add(&reply->body, bytes, len);
    return len;
}

static struct curl_slist *headers(const lwc_http *http, const lwc_request *request)
{
    lwc_text accept = {0};
    lwc_text_printf(&accept, "Accept: %s",
                    request->accept != NULL ? request->accept
                                            : "application/json, application/problem+json");
    struct curl_slist *list = curl_slist_append(NULL, accept.data);
    lwc_text_clear(&accept);
    if (request->body != NULL) {
        list = curl_slist_append(list, request->table ? "Content-Type: text/csv"
                                                      : "Content-Type: application/json");
        list = curl_slist_append(list, "Expect:");
    }
    if (http->bearer != NULL) {
        list = curl_slist_append(list, http->bearer);
    }
    return list;
}

/* Everything libcurl is told about this request. */
static void prepare(lwc_http *http, const lwc_request *request, const char *url,
                    struct curl_slist *list, lwc_reply *reply)
{
    CURL *curl = http->curl;
    curl_easy_reset(curl); /* keeps the connection, forgets the options */
    http->error[0] = '\0';
    long timeout_ms = (long)(http->timeout_s * 1000.0);
    curl_easy_setopt(curl, CURLOPT_ERRORBUFFER, http->error);
    curl_easy_setopt(curl, CURLOPT_URL, url);
    curl_easy_setopt(curl, CURLOPT_PROTOCOLS_STR, "http,https");
    curl_easy_setopt(curl, CURLOPT_PROXY, "");
    curl_easy_setopt(curl, CURLOPT_FOLLOWLOCATION, 0L);
    curl_easy_setopt(curl, CURLOPT_NOSIGNAL, 1L);
    curl_easy_setopt(curl, CURLOPT_HTTP_VERSION, (long)CURL_HTTP_VERSION_1_1);
    curl_easy_setopt(curl, CURLOPT_USERAGENT, "leeway/" LEEWAY_VERSION);
    curl_easy_setopt(curl, CURLOPT_TIMEOUT_MS, timeout_ms);
    curl_easy_setopt(curl, CURLOPT_CONNECTTIMEOUT_MS, timeout_ms < 5000 ? timeout_ms : 5000L);
    curl_easy_setopt(curl, CURLOPT_MAXFILESIZE_LARGE, (curl_off_t)LWC_ANSWER_MAX);
    curl_easy_setopt(curl, CURLOPT_HTTPHEADER, list);
    curl_easy_setopt(curl, CURLOPT_WRITEFUNCTION, take_bytes);
    curl_easy_setopt(curl, CURLOPT_WRITEDATA, reply);
    if (strcmp(request->method, "GET") != 0) {
        curl_easy_setopt(curl, CURLOPT_POST, 1L);
        curl_easy_setopt(curl, CURLOPT_CUSTOMREQUEST, request->method);
        curl_easy_setopt(curl, CURLOPT_POSTFIELDSIZE_LARGE, (curl_off_t)request->body_len);
        curl_easy_setopt(curl, CURLOPT_POSTFIELDS, request->body != NULL ? request->body : "");
    }
}

/* Runs the prepared transfer; looks for an interrupt ten times a second. */
static CURLcode run(lwc_http *http)
{
    CURLcode result = CURLE_FAILED_INIT;
    if (curl_multi_add_handle(http->multi, http->curl) != CURLM_OK) {
        return result;
    }
    int running = 1;
    while (running > 0 && !lwc_interrupted()) {
        if (curl_multi_perform(http->multi, &running) != CURLM_OK ||
            (running > 0 &&
             curl_multi_poll(http->multi, NULL, 0, POLL_MS, NULL) != CURLM_OK)) {
            break;
        }
    }
    int left = 0;
    CURLMsg *message = NULL;
    while ((message = curl_multi_info_read(http->multi, &left)) != NULL) {
        if (message->msg == CURLMSG_DONE && message->easy_handle == http->curl) {
            result = message->data.result;
        }
    }
    (void)curl_multi_remove_handle(http->multi, http->curl);
    return result;
}

static void copy_header(char *out, size_t size, const char *value)
{
    out[0] = '\0';
    if (value != NULL) {
        lwc_text safe = {0};
        lwc_text_safe(&safe, value, strlen(value));
        (void)snprintf(out, size, "%s", lwc_text_string(&safe));
        lwc_text_clear(&safe);
    }
}

static lwc_contact explain(const lwc_http *http, CURLcode result)
{
    switch (result) {
    case CURLE_COULDNT_CONNECT:
    case CURLE_COULDNT_RESOLVE_HOST:
        lwc_complain("no service answers at %s (%s)\n"
                     "        next: start it (deploy/up), or name another with --server URL",
                     http->server, http->error[0] ? http->error : curl_easy_strerror(result));
        return LWC_NO_CONTACT;
    case CURLE_OPERATION_TIMEDOUT:
        lwc_complain("no answer from %s within %g s\n"
                     "        next: see whether it is well (leeway health), or wait longer with "
                     "--timeout SECONDS",
                     http->server, http->timeout_s);
        return LWC_NO_CONTACT;
    case CURLE_WRITE_ERROR:
    case CURLE_FILESIZE_EXCEEDED:
        lwc_complain("the answer of %s is larger than %d MB and was dropped\n"
                     "        next: ask for less at once (a smaller batch, one mode)",
                     http->server, LWC_ANSWER_MAX / (1024 * 1024));
        return LWC_UNUSABLE;
    default:
        lwc_complain("the talk with %s broke off (%s)\n"
                     "        next: ask again; if it happens again, look at the service's log",
                     http->server, http->error[0] ? http->error : curl_easy_strerror(result));
        return LWC_NO_CONTACT;
    }
}

static lwc_contact ask_once(lwc_http *http, const lwc_request *request, lwc_reply *reply)
{
    lwc_text url = {0};
    lwc_text_printf(&url, "%s%s", http->server, request->path);
    struct curl_slist *list = headers(http, request);
    lwc_text_reset(&reply->body);
    prepare(http, request, url.data, list, reply);
    CURLcode result = run(http);
    lwc_contact contact = LWC_ANSWERED;
    if (lwc_interrupted()) {
        contact = LWC_INTERRUPTED;
        lwc_complain("interrupted");
    } else if (result != CURLE_OK) {
        contact = explain(http, result);
    } else {
        char *type = NULL;
        char *location = NULL;
        curl_off_t wait_s = 0;
        (void)curl_easy_getinfo(http->curl, CURLINFO_RESPONSE_CODE, &reply->status);
        (void)curl_easy_getinfo(http->curl, CURLINFO_CONTENT_TYPE, &type);
        (void)curl_easy_getinfo(http->curl, CURLINFO_REDIRECT_URL, &location);
        (void)curl_easy_getinfo(http->curl, CURLINFO_RETRY_AFTER, &wait_s);
        copy_header(reply->type, sizeof reply->type, type);
        copy_header(reply->location, sizeof reply->location, location);
        reply->retry_after_s = wait_s > 0 && wait_s < 86400 ? (long)wait_s : wait_s > 0 ? 86400 : 0;
    }
    curl_slist_free_all(list);
    lwc_text_clear(&url);
    return contact;
}

/* Waits in small steps; false when interrupted. */
static bool wait_politely(long seconds)
{
    for (long i = 0; i < seconds * 10 && !lwc_interrupted(); i++) {
        struct timespec tenth = {.tv_sec = 0, .tv_nsec = 100 * 1000 * 1000};
        (void)nanosleep(&tenth, NULL);
    }
    return !lwc_interrupted();
}

lwc_contact lwc_http_ask(lwc_http *http, const lwc_request *request, lwc_reply *reply)
{
    for (int attempt = 0;; attempt++) {
        lwc_contact contact = ask_once(http, request, reply);
        if (contact != LWC_ANSWERED || reply->status != 503 || request->once ||
            attempt >= LWC_RETRIES || reply->retry_after_s > RETRY_WAIT_MAX_S) {
            return contact;
        }
        long wait_s = reply->retry_after_s > 0 ? reply->retry_after_s : 1;
        if (isatty(STDERR_FILENO)) {
            lwc_complain("the service is busy; asking again in %ld s (%d of %d)", wait_s,
                         attempt + 1, LWC_RETRIES);
        }
        if (!wait_politely(wait_s)) {
            lwc_complain("interrupted");
            return LWC_INTERRUPTED;
        }
    }
}
