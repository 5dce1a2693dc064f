/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions as query strings: GET .../reach and GET .../margin, for PLCs and dashboards, and what
 * stands beside a path sent as a table. Every member is understood or refused; none may stand
 * twice. A '+' arrives as a blank (forms are decoded so), hence a blank in a mode, before a number
 * or before its exponent is read as '+'. */
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "document.h"
#include "flat.h"
#include "pointer.h"
#include "question_in.h"

static const double reading_most = 1e12;

typedef struct query {
    const lwd_pair *pair;
    size_t n;
    lwd_asked kind;
    const lwd_edge *edge; /* NULL while the head is read */
    lwd_findings *findings;
    lwd_flat pose;
    lwd_flat from;
} query;

static void tell(query *in, const lwd_pair *at, const char *code, const char *expected,
                 const char *format, ...) __attribute__((format(printf, 5, 6)));

static void tell(query *in, const lwd_pair *at, const char *code, const char *expected,
                 const char *format, ...)
{
    char place[LWD_POINTER_SIZE];
    lwd_pointer pointer;
    va_list args;
    lwd_pointer_init(&pointer, place, sizeof place);
    lwd_pointer_name(&pointer, at->name);
    lwd_finding *f = lwd_findings_add(in->findings, LW_ERROR, code, place);
    if (f == NULL) {
        return;
    }
    va_start(args, format);
    (void)vsnprintf(f->text, sizeof f->text, format, args);
    va_end(args);
    lwd_text_copy(f->expected, sizeof f->expected, expected);
    if (at->value[0] != '\0') {
        (void)snprintf(f->got, sizeof f->got, "\"%.60s\"", at->value);
    }
}

/* ---- members ------------------------------------------------------------------------------- */

static bool read_number(query *in, const lwd_pair *at, double low, double high, double *out)
{
    double value = 0.0;
    if (!lwd_flat_number(at->value, &value)) {
        tell(in, at, "bad-query", "a decimal number", "%.40s takes a decimal number such as 12.5.",
             at->name);
        return false;
    }
    if (!(value >= low && value <= high)) {
        tell(in, at, "out-of-range", "a number of sensible size",
             "The number of %.40s is far out of range.", at->name);
        return false;
    }
    *out = value;
    return true;
}

static size_t word_index(const char *name, const char *const *word, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        if (strcmp(name, word[i]) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

/* One number of a pose; false if `name` is none of its members. */
static bool read_pose_member(query *in, const lwd_pair *at, const char *name, lwd_units units,
                             lwd_flat *flat)
{
    size_t i = lwd_flat_member(name);
    double value = 0.0;
    if (i == SIZE_MAX) {
        return false;
    }
    if (read_number(in, at, -LWD_FLAT_MOST, LWD_FLAT_MOST, &value)) {
        lwd_flat_put(flat, units, i, value);
    }
    return true;
}

static void read_joint(query *in, const lwd_pair *at, const char *name, lwd_units units,
                       lwd_flat *flat)
{
    size_t coord = lwd_edge_coord(in->edge, name);
    double value = 0.0;
    if (coord == SIZE_MAX) {
        tell(in, at, "unknown-member", "joint. and the name of a joint",
             "The mechanism has no joint \"%.40s\".", name);
    } else if (read_number(in, at, -LWD_FLAT_MOST, LWD_FLAT_MOST, &value)
               && !lwd_flat_put_joint(flat, in->edge, units, coord, value)) {
        tell(in, at, "too-many", "at most 16 joints", "A pose takes at most 16 joints.");
    }
}

static void read_drive(query *in, const lwd_pair *at, const char *name, lw_posture_ask *posture)
{
    size_t drive = lwd_edge_drive(in->edge, name);
    double reading = 0.0;
    if (drive == SIZE_MAX) {
        tell(in, at, "unknown-member", "the name of a drive",
             "The mechanism has no drive \"%.40s\"; its first drive is \"%s\".", name,
             in->edge->spec->drive[0].name);
        return;
    }
    if (!read_number(in, at, -reading_most, reading_most, &reading)) {
        return;
    }
    if (posture->has_drive[drive]) { /* m1= and drive.m1= */
        tell(in, at, "doubled-member", "one reading a drive",
             "The drive \"%s\" has two readings here.", in->edge->spec->drive[drive].name);
        return;
    }
    posture->kind = LW_BY_DRIVES;
    posture->has_drive[drive] = true;
    posture->drive[drive] = lwd_reading_in(in->edge, drive, reading);
}

static void read_mode(query *in, const lwd_pair *at, lwd_question *q)
{
    lw_posture_ask *posture = in->kind == LWD_ASK_PATH ? &q->from : &q->posture;
    if (in->kind == LWD_ASK_REACH && strcmp(at->value, "any") == 0) {
        q->any_mode = true;
        return;
    }
    if (!lwd_edge_mode_parse(in->edge, at->value, &posture->mode)) {
        char text[LW_MODE_TEXT_SIZE];
        lw_mode_text(text, &in->edge->report->home_mode);
        tell(in, at, "bad-mode", "signs, one a limb, or the name of a mode",
             "This is no mode of the mechanism; the default one is \"%s\".", text);
        return;
    }
    posture->has_mode = true;
}

static void read_tool(query *in, const lwd_pair *at, lwd_question *q)
{
    size_t tool = lwd_edge_tool(in->edge, at->value);
    if (tool == SIZE_MAX) {
        tell(in, at, "unknown-name", "the name of a tool",
             "This revision has no tool of this name; its first tool is \"%s\".",
             in->edge->spec->tool[0].name);
        return;
    }
    q->tool = tool;
}

static void read_form(query *in, const lwd_pair *at, lwd_question *q)
{
    static const char *const word[] = {"quaternion", "zyx", "rotation_vector", "direction", "rz"};
    size_t i = word_index(at->value, word, 5);
    if (i == SIZE_MAX) {
        tell(in, at, "bad-query", "quaternion, zyx, rotation_vector, direction or rz",
             "This is no form of an orientation.");
        return;
    }
    q->form = (lwd_form)(LWD_FORM_QUATERNION + i);
}

static void read_margin_min(query *in, const lwd_pair *at, lwd_question *q)
{
    double value = 0.0;
    if (!read_number(in, at, 0.0, 1e6, &value)) {
        return;
    }
    q->has_margin_min = true;
    if (at->name[10] == '\0') {
        q->margin_min_is_number = true;
        q->margin_min_number = value;
        return;
    }
    int i = lwd_margin_of(at->name + 11);
    if (i < 0) {
        tell(in, at, "unknown-member",
             "margin_min. and accuracy, load, speed, spare, travel or hold",
             "There is no margin of this name.");
        return;
    }
    q->margin_min.asked[i] = true;
    q->margin_min.value[i] = value;
}

static bool begins(const char *text, const char *start)
{
    return strncmp(text, start, strlen(start)) == 0;
}

/* units.length and units.angle; read before all others, whose numbers are in them. No drive can
 * have such a name: it has a point. */
static void read_units(query *in, lwd_units *units)
{
    for (size_t i = 0; i < in->n; i++) {
        const lwd_pair *at = &in->pair[i];
        if (strcmp(at->name, "units.length") == 0) {
            units->metres = strcmp(at->value, "m") == 0;
            if (!units->metres && strcmp(at->value, "mm") != 0) {
                tell(in, at, "bad-query", "mm or m", "units.length takes mm or m.");
            }
        } else if (strcmp(at->name, "units.angle") == 0) {
            units->radians = strcmp(at->value, "rad") == 0;
            if (!units->radians && strcmp(at->value, "deg") != 0) {
                tell(in, at, "bad-query", "deg or rad", "units.angle takes deg or rad.");
            }
        }
    }
}

/* The members read with the head. */
static bool is_head(const char *name)
{
    return strcmp(name, "ref") == 0 || strcmp(name, "revision") == 0 || strcmp(name, "expect") == 0;
}

static bool read_common(query *in, const lwd_pair *at, lwd_question *q)
{
    if (is_head(at->name) || strcmp(at->name, "units.length") == 0
        || strcmp(at->name, "units.angle") == 0) {
        return true;
    }
    if (strcmp(at->name, "units") == 0 && lwd_edge_drive(in->edge, "units") == SIZE_MAX) {
        tell(in, at, "bad-query", "units.length=mm or m, units.angle=deg or rad",
             "In a query the units are written apart: units.length and units.angle.");
        return true;
    }
    if (strcmp(at->name, "tool") == 0) {
        read_tool(in, at, q);
        return true;
    }
    if (strcmp(at->name, "orientation") == 0) {
        read_form(in, at, q);
        return true;
    }
    return false;
}

static void read_whole(query *in, const lwd_pair *at, long most, int64_t *out)
{
    size_t n = strspn(at->value, "0123456789");
    long value = n > 0 && n < 10 && at->value[n] == '\0' ? strtol(at->value, NULL, 10) : 0;
    if (value < 1 || value > most) {
        tell(in, at, "out-of-range", "a whole number from 1, within its bound",
             "%.40s takes a whole number from 1 to %ld.", at->name, most);
        return;
    }
    *out = value;
}

/* How long may be worked on it, and what is wanted of it. */
static bool read_effort(query *in, const lwd_pair *at, lwd_question *q)
{
    if (strcmp(at->name, "margin_min") == 0 || begins(at->name, "margin_min.")) {
        read_margin_min(in, at, q);
    } else if (strcmp(at->name, "budget") == 0) {
        read_whole(in, at, LW_PATH_BUDGET_MOST, &q->budget);
    } else if (strcmp(at->name, "timeout_ms") == 0) {
        read_whole(in, at, LWD_TIMEOUT_MOST, &q->timeout_ms);
    } else {
        return false;
    }
    return true;
}

static void read_reach_member(query *in, const lwd_pair *at, lwd_question *q)
{
    const char *name = at->name;
    if (read_common(in, at, q) || read_effort(in, at, q)) {
        return;
    }
    bool direction = name[0] == 'd' && name[1] != '\0' && name[2] == '\0';
    if (!direction && read_pose_member(in, at, name, q->units, &in->pose)) {
        return;
    }
    if (begins(name, "joint.")) {
        read_joint(in, at, name + 6, q->units, &in->pose);
    } else if (begins(name, "from.")) {
        q->has_from = true;
        read_drive(in, at, name + 5, &q->from);
    } else if (strcmp(name, "mode") == 0) {
        read_mode(in, at, q);
    } else {
        tell(in, at, "unknown-member",
             "x y z, qw qx qy qz, yaw pitch roll, rvx rvy rvz, rz, joint., from., mode ...",
             "The question reach has no member \"%.40s\".", name);
    }
}

/* What stands beside a table of moves: where it starts, and how it is judged. */
static void read_path_member(query *in, const lwd_pair *at, lwd_question *q)
{
    const char *name = at->name;
    const char *start = begins(name, "from.") ? name + 5 : NULL;
    if (read_common(in, at, q) || read_effort(in, at, q)) {
        return;
    }
    if (start != NULL && begins(start, "joint.")) {
        read_joint(in, at, start + 6, q->units, &in->from);
    } else if (start != NULL && lwd_edge_drive(in->edge, start) == SIZE_MAX
               && read_pose_member(in, at, start, q->units, &in->from)) {
        return;
    } else if (start != NULL) {
        read_drive(in, at, begins(start, "drive.") ? start + 6 : start, &q->from);
    } else if (strcmp(name, "mode") == 0) {
        read_mode(in, at, q);
    } else if (strcmp(name, "certificate") == 0) {
        static const char *const word[] = {"false", "true"};
        size_t i = word_index(at->value, word, 2);
        q->certificate = i == 1;
        if (i == SIZE_MAX) {
            tell(in, at, "bad-query", "true or false", "certificate takes true or false.");
        }
    } else {
        tell(in, at, "unknown-member",
             "from.m1 and the like, mode, margin_min, units.length, tool, budget, timeout_ms ...",
             "The question path has no member \"%.40s\" beside its table.", name);
    }
}

static void read_margin_member(query *in, const lwd_pair *at, lwd_question *q)
{
    if (read_common(in, at, q)) {
        return;
    }
    if (strcmp(at->name, "distance") == 0) {
        tell(in, at, "not-served-yet", "the question without this member",
             "The distance to the nearest singularity is not served yet.");
        return;
    }
    read_drive(in, at, begins(at->name, "drive.") ? at->name + 6 : at->name, &q->posture);
}

/* ---- orientation --------------------------------------------------------------------------- */

/* A fault of several members together, told at the one named. */
static void tell_pose(query *in, const char *name, const char *expected, const char *text)
{
    const lwd_pair at = {.name = name, .value = ""};
    tell(in, &at, "bad-query", expected, "%s", text);
}

static void close_pose(query *in, lwd_flat *flat, lw_pose_ask *out, lwd_form *form)
{
    const lwd_flat_fault *fault = lwd_flat_close(flat, form);
    if (fault != NULL) {
        tell_pose(in, fault->member, fault->expected, fault->text);
    }
    *out = flat->pose;
}

/* The start of a path: readings or a pose, not both, and one of them. */
static void close_from(query *in, lwd_question *q)
{
    lwd_form none = LWD_FORM_QUATERNION; /* the start sets no form for the answer */
    bool readings = q->from.kind == LW_BY_DRIVES;
    bool pose = lwd_flat_given(&in->from);
    if (in->findings->n_error > 0) {
        return;
    }
    if (readings == pose) {
        tell_pose(in, "from", "from.m1=.. and so on, or from.x=.. and so on",
                  pose ? "The start is given by readings and by a pose; leave one of them out."
                       : "A path needs its start: from.NAME=.. for each drive, or a pose.");
    } else if (readings && q->from.has_mode) {
        tell_pose(in, "mode", "mode beside a start given by its pose",
                  "A mode picks among the postures of a pose; it has no use beside readings.");
    } else if (pose) {
        q->from.kind = LW_BY_POSE;
        close_pose(in, &in->from, &q->from.pose, &none);
    }
    q->has_from = true;
}

/* ---- the two steps ------------------------------------------------------------------------- */

static void refuse_doubled(query *in)
{
    for (size_t i = 1; i < in->n; i++) {
        for (size_t k = 0; k < i; k++) {
            if (strcmp(in->pair[i].name, in->pair[k].name) == 0) {
                tell(in, &in->pair[i], "doubled-member", "each member once",
                     "The member \"%.40s\" stands twice.", in->pair[i].name);
                break;
            }
        }
    }
}

static void read_head_member(query *in, const lwd_pair *at, lwd_question_head *head)
{
    if (strcmp(at->name, "ref") == 0) {
        if (!lwd_ref_ok(at->value)) {
            tell(in, at, "bad-query", "1 to 32 printable ASCII characters",
                 "A ref is 1 to 32 printable ASCII characters; it is sent back unchanged.");
            return;
        }
        head->has_ref = true;
        lwd_text_copy(head->ref, sizeof head->ref, at->value);
    } else if (strcmp(at->name, "revision") == 0) {
        size_t n = strspn(at->value, "0123456789");
        if (n == 0 || n > 9 || at->value[n] != '\0' || at->value[0] == '0') {
            tell(in, at, "bad-query", "the number of a revision, from 1",
                 "revision takes a whole number from 1.");
            return;
        }
        head->revision = strtol(at->value, NULL, 10);
    } else if (strcmp(at->name, "expect") == 0 && !lwd_expect_parse(at->value, head->expect)) {
        head->expect[0] = '\0';
        tell(in, at, "bad-query", "8 or 64 hex digits",
             "expect takes a digest as answers show it, or its first 8 digits.");
    }
}

bool lwd_query_head_read(const lwd_pair *pairs, size_t n, lwd_asked kind, lwd_findings *findings,
                         lwd_question_head *head)
{
    query in = {.pair = pairs, .n = n, .kind = kind, .findings = findings};
    head->has_ref = false;
    head->ref[0] = '\0';
    head->revision = 0;
    head->expect[0] = '\0';
    refuse_doubled(&in);
    for (size_t i = 0; i < n; i++) {
        read_head_member(&in, &pairs[i], head);
    }
    return findings->n_error == 0;
}

static void clear_posture(lw_posture_ask *posture)
{
    posture->kind = LW_BY_NOTHING;
    memset(posture->has_drive, 0, sizeof posture->has_drive);
    memset(&posture->pose, 0, sizeof posture->pose);
    posture->has_mode = false;
    posture->near = NULL;
}

/* A threshold for all and one by name together say two things at once. */
static void refuse_two_thresholds(query *in, const lwd_question *q)
{
    for (size_t i = 0; i < LW_MARGIN_COUNT && q->margin_min_is_number; i++) {
        if (q->margin_min.asked[i]) {
            tell_pose(in, "margin_min", "a number, or margin_min.load= and the like",
                      "margin_min stands beside margin_min.* members; send one of them.");
            return;
        }
    }
}

bool lwd_query_read(const lwd_pair *pairs, size_t n, const lwd_question_head *head,
                    const lwd_edge *edge, lwd_asked kind, lwd_findings *findings,
                    lwd_question *out)
{
    query in = {.pair = pairs, .n = n, .kind = kind, .edge = edge, .findings = findings};
    lwd_question_clear(out, kind, head, edge);
    clear_posture(&out->posture);
    clear_posture(&out->from);
    lwd_flat_open(&in.pose);
    lwd_flat_open(&in.from);
    read_units(&in, &out->units);
    for (size_t i = 0; i < n; i++) {
        if (kind == LWD_ASK_REACH) {
            read_reach_member(&in, &pairs[i], out);
        } else if (kind == LWD_ASK_PATH) {
            read_path_member(&in, &pairs[i], out);
        } else {
            read_margin_member(&in, &pairs[i], out);
        }
    }
    if (kind == LWD_ASK_MARGIN && out->posture.kind == LW_BY_NOTHING && findings->n_error == 0) {
        const lwd_pair at = {.name = edge->spec->drive[0].name, .value = ""};
        tell(&in, &at, "missing-member", "a reading for each drive",
             "The question margin needs the readings of the drives, such as %s=12.5.", at.name);
    }
    if (kind == LWD_ASK_REACH) {
        out->posture.kind = LW_BY_POSE;
        close_pose(&in, &in.pose, &out->posture.pose, &out->form);
    } else if (kind == LWD_ASK_PATH) {
        close_from(&in, out);
    }
    refuse_two_thresholds(&in, out);
    return findings->n_error == 0;
}
