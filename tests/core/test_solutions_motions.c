/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions whose solutions are no list: mechanisms that can move while everything asked for stays
 * met. The answer says so, gives the dimension and one posture, and never claims to be complete.
 * Published self-motions (tests/cases/griffis-duffy-1993, sommese-2001), a redundant arm, and as
 * the opposite a double root, from which nothing leads away. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SEED = 3 };

/* ---- forward: a platform that moves with its struts locked ----------------------------------- */

static void platform_of_griffis_and_duffy_is_no_list(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("griffis-duffy-1993/cases.json");
    double position[3];
    lw_frame home = lwt_frame_identity();
    assert_int_equal(lwt_numbers(lwt_member(set, "home"), "position", position, 3), 3);
    memcpy(home.pos_m, position, sizeof position);
    lwt_machine *m = lwt_kit_struts_case(set, &home);
    lwt_machine_load_prepared(m, SEED, 20000);
    const double drive[6] = {0, 0, 0, 0, 0, 0};
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    assert_false(a->complete);
    assert_int_equal(a->dimension, (int)lwt_number(set, "mobility_locked"));
    assert_int_equal(a->outcome, LW_OUTCOME_SINGULAR);
    assert_non_null(a->reason);
    assert_int_equal(a->n_solution, 1);
    assert_int_equal(a->found.complex_count, -1);
    lwt_check_solutions(m, a->solution, 1);
    lw_forward_ask one = {.readings = lwt_by_drives(m, drive, NULL)};
    assert_int_equal(lw_forward(&a, m->model, &one, m->work, &m->err), LW_OK);
    assert_int_equal(a->outcome, LW_OUTCOME_SINGULAR);
    assert_int_equal(a->dimension, 1);
    assert_false(a->complete);
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* ---- forward: seven links of special lengths ------------------------------------------------- */

/* Six isolated assemblies, two of them real, and a curve with real points. Drawn in an isolated
 * one. */
static void seven_links_of_special_lengths_have_a_curve_beside(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sommese-2001/cases.json");
    double theta[12];
    assert_int_equal(lwt_numbers(file, "isolated_deg", theta, 12), 12);
    lwt_machine *m = lwt_kit_seven_links(lwt_member(file, "links"), theta);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    const double drive = 0.3;
    const lw_forward_answer *a = lwt_forward_all(m, &drive);
    print_message("%d isolated, %zu listed, dimension %zu\n", a->found.complex_count,
                  a->n_solution, a->dimension);
    assert_false(a->complete);
    assert_int_equal(a->dimension, 1);
    assert_non_null(a->reason);
    assert_int_equal(a->found.complex_count, 6);
    assert_int_equal(a->n_solution, 3); /* two isolated real ones, and one posture of the curve */
    lwt_check_solutions(m, a->solution, a->n_solution);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* ---- inverse --------------------------------------------------------------------------------- */

/* Seven revolutes, six components of a pose: one freedom left. */
static void seven_revolutes_leave_a_freedom(void **state)
{
    (void)state;
    const lwt_table table = {.n = 7,
                             .a = {0.1, 0.3, 0.2, 0.15, 0.05, 0.1, 0.02},
                             .alpha = {1.2, -0.9, 1.4, -1.1, 0.8, 1.5, 0.4},
                             .d = {0.3, 0.1, 0.25, -0.1, 0.3, 0.05, 0.1}};
    static const double ref[7] = {0.2, -0.5, 0.4, 0.9, -0.3, 0.7, 0.1};
    lwt_machine *m = lwt_kit_arm("seven-revolutes", &table, ref, "x y z rx ry rz");
    lwt_machine_load_prepared(m, SEED, 20000);
    double to[7];
    for (size_t i = 0; i < 7; i++) {
        to[i] = ref[i] + 0.1 * (double)(i % 3);
    }
    lw_frame pose = lwt_table_forward(&table, to);
    const lw_inverse_answer *a = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_false(a->complete);
    assert_int_equal(a->dimension, 1);
    assert_int_equal(a->n_solution, 1);
    assert_non_null(a->reason);
    assert_int_equal(a->found.complex_count, -1);
    lwt_check_solutions(m, a->solution, 1);
    lwt_machine_free(m);
}

/* A double root is no motion: a stretched five-bar, its postures about to vanish. The two arms'
 * ends meet in one point only, the drives do not hold it, and nothing leads away. */
static void a_double_root_is_no_motion(void **state)
{
    (void)state;
    double theta[2];
    const double base[4] = {0, 0, 0.5, 0};
    const double first[2] = {0.3, 0.3};
    const double second[2] = {0.35, 0.4};
    lwt_machine *m = lwt_kit_pin_arms("five-bar", 2, base, first, second,
                                      (const double[2]){0.25, 0.45}, (const int[2]){1, -1}, theta);
    lwt_machine_load_prepared(m, SEED, 20000);
    /* Knees 0.75 apart, in line with the pin: cranks turned outward until it is so. */
    double low = 0.0;
    double high = 2.0;
    double drive[2];
    for (int i = 0; i < 200; i++) {
        double out = 0.5 * (low + high);
        double x = 0.3 * cos(theta[0] + out) - (0.5 + 0.3 * cos(theta[1] - out));
        double y = 0.3 * sin(theta[0] + out) - 0.3 * sin(theta[1] - out);
        if (hypot(x, y) < 0.75) {
            low = out;
        } else {
            high = out;
        }
        drive[0] = low;
        drive[1] = -low;
    }
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    assert_int_equal(a->dimension, 0);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(platform_of_griffis_and_duffy_is_no_list),
        cmocka_unit_test(seven_links_of_special_lengths_have_a_curve_beside),
        cmocka_unit_test(seven_revolutes_leave_a_freedom),
        cmocka_unit_test(a_double_root_is_no_motion),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
