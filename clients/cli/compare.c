/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Comparing answers; see compare.h. The kind of a number, and with it its tolerance, follows from
 * the names on the way to it, which the service's contract fixes. */
#include "compare.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { DEPTH_MAX = LWC_JSON_DEPTH_MAX + 1 };

typedef struct walk {
    const lwc_compare_rules *rules;
    lwc_difference_seen seen;
    void *context;
    double length_scale; /* answer units per mm */
    double angle_scale;  /* answer units per degree */
    lwc_text pointer;
    size_t differences;
} walk;

static const char *const KIND_NAMES[LWC_UNIT_KINDS] = {"length_mm", "angle_deg", "ratio", "reading",
                                                       "count"};

const char *lwc_unit_kind_name(lwc_unit_kind kind)
{
    return KIND_NAMES[kind];
}

bool lwc_unit_kind_find(lwc_unit_kind *out, const char *name)
{
    for (int i = 0; i < LWC_COUNT; i++) {
        if (strcmp(KIND_NAMES[i], name) == 0) {
            *out = (lwc_unit_kind)i;
            return true;
        }
    }
    return false;
}

static bool in_list(const char *list, const char *name)
{
    size_t len = strlen(name);
    for (const char *p = list; p != NULL && *p != '\0';) {
        size_t part = strcspn(p, ",");
        if (part == len && memcmp(p, name, len) == 0) {
            return true;
        }
        p += part;
        p += *p == ',';
    }
    return false;
}

/* Whether one of the sources has an array `list` that holds `name`. */
static bool in_sources(const lwc_compare_rules *rules, const char *list, const char *name)
{
    for (size_t i = 0; i < 2; i++) {
        const cJSON *item = NULL;
        cJSON_ArrayForEach(item, lwc_json_get(rules->source[i], list))
        {
            if (cJSON_IsString(item) && strcmp(item->valuestring, name) == 0) {
                return true;
            }
        }
    }
    return false;
}

static bool is_left_out(const lwc_compare_rules *rules, const char *name)
{
    /* What changes with time or revision without the machine's answer being another one. */
    static const char *const VOLATILE =
        "served_at,digest,revision,state,request_id,instance,tag,iterations,boxes,cells";
    if (in_list(rules->check, name) || in_sources(rules, "check", name)) {
        return false;
    }
    return in_list(VOLATILE, name) || in_list(rules->ignore, name) ||
           in_sources(rules, "ignore", name);
}

/* Kind that a member's name gives to the numbers in it; `outer` where the name says nothing. */
static lwc_unit_kind kind_of(const char *name, lwc_unit_kind outer)
{
    static const struct {
        const char *names;
        lwc_unit_kind kind;
    } TABLE[] = {
        {"code,no,mode_no,revision,complex,real,not_converged,rank,ranks,dimension,from,to,"
         "mobility",
         LWC_COUNT},
        {"drives,joints,disagreement,allowed,readings", LWC_READING},
        {"quaternion,direction,margins,least,margin,at,open,proof", LWC_RATIO},
        {"position,length,characteristic_length,distance,pose,point,along", LWC_LENGTH},
        {"zyx,rotation_vector,angle,rz,rx,ry,yaw,pitch,roll,about,turn", LWC_ANGLE},
    };
    bool in_joints = outer == LWC_READING; /* a joint may bear any name */
    for (size_t i = 0; i < sizeof TABLE / sizeof TABLE[0] && !in_joints; i++) {
        if (in_list(TABLE[i].names, name)) {
            return TABLE[i].kind;
        }
    }
    if (strcmp(name, "limits_broken") == 0) {
        return LWC_READING;
    }
    return outer;
}

/* Whether the pointer fits a pattern in which '*' stands for one whole step. */
static bool pointer_fits(const char *pointer, const char *pattern)
{
    while (*pointer != '\0' && *pattern != '\0') {
        if (pattern[0] == '*' && (pattern[1] == '/' || pattern[1] == '\0')) {
            pattern++;
            pointer += strcspn(pointer, "/");
        } else if (*pointer++ != *pattern++) {
            return false;
        }
    }
    return *pointer == '\0' && *pattern == '\0';
}

static double tolerance_here(const walk *w, lwc_unit_kind kind, double expected)
{
    for (size_t i = 0; i < 2; i++) {
        const cJSON *item = NULL;
        cJSON_ArrayForEach(item, lwc_json_get(w->rules->source[i], "at"))
        {
            if (cJSON_IsNumber(item) && pointer_fits(lwc_text_string(&w->pointer), item->string)) {
                return item->valuedouble;
            }
        }
    }
    double tolerance = w->rules->tolerance.by_kind[kind];
    if (kind == LWC_LENGTH) {
        return tolerance * w->length_scale;
    }
    if (kind == LWC_ANGLE) {
        return tolerance * w->angle_scale;
    }
    /* A condition number of a million has no sixth decimal worth comparing. */
    return kind == LWC_RATIO && fabs(expected) > 1.0 ? tolerance * fabs(expected) : tolerance;
}

static void report(walk *w, const cJSON *expected, const cJSON *got, const char *note)
{
    w->differences++;
    if (w->seen != NULL) {
        lwc_difference difference = {.pointer = lwc_text_string(&w->pointer),
                                     .expected = expected,
                                     .got = got,
                                     .note = note};
        w->seen(w->context, &difference);
    }
}

static void compare_numbers(walk *w, const cJSON *expected, const cJSON *got, lwc_unit_kind kind,
                            const char *name, double sign)
{
    double off = sign * got->valuedouble - expected->valuedouble;
    double tolerance =
        kind == LWC_COUNT ? 0.0 : tolerance_here(w, kind, expected->valuedouble);
    /* Parts of an orientation mean the same one turn further on; coordinates do not. */
    if (kind == LWC_ANGLE && name != NULL && in_list("yaw,pitch,roll,rz", name)) {
        off = remainder(off, 360.0 * w->angle_scale);
    }
    if (!(fabs(off) <= tolerance)) {
        w->differences++;
        if (w->seen != NULL) {
            lwc_difference difference = {.pointer = lwc_text_string(&w->pointer),
                                         .expected = expected,
                                         .got = got,
                                         .is_number = true,
                                         .off = off,
                                         .tolerance = tolerance,
                                         .kind = kind};
            w->seen(w->context, &difference);
        }
    }
}

static void compare_values(walk *w, const cJSON *expected, const cJSON *got, lwc_unit_kind kind,
                           const char *name, double sign);

/* -1 where the two quaternions are nearer with one turned round: q and -q turn a body alike. */
static double quaternion_sign(const cJSON *expected, const cJSON *got)
{
    double dot = 0.0;
    const cJSON *part = NULL;
    cJSON_ArrayForEach(part, expected)
    {
        double value = 0.0;
        if (cJSON_IsNumber(part) && lwc_json_number(got, part->string, &value)) {
            dot += part->valuedouble * value;
        }
    }
    return dot < 0.0 ? -1.0 : 1.0;
}

static void compare_objects(walk *w, const cJSON *expected, const cJSON *got, lwc_unit_kind kind,
                            const char *name)
{
    double sign = name != NULL && strcmp(name, "quaternion") == 0 ? quaternion_sign(expected, got)
                                                                  : 1.0;
    const cJSON *member = NULL;
    cJSON_ArrayForEach(member, expected)
    {
        if (is_left_out(w->rules, member->string) && kind != LWC_READING) {
            continue;
        }
        size_t len = w->pointer.len;
        lwc_pointer_add(&w->pointer, member->string);
        const cJSON *other = lwc_json_get(got, member->string);
        if (other == NULL) {
            report(w, member, NULL, "missing");
        } else {
            compare_values(w, member, other, kind_of(member->string, kind), member->string, sign);
        }
        w->pointer.len = len;
        w->pointer.data[len] = '\0';
    }
}

static const char *mode_of(const cJSON *item)
{
    return lwc_json_string(item, "mode");
}

/* Every member is an object with a mode of its own: then members belong together by mode. */
static bool has_own_modes(const cJSON *array)
{
    if (!cJSON_IsArray(array) || array->child == NULL) {
        return false;
    }
    size_t checked = 0;
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, array)
    {
        if (mode_of(item) == NULL || ++checked > 512) {
            return false;
        }
        for (const cJSON *before = array->child; before != item; before = before->next) {
            if (strcmp(mode_of(before), mode_of(item)) == 0) {
                return false;
            }
        }
    }
    return true;
}

static const cJSON *by_mode(const cJSON *array, const char *mode)
{
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, array)
    {
        if (strcmp(mode_of(item), mode) == 0) {
            return item;
        }
    }
    return NULL;
}

static void compare_arrays(walk *w, const cJSON *expected, const cJSON *got, lwc_unit_kind kind)
{
    int n_expected = cJSON_GetArraySize(expected);
    int n_got = cJSON_GetArraySize(got);
    bool modes = has_own_modes(expected) && has_own_modes(got);
    if (n_expected != n_got) {
        char note[80];
        (void)snprintf(note, sizeof note, "expected %d, got %d", n_expected, n_got);
        report(w, expected, got, note);
        if (!modes) {
            return; /* one more or one fewer: which belongs to which is unknown */
        }
    }
    size_t no = 0;
    const cJSON *other = got->child;
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, expected)
    {
        char step[24];
        (void)snprintf(step, sizeof step, "%zu", no++);
        size_t len = w->pointer.len;
        lwc_pointer_add(&w->pointer, step);
        const cJSON *partner = modes ? by_mode(got, mode_of(item)) : other;
        if (partner == NULL) {
            report(w, item, NULL, "no solution in this mode");
        } else {
            compare_values(w, item, partner, kind, NULL, 1.0);
        }
        other = other != NULL ? other->next : NULL;
        w->pointer.len = len;
        w->pointer.data[len] = '\0';
    }
}

static void compare_values(walk *w, const cJSON *expected, const cJSON *got, lwc_unit_kind kind,
                           const char *name, double sign)
{
    if (cJSON_IsObject(expected) && cJSON_IsObject(got)) {
        compare_objects(w, expected, got, kind, name);
    } else if (cJSON_IsArray(expected) && cJSON_IsArray(got)) {
        compare_arrays(w, expected, got, kind);
    } else if (cJSON_IsNumber(expected) && cJSON_IsNumber(got)) {
        compare_numbers(w, expected, got, kind, name, sign);
    } else if (cJSON_IsString(expected) && cJSON_IsString(got)) {
        if (strcmp(expected->valuestring, got->valuestring) != 0) {
            report(w, expected, got, NULL);
        }
    } else if ((expected->type & 0xff) != (got->type & 0xff)) {
        report(w, expected, got, NULL);
    }
}

size_t lwc_compare(const cJSON *expected, const cJSON *got, const lwc_compare_rules *rules,
                   lwc_difference_seen seen, void *context)
{
    walk w = {.rules = rules, .seen = seen, .context = context, .length_scale = 1.0,
              .angle_scale = 1.0};
    const cJSON *units = lwc_json_get(expected, "units");
    const char *length = lwc_json_string(units, "length");
    const char *angle = lwc_json_string(units, "angle");
    if (length != NULL && strcmp(length, "m") == 0) {
        w.length_scale = 1e-3;
    }
    if (angle != NULL && strcmp(angle, "rad") == 0) {
        w.angle_scale = 3.14159265358979323846 / 180.0;
    }
    lwc_text_puts(&w.pointer, "");
    compare_values(&w, expected, got, LWC_RATIO, NULL, 1.0);
    lwc_text_clear(&w.pointer);
    return w.differences;
}

cJSON *lwc_narrow(const cJSON *expected, const cJSON *got)
{
    if (cJSON_IsObject(expected) && cJSON_IsObject(got)) {
        cJSON *out = lwc_json_object();
        const cJSON *member = NULL;
        cJSON_ArrayForEach(member, expected)
        {
            const cJSON *other = lwc_json_get(got, member->string);
            if (other != NULL) {
                lwc_json_put(out, member->string, lwc_narrow(member, other));
            }
        }
        return out;
    }
    if (cJSON_IsArray(expected) && cJSON_IsArray(got) && expected->child != NULL &&
        cJSON_GetArraySize(expected) == cJSON_GetArraySize(got)) {
        bool modes = has_own_modes(expected) && has_own_modes(got);
        cJSON *out = cJSON_CreateArray();
        const cJSON *item = expected->child;
        const cJSON *other = NULL;
        cJSON_ArrayForEach(other, got)
        {
            const cJSON *like = modes ? by_mode(expected, mode_of(other)) : item;
            cJSON *narrowed = lwc_narrow(like != NULL ? like : expected->child, other);
            if (!cJSON_AddItemToArray(out, narrowed)) {
                cJSON_Delete(narrowed);
            }
            item = item->next;
        }
        return out;
    }
    return lwc_json_copy(got);
}
