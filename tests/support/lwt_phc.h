/* SPDX-License-Identifier: GPL-3.0-or-later */
/* An independent solver: systems of polynomials go to the command phc (Debian: phcpack, homotopy
 * continuation) in a process of its own, and its solutions are read back. For six-strut platforms
 * the system is written here, in the coordinates of Study, as quadrics. */
#ifndef LWT_PHC_H
#define LWT_PHC_H

#include <leeway/posture.h>

#include <complex.h>

enum { LWT_PHC_MAX = 128, LWT_PHC_NAMES = 16 };

typedef struct lwt_phc_list {
    double seconds; /* processor time of the whole command */
    size_t n;       /* isolated solutions that phc calls regular, real or not */
    double complex value[LWT_PHC_MAX][LWT_PHC_NAMES]; /* in the order of the names */
} lwt_phc_list;

/* `system` as phc reads it: the number of polynomials, then each, ended by a semicolon. seed picks
 * the random numbers of its homotopies. False if the command is not there, its answer cannot be
 * read or is longer than LWT_PHC_MAX. */
bool lwt_phc_solve(lwt_phc_list *out, const char *system, const char *const *name, size_t n_name,
                   unsigned seed);

/* Where a body stands over the complex numbers. */
typedef struct lwt_place {
    double complex rot[9], pos_m[3];
} lwt_place;

typedef struct lwt_phc {
    double seconds;
    int finite; /* isolated solutions, real or not */
    lwt_place all[LWT_PHC_MAX];
    int n;      /* the real ones */
    lw_frame real[LWT_PHC_MAX];
} lwt_phc;

/* base[18], plate[18] and length_m[6] as for lwt_kit_struts. */
bool lwt_phc_struts(lwt_phc *out, const double *base, const double *plate, const double *length_m,
                    unsigned seed);

#endif
