/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Jacobian question: output rates per drive rate and back. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "rates.h"

/* Turns the three-vectors of the twist rows into tool axes. */
static void twist_to_tool(double *twist, size_t n, const double rot[9])
{
    for (size_t half = 0; half < 2; half++) {
        for (size_t j = 0; j < n; j++) {
            double v[3];
            double t[3];
            for (size_t i = 0; i < 3; i++) {
                v[i] = twist[(3 * half + i) * n + j];
            }
            lwi_rot_back(t, rot, v);
            for (size_t i = 0; i < 3; i++) {
                twist[(3 * half + i) * n + j] = t[i];
            }
        }
    }
}

/* Factors the rows divided by `weight` for lwi_invert; true where the least singular value of
 * `scaled` is above the threshold of rank times the largest. Where the weights are the scales,
 * the diagonal of the factor settles nearly every case: its last entry is at most 2^m times the
 * least singular value and its first at least the largest over sqrt(m) (Golub & Van Loan, Matrix
 * Computations, 5.4.2). The rest is told by the singular values themselves. */
static bool factor(const double *a, size_t n, size_t m, const double *weight, bool weight_scales,
                   double *scaled, lw_work *work)
{
    double *sv = work->vector[1];
    double ratio = n >= m ? lwi_factor(a, n, m, weight, work) : 0.0;
    if (weight_scales && m <= 12 && ratio > 4096.0 * 4.0 * LWI_RANK_POSTURE) {
        return true;
    }
    if (n < m) {
        return false;
    }
    lwi_svd(scaled, n, m, m, sv, NULL);
    return ratio > 1e-12 && sv[m - 1] > LWI_RANK_POSTURE * sv[0];
}

static void reference_point(double point[3], const lw_solution *sol, const lw_jacobian_ask *ask)
{
    if (!ask->has_point) {
        lwi_copy3(point, sol->tool.pos_m);
    } else if (ask->in_tool) {
        lwi_frame_apply(point, &sol->tool, ask->point_m);
    } else {
        lwi_copy3(point, ask->point_m);
    }
}

static double drive_scale(const lw_model *m, size_t d)
{
    return m->spec->drive[d].turning ? 1.0 : 1.0 / m->length_m;
}

/* Condition number of output per drive rates with lengths over the characteristic length. */
static double scaled_condition(const lw_jacobian_answer *answer, const lw_model *m,
                               const lwi_rates *rates, lw_work *work)
{
    double *a = work->matrix[1];
    double *t = work->matrix[2];
    double *j = work->matrix[3];
    size_t n_in = rates->n_drive;
    if (n_in == rates->m) { /* no spare drives, so weights do not matter: scale what is known */
        for (size_t o = 0; o < rates->n_output; o++) {
            double scale = lwi_output_scale(m, o);
            for (size_t d = 0; d < n_in; d++) {
                j[o * n_in + d] = scale * answer->forward[o * n_in + d] / drive_scale(m, d);
            }
        }
    } else {
        lwi_scaled_drives(a, m, rates, work);
        lwi_scaled_outputs(t, m, rates, work);
        if (!lwi_solve_through(j, a, n_in, t, rates->n_output, rates->m, NULL, work)) {
            return 0.0;
        }
    }
    /* n_output x n_drive: its condition is that of the smaller side. */
    double *sv = work->vector[0];
    size_t n = rates->n_output < n_in ? rates->n_output : n_in;
    lwi_svd(j, rates->n_output, n_in, n_in, sv, NULL);
    return sv[n - 1] > LWI_RANK_POSTURE * sv[0] ? sv[0] / sv[n - 1] : 0.0;
}

/* Empties an answer as far as this mechanism uses it: the whole is 7 kB. */
static void clear(lw_jacobian_answer *a, const lw_spec *spec)
{
    size_t n = spec->n_output * spec->n_drive * sizeof(double);
    a->outcome = LW_OUTCOME_NONE;
    a->reason = NULL;
    a->solution = NULL;
    a->n_output = spec->n_output;
    a->n_drive = spec->n_drive;
    a->has_forward = a->has_inverse = false;
    memset(a->forward, 0, n);
    memset(a->inverse, 0, n);
    memset(a->twist, 0, 6 * spec->n_drive * sizeof(double));
    a->condition_forward = 0.0;
}

lw_code lw_jacobian(const lw_jacobian_answer **out, const lw_model *m, const lw_jacobian_ask *ask,
                    lw_work *work, lw_err *err)
{
    lw_jacobian_answer *a = &work->jacobian;
    const lw_posture_answer *posture;
    double point[3];
    double weight[LW_MAX_DRIVES + LW_MAX_OUTPUTS];
    lwi_rates rates;
    *out = NULL;
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    lw_code rc = lw_posture(&posture, m, ask->tool, ask->tool_written, ask->posture, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    clear(a, m->spec);
    *out = a;
    a->outcome = posture->outcome;
    a->reason = posture->reason;
    a->solution = posture->solution;
    if (posture->solution == NULL) {
        return LW_OK;
    }
    if (a->outcome == LW_OUTCOME_LIMIT) {
        a->outcome = LW_OUTCOME_OK; /* rates exist beyond limits too; the solution tells of them */
        a->reason = "the posture is beyond a limit";
    }
    reference_point(point, posture->solution, ask);
    lwi_rates_at(&rates, m, tool, &posture->solution->config, point, work);
    if (ask->in_tool) {
        twist_to_tool(work->twist, rates.m, posture->solution->tool.rot);
        for (size_t o = 0; o < rates.n_output; o++) {
            if (m->spec->output[o].kind <= LW_OUT_Z) {
                memcpy(work->tk + o * rates.m, work->twist + m->spec->output[o].kind * rates.m,
                       rates.m * sizeof *work->tk);
            }
        }
    }
    /* Without spare drives the weights do not matter, and the scales serve. */
    bool spare = rates.n_drive > rates.m;
    for (size_t d = 0; d < rates.n_drive; d++) {
        weight[d] = spare ? lwi_drive_sigma(m, d) : 1.0 / drive_scale(m, d);
    }
    lwi_scaled_drives(work->matrix[1], m, &rates, work);
    bool held =
        factor(work->ak, rates.n_drive, rates.m, weight, !spare, work->matrix[1], work);
    if (held) {
        a->has_forward = true;
        const double *back = lwi_invert(rates.n_drive, rates.m, weight, work);
        lwi_product(a->forward, work->tk, rates.n_output, rates.m, back, rates.n_drive);
        lwi_product(a->twist, work->twist, 6, rates.m, back, rates.n_drive);
    }
    for (size_t o = 0; o < rates.n_output; o++) {
        weight[o] = 1.0 / lwi_output_scale(m, o);
    }
    lwi_scaled_outputs(work->matrix[1], m, &rates, work);
    bool led = rates.n_output == rates.m &&
               factor(work->tk, rates.n_output, rates.m, weight, true, work->matrix[1], work);
    if (led) {
        a->has_inverse = true;
        const double *back = lwi_invert(rates.n_output, rates.m, weight, work);
        lwi_product(a->inverse, work->ak, rates.n_drive, rates.m, back, rates.n_output);
    }
    a->condition_forward = a->has_forward ? scaled_condition(a, m, &rates, work) : 0.0;
    if (!held || !led) {
        a->outcome = LW_OUTCOME_SINGULAR;
        a->reason = !held ? "forward singularity: the drives do not hold the posture"
                          : "inverse singularity: a tool direction is lost";
        if (held && rates.n_output != rates.m) {
            a->outcome = LW_OUTCOME_OK;
            a->reason = "kinematically redundant: outputs do not determine drive rates";
        }
    }
    return LW_OK;
}
