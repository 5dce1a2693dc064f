/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Validation that needs solving: outputs, drives, home, named modes, known check postures, round
 * trips. Says what it found; never repairs anything. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "../query/rates.h"
#include "build.h"

#include <stdint.h>
#include <stdio.h>

static const char *motion_word(lw_motion motion)
{
    static const char *const word[] = {"none", "3T3R", "3T2R", "3T1R", "3T", "2T1R", "2T",
                                       "2R1T", "1T2R", "3R",   "2R",   "1R", "1T"};
    return (unsigned)motion < sizeof word / sizeof word[0] ? word[motion] : "none";
}

static void check_mobility(lw_model *m)
{
    lw_report *r = &m->report;
    char got[32];
    char expected[32];
    int mobility = (int)m->mobility;
    int outputs = (int)m->spec->n_output;
    (void)snprintf(expected, sizeof expected, "%d", mobility);
    (void)snprintf(got, sizeof got, "%d", outputs);
    r->redundancy_drives = (int)m->spec->n_drive - mobility;
    r->redundancy_kinematic = mobility - outputs;
    if (outputs > mobility) {
        lwi_find(r, LW_ERROR, "outputs-exceed-mobility", "/outputs", expected, got,
                 "%d outputs are declared, but the mechanism has only %d freedom%s.", outputs,
                 mobility, mobility == 1 ? "" : "s");
    } else if (outputs < mobility) {
        lwi_find(r, LW_WARNING, "kinematically-redundant", "/outputs", expected, got,
                 "The mechanism is kinematically redundant by %d: a tool pose leaves it free to "
                 "move.",
                 mobility - outputs);
    }
    if (r->mobility_counted - r->idle_spins != mobility) {
        lwi_find(r, LW_NOTE, "count-differs", "/joints", NULL, NULL,
                 "By the Gruebler-Kutzbach count the mobility would be %d (idle spins %d); the "
                 "rank of the closure equations says %d.",
                 r->mobility_counted, r->idle_spins, mobility);
    }
    if (r->assumes_exact_geometry) {
        char dropped[32] = "below 1e-12"; /* rounding alone: its digits would say nothing */
        if (r->rank_dropped >= 1e-12) {
            (void)snprintf(dropped, sizeof dropped, "%.2g", r->rank_dropped);
        }
        lwi_find(r, LW_NOTE, "assumes-exact-geometry", "/joints", NULL, NULL,
                 "Mobility %d holds for the geometry as drawn (parallel and meeting axes): least "
                 "relative singular value kept %.2g, largest dropped %s.",
                 mobility, r->rank_kept, dropped);
    }
    if (r->idle_spins > 0) {
        lwi_find(r, LW_NOTE, "idle-spins", "/joints", NULL, NULL,
                 "%d ball-ended members can spin about their own line; these spins are locked.",
                 r->idle_spins);
    }
    if (m->spec->motion != LW_MOTION_NONE && r->motion != m->spec->motion) {
        lwi_find(r, LW_ERROR, "motion-mismatch", "/motion", motion_word(r->motion),
                 motion_word(m->spec->motion),
                 "The document declares motion %s, the geometry moves the tool body as %s.",
                 motion_word(m->spec->motion),
                 r->motion == LW_MOTION_NONE ? "no pure pattern" : motion_word(r->motion));
    }
}

static size_t rank_at(double *a, size_t rows, size_t cols)
{
    double sv[LWI_MAX_VARS];
    size_t n = rows < cols ? rows : cols;
    size_t rank = 0;
    lwi_svd(a, rows, cols, cols, sv, NULL);
    while (rank < n && sv[rank] > 1e-6 * sv[0] && sv[rank] > 1e-9) {
        rank++;
    }
    return rank;
}

/* Drives without which the others hold the machine here: spare in general. */
static void mark_spare(lw_model *m, const lwi_rates *r, lw_work *work)
{
    double *all = work->matrix[2];
    lwi_scaled_drives(all, m, r, work);
    for (size_t d = 0; d < r->n_drive && r->n_drive > r->m; d++) {
        size_t n = 0;
        for (size_t i = 0; i < r->n_drive; i++) {
            if (i != d) {
                memcpy(work->matrix[1] + n++ * r->m, all + i * r->m, r->m * sizeof *all);
            }
        }
        m->drive_spare[d] = m->drive_spare[d] || rank_at(work->matrix[1], n, r->m) == r->m;
    }
}

/* Generic ranks of outputs and drives over the samples. */
static void check_ranks(lw_model *m, lwi_samples *s, lw_work *work)
{
    lw_report *r = &m->report;
    size_t out_rank = 0;
    size_t drive_rank = 0;
    const lw_spec_tool *tool = &m->spec->tool[0];
    for (size_t k = 0; k < s->n; k++) {
        lwi_rates rates;
        lw_frame pose;
        lwi_eval_nodes(&work->ev, m->whole, &s->state[k]);
        lwi_config_from_eval(&work->scratch, m->whole, &s->state[k], &work->ev, &m->reference);
        lwi_tool_pose(&pose, tool, &work->scratch);
        lwi_rates_at(&rates, m, tool, &work->scratch, pose.pos_m, work);
        lwi_scaled_outputs(work->matrix[1], m, &rates, work);
        size_t rank = rank_at(work->matrix[1], rates.n_output, rates.m);
        out_rank = rank > out_rank ? rank : out_rank;
        lwi_scaled_drives(work->matrix[1], m, &rates, work);
        rank = rank_at(work->matrix[1], rates.n_drive, rates.m);
        drive_rank = rank > drive_rank ? rank : drive_rank;
        mark_spare(m, &rates, work);
    }
    char got[32];
    char expected[32];
    (void)snprintf(got, sizeof got, "%zu", out_rank);
    (void)snprintf(expected, sizeof expected, "%zu", m->spec->n_output);
    if (out_rank < m->spec->n_output && m->spec->n_output <= m->mobility) {
        lwi_find(r, LW_ERROR, "outputs-do-not-span", "/outputs", expected, got,
                 "The outputs do not describe the motion: only %zu of %zu can change "
                 "independently.",
                 out_rank, m->spec->n_output);
    }
    (void)snprintf(got, sizeof got, "%zu", drive_rank);
    (void)snprintf(expected, sizeof expected, "%zu", m->mobility);
    if (drive_rank < m->mobility) {
        lwi_find(r, LW_WARNING, "drives-do-not-hold", "/drives", expected, got,
                 "With all %zu drives locked the mechanism can still move: they hold only %zu of "
                 "%zu freedom%s.",
                 m->spec->n_drive, drive_rank, m->mobility, m->mobility == 1 ? "" : "s");
    } else if (m->spec->n_drive > m->mobility) {
        lwi_find(r, LW_NOTE, "drives-to-spare", "/drives", NULL, NULL,
                 "%zu drives for %zu freedom%s: redundantly driven by %zu.", m->spec->n_drive,
                 m->mobility, m->mobility == 1 ? "" : "s", m->spec->n_drive - m->mobility);
    }
}

static void singular_posture(lw_model *m, const lw_config *config, const char *which,
                             const char *where, lw_work *work)
{
    lw_solution *sol = lwi_slot(work, LWI_SLOT_POSTURE);
    char code[40];
    lwi_config_copy(&sol->config, m, config);
    lwi_solution_finish(sol, m, &m->spec->tool[0]);
    lwi_rates rates;
    lwi_rates_at(&rates, m, &m->spec->tool[0], config, sol->tool.pos_m, work);
    if (m->rank > 0 && !(rates.closure_ratio > LWI_RANK_POSTURE)) {
        (void)snprintf(code, sizeof code, "%s-singular-constraint", which);
        lwi_find(&m->report, LW_WARNING, code, where, NULL, NULL,
                 "The %s posture is a constraint singularity: the mechanism has more freedoms "
                 "there than elsewhere.",
                 which);
        return;
    }
    lwi_scaled_outputs(work->matrix[1], m, &rates, work);
    if (rank_at(work->matrix[1], rates.n_output, rates.m) < m->spec->n_output) {
        (void)snprintf(code, sizeof code, "%s-singular-inverse", which);
        lwi_find(&m->report, LW_WARNING, code, where, NULL, NULL,
                 "The %s posture is an inverse singularity: a tool direction is lost there.",
                 which);
    }
    lwi_scaled_drives(work->matrix[1], m, &rates, work);
    if (rank_at(work->matrix[1], rates.n_drive, rates.m) < m->mobility) {
        (void)snprintf(code, sizeof code, "%s-singular-forward", which);
        lwi_find(&m->report, LW_WARNING, code, where, NULL, NULL,
                 "The %s posture is a forward singularity: the drives do not hold it.", which);
    }
}

static void check_limits(lw_model *m, const lw_config *config, const char *which, const char *where,
                         lw_work *work)
{
    lw_solution *sol = lwi_slot(work, LWI_SLOT_POSTURE);
    lwi_config_copy(&sol->config, m, config);
    lwi_solution_finish(sol, m, &m->spec->tool[0]);
    if (!sol->within_limits) {
        const lw_limit *l = &sol->limit[0];
        const char *name = l->of == LW_LIMIT_DRIVE ? m->spec->drive[l->index].name
                           : l->of == LW_LIMIT_ROD ? m->spec->rod[l->index].name
                                                   : m->spec->joint[l->index].name;
        lwi_find(&m->report, LW_ERROR, "limits-exclude-posture", where, NULL, NULL,
                 "The %s posture is beyond the limit of \"%s\" by %.4g (m or rad).", which, name,
                 l->over);
    }
}

static void find_home(lw_model *m, lw_work *work)
{
    const lw_posture_answer *p;
    lw_err err = {0};
    if (m->spec->home.kind == LW_BY_NOTHING) {
        return;
    }
    lw_code rc = lw_posture(&p, m, 0, NULL, &m->spec->home, work, &err);
    if (rc != LW_OK || p->solution == NULL) {
        char where[120];
        (void)snprintf(where, sizeof where, "/home%s", rc != LW_OK ? err.where : "");
        where[95] = '\0';
        lwi_find(&m->report, LW_ERROR, "home-is-no-posture", where, "a posture of this mechanism",
                 NULL, "The home posture could not be reached from the reference posture: %.150s.",
                 rc != LW_OK ? err.msg : p->reason != NULL ? p->reason : "no solution");
        return;
    }
    lwi_config_copy(&m->home, m, &p->solution->config);
}

static void check_modes(lw_model *m, lw_work *work)
{
    char where[96];
    m->report.n_mode_name = m->spec->n_mode;
    for (size_t i = 0; i < m->spec->n_mode; i++) {
        const lw_posture_answer *p;
        lw_err err = {0};
        lw_mode *mode = &m->report.mode_name[i];
        (void)snprintf(where, sizeof where, "/modes/%s/example", m->spec->mode[i].name);
        lw_code rc = lw_posture(&p, m, 0, NULL, &m->spec->mode[i].example, work, &err);
        if (rc != LW_OK || p->solution == NULL) {
            lwi_find(&m->report, LW_ERROR, "mode-example-is-no-posture", where,
                     "a posture of this mechanism", NULL,
                     "The example of mode \"%s\" is no posture: %.150s.", m->spec->mode[i].name,
                     rc != LW_OK ? err.msg : p->reason != NULL ? p->reason : "no solution");
            continue;
        }
        *mode = p->solution->mode;
        for (size_t k = 0; k < mode->count; k++) {
            if (mode->sign[k] == 0) {
                lwi_find(&m->report, LW_WARNING, "mode-example-singular", where, NULL, NULL,
                         "The example of mode \"%s\" stands at a change-over of limb \"%s\".",
                         m->spec->mode[i].name, m->report.limb[k].name);
            }
        }
        for (size_t k = 0; k < i; k++) {
            if (lw_mode_same(mode, &m->report.mode_name[k])) {
                lwi_find(&m->report, LW_WARNING, "mode-named-twice", where, NULL, NULL,
                         "Modes \"%s\" and \"%s\" have the same signs.", m->spec->mode[i].name,
                         m->spec->mode[k].name);
            }
        }
    }
}

static double pose_gap(const lw_pose_ask *pose, const lw_frame *tool, double *angle)
{
    double gap = 0.0;
    *angle = 0.0;
    for (int i = 0; i < 3; i++) {
        if (pose->has_position[i]) {
            double d = pose->position_m[i] - tool->pos_m[i];
            gap += d * d;
        }
    }
    double want[9];
    double zyx[3];
    bool full = pose->orient == LW_ORIENT_QUATERNION ||
                (pose->orient == LW_ORIENT_ZYX && pose->has_zyx[0] && pose->has_zyx[1] &&
                 pose->has_zyx[2]);
    if (full) {
        double rest[9];
        double v[3];
        if (pose->orient == LW_ORIENT_QUATERNION) {
            lw_rot_from_quat(want, pose->quat);
        } else {
            lw_rot_from_zyx(want, pose->zyx_rad);
        }
        lwi_rot_mul_at(rest, tool->rot, want);
        lwi_rot_log(v, rest);
        *angle = lwi_norm(v);
    } else if (pose->orient == LW_ORIENT_ZYX) {
        lw_zyx_from_rot(zyx, tool->rot);
        for (int i = 0; i < 3; i++) {
            double d = pose->has_zyx[i] ? 2.0 * fabs(sin(0.5 * (pose->zyx_rad[i] - zyx[i]))) : 0.0;
            *angle = fmax(*angle, d);
        }
    }
    return sqrt(gap);
}

/* What a check may be off by: its own figure, else the tolerance needed, else nothing but rounding
 * (1e-6 m or rad). */
static double allowed(const lw_figure *own, const lw_figure *needed)
{
    return own->asked ? own->value : needed->asked ? needed->value : 1e-6;
}

static void check_checks(lw_model *m, lw_work *work)
{
    char where[96];
    for (size_t i = 0; i < m->spec->n_check; i++) {
        const lw_spec_check *check = &m->spec->check[i];
        const lw_posture_answer *p;
        lw_err err = {0};
        (void)snprintf(where, sizeof where, "/checks/%zu", i);
        lw_code rc = lw_posture(&p, m, 0, NULL, &check->posture, work, &err);
        if (rc != LW_OK || p->solution == NULL) {
            lwi_find(&m->report, LW_WARNING, "check-not-reached", where, NULL, NULL,
                     "The readings of this check lead to no posture: %.150s.",
                     rc != LW_OK ? err.msg : p->reason != NULL ? p->reason : "no solution");
            continue;
        }
        double angle;
        double gap = pose_gap(&check->pose, &p->solution->tool, &angle);
        double allow = allowed(&check->within_position_m, &m->spec->needs.position_tolerance_m);
        double allow_angle = allowed(&check->within_angle_rad, &m->spec->needs.angle_tolerance_rad);
        if (!(gap <= allow) || !(angle <= allow_angle)) {
            lwi_find(&m->report, LW_WARNING, "check-missed", where, NULL, NULL,
                     "The model puts the tool %.4g mm and %.4g deg from the pose measured here.",
                     gap * 1e3, angle * 57.29577951308232);
        }
    }
}

/* Central differences of every closure row against its derivative, at the samples. */
static void check_derivatives(lw_model *m, lwi_samples *s)
{
    const lwi_system *sys = m->whole;
    double h = 1e-6;
    double worst = 0.0;
    double d[LWI_MAX_VARS];
    double y[LWI_MAX_VARS] = {0};
    for (size_t k = 0; k < s->n; k += 6) {
        for (size_t i = 0; i < sys->n_row; i++) {
            if (sys->row[i].kind == LWI_ROW_SPIN) {
                continue;
            }
            lwi_eval_nodes(&s->ev, sys, &s->state[k]);
            lwi_row_derivative(d, sys, &sys->row[i], &s->state[k], &s->ev);
            for (size_t v = 0; v < sys->n_var; v++) {
                double side[2];
                for (int p = 0; p < 2; p++) {
                    lwi_state trial = s->state[k];
                    y[v] = p == 0 ? h : -h;
                    lwi_state_step(&trial, sys, y);
                    lwi_eval_nodes(&s->ev, sys, &trial);
                    side[p] = lwi_row_residual(sys, &sys->row[i], &trial, &s->ev);
                }
                y[v] = 0.0;
                worst = fmax(worst, fabs((side[0] - side[1]) / (2.0 * h) - d[v]));
            }
        }
    }
    m->report.worst_derivative = worst;
    if (!(worst < 1e-6)) {
        lwi_find(&m->report, LW_ERROR, "derivative-check", "", NULL, NULL,
                 "Derivative and difference of the closure disagree by %.3g: report this.", worst);
    }
}

/* inverse(forward(x)) = x at sampled configurations. */
static void check_round_trip(lw_model *m, lwi_samples *s, lw_work *work)
{
    const lw_spec_tool *tool = &m->spec->tool[0];
    double worst = 0.0;
    size_t missed = 0;
    size_t tried = 0;
    for (size_t k = 0; k < s->n && m->completion.usable && m->explicit_inverse; k += 3) {
        lw_config *have = &work->scratch2;
        lw_inverse_ask ask = {.tool = 0};
        const lw_inverse_answer *inv;
        lw_frame pose;
        double pos;
        double ang;
        lw_err err = {0};
        lwi_eval_nodes(&work->ev, m->whole, &s->state[k]);
        lwi_closure_error(&pos, &ang, m->whole, &s->state[k], &work->ev);
        m->report.worst_closure = fmax(m->report.worst_closure, fmax(pos / m->length_m, ang));
        lwi_config_from_eval(have, m->whole, &s->state[k], &work->ev, &m->reference);
        lwi_tool_pose(&pose, tool, have);
        for (int i = 0; i < 3; i++) {
            ask.pose.has_position[i] = true;
            ask.pose.position_m[i] = pose.pos_m[i];
        }
        ask.pose.orient = LW_ORIENT_QUATERNION;
        lw_quat_from_rot(ask.pose.quat, pose.rot);
        for (size_t o = 0; o < m->spec->n_output; o++) {
            if (m->spec->output[o].kind == LW_OUT_COORD) {
                ask.pose.joint_coord[ask.pose.n_joint] = m->spec->output[o].coord;
                ask.pose.joint_value[ask.pose.n_joint++] = have->coord[m->spec->output[o].coord];
            }
        }
        tried++;
        if (lw_inverse(&inv, m, &ask, work, &err) != LW_OK || inv->n_solution == 0) {
            missed++;
            continue;
        }
        double near = 1e300;
        for (size_t i = 0; i < inv->n_solution; i++) {
            double gap = 0.0;
            double drive[LW_MAX_DRIVES];
            lwi_drive_coords(drive, m, have);
            for (size_t d = 0; d < m->spec->n_drive; d++) {
                double x = inv->solution[i].drive[d] - drive[d];
                x = m->spec->drive[d].turning ? 2.0 * fabs(sin(0.5 * x)) * m->length_m : fabs(x);
                gap = fmax(gap, x);
            }
            near = fmin(near, gap);
        }
        worst = fmax(worst, near);
    }
    m->report.worst_roundtrip_m = worst;
    if (missed > 0 || !(worst <= 1e-5 * m->length_m)) {
        lwi_find(&m->report, LW_WARNING, "round-trip", "", NULL, NULL,
                 "inverse(forward(x)) = x failed at %zu of %zu random postures (worst %.3g m).",
                 missed, tried, worst);
    }
}

lw_code lwi_validate(lw_model *m, lwi_samples *s, lw_err *err)
{
    lw_work *work;
    check_mobility(m);
    check_derivatives(m, s);
    if (lwi_has_errors(&m->report)) {
        return LW_E_MODEL;
    }
    lw_code rc = lw_work_new(&work, m, err);
    if (rc != LW_OK) {
        return rc;
    }
    rc = lwi_limbs_home(m, err);
    if (rc != LW_OK) {
        lw_work_free(work);
        return rc;
    }
    m->report.explicit_inverse = m->explicit_inverse && m->completion.usable;
    check_ranks(m, s, work);
    check_limits(m, &m->reference, "reference", "", work);
    singular_posture(m, &m->reference, "reference", "", work);
    if (!lwi_has_errors(&m->report)) {
        find_home(m, work);
        if (m->spec->home.kind != LW_BY_NOTHING) {
            rc = lwi_limbs_home(m, err);
            check_limits(m, &m->home, "home", "/home", work);
            singular_posture(m, &m->home, "home", "/home", work);
        }
        lwi_mode_of(&m->report.reference_mode, m, &m->reference);
        check_modes(m, work);
        check_checks(m, work);
        check_round_trip(m, s, work);
    }
    lw_work_free(work);
    return rc == LW_OK && lwi_has_errors(&m->report) ? LW_E_MODEL : rc;
}
