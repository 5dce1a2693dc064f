/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Commands about the catalog: load, list, show, report, history, publish, withdraw, difference;
 * and about the service: health, about. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "answer.h"
#include "commands.h"
#include "table.h"

enum { DOCUMENT_MAX = 4 * 1024 * 1024 };

/* Prints `tree` unless the raw body went out already; frees it. */
static int finish(lwc_session *session, cJSON *tree, lwc_text *text, int status)
{
    if (!session->args->json) {
        lwc_print(text);
    }
    lwc_text_clear(text);
    cJSON_Delete(tree);
    return status;
}

/* Every member of an object, or a bare array, by name. */
static void show_all(lwc_text *out, const cJSON *tree)
{
    if (cJSON_IsObject(tree)) {
        const cJSON *member = NULL;
        cJSON_ArrayForEach(member, tree)
        {
            lwc_value_block(out, member->string, member, 0);
        }
    } else {
        lwc_value_block(out, "answer", tree, 0);
    }
}

/* ---- load ----------------------------------------------------------------------------------- */

/* Codes of the warnings, as --accept wants them; empty where there are none. */
static void warning_codes(lwc_text *out, const cJSON *findings)
{
    const cJSON *finding = NULL;
    cJSON_ArrayForEach(finding, findings)
    {
        const char *severity = lwc_json_string(finding, "severity");
        const char *code = lwc_json_string(finding, "code");
        code = code != NULL ? code : lwc_json_string(finding, "finding");
        if (severity != NULL && strcmp(severity, "warning") == 0 && code != NULL &&
            strstr(lwc_text_string(out), code) == NULL) {
            lwc_text_puts(out, out->len > 0 ? "," : "");
            lwc_text_safe(out, code, strlen(code));
        }
    }
}

static void show_loaded(lwc_text *out, const char *file, const char *name, long status,
                        const cJSON *answer)
{
    double revision = 0.0;
    const char *state = lwc_json_string(answer, "state");
    const char *digest = lwc_json_string(answer, "digest");
    bool known = lwc_json_number(answer, "revision", &revision);
    lwc_text_printf(out, "%s: %s", file, name);
    if (known) {
        lwc_text_printf(out, " revision %.0f", revision);
    }
    lwc_text_puts(out, status == 201 ? ", stored as a new draft" : ", stored before");
    if (state != NULL && status != 201) {
        lwc_text_puts(out, ", ");
        lwc_text_safe(out, state, strlen(state));
    }
    if (digest != NULL) {
        lwc_text_puts(out, ", digest ");
        lwc_text_safe(out, digest, strlen(digest) < 8 ? strlen(digest) : 8);
    }
    lwc_text_putc(out, '\n');
    size_t count = lwc_show_findings(out, lwc_findings(answer));
    lwc_text codes = {0};
    warning_codes(&codes, lwc_findings(answer));
    if (count == 0) {
        lwc_text_puts(out, "  no findings\n");
    }
    if (known && (state == NULL || strcmp(state, "published") != 0)) {
        lwc_text_printf(out, "  next: leeway report %s %.0f; then leeway publish %s %.0f%s%s\n",
                        name, revision, name, revision, codes.len > 0 ? " --accept " : "",
                        lwc_text_string(&codes));
    }
    lwc_text_clear(&codes);
}

/* The name the document gives itself, into `name` (at least 33 bytes); false after a complaint. */
static bool document_name(char *name, const char *file, const lwc_text *document)
{
    lwc_json_fault fault;
    cJSON *tree = lwc_json_parse(document->data, document->len, &fault);
    if (tree == NULL) {
        lwc_complain("%s, line %zu, column %zu: %s\n        next: correct it there and load again",
                     file, fault.line, fault.column, fault.what);
        return false;
    }
    const char *own = lwc_json_string(tree, "name");
    bool ok = own != NULL && lwc_is_name(own, strlen(own), false);
    if (ok) {
        (void)snprintf(name, 33, "%s", own);
    } else {
        lwc_complain("%s: at /name: expected a name of lower case letters, digits and hyphens, at "
                     "most 32, got %s",
                     file, own == NULL ? "none" : "another");
    }
    cJSON_Delete(tree);
    return ok;
}

static int load_one(lwc_session *session, const char *file)
{
    lwc_text document = {0};
    lwc_text why = {0};
    char name[33] = "";
    char path[80];
    int status = LWC_EXIT_ERROR;
    if (!lwc_read_file(&document, file, DOCUMENT_MAX, &why)) {
        lwc_complain("%s", lwc_text_string(&why));
    } else if (document_name(name, file, &document)) {
        lwc_reply reply = {0};
        (void)snprintf(path, sizeof path, "/v1/mechanisms/%s", name);
        lwc_request request = {.method = "PUT", .path = path, .body = document.data,
                               .body_len = document.len};
        lwc_contact contact = lwc_http_ask(session->http, &request, &reply);
        status = lwc_contact_exit(contact);
        cJSON *answer = contact == LWC_ANSWERED ? lwc_reply_json(&reply) : NULL;
        if (contact != LWC_ANSWERED) {
            /* told already */
        } else if ((reply.status == 200 || reply.status == 201) && answer != NULL) {
            lwc_text text = {0};
            if (session->args->json) {
                lwc_print_raw(&reply);
            } else {
                show_loaded(&text, file, name, reply.status, answer);
                lwc_print(&text);
            }
            lwc_text_clear(&text);
        } else {
            (void)fflush(stdout);
            if (!session->args->json) {
                (void)fprintf(stderr, "%s: not stored\n", file);
            }
            status = lwc_refused(session, "load", &reply, answer);
        }
        cJSON_Delete(answer);
        lwc_text_clear(&reply.body);
    }
    lwc_text_clear(&document);
    lwc_text_clear(&why);
    return status;
}

int lwc_cmd_load(lwc_session *session)
{
    if (!lwc_word_count(session, 1, SIZE_MAX, "load FILE...")) {
        return LWC_EXIT_ERROR;
    }
    int worst = LWC_EXIT_YES;
    for (size_t i = 0; i < session->args->n_words && !lwc_interrupted(); i++) {
        int status = load_one(session, session->args->words[i]);
        worst = status > worst ? status : worst;
        if (status == LWC_EXIT_NO_CONTACT) {
            break; /* the next file would wait in vain as well */
        }
    }
    return worst;
}

/* ---- looking -------------------------------------------------------------------------------- */

/* The first array member of an object, or the value itself if it is an array. */
static const cJSON *rows_of(const cJSON *tree, const char *name)
{
    if (cJSON_IsArray(tree)) {
        return tree;
    }
    const cJSON *rows = lwc_json_get(tree, name);
    return cJSON_IsArray(rows) ? rows : NULL;
}

int lwc_cmd_list(lwc_session *session)
{
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 0, 0, "list")) {
        return LWC_EXIT_ERROR;
    }
    int status = lwc_get_json(session, "list", &tree, "/v1/mechanisms");
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    const cJSON *rows = rows_of(tree, "mechanisms");
    if (rows != NULL && rows->child == NULL) {
        lwc_text_puts(&text, "the catalog is empty\nnext: leeway load FILE\n");
    } else if (rows == NULL || !lwc_object_table(&text, rows, 0)) {
        show_all(&text, tree);
    }
    return finish(session, tree, &text, status);
}

/* Document, wherever the answer holds it. */
static const cJSON *document_of(const cJSON *tree)
{
    const cJSON *document = lwc_json_get(tree, "document");
    return cJSON_IsObject(document) ? document : tree;
}

/* Joint "between" two bodies, drive range and so on, one table a group. */
static void show_document(lwc_text *out, const cJSON *document)
{
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, document)
    {
        if (strcmp(member->string, "format") != 0) {
            lwc_value_block(out, member->string, member, 0);
        }
    }
}

int lwc_cmd_show(lwc_session *session)
{
    const char *name = NULL;
    long revision = 0;
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 1, 2, "show NAME [REV]") || !lwc_word_name(session, 0, &name) ||
        (session->args->n_words > 1 && !lwc_word_revision(session, 1, &revision))) {
        return LWC_EXIT_ERROR;
    }
    int status = revision > 0 ? lwc_get_json(session, "show", &tree,
                                             "/v1/mechanisms/%s/revisions/%ld", name, revision)
                              : lwc_get_json(session, "show", &tree, "/v1/mechanisms/%s", name);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    const cJSON *document = document_of(tree);
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, tree)
    {
        if (document != tree && member != document) {
            lwc_value_block(&text, member->string, member, 0);
        }
    }
    if (document != tree) {
        lwc_text_putc(&text, '\n');
    }
    show_document(&text, document);
    return finish(session, tree, &text, status);
}

/* The revision that answers by default, or else the newest; 0 if the answer names none. */
static long default_revision(const cJSON *tree)
{
    static const char *const NAMES[] = {"answering", "published", "revision", "latest"};
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        double number = 0.0;
        const cJSON *inner = lwc_json_get(tree, NAMES[i]);
        if ((lwc_json_number(tree, NAMES[i], &number) ||
             lwc_json_number(inner, "revision", &number)) &&
            number >= 1.0 && number <= LWC_REVISION_MAX) {
            return (long)number;
        }
    }
    return 0;
}

int lwc_cmd_report(lwc_session *session)
{
    const char *name = NULL;
    long revision = 0;
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 1, 2, "report NAME [REV]") || !lwc_word_name(session, 0, &name) ||
        (session->args->n_words > 1 && !lwc_word_revision(session, 1, &revision))) {
        return LWC_EXIT_ERROR;
    }
    if (revision == 0) {
        lwc_args quiet = *session->args;
        lwc_session look = {.args = &quiet, .http = session->http};
        quiet.json = false;
        int status = lwc_get_json(&look, "report", &tree, "/v1/mechanisms/%s", name);
        if (tree == NULL) {
            return status;
        }
        revision = default_revision(tree);
        cJSON_Delete(tree);
        if (revision == 0) {
            lwc_complain("which revision? See: leeway history %s; then: leeway report %s REV", name,
                         name);
            return LWC_EXIT_ERROR;
        }
    }
    int status = lwc_get_json(session, "report", &tree, "/v1/mechanisms/%s/revisions/%ld/report",
                              name, revision);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    const cJSON *findings = lwc_findings(tree);
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, tree)
    {
        if (member != findings) {
            lwc_value_block(&text, member->string, member, 0);
        }
    }
    if (findings != NULL) {
        lwc_text_puts(&text, "\nfindings\n");
        if (lwc_show_findings(&text, findings) == 0) {
            lwc_text_puts(&text, "  none\n");
        }
    }
    return finish(session, tree, &text, status);
}

int lwc_cmd_history(lwc_session *session)
{
    const char *name = NULL;
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 1, 1, "history NAME") || !lwc_word_name(session, 0, &name)) {
        return LWC_EXIT_ERROR;
    }
    int status = lwc_get_json(session, "history", &tree, "/v1/mechanisms/%s/revisions", name);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    show_all(&text, tree);
    return finish(session, tree, &text, status);
}

int lwc_cmd_difference(lwc_session *session)
{
    const char *name = NULL;
    long from = 0;
    long to = 0;
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 3, 3, "difference NAME A B") ||
        !lwc_word_name(session, 0, &name) || !lwc_word_revision(session, 1, &from) ||
        !lwc_word_revision(session, 2, &to)) {
        return LWC_EXIT_ERROR;
    }
    int status = lwc_get_json(session, "difference", &tree,
                              "/v1/mechanisms/%s/difference?from=%ld&to=%ld", name, from, to);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    show_all(&text, tree);
    return finish(session, tree, &text, status);
}

/* ---- publish, withdraw ---------------------------------------------------------------------- */

static bool put_accept(cJSON *body, const char *list)
{
    cJSON *array = cJSON_CreateArray();
    lwc_json_put(body, "accept", array);
    for (const char *p = list; *p != '\0';) {
        char code[64];
        size_t len = strcspn(p, ", ");
        if (len >= sizeof code) {
            lwc_complain("--accept \"%s\": expected warning codes with commas between; see: leeway "
                         "report NAME REV",
                         list);
            return false;
        }
        memcpy(code, p, len);
        code[len] = '\0';
        cJSON *item = len > 0 ? cJSON_CreateString(code) : NULL;
        if (item != NULL && !cJSON_AddItemToArray(array, item)) {
            cJSON_Delete(item);
        }
        p += len;
        p += *p != '\0';
    }
    return true;
}

static int change_state(lwc_session *session, const char *verb, const char *done)
{
    const char *name = NULL;
    long revision = 0;
    char path[128];
    char usage[48];
    (void)snprintf(usage, sizeof usage, "%s NAME REV", verb);
    if (!lwc_word_count(session, 2, 2, usage) || !lwc_word_name(session, 0, &name) ||
        !lwc_word_revision(session, 1, &revision)) {
        return LWC_EXIT_ERROR;
    }
    cJSON *body = lwc_json_object();
    if (session->args->accept != NULL && !put_accept(body, session->args->accept)) {
        cJSON_Delete(body);
        return LWC_EXIT_ERROR;
    }
    if (session->args->reason != NULL) {
        lwc_json_put_string(body, "reason", session->args->reason);
    }
    lwc_text json = {0};
    lwc_json_write(&json, body);
    (void)snprintf(path, sizeof path, "/v1/mechanisms/%s/revisions/%ld/%s", name, revision, verb);
    lwc_request request = {.method = "POST", .path = path, .body = json.data,
                           .body_len = json.len};
    cJSON *tree = NULL;
    int status = lwc_ask_json(session, verb, &request, &tree);
    lwc_text_clear(&json);
    cJSON_Delete(body);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    lwc_text_printf(&text, "%s revision %ld %s\n", name, revision, done);
    (void)lwc_show_findings(&text, lwc_findings(tree));
    return finish(session, tree, &text, status);
}

int lwc_cmd_publish(lwc_session *session)
{
    return change_state(session, "publish", "is published and answers from now on");
}

int lwc_cmd_withdraw(lwc_session *session)
{
    return change_state(session, "withdraw",
                        "is withdrawn; to let another answer: leeway publish NAME REV");
}

/* ---- the service ---------------------------------------------------------------------------- */

int lwc_cmd_health(lwc_session *session)
{
    static const char *const PATHS[] = {"/healthz", "/readyz"};
    static const char *const WORDS[] = {"alive", "ready"};
    int status = LWC_EXIT_YES;
    if (!lwc_word_count(session, 0, 0, "health")) {
        return LWC_EXIT_ERROR;
    }
    for (size_t i = 0; i < 2; i++) {
        lwc_reply reply = {0};
        lwc_request request = {.method = "GET", .path = PATHS[i], .once = true};
        lwc_contact contact = lwc_http_ask(session->http, &request, &reply);
        bool yes = reply.status >= 200 && reply.status < 300;
        if (contact != LWC_ANSWERED) {
            lwc_text_clear(&reply.body);
            return lwc_contact_exit(contact);
        }
        if (session->args->json) {
            lwc_print_raw(&reply);
        } else {
            (void)printf("%-6s %s (%s answered %ld)\n", WORDS[i], yes ? "yes" : "no", PATHS[i],
                         reply.status);
        }
        status = yes ? status : LWC_EXIT_NO;
        lwc_text_clear(&reply.body);
    }
    return status;
}

int lwc_cmd_about(lwc_session *session)
{
    cJSON *tree = NULL;
    if (!lwc_word_count(session, 0, 0, "about")) {
        return LWC_EXIT_ERROR;
    }
    int status = lwc_get_json(session, "about", &tree, "/about");
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    show_all(&text, tree);
    return finish(session, tree, &text, status);
}
