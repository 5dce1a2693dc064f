/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Complete solution sets in tests, see lwt_all.h. */
#include "lwt_all.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "lwt.h"

void lwt_machine_load_prepared(lwt_machine *m, unsigned long long seed, unsigned long max_paths)
{
    lw_code code = lwt_machine_report(m);
    if (code != LW_OK) {
        lwt_fail("%s was refused: %s: %s", m->spec->name, m->err.where, m->err.msg);
    }
    code = lw_model_prepare(m->model, seed, max_paths, NULL, &m->err);
    if (code != LW_OK) {
        lwt_fail("%s was not prepared: %s", m->spec->name, m->err.msg);
    }
    code = lw_work_new(&m->work, m->model, &m->err);
    if (code != LW_OK) {
        lwt_fail("%s got no work: %s", m->spec->name, m->err.msg);
    }
}

const lw_set_info *lwt_forward_set(const lwt_machine *m)
{
    return &lw_model_report(m->model)->forward_set;
}

const lw_set_info *lwt_inverse_set(const lwt_machine *m)
{
    return &lw_model_report(m->model)->inverse_set;
}

const lw_forward_answer *lwt_forward_all(lwt_machine *m, const double *drive)
{
    lw_forward_ask ask = {.readings = lwt_by_drives(m, drive, NULL), .all = true};
    const lw_forward_answer *answer = NULL;
    lw_code code = lw_forward(&answer, m->model, &ask, m->work, &m->err);
    if (code != LW_OK) {
        lwt_fail("forward, all: %s: %s", m->err.where, m->err.msg);
    }
    return answer;
}

void lwt_readings_of_lengths(double *drive, const lwt_machine *m, const double *length_m)
{
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        double d[3];
        const lw_spec_rod *rod = &m->spec->rod[i];
        for (size_t k = 0; k < 3; k++) {
            d[k] = rod->end_m[1][k] - rod->end_m[0][k];
        }
        drive[i] = length_m[i] - lwt_norm(d);
    }
}

static bool same_point(const lw_config *a, const lw_config *b, size_t body, const double at[3],
                       double tol)
{
    double p[3];
    double q[3];
    lwt_frame_point(p, &a->body[body], at);
    lwt_frame_point(q, &b->body[body], at);
    return fabs(p[0] - q[0]) <= tol && fabs(p[1] - q[1]) <= tol && fabs(p[2] - q[2]) <= tol;
}

bool lwt_same_posture(const lw_spec *spec, const lw_solution *a, const lw_solution *b, double tol)
{
    if (!(lwt_frame_distance(&a->tool, &b->tool) <= tol) ||
        !(lwt_frame_angle(&a->tool, &b->tool) <= tol)) {
        return false;
    }
    for (size_t i = 0; i < spec->n_drive; i++) {
        double gap = a->drive[i] - b->drive[i];
        if (!(fabs(spec->drive[i].turning ? lwt_wrap(gap) : gap) <= tol)) {
            return false;
        }
    }
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        bool placed = joint->type != LW_PRISMATIC && joint->type != LW_PLANAR;
        if (joint->type != LW_SPHERICAL && joint->type != LW_FIXED) {
            double u[3];
            double v[3];
            lwt_frame_vector(u, &a->config.body[joint->body[0]], joint->axis);
            lwt_frame_vector(v, &b->config.body[joint->body[0]], joint->axis);
            if (!(fabs(u[0] - v[0]) <= tol) || !(fabs(u[1] - v[1]) <= tol) ||
                !(fabs(u[2] - v[2]) <= tol)) {
                return false;
            }
        }
        if (placed && (!same_point(&a->config, &b->config, joint->body[0], joint->at_m, tol) ||
                       !same_point(&a->config, &b->config, joint->body[1], joint->at_m, tol))) {
            return false;
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        for (size_t e = 0; e < 2; e++) {
            if (!same_point(&a->config, &b->config, spec->rod[r].body[e], spec->rod[r].end_m[e],
                            tol)) {
                return false;
            }
        }
    }
    return true;
}

void lwt_check_solutions(const lwt_machine *m, const lw_solution *solution, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        double position = 1.0;
        double angle = 1.0;
        lwt_closure(m->spec, &solution[i].config, &position, &angle);
        if (!(position <= 1e-9) || !(angle <= 1e-9)) {
            lwt_fail("%s: solution %zu does not close: %g m, %g rad", m->spec->name, i, position,
                     angle);
        }
        for (size_t k = 0; k < i; k++) {
            if (lwt_same_posture(m->spec, &solution[i], &solution[k], 1e-7)) {
                lwt_fail("%s: solutions %zu and %zu are one posture", m->spec->name, k, i);
            }
        }
    }
}

void lwt_expect_closed(const lw_set_info *set, size_t solutions)
{
    assert_true(set->present);
    assert_true(set->closed);
    assert_int_equal(set->solutions, solutions);
}

void lwt_expect_all(const lwt_machine *m, const lw_forward_answer *a, int complex_count)
{
    assert_true(a->complete);
    assert_int_equal(a->basis, LW_BASIS_TRACE);
    assert_int_equal(a->found.not_converged, 0);
    assert_int_equal(a->found.complex_count, complex_count);
    assert_int_equal(a->found.real, (int)a->n_solution);
    lwt_check_solutions(m, a->solution, a->n_solution);
}

size_t lwt_find_tool(const lw_solution *solution, size_t n, const lw_frame *tool, double tol_m,
                     double tol_rad)
{
    for (size_t i = 0; i < n; i++) {
        if (lwt_frame_distance(&solution[i].tool, tool) <= tol_m &&
            lwt_frame_angle(&solution[i].tool, tool) <= tol_rad) {
            return i;
        }
    }
    return n;
}

int lwt_share(int count)
{
    const char *text = getenv("LWT_SHARE");
    double share = text == NULL ? 1.0 : strtod(text, NULL);
    double n = share >= 0.0 && share <= 1000.0 ? share * (double)count : (double)count;
    return n < 1.0 ? 1 : (int)n;
}
