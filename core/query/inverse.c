/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Inverse question. Where the outputs determine the whole tool pose and every limb is explicit, all
 * solutions are combinations of limb branches and the list is complete; else Newton's method from
 * several starts gives what it finds and says so. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "all.h"

#include <stdint.h>

typedef struct inverse_run {
    const lw_model *m;
    const lw_spec_tool *tool;
    const lw_inverse_ask *ask;
    lw_inverse_answer *a;
    lw_work *work;
    const lw_config *hint;
    size_t n; /* solutions so far */
    bool contradicted; /* by joints given with the pose that are no outputs */
} inverse_run;

/* Displacements of all bodies that are known without solving limbs. */
static void place_known(lw_config *c, const lw_model *m, const lwi_pose_known *pose)
{
    const lw_spec *spec = m->spec;
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == LW_OUT_COORD) {
            c->coord[spec->output[o].coord] = pose->output_coord[o];
        }
    }
    for (size_t k = 0; k < m->n_determined; k++) {
        const lwi_determined *d = &m->determined[k];
        double sum = 0.0;
        for (size_t i = 0; i < d->n; i++) {
            sum += d->factor[i] * pose->output_coord[d->from[i]];
        }
        c->coord[d->coord] = sum;
    }
    size_t tool = m->fused[spec->tool[0].body];
    size_t frame = m->fused[spec->frame];
    for (size_t i = 0; i < spec->n_body; i++) {
        if (m->fused[i] == tool) {
            c->body[i] = pose->body;
        } else if (m->fused[i] == frame) {
            lwi_frame_identity(&c->body[i]);
        }
    }
    for (size_t k = 0; k < m->n_propagate; k++) {
        const lwi_propagate *p = &m->propagate[k];
        const lw_spec_joint *joint = &spec->joint[p->joint];
        lw_frame x;
        lwi_joint_carry(&x, spec, p->joint, c->coord + lw_spec_joint_coord(spec, p->joint, 0), NULL,
                        joint->body[0] == p->from, &c->body[p->from]);
        for (size_t i = 0; i < spec->n_body; i++) {
            if (m->fused[i] == m->fused[p->to]) {
                c->body[i] = x;
            }
        }
    }
}

static bool coord_is_known(const lw_model *m, size_t coord)
{
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD && m->spec->output[o].coord == coord) {
            return true;
        }
    }
    for (size_t k = 0; k < m->n_determined; k++) {
        if (m->determined[k].coord == coord) {
            return true;
        }
    }
    return false;
}

/* A turn beside its range is moved by whole turns into it, where that is possible. */
static double into_range(double turn, const lw_range *range)
{
    const double whole = 6.283185307179586476925;
    if (range->has_high && turn > range->high + LWI_LIMIT_SLACK) {
        double moved = turn - whole * ceil((turn - range->high - LWI_LIMIT_SLACK) / whole);
        turn = !range->has_low || moved >= range->low - LWI_LIMIT_SLACK ? moved : turn;
    } else if (range->has_low && turn < range->low - LWI_LIMIT_SLACK) {
        double moved = turn + whole * ceil((range->low - LWI_LIMIT_SLACK - turn) / whole);
        turn = !range->has_high || moved <= range->high + LWI_LIMIT_SLACK ? moved : turn;
    }
    return turn;
}

/* Every joint and rod coordinate from the bodies. */
static void coords_from_bodies(lw_config *c, const lw_model *m, const lw_config *hint)
{
    const lw_spec *spec = m->spec;
    size_t coord = 0;
    size_t ball = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        size_t n = lw_joint_coords(joint->type);
        double value[3] = {0, 0, 0};
        lwi_joint_from_frames(joint, &c->body[joint->body[0]], &c->body[joint->body[1]],
                              hint->coord + coord, value,
                              joint->type == LW_SPHERICAL ? c->ball[ball] : NULL);
        for (size_t k = 0; k < n; k++) {
            if (coord_is_known(m, coord + k)) {
                continue;
            }
            bool turn = joint->type != LW_HELICAL && lw_spec_coord_turning(spec, coord + k);
            c->coord[coord + k] = turn ? into_range(value[k], &joint->range[k]) : value[k];
        }
        coord += n;
        ball += joint->type == LW_SPHERICAL;
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        double p[3];
        double q[3];
        lwi_frame_apply(p, &c->body[spec->rod[r].body[0]], spec->rod[r].end_m[0]);
        lwi_frame_apply(q, &c->body[spec->rod[r].body[1]], spec->rod[r].end_m[1]);
        lwi_sub(q, q, p);
        c->coord[coord + r] = lwi_norm(q) - m->whole->rod[r].length_m;
    }
}

/* Turns of single-joint drives are moved by whole turns into the drive's range too. */
static void drives_into_range(lw_config *c, const lw_model *m)
{
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        const lw_spec_drive *drive = &m->spec->drive[d];
        if (drive->turning && drive->n_term == 1 && drive->term[0].factor == 1.0 &&
            !coord_is_known(m, drive->term[0].coord)) {
            double *q = &c->coord[drive->term[0].coord];
            *q = into_range(*q, &drive->range);
        }
    }
}

static bool closes(lw_solution *sol, const lw_model *m, lw_work *work)
{
    const lwi_system *sys = m->whole;
    sol->residual_position_m = 0.0;
    sol->residual_angle_rad = 0.0;
    if (sys->n_row + sys->n_row_dropped == 0) {
        return true;
    }
    lwi_state_from_config(&work->state, sys, &sol->config);
    lwi_eval_nodes(&work->ev, sys, &work->state);
    lwi_closure_error(&sol->residual_position_m, &sol->residual_angle_rad, sys, &work->state,
                      &work->ev);
    return sol->residual_position_m <= LWI_CLOSED * m->length_m &&
           sol->residual_angle_rad <= LWI_CLOSED;
}

/* Adds the combination of limb branches in work->limb_result to the list, if it closes. */
static void add_combination(inverse_run *run, const unsigned *branch, const lw_config *known)
{
    const lw_model *m = run->m;
    if (run->n >= m->max_solutions) {
        return;
    }
    lw_solution *sol = &run->work->solution[run->n];
    lwi_config_copy(&sol->config, m, known);
    size_t open = 0;
    for (size_t i = 0; i < m->n_limb; i++) {
        const lwi_limb_result *r = &run->work->limb_result[i * LWI_MAX_BRANCHES + branch[i]];
        open += r->open;
        for (size_t k = 0; k < m->limb[i].n_body; k++) {
            sol->config.body[m->limb[i].body[k]] = r->body[k];
        }
    }
    coords_from_bodies(&sol->config, m, run->hint);
    drives_into_range(&sol->config, m);
    if (closes(sol, m, run->work)) {
        lwi_solution_finish(sol, m, run->tool);
        run->n++;
        run->a->dimension = open > run->a->dimension ? open : run->a->dimension;
    }
}

static void run_explicit(inverse_run *run, const lwi_pose_known *pose)
{
    const lw_model *m = run->m;
    lw_inverse_answer *a = run->a;
    lw_config *known = &run->work->scratch;
    unsigned branch[LW_MAX_LIMBS] = {0};
    unsigned real[LW_MAX_LIMBS];
    place_known(known, m, pose);
    a->found.complex_count = 1;
    for (size_t i = 0; i < m->n_limb; i++) {
        double miss = 0.0;
        real[i] = 0;
        a->found.complex_count *= (int)m->limb[i].branches;
        for (unsigned b = 0; b < m->limb[i].branches; b++) {
            lwi_limb_result *r = &run->work->limb_result[i * LWI_MAX_BRANCHES + b];
            lwi_limb_solve(r, m, &m->limb[i], b, known);
            real[i] += r->real;
            /* The branch that comes nearest says how far the limb is off; 0 is not known. */
            if (!r->real && r->miss_m != 0.0 && (miss == 0.0 || fabs(r->miss_m) < fabs(miss))) {
                miss = r->miss_m;
            }
        }
        if (real[i] == 0 &&
            (a->off_by_limb == SIZE_MAX || fabs(miss) > fabs(a->off_by_limb_m))) {
            a->off_by_limb = i;
            a->off_by_limb_m = miss;
        }
    }
    if (a->off_by_limb != SIZE_MAX) {
        return;
    }
    for (;;) {
        bool all = true;
        for (size_t i = 0; i < m->n_limb && all; i++) {
            all = run->work->limb_result[i * LWI_MAX_BRANCHES + branch[i]].real;
        }
        if (all && run->n >= m->max_solutions) {
            a->complete = false; /* more combinations than are listed */
            return;
        }
        if (all) {
            add_combination(run, branch, known);
        }
        size_t i = 0;
        while (i < m->n_limb && ++branch[i] >= m->limb[i].branches) {
            branch[i++] = 0;
        }
        if (i == m->n_limb) {
            return;
        }
    }
}

/* One mode only: one branch per limb, nothing else is computed. */
static bool run_one_mode(inverse_run *run, const lwi_pose_known *pose, const lw_mode *mode)
{
    const lw_model *m = run->m;
    lw_config *known = &run->work->scratch;
    unsigned branch[LW_MAX_LIMBS];
    place_known(known, m, pose);
    for (size_t i = 0; i < m->n_limb; i++) {
        if (!lwi_branch_from_entry(&branch[i], &m->limb[i], mode->sign[i], mode->branch[i])) {
            return false;
        }
        lwi_limb_result *r = &run->work->limb_result[i * LWI_MAX_BRANCHES + branch[i]];
        lwi_limb_solve(r, m, &m->limb[i], branch[i], known);
        if (!r->real) {
            return false;
        }
    }
    add_combination(run, branch, known);
    return run->n == 1;
}

static bool seen_before(const inverse_run *run, const lw_solution *sol)
{
    for (size_t i = 0; i < run->n; i++) {
        if (lwi_same_posture(run->m, &run->work->solution[i].config, &sol->config)) {
            return true;
        }
    }
    return false;
}

/* Newton from the hint and from fixed scattered starts. */
static void run_local(inverse_run *run, const lwi_goal *goal, size_t n_goal)
{
    const lw_model *m = run->m;
    lwi_newton_info info;
    lwi_random random;
    double y[LWI_MAX_VARS];
    size_t starts = run->ask->near != NULL ? 1 : 24;
    size_t failed = 0;
    lwi_random_seed(&random, 20260101ULL);
    for (size_t s = 0; s < starts && run->n < m->max_solutions; s++) {
        lw_solution *sol = &run->work->solution[run->n];
        lwi_state_from_config(&run->work->state, m->whole, run->hint);
        for (size_t i = 0; i < m->whole->n_var && s > 0; i++) {
            y[i] = 1.4 * (2.0 * lwi_random_unit(&random) - 1.0);
        }
        if (s > 0) {
            lwi_state_step(&run->work->state, m->whole, y);
        }
        if (!lwi_settle(sol, &info, m, run->tool, goal, n_goal, run->hint, run->work) ||
            !(info.goal <= 1e-8)) {
            failed++;
            continue;
        }
        if (info.free_left > run->a->dimension) {
            run->a->dimension = info.free_left;
        }
        /* Where the pose leaves freedoms open there is no list: one representative, the nearest. */
        if (!seen_before(run, sol)) {
            run->n++;
        }
        if (run->a->dimension > 0) {
            break;
        }
    }
    run->a->found.not_converged = (int)failed;
}

static void full_pose_goals(lwi_goal *goal, size_t *n_goal, const lw_model *m,
                            const lwi_pose_known *pose)
{
    size_t n = 0;
    for (size_t axis = 0; axis < 6; axis++) {
        lwi_goal *g = &goal[n++];
        memset(g, 0, sizeof *g);
        g->body = m->spec->tool[0].body;
        g->axis = axis % 3;
        g->kind = axis < 3 ? LWI_GOAL_POINT : LWI_GOAL_ROT;
        g->weight = axis < 3 ? 1.0 / m->length_m : 1.0;
        lwi_copy3(g->point_m, m->spec->tool[0].frame.pos_m);
        double p[3];
        lwi_frame_apply(p, &pose->body, g->point_m);
        g->value = axis < 3 ? p[axis] : 0.0;
        memcpy(g->rot, pose->body.rot, sizeof g->rot);
    }
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD) {
            lwi_goal *g = &goal[n++];
            memset(g, 0, sizeof *g);
            g->kind = LWI_GOAL_TERMS;
            g->n_term = 1;
            g->term[0].coord = m->spec->output[o].coord;
            g->term[0].factor = 1.0;
            g->value = pose->output_coord[o];
            g->weight = lw_spec_coord_turning(m->spec, g->term[0].coord) ? 1.0 : 1.0 / m->length_m;
        }
    }
    *n_goal = n;
}

static bool contradicts(const lw_model *m, const lwi_pose_known *pose)
{
    double tolerance = 1e-5 * m->length_m;
    double angle = 1e-5;
    if (m->spec->needs.position_tolerance_m.asked) {
        tolerance = fmax(tolerance, m->spec->needs.position_tolerance_m.value);
    }
    if (m->spec->needs.angle_tolerance_rad.asked) {
        angle = fmax(angle, m->spec->needs.angle_tolerance_rad.value);
    }
    return pose->off_by_position_m > tolerance || pose->off_by_angle_rad > angle;
}

static bool is_output(const lw_model *m, size_t coord)
{
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD && m->spec->output[o].coord == coord) {
            return true;
        }
    }
    return false;
}

/* Joint coordinates given with the pose that are no outputs: solutions that contradict them leave
 * the list; where none is left, by how much the nearest is off is told. */
static void compare_joints(inverse_run *run)
{
    const lw_pose_ask *pose = &run->ask->pose;
    lw_inverse_answer *a = run->a;
    size_t kept = 0;
    double least = 1e300;
    bool any = false;
    for (size_t i = 0; i < pose->n_joint; i++) {
        any = any || !is_output(run->m, pose->joint_coord[i]);
    }
    for (size_t s = 0; any && s < run->n; s++) {
        lw_solution *sol = &run->work->solution[s];
        double position = 0.0;
        double angle = 0.0;
        for (size_t i = 0; i < pose->n_joint; i++) {
            size_t coord = pose->joint_coord[i];
            double d = fabs(sol->config.coord[coord] - pose->joint_value[i]);
            if (is_output(run->m, coord)) {
                continue;
            }
            if (lw_spec_coord_turning(run->m->spec, coord)) {
                angle = fmax(angle, d);
            } else {
                position = fmax(position, d);
            }
        }
        lwi_pose_known off = {.off_by_position_m = position, .off_by_angle_rad = angle};
        double size = fmax(position / run->m->length_m, angle);
        if (size < least) {
            least = size;
            a->off_by_position_m = position;
            a->off_by_angle_rad = angle;
        }
        if (!contradicts(run->m, &off)) {
            lw_solution t = run->work->solution[kept]; /* swap: storage stays owned once */
            run->work->solution[kept++] = *sol;
            *sol = t;
        }
    }
    if (any && run->n > 0 && kept == 0) {
        run->contradicted = true;
    } else if (any) {
        a->off_by_position_m = a->off_by_angle_rad = 0.0;
    }
    run->n = any ? kept : run->n;
}

/* Outcome over the solutions as filtered; counts are of all of them. */
static void judge_list(inverse_run *run)
{
    lw_inverse_answer *a = run->a;
    lw_work *work = run->work;
    size_t kept = 0;
    size_t best = SIZE_MAX;
    double best_distance = 1e300;
    bool other_within = false;
    compare_joints(run);
    a->found.real = (int)run->n;
    a->found.within_limits = 0;
    for (size_t i = 0; i < run->n; i++) {
        lw_solution *sol = &work->solution[i];
        a->found.within_limits += sol->within_limits;
        bool match = !run->ask->has_mode || lwi_mode_fits(&sol->mode, &run->ask->mode);
        if (!match) {
            other_within = other_within || sol->within_limits;
            continue;
        }
        if (kept != i) { /* swap, so that config storage stays owned once */
            lw_solution t = work->solution[kept];
            work->solution[kept] = *sol;
            *sol = t;
        }
        if (run->ask->near != NULL) {
            double d = lwi_config_distance(run->m, &work->solution[kept].config, run->hint);
            if (d < best_distance) {
                best_distance = d;
                best = kept;
            }
        }
        kept++;
    }
    if (best != SIZE_MAX && best != 0) {
        lw_solution t = work->solution[0];
        work->solution[0] = work->solution[best];
        work->solution[best] = t;
    }
    a->n_solution = run->ask->near != NULL && kept > 0 ? 1 : kept;
    a->solution = work->solution;
    bool within = false;
    for (size_t i = 0; i < a->n_solution; i++) {
        within = within || work->solution[i].within_limits;
    }
    if (within) {
        a->outcome = LW_OUTCOME_OK;
        a->reason = a->dimension > 0 ? "the pose leaves the mechanism a motion: what is listed are "
                                       "postures of it, not all"
                                     : NULL;
    } else if (a->n_solution > 0) {
        a->outcome = LW_OUTCOME_LIMIT;
        a->reason = "every solution in question is beyond a limit";
        if (other_within) {
            a->outcome = LW_OUTCOME_OTHER_MODE;
            a->reason = "the mode asked for is beyond a limit, another mode is not";
        }
    } else if (run->n > 0) {
        a->outcome = other_within ? LW_OUTCOME_OTHER_MODE : LW_OUTCOME_LIMIT;
        a->reason = other_within ? "reachable, but not in the mode asked for"
                                 : "not in the mode asked for, and other modes are beyond a limit";
    } else if (run->contradicted) {
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->reason = "a joint given with the pose stands elsewhere at that pose";
    } else if (a->complete) {
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->reason = "no posture takes the tool there";
    } else {
        a->outcome = LW_OUTCOME_UNDECIDED;
        a->reason = "no solution was found from the starts tried; that is no proof that there is "
                    "none";
    }
}

/* All solutions from the prepared set. */
static void run_set(inverse_run *run, const lwi_pose_known *pose, const lwi_goal *goal,
                    size_t n_goal)
{
    lwi_all_info info;
    lwi_inverse_all(&info, run->m, run->tool, pose, goal, n_goal, run->hint, run->work);
    run->n = info.n;
    for (size_t i = 0; i < info.n; i++) {
        lw_solution *sol = &run->work->solution[i];
        bool certified = sol->certified;
        double radius = sol->certified_radius;
        drives_into_range(&sol->config, run->m);
        lwi_solution_finish(sol, run->m, run->tool);
        sol->certified = certified;
        sol->certified_radius = radius;
    }
    run->a->found.complex_count = (int)info.finite;
    run->a->found.not_converged = (int)info.unsettled;
    run->a->complete = info.closed;
    run->a->dimension = info.dimension;
    run->a->basis = run->m->set[1]->fibre.trace_closed ? LW_BASIS_TRACE : LW_BASIS_SATURATED;
}

static void run_completed(inverse_run *run, const lwi_pose_known *pose)
{
    const lw_model *m = run->m;
    lw_inverse_answer *a = run->a;
    size_t n_goal;
    bool cut = false;
    a->off_by_position_m = pose->off_by_position_m;
    a->off_by_angle_rad = pose->off_by_angle_rad;
    if (contradicts(m, pose)) {
        a->complete = true;
        a->basis = LW_BASIS_EXPLICIT;
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->reason = "the pose asks for components that this mechanism cannot change";
        return;
    }
    if (m->explicit_inverse) {
        a->complete = true;
        a->basis = LW_BASIS_EXPLICIT;
        run_explicit(run, pose);
        cut = !a->complete;
        if (!a->complete && run->ask->has_mode) {
            run->n = 0; /* the list is cut: the mode asked for is solved by itself */
            (void)run_one_mode(run, pose, &run->ask->mode);
        }
    } else {
        full_pose_goals(run->work->goal2, &n_goal, m, pose);
        if (m->set[1] != NULL) {
            run_set(run, pose, run->work->goal2, n_goal);
        } else {
            run_local(run, run->work->goal2, n_goal);
        }
    }
    const bool open = a->basis == LW_BASIS_EXPLICIT && a->dimension > 0;
    if (open) {
        a->complete = false; /* a limb is free to move: what is listed are samples */
        a->found.complex_count = -1;
    }
    judge_list(run);
    if (cut || open) {
        a->found.real = a->found.within_limits = -1; /* not all are listed */
    }
    if (open && a->n_solution > 0 && a->outcome == LW_OUTCOME_LIMIT) {
        a->outcome = LW_OUTCOME_UNDECIDED;
        a->reason = "the samples found are beyond a limit, but the pose leaves a freedom open";
    }
}

lw_code lw_inverse(const lw_inverse_answer **out, const lw_model *m, const lw_inverse_ask *ask,
                   lw_work *work, lw_err *err)
{
    lw_inverse_answer *a = &work->inverse;
    lw_code rc;
    *out = NULL;
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->has_mode && lwi_mode_check(m, &ask->mode, err) != LW_OK) {
        return LW_E_ARGUMENT;
    }
    /* `near` may itself be an inverse question and use the answer's storage: it comes first. */
    lw_outcome outcome = LW_OUTCOME_NONE;
    const char *reason = NULL;
    const lw_config *hint = lwi_near_config(m, ask->near, NULL, work, &outcome, &reason, &rc, err);
    if (rc != LW_OK) {
        return rc;
    }
    memset(a, 0, sizeof *a);
    a->off_by_limb = SIZE_MAX;
    a->basis = LW_BASIS_LOCAL;
    a->found.complex_count = -1;
    a->outcome = outcome;
    a->reason = reason;
    inverse_run run = {.m = m, .tool = tool, .ask = ask, .a = a, .work = work, .hint = hint};
    *out = a;
    if (hint == NULL) {
        return LW_OK;
    }
    if (m->completion.usable && m->fused[tool->body] == m->fused[m->spec->tool[0].body]) {
        lwi_pose_known pose;
        rc = lwi_pose_complete(&pose, m, tool, &ask->pose, err);
        if (rc == LW_OK) {
            run_completed(&run, &pose);
        }
    } else {
        size_t n_goal;
        rc = lwi_pose_goals(work->goal2, &n_goal, m, tool, &ask->pose, err);
        if (rc == LW_OK) {
            run_local(&run, work->goal2, n_goal);
            judge_list(&run);
        }
    }
    if (rc != LW_OK) {
        *out = NULL;
    }
    return rc;
}

/* The pose in one mode, explicit mechanisms only: the fast path of reach. */
bool lwi_inverse_one(lw_solution **sol, bool *open, const lw_model *m, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lw_mode *mode, const lw_config *hint,
                     lw_work *work)
{
    lw_inverse_answer unused = {.off_by_limb = SIZE_MAX};
    inverse_run run = {.m = m, .tool = tool, .a = &unused, .work = work, .hint = hint};
    if (!m->explicit_inverse || !run_one_mode(&run, pose, mode)) {
        return false;
    }
    *open = unused.dimension > 0;
    *sol = &work->solution[0];
    return true;
}

/* Of the limbs in their branches of a mode, the first that has no solution at the pose, and by how
 * much it is too short or too long; SIZE_MAX where all have one. Explicit mechanisms only. */
size_t lwi_inverse_misses(double *miss_m, const lw_model *m, const lwi_pose_known *pose,
                          const lw_mode *mode, lw_work *work)
{
    place_known(&work->scratch, m, pose);
    for (size_t i = 0; i < m->n_limb; i++) {
        unsigned branch;
        lwi_limb_result *r = &work->limb_result[i * LWI_MAX_BRANCHES];
        if (!lwi_branch_from_entry(&branch, &m->limb[i], mode->sign[i], mode->branch[i])) {
            continue;
        }
        lwi_limb_solve(r, m, &m->limb[i], branch, &work->scratch);
        if (!r->real) {
            *miss_m = r->miss_m;
            return i;
        }
    }
    return SIZE_MAX;
}
