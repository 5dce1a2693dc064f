/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evaluator: displacements of nodes, rows with exact derivatives, twist rows, sums of
 * coordinates, closure errors told in metres and radians. core/homotopy/complex.c continues the
 * same rows to complex numbers. */
#include "../math/vec3.h"
#include "system.h"

/* Rotation about a real unit axis by an angle given through sine and cosine. */
static void turn_rotation(double out[9], const double u[3], double c, double s)
{
    double v = 1.0 - c;
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

/* X_child = X_parent E where E turns by rot about the reference point `at`. */
static void turn_about(lw_frame *child, const lw_frame *parent, const double rot[9],
                       const double at[3])
{
    double before[3];
    double after[3];
    lwi_rot_mul(child->rot, parent->rot, rot);
    lwi_frame_apply(before, parent, at);
    lwi_rot_apply(after, child->rot, at);
    for (int i = 0; i < 3; i++) {
        child->pos_m[i] = before[i] - after[i];
    }
}

static void eval_ball(lwi_eval *ev, const lwi_element *el, size_t k, const lwi_state *st)
{
    const lw_frame *parent = &ev->node[el->parent];
    lw_frame *child = &ev->node[el->child];
    double rot[9];
    if (el->kind == LWI_BALL) {
        double q[4];
        for (int i = 0; i < 4; i++) {
            q[i] = st->quat[el->quat][i] * (i > 0 ? el->sign : 1.0);
        }
        lw_rot_from_quat(rot, q);
        turn_about(child, parent, rot, el->at);
        lwi_frame_apply(ev->p[k], parent, el->at);
    } else {
        lw_rot_from_quat(child->rot, st->quat[el->quat]);
        for (int i = 0; i < 3; i++) {
            child->pos_m[i] = st->pos_m[el->quat][i];
        }
        lwi_frame_apply(ev->p[k], child, el->at);
    }
}

void lwi_eval_nodes(lwi_eval *ev, const lwi_system *sys, const lwi_state *st)
{
    for (size_t n = 0; n < sys->n_node; n++) {
        if (sys->node_given[n]) {
            ev->node[n] = st->given[n];
        }
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        const lw_frame *parent = &ev->node[el->parent];
        lw_frame *child = &ev->node[el->child];
        if (el->kind == LWI_BALL || el->kind == LWI_FREE) {
            eval_ball(ev, el, k, st);
            continue;
        }
        double q = st->value[k] * el->sign;
        lwi_rot_apply(ev->w[k], parent->rot, el->axis);
        if (el->kind == LWI_SLIDE) {
            *child = *parent;
            for (int i = 0; i < 3; i++) {
                child->pos_m[i] += ev->w[k][i] * q;
                ev->w[k][i] *= el->sign;
            }
            continue;
        }
        double rot[9];
        turn_rotation(rot, el->axis, cos(q), sin(q));
        turn_about(child, parent, rot, el->at);
        lwi_frame_apply(ev->p[k], parent, el->at);
        for (int i = 0; i < 3; i++) {
            if (el->kind == LWI_HELIX) {
                child->pos_m[i] += ev->w[k][i] * q * el->pitch;
            }
            ev->w[k][i] *= el->sign;
        }
    }
}

/* Adds `factor` times the derivative of the functional (f at p, m) by element k. */
static inline void add_screw(double *out, const lwi_system *sys, const lwi_eval *ev, size_t k,
                             double factor, const double p[3], const double f[3], const double m[3])
{
    const lwi_element *el = &sys->element[k];
    if (el->var < 0) {
        return;
    }
    double *slot = out + el->var;
    const double *scale = sys->var_scale + el->var;
    if (el->kind == LWI_SLIDE) {
        slot[0] += factor * scale[0] * lwi_dot(f, ev->w[k]);
        return;
    }
    double arm[3];
    double turn[3];
    for (int i = 0; i < 3; i++) {
        arm[i] = p[i] - ev->p[k][i];
    }
    lwi_cross(turn, arm, f);
    for (int i = 0; i < 3; i++) {
        turn[i] += m[i];
    }
    if (el->kind == LWI_BALL) {
        /* Tangents of a ball stand in the parent's axes. */
        const double *r = ev->node[el->parent].rot;
        for (int i = 0; i < 3; i++) {
            double along = r[i] * turn[0] + r[3 + i] * turn[1] + r[6 + i] * turn[2];
            slot[i] += factor * scale[i] * along;
        }
    } else if (el->kind == LWI_FREE) {
        for (int i = 0; i < 3; i++) {
            slot[i] += factor * scale[i] * f[i];
            slot[3 + i] += factor * scale[3 + i] * turn[i];
        }
    } else {
        double d = lwi_dot(turn, ev->w[k]);
        if (el->kind == LWI_HELIX) {
            d += el->pitch * lwi_dot(f, ev->w[k]);
        }
        slot[0] += factor * scale[0] * d;
    }
}

/* Point and functional of a row that lives on a relative twist; returns the residual. */
static double row_functional(const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                             const lwi_eval *ev, double p[3], double f[3], double m[3])
{
    const lw_frame *xa = &ev->node[row->a];
    const lw_frame *xb = &ev->node[row->b];
    double pa[3];
    for (int i = 0; i < 3; i++) {
        p[i] = f[i] = m[i] = 0.0;
    }
    if (row->kind == LWI_ROW_AXIS) {
        double e[3];
        double u[3];
        lwi_rot_apply(e, xa->rot, row->e);
        lwi_rot_apply(u, xb->rot, row->u);
        lwi_cross(m, u, e);
        return lwi_dot(e, u) - row->value;
    }
    if (row->kind == LWI_ROW_SPIN) {
        lwi_rot_apply(m, xb->rot, row->u);
        return 0.0;
    }
    lwi_frame_apply(pa, xa, row->pa);
    lwi_frame_apply(p, xb, row->pb);
    if (row->kind == LWI_ROW_POINT) {
        double sum = 0.0;
        lwi_rot_apply(f, xa->rot, row->e);
        for (int i = 0; i < 3; i++) {
            f[i] /= sys->length_m;
            sum += f[i] * (p[i] - pa[i]);
        }
        return sum;
    }
    /* A rod. */
    double square = 0.0;
    double scale = 1.0 / (sys->rod[row->rod].length_m * sys->length_m);
    double length = st->rod_length_m[row->rod];
    for (int i = 0; i < 3; i++) {
        double d = p[i] - pa[i];
        f[i] = d * scale;
        square += d * d;
    }
    return 0.5 * scale * (square - length * length);
}

static double rod_functional(const lwi_system *sys, size_t r, const lwi_eval *ev, double p[3],
                             double f[3])
{
    const lwi_rod_info *rod = &sys->rod[r];
    double pa[3];
    double square = 0.0;
    lwi_frame_apply(pa, &ev->node[rod->a], rod->end[0]);
    lwi_frame_apply(p, &ev->node[rod->b], rod->end[1]);
    for (int i = 0; i < 3; i++) {
        f[i] = p[i] - pa[i];
        square += f[i] * f[i];
    }
    double length = sqrt(square);
    for (int i = 0; i < 3; i++) {
        f[i] /= length;
    }
    return length;
}

double lwi_rod_length(const lwi_system *sys, const lwi_eval *ev, size_t rod)
{
    double p[3];
    double f[3];
    return rod_functional(sys, rod, ev, p, f);
}

static void add_rod(double *out, const lwi_system *sys, const lwi_eval *ev, size_t r, double factor)
{
    static const double none[3] = {0.0, 0.0, 0.0};
    double p[3];
    double f[3];
    const lwi_rod_info *rod = &sys->rod[r];
    (void)rod_functional(sys, r, ev, p, f);
    for (size_t k = 0; k < rod->n_link; k++) {
        const lwi_link *link = &sys->link[rod->link + k];
        add_screw(out, sys, ev, (size_t)link->element, factor * link->sign, p, f, none);
    }
}

double lwi_row_residual(const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                        const lwi_eval *ev)
{
    double p[3];
    double f[3];
    double m[3];
    if (row->kind != LWI_ROW_LINEAR) {
        return row_functional(sys, row, st, ev, p, f, m);
    }
    double sum = 0.0;
    for (size_t t = 0; t < row->n_term; t++) {
        sum += row->term_factor[t] * st->value[row->term_element[t]];
    }
    for (size_t t = 0; t < row->n_rod_term; t++) {
        size_t r = (size_t)row->rod_term[t];
        sum += row->rod_factor[t] * (lwi_rod_length(sys, ev, r) - sys->rod[r].length_m);
    }
    return sum;
}

/* Residual and derivative of one row; out has n_var entries and is overwritten. */
static double row_both(double *out, const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                       const lwi_eval *ev)
{
    for (size_t i = 0; i < sys->n_var; i++) {
        out[i] = 0.0;
    }
    if (row->kind == LWI_ROW_LINEAR) {
        for (size_t t = 0; t < row->n_term; t++) {
            int var = sys->element[row->term_element[t]].var;
            if (var >= 0) {
                out[var] += row->term_factor[t] * sys->var_scale[var];
            }
        }
        for (size_t t = 0; t < row->n_rod_term; t++) {
            add_rod(out, sys, ev, (size_t)row->rod_term[t], row->rod_factor[t]);
        }
        return lwi_row_residual(sys, row, st, ev);
    }
    double p[3];
    double f[3];
    double m[3];
    double res = row_functional(sys, row, st, ev, p, f, m);
    for (size_t k = 0; k < row->n_link; k++) {
        const lwi_link *link = &sys->link[row->link + k];
        add_screw(out, sys, ev, (size_t)link->element, link->sign, p, f, m);
    }
    return res;
}

void lwi_row_derivative(double *out, const lwi_system *sys, const lwi_row *row, const lwi_state *st,
                        const lwi_eval *ev)
{
    (void)row_both(out, sys, row, st, ev);
}

size_t lwi_eval_rows(double *res, double *jac, size_t ld, const lwi_system *sys,
                     const lwi_state *st, const lwi_eval *ev)
{
    for (size_t i = 0; i < sys->n_row; i++) {
        if (jac != NULL) {
            res[i] = row_both(jac + i * ld, sys, &sys->row[i], st, ev);
        } else {
            res[i] = lwi_row_residual(sys, &sys->row[i], st, ev);
        }
    }
    return sys->n_row;
}

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
            add_screw(out, sys, ev, k, 1.0, p, f, m);
            at = sys->element[k].parent;
        }
    }
}

/* Column of element k: velocity and turn of a body point p that moves with it. */
static void screw_column(double *out, size_t n, const lwi_system *sys, const lwi_eval *ev, size_t k,
                         const double p[3])
{
    const lwi_element *el = &sys->element[k];
    const double *w = ev->w[k];
    double scale = sys->var_scale[el->var];
    double v[3];
    double arm[3];
    if (el->kind == LWI_SLIDE) {
        for (size_t i = 0; i < 3; i++) {
            out[i * n] = scale * w[i];
        }
        return;
    }
    lwi_sub(arm, p, ev->p[k]);
    lwi_cross(v, w, arm);
    for (size_t i = 0; i < 3; i++) {
        double along = el->kind == LWI_HELIX ? v[i] + el->pitch * w[i] : v[i];
        out[i * n] = scale * along;
        out[(3 + i) * n] = scale * w[i];
    }
}

void lwi_twist_rows(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                    const double p[3])
{
    static const double zero[3] = {0.0, 0.0, 0.0};
    size_t n = sys->n_var;
    size_t at = node;
    memset(out, 0, 6 * n * sizeof *out);
    for (size_t k = sys->n_element; k-- > 0;) {
        const lwi_element *el = &sys->element[k];
        if (el->child != at) {
            continue;
        }
        at = el->parent;
        if (el->var >= 0 && (el->kind == LWI_BALL || el->kind == LWI_FREE)) {
            for (size_t c = 0; c < 6; c++) {
                double unit[3] = {c % 3 == 0, c % 3 == 1, c % 3 == 2};
                add_screw(out + c * n, sys, ev, k, 1.0, p, c < 3 ? unit : zero,
                              c < 3 ? zero : unit);
            }
        } else if (el->var >= 0) {
            screw_column(out + el->var, n, sys, ev, k, p);
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
                add_rod(out, sys, ev, r, term[t].factor);
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
