/* SPDX-License-Identifier: GPL-3.0-or-later */
/* leeway path: a file of moves, as JSON or as a table, is proved move by move. What the command
 * line adds (start, thresholds, units ...) goes into the JSON, or beside the table into the
 * query. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "commands.h"
#include "question.h"
#include "record.h"

enum { FILE_MAX = 4 * 1024 * 1024 };

/* ---- the query beside a table --------------------------------------------------------------- */

static void put_escaped(lwc_text *query, const char *text)
{
    static const char plain[] = "abcdefghijklmnopqrstuvwxyz"
                                "ABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-._~";
    for (const char *p = text; *p != '\0'; p++) {
        if (strchr(plain, *p) != NULL) {
            lwc_text_putc(query, *p);
        } else {
            lwc_text_printf(query, "%%%02X", (unsigned)(unsigned char)*p);
        }
    }
}

static void put_pair(lwc_text *query, const char *prefix, const char *name, const cJSON *value)
{
    lwc_text_putc(query, query->len > 0 ? '&' : '?');
    lwc_text_puts(query, prefix);
    put_escaped(query, name);
    lwc_text_putc(query, '=');
    if (cJSON_IsNumber(value)) {
        lwc_text number = {0};
        lwc_text_exact(&number, value->valuedouble);
        put_escaped(query, lwc_text_string(&number));
        lwc_text_clear(&number);
    } else {
        put_escaped(query, cJSON_IsString(value) ? value->valuestring
                           : cJSON_IsTrue(value) ? "true"
                                                 : "false");
    }
}

/* A pose's members under the names of flat notation. */
static void put_pose(lwc_text *query, const cJSON *pose)
{
    static const struct {
        const char *form;
        const char *prefix;
    } FORMS[] = {{"quaternion", "from.q"},
                 {"zyx", "from."},
                 {"rotation_vector", "from.rv"},
                 {"direction", "from.d"},
                 {"joints", "from.joint."}};
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, pose)
    {
        const char *prefix = "from.";
        for (size_t i = 0; i < sizeof FORMS / sizeof FORMS[0]; i++) {
            prefix = strcmp(member->string, FORMS[i].form) == 0 ? FORMS[i].prefix : prefix;
        }
        const cJSON *part = NULL;
        if (!cJSON_IsObject(member)) {
            put_pair(query, prefix, member->string, member);
            continue;
        }
        cJSON_ArrayForEach(part, member)
        {
            put_pair(query, prefix, part->string, part);
        }
    }
}

static bool put_start(lwc_text *query, const cJSON *from)
{
    const cJSON *member = NULL;
    if (lwc_json_get(from, "near") != NULL || lwc_json_get(from, "joints") != NULL) {
        lwc_complain("beside a table the start is given by readings or by a pose alone; put the "
                     "path into a JSON file for more");
        return false;
    }
    cJSON_ArrayForEach(member, lwc_json_get(from, "drives"))
    {
        put_pair(query, "from.drive.", member->string, member);
    }
    put_pose(query, lwc_json_get(from, "pose"));
    if (lwc_json_get(from, "mode") != NULL) {
        put_pair(query, "", "mode", lwc_json_get(from, "mode"));
    }
    return true;
}

/* The members of a question as a query string. */
static bool make_query(lwc_text *query, const cJSON *body)
{
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, body)
    {
        const cJSON *part = NULL;
        if (strcmp(member->string, "from") == 0) {
            if (!put_start(query, member)) {
                return false;
            }
        } else if (!cJSON_IsObject(member)) {
            put_pair(query, "", member->string, member);
        } else {
            cJSON_ArrayForEach(part, member)
            {
                put_pair(query, strcmp(member->string, "units") == 0 ? "units." : "margin_min.",
                         part->string, part);
            }
        }
    }
    return true;
}

/* ---- the two forms of file ------------------------------------------------------------------ */

static int ask_table(lwc_session *session, const char *path, const lwc_text *table,
                     const cJSON *options)
{
    lwc_text query = {0};
    lwc_text target = {0};
    int status = LWC_EXIT_ERROR;
    if (make_query(&query, options)) {
        lwc_text_printf(&target, "%s%s", path, lwc_text_string(&query));
        lwc_request request = {.method = "POST", .path = target.data, .body = table->data,
                               .body_len = table->len, .table = true};
        status = lwc_ask_and_show(session, "path", path, &request, NULL);
    }
    lwc_text_clear(&query);
    lwc_text_clear(&target);
    return status;
}

/* What the command line says goes into the question of the file, which must not say it too. */
static bool join(cJSON *body, const cJSON *options, const char *file)
{
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, options)
    {
        if (lwc_json_get(body, member->string) != NULL) {
            lwc_complain("%s says \"%s\" already; say it in the file or on the command line",
                         file, member->string);
            return false;
        }
        lwc_json_put(body, member->string, lwc_json_copy(member));
    }
    return true;
}

static int ask_json(lwc_session *session, const char *path, const char *file, const lwc_text *text,
                    const cJSON *options)
{
    lwc_json_fault fault;
    lwc_text json = {0};
    int status = LWC_EXIT_ERROR;
    cJSON *body = lwc_json_parse(text->data, text->len, &fault);
    if (body == NULL) {
        lwc_complain("%s, line %zu, column %zu: %s", file, fault.line, fault.column, fault.what);
        return status;
    }
    if (cJSON_IsArray(body)) { /* the moves alone */
        cJSON *whole = lwc_json_object();
        lwc_json_put(whole, "through", body);
        body = whole;
    }
    if (join(body, options, file)) {
        lwc_json_write(&json, body);
        lwc_request request = {.method = "POST", .path = path, .body = json.data,
                               .body_len = json.len};
        status = lwc_ask_and_show(session, "path", path, &request, body);
    }
    lwc_text_clear(&json);
    cJSON_Delete(body);
    return status;
}

/* JSON begins with a brace or bracket, a table with the name of a column. */
static bool is_json(const lwc_text *text)
{
    size_t blank = text->data != NULL ? strspn(text->data, " \t\r\n") : 0;
    return blank < text->len && (text->data[blank] == '{' || text->data[blank] == '[');
}

int lwc_cmd_path(lwc_session *session)
{
    const lwc_args *args = session->args;
    const char *name = NULL;
    char path[96];
    long revision = 0;
    if (!lwc_word_count(session, 2, SIZE_MAX, "path NAME FILE --from \"m1=10 m2=20\"") ||
        !lwc_word_name(session, 0, &name) || !lwc_read_revision(args->revision, &revision) ||
        (args->record != NULL && !lwc_record_check(args->record))) {
        return LWC_EXIT_ERROR;
    }
    const char *file = args->words[1];
    cJSON *options = lwc_json_object();
    lwc_text text = {0};
    lwc_text why = {0};
    int status = LWC_EXIT_ERROR;
    (void)snprintf(path, sizeof path, "/v1/mechanisms/%s/path", name);
    if (!lwc_path_options(options, args->words + 2, args->n_words - 2, args)) {
        status = LWC_EXIT_ERROR;
    } else if (!lwc_read_file(&text, file, FILE_MAX, &why)) {
        lwc_complain("%s", lwc_text_string(&why));
    } else if (is_json(&text)) {
        status = ask_json(session, path, file, &text, options);
    } else if (lwc_json_get(options, "from") == NULL) {
        lwc_complain("say where the path starts: --from \"m1=10 m2=20\", a reading for each drive, "
                     "or a pose");
    } else {
        status = ask_table(session, path, &text, options);
    }
    cJSON_Delete(options);
    lwc_text_clear(&text);
    lwc_text_clear(&why);
    return status;
}
