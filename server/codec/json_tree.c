/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The tree of a text that has passed json_scan.c, made in one allocation: the nodes first, behind
 * them the characters of keys and strings, which never take more room than they took in the text.
 * A question's body is read in a quarter of the time that a node by node parser takes. Nothing is
 * checked here; what the scan lets through is all there can be. Callable from any thread. */
#include "json_tree.h"

#include <limits.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "utf8.h"

typedef struct level {
    cJSON *holder; /* the object or array that is open */
    cJSON *last;   /* its last child so far */
    char *key;     /* the key that waits for its value, NULL = none */
} level;

typedef struct builder {
    const unsigned char *at;
    cJSON *node;  /* the next free one */
    char *chars;  /* where the next string goes */
    unsigned depth;
    level level[LWD_SCAN_DEPTH + 1]; /* [0] holds the root */
} builder;

static cJSON *add(builder *b, int type)
{
    level *l = &b->level[b->depth];
    cJSON *node = b->node++;
    *node = (cJSON){.type = type, .string = l->key};
    l->key = NULL;
    if (l->last == NULL) {
        l->holder->child = node;
    } else {
        l->last->next = node;
        node->prev = l->last;
    }
    l->last = node;
    return node;
}

static void open_level(builder *b, int type)
{
    cJSON *node = add(b, type);
    b->depth++;
    b->level[b->depth] = (level){.holder = node};
}

static void close_level(builder *b)
{
    const level *l = &b->level[b->depth];
    if (l->last != NULL) { /* the first child's `prev` is the last, as that library has it */
        l->holder->child->prev = l->last;
    }
    b->depth--;
}

static uint32_t hex4(const unsigned char *p)
{
    uint32_t value = 0;
    for (int i = 0; i < 4; i++) {
        uint32_t c = p[i];
        value = value << 4 | (c <= '9' ? c - '0' : (c | 0x20) - 'a' + 10);
    }
    return value;
}

/* b->at is on a backslash. */
static void put_escaped(builder *b)
{
    static const char letter[] = "\"\\/bfnrt";
    static const char meant[] = "\"\\/\b\f\n\r\t";
    const unsigned char *p = b->at;
    if (p[1] != 'u') {
        *b->chars++ = meant[strchr(letter, p[1]) - letter];
        b->at += 2;
        return;
    }
    uint32_t c = hex4(p + 2);
    b->at += 6;
    if (c >= 0xd800 && c < 0xdc00) {
        c = 0x10000 + ((c - 0xd800) << 10) + (hex4(p + 8) - 0xdc00);
        b->at += 6;
    }
    b->chars += lwd_utf8_put(b->chars, c);
}

/* b->at is on the opening quote and goes behind the closing one. */
static char *string(builder *b)
{
    char *text = b->chars;
    b->at++;
    while (*b->at != '"') {
        if (*b->at == '\\') {
            put_escaped(b);
        } else {
            *b->chars++ = (char)*b->at++;
        }
    }
    b->at++;
    *b->chars++ = '\0';
    return text;
}

static double number_by_library(const unsigned char *from, size_t n)
{
    char copy[LWD_SCAN_NUMBER_SIZE + 1];
    memcpy(copy, from, n);
    copy[n] = '\0';
    return strtod(copy, NULL);
}

/* Up to 15 digits and powers of ten up to 22 are doubles exactly, so one division or product rounds
 * once, as strtod would (W. D. Clinger, "How to read floating point numbers accurately", 1990).
 * Anything longer is left to strtod. */
static double number(builder *b)
{
    static const double ten_to[23] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,
                                      1e8,  1e9,  1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
                                      1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
    enum { DIGITS = 15 };
    const unsigned char *from = b->at;
    const unsigned char *p = from;
    uint64_t digits = 0;
    int n = 0;
    int decimals = 0;
    bool negative = *p == '-';
    bool pointed = false;
    for (p += negative ? 1 : 0; (*p >= '0' && *p <= '9') || *p == '.'; p++) {
        if (*p == '.') {
            pointed = true;
            continue;
        }
        n += n > 0 || *p != '0' ? 1 : 0;
        digits = n <= DIGITS ? digits * 10 + (uint64_t)(*p - '0') : digits;
        decimals += pointed ? 1 : 0;
    }
    bool simple = n <= DIGITS && decimals <= 22 && (*p | 0x20) != 'e';
    while ((*p >= '0' && *p <= '9') || *p == '+' || *p == '-' || (*p | 0x20) == 'e') {
        p++;
    }
    b->at = p;
    if (!simple) {
        return number_by_library(from, (size_t)(p - from));
    }
    double value = (double)digits / ten_to[decimals];
    return negative ? -value : value;
}

static void add_number(builder *b)
{
    double value = number(b);
    cJSON *node = add(b, cJSON_Number);
    node->valuedouble = value;
    node->valueint = value >= INT_MAX ? INT_MAX : value <= INT_MIN ? INT_MIN : (int)value;
}

static void add_word(builder *b, int type, size_t len)
{
    add(b, type)->valueint = type == cJSON_True ? 1 : 0;
    b->at += len;
}

/* One step: a blank, a mark, a key or a value. */
static void go_on(builder *b)
{
    level *l = &b->level[b->depth];
    switch (*b->at) {
    case ' ': case '\t': case '\n': case '\r': case ',': case ':':
        b->at++;
        break;
    case '{':
        b->at++;
        open_level(b, cJSON_Object);
        break;
    case '[':
        b->at++;
        open_level(b, cJSON_Array);
        break;
    case '}': case ']':
        b->at++;
        close_level(b);
        break;
    case '"':
        if (l->holder->type == cJSON_Object && l->key == NULL) {
            l->key = string(b);
        } else {
            char *text = string(b);
            add(b, cJSON_String)->valuestring = text;
        }
        break;
    case 't':
        add_word(b, cJSON_True, 4);
        break;
    case 'f':
        add_word(b, cJSON_False, 5);
        break;
    case 'n':
        add_word(b, cJSON_NULL, 4);
        break;
    default:
        add_number(b);
        break;
    }
}

struct cJSON *lwd_json_tree_new(const char *text, size_t len, size_t values)
{
    cJSON *node = malloc(values * sizeof *node + len + 1);
    cJSON root = {.type = cJSON_Array};
    builder b;
    if (node == NULL) {
        return NULL;
    }
    b.at = (const unsigned char *)text;
    b.node = node;
    b.chars = (char *)(node + values);
    b.depth = 0;
    b.level[0] = (level){.holder = &root};
    while (root.child == NULL || b.depth > 0) {
        go_on(&b);
    }
    return root.child; /* the first node, so the block itself */
}

void lwd_json_tree_free(struct cJSON *tree)
{
    free(tree);
}
