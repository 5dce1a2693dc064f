/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Building questions from what the user typed; see question.h. */
#include "question.h"

#include <math.h>
#include <string.h>

static const char *const KINDS[LWC_KIND_COUNT] = {
    [LWC_INVERSE] = "inverse", [LWC_FORWARD] = "forward", [LWC_JACOBIAN] = "jacobian",
    [LWC_MARGIN] = "margin",   [LWC_REACH] = "reach",     [LWC_FREE_TRAVEL] = "free-travel"};

const char *lwc_kind_name(lwc_kind kind)
{
    return KINDS[kind];
}

bool lwc_kind_find(lwc_kind *out, const char *word)
{
    for (int i = 0; i < LWC_KIND_COUNT; i++) {
        if (strcmp(KINDS[i], word) == 0) {
            *out = (lwc_kind)i;
            return true;
        }
    }
    const char *near = lwc_nearest(word, KINDS, LWC_KIND_COUNT);
    lwc_complain("there is no question \"%s\"%s%s%s; there are inverse, forward, jacobian, "
                 "margin, reach and free-travel",
                 word, near != NULL ? "; did you mean \"" : "", near != NULL ? near : "",
                 near != NULL ? "\"?" : "");
    return false;
}

/* Where a name that stands for a part of an orientation belongs. */
static const struct part {
    const char *name;
    const char *form;
    const char *member;
} PARTS[] = {
    {"qw", "quaternion", "w"},       {"qx", "quaternion", "x"},
    {"qy", "quaternion", "y"},       {"qz", "quaternion", "z"},
    {"yaw", "zyx", "yaw"},           {"pitch", "zyx", "pitch"},
    {"roll", "zyx", "roll"},         {"rvx", "rotation_vector", "x"},
    {"rvy", "rotation_vector", "y"}, {"rvz", "rotation_vector", "z"},
    {"dx", "direction", "x"},        {"dy", "direction", "y"},
    {"dz", "direction", "z"},
};

/* One posture or pose as typed, sorted by what the members are. */
typedef struct place {
    cJSON *pose;   /* x y z and orientation */
    cJSON *joints; /* joint.NAME */
    cJSON *drives; /* NAME or drive.NAME */
    const char *mode;
} place;

static void place_clear(place *where)
{
    cJSON_Delete(where->pose);
    cJSON_Delete(where->joints);
    cJSON_Delete(where->drives);
    *where = (place){0};
}

static bool put_once(cJSON **group, const char *name, double value, const char *typed)
{
    if (*group == NULL) {
        *group = lwc_json_object();
    }
    if (lwc_json_get(*group, name) != NULL) {
        lwc_complain("\"%s\" is given twice; give each value once", typed);
        return false;
    }
    lwc_json_put_number(*group, name, value);
    return true;
}

/* True if `name` names a member of a pose; then it is put there (or complained of: *ok). */
static bool put_pose_member(place *where, const char *name, double value, const char *typed,
                            bool *ok)
{
    if (strcmp(name, "x") == 0 || strcmp(name, "y") == 0 || strcmp(name, "z") == 0 ||
        strcmp(name, "rz") == 0) {
        *ok = put_once(&where->pose, name, value, typed);
        return true;
    }
    if (strcmp(name, "rx") == 0 || strcmp(name, "ry") == 0) {
        lwc_complain("\"%s\": write roll=.. for rx and pitch=.. for ry (with yaw=.. for rz)",
                     typed);
        *ok = false;
        return true;
    }
    for (size_t i = 0; i < sizeof PARTS / sizeof PARTS[0]; i++) {
        if (strcmp(name, PARTS[i].name) == 0) {
            if (where->pose == NULL) {
                where->pose = lwc_json_object();
            }
            cJSON *form = lwc_json_room(where->pose, PARTS[i].form);
            *ok = put_once(&form, PARTS[i].member, value, typed);
            return true;
        }
    }
    return false;
}

/* Takes one "NAME=VALUE", with any prefix (from., near.) already cut off `name`. */
static bool place_put(place *where, const char *name, const char *text, const char *typed)
{
    double value = 0.0;
    if (strcmp(name, "mode") == 0) {
        if (where->mode != NULL) {
            lwc_complain("\"%s\" is given twice; give each value once", typed);
            return false;
        }
        where->mode = text;
        return true;
    }
    if (!lwc_read_number(text, &value)) {
        lwc_complain("\"%s\": expected a number like 12.5 after '=', with a decimal point", typed);
        return false;
    }
    bool ok = true;
    if (lwc_starts(name, "joint.")) {
        const char *joint = name + strlen("joint.");
        if (!lwc_is_name(joint, strlen(joint), true)) {
            lwc_complain("\"%s\": a joint's name has lower case letters, digits and hyphens",
                         typed);
            return false;
        }
        return put_once(&where->joints, joint, value, typed);
    }
    if (!lwc_starts(name, "drive.") && put_pose_member(where, name, value, typed, &ok)) {
        return ok;
    }
    const char *drive = lwc_starts(name, "drive.") ? name + strlen("drive.") : name;
    if (!lwc_is_name(drive, strlen(drive), false)) {
        lwc_complain("\"%s\": expected x y z rz, yaw pitch roll, qw qx qy qz, rvx rvy rvz, "
                     "dx dy dz, joint.NAME, from.NAME, near.NAME or a drive's name (lower case)",
                     typed);
        return false;
    }
    return put_once(&where->drives, drive, value, typed);
}

/* Splits a word at '='; the name is copied into `name` (size LWC_WORD_MAX). */
enum { LWC_WORD_MAX = 96 };

static bool split(const char *word, char *name, const char **text)
{
    const char *equals = strchr(word, '=');
    if (equals == NULL || equals == word || (size_t)(equals - word) >= LWC_WORD_MAX) {
        lwc_complain("\"%s\": expected NAME=VALUE, for example x=12.5 or m1=10", word);
        return false;
    }
    memcpy(name, word, (size_t)(equals - word));
    name[equals - word] = '\0';
    *text = equals + 1;
    return true;
}

/* An option's list "m1=10 m2=20" or "x=1,y=2"; the parts live in `store`. */
static bool place_put_list(place *where, const char *list, lwc_text *store)
{
    size_t start = store->len;
    lwc_text_puts(store, list);
    lwc_text_putc(store, '\0');
    char *p = store->data + start;
    bool any = false;
    while (*p != '\0') {
        p += strspn(p, " ,\t");
        size_t len = strcspn(p, " ,\t");
        if (len == 0) {
            break;
        }
        bool last = p[len] == '\0';
        p[len] = '\0';
        char name[LWC_WORD_MAX];
        const char *text = NULL;
        if (!split(p, name, &text) || !place_put(where, name, text, p)) {
            return false;
        }
        any = true;
        p += last ? len : len + 1;
    }
    if (!any) {
        lwc_complain("\"%s\": expected values such as \"m1=10 m2=20\" or \"x=0 y=0\"", list);
    }
    return any;
}

static bool has_any(const place *where)
{
    return where->pose != NULL || where->joints != NULL || where->drives != NULL ||
           where->mode != NULL;
}

/* Moves `item` into `object`. */
static void move_into(cJSON *object, const char *name, cJSON **item)
{
    if (*item != NULL) {
        lwc_json_put(object, name, *item);
        *item = NULL;
    }
}

static cJSON *take_pose(place *where)
{
    cJSON *pose = where->pose != NULL ? where->pose : lwc_json_object();
    where->pose = NULL;
    move_into(pose, "joints", &where->joints);
    return pose;
}

/* Puts a posture's members into `object`: readings, or a pose in a mode, or joints. */
static bool put_posture(cJSON *object, place *where, const char *what)
{
    if (where->drives != NULL && (where->pose != NULL || where->joints != NULL)) {
        lwc_complain("%s: name a posture by readings or by a pose, not by both", what);
        return false;
    }
    if (where->drives != NULL && where->mode != NULL) {
        lwc_complain("%s: a mode goes with a pose; for readings give --near instead", what);
        return false;
    }
    if (where->drives != NULL) {
        move_into(object, "drives", &where->drives);
    } else if (where->pose == NULL && where->joints != NULL && where->mode == NULL) {
        move_into(object, "joints", &where->joints);
    } else if (where->pose != NULL || where->joints != NULL) {
        lwc_json_put(object, "pose", take_pose(where));
        if (where->mode != NULL) {
            lwc_json_put_string(object, "mode", where->mode);
        }
    } else {
        lwc_complain("%s: a mode alone names no posture; add a pose", what);
        return false;
    }
    return true;
}

/* `near` may be a bare pose as well. */
static bool put_near(cJSON *body, place *near)
{
    if (near->pose != NULL && near->drives == NULL && near->mode == NULL) {
        lwc_json_put(body, "near", take_pose(near));
        return true;
    }
    return put_posture(lwc_json_room(body, "near"), near, "near");
}

/* Where a move starts, and for reach the posture near it: readings alone name no assembly mode. */
static bool put_from_and_near(cJSON *body, lwc_kind kind, place *from, place *near)
{
    if (has_any(from) && !put_posture(lwc_json_room(body, "from"), from, "from")) {
        return false;
    }
    if (!has_any(near)) {
        return true;
    }
    if (kind != LWC_REACH) {
        return put_near(body, near);
    }
    if (lwc_json_get(body, "from") == NULL) {
        lwc_complain("near is taken only for where a move starts; give from.NAME=.. as well, or "
                     "ask inverse for the solution nearby");
        return false;
    }
    return put_near(lwc_json_room(body, "from"), near);
}

static bool put_main(cJSON *body, lwc_kind kind, place *main_place, const char *mode)
{
    bool wants_pose = kind == LWC_INVERSE || kind == LWC_REACH;
    if (mode != NULL && main_place->mode != NULL) {
        lwc_complain("the mode is given twice; give it once");
        return false;
    }
    main_place->mode = mode != NULL ? mode : main_place->mode;
    if (kind == LWC_FORWARD) {
        if (main_place->pose != NULL || main_place->joints != NULL || main_place->mode != NULL) {
            lwc_complain("forward takes readings, for example m1=10 m2=20; for a pose ask inverse; "
                         "to pick among solutions give --near");
            return false;
        }
        if (main_place->drives == NULL) {
            lwc_complain("forward wants the drives' readings, for example: leeway ask forward NAME "
                         "m1=10 m2=20");
            return false;
        }
        move_into(body, "drives", &main_place->drives);
        return true;
    }
    if (wants_pose && main_place->drives != NULL) {
        lwc_text first = {0};
        lwc_text_puts(&first, main_place->drives->child->string);
        lwc_complain("%s takes a pose; \"%s\" is no part of one (x y z, yaw pitch roll, qw qx qy "
                     "qz, rz, joint.NAME). For readings ask forward; as a start write from.%s=..",
                     lwc_kind_name(kind), first.data, first.data);
        lwc_text_clear(&first);
        return false;
    }
    if (main_place->pose == NULL && main_place->joints == NULL && main_place->drives == NULL) {
        lwc_complain("%s wants %s, for example: leeway ask %s NAME %s", lwc_kind_name(kind),
                     wants_pose ? "a pose" : "a posture", lwc_kind_name(kind),
                     wants_pose ? "x=10 y=0 z=500" : "m1=10 m2=20");
        return false;
    }
    if (wants_pose) {
        lwc_json_put(body, "pose", take_pose(main_place));
        if (main_place->mode != NULL) {
            lwc_json_put_string(body, "mode", main_place->mode);
        }
        return true;
    }
    return put_posture(body, main_place, lwc_kind_name(kind));
}

/* "load=1,travel=0.05" into an object. */
static bool put_numbers(cJSON *object, const char *text, const char *option, const char *example)
{
    const char *p = text;
    while (*p != '\0') {
        char part[LWC_WORD_MAX];
        size_t len = strcspn(p, ", ");
        if (len == 0 || len >= sizeof part) {
            break;
        }
        memcpy(part, p, len);
        part[len] = '\0';
        char name[LWC_WORD_MAX];
        const char *number = NULL;
        double value = 0.0;
        if (!split(part, name, &number) || !lwc_read_number(number, &value) ||
            !put_once(&object, name, value, part)) {
            break;
        }
        p += len;
        p += *p != '\0';
        if (*p == '\0') {
            return true;
        }
    }
    lwc_complain("%s \"%s\": expected %s", option, text, example);
    return false;
}

/* "1.2", or "load=1,travel=0.05". */
static bool put_margin_min(cJSON *body, const char *text)
{
    double value = 0.0;
    if (lwc_read_number(text, &value)) {
        lwc_json_put_number(body, "margin_min", value);
        return true;
    }
    return put_numbers(lwc_json_room(body, "margin_min"), text, "--margin-min",
                       "a number, or load=1.2,travel=0.05");
}

static bool put_units(cJSON *body, const char *text)
{
    cJSON *units = lwc_json_room(body, "units");
    const char *p = text;
    bool ok = true;
    while (ok && *p != '\0') {
        size_t len = strcspn(p, ", ");
        bool length = (len == 2 && memcmp(p, "mm", 2) == 0) || (len == 1 && *p == 'm');
        bool angle = len == 3 && (memcmp(p, "deg", 3) == 0 || memcmp(p, "rad", 3) == 0);
        const char *name = length ? "length" : "angle";
        ok = (length || angle) && lwc_json_get(units, name) == NULL;
        if (ok) {
            char unit[4] = "";
            memcpy(unit, p, len);
            lwc_json_put_string(units, name, unit);
        }
        p += len;
        p += *p != '\0';
    }
    if (!ok || units->child == NULL) {
        lwc_complain("--units \"%s\": expected mm or m, then deg or rad, as in --units mm,deg",
                     text);
        return false;
    }
    return true;
}

static bool put_count(cJSON *object, const char *name, const char *text)
{
    long value = 0;
    if (!lwc_read_count(text, 1000000000L, &value)) {
        lwc_complain("--%s \"%s\": expected a whole number from 1 on", name, text);
        return false;
    }
    lwc_json_put_number(object, name, (double)value);
    return true;
}

static bool put_timeout(cJSON *object, const char *text)
{
    long value = 0;
    if (!lwc_read_count(text, 600000L, &value)) {
        lwc_complain("--timeout-ms \"%s\": expected milliseconds, 1 to 600000", text);
        return false;
    }
    lwc_json_put_number(object, "timeout_ms", (double)value);
    return true;
}

/* Complains of an option that belongs to another question. */
static bool only_for(bool given, const char *option, bool allowed, lwc_kind kind, const char *kinds)
{
    if (given && !allowed) {
        lwc_complain("--%s does not go with %s; it is for %s", option, lwc_kind_name(kind), kinds);
        return false;
    }
    return true;
}

static bool check_kind(lwc_kind kind, const lwc_args *args)
{
    return only_for(args->all, "all", kind == LWC_FORWARD, kind, "forward") &&
           only_for(args->point != NULL, "point", kind == LWC_JACOBIAN, kind, "jacobian") &&
           only_for(args->in != NULL, "in", kind == LWC_JACOBIAN, kind, "jacobian") &&
           only_for(args->distance, "distance", kind == LWC_MARGIN, kind, "margin") &&
           only_for(args->margin_min != NULL, "margin-min",
                    kind == LWC_REACH || kind == LWC_FREE_TRAVEL, kind, "reach and free-travel") &&
           only_for(args->from != NULL, "from", kind == LWC_REACH, kind, "reach") &&
           only_for(args->budget != NULL, "budget",
                    kind == LWC_REACH || kind == LWC_FREE_TRAVEL ||
                        (kind == LWC_MARGIN && args->distance),
                    kind, "reach, free-travel, and for margin with --distance") &&
           only_for(args->timeout_ms != NULL, "timeout-ms",
                    kind == LWC_REACH || kind == LWC_FREE_TRAVEL || kind == LWC_MARGIN, kind,
                    "reach, free-travel and margin");
}

static bool put_point(cJSON *body, const char *list, lwc_text *store)
{
    place point = {0};
    bool ok = place_put_list(&point, list, store);
    if (ok && (point.pose == NULL || cJSON_GetArraySize(point.pose) != 3 ||
               lwc_json_get(point.pose, "x") == NULL || lwc_json_get(point.pose, "y") == NULL ||
               lwc_json_get(point.pose, "z") == NULL || point.drives != NULL ||
               point.joints != NULL || point.mode != NULL)) {
        lwc_complain("--point \"%s\": expected x=..,y=..,z=..", list);
        ok = false;
    }
    if (ok) {
        move_into(body, "point", &point.pose);
    }
    place_clear(&point);
    return ok;
}

/* "position=40,angle=30". */
static bool put_reach(cJSON *body, const char *text)
{
    cJSON *reach = lwc_json_room(body, "reach");
    return put_numbers(reach, text, "--reach", "position=40,angle=30");
}

static bool put_options(cJSON *body, const lwc_args *args, lwc_text *store)
{
    const struct {
        const char *name;
        const char *text;
    } strings[] = {{"tool", args->tool},
                   {"orientation", args->orientation},
                   {"in", args->in},
                   {"ref", args->ref},
                   {"expect", args->expect}};
    for (size_t i = 0; i < sizeof strings / sizeof strings[0]; i++) {
        if (strings[i].text != NULL) {
            lwc_json_put_string(body, strings[i].name, strings[i].text);
        }
    }
    if (args->all) {
        lwc_json_put(body, "all", cJSON_CreateTrue());
    }
    if (args->certificate) {
        lwc_json_put(body, "certificate", cJSON_CreateTrue());
    }
    cJSON *budget_room = args->distance ? lwc_json_room(body, "distance") : body;
    return (args->revision == NULL || put_count(body, "revision", args->revision)) &&
           (args->budget == NULL || put_count(budget_room, "budget", args->budget)) &&
           (args->timeout_ms == NULL || put_timeout(body, args->timeout_ms)) &&
           (args->reach == NULL || put_reach(body, args->reach)) &&
           (args->units == NULL || put_units(body, args->units)) &&
           (args->margin_min == NULL || put_margin_min(body, args->margin_min)) &&
           (args->point == NULL || put_point(body, args->point, store));
}

/* Sorts the words into the three places a question may name. */
static bool sort_words(const char *const *words, size_t n_words, place *main_place, place *near,
                       place *from)
{
    for (size_t i = 0; i < n_words; i++) {
        char name[LWC_WORD_MAX];
        const char *text = NULL;
        if (!split(words[i], name, &text)) {
            return false;
        }
        bool is_from = lwc_starts(name, "from.");
        bool is_near = lwc_starts(name, "near.");
        place *where = is_from ? from : is_near ? near : main_place;
        if (!place_put(where, is_from || is_near ? name + 5 : name, text, words[i])) {
            return false;
        }
    }
    return true;
}

cJSON *lwc_question_build(lwc_kind kind, const char *const *words, size_t n_words,
                          const lwc_args *args)
{
    cJSON *body = lwc_json_object();
    place main_place = {0};
    place near = {0};
    place from = {0};
    lwc_text near_text = {0}; /* the places borrow mode names from these */
    lwc_text from_text = {0};
    lwc_text point_text = {0};
    bool ok = check_kind(kind, args) && sort_words(words, n_words, &main_place, &near, &from) &&
              (args->near == NULL || place_put_list(&near, args->near, &near_text)) &&
              (args->from == NULL || place_put_list(&from, args->from, &from_text)) &&
              only_for(has_any(&from), "from", kind == LWC_REACH, kind, "reach") &&
              put_main(body, kind, &main_place, args->mode) &&
              put_from_and_near(body, kind, &from, &near) &&
              put_options(body, args, &point_text);
    place_clear(&main_place);
    place_clear(&near);
    place_clear(&from);
    lwc_text_clear(&near_text);
    lwc_text_clear(&from_text);
    lwc_text_clear(&point_text);
    if (!ok) {
        cJSON_Delete(body);
        return NULL;
    }
    return body;
}

bool lwc_path_options(cJSON *body, const char *const *words, size_t n_words, const lwc_args *args)
{
    place main_place = {0};
    place near = {0};
    place from = {0};
    lwc_text near_text = {0};
    lwc_text from_text = {0};
    lwc_text point_text = {0};
    bool ok = sort_words(words, n_words, &main_place, &near, &from) &&
              (args->near == NULL || place_put_list(&near, args->near, &near_text)) &&
              (args->from == NULL || place_put_list(&from, args->from, &from_text));
    if (ok && has_any(&main_place)) {
        lwc_complain("a path takes its moves from the file; words beside it say where it starts, "
                     "as from.m1=10");
        ok = false;
    }
    ok = ok && put_from_and_near(body, LWC_REACH, &from, &near) &&
         put_options(body, args, &point_text);
    place_clear(&main_place);
    place_clear(&near);
    place_clear(&from);
    lwc_text_clear(&near_text);
    lwc_text_clear(&from_text);
    lwc_text_clear(&point_text);
    return ok;
}
