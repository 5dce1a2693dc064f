/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Commands that change the catalog: load, publish, withdraw. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "answer.h"
#include "commands.h"

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

/* ---- load ----------------------------------------------------------------------------------- */

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
    lwc_finding_codes(&codes, lwc_findings(answer), "warning");
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
    const cJSON *changed = lwc_json_get(tree, "changed");
    lwc_text_printf(&text, "%s revision %ld %s%s\n", name, revision, done,
                    cJSON_IsFalse(changed) ? " (it was so already)" : "");
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
