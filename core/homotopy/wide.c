/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sharpening in long doubles, see wide.h: the formulas are those of closure/eval.inc. */
#include "wide.h"

#include <math.h>
#include <string.h>

typedef lwi_wx num;
typedef lwi_w_frame num_frame;
typedef lwi_w_eval num_eval;
typedef lwi_w_point num_point;

#define NUM_WIDE 0
#define NUM_RATES 0
#define NUM_OWN_POINT 0

#include "../closure/eval_plain.inc"

static inline num num_over(num a, double x)
{
    return a / x;
}

static inline num num_unit(num f[3])
{
    num length = csqrtl(f[0] * f[0] + f[1] * f[1] + f[2] * f[2]);
    for (int i = 0; i < 3; i++) {
        f[i] /= length;
    }
    return length;
}

#include "../closure/eval.inc"

/* Brings what is unit in doubles to unit here. */
static void make_unit(num *v, size_t n)
{
    num square = 0.0L;
    for (size_t i = 0; i < n; i++) {
        square += v[i] * v[i];
    }
    num scale = 1.0L / csqrtl(square);
    for (size_t i = 0; i < n; i++) {
        v[i] *= scale;
    }
}

static void take_state(lwi_wide *x, const lwi_system *sys, const lwi_hpoint *at)
{
    x->s = at->s;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_SLIDE) {
            x->at.value[k] = at->st.lin[k];
        } else if (el->kind == LWI_TURN) {
            for (int i = 0; i < 2; i++) {
                x->at.cs[k][i] = at->st.cs[k][i];
            }
            make_unit(x->at.cs[k], 2);
        } else {
            for (int i = 0; i < 4; i++) {
                x->quat[el->quat][i] = at->st.quat[el->quat][i];
            }
            make_unit(x->quat[el->quat], 4);
            for (int i = 0; i < 3 && el->kind == LWI_FREE; i++) {
                x->at.pos_m[el->quat][i] = at->st.pos_m[el->quat][i];
            }
        }
    }
}

/* Inputs on the line at s, turns as tangents of half angles, and rotations of balls. */
static void set_inputs(lwi_wide *x, const lwi_homotopy *h)
{
    const lwi_hom *hom = h->hom;
    const lwi_system *sys = hom->sys;
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        x->at.rod_m[r] = sys->rod[r].length_m;
    }
    for (int i = 0; i < 9; i++) {
        x->at.given[0].rot[i] = i % 4 == 0 ? 1.0L : 0.0L;
    }
    memset(x->at.given[0].pos_m, 0, sizeof x->at.given[0].pos_m);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        num v[7];
        for (size_t i = 0; i < (par->kind == LWI_PAR_NODE ? 7 : 1); i++) {
            num from = h->p0[par->first + i];
            v[i] = from + x->s * (h->p1[par->first + i] - from);
        }
        if (par->kind == LWI_PAR_ROD) {
            x->at.rod_m[par->index] = v[0];
        } else if (par->kind == LWI_PAR_SLIDE) {
            x->at.value[par->index] = v[0];
        } else if (par->kind == LWI_PAR_TURN) {
            num n = 1.0L / (1.0L + v[0] * v[0]);
            x->at.cs[par->index][0] = (1.0L - v[0] * v[0]) * n;
            x->at.cs[par->index][1] = 2.0L * v[0] * n;
            x->at.value[par->index] = v[0];
        } else {
            make_unit(v + 3, 4);
            num_quat_rot(x->at.given[par->index].rot, v + 3);
            memcpy(x->at.given[par->index].pos_m, v, 3 * sizeof v[0]);
        }
    }
    for (size_t q = 0; q < sys->n_quat; q++) {
        num_quat_rot(x->at.rot[q], x->quat[q]);
    }
}

static void observe(lwi_wide *x, const lwi_system *sys)
{
    num *v = x->value;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_SLIDE) {
            *v++ = x->at.value[k] / sys->length_m;
        } else if (el->kind == LWI_TURN) {
            *v++ = x->at.cs[k][0];
            *v++ = x->at.cs[k][1];
        } else {
            memcpy(v, x->at.rot[el->quat], 9 * sizeof *v);
            v += 9;
            for (int i = 0; i < 3 && el->kind == LWI_FREE; i++) {
                *v++ = x->at.pos_m[el->quat][i] / sys->length_m;
            }
        }
    }
}

/* Minus the residuals of the mixed rows and of the slice, as they are solved for. */
static void residuals(lwi_cx *out, lwi_wide *x, const lwi_homotopy *h)
{
    const lwi_hom *hom = h->hom;
    const lwi_system *sys = hom->sys;
    num row[LWI_HOM_ROWS];
    set_inputs(x, h);
    num_eval_nodes(&x->ev, sys, &x->at);
    for (size_t i = 0; i < hom->n_row; i++) {
        row[i] = num_row(NULL, sys, &sys->row[i], &x->at, &x->ev);
    }
    for (size_t i = 0; i < hom->n; i++) {
        num sum = hom->square ? row[i] : 0.0L;
        for (size_t k = 0; k < hom->n_row && !hom->square; k++) {
            sum += hom->mix[i * hom->n_row + k] * row[k];
        }
        out[i] = (lwi_cx)-sum;
    }
    const lwi_slice *slice = &h->slice[1];
    num sum = slice->b * x->s - slice->c;
    observe(x, sys);
    for (size_t i = 0; i < hom->n_observe; i++) {
        sum += slice->a[i] * x->value[i];
    }
    out[hom->n] = (lwi_cx)-sum;
}

static void quat_mul(num out[4], const num a[4], const num b[4])
{
    out[0] = a[0] * b[0] - a[1] * b[1] - a[2] * b[2] - a[3] * b[3];
    out[1] = a[0] * b[1] + a[1] * b[0] + a[2] * b[3] - a[3] * b[2];
    out[2] = a[0] * b[2] - a[1] * b[3] + a[2] * b[0] + a[3] * b[1];
    out[3] = a[0] * b[3] + a[1] * b[2] - a[2] * b[1] + a[3] * b[0];
}

/* The same steps as lwi_cstate_step takes; small ones only. */
static void step(lwi_wide *x, const lwi_system *sys, const lwi_cx *y)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        const lwi_cx *d = y + el->var;
        const double *scale = sys->var_scale + el->var;
        if (el->kind == LWI_SLIDE) {
            x->at.value[k] += (num)d[0] * scale[0];
        } else if (el->kind == LWI_TURN) {
            num t = 0.5L * d[0] * scale[0];
            num a = x->at.cs[k][0];
            num b = x->at.cs[k][1];
            x->at.cs[k][0] = a - t * b;
            x->at.cs[k][1] = b + t * a;
            a = x->at.cs[k][0]; /* (1 + i t)^2 up to its size, which make_unit takes off */
            b = x->at.cs[k][1];
            x->at.cs[k][0] = a - t * b;
            x->at.cs[k][1] = b + t * a;
            make_unit(x->at.cs[k], 2);
        } else {
            bool ball = el->kind == LWI_BALL;
            double sign = ball ? el->sign : 1.0;
            const lwi_cx *turn = ball ? d : d + 3;
            num dq[4] = {1.0L, 0.5L * sign * turn[0], 0.5L * sign * turn[1], 0.5L * sign * turn[2]};
            num q[4];
            num before[3];
            num after[3];
            num *old = x->quat[el->quat];
            num_rotate(before, x->at.rot[el->quat], el->at);
            if (sign > 0.0) {
                quat_mul(q, dq, old);
            } else {
                quat_mul(q, old, dq);
            }
            make_unit(q, 4);
            memcpy(old, q, sizeof q);
            num_quat_rot(x->at.rot[el->quat], q);
            num_rotate(after, x->at.rot[el->quat], el->at);
            for (int i = 0; i < 3 && !ball; i++) {
                x->at.pos_m[el->quat][i] += before[i] - after[i] + (num)d[i] * scale[i];
            }
        }
    }
}

bool lwi_wide_sharpen(lwi_wide *x, const lwi_homotopy *h, const lwi_hpoint *at, lwi_track_work *w)
{
    const lwi_hom *hom = h->hom;
    lwi_cx y[LWI_HOM_VARS + 1];
    double size = 1.0;
    take_state(x, hom->sys, at);
    for (int it = 0; it < 4; it++) {
        residuals(y, x, h);
        if (!lwi_hom_correct(y, h, at, 1.0, w)) {
            return false;
        }
        size = 0.0;
        for (size_t i = 0; i <= hom->n; i++) {
            size = fmax(size, cabs(y[i]) * w->weight[i]);
        }
        if (!(size < 0.1)) {
            return false;
        }
        step(x, hom->sys, y);
        x->s += y[hom->n];
    }
    set_inputs(x, h);
    observe(x, hom->sys);
    return size < 1e-9; /* what rounding leaves of the last step */
}
