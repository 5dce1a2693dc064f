/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions as query strings: GET .../reach and GET .../margin, for PLCs and dashboards. Every
 * member is understood or refused; none may stand twice. A '+' arrives as a blank (forms are
 * decoded so), hence a blank in a mode, before a number or before its exponent is read as '+'. */
#include <float.h>
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "document.h"
#include "pointer.h"
#include "question_in.h"

enum { VALUE_MAX = 40 };
static const double length_most = 1e6; /* in the units of the question */
static const double angle_most = 1e6;
static const double reading_most = 1e12;

typedef struct query {
    const lwd_pair *pair;
    size_t n;
    lwd_asked kind;
    const lwd_edge *edge; /* NULL while the head is read */
    lwd_findings *findings;
    bool form_given[4]; /* quaternion, zyx, rotation vector, rz */
    double quat[4];
    bool has_quat[4];
    double vector[3];
    bool has_vector[3];
    double zyx[3];
    bool has_zyx[3];
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

/* ---- numbers ------------------------------------------------------------------------------- */

static size_t digits(const char *p)
{
    size_t n = 0;
    while (p[n] >= '0' && p[n] <= '9') {
        n++;
    }
    return n;
}

static const char *sign(const char *p, char **out)
{
    if (*p == '-' || *p == '+' || *p == ' ') {
        *(*out)++ = *p == '-' ? '-' : '+';
        return p + 1;
    }
    return p;
}

/* [sign] digits [. digits] [e [sign] digits]; a leading or trailing point is read as PLCs write it.
 * The daemon never leaves the "C" locale, so strtod reads a point. */
static bool number_of(const char *text, double *out)
{
    char copy[VALUE_MAX + 1];
    char *to = copy;
    if (strlen(text) > VALUE_MAX) {
        return false;
    }
    const char *p = sign(text, &to);
    size_t whole = digits(p);
    memcpy(to, p, whole);
    to += whole;
    p += whole;
    size_t rest = 0;
    if (*p == '.') {
        *to++ = *p++;
        rest = digits(p);
        memcpy(to, p, rest);
        to += rest;
        p += rest;
    }
    if (whole + rest == 0) {
        return false;
    }
    if (*p == 'e' || *p == 'E') {
        *to++ = 'e';
        p = sign(p + 1, &to);
        size_t n = digits(p);
        if (n == 0) {
            return false;
        }
        memcpy(to, p, n);
        to += n;
        p += n;
    }
    *to = '\0';
    double value = strtod(copy, NULL);
    if (*p != '\0' || !(fabs(value) <= DBL_MAX)) {
        return false;
    }
    *out = value;
    return true;
}

static bool read_number(query *in, const lwd_pair *at, double low, double high, double *out)
{
    double value = 0.0;
    if (!number_of(at->value, &value)) {
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

/* ---- members ------------------------------------------------------------------------------- */

static size_t word_index(const char *name, const char *const *word, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        if (strcmp(name, word[i]) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

static bool read_pose_member(query *in, const lwd_pair *at, lwd_question *q)
{
    static const char *const word[] = {"x",  "y",   "z",     "qw",   "qx",  "qy",  "qz",
                                       "yaw", "pitch", "roll", "rvx", "rvy", "rvz", "rz"};
    lw_pose_ask *pose = &q->posture.pose;
    size_t i = word_index(at->name, word, sizeof word / sizeof word[0]);
    double value = 0.0;
    if (i == SIZE_MAX) {
        return false;
    }
    double most = i < 3 ? length_most : angle_most;
    if (!read_number(in, at, -most, most, &value)) {
        return true;
    }
    if (i < 3) {
        pose->has_position[i] = true;
        pose->position_m[i] = lwd_length_in(q->units, value);
    } else if (i < 7) {
        in->form_given[0] = true;
        in->has_quat[i - 3] = true;
        in->quat[i - 3] = value;
    } else if (i < 10) {
        in->form_given[1] = true;
        in->has_zyx[i - 7] = true;
        in->zyx[i - 7] = lwd_angle_in(q->units, value);
    } else if (i < 13) {
        in->form_given[2] = true;
        in->has_vector[i - 10] = true;
        in->vector[i - 10] = lwd_angle_in(q->units, value);
    } else {
        in->form_given[3] = true;
        in->has_zyx[0] = true;
        in->zyx[0] = lwd_angle_in(q->units, value);
    }
    return true;
}

static void read_joint(query *in, const lwd_pair *at, const char *name, lwd_question *q)
{
    const lwd_edge *edge = in->edge;
    lw_pose_ask *pose = &q->posture.pose;
    size_t coord = lwd_edge_coord(edge, name);
    double value = 0.0;
    if (coord == SIZE_MAX) {
        tell(in, at, "unknown-member", "joint. and the name of a joint",
             "The mechanism has no joint \"%.40s\".", name);
        return;
    }
    if (pose->n_joint >= LW_MAX_OUTPUTS) {
        tell(in, at, "too-many", "at most 16 joints", "A pose takes at most 16 joints.");
        return;
    }
    if (!read_number(in, at, -angle_most, angle_most, &value)) {
        return;
    }
    size_t rod_first = edge->n_coord - edge->spec->n_rod;
    double si = edge->coord_turning[coord] ? lwd_angle_in(q->units, value)
                                           : lwd_length_in(q->units, value);
    if (coord >= rod_first) {
        si -= edge->rod_length_m[coord - rod_first];
    }
    pose->joint_coord[pose->n_joint] = coord;
    pose->joint_value[pose->n_joint] = si;
    pose->n_joint++;
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
    if (in->kind == LWD_ASK_REACH && strcmp(at->value, "any") == 0) {
        q->any_mode = true;
        return;
    }
    if (!lwd_edge_mode_parse(in->edge, at->value, &q->posture.mode)) {
        char text[LW_MODE_TEXT_SIZE];
        lw_mode_text(text, &in->edge->report->home_mode);
        tell(in, at, "bad-mode", "signs, one a limb, or the name of a mode",
             "This is no mode of the mechanism; the default one is \"%s\".", text);
        return;
    }
    q->posture.has_mode = true;
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

static void read_reach_member(query *in, const lwd_pair *at, lwd_question *q)
{
    const char *name = at->name;
    if (read_common(in, at, q) || read_pose_member(in, at, q)) {
        return;
    }
    if (begins(name, "joint.")) {
        read_joint(in, at, name + 6, q);
    } else if (begins(name, "from.")) {
        q->has_from = true;
        read_drive(in, at, name + 5, &q->from);
    } else if (strcmp(name, "mode") == 0) {
        read_mode(in, at, q);
    } else if (strcmp(name, "margin_min") == 0 || begins(name, "margin_min.")) {
        read_margin_min(in, at, q);
    } else if (strcmp(name, "distance") == 0 || begins(name, "through")) {
        tell(in, at, "not-served-yet", "the question without this member",
             "%.40s is not served yet.", name);
    } else {
        tell(in, at, "unknown-member",
             "x y z, qw qx qy qz, yaw pitch roll, rvx rvy rvz, rz, joint., from., mode ...",
             "The question reach has no member \"%.40s\".", name);
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

static void set_quaternion(query *in, lw_pose_ask *pose)
{
    double norm = 0.0;
    for (size_t i = 0; i < 4; i++) {
        if (!in->has_quat[i]) {
            tell_pose(in, "qw", "qw, qx, qy and qz", "A quaternion needs qw, qx, qy and qz.");
            return;
        }
        norm += in->quat[i] * in->quat[i];
    }
    norm = sqrt(norm);
    if (!(fabs(norm - 1.0) <= 1e-3)) {
        tell_pose(in, "qw", "unit length within 0.001",
                  "The quaternion is not of unit length; send at least five decimals.");
        return;
    }
    pose->orient = LW_ORIENT_QUATERNION;
    for (size_t i = 0; i < 4; i++) {
        pose->quat[i] = in->quat[i] / norm;
    }
}

static void set_rotation_vector(query *in, lw_pose_ask *pose)
{
    double angle = 0.0;
    for (size_t i = 0; i < 3; i++) {
        if (!in->has_vector[i]) {
            tell_pose(in, "rvx", "rvx, rvy and rvz", "A rotation vector needs rvx, rvy and rvz.");
            return;
        }
        angle += in->vector[i] * in->vector[i];
    }
    angle = sqrt(angle);
    double per = angle > 0.0 ? sin(0.5 * angle) / angle : 0.5;
    pose->orient = LW_ORIENT_QUATERNION;
    pose->quat[0] = cos(0.5 * angle);
    for (size_t i = 0; i < 3; i++) {
        pose->quat[i + 1] = per * in->vector[i];
    }
}

static void set_orientation(query *in, lwd_question *q)
{
    static const lwd_form form[4] = {LWD_FORM_QUATERNION, LWD_FORM_ZYX, LWD_FORM_ROTATION_VECTOR,
                                     LWD_FORM_RZ};
    static const char *const name[4] = {"qw", "yaw", "rvx", "rz"};
    lw_pose_ask *pose = &q->posture.pose;
    size_t given = SIZE_MAX;
    for (size_t i = 0; i < 4; i++) {
        if (!in->form_given[i]) {
            continue;
        }
        if (given != SIZE_MAX) {
            tell_pose(in, name[i], "one form of the orientation",
                      "The orientation is given in two forms; send one of them.");
            return;
        }
        given = i;
    }
    if (given == SIZE_MAX) {
        return;
    }
    if (q->form == LWD_FORM_DEFAULT) {
        q->form = form[given];
    }
    if (given == 0) {
        set_quaternion(in, pose);
    } else if (given == 2) {
        set_rotation_vector(in, pose);
    } else {
        pose->orient = LW_ORIENT_ZYX;
        for (size_t i = 0; i < 3; i++) {
            pose->has_zyx[i] = in->has_zyx[i];
            pose->zyx_rad[i] = in->zyx[i];
        }
    }
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
        size_t n = digits(at->value);
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

bool lwd_query_read(const lwd_pair *pairs, size_t n, const lwd_question_head *head,
                    const lwd_edge *edge, lwd_asked kind, lwd_findings *findings,
                    lwd_question *out)
{
    query in = {.pair = pairs, .n = n, .kind = kind, .edge = edge, .findings = findings};
    lwd_question_clear(out, kind, head, edge);
    clear_posture(&out->posture);
    clear_posture(&out->from);
    read_units(&in, &out->units);
    for (size_t i = 0; i < n; i++) {
        if (kind == LWD_ASK_REACH) {
            read_reach_member(&in, &pairs[i], out);
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
        set_orientation(&in, out);
        if (out->margin_min_is_number) {
            for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
                if (out->margin_min.asked[i]) {
                    tell_pose(&in, "margin_min", "a number, or margin_min.load= and the like",
                              "margin_min stands beside margin_min.* members; send one of them.");
                    break;
                }
            }
        }
    }
    return findings->n_error == 0;
}
