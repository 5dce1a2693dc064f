/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Text, numbers and files for the command line; see text.h. */
#include "text.h"

#include <ctype.h>
#include <errno.h>
#include <math.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

void *lwc_grow(void *memory, size_t bytes)
{
    void *grown = realloc(memory, bytes > 0 ? bytes : 1);
    if (grown == NULL) {
        fputs("leeway: out of memory; ask for less at once, or close other programs\n", stderr);
        exit(LWC_EXIT_ERROR);
    }
    return grown;
}

char *lwc_copy(const char *string)
{
    size_t len = strlen(string) + 1;
    char *copy = lwc_grow(NULL, len);
    memcpy(copy, string, len);
    return copy;
}

void lwc_text_clear(lwc_text *text)
{
    free(text->data);
    *text = (lwc_text){0};
}

void lwc_text_reset(lwc_text *text)
{
    text->len = 0;
    if (text->data != NULL) {
        text->data[0] = '\0';
    }
}

/* Room for `more` bytes and the closing NUL. */
static void reserve(lwc_text *text, size_t more)
{
    if (more > SIZE_MAX / 4 - text->len) {
        more = SIZE_MAX / 4; /* lets lwc_grow fail with its sentence */
    }
    size_t need = text->len + more + 1;
    if (need > text->cap) {
        size_t cap = text->cap < 64 ? 64 : text->cap;
        while (cap < need) {
            cap *= 2;
        }
        text->data = lwc_grow(text->data, cap);
        text->cap = cap;
    }
}

void lwc_text_add(lwc_text *text, const char *bytes, size_t len)
{
    reserve(text, len);
    if (len > 0) {
        memcpy(text->data + text->len, bytes, len);
    }
    text->len += len;
    text->data[text->len] = '\0';
}

void lwc_text_puts(lwc_text *text, const char *string)
{
    lwc_text_add(text, string, strlen(string));
}

void lwc_text_putc(lwc_text *text, char c)
{
    lwc_text_add(text, &c, 1);
}

void lwc_text_fill(lwc_text *text, char c, size_t count)
{
    reserve(text, count);
    memset(text->data + text->len, c, count);
    text->len += count;
    text->data[text->len] = '\0';
}

void lwc_text_printf(lwc_text *text, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    va_list again;
    va_copy(again, args);
    int need = vsnprintf(NULL, 0, format, args);
    va_end(args);
    if (need > 0) {
        reserve(text, (size_t)need);
        (void)vsnprintf(text->data + text->len, (size_t)need + 1, format, again);
        text->len += (size_t)need;
    }
    va_end(again);
}

const char *lwc_text_string(const lwc_text *text)
{
    return text->data != NULL ? text->data : "";
}

void lwc_text_exact(lwc_text *text, double value)
{
    char digits[40];
    for (int precision = 15; precision <= 17; precision++) {
        (void)snprintf(digits, sizeof digits, "%.*g", precision, value);
        double back = strtod(digits, NULL);
        if (memcmp(&back, &value, sizeof back) == 0) {
            break;
        }
    }
    lwc_text_puts(text, digits);
}

void lwc_text_number(lwc_text *text, double value, int digits)
{
    char out[64];
    (void)snprintf(out, sizeof out, "%.*g", digits, value);
    lwc_text_puts(text, strcmp(out, "-0") == 0 ? "0" : out);
}

size_t lwc_utf8_length(const char *bytes, size_t left)
{
    const unsigned char *p = (const unsigned char *)bytes;
    size_t need = left == 0 ? 0 : p[0] < 0x80 ? 1 : p[0] >= 0xf0 ? 4 : p[0] >= 0xe0 ? 3 : 2;
    if (need < 2) {
        return need;
    }
    bool ok = p[0] >= 0xc2 && p[0] <= 0xf4 && left >= need;
    for (size_t i = 1; ok && i < need; i++) {
        ok = (p[i] & 0xc0) == 0x80;
    }
    /* No longer form than needed, no surrogates, nothing beyond U+10FFFF. */
    ok = ok && !(p[0] == 0xe0 && p[1] < 0xa0) && !(p[0] == 0xed && p[1] > 0x9f) &&
         !(p[0] == 0xf0 && p[1] < 0x90) && !(p[0] == 0xf4 && p[1] > 0x8f);
    return ok ? need : 0;
}

void lwc_text_safe(lwc_text *text, const char *bytes, size_t len)
{
    for (size_t i = 0; i < len;) {
        unsigned char c = (unsigned char)bytes[i];
        size_t step = lwc_utf8_length(bytes + i, len - i);
        bool two_byte_control = c == 0xc2 && step == 2 && (unsigned char)bytes[i + 1] < 0xa0;
        if (c == '\n' || c == '\r' || c == '\t') {
            lwc_text_putc(text, ' ');
        } else if (c < 0x20 || c == 0x7f || step == 0 || two_byte_control) {
            lwc_text_putc(text, '?');
        } else {
            lwc_text_add(text, bytes + i, step);
        }
        i += step > 0 ? step : 1;
    }
}

size_t lwc_columns(const char *string)
{
    size_t columns = 0;
    for (const char *p = string; *p != '\0'; p++) {
        columns += ((unsigned char)*p & 0xc0) != 0x80;
    }
    return columns;
}

/* Length of the number at `p` in the JSON grammar, 0 if there is none. */
static size_t number_length(const char *p)
{
    const char *start = p;
    p += *p == '-' || *p == '+';
    if (!isdigit((unsigned char)*p)) {
        return 0;
    }
    while (isdigit((unsigned char)*p)) {
        p++;
    }
    if (*p == '.') {
        p++;
        if (!isdigit((unsigned char)*p)) {
            return 0;
        }
        while (isdigit((unsigned char)*p)) {
            p++;
        }
    }
    if (*p == 'e' || *p == 'E') {
        p++;
        p += *p == '-' || *p == '+';
        if (!isdigit((unsigned char)*p)) {
            return 0;
        }
        while (isdigit((unsigned char)*p)) {
            p++;
        }
    }
    return (size_t)(p - start);
}

bool lwc_read_number(const char *string, double *out)
{
    size_t len = number_length(string);
    if (len == 0 || string[len] != '\0') {
        return false;
    }
    double value = strtod(string, NULL);
    if (!isfinite(value)) {
        return false;
    }
    *out = value;
    return true;
}

bool lwc_read_count(const char *string, long largest, long *out)
{
    if (!isdigit((unsigned char)string[0])) {
        return false;
    }
    char *end = NULL;
    errno = 0;
    long value = strtol(string, &end, 10);
    if (errno != 0 || *end != '\0' || value < 1 || value > largest) {
        return false;
    }
    *out = value;
    return true;
}

bool lwc_starts(const char *string, const char *prefix)
{
    return strncmp(string, prefix, strlen(prefix)) == 0;
}

bool lwc_is_name(const char *string, size_t len, bool parts)
{
    if (len == 0 || len > (parts ? 65u : 32u)) {
        return false;
    }
    for (size_t i = 0; i < len; i++) {
        char c = string[i];
        bool fits = (c >= 'a' && c <= 'z') || (c >= '0' && c <= '9') || c == '-';
        bool dot = parts && c == '.' && i > 0 && i + 1 < len && string[i - 1] != '.';
        if (!fits && !dot) {
            return false;
        }
    }
    return true;
}

void lwc_complain(const char *format, ...)
{
    va_list args;
    va_start(args, format);
    fputs("leeway: ", stderr);
    (void)vfprintf(stderr, format, args);
    fputc('\n', stderr);
    va_end(args);
}

bool lwc_read_file(lwc_text *out, const char *path, size_t most, lwc_text *why)
{
    bool standard_input = strcmp(path, "-") == 0;
    FILE *file = standard_input ? stdin : fopen(path, "rb");
    if (file == NULL) {
        lwc_text_printf(why, "cannot open %s: %s", path, strerror(errno));
        return false;
    }
    lwc_text_add(out, "", 0);
    char chunk[16384];
    size_t got = 0;
    while (out->len <= most && (got = fread(chunk, 1, sizeof chunk, file)) > 0) {
        lwc_text_add(out, chunk, got);
    }
    bool ok = !ferror(file) && out->len <= most;
    if (ferror(file)) {
        lwc_text_printf(why, "cannot read %s: %s", path, strerror(errno));
    } else if (!ok) {
        lwc_text_printf(why, "%s holds more than %zu MB, which is the most", path,
                        most / (1024u * 1024u));
    }
    if (!standard_input) {
        (void)fclose(file);
    }
    return ok;
}

bool lwc_may_colour(FILE *stream)
{
    const char *no_colour = getenv("NO_COLOR");
    const char *terminal = getenv("TERM");
    return isatty(fileno(stream)) && (no_colour == NULL || no_colour[0] == '\0') &&
           terminal != NULL && strcmp(terminal, "dumb") != 0;
}
