/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Poses in single numbers, see flat.h. */
#include "flat.h"

#include <float.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { VALUE_MAX = 40 };

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

/* The daemon never leaves the "C" locale, so strtod reads a point. */
bool lwd_flat_number(const char *text, double *out)
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

/* ---- members ------------------------------------------------------------------------------- */

typedef enum unit { LENGTH, ANGLE, PLAIN } unit;

enum { X = 0, QUATERNION = 3, ZYX = 7, VECTOR = 10, DIRECTION = 13, RZ = 16 };

static const struct {
    const char *name;
    unit unit;
    unsigned char form; /* LWD_FLAT_FORMS: a position */
} member[LWD_FLAT_NUMBERS] = {
    {"x", LENGTH, LWD_FLAT_FORMS}, {"y", LENGTH, LWD_FLAT_FORMS}, {"z", LENGTH, LWD_FLAT_FORMS},
    {"qw", PLAIN, 0},  {"qx", PLAIN, 0},    {"qy", PLAIN, 0},   {"qz", PLAIN, 0},
    {"yaw", ANGLE, 1}, {"pitch", ANGLE, 1}, {"roll", ANGLE, 1},
    {"rvx", ANGLE, 2}, {"rvy", ANGLE, 2},   {"rvz", ANGLE, 2},
    {"dx", PLAIN, 3},  {"dy", PLAIN, 3},    {"dz", PLAIN, 3},
    {"rz", ANGLE, 4}};

void lwd_flat_open(lwd_flat *flat)
{
    memset(flat, 0, sizeof *flat);
}

size_t lwd_flat_member(const char *name)
{
    for (size_t i = 0; i < LWD_FLAT_NUMBERS; i++) {
        if (strcmp(name, member[i].name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

void lwd_flat_put(lwd_flat *flat, lwd_units units, size_t i, double value)
{
    double si = member[i].unit == LENGTH  ? lwd_length_in(units, value)
                : member[i].unit == ANGLE ? lwd_angle_in(units, value)
                                          : value;
    flat->has[i] = true;
    flat->value[i] = si;
    if (i < QUATERNION) {
        flat->pose.has_position[i] = true;
        flat->pose.position_m[i] = si;
    }
}

bool lwd_flat_put_joint(lwd_flat *flat, const lwd_edge *edge, lwd_units units, size_t coord,
                        double value)
{
    lw_pose_ask *pose = &flat->pose;
    if (pose->n_joint >= LW_MAX_OUTPUTS) {
        return false;
    }
    size_t rod_first = edge->n_coord - edge->spec->n_rod;
    double si =
        edge->coord_turning[coord] ? lwd_angle_in(units, value) : lwd_length_in(units, value);
    if (coord >= rod_first) {
        si -= edge->rod_length_m[coord - rod_first];
    }
    pose->joint_coord[pose->n_joint] = coord;
    pose->joint_value[pose->n_joint] = si;
    pose->n_joint++;
    return true;
}

bool lwd_flat_given(const lwd_flat *flat)
{
    bool any = flat->pose.n_joint > 0;
    for (size_t i = 0; i < LWD_FLAT_NUMBERS; i++) {
        any = any || flat->has[i];
    }
    return any;
}

/* ---- orientation --------------------------------------------------------------------------- */

static bool all(const lwd_flat *flat, size_t first, size_t n)
{
    bool whole = true;
    for (size_t i = 0; i < n; i++) {
        whole = whole && flat->has[first + i];
    }
    return whole;
}

static double length_of(const double *v, size_t n)
{
    double sum = 0.0;
    for (size_t i = 0; i < n; i++) {
        sum += v[i] * v[i];
    }
    return sqrt(sum);
}

static const lwd_flat_fault *set_quaternion(lwd_flat *flat)
{
    static const lwd_flat_fault part = {"qw", "qw, qx, qy and qz",
                                        "A quaternion needs qw, qx, qy and qz."};
    static const lwd_flat_fault size = {
        "qw", "unit length within 0.001",
        "The quaternion is not of unit length; send at least five decimals."};
    double norm = length_of(&flat->value[QUATERNION], 4);
    if (!all(flat, QUATERNION, 4)) {
        return &part;
    }
    if (!(fabs(norm - 1.0) <= 1e-3)) {
        return &size;
    }
    flat->pose.orient = LW_ORIENT_QUATERNION;
    for (size_t i = 0; i < 4; i++) {
        flat->pose.quat[i] = flat->value[QUATERNION + i] / norm;
    }
    return NULL;
}

static const lwd_flat_fault *set_rotation_vector(lwd_flat *flat)
{
    static const lwd_flat_fault part = {"rvx", "rvx, rvy and rvz",
                                        "A rotation vector needs rvx, rvy and rvz."};
    double angle = length_of(&flat->value[VECTOR], 3);
    if (!all(flat, VECTOR, 3)) {
        return &part;
    }
    double per = angle > 0.0 ? sin(0.5 * angle) / angle : 0.5;
    flat->pose.orient = LW_ORIENT_QUATERNION;
    flat->pose.quat[0] = cos(0.5 * angle);
    for (size_t i = 0; i < 3; i++) {
        flat->pose.quat[i + 1] = per * flat->value[VECTOR + i];
    }
    return NULL;
}

static const lwd_flat_fault *set_direction(lwd_flat *flat)
{
    static const lwd_flat_fault part = {"dx", "dx, dy and dz", "A direction needs dx, dy and dz."};
    static const lwd_flat_fault size = {"dx", "a direction, not all zero",
                                        "A direction of zero length points nowhere."};
    double norm = length_of(&flat->value[DIRECTION], 3);
    if (!all(flat, DIRECTION, 3)) {
        return &part;
    }
    if (!(norm >= 1e-9)) {
        return &size;
    }
    flat->pose.orient = LW_ORIENT_DIRECTION;
    for (size_t i = 0; i < 3; i++) {
        flat->pose.direction[i] = flat->value[DIRECTION + i] / norm;
    }
    return NULL;
}

static const lwd_flat_fault *set_zyx(lwd_flat *flat)
{
    flat->pose.orient = LW_ORIENT_ZYX;
    for (size_t i = 0; i < 3; i++) {
        flat->pose.has_zyx[i] = flat->has[ZYX + i];
        flat->pose.zyx_rad[i] = flat->value[ZYX + i];
    }
    return NULL;
}

static const lwd_flat_fault *set_rz(lwd_flat *flat)
{
    flat->pose.orient = LW_ORIENT_ZYX;
    flat->pose.has_zyx[0] = true;
    flat->pose.zyx_rad[0] = flat->value[RZ];
    return NULL;
}

const lwd_flat_fault *lwd_flat_close(lwd_flat *flat, lwd_form *form)
{
    static const lwd_form forms[LWD_FLAT_FORMS] = {LWD_FORM_QUATERNION, LWD_FORM_ZYX,
                                                   LWD_FORM_ROTATION_VECTOR, LWD_FORM_DIRECTION,
                                                   LWD_FORM_RZ};
    static const lwd_flat_fault *(*const set[LWD_FLAT_FORMS])(lwd_flat *) = {
        set_quaternion, set_zyx, set_rotation_vector, set_direction, set_rz};
#define TWO(name)                                                                                  \
    {name, "one form of the orientation",                                                          \
     "The orientation is given in two forms; send one of them."}
    static const lwd_flat_fault two[LWD_FLAT_FORMS] = {TWO("qw"), TWO("yaw"), TWO("rvx"),
                                                       TWO("dx"), TWO("rz")};
#undef TWO
    size_t given = LWD_FLAT_FORMS;
    for (size_t i = QUATERNION; i < LWD_FLAT_NUMBERS; i++) {
        if (!flat->has[i] || member[i].form == given) {
            continue;
        }
        if (given != LWD_FLAT_FORMS) {
            return &two[member[i].form];
        }
        given = member[i].form;
    }
    if (given == LWD_FLAT_FORMS) {
        return NULL;
    }
    if (*form == LWD_FORM_DEFAULT) {
        *form = forms[given];
    }
    return set[given](flat);
}
