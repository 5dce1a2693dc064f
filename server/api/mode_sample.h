/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How much of a mechanism's neighbourhood each of its modes holds: inverse solutions listed at tool
 * poses drawn around home, the same poses for the same digest on every machine. Called by modes.c
 * in a worker. */
#ifndef LWD_API_MODE_SAMPLE_H
#define LWD_API_MODE_SAMPLE_H

#include "store.h"

enum {
    LWD_MODES_MAX = 512,
    LWD_SAMPLE_EXPLICIT = 1000, /* poses, where the inverse is explicit */
    LWD_SAMPLE_TRACKED = 100    /* poses, where solutions are tracked or searched */
};

/* One mode with the first posture found in it. */
typedef struct lwd_mode_row {
    lw_mode mode;
    unsigned number;  /* of the mode in registers, 0: none */
    size_t held;      /* poses with a solution in this mode within limits */
    size_t last_pose; /* the pose counted last, from 1 */
    double drive[LW_MAX_DRIVES];
    lw_frame tool;
    double coord[LW_MAX_COORDS];
} lwd_mode_row;

typedef struct lwd_mode_sample {
    size_t poses;
    size_t reached; /* poses with a solution within limits, in any mode */
} lwd_mode_sample;

/* What the sample is, in a sentence. */
extern const char lwd_mode_sample_how[];

/* Fills held and the postures of the rows, whose modes are given. */
void lwd_mode_sample_run(lwd_mode_sample *out, lwd_mode_row *row, size_t n, const lwd_held *held,
                         lw_work *work);

#endif
