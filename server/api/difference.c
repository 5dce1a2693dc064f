/* SPDX-License-Identifier: GPL-3.0-or-later */
/* GET .../difference?from=&to=: two revisions side by side, in words and numbers. This file holds
 * the handler and the ways to tell one change; difference_parts.c walks the documents. */
#include "difference.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

bool lwd_diff_equal(double a, double b)
{
    return fabs(a - b) <= 1e-12 * fmax(fabs(a), fabs(b));
}

/* ---- telling one change ---------------------------------------------------------------------- */

static void begin(lwd_diff *d, const char *what)
{
    d->n++;
    lwd_json_object(d->json);
    lwd_json_put_string(d->json, "of", d->of);
    if (d->name[0] != '\0') {
        lwd_json_put_string(d->json, "name", d->name);
    }
    lwd_json_put_string(d->json, "what", what);
}

/* "joint shaft: " or "document: ". */
static int subject(const lwd_diff *d, char *out, size_t size)
{
    return snprintf(out, size, "%s%s%s: ", d->of, d->name[0] != '\0' ? " " : "", d->name);
}

static void end(lwd_diff *d, const char *text)
{
    lwd_json_put_string(d->json, "text", text);
    lwd_json_end(d->json);
}

static void put_optional(lwd_diff *d, const char *key, bool has, double value)
{
    if (has) {
        lwd_json_put_number(d->json, key, lwd_tidy(value));
    } else {
        lwd_json_put_null(d->json, key);
    }
}

void lwd_diff_optional(lwd_diff *d, const char *what, bool has_a, double a, bool has_b, double b,
                       const char *unit)
{
    char text[256];
    if (has_a == has_b && (!has_a || lwd_diff_equal(a, b))) {
        return;
    }
    begin(d, what);
    put_optional(d, "old", has_a, a);
    put_optional(d, "new", has_b, b);
    if (has_a && has_b) {
        lwd_json_put_number(d->json, "change", lwd_tidy(b - a));
    }
    if (unit[0] != '\0') {
        lwd_json_put_string(d->json, "unit", unit);
    }
    int n = subject(d, text, sizeof text);
    lwd_num old_text = lwd_num_short(a);
    lwd_num new_text = lwd_num_short(b);
    lwd_num by = lwd_num_short(b - a);
    if (has_a && has_b) {
        (void)snprintf(text + n, sizeof text - (size_t)n, "%s was %s, is %s %s (%s%s)", what,
                       old_text.text, new_text.text, unit, b > a ? "+" : "", by.text);
    } else if (has_b) {
        (void)snprintf(text + n, sizeof text - (size_t)n, "%s is %s %s now, was not given", what,
                       new_text.text, unit);
    } else {
        (void)snprintf(text + n, sizeof text - (size_t)n, "%s was %s %s, is not given now", what,
                       old_text.text, unit);
    }
    end(d, text);
}

void lwd_diff_number(lwd_diff *d, const char *what, double a, double b, const char *unit)
{
    lwd_diff_optional(d, what, true, a, true, b, unit);
}

/* Low and high end in the order they are shown: a negative slope swaps them. */
static void ends(const lw_range *range, double slope, double offset, bool has[2], double value[2])
{
    bool swap = slope < 0.0;
    has[0] = swap ? range->has_high : range->has_low;
    has[1] = swap ? range->has_low : range->has_high;
    value[0] = offset + slope * (swap ? range->high : range->low);
    value[1] = offset + slope * (swap ? range->low : range->high);
}

void lwd_diff_range(lwd_diff *d, const char *what, const lw_range *a, const lw_range *b,
                    double slope_a, double offset_a, double slope_b, double offset_b,
                    const char *unit)
{
    static const char *const side[2] = {"lower end of", "upper end of"};
    bool has_a[2];
    bool has_b[2];
    double value_a[2];
    double value_b[2];
    ends(a, slope_a, offset_a, has_a, value_a);
    ends(b, slope_b, offset_b, has_b, value_b);
    for (size_t i = 0; i < 2; i++) {
        char name[80];
        (void)snprintf(name, sizeof name, "%s %s", side[i], what);
        lwd_diff_optional(d, name, has_a[i], value_a[i], has_b[i], value_b[i], unit);
    }
}

void lwd_diff_point(lwd_diff *d, const char *what, const double a_m[3], const double b_m[3])
{
    char text[256];
    double by = 0.0;
    double size = 0.0;
    for (size_t i = 0; i < 3; i++) {
        by += (b_m[i] - a_m[i]) * (b_m[i] - a_m[i]);
        size += a_m[i] * a_m[i] + b_m[i] * b_m[i];
    }
    by = sqrt(by);
    if (by <= 1e-12 * sqrt(size)) {
        return;
    }
    begin(d, what);
    for (size_t side = 0; side < 2; side++) {
        const double *p = side == 0 ? a_m : b_m;
        lwd_json_put_array(d->json, side == 0 ? "old" : "new");
        for (size_t i = 0; i < 3; i++) {
            lwd_json_number(d->json, lwd_tidy(lwd_length_out(d->units, p[i])));
        }
        lwd_json_end(d->json);
    }
    double shown = lwd_length_out(d->units, by);
    lwd_json_put_number(d->json, "change", lwd_tidy(shown));
    lwd_json_put_string(d->json, "unit", lwd_length_word(d->units));
    int n = subject(d, text, sizeof text);
    (void)snprintf(text + n, sizeof text - (size_t)n, "%s moved by %s %s", what,
                   lwd_num_short(shown).text, lwd_length_word(d->units));
    end(d, text);
}

static void turned(lwd_diff *d, const char *what, double angle_rad, const double *a,
                   const double *b, size_t n_number)
{
    char text[256];
    double shown = lwd_angle_out(d->units, angle_rad);
    begin(d, what);
    lwd_json_put_numbers(d->json, "old", a, n_number);
    lwd_json_put_numbers(d->json, "new", b, n_number);
    lwd_json_put_number(d->json, "change", shown);
    lwd_json_put_string(d->json, "unit", lwd_angle_word(d->units));
    int n = subject(d, text, sizeof text);
    (void)snprintf(text + n, sizeof text - (size_t)n, "%s turned by %s %s", what,
                   lwd_num_short(shown).text, lwd_angle_word(d->units));
    end(d, text);
}

void lwd_diff_axis(lwd_diff *d, const char *what, const double a[3], const double b[3])
{
    double cross[3] = {a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2],
                       a[0] * b[1] - a[1] * b[0]};
    double sine = sqrt(cross[0] * cross[0] + cross[1] * cross[1] + cross[2] * cross[2]);
    double angle = atan2(sine, a[0] * b[0] + a[1] * b[1] + a[2] * b[2]);
    if (angle > 1e-12) {
        turned(d, what, angle, a, b, 3);
    }
}

void lwd_diff_turn(lwd_diff *d, const char *what, const double a[9], const double b[9])
{
    double rot[9]; /* from a to b */
    double quat_a[4];
    double quat_b[4];
    double quat[4];
    for (size_t i = 0; i < 3; i++) {
        for (size_t k = 0; k < 3; k++) {
            rot[3 * i + k] = b[3 * i] * a[3 * k] + b[3 * i + 1] * a[3 * k + 1]
                             + b[3 * i + 2] * a[3 * k + 2];
        }
    }
    lw_quat_from_rot(quat, rot);
    double sine = sqrt(quat[1] * quat[1] + quat[2] * quat[2] + quat[3] * quat[3]);
    double angle = 2.0 * atan2(sine, quat[0]);
    if (angle > 1e-12) {
        lw_quat_from_rot(quat_a, a);
        lw_quat_from_rot(quat_b, b);
        turned(d, what, angle, quat_a, quat_b, 4);
    }
}

void lwd_diff_text(lwd_diff *d, const char *what, const char *a, const char *b)
{
    char text[320];
    if (strcmp(a, b) == 0) {
        return;
    }
    begin(d, what);
    lwd_json_put_string(d->json, "old", a);
    lwd_json_put_string(d->json, "new", b);
    int n = subject(d, text, sizeof text);
    (void)snprintf(text + n, sizeof text - (size_t)n, "%s was \"%.90s\", is \"%.90s\"", what, a, b);
    end(d, text);
}

void lwd_diff_there(lwd_diff *d, bool added)
{
    char text[128];
    begin(d, added ? "added" : "removed");
    int n = subject(d, text, sizeof text);
    (void)snprintf(text + n, sizeof text - (size_t)n, "%s", added ? "is new" : "is gone");
    end(d, text);
}

/* ---- the handler ----------------------------------------------------------------------------- */

static void put_side(lwd_json *json, const char *key, const lwd_held *held)
{
    lwd_json_put_object(json, key);
    lwd_json_put_int(json, "revision", held->number);
    lwd_json_put_string(json, "digest", held->edge.digest);
    lwd_json_put_string(json, "state",
                        lwd_catalog_state_name((lwd_catalog_state)atomic_load(&held->state)));
    lwd_json_end(json);
}

static void write(const lwd_held *a, const lwd_held *b, const lwd_request *request,
                  lwd_reply *reply)
{
    lwd_json json;
    lwd_diff d = {.json = &json, .a = a, .b = b, .units = b->document->units, .of = "document",
                  .name = ""};
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", b->name);
    put_side(&json, "from", a);
    put_side(&json, "to", b);
    lwd_json_put_object(&json, "units");
    lwd_json_put_string(&json, "length", lwd_length_word(d.units));
    lwd_json_put_string(&json, "angle", lwd_angle_word(d.units));
    lwd_json_end(&json);
    lwd_json_put_bool(&json, "same_digest", strcmp(a->edge.digest, b->edge.digest) == 0);
    lwd_json_put_array(&json, "changes");
    lwd_diff_documents(&d);
    lwd_json_end(&json);
    lwd_json_put_int(&json, "count", (int64_t)d.n);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

/* from and to: numbers of revisions; `to` left out is the one that answers. */
static bool read_query(const lwd_request *request, lwd_reply *reply, int64_t revision[2])
{
    static const char *const name[] = {"from", "to"};
    const char *value[2];
    if (!lwd_query_members(reply, request, name, value, 2)) {
        return false;
    }
    if (value[0] == NULL) {
        lwd_fail(reply, request, LWD_PROBLEM_MEMBER_MISSING, NULL, "from=1&to=2", NULL,
                 "Say which two revisions: from= and to= (left out: the one that answers).");
        return false;
    }
    for (size_t i = 0; i < 2; i++) {
        revision[i] = value[i] != NULL ? lwd_count_of(value[i]) : 0;
        if (value[i] != NULL && revision[i] == 0) {
            lwd_fail(reply, request, LWD_PROBLEM_QUERY, NULL, "a whole number from 1", value[i],
                     "%s takes the number of a revision.", name[i]);
            return false;
        }
    }
    return true;
}

void lwd_get_difference(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    const char *name = NULL;
    int64_t revision[2] = {0, 0};
    lwd_held *held[2] = {NULL, NULL};
    lwd_catalog_error err;
    lwd_store_result result = LWD_STORE_OK;
    if (!lwd_takes_json(reply, request) || !lwd_path_name(reply, request, &name)
        || !read_query(request, reply, revision)) {
        return;
    }
    for (size_t i = 0; i < 2 && result == LWD_STORE_OK; i++) {
        result = lwd_store_get(app->store, name, revision[i], true, &held[i], &err);
    }
    if (result != LWD_STORE_OK) {
        lwd_fail_store(reply, request, result, &err);
    } else {
        write(held[0], held[1], request, reply);
    }
    lwd_held_drop(held[0]);
    lwd_held_drop(held[1]);
}
