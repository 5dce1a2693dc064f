/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Let q be the scaled unknowns, C(q) q' = 0 the closure rows, T(q) q' = x' the outputs and A(q) the
 * drives. Over a way of the tool of length s (scaled), started where G = [T; C] has least singular
 * value g and changes by no more than b per unit of q (Frobenius norm),
 *
 *     |q'| <= 1 / (g - b |dq|),   so   g |dq| - b |dq|^2 / 2 <= s :
 *
 * while s is below that for some |dq| < g / b, the posture can be followed and no motion with the
 * tool at rest exists. No motion with the drives locked exists while |dq| < h / c, h and c the same
 * figures of [A; C] (Weyl's theorem for singular values).
 *
 * How fast rows change: where a point is moved by the turns t_k of some unknowns with speeds v_k,
 * the velocity it gets from unknown k changes with unknown l by at most max(t_l v_k, t_k v_l),
 * directions by t_k t_l, lengths of rods by v_k v_l / L more. Speeds are distances from axes, taken
 * where the posture is, and larger by a third of their root mean square, which covers moves of
 * |dq| <= 1 / (4 sqrt(n) t) with n unknowns in the chain: along them the speeds' norm grows by no
 * more than a third. The sum over all rows of squared bounds is a form in |dq|; its largest
 * eigenvalue is bounded by Collatz and Wielandt's quotients.
 *
 * Doubles with a factor UP; singular values less 1e-11 of the largest. */
#include "ball_any.h"

#include "../math/vec3.h"

#include <stdint.h>

#define UP (1.0 + 1e-9)
enum { VARS = LWI_BALL_ANY_VARS };

typedef struct chain {
    size_t n;
    size_t var[VARS];
    double turn[VARS], speed[VARS]; /* per scaled unknown: rad, m */
    double norm;                    /* of the speeds, grown */
} chain;

typedef struct gathering {
    const lw_model *m;
    const lwi_system *sys;
    const lwi_eval *ev;
    size_t n;
    double *form;   /* n x n, sum of c^2 D^T D */
    double *matrix; /* rows x n */
    size_t rows, room;
    double step; /* |dq| that all bounds cover */
    bool good;
} gathering;

static void add_unknown(chain *c, size_t var, double turn, double speed)
{
    for (size_t i = 0; i < c->n; i++) {
        if (c->var[i] == var) {
            c->turn[i] = fmax(c->turn[i], turn);
            c->speed[i] = fmax(c->speed[i], speed);
            return;
        }
    }
    if (c->n < VARS) {
        c->var[c->n] = var;
        c->turn[c->n] = turn;
        c->speed[c->n++] = speed;
    }
}

static void add_element(chain *c, const gathering *g, size_t k, const double p[3])
{
    const lwi_element *el = &g->sys->element[k];
    double d[3];
    if (el->var < 0) {
        return;
    }
    size_t var = (size_t)el->var;
    double scale = g->sys->var_scale[var];
    lwi_sub(d, p, g->ev->p[k]);
    double far = lwi_norm(d);
    switch (el->kind) {
    case LWI_SLIDE:
        add_unknown(c, var, 0.0, scale);
        break;
    case LWI_TURN:
    case LWI_HELIX: {
        double along = lwi_dot(d, g->ev->w[k]);
        double across = sqrt(fmax(far * far - along * along, 0.0));
        double pitch = el->kind == LWI_HELIX ? fabs(el->pitch) : 0.0;
        add_unknown(c, var, scale, scale * hypot(across, pitch));
        break;
    }
    case LWI_BALL:
        for (size_t i = 0; i < 3; i++) {
            add_unknown(c, var + i, g->sys->var_scale[var + i], far * g->sys->var_scale[var + i]);
        }
        break;
    case LWI_FREE:
        for (size_t i = 0; i < 3; i++) {
            add_unknown(c, var + i, 0.0, g->sys->var_scale[var + i]);
            add_unknown(c, var + 3 + i, g->sys->var_scale[var + 3 + i],
                        far * g->sys->var_scale[var + 3 + i]);
        }
        break;
    }
}

/* Grows the speeds and notes how far that covers. */
static void close_chain(chain *c, gathering *g)
{
    double sum = 0.0;
    double most = 0.0;
    for (size_t i = 0; i < c->n; i++) {
        sum += c->speed[i] * c->speed[i];
        most = fmax(most, c->turn[i]);
    }
    double norm = sqrt(sum);
    double root = sqrt((double)(c->n > 0 ? c->n : 1));
    if (most > 0.0) {
        g->step = fmin(g->step, 0.25 / (root * most));
    }
    for (size_t i = 0; i < c->n; i++) {
        c->speed[i] += most > 0.0 ? norm / (3.0 * root) * (c->turn[i] / most) : 0.0;
    }
    c->norm = 4.0 / 3.0 * norm;
}

static void of_links(chain *c, gathering *g, size_t link, size_t n, const double p[3])
{
    c->n = 0;
    for (size_t k = 0; k < n; k++) {
        add_element(c, g, (size_t)g->sys->link[link + k].element, p);
    }
    close_chain(c, g);
}

static void of_node(chain *c, gathering *g, size_t node, const double p[3])
{
    c->n = 0;
    for (size_t k = g->sys->n_element; k-- > 0;) {
        if (g->sys->element[k].child == node) {
            add_element(c, g, k, p);
            node = g->sys->element[k].parent;
        }
    }
    close_chain(c, g);
}

/* Adds (point D_p + turn D_t + pair v v^T)^2 to the form. */
static void add_form(gathering *g, const chain *c, double point, double turn, double pair)
{
    double d[VARS];
    for (size_t i = 0; i < c->n; i++) {
        for (size_t j = 0; j < c->n; j++) {
            d[j] = point * fmax(c->turn[i] * c->speed[j], c->turn[j] * c->speed[i]) +
                   turn * c->turn[i] * c->turn[j] + pair * c->speed[i] * c->speed[j];
        }
        for (size_t j = 0; j < c->n; j++) {
            double *row = g->form + c->var[j] * g->n;
            for (size_t k = 0; k < c->n; k++) {
                row[c->var[k]] += d[j] * d[k];
            }
        }
    }
}

static double *next_row(gathering *g)
{
    if ((g->rows + 1) * g->n > g->room) {
        g->good = false;
        return NULL;
    }
    double *row = g->matrix + g->rows++ * g->n;
    memset(row, 0, g->n * sizeof *row);
    return row;
}

/* A rod's length times `factor`. */
static void add_length(gathering *g, size_t rod, double factor)
{
    const lwi_rod_info *info = &g->sys->rod[rod];
    double p[3];
    chain c;
    lwi_frame_apply(p, &g->ev->node[info->b], info->end[1]);
    of_links(&c, g, info->link, info->n_link, p);
    double length = lwi_rod_length(g->sys, g->ev, rod);
    double least = 0.5 * length; /* lengths no less than half are covered */
    if (c.norm > 0.0) {
        g->step = fmin(g->step, 0.5 * length / c.norm);
    }
    add_form(g, &c, factor, 0.0, factor / least);
}

static void add_closure(gathering *g, const lwi_state *state)
{
    const lwi_system *sys = g->sys;
    for (size_t i = 0; i < sys->n_row && g->good; i++) {
        const lwi_row *row = &sys->row[i];
        double *out = next_row(g);
        double p[3];
        chain c;
        if (out == NULL) {
            return;
        }
        lwi_row_derivative(out, sys, row, state, g->ev);
        if (row->kind == LWI_ROW_LINEAR) {
            for (size_t t = 0; t < row->n_rod_term; t++) {
                /* one term's change and another's add up; bounded by the sum of their squares
                 * times their number */
                add_length(g, (size_t)row->rod_term[t],
                           fabs(row->rod_factor[t]) * sqrt((double)row->n_rod_term));
            }
            continue;
        }
        lwi_frame_apply(p, &g->ev->node[row->b], row->pb);
        of_links(&c, g, row->link, row->n_link, p);
        if (row->kind == LWI_ROW_POINT) {
            add_form(g, &c, 1.0 / sys->length_m, 0.0, 0.0);
        } else if (row->kind == LWI_ROW_ROD) {
            double length = sys->rod[row->rod].length_m;
            add_form(g, &c, 1.0 / sys->length_m, 0.0, 1.0 / (length * sys->length_m));
        } else {
            /* locked spins: the axis turns, and so does what it is measured against */
            add_form(g, &c, 0.0, row->kind == LWI_ROW_SPIN ? 2.0 : 1.0, 0.0);
        }
    }
}

static void add_terms(gathering *g, const lwi_state *state, const lw_term *term, size_t n,
                      double scale)
{
    double value;
    size_t scalar = lw_spec_coord_count(g->m->spec) - g->m->spec->n_rod;
    double *out = next_row(g);
    if (out == NULL) {
        return;
    }
    g->good = g->good && lwi_terms(&value, out, g->sys, state, g->ev, term, n);
    for (size_t v = 0; v < g->n; v++) {
        out[v] *= scale;
    }
    for (size_t t = 0; t < n; t++) {
        if (term[t].coord >= scalar) {
            add_length(g, term[t].coord - scalar, fabs(term[t].factor) * scale * sqrt((double)n));
        }
    }
}

/* Outputs, scaled; in the metric of the tool's motion. */
static bool add_outputs(gathering *g, const lwi_state *state, const lw_spec_tool *tool,
                        const lw_solution *sol, double *rows)
{
    const lw_spec *spec = g->m->spec;
    size_t node = g->sys->body_node[tool->body];
    size_t turns = 0;
    size_t shifts = 0;
    double over = 1.0 / g->m->length_m;
    chain c;
    lwi_twist_rows(rows, g->sys, g->ev, node, sol->tool.pos_m);
    for (size_t o = 0; o < spec->n_output && g->good; o++) {
        lw_output_kind kind = spec->output[o].kind;
        if (kind == LW_OUT_COORD) {
            lw_term term = {.coord = spec->output[o].coord, .factor = 1.0};
            add_terms(g, state, &term, 1, lwi_output_scale(g->m, o));
            continue;
        }
        double *out = next_row(g);
        for (size_t v = 0; out != NULL && v < g->n; v++) {
            out[v] = rows[(size_t)kind * g->n + v] * (kind <= LW_OUT_Z ? over : 1.0);
        }
        shifts += kind <= LW_OUT_Z;
        turns += kind > LW_OUT_Z;
    }
    of_node(&c, g, node, sol->tool.pos_m);
    if (shifts > 0) {
        add_form(g, &c, over, 0.0, 0.0);
    }
    if (turns > 0) {
        add_form(g, &c, 0.0, 1.0, 0.0);
    }
    /* One or three turns are those of the body itself; two are read from its attitude. */
    return turns == 0 || turns == 3 || (turns == 1 && g->m->completion.rot == LWI_ROT_AXIS);
}

/* Upper bound of the form's largest eigenvalue's root. */
static double change_of(gathering *g, double *v, double *w)
{
    size_t n = g->n;
    double most = 0.0;
    for (size_t i = 0; i < n; i++) {
        v[i] = 1.0;
    }
    for (int turn = 0; turn < 12; turn++) {
        double top = 0.0;
        most = 0.0;
        for (size_t i = 0; i < n; i++) {
            w[i] = 0.0;
            for (size_t j = 0; j < n; j++) {
                w[i] += g->form[i * n + j] * v[j];
            }
            most = fmax(most, w[i] / v[i]);
            top = fmax(top, w[i]);
        }
        for (size_t i = 0; i < n && top > 0.0; i++) {
            v[i] = w[i] / top + 1e-3;
        }
    }
    return sqrt(most) * UP;
}

static double least_of(gathering *g)
{
    double sv[VARS];
    if (g->rows < g->n) {
        return 0.0;
    }
    lwi_svd(g->matrix, g->rows, g->n, g->n, sv, NULL);
    return sv[g->n - 1] - 1e-11 * sv[0];
}

static void begin(gathering *g, const lw_model *m, lw_work *work)
{
    size_t side = m->whole->n_var > m->whole->n_row ? m->whole->n_var : m->whole->n_row;
    side = side > 64 ? side : 64;
    *g = (gathering){.m = m, .sys = m->whole, .ev = &work->ev, .n = m->whole->n_var, .good = true};
    g->form = work->matrix[2];
    g->matrix = work->matrix[1];
    g->room = side * side;
    g->step = INFINITY;
    memset(g->form, 0, g->n * g->n * sizeof *g->form);
}

/* How far unknowns may move, all together, until one of the limits that elements carry is met;
 * INFINITY without limits, 0 where one is not carried. */
static double limits_within(const lw_model *m, const lw_solution *sol)
{
    const lw_spec *spec = m->spec;
    double least = INFINITY;
    size_t coord = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        size_t n = lw_joint_coords(spec->joint[j].type);
        for (size_t k = 0; k < n; k++) {
            const lw_range *range = &spec->joint[j].range[k];
            double value = sol->config.coord[coord + k];
            double room = fmin(range->has_low ? value - range->low : INFINITY,
                               range->has_high ? range->high - value : INFINITY);
            int element = m->whole->coord_element[coord + k];
            if (!(room < INFINITY)) {
                continue;
            }
            if (element < 0 || m->whole->element[element].var < 0) {
                return 0.0;
            }
            least = fmin(least, room / m->whole->var_scale[m->whole->element[element].var]);
        }
        coord += n;
        if (spec->joint[j].type == LW_SPHERICAL && spec->joint[j].has_cone) {
            return 0.0;
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        if (spec->rod[r].swivel[0].present || spec->rod[r].swivel[1].present ||
            (lwi_rod_moves(spec, r) &&
             (spec->rod[r].range_m.has_low || spec->rod[r].range_m.has_high))) {
            return 0.0;
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        const lw_spec_drive *drive = &spec->drive[d];
        double room = fmin(drive->range.has_low ? sol->drive[d] - drive->range.low : INFINITY,
                           drive->range.has_high ? drive->range.high - sol->drive[d] : INFINITY);
        double steep = 0.0;
        for (size_t t = 0; t < drive->n_term && room < INFINITY; t++) {
            size_t c = drive->term[t].coord;
            int element = c < coord ? m->whole->coord_element[c] : -1;
            if (element < 0 || m->whole->element[element].var < 0) {
                return 0.0;
            }
            steep +=
                fabs(drive->term[t].factor) * m->whole->var_scale[m->whole->element[element].var];
        }
        least = steep > 0.0 ? fmin(least, room / steep) : least;
    }
    return fmax(least, 0.0);
}

void lwi_ball_any_at(lwi_ball_any *out, const lw_model *m, const lw_spec_tool *tool,
                     const lw_solution *sol, lw_work *work)
{
    gathering g;
    memset(out, 0, sizeof *out);
    if (m->whole->n_var == 0 || m->whole->n_var > VARS || 6 * m->whole->n_var > 64 * 64) {
        return;
    }
    begin(&g, m, work);
    bool exact = add_outputs(&g, &work->state, tool, sol, work->matrix[0]);
    add_closure(&g, &work->state);
    double b = change_of(&g, work->vector[0], work->vector[1]);
    double least = least_of(&g);
    double step = g.step;
    if (!g.good || !(least > 0.0) || !exact) {
        return;
    }
    double most = fmin(step, b > 0.0 ? 0.999 * least / b : step);
    most = fmin(most, 1e6);
    out->inverse = true;
    out->inverse_m = m->length_m * (least * most - 0.5 * b * most * most) / UP;
    double within = limits_within(m, sol);
    if (within > 0.0 && within < INFINITY) {
        double q = fmin(within, most);
        out->limit = true;
        out->limit_m = m->length_m * (least * q - 0.5 * b * q * q) / UP;
    }
    begin(&g, m, work);
    for (size_t d = 0; d < m->spec->n_drive && g.good; d++) {
        add_terms(&g, &work->state, m->spec->drive[d].term, m->spec->drive[d].n_term,
                  m->spec->drive[d].turning ? 1.0 : 1.0 / m->length_m);
    }
    add_closure(&g, &work->state);
    double c = change_of(&g, work->vector[0], work->vector[1]);
    double hold = least_of(&g);
    if (!g.good || !(hold > 0.0)) {
        return;
    }
    out->forward_none = c == 0.0; /* these rows never change */
    double q = fmin(fmin(most, g.step), c > 0.0 ? hold / c : INFINITY);
    out->forward = true;
    out->forward_m = m->length_m * (least * q - 0.5 * b * q * q) / UP;
}
