/* SPDX-License-Identifier: GPL-3.0-or-later */
/* First-order facts on an interval, by a basis of parameters as many as the freedoms. Moves of the
 * tool: the outputs are the parameters x, and with F the solved rows, G the drives, q the unknowns
 * the drives go by G_x - G_q F_q^-1 F_x. Moves by readings: the leading readings are the
 * parameters, and everything follows from d unknown / d reading = M^-1 (0 1). */
#include "../math/vec3.h"
#include "prove.h"

static lwi_pm zero(void)
{
    return lwi_pm_const(0.0);
}

/* How the tool body moves by each output; see query/pose.c for what the others do meanwhile. */
static void set_inputs(lwi_prove *p)
{
    const lw_model *m = p->model;
    const lwi_completion *c = &m->completion;
    lwi_pm_inputs *in = &p->inputs;
    const lwi_pm_frame *body = &p->point->given[p->tool_node];
    for (int i = 0; i < 3; i++) {
        in->at[i] = lwi_pm_add(body->pos_m[i], p->arm[i]);
    }
    for (size_t o = 0; o < in->m; o++) {
        lw_output_kind kind = m->spec->output[o].kind;
        double *w = in->w[o];
        w[0] = w[1] = w[2] = 0.0;
        for (int i = 0; i < 3; i++) {
            in->v[o][i] = lwi_pm_const(kind == (lw_output_kind)(LW_OUT_X + i) ? 1.0 : 0.0);
        }
        if (kind >= LW_OUT_RX && kind <= LW_OUT_RZ) {
            if (c->rot == LWI_ROT_FULL) {
                w[kind - LW_OUT_RX] = 1.0;
            } else {
                lwi_copy3(w, c->axis);
            }
        } else if (kind == LW_OUT_COORD && c->rot == LWI_ROT_COORD && c->output == o) {
            for (int i = 0; i < 3; i++) {
                w[i] = c->factor * c->axis[i];
            }
        }
        /* Components of the displacement that are no outputs stand still: there the tool point
         * moves by the turn alone. */
        for (int i = 0; i < 3; i++) {
            int a = (i + 1) % 3;
            int b = (i + 2) % 3;
            if (!c->pos_output[i] && (w[a] != 0.0 || w[b] != 0.0)) {
                in->v[o][i] = lwi_pm_axpy(lwi_pm_scale(p->arm[b], w[a]), -w[b], p->arm[a]);
            }
        }
        for (int i = 0; i < 3; i++) {
            p->vel[o][i] = in->v[o][i];
            p->turn[o][i] = lwi_pm_const(w[i]);
        }
        for (size_t k = 0; k < in->m; k++) {
            p->coord_rate[o][k] = lwi_pm_const(k == o ? 1.0 : 0.0);
        }
    }
}

/* d unknown / d output of one block: -F_q^-1 F_x. */
static bool block_rates(lwi_prove *p, const lwi_prove_block *block)
{
    size_t n = block->n;
    size_t m = p->inputs.m;
    lwi_pm *jac = p->jac + block->jac;
    lwi_pm *in = p->in + block->in;
    lwi_pm *x = p->big[0];
    for (size_t i = 0; i < n; i++) {
        for (size_t c = 0; c < n; c++) {
            p->row[block->var[c]] = zero();
        }
        (void)lwi_pm_row(p->row, in + i * m, p->sys, &p->sys->row[block->pick[i]], p->point,
                         p->eval, &p->inputs);
        for (size_t c = 0; c < n; c++) {
            jac[i * n + c] = p->row[block->var[c]];
        }
    }
    if (n == 1) {
        lwi_pm inverse = lwi_pm_recip(jac[0]);
        for (size_t j = 0; j < m; j++) {
            x[j] = lwi_pm_mul(inverse, in[j]);
        }
    } else if (!lwi_pm_solve_square(x, jac, n, in, m, p->solver)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < m; j++) {
            p->solved[block->var[i] * m + j] = lwi_pm_neg(x[i * m + j]);
        }
    }
    return true;
}

/* d unknown / d leading reading: the last columns of M^-1; lengths stand scaled in M. */
static bool lead_rates(lwi_prove *p)
{
    const lwi_prove_block *block = &p->block[0];
    size_t n = block->n;
    size_t m = p->n_lead;
    lwi_pm *b = p->big[1];
    lwi_pm *x = p->big[0];
    lwi_block_models(p, block);
    for (size_t i = 0; i < n * m; i++) {
        b[i] = zero();
    }
    for (size_t l = 0; l < m; l++) {
        bool turning = p->model->spec->drive[p->lead[l]].turning;
        b[(n - m + l) * m + l] = lwi_pm_const(turning ? 1.0 : 1.0 / p->sys->length_m);
    }
    if (!lwi_pm_solve_square(x, p->jac + block->jac, n, b, m, p->solver)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < m; j++) {
            p->solved[block->var[i] * m + j] = x[i * m + j];
        }
    }
    return true;
}

/* Adds row times the rates of the unknowns it sees; row is by unknown. */
static void through(lwi_pm *out, const lwi_prove *p, const lwi_pm *row, const unsigned short *var,
                    size_t n)
{
    size_t m = p->inputs.m;
    for (size_t i = 0; i < n; i++) {
        if (lwi_pm_mag(row[var[i]]) == 0.0) {
            continue;
        }
        for (size_t j = 0; j < m; j++) {
            out[j] = lwi_pm_add(out[j], lwi_pm_mul(row[var[i]], p->solved[var[i] * m + j]));
        }
    }
}

/* Value of a sum of coordinates and its rates. */
static void sum_rates(lwi_pm *value, lwi_pm *out, lwi_prove *p, const lw_term *term, size_t n_term)
{
    unsigned short var[LWI_MAX_VARS];
    size_t n = lwi_terms_vars(var, p->sys, term, n_term);
    for (size_t i = 0; i < n; i++) {
        p->row[var[i]] = zero();
    }
    (void)lwi_pm_terms(value, p->row, out, p->sys, p->point, p->eval, term, n_term, &p->inputs);
    through(out, p, p->row, var, n);
}

/* The tool by the leading readings, output joints too. */
static void tool_rates(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    const lwi_system *sys = p->sys;
    size_t n = sys->n_var;
    size_t m = p->inputs.m;
    size_t node = sys->body_node[p->tool->body];
    unsigned short var[LWI_MAX_VARS];
    size_t n_var = lwi_node_vars(var, sys, node);
    lwi_pm *rows = p->big[1];
    lwi_pm at[3];
    for (size_t i = 0; i < 6 * n; i++) {
        rows[i] = zero();
    }
    lwi_pm_place(at, &p->eval->node[node], p->tool->frame.pos_m);
    lwi_pm_twist_rows(rows, n, sys, p->eval, node, at);
    for (size_t c = 0; c < 6; c++) {
        lwi_pm sum[LW_MAX_OUTPUTS];
        for (size_t j = 0; j < m; j++) {
            sum[j] = zero();
        }
        through(sum, p, rows + c * n, var, n_var);
        for (size_t j = 0; j < m; j++) {
            *(c < 3 ? &p->vel[j][c] : &p->turn[j][c - 3]) = sum[j];
        }
    }
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_term term = {.coord = spec->output[o].coord, .factor = 1.0};
        lwi_pm value;
        if (spec->output[o].kind == LW_OUT_COORD) {
            sum_rates(&value, p->coord_rate[o], p, &term, 1);
        }
    }
}

bool lwi_rates_model(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    size_t m = p->inputs.m;
    if (!p->joints) {
        set_inputs(p);
    }
    for (size_t b = 0; b < p->n_block; b++) {
        if (p->joints ? !lead_rates(p) : !block_rates(p, &p->block[b])) {
            p->stage = LWI_STAGE_BLOCK;
            p->limb = p->block[b].limb;
            return false;
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        sum_rates(&p->drive[d], p->rates + d * m, p, spec->drive[d].term, spec->drive[d].n_term);
    }
    if (p->joints) {
        tool_rates(p);
    }
    return true;
}

/* Drives by outputs, A T^-1. False where T may be singular, or where the angles that are outputs
 * are not those of turns about fixed axes. */
bool lwi_rates_by_output(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    const lwi_completion *c = &p->model->completion;
    size_t m = p->inputs.m;
    lwi_pm *t = p->big[0];
    lwi_pm *b = p->big[1];
    if (!p->joints) {
        memcpy(p->by_output, p->rates, spec->n_drive * m * sizeof *p->rates);
        return true;
    }
    for (size_t o = 0; o < m; o++) {
        lw_output_kind kind = spec->output[o].kind;
        for (size_t j = 0; j < m; j++) {
            lwi_pm *to = &t[j * m + o]; /* transposed */
            if (kind == LW_OUT_COORD) {
                *to = p->coord_rate[o][j];
            } else if (kind <= LW_OUT_Z) {
                *to = p->vel[j][kind];
            } else if (c->rot == LWI_ROT_FULL) {
                *to = p->turn[j][kind - LW_OUT_RX];
            } else if (c->rot == LWI_ROT_AXIS) {
                *to = lwi_pm_dot3k(c->axis, p->turn[j]);
            } else {
                return false;
            }
        }
    }
    for (size_t j = 0; j < m; j++) {
        for (size_t d = 0; d < spec->n_drive; d++) {
            b[j * spec->n_drive + d] = p->rates[d * m + j];
        }
    }
    if (!lwi_pm_solve_square(b, t, m, b, spec->n_drive, p->solver)) {
        return false;
    }
    for (size_t o = 0; o < m; o++) {
        for (size_t d = 0; d < spec->n_drive; d++) {
            p->by_output[d * m + o] = b[o * spec->n_drive + d];
        }
    }
    return true;
}
