/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Readings whole turns apart: counted within the drive's range, the one next to `near` is given.
 * Counts by hand: a shaft at 30 deg with a range of +-800 deg stands at -690, -330, 30, 390 and
 * 750. */
#include "lwt.h"
#include "lwt_build.h"

static const double Z_AXIS[3] = {0, 0, 1};
static const double ORIGIN[3] = {0, 0, 0};

static lwt_machine *shaft(double range_deg)
{
    lwt_machine *m = lwt_machine_new("shaft");
    size_t body = lwt_add_body(m);
    size_t joint = lwt_add_revolute(m, 0, body, ORIGIN, Z_AXIS);
    size_t drive = lwt_drive_joint(m, joint);
    m->spec->drive[drive].range = (lw_range){.has_low = true,
                                             .has_high = true,
                                             .low = -range_deg * LWT_DEG,
                                             .high = range_deg * LWT_DEG};
    (void)lwt_add_tool(m, body, NULL);
    lwt_add_outputs(m, "rz");
    lwt_machine_load(m);
    return m;
}

static unsigned turns_at(lwt_machine *m, double angle_deg)
{
    lw_frame pose = lwt_frame_turn(Z_AXIS, ORIGIN, angle_deg * LWT_DEG);
    const lw_inverse_answer *a = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_int_equal(a->n_solution, 1);
    assert_true(a->solution[0].within_limits);
    lwt_near(a->solution[0].drive[0], angle_deg * LWT_DEG, 1e-12);
    return a->solution[0].turns[0];
}

static void counts_whole_turns_within_the_range(void **state)
{
    (void)state;
    lwt_machine *m = shaft(800.0);
    assert_int_equal(turns_at(m, 30.0), 5);
    assert_int_equal(turns_at(m, 100.0), 4); /* -620, -260, 100, 460 */
    lwt_machine_free(m);
    m = shaft(170.0);
    assert_int_equal(turns_at(m, 30.0), 1);
    lwt_machine_free(m);
}

static void gives_the_turn_next_to_near(void **state)
{
    (void)state;
    lwt_machine *m = shaft(800.0);
    const double there[1] = {400.0 * LWT_DEG};
    lw_frame pose = lwt_frame_turn(Z_AXIS, ORIGIN, 30.0 * LWT_DEG);
    const lw_inverse_answer *a =
        lwt_inverse(m, &pose, NULL, NULL, lwt_by_drives(m, there, NULL));
    assert_int_equal(a->n_solution, 1);
    lwt_near(a->solution[0].drive[0], 390.0 * LWT_DEG, 1e-12);
    assert_int_equal(a->solution[0].turns[0], 5);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(counts_whole_turns_within_the_range),
        cmocka_unit_test(gives_the_turn_next_to_near),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
