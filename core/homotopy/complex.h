/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The closure system over complex numbers, cut down to what path tracking needs: unknowns move by
 * Cayley steps (turns as sine and cosine, free bodies and balls as unit quaternions), inputs move
 * along a parameter path with exact rates. Same rows as closure/eval.inc; everything is rational in
 * the unknowns and no conjugate is taken. */
#ifndef LWI_HOMOTOPY_COMPLEX_H
#define LWI_HOMOTOPY_COMPLEX_H

#include "../closure/system.h"

#include <complex.h>

typedef double complex lwi_cx;

typedef struct lwi_cframe {
    lwi_cx rot[9];
    lwi_cx pos_m[3];
} lwi_cframe;

/* A point on the complexified configuration manifold. Given elements and nodes hold their
 * inputs. */
typedef struct lwi_cstate {
    lwi_cx lin[LWI_MAX_ELEMENTS];     /* slides (m), turn count does not exist here */
    lwi_cx cs[LWI_MAX_ELEMENTS][2];   /* turns: cosine, sine */
    lwi_cx quat[LWI_MAX_QUATS][4];    /* unit in the bilinear sense */
    lwi_cx pos_m[LWI_MAX_QUATS][3];
} lwi_cstate;

/* Inputs at one parameter point, with rates along the path when tangents are wanted. */
typedef struct lwi_cinput {
    lwi_cx lin[LWI_MAX_ELEMENTS];
    lwi_cx lin_rate[LWI_MAX_ELEMENTS];
    lwi_cx cs[LWI_MAX_ELEMENTS][2];
    lwi_cx turn_rate[LWI_MAX_ELEMENTS];
    lwi_cframe node[LWI_MAX_NODES];   /* given nodes */
    lwi_cx node_w[LWI_MAX_NODES][3];  /* their twist: angular velocity, */
    lwi_cx node_v[LWI_MAX_NODES][3];  /* velocity of the point now at the origin */
    lwi_cx rod_m[LW_MAX_RODS];
    lwi_cx rod_rate[LW_MAX_RODS];
} lwi_cinput;

typedef struct lwi_ceval {
    lwi_cframe node[LWI_MAX_NODES];
    lwi_cx w[LWI_MAX_ELEMENTS][3];
    lwi_cx p[LWI_MAX_ELEMENTS][3];
} lwi_ceval;

void lwi_ceval_nodes(lwi_ceval *ev, const lwi_system *sys, const lwi_cstate *st,
                     const lwi_cinput *in);
/* Residuals (n_row), derivative (n_row x n_var, ld n_var, scaled) and rate along the inputs' path
 * (n_row); jac and rate may be NULL. Rows of kind LINEAR use lin of slides and helices only. */
void lwi_ceval_rows(lwi_cx *res, lwi_cx *jac, lwi_cx *rate, const lwi_system *sys,
                    const lwi_cstate *st, const lwi_cinput *in, const lwi_ceval *ev);
void lwi_cstate_step(lwi_cstate *to, const lwi_cstate *from, const lwi_system *sys,
                     const lwi_cx *y);
/* Coordinates that tell solutions apart and embed the solution curve: rotation entries,
 * positions over the length, sines and cosines, slides over the length of all unknown elements.
 * Returns their number; value may be NULL. Derivative of f . value by the unknowns:
 * lwi_cobserve_rate. */
size_t lwi_cobserve(lwi_cx *value, const lwi_system *sys, const lwi_cstate *st);
/* out[n_var] = d (sum coef_i value_i) / d unknown, scaled. */
void lwi_cobserve_gradient(lwi_cx *out, const lwi_cx *coef, const lwi_system *sys,
                           const lwi_cstate *st);

/* Copies what is in use; stores and loads unknowns as a plain vector of lwi_cpack_size numbers. */
void lwi_cstate_copy(lwi_cstate *to, const lwi_cstate *from, const lwi_system *sys);
size_t lwi_cpack_size(const lwi_system *sys);
void lwi_cpack(lwi_cx *out, const lwi_system *sys, const lwi_cstate *st);
void lwi_cunpack(lwi_cstate *st, const lwi_system *sys, const lwi_cx *in);

/* Dense complex LU with partial pivoting: a (n x n, destroyed), b <- solution. False if
 * singular. */
bool lwi_cx_solve(lwi_cx *a, size_t n, lwi_cx *b);

#endif
