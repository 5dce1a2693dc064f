/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What loading says of a mechanism: each kinematic finding is provoked once, and is absent from the
 * mechanism it was made from. Mobilities and relations are elementary (counted by hand). */
#include "lwt.h"
#include "lwt_build.h"

#include <string.h>

static const double X_AXIS[3] = {1, 0, 0};
static const double Z_AXIS[3] = {0, 0, 1};
static const double ORIGIN[3] = {0, 0, 0};

/* A two-link arm in the plane with its tool at the tip: two freedoms, x and y. */
static lwt_machine *two_links(void)
{
    lwt_machine *m = lwt_machine_new("two-links");
    size_t upper = lwt_add_body(m);
    size_t lower = lwt_add_body(m);
    size_t a = lwt_add_revolute(m, 0, upper, ORIGIN, Z_AXIS);
    size_t b = lwt_add_revolute(m, upper, lower, (const double[3]){0.4, 0, 0}, Z_AXIS);
    lw_frame tip = lwt_frame_zyx((const double[3]){0.4, 0.3, 0}, 0, 0, 0);
    (void)lwt_drive_joint(m, a);
    (void)lwt_drive_joint(m, b);
    (void)lwt_add_tool(m, lower, &tip);
    lwt_add_outputs(m, "x y");
    return m;
}

static void expect(lwt_machine *m, lw_code code, const char *finding, lw_severity severity,
                   const char *where)
{
    assert_int_equal(lwt_machine_report(m), code);
    const lw_finding *f = lwt_finding(m, finding);
    if (f == NULL) {
        for (size_t i = 0; i < m->report->n_finding; i++) {
            print_message("found %s: %s\n", m->report->finding[i].code, m->report->finding[i].text);
        }
    }
    assert_non_null(f);
    assert_int_equal(f->severity, severity);
    assert_string_equal(f->where, where);
    assert_true(strlen(f->text) > 20);
    lwt_machine_free(m);
}

static void a_sound_mechanism_has_no_errors_or_warnings(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    assert_int_equal(lwt_machine_report(m), LW_OK);
    for (size_t i = 0; i < m->report->n_finding; i++) {
        assert_int_equal(m->report->finding[i].severity, LW_NOTE);
    }
    assert_int_equal(m->report->mobility, 2);
    lwt_machine_free(m);
}

static void refuses_a_body_that_hangs_free(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    (void)lwt_add_body(m);
    expect(m, LW_E_MODEL, "body-hangs-free", LW_ERROR, "/bodies/3");
}

static void refuses_a_tool_on_the_frame(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->tool[0].body = 0;
    expect(m, LW_E_MODEL, "tool-on-frame", LW_ERROR, "/tools/0/body");
}

static void refuses_a_joint_between_fixed_bodies(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->joint[m->spec->n_joint] = m->spec->joint[1];
    m->spec->joint[m->spec->n_joint++].type = LW_FIXED; /* beside the elbow, no coordinates */
    expect(m, LW_E_MODEL, "joint-locked-by-fixed", LW_ERROR, "/joints/1/between");
}

static void refuses_more_outputs_than_freedoms(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    lwt_add_outputs(m, "rz");
    expect(m, LW_E_MODEL, "outputs-exceed-mobility", LW_ERROR, "/outputs");
}

static void warns_of_fewer_outputs_than_freedoms(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->n_output = 1;
    expect(m, LW_OK, "kinematically-redundant", LW_WARNING, "/outputs");
}

static void refuses_outputs_that_do_not_span(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->output[1].kind = LW_OUT_Z; /* never changes */
    expect(m, LW_E_MODEL, "outputs-do-not-span", LW_ERROR, "/outputs");
}

static void refuses_a_wrong_motion_pattern(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->motion = LW_MOTION_3T;
    expect(m, LW_E_MODEL, "motion-mismatch", LW_ERROR, "/motion");
}

static void warns_of_drives_that_do_not_hold(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->n_drive = 1;
    expect(m, LW_OK, "drives-do-not-hold", LW_WARNING, "/drives");
}

static void warns_of_a_singular_reference_posture(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->tool[0].frame.pos_m[0] = 0.7; /* stretched: the tip in line with both links */
    m->spec->tool[0].frame.pos_m[1] = 0.0;
    expect(m, LW_OK, "reference-singular-inverse", LW_WARNING, "");
}

static void refuses_limits_that_exclude_the_reference(void **state)
{
    (void)state;
    lwt_machine *m = two_links();
    m->spec->joint[1].range[0] = (lw_range){.has_low = true, .low = 0.1};
    expect(m, LW_E_MODEL, "limits-exclude-posture", LW_ERROR, "");
}

/* A triangle of three bars on parallel pivots is a truss: 3 (3 - 1) - 2 * 3 = 0 in its plane. */
static void refuses_a_truss(void **state)
{
    (void)state;
    lwt_machine *m = lwt_machine_new("truss");
    size_t a = lwt_add_body(m);
    size_t b = lwt_add_body(m);
    size_t j = lwt_add_revolute(m, 0, a, ORIGIN, Z_AXIS);
    (void)lwt_add_revolute(m, a, b, (const double[3]){0.5, 0.4, 0}, Z_AXIS);
    (void)lwt_add_revolute(m, b, 0, (const double[3]){1, 0, 0}, Z_AXIS);
    (void)lwt_drive_joint(m, j);
    (void)lwt_add_tool(m, b, NULL);
    lwt_add_outputs(m, "rz");
    expect(m, LW_E_MODEL, "no-mobility", LW_ERROR, "/joints");
}

static void warns_of_a_check_pose_that_is_missed(void **state)
{
    (void)state;
    for (int miss = 0; miss < 2; miss++) {
        lwt_machine *m = two_links();
        lw_spec_check *check = &m->spec->check[m->spec->n_check++];
        check->posture.kind = LW_BY_DRIVES;
        check->posture.has_drive[0] = check->posture.has_drive[1] = true;
        check->pose.has_position[0] = check->pose.has_position[1] = true;
        check->pose.position_m[0] = 0.4 + (miss ? 0.002 : 0.0);
        check->pose.position_m[1] = 0.3;
        check->within_position_m = (lw_figure){.asked = true, .value = 1e-3};
        assert_int_equal(lwt_machine_report(m), LW_OK);
        assert_true((lwt_finding(m, "check-missed") != NULL) == (miss == 1));
        lwt_machine_free(m);
    }
}

/* Spindle and nut by two helical joints on one line, and the same relation as a coupling: with
 * leads of 30 and -20 mm the nut moves 50 mm a turn of the spindle against the frame's nut. */
static lwt_machine *screw_with_coupling(double travel_a_turn_m)
{
    lwt_machine *m = lwt_machine_new("screw");
    size_t spindle = lwt_add_body(m);
    size_t nut = lwt_add_body(m);
    size_t turn = lwt_add_helical(m, 0, spindle, ORIGIN, Z_AXIS, 0.030);
    (void)lwt_add_helical(m, nut, spindle, (const double[3]){0, 0, 0.1}, Z_AXIS, -0.020);
    size_t slide = lwt_add_prismatic(m, 0, nut, Z_AXIS);
    (void)lwt_add_coupling(m, lwt_coord(m, turn, 0), travel_a_turn_m / (2.0 * LWT_PI),
                           lwt_coord(m, slide, 0), -1.0);
    (void)lwt_drive_joint(m, turn);
    (void)lwt_add_tool(m, nut, NULL);
    lwt_add_outputs(m, "z");
    return m;
}

static void tells_screws_said_twice_apart(void **state)
{
    (void)state;
    expect(screw_with_coupling(0.050), LW_OK, "screw-said-twice", LW_WARNING, "/couplings/0");
    expect(screw_with_coupling(0.040), LW_E_MODEL, "screw-contradicts", LW_ERROR, "/couplings/0");
}

static void names_idle_spins(void **state)
{
    (void)state;
    lwt_machine *m = lwt_machine_new("ball-ended");
    size_t slide = lwt_add_body(m);
    size_t bar = lwt_add_body(m);
    size_t crank = lwt_add_body(m);
    size_t p = lwt_add_prismatic(m, 0, slide, X_AXIS);
    (void)lwt_add_spherical(m, slide, bar, (const double[3]){0.2, 0.1, 0.3});
    (void)lwt_add_spherical(m, bar, crank, (const double[3]){0.5, 0.4, 0.1});
    (void)lwt_add_revolute(m, 0, crank, (const double[3]){0.6, 0, 0}, Z_AXIS);
    (void)lwt_drive_joint(m, p);
    (void)lwt_add_tool(m, crank, NULL);
    lwt_add_outputs(m, "rz");
    assert_int_equal(lwt_machine_report(m), LW_OK);
    assert_int_equal(m->report->idle_spins, 1);
    assert_int_equal(m->report->mobility, 1);
    assert_int_equal(m->report->mobility_counted, 2); /* the spin counts by formula */
    assert_non_null(lwt_finding(m, "idle-spins"));
    lwt_machine_free(m);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sound_mechanism_has_no_errors_or_warnings),
        cmocka_unit_test(refuses_a_body_that_hangs_free),
        cmocka_unit_test(refuses_a_tool_on_the_frame),
        cmocka_unit_test(refuses_a_joint_between_fixed_bodies),
        cmocka_unit_test(refuses_more_outputs_than_freedoms),
        cmocka_unit_test(warns_of_fewer_outputs_than_freedoms),
        cmocka_unit_test(refuses_outputs_that_do_not_span),
        cmocka_unit_test(refuses_a_wrong_motion_pattern),
        cmocka_unit_test(warns_of_drives_that_do_not_hold),
        cmocka_unit_test(warns_of_a_singular_reference_posture),
        cmocka_unit_test(refuses_limits_that_exclude_the_reference),
        cmocka_unit_test(refuses_a_truss),
        cmocka_unit_test(warns_of_a_check_pose_that_is_missed),
        cmocka_unit_test(tells_screws_said_twice_apart),
        cmocka_unit_test(names_idle_spins),
    };
    lw_init();
    return cmocka_run_group_tests(tests, NULL, NULL);
}
