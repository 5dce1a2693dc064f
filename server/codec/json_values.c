/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The typed getters of json_in.h. Comparisons are written so that a NaN would fail, although the
 * scan lets none in. */
#include "json_in.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include <cjson/cJSON.h>

static bool want_number(const lwd_reader *r)
{
    if (r->node == NULL) {
        return false;
    }
    if (!cJSON_IsNumber(r->node)) {
        LWD_TELL(r, "wrong-type", "a number", NULL, "A number belongs here.");
        return false;
    }
    return true;
}

bool lwd_read_number(const lwd_reader *r, double low, double high, double *out)
{
    if (!want_number(r)) {
        return false;
    }
    double x = r->node->valuedouble;
    if (!(x >= low && x <= high)) {
        char expected[96];
        (void)snprintf(expected, sizeof expected, "a number from %s to %s", lwd_num_of(low).text,
                       lwd_num_of(high).text);
        LWD_TELL(r, "out-of-range", expected, NULL, "The number %s is not between %s and %s.",
                 lwd_num_of(x).text, lwd_num_of(low).text, lwd_num_of(high).text);
        return false;
    }
    *out = x;
    return true;
}

bool lwd_read_positive(const lwd_reader *r, double high, double *out)
{
    if (!want_number(r)) {
        return false;
    }
    double x = r->node->valuedouble;
    if (!(x > 0.0 && x <= high)) {
        char expected[80];
        (void)snprintf(expected, sizeof expected, "a number above 0, at most %s",
                       lwd_num_of(high).text);
        LWD_TELL(r, "out-of-range", expected, NULL,
                 "The number %s must be above 0 and at most %s.", lwd_num_of(x).text,
                 lwd_num_of(high).text);
        return false;
    }
    *out = x;
    return true;
}

bool lwd_read_int(const lwd_reader *r, long low, long high, long *out)
{
    double x = 0.0;
    if (!lwd_read_number(r, (double)low, (double)high, &x)) {
        return false;
    }
    if (x != floor(x)) {
        LWD_TELL(r, "wrong-type", "a whole number", NULL, "A whole number belongs here.");
        return false;
    }
    *out = (long)x;
    return true;
}

bool lwd_read_bool(const lwd_reader *r, bool *out)
{
    if (r->node == NULL) {
        return false;
    }
    if (!cJSON_IsBool(r->node)) {
        LWD_TELL(r, "wrong-type", "true or false", NULL, "true or false belongs here.");
        return false;
    }
    *out = cJSON_IsTrue(r->node) != 0;
    return true;
}

bool lwd_read_text(const lwd_reader *r, size_t most, const char **out)
{
    if (r->node == NULL) {
        return false;
    }
    if (!cJSON_IsString(r->node)) {
        LWD_TELL(r, "wrong-type", "a text in quotes", NULL, "A text in quotes belongs here.");
        return false;
    }
    size_t n = strlen(r->node->valuestring);
    if (n > most) {
        char expected[48];
        char got[48];
        (void)snprintf(expected, sizeof expected, "at most %zu bytes", most);
        (void)snprintf(got, sizeof got, "%zu bytes", n);
        LWD_TELL(r, "too-long", expected, got, "The text is too long; shorten it to %zu bytes.",
                 most);
        return false;
    }
    *out = r->node->valuestring;
    return true;
}

bool lwd_read_name(const lwd_reader *r, char out[LW_NAME_SIZE])
{
    if (r->node == NULL) {
        return false;
    }
    const char *text = cJSON_IsString(r->node) ? r->node->valuestring : "";
    size_t n = strlen(text);
    if (n == 0 || n >= LW_NAME_SIZE || strspn(text, "abcdefghijklmnopqrstuvwxyz0123456789-") != n) {
        LWD_TELL(r, cJSON_IsString(r->node) ? "bad-name" : "wrong-type",
                 "1 to 32 of a-z 0-9 -", NULL,
                 "A name is written with lower-case letters, digits and hyphens, at most 32.");
        return false;
    }
    memcpy(out, text, n + 1);
    return true;
}

bool lwd_read_word(const lwd_reader *r, const char *const *word, size_t n, size_t *out)
{
    if (r->node == NULL) {
        return false;
    }
    const char *text = cJSON_IsString(r->node) ? r->node->valuestring : NULL;
    for (size_t i = 0; i < n && text != NULL; i++) {
        if (strcmp(text, word[i]) == 0) {
            *out = i;
            return true;
        }
    }
    char expected[80] = "one of";
    size_t used = strlen(expected);
    for (size_t i = 0; i < n; i++) {
        int more = snprintf(expected + used, sizeof expected - used, " %s", word[i]);
        used += more > 0 ? (size_t)more : 0;
        used = used < sizeof expected ? used : sizeof expected - 1;
    }
    const char *near = text != NULL ? lwd_nearest(text, word, n) : NULL;
    LWD_TELL(r, text != NULL ? "unknown-word" : "wrong-type", expected, NULL,
             "This is none of the words that may stand here.%s%s%s", near ? " Is \"" : "",
             near ? near : "", near ? "\" meant?" : "");
    return false;
}

/* ---- groups of numbers ----------------------------------------------------------------------- */

bool lwd_read_vec3(const lwd_reader *r, double most, double out[3])
{
    if (!lwd_want_array(r, 3, 3, "numbers")) {
        return false;
    }
    double v[3] = {0.0, 0.0, 0.0};
    bool good = true;
    lwd_reader e;
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        good = lwd_read_number(&e, -most, most, &v[e.index]) && good;
    }
    if (good) {
        memcpy(out, v, sizeof v);
    }
    return good;
}

bool lwd_read_axis(const lwd_reader *r, double out[3])
{
    double v[3];
    if (!lwd_read_vec3(r, 1e9, v)) {
        return false;
    }
    double size = fmax(fabs(v[0]), fmax(fabs(v[1]), fabs(v[2])));
    if (!(size >= 1e-9)) {
        LWD_TELL(r, "zero-axis", "a direction, not all zero", NULL,
                 "An axis of zero length has no direction.");
        return false;
    }
    double length = size * sqrt((v[0] / size) * (v[0] / size) + (v[1] / size) * (v[1] / size) +
                                (v[2] / size) * (v[2] / size));
    for (int i = 0; i < 3; i++) {
        out[i] = v[i] / length;
    }
    return true;
}

bool lwd_read_range(const lwd_reader *r, double most, lw_range *out)
{
    if (!lwd_want_array(r, 2, 2, "numbers or null")) {
        return false;
    }
    lw_range range = {0};
    bool good = true;
    lwd_reader e;
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        bool *has = e.index == 0 ? &range.has_low : &range.has_high;
        if (!lwd_is_null(&e)) {
            *has = lwd_read_number(&e, -most, most, e.index == 0 ? &range.low : &range.high);
            good = good && *has;
        }
    }
    if (good && range.has_low && range.has_high && !(range.low < range.high)) {
        char got[80];
        (void)snprintf(got, sizeof got, "[%s, %s]", lwd_num_of(range.low).text,
                       lwd_num_of(range.high).text);
        LWD_TELL(r, "empty-range", "[low, high] with low below high", got,
                 "The range from %s to %s is empty; its first number must be the smaller one.",
                 lwd_num_of(range.low).text, lwd_num_of(range.high).text);
        return false;
    }
    if (good) {
        *out = range;
    }
    return good;
}

bool lwd_read_xyz(const lwd_reader *r, double most, double out[3])
{
    static const lwd_member table[3] = {{"x", true}, {"y", true}, {"z", true}};
    lwd_reader m[3];
    if (!lwd_read_members(r, table, 3, m)) {
        return false;
    }
    double v[3] = {0.0, 0.0, 0.0};
    bool good = true;
    for (int i = 0; i < 3; i++) {
        good = lwd_read_number(&m[i], -most, most, &v[i]) && good;
    }
    if (good) {
        memcpy(out, v, sizeof v);
    }
    return good;
}

bool lwd_read_quaternion(const lwd_reader *r, double out[4])
{
    static const lwd_member table[4] = {{"w", true}, {"x", true}, {"y", true}, {"z", true}};
    lwd_reader m[4];
    if (!lwd_read_members(r, table, 4, m)) {
        return false;
    }
    double q[4] = {0.0, 0.0, 0.0, 0.0};
    bool good = true;
    for (int i = 0; i < 4; i++) {
        good = lwd_read_number(&m[i], -2.0, 2.0, &q[i]) && good;
    }
    if (!good) {
        return false;
    }
    double length = sqrt(q[0] * q[0] + q[1] * q[1] + q[2] * q[2] + q[3] * q[3]);
    if (!(fabs(length - 1.0) <= 1e-3)) {
        char got[60];
        (void)snprintf(got, sizeof got, "length %s", lwd_num_short(length).text);
        LWD_TELL(r, "quaternion-length", "unit length within 1e-3", got,
                 "The quaternion has length %s; a turn needs length 1.",
                 lwd_num_short(length).text);
        return false;
    }
    for (int i = 0; i < 4; i++) {
        out[i] = q[i] / length;
    }
    return true;
}
