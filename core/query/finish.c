/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What every solution carries besides its configuration: drive coordinates, tool pose, mode,
 * limits. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "finish.h"

#include <stdint.h>

void lwi_drive_coords(double *drive, const lw_model *model, const lw_config *config)
{
    const lw_spec *spec = model->spec;
    for (size_t d = 0; d < spec->n_drive; d++) {
        double sum = 0.0;
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            sum += spec->drive[d].term[t].factor * config->coord[spec->drive[d].term[t].coord];
        }
        drive[d] = sum;
    }
}

static void judge(lw_solution *sol, lw_limit_of of, size_t index, size_t part, double value,
                  const lw_range *range)
{
    double over = 0.0;
    if (range->has_low && !(value >= range->low - LWI_LIMIT_SLACK)) {
        over = range->low - value;
    } else if (range->has_high && !(value <= range->high + LWI_LIMIT_SLACK)) {
        over = value - range->high;
    } else {
        return;
    }
    sol->within_limits = false;
    if (sol->n_limit < LW_MAX_LIMITS_BROKEN) {
        lw_limit *limit = &sol->limit[sol->n_limit++];
        limit->of = of;
        limit->index = index;
        limit->part = part;
        limit->value = value;
        limit->range = *range;
        limit->over = over;
    }
}

static void judge_cone(lw_solution *sol, lw_limit_of of, size_t index, size_t end,
                       const double a[3], const double b[3], double cone_rad)
{
    double c[3];
    lw_range range = {.has_low = false, .has_high = true, .high = cone_rad};
    lwi_cross(c, a, b);
    /* atan(x) <= x and tan(x) >= x + x^3 / 3: well inside the cone without asking for the angle. */
    double along = lwi_dot(a, b);
    double room = along * (cone_rad + cone_rad * cone_rad * cone_rad / 3.0) * (1.0 - 1e-9);
    if (along > 0.0 && cone_rad < 1.5 && lwi_dot(c, c) < room * room) {
        return;
    }
    judge(sol, of, index, LW_PART_CONE + end, atan2(lwi_norm(c), lwi_dot(a, b)), &range);
}

static void judge_joint(lw_solution *sol, const lw_model *model, size_t j, size_t first)
{
    const lw_spec_joint *joint = &model->spec->joint[j];
    size_t n = lw_joint_coords(joint->type);
    for (size_t k = 0; k < n; k++) {
        judge(sol, LW_LIMIT_JOINT, j, k, sol->config.coord[first + k], &joint->range[k]);
    }
    if (joint->type == LW_SPHERICAL && joint->has_cone) {
        double a[3];
        double b[3];
        lwi_rot_apply(a, sol->config.body[joint->body[0]].rot, joint->cone_axis);
        lwi_rot_apply(b, sol->config.body[joint->body[1]].rot, joint->stud_axis);
        judge_cone(sol, LW_LIMIT_JOINT, j, 0, a, b, joint->cone_rad);
    }
}

static void judge_rod(lw_solution *sol, const lw_model *model, size_t r, size_t coord)
{
    const lw_spec_rod *rod = &model->spec->rod[r];
    double length = model->whole->rod[r].length_m + sol->config.coord[coord];
    judge(sol, LW_LIMIT_ROD, r, 0, length, &rod->range_m);
    if (!rod->swivel[0].present && !rod->swivel[1].present) {
        return;
    }
    double p[3];
    double q[3];
    double d[3];
    lwi_frame_apply(p, &sol->config.body[rod->body[0]], rod->end_m[0]);
    lwi_frame_apply(q, &sol->config.body[rod->body[1]], rod->end_m[1]);
    lwi_sub(d, q, p);
    for (size_t e = 0; e < 2; e++) {
        double a[3];
        if (!rod->swivel[e].present) {
            continue;
        }
        lwi_rot_apply(a, sol->config.body[rod->body[e]].rot, rod->swivel[e].axis);
        for (int i = 0; i < 3 && e == 1; i++) {
            a[i] = -a[i]; /* the rod leaves its second end backwards */
        }
        judge_cone(sol, LW_LIMIT_ROD, r, e, a, d, rod->swivel[e].cone_rad);
    }
}

void lwi_limits_judge(lw_solution *sol, const lw_model *model)
{
    const lw_spec *spec = model->spec;
    size_t coord = 0;
    sol->within_limits = true;
    sol->n_limit = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        judge_joint(sol, model, j, coord);
        coord += lw_joint_coords(spec->joint[j].type);
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        judge_rod(sol, model, r, coord + r);
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        judge(sol, LW_LIMIT_DRIVE, d, 0, sol->drive[d], &spec->drive[d].range);
    }
}

/* A turning drive on one joint may stand whole turns apart with the same posture. */
static unsigned whole_turns(const lw_model *model, size_t d, double value)
{
    const lw_spec_drive *drive = &model->spec->drive[d];
    size_t joint;
    size_t part;
    size_t rod;
    const lw_range *r = &drive->range;
    bool bounded = r->has_low && r->has_high;
    if (bounded && !(value >= r->low - LWI_LIMIT_SLACK && value <= r->high + LWI_LIMIT_SLACK)) {
        return 0;
    }
    if (!bounded || !drive->turning || drive->n_term != 1 ||
        !lw_spec_coord_owner(model->spec, drive->term[0].coord, &joint, &part, &rod) ||
        joint == SIZE_MAX || model->spec->joint[joint].type != LW_REVOLUTE) {
        return 1;
    }
    /* Coupled and output turns are counted: they differ. */
    for (size_t c = 0; c < model->spec->n_coupling; c++) {
        for (size_t t = 0; t < model->spec->coupling[c].n_term; t++) {
            if (model->spec->coupling[c].term[t].coord == drive->term[0].coord) {
                return 1;
            }
        }
    }
    for (size_t o = 0; o < model->spec->n_output; o++) {
        if (model->spec->output[o].kind == LW_OUT_COORD &&
            model->spec->output[o].coord == drive->term[0].coord) {
            return 1;
        }
    }
    double turn = 6.283185307179586476925 * fabs(drive->term[0].factor);
    double up = floor((r->high + LWI_LIMIT_SLACK - value) / turn);
    double down = floor((value - r->low + LWI_LIMIT_SLACK) / turn);
    return (unsigned)(fmin(up, 1e6) + fmin(down, 1e6)) + 1U;
}

void lwi_solution_finish(lw_solution *sol, const lw_model *model, const lw_spec_tool *tool)
{
    lwi_drive_coords(sol->drive, model, &sol->config);
    lwi_tool_pose(&sol->tool, tool, &sol->config);
    lwi_mode_of(&sol->mode, model, &sol->config);
    sol->mode_known = true;
    sol->contradicted = false;
    sol->certified = false;
    sol->certified_radius = 0.0;
    for (size_t d = 0; d < model->spec->n_drive; d++) {
        sol->turns[d] = whole_turns(model, d, sol->drive[d]);
    }
    lwi_limits_judge(sol, model);
}

void lwi_solution_from_state(lw_solution *sol, const lw_model *model, const lw_spec_tool *tool,
                             const lwi_state *state, const lwi_eval *ev, const lw_config *hint)
{
    lwi_config_from_eval(&sol->config, model->whole, state, ev, hint);
    lwi_closure_error(&sol->residual_position_m, &sol->residual_angle_rad, model->whole, state, ev);
    lwi_solution_finish(sol, model, tool);
}

/* Scaled distance of two configurations over all scalar coordinates and body rotations. */
double lwi_config_distance(const lw_model *model, const lw_config *a, const lw_config *b)
{
    double sum = 0.0;
    for (size_t i = 0; i < model->n_coord; i++) {
        double d = a->coord[i] - b->coord[i];
        d = lw_spec_coord_turning(model->spec, i) ? d : d / model->length_m;
        sum += d * d;
    }
    if (model->n_coord == model->spec->n_rod || model->n_ball > 0) {
        for (size_t i = 0; i < model->spec->n_body; i++) {
            double rest[9];
            double v[3];
            lwi_rot_mul_at(rest, a->body[i].rot, b->body[i].rot);
            lwi_rot_log(v, rest);
            sum += lwi_dot(v, v);
            lwi_sub(v, a->body[i].pos_m, b->body[i].pos_m);
            sum += lwi_dot(v, v) / (model->length_m * model->length_m);
        }
    }
    return sqrt(sum);
}

const char *lw_outcome_word(lw_outcome outcome)
{
    static const char *const word[] = {"none",        "ok",           "low_margin", "limit",
                                       "out_of_reach", "undecided",    "other_mode", "singular",
                                       "inconsistent", "blocked"};
    return (unsigned)outcome < sizeof word / sizeof word[0] ? word[outcome] : "none";
}

const char *lw_margin_word(lw_margin_name name)
{
    static const char *const word[] = {"accuracy", "load", "speed", "spare", "travel", "hold"};
    return (unsigned)name < LW_MARGIN_COUNT ? word[name] : "";
}
