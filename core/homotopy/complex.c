/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Complex evaluation of closure rows for the path tracker. Compiled with limited-range complex
 * arithmetic: operands are finite by construction, the tracker checks what it accepts. */
#include "complex.h"

#include <string.h>

static inline lwi_cx dot3(const lwi_cx a[3], const lwi_cx b[3])
{
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

static inline void cross3(lwi_cx out[3], const lwi_cx a[3], const lwi_cx b[3])
{
    out[0] = a[1] * b[2] - a[2] * b[1];
    out[1] = a[2] * b[0] - a[0] * b[2];
    out[2] = a[0] * b[1] - a[1] * b[0];
}

static inline void rotate(lwi_cx out[3], const lwi_cx r[9], const double v[3])
{
    for (int i = 0; i < 3; i++) {
        out[i] = r[3 * i] * v[0] + r[3 * i + 1] * v[1] + r[3 * i + 2] * v[2];
    }
}

static inline void place(lwi_cx out[3], const lwi_cframe *x, const double p[3])
{
    rotate(out, x->rot, p);
    for (int i = 0; i < 3; i++) {
        out[i] += x->pos_m[i];
    }
}

static void matmul(lwi_cx out[9], const lwi_cx a[9], const lwi_cx b[9])
{
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            out[3 * i + j] = a[3 * i] * b[j] + a[3 * i + 1] * b[3 + j] + a[3 * i + 2] * b[6 + j];
        }
    }
}

static void quat_rot(lwi_cx rot[9], const lwi_cx q[4])
{
    lwi_cx w = q[0];
    lwi_cx x = q[1];
    lwi_cx y = q[2];
    lwi_cx z = q[3];
    rot[0] = w * w + x * x - y * y - z * z;
    rot[1] = 2.0 * (x * y - w * z);
    rot[2] = 2.0 * (x * z + w * y);
    rot[3] = 2.0 * (x * y + w * z);
    rot[4] = w * w - x * x + y * y - z * z;
    rot[5] = 2.0 * (y * z - w * x);
    rot[6] = 2.0 * (x * z - w * y);
    rot[7] = 2.0 * (y * z + w * x);
    rot[8] = w * w - x * x - y * y + z * z;
}

static void turn_rot(lwi_cx out[9], const double u[3], lwi_cx c, lwi_cx s)
{
    lwi_cx v = 1.0 - c;
    out[0] = c + v * (u[0] * u[0]);
    out[1] = v * (u[0] * u[1]) - s * u[2];
    out[2] = v * (u[0] * u[2]) + s * u[1];
    out[3] = v * (u[1] * u[0]) + s * u[2];
    out[4] = c + v * (u[1] * u[1]);
    out[5] = v * (u[1] * u[2]) - s * u[0];
    out[6] = v * (u[2] * u[0]) - s * u[1];
    out[7] = v * (u[2] * u[1]) + s * u[0];
    out[8] = c + v * (u[2] * u[2]);
}

static void turn_about(lwi_cframe *child, const lwi_cframe *parent, const lwi_cx rot[9],
                       const double at[3], const lwi_cx at_now[3])
{
    lwi_cx after[3];
    matmul(child->rot, parent->rot, rot);
    rotate(after, child->rot, at);
    for (int i = 0; i < 3; i++) {
        child->pos_m[i] = at_now[i] - after[i];
    }
}

void lwi_ceval_nodes(lwi_ceval *ev, const lwi_system *sys, const lwi_cstate *st,
                     const lwi_cinput *in)
{
    for (size_t n = 0; n < sys->n_node; n++) {
        if (sys->node_given[n]) {
            ev->node[n] = in->node[n];
        }
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        const lwi_cframe *parent = &ev->node[el->parent];
        lwi_cframe *child = &ev->node[el->child];
        lwi_cx rot[9];
        if (el->kind == LWI_FREE) {
            quat_rot(child->rot, st->quat[el->quat]);
            memcpy(child->pos_m, st->pos_m[el->quat], sizeof child->pos_m);
            place(ev->p[k], child, el->at);
            continue;
        }
        if (el->kind == LWI_BALL) {
            lwi_cx q[4];
            for (int i = 0; i < 4; i++) {
                q[i] = st->quat[el->quat][i] * (i > 0 ? el->sign : 1.0);
            }
            quat_rot(rot, q);
            place(ev->p[k], parent, el->at);
            turn_about(child, parent, rot, el->at, ev->p[k]);
            continue;
        }
        rotate(ev->w[k], parent->rot, el->axis);
        if (el->kind == LWI_SLIDE) {
            lwi_cx q = (el->given ? in->lin[k] : st->lin[k]) * el->sign;
            *child = *parent;
            for (int i = 0; i < 3; i++) {
                child->pos_m[i] += ev->w[k][i] * q;
                ev->w[k][i] *= el->sign;
            }
            continue;
        }
        const lwi_cx *cs = el->given ? in->cs[k] : st->cs[k];
        turn_rot(rot, el->axis, cs[0], cs[1] * el->sign);
        place(ev->p[k], parent, el->at);
        turn_about(child, parent, rot, el->at, ev->p[k]);
        if (el->kind == LWI_HELIX) {
            lwi_cx q = (el->given ? in->lin[k] : st->lin[k]) * (el->sign * el->pitch);
            for (int i = 0; i < 3; i++) {
                child->pos_m[i] += ev->w[k][i] * q;
            }
        }
        for (int i = 0; i < 3; i++) {
            ev->w[k][i] *= el->sign;
        }
    }
}

typedef struct sink {
    const lwi_system *sys;
    const lwi_cinput *in;
    const lwi_ceval *ev;
    lwi_cx *row;  /* NULL: no derivative */
    lwi_cx *rate; /* NULL: no rate */
    bool rooted;  /* some node besides the frame is given */
} sink;

static void add_screw(const sink *s, size_t k, double factor, const lwi_cx p[3], const lwi_cx f[3],
                      const lwi_cx m[3])
{
    const lwi_element *el = &s->sys->element[k];
    const lwi_cx *w = s->ev->w[k];
    if (el->kind == LWI_SLIDE) {
        lwi_cx d = factor * dot3(f, w);
        if (el->given) {
            if (s->rate != NULL) {
                *s->rate += d * s->in->lin_rate[k];
            }
        } else if (s->row != NULL) {
            s->row[el->var] += d * s->sys->var_scale[el->var];
        }
        return;
    }
    lwi_cx arm[3];
    lwi_cx turn[3];
    for (int i = 0; i < 3; i++) {
        arm[i] = p[i] - s->ev->p[k][i];
    }
    cross3(turn, arm, f);
    for (int i = 0; i < 3; i++) {
        turn[i] += m[i];
    }
    if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
        lwi_cx d = dot3(turn, w);
        if (el->kind == LWI_HELIX) {
            d += el->pitch * dot3(f, w);
        }
        d *= factor;
        if (el->given) {
            if (s->rate != NULL) {
                *s->rate += d * s->in->turn_rate[k];
            }
        } else if (s->row != NULL) {
            s->row[el->var] += d * s->sys->var_scale[el->var];
        }
        return;
    }
    if (s->row == NULL) {
        return;
    }
    lwi_cx *slot = s->row + el->var;
    const double *scale = s->sys->var_scale + el->var;
    if (el->kind == LWI_BALL) {
        const lwi_cx *r = s->ev->node[el->parent].rot;
        for (int i = 0; i < 3; i++) {
            slot[i] += factor * (r[i] * turn[0] + r[3 + i] * turn[1] + r[6 + i] * turn[2]);
        }
    } else {
        for (int i = 0; i < 3; i++) {
            slot[i] += factor * scale[i] * f[i];
            slot[3 + i] += factor * turn[i];
        }
    }
}

/* Given nodes at the roots of a chain move with their inputs. */
static void add_root(const sink *s, size_t node, double factor, const lwi_cx p[3],
                     const lwi_cx f[3], const lwi_cx m[3])
{
    lwi_cx turn[3];
    if (s->rate == NULL || node == 0) {
        return;
    }
    cross3(turn, p, f);
    for (int i = 0; i < 3; i++) {
        turn[i] += m[i];
    }
    *s->rate += factor * (dot3(turn, s->in->node_w[node]) + dot3(f, s->in->node_v[node]));
}

static size_t root_of(const lwi_system *sys, size_t node)
{
    for (size_t k = sys->n_element; k-- > 0;) {
        if (sys->element[k].child == node) {
            node = sys->element[k].parent;
        }
    }
    return node;
}

static void add_links(const sink *s, size_t a, size_t b, size_t link, size_t n, const lwi_cx p[3],
                      const lwi_cx f[3], const lwi_cx m[3])
{
    for (size_t k = 0; k < n; k++) {
        const lwi_link *l = &s->sys->link[link + k];
        add_screw(s, (size_t)l->element, l->sign, p, f, m);
    }
    if (s->rate != NULL && s->rooted) {
        size_t ra = root_of(s->sys, a);
        size_t rb = root_of(s->sys, b);
        if (ra != rb) {
            add_root(s, rb, 1.0, p, f, m);
            add_root(s, ra, -1.0, p, f, m);
        }
    }
}

static lwi_cx linear_row(const sink *s, const lwi_row *row, const lwi_cstate *st)
{
    lwi_cx sum = 0.0;
    for (size_t t = 0; t < row->n_term; t++) {
        int k = row->term_element[t];
        const lwi_element *el = &s->sys->element[k];
        sum += row->term_factor[t] * (el->given ? s->in->lin[k] : st->lin[k]);
        if (el->given) {
            if (s->rate != NULL) {
                *s->rate += row->term_factor[t] * (el->kind == LWI_SLIDE ? s->in->lin_rate[k]
                                                                        : s->in->turn_rate[k]);
            }
        } else if (s->row != NULL) {
            s->row[el->var] += row->term_factor[t] * s->sys->var_scale[el->var];
        }
    }
    return sum;
}

static lwi_cx one_row(const sink *s, const lwi_row *row, const lwi_cstate *st)
{
    const lwi_cframe *xa = &s->ev->node[row->a];
    const lwi_cframe *xb = &s->ev->node[row->b];
    lwi_cx p[3] = {0.0, 0.0, 0.0};
    lwi_cx f[3] = {0.0, 0.0, 0.0};
    lwi_cx m[3] = {0.0, 0.0, 0.0};
    lwi_cx res = 0.0;
    if (row->kind == LWI_ROW_LINEAR) {
        return linear_row(s, row, st);
    }
    if (row->kind == LWI_ROW_AXIS) {
        lwi_cx e[3];
        lwi_cx u[3];
        rotate(e, xa->rot, row->e);
        rotate(u, xb->rot, row->u);
        cross3(m, u, e);
        res = dot3(e, u) - row->value;
    } else if (row->kind == LWI_ROW_SPIN) {
        rotate(m, xb->rot, row->u);
    } else {
        lwi_cx pa[3];
        place(pa, xa, row->pa);
        place(p, xb, row->pb);
        if (row->kind == LWI_ROW_POINT) {
            rotate(f, xa->rot, row->e);
            for (int i = 0; i < 3; i++) {
                f[i] *= 1.0 / s->sys->length_m;
                res += f[i] * (p[i] - pa[i]);
            }
        } else {
            double scale = 1.0 / (s->sys->rod[row->rod].length_m * s->sys->length_m);
            lwi_cx length = s->in->rod_m[row->rod];
            lwi_cx square = 0.0;
            for (int i = 0; i < 3; i++) {
                lwi_cx d = p[i] - pa[i];
                f[i] = d * scale;
                square += d * d;
            }
            res = (0.5 * scale) * (square - length * length);
            if (s->rate != NULL) {
                *s->rate -= scale * length * s->in->rod_rate[row->rod];
            }
        }
    }
    if (s->row != NULL || s->rate != NULL) {
        add_links(s, row->a, row->b, row->link, row->n_link, p, f, m);
    }
    return res;
}

void lwi_ceval_rows(lwi_cx *res, lwi_cx *jac, lwi_cx *rate, const lwi_system *sys,
                    const lwi_cstate *st, const lwi_cinput *in, const lwi_ceval *ev)
{
    sink s = {.sys = sys, .in = in, .ev = ev};
    for (size_t n = 1; n < sys->n_node; n++) {
        s.rooted = s.rooted || sys->node_given[n];
    }
    if (jac != NULL) {
        memset(jac, 0, sys->n_row * sys->n_var * sizeof *jac);
    }
    for (size_t i = 0; i < sys->n_row; i++) {
        s.row = jac != NULL ? jac + i * sys->n_var : NULL;
        if (rate != NULL) {
            rate[i] = 0.0;
            s.rate = &rate[i];
        }
        res[i] = one_row(&s, &sys->row[i], st);
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
            quat_rot(rot, from->quat[el->quat]);
            rotate(before, rot, el->at);
            cayley(dq, d + 3);
            quat_mul(q, dq, from->quat[el->quat]);
            renorm(q);
            quat_rot(rot, q);
            rotate(after, rot, el->at);
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
                quat_rot(v, st->quat[el->quat]);
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
            quat_rot(r, st->quat[el->quat]);
            for (int j = 0; j < 3; j++) {
                lwi_cx cj[3] = {c[j], c[3 + j], c[6 + j]};
                lwi_cx rj[3] = {r[j], r[3 + j], r[6 + j]};
                lwi_cx t[3];
                cross3(t, rj, cj);
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
                rotate(arm, r, el->at);
                cross3(t, arm, c + 9);
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
