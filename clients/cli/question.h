/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From words like "x=10 yaw=5 joint.shaft=720 from.m1=3" and options to the body of a question.
 * Pure: no network, no files; every fault is a complaint on stderr. */
#ifndef LWC_QUESTION_H
#define LWC_QUESTION_H

#include "args.h"
#include "json.h"

typedef enum lwc_kind {
    LWC_INVERSE,
    LWC_FORWARD,
    LWC_JACOBIAN,
    LWC_MARGIN,
    LWC_REACH,
    LWC_FREE_TRAVEL,
    LWC_KIND_COUNT
} lwc_kind;

const char *lwc_kind_name(lwc_kind kind);
/* False after a complaint that names the kinds there are. */
bool lwc_kind_find(lwc_kind *out, const char *word);

/* The body for these words (assignments) and options, or NULL after a complaint. */
cJSON *lwc_question_build(lwc_kind kind, const char *const *words, size_t n_words,
                          const lwc_args *args);

/* Puts into the body of a path where it starts (from.NAME=.. words, --from, --near) and what the
 * options say. False after a complaint. */
bool lwc_path_options(cJSON *body, const char *const *words, size_t n_words, const lwc_args *args);

#endif
