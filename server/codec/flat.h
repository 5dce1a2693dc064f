/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A pose written in single numbers, as query strings and tables have it: x y z, one of qw qx qy qz,
 * yaw pitch roll, rvx rvy rvz, dx dy dz and rz, and joint coordinates. Faults are returned, and
 * told by the reader that knows the place. No state; any thread. */
#ifndef LWD_FLAT_H
#define LWD_FLAT_H

#include <leeway/posture.h>

#include "edge.h"

enum {
    LWD_FLAT_FORMS = 5, /* quaternion, zyx, rotation vector, direction, rz */
    LWD_FLAT_NUMBERS = 17
};

typedef struct lwd_flat {
    bool has[LWD_FLAT_NUMBERS];
    double value[LWD_FLAT_NUMBERS]; /* SI */
    lw_pose_ask pose; /* positions and joints as they come; orientation when closed */
} lwd_flat;

typedef struct lwd_flat_fault {
    const char *member;   /* where it is told */
    const char *expected;
    const char *text;
} lwd_flat_fault;

/* Largest size of any of these numbers, in the units of the question. */
#define LWD_FLAT_MOST 1e6

void lwd_flat_open(lwd_flat *flat);
/* Number of a member, SIZE_MAX if the name is none. */
size_t lwd_flat_member(const char *name);
void lwd_flat_put(lwd_flat *flat, lwd_units units, size_t member, double value);
/* False if there is no room for one more joint coordinate. `value` as people read it. */
bool lwd_flat_put_joint(lwd_flat *flat, const lwd_edge *edge, lwd_units units, size_t coord,
                        double value);
/* Whether anything was put. */
bool lwd_flat_given(const lwd_flat *flat);
/* Makes the orientation; `form` gets its form unless it has one already. NULL if all is well. */
const lwd_flat_fault *lwd_flat_close(lwd_flat *flat, lwd_form *form);

/* A whole text as one decimal number: [sign] digits [. digits] [e [sign] digits]. A leading or
 * trailing point is read as PLCs write it; a blank for a sign is a '+' that was decoded. */
bool lwd_flat_number(const char *text, double *out);

#endif
