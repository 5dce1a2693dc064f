/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Drive rates by output rates on an interval: J = G_x - G_q F_q^-1 F_x, F the solved rows, G the
 * drives, q the unknowns, x the outputs. And whether the drives hold the tool. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "prove.h"

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
            p->row[block->var[c]] = lwi_pm_const(0.0);
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

bool lwi_rates_model(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    const lwi_system *sys = p->sys;
    size_t m = p->inputs.m;
    set_inputs(p);
    for (size_t b = 0; b < p->n_block; b++) {
        if (!block_rates(p, &p->block[b])) {
            p->stage = LWI_STAGE_BLOCK;
            p->limb = p->block[b].limb;
            return false;
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        unsigned short var[LWI_MAX_VARS];
        size_t n = lwi_terms_vars(var, sys, spec->drive[d].term, spec->drive[d].n_term);
        lwi_pm *out = p->rates + d * m;
        for (size_t i = 0; i < n; i++) {
            p->row[var[i]] = lwi_pm_const(0.0);
        }
        (void)lwi_pm_terms(&p->drive[d], p->row, out, sys, p->point, p->eval, spec->drive[d].term,
                           spec->drive[d].n_term, &p->inputs);
        for (size_t i = 0; i < n; i++) {
            const lwi_pm g = p->row[var[i]];
            bool none = lwi_pm_mag(g) == 0.0;
            for (size_t j = 0; j < m && !none; j++) {
                out[j] = lwi_pm_add(out[j], lwi_pm_mul(g, p->solved[var[i] * m + j]));
            }
        }
    }
    return true;
}
