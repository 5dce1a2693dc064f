/* SPDX-License-Identifier: GPL-3.0-or-later */
/* leeway replay: recorded questions are asked again, and every difference is told. The file is
 * checked as a whole before the first question goes out. */
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "answer.h"
#include "commands.h"
#include "record.h"
#include "replay_file.h"
#include "table.h"

enum { SHOWN_MAX = 48 /* characters of a text or group in the table */ };

typedef struct totals {
    size_t questions; /* in the file */
    size_t asked;
    size_t differing;
    size_t differences;
    size_t unanswered;
    double worst; /* largest off over its tolerance */
    lwc_text worst_place;
    bool rewritten;
} totals;

typedef struct seen {
    const lwc_replay_entry *entry;
    lwc_table table;
    totals *sum;
    bool json;
} seen;

/* ---- telling differences -------------------------------------------------------------------- */

static void short_text(lwc_text *out, const cJSON *item)
{
    lwc_text full = {0};
    if (item == NULL) {
        lwc_text_putc(out, '-');
        return;
    }
    lwc_json_write(&full, item);
    if (full.len > SHOWN_MAX && !cJSON_IsString(item)) {
        size_t len = SHOWN_MAX;
        while (len > 0 && ((unsigned char)full.data[len] & 0xc0) == 0x80) {
            len--;
        }
        full.len = len;
        full.data[len] = '\0';
        lwc_text_puts(&full, "...");
    }
    lwc_text_safe(out, full.data, full.len);
    lwc_text_clear(&full);
}

static void difference_json(const seen *s, const lwc_difference *d)
{
    cJSON *line = lwc_json_object();
    lwc_text text = {0};
    lwc_json_put_number(line, "line", (double)s->entry->line);
    lwc_json_put_string(line, "path", s->entry->path);
    lwc_json_put_string(line, "pointer", d->pointer);
    lwc_json_put(line, "expected", lwc_json_copy(d->expected));
    lwc_json_put(line, "got", d->got != NULL ? lwc_json_copy(d->got) : cJSON_CreateNull());
    if (d->is_number) {
        lwc_json_put_number(line, "off_by", d->off);
        lwc_json_put_number(line, "tolerance", d->tolerance);
        lwc_json_put_string(line, "kind", lwc_unit_kind_name(d->kind));
    }
    if (d->note != NULL) {
        lwc_json_put_string(line, "note", d->note);
    }
    lwc_json_write(&text, line);
    lwc_text_putc(&text, '\n');
    lwc_print(&text);
    lwc_text_clear(&text);
    cJSON_Delete(line);
}

static void difference_row(lwc_table *table, const lwc_difference *d)
{
    lwc_text text = {0};
    const char *pointer = d->pointer[0] != '\0' ? d->pointer : "(whole)";
    lwc_table_text(table, pointer);
    short_text(&text, d->expected);
    lwc_table_text(table, lwc_text_string(&text));
    lwc_text_reset(&text);
    short_text(&text, d->got);
    lwc_table_text(table, lwc_text_string(&text));
    lwc_text_reset(&text);
    if (d->is_number) {
        lwc_text_number(&text, d->off, 4);
        lwc_table_text(table, text.data);
        lwc_text_reset(&text);
        lwc_text_number(&text, d->tolerance, 4);
        lwc_table_text(table, text.data);
        lwc_table_text(table, lwc_unit_kind_name(d->kind));
    } else {
        lwc_table_text(table, "-");
        lwc_table_text(table, "-");
        lwc_table_text(table, d->note != NULL ? d->note : "");
    }
    lwc_text_clear(&text);
}

static void see_difference(void *context, const lwc_difference *d)
{
    seen *s = context;
    s->sum->differences++;
    if (s->json) {
        difference_json(s, d);
    } else {
        difference_row(&s->table, d);
    }
    double ratio = d->is_number && d->tolerance > 0.0 ? fabs(d->off) / d->tolerance : 0.0;
    if (ratio > s->sum->worst) {
        s->sum->worst = ratio;
        lwc_text_reset(&s->sum->worst_place);
        lwc_text_printf(&s->sum->worst_place, "line %zu ", s->entry->line);
        lwc_text_safe(&s->sum->worst_place, d->pointer, strlen(d->pointer));
        lwc_text_puts(&s->sum->worst_place, ", off by ");
        lwc_text_number(&s->sum->worst_place, d->off, 4);
    }
}

static void show_table(const seen *s, const char *path)
{
    lwc_text text = {0};
    lwc_text_printf(&text, "line %zu  %s %s", s->entry->line, s->entry->method, path);
    if (s->entry->note != NULL) {
        lwc_text_puts(&text, "  (");
        lwc_text_safe(&text, s->entry->note, strlen(s->entry->note));
        lwc_text_putc(&text, ')');
    }
    lwc_text_putc(&text, '\n');
    lwc_table_print(&text, &s->table, 2);
    lwc_print(&text);
    lwc_text_clear(&text);
}

/* ---- one question --------------------------------------------------------------------------- */

static size_t compare_status(seen *s, long expected, long got)
{
    if (expected == got) {
        return 0;
    }
    cJSON *want = cJSON_CreateNumber((double)expected);
    cJSON *have = cJSON_CreateNumber((double)got);
    lwc_difference d = {.pointer = "", .expected = want, .got = have, .note = "HTTP status"};
    see_difference(s, &d);
    cJSON_Delete(want);
    cJSON_Delete(have);
    return 1;
}

/* Compares one answer and tells what differs. Returns the number of differences. */
static size_t judge(lwc_session *session, const lwc_replay *replay, const lwc_replay_entry *entry,
                    const char *path, long status, const cJSON *answer, totals *sum)
{
    seen s = {.entry = entry, .sum = sum, .json = session->args->json};
    static const char *const HEAD[] = {"pointer", "expected", "got", "off by", "tolerance", ""};
    lwc_table_init(&s.table, 6);
    for (size_t i = 0; i < 6; i++) {
        lwc_table_text(&s.table, HEAD[i]);
    }
    lwc_compare_rules rules;
    lwc_replay_rules(&rules, replay, entry, session->args->tolerance);
    lwc_text ignore = {0};
    lwc_text_puts(&ignore, session->args->ignore != NULL ? session->args->ignore : "");
    if (session->args->mechanism != NULL) {
        lwc_text_puts(&ignore, ",mechanism"); /* asked to differ */
    }
    rules.check = session->args->check;
    rules.ignore = lwc_text_string(&ignore);
    size_t found = compare_status(&s, entry->status, status);
    found += lwc_compare(entry->expect, answer, &rules, see_difference, &s);
    if (found > 0 && !s.json) {
        show_table(&s, path);
    }
    lwc_text_clear(&ignore);
    lwc_table_clear(&s.table);
    return found;
}

/* Asks one entry again. Returns LWC_EXIT_NO_CONTACT or a negative value when the replay must end,
 * else LWC_EXIT_YES. `rewritten` gets the entry's line for --update. */
static int ask_again(lwc_session *session, const lwc_replay *replay, const lwc_replay_entry *entry,
                     long revision, totals *sum, lwc_text *rewritten)
{
    lwc_text path = {0};
    lwc_text json = {0};
    lwc_reply reply = {0};
    lwc_replay_path(&path, entry, session->args->mechanism, revision);
    cJSON *body = lwc_replay_body(entry, revision);
    if (body != NULL) {
        lwc_json_write(&json, body);
    }
    lwc_request request = {.method = entry->method, .path = path.data, .body = json.data,
                           .body_len = json.len};
    lwc_contact contact = lwc_http_ask(session->http, &request, &reply);
    int status = contact == LWC_INTERRUPTED ? -1 : lwc_contact_exit(contact);
    sum->asked++;
    cJSON *answer = contact == LWC_ANSWERED ? lwc_reply_json(&reply) : NULL;
    bool refused = reply.status == 401 || reply.status == 403 || reply.status == 429 ||
                   reply.status >= 500;
    if (answer == NULL || (refused && reply.status != entry->status)) {
        sum->unanswered++;
        if (contact == LWC_ANSWERED) {
            lwc_args quiet = *session->args; /* standard output is for the differences */
            lwc_session told = {.args = &quiet, .http = session->http};
            quiet.json = false;
            lwc_complain("line %zu was not answered", entry->line);
            (void)lwc_refused(&told, "ask", &reply, answer);
        }
        status = contact == LWC_UNUSABLE ? LWC_EXIT_YES : contact == LWC_ANSWERED ? 0 : status;
    } else {
        size_t found = judge(session, replay, entry, path.data, reply.status, answer, sum);
        sum->differing += found > 0;
        if (found > 0) {
            cJSON *expect = reply.status == entry->status ? lwc_narrow(entry->expect, answer)
                                                          : lwc_json_copy(answer);
            lwc_replay_rewrite(rewritten, entry, reply.status, expect);
            cJSON_Delete(expect);
        } else {
            lwc_text_add(rewritten, entry->text, entry->text_len);
            lwc_text_putc(rewritten, '\n');
        }
    }
    cJSON_Delete(answer);
    cJSON_Delete(body);
    lwc_text_clear(&reply.body);
    lwc_text_clear(&json);
    lwc_text_clear(&path);
    return status;
}

/* ---- the whole file ------------------------------------------------------------------------- */

static void show_progress(const totals *sum, struct timespec *last)
{
    struct timespec now;
    if (!isatty(STDERR_FILENO) || clock_gettime(CLOCK_MONOTONIC, &now) != 0) {
        return;
    }
    double since_s = (double)(now.tv_sec - last->tv_sec) +
                     (double)(now.tv_nsec - last->tv_nsec) * 1e-9;
    if (since_s >= 0.2 || sum->asked == sum->questions) {
        (void)fprintf(stderr, "\r%zu of %zu asked, %zu differ ", sum->asked, sum->questions,
                      sum->differing);
        if (sum->asked == sum->questions) {
            (void)fprintf(stderr, "\r%*s\r", 60, "");
        }
        *last = now;
    }
}

/* Counts the questions, so that a fault anywhere is told before the first is asked. */
static bool check_file(const lwc_text *data, const char *file, totals *sum)
{
    lwc_replay replay;
    lwc_replay_entry entry;
    lwc_text why = {0};
    int got = lwc_replay_open(&replay, data->data, data->len, &why) ? 1 : -1;
    while (got > 0 && (got = lwc_replay_next(&replay, &entry, &why)) > 0) {
        sum->questions++;
        lwc_replay_entry_clear(&entry);
    }
    lwc_replay_close(&replay);
    if (got < 0) {
        lwc_complain("%s, %s\n        next: correct that line; nothing was asked", file,
                     lwc_text_string(&why));
    }
    lwc_text_clear(&why);
    return got >= 0;
}

/* Head line and what follows as it stands, up to the first question. */
static int ask_all(lwc_session *session, const lwc_text *data, long revision, totals *sum,
                   lwc_text *rewritten)
{
    lwc_replay replay;
    lwc_replay_entry entry;
    lwc_text why = {0};
    struct timespec last = {0};
    int status = LWC_EXIT_YES;
    if (lwc_replay_open(&replay, data->data, data->len, &why)) {
        size_t head = replay.at;
        lwc_text_add(rewritten, data->data, head);
        if (head > 0 && data->data[head - 1] != '\n') {
            lwc_text_putc(rewritten, '\n');
        }
        while (status == LWC_EXIT_YES && lwc_replay_next(&replay, &entry, &why) > 0) {
            status = ask_again(session, &replay, &entry, revision, sum, rewritten);
            lwc_replay_entry_clear(&entry);
            show_progress(sum, &last);
        }
    }
    lwc_replay_close(&replay);
    lwc_text_clear(&why);
    return status;
}

static void show_summary(const lwc_session *session, const totals *sum)
{
    size_t same = sum->asked - sum->differing - sum->unanswered;
    lwc_text text = {0};
    if (session->args->json) {
        lwc_text_printf(&text,
                        "{\"questions\":%zu,\"asked\":%zu,\"same\":%zu,\"differ\":%zu,"
                        "\"differences\":%zu,\"not_answered\":%zu}\n",
                        sum->questions, sum->asked, same, sum->differing, sum->differences,
                        sum->unanswered);
    } else {
        lwc_text_printf(&text, "%zu questions: %zu same, %zu differ", sum->questions, same,
                        sum->differing);
        if (sum->differences > 0) {
            lwc_text_printf(&text, " (%zu differences)", sum->differences);
        }
        if (sum->unanswered > 0) {
            lwc_text_printf(&text, ", %zu not answered", sum->unanswered);
        }
        if (sum->asked < sum->questions) {
            lwc_text_printf(&text, ", %zu not asked", sum->questions - sum->asked);
        }
        if (sum->worst > 0.0) {
            lwc_text_printf(&text, "; furthest off: %s", lwc_text_string(&sum->worst_place));
        }
        lwc_text_puts(&text, sum->rewritten ? "; expectations rewritten\n" : "\n");
    }
    lwc_print(&text);
    lwc_text_clear(&text);
}

static bool check_args(lwc_session *session, long *revision)
{
    const lwc_args *args = session->args;
    lwc_tolerance tolerance = LWC_TOLERANCE_DEFAULT;
    lwc_text why = {0};
    bool ok = lwc_word_count(session, 1, 1, "replay FILE") &&
              lwc_read_revision(args->revision, revision);
    if (ok && args->mechanism != NULL &&
        !lwc_is_name(args->mechanism, strlen(args->mechanism), false)) {
        lwc_complain("--mechanism \"%s\": expected lower case letters, digits and hyphens",
                     args->mechanism);
        ok = false;
    }
    if (ok && args->tolerance != NULL &&
        !lwc_replay_tolerance(&tolerance, args->tolerance, &why)) {
        lwc_complain("--tolerance %s", lwc_text_string(&why));
        ok = false;
    }
    if (ok && args->update && strcmp(args->words[0], "-") == 0) {
        lwc_complain("--update rewrites a file; name one instead of \"-\"");
        ok = false;
    }
    lwc_text_clear(&why);
    return ok;
}

int lwc_cmd_replay(lwc_session *session)
{
    const lwc_args *args = session->args;
    long revision = 0;
    if (!check_args(session, &revision)) {
        return LWC_EXIT_ERROR;
    }
    lwc_text data = {0};
    lwc_text why = {0};
    lwc_text rewritten = {0};
    totals sum = {0};
    int status = LWC_EXIT_ERROR;
    if (!lwc_read_file(&data, args->words[0], LWC_REPLAY_FILE_MAX, &why)) {
        lwc_complain("%s", lwc_text_string(&why));
    } else if (check_file(&data, args->words[0], &sum)) {
        status = ask_all(session, &data, revision, &sum, &rewritten);
        bool whole = status == LWC_EXIT_YES && sum.unanswered == 0 && sum.asked == sum.questions;
        if (args->update && whole && sum.differing > 0) {
            sum.rewritten = lwc_replace_file(args->words[0], &rewritten);
            whole = sum.rewritten;
        } else if (args->update && !whole) {
            lwc_complain("not every question was answered, so %s is left as it is",
                         args->words[0]);
        }
        show_summary(session, &sum);
        if (status == LWC_EXIT_YES) {
            status = !whole                                ? LWC_EXIT_ERROR
                     : sum.differing > 0 && !sum.rewritten ? LWC_EXIT_NO
                                                           : LWC_EXIT_YES;
        } else if (status < 0) {
            status = LWC_EXIT_ERROR;
        }
    }
    lwc_text_clear(&data);
    lwc_text_clear(&why);
    lwc_text_clear(&rewritten);
    lwc_text_clear(&sum.worst_place);
    return status;
}
