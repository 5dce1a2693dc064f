/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a decoder has to say about a text, bounded, so that several faults are told at once. */
#ifndef LWD_FINDINGS_H
#define LWD_FINDINGS_H

#include <stdbool.h>
#include <stddef.h>

#include <leeway/model.h>

#include "json_scan.h"

enum { LWD_MAX_FINDINGS = 64 };

typedef struct lwd_finding {
    lw_severity severity;
    char code[40];                  /* a stable word such as "unknown-member" */
    char pointer[LWD_POINTER_SIZE]; /* RFC 6901; "" is the whole text. A missing member is named by
                                     * the place where it should stand. */
    char text[240];                 /* one sentence: what is wrong and what to do */
    char expected[80];
    char got[80];
} lwd_finding;

typedef struct lwd_findings {
    size_t n;
    size_t n_error;   /* kept or lost */
    size_t n_warning;
    size_t lost;      /* beyond LWD_MAX_FINDINGS */
    bool no_memory;   /* memory ran out: the text may be all right */
    lwd_finding item[LWD_MAX_FINDINGS];
} lwd_findings;

void lwd_findings_init(lwd_findings *findings);

/* Adds one with code, pointer and severity set and the texts empty. When the list is full, an error
 * takes the place of the last note or warning; NULL if there is no place. */
lwd_finding *lwd_findings_add(lwd_findings *findings, lw_severity severity, const char *code,
                              const char *pointer);

/* The first error, NULL if there is none. */
const lwd_finding *lwd_findings_first_error(const lwd_findings *findings);

/* Copies text, cut to size at a whole UTF-8 character. */
void lwd_text_copy(char *out, size_t size, const char *text);

#endif
