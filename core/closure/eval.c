/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evaluator over doubles: displacements of nodes, rows with exact derivatives, twist rows, sums
 * of coordinates, closure errors told in metres and radians. The formulas are those of eval.inc. */
#include "../math/vec3.h"
#include "system.h"

typedef double num;
typedef lw_frame num_frame;
typedef lwi_eval num_eval;
typedef lwi_state num_point;

#define NUM_WIDE 0
#define NUM_RATES 0
#define NUM_OWN_POINT 1

#include "eval_plain.inc"

static inline num num_over(num a, double x)
{
    return a / x;
}

static inline num num_unit(num f[3])
{
    double length = lwi_norm(f);
    for (int i = 0; i < 3; i++) {
        f[i] /= length;
    }
    return length;
}

static inline num num_value(const lwi_state *st, size_t k)
{
    return st->value[k];
}

static inline void num_turn(num cs[2], const lwi_state *st, size_t k)
{
    cs[0] = cos(st->value[k]);
    cs[1] = sin(st->value[k]);
}

static inline void num_rotation(num rot[9], const lwi_state *st, size_t i)
{
    lw_rot_from_quat(rot, st->quat[i]);
}

static inline const num *num_position(const lwi_state *st, size_t i)
{
    return st->pos_m[i];
}

static inline const lw_frame *num_given(const lwi_state *st, size_t n)
{
    return &st->given[n];
}

static inline num num_rod_given(const lwi_state *st, size_t r)
{
    return st->rod_length_m[r];
}

#include "eval.inc"

void lwi_eval_nodes(lwi_eval *ev, const lwi_system *sys, const lwi_state *st)
{
    num_eval_nodes(ev, sys, st);
}

double lwi_rod_length(const lwi_system *sys, const lwi_eval *ev, size_t rod)
{
    return num_rod_length(sys, ev, rod);
}

double lwi_row_residual(const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                        const lwi_eval *ev)
{
    return num_row(NULL, sys, row, st, ev);
}

void lwi_row_derivative(double *out, const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                        const lwi_eval *ev)
{
    memset(out, 0, sys->n_var * sizeof *out);
    (void)num_row(out, sys, row, st, ev);
}

size_t lwi_eval_rows(double *res, double *jac, size_t ld, const lwi_system *sys,
                     const lwi_state *st, const lwi_eval *ev)
{
    for (size_t i = 0; i < sys->n_row; i++) {
        double *out = jac != NULL ? jac + i * ld : NULL;
        if (out != NULL) {
            memset(out, 0, sys->n_var * sizeof *out);
        }
        res[i] = num_row(out, sys, &sys->row[i], st, ev);
    }
    return sys->n_row;
}

void lwi_twist_row(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                   const double p[3], const double f[3], const double m[3])
{
    num_wrench h = {.force = true, .moment = true};
    lwi_copy3(h.p, p);
    lwi_copy3(h.f, f);
    lwi_copy3(h.m, m);
    memset(out, 0, sys->n_var * sizeof *out);
    num_twist_row(out, sys, ev, node, &h);
}

void lwi_twist_rows(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                    const double p[3])
{
    memset(out, 0, 6 * sys->n_var * sizeof *out);
    num_twist_rows(out, sys->n_var, sys, ev, node, p);
}

bool lwi_terms(double *value, double *out, const lwi_system *sys, const lwi_state *state,
               const lwi_eval *ev, const lw_term *term, size_t n_term)
{
    if (out != NULL) {
        memset(out, 0, sys->n_var * sizeof *out);
    }
    return num_terms(value, out, sys, state, ev, term, n_term);
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
