/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Growable text, numbers as text, and memory that ends the program with a sentence when it runs
 * out. Everything of the command line uses it. No locale is ever set in this program, so the C
 * library's number routines keep to the decimal point. */
#ifndef LWC_TEXT_H
#define LWC_TEXT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>

#if defined(__GNUC__)
#define LWC_PRINTF(fmt, first) __attribute__((format(printf, fmt, first)))
#else
#define LWC_PRINTF(fmt, first)
#endif

/* Exit statuses; the man page lists them for scripts. */
enum {
    LWC_EXIT_YES = 0,        /* verdict 1, or the command did what was asked */
    LWC_EXIT_NO = 1,         /* any other verdict, or a replay that found differences */
    LWC_EXIT_ERROR = 2,      /* used wrongly, or refused by the service */
    LWC_EXIT_NO_CONTACT = 3  /* nobody answered */
};

typedef struct lwc_text {
    char *data; /* NUL-terminated once anything was added, else NULL */
    size_t len;
    size_t cap;
} lwc_text;

void lwc_text_clear(lwc_text *text);
/* Forget the content, keep the memory. */
void lwc_text_reset(lwc_text *text);
void lwc_text_add(lwc_text *text, const char *bytes, size_t len);
void lwc_text_puts(lwc_text *text, const char *string);
void lwc_text_putc(lwc_text *text, char c);
void lwc_text_fill(lwc_text *text, char c, size_t count);
void lwc_text_printf(lwc_text *text, const char *format, ...) LWC_PRINTF(2, 3);
/* As many digits as read back to the same bits, and no more. `value` is finite. */
void lwc_text_exact(lwc_text *text, double value);
/* At most `digits` significant digits, without trailing zeros; for people. */
void lwc_text_number(lwc_text *text, double value, int digits);
/* Text of foreign origin, made safe for a terminal: control characters (also the two-byte ones
 * of UTF-8) and what is no UTF-8 become '?', line ends become blanks. */
void lwc_text_safe(lwc_text *text, const char *bytes, size_t len);
/* The content as a string, "" where nothing was added. Borrowed until the next change. */
const char *lwc_text_string(const lwc_text *text);

/* Bytes of the well-formed UTF-8 character at `bytes`, 0 if there is none. */
size_t lwc_utf8_length(const char *bytes, size_t left);
/* Number of columns a UTF-8 string takes, one for each character. */
size_t lwc_columns(const char *string);

/* realloc that never returns NULL. */
void *lwc_grow(void *memory, size_t bytes);
char *lwc_copy(const char *string);

/* Strict decimal number, the JSON grammar with a leading '+' allowed; false if anything is left
 * over or the value is not finite. */
bool lwc_read_number(const char *string, double *out);
/* Whole number from 1 to `largest`. */
bool lwc_read_count(const char *string, long largest, long *out);
bool lwc_starts(const char *string, const char *prefix);
/* Names of mechanisms, drives, joints: lower case, digits, hyphens, 1 to 32 characters. With
 * `parts`, dots may separate a joint's name and its part. */
bool lwc_is_name(const char *string, size_t len, bool parts);

/* One sentence on stderr, with the program's name in front. */
void lwc_complain(const char *format, ...) LWC_PRINTF(1, 2);

/* Whole file into memory, "-" is standard input. False with errno-like sentence in `why`. */
bool lwc_read_file(lwc_text *out, const char *path, size_t most, lwc_text *why);

/* True where colour may be used on this stream: a terminal, and NO_COLOR is not set. */
bool lwc_may_colour(FILE *stream);

#endif
