/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How a singular value changes along motions, exactly. Let A K v = s u with G K = 0 (G the closure
 * rows), w = K v. Moving along x, the value changes by
 *     ds = u . (dA[x] w) - l . (dG[x] w),   G^T l = the part of A^T u that G can make,
 * since w must stay in the null space of G, which turns (first-order perturbation of a singular
 * value; Stewart & Sun, Matrix Perturbation Theory 1990, IV.2, for the restricted matrix).
 * Rows are functionals (f at p, m) on the relative twist of two nodes; twists change along x by the
 * Lie bracket of each joint screw with the motion of the body that carries it. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "../solve/newton.h"
#include "singular.h"

static void add_cross(double out[3], const double a[3], const double b[3])
{
    double c[3];
    lwi_cross(c, a, b);
    lwi_add(out, out, c);
}

/* Velocity of the point p of a body with twist t. */
static void velocity(double out[3], const lwi_twist *t, const double p[3])
{
    lwi_cross(out, t->w, p);
    lwi_add(out, out, t->v);
}

/* Adds rate times the unit screw of freedom i of element k. */
static void add_screw(lwi_twist *out, const lwi_system *sys, const lwi_eval *ev, size_t k, size_t i,
                      double rate)
{
    const lwi_element *el = &sys->element[k];
    double w[3] = {i % 3 == 0, i % 3 == 1, i % 3 == 2};
    if (el->kind == LWI_FREE && i < 3) {
        lwi_axpy(out->v, out->v, rate, w);
        return;
    }
    if (el->kind == LWI_BALL) {
        const double *r = ev->node[el->parent].rot;
        for (size_t c = 0; c < 3; c++) {
            w[c] = r[3 * c + i];
        }
    } else if (el->kind != LWI_FREE) {
        lwi_copy3(w, ev->w[k]);
    }
    if (el->kind == LWI_SLIDE) {
        lwi_axpy(out->v, out->v, rate, w);
        return;
    }
    double v[3];
    lwi_cross(v, ev->p[k], w);
    if (el->kind == LWI_HELIX) {
        lwi_axpy(v, v, el->pitch, w);
    }
    lwi_axpy(out->v, out->v, rate, v);
    lwi_axpy(out->w, out->w, rate, w);
}

static size_t freedoms(const lwi_element *el)
{
    return el->var < 0 ? 0 : el->kind == LWI_BALL ? 3 : el->kind == LWI_FREE ? 6 : 1;
}

void lwi_node_twists(lwi_twist *out, const lwi_system *sys, const lwi_eval *ev, const double *y)
{
    memset(out, 0, sys->n_node * sizeof *out);
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        size_t n = freedoms(el);
        lwi_twist *t = &out[el->child];
        *t = out[el->parent];
        for (size_t i = 0; i < n; i++) {
            size_t var = (size_t)el->var + i;
            add_screw(t, sys, ev, k, i, sys->var_scale[var] * y[var]);
        }
    }
}

/* Change along x of the twists along y: each screw is carried by the parent's motion, the turns of
 * a free body by its own point. */
static void twist_changes(lwi_twist *out, const lwi_system *sys, const lwi_eval *ev,
                          const lwi_twist *y, const lwi_twist *x)
{
    memset(out, 0, sys->n_node * sizeof *out);
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        lwi_twist *t = &out[el->child];
        *t = out[el->parent];
        if (freedoms(el) == 0) {
            continue;
        }
        lwi_twist own;
        lwi_sub(own.v, y[el->child].v, y[el->parent].v);
        lwi_sub(own.w, y[el->child].w, y[el->parent].w);
        if (el->kind == LWI_FREE) {
            double moved[3];
            velocity(moved, &x[el->child], ev->p[k]);
            add_cross(t->v, moved, own.w);
        } else {
            const lwi_twist *by = &x[el->parent];
            add_cross(t->w, by->w, own.w);
            add_cross(t->v, by->w, own.v);
            add_cross(t->v, by->v, own.w);
        }
    }
}

/* Change of f . (velocity at p of twist y) where f, p and y change by df, dp and dy. */
static double force_change(const double f[3], const double df[3], const double p[3],
                           const double dp[3], const lwi_twist *y, const lwi_twist *dy)
{
    double now[3];
    double then[3];
    velocity(now, y, p);
    velocity(then, dy, p);
    add_cross(then, y->w, dp);
    return lwi_dot(df, now) + lwi_dot(f, then);
}

static void relative(lwi_twist *out, const lwi_twist *t, size_t a, size_t b)
{
    lwi_sub(out->v, t[b].v, t[a].v);
    lwi_sub(out->w, t[b].w, t[a].w);
}

/* Of a rod: its rate of change of length (unit), or the row of a rod of fixed length. */
static double rod_change(const lwi_system *sys, size_t r, bool unit, const lwi_eval *ev,
                         const lwi_singular_work *s)
{
    const lwi_rod_info *rod = &sys->rod[r];
    double pa[3];
    double p[3];
    double d[3];
    double va[3];
    double vb[3];
    double dd[3];
    lwi_twist y;
    lwi_twist dy;
    lwi_frame_apply(pa, &ev->node[rod->a], rod->end[0]);
    lwi_frame_apply(p, &ev->node[rod->b], rod->end[1]);
    lwi_sub(d, p, pa);
    velocity(va, &s->x[rod->a], pa);
    velocity(vb, &s->x[rod->b], p);
    lwi_sub(dd, vb, va);
    double length = lwi_norm(d);
    double scale = unit ? 1.0 / length : 1.0 / (rod->length_m * sys->length_m);
    double along = unit ? lwi_dot(d, dd) / (length * length) : 0.0;
    for (int i = 0; i < 3; i++) {
        dd[i] = scale * (dd[i] - along * d[i]);
        d[i] *= scale;
    }
    relative(&y, s->y, rod->a, rod->b);
    relative(&dy, s->dy, rod->a, rod->b);
    return force_change(d, dd, p, vb, &y, &dy);
}

/* Change along x of (derivative of the row) . y. */
static double row_change(const lwi_system *sys, const lwi_row *row, const lwi_eval *ev,
                         const lwi_singular_work *s)
{
    lwi_twist y;
    lwi_twist dy;
    double p[3];
    double e[3];
    double u[3];
    double m[3];
    double dm[3] = {0, 0, 0};
    if (row->kind == LWI_ROW_ROD) {
        return rod_change(sys, (size_t)row->rod, false, ev, s);
    }
    if (row->kind == LWI_ROW_LINEAR) {
        double sum = 0.0;
        for (size_t t = 0; t < row->n_rod_term; t++) {
            sum += row->rod_factor[t] * rod_change(sys, (size_t)row->rod_term[t], true, ev, s);
        }
        return sum;
    }
    relative(&y, s->y, row->a, row->b);
    relative(&dy, s->dy, row->a, row->b);
    const lwi_twist *xa = &s->x[row->a];
    const lwi_twist *xb = &s->x[row->b];
    if (row->kind == LWI_ROW_POINT) {
        double f[3];
        double df[3];
        double dp[3];
        lwi_rot_apply(e, ev->node[row->a].rot, row->e);
        for (int i = 0; i < 3; i++) {
            f[i] = e[i] / sys->length_m;
        }
        lwi_cross(df, xa->w, f);
        lwi_frame_apply(p, &ev->node[row->b], row->pb);
        velocity(dp, xb, p);
        return force_change(f, df, p, dp, &y, &dy);
    }
    lwi_rot_apply(u, ev->node[row->b].rot, row->u);
    if (row->kind == LWI_ROW_AXIS) {
        double du[3];
        double de[3];
        lwi_rot_apply(e, ev->node[row->a].rot, row->e);
        lwi_cross(m, u, e);
        lwi_cross(du, xb->w, u);
        lwi_cross(de, xa->w, e);
        add_cross(dm, du, e);
        add_cross(dm, u, de);
    } else {
        lwi_copy3(m, u);
        lwi_cross(dm, xb->w, u);
    }
    return lwi_dot(dm, y.w) + lwi_dot(m, dy.w);
}

static double drives_change(const lwi_singular_place *at, const double *u,
                            const lwi_singular_work *s)
{
    const lw_spec *spec = at->model->spec;
    size_t n_scalar = lw_spec_coord_count(spec) - spec->n_rod;
    double sum = 0.0;
    for (size_t d = 0; d < spec->n_drive; d++) {
        double scale = spec->drive[d].turning ? u[d] : u[d] / at->model->length_m;
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            const lw_term *term = &spec->drive[d].term[t];
            if (term->coord >= n_scalar) {
                sum += scale * term->factor * rod_change(at->model->whole, term->coord - n_scalar,
                                                         true, &at->work->ev, s);
            }
        }
    }
    return sum;
}

/* Change of a turn output's axis while the tool body turns by w. */
static void axis_change(double out[3], const double rot[9], lw_output_kind kind, const double w[3])
{
    double a[3];
    double yaw_axis[3];
    double pitch_axis[3];
    lw_zyx_from_rot(a, rot);
    lwi_output_axis(yaw_axis, rot, LW_OUT_RZ);
    lwi_output_axis(pitch_axis, rot, LW_OUT_RY);
    double yaw = lwi_dot(yaw_axis, w);
    double pitch = lwi_dot(pitch_axis, w);
    double cy = cos(a[0]);
    double sy = sin(a[0]);
    double cp = cos(a[1]);
    double sp = sin(a[1]);
    cp = fabs(cp) < 1e-9 ? (cp < 0.0 ? -1e-9 : 1e-9) : cp;
    double by_yaw = kind == LW_OUT_RZ ? sp / cp : kind == LW_OUT_RY ? 1.0 : 1.0 / cp;
    double by_pitch = kind == LW_OUT_RZ ? 1.0 / (cp * cp) : kind == LW_OUT_RY ? 0.0
                                                                              : sp / (cp * cp);
    if (kind == LW_OUT_RY) {
        out[0] = -cy * yaw;
        out[1] = -sy * yaw;
    } else {
        out[0] = -sy * by_yaw * yaw + cy * by_pitch * pitch;
        out[1] = cy * by_yaw * yaw + sy * by_pitch * pitch;
    }
    out[2] = 0.0;
}

static size_t turn_outputs(const lw_spec *spec)
{
    size_t n = 0;
    for (size_t o = 0; o < spec->n_output; o++) {
        n += spec->output[o].kind >= LW_OUT_RX && spec->output[o].kind <= LW_OUT_RZ;
    }
    return n;
}

/* force, moment: NULL dm leaves their change out. */
static void wrench(double force[3], double moment[3], double dm[3], const double w[3],
                   const lwi_singular_place *at, const double *u)
{
    const lw_spec *spec = at->model->spec;
    size_t turns = turn_outputs(spec);
    memset(force, 0, 3 * sizeof *force);
    memset(moment, 0, 3 * sizeof *moment);
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        if (kind == LW_OUT_COORD) {
            continue;
        }
        double weight = u[o] * lwi_output_scale(at->model, o);
        if (kind <= LW_OUT_Z) {
            force[kind] += weight;
        } else if (turns == 3) {
            moment[kind - LW_OUT_RX] += weight;
        } else {
            double axis[3];
            lwi_output_axis(axis, at->solution->tool.rot, kind);
            lwi_axpy(moment, moment, weight, axis);
            if (dm != NULL) {
                axis_change(axis, at->solution->tool.rot, kind, w);
                lwi_axpy(dm, dm, weight, axis);
            }
        }
    }
}

void lwi_output_wrench(double force[3], double moment[3], const lwi_singular_place *at,
                       const double *u)
{
    wrench(force, moment, NULL, NULL, at, u);
}

static double tool_change(const lwi_singular_place *at, const double *u,
                          const lwi_singular_work *s)
{
    static const double rest[3] = {0, 0, 0};
    const lw_spec *spec = at->model->spec;
    size_t node = at->model->whole->body_node[at->tool->body];
    size_t n_scalar = lw_spec_coord_count(spec) - spec->n_rod;
    double force[3];
    double moment[3];
    double dm[3] = {0, 0, 0};
    double dp[3];
    wrench(force, moment, dm, s->x[node].w, at, u);
    velocity(dp, &s->x[node], at->solution->tool.pos_m);
    double sum = force_change(force, rest, at->solution->tool.pos_m, dp, &s->y[node],
                              &s->dy[node]) +
                 lwi_dot(dm, s->y[node].w) + lwi_dot(moment, s->dy[node].w);
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == LW_OUT_COORD && spec->output[o].coord >= n_scalar) {
            sum += u[o] * lwi_output_scale(at->model, o) *
                   rod_change(at->model->whole, spec->output[o].coord - n_scalar, true,
                              &at->work->ev, s);
        }
    }
    return sum;
}

/* u . (scaled rows) over the unknowns of the system, into s->row. */
static void weighed_row(const lwi_singular_place *at, lwi_of of, const double *u,
                        lwi_singular_work *s)
{
    const lw_spec *spec = at->model->spec;
    const lwi_system *sys = at->model->whole;
    const lw_work *work = at->work;
    double *row = s->motion; /* not yet in use */
    double unused;
    memset(s->row, 0, sys->n_var * sizeof *s->row);
    for (size_t d = 0; of == LWI_OF_DRIVES && d < spec->n_drive; d++) {
        double scale = spec->drive[d].turning ? u[d] : u[d] / at->model->length_m;
        (void)lwi_terms(&unused, row, sys, &work->state, &work->ev, spec->drive[d].term,
                        spec->drive[d].n_term);
        for (size_t i = 0; i < sys->n_var; i++) {
            s->row[i] += scale * row[i];
        }
    }
    if (of == LWI_OF_DRIVES) {
        return;
    }
    double force[3];
    double moment[3];
    wrench(force, moment, NULL, NULL, at, u);
    lwi_twist_row(s->row, sys, &work->ev, sys->body_node[at->tool->body],
                  at->solution->tool.pos_m, force, moment);
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == LW_OUT_COORD) {
            lw_term term = {.coord = spec->output[o].coord, .factor = 1.0};
            (void)lwi_terms(&unused, row, sys, &work->state, &work->ev, &term, 1);
            for (size_t i = 0; i < sys->n_var; i++) {
                s->row[i] += u[o] * lwi_output_scale(at->model, o) * row[i];
            }
        }
    }
}

bool lwi_singular_slope(double *out, const lwi_singular_place *at, lwi_of of, const double *u,
                        const double *v)
{
    const lwi_system *sys = at->model->whole;
    lwi_singular_work *s = at->work->singular_work;
    size_t m = at->rates->m;
    size_t rank = sys->n_var - m;
    weighed_row(at, of, u, s);
    if (!lwi_row_multipliers(s->multiplier, s->row, sys, rank, &at->work->newton)) {
        return false;
    }
    for (size_t i = 0; i < sys->n_var; i++) {
        double sum = 0.0;
        for (size_t j = 0; j < m; j++) {
            sum += at->work->k[i * m + j] * v[j];
        }
        s->motion[i] = sum;
    }
    lwi_node_twists(s->y, sys, &at->work->ev, s->motion);
    for (size_t j = 0; j < m; j++) {
        for (size_t i = 0; i < sys->n_var; i++) {
            s->motion[i] = at->work->k[i * m + j];
        }
        lwi_node_twists(s->x, sys, &at->work->ev, s->motion);
        twist_changes(s->dy, sys, &at->work->ev, s->y, s->x);
        double sum = of == LWI_OF_DRIVES ? drives_change(at, u, s) : tool_change(at, u, s);
        for (size_t r = 0; r < sys->n_row; r++) {
            double l = s->multiplier[r];
            if (l > 0.0 || l < 0.0) {
                sum -= l * row_change(sys, &sys->row[r], &at->work->ev, s);
            }
        }
        out[j] = sum;
    }
    return true;
}
