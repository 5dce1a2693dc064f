/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Differential screws against printed leads and torques: by helical joints, by a coupling, and as
 * two nuts on one spindle, over many turns. Source: tests/cases/khurmi-gupta-2005. */
#include "lwt.h"
#include "lwt_build.h"

#include <math.h>

#include <cjson/cJSON.h>

static const double ORIGIN[3] = {0, 0, 0};
static const double Z_AXIS[3] = {0, 0, 1};

/* Spindle in a fixed nut (lead 1); a second nut on it (lead 2) is kept from turning by a slide. */
static lwt_machine *by_helical_joints(double lead_1_m, double lead_2_m)
{
    lwt_machine *m = lwt_machine_new("differential-screw");
    size_t spindle = lwt_add_body(m);
    size_t nut = lwt_add_body(m);
    size_t turn = lwt_add_helical(m, 0, spindle, ORIGIN, Z_AXIS, lead_1_m);
    (void)lwt_add_helical(m, spindle, nut, (const double[3]){0, 0, 0.1}, Z_AXIS, lead_2_m);
    (void)lwt_add_prismatic(m, 0, nut, Z_AXIS);
    (void)lwt_drive_joint(m, turn);
    (void)lwt_add_tool(m, nut, NULL);
    lwt_add_outputs(m, "z");
    return m;
}

static lwt_machine *by_coupling(double lead_1_m, double lead_2_m)
{
    lwt_machine *m = lwt_machine_new("coupled-screw");
    size_t spindle = lwt_add_body(m);
    size_t nut = lwt_add_body(m);
    size_t turn = lwt_add_revolute(m, 0, spindle, ORIGIN, Z_AXIS);
    size_t slide = lwt_add_prismatic(m, 0, nut, Z_AXIS);
    (void)lwt_add_coupling(m, lwt_coord(m, turn, 0), (lead_1_m - lead_2_m) / (2.0 * LWT_PI),
                           lwt_coord(m, slide, 0), -1.0);
    (void)lwt_drive_joint(m, turn);
    (void)lwt_add_tool(m, nut, NULL);
    lwt_add_outputs(m, "z");
    return m;
}

static void check_travel(lwt_machine *m, double travel_m, double tol_m)
{
    static const double turns[] = {1.0, -1.0, 0.25, 10.0, -7.25, 143.5};
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 1);
    for (size_t i = 0; i < sizeof turns / sizeof turns[0]; i++) {
        const double drive[1] = {2.0 * LWT_PI * turns[i]};
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        lw_frame tool = forward->solution[0].tool;
        lwt_near(tool.pos_m[2], travel_m * turns[i], tol_m * fmax(1.0, fabs(turns[i])));
        lwt_near(forward->solution[0].drive[0], drive[0], 1e-9);
        double position = 0.0;
        double angle = 0.0;
        lwt_closure(m->spec, &forward->solution[0].config, &position, &angle);
        lwt_near(position, 0.0, 1e-12);
        lwt_near(angle, 0.0, 1e-10);
        /* And back: the height alone tells the turns, none are lost. */
        const lw_inverse_answer *inverse = lwt_inverse(m, &tool, NULL, NULL, NULL);
        assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
        assert_int_equal(inverse->n_solution, 1);
        lwt_near(inverse->solution[0].drive[0], drive[0], 1e-8);
    }
}

static void travel_a_turn_is_the_difference_of_leads(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("khurmi-gupta-2005/cases.json");
    double tol = 1e-3 * lwt_number(lwt_member(file, "tolerance"), "travel_mm");
    size_t count = 0;
    const cJSON *pair = NULL;
    cJSON_ArrayForEach(pair, lwt_member(file, "pairs"))
    {
        double lead_1 = 1e-3 * lwt_number(pair, "lead_1");
        double lead_2 = 1e-3 * lwt_number(pair, "lead_2");
        double travel = 1e-3 * lwt_number(pair, "travel_per_turn");
        lwt_machine *m = by_helical_joints(lead_1, lead_2);
        check_travel(m, travel, tol);
        lwt_machine_free(m);
        m = by_coupling(lead_1, lead_2);
        check_travel(m, travel, tol);
        lwt_machine_free(m);
        count++;
    }
    assert_int_equal(count, 4);
    cJSON_Delete(file);
}

static void ideal_torque_is_load_times_lead_over_a_turn(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("khurmi-gupta-2005/cases.json");
    const cJSON *set = lwt_member(file, "torque_per_load");
    lwt_machine *m = by_helical_joints(1e-3 * lwt_number(set, "lead_1"),
                                       1e-3 * lwt_number(set, "lead_2"));
    lwt_machine_load(m);
    const double drive[1] = {0.7};
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
    assert_true(jacobian->has_forward);
    assert_int_equal(jacobian->n_output, 1);
    double half = 0.0;
    double printed = lwt_printed(lwt_text(set, "printed"), &half);
    /* Power: torque times turn rate is load times travel rate. */
    lwt_near(1e3 * jacobian->forward[0], printed, half);
    lwt_near(1e3 * jacobian->forward[0], 4.0 / (2.0 * LWT_PI), 1e-12);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* Two driven nuts that cannot turn and one spindle in both: the spindle's turn follows from the
 * change of their distance, 2 pi (z2 - z1) / (lead 1 - lead 2), by the definition of a lead. */
static void two_nuts_turn_one_spindle(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("khurmi-gupta-2005/cases.json");
    const cJSON *pair = NULL;
    cJSON_ArrayForEach(pair, lwt_member(file, "pairs"))
    {
        double lead_1 = 1e-3 * lwt_number(pair, "lead_1");
        double lead_2 = 1e-3 * lwt_number(pair, "lead_2");
        double travel = 1e-3 * lwt_number(pair, "travel_per_turn");
        lwt_machine *m = lwt_machine_new("two-nuts");
        size_t upper = lwt_add_body(m);
        size_t lower = lwt_add_body(m);
        size_t spindle = lwt_add_body(m);
        size_t z1 = lwt_add_prismatic(m, 0, upper, Z_AXIS);
        size_t z2 = lwt_add_prismatic(m, 0, lower, Z_AXIS);
        size_t h1 = lwt_add_helical(m, upper, spindle, ORIGIN, Z_AXIS, lead_1);
        (void)lwt_add_helical(m, lower, spindle, (const double[3]){0, 0, -0.2}, Z_AXIS, lead_2);
        (void)lwt_drive_joint(m, z1);
        (void)lwt_drive_joint(m, z2);
        (void)lwt_add_tool(m, spindle, NULL);
        lwt_add_outputs(m, "z");
        lwt_add_output_coord(m, lwt_coord(m, h1, 0));
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 2);
        static const double moves[][2] = {{0.01, 0.02}, {-0.03, 0.01}, {0.05, -0.07}, {0.2, 0.2}};
        for (size_t i = 0; i < sizeof moves / sizeof moves[0]; i++) {
            double turn = 2.0 * LWT_PI * (moves[i][1] - moves[i][0]) / travel;
            const lw_forward_answer *forward = lwt_forward(m, moves[i], NULL);
            const lw_solution *solution = &forward->solution[0];
            lwt_near(solution->config.coord[lwt_coord(m, h1, 0)], turn, 1e-9);
            lwt_near(solution->tool.pos_m[2], moves[i][0] + lead_1 * turn / (2.0 * LWT_PI), 1e-11);
            lwt_copy kept;
            lwt_keep(&kept, m, solution);
            const lw_inverse_answer *inverse =
                lwt_inverse(m, &kept.tool, kept.coord, NULL, NULL);
            assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
            assert_int_equal(inverse->n_solution, 1);
            lwt_near_n(inverse->solution[0].drive, moves[i], 2, 1e-11);
        }
        lwt_machine_free(m);
    }
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(travel_a_turn_is_the_difference_of_leads),
        cmocka_unit_test(ideal_torque_is_load_times_lead_over_a_turn),
        cmocka_unit_test(two_nuts_turn_one_spindle),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
