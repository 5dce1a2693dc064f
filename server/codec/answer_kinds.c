/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The answers to inverse, forward, jacobian and reach. */
#include <stdio.h>
#include <string.h>

#include "answer_out.h"

static void put_solutions(lwd_json *json, const lwd_answer_head *head, const lw_solution *solution,
                          size_t n)
{
    lwd_json_put_array(json, "solutions");
    for (size_t i = 0; i < n; i++) {
        lwd_answer_solution(json, head, &solution[i]);
    }
    lwd_json_end(json);
}

void lwd_answer_inverse(lwd_json *json, const lwd_answer_head *head,
                        const lw_inverse_answer *answer)
{
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    lwd_answer_found(json, &answer->found, answer->complete, answer->basis);
    if (answer->dimension > 0) {
        lwd_json_put_int(json, "dimension", (int)answer->dimension);
    }
    if (answer->outcome == LW_OUTCOME_OUT_OF_REACH) {
        lwd_answer_off_by(json, head, answer->off_by_position_m, answer->off_by_angle_rad,
                          answer->off_by_limb, answer->off_by_limb_m);
    }
    put_solutions(json, head, answer->solution, answer->n_solution);
    lwd_answer_end(json);
}

/* How far the readings contradict one another, where there are drives to spare. */
static void put_disagreement(lwd_json *json, const lwd_edge *edge, const lw_forward_answer *answer)
{
    size_t n = answer->n_disagreement;
    if (n == 0) {
        return;
    }
    const double *const value[2] = {answer->disagreement, answer->allowed};
    static const char *const key[2] = {"disagreement", "allowed"};
    for (size_t k = 0; k < 2; k++) {
        lwd_json_put_object(json, key[k]);
        for (size_t i = 0; i < n && i < edge->spec->n_drive; i++) {
            double slope = edge->drive[i].slope;
            double shown = slope * value[k][i];
            if (k == 1 && shown < 0.0) {
                shown = -shown; /* what is allowed has no sign */
            }
            lwd_json_put_number(json, edge->spec->drive[i].name, shown);
        }
        lwd_json_end(json);
    }
    lwd_json_put_object(json, "chi_square");
    lwd_json_put_number(json, "value", answer->chi_square);
    lwd_json_put_number(json, "limit", answer->chi_square_limit);
    lwd_json_end(json);
    bool named = answer->suspect >= 0 && (size_t)answer->suspect < edge->spec->n_drive;
    lwd_json_put_string(json, "suspect", named ? edge->spec->drive[answer->suspect].name : NULL);
}

void lwd_answer_from_readings(lwd_json *json, const lwd_edge *edge, const lw_forward_answer *from)
{
    if (from != NULL && from->n_disagreement > 0) {
        lwd_json_put_object(json, "from_readings");
        lwd_json_put_int(json, "code", (int64_t)from->outcome);
        put_disagreement(json, edge, from);
        lwd_json_end(json);
    }
}

void lwd_answer_forward(lwd_json *json, const lwd_answer_head *head,
                        const lw_forward_answer *answer)
{
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    lwd_answer_found(json, &answer->found, answer->complete, answer->basis);
    if (answer->dimension > 0) {
        lwd_json_put_int(json, "dimension", (int)answer->dimension);
    }
    put_disagreement(json, head->edge, answer);
    if (answer->outcome == LW_OUTCOME_UNDECIDED) {
        lwd_json_put_number(json, "wall_at", answer->wall_at);
    }
    put_solutions(json, head, answer->solution, answer->n_solution);
    lwd_json_put_int(json, "iterations", answer->iterations);
    lwd_answer_end(json);
}

/* ---- jacobian ------------------------------------------------------------------------------ */

enum { NAME_SIZE = LWD_COORD_NAME_SIZE + 8, AXES_MAX = LW_MAX_DRIVES };

/* Names, units and scales of the rows or columns of one matrix. */
typedef struct axes {
    size_t n;
    const char *name[AXES_MAX];
    char unit[AXES_MAX][LWD_UNIT_SIZE + 4];
    double scale[AXES_MAX]; /* shown = scale * SI */
} axes;

static void axes_drives(axes *out, const lwd_edge *edge)
{
    out->n = edge->spec->n_drive;
    for (size_t i = 0; i < out->n; i++) {
        out->name[i] = edge->spec->drive[i].name;
        (void)snprintf(out->unit[i], sizeof out->unit[i], "%s/s", edge->drive[i].unit);
        out->scale[i] = edge->drive[i].slope;
    }
}

static void axis_set(axes *out, size_t i, const char *name, lwd_units units, bool turning)
{
    out->name[i] = name;
    out->scale[i] = turning ? lwd_angle_out(units, 1.0) : lwd_length_out(units, 1.0);
    (void)snprintf(out->unit[i], sizeof out->unit[i], "%s/s",
                   turning ? lwd_angle_word(units) : lwd_length_word(units));
}

static void axes_outputs(axes *out, const lwd_edge *edge, lwd_units units, size_t n)
{
    static const char *const word[] = {"x", "y", "z", "rx", "ry", "rz"};
    out->n = n < edge->spec->n_output ? n : edge->spec->n_output;
    for (size_t i = 0; i < out->n; i++) {
        const lw_spec_output *o = &edge->spec->output[i];
        if (o->kind == LW_OUT_COORD) {
            axis_set(out, i, edge->coord_name[o->coord], units, edge->coord_turning[o->coord]);
        } else {
            axis_set(out, i, word[o->kind], units, o->kind >= LW_OUT_RX);
        }
    }
}

static void axes_twist(axes *out, lwd_units units)
{
    static const char *const word[6] = {"vx", "vy", "vz", "wx", "wy", "wz"};
    out->n = 6;
    for (size_t i = 0; i < 6; i++) {
        axis_set(out, i, word[i], units, i >= 3);
    }
}

static void put_axes(lwd_json *json, const char *key, const axes *a)
{
    lwd_json_put_array(json, key);
    for (size_t i = 0; i < a->n; i++) {
        lwd_json_object(json);
        lwd_json_put_string(json, "name", a->name[i]);
        lwd_json_put_string(json, "unit", a->unit[i]);
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_matrix(lwd_json *json, const char *key, const axes *rows, const axes *columns,
                       const double *value)
{
    lwd_json_put_object(json, key);
    put_axes(json, "rows", rows);
    put_axes(json, "columns", columns);
    lwd_json_put_array(json, "values");
    for (size_t i = 0; i < rows->n; i++) {
        lwd_json_array(json);
        for (size_t k = 0; k < columns->n; k++) {
            lwd_json_number(json, value[i * columns->n + k] * rows->scale[i] / columns->scale[k]);
        }
        lwd_json_end(json);
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

void lwd_answer_jacobian(lwd_json *json, const lwd_answer_head *head,
                         const lw_jacobian_answer *answer)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    axes drives;
    axes outputs;
    axes twist;
    axes_drives(&drives, edge);
    axes_outputs(&outputs, edge, units, answer->n_output);
    axes_twist(&twist, units);
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    if (answer->has_forward && answer->solution != NULL) {
        put_matrix(json, "forward", &outputs, &drives, answer->forward);
        put_matrix(json, "twist", &twist, &drives, answer->twist);
    } else {
        lwd_json_put_null(json, "forward");
    }
    if (answer->has_inverse && answer->solution != NULL) {
        put_matrix(json, "inverse", &drives, &outputs, answer->inverse);
    } else {
        lwd_json_put_null(json, "inverse");
    }
    if (answer->condition_forward > 0.0) {
        lwd_json_put_number(json, "condition_forward", answer->condition_forward);
    } else {
        lwd_json_put_null(json, "condition_forward");
    }
    lwd_json_put_string(json, "in", head->question->in_tool ? "tool" : "fixed");
    lwd_json_key(json, "posture");
    if (answer->solution != NULL) {
        lwd_answer_solution(json, head, answer->solution);
    } else {
        lwd_json_null(json);
    }
    lwd_answer_end(json);
}

/* ---- reach --------------------------------------------------------------------------------- */

static void put_other_modes(lwd_json *json, const lwd_answer_head *head,
                            const lw_reach_answer *answer)
{
    lwd_json_put_array(json, "other_modes");
    for (size_t i = 0; i < answer->n_other && i < LW_MAX_MODES; i++) {
        lwd_json_object(json);
        lwd_answer_mode(json, head, &answer->other[i]);
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_reach_margins(lwd_json *json, const lwd_answer_head *head,
                              const lw_reach_answer *answer)
{
    if (answer->margin == NULL) {
        return;
    }
    lwd_answer_margins(json, head, answer->margin);
    if (answer->failed_margin >= 0 && answer->failed_margin < LW_MARGIN_COUNT) {
        lwd_json_put_string(json, "failed_margin",
                            lw_margin_word((lw_margin_name)answer->failed_margin));
    }
    if (answer->margin->classes != 0) {
        static const char *const word[3] = {"forward", "inverse", "constraint"};
        lwd_json_put_array(json, "classes");
        for (unsigned i = 0; i < 3; i++) {
            if (answer->margin->classes & (1U << i)) {
                lwd_json_string(json, word[i]);
            }
        }
        lwd_json_end(json);
    }
}

void lwd_answer_reach(lwd_json *json, const lwd_answer_head *head, const lw_reach_answer *answer)
{
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    lwd_json_put_string(json, "checked", answer->move_checked ? "move" : "posture");
    if (answer->move_checked) {
        lwd_json_put_number(json, "at", answer->move_at);
    }
    if (answer->asked_mode.count > 0) {
        char text[LW_MODE_TEXT_SIZE];
        lw_mode_text(text, &answer->asked_mode);
        lwd_json_put_string(json, "asked_mode", text);
    }
    lwd_answer_found(json, &answer->found, answer->complete, answer->basis);
    put_reach_margins(json, head, answer);
    if (answer->outcome == LW_OUTCOME_OUT_OF_REACH) {
        lwd_answer_off_by(json, head, answer->off_by_position_m, answer->off_by_angle_rad,
                          answer->off_by_limb, answer->off_by_limb_m);
    }
    if (answer->n_other > 0 || answer->outcome == LW_OUTCOME_OTHER_MODE) {
        put_other_modes(json, head, answer);
    }
    lwd_answer_from_readings(json, head->edge, answer->from);
    lwd_json_key(json, "solution");
    if (answer->solution != NULL) {
        lwd_answer_solution(json, head, answer->solution);
    } else {
        lwd_json_null(json);
    }
    lwd_answer_end(json);
}
