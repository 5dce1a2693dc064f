/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves by readings: each leading reading goes evenly from where it stands to its end. With more
 * drives than freedoms the best conditioned set at the start leads; the others follow, and what
 * they would have to read is judged against their limits. */
#include "../math/vec3.h"
#include "moves.h"

#include <stdint.h>

/* The readings at the end: as given, or those of the posture that takes the tool to the pose in the
 * mode of the start. */
static lw_code end_readings(bool has[LW_MAX_DRIVES], double to[LW_MAX_DRIVES], lw_frame *goal,
                            lw_move_answer *a, const lw_model *m, const lw_spec_tool *tool,
                            const lw_move *move, const lw_config *start, lw_work *work,
                            lw_err *err)
{
    const lw_inverse_answer *inverse;
    const lw_solution *best = NULL;
    double least = 1e300;
    if (move->has_drives) {
        memcpy(has, move->has_drive, LW_MAX_DRIVES * sizeof *has);
        memcpy(to, move->drive, LW_MAX_DRIVES * sizeof *to);
        return LW_OK;
    }
    lw_inverse_ask ask = {.tool_written = tool, .pose = move->pose, .has_mode = true};
    lwi_mode_of(&ask.mode, m, start);
    lw_code rc = lw_inverse(&inverse, m, &ask, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    for (size_t i = 0; i < inverse->n_solution; i++) {
        double d = lwi_config_distance(m, &inverse->solution[i].config, start);
        if (d < least) {
            least = d;
            best = &inverse->solution[i];
        }
    }
    if (best == NULL) {
        a->examined = true;
        a->outcome = inverse->outcome == LW_OUTCOME_OK ? LW_OUTCOME_UNDECIDED : inverse->outcome;
        a->stop = LW_STOP_REACH;
        a->at = 1.0;
        a->limb = inverse->off_by_limb;
        a->reason = "no posture in the mode of the start takes the tool to the end";
        return LW_OK;
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        has[d] = true;
        to[d] = best->drive[d];
    }
    *goal = best->tool;
    return LW_OK;
}

/* Of the drives with an end, those that hold the machine best at the start. */
static bool choose_leads(lwi_prove *p, const bool has[LW_MAX_DRIVES], const lw_model *m,
                         const lw_spec_tool *tool, const lw_config *start, lw_work *work)
{
    lwi_rates rates;
    double a[LW_MAX_OUTPUTS * LW_MAX_DRIVES];
    double tau[LW_MAX_DRIVES];
    size_t perm[LW_MAX_DRIVES];
    size_t drive[LW_MAX_DRIVES];
    size_t n = 0;
    lw_frame pose;
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        if (has[d]) {
            drive[n++] = d;
        }
    }
    if (n < m->mobility || m->mobility == 0) {
        return false;
    }
    lwi_tool_pose(&pose, tool, start);
    lwi_rates_at(&rates, m, tool, start, pose.pos_m, work);
    for (size_t i = 0; i < n; i++) {
        double scale = m->spec->drive[drive[i]].turning ? 1.0 : 1.0 / m->length_m;
        for (size_t j = 0; j < m->mobility; j++) {
            a[j * n + i] = scale * work->ak[drive[i] * rates.m + j];
        }
    }
    (void)lwi_qrp(a, m->mobility, n, n, tau, perm);
    for (size_t i = 0; i < m->mobility; i++) {
        p->lead[i] = drive[perm[i]];
    }
    return true;
}

/* A drive that follows and was given an end stands elsewhere there. */
static bool followers_agree(const lwi_prove *p, const bool has[LW_MAX_DRIVES],
                            const double to[LW_MAX_DRIVES], const lw_solution *end)
{
    for (size_t d = 0; d < p->model->spec->n_drive; d++) {
        /* Four deviations of what a reading is off by resolution and backlash. */
        double allowed = 4.0 * lwi_drive_sigma(p->model, d);
        if (has[d] && !(fabs(end->drive[d] - to[d]) <= allowed)) {
            return false;
        }
    }
    return true;
}

/* Beyond a forward singularity the readings of a pose belong to another assembly. */
static bool at_goal(const lw_model *m, const lw_move *move, const lw_frame *goal,
                    const lw_solution *end)
{
    double v[3];
    double rest[9];
    lwi_sub(v, end->tool.pos_m, goal->pos_m);
    double off_m = lwi_norm(v);
    lwi_rot_mul_at(rest, goal->rot, end->tool.rot);
    lwi_rot_log(v, rest);
    return off_m <= 1e-6 * m->length_m && lwi_norm(v) <= 1e-6 &&
           lwi_move_joints_agree(m, &move->pose, &end->config);
}

lw_code lwi_move_joints(lw_move_answer *a, double *proved, const lw_model *m,
                        const lwi_advance_ask *ask, const lw_move *move, const lw_config *start,
                        lw_solution *sol, lw_work *work, lw_err *err)
{
    lwi_prove *p = work->prove_joints;
    bool has[LW_MAX_DRIVES] = {false};
    double to[LW_MAX_DRIVES] = {0};
    lw_frame goal;
    *proved = 0.0;
    if (!lwi_move_supported(a, m, ask, work)) {
        return LW_OK;
    }
    lw_code rc = end_readings(has, to, &goal, a, m, ask->tool, move, start, work, err);
    if (rc != LW_OK || a->examined) {
        return rc;
    }
    if (!choose_leads(p, has, m, ask->tool, start, work)) {
        return LW_FAIL(err, LW_E_POSTURE, "/drives",
                       "readings of at least %zu drives are needed for the end", m->mobility);
    }
    lwi_drive_coords(p->from, m, start);
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        p->along[d] = to[d] - p->from[d];
    }
    a->examined = true;
    lwi_solution_copy(sol, m, lwi_slot(work, LWI_SLOT_MOVE_START));
    lwi_config_copy(&sol->config, m, start);
    lwi_prove_begin_joints(p, ask->tool, ask->min, start);
    lw_frame from;
    lwi_tool_pose(&from, ask->tool, start);
    lwi_advance(a, proved, p, ask, sol, work);
    if (a->outcome != LW_OUTCOME_OK) {
        return LW_OK;
    }
    a->has_end = true;
    memcpy(a->end_drive, sol->drive, sizeof a->end_drive);
    a->end_tool = sol->tool;
    /* From end to end: the way of the tool itself is a curve. */
    double v[3];
    double rest[9];
    lwi_sub(v, sol->tool.pos_m, from.pos_m);
    a->length_m = lwi_norm(v);
    lwi_rot_mul_at(rest, from.rot, sol->tool.rot);
    lwi_rot_log(v, rest);
    a->turn_rad = lwi_norm(v);
    if (!move->has_drives && !at_goal(m, move, &goal, sol)) {
        a->outcome = LW_OUTCOME_OTHER_MODE;
        a->stop = LW_STOP_REACH;
        a->reason = "these readings lead to another posture from here than the pose asked for: the "
                    "way passes into another assembly mode";
    } else if (!followers_agree(p, has, to, sol)) {
        a->outcome = LW_OUTCOME_INCONSISTENT;
        a->stop = LW_STOP_REACH;
        a->reason = "the readings given for the end contradict one another: drives that follow "
                    "stand elsewhere there";
    }
    return LW_OK;
}
