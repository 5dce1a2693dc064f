/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mechanisms of many kinds for checks of identities, each with the span in which nearly every
 * random posture exists. Made up, no published geometry. */
#ifndef LWT_SUBJECTS_H
#define LWT_SUBJECTS_H

#include "lwt_build.h"

typedef struct lwt_subject {
    const char *name;
    lwt_machine *(*make)(void); /* not loaded yet */
    double span;       /* drives, or the pose of a machine with spare drives, +- from reference */
    bool planar_moves; /* carried about in the xy plane only, since outputs name its axes */
    int count;
} lwt_subject;

enum { LWT_SUBJECTS = 21 };
extern const lwt_subject lwt_subjects[LWT_SUBJECTS];

#endif
