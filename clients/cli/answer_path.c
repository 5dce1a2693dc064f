/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Answers about moves in words and tables: path and free-travel. Called by answer.c. */
#include "answer_parts.h"

#include <string.h>

#include "table.h"

static void cell_number(lwc_table *table, const cJSON *item)
{
    lwc_text text = {0};
    if (cJSON_IsNumber(item)) {
        lwc_text_number(&text, item->valuedouble, 6);
    }
    lwc_table_text(table, text.len > 0 ? text.data : "-");
    lwc_text_clear(&text);
}

/* "limit m2", "margin load", "inverse limb-3"; "" where nothing stopped it. */
static void stopped_by(lwc_text *out, const cJSON *move)
{
    static const char *const NAMES[] = {"margin", "limb", "drive"};
    const char *cause = lwc_json_string(move, "cause");
    const cJSON *limit = NULL;
    lwc_text_puts(out, cause != NULL ? cause : "");
    cJSON_ArrayForEach(limit, lwc_json_get(move, "limits_broken"))
    {
        const char *name = lwc_json_string(limit, "name");
        lwc_text_printf(out, " %s", name != NULL ? name : "?");
    }
    bool limited = cJSON_GetArraySize(lwc_json_get(move, "limits_broken")) > 0;
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0] && !limited; i++) {
        const char *name = lwc_json_string(move, NAMES[i]);
        if (name != NULL) {
            lwc_text_printf(out, "%s%s", out->len > 0 ? " " : "", name);
        }
    }
}

static void cell_stopped(lwc_table *table, const cJSON *move)
{
    lwc_text raw = {0};
    lwc_text text = {0};
    stopped_by(&raw, move);
    lwc_text_safe(&text, lwc_text_string(&raw), raw.len);
    lwc_table_text(table, text.len > 0 ? text.data : "-");
    lwc_text_clear(&text);
    lwc_text_clear(&raw);
}

static void cell_verdict(lwc_table *table, const cJSON *move)
{
    lwc_text text = {0};
    const char *outcome = lwc_json_string(move, "outcome");
    double code = 0.0;
    if (cJSON_IsFalse(lwc_json_get(move, "examined"))) {
        lwc_text_puts(&text, "not examined");
    } else if (lwc_json_number(move, "code", &code) && outcome != NULL) {
        lwc_text_printf(&text, "%.0f ", code);
        lwc_text_safe(&text, outcome, strlen(outcome));
    }
    lwc_table_text(table, text.len > 0 ? text.data : "-");
    lwc_text_clear(&text);
}

/* The margin that comes lowest along a move: of the ratios, else of travel and hold. */
static const cJSON *least_of(const cJSON *least)
{
    const cJSON *found = NULL;
    double lowest = 0.0;
    for (int pass = 0; pass < 2 && found == NULL; pass++) {
        const cJSON *member = NULL;
        cJSON_ArrayForEach(member, least)
        {
            bool scale = strcmp(member->string, "travel") == 0 ||
                         strcmp(member->string, "hold") == 0;
            double value = 0.0;
            if (scale == (pass == 1) && lwc_json_number(member, "value", &value) &&
                (found == NULL || value < lowest)) {
                found = member;
                lowest = value;
            }
        }
    }
    return found;
}

static void line_name(lwc_text *out, const cJSON *move)
{
    const char *line = lwc_json_string(move, "line");
    double no = 0.0;
    if (line != NULL) {
        lwc_text_safe(out, line, strlen(line));
    } else if (lwc_json_number(move, "no", &no)) {
        lwc_text_printf(out, "%.0f", no);
    }
}

static void move_row(lwc_table *table, const cJSON *move)
{
    const cJSON *least = least_of(lwc_json_get(move, "least"));
    lwc_text text = {0};
    line_name(&text, move);
    lwc_table_text(table, text.len > 0 ? text.data : "-");
    lwc_text_clear(&text);
    lwc_table_value(table, lwc_json_get(move, "move"));
    cell_verdict(table, move);
    cell_number(table, lwc_json_get(move, "at"));
    lwc_table_text(table, least != NULL ? least->string : "-");
    cell_number(table, lwc_json_get(least, "value"));
    cell_number(table, lwc_json_get(least, "at_least"));
    cell_number(table, lwc_json_get(least, "at"));
    cell_stopped(table, move);
}

/* Reason, limits and the interval left open of a move that is not clear, and what would help. */
static void show_trouble(lwc_text *out, const cJSON *move)
{
    double code = 0.0;
    const char *reason = lwc_json_string(move, "reason");
    if (!lwc_json_number(move, "code", &code) || code < 1.5) {
        return;
    }
    lwc_text_putc(out, '\n');
    line_name(out, move);
    if (reason != NULL) {
        lwc_text_puts(out, ": ");
        lwc_text_safe(out, reason, strlen(reason));
    }
    lwc_text_putc(out, '\n');
    lwc_show_limits(out, lwc_json_get(move, "limits_broken"));
    if (cJSON_IsArray(lwc_json_get(move, "open"))) {
        lwc_text_puts(out, "  open: ");
        lwc_value_line(out, lwc_json_get(move, "open"));
        lwc_text_puts(out, " of the move; more --budget may settle it\n");
    }
    const char *next = lwc_verdict_next((long)code);
    lwc_text_printf(out, "  next: %s\n", next != NULL ? next : "look at the answer with --json");
}

void lwc_show_path(lwc_text *out, const cJSON *answer)
{
    static const char *const HEAD[] = {"line", "move",     "verdict",  "at", "least margin",
                                       "value", "at least", "where", "stopped by"};
    enum { COLUMNS = sizeof HEAD / sizeof HEAD[0] };
    const cJSON *move = NULL;
    lwc_table table;
    lwc_table_init(&table, COLUMNS);
    for (size_t i = 0; i < COLUMNS; i++) {
        lwc_table_text(&table, HEAD[i]);
    }
    cJSON_ArrayForEach(move, lwc_json_get(answer, "moves"))
    {
        move_row(&table, move);
    }
    lwc_text_puts(out, "\nmoves (at and where: share of the move, 0 to 1; at least: proved for "
                       "every point)\n");
    lwc_table_print(out, &table, 2);
    lwc_table_clear(&table);
    cJSON_ArrayForEach(move, lwc_json_get(answer, "moves"))
    {
        show_trouble(out, move);
    }
}

/* ---- free travel ---------------------------------------------------------------------------- */

static void way_row(lwc_table *table, const char *part, const char *axis, const char *sense,
                    const cJSON *way)
{
    lwc_text text = {0};
    lwc_text_printf(&text, "%s %s%s", part, sense, axis);
    lwc_table_text(table, text.data);
    lwc_text_clear(&text);
    if (!cJSON_IsObject(way)) {
        lwc_table_text(table, "no such freedom");
        for (size_t i = 0; i < 3; i++) {
            lwc_table_text(table, "-");
        }
        return;
    }
    cell_number(table, lwc_json_get(way, "at_least"));
    cell_number(table, lwc_json_get(way, "blocked_at"));
    cell_verdict(table, way);
    cell_stopped(table, way);
}

void lwc_show_travel(lwc_text *out, const cJSON *answer)
{
    static const char *const HEAD[] = {"way", "free at least", "blocked at", "verdict",
                                       "stopped by"};
    static const char *const PARTS[] = {"along", "about"};
    static const char *const AXES[] = {"x", "y", "z"};
    lwc_table table;
    lwc_table_init(&table, 5);
    for (size_t i = 0; i < 5; i++) {
        lwc_table_text(&table, HEAD[i]);
    }
    for (size_t i = 0; i < 6; i++) {
        const cJSON *axis = lwc_json_get(lwc_json_get(answer, PARTS[i / 3]), AXES[i % 3]);
        if (cJSON_IsObject(axis)) {
            way_row(&table, PARTS[i / 3], AXES[i % 3], "-", lwc_json_get(axis, "minus"));
            way_row(&table, PARTS[i / 3], AXES[i % 3], "+", lwc_json_get(axis, "plus"));
        }
    }
    lwc_text_puts(out, "\nfree travel along and about the tool's own axes, each way alone\n");
    lwc_table_print(out, &table, 2);
    lwc_table_clear(&table);
}
