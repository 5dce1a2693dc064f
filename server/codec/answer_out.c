/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What answers have in common: the head, poses, solutions, limits, margins. */
#include "answer_out.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

const char *lwd_asked_word(lwd_asked kind)
{
    static const char *const word[LWD_ASK_COUNT] = {"inverse", "forward", "jacobian", "margin",
                                                    "reach", "path", "free-travel"};
    return (unsigned)kind < LWD_ASK_COUNT ? word[kind] : "?";
}

static const lw_spec_tool *tool_of(const lwd_answer_head *head)
{
    const lwd_question *q = head->question;
    return q->tool_is_written ? &q->tool_written : &head->edge->spec->tool[q->tool];
}

void lwd_answer_begin(lwd_json *json, const lwd_answer_head *head, lw_outcome outcome,
                      const char *reason)
{
    const lwd_edge *edge = head->edge;
    const lwd_question *q = head->question;
    lwd_json_object(json);
    lwd_json_put_string(json, "mechanism", edge->name);
    lwd_json_put_int(json, "revision", edge->revision);
    lwd_json_put_string(json, "state", head->state);
    lwd_json_put_string(json, "digest", edge->digest);
    lwd_json_put_string(json, "tool", tool_of(head)->name);
    lwd_json_put_object(json, "units");
    lwd_json_put_string(json, "length", lwd_length_word(q->units));
    lwd_json_put_string(json, "angle", lwd_angle_word(q->units));
    lwd_json_end(json);
    if (q->head.has_ref) {
        lwd_json_put_string(json, "ref", q->head.ref);
    }
    lwd_answer_asked(json, head);
    lwd_json_put_string(json, "served_at", head->served_at);
    lwd_json_put_int(json, "code", (int64_t)outcome);
    lwd_json_put_string(json, "outcome", lw_outcome_word(outcome));
    if (reason != NULL) {
        lwd_json_put_string(json, "reason", reason);
    }
}

/* The answer is about the geometry of joints, rods and drives alone; say what it left out. */
void lwd_answer_end(lwd_json *json)
{
    static const char left_out[] = "[\"collisions\",\"body weights\"]";
    lwd_json_key(json, "not_looked_at");
    lwd_json_raw(json, left_out, sizeof left_out - 1);
    lwd_json_end(json);
}

/* ---- poses --------------------------------------------------------------------------------- */

static void put_xyz(lwd_json *json, const char *key, const double v[3])
{
    lwd_json_put_object(json, key);
    lwd_json_put_number(json, "x", v[0]);
    lwd_json_put_number(json, "y", v[1]);
    lwd_json_put_number(json, "z", v[2]);
    lwd_json_end(json);
}

static void put_quaternion(lwd_json *json, const double q[4])
{
    lwd_json_put_object(json, "quaternion");
    lwd_json_put_number(json, "w", q[0]);
    lwd_json_put_number(json, "x", q[1]);
    lwd_json_put_number(json, "y", q[2]);
    lwd_json_put_number(json, "z", q[3]);
    lwd_json_end(json);
}

static void put_zyx(lwd_json *json, lwd_units units, const double zyx_rad[3])
{
    lwd_json_put_object(json, "zyx");
    lwd_json_put_number(json, "yaw", lwd_angle_out(units, zyx_rad[0]));
    lwd_json_put_number(json, "pitch", lwd_angle_out(units, zyx_rad[1]));
    lwd_json_put_number(json, "roll", lwd_angle_out(units, zyx_rad[2]));
    lwd_json_end(json);
}

/* Axis times angle, 0 to half a turn, from a quaternion with w >= 0. */
static void put_rotation_vector(lwd_json *json, lwd_units units, const double q[4])
{
    double s = sqrt(q[1] * q[1] + q[2] * q[2] + q[3] * q[3]);
    double per = s > 0.0 ? 2.0 * atan2(s, q[0]) / s : 2.0;
    double v[3];
    for (size_t i = 0; i < 3; i++) {
        v[i] = lwd_angle_out(units, per * q[i + 1]);
    }
    put_xyz(json, "rotation_vector", v);
}

static void put_orientation(lwd_json *json, const lwd_answer_head *head, const double rot[9])
{
    lwd_units units = head->question->units;
    lwd_form form = head->question->form;
    double quat[4];
    double zyx[3];
    if (form == LWD_FORM_DEFAULT) {
        form = head->edge->form;
    }
    switch (form) {
    case LWD_FORM_RZ:
        lw_zyx_from_rot(zyx, rot);
        /* A tool that stands tilted on its body needs all three angles. */
        if (fabs(zyx[1]) <= 1e-9 && fabs(zyx[2]) <= 1e-9) {
            lwd_json_put_number(json, "rz", lwd_angle_out(units, zyx[0]));
        } else {
            put_zyx(json, units, zyx);
        }
        break;
    case LWD_FORM_ZYX:
        lw_zyx_from_rot(zyx, rot);
        put_zyx(json, units, zyx);
        break;
    case LWD_FORM_DIRECTION: {
        const double z_axis[3] = {rot[2], rot[5], rot[8]};
        put_xyz(json, "direction", z_axis);
        break;
    }
    case LWD_FORM_ROTATION_VECTOR:
        lw_quat_from_rot(quat, rot);
        put_rotation_vector(json, units, quat);
        break;
    case LWD_FORM_DEFAULT:
    case LWD_FORM_QUATERNION:
        lw_quat_from_rot(quat, rot);
        put_quaternion(json, quat);
        break;
    }
}

void lwd_answer_pose(lwd_json *json, const lwd_answer_head *head, const lw_frame *tool,
                     const double *coord)
{
    const lwd_edge *edge = head->edge;
    const lw_spec *spec = edge->spec;
    lwd_units units = head->question->units;
    lwd_json_put_object(json, "pose");
    lwd_json_put_number(json, "x", lwd_length_out(units, tool->pos_m[0]));
    lwd_json_put_number(json, "y", lwd_length_out(units, tool->pos_m[1]));
    lwd_json_put_number(json, "z", lwd_length_out(units, tool->pos_m[2]));
    put_orientation(json, head, tool->rot);
    bool open = false;
    for (size_t i = 0; i < spec->n_output && coord != NULL; i++) {
        if (spec->output[i].kind != LW_OUT_COORD) {
            continue;
        }
        size_t c = spec->output[i].coord;
        if (!open) {
            lwd_json_put_object(json, "joints");
            open = true;
        }
        lwd_json_put_number(json, edge->coord_name[c], lwd_coord_out(edge, units, c, coord[c]));
    }
    if (open) {
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

/* ---- solutions ----------------------------------------------------------------------------- */

void lwd_answer_mode(lwd_json *json, const lwd_answer_head *head, const lw_mode *mode)
{
    char text[LW_MODE_TEXT_SIZE];
    lw_mode_text(text, mode);
    lwd_json_put_string(json, "mode", text);
    const char *name = lwd_edge_mode_name(head->edge, mode);
    if (name != NULL) {
        lwd_json_put_string(json, "mode_name", name);
    }
    unsigned number = lw_mode_number(head->edge->model, mode);
    if (number != 0) {
        lwd_json_put_int(json, "mode_no", (int64_t)number);
    }
}

static void put_coords(lwd_json *json, const lwd_answer_head *head, const lw_config *config)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    size_t rod_first = edge->n_coord - edge->spec->n_rod;
    lwd_json_put_object(json, "joints");
    for (size_t c = 0; c < rod_first; c++) {
        lwd_json_put_number(json, edge->coord_name[c],
                            lwd_coord_out(edge, units, c, config->coord[c]));
    }
    for (size_t k = 0; k < edge->n_ball; k++) {
        lwd_json_put_object(json, edge->spec->joint[edge->ball_joint[k]].name);
        put_quaternion(json, config->ball[k]);
        lwd_json_end(json);
    }
    for (size_t r = 0; r < edge->spec->n_rod; r++) {
        size_t c = rod_first + r;
        if (edge->coord_shown[c]) {
            double length_m = edge->rod_length_m[r] + config->coord[c];
            lwd_json_put_number(json, edge->coord_name[c], lwd_length_out(units, length_m));
        }
    }
    lwd_json_end(json);
}

static void put_limits(lwd_json *json, const lwd_answer_head *head, const lw_solution *solution)
{
    lwd_json_put_array(json, "limits_broken");
    for (size_t i = 0; i < solution->n_limit && i < LW_MAX_LIMITS_BROKEN; i++) {
        lwd_answer_limit(json, head, &solution->limit[i]);
    }
    lwd_json_end(json);
}

void lwd_answer_solution(lwd_json *json, const lwd_answer_head *head, const lw_solution *solution)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    lwd_json_object(json);
    if (solution->mode_known) {
        lwd_answer_mode(json, head, &solution->mode);
    } else {
        lwd_json_put_null(json, "mode");
    }
    lwd_json_put_object(json, "drives");
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        lwd_json_put_number(json, edge->spec->drive[i].name,
                            lwd_reading_out(edge, i, solution->drive[i]));
    }
    lwd_json_end(json);
    put_coords(json, head, &solution->config);
    lwd_answer_pose(json, head, &solution->tool, solution->config.coord);
    lwd_json_put_bool(json, "within_limits", solution->within_limits);
    put_limits(json, head, solution);
    if (solution->contradicted) {
        lwd_json_put_bool(json, "contradicted", true);
    }
    bool open = false;
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        if (solution->turns[i] > 1) {
            if (!open) {
                lwd_json_put_object(json, "turns");
                open = true;
            }
            lwd_json_put_int(json, edge->spec->drive[i].name, (int)solution->turns[i]);
        }
    }
    if (open) {
        lwd_json_end(json);
    }
    if (solution->certified) {
        lwd_json_put_bool(json, "certified", true);
    }
    lwd_json_put_object(json, "residual");
    lwd_json_put_number(json, "position", lwd_length_out(units, solution->residual_position_m));
    lwd_json_put_number(json, "angle", lwd_angle_out(units, solution->residual_angle_rad));
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_count(lwd_json *json, const char *key, int count)
{
    if (count < 0) {
        lwd_json_put_null(json, key);
    } else {
        lwd_json_put_int(json, key, count);
    }
}

void lwd_answer_found(lwd_json *json, const lw_found *found, bool complete, lw_basis basis)
{
    static const char *const word[] = {"local", "explicit", "trace", "saturated"};
    lwd_json_put_object(json, "found");
    put_count(json, "complex", found->complex_count);
    put_count(json, "real", found->real);
    put_count(json, "within_limits", found->within_limits);
    put_count(json, "not_converged", found->not_converged);
    lwd_json_end(json);
    lwd_json_put_bool(json, "complete", complete);
    lwd_json_put_string(json, "basis", word[basis]);
}

/* ---- limits -------------------------------------------------------------------------------- */

const char *lwd_limit_name(const lwd_edge *edge, const lw_limit *limit)
{
    const lw_spec *spec = edge->spec;
    if (limit->of == LW_LIMIT_DRIVE) {
        return limit->index < spec->n_drive ? spec->drive[limit->index].name : "?";
    }
    if (limit->of == LW_LIMIT_ROD) {
        return limit->index < spec->n_rod ? spec->rod[limit->index].name : "?";
    }
    if (limit->index >= spec->n_joint) {
        return "?";
    }
    if (limit->part >= LW_PART_CONE) {
        return spec->joint[limit->index].name;
    }
    return edge->coord_name[lw_spec_joint_coord(spec, limit->index, limit->part)];
}

/* Units of a limit's figures: a linear map from SI. */
typedef struct limit_scale {
    double slope;
    double offset;
} limit_scale;

static limit_scale scale_of(const lwd_edge *edge, lwd_units units, const lw_limit *limit)
{
    limit_scale scale = {.slope = lwd_length_out(units, 1.0), .offset = 0.0};
    if (limit->of == LW_LIMIT_DRIVE) {
        scale.slope = edge->drive[limit->index].slope;
        scale.offset = edge->drive[limit->index].at_reference;
    } else if (limit->part >= LW_PART_CONE) {
        scale.slope = lwd_angle_out(units, 1.0);
    } else if (limit->of == LW_LIMIT_JOINT
               && edge->coord_turning[lw_spec_joint_coord(edge->spec, limit->index, limit->part)]) {
        scale.slope = lwd_angle_out(units, 1.0);
    }
    return scale;
}

double lwd_limit_over(const lwd_edge *edge, lwd_units units, const lw_limit *limit)
{
    return fabs(scale_of(edge, units, limit).slope) * limit->over;
}

static void put_bound(lwd_json *json, const limit_scale *scale, bool has, double value)
{
    if (has) {
        lwd_json_number(json, lwd_tidy(scale->offset + scale->slope * value));
    } else {
        lwd_json_null(json);
    }
}

void lwd_answer_limit(lwd_json *json, const lwd_answer_head *head, const lw_limit *limit)
{
    static const char *const word[] = {"joint", "rod", "drive"};
    limit_scale scale = scale_of(head->edge, head->question->units, limit);
    const lw_range *range = &limit->range;
    lwd_json_object(json);
    lwd_json_put_string(json, "of", word[limit->of]);
    lwd_json_put_string(json, "name", lwd_limit_name(head->edge, limit));
    lwd_json_put_int(json, "no", (int64_t)limit->index + 1);
    if (limit->part >= LW_PART_CONE && limit->of != LW_LIMIT_DRIVE) {
        lwd_json_put_string(json, "cause", "cone");
        if (limit->of == LW_LIMIT_ROD) {
            lwd_json_put_int(json, "end", (int64_t)(limit->part - LW_PART_CONE) + 1);
        }
    }
    lwd_json_put_number(json, "value", scale.offset + scale.slope * limit->value);
    lwd_json_put_array(json, "range");
    if (scale.slope >= 0.0) {
        put_bound(json, &scale, range->has_low, range->low);
        put_bound(json, &scale, range->has_high, range->high);
    } else { /* readings that run against the coordinate */
        put_bound(json, &scale, range->has_high, range->high);
        put_bound(json, &scale, range->has_low, range->low);
    }
    lwd_json_end(json);
    lwd_json_put_number(json, "over", fabs(scale.slope) * limit->over);
    lwd_json_end(json);
}

void lwd_answer_off_by(lwd_json *json, const lwd_answer_head *head, double position_m,
                       double angle_rad, size_t limb, double limb_m)
{
    lwd_units units = head->question->units;
    bool named = limb < head->edge->report->n_limb;
    if (!(position_m > 0.0) && !(angle_rad > 0.0) && !named) {
        return;
    }
    lwd_json_put_object(json, "off_by");
    if (position_m > 0.0) {
        lwd_json_put_number(json, "position", lwd_length_out(units, position_m));
    }
    if (angle_rad > 0.0) {
        lwd_json_put_number(json, "angle", lwd_angle_out(units, angle_rad));
    }
    if (named) {
        lwd_json_put_string(json, "limb", head->edge->report->limb[limb].name);
        if (limb_m != 0.0) {
            lwd_json_put_number(json, "limb_by", lwd_length_out(units, limb_m));
        }
    }
    lwd_json_end(json);
}
