/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Accept and Content-Type, see negotiate.h. */
#include "negotiate.h"

#include <stddef.h>
#include <string.h>
#include <strings.h>

static const char *skip_blank(const char *at, const char *end)
{
    while (at < end && (*at == ' ' || *at == '\t')) {
        at++;
    }
    return at;
}

static size_t trim(const char *at, const char *end)
{
    while (end > at && (end[-1] == ' ' || end[-1] == '\t')) {
        end--;
    }
    return (size_t)(end - at);
}

/* The end of one piece of a list; a separator inside a quoted string does not count. */
static const char *piece_end(const char *at, const char *end, char separator)
{
    bool quoted = false;

    for (; at < end; at++) {
        if (*at == '"') {
            quoted = !quoted;
        } else if (quoted && *at == '\\' && at + 1 < end) {
            at++;
        } else if (!quoted && *at == separator) {
            break;
        }
    }
    return at;
}

/* "1", "0.5", "0.25", "1.000" in thousandths; anything else counts as 1000, so that a client with
 * an odd header is answered rather than refused. */
static int quality(const char *at, size_t len)
{
    int value;
    int unit = 100;

    if (len == 0 || len > 5 || (at[0] != '0' && at[0] != '1') || (len > 1 && at[1] != '.')) {
        return 1000;
    }
    value = (at[0] - '0') * 1000;
    for (size_t i = 2; i < len; i++) {
        if (at[i] < '0' || at[i] > '9') {
            return 1000;
        }
        value += (at[i] - '0') * unit;
        unit /= 10;
    }
    return value > 1000 ? 1000 : value;
}

/* 3: the type itself, 2: its main type with a star, 1: all types, 0: no match. */
static int range_match(const char *range, size_t len, const char *type)
{
    size_t main_len = strcspn(type, "/");

    if (len == strlen(type) && strncasecmp(range, type, len) == 0) {
        return 3;
    }
    if (len == main_len + 2 && range[main_len + 1] == '*' &&
        strncasecmp(range, type, main_len + 1) == 0) {
        return 2;
    }
    return len == 3 && memcmp(range, "*/*", 3) == 0 ? 1 : 0;
}

int lwd_accept_quality(const char *accept, const char *type)
{
    const char *end;
    const char *at;
    int best_match = 0;
    int best = 0;
    bool any = false;

    if (accept == NULL) {
        return 1000;
    }
    end = accept + strlen(accept);
    for (at = accept; at < end; at++) {
        const char *stop = piece_end(at, end, ',');
        const char *head = skip_blank(at, stop);
        const char *part = piece_end(head, stop, ';');
        size_t len = trim(head, part);
        int match = range_match(head, len, type);
        int q = 1000;
        any = any || len != 0;
        while (part < stop) {
            const char *next;
            part = skip_blank(part + 1, stop);
            next = piece_end(part, stop, ';');
            if (next - part >= 2 && (part[0] == 'q' || part[0] == 'Q') && part[1] == '=') {
                q = quality(part + 2, trim(part + 2, next));
            }
            part = next;
        }
        if (match > best_match || (match != 0 && match == best_match && q > best)) {
            best_match = match;
            best = q;
        }
        at = stop;
    }
    return any ? best : 1000;
}

bool lwd_content_type_is(const char *content_type, const char *type)
{
    const char *end = content_type + strlen(content_type);
    const char *head = skip_blank(content_type, end);
    const char *part = piece_end(head, end, ';');
    size_t len = trim(head, part);

    if (len != strlen(type) || strncasecmp(head, type, len) != 0) {
        return false;
    }
    while (part < end) {
        const char *next;
        part = skip_blank(part + 1, end);
        next = piece_end(part, end, ';');
        if (next - part > 8 && strncasecmp(part, "charset=", 8) == 0) {
            const char *value = part + 8;
            size_t value_len = trim(value, next);
            if (!(value_len == 5 && strncasecmp(value, "utf-8", 5) == 0) &&
                !(value_len == 7 && strncasecmp(value, "\"utf-8\"", 7) == 0)) {
                return false;
            }
        }
        part = next;
    }
    return true;
}
