/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Poses and postures to SI, see posture_in.h. */
#include "posture_in.h"

#include <math.h>
#include <string.h>

#include <leeway/query.h>

#include "document_internal.h"

static const double reading_most = 1e9;

double lwd_length_most(lwd_units units)
{
    return units.metres ? 1e3 : 1e6;
}

double lwd_angle_most(lwd_units units)
{
    return units.radians ? 1e5 : 6e6;
}

/* ---- orientations ---------------------------------------------------------------------------- */

enum { O_QUATERNION, O_ZYX, O_ROTATION_VECTOR, O_DIRECTION, O_RZ, O_FORMS };
#define ORIENTATION_TABLE                                                                          \
    {"quaternion", false}, {"zyx", false}, {"rotation_vector", false}, {"direction", false},       \
        {"rz", false}

/* A rotation vector, rad, to a unit quaternion. */
static void quat_of_vector(double quat[4], const double v[3])
{
    double angle = sqrt(v[0] * v[0] + v[1] * v[1] + v[2] * v[2]);
    double scale = angle > 1e-8 ? sin(0.5 * angle) / angle : 0.5;
    quat[0] = cos(0.5 * angle);
    for (int i = 0; i < 3; i++) {
        quat[i + 1] = scale * v[i];
    }
}

static bool read_zyx(const lwd_reader *r, lwd_units units, lw_pose_ask *out)
{
    static const lwd_member table[3] = {{"yaw", false}, {"pitch", false}, {"roll", false}};
    lwd_reader m[3];
    if (!lwd_read_members(r, table, 3, m)) {
        return false;
    }
    bool good = true;
    for (int i = 0; i < 3; i++) {
        double angle = 0.0;
        if (lwd_read_number(&m[i], -lwd_angle_most(units), lwd_angle_most(units), &angle)) {
            out->has_zyx[i] = true;
            out->zyx_rad[i] = lwd_angle_in(units, angle);
        } else {
            good = good && !lwd_is_given(&m[i]);
        }
    }
    if (good && !out->has_zyx[0] && !out->has_zyx[1] && !out->has_zyx[2]) {
        LWD_TELL(r, "missing-member", "yaw, pitch or roll", "none of them",
                 "Give at least one of yaw, pitch and roll.");
        return false;
    }
    out->orient = LW_ORIENT_ZYX;
    return good;
}

/* The one form of m[0..O_FORMS) that is given; more than one is an error. */
static bool read_orientation(const lwd_reader m[O_FORMS], lwd_units units, lw_pose_ask *out)
{
    size_t form = O_FORMS;
    for (size_t i = 0; i < O_FORMS; i++) {
        if (!lwd_is_given(&m[i])) {
            continue;
        }
        if (form < O_FORMS) {
            LWD_TELL(&m[i], "two-orientations", "one form of orientation", m[i].name,
                     "The orientation is given as \"%s\" already; leave one of the two out.",
                     m[form].name);
            return false;
        }
        form = i;
    }
    double v[3];
    switch (form) {
    case O_QUATERNION:
        out->orient = LW_ORIENT_QUATERNION;
        return lwd_read_quaternion(&m[form], out->quat);
    case O_ZYX:
        return read_zyx(&m[form], units, out);
    case O_ROTATION_VECTOR:
        if (!lwd_read_xyz(&m[form], lwd_angle_most(units), v)) {
            return false;
        }
        for (int i = 0; i < 3; i++) {
            v[i] = lwd_angle_in(units, v[i]);
        }
        quat_of_vector(out->quat, v);
        out->orient = LW_ORIENT_QUATERNION;
        return true;
    case O_DIRECTION: {
        if (!lwd_read_xyz(&m[form], 1e9, v)) {
            return false;
        }
        double size = sqrt(v[0] * v[0] + v[1] * v[1] + v[2] * v[2]);
        if (!(size >= 1e-9)) {
            LWD_TELL(&m[form], "zero-axis", "a direction, not all zero", NULL,
                     "A direction of zero length points nowhere.");
            return false;
        }
        for (int i = 0; i < 3; i++) {
            out->direction[i] = v[i] / size;
        }
        out->orient = LW_ORIENT_DIRECTION;
        return true;
    }
    case O_RZ: {
        double angle = 0.0;
        if (!lwd_read_number(&m[form], -lwd_angle_most(units), lwd_angle_most(units), &angle)) {
            return false;
        }
        out->has_zyx[0] = true;
        out->zyx_rad[0] = lwd_angle_in(units, angle);
        out->orient = LW_ORIENT_ZYX;
        return true;
    }
    default:
        return true;
    }
}

/* A whole turn of a pose; rz alone and missing zyx members stand for zero. */
static void rot_of_pose(double rot[9], const lw_pose_ask *pose)
{
    if (pose->orient == LW_ORIENT_QUATERNION) {
        lw_rot_from_quat(rot, pose->quat);
    } else {
        lw_rot_from_zyx(rot, pose->zyx_rad);
    }
}

static bool tell_half_turn(const lwd_reader *r, const lw_pose_ask *pose)
{
    if (pose->orient == LW_ORIENT_NONE || pose->orient == LW_ORIENT_DIRECTION) {
        LWD_TELL(r, "no-orientation", "quaternion, zyx, rotation_vector or rz", NULL,
                 "A whole orientation is needed here: quaternion, zyx, rotation_vector or rz.");
        return true;
    }
    return false;
}

bool lwd_rotation_in(const lwd_reader *r, lwd_units units, double rot[9])
{
    static const lwd_member table[O_FORMS] = {ORIENTATION_TABLE};
    lwd_reader m[O_FORMS];
    lw_pose_ask pose = {.orient = LW_ORIENT_NONE};
    size_t errors = r->findings->n_error;
    if (!lwd_read_members(r, table, O_FORMS, m) || !read_orientation(m, units, &pose) ||
        r->findings->n_error != errors || tell_half_turn(r, &pose)) {
        return false;
    }
    rot_of_pose(rot, &pose);
    return true;
}

/* ---- poses ----------------------------------------------------------------------------------- */

enum { P_X, P_Y, P_Z, P_JOINTS = 3 + O_FORMS, P_MEMBERS };
static const lwd_member pose_table[P_MEMBERS] = {
    {"x", false}, {"y", false}, {"z", false}, ORIENTATION_TABLE, {"joints", false}};

/* A joint coordinate's or rod's value to the change from the reference posture, m or rad. */
static bool read_coord_value(const lwd_reader *r, const lwd_posture_scope *scope, size_t coord,
                             double *out)
{
    const lw_spec *spec = &scope->document->spec;
    size_t joint = 0;
    size_t part = 0;
    size_t rod = 0;
    double x = 0.0;
    bool turning = lw_spec_coord_turning(spec, coord);
    double most = turning ? lwd_angle_most(scope->units) : lwd_length_most(scope->units);
    (void)lw_spec_coord_owner(spec, coord, &joint, &part, &rod);
    if (joint == SIZE_MAX) { /* a rod shows its length */
        if (!lwd_read_positive(r, most, &x)) {
            return false;
        }
        *out = lwd_length_in(scope->units, x) - scope->document->rod_length_m[rod];
        return true;
    }
    if (!lwd_read_number(r, -most, most, &x)) {
        return false;
    }
    *out = turning ? lwd_angle_in(scope->units, x) : lwd_length_in(scope->units, x);
    return true;
}

static bool read_pose_joints(const lwd_reader *r, const lwd_posture_scope *scope, lw_pose_ask *out)
{
    lwd_reader e;
    bool good = lwd_want_object(r);
    for (bool more = good && lwd_first(r, &e); more; more = lwd_next(&e)) {
        size_t coord = 0;
        double value = 0.0;
        if (!lwd_member_coord(&e, scope->document, &coord) ||
            !read_coord_value(&e, scope, coord, &value)) {
            good = false;
        } else if (out->n_joint >= LW_MAX_OUTPUTS) {
            LWD_TELL(&e, "too-many", "at most 16 joints in a pose", NULL,
                     "A pose takes at most %d joint coordinates.", LW_MAX_OUTPUTS);
            return false;
        } else {
            out->joint_coord[out->n_joint] = coord;
            out->joint_value[out->n_joint] = value;
            out->n_joint++;
        }
    }
    return good;
}

bool lwd_pose_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_pose_ask *out)
{
    lwd_reader m[P_MEMBERS];
    size_t errors = r->findings->n_error;
    memset(out, 0, sizeof *out);
    if (!lwd_read_members(r, pose_table, P_MEMBERS, m)) {
        return false;
    }
    double most = lwd_length_most(scope->units);
    for (int i = 0; i < 3; i++) {
        double x = 0.0;
        if (lwd_read_number(&m[i], -most, most, &x)) {
            out->has_position[i] = true;
            out->position_m[i] = lwd_length_in(scope->units, x);
        }
    }
    (void)read_orientation(&m[3], scope->units, out);
    if (lwd_is_given(&m[P_JOINTS])) {
        (void)read_pose_joints(&m[P_JOINTS], scope, out);
    }
    if (r->findings->n_error == errors && out->orient == LW_ORIENT_NONE && out->n_joint == 0 &&
        !out->has_position[0] && !out->has_position[1] && !out->has_position[2]) {
        LWD_TELL(r, "empty-pose", "x, y, z, an orientation or joints", NULL,
                 "A pose needs at least one of x, y, z, an orientation and joints.");
    }
    return r->findings->n_error == errors;
}

/* ---- postures -------------------------------------------------------------------------------- */

bool lwd_readings_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    const lwd_document *doc = scope->document;
    lwd_reader e;
    size_t errors = r->findings->n_error;
    memset(out->has_drive, 0, sizeof out->has_drive);
    memset(out->drive, 0, sizeof out->drive);
    out->kind = LW_BY_DRIVES;
    if (!lwd_want_object(r)) {
        return false;
    }
    if (lwd_count(r) == 0) {
        LWD_TELL(r, "too-few", "at least one reading", "none", "Give the readings of the drives.");
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        size_t i = 0;
        double reading = 0.0;
        if (lwd_member_drive(&e, doc, &i) &&
            lwd_read_number(&e, -reading_most, reading_most, &reading)) {
            out->has_drive[i] = true;
            out->drive[i] = (reading - doc->drive[i].at_reference) / doc->drive[i].slope;
        }
    }
    return r->findings->n_error == errors;
}

/* The number of a spherical joint among the spherical joints; SIZE_MAX if it is none. */
static size_t ball_of(const lwd_document *doc, const char *name)
{
    for (size_t k = 0; k < doc->n_ball; k++) {
        if (strcmp(doc->spec.joint[doc->ball_joint[k]].name, name) == 0) {
            return k;
        }
    }
    return SIZE_MAX;
}

static void read_joint(const lwd_reader *e, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    size_t ball = ball_of(scope->document, e->name);
    if (ball != SIZE_MAX) {
        double rot[9];
        if (lwd_rotation_in(e, scope->units, rot)) {
            out->has_ball[ball] = true;
            lw_quat_from_rot(out->ball[ball], rot);
        }
        return;
    }
    size_t coord = 0;
    double value = 0.0;
    if (lwd_member_coord(e, scope->document, &coord) &&
        read_coord_value(e, scope, coord, &value)) {
        out->has_coord[coord] = true;
        out->coord[coord] = value;
    }
}

static void read_joints(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    lwd_reader e;
    out->kind = LW_BY_JOINTS;
    memset(out->has_coord, 0, sizeof out->has_coord);
    memset(out->coord, 0, sizeof out->coord);
    memset(out->has_ball, 0, sizeof out->has_ball);
    if (!lwd_want_object(r)) {
        return;
    }
    if (lwd_count(r) == 0) {
        LWD_TELL(r, "too-few", "at least one joint", "none", "Give the joints' coordinates.");
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_joint(&e, scope, out);
    }
}

static void read_body(const lwd_reader *e, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    static const char *const axis[3] = {"x", "y", "z"};
    const lwd_document *doc = scope->document;
    size_t body = lwd_document_body(doc, e->name);
    lw_pose_ask pose;
    if (body == SIZE_MAX || body == doc->spec.frame) {
        LWD_TELL(e, "unknown-name", "the name of a moving body", e->name,
                 "\"%.40s\" is no moving body of this mechanism.", e->name);
        return;
    }
    if (!lwd_pose_in(e, scope, &pose) || tell_half_turn(e, &pose)) {
        return;
    }
    for (int i = 0; i < 3; i++) {
        if (!pose.has_position[i]) {
            lwd_reader missing = {NULL, e, axis[i], 0, e->findings};
            LWD_TELL(&missing, "missing-member", axis[i], "nothing",
                     "The member \"%s\" is missing: a body's pose is given whole.", axis[i]);
            return;
        }
    }
    if (pose.n_joint > 0) {
        LWD_TELL(e, "unknown-member", "x, y, z and an orientation", "joints",
                 "\"joints\" does not belong into the pose of a body.");
        return;
    }
    out->has_body[body] = true;
    memcpy(out->body[body].pos_m, pose.position_m, sizeof pose.position_m);
    rot_of_pose(out->body[body].rot, &pose);
}

static void read_bodies(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    lwd_reader e;
    out->kind = LW_BY_BODIES;
    memset(out->has_body, 0, sizeof out->has_body);
    if (!lwd_want_object(r)) {
        return;
    }
    if (lwd_count(r) == 0) {
        LWD_TELL(r, "too-few", "at least one body", "none", "Give the poses of the bodies.");
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_body(&e, scope, out);
    }
}

/* Signs without knowing how many limbs there are. */
static bool parse_signs(const char *text, lw_mode *out)
{
    for (size_t n = 1; n <= LW_MAX_LIMBS; n++) {
        if (lw_mode_parse(out, text, n)) {
            return true;
        }
    }
    return false;
}

static void read_mode(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    const char *text = NULL;
    if (!lwd_read_text(r, LW_MODE_TEXT_SIZE - 1, &text)) {
        return;
    }
    out->has_mode = scope->mode != NULL ? scope->mode(scope->user, text, &out->mode)
                                        : parse_signs(text, &out->mode);
    if (!out->has_mode) {
        LWD_TELL(r, "unknown-mode",
                 scope->mode != NULL ? "a mode's name or one sign a limb" : "signs such as +-+",
                 NULL,
                 scope->mode != NULL
                     ? "This is no mode here: give one of the names, or one sign for each limb."
                     : "Give the mode by its signs; names are known only after loading.");
    }
}

bool lwd_posture_read(const lwd_reader *r, const lwd_reader m[LWD_POSTURE_MEMBERS],
                      const lwd_posture_scope *scope, bool optional, lw_posture_ask *out,
                      lw_posture_ask *near)
{
    static const size_t ways[4] = {LWD_POSTURE_DRIVES, LWD_POSTURE_POSE, LWD_POSTURE_JOINTS,
                                   LWD_POSTURE_BODIES};
    size_t errors = r->findings->n_error;
    size_t way = LWD_POSTURE_MEMBERS;
    out->kind = LW_BY_NOTHING;
    out->has_mode = false;
    out->near = NULL;
    for (size_t i = 0; i < 4; i++) {
        if (lwd_is_given(&m[ways[i]]) && way < LWD_POSTURE_MEMBERS) {
            LWD_TELL(&m[ways[i]], "two-postures", "one of drives, pose, joints, bodies",
                     m[ways[i]].name,
                     "The posture is given by \"%s\" already; leave one of the two out.",
                     m[way].name);
            return false;
        }
        way = lwd_is_given(&m[ways[i]]) ? ways[i] : way;
    }
    switch (way) {
    case LWD_POSTURE_DRIVES:
        (void)lwd_readings_in(&m[way], scope, out);
        break;
    case LWD_POSTURE_POSE:
        out->kind = LW_BY_POSE;
        (void)lwd_pose_in(&m[way], scope, &out->pose);
        break;
    case LWD_POSTURE_JOINTS:
        read_joints(&m[way], scope, out);
        break;
    case LWD_POSTURE_BODIES:
        read_bodies(&m[way], scope, out);
        break;
    default:
        if (!optional) {
            LWD_TELL(r, "no-posture", "drives, pose, joints or bodies", "none of them",
                     "A posture is given by drives, pose, joints or bodies.");
        }
        break;
    }
    if (lwd_is_given(&m[LWD_POSTURE_MODE])) {
        if (way != LWD_POSTURE_POSE && way != LWD_POSTURE_MEMBERS) {
            LWD_TELL(&m[LWD_POSTURE_MODE], "mode-without-pose", "mode beside pose", NULL,
                     "A mode picks among the postures of a pose; it has no use beside \"%s\".",
                     m[way].name);
        } else {
            read_mode(&m[LWD_POSTURE_MODE], scope, out);
        }
    }
    if (lwd_is_given(&m[LWD_POSTURE_NEAR])) {
        if (near == NULL) {
            LWD_TELL(&m[LWD_POSTURE_NEAR], "nested-near", "a posture without near", NULL,
                     "A posture that says what is near has no \"near\" of its own.");
        } else if (lwd_near_in(&m[LWD_POSTURE_NEAR], scope, near)) {
            out->near = near;
        }
    }
    return r->findings->n_error == errors;
}

static bool posture_object(const lwd_reader *r, const lwd_posture_scope *scope,
                           lw_posture_ask *out, lw_posture_ask *near)
{
    static const lwd_member table[LWD_POSTURE_MEMBERS] = {LWD_POSTURE_TABLE};
    lwd_reader m[LWD_POSTURE_MEMBERS];
    size_t errors = r->findings->n_error;
    return lwd_read_members(r, table, LWD_POSTURE_MEMBERS, m) &&
           lwd_posture_read(r, m, scope, false, out, near) && r->findings->n_error == errors;
}

bool lwd_posture_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out,
                    lw_posture_ask *near)
{
    return posture_object(r, scope, out, near);
}

bool lwd_near_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out)
{
    lwd_reader any;
    out->kind = LW_BY_NOTHING;
    out->has_mode = false;
    out->near = NULL;
    if (!lwd_want_object(r)) {
        return false;
    }
    bool pose = false;
    for (size_t i = 0; i < P_JOINTS; i++) { /* "joints" stands in both */
        pose = pose || lwd_find(r, pose_table[i].name, &any);
    }
    if (pose) {
        out->kind = LW_BY_POSE;
        return lwd_pose_in(r, scope, &out->pose);
    }
    return posture_object(r, scope, out, NULL);
}
