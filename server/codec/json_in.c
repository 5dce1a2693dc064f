/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cursor, key tables and the telling of faults; the typed getters are in json_values.c. The only
 * files that include cJSON are this one, json_values.c and canonical.c. */
#include "json_in.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "number.h"
#include "pointer.h"

/* ---- text to tree ---------------------------------------------------------------------------- */

static const char *scan_code(lwd_scan_kind kind)
{
    switch (kind) {
    case LWD_SCAN_NUMBER:
        return "malformed-number";
    case LWD_SCAN_TEXT:
        return "malformed-text";
    case LWD_SCAN_DOUBLED:
        return "doubled-member";
    case LWD_SCAN_BOUND:
        return "too-large";
    case LWD_SCAN_MEMORY:
        return "no-memory";
    default:
        return "malformed-json";
    }
}

struct cJSON *lwd_json_parse(const char *text, size_t len, const lwd_scan_limits *limits,
                             lwd_findings *findings)
{
    lwd_scan_fault fault;
    if (!lwd_json_scan(text, len, limits, &fault)) {
        findings->no_memory = fault.kind == LWD_SCAN_MEMORY;
        lwd_finding *f =
            lwd_findings_add(findings, LW_ERROR, scan_code(fault.kind), fault.pointer);
        if (f != NULL) {
            (void)snprintf(f->text, sizeof f->text, "%s (line %zu, column %zu, byte %zu)",
                           fault.text, fault.line, fault.column, fault.offset);
            lwd_text_copy(f->expected, sizeof f->expected, fault.expected);
            lwd_text_copy(f->got, sizeof f->got, fault.got);
        }
        return NULL;
    }
    cJSON *tree = cJSON_ParseWithLength(text, len);
    if (tree == NULL) { /* the scan is stricter than the parser: only memory can be short */
        findings->no_memory = true;
        lwd_finding *f = lwd_findings_add(findings, LW_ERROR, "no-memory", "");
        if (f != NULL) {
            lwd_text_copy(f->text, sizeof f->text, "There is not enough memory to read the text.");
        }
    }
    return tree;
}

void lwd_json_free(struct cJSON *tree)
{
    cJSON_Delete(tree);
}

lwd_reader lwd_reader_of(const struct cJSON *tree, lwd_findings *findings)
{
    return (lwd_reader){.node = tree, .findings = findings};
}

/* ---- telling --------------------------------------------------------------------------------- */

static void walk_pointer(const lwd_reader *r, lwd_pointer *pointer)
{
    if (r->parent == NULL) {
        return;
    }
    walk_pointer(r->parent, pointer); /* as deep as the text, so at most 32 */
    if (r->name != NULL) {
        lwd_pointer_name(pointer, r->name);
    } else {
        lwd_pointer_index(pointer, r->index);
    }
}

void lwd_reader_pointer(const lwd_reader *r, char out[LWD_POINTER_SIZE])
{
    lwd_pointer pointer;
    lwd_pointer_init(&pointer, out, LWD_POINTER_SIZE);
    walk_pointer(r, &pointer);
}

lwd_num lwd_num_of(double x)
{
    lwd_num num;
    num.text[lwd_number_put(num.text, x)] = '\0';
    return num;
}

lwd_num lwd_num_short(double x)
{
    lwd_num num;
    num.text[lwd_number_put_plain(num.text, x)] = '\0';
    if (num.text[0] == '\0') {
        num = lwd_num_of(x);
    }
    return num;
}

void lwd_describe(const lwd_reader *r, char *out, size_t size)
{
    const cJSON *node = r->node;
    char word[40];
    if (node == NULL) {
        (void)snprintf(out, size, "nothing");
    } else if (cJSON_IsNumber(node)) {
        (void)snprintf(out, size, "the number %s", lwd_num_of(node->valuedouble).text);
    } else if (cJSON_IsString(node)) {
        lwd_text_copy(word, sizeof word, node->valuestring);
        (void)snprintf(out, size, "the text \"%s\"%s", word,
                       strlen(word) < strlen(node->valuestring) ? " ..." : "");
    } else if (cJSON_IsArray(node)) {
        (void)snprintf(out, size, "an array of %zu", lwd_count(r));
    } else if (cJSON_IsObject(node)) {
        (void)snprintf(out, size, "an object");
    } else if (cJSON_IsNull(node)) {
        (void)snprintf(out, size, "null");
    } else {
        (void)snprintf(out, size, "%s", cJSON_IsTrue(node) ? "true" : "false");
    }
}

void lwd_tell(const lwd_reader *r, lw_severity severity, const char *code, const char *expected,
              const char *got, const char *format, ...)
{
    char pointer[LWD_POINTER_SIZE];
    lwd_reader_pointer(r, pointer);
    lwd_finding *f = lwd_findings_add(r->findings, severity, code, pointer);
    if (f == NULL) {
        return;
    }
    char text[480];
    va_list args;
    va_start(args, format);
    (void)vsnprintf(text, sizeof text, format, args);
    va_end(args);
    lwd_text_copy(f->text, sizeof f->text, text);
    if (expected != NULL) {
        lwd_text_copy(f->expected, sizeof f->expected, expected);
    }
    if (got != NULL) {
        lwd_text_copy(f->got, sizeof f->got, got);
    } else {
        lwd_describe(r, text, sizeof text);
        lwd_text_copy(f->got, sizeof f->got, text);
    }
}

/* ---- the nearest name ------------------------------------------------------------------------ */

static char lower(char c)
{
    return c >= 'A' && c <= 'Z' ? (char)(c - 'A' + 'a') : c;
}

/* Edits (insert, drop, change, swap of neighbours) from a to b, case ignored; a large number where
 * either is longer than 32. */
static unsigned edits(const char *a, const char *b)
{
    enum { MOST = 32 };
    size_t n = strlen(a);
    size_t m = strlen(b);
    unsigned row[3][MOST + 1]; /* two rows back, one back, this one */
    if (n > MOST || m > MOST) {
        return 1000;
    }
    for (size_t j = 0; j <= m; j++) {
        row[1][j] = (unsigned)j;
    }
    for (size_t i = 1; i <= n; i++) {
        row[2][0] = (unsigned)i;
        for (size_t j = 1; j <= m; j++) {
            bool same = lower(a[i - 1]) == lower(b[j - 1]);
            unsigned best = row[1][j - 1] + (same ? 0u : 1u);
            best = row[1][j] + 1 < best ? row[1][j] + 1 : best;
            best = row[2][j - 1] + 1 < best ? row[2][j - 1] + 1 : best;
            if (i > 1 && j > 1 && lower(a[i - 1]) == lower(b[j - 2]) &&
                lower(a[i - 2]) == lower(b[j - 1]) && row[0][j - 2] + 1 < best) {
                best = row[0][j - 2] + 1;
            }
            row[2][j] = best;
        }
        memcpy(row[0], row[1], sizeof row[0]);
        memcpy(row[1], row[2], sizeof row[1]);
    }
    return row[1][m];
}

const char *lwd_nearest(const char *name, const char *const *word, size_t n)
{
    const char *best = NULL;
    unsigned fewest = 1000;
    for (size_t i = 0; i < n; i++) {
        unsigned e = edits(name, word[i]);
        if (e < fewest) {
            fewest = e;
            best = word[i];
        }
    }
    /* One edit for every three characters is a slip of the pen, more is another word. */
    return best != NULL && fewest <= (strlen(name) + 2) / 3 ? best : NULL;
}

/* ---- objects and arrays ---------------------------------------------------------------------- */

bool lwd_is_given(const lwd_reader *r)
{
    return r->node != NULL;
}

bool lwd_is_null(const lwd_reader *r)
{
    return r->node != NULL && cJSON_IsNull(r->node);
}

bool lwd_is_text(const lwd_reader *r)
{
    return r->node != NULL && cJSON_IsString(r->node);
}

bool lwd_is_object(const lwd_reader *r)
{
    return r->node != NULL && cJSON_IsObject(r->node);
}

size_t lwd_count(const lwd_reader *r)
{
    size_t n = 0;
    if (r->node != NULL && (cJSON_IsArray(r->node) || cJSON_IsObject(r->node))) {
        for (const cJSON *c = r->node->child; c != NULL; c = c->next) {
            n++;
        }
    }
    return n;
}

bool lwd_want_object(const lwd_reader *r)
{
    if (r->node == NULL) {
        return false;
    }
    if (!cJSON_IsObject(r->node)) {
        LWD_TELL(r, "wrong-type", "an object", NULL, "An object in braces belongs here.");
        return false;
    }
    return true;
}

bool lwd_want_array(const lwd_reader *r, size_t least, size_t most, const char *of_what)
{
    char expected[80];
    if (r->node == NULL) {
        return false;
    }
    if (least == most) {
        (void)snprintf(expected, sizeof expected, "an array of %zu %s", most, of_what);
    } else {
        (void)snprintf(expected, sizeof expected, "an array of %zu to %zu %s", least, most,
                       of_what);
    }
    if (!cJSON_IsArray(r->node)) {
        LWD_TELL(r, "wrong-type", expected, NULL, "An array in brackets belongs here.");
        return false;
    }
    size_t n = lwd_count(r);
    if (n < least || n > most) {
        LWD_TELL(r, n > most ? "too-many" : "too-few", expected, NULL,
                 "Here stand %zu, but %s %zu %s belong here.", n,
                 least == most ? "just" : n > most ? "at most" : "at least",
                 n > most ? most : least, of_what);
        return false;
    }
    return true;
}

static lwd_reader child_of(const lwd_reader *r, const cJSON *node, const char *name, size_t index)
{
    return (lwd_reader){node, r, name, index, r->findings};
}

bool lwd_find(const lwd_reader *r, const char *name, lwd_reader *child)
{
    *child = child_of(r, NULL, name, 0);
    if (lwd_is_object(r)) {
        child->node = cJSON_GetObjectItemCaseSensitive(r->node, name);
    }
    return child->node != NULL;
}

bool lwd_first(const lwd_reader *r, lwd_reader *child)
{
    if (r->node == NULL || !(cJSON_IsArray(r->node) || cJSON_IsObject(r->node)) ||
        r->node->child == NULL) {
        return false;
    }
    *child = child_of(r, r->node->child, r->node->child->string, 0);
    return true;
}

bool lwd_next(lwd_reader *child)
{
    const cJSON *node = child->node->next;
    if (node == NULL) {
        return false;
    }
    *child = child_of(child->parent, node, node->string, child->index + 1);
    return true;
}

static void tell_unknown(const lwd_reader *member, const lwd_member *table, size_t n)
{
    enum { MOST = 40 };
    const char *word[MOST];
    char expected[80] = "one of";
    size_t used = strlen(expected);
    n = n < MOST ? n : MOST;
    for (size_t i = 0; i < n; i++) {
        word[i] = table[i].name;
        int more = snprintf(expected + used, sizeof expected - used, " %s", word[i]);
        used += more > 0 ? (size_t)more : 0;
        used = used < sizeof expected ? used : sizeof expected - 1;
    }
    const char *near = lwd_nearest(member->name, word, n);
    char name[48];
    lwd_text_copy(name, sizeof name, member->name);
    if (near != NULL) {
        LWD_TELL(member, "unknown-member", expected, name,
                 "\"%s\" is not known here. Is \"%s\" meant?", name, near);
    } else {
        LWD_TELL(member, "unknown-member", expected, name,
                 "\"%s\" is not known here. Leave it out or see which members there are.", name);
    }
}

bool lwd_read_members(const lwd_reader *r, const lwd_member *table, size_t n, lwd_reader *out)
{
    for (size_t i = 0; i < n; i++) {
        out[i] = child_of(r, NULL, table[i].name, 0);
    }
    if (!lwd_want_object(r)) {
        return false;
    }
    for (const cJSON *c = r->node->child; c != NULL; c = c->next) {
        size_t i = 0;
        while (i < n && strcmp(c->string, table[i].name) != 0) {
            i++;
        }
        if (i < n) {
            out[i].node = c;
        } else {
            lwd_reader unknown = child_of(r, c, c->string, 0);
            tell_unknown(&unknown, table, n);
        }
    }
    for (size_t i = 0; i < n; i++) {
        if (table[i].required && out[i].node == NULL) {
            LWD_TELL(&out[i], "missing-member", table[i].name, "nothing",
                     "The member \"%s\" is missing here.", table[i].name);
        }
    }
    return true;
}
