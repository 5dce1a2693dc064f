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

static double condition(const double *a, size_t n, size_t m, lw_work *work)
{
    double *sv = work->vector[0];
    memcpy(work->matrix[0], a, n * m * sizeof *a);
    lwi_svd(work->matrix[0], n, m, m, sv, NULL);
    double least = n >= m ? sv[m - 1] : 0.0;
    return least > LWI_RANK_POSTURE * sv[0] ? sv[0] / least : 0.0;
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

/* Condition number of output per drive rates with lengths over the characteristic length. */
static double scaled_condition(const lw_model *m, const lwi_rates *rates, lw_work *work)
{
    double *a = work->matrix[1];
    double *t = work->matrix[2];
    double *j = work->matrix[3];
    lwi_scaled_drives(a, m, rates, work);
    lwi_scaled_outputs(t, m, rates, work);
    if (!lwi_solve_through(j, a, rates->n_drive, t, rates->n_output, rates->m, NULL, work)) {
        return 0.0;
    }
    /* n_output x n_drive: its condition is that of the smaller side. */
    double *sv = work->vector[0];
    size_t n = rates->n_output < rates->n_drive ? rates->n_output : rates->n_drive;
    memcpy(work->matrix[0], j, rates->n_output * rates->n_drive * sizeof *j);
    lwi_svd(work->matrix[0], rates->n_output, rates->n_drive, rates->n_drive, sv, NULL);
    double c = sv[n - 1] > LWI_RANK_POSTURE * sv[0] ? sv[0] / sv[n - 1] : 0.0;
    return c;
}

lw_code lw_jacobian(const lw_jacobian_answer **out, const lw_model *m, const lw_jacobian_ask *ask,
                    lw_work *work, lw_err *err)
{
    lw_jacobian_answer *a = &work->jacobian;
    const lw_posture_answer *posture;
    double point[3];
    double weight[LW_MAX_DRIVES];
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
    memset(a, 0, sizeof *a);
    *out = a;
    a->outcome = posture->outcome;
    a->reason = posture->reason;
    a->solution = posture->solution;
    a->n_output = m->spec->n_output;
    a->n_drive = m->spec->n_drive;
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
    for (size_t d = 0; d < rates.n_drive; d++) {
        weight[d] = lwi_drive_sigma(m, d);
    }
    lwi_scaled_drives(work->matrix[1], m, &rates, work);
    bool held = condition(work->matrix[1], rates.n_drive, rates.m, work) > 0.0;
    lwi_scaled_outputs(work->matrix[1], m, &rates, work);
    bool led = rates.n_output == rates.m &&
               condition(work->matrix[1], rates.n_output, rates.m, work) > 0.0;
    a->has_forward =
        held && lwi_solve_through(a->forward, work->ak, rates.n_drive, work->tk, rates.n_output,
                                  rates.m, weight, work);
    if (held) {
        (void)lwi_solve_through(a->twist, work->ak, rates.n_drive, work->twist, 6, rates.m, weight,
                                work);
    }
    a->has_inverse = led && lwi_solve_through(a->inverse, work->tk, rates.n_output, work->ak,
                                              rates.n_drive, rates.m, NULL, work);
    a->condition_forward = a->has_forward ? scaled_condition(m, &rates, work) : 0.0;
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
