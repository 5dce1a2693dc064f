/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Faults that a review found, each with the posture that showed it. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

static lwt_machine *subject(const char *name)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            lwt_machine *m = lwt_subjects[i].make();
            lwt_machine_load(m);
            return m;
        }
    }
    lwt_fail("no subject %s", name);
    return NULL;
}

/* Joint 6 of the two-stage machine is the guide between its plates: it follows from the screw's
 * turn. By hand: leads 20 and 12 mm on one spindle, so the plates part by 8 mm a turn. */
static void joints_that_are_no_outputs_are_compared(void **state)
{
    (void)state;
    lwt_machine *m = subject("two-stages");
    lw_inverse_ask ask = {.tool = 0};
    const lw_inverse_answer *a;
    const size_t guide = lwt_coord(m, 6, 0);
    const size_t turn = lwt_coord(m, 7, 0);
    int agreed = 0;
    for (int k = 0; k < 3; k++) {
        static const double part_m[3] = {0.008, -0.008, 0.010};
        double coord[LW_MAX_COORDS] = {0}; /* by coordinate number */
        coord[turn] = 2.0 * LWT_PI;
        lw_frame tool = lwt_frame_zyx((const double[3]){0.01, 0.0, -0.2}, 0, 0, 0);
        lwt_pose_of(m, &tool, coord, &ask.pose);
        assert_int_equal(ask.pose.joint_coord[0], turn);
        ask.pose.joint_coord[ask.pose.n_joint] = guide;
        ask.pose.joint_value[ask.pose.n_joint++] = part_m[k];
        memset(&m->err, 0, sizeof m->err);
        assert_int_equal(lw_inverse(&a, m->model, &ask, m->work, &m->err), LW_OK);
        if (a->outcome == LW_OUTCOME_OUT_OF_REACH) {
            assert_int_equal(a->n_solution, 0);
            assert_true(a->off_by_position_m > 0.001);
        } else {
            agreed++;
            assert_true(k < 2);
            lwt_near(fabs(a->solution[0].config.coord[guide]), 0.008, 1e-12);
        }
    }
    assert_int_equal(agreed, 1); /* by 8 mm one way, whichever way the guide is written */
    lwt_machine_free(m);
}

/* A stretched two-link limb is a double root: its determinant carries the root of the rounding and
 * must still read "0", and the drive that alone moves it is indispensable. */
static void a_stretched_limb_reads_zero(void **state)
{
    (void)state;
    lwt_machine *m = lwt_machine_new("two-links");
    size_t upper = lwt_add_body(m);
    size_t lower = lwt_add_body(m);
    size_t tip = lwt_add_body(m);
    static const double z[3] = {0, 0, 1};
    size_t a = lwt_add_revolute(m, 0, upper, (const double[3]){0, 0, 0}, z);
    size_t b = lwt_add_revolute(m, upper, lower, (const double[3]){0.31, 0.1, 0}, z);
    size_t c = lwt_add_revolute(m, lower, tip, (const double[3]){0.5, 0.33, 0}, z);
    (void)lwt_drive_joint(m, a);
    (void)lwt_drive_joint(m, b);
    (void)lwt_drive_joint(m, c);
    lw_frame tool = lwt_frame_zyx((const double[3]){0.5, 0.33, 0}, 0, 0, 0);
    (void)lwt_add_tool(m, tip, &tool);
    lwt_add_outputs(m, "x y rz");
    lwt_machine_load(m);
    double reach = hypot(0.31, 0.1) + hypot(0.19, 0.23);
    for (int k = 0; k < 8; k++) {
        double angle = 0.3 + 0.7 * k;
        lw_frame pose = lwt_frame_zyx(
            (const double[3]){reach * cos(angle), reach * sin(angle), 0}, 0.1 * k, 0, 0);
        const lw_inverse_answer *inv = lwt_inverse(m, &pose, NULL, NULL, NULL);
        assert_true(inv->n_solution >= 1);
        assert_int_equal(inv->solution[0].mode.sign[0], 0);
        const lw_margin_answer *margin = lwt_margin(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
        assert_true((margin->classes & LW_CLASS_INVERSE) != 0);
        assert_true(margin->limb_singular[0]);
        assert_int_equal(margin->classes & LW_CLASS_FORWARD, 0);
    }
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(joints_that_are_no_outputs_are_compared),
        cmocka_unit_test(a_stretched_limb_reads_zero),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
