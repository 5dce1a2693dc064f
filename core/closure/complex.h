/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The closure system over complex numbers: same source as the real one. Used where analytic
 * continuation is wanted, and to check derivatives by the complex step. */
#ifndef LWI_COMPLEX_H
#define LWI_COMPLEX_H

#include "system.h"

#include <complex.h>

typedef struct lwi_c_frame {
    double complex rot[9];
    double complex pos_m[3];
} lwi_c_frame;

#define LWI_NUM double complex
#define LWI_NAME(x) lwi_c_##x
#define LWI_FRAME lwi_c_frame
#include "values.inc"
#undef LWI_NUM
#undef LWI_NAME
#undef LWI_FRAME

void lwi_c_state_from_real(lwi_c_state *out, const lwi_system *sys, const lwi_state *in);
void lwi_c_eval_nodes(lwi_c_eval *ev, const lwi_system *sys, const lwi_c_state *state);
size_t lwi_c_eval_rows(double complex *res, double complex *jac, size_t ld, const lwi_system *sys,
                       const lwi_c_state *state, const lwi_c_eval *ev);
double complex lwi_c_row_residual(const lwi_system *sys, const lwi_row *row,
                                  const lwi_c_state *state, const lwi_c_eval *ev);
void lwi_c_row_derivative(double complex *out, const lwi_system *sys, const lwi_row *row,
                          const lwi_c_state *state, const lwi_c_eval *ev);
double complex lwi_c_rod_length(const lwi_system *sys, const lwi_c_eval *ev, size_t rod);

#endif
