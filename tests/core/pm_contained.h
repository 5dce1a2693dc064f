/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The containment check of polynomial models, compiled several times: other degrees, other flags,
 * and with error terms left out. Each copy is one function of this type. */
#ifndef PM_CONTAINED_H
#define PM_CONTAINED_H

#include <stdbool.h>
#include <stdint.h>

typedef struct pm_report {
    long checked;       /* values held against the reference */
    long failed;        /* operations that gave no finite model */
    long outside;       /* values outside the model */
    long done;          /* operations */
    const char *first;  /* the operation of the first value outside, or NULL */
    double tightest;    /* largest distance over rest seen, for results that have a rest */
    int terms;          /* how many error terms there are */
} pm_report;

/* Runs `rounds` of each operation in each rounding mode. `mutant` is the error term left out, 0 for
 * none; `first_only` stops at the first value outside. */
typedef pm_report pm_check(uint64_t seed, long rounds, int mutant, bool first_only);

#endif
