/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The only libcurl of the command line: one request, one bounded answer, polite retries, and an
 * end to waiting when the user interrupts. */
#ifndef LWC_HTTP_H
#define LWC_HTTP_H

#include "text.h"

enum { LWC_ANSWER_MAX = 64 * 1024 * 1024, LWC_RETRIES = 3 };

typedef struct lwc_http lwc_http;

typedef struct lwc_http_settings {
    const char *server;     /* http://host[:port][/prefix] */
    const char *token_file; /* or NULL */
    double timeout_s;
} lwc_http_settings;

typedef struct lwc_reply {
    long status;        /* of the last attempt */
    lwc_text body;
    char type[96];      /* content type, "" where none was sent */
    char location[256]; /* where a redirect would lead, "" otherwise */
    long retry_after_s;
} lwc_reply;

typedef struct lwc_request {
    const char *method; /* GET, POST, PUT */
    const char *path;   /* from the slash on, already escaped */
    const char *body;   /* or NULL */
    size_t body_len;
    const char *accept; /* or NULL for JSON */
    bool table;         /* the body is CSV, not JSON */
    bool once;          /* take a 503 for an answer, do not ask again */
} lwc_request;

typedef enum lwc_contact {
    LWC_ANSWERED,
    LWC_NO_CONTACT,  /* nobody there, or no answer in time */
    LWC_UNUSABLE,    /* an answer came, but it cannot be used (too large, broken) */
    LWC_INTERRUPTED  /* the user pressed Ctrl-C */
} lwc_contact;

/* NULL after a complaint (a URL or token file that cannot be used). */
lwc_http *lwc_http_new(const lwc_http_settings *settings);
void lwc_http_free(lwc_http *http);
const char *lwc_http_server(const lwc_http *http);
bool lwc_http_has_token(const lwc_http *http);

/* Asks, and asks again up to LWC_RETRIES times where the service says 503. Complains on stderr
 * for everything but LWC_ANSWERED. Clear the reply's body in every case. */
lwc_contact lwc_http_ask(lwc_http *http, const lwc_request *request, lwc_reply *reply);

/* From now on Ctrl-C ends the waiting instead of the program. */
void lwc_interrupt_watch(void);
bool lwc_interrupted(void);
/* Ends the program by the signal that came, as a shell expects; call it after cleaning up. */
void lwc_interrupt_finish(void);

#endif
