/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All solutions: the prepared set is tracked to the question's inputs, real ends are settled by the
 * real Newton method and finished like any other solution. */
#include "all.h"

#include "../math/tol.h"
#include "../math/vec3.h"

typedef struct taking {
    lwi_all_info *info;
    const lw_model *m;
    const lw_spec_tool *tool;
    const lwi_goal *goal;
    size_t n_goal;
    double goal_most; /* largest residual of goals that still counts as met */
    const lw_config *hint;
    lw_work *work;
} taking;

/* Same posture: tool, rods, the places and axes of all joints; idle spins and whole turns do not
 * count. */
bool lwi_same_posture(const lw_model *m, const lw_config *a, const lw_config *b)
{
    const lw_spec *spec = m->spec;
    double far = 1e-6 * m->length_m;
    double d[3];
    double p[3];
    double q[3];
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        /* Joints whose axes meet keep their places when one of them flips; their axes do not. */
        if (joint->type != LW_SPHERICAL && joint->type != LW_FIXED) {
            lwi_rot_apply(p, a->body[joint->body[0]].rot, joint->axis);
            lwi_rot_apply(q, b->body[joint->body[0]].rot, joint->axis);
            lwi_sub(d, p, q);
            if (!(lwi_norm(d) <= 1e-6)) {
                return false;
            }
        }
        if (joint->type == LW_PRISMATIC || joint->type == LW_PLANAR || joint->type == LW_FIXED) {
            continue;
        }
        for (size_t e = 0; e < 2; e++) {
            lwi_frame_apply(p, &a->body[joint->body[e]], joint->at_m);
            lwi_frame_apply(q, &b->body[joint->body[e]], joint->at_m);
            lwi_sub(d, p, q);
            if (!(lwi_norm(d) <= far)) {
                return false;
            }
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        for (size_t e = 0; e < 2; e++) {
            lwi_frame_apply(p, &a->body[spec->rod[r].body[e]], spec->rod[r].end_m[e]);
            lwi_frame_apply(q, &b->body[spec->rod[r].body[e]], spec->rod[r].end_m[e]);
            lwi_sub(d, p, q);
            if (!(lwi_norm(d) <= far)) {
                return false;
            }
        }
    }
    for (size_t t = 0; t < spec->n_tool; t++) {
        double rest[9];
        lwi_rot_mul_at(rest, a->body[spec->tool[t].body].rot, b->body[spec->tool[t].body].rot);
        lwi_rot_log(d, rest);
        if (!(lwi_norm(d) <= 1e-6)) {
            return false;
        }
    }
    for (size_t k = 0; k < spec->n_drive; k++) {
        double gap = 0.0;
        for (size_t t = 0; t < spec->drive[k].n_term; t++) {
            size_t coord = spec->drive[k].term[t].coord;
            gap += spec->drive[k].term[t].factor * (a->coord[coord] - b->coord[coord]);
        }
        gap = spec->drive[k].turning ? 2.0 * fabs(sin(0.5 * gap)) : fabs(gap) / m->length_m;
        if (!(gap <= 1e-6)) {
            return false;
        }
    }
    return true;
}

static bool take(void *context, const lwi_set *set, lwi_set_work *w)
{
    taking *t = context;
    lw_work *work = t->work;
    lwi_newton_info ni;
    if (t->info->n >= t->m->max_solutions) {
        return false;
    }
    lwi_eval_nodes(&w->ev, set->sys, &w->state);
    lwi_config_from_eval(&work->scratch, set->sys, &w->state, &w->ev, t->hint);
    lwi_state_from_config(&work->state, t->m->whole, &work->scratch);
    lw_solution *sol = &work->solution[t->info->n];
    if (!lwi_settle(sol, &ni, t->m, t->tool, t->goal, t->n_goal, t->hint, work) ||
        !(ni.goal <= t->goal_most) || !(ni.moved < 0.05)) {
        return false;
    }
    for (size_t i = 0; i < t->info->n; i++) {
        if (lwi_same_posture(t->m, &work->solution[i].config, &sol->config)) {
            return false;
        }
    }
    /* On the set's own system, with the inputs the solution has. */
    lwi_certificate proof;
    lwi_state_from_config(&w->state, set->sys, &sol->config);
    lwi_frame_identity(&w->state.given[0]);
    lwi_certify(&proof, set->sys, &w->state, &w->ev, &w->certify);
    sol->certified = proof.holds;
    sol->certified_radius = proof.radius;
    t->info->n++;
    return true;
}

/* work->state is settled; where it lies on a motion that the goals leave open it joins the list as
 * its one posture. */
static bool take_open_state(taking *t)
{
    lwi_newton_info ni;
    lw_work *work = t->work;
    lw_solution *sol = &work->solution[t->info->n];
    if (t->info->n >= t->m->max_solutions ||
        !lwi_settle(sol, &ni, t->m, t->tool, t->goal, t->n_goal, t->hint, work) ||
        !(ni.goal <= 1e-8)) {
        return false;
    }
    size_t dimension = lwi_open_dimension(t->m, t->goal, t->n_goal, work);
    if (dimension == 0) {
        return false;
    }
    sol->certified = false;
    t->info->dimension = dimension;
    t->info->n++;
    return true;
}

/* An end that did not settle, its real parts: it may lie next to a motion's real postures. */
static bool take_open(void *context, const lwi_set *set, lwi_set_work *w)
{
    taking *t = context;
    lwi_eval_nodes(&w->ev, set->sys, &w->state);
    lwi_config_from_eval(&t->work->scratch, set->sys, &w->state, &w->ev, t->hint);
    lwi_state_from_config(&t->work->state, t->m->whole, &t->work->scratch);
    return take_open_state(t);
}

/* The same from scattered starts, for motions that every input leaves open: no path leads there. */
static void scatter_open(taking *t)
{
    lwi_random random;
    double y[LWI_MAX_VARS];
    lwi_random_seed(&random, 20261201ULL);
    for (int start = 0; start < 24 && t->info->dimension == 0; start++) {
        lwi_state_from_config(&t->work->state, t->m->whole, t->hint);
        for (size_t i = 0; i < t->m->whole->n_var; i++) {
            y[i] = 1.4 * (2.0 * lwi_random_unit(&random) - 1.0);
        }
        lwi_state_step(&t->work->state, t->m->whole, y);
        (void)take_open_state(t);
    }
}

static void run(lwi_all_info *info, const lwi_set *set, const lwi_cx *target, taking *t)
{
    lwi_set_count count;
    memset(info, 0, sizeof *info);
    lwi_set_solve(&count, set, target, take, t, t->work->set);
    info->finite = count.finite;
    info->unsettled = count.unsettled;
    info->isolated = info->n;
    if (set->fibre.open > 0) {
        scatter_open(t);
        info->dimension = info->dimension > 0 ? info->dimension : set->fibre.open;
    } else if (count.unsettled > 0) {
        (void)lwi_set_loose(set, take_open, t, t->work->set);
    }
    info->closed = set->fibre.trace_closed && count.unsettled == 0 && info->dimension == 0;
}

bool lwi_forward_all_ready(const lw_model *m, const lw_posture_ask *readings)
{
    const lwi_set *set = m->set[0];
    for (size_t i = 0; set != NULL && i < set->n_drive; i++) {
        if (!readings->has_drive[set->drive[i]]) {
            return false;
        }
    }
    return set != NULL;
}

/* Coordinate that a chosen drive's reading stands for. */
static bool coord_value(double *value, const lw_model *m, const lwi_set *set, size_t coord,
                        const lw_posture_ask *readings)
{
    for (size_t i = 0; i < set->n_drive; i++) {
        const lw_term *term = m->spec->drive[set->drive[i]].term;
        if (term->coord == coord) {
            *value = readings->drive[set->drive[i]] / term->factor;
            return true;
        }
    }
    return false;
}

void lwi_forward_all(lwi_all_info *info, const lw_model *m, const lw_spec_tool *tool,
                     const lw_posture_ask *readings, const lwi_goal *goal, size_t n_goal,
                     const lw_config *hint, lw_work *work)
{
    const lwi_set *set = m->set[0];
    const lwi_hom *hom = &set->fibre.hom;
    lwi_state *state = &work->set->state;
    lwi_cx target[LWI_HOM_PARAMS];
    lwi_state_reference(state, set->sys);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        double value = 0.0;
        bool rod = par->kind == LWI_PAR_ROD;
        size_t coord = rod ? lw_spec_rod_coord(m->spec, par->index)
                           : (size_t)set->sys->element[par->index].coord;
        (void)coord_value(&value, m, set, coord, readings);
        if (rod) {
            value += set->sys->rod[par->index].length_m;
            state->rod_length_m[par->index] = value;
        } else {
            state->value[par->index] = value;
        }
        target[par->first] = value;
    }
    /* With spare readings a solution of the square choice counts even where the others
     * contradict it. */
    taking t = {.info = info,
                .m = m,
                .tool = tool,
                .goal = goal,
                .n_goal = n_goal,
                .goal_most = n_goal > m->mobility ? 1e300 : 1e-8,
                .hint = hint,
                .work = work};
    run(info, set, target, &t);
}

void lwi_inverse_all(lwi_all_info *info, const lw_model *m, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lwi_goal *goal, size_t n_goal,
                     const lw_config *hint, lw_work *work)
{
    const lwi_set *set = m->set[1];
    const lwi_hom *hom = &set->fibre.hom;
    const lw_spec *spec = m->spec;
    lwi_state *state = &work->set->state;
    lwi_cx target[LWI_HOM_PARAMS];
    lwi_state_reference(state, set->sys);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        if (par->kind == LWI_PAR_NODE) {
            double q[4];
            lw_quat_from_rot(q, pose->body.rot);
            state->given[par->index] = pose->body;
            for (size_t i = 0; i < 7; i++) {
                target[par->first + i] = i < 3 ? pose->body.pos_m[i] : q[i - 3];
            }
            continue;
        }
        size_t coord = (size_t)set->sys->element[par->index].coord;
        double value = 0.0;
        for (size_t o = 0; o < spec->n_output; o++) {
            if (spec->output[o].kind == LW_OUT_COORD && spec->output[o].coord == coord) {
                value = pose->output_coord[o];
            }
        }
        for (size_t k = 0; k < m->n_determined; k++) {
            for (size_t i = 0; m->determined[k].coord == coord && i < m->determined[k].n; i++) {
                value += m->determined[k].factor[i] * pose->output_coord[m->determined[k].from[i]];
            }
        }
        state->value[par->index] = value;
        target[par->first] = value;
    }
    taking t = {.info = info,
                .m = m,
                .tool = tool,
                .goal = goal,
                .n_goal = n_goal,
                .goal_most = 1e-8,
                .hint = hint,
                .work = work};
    run(info, set, target, &t);
}
