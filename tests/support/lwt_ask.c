/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions of tests, and closure checked from the definition of each joint: see lwt_build.h. */
#include <math.h>
#include <string.h>

#include "lwt.h"
#include "lwt_build.h"

/* ---- naming postures ------------------------------------------------------------------------- */

lw_posture_ask *lwt_posture(lwt_machine *m)
{
    lw_posture_ask *posture = &m->ring[m->ring_next++ % LWT_RING];
    memset(posture, 0, sizeof *posture);
    return posture;
}

lw_posture_ask *lwt_by_drives(lwt_machine *m, const double *drive, const lw_posture_ask *near)
{
    lw_posture_ask *posture = lwt_posture(m);
    posture->kind = LW_BY_DRIVES;
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        posture->has_drive[i] = true;
        posture->drive[i] = drive[i];
    }
    posture->near = near;
    return posture;
}

/* Yaw, pitch, roll of a frame that stays clear of pitch = +-90 deg. */
static void zyx_of(double zyx[3], const lw_frame *frame)
{
    const double *r = frame->rot;
    zyx[0] = atan2(r[3], r[0]);
    zyx[1] = atan2(-r[6], hypot(r[0], r[3]));
    zyx[2] = atan2(r[7], r[8]);
}

void lwt_pose_of(const lwt_machine *m, const lw_frame *tool, const double *coord, lw_pose_ask *out)
{
    memset(out, 0, sizeof *out);
    bool turn[3] = {false, false, false}; /* yaw, pitch, roll */
    for (size_t i = 0; i < m->spec->n_output; i++) {
        const lw_spec_output *output = &m->spec->output[i];
        switch (output->kind) {
        case LW_OUT_X:
        case LW_OUT_Y:
        case LW_OUT_Z:
            out->has_position[output->kind - LW_OUT_X] = true;
            break;
        case LW_OUT_RX:
        case LW_OUT_RY:
        case LW_OUT_RZ:
            turn[LW_OUT_RZ - output->kind] = true;
            break;
        case LW_OUT_COORD:
            assert_non_null(coord);
            out->joint_coord[out->n_joint] = output->coord;
            out->joint_value[out->n_joint++] = coord[output->coord];
            break;
        }
    }
    memcpy(out->position_m, tool->pos_m, sizeof out->position_m);
    if (turn[0] && turn[1] && turn[2]) {
        out->orient = LW_ORIENT_QUATERNION;
        lwt_quat_of(out->quat, tool);
    } else if (turn[0] || turn[1] || turn[2]) {
        out->orient = LW_ORIENT_ZYX;
        memcpy(out->has_zyx, turn, sizeof turn);
        zyx_of(out->zyx_rad, tool);
    }
}

lw_posture_ask *lwt_by_pose(lwt_machine *m, const lw_frame *tool, const double *coord,
                            const lw_mode *mode, const lw_posture_ask *near)
{
    lw_posture_ask *posture = lwt_posture(m);
    posture->kind = LW_BY_POSE;
    lwt_pose_of(m, tool, coord, &posture->pose);
    if (mode != NULL) {
        posture->has_mode = true;
        posture->mode = *mode;
    }
    posture->near = near;
    return posture;
}

static bool held_by_joints(const lw_spec *spec)
{
    /* Bodies reached from the fixed one through joints alone. */
    bool reached[LW_MAX_BODIES] = {false};
    reached[spec->frame] = true;
    for (size_t round = 0; round < spec->n_body; round++) {
        for (size_t i = 0; i < spec->n_joint; i++) {
            const size_t *body = spec->joint[i].body;
            bool either = reached[body[0]] || reached[body[1]];
            reached[body[0]] = either;
            reached[body[1]] = either;
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        if (!reached[i]) {
            return false;
        }
    }
    return true;
}

lw_posture_ask *lwt_by_config(lwt_machine *m, const lw_config *config)
{
    const lw_spec *spec = m->spec;
    lw_posture_ask *posture = lwt_posture(m);
    if (!held_by_joints(spec)) {
        posture->kind = LW_BY_BODIES;
        for (size_t i = 0; i < spec->n_body; i++) {
            posture->has_body[i] = i != spec->frame;
            posture->body[i] = config->body[i];
        }
        return posture;
    }
    posture->kind = LW_BY_JOINTS;
    size_t n = lw_spec_coord_count(spec);
    for (size_t i = 0; i < n; i++) {
        posture->has_coord[i] = true;
        posture->coord[i] = config->coord[i];
    }
    size_t ball = 0;
    for (size_t i = 0; i < spec->n_joint; i++) {
        if (spec->joint[i].type == LW_SPHERICAL) {
            posture->has_ball[ball] = true;
            memcpy(posture->ball[ball], config->ball[ball], sizeof posture->ball[ball]);
            ball++;
        }
    }
    return posture;
}

/* ---- asking ---------------------------------------------------------------------------------- */

static void call_went_well(lwt_machine *m, lw_code code, const char *question)
{
    if (code != LW_OK) {
        lwt_fail("%s of %s: %s at %s", question, m->spec->name, m->err.msg, m->err.where);
    }
}

const lw_inverse_answer *lwt_inverse(lwt_machine *m, const lw_frame *tool, const double *coord,
                                     const lw_mode *mode, const lw_posture_ask *near)
{
    lw_inverse_ask ask;
    memset(&ask, 0, sizeof ask);
    lwt_pose_of(m, tool, coord, &ask.pose);
    if (mode != NULL) {
        ask.has_mode = true;
        ask.mode = *mode;
    }
    ask.near = near;
    const lw_inverse_answer *out = NULL;
    memset(&m->err, 0, sizeof m->err);
    call_went_well(m, lw_inverse(&out, m->model, &ask, m->work, &m->err), "inverse");
    return out;
}

const lw_forward_answer *lwt_forward(lwt_machine *m, const double *drive,
                                     const lw_posture_ask *near)
{
    lw_forward_ask ask;
    memset(&ask, 0, sizeof ask);
    ask.readings = lwt_by_drives(m, drive, near);
    const lw_forward_answer *out = NULL;
    memset(&m->err, 0, sizeof m->err);
    call_went_well(m, lw_forward(&out, m->model, &ask, m->work, &m->err), "forward");
    if (out->outcome != LW_OUTCOME_OK || out->n_solution != 1) {
        lwt_fail("forward of %s: %s, %zu solutions, wanted ok and 1: %s", m->spec->name,
                 lw_outcome_word(out->outcome), out->n_solution,
                 out->reason == NULL ? "no reason" : out->reason);
    }
    return out;
}

const lw_jacobian_answer *lwt_jacobian(lwt_machine *m, const lw_posture_ask *posture)
{
    lw_jacobian_ask ask;
    memset(&ask, 0, sizeof ask);
    ask.posture = posture;
    const lw_jacobian_answer *out = NULL;
    memset(&m->err, 0, sizeof m->err);
    call_went_well(m, lw_jacobian(&out, m->model, &ask, m->work, &m->err), "jacobian");
    return out;
}

const lw_margin_answer *lwt_margin(lwt_machine *m, const lw_posture_ask *posture)
{
    const lw_margin_answer *out = NULL;
    memset(&m->err, 0, sizeof m->err);
    call_went_well(m, lw_margin(&out, m->model, 0, NULL, posture, m->work, &m->err), "margin");
    return out;
}

void lwt_keep(lwt_copy *out, const lwt_machine *m, const lw_solution *solution)
{
    const lw_spec *spec = m->spec;
    memset(out, 0, sizeof *out);
    memcpy(out->coord, solution->config.coord, lw_spec_coord_count(spec) * sizeof out->coord[0]);
    memcpy(out->body, solution->config.body, spec->n_body * sizeof out->body[0]);
    size_t balls = 0;
    for (size_t i = 0; i < spec->n_joint; i++) {
        balls += spec->joint[i].type == LW_SPHERICAL;
    }
    if (balls > 0) {
        memcpy(out->ball, solution->config.ball, balls * sizeof out->ball[0]);
    }
    memcpy(out->drive, solution->drive, spec->n_drive * sizeof out->drive[0]);
    out->tool = solution->tool;
    out->mode = solution->mode;
    out->mode_known = solution->mode_known;
}

lw_config lwt_config_of(lwt_copy *copy)
{
    return (lw_config){.coord = copy->coord, .ball = copy->ball, .body = copy->body};
}

/* ---- checking without the core --------------------------------------------------------------- */

/* Motion of the second body seen from the first, both in the reference posture's frame. */
static lw_frame joint_motion(const lw_spec_joint *joint, const double *q, const double *ball)
{
    lw_frame first = lwt_frame_identity();
    lw_frame second = lwt_frame_identity();
    double side[3];
    switch (joint->type) {
    case LW_FIXED:
        break;
    case LW_REVOLUTE:
        first = lwt_frame_turn(joint->axis, joint->at_m, q[0]);
        break;
    case LW_PRISMATIC:
        first = lwt_frame_slide(joint->axis, q[0]);
        break;
    case LW_HELICAL:
        first = lwt_frame_turn(joint->axis, joint->at_m, q[0]);
        second = lwt_frame_slide(joint->axis, joint->lead_m * q[0] / (2.0 * LWT_PI));
        break;
    case LW_CYLINDRICAL:
        first = lwt_frame_turn(joint->axis, joint->at_m, q[0]);
        second = lwt_frame_slide(joint->axis, q[1]);
        break;
    case LW_UNIVERSAL:
        first = lwt_frame_turn(joint->axis, joint->at_m, q[0]);
        second = lwt_frame_turn(joint->second_axis, joint->at_m, q[1]);
        break;
    case LW_SPHERICAL: {
        double moved[3];
        first = lwt_frame_quat((const double[3]){0, 0, 0}, ball);
        lwt_frame_vector(moved, &first, joint->at_m);
        for (size_t i = 0; i < 3; i++) {
            first.pos_m[i] = joint->at_m[i] - moved[i];
        }
        break;
    }
    case LW_PLANAR:
        lwt_cross(side, joint->axis, joint->second_axis);
        for (size_t i = 0; i < 3; i++) {
            first.pos_m[i] = q[0] * joint->second_axis[i] + q[1] * side[i];
        }
        second = lwt_frame_turn(joint->axis, joint->at_m, q[2]);
        break;
    }
    return lwt_frame_mul(&first, &second);
}

static double larger(double worst, double value)
{
    return value <= worst ? worst : value; /* a NaN comes through */
}

void lwt_closure(const lw_spec *spec, const lw_config *config, double *position_m,
                 double *angle_rad)
{
    double position = 0.0;
    double angle = 0.0;
    size_t ball = 0;
    for (size_t i = 0; i < spec->n_joint; i++) {
        const lw_spec_joint *joint = &spec->joint[i];
        bool spherical = joint->type == LW_SPHERICAL;
        const double *q = lw_joint_coords(joint->type) == 0
                              ? NULL
                              : &config->coord[lw_spec_joint_coord(spec, i, 0)];
        lw_frame motion = joint_motion(joint, q, spherical ? config->ball[ball] : NULL);
        ball += spherical;
        lw_frame want = lwt_frame_mul(&config->body[joint->body[0]], &motion);
        const lw_frame *got = &config->body[joint->body[1]];
        double at_want[3];
        double at_got[3];
        lwt_frame_point(at_want, &want, joint->at_m);
        lwt_frame_point(at_got, got, joint->at_m);
        double d[3] = {at_got[0] - at_want[0], at_got[1] - at_want[1], at_got[2] - at_want[2]};
        position = larger(position, lwt_norm(d));
        angle = larger(angle, lwt_frame_angle(&want, got));
    }
    for (size_t i = 0; i < spec->n_rod; i++) {
        const lw_spec_rod *rod = &spec->rod[i];
        double a[3];
        double b[3];
        lwt_frame_point(a, &config->body[rod->body[0]], rod->end_m[0]);
        lwt_frame_point(b, &config->body[rod->body[1]], rod->end_m[1]);
        double now[3] = {b[0] - a[0], b[1] - a[1], b[2] - a[2]};
        double then[3] = {rod->end_m[1][0] - rod->end_m[0][0], rod->end_m[1][1] - rod->end_m[0][1],
                          rod->end_m[1][2] - rod->end_m[0][2]};
        double change = config->coord[lw_spec_rod_coord(spec, i)];
        position = larger(position, fabs(lwt_norm(now) - lwt_norm(then) - change));
    }
    for (size_t i = 0; i < spec->n_coupling; i++) {
        const lw_spec_coupling *coupling = &spec->coupling[i];
        double sum = 0.0;
        for (size_t k = 0; k < coupling->n_term; k++) {
            sum += coupling->term[k].factor * config->coord[coupling->term[k].coord];
        }
        position = larger(position, fabs(sum));
    }
    *position_m = position;
    *angle_rad = angle;
}

void lwt_spec_move(lw_spec *spec, const lw_frame *by)
{
    for (size_t i = 0; i < spec->n_joint; i++) {
        lw_spec_joint *joint = &spec->joint[i];
        lwt_frame_point(joint->at_m, by, joint->at_m);
        lwt_frame_vector(joint->axis, by, joint->axis);
        lwt_frame_vector(joint->second_axis, by, joint->second_axis);
        lwt_frame_vector(joint->cone_axis, by, joint->cone_axis);
        lwt_frame_vector(joint->stud_axis, by, joint->stud_axis);
    }
    for (size_t i = 0; i < spec->n_rod; i++) {
        for (size_t k = 0; k < 2; k++) {
            lwt_frame_point(spec->rod[i].end_m[k], by, spec->rod[i].end_m[k]);
            lwt_frame_vector(spec->rod[i].swivel[k].axis, by, spec->rod[i].swivel[k].axis);
        }
    }
    for (size_t i = 0; i < spec->n_tool; i++) {
        spec->tool[i].frame = lwt_frame_mul(by, &spec->tool[i].frame);
    }
}
