/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evaluator over complex numbers for the path tracker, with rates along the path of the inputs:
 * the formulas are those of closure/eval.inc. Steps, coordinates to observe, packing. Compiled with
 * limited-range complex arithmetic: operands are finite by construction, the tracker checks what it
 * accepts. */
#include "complex.h"

#include <string.h>

/* Where the unknowns are, and the inputs. */
typedef struct num_point {
    const lwi_cstate *st;
    const lwi_cinput *in;
    const lwi_system *sys;
} num_point;

typedef lwi_cx num;
typedef lwi_cframe num_frame;
typedef lwi_ceval num_eval;

#define NUM_WIDE 0
#define NUM_RATES 1
#define NUM_OWN_POINT 1

#include "../closure/eval_plain.inc"

static inline num num_over(num a, double x)
{
    return a * (1.0 / x);
}

/* The root continues that of the reals, as long as the square stays off the negative axis. */
static inline num num_unit(num f[3])
{
    num length = csqrt(f[0] * f[0] + f[1] * f[1] + f[2] * f[2]);
    for (int i = 0; i < 3; i++) {
        f[i] /= length;
    }
    return length;
}

static inline num num_value(const num_point *at, size_t k)
{
    return at->sys->element[k].given ? at->in->lin[k] : at->st->lin[k];
}

static inline void num_turn(num cs[2], const num_point *at, size_t k)
{
    const lwi_cx *from = at->sys->element[k].given ? at->in->cs[k] : at->st->cs[k];
    cs[0] = from[0];
    cs[1] = from[1];
}

static void num_rotation(num rot[9], const num_point *at, size_t i);

static inline const num *num_position(const num_point *at, size_t i)
{
    return at->st->pos_m[i];
}

static inline const num_frame *num_given(const num_point *at, size_t n)
{
    return &at->in->node[n];
}

static inline num num_rod_given(const num_point *at, size_t r)
{
    return at->in->rod_m[r];
}

static inline num num_value_rate(const num_point *at, size_t k)
{
    return at->in->lin_rate[k];
}

static inline num num_turn_rate(const num_point *at, size_t k)
{
    return at->in->turn_rate[k];
}

static inline num num_rod_rate(const num_point *at, size_t r)
{
    return at->in->rod_rate[r];
}

static inline const num *num_node_w(const num_point *at, size_t n)
{
    return at->in->node_w[n];
}

static inline const num *num_node_v(const num_point *at, size_t n)
{
    return at->in->node_v[n];
}

#include "../closure/eval.inc"

static void num_rotation(num rot[9], const num_point *at, size_t i)
{
    num_quat_rot(rot, at->st->quat[i]);
}

void lwi_ceval_nodes(lwi_ceval *ev, const lwi_system *sys, const lwi_cstate *st,
                     const lwi_cinput *in)
{
    const num_point at = {st, in, sys};
    num_eval_nodes(ev, sys, &at);
}

void lwi_ceval_rows(lwi_cx *res, lwi_cx *jac, lwi_cx *rate, const lwi_system *sys,
                    const lwi_cstate *st, const lwi_cinput *in, const lwi_ceval *ev)
{
    const num_point at = {st, in, sys};
    num_sink to = {.sys = sys, .ev = ev, .st = &at};
    for (size_t n = 1; n < sys->n_node; n++) {
        to.rooted = to.rooted || sys->node_given[n];
    }
    if (jac != NULL) {
        memset(jac, 0, sys->n_row * sys->n_var * sizeof *jac);
    }
    for (size_t i = 0; i < sys->n_row; i++) {
        to.out = jac != NULL ? jac + i * sys->n_var : NULL;
        if (rate != NULL) {
            rate[i] = 0.0;
            to.rate = &rate[i];
        }
        res[i] = num_row_to(&to, &sys->row[i], &at);
    }
}

/* Unit quaternion (1, d/2) over its bilinear norm. */
static void cayley(lwi_cx out[4], const lwi_cx d[3])
{
    lwi_cx square = 1.0 + 0.25 * (d[0] * d[0] + d[1] * d[1] + d[2] * d[2]);
    lwi_cx n = 1.0 / csqrt(square);
    out[0] = n;
    for (int i = 0; i < 3; i++) {
        out[i + 1] = 0.5 * d[i] * n;
    }
}

static void quat_mul(lwi_cx out[4], const lwi_cx a[4], const lwi_cx b[4])
{
    out[0] = a[0] * b[0] - a[1] * b[1] - a[2] * b[2] - a[3] * b[3];
    out[1] = a[0] * b[1] + a[1] * b[0] + a[2] * b[3] - a[3] * b[2];
    out[2] = a[0] * b[2] - a[1] * b[3] + a[2] * b[0] + a[3] * b[1];
    out[3] = a[0] * b[3] + a[1] * b[2] - a[2] * b[1] + a[3] * b[0];
}

static void renorm(lwi_cx q[4])
{
    lwi_cx square = q[0] * q[0] + q[1] * q[1] + q[2] * q[2] + q[3] * q[3];
    lwi_cx n = 1.5 - 0.5 * square; /* one Newton step of 1/sqrt near 1 */
    for (int i = 0; i < 4; i++) {
        q[i] *= n;
    }
}

void lwi_cstate_step(lwi_cstate *to, const lwi_cstate *from, const lwi_system *sys,
                     const lwi_cx *y)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        const lwi_cx *d = y + el->var;
        const double *scale = sys->var_scale + el->var;
        if (el->kind == LWI_SLIDE) {
            to->lin[k] = from->lin[k] + d[0] * scale[0];
        } else if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
            lwi_cx h = 0.5 * d[0] * scale[0];
            lwi_cx n = 1.0 / (1.0 + h * h);
            lwi_cx c = (1.0 - h * h) * n;
            lwi_cx s = 2.0 * h * n;
            lwi_cx a = from->cs[k][0];
            lwi_cx b = from->cs[k][1];
            lwi_cx x = a * c - b * s;
            lwi_cx z = a * s + b * c;
            lwi_cx fix = 1.5 - 0.5 * (x * x + z * z);
            to->cs[k][0] = x * fix;
            to->cs[k][1] = z * fix;
            to->lin[k] = from->lin[k] + d[0] * scale[0];
        } else if (el->kind == LWI_BALL) {
            lwi_cx v[3] = {el->sign * d[0], el->sign * d[1], el->sign * d[2]};
            lwi_cx dq[4];
            lwi_cx q[4];
            cayley(dq, v);
            if (el->sign > 0.0) {
                quat_mul(q, dq, from->quat[el->quat]);
            } else {
                quat_mul(q, from->quat[el->quat], dq);
            }
            renorm(q);
            memcpy(to->quat[el->quat], q, sizeof q);
        } else {
            lwi_cx before[3];
            lwi_cx after[3];
            lwi_cx rot[9];
            lwi_cx dq[4];
            lwi_cx q[4];
            num_quat_rot(rot, from->quat[el->quat]);
            num_rotate(before, rot, el->at);
            cayley(dq, d + 3);
            quat_mul(q, dq, from->quat[el->quat]);
            renorm(q);
            num_quat_rot(rot, q);
            num_rotate(after, rot, el->at);
            for (int i = 0; i < 3; i++) {
                to->pos_m[el->quat][i] =
                    from->pos_m[el->quat][i] + before[i] - after[i] + d[i] * scale[i];
            }
            memcpy(to->quat[el->quat], q, sizeof q);
        }
    }
}

size_t lwi_cobserve(lwi_cx *value, const lwi_system *sys, const lwi_cstate *st)
{
    size_t n = 0;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        size_t count = el->kind == LWI_FREE ? 12 : el->kind == LWI_BALL ? 9
                       : el->kind == LWI_SLIDE ? 1 : 2;
        if (value != NULL) {
            lwi_cx *v = value + n;
            if (el->kind == LWI_SLIDE) {
                v[0] = st->lin[k] / sys->length_m;
            } else if (count == 2) {
                v[0] = st->cs[k][0];
                v[1] = st->cs[k][1];
            } else {
                num_quat_rot(v, st->quat[el->quat]);
                for (int i = 0; i < 3 && count == 12; i++) {
                    v[9 + i] = st->pos_m[el->quat][i] / sys->length_m;
                }
            }
        }
        n += count;
    }
    return n;
}

void lwi_cobserve_gradient(lwi_cx *out, const lwi_cx *coef, const lwi_system *sys,
                           const lwi_cstate *st)
{
    size_t n = 0;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        const lwi_cx *c = coef + n;
        lwi_cx *slot = out + el->var;
        const double *scale = sys->var_scale + el->var;
        if (el->kind == LWI_SLIDE) {
            slot[0] = c[0] * scale[0] / sys->length_m;
            n += 1;
        } else if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
            slot[0] = scale[0] * (c[1] * st->cs[k][0] - c[0] * st->cs[k][1]);
            n += 2;
        } else {
            /* d R = [w] R column by column: row i of R changes by (e_i x ...):
             * sum c_ij (w x r_j)_i */
            lwi_cx r[9];
            lwi_cx g[3] = {0.0, 0.0, 0.0};
            num_quat_rot(r, st->quat[el->quat]);
            for (int j = 0; j < 3; j++) {
                lwi_cx cj[3] = {c[j], c[3 + j], c[6 + j]};
                lwi_cx rj[3] = {r[j], r[3 + j], r[6 + j]};
                lwi_cx t[3];
                num_cross(t, rj, cj);
                for (int i = 0; i < 3; i++) {
                    g[i] += t[i];
                }
            }
            if (el->kind == LWI_BALL) {
                /* The ball's own quaternion turns by el->sign * step on its left (or right). */
                lwi_cx h[3] = {g[0], g[1], g[2]};
                if (el->sign < 0.0) {
                    for (int i = 0; i < 3; i++) {
                        h[i] = -(r[i] * g[0] + r[3 + i] * g[1] + r[6 + i] * g[2]);
                    }
                }
                for (int i = 0; i < 3; i++) {
                    slot[i] = h[i];
                }
                n += 9;
            } else {
                /* Position: step translation, and what turning about the reference point adds. */
                lwi_cx arm[3];
                lwi_cx t[3];
                num_rotate(arm, r, el->at);
                num_cross(t, arm, c + 9);
                for (int i = 0; i < 3; i++) {
                    slot[i] = c[9 + i] * scale[i] / sys->length_m;
                    slot[3 + i] = g[i] - t[i] / sys->length_m;
                }
                n += 12;
            }
        }
    }
}

void lwi_cstate_copy(lwi_cstate *to, const lwi_cstate *from, const lwi_system *sys)
{
    memcpy(to->lin, from->lin, sys->n_element * sizeof to->lin[0]);
    memcpy(to->cs, from->cs, sys->n_element * sizeof to->cs[0]);
    memcpy(to->quat, from->quat, sys->n_quat * sizeof to->quat[0]);
    memcpy(to->pos_m, from->pos_m, sys->n_quat * sizeof to->pos_m[0]);
}

size_t lwi_cpack_size(const lwi_system *sys)
{
    size_t n = 0;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        n += el->given ? 0 : el->kind == LWI_FREE ? 7 : el->kind == LWI_BALL ? 4 : 3;
    }
    return n;
}

void lwi_cpack(lwi_cx *out, const lwi_system *sys, const lwi_cstate *st)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_FREE || el->kind == LWI_BALL) {
            memcpy(out, st->quat[el->quat], sizeof st->quat[0]);
            out += 4;
            if (el->kind == LWI_FREE) {
                memcpy(out, st->pos_m[el->quat], sizeof st->pos_m[0]);
                out += 3;
            }
        } else {
            out[0] = st->lin[k];
            out[1] = st->cs[k][0];
            out[2] = st->cs[k][1];
            out += 3;
        }
    }
}

void lwi_cunpack(lwi_cstate *st, const lwi_system *sys, const lwi_cx *in)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_FREE || el->kind == LWI_BALL) {
            memcpy(st->quat[el->quat], in, sizeof st->quat[0]);
            in += 4;
            if (el->kind == LWI_FREE) {
                memcpy(st->pos_m[el->quat], in, sizeof st->pos_m[0]);
                in += 3;
            }
        } else {
            st->lin[k] = in[0];
            st->cs[k][0] = in[1];
            st->cs[k][1] = in[2];
            in += 3;
        }
    }
}
