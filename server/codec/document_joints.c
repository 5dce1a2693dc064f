/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Bodies and joints of the mechanism document. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

static const double square_tolerance = 1.7453292519943295e-3; /* 0.1 degree, rad */

/* ---- bodies ---------------------------------------------------------------------------------- */

void lwd_decode_bodies(lwd_decode *d)
{
    lwd_document *doc = d->doc;
    const lwd_reader *r = &d->m[LWD_D_BODIES];
    lwd_reader e;
    if (!lwd_want_array(r, 2, LW_MAX_BODIES, "names of bodies")) {
        return;
    }
    d->bodies_known = true;
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        char name[LW_NAME_SIZE];
        if (!lwd_read_name(&e, name)) {
            d->bodies_known = false;
            continue;
        }
        if (lwd_document_body(doc, name) != SIZE_MAX) {
            LWD_TELL(&e, "doubled-name", "a name of its own", NULL,
                     "There is a body \"%s\" already.", name);
        }
        memcpy(doc->spec.body[doc->spec.n_body++], name, sizeof name);
    }
    if (d->bodies_known) {
        (void)lwd_read_body(&d->m[LWD_D_FRAME], doc, &doc->spec.frame);
    }
}

/* ---- what joints and rods share -------------------------------------------------------------- */

double lwd_angle_between(const double a[3], const double b[3])
{
    double cross[3] = {a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2],
                       a[0] * b[1] - a[1] * b[0]};
    double dot = a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
    return atan2(sqrt(cross[0] * cross[0] + cross[1] * cross[1] + cross[2] * cross[2]), dot);
}

bool lwd_make_square(const lwd_reader *r, const double first[3], double second[3])
{
    double along = first[0] * second[0] + first[1] * second[1] + first[2] * second[2];
    double off = fabs(lwd_angle_between(first, second) - 1.5707963267948966);
    char got[60];
    (void)snprintf(got, sizeof got, "%s deg off", lwd_num_short(off * 57.29577951308232).text);
    if (!(off <= square_tolerance)) {
        LWD_TELL(r, "axes-not-square", "square within 0.1 deg", got,
                 "The two axes must stand at right angles; they are %s.", got);
        return false;
    }
    if (off > 1e-9) {
        lwd_tell(r, LW_NOTE, "axes-straightened", "square", got,
                 "The two axes were %s a right angle; this one was straightened.", got);
    }
    double size = 0.0;
    for (int i = 0; i < 3; i++) {
        second[i] -= along * first[i];
        size += second[i] * second[i];
    }
    for (int i = 0; i < 3; i++) {
        second[i] /= sqrt(size);
    }
    return true;
}

lw_range lwd_range_in(lw_range written, lwd_units units, bool turning)
{
    lw_range range = written;
    range.low = turning ? lwd_angle_in(units, written.low) : lwd_length_in(units, written.low);
    range.high = turning ? lwd_angle_in(units, written.high) : lwd_length_in(units, written.high);
    return range;
}

bool lwd_read_point(const lwd_reader *r, lwd_units units, double out_m[3])
{
    double v[3];
    if (!lwd_read_vec3(r, lwd_length_most(units), v)) {
        return false;
    }
    for (int i = 0; i < 3; i++) {
        out_m[i] = lwd_length_in(units, v[i]);
    }
    return true;
}

bool lwd_read_between(const lwd_reader *r, const lwd_decode *d, size_t body[2])
{
    lwd_reader e;
    bool good = lwd_want_array(r, 2, 2, "names of bodies");
    if (!good || !d->bodies_known) {
        return false;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        good = lwd_read_body(&e, d->doc, &body[e.index]) && good;
    }
    if (good && body[0] == body[1]) {
        LWD_TELL(r, "same-body", "two different bodies", d->doc->spec.body[body[0]],
                 "Both ends are on the body \"%s\"; nothing could move.",
                 d->doc->spec.body[body[0]]);
        return false;
    }
    return good;
}

/* ---- one joint ------------------------------------------------------------------------------- */

static const char *const type_word[] = {"fixed",       "revolute",  "prismatic", "helical",
                                        "cylindrical", "universal", "spherical", "planar"};
enum { TYPES = 8 };
_Static_assert((int)LW_PLANAR == TYPES - 1, "type_word follows lw_joint_type");

enum {
    J_NAME, J_TYPE, J_BETWEEN, J_AT, J_AXIS, J_RANGE, J_LEAD, J_RANGES, J_SECOND_AXIS, J_X_AXIS,
    J_CONE, J_CONE_AXIS, J_STUD_AXIS, J_MEMBERS
};

/* Which members a type takes: '!' must, '?' may, '-' not. */
static const char takes[TYPES][J_MEMBERS + 1] = {
    [LW_FIXED] = "!!!----------",       [LW_REVOLUTE] = "!!!!!?-------",
    [LW_PRISMATIC] = "!!!?!?-------",   [LW_HELICAL] = "!!!!!?!------",
    [LW_CYLINDRICAL] = "!!!!!--?-----", [LW_UNIVERSAL] = "!!!!!--?!----",
    [LW_SPHERICAL] = "!!!!------???",   [LW_PLANAR] = "!!!!!--?-!---",
};
static const char *const member_word[J_MEMBERS] = {
    "name", "type", "between", "at", "axis", "range", "lead", "ranges", "second_axis", "x_axis",
    "cone", "cone_axis", "stud_axis"};

/* The members that the type takes, sorted into m by their J_ number. */
static bool read_joint_members(const lwd_reader *r, lw_joint_type type, lwd_reader m[J_MEMBERS])
{
    lwd_member table[J_MEMBERS];
    size_t place[J_MEMBERS];
    lwd_reader found[J_MEMBERS];
    size_t n = 0;
    for (size_t i = 0; i < J_MEMBERS; i++) {
        m[i] = (lwd_reader){NULL, r, member_word[i], 0, r->findings};
        if (takes[type][i] != '-') {
            table[n] = (lwd_member){member_word[i], takes[type][i] == '!'};
            place[n++] = i;
        }
    }
    if (!lwd_read_members(r, table, n, found)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        m[place[i]] = found[i];
    }
    return true;
}

/* A range of a coordinate: in document units, zero inside. */
static void read_joint_range(const lwd_reader *r, lwd_units units, bool turning, lw_range *out)
{
    lw_range written;
    double most = turning ? lwd_angle_most(units) : lwd_length_most(units);
    if (!lwd_read_range(r, most, &written)) {
        return;
    }
    if ((written.has_low && written.low > 0.0) || (written.has_high && written.high < 0.0)) {
        LWD_TELL(r, "reference-outside", "a range that holds 0", NULL,
                 "The range leaves out 0, the coordinate in the reference posture. Ranges of "
                 "joints are changes from the reference posture.");
        return;
    }
    *out = lwd_range_in(written, units, turning);
}

static void read_ranges(const lwd_reader *r, const lwd_document *doc, lw_spec_joint *joint)
{
    lwd_member table[3];
    lwd_reader m[3];
    size_t n = lw_joint_coords(joint->type);
    for (size_t p = 0; p < n; p++) {
        table[p] = (lwd_member){lwd_part_word(joint->type, p), false};
    }
    if (!lwd_is_given(r) || !lwd_read_members(r, table, n, m)) {
        return;
    }
    for (size_t p = 0; p < n; p++) {
        bool turning = joint->type == LW_UNIVERSAL ||
                       (joint->type == LW_CYLINDRICAL ? p == 0 : p == 2);
        read_joint_range(&m[p], doc->units, turning, &joint->range[p]);
    }
}

static void read_cone(const lwd_reader m[J_MEMBERS], const lwd_document *doc, lw_spec_joint *joint)
{
    double cone = 0.0;
    bool has_axis = lwd_read_axis(&m[J_CONE_AXIS], joint->cone_axis);
    if (!lwd_is_given(&m[J_CONE])) {
        for (size_t i = J_CONE_AXIS; i <= J_STUD_AXIS; i++) {
            if (lwd_is_given(&m[i])) {
                LWD_TELL(&m[J_CONE], "missing-member", "cone", "nothing",
                         "\"%s\" has no use without \"cone\", the half angle.", m[i].name);
                return;
            }
        }
        return;
    }
    if (!lwd_read_positive(&m[J_CONE], doc->units.radians ? 3.141592653589793 : 180.0, &cone)) {
        return;
    }
    if (!lwd_is_given(&m[J_CONE_AXIS])) {
        LWD_TELL(&m[J_CONE_AXIS], "missing-member", "cone_axis", "nothing",
                 "The member \"cone_axis\" is missing: the middle of the cone, on the first body.");
        return;
    }
    memcpy(joint->stud_axis, joint->cone_axis, sizeof joint->stud_axis);
    bool has_stud = !lwd_is_given(&m[J_STUD_AXIS]) ||
                    lwd_read_axis(&m[J_STUD_AXIS], joint->stud_axis);
    if (!has_axis || !has_stud) {
        return;
    }
    joint->has_cone = true;
    joint->cone_rad = lwd_angle_in(doc->units, cone);
    double at = lwd_angle_between(joint->cone_axis, joint->stud_axis);
    if (!(at <= joint->cone_rad)) {
        char got[48];
        (void)snprintf(got, sizeof got, "%s %s",
                       lwd_num_short(lwd_angle_out(doc->units, at)).text,
                       lwd_angle_word(doc->units));
        LWD_TELL(&m[J_CONE], "reference-outside", "a cone that holds the reference posture", got,
                 "In the reference posture the stud stands at %s, outside the cone.", got);
    }
}

static void read_joint_axes(const lwd_reader m[J_MEMBERS], lw_spec_joint *joint)
{
    bool has_axis = lwd_read_axis(&m[J_AXIS], joint->axis);
    size_t other = joint->type == LW_PLANAR ? J_X_AXIS : J_SECOND_AXIS;
    if (lwd_read_axis(&m[other], joint->second_axis) && has_axis) {
        (void)lwd_make_square(&m[other], joint->axis, joint->second_axis);
    }
}

static void read_joint(const lwd_reader m[J_MEMBERS], lwd_decode *d, lw_spec_joint *joint)
{
    lwd_document *doc = d->doc;
    (void)lwd_read_between(&m[J_BETWEEN], d, joint->body);
    (void)lwd_read_point(&m[J_AT], doc->units, joint->at_m);
    read_joint_axes(m, joint);
    if (lwd_is_given(&m[J_RANGE])) {
        read_joint_range(&m[J_RANGE], doc->units, joint->type != LW_PRISMATIC, &joint->range[0]);
    }
    double most = lwd_length_most(doc->units);
    double lead = 0.0;
    if (lwd_read_number(&m[J_LEAD], -most, most, &lead)) {
        joint->lead_m = lwd_length_in(doc->units, lead);
        if (!(fabs(joint->lead_m) >= 1e-9)) {
            LWD_TELL(&m[J_LEAD], "zero-lead", "a lead other than 0", NULL,
                     "A screw of lead 0 does not slide; use a revolute joint.");
        }
    }
    read_ranges(&m[J_RANGES], doc, joint);
    if (joint->type == LW_SPHERICAL) {
        read_cone(m, doc, joint);
    }
}

/* Name and type come first: without them no coordinate can be numbered. */
static void read_one(const lwd_reader *r, lwd_decode *d)
{
    lw_spec *spec = &d->doc->spec;
    lw_spec_joint *joint = &spec->joint[spec->n_joint];
    lwd_reader type;
    lwd_reader m[J_MEMBERS];
    size_t word = 0;
    if (!lwd_want_object(r)) {
        d->coords_known = false;
        return;
    }
    if (!lwd_find(r, "type", &type)) {
        LWD_TELL(&type, "missing-member", "type", "nothing",
                 "The member \"type\" is missing: the type of the joint.");
        d->coords_known = false;
        return;
    }
    if (!lwd_read_word(&type, type_word, TYPES, &word)) {
        d->coords_known = false;
        return;
    }
    joint->type = (lw_joint_type)word;
    if (!read_joint_members(r, joint->type, m)) {
        return;
    }
    if (!lwd_read_own_name(&m[J_NAME], d->doc, joint->name)) {
        joint->name[0] = '\0';
        d->coords_known = false;
    }
    read_joint(m, d, joint);
    spec->n_joint++;
    if (joint->type == LW_SPHERICAL) {
        if (d->doc->n_ball == LW_MAX_BALLS) {
            LWD_TELL(r, "too-many", "at most 48 spherical joints", NULL,
                     "A mechanism may have at most %d spherical joints.", LW_MAX_BALLS);
            return;
        }
        d->doc->ball_joint[d->doc->n_ball++] = spec->n_joint - 1;
    }
}

void lwd_decode_joints(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_JOINTS];
    lwd_reader e;
    if (!lwd_is_given(r)) {
        return;
    }
    if (!lwd_want_array(r, 0, LW_MAX_JOINTS, "joints")) {
        d->coords_known = false;
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_one(&e, d);
    }
}
