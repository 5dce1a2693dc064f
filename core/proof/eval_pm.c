/* SPDX-License-Identifier: GPL-3.0-or-later */
/* closure/eval.inc over polynomial models, and derivatives by what is given. */
#include "eval_pm.h"

#include <string.h>

typedef lwi_pm num;
typedef lwi_pm_frame num_frame;
typedef lwi_pm_eval num_eval;
typedef lwi_pm_point num_point;

#define NUM_WIDE 1
#define NUM_RATES 0
#define NUM_OWN_POINT 0

static inline num num_of(double x)
{
    return lwi_pm_const(x);
}

static inline num num_add(num a, num b)
{
    return lwi_pm_add(a, b);
}

static inline num num_sub(num a, num b)
{
    return lwi_pm_sub(a, b);
}

static inline num num_mul(num a, num b)
{
    return lwi_pm_mul(a, b);
}

static inline num num_scale(num a, double x)
{
    return lwi_pm_scale(a, x);
}

static inline num num_over(num a, double x)
{
    /* 1 / x is rounded: its part of the size goes to the rest. */
    num out = lwi_pm_scale(a, 1.0 / x);
    return lwi_pm_widen(out, LWI_PM_EPS * lwi_pm_mag(out));
}

static inline num num_unit(num f[3])
{
    num square = num_add(num_add(num_mul(f[0], f[0]), num_mul(f[1], f[1])), num_mul(f[2], f[2]));
    num inverse = lwi_pm_rsqrt(square);
    for (int i = 0; i < 3; i++) {
        f[i] = num_mul(f[i], inverse);
    }
    return num_mul(square, inverse);
}

#include "../closure/eval.inc"

void lwi_pm_eval_nodes(lwi_pm_eval *ev, const lwi_system *sys, const lwi_pm_point *st)
{
    num_eval_nodes(ev, sys, st);
}

void lwi_pm_eval_screws(lwi_pm_eval *ev, const lwi_system *sys)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->kind == LWI_FREE) {
            num_place(ev->p[k], &ev->node[el->child], el->at);
            continue;
        }
        if (el->kind != LWI_SLIDE) {
            num_place(ev->p[k], &ev->node[el->parent], el->at);
        }
        if (el->kind != LWI_BALL) {
            num_rotate(ev->w[k], ev->node[el->parent].rot, el->axis);
            for (int i = 0; i < 3 && el->sign != 1.0; i++) {
                ev->w[k][i] = num_scale(ev->w[k][i], el->sign);
            }
        }
    }
}

void lwi_pm_eval_child(lwi_pm_frame *child, const lwi_pm_frame *parent, const lwi_system *sys,
                       size_t k, const lwi_pm_point *st)
{
    const lwi_element *el = &sys->element[k];
    num w[3];
    num now[3];
    num_rotate(w, parent->rot, el->axis);
    if (el->kind == LWI_SLIDE) {
        *child = *parent;
    } else {
        num_turn_rot(child->rot, parent->rot, el->axis, st->cs[k][0],
                     num_scale(st->cs[k][1], el->sign));
        num_place(now, parent, el->at);
        num_about(child, el->at, now);
    }
    if (el->kind != LWI_TURN) {
        num q = num_scale(st->value[k], el->sign);
        for (int i = 0; i < 3; i++) {
            num along = num_mul(w[i], q);
            along = el->kind == LWI_HELIX ? num_scale(along, el->pitch) : along;
            child->pos_m[i] = num_add(child->pos_m[i], along);
        }
    }
}

/* The functional by the rate of given element k. */
static num by_element(const lwi_system *sys, const num_eval *ev, size_t k, const num_wrench *h)
{
    const lwi_element *el = &sys->element[k];
    if (el->kind == LWI_SLIDE) {
        return h->force ? num_dot(h->f, ev->w[k]) : num_of(0.0);
    }
    num turn[3];
    num_moment(turn, h, ev->p[k]);
    num d = num_dot(turn, ev->w[k]);
    if (el->kind == LWI_HELIX && h->force) {
        d = num_add(d, num_scale(num_dot(h->f, ev->w[k]), el->pitch));
    }
    return d;
}

/* Adds factor times the functional by every output rate to in: through the given node where just
 * one of a and b hangs on it, and through given elements between them. */
static void add_inputs(num *in, const lwi_system *sys, const num_eval *ev, size_t a, size_t b,
                       size_t link, size_t n_link, double factor, const num_wrench *h,
                       const lwi_pm_inputs *inputs)
{
    bool on_a = inputs->root[a] == inputs->node;
    bool on_b = inputs->root[b] == inputs->node;
    if (on_a != on_b) {
        double sign = on_b ? factor : -factor;
        num turn[3];
        num_moment(turn, h, inputs->at);
        for (size_t j = 0; j < inputs->m; j++) {
            for (int i = 0; i < 3; i++) {
                if (inputs->w[j][i] != 0.0) {
                    in[j] = lwi_pm_axpy(in[j], sign * inputs->w[j][i], turn[i]);
                }
                const num *v = &inputs->v[j][i];
                if (!h->force || (v->c[0] == 0.0 && lwi_pm_mag(*v) == 0.0)) {
                    continue;
                }
                bool one = v->c[0] == 1.0 && lwi_pm_mag(*v) <= 1.0 + 0x1p-40 && v->e == 0.0;
                num part = one ? h->f[i] : num_mul(*v, h->f[i]);
                in[j] = lwi_pm_axpy(in[j], sign, part);
            }
        }
    }
    for (size_t k = 0; k < n_link; k++) {
        const lwi_link *l = &sys->link[link + k];
        size_t e = (size_t)l->element;
        if (!sys->element[e].given) {
            continue;
        }
        num d = by_element(sys, ev, e, h);
        for (size_t j = 0; j < inputs->m; j++) {
            if (inputs->rate[j][e] != 0.0) {
                in[j] = lwi_pm_axpy(in[j], factor * l->sign * inputs->rate[j][e], d);
            }
        }
    }
}

static num add_rod(num *out, num *in, const lwi_system *sys, const num_eval *ev, size_t r,
                   double factor, const lwi_pm_inputs *inputs)
{
    const lwi_rod_info *rod = &sys->rod[r];
    num_sink to = {.sys = sys, .ev = ev, .out = out};
    num_wrench h;
    num length = num_rod_wrench(&h, sys, r, ev);
    if (out != NULL) {
        num_add_links(&to, rod->a, rod->b, rod->link, rod->n_link, factor, &h);
    }
    if (in != NULL) {
        add_inputs(in, sys, ev, rod->a, rod->b, rod->link, rod->n_link, factor, &h, inputs);
    }
    return length;
}

static void add_rate(num *in, size_t element, double factor, const lwi_pm_inputs *inputs)
{
    for (size_t j = 0; in != NULL && j < inputs->m; j++) {
        in[j] = lwi_pm_shift(in[j], factor * inputs->rate[j][element]);
    }
}

lwi_pm lwi_pm_row(lwi_pm *out, lwi_pm *in, const lwi_system *sys, const lwi_row *row,
                  const lwi_pm_point *st, const lwi_pm_eval *ev, const lwi_pm_inputs *inputs)
{
    num_sink to = {.sys = sys, .ev = ev, .out = out};
    for (size_t j = 0; in != NULL && j < inputs->m; j++) {
        in[j] = num_of(0.0);
    }
    if (row->kind == LWI_ROW_LINEAR) {
        num res = num_add_linear(&to, row, st, out != NULL);
        for (size_t t = 0; in != NULL && t < row->n_term; t++) {
            add_rate(in, (size_t)row->term_element[t], row->term_factor[t], inputs);
        }
        for (size_t t = 0; in != NULL && t < row->n_rod_term; t++) {
            (void)add_rod(NULL, in, sys, ev, (size_t)row->rod_term[t], row->rod_factor[t], inputs);
        }
        return res;
    }
    num_wrench h;
    num res = num_row_wrench(&h, &to, row, st);
    if (out != NULL) {
        num_add_links(&to, row->a, row->b, row->link, row->n_link, 1.0, &h);
    }
    if (in != NULL) {
        add_inputs(in, sys, ev, row->a, row->b, row->link, row->n_link, 1.0, &h, inputs);
    }
    return res;
}

bool lwi_pm_terms(lwi_pm *value, lwi_pm *out, lwi_pm *in, const lwi_system *sys,
                  const lwi_pm_point *st, const lwi_pm_eval *ev, const lw_term *term,
                  size_t n_term, const lwi_pm_inputs *inputs)
{
    num_sink to = {.sys = sys, .ev = ev, .out = out};
    size_t n_scalar = lw_spec_coord_count(sys->spec) - sys->spec->n_rod;
    num sum = num_of(0.0);
    for (size_t j = 0; in != NULL && j < inputs->m; j++) {
        in[j] = num_of(0.0);
    }
    for (size_t t = 0; t < n_term; t++) {
        double factor = term[t].factor;
        num have;
        if (term[t].coord >= n_scalar) {
            size_t r = term[t].coord - n_scalar;
            have = add_rod(out, in, sys, ev, r, factor, inputs);
            have = num_sub(have, num_of(sys->rod[r].length_m));
        } else {
            int k = sys->coord_element[term[t].coord];
            if (k < 0) {
                return false;
            }
            have = st->value[k];
            if (out != NULL && sys->element[k].var >= 0) {
                num_put_one(&to, (size_t)k, factor, num_of(1.0));
            }
            add_rate(in, (size_t)k, factor, inputs);
        }
        sum = t == 0 ? num_scale(have, factor) : num_add(sum, num_scale(have, factor));
    }
    *value = sum;
    return true;
}

lwi_pm lwi_pm_rod_length(const lwi_system *sys, const lwi_pm_eval *ev, size_t rod)
{
    return num_rod_length(sys, ev, rod);
}

void lwi_pm_twist_rows(lwi_pm *out, size_t ld, const lwi_system *sys, const lwi_pm_eval *ev,
                       size_t node, const lwi_pm p[3])
{
    num_twist_rows(out, ld, sys, ev, node, p);
}

void lwi_pm_place(lwi_pm out[3], const lwi_pm_frame *x, const double p[3])
{
    num_place(out, x, p);
}

void lwi_pm_rotate(lwi_pm out[3], const lwi_pm rot[9], const double v[3])
{
    num_rotate(out, rot, v);
}

void lwi_pm_quat_rot(lwi_pm rot[9], const lwi_pm q[4])
{
    num_quat_rot(rot, q);
}

void lwi_pm_between(lwi_pm rot[9], const lwi_pm a[9], const lwi_pm b[9])
{
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            const num p[3] = {a[i], a[3 + i], a[6 + i]};
            const num q[3] = {b[j], b[3 + j], b[6 + j]};
            rot[3 * i + j] = num_dot(p, q);
        }
    }
}
