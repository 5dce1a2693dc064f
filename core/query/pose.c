/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a tool pose as a person gives it to what is known: members that are outputs are taken,
 * members that follow are completed, members given on top are compared. */
#include "../math/vec3.h"
#include "finish.h"

#include <stdint.h>
#include <stdio.h>

static bool given_rotation(double rot[9], const lw_pose_ask *pose)
{
    if (pose->orient == LW_ORIENT_QUATERNION) {
        lw_rot_from_quat(rot, pose->quat);
        return true;
    }
    if (pose->orient == LW_ORIENT_ZYX && pose->has_zyx[0] && pose->has_zyx[1] && pose->has_zyx[2]) {
        lw_rot_from_zyx(rot, pose->zyx_rad);
        return true;
    }
    return false;
}

static lw_code take_joints(lwi_pose_known *out, const lw_model *m, const lw_pose_ask *pose,
                           lw_err *err)
{
    const lw_spec *spec = m->spec;
    char where[96];
    /* Joints that are no outputs are compared with the solutions found. */
    for (size_t o = 0; o < spec->n_output; o++) {
        bool found = false;
        if (spec->output[o].kind != LW_OUT_COORD) {
            continue;
        }
        for (size_t i = 0; i < pose->n_joint && !found; i++) {
            if (pose->joint_coord[i] == spec->output[o].coord) {
                out->output_coord[o] = pose->joint_value[i];
                found = true;
            }
        }
        if (!found) {
            size_t joint;
            size_t part;
            size_t rod;
            (void)lw_spec_coord_owner(spec, spec->output[o].coord, &joint, &part, &rod);
            const char *name = joint != SIZE_MAX ? spec->joint[joint].name : spec->rod[rod].name;
            (void)snprintf(where, sizeof where, "/pose/joints/%s", name);
            return LW_FAIL(err, LW_E_POSTURE, where,
                           "the coordinate of \"%s\" is an output and must be given", name);
        }
    }
    return LW_OK;
}

static lw_code take_rotation(lwi_pose_known *out, const lw_model *m, const lw_spec_tool *tool,
                             const lw_pose_ask *pose, lw_err *err)
{
    static const char *const angle_name[3] = {"roll", "pitch", "yaw"};
    const lwi_completion *c = &m->completion;
    double tool_rot[9];
    double full[9];
    double v[3];
    bool has_full = given_rotation(tool_rot, pose);
    if (has_full) { /* R_body = R_given R_tool0^T */
        double back[9];
        for (int i = 0; i < 3; i++) {
            for (int j = 0; j < 3; j++) {
                back[3 * i + j] = tool->frame.rot[3 * j + i];
            }
        }
        lwi_rot_mul(full, tool_rot, back);
    }
    double angle = 0.0;
    switch (c->rot) {
    case LWI_ROT_FULL:
        if (!has_full) {
            return LW_FAIL(err, LW_E_POSTURE, "/pose",
                           "the orientation is an output: give a quaternion, all of zyx, or a "
                           "rotation vector");
        }
        memcpy(out->body.rot, full, sizeof full);
        return LW_OK;
    case LWI_ROT_COORD:
        angle = c->factor * out->output_coord[c->output];
        break;
    case LWI_ROT_AXIS: {
        /* outputs rx ry rz are roll pitch yaw, stored yaw pitch roll in zyx_rad */
        int k = c->axis[2] == 1.0 ? 0 : c->axis[1] == 1.0 ? 1 : 2;
        double zero[3];
        lw_zyx_from_rot(zero, tool->frame.rot);
        if (has_full) {
            angle = lwi_rot_angle_about(full, c->axis);
        } else if (pose->orient == LW_ORIENT_ZYX && pose->has_zyx[k]) {
            angle = pose->zyx_rad[k] - zero[k];
        } else {
            return LW_FAIL(err, LW_E_POSTURE, "/pose",
                           "the angle %s is an output and must be given",
                           k == 0 ? "rz (yaw)" : angle_name[k == 1 ? 1 : 0]);
        }
        break;
    }
    case LWI_ROT_CONST:
    case LWI_ROT_NONE:
        break;
    }
    lwi_rot_axis(out->body.rot, c->axis, angle);
    if (c->rot == LWI_ROT_CONST) {
        lw_frame one;
        lwi_frame_identity(&one);
        memcpy(out->body.rot, one.rot, sizeof one.rot);
    }
    if (has_full) {
        double rest[9];
        lwi_rot_mul_at(rest, out->body.rot, full);
        lwi_rot_log(v, rest);
        out->off_by_angle_rad = lwi_norm(v);
    } else if (pose->orient == LW_ORIENT_ZYX) {
        const double whole = 6.283185307179586476925;
        double have[9];
        double zyx[3];
        lwi_rot_mul(have, out->body.rot, tool->frame.rot);
        lw_zyx_from_rot(zyx, have);
        for (int i = 0; i < 3; i++) {
            double d = pose->has_zyx[i] ? fabs(remainder(pose->zyx_rad[i] - zyx[i], whole)) : 0.0;
            out->off_by_angle_rad = fmax(out->off_by_angle_rad, d);
        }
    } else if (pose->orient == LW_ORIENT_DIRECTION) {
        double z0[3] = {tool->frame.rot[2], tool->frame.rot[5], tool->frame.rot[8]};
        double z[3];
        lwi_rot_apply(z, out->body.rot, z0);
        lwi_cross(v, z, pose->direction);
        out->off_by_angle_rad = atan2(lwi_norm(v), lwi_dot(z, pose->direction));
    }
    return LW_OK;
}

lw_code lwi_pose_complete(lwi_pose_known *out, const lw_model *m, const lw_spec_tool *tool,
                          const lw_pose_ask *pose, lw_err *err)
{
    static const char *const where[3] = {"/pose/x", "/pose/y", "/pose/z"};
    double arm[3];
    memset(out, 0, sizeof *out);
    lw_code rc = take_joints(out, m, pose, err);
    if (rc == LW_OK) {
        rc = take_rotation(out, m, tool, pose, err);
    }
    if (rc != LW_OK) {
        return rc;
    }
    lwi_rot_apply(arm, out->body.rot, tool->frame.pos_m);
    for (int i = 0; i < 3; i++) {
        if (m->completion.pos_output[i]) {
            if (!pose->has_position[i]) {
                return LW_FAIL(err, LW_E_POSTURE, where[i], "%s is an output and must be given",
                               where[i] + 6);
            }
            out->body.pos_m[i] = pose->position_m[i] - arm[i];
        } else {
            out->body.pos_m[i] = 0.0;
            if (pose->has_position[i]) {
                out->off_by_position_m =
                    fmax(out->off_by_position_m, fabs(pose->position_m[i] - arm[i]));
            }
        }
    }
    return LW_OK;
}

static void point_goal(lwi_goal *g, const lw_model *m, const lw_spec_tool *tool, size_t axis,
                       double value)
{
    memset(g, 0, sizeof *g);
    g->kind = LWI_GOAL_POINT;
    g->axis = axis;
    g->body = tool->body;
    lwi_copy3(g->point_m, tool->frame.pos_m);
    g->value = value;
    g->weight = 1.0 / m->length_m;
}

lw_code lwi_pose_goals(lwi_goal *goal, size_t *n_goal, const lw_model *m, const lw_spec_tool *tool,
                       const lw_pose_ask *pose, lw_err *err)
{
    static const char *const name[6] = {"x", "y", "z", "roll", "pitch", "yaw"};
    const lw_spec *spec = m->spec;
    double tool_rot[9];
    bool full = given_rotation(tool_rot, pose);
    size_t n = 0;
    size_t n_turn = 0;
    lwi_pose_known joints;
    memset(&joints, 0, sizeof joints);
    lw_code rc = take_joints(&joints, m, pose, err);
    if (rc != LW_OK) {
        return rc;
    }
    for (size_t o = 0; o < spec->n_output; o++) {
        n_turn += spec->output[o].kind >= LW_OUT_RX && spec->output[o].kind <= LW_OUT_RZ;
    }
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        lwi_goal *g = &goal[n];
        if (kind == LW_OUT_COORD) {
            memset(g, 0, sizeof *g);
            g->kind = LWI_GOAL_TERMS;
            g->n_term = 1;
            g->term[0].coord = spec->output[o].coord;
            g->term[0].factor = 1.0;
            g->value = joints.output_coord[o];
            g->weight = lw_spec_coord_turning(spec, g->term[0].coord) ? 1.0 : 1.0 / m->length_m;
            n++;
            continue;
        }
        if (kind <= LW_OUT_Z) {
            if (!pose->has_position[kind]) {
                return LW_FAIL(err, LW_E_POSTURE, "/pose", "%s is an output and must be given",
                               name[kind]);
            }
            point_goal(g, m, tool, (size_t)kind, pose->position_m[kind]);
            n++;
            continue;
        }
        memset(g, 0, sizeof *g);
        g->body = tool->body;
        g->weight = 1.0;
        memcpy(g->rot0, tool->frame.rot, sizeof g->rot0);
        size_t k = 5 - (size_t)kind; /* yaw 0, pitch 1, roll 2 */
        if (pose->orient == LW_ORIENT_DIRECTION && n_turn == 2) {
            g->kind = LWI_GOAL_DIRECTION;
            lwi_copy3(g->dir, pose->direction);
            g->axis = n > 0 && goal[n - 1].kind == LWI_GOAL_DIRECTION ? 1 : 0;
        } else if (n_turn == 3 && full) {
            double back[9];
            for (int i = 0; i < 3; i++) {
                for (int j = 0; j < 3; j++) {
                    back[3 * i + j] = tool->frame.rot[3 * j + i];
                }
            }
            g->kind = LWI_GOAL_ROT;
            g->axis = (size_t)kind - LW_OUT_RX;
            lwi_rot_mul(g->rot, tool_rot, back);
        } else {
            double zyx[3];
            bool have = full || (pose->orient == LW_ORIENT_ZYX && pose->has_zyx[k]);
            if (!have) {
                return LW_FAIL(err, LW_E_POSTURE, "/pose", "%s is an output and must be given",
                               name[kind]);
            }
            if (full) {
                lw_zyx_from_rot(zyx, tool_rot);
            } else {
                memcpy(zyx, pose->zyx_rad, sizeof zyx);
            }
            g->kind = LWI_GOAL_ZYX;
            g->axis = k;
            g->value = zyx[k];
        }
        n++;
    }
    *n_goal = n;
    return LW_OK;
}
