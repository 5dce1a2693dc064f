/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves: lines and circles of the tool point, one turn about a fixed axis, output joints evenly. */
#include "move.h"

#include "../math/vec3.h"

/* What three points say of a circle; false where they lie on one line or two coincide. */
static bool circle_through(lwi_move *m, const double via[3], const double end[3])
{
    double a[3];
    double b[3];
    double n[3];
    lwi_sub(a, via, m->from_m);
    lwi_sub(b, end, m->from_m);
    lwi_cross(n, a, b);
    double aa = lwi_dot(a, a);
    double bb = lwi_dot(b, b);
    double nn = lwi_dot(n, n);
    if (!(nn > 1e-12 * aa * bb) || !(aa > 0.0) || !(bb > 0.0)) {
        return false;
    }
    /* Circumcentre: from + (|a|^2 (b x n)... ) / (2 |n|^2). */
    double to[3];
    double u[3];
    double v[3];
    lwi_cross(u, b, n);
    lwi_cross(v, n, a);
    for (int i = 0; i < 3; i++) {
        to[i] = (aa * u[i] + bb * v[i]) / (2.0 * nn);
    }
    lwi_add(m->centre_m, m->from_m, to);
    double unit[3];
    (void)lwi_unit(unit, n);
    for (int i = 0; i < 3; i++) {
        m->out_m[i] = -to[i];
    }
    lwi_cross(m->side_m, unit, m->out_m);
    lwi_sub(u, end, m->centre_m);
    double angle = atan2(lwi_dot(u, m->side_m), lwi_dot(u, m->out_m));
    /* About the normal a x b the way from start over via to the end is the positive one. */
    m->sweep_rad = angle > 0.0 ? angle : angle + 6.283185307179586476925;
    return true;
}

static double wrap(double angle)
{
    return remainder(angle, 6.283185307179586476925);
}

static void set_turn(lwi_move *m, const lw_model *model, const lw_config *start,
                     const lwi_pose_known *end, const lw_frame *body0)
{
    const lwi_completion *c = &model->completion;
    double rest[9];
    double v[3];
    memcpy(m->rot0, body0->rot, sizeof m->rot0);
    lwi_copy3(m->axis, c->axis);
    switch (c->rot) {
    case LWI_ROT_FULL:
        lwi_rot_mul_at(rest, body0->rot, end->body.rot);
        lwi_rot_log(v, rest);
        m->turn_rad = lwi_norm(v);
        if (!lwi_unit(m->axis, v)) {
            m->axis[0] = m->axis[1] = 0.0;
            m->axis[2] = 1.0;
            m->turn_rad = 0.0;
        }
        break;
    case LWI_ROT_AXIS: {
        double from = lwi_rot_angle_about(body0->rot, c->axis);
        lwi_rot_axis(m->rot0, c->axis, from);
        m->turn_rad = wrap(lwi_rot_angle_about(end->body.rot, c->axis) - from);
        break;
    }
    case LWI_ROT_COORD: {
        double from = c->factor * start->coord[model->spec->output[c->output].coord];
        lwi_rot_axis(m->rot0, c->axis, from);
        m->turn_rad = c->factor * end->output_coord[c->output] - from;
        break;
    }
    case LWI_ROT_CONST:
    case LWI_ROT_NONE: {
        lw_frame one;
        lwi_frame_identity(&one);
        memcpy(m->rot0, one.rot, sizeof m->rot0);
        m->axis[0] = m->axis[1] = 0.0;
        m->axis[2] = 1.0;
        m->turn_rad = 0.0;
        break;
    }
    }
}

lw_code lwi_move_make(lwi_move *m, const lw_model *model, const lw_spec_tool *tool,
                      const lw_config *start, const lwi_pose_known *end, const double *via_m,
                      lw_err *err)
{
    const lw_frame *body0 = &start->body[tool->body];
    double goal[3];
    memset(m, 0, sizeof *m);
    lwi_copy3(m->tool_m, tool->frame.pos_m);
    set_turn(m, model, start, end, body0);
    double arm[3];
    lwi_rot_apply(arm, m->rot0, m->tool_m);
    lwi_add(m->from_m, body0->pos_m, arm);
    lwi_frame_apply(goal, &end->body, m->tool_m);
    lwi_sub(m->along_m, goal, m->from_m);
    for (int i = 0; i < 3; i++) {
        m->follows[i] = model->completion.pos_output[i];
        if (!m->follows[i]) {
            m->along_m[i] = 0.0;
        }
    }
    m->length_m = lwi_norm(m->along_m);
    if (via_m != NULL) {
        if (!circle_through(m, via_m, goal)) {
            return LW_FAIL(err, LW_E_ARGUMENT, "/via",
                           "start, via and end lie on one line or coincide: they name no circle; "
                           "ask for a line, or give another point");
        }
        m->arc = true;
        m->length_m = fabs(m->sweep_rad) * lwi_norm(m->out_m);
    }
    for (size_t o = 0; o < model->spec->n_output; o++) {
        if (model->spec->output[o].kind == LW_OUT_COORD) {
            m->coord[o] = start->coord[model->spec->output[o].coord];
            m->coord_along[o] = end->output_coord[o] - m->coord[o];
        }
    }
    return LW_OK;
}

void lwi_move_at(lw_frame *body, double coord[LW_MAX_OUTPUTS], const lwi_move *m,
                 const lw_model *model, double t)
{
    double turn[9];
    double arm[3];
    double p[3];
    lwi_rot_axis(turn, m->axis, m->turn_rad * t);
    lwi_rot_mul(body->rot, m->rot0, turn);
    lwi_rot_apply(arm, body->rot, m->tool_m);
    double c = cos(m->sweep_rad * t);
    double s = sin(m->sweep_rad * t);
    for (int i = 0; i < 3; i++) {
        p[i] = m->arc ? m->centre_m[i] + c * m->out_m[i] + s * m->side_m[i]
                      : m->from_m[i] + t * m->along_m[i];
        body->pos_m[i] = m->follows[i] ? p[i] - arm[i] : m->still_m[i];
    }
    for (size_t o = 0; o < model->spec->n_output; o++) {
        coord[o] = m->coord[o] + t * m->coord_along[o];
    }
}

void lwi_move_models(lwi_pm_frame *body, lwi_pm arm[3], lwi_pm coord[LW_MAX_OUTPUTS],
                     const lwi_move *m, const lw_model *model, double mid, double half)
{
    lwi_pm t = lwi_pm_var(mid, half);
    if (m->turn_rad == 0.0) {
        for (int i = 0; i < 9; i++) {
            body->rot[i] = lwi_pm_const(m->rot0[i]);
        }
    } else {
        /* R0 + sin R0 [a] + (1 - cos) R0 [a]^2; the products of constants are taken as they come,
         * they define the move. */
        double skew[9] = {0.0, -m->axis[2], m->axis[1], m->axis[2], 0.0, -m->axis[0],
                          -m->axis[1], m->axis[0], 0.0};
        double first[9];
        double second[9];
        lwi_pm s;
        lwi_pm c;
        lwi_rot_mul(first, m->rot0, skew);
        lwi_rot_mul(second, first, skew);
        lwi_pm_sincos(lwi_pm_scale(t, m->turn_rad), &s, &c);
        lwi_pm v = lwi_pm_sub(lwi_pm_const(1.0), c);
        for (int i = 0; i < 9; i++) {
            lwi_pm r = lwi_pm_axpy(lwi_pm_const(m->rot0[i]), first[i], s);
            body->rot[i] = lwi_pm_axpy(r, second[i], v);
        }
    }
    lwi_pm s = lwi_pm_const(0.0);
    lwi_pm c = lwi_pm_const(1.0);
    if (m->arc) {
        lwi_pm_sincos(lwi_pm_scale(t, m->sweep_rad), &s, &c);
    }
    for (int i = 0; i < 3; i++) {
        arm[i] = lwi_pm_dot3k(m->tool_m, body->rot + 3 * i);
        lwi_pm p = m->arc ? lwi_pm_axpy(lwi_pm_axpy(lwi_pm_const(m->centre_m[i]), m->out_m[i], c),
                                        m->side_m[i], s)
                          : lwi_pm_axpy(lwi_pm_const(m->from_m[i]), m->along_m[i], t);
        body->pos_m[i] = m->follows[i] ? lwi_pm_sub(p, arm[i]) : lwi_pm_const(m->still_m[i]);
    }
    for (size_t o = 0; o < model->spec->n_output; o++) {
        coord[o] = lwi_pm_axpy(lwi_pm_const(m->coord[o]), m->coord_along[o], t);
    }
}
