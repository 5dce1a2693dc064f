/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The closure system over polynomial models: displacements, rows and derivatives as functions of
 * where on an interval of a move the mechanism is. The formulas are those of closure/eval.inc.
 * Called by the files of this folder only. */
#ifndef LWI_EVAL_PM_H
#define LWI_EVAL_PM_H

#include "../closure/system.h"
#include "pm.h"

LWI_EVAL_TYPES(lwi_pm, lwi_pm);

/* How the inputs of a system move per unit of each of the m output rates: the given node (the tool
 * body; SIZE_MAX: none) and given elements. */
typedef struct lwi_pm_inputs {
    size_t m;
    size_t node;
    unsigned short root[LWI_MAX_NODES];
    lwi_pm at[3];                      /* reference point: the tool point, fixed frame */
    lwi_pm v[LW_MAX_OUTPUTS][3];       /* its velocity */
    double w[LW_MAX_OUTPUTS][3];       /* turn */
    double rate[LW_MAX_OUTPUTS][LWI_MAX_ELEMENTS]; /* given elements; unknown ones 0 */
} lwi_pm_inputs;

void lwi_pm_eval_nodes(lwi_pm_eval *ev, const lwi_system *sys, const lwi_pm_point *st);
/* Fills ev->w and ev->p of all elements from ev->node. */
void lwi_pm_eval_screws(lwi_pm_eval *ev, const lwi_system *sys);
/* Displacement of element k's child from its parent's, ev->p of turns too. */
void lwi_pm_eval_child(lwi_pm_frame *child, const lwi_pm_frame *parent, const lwi_system *sys,
                       size_t k, const lwi_pm_point *st);

/* Residual of a row; out (by unknown, cleared by the caller; NULL: none) gets the derivative, in
 * (m long, overwritten; NULL: none) the derivative by output rates. */
lwi_pm lwi_pm_row(lwi_pm *out, lwi_pm *in, const lwi_system *sys, const lwi_row *row,
                  const lwi_pm_point *st, const lwi_pm_eval *ev, const lwi_pm_inputs *inputs);
/* The same for a sum of coordinates; false if no element carries one. */
bool lwi_pm_terms(lwi_pm *value, lwi_pm *out, lwi_pm *in, const lwi_system *sys,
                  const lwi_pm_point *st, const lwi_pm_eval *ev, const lw_term *term,
                  size_t n_term, const lwi_pm_inputs *inputs);
lwi_pm lwi_pm_rod_length(const lwi_system *sys, const lwi_pm_eval *ev, size_t rod);
/* The point's six twist rows, ld apart, cleared by the caller. */
void lwi_pm_twist_rows(lwi_pm *out, size_t ld, const lwi_system *sys, const lwi_pm_eval *ev,
                       size_t node, const lwi_pm p[3]);
void lwi_pm_place(lwi_pm out[3], const lwi_pm_frame *x, const double p[3]);
void lwi_pm_rotate(lwi_pm out[3], const lwi_pm rot[9], const double v[3]);
void lwi_pm_quat_rot(lwi_pm rot[9], const lwi_pm q[4]);
/* rot = a^T b. */
void lwi_pm_between(lwi_pm rot[9], const lwi_pm a[9], const lwi_pm b[9]);

#endif
