/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the commands share: asking, telling refusals, checking words. Declared in commands.h. */
#include <stdarg.h>
#include <stdlib.h>
#include <string.h>

#include "answer.h"
#include "commands.h"

int lwc_contact_exit(lwc_contact contact)
{
    return contact == LWC_ANSWERED     ? LWC_EXIT_YES
           : contact == LWC_NO_CONTACT ? LWC_EXIT_NO_CONTACT
                                       : LWC_EXIT_ERROR;
}

cJSON *lwc_reply_json(const lwc_reply *reply)
{
    lwc_json_fault fault;
    bool claims = strstr(reply->type, "json") != NULL;
    if (reply->body.len == 0) {
        return NULL;
    }
    cJSON *tree = lwc_json_parse(reply->body.data, reply->body.len, &fault);
    if (tree == NULL && claims) {
        lwc_complain("the answer says it is JSON and is not: %s (line %zu, column %zu)", fault.what,
                     fault.line, fault.column);
    }
    return tree;
}

void lwc_print_raw(const lwc_reply *reply)
{
    (void)fwrite(reply->body.data, 1, reply->body.len, stdout);
    if (reply->body.len == 0 || reply->body.data[reply->body.len - 1] != '\n') {
        (void)fputc('\n', stdout);
    }
}

void lwc_print(const lwc_text *text)
{
    (void)fwrite(lwc_text_string(text), 1, text->len, stdout);
}

int lwc_refused(lwc_session *session, const char *asked, const lwc_reply *reply,
                const cJSON *problem)
{
    lwc_text text = {0};
    if (session->args->json && problem != NULL) {
        lwc_print_raw(reply);
    }
    lwc_show_refusal(&text, session->http, asked, reply, problem);
    (void)fflush(stdout);
    (void)fputs(lwc_text_string(&text), stderr);
    lwc_text_clear(&text);
    return LWC_EXIT_ERROR;
}

int lwc_ask_json(lwc_session *session, const char *asked, const lwc_request *request, cJSON **out)
{
    lwc_reply reply = {0};
    *out = NULL;
    lwc_contact contact = lwc_http_ask(session->http, request, &reply);
    int status = lwc_contact_exit(contact);
    if (contact == LWC_ANSWERED) {
        cJSON *tree = lwc_reply_json(&reply);
        bool good = reply.status >= 200 && reply.status < 300;
        if (good && tree != NULL) {
            if (session->args->json) {
                lwc_print_raw(&reply);
            }
            *out = tree;
            tree = NULL;
        } else {
            status = lwc_refused(session, asked, &reply, tree);
        }
        cJSON_Delete(tree);
    }
    lwc_text_clear(&reply.body);
    return status;
}

int lwc_get_json(lwc_session *session, const char *asked, cJSON **out, const char *format, ...)
{
    char path[512];
    va_list args;
    va_start(args, format);
    (void)vsnprintf(path, sizeof path, format, args);
    va_end(args);
    lwc_request request = {.method = "GET", .path = path};
    return lwc_ask_json(session, asked, &request, out);
}

bool lwc_word_name(const lwc_session *session, size_t at, const char **out)
{
    const char *word = session->args->words[at];
    if (!lwc_is_name(word, strlen(word), false)) {
        lwc_complain("\"%s\" is no mechanism's name: lower case letters, digits and hyphens, at "
                     "most 32; see: leeway list",
                     word);
        return false;
    }
    *out = word;
    return true;
}

bool lwc_read_revision(const char *text, long *out)
{
    *out = 0;
    if (text != NULL && !lwc_read_count(text, LWC_REVISION_MAX, out)) {
        lwc_complain("\"%s\" is no revision: expected a whole number from 1 on; see: leeway "
                     "history NAME",
                     text);
        return false;
    }
    return true;
}

bool lwc_word_revision(const lwc_session *session, size_t at, long *out)
{
    return lwc_read_revision(session->args->words[at], out);
}

bool lwc_word_count(const lwc_session *session, size_t least, size_t most, const char *usage)
{
    size_t n = session->args->n_words;
    if (n < least || n > most) {
        lwc_complain("write it as: leeway %s; more: leeway help %s", usage,
                     lwc_command_name(session->args->command));
        return false;
    }
    return true;
}
