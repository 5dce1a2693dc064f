/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evaluator for doubles, and what only doubles need: twist rows, sums of coordinates, closure
 * errors told in metres and radians. */
#include "../math/vec3.h"
#include "system.h"

#define LWI_NUM double
#define LWI_NAME(x) lwi_##x
#define LWI_FRAME lw_frame
#define LWI_SIN sin
#define LWI_COS cos
#define LWI_SQRT sqrt
#include "eval.inc"

void lwi_twist_row(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                   const double p[3], const double f[3], const double m[3])
{
    for (size_t i = 0; i < sys->n_var; i++) {
        out[i] = 0.0;
    }
    /* Elements come parents first: walk up from the last one that ends in the node. */
    size_t at = node;
    for (size_t k = sys->n_element; k-- > 0;) {
        if (sys->element[k].child == at) {
            lwi_add_screw(out, sys, ev, k, 1.0, p, f, m);
            at = sys->element[k].parent;
        }
    }
}

bool lwi_terms(double *value, double *out, const lwi_system *sys, const lwi_state *state,
               const lwi_eval *ev, const lw_term *term, size_t n_term)
{
    size_t n_scalar = lw_spec_coord_count(sys->spec) - sys->spec->n_rod;
    double sum = 0.0;
    for (size_t i = 0; out != NULL && i < sys->n_var; i++) {
        out[i] = 0.0;
    }
    for (size_t t = 0; t < n_term; t++) {
        size_t coord = term[t].coord;
        if (coord >= n_scalar) {
            size_t r = coord - n_scalar;
            sum += term[t].factor * (lwi_rod_length(sys, ev, r) - sys->rod[r].length_m);
            if (out != NULL) {
                lwi_add_rod(out, sys, ev, r, term[t].factor);
            }
            continue;
        }
        int k = sys->coord_element[coord];
        if (k < 0) {
            return false;
        }
        sum += term[t].factor * state->value[k];
        int var = sys->element[k].var;
        if (out != NULL && var >= 0) {
            out[var] += term[t].factor * sys->var_scale[var];
        }
    }
    *value = sum;
    return true;
}

static void one_error(double *position_m, double *angle_rad, const lwi_system *sys,
                      const lwi_row *row, const lwi_state *state, const lwi_eval *ev)
{
    double r = fabs(lwi_row_residual(sys, row, state, ev));
    bool angle = row->kind == LWI_ROW_AXIS;
    double *worst = angle ? angle_rad : position_m;
    double scaled = angle ? r : r * sys->length_m;
    if (!(scaled <= *worst)) {
        *worst = scaled;
    }
}

void lwi_closure_error(double *position_m, double *angle_rad, const lwi_system *sys,
                       const lwi_state *state, const lwi_eval *ev)
{
    *position_m = 0.0;
    *angle_rad = 0.0;
    for (size_t i = 0; i < sys->n_row; i++) {
        one_error(position_m, angle_rad, sys, &sys->row[i], state, ev);
    }
    for (size_t i = 0; i < sys->n_row_dropped; i++) {
        one_error(position_m, angle_rad, sys, &sys->row_dropped[i], state, ev);
    }
}
