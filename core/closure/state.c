/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Configurations and states: reference posture, steps on the manifold, and every joint coordinate
 * from the displacements of bodies. */
#include "../math/vec3.h"
#include "system.h"

#define PI 3.14159265358979323846

void lwi_state_reference(lwi_state *state, const lwi_system *sys)
{
    memset(state, 0, sizeof *state);
    for (size_t i = 0; i < sys->n_quat; i++) {
        state->quat[i][0] = 1.0;
    }
    for (size_t n = 0; n < sys->n_node; n++) {
        lwi_frame_identity(&state->given[n]);
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        state->rod_length_m[r] = sys->rod[r].length_m;
    }
}

void lwi_state_from_config(lwi_state *state, const lwi_system *sys, const lw_config *config)
{
    size_t n_scalar = lw_spec_coord_count(sys->spec) - sys->spec->n_rod;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->kind == LWI_BALL) {
            memcpy(state->quat[el->quat], config->ball[el->ball], sizeof state->quat[0]);
        } else if (el->kind == LWI_FREE) {
            const lw_frame *x = &config->body[el->body];
            lw_quat_from_rot(state->quat[el->quat], x->rot);
            lwi_copy3(state->pos_m[el->quat], x->pos_m);
        } else {
            state->value[k] = config->coord[el->coord];
        }
    }
    for (size_t i = 0; i < sys->spec->n_body; i++) {
        size_t node = sys->body_node[i];
        if (sys->node_given[node]) {
            state->given[node] = config->body[i];
        }
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        state->rod_length_m[r] = sys->rod[r].length_m;
        if (lwi_rod_moves(sys->spec, r)) {
            state->rod_length_m[r] += config->coord[n_scalar + r];
        }
    }
}

static double unwrap(double angle, const double *hint)
{
    return hint == NULL ? angle : angle + 2.0 * PI * round((*hint - angle) / (2.0 * PI));
}

static double angle_between(const double from[3], const double to[3], const double axis[3])
{
    double c[3];
    lwi_cross(c, from, to);
    return atan2(lwi_dot(c, axis), lwi_dot(from, to));
}

void lwi_joint_from_frames(const lw_spec_joint *joint, const lw_frame *a, const lw_frame *b,
                           const double *hint, double *coord, double ball[4])
{
    lw_frame rel;
    double moved[3];
    double d[3];
    double y[3];
    lwi_frame_between(&rel, a, b);
    lwi_frame_apply(moved, &rel, joint->at_m);
    lwi_sub(d, moved, joint->at_m);
    switch (joint->type) {
    case LW_FIXED:
        break;
    case LW_REVOLUTE:
        coord[0] = unwrap(lwi_rot_angle_about(rel.rot, joint->axis), hint);
        break;
    case LW_PRISMATIC:
        coord[0] = lwi_dot(d, joint->axis);
        break;
    case LW_HELICAL:
        /* The slide tells the turn, whole turns included. */
        coord[0] = unwrap(lwi_rot_angle_about(rel.rot, joint->axis), hint);
        if (fabs(joint->lead_m) > 0.0) {
            double turn = lwi_dot(d, joint->axis) * 2.0 * PI / joint->lead_m;
            coord[0] = unwrap(coord[0], &turn);
        }
        break;
    case LW_CYLINDRICAL:
        coord[0] = unwrap(lwi_rot_angle_about(rel.rot, joint->axis), hint);
        coord[1] = lwi_dot(d, joint->axis);
        break;
    case LW_UNIVERSAL:
        lwi_rot_apply(moved, rel.rot, joint->second_axis);
        coord[0] = unwrap(angle_between(joint->second_axis, moved, joint->axis), hint);
        lwi_rot_back(moved, rel.rot, joint->axis);
        coord[1] = unwrap(angle_between(moved, joint->axis, joint->second_axis),
                          hint != NULL ? hint + 1 : NULL);
        break;
    case LW_PLANAR:
        lwi_cross(y, joint->axis, joint->second_axis);
        coord[0] = lwi_dot(d, joint->second_axis);
        coord[1] = lwi_dot(d, y);
        coord[2] = unwrap(lwi_rot_angle_about(rel.rot, joint->axis),
                          hint != NULL ? hint + 2 : NULL);
        break;
    case LW_SPHERICAL:
        lw_quat_from_rot(ball, rel.rot);
        break;
    }
}

void lwi_config_from_eval(lw_config *config, const lwi_system *sys, const lwi_state *state,
                          const lwi_eval *ev, const lw_config *hint)
{
    const lw_spec *spec = sys->spec;
    size_t coord = 0;
    size_t ball = 0;
    for (size_t i = 0; i < spec->n_body; i++) {
        config->body[i] = ev->node[sys->body_node[i]];
    }
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        size_t n = lw_joint_coords(joint->type);
        bool carried = n > 0;
        for (size_t k = 0; k < n; k++) {
            carried = carried && sys->coord_element[coord + k] >= 0;
        }
        if (carried) {
            for (size_t k = 0; k < n; k++) {
                config->coord[coord + k] = state->value[sys->coord_element[coord + k]];
            }
        } else {
            lwi_joint_from_frames(joint, &config->body[joint->body[0]],
                                  &config->body[joint->body[1]],
                                  hint != NULL ? hint->coord + coord : NULL, config->coord + coord,
                                  joint->type == LW_SPHERICAL ? config->ball[ball] : NULL);
        }
        coord += n;
        ball += joint->type == LW_SPHERICAL;
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        config->coord[coord + r] =
            lwi_rod_length(sys, ev, r) - sys->rod[r].length_m;
    }
}

static void step_ball(double q[4], const lwi_element *el, const double *step)
{
    double old[4];
    double dq[4];
    double d[3];
    memcpy(old, q, sizeof old);
    for (int i = 0; i < 3; i++) {
        d[i] = el->sign * step[i];
    }
    lwi_quat_cayley(dq, d);
    if (el->sign > 0.0) {
        lwi_quat_mul(q, dq, old);
    } else {
        lwi_quat_mul(q, old, dq);
    }
    lwi_quat_unit(q);
}

/* A free body turns about its reference point and shifts, both along fixed axes. */
static void step_free(double q[4], double pos_m[3], const lwi_element *el, const double *step,
                      const double *scale)
{
    double rot[9];
    double before[3];
    double after[3];
    double dq[4];
    double old[4];
    lw_rot_from_quat(rot, q);
    lwi_rot_apply(before, rot, el->at);
    memcpy(old, q, sizeof old);
    lwi_quat_cayley(dq, step + 3);
    lwi_quat_mul(q, dq, old);
    lwi_quat_unit(q);
    lw_rot_from_quat(rot, q);
    lwi_rot_apply(after, rot, el->at);
    for (int i = 0; i < 3; i++) {
        pos_m[i] += before[i] - after[i] + step[i] * scale[i];
    }
}

void lwi_state_step(lwi_state *state, const lwi_system *sys, const double *y)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->var < 0) {
            continue;
        }
        const double *step = y + el->var;
        const double *scale = sys->var_scale + el->var;
        if (el->kind == LWI_BALL) {
            step_ball(state->quat[el->quat], el, step);
        } else if (el->kind == LWI_FREE) {
            step_free(state->quat[el->quat], state->pos_m[el->quat], el, step, scale);
        } else {
            state->value[k] += step[0] * scale[0];
        }
    }
}
