/* SPDX-License-Identifier: GPL-3.0-or-later */
/* An independent solver for six-strut platforms: the system in the coordinates of Study, written as
 * quadrics, goes to the command phc (Debian: phcpack, homotopy continuation) in a process of its
 * own, and its solutions are read back. */
#ifndef LWT_PHC_H
#define LWT_PHC_H

#include <leeway/posture.h>

enum { LWT_PHC_MAX = 128 };

typedef struct lwt_phc {
    double seconds;   /* processor time of the whole command */
    int finite;       /* isolated solutions, real or not */
    int n;            /* the real ones */
    lw_frame real[LWT_PHC_MAX];
} lwt_phc;

/* False if the command is not there or its answer cannot be read. base[18], plate[18] and
 * length_m[6] as for lwt_kit_struts; seed picks the random numbers of its homotopies. */
bool lwt_phc_struts(lwt_phc *out, const double *base, const double *plate, const double *length_m,
                    unsigned seed);

#endif
