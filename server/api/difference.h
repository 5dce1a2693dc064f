/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What changed between two revisions, told part by part. Used by the two difference files only. */
#ifndef LWD_API_DIFFERENCE_H
#define LWD_API_DIFFERENCE_H

#include "api.h"

/* One comparison under way. Numbers are told in the units of the newer document. */
typedef struct lwd_diff {
    lwd_json *json;
    const lwd_held *a; /* older */
    const lwd_held *b; /* newer */
    lwd_units units;
    size_t n;          /* changes told */
    const char *of;    /* "joint", "rod", ... of the part in hand */
    const char *name;  /* and its name; "" for the document itself */
} lwd_diff;

/* Equal but for the rounding of a change of units. */
bool lwd_diff_equal(double a, double b);

/* Each tells one change if there is one. */
void lwd_diff_number(lwd_diff *d, const char *what, double a, double b, const char *unit);
/* A figure that may be missing on either side. */
void lwd_diff_optional(lwd_diff *d, const char *what, bool has_a, double a, bool has_b, double b,
                       const char *unit);
void lwd_diff_range(lwd_diff *d, const char *what, const lw_range *a, const lw_range *b,
                    double slope_a, double offset_a, double slope_b, double offset_b,
                    const char *unit);
void lwd_diff_point(lwd_diff *d, const char *what, const double a_m[3], const double b_m[3]);
void lwd_diff_axis(lwd_diff *d, const char *what, const double a[3], const double b[3]);
void lwd_diff_turn(lwd_diff *d, const char *what, const double a[9], const double b[9]);
void lwd_diff_text(lwd_diff *d, const char *what, const char *a, const char *b);
void lwd_diff_there(lwd_diff *d, bool added);

/* difference_parts.c: all parts of the documents. */
void lwd_diff_documents(lwd_diff *d);

#endif
