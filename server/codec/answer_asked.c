/* SPDX-License-Identifier: GPL-3.0-or-later */
/* "asked": the question as it was understood, so that whoever reads an answer later sees what it
 * answers. Numbers have been to SI and back; the few digits they were written in come back. */
#include <string.h>

#include "answer_out.h"
#include "path_in.h"

static void put_direction(lwd_json *json, const double v[3])
{
    lwd_json_put_object(json, "direction");
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

static void put_zyx(lwd_json *json, lwd_units units, const lw_pose_ask *pose)
{
    static const char *const name[3] = {"yaw", "pitch", "roll"};
    if (pose->has_zyx[0] && !pose->has_zyx[1] && !pose->has_zyx[2]) {
        lwd_json_put_number(json, "rz", lwd_tidy(lwd_angle_out(units, pose->zyx_rad[0])));
        return;
    }
    lwd_json_put_object(json, "zyx");
    for (size_t i = 0; i < 3; i++) {
        if (pose->has_zyx[i]) {
            lwd_json_put_number(json, name[i], lwd_tidy(lwd_angle_out(units, pose->zyx_rad[i])));
        }
    }
    lwd_json_end(json);
}

static void put_pose(lwd_json *json, const lwd_answer_head *head, const char *key,
                     const lw_pose_ask *pose)
{
    static const char *const name[3] = {"x", "y", "z"};
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    if (key != NULL) {
        lwd_json_key(json, key);
    }
    lwd_json_object(json);
    for (size_t i = 0; i < 3; i++) {
        if (pose->has_position[i]) {
            double value = lwd_length_out(units, pose->position_m[i]);
            lwd_json_put_number(json, name[i], lwd_tidy(value));
        }
    }
    if (pose->orient == LW_ORIENT_QUATERNION) {
        put_quaternion(json, pose->quat);
    } else if (pose->orient == LW_ORIENT_ZYX) {
        put_zyx(json, units, pose);
    } else if (pose->orient == LW_ORIENT_DIRECTION) {
        put_direction(json, pose->direction);
    }
    if (pose->n_joint > 0) {
        lwd_json_put_object(json, "joints");
        for (size_t i = 0; i < pose->n_joint; i++) {
            size_t c = pose->joint_coord[i];
            double value = lwd_coord_out(edge, units, c, pose->joint_value[i]);
            lwd_json_put_number(json, edge->coord_name[c], lwd_tidy(value));
        }
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_drives(lwd_json *json, const lwd_edge *edge, const bool *has, const double *drive)
{
    lwd_json_put_object(json, "drives");
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        if (has[i]) {
            lwd_json_put_number(json, edge->spec->drive[i].name,
                                lwd_tidy(lwd_reading_out(edge, i, drive[i])));
        }
    }
    lwd_json_end(json);
}

static void put_joints(lwd_json *json, const lwd_answer_head *head, const lw_posture_ask *posture)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    size_t rod_first = edge->n_coord - edge->spec->n_rod;
    lwd_json_put_object(json, "joints");
    for (size_t c = 0; c < edge->n_coord; c++) {
        if (!posture->has_coord[c]) {
            continue;
        }
        double value = c < rod_first
                           ? lwd_coord_out(edge, units, c, posture->coord[c])
                           : lwd_length_out(units, edge->rod_length_m[c - rod_first]
                                                       + posture->coord[c]);
        lwd_json_put_number(json, edge->coord_name[c], lwd_tidy(value));
    }
    for (size_t k = 0; k < edge->n_ball; k++) {
        if (posture->has_ball[k]) {
            lwd_json_put_object(json, edge->spec->joint[edge->ball_joint[k]].name);
            put_quaternion(json, posture->ball[k]);
            lwd_json_end(json);
        }
    }
    lwd_json_end(json);
}

static void put_bodies(lwd_json *json, const lwd_answer_head *head, const lw_posture_ask *posture)
{
    const lw_spec *spec = head->edge->spec;
    double length = lwd_length_out(head->question->units, 1.0);
    lwd_json_put_object(json, "bodies");
    for (size_t i = 0; i < spec->n_body; i++) {
        if (!posture->has_body[i]) {
            continue;
        }
        const lw_frame *frame = &posture->body[i];
        double quat[4];
        lw_quat_from_rot(quat, frame->rot);
        lwd_json_put_object(json, spec->body[i]);
        lwd_json_put_number(json, "x", lwd_tidy(frame->pos_m[0] * length));
        lwd_json_put_number(json, "y", lwd_tidy(frame->pos_m[1] * length));
        lwd_json_put_number(json, "z", lwd_tidy(frame->pos_m[2] * length));
        put_quaternion(json, quat);
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_mode(lwd_json *json, const lw_mode *mode)
{
    char text[LW_MODE_TEXT_SIZE];
    lw_mode_text(text, mode);
    lwd_json_put_string(json, "mode", text);
}

/* The members of a posture, without the braces around them; no deeper than its `near`. */
static void put_posture_members(lwd_json *json, const lwd_answer_head *head,
                                const lw_posture_ask *posture)
{
    switch (posture->kind) {
    case LW_BY_NOTHING:
        break;
    case LW_BY_DRIVES:
        put_drives(json, head->edge, posture->has_drive, posture->drive);
        break;
    case LW_BY_POSE:
        put_pose(json, head, "pose", &posture->pose);
        break;
    case LW_BY_JOINTS:
        put_joints(json, head, posture);
        break;
    case LW_BY_BODIES:
        put_bodies(json, head, posture);
        break;
    }
    if (posture->has_mode) {
        put_mode(json, &posture->mode);
    }
}

static void put_posture(lwd_json *json, const lwd_answer_head *head,
                        const lw_posture_ask *posture)
{
    put_posture_members(json, head, posture);
    if (posture->near != NULL) {
        lwd_json_put_object(json, "near");
        put_posture_members(json, head, posture->near);
        lwd_json_end(json);
    }
}

/* A tool that was written out in the question; a named one stands in "tool" of the answer. */
static void put_tool(lwd_json *json, const lwd_answer_head *head)
{
    const lw_spec_tool *tool = &head->question->tool_written;
    double quat[4];
    lw_quat_from_rot(quat, tool->frame.rot);
    lwd_json_put_object(json, "tool");
    lwd_json_put_string(json, "name", tool->name);
    lwd_json_put_string(json, "body", head->edge->spec->body[tool->body]);
    lwd_json_put_array(json, "at");
    for (size_t i = 0; i < 3; i++) {
        lwd_json_number(json,
                        lwd_tidy(lwd_length_out(head->question->units, tool->frame.pos_m[i])));
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "orientation");
    put_quaternion(json, quat);
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_margin_min(lwd_json *json, const lwd_question *q)
{
    if (q->margin_min_is_number) {
        lwd_json_put_number(json, "margin_min", q->margin_min_number);
        return;
    }
    lwd_json_put_object(json, "margin_min");
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        if (q->margin_min.asked[i]) {
            lwd_json_put_number(json, lw_margin_word((lw_margin_name)i), q->margin_min.value[i]);
        }
    }
    lwd_json_end(json);
}

static void put_moves(lwd_json *json, const lwd_answer_head *head, const lwd_path *path)
{
    lwd_json_put_array(json, "through");
    for (size_t i = 0; i < path->n; i++) {
        const lw_move *move = &path->move[i];
        lwd_json_object(json);
        if (path->line[i][0] != '\0') {
            lwd_json_put_string(json, "line", path->line[i]);
        }
        lwd_json_put_string(json, "move", lwd_move_word(move->kind));
        if (move->kind == LW_MOVE_CIRCLE) {
            put_pose(json, head, "via", &move->via);
        }
        if (move->has_drives) {
            put_drives(json, head->edge, move->has_drive, move->drive);
        } else {
            put_pose(json, head, "pose", &move->pose);
        }
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_travel(lwd_json *json, const lwd_question *q)
{
    lwd_json_put_object(json, "reach");
    if (q->travel_m > 0.0) {
        lwd_json_put_number(json, "position", lwd_tidy(lwd_length_out(q->units, q->travel_m)));
    }
    if (q->travel_rad > 0.0) {
        lwd_json_put_number(json, "angle", lwd_tidy(lwd_angle_out(q->units, q->travel_rad)));
    }
    lwd_json_end(json);
}

void lwd_answer_asked(lwd_json *json, const lwd_answer_head *head)
{
    const lwd_question *q = head->question;
    lwd_json_put_object(json, "asked");
    put_posture(json, head, &q->posture);
    if (q->tool_is_written) {
        put_tool(json, head);
    }
    if (q->kind == LWD_ASK_REACH && q->any_mode) {
        lwd_json_put_string(json, "mode", "any");
    }
    if (q->has_from) {
        lwd_json_put_object(json, "from");
        put_posture(json, head, &q->from);
        lwd_json_end(json);
    }
    if (q->kind == LWD_ASK_PATH) {
        put_moves(json, head, q->path);
    }
    if (q->travel_m > 0.0 || q->travel_rad > 0.0) {
        put_travel(json, q);
    }
    if (q->has_margin_min) {
        put_margin_min(json, q);
    }
    if (q->all) {
        lwd_json_put_bool(json, "all", true);
    }
    if (q->has_point) {
        lwd_json_put_array(json, "point");
        for (size_t i = 0; i < 3; i++) {
            lwd_json_number(json, lwd_tidy(lwd_length_out(q->units, q->point_m[i])));
        }
        lwd_json_end(json);
    }
    if (q->in_tool) {
        lwd_json_put_string(json, "in", "tool");
    }
    if (q->has_distance) {
        lwd_json_put_object(json, "distance");
        if (q->budget != 0) {
            lwd_json_put_int(json, "budget", q->budget);
        }
        lwd_json_end(json);
    } else if (q->budget != 0) {
        lwd_json_put_int(json, "budget", q->budget);
    }
    if (q->timeout_ms != 0) {
        lwd_json_put_int(json, "timeout_ms", q->timeout_ms);
    }
    if (q->certificate) {
        lwd_json_put_bool(json, "certificate", true);
    }
    lwd_json_end(json);
}
