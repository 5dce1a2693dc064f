/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Comparing an answer with what was expected of it. Everything expected must be there; what the
 * answer says besides is no difference. Pure: no network, no files. */
#ifndef LWC_COMPARE_H
#define LWC_COMPARE_H

#include "json.h"

typedef enum lwc_unit_kind {
    LWC_LENGTH,  /* tolerance in mm */
    LWC_ANGLE,   /* in degrees */
    LWC_RATIO,   /* margins, quaternions, matrix entries: plain numbers */
    LWC_READING, /* drives and joints: in the units of the reading */
    LWC_COUNT,   /* codes, counts, numbers of things: equal or not */
    LWC_UNIT_KINDS
} lwc_unit_kind;

/* Tolerances by kind, absolute; for ratios above one relative. The one for LWC_COUNT is not
 * used. */
typedef struct lwc_tolerance {
    double by_kind[LWC_UNIT_KINDS];
} lwc_tolerance;

/* A nanometre, about 0.004 arc seconds, and a millionth: far above the rounding of printed answers,
 * far below anything a machine shows. */
#define LWC_TOLERANCE_DEFAULT {{1e-6, 1e-6, 1e-6, 1e-6, 0.0}}

/* "length_mm", "angle_deg", "ratio", "reading". */
const char *lwc_unit_kind_name(lwc_unit_kind kind);
bool lwc_unit_kind_find(lwc_unit_kind *out, const char *name);

typedef struct lwc_difference {
    const char *pointer; /* into the expected answer */
    const cJSON *expected;
    const cJSON *got;     /* NULL where the answer lacks it */
    const char *note;     /* or NULL; why it differs where the values alone do not say */
    bool is_number;
    double off;           /* got - expected in the answer's units, angles by the short way */
    double tolerance;     /* in the answer's units */
    lwc_unit_kind kind;
} lwc_difference;

typedef void (*lwc_difference_seen)(void *context, const lwc_difference *difference);

typedef struct lwc_compare_rules {
    lwc_tolerance tolerance;
    /* Up to two objects, the nearer first (a question's line, the file's head), that may hold
     *   "at": {"/solutions/STAR/drives/m1": 0.01}   STAR is '*' and stands for one step; in the
     *                                               answer's units; beats the kinds
     *   "check": ["digest"]                         compared although left out by default
     *   "ignore": ["reason"]                        left out */
    const cJSON *source[2];
    const char *check; /* comma lists of the same from the command line, or NULL */
    const char *ignore;
} lwc_compare_rules;

/* Number of differences; each is handed to `seen` (may be NULL) while it is borrowed. */
size_t lwc_compare(const cJSON *expected, const cJSON *got, const lwc_compare_rules *rules,
                   lwc_difference_seen seen, void *context);

/* The answer cut down to the members `expected` has, for rewriting an expectation. */
cJSON *lwc_narrow(const cJSON *expected, const cJSON *got);

#endif
