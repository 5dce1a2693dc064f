/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Files of recorded questions; see replay_file.h. Every member is checked before anything is asked:
 * a file written by hand deserves to be told what is wrong, with its line. */
#include "replay_file.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Questions that may be asked again: they answer at once and change nothing. */
static const char *const POST_QUESTIONS[] = {"inverse", "forward",     "jacobian",   "margin",
                                             "reach",   "path",        "free-travel",
                                             "consistency"};
static const char *const GET_QUESTIONS[] = {"margin", "reach", "modes", "difference"};

static bool blame(lwc_text *why, size_t line, const char *what)
{
    lwc_text_printf(why, "line %zu: %s", line, what);
    return false;
}

/* Next line that is not blank; false at the end. */
static bool next_line(lwc_replay *replay, const char **text, size_t *len)
{
    while (replay->at < replay->len) {
        const char *start = replay->data + replay->at;
        const char *end = memchr(start, '\n', replay->len - replay->at);
        size_t n = end != NULL ? (size_t)(end - start) : replay->len - replay->at;
        replay->at += n + (end != NULL);
        replay->line++;
        while (n > 0 && (start[n - 1] == '\r' || start[n - 1] == ' ' || start[n - 1] == '\t')) {
            n--;
        }
        if (n > 0) {
            *text = start;
            *len = n;
            return true;
        }
    }
    return false;
}

static cJSON *parse_line(size_t line, const char *text, size_t len, lwc_text *why)
{
    lwc_json_fault fault;
    cJSON *tree = lwc_json_parse(text, len, &fault);
    if (tree == NULL) {
        lwc_text_printf(why, "line %zu, column %zu: %s", line, fault.column, fault.what);
    } else if (!cJSON_IsObject(tree)) {
        (void)blame(why, line, "expected one JSON object on each line");
        cJSON_Delete(tree);
        tree = NULL;
    }
    return tree;
}

/* "line 3: /tolerance/length: expected ..." */
static bool blame_at(lwc_text *why, size_t line, const char *group, const char *name,
                     const char *what)
{
    lwc_text pointer = {0};
    lwc_pointer_add(&pointer, group);
    if (name != NULL) {
        lwc_pointer_add(&pointer, name);
    }
    lwc_text_printf(why, "line %zu: ", line);
    lwc_text_safe(why, pointer.data, pointer.len);
    lwc_text_printf(why, ": %s", what);
    lwc_text_clear(&pointer);
    return false;
}

static bool is_tolerance(const cJSON *item)
{
    return cJSON_IsNumber(item) && item->valuedouble >= 0.0;
}

/* The members a head and a question share. */
static bool check_rules(const cJSON *tree, size_t line, lwc_text *why)
{
    static const char *const LISTS[] = {"check", "ignore"};
    const cJSON *tolerance = lwc_json_get(tree, "tolerance");
    const cJSON *at = lwc_json_get(tree, "at");
    const cJSON *item = NULL;
    if ((tolerance != NULL && !cJSON_IsObject(tolerance)) || (at != NULL && !cJSON_IsObject(at))) {
        return blame(why, line, "\"tolerance\" and \"at\" are objects of numbers");
    }
    cJSON_ArrayForEach(item, tolerance)
    {
        lwc_unit_kind kind;
        if (!lwc_unit_kind_find(&kind, item->string)) {
            return blame_at(why, line, "tolerance", item->string,
                            "expected length_mm, angle_deg, ratio or reading");
        }
        if (!is_tolerance(item)) {
            return blame_at(why, line, "tolerance", item->string,
                            "expected a number that is not negative");
        }
    }
    cJSON_ArrayForEach(item, at)
    {
        if (item->string[0] != '/') {
            return blame_at(why, line, "at", item->string,
                            "expected a pointer such as /solutions/*/drives/m1");
        }
        if (!is_tolerance(item)) {
            return blame_at(why, line, "at", item->string,
                            "expected a number that is not negative");
        }
    }
    for (size_t i = 0; i < 2; i++) {
        const cJSON *list = lwc_json_get(tree, LISTS[i]);
        bool ok = list == NULL || cJSON_IsArray(list);
        cJSON_ArrayForEach(item, list)
        {
            ok = ok && cJSON_IsString(item);
        }
        if (!ok) {
            return blame_at(why, line, LISTS[i], NULL, "expected an array of member names");
        }
    }
    return true;
}

static bool check_names(const cJSON *tree, const char *const *known, size_t count, size_t line,
                        lwc_text *why)
{
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, tree)
    {
        bool found = false;
        for (size_t i = 0; i < count; i++) {
            found = found || strcmp(item->string, known[i]) == 0;
        }
        if (!found) {
            return blame_at(why, line, item->string, NULL,
                            lwc_starts(item->string, "expect") ? "unknown member; it is \"expect\""
                                                               : "unknown member");
        }
    }
    return true;
}

bool lwc_replay_open(lwc_replay *replay, const char *data, size_t len, lwc_text *why)
{
    static const char *const KNOWN[] = {"format", "title", "tolerance", "at", "check", "ignore"};
    *replay = (lwc_replay){.data = data, .len = len};
    const char *text = NULL;
    size_t n = 0;
    if (!next_line(replay, &text, &n)) {
        lwc_text_puts(why, "the file is empty; its first line should be "
                           "{\"format\":\"" LWC_REPLAY_FORMAT "\"}");
        return false;
    }
    replay->head = parse_line(replay->line, text, n, why);
    if (replay->head == NULL) {
        return false;
    }
    const char *format = lwc_json_string(replay->head, "format");
    if (format == NULL || strcmp(format, LWC_REPLAY_FORMAT) != 0) {
        return blame(why, replay->line,
                     "expected the head {\"format\":\"" LWC_REPLAY_FORMAT "\"}");
    }
    return check_names(replay->head, KNOWN, sizeof KNOWN / sizeof KNOWN[0], replay->line, why) &&
           check_rules(replay->head, replay->line, why);
}

void lwc_replay_close(lwc_replay *replay)
{
    cJSON_Delete(replay->head);
    replay->head = NULL;
}

static bool is_one_of(const char *word, size_t len, const char *const *list, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        if (strlen(list[i]) == len && memcmp(list[i], word, len) == 0) {
            return true;
        }
    }
    return false;
}

/* "/v1/mechanisms/NAME/QUESTION", for GET with a query or "/revisions/N/report" as well. */
static bool is_question_path(const char *path, bool get)
{
    static const char PREFIX[] = "/v1/mechanisms/";
    if (!lwc_starts(path, PREFIX) || strlen(path) > LWC_REPLAY_PATH_MAX) {
        return false;
    }
    for (const char *p = path; *p != '\0'; p++) {
        if (*p <= 0x20 || *p >= 0x7f || strchr("#\\\"<>", *p) != NULL) {
            return false;
        }
    }
    const char *name = path + strlen(PREFIX);
    size_t name_len = strcspn(name, "/?");
    if (!lwc_is_name(name, name_len, false) || name[name_len] != '/') {
        return false;
    }
    const char *word = name + name_len + 1;
    size_t len = strcspn(word, "?");
    if (!get) {
        return word[len] == '\0' &&
               is_one_of(word, len, POST_QUESTIONS,
                         sizeof POST_QUESTIONS / sizeof POST_QUESTIONS[0]);
    }
    if (is_one_of(word, len, GET_QUESTIONS, sizeof GET_QUESTIONS / sizeof GET_QUESTIONS[0])) {
        return true;
    }
    size_t digits = lwc_starts(word, "revisions/") ? strspn(word + 10, "0123456789") : 0;
    return digits > 0 && strcmp(word + 10 + digits, "/report") == 0;
}

static bool check_entry(lwc_replay_entry *entry, lwc_text *why)
{
    static const char *const KNOWN[] = {"method", "path",  "body",   "status", "expect",
                                        "note",   "tolerance", "at", "check",  "ignore"};
    const cJSON *tree = entry->tree;
    if (!check_names(tree, KNOWN, sizeof KNOWN / sizeof KNOWN[0], entry->line, why)) {
        return false;
    }
    entry->method = lwc_json_string(tree, "method");
    entry->path = lwc_json_string(tree, "path");
    entry->body = lwc_json_get(tree, "body");
    entry->expect = lwc_json_get(tree, "expect");
    entry->note = lwc_json_string(tree, "note");
    bool get = entry->method != NULL && strcmp(entry->method, "GET") == 0;
    if (!get && (entry->method == NULL || strcmp(entry->method, "POST") != 0)) {
        return blame_at(why, entry->line, "method", NULL, "expected \"POST\" or \"GET\"");
    }
    if (entry->path == NULL || !is_question_path(entry->path, get)) {
        return blame_at(why, entry->line, "path", NULL,
                        "expected a question such as /v1/mechanisms/NAME/inverse (a replay asks, "
                        "it never changes anything)");
    }
    if (get ? entry->body != NULL : !cJSON_IsObject(entry->body)) {
        return blame_at(why, entry->line, "body", NULL,
                        get ? "GET has no body" : "expected the question, an object");
    }
    if (!cJSON_IsObject(entry->expect) && !cJSON_IsArray(entry->expect)) {
        return blame_at(why, entry->line, "expect", NULL, "expected the answer, or a part of it");
    }
    double status = 200.0;
    const cJSON *item = lwc_json_get(tree, "status");
    if (item != NULL && (!lwc_json_number(tree, "status", &status) || status < 200.0 ||
                         status > 599.0 || floor(status) < status)) {
        return blame_at(why, entry->line, "status", NULL, "expected an HTTP status, 200 to 599");
    }
    entry->status = (long)status;
    if (lwc_json_get(tree, "note") != NULL && entry->note == NULL) {
        return blame_at(why, entry->line, "note", NULL, "expected a text");
    }
    return check_rules(tree, entry->line, why);
}

int lwc_replay_next(lwc_replay *replay, lwc_replay_entry *entry, lwc_text *why)
{
    *entry = (lwc_replay_entry){0};
    if (!next_line(replay, &entry->text, &entry->text_len)) {
        return 0;
    }
    entry->line = replay->line;
    entry->tree = parse_line(entry->line, entry->text, entry->text_len, why);
    if (entry->tree == NULL || !check_entry(entry, why)) {
        lwc_replay_entry_clear(entry);
        return -1;
    }
    return 1;
}

void lwc_replay_entry_clear(lwc_replay_entry *entry)
{
    cJSON_Delete(entry->tree);
    *entry = (lwc_replay_entry){0};
}

bool lwc_replay_tolerance(lwc_tolerance *tolerance, const char *list, lwc_text *why)
{
    const char *p = list;
    while (*p != '\0') {
        char part[64];
        size_t len = strcspn(p, ",");
        char *equals = NULL;
        double value = 0.0;
        lwc_unit_kind kind;
        if (len < sizeof part) {
            memcpy(part, p, len);
            part[len] = '\0';
            equals = strchr(part, '=');
        }
        if (equals != NULL) {
            *equals = '\0';
        }
        if (equals == NULL || !lwc_unit_kind_find(&kind, part) ||
            !lwc_read_number(equals + 1, &value) || value < 0.0) {
            lwc_text_printf(why, "\"%s\": expected length_mm=V,angle_deg=V,ratio=V,reading=V, any "
                                 "of them",
                            list);
            return false;
        }
        tolerance->by_kind[kind] = value;
        p += len;
        p += *p == ',';
    }
    return true;
}

void lwc_replay_rules(lwc_compare_rules *out, const lwc_replay *replay,
                      const lwc_replay_entry *entry, const char *tolerance)
{
    *out = (lwc_compare_rules){.tolerance = LWC_TOLERANCE_DEFAULT,
                               .source = {entry->tree, replay->head}};
    for (size_t i = 2; i-- > 0;) {
        const cJSON *item = NULL;
        cJSON_ArrayForEach(item, lwc_json_get(out->source[i], "tolerance"))
        {
            lwc_unit_kind kind;
            if (lwc_unit_kind_find(&kind, item->string)) {
                out->tolerance.by_kind[kind] = item->valuedouble;
            }
        }
    }
    if (tolerance != NULL) {
        lwc_text ignored = {0};
        (void)lwc_replay_tolerance(&out->tolerance, tolerance, &ignored);
        lwc_text_clear(&ignored);
    }
}

void lwc_replay_path(lwc_text *out, const lwc_replay_entry *entry, const char *mechanism,
                     long revision)
{
    const char *name = entry->path + strlen("/v1/mechanisms/");
    const char *rest = name + strcspn(name, "/");
    lwc_text_puts(out, "/v1/mechanisms/");
    if (mechanism != NULL) {
        lwc_text_puts(out, mechanism);
    } else {
        lwc_text_add(out, name, (size_t)(rest - name));
    }
    const char *query = strchr(rest, '?');
    if (revision == 0 || entry->body != NULL || lwc_starts(rest, "/difference")) {
        lwc_text_puts(out, rest);
        return;
    }
    if (lwc_starts(rest, "/revisions/")) {
        lwc_text_printf(out, "/revisions/%ld/report", revision);
        return;
    }
    lwc_text_add(out, rest, query != NULL ? (size_t)(query - rest) : strlen(rest));
    lwc_text_printf(out, "?revision=%ld", revision);
    while (query != NULL && *query != '\0') {
        query++; /* past '?' or '&' */
        size_t len = strcspn(query, "&");
        if (len > 0 && !lwc_starts(query, "revision=") && !lwc_starts(query, "expect=")) {
            lwc_text_putc(out, '&');
            lwc_text_add(out, query, len);
        }
        query += len;
    }
}

cJSON *lwc_replay_body(const lwc_replay_entry *entry, long revision)
{
    if (entry->body == NULL) {
        return NULL;
    }
    cJSON *body = lwc_json_copy(entry->body);
    if (revision > 0) {
        cJSON *member = NULL;
        cJSON_ArrayForEach(member, lwc_json_get(body, "batch"))
        {
            lwc_json_drop(member, "revision");
            lwc_json_drop(member, "expect");
        }
        lwc_json_drop(body, "revision");
        lwc_json_drop(body, "expect");
        lwc_json_put_number(body, "revision", (double)revision);
    }
    return body;
}

void lwc_replay_write_head(lwc_text *out)
{
    lwc_text_puts(out, "{\"format\":\"" LWC_REPLAY_FORMAT "\"}\n");
}

void lwc_replay_write(lwc_text *out, const char *path, const cJSON *body, long status,
                      const cJSON *answer)
{
    lwc_text_puts(out, "{\"method\":\"POST\",\"path\":");
    lwc_json_write_string(out, path);
    lwc_text_puts(out, ",\"body\":");
    lwc_json_write(out, body);
    lwc_text_printf(out, ",\"status\":%ld,\"expect\":", status);
    lwc_json_write(out, answer);
    lwc_text_puts(out, "}\n");
}

void lwc_replay_rewrite(lwc_text *out, const lwc_replay_entry *entry, long status,
                        const cJSON *expect)
{
    const cJSON *member = NULL;
    bool has_status = lwc_json_get(entry->tree, "status") != NULL;
    lwc_text_putc(out, '{');
    cJSON_ArrayForEach(member, entry->tree)
    {
        if (member != entry->tree->child) {
            lwc_text_putc(out, ',');
        }
        bool is_expect = strcmp(member->string, "expect") == 0;
        if (is_expect && !has_status && status != entry->status) {
            lwc_text_printf(out, "\"status\":%ld,", status);
        }
        lwc_json_write_string(out, member->string);
        lwc_text_putc(out, ':');
        if (is_expect) {
            lwc_json_write(out, expect);
        } else if (strcmp(member->string, "status") == 0) {
            lwc_text_printf(out, "%ld", status);
        } else {
            lwc_json_write(out, member);
        }
    }
    lwc_text_puts(out, "}\n");
}
