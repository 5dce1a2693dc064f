/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The scan keeps a small stack of open objects and arrays instead of recursing, and finds doubled
 * keys with one hash table over (object, key) for the whole text, so its time is linear whatever is
 * sent. Pointer, line and column are worked out only when there is a fault. */
#include "json_scan.h"

#include <math.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "pointer.h"
#include "utf8.h"

typedef struct level {
    bool object;
    uint32_t serial;  /* number of the object, for the key table */
    size_t index;     /* array: of the element being read */
    size_t key;       /* object: offset of the key being read (after the quote), SIZE_MAX = none */
} level;

typedef struct slot {
    uint64_t hash;    /* 0 = empty */
    uint32_t serial;
    uint32_t key;     /* offset after the opening quote */
} slot;

enum { SLOTS_AT_FIRST = 128, PROBE_MAX = 256 };

typedef struct scan {
    const unsigned char *text;
    size_t len;
    size_t at;
    const lwd_scan_limits *limits;
    lwd_scan_fault *fault;
    unsigned depth;
    size_t values;
    uint32_t serial;
    level level[LWD_SCAN_DEPTH + 1];
    slot *slot;
    size_t n_slot;
    size_t n_used;
    slot first[SLOTS_AT_FIRST];
} scan;

/* ---- naming the place ------------------------------------------------------------------------ */

static void place(scan *s, size_t offset)
{
    lwd_scan_fault *f = s->fault;
    f->offset = offset;
    f->line = 1;
    f->column = 1;
    for (size_t i = 0; i < offset && i < s->len; i++) {
        if (s->text[i] == '\n') {
            f->line++;
            f->column = 1;
        } else if ((s->text[i] & 0xc0) != 0x80) {
            f->column++;
        }
    }
}

static unsigned hex4(const unsigned char *p)
{
    unsigned value = 0;
    for (int i = 0; i < 4; i++) {
        unsigned c = p[i];
        value = value << 4 | (c <= '9' ? c - '0' : (c | 0x20) - 'a' + 10);
    }
    return value;
}

/* Reads one character of a string that has passed the scan; false at the closing quote. */
static bool next_char(const unsigned char **p, uint32_t *c)
{
    const unsigned char *q = *p;
    if (*q == '"') {
        return false;
    }
    if (*q != '\\') {
        *p += lwd_utf8_next(q, 4, c);
        return true;
    }
    static const char letter[] = "\"\\/bfnrt";
    static const char meant[] = "\"\\/\b\f\n\r\t";
    if (q[1] != 'u') {
        const char *found = strchr(letter, q[1]);
        *c = (unsigned char)meant[found - letter];
        *p += 2;
        return true;
    }
    *c = hex4(q + 2);
    *p += 6;
    if (*c >= 0xd800 && *c < 0xdc00) {
        *c = 0x10000 + ((*c - 0xd800) << 10) + (hex4(q + 8) - 0xdc00);
        *p += 6;
    }
    return true;
}

static void name_pointer(scan *s)
{
    lwd_pointer pointer;
    lwd_pointer_init(&pointer, s->fault->pointer, sizeof s->fault->pointer);
    for (unsigned i = 1; i <= s->depth; i++) {
        const level *l = &s->level[i];
        if (!l->object) {
            lwd_pointer_index(&pointer, l->index);
            continue;
        }
        if (l->key == SIZE_MAX) {
            break;
        }
        char name[LWD_POINTER_SIZE];
        size_t n = 0;
        uint32_t c = 0;
        for (const unsigned char *p = s->text + l->key; n + 5 < sizeof name && next_char(&p, &c);) {
            n += lwd_utf8_put(name + n, c);
        }
        name[n] = '\0';
        lwd_pointer_name(&pointer, name);
    }
}

/* What stands at the offset, for people. */
static void show(char *out, size_t size, const scan *s, size_t offset)
{
    if (offset >= s->len) {
        (void)snprintf(out, size, "the end of the text");
        return;
    }
    unsigned char c = s->text[offset];
    if (c <= 0x20 || c >= 0x7f) {
        (void)snprintf(out, size, "byte 0x%02x", c);
        return;
    }
    char word[24];
    size_t n = 0;
    while (n + 1 < sizeof word && offset + n < s->len) {
        c = s->text[offset + n];
        if (c <= 0x20 || c >= 0x7f || (n > 0 && strchr(",:]}[{\"", c) != NULL)) {
            break;
        }
        word[n] = (char)c;
        n++;
    }
    word[n] = '\0';
    (void)snprintf(out, size, "%s", word);
}

static bool fail(scan *s, lwd_scan_kind kind, size_t offset, const char *text, const char *expected)
{
    lwd_scan_fault *f = s->fault;
    f->kind = kind;
    place(s, offset);
    name_pointer(s);
    (void)snprintf(f->text, sizeof f->text, "%s", text);
    (void)snprintf(f->expected, sizeof f->expected, "%s", expected);
    show(f->got, sizeof f->got, s, offset);
    return false;
}

static bool fail_bound(scan *s, size_t offset, const char *what, size_t most)
{
    lwd_scan_fault *f = s->fault;
    (void)fail(s, LWD_SCAN_BOUND, offset, "", "");
    (void)snprintf(f->text, sizeof f->text, "The text has too many %s.", what);
    (void)snprintf(f->expected, sizeof f->expected, "at most %zu %s", most, what);
    (void)snprintf(f->got, sizeof f->got, "more");
    return false;
}

/* ---- strings --------------------------------------------------------------------------------- */

static bool is_hex4(const scan *s, size_t at)
{
    if (s->len - at < 4) {
        return false;
    }
    for (size_t i = 0; i < 4; i++) {
        unsigned char c = s->text[at + i];
        if (!((c >= '0' && c <= '9') || ((c | 0x20) >= 'a' && (c | 0x20) <= 'f'))) {
            return false;
        }
    }
    return true;
}

static bool escape(scan *s)
{
    size_t start = s->at;
    const unsigned char *t = s->text;
    s->at++;
    if (s->at >= s->len || strchr("\"\\/bfnrtu", t[s->at]) == NULL || t[s->at] == '\0') {
        return fail(s, LWD_SCAN_TEXT, start, "This escape in a string does not exist.",
                    "one of \\\" \\\\ \\/ \\b \\f \\n \\r \\t \\uXXXX");
    }
    if (t[s->at++] != 'u') {
        return true;
    }
    if (!is_hex4(s, s->at)) {
        return fail(s, LWD_SCAN_TEXT, start, "\\u must be followed by four hex digits.",
                    "four hex digits");
    }
    unsigned unit = hex4(t + s->at);
    s->at += 4;
    if (unit == 0) {
        return fail(s, LWD_SCAN_TEXT, start, "A string must not hold the character U+0000.",
                    "any character but U+0000");
    }
    if (unit < 0xd800 || unit > 0xdfff) {
        return true;
    }
    if (unit < 0xdc00 && s->len - s->at >= 2 && t[s->at] == '\\' && t[s->at + 1] == 'u' &&
        is_hex4(s, s->at + 2)) {
        unsigned low = hex4(t + s->at + 2);
        if (low >= 0xdc00 && low <= 0xdfff) {
            s->at += 6;
            return true;
        }
    }
    return fail(s, LWD_SCAN_TEXT, start, "Half of a surrogate pair stands alone in a string.",
                "\\uD800 to \\uDBFF followed by \\uDC00 to \\uDFFF");
}

/* s->at is after the opening quote; moves behind the closing one. */
static bool string(scan *s)
{
    size_t start = s->at - 1;
    while (s->at < s->len) {
        unsigned char c = s->text[s->at];
        if (c == '"') {
            s->at++;
            return true;
        }
        if (c == '\\') {
            if (!escape(s)) {
                return false;
            }
        } else if (c < 0x20) {
            return fail(s, LWD_SCAN_TEXT, s->at,
                        "A string holds a raw control character; write it as an escape.",
                        "\\n, \\t or \\uXXXX");
        } else if (c < 0x80) {
            s->at++;
        } else {
            uint32_t code = 0;
            size_t n = lwd_utf8_next(s->text + s->at, s->len - s->at, &code);
            if (n == 0) {
                return fail(s, LWD_SCAN_TEXT, s->at, "A string holds bytes that are not UTF-8.",
                            "text in UTF-8");
            }
            s->at += n;
        }
    }
    return fail(s, LWD_SCAN_SYNTAX, start, "A string is not closed.", "a closing quote");
}

/* ---- doubled keys ---------------------------------------------------------------------------- */

static uint64_t mix(uint64_t h)
{
    h ^= h >> 32;
    h *= UINT64_C(0xd6e8feb86659fd93);
    h ^= h >> 32;
    h *= UINT64_C(0xd6e8feb86659fd93);
    return h ^ h >> 32;
}

static uint64_t key_hash(const scan *s, uint32_t serial, size_t key)
{
    uint64_t h = mix(serial + UINT64_C(0x9e3779b97f4a7c15));
    uint32_t c = 0;
    for (const unsigned char *p = s->text + key; next_char(&p, &c);) {
        h = mix(h ^ c) + c;
    }
    h = mix(h);
    return h == 0 ? 1 : h;
}

static bool same_key(const scan *s, size_t a, size_t b)
{
    const unsigned char *p = s->text + a;
    const unsigned char *q = s->text + b;
    uint32_t c = 0;
    uint32_t d = 0;
    for (;;) {
        bool more_a = next_char(&p, &c);
        bool more_b = next_char(&q, &d);
        if (!more_a || !more_b) {
            return more_a == more_b;
        }
        if (c != d) {
            return false;
        }
    }
}

static bool grow_slots(scan *s)
{
    size_t n = s->n_slot * 4;
    slot *more = calloc(n, sizeof *more);
    if (more == NULL) {
        return false;
    }
    for (size_t i = 0; i < s->n_slot; i++) {
        if (s->slot[i].hash != 0) {
            size_t at = (size_t)s->slot[i].hash & (n - 1);
            while (more[at].hash != 0) {
                at = (at + 1) & (n - 1);
            }
            more[at] = s->slot[i];
        }
    }
    if (s->slot != s->first) {
        free(s->slot);
    }
    s->slot = more;
    s->n_slot = n;
    return true;
}

/* Notes the key of the innermost object; false (with the fault) if it stands there already. */
static bool note_key(scan *s, size_t key)
{
    if (s->n_used * 2 >= s->n_slot && !grow_slots(s)) {
        return fail(s, LWD_SCAN_MEMORY, key, "There is not enough memory to read the text.", "");
    }
    uint32_t serial = s->level[s->depth].serial;
    uint64_t hash = key_hash(s, serial, key);
    size_t at = (size_t)hash & (s->n_slot - 1);
    for (int probe = 0; s->slot[at].hash != 0; probe++) {
        if (s->slot[at].hash == hash && s->slot[at].serial == serial &&
            same_key(s, s->slot[at].key, key)) {
            s->level[s->depth].key = key;
            (void)fail(s, LWD_SCAN_DOUBLED, key - 1, "A member stands twice in the same object.",
                       "each member once");
            (void)snprintf(s->fault->got, sizeof s->fault->got, "it a second time");
            return false;
        }
        if (probe >= PROBE_MAX) { /* only keys made to collide get here */
            return fail_bound(s, key, "members alike", PROBE_MAX);
        }
        at = (at + 1) & (s->n_slot - 1);
    }
    s->slot[at] = (slot){hash, serial, (uint32_t)key};
    s->n_used++;
    return true;
}

/* ---- numbers and words ----------------------------------------------------------------------- */

static bool digit_at(const scan *s)
{
    return s->at < s->len && s->text[s->at] >= '0' && s->text[s->at] <= '9';
}

/* The number in [start, s->at) is too large for a double. */
static bool is_infinite(const scan *s, size_t start)
{
    char copy[LWD_SCAN_NUMBER_SIZE + 1];
    size_t n = s->at - start;
    memcpy(copy, s->text + start, n);
    copy[n] = '\0';
    return !isfinite(strtod(copy, NULL));
}

static bool number(scan *s)
{
    size_t start = s->at;
    bool huge = false; /* may be beyond the range of doubles */
    if (s->text[s->at] == '-') {
        s->at++;
    }
    if (!digit_at(s)) {
        return fail(s, LWD_SCAN_NUMBER, start, "A number needs a digit after its sign.",
                    "a number such as -12.5 or 1e-3");
    }
    if (s->text[s->at] == '0') {
        s->at++;
        if (digit_at(s)) {
            return fail(s, LWD_SCAN_NUMBER, start, "A number must not begin with a spare zero.",
                        "a number such as -12.5 or 1e-3");
        }
    }
    while (digit_at(s)) {
        s->at++;
    }
    if (s->at < s->len && s->text[s->at] == '.') {
        s->at++;
        if (!digit_at(s)) {
            return fail(s, LWD_SCAN_NUMBER, start, "A number needs a digit after its point.",
                        "a number such as -12.5 or 1e-3");
        }
        while (digit_at(s)) {
            s->at++;
        }
    }
    if (s->at < s->len && (s->text[s->at] | 0x20) == 'e') {
        s->at++;
        if (s->at < s->len && (s->text[s->at] == '+' || s->text[s->at] == '-')) {
            s->at++;
        }
        size_t digits = s->at;
        if (!digit_at(s)) {
            return fail(s, LWD_SCAN_NUMBER, start, "A number needs a digit in its exponent.",
                        "a number such as -12.5 or 1e-3");
        }
        while (digit_at(s)) {
            s->at++;
        }
        huge = s->at - digits >= 3;
    }
    if (s->at - start > LWD_SCAN_NUMBER_SIZE) {
        return fail(s, LWD_SCAN_NUMBER, start, "A number has too many characters.",
                    "at most 60 characters (17 digits say all a number can hold)");
    }
    /* Without an exponent of three digits, 60 characters cannot leave the range of doubles. */
    if (huge && is_infinite(s, start)) {
        return fail(s, LWD_SCAN_NUMBER, start, "A number is too large to be held.",
                    "a number between -1.79e308 and 1.79e308");
    }
    return true;
}

static bool word(scan *s, const char *text)
{
    size_t n = strlen(text);
    if (s->len - s->at >= n && memcmp(s->text + s->at, text, n) == 0) {
        s->at += n;
        return true;
    }
    return fail(s, LWD_SCAN_SYNTAX, s->at, "This is no JSON value.",
                "a number, a text in quotes, true, false, null, [ or {");
}

/* ---- structure ------------------------------------------------------------------------------- */

static void blanks(scan *s)
{
    while (s->at < s->len) {
        unsigned char c = s->text[s->at];
        if (c != ' ' && c != '\n' && c != '\r' && c != '\t') {
            return;
        }
        s->at++;
    }
}

/* Key and colon of the next member. */
static bool member(scan *s)
{
    blanks(s);
    level *l = &s->level[s->depth];
    if (s->at >= s->len || s->text[s->at] != '"') {
        l->key = SIZE_MAX;
        return fail(s, LWD_SCAN_SYNTAX, s->at, "An object goes on with a member name in quotes.",
                    "a name in quotes");
    }
    s->at++;
    size_t key = s->at;
    l->key = SIZE_MAX;
    if (!string(s) || !note_key(s, key)) {
        return false;
    }
    l->key = key;
    blanks(s);
    if (s->at >= s->len || s->text[s->at] != ':') {
        return fail(s, LWD_SCAN_SYNTAX, s->at, "A member name is followed by a colon.", "a colon");
    }
    s->at++;
    return true;
}

/* s->at is on '{' or '['. *empty: it was closed at once. */
static bool open_level(scan *s, bool *empty)
{
    bool object = s->text[s->at] == '{';
    if (s->depth >= s->limits->depth) {
        return fail_bound(s, s->at, "nested levels", s->limits->depth);
    }
    s->at++;
    s->depth++;
    s->level[s->depth] = (level){.object = object, .serial = ++s->serial, .key = SIZE_MAX};
    blanks(s);
    *empty = s->at < s->len && s->text[s->at] == (object ? '}' : ']');
    if (*empty) {
        s->at++;
        s->depth--;
        return true;
    }
    return object ? member(s) : true;
}

/* After a value: closes what is to be closed and goes to the next value. *more is false when the
 * text is whole. */
static bool go_on(scan *s, bool *more)
{
    while (s->depth > 0) {
        level *l = &s->level[s->depth];
        blanks(s);
        unsigned char c = s->at < s->len ? s->text[s->at] : 0;
        if (c == ',') {
            s->at++;
            *more = true;
            if (l->object) {
                return member(s);
            }
            l->index++;
            return true;
        }
        if (c != (l->object ? '}' : ']')) {
            return fail(s, LWD_SCAN_SYNTAX, s->at,
                        l->object ? "An object goes on with a comma or ends."
                                  : "An array goes on with a comma or ends.",
                        l->object ? "a comma or }" : "a comma or ]");
        }
        s->at++;
        s->depth--;
    }
    *more = false;
    return true;
}

static bool value(scan *s, bool *opened)
{
    *opened = false;
    blanks(s);
    if (++s->values > s->limits->values) {
        return fail_bound(s, s->at, "values", s->limits->values);
    }
    if (s->at >= s->len) {
        return fail(s, LWD_SCAN_SYNTAX, s->at, "The text ends where a value is missing.",
                    "a value");
    }
    switch (s->text[s->at]) {
    case '{':
    case '[': {
        bool empty = false;
        if (!open_level(s, &empty)) {
            return false;
        }
        *opened = !empty;
        return true;
    }
    case '"':
        s->at++;
        return string(s);
    case 't':
        return word(s, "true");
    case 'f':
        return word(s, "false");
    case 'n':
        return word(s, "null");
    case '-': case '0': case '1': case '2': case '3': case '4': case '5': case '6': case '7':
    case '8': case '9':
        return number(s);
    default:
        return word(s, "\"");
    }
}

static bool whole(scan *s)
{
    for (bool more = true; more;) {
        bool opened = false;
        if (!value(s, &opened)) {
            return false;
        }
        if (!opened && !go_on(s, &more)) {
            return false;
        }
    }
    blanks(s);
    if (s->at < s->len) {
        return fail(s, LWD_SCAN_SYNTAX, s->at, "Something follows after the end of the JSON value.",
                    "the end of the text");
    }
    return true;
}

bool lwd_json_scan(const char *text, size_t len, const lwd_scan_limits *limits,
                   lwd_scan_fault *fault)
{
    scan s;
    s.text = (const unsigned char *)text;
    s.len = len;
    s.at = 0;
    s.limits = limits;
    s.fault = fault;
    s.depth = 0;
    s.values = 0;
    s.serial = 0;
    s.slot = s.first;
    s.n_slot = SLOTS_AT_FIRST;
    s.n_used = 0;
    memset(s.first, 0, sizeof s.first);
    *fault = (lwd_scan_fault){.kind = LWD_SCAN_OK};
    if (len > limits->size || len >= UINT32_MAX) {
        (void)fail_bound(&s, 0, "bytes", limits->size);
        (void)snprintf(fault->got, sizeof fault->got, "%zu bytes", len);
        return false;
    }
    if (len >= 3 && memcmp(text, "\xef\xbb\xbf", 3) == 0) {
        return fail(&s, LWD_SCAN_SYNTAX, 0, "The text begins with a byte order mark; leave it out.",
                    "JSON text in UTF-8 without a byte order mark");
    }
    bool good = whole(&s);
    if (s.slot != s.first) {
        free(s.slot);
    }
    return good;
}
