/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rates: null space, drive rates, output rates, tool twist. */
#include "rates.h"

#include "../math/tol.h"
#include "../math/vec3.h"

static void through_k(double *out, const double *row, const lw_model *m, size_t left,
                      const lw_work *work)
{
    size_t n = m->whole->n_var;
    for (size_t j = 0; j < left; j++) {
        out[j] = 0.0;
    }
    for (size_t v = 0; v < n; v++) {
        double r = row[v];
        const double *k = work->k + v * left;
        for (size_t j = 0; r != 0.0 && j < left; j++) {
            out[j] += r * k[j];
        }
    }
}

void lwi_output_axis(double rate[3], const double rot[9], lw_output_kind kind)
{
    double zyx[3];
    lw_zyx_from_rot(zyx, rot);
    lwi_zyx_axis(rate, zyx, (size_t)LW_OUT_RZ - (size_t)kind);
}

static void output_rates(const lw_model *m, const lw_spec_tool *tool, lwi_rates *r, lw_work *work)
{
    const lw_spec *spec = m->spec;
    size_t left = r->m;
    size_t turns = 0;
    double rot[9];
    double *row = work->vector[0];
    for (size_t o = 0; o < spec->n_output; o++) {
        turns += spec->output[o].kind >= LW_OUT_RX && spec->output[o].kind <= LW_OUT_RZ;
    }
    lwi_rot_mul(rot, work->ev.node[m->whole->body_node[tool->body]].rot, tool->frame.rot);
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        double *out = work->tk + o * left;
        if (kind == LW_OUT_COORD) {
            double value;
            lw_term term = {.coord = spec->output[o].coord, .factor = 1.0};
            (void)lwi_terms(&value, row, m->whole, &work->state, &work->ev, &term, 1);
            through_k(out, row, m, left, work);
        } else if (kind <= LW_OUT_Z) {
            memcpy(out, work->twist + (size_t)kind * left, left * sizeof *out);
        } else {
            /* All three rotations: the angular velocity itself, which has no singular attitude. */
            double rate[3] = {0, 0, 0};
            if (turns == 3) {
                rate[kind - LW_OUT_RX] = 1.0;
            } else {
                lwi_output_axis(rate, rot, kind);
            }
            for (size_t j = 0; j < left; j++) {
                out[j] = rate[0] * work->twist[3 * left + j] + rate[1] * work->twist[4 * left + j] +
                         rate[2] * work->twist[5 * left + j];
            }
        }
    }
    r->n_output = spec->n_output;
}

/* Everything that follows from the null space in work->k, of r->m columns. */
static void rates_through_k(lwi_rates *r, const lw_model *m, const lw_spec_tool *tool,
                            const double point_m[3], lw_work *work)
{
    const lwi_system *sys = m->whole;
    size_t left = r->m;
    double *row = work->vector[0];
    r->n_drive = m->spec->n_drive;
    for (size_t d = 0; d < r->n_drive; d++) {
        double value;
        (void)lwi_terms(&value, row, sys, &work->state, &work->ev, m->spec->drive[d].term,
                        m->spec->drive[d].n_term);
        through_k(work->ak + d * left, row, m, left, work);
    }
    size_t node = sys->body_node[tool->body];
    double *rows = work->matrix[0];
    lwi_twist_rows(rows, sys, &work->ev, node, point_m);
    for (size_t c = 0; c < 6; c++) {
        through_k(work->twist + c * left, rows + c * sys->n_var, m, left, work);
    }
    output_rates(m, tool, r, work);
}

void lwi_rates_at(lwi_rates *r, const lw_model *m, const lw_spec_tool *tool,
                  const lw_config *config, const double point_m[3], lw_work *work)
{
    const lwi_system *sys = m->whole;
    lwi_state_from_config(&work->state, sys, config);
    lwi_eval_nodes(&work->ev, sys, &work->state);
    r->m = m->mobility;
    r->closure_ratio =
        lwi_null_space(work->k, sys, m->rank, &work->state, &work->ev, &work->newton);
    rates_through_k(r, m, tool, point_m, work);
}

void lwi_rates_widen(lwi_rates *r, const lw_model *m, const lw_spec_tool *tool,
                     const double point_m[3], double threshold, lw_work *work)
{
    r->m = lwi_null_space_here(work->k, m->whole, m->rank, threshold, &work->newton);
    rates_through_k(r, m, tool, point_m, work);
}

void lwi_scaled_drives(double *out, const lw_model *m, const lwi_rates *r, const lw_work *work)
{
    for (size_t d = 0; d < r->n_drive; d++) {
        double scale = m->spec->drive[d].turning ? 1.0 : 1.0 / m->length_m;
        for (size_t j = 0; j < r->m; j++) {
            out[d * r->m + j] = scale * work->ak[d * r->m + j];
        }
    }
}

double lwi_output_scale(const lw_model *m, size_t output)
{
    lw_output_kind kind = m->spec->output[output].kind;
    bool length = kind <= LW_OUT_Z || (kind == LW_OUT_COORD &&
                                       !lw_spec_coord_turning(m->spec,
                                                              m->spec->output[output].coord));
    return length ? 1.0 / m->length_m : 1.0;
}

void lwi_scaled_outputs(double *out, const lw_model *m, const lwi_rates *r, const lw_work *work)
{
    for (size_t o = 0; o < r->n_output; o++) {
        double scale = lwi_output_scale(m, o);
        for (size_t j = 0; j < r->m; j++) {
            out[o * r->m + j] = scale * work->tk[o * r->m + j];
        }
    }
}

double lwi_factor(const double *a, size_t n_in, size_t m, const double *weight, lw_work *work)
{
    double *qr = work->matrix[0];
    for (size_t i = 0; i < n_in; i++) {
        double w = weight != NULL ? 1.0 / weight[i] : 1.0;
        for (size_t j = 0; j < m; j++) {
            qr[i * m + j] = w * a[i * m + j];
        }
    }
    size_t steps = lwi_qrp(qr, n_in, m, m, work->vector[0], work->index);
    double first = steps == m ? fabs(qr[0]) : 0.0;
    return first > 0.0 ? fabs(qr[(m - 1) * m + m - 1]) / first : 0.0;
}

/* All columns at a time, so that the inner loops run along rows. */
static void reflect_all(double *e, size_t n_in, size_t m, const lw_work *work)
{
    const double *qr = work->matrix[0];
    double *sum = work->vector[1];
    for (size_t k = 0; k < m; k++) {
        memcpy(sum, e + k * n_in, n_in * sizeof *sum);
        for (size_t i = k + 1; i < n_in; i++) {
            double v = qr[i * m + k];
            for (size_t c = 0; c < n_in; c++) {
                sum[c] += v * e[i * n_in + c];
            }
        }
        for (size_t c = 0; c < n_in; c++) {
            sum[c] *= work->vector[0][k];
            e[k * n_in + c] -= sum[c];
        }
        for (size_t i = k + 1; i < n_in; i++) {
            double v = qr[i * m + k];
            for (size_t c = 0; c < n_in; c++) {
                e[i * n_in + c] -= v * sum[c];
            }
        }
    }
}

const double *lwi_invert(size_t n_in, size_t m, const double *weight, lw_work *work)
{
    const double *qr = work->matrix[0];
    double *e = work->matrix[0] + n_in * m;
    double *p = e + n_in * n_in;
    memset(e, 0, n_in * n_in * sizeof *e);
    for (size_t i = 0; i < n_in; i++) {
        e[i * n_in + i] = weight != NULL ? 1.0 / weight[i] : 1.0;
    }
    reflect_all(e, n_in, m, work);
    for (size_t k = m; k-- > 0;) {
        double *row = p + work->index[k] * n_in;
        memcpy(row, e + k * n_in, n_in * sizeof *row);
        for (size_t j = k + 1; j < m; j++) {
            const double *known = p + work->index[j] * n_in;
            for (size_t c = 0; c < n_in; c++) {
                row[c] -= qr[k * m + j] * known[c];
            }
        }
        for (size_t c = 0; c < n_in; c++) {
            row[c] /= qr[k * m + k];
        }
    }
    return p;
}

void lwi_product(double *out, const double *b, size_t n_out, size_t m, const double *p, size_t n_in)
{
    for (size_t o = 0; o < n_out; o++) {
        double *row = out + o * n_in;
        memset(row, 0, n_in * sizeof *row);
        for (size_t j = 0; j < m; j++) {
            double f = b[o * m + j];
            for (size_t c = 0; c < n_in; c++) {
                row[c] += f * p[j * n_in + c];
            }
        }
    }
}

bool lwi_solve_through(double *out, const double *a, size_t n_in, const double *b, size_t n_out,
                       size_t m, const double *weight, lw_work *work)
{
    if (!(lwi_factor(a, n_in, m, weight, work) > 1e-12)) {
        return false;
    }
    lwi_product(out, b, n_out, m, lwi_invert(n_in, m, weight, work), n_in);
    return true;
}
