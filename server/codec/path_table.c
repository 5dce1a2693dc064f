/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A path as a table: the header says what the columns are, each row is one move. Columns are line,
 * move, the numbers of a pose as in flat.h, via.x via.y via.z, joint.NAME, and drives by NAME or
 * drive.NAME. An empty field is not given. */
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "csv.h"
#include "flat.h"
#include "path_in.h"
#include "pointer.h"
#include "question_in.h"

typedef enum column_of { OF_LINE, OF_MOVE, OF_POSE, OF_VIA, OF_JOINT, OF_DRIVE } column_of;

enum { NAME_MAX = 48 };

typedef struct column {
    column_of of;
    size_t index; /* number of the pose member, coordinate, drive */
    char name[NAME_MAX];
} column;

typedef struct table {
    lwd_csv csv;
    const lwd_edge *edge;
    lwd_findings *findings;
    lwd_question *q;
    size_t n;
    column column[LWD_CSV_COLUMNS];
    size_t move_column;
} table;

static void tell(table *t, const char *name, const char *code, const char *expected,
                 const char *got, const char *format, ...) __attribute__((format(printf, 6, 7)));

/* A fault in the present row; `name` is the column's, "" the whole row. */
static void tell(table *t, const char *name, const char *code, const char *expected,
                 const char *got, const char *format, ...)
{
    char place[LWD_POINTER_SIZE];
    char what[160];
    lwd_pointer pointer;
    va_list args;
    lwd_pointer_init(&pointer, place, sizeof place);
    if (t->csv.row > 0) {
        lwd_pointer_index(&pointer, t->csv.row);
    }
    if (name[0] != '\0') {
        lwd_pointer_name(&pointer, name);
    }
    lwd_finding *f = lwd_findings_add(t->findings, LW_ERROR, code, place);
    if (f == NULL) {
        return;
    }
    va_start(args, format);
    (void)vsnprintf(what, sizeof what, format, args);
    va_end(args);
    if (t->csv.row == 0) {
        lwd_text_copy(f->text, sizeof f->text, what);
    } else {
        (void)snprintf(f->text, sizeof f->text, "Row %zu%s%.40s: %s", t->csv.row,
                       name[0] != '\0' ? ", column " : "", name, what);
    }
    lwd_text_copy(f->expected, sizeof f->expected, expected);
    if (got != NULL && got[0] != '\0') {
        (void)snprintf(f->got, sizeof f->got, "\"%.60s\"", got);
    }
}

static void tell_csv(table *t)
{
    char name[24] = "";
    if (t->csv.n > 0 && t->csv.n <= t->n) {
        tell(t, t->column[t->csv.n - 1].name, "malformed-csv", "RFC 4180", NULL, "%s",
             t->csv.fault);
        return;
    }
    (void)snprintf(name, sizeof name, "%zu", t->csv.n);
    tell(t, name, "malformed-csv", "RFC 4180", NULL, "%s", t->csv.fault);
}

/* ---- the header ---------------------------------------------------------------------------- */

static bool starts(const char *text, const char *start)
{
    return strncmp(text, start, strlen(start)) == 0;
}

/* What a name of the header stands for; false if it stands for nothing here. */
static bool column_find(const table *t, const char *name, column *out)
{
    size_t i = lwd_flat_member(name);
    if (strcmp(name, "line") == 0 || strcmp(name, "move") == 0) {
        out->of = name[0] == 'l' ? OF_LINE : OF_MOVE;
        return true;
    }
    if (starts(name, "via.")) {
        out->of = OF_VIA;
        out->index = lwd_flat_member(name + 4);
        return out->index < 3;
    }
    if (starts(name, "joint.")) {
        out->of = OF_JOINT;
        out->index = lwd_edge_coord(t->edge, name + 6);
        return out->index != SIZE_MAX;
    }
    out->of = OF_DRIVE;
    out->index = lwd_edge_drive(t->edge, starts(name, "drive.") ? name + 6 : name);
    if (i != SIZE_MAX && !starts(name, "drive.")) {
        out->of = OF_POSE;
        out->index = i;
    }
    return out->index != SIZE_MAX;
}

static void read_column(table *t, const char *name)
{
    column *c = &t->column[t->n];
    c->index = 0;
    if (strlen(name) >= NAME_MAX || !column_find(t, name, c)) {
        char place[24];
        (void)snprintf(place, sizeof place, "%zu", t->n + 1);
        tell(t, place, "unknown-member",
             "line, move, x, yaw, qw, via.x, joint.NAME, a drive, ...", name,
             "no column has this name here.");
        return;
    }
    lwd_text_copy(c->name, sizeof c->name, name);
    for (size_t i = 0; i < t->n; i++) {
        if (t->column[i].of == c->of && t->column[i].index == c->index) {
            tell(t, c->name, "doubled-member", "each column once", name,
                 "the column stands twice.");
            return;
        }
    }
    if (c->of == OF_MOVE) {
        t->move_column = t->n;
    }
    t->n++;
}

static bool read_header(table *t)
{
    lwd_csv_result result = lwd_csv_next(&t->csv);
    if (result == LWD_CSV_FAULT) {
        tell_csv(t);
        return false;
    }
    if (result == LWD_CSV_END) {
        tell(t, "", "missing-member", "a header row, then one row a move", NULL,
             "The table is empty.");
        return false;
    }
    if (t->csv.n == 1 && strchr(t->csv.field[0], ';') != NULL) {
        tell(t, "", "malformed-csv", "commas between the fields", t->csv.field[0],
             "the fields are divided by semicolons; write commas, and points in numbers.");
        return false;
    }
    t->move_column = SIZE_MAX;
    for (size_t i = 0; i < t->csv.n; i++) {
        read_column(t, t->csv.field[i]);
    }
    if (t->findings->n_error == 0 && t->move_column == SIZE_MAX) {
        tell(t, "move", "missing-member", "a column move: line, circle or joints", NULL,
             "the column \"move\" is missing.");
    }
    return t->findings->n_error == 0;
}

/* ---- rows ---------------------------------------------------------------------------------- */

static bool number(table *t, const column *c, const char *text, double most, double *out)
{
    if (!lwd_flat_number(text, out)) {
        tell(t, c->name, "wrong-type", "a decimal number such as 12.5", text,
             "this is no number.");
        return false;
    }
    if (!(*out >= -most && *out <= most)) {
        tell(t, c->name, "out-of-range", "a number of sensible size", text,
             "the number is far out of range.");
        return false;
    }
    return true;
}

static bool read_kind(table *t, lw_move *move)
{
    const char *text = t->csv.field[t->move_column];
    for (unsigned kind = LW_MOVE_LINE; kind <= LW_MOVE_JOINTS; kind++) {
        if (strcmp(text, lwd_move_word((lw_move_kind)kind)) == 0) {
            move->kind = (lw_move_kind)kind;
            return true;
        }
    }
    tell(t, "move", "bad-value", "line, circle or joints", text, "this is no kind of move.");
    return false;
}

/* A field that this kind of move has no use for. */
static bool has_use(table *t, const column *c, lw_move_kind kind)
{
    bool use = c->of == OF_VIA     ? kind == LW_MOVE_CIRCLE
               : c->of == OF_DRIVE ? kind == LW_MOVE_JOINTS
                                   : true;
    if (!use) {
        tell(t, c->name, "unknown-member", "an empty field", NULL,
             "a move of the kind %s takes no %s.", lwd_move_word(kind),
             c->of == OF_VIA ? "via" : "readings");
    }
    return use;
}

static void read_cell(table *t, const column *c, const char *text, lw_move *move, lwd_flat *pose)
{
    lwd_units units = t->q->units;
    double value = 0.0;
    if (text[0] == '\0' || c->of == OF_MOVE || !has_use(t, c, move->kind)) {
        return;
    }
    if (c->of == OF_LINE) {
        if (lwd_ref_ok(text)) {
            lwd_text_copy(t->q->path->line[t->q->path->n], LWD_REF_MAX + 1, text);
        } else {
            tell(t, c->name, "bad-line", "1 to 32 printable ASCII characters", text,
                 "a line's tag is 1 to 32 printable ASCII characters.");
        }
        return;
    }
    if (!number(t, c, text, c->of == OF_DRIVE ? 1e9 : LWD_FLAT_MOST, &value)) {
        return;
    }
    switch (c->of) {
    case OF_POSE:
        lwd_flat_put(pose, units, c->index, value);
        break;
    case OF_VIA:
        move->via.has_position[c->index] = true;
        move->via.position_m[c->index] = lwd_length_in(units, value);
        break;
    case OF_JOINT:
        if (!lwd_flat_put_joint(pose, t->edge, units, c->index, value)) {
            tell(t, c->name, "too-many", "at most 16 joints", NULL,
                 "a pose takes at most 16 joints.");
        }
        break;
    case OF_DRIVE:
        move->has_drives = true;
        move->has_drive[c->index] = true;
        move->drive[c->index] = lwd_reading_in(t->edge, c->index, value);
        break;
    case OF_LINE:
    case OF_MOVE:
        break;
    }
}

/* What a move of its kind needs. */
static void check_move(table *t, const lw_move *move, bool posed)
{
    bool via = move->via.has_position[0] || move->via.has_position[1] || move->via.has_position[2];
    if (move->kind == LW_MOVE_JOINTS && posed == move->has_drives) {
        tell(t, "", posed ? "two-postures" : "missing-member", "readings or a pose", NULL, "%s",
             posed ? "the end is given by readings and by a pose; leave one of them empty."
                   : "the move's end is missing: give readings or a pose.");
    } else if (move->kind != LW_MOVE_JOINTS && !posed) {
        tell(t, "", "missing-member", "x, y, z and so on", NULL, "the move's end is missing.");
    } else if (move->kind == LW_MOVE_CIRCLE && !via) {
        tell(t, "", "missing-member", "via.x, via.y, via.z", NULL,
             "a circle needs the point via that it passes through.");
    }
}

static void read_row(table *t)
{
    lwd_path *path = t->q->path;
    lw_move *move = &path->move[path->n];
    lwd_flat pose;
    if (t->csv.n != t->n) {
        tell(t, "", "malformed-csv", "as many fields as the header has", NULL,
             "the row has %zu fields, the header has %zu.", t->csv.n, t->n);
        return;
    }
    memset(move, 0, sizeof *move);
    path->line[path->n][0] = '\0';
    path->row[path->n] = t->csv.row;
    lwd_flat_open(&pose);
    if (!read_kind(t, move)) {
        return;
    }
    for (size_t i = 0; i < t->n; i++) {
        read_cell(t, &t->column[i], t->csv.field[i], move, &pose);
    }
    const lwd_flat_fault *fault = lwd_flat_close(&pose, &t->q->form);
    if (fault != NULL) {
        tell(t, fault->member, "bad-value", fault->expected, NULL, "%s", fault->text);
    }
    check_move(t, move, lwd_flat_given(&pose));
    move->pose = pose.pose;
    path->n++;
}

bool lwd_path_table_in(const char *text, size_t len, const lwd_edge *edge, lwd_findings *findings,
                       lwd_question *q)
{
    table t = {.edge = edge, .findings = findings, .q = q};
    lwd_csv_result result = LWD_CSV_END;
    q->path->n = 0;
    lwd_csv_open(&t.csv, text, len);
    if (!read_header(&t)) {
        return false;
    }
    while ((result = lwd_csv_next(&t.csv)) == LWD_CSV_ROW) {
        if (q->path->n == LW_MAX_MOVES) {
            tell(&t, "", "too-many", "at most 256 moves", NULL,
                 "a path has at most %d moves; divide it.", LW_MAX_MOVES);
            return false;
        }
        read_row(&t);
    }
    if (result == LWD_CSV_FAULT) {
        tell_csv(&t);
    } else if (q->path->n == 0 && findings->n_error == 0) {
        t.csv.row = 0;
        tell(&t, "", "too-few", "a row for each move", NULL, "The table has no moves.");
    }
    return findings->n_error == 0;
}
