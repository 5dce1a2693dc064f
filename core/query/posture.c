/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Any way of naming a posture to one configuration. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "finish.h"

#include <stdint.h>
#include <stdio.h>

bool lwi_settle(lw_solution *sol, lwi_newton_info *info, const lw_model *m,
                const lw_spec_tool *tool, const lwi_goal *goal, size_t n_goal,
                const lw_config *hint, lw_work *work)
{
    lwi_newton(info, m->whole, m->rank, goal, n_goal, 60, &work->state, &work->ev, &work->newton);
    if (!info->converged) {
        return false;
    }
    lwi_solution_from_state(sol, m, tool, &work->state, &work->ev, hint);
    return true;
}

static size_t joint_goals(lwi_goal *goal, const lw_model *m, const lw_posture_ask *ask)
{
    size_t n = 0;
    for (size_t c = 0; c < m->n_coord && n < LWI_MAX_GOALS; c++) {
        if (!ask->has_coord[c]) {
            continue;
        }
        lwi_goal *g = &goal[n++];
        memset(g, 0, sizeof *g);
        g->kind = LWI_GOAL_TERMS;
        g->n_term = 1;
        g->term[0].coord = c;
        g->term[0].factor = 1.0;
        g->value = ask->coord[c];
        g->weight = lw_spec_coord_turning(m->spec, c) ? 1.0 : 1.0 / m->length_m;
    }
    for (size_t b = 0; b < m->n_ball; b++) {
        for (size_t axis = 0; ask->has_ball[b] && axis < 3 && n < LWI_MAX_GOALS; axis++) {
            lwi_goal *g = &goal[n++];
            memset(g, 0, sizeof *g);
            g->kind = LWI_GOAL_BALL;
            g->ball = b;
            g->axis = axis;
            memcpy(g->quat, ask->ball[b], sizeof g->quat);
            g->weight = 1.0;
        }
    }
    return n;
}

/* Joint coordinates that the whole system does not carry (cut joints) are reached by starting from
 * them; here they are compared after solving. */
static double passive_gap(const lw_model *m, const lw_posture_ask *ask, const lw_config *config)
{
    double worst = 0.0;
    for (size_t c = 0; c < m->n_coord; c++) {
        if (ask->has_coord[c]) {
            bool turning = lw_spec_coord_turning(m->spec, c);
            double d = config->coord[c] - ask->coord[c];
            d = turning ? 2.0 * fabs(sin(0.5 * d)) : fabs(d) / m->length_m;
            worst = fmax(worst, d);
        }
    }
    for (size_t b = 0; b < m->n_ball; b++) {
        if (ask->has_ball[b]) {
            const double *p = config->ball[b];
            const double *q = ask->ball[b];
            double dot = p[0] * q[0] + p[1] * q[1] + p[2] * q[2] + p[3] * q[3];
            worst = fmax(worst, 2.0 * sqrt(fmax(0.0, 1.0 - dot * dot)));
        }
    }
    return worst;
}

static lw_code by_joints(lw_posture_answer *a, lw_solution *sol, const lw_model *m,
                         const lw_spec_tool *tool, const lw_posture_ask *ask,
                         const lw_config *start, lw_work *work, lw_err *err)
{
    lwi_newton_info info;
    lwi_goal *all = work->goal3;
    size_t n = joint_goals(all, m, ask);
    size_t kept = 0;
    /* Start from the given values where the tree carries them. */
    lwi_config_copy(&work->scratch, m, start);
    for (size_t c = 0; c < m->n_coord; c++) {
        if (ask->has_coord[c]) {
            work->scratch.coord[c] = ask->coord[c];
        }
    }
    for (size_t b = 0; b < m->n_ball; b++) {
        if (ask->has_ball[b]) {
            memcpy(work->scratch.ball[b], ask->ball[b], sizeof work->scratch.ball[b]);
        }
    }
    lwi_state_from_config(&work->state, m->whole, &work->scratch);
    lwi_eval_nodes(&work->ev, m->whole, &work->state);
    for (size_t i = 0; i < n; i++) {
        double r;
        if (lwi_goal_eval(&r, NULL, &all[i], m->whole, &work->state, &work->ev)) {
            all[kept++] = all[i];
        }
    }
    if (!lwi_settle(sol, &info, m, tool, all, kept, start, work)) {
        return LW_FAIL(err, LW_E_NOT_CLOSED, "/joints",
                       "no closed posture was found from these joint values");
    }
    double gap = passive_gap(m, ask, &sol->config);
    if (!(gap <= LWI_CLOSED)) {
        return LW_FAIL(err, LW_E_NOT_CLOSED, "/joints",
                       "the values do not close the loops: the nearest closed posture is %.3g rad "
                       "(or characteristic lengths) away, %.3g is allowed",
                       gap, LWI_CLOSED);
    }
    if (info.free_left > 0 && kept == n) {
        return LW_FAIL(err, LW_E_POSTURE, "/joints",
                       "the values leave %zu freedom%s open: give more joints", info.free_left,
                       info.free_left == 1 ? "" : "s");
    }
    a->solution = sol;
    return LW_OK;
}

static lw_code by_bodies(lw_posture_answer *a, lw_solution *sol, const lw_model *m,
                         const lw_spec_tool *tool, const lw_posture_ask *ask,
                         const lw_config *start, lw_work *work, lw_err *err)
{
    lwi_newton_info info;
    lwi_goal *goal = work->goal3;
    size_t n = 0;
    lwi_config_copy(&work->scratch, m, start);
    for (size_t b = 0; b < m->spec->n_body; b++) {
        if (!ask->has_body[b]) {
            continue;
        }
        work->scratch.body[b] = ask->body[b];
        for (size_t axis = 0; axis < 6 && n < LWI_MAX_GOALS; axis++) {
            lwi_goal *g = &goal[n++];
            memset(g, 0, sizeof *g);
            g->body = b;
            g->axis = axis % 3;
            g->kind = axis < 3 ? LWI_GOAL_POINT : LWI_GOAL_ROT;
            g->weight = axis < 3 ? 1.0 / m->length_m : 1.0;
            g->value = axis < 3 ? ask->body[b].pos_m[axis] : 0.0;
            memcpy(g->rot, ask->body[b].rot, sizeof g->rot);
        }
    }
    /* Joints between given bodies start where the bodies say, screws with their whole turns. */
    size_t coord = 0;
    size_t ball = 0;
    for (size_t j = 0; j < m->spec->n_joint; j++) {
        const lw_spec_joint *joint = &m->spec->joint[j];
        size_t p = joint->body[0];
        size_t q = joint->body[1];
        if ((ask->has_body[p] || p == m->spec->frame) &&
            (ask->has_body[q] || q == m->spec->frame)) {
            lwi_joint_from_frames(joint, &work->scratch.body[p], &work->scratch.body[q],
                                  start->coord + coord, work->scratch.coord + coord,
                                  joint->type == LW_SPHERICAL ? work->scratch.ball[ball] : NULL);
        }
        coord += lw_joint_coords(joint->type);
        ball += joint->type == LW_SPHERICAL;
    }
    lwi_state_from_config(&work->state, m->whole, &work->scratch);
    if (!lwi_settle(sol, &info, m, tool, goal, n, start, work) || !(info.goal <= LWI_CLOSED)) {
        return LW_FAIL(err, LW_E_NOT_CLOSED, "/bodies",
                       "no closed posture has its bodies there (nearest is off by %.3g of the "
                       "characteristic length)",
                       info.goal);
    }
    if (info.free_left > 0) {
        return LW_FAIL(err, LW_E_POSTURE, "/bodies",
                       "the poses leave %zu freedoms open: give more bodies", info.free_left);
    }
    a->solution = sol;
    return LW_OK;
}

static lw_code by_pose(lw_posture_answer *a, const lw_model *m, size_t tool,
                       const lw_spec_tool *written, const lw_posture_ask *ask, lw_work *work,
                       lw_err *err)
{
    const lw_inverse_answer *inv;
    lw_inverse_ask question = {.tool = tool,
                               .tool_written = written,
                               .pose = ask->pose,
                               .has_mode = ask->has_mode || ask->near == NULL,
                               .mode = ask->has_mode ? ask->mode : m->home_mode,
                               .near = ask->near};
    lw_code rc = lw_inverse(&inv, m, &question, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    a->outcome = inv->outcome;
    a->reason = inv->reason;
    a->solution = NULL;
    if (inv->n_solution > 0 &&
        (inv->outcome == LW_OUTCOME_OK || inv->outcome == LW_OUTCOME_LIMIT)) {
        a->solution = inv->solution;
    }
    return LW_OK;
}

/* One level of posture; `near` of it is solved before by the caller. */
static lw_code one_posture(lw_posture_answer *a, lw_solution *sol, const lw_model *m, size_t tool,
                           const lw_spec_tool *written, const lw_posture_ask *ask,
                           const lw_config *start, lw_work *work, lw_err *err)
{
    lw_code rc;
    const lw_spec_tool *t = lwi_tool(m, tool, written, err);
    if (t == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->kind == LW_BY_JOINTS) {
        rc = by_joints(a, sol, m, t, ask, start, work, err);
    } else if (ask->kind == LW_BY_BODIES) {
        rc = by_bodies(a, sol, m, t, ask, start, work, err);
    } else {
        return LW_FAIL(err, LW_E_ARGUMENT, "",
                       "a posture is needed: drives, pose, joints or bodies");
    }
    if (rc == LW_OK) {
        a->outcome = sol->within_limits ? LW_OUTCOME_OK : LW_OUTCOME_LIMIT;
    }
    return rc;
}

/* Of all inverse solutions at a bare pose, the one whose readings are nearest to those asked
 * about: a pose alone names no working mode, the readings do. */
static const lw_solution *nearest_readings(const lw_model *m, const lw_posture_ask *near,
                                           const lw_posture_ask *readings, lw_work *work,
                                           lw_code *rc, lw_err *err)
{
    const lw_inverse_answer *inv;
    const lw_solution *best = NULL;
    double best_gap = 1e300;
    lw_inverse_ask question = {.tool = 0, .pose = near->pose};
    *rc = lw_inverse(&inv, m, &question, work, err);
    for (size_t i = 0; *rc == LW_OK && i < inv->n_solution; i++) {
        double gap = 0.0;
        for (size_t d = 0; d < m->spec->n_drive; d++) {
            if (readings->has_drive[d]) {
                double x = inv->solution[i].drive[d] - readings->drive[d];
                x = m->spec->drive[d].turning ? x : x / m->length_m;
                gap += x * x;
            }
        }
        if (gap < best_gap) {
            best_gap = gap;
            best = &inv->solution[i];
        }
    }
    return best;
}

void lwi_err_under(lw_err *err, const char *member)
{
    char inner[sizeof err->where];
    if (err != NULL) {
        memcpy(inner, err->where, sizeof inner);
        (void)snprintf(err->where, sizeof err->where, "%s%.80s", member, inner);
    }
}

const lw_config *lwi_near_config(const lw_model *m, const lw_posture_ask *near,
                                 const lw_posture_ask *readings, lw_work *work,
                                 lw_outcome *outcome, const char **reason, lw_code *rc, lw_err *err)
{
    const lw_posture_answer *answer;
    const lw_solution *found;
    *rc = LW_OK;
    if (near == NULL || near->kind == LW_BY_NOTHING) {
        return &m->home;
    }
    if (readings != NULL && near->kind == LW_BY_POSE && !near->has_mode && near->near == NULL) {
        found = nearest_readings(m, near, readings, work, rc, err);
    } else {
        *rc = lw_posture(&answer, m, 0, NULL, near, work, err);
        found = *rc == LW_OK ? answer->solution : NULL;
    }
    if (*rc != LW_OK) {
        lwi_err_under(err, "/near");
        return NULL;
    }
    if (found == NULL) {
        *outcome = LW_OUTCOME_UNDECIDED;
        *reason = "\"near\" names no posture of this mechanism";
        return NULL;
    }
    lw_solution *start = lwi_slot(work, LWI_SLOT_START);
    lwi_solution_copy(start, m, found);
    return &start->config;
}

lw_code lw_posture(const lw_posture_answer **out, const lw_model *m, size_t tool,
                   const lw_spec_tool *written, const lw_posture_ask *ask, lw_work *work,
                   lw_err *err)
{
    lw_posture_answer *a = &work->posture;
    lw_code rc = LW_OK;
    *out = NULL;
    memset(a, 0, sizeof *a);
    lw_solution *sol = lwi_slot(work, LWI_SLOT_POSTURE);
    if (ask->kind == LW_BY_POSE) {
        rc = by_pose(a, m, tool, written, ask, work, err);
    } else if (ask->kind == LW_BY_DRIVES) {
        const lw_forward_answer *f;
        lw_forward_ask question = {.tool = tool, .tool_written = written, .readings = ask};
        rc = lw_forward(&f, m, &question, work, err);
        if (rc == LW_OK) {
            a->outcome = f->outcome;
            a->reason = f->reason;
            a->solution = f->solution;
        }
    } else {
        const lw_config *start =
            lwi_near_config(m, ask->near, NULL, work, &a->outcome, &a->reason, &rc, err);
        if (rc == LW_OK && start != NULL) {
            rc = one_posture(a, sol, m, tool, written, ask, start, work, err);
        }
    }
    if (rc != LW_OK) {
        return rc;
    }
    if (a->solution != NULL && a->solution != sol) {
        lwi_solution_copy(sol, m, a->solution);
        a->solution = sol;
    }
    *out = a;
    return LW_OK;
}
