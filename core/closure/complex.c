/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evaluator for complex numbers. */
#include "complex.h"

#include <string.h>

#define LWI_NUM double complex
#define LWI_NAME(x) lwi_c_##x
#define LWI_FRAME lwi_c_frame
#define LWI_SIN csin
#define LWI_COS ccos
#define LWI_SQRT csqrt
#include "eval.inc"

void lwi_c_state_from_real(lwi_c_state *out, const lwi_system *sys, const lwi_state *in)
{
    memset(out, 0, sizeof *out);
    for (size_t k = 0; k < sys->n_element; k++) {
        out->value[k] = in->value[k];
    }
    for (size_t i = 0; i < sys->n_quat; i++) {
        for (int j = 0; j < 4; j++) {
            out->quat[i][j] = in->quat[i][j];
        }
        for (int j = 0; j < 3; j++) {
            out->pos_m[i][j] = in->pos_m[i][j];
        }
    }
    for (size_t n = 0; n < sys->n_node; n++) {
        for (int j = 0; sys->node_given[n] && j < 9; j++) {
            out->given[n].rot[j] = in->given[n].rot[j];
        }
        for (int j = 0; sys->node_given[n] && j < 3; j++) {
            out->given[n].pos_m[j] = in->given[n].pos_m[j];
        }
    }
    for (size_t r = 0; r < LW_MAX_RODS; r++) {
        out->rod_length_m[r] = in->rod_length_m[r];
    }
}
