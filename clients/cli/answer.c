/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Answers in words and tables; see answer.h. */
#include "answer.h"

#include <string.h>

#include "answer_parts.h"
#include "table.h"

static const struct verdict {
    const char *outcome;
    const char *meaning;
    const char *next;
} VERDICTS[] = {
    {"?", "no verdict", "look at the answer with --json"},
    {"ok", "yes, and every threshold holds", NULL},
    {"low_margin", "reachable, but with less room than asked for",
     "stay clear of this posture, or take another mode; the least margin says where room lacks"},
    {"limit", "a drive, joint or rod limit stops it",
     "the limits broken say which and by how much; another pose, mode or tool may do"},
    {"out_of_reach", "no posture takes the tool there",
     "check pose, units and tool of the question, then the lengths in the document"},
    {"undecided", "not settled; never take this as yes",
     "read the reason; a --near closer to the machine's posture may settle it"},
    {"other_mode", "reachable, but not in the mode asked for, or not without a mode change",
     "ask for one of the modes named, or with --mode any (reach)"},
    {"singular", "the posture, or the way, is singular",
     "ask for the margin nearby to see which way leads out"},
    {"inconsistent", "the readings contradict one another",
     "compare each drive's disagreement with what is allowed; check the suspect's reference"},
    {"blocked", "proved that no way exists", "the reason names the wall; choose another mode"},
};

enum { VERDICT_LAST = sizeof VERDICTS / sizeof VERDICTS[0] - 1 };

static const struct verdict *verdict(long code)
{
    return &VERDICTS[code >= 1 && code <= VERDICT_LAST ? code : 0];
}

const char *lwc_verdict_meaning(long code)
{
    return verdict(code)->meaning;
}

const char *lwc_verdict_next(long code)
{
    return verdict(code)->next;
}

/* The array of a batch's answers, or NULL for a single answer. */
static const cJSON *batch_of(const cJSON *answer)
{
    if (cJSON_IsArray(answer)) {
        return answer;
    }
    const cJSON *batch = lwc_json_get(answer, "answers");
    return cJSON_IsArray(batch) ? batch : NULL;
}

/* Verdict code, or 0 where there is none. */
static long code_of(const cJSON *answer)
{
    double code = 0.0;
    return lwc_json_number(answer, "code", &code) && code >= 0.0 && code < 1e6 ? (long)code : 0;
}

int lwc_answer_exit(const cJSON *answer)
{
    const cJSON *batch = batch_of(answer);
    if (batch != NULL) {
        int worst = LWC_EXIT_YES;
        const cJSON *member = NULL;
        cJSON_ArrayForEach(member, batch)
        {
            int status = lwc_answer_exit(member);
            worst = status > worst ? status : worst;
        }
        return worst;
    }
    long code = code_of(answer);
    return code == 1 ? LWC_EXIT_YES : code >= 2 && code <= 999 ? LWC_EXIT_NO : LWC_EXIT_ERROR;
}

/* ---- solutions ------------------------------------------------------------------------------ */

/* Copies the members of a pose into `row` under the names the command line uses for them. */
static void flatten_pose(cJSON *row, const cJSON *pose)
{
    static const struct {
        const char *form;
        const char *prefix;
    } FORMS[] = {{"quaternion", "q"}, {"zyx", ""}, {"rotation_vector", "rv"}, {"direction", "d"},
                 {"joints", "joint."}};
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, pose)
    {
        const char *prefix = NULL;
        for (size_t i = 0; i < sizeof FORMS / sizeof FORMS[0]; i++) {
            if (strcmp(member->string, FORMS[i].form) == 0) {
                prefix = FORMS[i].prefix;
            }
        }
        if (prefix == NULL || !cJSON_IsObject(member)) {
            lwc_json_put(row, member->string, lwc_json_copy(member));
            continue;
        }
        const cJSON *part = NULL;
        cJSON_ArrayForEach(part, member)
        {
            lwc_text name = {0};
            lwc_text_printf(&name, "%s%s", prefix, part->string);
            lwc_json_put(row, lwc_text_string(&name), lwc_json_copy(part));
            lwc_text_clear(&name);
        }
    }
}

/* "drive m2 171.5 is 1.5 beyond [-170, 170]". */
static void limit_line(lwc_text *out, const cJSON *limit)
{
    const char *of = lwc_json_string(limit, "of");
    const char *name = lwc_json_string(limit, "name");
    if (name == NULL) {
        lwc_value_line(out, limit);
        return;
    }
    lwc_text_printf(out, "%s %s ", of != NULL ? of : "", name);
    lwc_value_line(out, lwc_json_get(limit, "value"));
    if (lwc_json_get(limit, "over") != NULL) {
        lwc_text_puts(out, " is ");
        lwc_value_line(out, lwc_json_get(limit, "over"));
        lwc_text_puts(out, " beyond");
    }
    if (lwc_json_get(limit, "range") != NULL) {
        lwc_text_puts(out, " [");
        lwc_value_line(out, lwc_json_get(limit, "range"));
        lwc_text_putc(out, ']');
    }
}

/* The names alone, for a cell of a table. */
static void limit_names(lwc_text *out, const cJSON *limits)
{
    const cJSON *limit = NULL;
    cJSON_ArrayForEach(limit, limits)
    {
        const char *name = lwc_json_string(limit, "name");
        lwc_text_puts(out, out->len > 0 ? ", " : "");
        lwc_text_puts(out, name != NULL ? name : "?");
    }
}

/* One line a limit, for solution `no` (0: there is only one). */
static void show_limits(lwc_text *out, const cJSON *limits, size_t no)
{
    const cJSON *limit = NULL;
    cJSON_ArrayForEach(limit, limits)
    {
        lwc_text line = {0};
        limit_line(&line, limit);
        lwc_text_puts(out, "  ");
        if (no > 0) {
            lwc_text_printf(out, "%zu: ", no);
        }
        lwc_text_safe(out, line.data, line.len);
        lwc_text_putc(out, '\n');
        lwc_text_clear(&line);
    }
}

void lwc_show_limits(lwc_text *out, const cJSON *limits)
{
    show_limits(out, limits, 0);
}

static void solution_row(cJSON *rows, const cJSON *solution, size_t no, bool named, bool pose)
{
    cJSON *row = lwc_json_object();
    if (!cJSON_AddItemToArray(rows, row)) {
        cJSON_Delete(row);
        return;
    }
    lwc_json_put_number(row, "no", (double)no);
    const char *mode = lwc_json_string(solution, "mode");
    lwc_json_put_string(row, "mode", mode != NULL ? mode : "-");
    if (named) {
        const char *name = lwc_json_string(solution, "mode_name");
        lwc_json_put_string(row, "name", name != NULL ? name : "-");
    }
    const cJSON *drive = NULL;
    cJSON_ArrayForEach(drive, lwc_json_get(solution, "drives"))
    {
        lwc_json_put(row, drive->string, lwc_json_copy(drive));
    }
    if (pose) {
        flatten_pose(row, lwc_json_get(solution, "pose"));
    }
    lwc_json_put(row, "within limits",
                 lwc_json_get(solution, "within_limits") != NULL
                     ? lwc_json_copy(lwc_json_get(solution, "within_limits"))
                     : cJSON_CreateNull());
    lwc_text limits = {0};
    limit_names(&limits, lwc_json_get(solution, "limits_broken"));
    lwc_json_put_string(row, "limits broken", limits.len > 0 ? limits.data : "-");
    lwc_text_clear(&limits);
}

static void show_solutions(lwc_text *out, const char *kind, const cJSON *solutions)
{
    /* Where a pose was asked, every solution has it: only the drives differ. */
    bool pose = strcmp(kind, "inverse") != 0 && strcmp(kind, "reach") != 0;
    bool named = false;
    const cJSON *solution = NULL;
    cJSON_ArrayForEach(solution, solutions)
    {
        named = named || lwc_json_string(solution, "mode_name") != NULL;
    }
    cJSON *rows = cJSON_CreateArray();
    size_t no = 0;
    cJSON_ArrayForEach(solution, solutions)
    {
        solution_row(rows, solution, ++no, named, pose);
    }
    lwc_text_puts(out, no > 0 ? "\nsolutions\n" : "\nsolutions     none\n");
    (void)lwc_object_table(out, rows, 2);
    cJSON_Delete(rows);
    no = 0;
    cJSON_ArrayForEach(solution, solutions)
    {
        show_limits(out, lwc_json_get(solution, "limits_broken"), ++no);
        if (cJSON_IsTrue(lwc_json_get(solution, "contradicted"))) {
            lwc_text_printf(out, "  %zu: a spare reading contradicts this posture\n", no);
        }
    }
}

/* A single solution under its own title, as a table of one row. */
static void show_single(lwc_text *out, const char *title, const cJSON *solution)
{
    if (!cJSON_IsObject(solution)) {
        return;
    }
    cJSON *rows = cJSON_CreateArray();
    solution_row(rows, solution, 1, lwc_json_string(solution, "mode_name") != NULL, true);
    lwc_json_drop(rows->child, "no");
    lwc_text_printf(out, "\n%s\n", title);
    (void)lwc_object_table(out, rows, 2);
    show_limits(out, lwc_json_get(solution, "limits_broken"), 0);
    cJSON_Delete(rows);
}

static void show_found(lwc_text *out, const cJSON *answer)
{
    const cJSON *found = lwc_json_get(answer, "found");
    const cJSON *complete = lwc_json_get(answer, "complete");
    const char *basis = lwc_json_string(answer, "basis");
    if (found != NULL) {
        lwc_value_block(out, "found", found, 0);
    }
    if (cJSON_IsBool(complete)) {
        lwc_text_printf(out, "complete      %s%s%s%s\n",
                        cJSON_IsTrue(complete) ? "yes, no solution is missing"
                                               : "no, there may be further solutions",
                        basis != NULL ? " (" : "", basis != NULL ? basis : "",
                        basis != NULL ? ")" : "");
    }
}

/* ---- margins -------------------------------------------------------------------------------- */

/* What a margin says besides asked, value, drive and direction. */
static void other_members(lwc_text *out, const cJSON *margin)
{
    static const char *const SHOWN[] = {"asked", "value", "drive", "direction"};
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, margin)
    {
        bool shown = false;
        for (size_t i = 0; i < sizeof SHOWN / sizeof SHOWN[0]; i++) {
            shown = shown || strcmp(member->string, SHOWN[i]) == 0;
        }
        if (!shown) {
            lwc_text_puts(out, out->len > 0 ? ", " : "");
            const char *unit = lwc_json_string(member, "unit");
            if (unit != NULL && lwc_json_get(member, "value") != NULL) {
                lwc_value_line(out, lwc_json_get(member, "value"));
                lwc_text_printf(out, " %s", unit);
            } else {
                lwc_text_puts(out, member->string);
                lwc_text_putc(out, ' ');
                lwc_value_line(out, member);
            }
        }
    }
}

/* Three numbers as "(0.6 0 -0.8)". */
static void vector_text(lwc_text *out, const cJSON *vector)
{
    const cJSON *part = NULL;
    lwc_text_putc(out, '(');
    cJSON_ArrayForEach(part, vector)
    {
        lwc_text_puts(out, part != vector->child ? " " : "");
        if (cJSON_IsNumber(part)) {
            lwc_text_number(out, part->valuedouble, 3);
        } else {
            lwc_value_line(out, part);
        }
    }
    lwc_text_putc(out, ')');
}

static bool is_zero_vector(const cJSON *vector)
{
    const cJSON *part = NULL;
    cJSON_ArrayForEach(part, vector)
    {
        if (!cJSON_IsNumber(part) || part->valuedouble < 0.0 || part->valuedouble > 0.0) {
            return false;
        }
    }
    return true;
}

/* "along (0 0 1), about (1 0 0)", whichever is not zero. */
static void direction_cell(lwc_table *table, const cJSON *direction)
{
    static const char *const PARTS[] = {"along", "about"};
    lwc_text text = {0};
    if (cJSON_IsObject(lwc_json_get(direction, "along"))) {
        for (size_t i = 0; i < 2; i++) {
            const cJSON *vector = lwc_json_get(direction, PARTS[i]);
            if (cJSON_IsObject(vector) && !is_zero_vector(vector)) {
                lwc_text_printf(&text, "%s%s ", text.len > 0 ? ", " : "", PARTS[i]);
                vector_text(&text, vector);
            }
        }
    } else {
        lwc_value_line(&text, direction);
    }
    lwc_table_text(table, text.len > 0 ? text.data : "-");
    lwc_text_clear(&text);
}

static void show_margins(lwc_text *out, const cJSON *margins, const cJSON *least)
{
    const char *least_name = lwc_json_string(least, "name");
    lwc_table table;
    lwc_table_init(&table, 7);
    static const char *const HEAD[] = {"margin", "asked", "value", "drive", "direction", "also",
                                       ""};
    for (size_t i = 0; i < 7; i++) {
        lwc_table_text(&table, HEAD[i]);
    }
    const cJSON *margin = NULL;
    cJSON_ArrayForEach(margin, margins)
    {
        const cJSON *asked = lwc_json_get(margin, "asked");
        bool is_least = least_name != NULL && strcmp(margin->string, least_name) == 0;
        lwc_text also = {0};
        other_members(&also, margin);
        lwc_table_text(&table, margin->string);
        lwc_table_value(&table, asked);
        lwc_table_value(&table, cJSON_IsNumber(margin) ? margin : lwc_json_get(margin, "value"));
        lwc_table_value(&table, lwc_json_get(margin, "drive"));
        direction_cell(&table, lwc_json_get(margin, "direction"));
        lwc_table_text(&table, also.len > 0 ? also.data : "-");
        lwc_table_text(&table, is_least ? "<- least" : "");
        lwc_text_clear(&also);
    }
    lwc_text_puts(out, "\nmargins (1 = just enough, 0 = none; travel and hold on their own "
                       "scales)\n");
    lwc_table_print(out, &table, 2);
    lwc_table_clear(&table);
}

/* ---- singularities --------------------------------------------------------------------------- */

static void show_weakest(lwc_text *out, const cJSON *list)
{
    const cJSON *weakest = NULL;
    cJSON_ArrayForEach(weakest, list)
    {
        const char *says = lwc_json_string(weakest, "says");
        const cJSON *joints = lwc_json_get(weakest, "joints");
        lwc_text_puts(out, "  ");
        lwc_text_safe(out, says != NULL ? says : "?", says != NULL ? strlen(says) : 1);
        lwc_text_putc(out, '\n');
        if (cJSON_IsObject(joints) && joints->child != NULL) {
            lwc_text_puts(out, "    joints ");
            lwc_value_line(out, joints);
            lwc_text_putc(out, '\n');
        }
    }
}

static void show_way_out(lwc_text *out, const char *what, const cJSON *way)
{
    const char *at = lwc_json_string(way, "measured_at");
    if (!cJSON_IsObject(way)) {
        return;
    }
    lwc_text_printf(out, "  %s grows by ", what);
    lwc_value_line(out, lwc_json_get(way, "growth"));
    lwc_text_puts(out, " over the step ");
    lwc_value_line(out, lwc_json_get(way, at != NULL && strcmp(at, "tool") == 0 ? "outputs"
                                                                                : "drives"));
    lwc_text_puts(out, cJSON_IsTrue(lwc_json_get(way, "either_way")) ? ", or back\n" : "\n");
}

static void show_singular(lwc_text *out, const cJSON *answer)
{
    const cJSON *leave = lwc_json_get(answer, "leave_by");
    if (!cJSON_IsArray(lwc_json_get(answer, "weakest_hold"))) {
        return;
    }
    lwc_text_puts(out, "\nnearest to singular (0 = singular)\n");
    show_weakest(out, lwc_json_get(answer, "weakest_hold"));
    show_way_out(out, "hold", lwc_json_get(leave, "hold"));
    show_weakest(out, lwc_json_get(answer, "weakest_motion"));
    show_way_out(out, "motion", lwc_json_get(leave, "motion"));
}

/* ---- the answer as a whole ------------------------------------------------------------------ */

static void show_head(lwc_text *out, const cJSON *answer)
{
    const char *mechanism = lwc_json_string(answer, "mechanism");
    const char *state = lwc_json_string(answer, "state");
    const char *digest = lwc_json_string(answer, "digest");
    const cJSON *units = lwc_json_get(answer, "units");
    double revision = 0.0;
    if (mechanism != NULL) {
        lwc_text_safe(out, mechanism, strlen(mechanism));
    }
    if (lwc_json_number(answer, "revision", &revision)) {
        lwc_text_printf(out, " revision %.0f", revision);
    }
    if (state != NULL) {
        lwc_text_puts(out, ", ");
        lwc_text_safe(out, state, strlen(state));
    }
    if (digest != NULL) {
        size_t len = strlen(digest);
        lwc_text_puts(out, ", digest ");
        lwc_text_safe(out, digest, len < 8 ? len : 8);
    }
    if (lwc_json_get(answer, "tool") != NULL) {
        lwc_text_puts(out, ", tool ");
        lwc_value_line(out, lwc_json_get(answer, "tool"));
    }
    if (lwc_json_string(units, "length") != NULL && lwc_json_string(units, "angle") != NULL) {
        lwc_text_puts(out, ", ");
        lwc_value_line(out, lwc_json_get(units, "length"));
        lwc_text_puts(out, " and ");
        lwc_value_line(out, lwc_json_get(units, "angle"));
    }
    if (out->len > 0 && out->data[out->len - 1] != '\n') {
        lwc_text_putc(out, '\n');
    }
    if (lwc_json_get(answer, "ref") != NULL) {
        lwc_value_block(out, "ref", lwc_json_get(answer, "ref"), 0);
    }
    if (lwc_json_get(answer, "asked") != NULL) {
        cJSON *asked = lwc_json_copy(lwc_json_get(answer, "asked"));
        lwc_json_drop(asked, "through"); /* the moves have a table of their own */
        lwc_value_block(out, "asked", asked, 0);
        cJSON_Delete(asked);
    }
}

static void show_verdict(lwc_text *out, const cJSON *answer, bool colour)
{
    long code = code_of(answer);
    const char *outcome = lwc_json_string(answer, "outcome");
    const char *bold = !colour ? "" : code == 1 ? "\x1b[1;32m" : "\x1b[1;33m";
    lwc_text_puts(out, "verdict       ");
    lwc_text_puts(out, bold);
    lwc_text_printf(out, "%ld ", code);
    outcome = outcome != NULL ? outcome : verdict(code)->outcome;
    lwc_text_safe(out, outcome, strlen(outcome));
    lwc_text_puts(out, colour ? "\x1b[0m" : "");
    /* Only some questions have thresholds; the others state how things are. */
    bool proved = cJSON_IsArray(lwc_json_get(answer, "moves"));
    bool thresholds = code != 1 || lwc_json_get(answer, "checked") != NULL;
    lwc_text_printf(out, ": %s\n",
                    proved && code == 1 ? "every point of every move is proved clear"
                    : thresholds        ? verdict(code)->meaning
                                        : "answered");
    if (verdict(code)->next != NULL) {
        lwc_text_printf(out, "next          %s\n", verdict(code)->next);
    }
}

static bool is_shown_already(const char *name)
{
    static const char *const SHOWN[] = {
        "mechanism", "revision", "state",   "digest",    "tool",    "units",    "ref",
        "asked",     "served_at", "code",   "outcome",   "found",   "complete", "basis",
        "solutions", "margins",  "least",   "limits_broken", "solution", "posture",
        "weakest_hold", "weakest_motion", "leave_by", "moves", "start", "along", "about"};
    for (size_t i = 0; i < sizeof SHOWN / sizeof SHOWN[0]; i++) {
        if (strcmp(name, SHOWN[i]) == 0) {
            return true;
        }
    }
    return false;
}

/* Members without a place of their own: the short ones before the tables, the long ones after. */
static void show_others(lwc_text *out, const cJSON *answer, bool shorts)
{
    const cJSON *member = NULL;
    bool first = !shorts;
    cJSON_ArrayForEach(member, answer)
    {
        if (!is_shown_already(member->string) && lwc_value_is_short(member) == shorts) {
            lwc_text_puts(out, first ? "\n" : "");
            first = false;
            lwc_value_block(out, member->string, member, 0);
        }
    }
}

static void show_one(lwc_text *out, const char *kind, const cJSON *answer, bool colour)
{
    if (code_of(answer) >= 1000) {
        lwc_text_puts(out, "refused       ");
        lwc_show_problem(out, answer);
        return;
    }
    if (lwc_json_get(answer, "outcome") == NULL) {
        lwc_value_block(out, "answer", answer, 0);
        return;
    }
    lwc_text head = {0};
    show_head(&head, answer);
    lwc_text_add(out, lwc_text_string(&head), head.len);
    lwc_text_clear(&head);
    show_verdict(out, answer, colour);
    show_found(out, answer);
    const cJSON *limits = lwc_json_get(answer, "limits_broken");
    if (cJSON_IsArray(limits) && limits->child != NULL) {
        lwc_text_puts(out, "limits broken\n");
        show_limits(out, limits, 0);
    }
    show_others(out, answer, true);
    if (cJSON_IsArray(lwc_json_get(answer, "solutions"))) {
        show_solutions(out, kind, lwc_json_get(answer, "solutions"));
    }
    show_single(out, "solution", lwc_json_get(answer, "solution"));
    show_single(out, "posture", lwc_json_get(answer, "posture"));
    show_single(out, "start", lwc_json_get(answer, "start"));
    if (cJSON_IsArray(lwc_json_get(answer, "moves"))) {
        lwc_show_path(out, answer);
    }
    if (cJSON_IsObject(lwc_json_get(answer, "along"))) {
        lwc_show_travel(out, answer);
    }
    if (cJSON_IsObject(lwc_json_get(answer, "margins"))) {
        show_margins(out, lwc_json_get(answer, "margins"), lwc_json_get(answer, "least"));
    }
    show_singular(out, answer);
    show_others(out, answer, false);
}

void lwc_show_answer(lwc_text *out, const char *kind, const cJSON *answer, bool colour)
{
    const cJSON *batch = batch_of(answer);
    if (batch == NULL) {
        show_one(out, kind, answer, colour);
        return;
    }
    int count = cJSON_GetArraySize(batch);
    int no = 0;
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, batch)
    {
        lwc_text_printf(out, "%sanswer %d of %d\n", no > 0 ? "\n" : "", no + 1, count);
        show_one(out, kind, member, colour);
        no++;
    }
}
