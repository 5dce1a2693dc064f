/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reach question: can the tool be there, in the mode asked for, with the margins asked for.
 * Judged in the fixed order: readings that contradict, no real solution, the asked mode (hold,
 * margins), other modes, limits. What is not settled is undecided. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "margin.h"
#include "moves.h"

#include <stdint.h>

bool lwi_inverse_one(lw_solution **sol, bool *open, const lw_model *m, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lw_mode *mode, const lw_config *hint,
                     lw_work *work);

static void take_solution(lw_reach_answer *a, const lw_model *m, const lw_solution *sol,
                          lw_work *work)
{
    lw_solution *slot = lwi_slot(work, LWI_SLOT_REACH);
    lwi_solution_copy(slot, m, sol);
    a->solution = slot;
}

/* A posture within limits in an allowed mode: hold, then thresholds. */
static void judge_margins(lw_reach_answer *a, const lw_model *m, const lw_spec_tool *tool,
                          const lw_reach_ask *ask, lw_work *work)
{
    lwi_margin_at(&work->margin, m, tool, a->solution, false, work);
    a->margin = &work->margin;
    a->failed_margin = -1;
    if (!work->margin.held) {
        a->outcome = LW_OUTCOME_SINGULAR;
        a->reason = work->margin.reason;
        return;
    }
    double worst = 1e300;
    bool unjudged = false;
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        const lw_margin_value *v = &work->margin.margin[i];
        if (!ask->margin_min.asked[i]) {
            continue;
        }
        if (!v->asked) {
            unjudged = true;
            continue;
        }
        double least = ask->margin_min.value[i];
        double relative = least > 0.0 ? v->value / least : 1e300;
        if (!(v->value >= least) && relative < worst) {
            worst = relative;
            a->failed_margin = i;
        }
    }
    a->outcome = a->failed_margin >= 0 ? LW_OUTCOME_LOW_MARGIN : LW_OUTCOME_OK;
    a->reason = a->failed_margin >= 0 ? "reachable, but a margin is below its threshold" : NULL;
    if (unjudged && a->outcome == LW_OUTCOME_OK) {
        a->outcome = LW_OUTCOME_UNDECIDED;
        a->reason = "a threshold names a margin that the document does not ask for (\"asked\": "
                    "false): state the need in the document, or leave the threshold out";
    }
}

static lw_code judge_from(lw_reach_answer *a, bool *stop, lw_mode *mode, const lw_model *m,
                          const lw_reach_ask *ask, lw_work *work, lw_err *err)
{
    const lw_posture_answer *p;
    *stop = false;
    lw_code rc = lw_posture(&p, m, ask->tool, ask->tool_written, ask->from, work, err);
    if (rc != LW_OK) {
        lwi_err_under(err, "/from");
        return rc;
    }
    a->from = ask->from->kind == LW_BY_DRIVES ? &work->forward : NULL;
    if (p->outcome == LW_OUTCOME_INCONSISTENT || p->solution == NULL) {
        a->outcome = p->outcome == LW_OUTCOME_INCONSISTENT ? p->outcome : LW_OUTCOME_UNDECIDED;
        a->reason = p->reason != NULL ? p->reason : "\"from\" names no posture";
        *stop = true;
        return LW_OK;
    }
    *mode = p->solution->mode;
    lw_solution *start = lwi_slot(work, LWI_SLOT_START);
    lwi_solution_copy(start, m, p->solution);
    return LW_OK;
}

static size_t outputs_of_joints(const lw_model *m)
{
    size_t n = 0;
    for (size_t o = 0; o < m->spec->n_output; o++) {
        n += m->spec->output[o].kind == LW_OUT_COORD;
    }
    return n;
}

/* Explicit mechanisms: one branch per limb, no list. True when that settles the question. */
static bool fast_path(lw_reach_answer *a, const lw_model *m, const lw_spec_tool *tool,
                      const lw_reach_ask *ask, const lw_config *hint, lw_work *work)
{
    lwi_pose_known pose;
    lw_solution *sol;
    bool open = false; /* a limb can move with the tool at rest: one posture of many */
    lw_err unused = {0};
    if (ask->any_mode || ask->pose.n_joint > outputs_of_joints(m) || !m->explicit_inverse ||
        !m->completion.usable ||
        m->fused[tool->body] != m->fused[m->spec->tool[0].body] ||
        lwi_pose_complete(&pose, m, tool, &ask->pose, &unused) != LW_OK ||
        pose.off_by_position_m > 0.0 || pose.off_by_angle_rad > 1e-12) {
        return false;
    }
    if (!lwi_inverse_one(&sol, &open, m, tool, &pose, &a->asked_mode, hint, work) ||
        !sol->within_limits) {
        return false;
    }
    a->found.complex_count = a->found.real = a->found.within_limits = -1;
    a->complete = !open;
    a->basis = LW_BASIS_EXPLICIT;
    take_solution(a, m, sol, work);
    return true;
}

static void list_others(lw_reach_answer *a, const lw_inverse_answer *inv)
{
    for (size_t i = 0; i < inv->n_solution && a->n_other < LW_MAX_MODES; i++) {
        const lw_solution *s = &inv->solution[i];
        if (s->within_limits && !lwi_mode_fits(&s->mode, &a->asked_mode)) {
            a->other[a->n_other++] = s->mode;
        }
    }
}

/* Of the solutions in a mode (NULL: any), the one nearest to the configuration asked from. */
static const lw_solution *in_mode(const lw_model *m, const lw_inverse_answer *inv,
                                  const lw_mode *mode, bool within, const lw_config *from)
{
    const lw_solution *best = NULL;
    double least = 1e300;
    for (size_t i = 0; i < inv->n_solution; i++) {
        const lw_solution *s = &inv->solution[i];
        if ((mode == NULL || lwi_mode_fits(&s->mode, mode)) && (!within || s->within_limits)) {
            double d = from != NULL ? lwi_config_distance(m, &s->config, from) : (double)i;
            if (d < least) {
                least = d;
                best = s;
            }
        }
    }
    return best;
}

static lw_code full_path(lw_reach_answer *a, const lw_model *m, const lw_spec_tool *tool,
                         const lw_reach_ask *ask, lw_work *work, lw_err *err)
{
    const lw_inverse_answer *inv;
    lw_inverse_ask question = {
        .tool = ask->tool, .tool_written = ask->tool_written, .pose = ask->pose};
    lw_code rc = lw_inverse(&inv, m, &question, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    a->found = inv->found;
    a->complete = inv->complete;
    a->basis = inv->basis;
    a->off_by_position_m = inv->off_by_position_m;
    a->off_by_angle_rad = inv->off_by_angle_rad;
    a->off_by_limb = inv->off_by_limb;
    a->off_by_limb_m = inv->off_by_limb_m;
    if (inv->n_solution == 0) {
        a->outcome = inv->outcome;
        a->reason = inv->reason;
        return LW_OK;
    }
    const lw_mode *wanted = ask->any_mode ? NULL : &a->asked_mode;
    const lw_config *from = ask->from != NULL ? &lwi_slot(work, LWI_SLOT_START)->config : NULL;
    const lw_solution *good = in_mode(m, inv, wanted, true, from);
    if (good != NULL) {
        take_solution(a, m, good, work);
        judge_margins(a, m, tool, ask, work);
        return LW_OK;
    }
    list_others(a, inv);
    const lw_solution *beyond = in_mode(m, inv, wanted, false, from);
    if (a->n_other > 0) {
        a->outcome = LW_OUTCOME_OTHER_MODE;
        a->reason = beyond != NULL ? "the mode asked for is beyond a limit, another is not"
                                   : "reachable, but not in the mode asked for";
    } else if (!inv->complete) {
        a->outcome = LW_OUTCOME_UNDECIDED;
        a->reason = "what was found is beyond limits, but not every solution is known";
    } else {
        a->outcome = LW_OUTCOME_LIMIT;
        a->reason = "every solution is beyond a limit";
    }
    take_solution(a, m, beyond != NULL ? beyond : inv->solution, work);
    return LW_OK;
}

/* The straight move from `from` to a posture that is good by itself. The move keeps the mode it
 * starts in; where it ends elsewhere, the posture asked for needs a mode change. */
static lw_code judge_move(lw_reach_answer *a, const lw_model *m, const lw_spec_tool *tool,
                          const lw_reach_ask *ask, lw_work *work, lw_err *err)
{
    lw_solution *start = lwi_slot(work, LWI_SLOT_START);
    lw_solution *sol = lwi_slot(work, LWI_SLOT_MOVE);
    lw_move move = {.kind = LW_MOVE_LINE, .pose = ask->pose};
    lwi_advance_ask how = {.tool = tool,
                           .min = &ask->margin_min,
                           .budget = ask->budget > 0 ? ask->budget : LW_PATH_BUDGET,
                           .abort = ask->abort};
    lw_move_answer answer;
    double proved;
    if (!ask->any_mode && !lwi_mode_fits(&start->mode, &a->asked_mode)) {
        a->outcome = LW_OUTCOME_OTHER_MODE;
        a->reason = "a straight move keeps the mode of \"from\", which is not the one asked for";
        return LW_OK;
    }
    lwi_move_answer_open(&answer);
    lwi_solution_copy(lwi_slot(work, LWI_SLOT_MOVE_START), m, start);
    lw_code rc = lwi_move_line(&answer, &proved, m, &how, &move, &start->config, sol, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    a->move_checked = answer.stop != LW_STOP_UNSUPPORTED;
    a->move_at = answer.at;
    a->outcome = answer.outcome;
    a->reason = answer.reason;
    if (answer.outcome == LW_OUTCOME_LOW_MARGIN) {
        a->failed_margin = answer.margin;
    }
    if (answer.outcome == LW_OUTCOME_OUT_OF_REACH && answer.limb != SIZE_MAX) {
        a->off_by_limb = answer.limb;
    }
    if (answer.has_end && !ask->any_mode && !lwi_mode_fits(&sol->mode, &a->asked_mode)) {
        a->outcome = LW_OUTCOME_OTHER_MODE;
        a->reason = "the straight move ends in another mode than the one asked for";
    }
    if (answer.stop != LW_STOP_UNSUPPORTED) { /* the end, or the witness on the way */
        bool seen = answer.outcome != LW_OUTCOME_UNDECIDED &&
                    answer.outcome != LW_OUTCOME_OUT_OF_REACH &&
                    answer.outcome != LW_OUTCOME_OTHER_MODE;
        if (seen) {
            take_solution(a, m, sol, work);
        }
        lwi_margin_at(&work->margin, m, tool, a->solution, false, work);
    }
    return LW_OK;
}

lw_code lw_reach(const lw_reach_answer **out, const lw_model *m, const lw_reach_ask *ask,
                 lw_work *work, lw_err *err)
{
    lw_reach_answer *a = &work->reach;
    lw_mode mode = m->home_mode;
    bool stop = false;
    lw_code rc = LW_OK;
    *out = NULL;
    memset(a, 0, sizeof *a);
    a->failed_margin = -1;
    a->off_by_limb = SIZE_MAX;
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->has_mode && lwi_mode_check(m, &ask->mode, err) != LW_OK) {
        return LW_E_ARGUMENT;
    }
    const lw_config *hint = &m->home;
    if (ask->from != NULL && ask->from->kind != LW_BY_NOTHING) {
        rc = judge_from(a, &stop, &mode, m, ask, work, err);
        if (rc != LW_OK) {
            return rc;
        }
        hint = &lwi_slot(work, LWI_SLOT_START)->config;
    }
    *out = a;
    a->asked_mode = ask->has_mode ? ask->mode : mode;
    if (stop) {
        return LW_OK;
    }
    if (fast_path(a, m, tool, ask, hint, work)) {
        judge_margins(a, m, tool, ask, work);
    } else {
        rc = full_path(a, m, tool, ask, work, err);
    }
    if (rc == LW_OK && a->outcome == LW_OUTCOME_OK && hint != &m->home) {
        rc = judge_move(a, m, tool, ask, work, err);
    }
    if (rc != LW_OK) {
        *out = NULL;
    }
    return rc;
}
