/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Strict reading and exact writing of JSON; see json.h. The scanner runs over the bytes before
 * cJSON does, so that cJSON only ever sees text that RFC 8259 allows. */
#include "json.h"

#include <math.h>
#include <stdarg.h>
#include <stdlib.h>
#include <string.h>

typedef struct scan {
    const char *data;
    size_t len;
    size_t at;
    size_t values;
    int depth;
    lwc_json_fault *fault;
} scan;

static bool scan_value(scan *s);

static bool fail(scan *s, const char *format, ...) LWC_PRINTF(2, 3);
static bool fail(scan *s, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    (void)vsnprintf(s->fault->what, sizeof s->fault->what, format, args);
    va_end(args);
    s->fault->offset = s->at;
    s->fault->line = 1;
    s->fault->column = 1;
    for (size_t i = 0; i < s->at && i < s->len; i++) {
        bool line_end = s->data[i] == '\n';
        s->fault->line += line_end;
        s->fault->column = line_end ? 1 : s->fault->column + 1;
    }
    return false;
}

static int peek(const scan *s)
{
    return s->at < s->len ? (unsigned char)s->data[s->at] : -1;
}

static void skip_blanks(scan *s)
{
    while (s->at < s->len && strchr(" \t\r\n", s->data[s->at]) != NULL && s->data[s->at] != '\0') {
        s->at++;
    }
}

static bool fail_expected(scan *s, const char *expected)
{
    int c = peek(s);
    if (c < 0) {
        return fail(s, "expected %s, but the text ends here", expected);
    }
    if (c > 0x20 && c < 0x7f) {
        return fail(s, "expected %s, got '%c'", expected, c);
    }
    return fail(s, "expected %s, got byte 0x%02x", expected, (unsigned)c);
}

static bool scan_digits(scan *s)
{
    size_t start = s->at;
    while (peek(s) >= '0' && peek(s) <= '9') {
        s->at++;
    }
    return s->at > start || fail_expected(s, "a digit");
}

static bool scan_number(scan *s)
{
    size_t start = s->at;
    s->at += peek(s) == '-';
    if (peek(s) == '0') {
        s->at++;
    } else if (!scan_digits(s)) {
        return false;
    }
    if (peek(s) == '.') {
        s->at++;
        if (!scan_digits(s)) {
            return false;
        }
    }
    if (peek(s) == 'e' || peek(s) == 'E') {
        s->at++;
        s->at += peek(s) == '+' || peek(s) == '-';
        if (!scan_digits(s)) {
            return false;
        }
    }
    char copy[64]; /* cJSON reads at most 63 characters of a number */
    size_t len = s->at - start;
    if (len >= sizeof copy) {
        s->at = start;
        return fail(s, "expected a number of at most 63 characters, got %zu", len);
    }
    memcpy(copy, s->data + start, len);
    copy[len] = '\0';
    if (!isfinite(strtod(copy, NULL))) {
        s->at = start;
        return fail(s, "expected a number below 1.8e308, got %s", copy);
    }
    return true;
}

/* Reads four hexadecimal digits; -1 after a fault. */
static long scan_hex4(scan *s)
{
    long value = 0;
    for (int i = 0; i < 4; i++) {
        int c = peek(s);
        if (c >= '0' && c <= '9') {
            value = value * 16 + (c - '0');
        } else if ((c | 0x20) >= 'a' && (c | 0x20) <= 'f' && c > 0) {
            value = value * 16 + ((c | 0x20) - 'a' + 10);
        } else {
            (void)fail_expected(s, "a hexadecimal digit");
            return -1;
        }
        s->at++;
    }
    return value;
}

static bool scan_escape(scan *s)
{
    s->at++;
    int c = peek(s);
    if (c > 0 && strchr("\"\\/bfnrt", c) != NULL) {
        s->at++;
        return true;
    }
    if (c != 'u') {
        return fail_expected(s, "one of \" \\ / b f n r t u after the backslash");
    }
    s->at++;
    long unit = scan_hex4(s);
    if (unit < 0) {
        return false;
    }
    if (unit == 0) {
        return fail(s, "the character \\u0000 is not allowed in a string");
    }
    if (unit >= 0xdc00 && unit <= 0xdfff) {
        return fail(s, "half of a surrogate pair in a string");
    }
    if (unit >= 0xd800 && unit <= 0xdbff) {
        if (s->len - s->at < 2 || s->data[s->at] != '\\' || s->data[s->at + 1] != 'u') {
            return fail(s, "half of a surrogate pair in a string");
        }
        s->at += 2;
        unit = scan_hex4(s);
        if (unit < 0) {
            return false;
        }
        if (unit < 0xdc00 || unit > 0xdfff) {
            return fail(s, "half of a surrogate pair in a string");
        }
    }
    return true;
}

static bool scan_utf8(scan *s)
{
    size_t len = lwc_utf8_length(s->data + s->at, s->len - s->at);
    if (len == 0) {
        return fail(s, "expected UTF-8 text, got byte 0x%02x", (unsigned)peek(s));
    }
    s->at += len;
    return true;
}

static bool scan_string(scan *s)
{
    s->at++;
    for (;;) {
        int c = peek(s);
        if (c < 0) {
            return fail(s, "expected the closing quote of a string, but the text ends here");
        }
        if (c == '"') {
            s->at++;
            return true;
        }
        if (c < 0x20) {
            return fail(s, "a raw control character (byte 0x%02x) stands in a string", (unsigned)c);
        }
        if (c == '\\') {
            if (!scan_escape(s)) {
                return false;
            }
        } else if (c >= 0x80) {
            if (!scan_utf8(s)) {
                return false;
            }
        } else {
            s->at++;
        }
    }
}

static bool scan_word(scan *s, const char *word)
{
    size_t len = strlen(word);
    if (s->len - s->at < len || memcmp(s->data + s->at, word, len) != 0) {
        return fail(s, "expected a value; words are true, false and null, in lower case");
    }
    s->at += len;
    return true;
}

static bool scan_member_name(scan *s)
{
    skip_blanks(s);
    if (peek(s) != '"') {
        return fail_expected(s, "a member name in quotes");
    }
    if (!scan_string(s)) {
        return false;
    }
    skip_blanks(s);
    if (peek(s) != ':') {
        return fail_expected(s, "':' after a member name");
    }
    s->at++;
    return true;
}

/* Object or array, told by its opening character. */
static bool scan_group(scan *s, bool object)
{
    char close = object ? '}' : ']';
    if (s->depth >= LWC_JSON_DEPTH_MAX) {
        return fail(s, "nested deeper than %d levels", LWC_JSON_DEPTH_MAX);
    }
    s->depth++;
    s->at++;
    skip_blanks(s);
    if (peek(s) == close) {
        s->at++;
        s->depth--;
        return true;
    }
    for (;;) {
        if ((object && !scan_member_name(s)) || !scan_value(s)) {
            return false;
        }
        skip_blanks(s);
        int c = peek(s);
        if (c == close) {
            s->at++;
            s->depth--;
            return true;
        }
        if (c != ',') {
            return fail_expected(s, object ? "',' or '}'" : "',' or ']'");
        }
        s->at++;
    }
}

static bool scan_value(scan *s)
{
    skip_blanks(s);
    if (++s->values > LWC_JSON_VALUES_MAX) {
        return fail(s, "more than %d values", LWC_JSON_VALUES_MAX);
    }
    int c = peek(s);
    switch (c) {
    case '{':
        return scan_group(s, true);
    case '[':
        return scan_group(s, false);
    case '"':
        return scan_string(s);
    case 't':
        return scan_word(s, "true");
    case 'f':
        return scan_word(s, "false");
    case 'n':
        return scan_word(s, "null");
    default:
        return c == '-' || (c >= '0' && c <= '9') ? scan_number(s) : fail_expected(s, "a value");
    }
}

static int by_name(const void *a, const void *b)
{
    const cJSON *const *left = a;
    const cJSON *const *right = b;
    return strcmp((*left)->string, (*right)->string);
}

/* Name of a member that stands twice in one object somewhere in the tree, or NULL. */
static const char *doubled_name(const cJSON *item)
{
    size_t count = 0;
    const cJSON *child = NULL;
    cJSON_ArrayForEach(child, item)
    {
        const char *deeper = doubled_name(child);
        if (deeper != NULL) {
            return deeper;
        }
        count++;
    }
    if (!cJSON_IsObject(item) || count < 2) {
        return NULL;
    }
    const cJSON **sorted = lwc_grow(NULL, count * sizeof(*sorted));
    size_t n = 0;
    cJSON_ArrayForEach(child, item)
    {
        sorted[n++] = child;
    }
    qsort(sorted, n, sizeof(*sorted), by_name);
    const char *found = NULL;
    for (size_t i = 1; i < n && found == NULL; i++) {
        if (strcmp(sorted[i - 1]->string, sorted[i]->string) == 0) {
            found = sorted[i]->string;
        }
    }
    free(sorted);
    return found;
}

cJSON *lwc_json_parse(const char *data, size_t len, lwc_json_fault *fault)
{
    scan s = {.data = data, .len = len, .fault = fault};
    *fault = (lwc_json_fault){0};
    if (!scan_value(&s)) {
        return NULL;
    }
    skip_blanks(&s);
    if (s.at != s.len) {
        (void)fail_expected(&s, "nothing more after the value");
        return NULL;
    }
    cJSON *tree = cJSON_ParseWithLength(data, len);
    if (tree == NULL) {
        s.at = 0;
        (void)fail(&s, "not enough memory for this text");
        return NULL;
    }
    const char *doubled = doubled_name(tree);
    if (doubled != NULL) {
        s.at = 0;
        lwc_text name = {0};
        lwc_text_safe(&name, doubled, strlen(doubled));
        (void)fail(&s, "the member \"%.64s\" stands twice in one object",
                   lwc_text_string(&name));
        lwc_text_clear(&name);
        cJSON_Delete(tree);
        return NULL;
    }
    return tree;
}

const cJSON *lwc_json_get(const cJSON *object, const char *name)
{
    return cJSON_IsObject(object) ? cJSON_GetObjectItemCaseSensitive(object, name) : NULL;
}

const char *lwc_json_string(const cJSON *object, const char *name)
{
    const cJSON *item = lwc_json_get(object, name);
    return cJSON_IsString(item) ? item->valuestring : NULL;
}

bool lwc_json_number(const cJSON *object, const char *name, double *out)
{
    const cJSON *item = lwc_json_get(object, name);
    if (!cJSON_IsNumber(item)) {
        return false;
    }
    *out = item->valuedouble;
    return true;
}

bool lwc_json_is_true(const cJSON *object, const char *name)
{
    return cJSON_IsTrue(lwc_json_get(object, name)) != 0;
}

void lwc_json_drop(cJSON *object, const char *name)
{
    if (cJSON_IsObject(object)) {
        cJSON_DeleteItemFromObjectCaseSensitive(object, name);
    }
}

/* cJSON returns NULL when memory runs out; there is nothing sensible to go on with. */
static cJSON *need(cJSON *item)
{
    if (item == NULL) {
        lwc_complain("out of memory");
        exit(LWC_EXIT_ERROR);
    }
    return item;
}

cJSON *lwc_json_object(void)
{
    return need(cJSON_CreateObject());
}

void lwc_json_put(cJSON *object, const char *name, cJSON *item)
{
    if (!cJSON_AddItemToObject(object, name, need(item))) {
        (void)need(NULL);
    }
}

void lwc_json_put_string(cJSON *object, const char *name, const char *string)
{
    lwc_json_put(object, name, cJSON_CreateString(string));
}

void lwc_json_put_number(cJSON *object, const char *name, double value)
{
    lwc_json_put(object, name, cJSON_CreateNumber(value));
}

cJSON *lwc_json_copy(const cJSON *item)
{
    return need(cJSON_Duplicate(item, 1));
}

cJSON *lwc_json_room(cJSON *object, const char *name)
{
    cJSON *room = cJSON_GetObjectItemCaseSensitive(object, name);
    if (room == NULL) {
        room = lwc_json_object();
        lwc_json_put(object, name, room);
    }
    return room;
}

void lwc_json_write_string(lwc_text *out, const char *string)
{
    lwc_text_putc(out, '"');
    for (const char *p = string; *p != '\0'; p++) {
        unsigned char c = (unsigned char)*p;
        if (c == '"' || c == '\\') {
            lwc_text_putc(out, '\\');
            lwc_text_putc(out, (char)c);
        } else if (c < 0x20 || c == 0x7f) {
            lwc_text_printf(out, "\\u%04x", (unsigned)c);
        } else {
            lwc_text_putc(out, (char)c);
        }
    }
    lwc_text_putc(out, '"');
}

void lwc_json_write(lwc_text *out, const cJSON *item)
{
    if (cJSON_IsObject(item) || cJSON_IsArray(item)) {
        bool object = cJSON_IsObject(item);
        lwc_text_putc(out, object ? '{' : '[');
        const cJSON *child = NULL;
        cJSON_ArrayForEach(child, item)
        {
            if (child != item->child) {
                lwc_text_putc(out, ',');
            }
            if (object) {
                lwc_json_write_string(out, child->string);
                lwc_text_putc(out, ':');
            }
            lwc_json_write(out, child);
        }
        lwc_text_putc(out, object ? '}' : ']');
    } else if (cJSON_IsString(item)) {
        lwc_json_write_string(out, item->valuestring);
    } else if (cJSON_IsNumber(item)) {
        lwc_text_exact(out, item->valuedouble);
    } else {
        lwc_text_puts(out, cJSON_IsTrue(item) ? "true" : cJSON_IsFalse(item) ? "false" : "null");
    }
}

void lwc_pointer_add(lwc_text *pointer, const char *name)
{
    lwc_text_putc(pointer, '/');
    for (const char *p = name; *p != '\0'; p++) {
        if (*p == '~' || *p == '/') {
            lwc_text_puts(pointer, *p == '~' ? "~0" : "~1");
        } else {
            lwc_text_putc(pointer, *p);
        }
    }
}
