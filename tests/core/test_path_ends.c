/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where moves end, and what they may not pass over: a pose reached by readings is the pose asked
 * for, a point in between is where it was said to be, and loops that do not quite close are not
 * proved. Held against the questions about single postures. */
#include "lwt.h"
#include "lwt_kit.h"

#include <math.h>

static const double BASE[6] = {-0.48, -0.31, 0.51, -0.29, 0.02, 0.56};
static const double PLATE[6] = {-0.12, -0.06, 0.13, -0.07, 0.0, 0.14};

static lwt_machine *three_arms(void)
{
    static const double pose[3] = {0, 0, 0};
    static const int elbow[3] = {1, 1, 1};
    double turn[3];
    return lwt_kit_planar_rrr("three-arms", 3, BASE, PLATE, 0.36, 0.35, pose, elbow, turn);
}

static lw_outcome run(lwt_machine *m, lw_move *move, const lw_posture_ask *from,
                      lw_move_answer *answer)
{
    const lw_path_answer *a;
    lw_path_ask ask = {.from = from, .n_move = 1, .move = move, .store = answer};
    if (lw_path(&a, m->model, &ask, m->work, &m->err) != LW_OK) {
        lwt_fail("%s: %s", m->err.where, m->err.msg);
    }
    return a->outcome;
}

/* The readings of a pose, gone to evenly, may lead into another assembly: never ok then. */
static void readings_that_lead_elsewhere_are_no_yes(void **state)
{
    lwt_machine *m = three_arms();
    lw_frame from = lwt_frame_planar(0, 0, 0);
    size_t there = 0;
    size_t elsewhere = 0;
    lwt_random rng;
    (void)state;
    lwt_machine_load(m);
    lwt_random_init(&rng, 5);
    for (int i = 0; i < 150; i++) {
        lw_move_answer answer;
        lw_frame to = lwt_frame_planar(lwt_random_in(&rng, -0.25, 0.25),
                                       lwt_random_in(&rng, -0.25, 0.25),
                                       lwt_random_in(&rng, -3.0, 3.0));
        lw_move move = {.kind = LW_MOVE_JOINTS};
        lwt_pose_of(m, &to, NULL, &move.pose);
        lw_outcome outcome =
            run(m, &move, lwt_by_pose(m, &from, NULL, NULL, NULL), &answer);
        if (outcome == LW_OUTCOME_OK) {
            assert_true(lwt_frame_distance(&answer.end_tool, &to) < 1e-6);
            assert_true(lwt_frame_angle(&answer.end_tool, &to) < 1e-6);
            there++;
        }
        elsewhere += outcome == LW_OUTCOME_OTHER_MODE;
    }
    assert_true(there > 10);
    assert_true(elsewhere > 3);
    lwt_machine_free(m);
}

static void a_point_in_between_that_cannot_be(void **state)
{
    lwt_machine *m = three_arms();
    lw_frame from = lwt_frame_planar(0, 0, 0);
    lw_frame to = lwt_frame_planar(0.06, 0, 0);
    lw_frame via = lwt_frame_planar(0.03, 0.03, 0);
    lw_move_answer answer;
    lw_move move = {.kind = LW_MOVE_CIRCLE};
    (void)state;
    lwt_machine_load(m);
    const lw_posture_ask *start = lwt_by_pose(m, &from, NULL, NULL, NULL);
    lwt_pose_of(m, &to, NULL, &move.pose);
    lwt_pose_of(m, &via, NULL, &move.via);
    assert_int_equal(run(m, &move, start, &answer), LW_OUTCOME_OK);
    move.via.has_position[2] = true;
    move.via.position_m[2] = 0.05; /* the plate stays in its plane */
    assert_int_equal(run(m, &move, start, &answer), LW_OUTCOME_OUT_OF_REACH);
    lwt_machine_free(m);
}

/* One axis is tilted: the rows left over by the planar loops close less and less on the way. What
 * is proved keeps within what every answer is held to, 1e-4. */
static void loops_that_do_not_quite_close(void **state)
{
    lwt_machine *m = three_arms();
    static const double zero[3] = {0, 0, 0};
    lwt_random rng;
    size_t proved = 0;
    size_t refused = 0;
    (void)state;
    m->spec->joint[1].axis[0] = sin(4e-4);
    m->spec->joint[1].axis[2] = cos(4e-4);
    lwt_machine_load(m);
    lwt_random_init(&rng, 7);
    for (int i = 0; i < 60; i++) {
        lw_move move = {.kind = LW_MOVE_JOINTS, .has_drives = true};
        lw_move_answer answer;
        for (size_t d = 0; d < 3; d++) {
            move.has_drive[d] = true;
            move.drive[d] = lwt_random_in(&rng, -0.5, 0.5);
        }
        if (run(m, &move, lwt_by_drives(m, zero, NULL), &answer) != LW_OUTCOME_OK) {
            refused++;
            continue;
        }
        proved++;
        for (int k = 1; k <= 10; k++) {
            double at[3];
            for (size_t d = 0; d < 3; d++) {
                at[d] = move.drive[d] * k / 10.0;
            }
            const lw_forward_answer *f = lwt_forward(m, at, NULL);
            assert_non_null(f->solution);
            assert_true(f->solution->residual_position_m <= 1e-4);
            assert_true(f->solution->residual_angle_rad <= 1e-4);
        }
    }
    assert_true(refused > 3);
    assert_true(proved > 3);
    lwt_machine_free(m);
}

/* A straight move keeps its mode: another one asked for is code 6, whatever lies on the way. */
static void another_mode_than_that_of_the_start(void **state)
{
    lwt_machine *m = three_arms();
    lw_frame from = lwt_frame_planar(0, 0, 0);
    lw_frame to = lwt_frame_planar(0.02, 0.01, 0.05);
    const lw_reach_answer *a;
    (void)state;
    lwt_machine_load(m);
    lw_reach_ask ask = {.has_mode = true, .mode = {.count = 3, .sign = {1, 1, 1}}};
    ask.from = lwt_by_pose(m, &from, NULL, NULL, NULL);
    lwt_pose_of(m, &to, NULL, &ask.pose);
    assert_int_equal(lw_reach(&a, m->model, &ask, m->work, &m->err), LW_OK);
    assert_int_equal(a->outcome, LW_OUTCOME_OK);
    ask.mode.sign[0] = -1;
    assert_int_equal(lw_reach(&a, m->model, &ask, m->work, &m->err), LW_OK);
    assert_int_equal(a->outcome, LW_OUTCOME_OTHER_MODE);
    lwt_machine_free(m);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(readings_that_lead_elsewhere_are_no_yes),
        cmocka_unit_test(a_point_in_between_that_cannot_be),
        cmocka_unit_test(loops_that_do_not_quite_close),
        cmocka_unit_test(another_mode_than_that_of_the_start),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
