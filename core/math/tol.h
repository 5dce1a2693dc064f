/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every tolerance of the core, with unit and reason. */
#ifndef LWI_TOL_H
#define LWI_TOL_H

/* Generic rank of closure rows, relative to the largest singular value, over many configurations.
 * Axes measured to 1e-3 rad still count as parallel; exact drawings drop to 1e-16. */
#define LWI_RANK_GENERIC 1e-3
/* Rank at one posture, relative: below this a rate matrix is called singular. Doubles leave about
 * 1e-13 on well-scaled matrices, but where two solutions meet, which is what a singular posture is,
 * a posture itself is only known to the root of that: about 1e-8. */
#define LWI_RANK_POSTURE 1e-6
/* A posture counts as closed when every row is below this, relative to the characteristic length.
 * Also what hand-written joint values may be off and are snapped. */
#define LWI_CLOSED 1e-4
/* Newton stops when the scaled step is below this (1 = one radian or one characteristic length). */
#define LWI_NEWTON_STEP 1e-13
/* Residual that a converged exact mechanism must reach, relative. */
#define LWI_NEWTON_RESIDUAL 1e-9
/* Slack on limits, m or rad, for values that sit on their limit by rounding. */
#define LWI_LIMIT_SLACK 1e-9
/* A limb's scaled determinant below this is "0" in a mode text, and the limb singular: at a double
 * root it carries about 1e-8 of rounding. */
#define LWI_SIGN_ZERO 1e-7
/* A screw's turn, shift or pitch below this, scaled, is none; a joint whose share in a motion is
 * below it rests. Null directions are known to about 1e-7 at a double root. */
#define LWI_MOTION_ZERO 1e-6
/* A motion is a limb's own where no joint outside the limb moves more than this. */
#define LWI_OWN_MOTION 1e-4
/* Singular values closer than this, relative, count as one multiple value: symmetric postures. */
#define LWI_SAME_VALUE 1e-6
/* Steps are measured at the tool (or the drives) only where that sees every motion this well. */
#define LWI_STEP_SEEN 1e-3
/* Largest scaled move of one tracking step. */
#define LWI_TRACK_STEP 0.35

#endif
