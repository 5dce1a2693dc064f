/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sampling of balls of tool poses; see the header. */
#include "lwt_balls.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "lwt_geom.h"

size_t lwt_share_of(size_t n)
{
    const char *text = getenv("LWT_SHARE");
    double part = text != NULL ? strtod(text, NULL) : 1.0;
    double out = (double)n * part;
    return out < 10.0 ? 10 : (size_t)out;
}

lw_distance_answer lwt_distance_ask(lwt_subject_at *s, const lw_model *model, lw_work *work,
                                    const lw_posture_ask *posture, size_t budget)
{
    const lw_distance_answer *a;
    lw_err err = {.code = LW_OK};
    lw_distance_ask question = {.posture = posture, .budget = budget};
    if (lw_distance(&a, model, &question, work, &err) != LW_OK) {
        lwt_fail("distance: %s %s", err.where, err.msg);
    }
    assert_non_null(a->solution);
    s->model = model;
    s->work = work;
    s->tool = a->solution->tool;
    s->mode = a->solution->mode;
    s->length = a->length_m;
    memcpy(s->coord, a->solution->config.coord,
           lw_spec_coord_count(lw_model_spec(model)) * sizeof *s->coord);
    return *a;
}

void lwt_distance_bracket(const lw_distance_side *side)
{
    assert_false(side->none && (side->known_least || side->known_most));
    if (side->known_least) {
        assert_true(side->at_least_m >= 0.0);
    }
    if (side->known_least && side->known_most) {
        assert_true(side->at_least_m <= side->at_most_m);
    }
}

void lwt_distance_sample(lw_pose_ask *out, const lwt_subject_at *s, double r, lwt_random *random)
{
    const lw_spec *spec = lw_model_spec(s->model);
    double y[LW_MAX_OUTPUTS];
    double w[3] = {0, 0, 0};
    double size = 0.0;
    size_t turns = 0;
    size_t one = 0;
    memset(out, 0, sizeof *out);
    for (size_t o = 0; o < spec->n_output; o++) {
        y[o] = lwt_random_normal(random);
        size += y[o] * y[o];
    }
    /* more of them near the rim, where a false proof would show */
    double reach = r * pow(lwt_random_in(random, 0.0, 1.0), 0.15) / sqrt(size);
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        y[o] *= reach;
        if (kind <= LW_OUT_Z) {
            out->has_position[kind] = true;
            out->position_m[kind] = s->tool.pos_m[kind] + y[o];
        } else if (kind < LW_OUT_COORD) {
            one = (size_t)LW_OUT_RZ - (size_t)kind;
            w[kind - LW_OUT_RX] = y[o] / s->length;
            turns++;
        } else {
            size_t coord = spec->output[o].coord;
            bool turning = lw_spec_coord_turning(spec, coord);
            out->joint_coord[out->n_joint] = coord;
            out->joint_value[out->n_joint++] =
                s->coord[coord] + (turning ? y[o] / s->length : y[o]);
        }
    }
    double zyx[3];
    lw_zyx_from_rot(zyx, s->tool.rot);
    if (turns == 1) {
        out->orient = LW_ORIENT_ZYX;
        out->has_zyx[one] = true;
        out->zyx_rad[one] = zyx[one] + w[2 - one];
    } else if (turns == 3) {
        double angle = lwt_norm(w);
        double q[4] = {cos(0.5 * angle), 0, 0, 0};
        double p[4];
        for (int k = 0; k < 3; k++) {
            q[k + 1] = angle > 0.0 ? sin(0.5 * angle) * w[k] / angle : 0.0;
        }
        lw_quat_from_rot(p, s->tool.rot);
        out->orient = LW_ORIENT_QUATERNION;
        out->quat[0] = q[0] * p[0] - q[1] * p[1] - q[2] * p[2] - q[3] * p[3];
        out->quat[1] = q[0] * p[1] + q[1] * p[0] + q[2] * p[3] - q[3] * p[2];
        out->quat[2] = q[0] * p[2] + q[2] * p[0] + q[3] * p[1] - q[1] * p[3];
        out->quat[3] = q[0] * p[3] + q[3] * p[0] + q[1] * p[2] - q[2] * p[1];
    }
}

const lw_inverse_answer *lwt_distance_solve(const lwt_subject_at *s, const lw_pose_ask *pose)
{
    const lw_inverse_answer *a;
    lw_err err = {.code = LW_OK};
    lw_inverse_ask question = {.pose = *pose, .has_mode = true, .mode = s->mode};
    if (lw_inverse(&a, s->model, &question, s->work, &err) != LW_OK) {
        lwt_fail("inverse: %s %s", err.where, err.msg);
    }
    return a;
}

void lwt_by_bodies(lw_posture_ask *out, const lw_spec *spec, const lw_solution *at)
{
    memset(out, 0, sizeof *out);
    out->kind = LW_BY_BODIES;
    for (size_t i = 0; i < spec->n_body; i++) {
        out->has_body[i] = i != spec->frame;
        out->body[i] = at->config.body[i];
    }
}

int lwt_rates_sign(const lwt_subject_at *s, const lw_solution *at, bool inverse)
{
    const lw_margin_answer *margin;
    const lw_jacobian_answer *j;
    lw_err err = {.code = LW_OK};
    lw_posture_ask posture;
    lw_jacobian_ask question = {.posture = &posture};
    lwt_by_bodies(&posture, lw_model_spec(s->model), at);
    assert_int_equal(lw_jacobian(&j, s->model, &question, s->work, &err), LW_OK);
    if (j->n_drive == j->n_output && (inverse ? j->has_forward : j->has_inverse)) {
        return lwt_det(inverse ? j->forward : j->inverse, j->n_drive) > 0.0 ? 1 : -1;
    }
    assert_int_equal(lw_margin(&margin, s->model, 0, NULL, &posture, s->work, &err), LW_OK);
    assert_non_null(margin->solution);
    unsigned lost = inverse ? LW_CLASS_INVERSE : LW_CLASS_FORWARD | LW_CLASS_CONSTRAINT;
    return (margin->classes & lost) == 0 ? 1 : 0;
}

void lwt_distance_balls(const lw_model *model, lw_work *work, const lw_posture_ask *posture,
                        size_t budget, size_t samples, lwt_random *random)
{
    lwt_subject_at s;
    lw_distance_answer a = lwt_distance_ask(&s, model, work, posture, budget);
    lw_pose_ask pose;
    lwt_distance_bracket(&a.forward);
    lwt_distance_bracket(&a.inverse);
    lwt_distance_bracket(&a.limit);
    lwt_distance_sample(&pose, &s, 0.0, random);
    const lw_inverse_answer *at = lwt_distance_solve(&s, &pose);
    assert_int_equal(at->n_solution, 1);
    int sign = lwt_rates_sign(&s, &at->solution[0], false);
    at = lwt_distance_solve(&s, &pose);
    int inverse_sign = lwt_rates_sign(&s, &at->solution[0], true);
    for (size_t i = 0; i < samples; i++) {
        if (a.forward.known_least && a.forward.at_least_m > 0.0) {
            lwt_distance_sample(&pose, &s, a.forward.at_least_m, random);
            /* where no posture of the mode is, none is singular */
            at = lwt_distance_solve(&s, &pose);
            if (at->n_solution > 0) {
                assert_int_equal(lwt_rates_sign(&s, &at->solution[0], false), sign);
            }
        }
        if (a.inverse.known_least && a.inverse.at_least_m > 0.0) {
            lwt_distance_sample(&pose, &s, a.inverse.at_least_m, random);
            at = lwt_distance_solve(&s, &pose);
            assert_int_equal(at->n_solution, 1);
            /* passing a forward singularity is no matter here, and flips it too */
            if (!a.forward.known_least) {
                assert_int_equal(lwt_rates_sign(&s, &at->solution[0], true), inverse_sign);
            }
        }
        if (a.limit.known_least && a.limit.at_least_m > 0.0) {
            lwt_distance_sample(&pose, &s, a.limit.at_least_m, random);
            at = lwt_distance_solve(&s, &pose);
            assert_true(at->n_solution == 1 && at->solution->within_limits);
        }
    }
}
