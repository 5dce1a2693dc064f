/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The commands. Each prints its answer on standard output, its troubles on standard error, and
 * returns the exit status. */
#ifndef LWC_COMMANDS_H
#define LWC_COMMANDS_H

#include "args.h"
#include "http.h"
#include "json.h"

typedef struct lwc_session {
    const lwc_args *args;
    lwc_http *http;
} lwc_session;

int lwc_cmd_load(lwc_session *session);
int lwc_cmd_list(lwc_session *session);
int lwc_cmd_show(lwc_session *session);
int lwc_cmd_report(lwc_session *session);
int lwc_cmd_history(lwc_session *session);
int lwc_cmd_publish(lwc_session *session);
int lwc_cmd_withdraw(lwc_session *session);
int lwc_cmd_difference(lwc_session *session);
int lwc_cmd_health(lwc_session *session);
int lwc_cmd_about(lwc_session *session);
int lwc_cmd_ask(lwc_session *session);
int lwc_cmd_path(lwc_session *session);
int lwc_cmd_travel(lwc_session *session);
int lwc_cmd_replay(lwc_session *session);

/* ---- shared by the commands (talk.c) ---- */

/* Exit status for a contact that failed. */
int lwc_contact_exit(lwc_contact contact);
/* The reply's body as JSON, NULL where it is none; a fault in a JSON body is complained of. */
cJSON *lwc_reply_json(const lwc_reply *reply);
/* Prints a refusal on stderr; with --json the body also goes to stdout. Returns the status. */
int lwc_refused(lwc_session *session, const char *asked, const lwc_reply *reply,
                const cJSON *problem);
/* Asks; on success fills *out (free it) and returns LWC_EXIT_YES, with --json printing the body.
 * Everything else is told on stderr, and *out is NULL. */
int lwc_ask_json(lwc_session *session, const char *asked, const lwc_request *request,
                 cJSON **out);
/* GET of a path that is put together like printf. */
int lwc_get_json(lwc_session *session, const char *asked, cJSON **out, const char *format, ...)
    LWC_PRINTF(4, 5);
/* The body as it came, closed with a line end. */
void lwc_print_raw(const lwc_reply *reply);
void lwc_print(const lwc_text *text);
/* Words of the command, checked: a mechanism's name, a revision. False after a complaint. */
bool lwc_word_name(const lwc_session *session, size_t at, const char **out);
bool lwc_word_revision(const lwc_session *session, size_t at, long *out);
/* False after a complaint that shows how the command is written. */
bool lwc_word_count(const lwc_session *session, size_t least, size_t most, const char *usage);
/* False after a complaint. Sets 0 where `text` is NULL. */
bool lwc_read_revision(const char *text, long *out);
enum { LWC_REVISION_MAX = 1000000000 };

/* ---- shared by ask and path (cmd_ask.c) ---- */

/* Asks, shows the answer, records question and answer; the exit status. `body` is what is recorded,
 * NULL: what the answer says was asked. */
int lwc_ask_and_show(lwc_session *session, const char *kind, const char *path,
                     const lwc_request *request, const cJSON *body);

/* ---- help (help.c) ---- */
int lwc_help(const char *command);
void lwc_help_command(lwc_command command);
/* Built from completion.bash. */
extern const char lwc_completion_text[];

#endif
