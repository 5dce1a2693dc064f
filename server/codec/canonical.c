/* SPDX-License-Identifier: GPL-3.0-or-later */
/* RFC 8785. Recursion is as deep as the tree, which the scan bounds to 32 levels. */
#include "canonical.h"

#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "number.h"

/* Weight of a UTF-8 byte so that comparing weights compares UTF-16 code units: byte order is code
 * point order, and that differs only in that U+10000 and above (lead bytes f0..f4) are written with
 * surrogates d800..dfff and so come before U+E000..U+FFFF (lead bytes ee and ef). */
static int weight(unsigned char c)
{
    return c == 0xee || c == 0xef ? c + 0x10 : c;
}

static int compare(const void *a, const void *b)
{
    const unsigned char *p = (const unsigned char *)(*(const cJSON *const *)a)->string;
    const unsigned char *q = (const unsigned char *)(*(const cJSON *const *)b)->string;
    while (*p != '\0' && *p == *q) {
        p++;
        q++;
    }
    return weight(*p) - weight(*q);
}

static void put_string(lwd_buf *out, const char *text)
{
    static const char digit[] = "0123456789abcdef";
    static const char special[] = "\"\\\b\f\n\r\t";
    static const char letter[] = "\"\\bfnrt";
    (void)lwd_buf_put(out, "\"", 1);
    while (*text != '\0') {
        const char *run = text;
        while ((unsigned char)*text >= 0x20 && *text != '"' && *text != '\\') {
            text++;
        }
        (void)lwd_buf_put(out, run, (size_t)(text - run));
        if (*text == '\0') {
            break;
        }
        const char *at = strchr(special, *text);
        if (at != NULL) {
            char escape[2] = {'\\', letter[at - special]};
            (void)lwd_buf_put(out, escape, 2);
        } else {
            char escape[6] = {'\\', 'u', '0', '0', digit[(unsigned char)*text >> 4],
                              digit[(unsigned char)*text & 15]};
            (void)lwd_buf_put(out, escape, 6);
        }
        text++;
    }
    (void)lwd_buf_put(out, "\"", 1);
}

static void put_value(lwd_buf *out, const cJSON *node);

static void put_object(lwd_buf *out, const cJSON *node)
{
    size_t n = 0;
    for (const cJSON *c = node->child; c != NULL; c = c->next) {
        n++;
    }
    const cJSON *few[32];
    const cJSON **member = n <= 32 ? few : malloc(n * sizeof *member);
    if (member == NULL) {
        out->failed = true;
        return;
    }
    n = 0;
    for (const cJSON *c = node->child; c != NULL; c = c->next) {
        member[n++] = c;
    }
    qsort(member, n, sizeof *member, compare);
    (void)lwd_buf_put(out, "{", 1);
    for (size_t i = 0; i < n; i++) {
        if (i > 0) {
            (void)lwd_buf_put(out, ",", 1);
        }
        put_string(out, member[i]->string);
        (void)lwd_buf_put(out, ":", 1);
        put_value(out, member[i]);
    }
    (void)lwd_buf_put(out, "}", 1);
    if (member != few) {
        free(member);
    }
}

static void put_value(lwd_buf *out, const cJSON *node)
{
    if (cJSON_IsObject(node)) {
        put_object(out, node);
    } else if (cJSON_IsArray(node)) {
        (void)lwd_buf_put(out, "[", 1);
        for (const cJSON *c = node->child; c != NULL; c = c->next) {
            put_value(out, c);
            if (c->next != NULL) {
                (void)lwd_buf_put(out, ",", 1);
            }
        }
        (void)lwd_buf_put(out, "]", 1);
    } else if (cJSON_IsNumber(node)) {
        char text[LWD_NUMBER_SIZE];
        size_t n = lwd_number_put_es(text, node->valuedouble);
        out->failed = out->failed || n == 0;
        (void)lwd_buf_put(out, text, n);
    } else if (cJSON_IsString(node)) {
        put_string(out, node->valuestring);
    } else {
        (void)lwd_buf_puts(out, cJSON_IsTrue(node) ? "true" : cJSON_IsFalse(node) ? "false"
                                                                                 : "null");
    }
}

bool lwd_canonical(const struct cJSON *tree, lwd_buf *out)
{
    put_value(out, tree);
    return !out->failed;
}

bool lwd_canonical_digest(const struct cJSON *tree, char digest[LWD_SHA256_HEX_SIZE])
{
    lwd_buf text;
    lwd_buf_init(&text, 0);
    bool good = lwd_canonical(tree, &text);
    if (good) {
        lwd_sha256_text(digest, text.data, text.len);
    } else {
        digest[0] = '\0';
    }
    lwd_buf_clear(&text);
    return good;
}
