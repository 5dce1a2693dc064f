/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Published cases: JSON files under tests/cases. Whatever is missing there fails the running test,
 * so that a misspelt member can never pass as "nothing to check". */
#include "lwt.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

static char *read_text(const char *path)
{
    FILE *stream = fopen(path, "rb");
    if (stream == NULL) {
        return NULL;
    }
    char *text = NULL;
    size_t len = 0;
    size_t cap = 0;
    for (;;) {
        if (cap - len < 2) {
            cap = cap == 0 ? 65536 : 2 * cap;
            char *larger = realloc(text, cap);
            if (larger == NULL) {
                break;
            }
            text = larger;
        }
        size_t got = fread(text + len, 1, cap - len - 1, stream);
        if (got == 0) {
            break;
        }
        len += got;
    }
    (void)fclose(stream);
    if (text != NULL) {
        text[len] = '\0';
    }
    return text;
}

cJSON *lwt_case_file_at(const char *name, const char *file, int line)
{
    char path[1024];
    int wrote = snprintf(path, sizeof path, "%s/%s", LWT_CASES_DIR, name);
    if (wrote < 0 || (size_t)wrote >= sizeof path) {
        lwt_fail_at(file, line, "case file name too long: %s", name);
    }
    char *text = read_text(path);
    if (text == NULL) {
        lwt_fail_at(file, line, "cannot read the case file %s: %s", path, strerror(errno));
    }
    cJSON *root = cJSON_Parse(text);
    const char *stop = root == NULL ? cJSON_GetErrorPtr() : NULL;
    if (root == NULL) {
        print_error("%s is no JSON near: %.60s\n", path, stop == NULL ? "" : stop);
    }
    free(text);
    if (root == NULL) {
        _fail(file, line);
    }
    return root;
}

const cJSON *lwt_member_at(const cJSON *object, const char *name, const char *file, int line)
{
    const cJSON *member = cJSON_GetObjectItemCaseSensitive(object, name);
    if (member == NULL) {
        lwt_fail_at(file, line, "the case has no member \"%s\"", name);
    }
    return member;
}

double lwt_number_at(const cJSON *object, const char *name, const char *file, int line)
{
    const cJSON *member = lwt_member_at(object, name, file, line);
    if (!cJSON_IsNumber(member)) {
        lwt_fail_at(file, line, "the member \"%s\" of the case is no number", name);
    }
    return member->valuedouble;
}

const char *lwt_text_at(const cJSON *object, const char *name, const char *file, int line)
{
    const cJSON *member = lwt_member_at(object, name, file, line);
    if (!cJSON_IsString(member)) {
        lwt_fail_at(file, line, "the member \"%s\" of the case is no text", name);
    }
    return member->valuestring;
}

/* Appends the numbers of an array, rows of a nested one in turn; returns the new count. */
static size_t gather(const cJSON *array, const char *name, double *out, size_t n, size_t max,
                     const char *file, int line)
{
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, array)
    {
        if (cJSON_IsArray(item)) {
            n = gather(item, name, out, n, max, file, line);
            continue;
        }
        if (!cJSON_IsNumber(item)) {
            lwt_fail_at(file, line, "\"%s\" holds something that is no number", name);
        }
        if (n >= max) {
            lwt_fail_at(file, line, "\"%s\" holds more than %zu numbers", name, max);
        }
        out[n++] = item->valuedouble;
    }
    return n;
}

size_t lwt_numbers_at(const cJSON *object, const char *name, double *out, size_t max,
                      const char *file, int line)
{
    const cJSON *member = lwt_member_at(object, name, file, line);
    if (!cJSON_IsArray(member)) {
        lwt_fail_at(file, line, "the member \"%s\" of the case is no array", name);
    }
    return gather(member, name, out, 0, max, file, line);
}

double lwt_printed_at(const char *text, double *half_digit, const char *file, int line)
{
    char *end = NULL;
    double value = strtod(text, &end);
    if (end == text || *end != '\0' || !isfinite(value)) {
        lwt_fail_at(file, line, "\"%s\" is no printed number", text);
    }
    /* The place of the last digit: what follows the point, moved by the exponent. */
    size_t digits = strcspn(text, "eE");
    const char *point = memchr(text, '.', digits);
    long place = point == NULL ? 0 : -(long)(digits - (size_t)(point - text) - 1);
    if (text[digits] != '\0') {
        place += strtol(text + digits + 1, NULL, 10);
    }
    if (half_digit != NULL) {
        *half_digit = 0.5 * pow(10.0, (double)place);
    }
    return value;
}
