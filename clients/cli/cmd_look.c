/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Commands that look: list, show, report, history, difference at the catalog; health, about at the
 * service itself. Long lists come in pages; all of them are fetched. */
#include <stdlib.h>
#include <string.h>

#include "answer.h"
#include "commands.h"
#include "table.h"

enum { PAGES_MAX = 1000 };

/* Prints `text` unless the raw body went out already; frees it and the tree. */
static int finish(lwc_session *session, cJSON *tree, lwc_text *text, int status)
{
    if (!session->args->json) {
        lwc_print(text);
    }
    lwc_text_clear(text);
    cJSON_Delete(tree);
    return status;
}

static void show_members(lwc_text *out, const cJSON *tree, const char *const *leave_out, size_t n)
{
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, tree)
    {
        bool left_out = false;
        for (size_t i = 0; i < n; i++) {
            left_out = left_out || strcmp(member->string, leave_out[i]) == 0;
        }
        if (!left_out && cJSON_IsObject(tree)) {
            lwc_value_block(out, member->string, member, 0);
        }
    }
}

/* Cuts digests in a listing to the eight digits that name a revision. */
static void shorten_digests(cJSON *rows)
{
    cJSON *row = NULL;
    cJSON_ArrayForEach(row, rows)
    {
        cJSON *digest = cJSON_GetObjectItemCaseSensitive(row, "digest");
        if (cJSON_IsString(digest) && strlen(digest->valuestring) > 8) {
            digest->valuestring[8] = '\0';
        }
    }
}

/* Fetches all pages of a listing and gathers the arrays named `list`. NULL after a complaint. */
static cJSON *all_pages(lwc_session *session, const char *path, const char *list, int *status)
{
    cJSON *rows = cJSON_CreateArray();
    char cursor[64] = "";
    for (int page = 0; page < PAGES_MAX; page++) {
        cJSON *tree = NULL;
        *status = cursor[0] == '\0'
                      ? lwc_get_json(session, "list", &tree, "%s", path)
                      : lwc_get_json(session, "list", &tree, "%s?cursor=%s", path, cursor);
        cJSON *array = cJSON_DetachItemFromObjectCaseSensitive(tree, list);
        const char *next = lwc_json_string(tree, "next");
        bool more = next != NULL && lwc_is_name(next, strlen(next), false);
        if (more) {
            (void)snprintf(cursor, sizeof cursor, "%s", next);
        }
        bool usable = cJSON_IsArray(array);
        if (tree != NULL && !usable) {
            lwc_complain("the answer has no list \"%s\"; see it with --json", list);
            *status = LWC_EXIT_ERROR;
        }
        while (usable && array->child != NULL) {
            cJSON *row = cJSON_DetachItemViaPointer(array, array->child);
            if (!cJSON_AddItemToArray(rows, row)) {
                cJSON_Delete(row);
            }
        }
        cJSON_Delete(array);
        cJSON_Delete(tree);
        if (!usable) {
            cJSON_Delete(rows);
            return NULL;
        }
        if (!more) {
            break;
        }
    }
    shorten_digests(rows);
    return rows;
}

int lwc_cmd_list(lwc_session *session)
{
    int status = LWC_EXIT_YES;
    if (!lwc_word_count(session, 0, 0, "list")) {
        return LWC_EXIT_ERROR;
    }
    cJSON *rows = all_pages(session, "/v1/mechanisms", "mechanisms", &status);
    if (rows == NULL) {
        return status;
    }
    lwc_text text = {0};
    if (rows->child == NULL) {
        lwc_text_puts(&text, "the catalog is empty\nnext: leeway load FILE\n");
    } else if (!lwc_object_table(&text, rows, 0)) {
        lwc_value_block(&text, "mechanisms", rows, 0);
    }
    return finish(session, rows, &text, status);
}

/* The revision that answers by default, or else the newest; 0 if the answer names none. */
static long default_revision(const cJSON *tree)
{
    static const char *const NAMES[] = {"answering", "revisions"};
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        double number = 0.0;
        if (lwc_json_number(tree, NAMES[i], &number) && number >= 1.0 &&
            number <= LWC_REVISION_MAX) {
            return (long)number;
        }
    }
    return 0;
}

/* The mechanism's own entry, never printed; *revision is the one to look at. */
static int look_up(lwc_session *session, const char *name, cJSON **tree, long *revision)
{
    lwc_args quiet = *session->args;
    lwc_session look = {.args = &quiet, .http = session->http};
    quiet.json = false;
    int status = lwc_get_json(&look, "show", tree, "/v1/mechanisms/%s", name);
    *revision = default_revision(*tree);
    if (*tree != NULL && *revision == 0) {
        lwc_complain("which revision of %s? See: leeway history %s", name, name);
        cJSON_Delete(*tree);
        *tree = NULL;
        status = LWC_EXIT_ERROR;
    }
    return status;
}

static bool name_and_revision(lwc_session *session, const char *usage, const char **name,
                              long *revision)
{
    return lwc_word_count(session, 1, 2, usage) && lwc_word_name(session, 0, name) &&
           (session->args->n_words < 2 || lwc_word_revision(session, 1, revision));
}

int lwc_cmd_show(lwc_session *session)
{
    static const char *const LEFT_OUT[] = {"format"};
    const char *name = NULL;
    long revision = 0;
    cJSON *entry = NULL;
    cJSON *document = NULL;
    lwc_text text = {0};
    if (!name_and_revision(session, "show NAME [REV]", &name, &revision)) {
        return LWC_EXIT_ERROR;
    }
    if (revision == 0) {
        int status = look_up(session, name, &entry, &revision);
        if (entry == NULL) {
            return status;
        }
        show_members(&text, entry, NULL, 0);
        lwc_text_printf(&text, "\ndocument of revision %ld\n", revision);
        cJSON_Delete(entry);
    }
    int status = lwc_get_json(session, "show", &document, "/v1/mechanisms/%s/revisions/%ld", name,
                              revision);
    show_members(&text, document, LEFT_OUT, 1);
    if (document == NULL) {
        lwc_text_reset(&text);
    }
    return finish(session, document, &text, status);
}

int lwc_cmd_report(lwc_session *session)
{
    static const char *const LEFT_OUT[] = {"findings"};
    const char *name = NULL;
    long revision = 0;
    cJSON *tree = NULL;
    if (!name_and_revision(session, "report NAME [REV]", &name, &revision)) {
        return LWC_EXIT_ERROR;
    }
    if (revision == 0) {
        int status = look_up(session, name, &tree, &revision);
        if (tree == NULL) {
            return status;
        }
        cJSON_Delete(tree);
    }
    int status = lwc_get_json(session, "report", &tree, "/v1/mechanisms/%s/revisions/%ld/report",
                              name, revision);
    if (tree == NULL) {
        return status;
    }
    lwc_text text = {0};
    lwc_text_printf(&text, "revision      %ld\n", revision);
    show_members(&text, tree, LEFT_OUT, 1);
    lwc_text_puts(&text, "\nfindings\n");
    if (lwc_show_findings(&text, lwc_findings(tree)) == 0) {
        lwc_text_puts(&text, "  none\n");
    }
    return finish(session, tree, &text, status);
}

int lwc_cmd_history(lwc_session *session)
{
    static const char *const LISTS[] = {"revisions", "events"};
    static const char *const ROUTES[] = {"revisions", "history"};
    const char *name = NULL;
    if (!lwc_word_count(session, 1, 1, "history NAME") || !lwc_word_name(session, 0, &name)) {
        return LWC_EXIT_ERROR;
    }
    lwc_text text = {0};
    int status = LWC_EXIT_YES;
    for (size_t i = 0; i < 2; i++) {
        char path[96];
        (void)snprintf(path, sizeof path, "/v1/mechanisms/%s/%s", name, ROUTES[i]);
        cJSON *rows = all_pages(session, path, LISTS[i], &status);
        if (rows == NULL) {
            lwc_text_clear(&text);
            return status;
        }
        lwc_text_printf(&text, "%s%s%s\n", i > 0 ? "\n" : "", LISTS[i],
                        rows->child == NULL ? "   none" : "");
        (void)lwc_object_table(&text, rows, 2);
        cJSON_Delete(rows);
    }
    return finish(session, NULL, &text, status);
}

/* "revision 2 (published, digest 1f2e3d4c)" of one side of a difference. */
static void show_side(lwc_text *out, const char *title, const cJSON *side)
{
    const char *digest = lwc_json_string(side, "digest");
    lwc_text_printf(out, "%-6srevision ", title);
    lwc_value_line(out, lwc_json_get(side, "revision"));
    lwc_text_puts(out, ", ");
    lwc_value_line(out, lwc_json_get(side, "state"));
    if (digest != NULL) {
        lwc_text_puts(out, ", digest ");
        lwc_text_safe(out, digest, strlen(digest) < 8 ? strlen(digest) : 8);
    }
    lwc_text_putc(out, '\n');
}

static void show_changes(lwc_text *out, const cJSON *changes)
{
    const cJSON *change = NULL;
    lwc_text_puts(out, changes->child == NULL ? "nothing changed\n" : "\n");
    cJSON_ArrayForEach(change, changes)
    {
        const char *text = lwc_json_string(change, "text");
        lwc_text_puts(out, "  ");
        if (text != NULL) {
            lwc_text_safe(out, text, strlen(text));
        } else {
            lwc_value_line(out, change);
        }
        lwc_text_putc(out, '\n');
    }
}

int lwc_cmd_difference(lwc_session *session)
{
    static const char *const LEFT_OUT[] = {"mechanism", "from", "to", "changes"};
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
    lwc_text_printf(&text, "%s\n", name);
    show_side(&text, "from", lwc_json_get(tree, "from"));
    show_side(&text, "to", lwc_json_get(tree, "to"));
    show_members(&text, tree, LEFT_OUT, 4);
    if (cJSON_IsArray(lwc_json_get(tree, "changes"))) {
        show_changes(&text, lwc_json_get(tree, "changes"));
    }
    return finish(session, tree, &text, status);
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
    show_members(&text, tree, NULL, 0);
    return finish(session, tree, &text, status);
}
