/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The five-bar and planar machines with a spare drive against published and recomputed values:
 * Jacobians, condition numbers, singular values, preload. Sources: tests/cases. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

/* ---- five-bar -------------------------------------------------------------------------------- */

static int elbow_of(const double base[2], const double point[2], double first, double second,
                    double theta_deg)
{
    double plus = lwt_two_link(point[0] - base[0], point[1] - base[1], first, second, 1);
    return fabs(lwt_wrap(plus - theta_deg * LWT_DEG)) < 1e-6 ? 1 : -1;
}

static void four_modes_of_the_pantograph(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("campion-2005/cases.json");
    const cJSON *tolerance = lwt_member(file, "tolerance");
    double a5 = lwt_number(file, "a5") * 1e-3;
    const double first[2] = {lwt_number(file, "a1") * 1e-3, lwt_number(file, "a4") * 1e-3};
    const double second[2] = {lwt_number(file, "a2") * 1e-3, lwt_number(file, "a3") * 1e-3};
    const double base[4] = {0, 0, -a5, 0};
    double point[2];
    assert_int_equal(lwt_numbers(file, "point", point, 2), 2);
    point[0] *= 1e-3;
    point[1] *= 1e-3;
    size_t count = 0;
    const cJSON *mode = NULL;
    cJSON_ArrayForEach(mode, lwt_member(file, "modes"))
    {
        double theta[2];
        double want[4];
        double ref_theta[2];
        assert_int_equal(lwt_numbers(mode, "theta_deg", theta, 2), 2);
        assert_int_equal(lwt_numbers(mode, "jacobian", want, 4), 4);
        const int elbow[2] = {elbow_of(&base[0], point, first[0], second[0], theta[0]),
                              elbow_of(&base[2], point, first[1], second[1], theta[1])};
        const double ref[2] = {point[0] + 0.004, point[1] - 0.003};
        lwt_machine *m =
            lwt_kit_pin_arms("pantograph", 2, base, first, second, ref, elbow, ref_theta);
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 2);
        assert_int_equal(m->report->mobility_counted, -1);
        lw_frame frame = lwt_frame_planar(point[0], point[1], 0.0);

        /* The inverse solutions hold the listed angles; where they are said to be complete there
         * are four. */
        const lw_inverse_answer *inverse = lwt_inverse(m, &frame, NULL, NULL, NULL);
        assert_true(!inverse->complete || inverse->n_solution == 4);
        const lw_solution *best = NULL;
        double off = INFINITY;
        for (size_t k = 0; k < inverse->n_solution; k++) {
            double worst = 0.0;
            for (size_t i = 0; i < 2; i++) {
                double drive = theta[i] * LWT_DEG - ref_theta[i];
                worst = fmax(worst, fabs(lwt_wrap(inverse->solution[k].drive[i] - drive)));
            }
            if (worst < off) {
                off = worst;
                best = &inverse->solution[k];
            }
        }
        assert_non_null(best);
        lwt_near(off, 0.0, lwt_number(tolerance, "angle_deg") * LWT_DEG);

        const double drive[2] = {theta[0] * LWT_DEG - ref_theta[0],
                                 theta[1] * LWT_DEG - ref_theta[1]};
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        lwt_near_n(forward->solution[0].tool.pos_m, point, 2, 1e-12);
        lwt_copy kept;
        lwt_keep(&kept, m, &forward->solution[0]);
        lw_config config = lwt_config_of(&kept);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_config(m, &config));
        assert_true(jacobian->has_forward);
        double got[4];
        for (size_t i = 0; i < 4; i++) {
            got[i] = 1e3 * jacobian->forward[i];
        }
        lwt_near_n(got, want, 4, lwt_number(tolerance, "jacobian"));
        lwt_near(jacobian->condition_forward, lwt_number(mode, "condition"),
                 lwt_number(tolerance, "condition"));
        /* With the signs as misprinted, d x4 and d x2 would turn round and the first row with
         * them: the check above must see that. */
        assert_true(fabs(got[0] + want[0]) > 1.0);
        lwt_machine_free(m);
        count++;
    }
    assert_int_equal(count, 4);
    cJSON_Delete(file);
}

/* ---- spare drives ---------------------------------------------------------------------------- */

/* Preload up to a factor: both scaled to the largest entry 1. */
static void same_direction(const double *got, const double *want, size_t n, double tol)
{
    size_t big = 0;
    for (size_t i = 1; i < n; i++) {
        if (fabs(want[i]) > fabs(want[big])) {
            big = i;
        }
    }
    assert_true(fabs(got[big]) > 0.0);
    for (size_t i = 0; i < n; i++) {
        lwt_near(got[i] / got[big], want[i] / want[big], tol);
    }
}

static void two_freedoms_on_three_arms(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("cheng-2003/cases.json");
    double base[6];
    double link = lwt_number(file, "link");
    const double links[3] = {link, link, link};
    const int elbow[3] = {1, 1, 1};
    double theta_ref[3];
    assert_int_equal(lwt_numbers(file, "base", base, 6), 6);
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(file, "cases"))
    {
        double point[2];
        double theta[3];
        double rates[6];
        double singular[2];
        double preload[3];
        (void)lwt_numbers(item, "point", point, 2);
        (void)lwt_numbers(item, "theta_deg", theta, 3);
        (void)lwt_numbers(item, "rates", rates, 6);
        (void)lwt_numbers(item, "singular_values", singular, 2);
        (void)lwt_numbers(item, "preload", preload, 3);
        const double ref[2] = {point[0] + 0.003, point[1] + 0.002};
        lwt_machine *m =
            lwt_kit_pin_arms("three-arms", 3, base, links, links, ref, elbow, theta_ref);
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 2);
        assert_int_equal(m->report->redundancy_drives, 1);
        double drive[3];
        for (size_t i = 0; i < 3; i++) {
            drive[i] = lwt_wrap(theta[i] * LWT_DEG - theta_ref[i]);
        }
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        lwt_near_n(forward->solution[0].tool.pos_m, point, 2, 1e-10);
        assert_int_equal(forward->n_disagreement, 3);
        for (size_t i = 0; i < 3; i++) {
            lwt_near(forward->disagreement[i], 0.0, 1e-9);
        }
        lwt_copy kept;
        lwt_keep(&kept, m, &forward->solution[0]);
        lw_config config = lwt_config_of(&kept);
        const lw_posture_ask *posture = lwt_by_config(m, &config);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, posture);
        assert_true(jacobian->has_inverse);
        lwt_near_n(jacobian->inverse, rates, 6, 1e-7); /* the point is met to 1e-10 */
        const lw_margin_answer *margin = lwt_margin(m, posture);
        assert_int_equal(margin->outcome, LW_OUTCOME_OK);
        assert_int_equal(margin->drives.rank, 2);
        double values[2];
        lwt_singular_values(values, jacobian->inverse, 3, 2);
        lwt_near_n(values, singular, 2, 1e-7);
        same_direction(margin->preload, preload, 3, 1e-7);
        for (size_t i = 0; i < 3; i++) {
            assert_false(margin->indispensable[i]);
            assert_true(margin->hold_without[i] > 0.0);
        }
        lwt_machine_free(m);
    }
    cJSON_Delete(file);
}

static void three_ropes_pull_evenly(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("pott-2009/cases.json");
    double r = lwt_number(file, "r");
    double tol = lwt_number(lwt_member(file, "tolerance"), "value");
    double direction[3];
    double preload[3];
    assert_int_equal(lwt_numbers(file, "directions_deg", direction, 3), 3);
    assert_int_equal(lwt_numbers(file, "preload", preload, 3), 3);
    lwt_machine *m = lwt_machine_new("three-ropes");
    size_t middle = lwt_add_body(m);
    size_t plate = lwt_add_body(m);
    size_t x = lwt_add_prismatic(m, 0, middle, (const double[3]){1, 0, 0});
    size_t y = lwt_add_prismatic(m, middle, plate, (const double[3]){0, 1, 0});
    for (size_t i = 0; i < 3; i++) {
        /* Every drive reads a sum of the two slides, as a rope in that direction does. */
        size_t drive = lwt_add_drive(m, lwt_coord(m, x, 0));
        m->spec->drive[drive].n_term = 2;
        m->spec->drive[drive].term[0].factor = r * cos(direction[i] * LWT_DEG);
        m->spec->drive[drive].term[1] = (lw_term){.coord = lwt_coord(m, y, 0),
                                                  .factor = r * sin(direction[i] * LWT_DEG)};
    }
    (void)lwt_add_tool(m, plate, NULL);
    lwt_add_outputs(m, "x y");
    lwt_machine_load(m);
    lw_frame pose = lwt_frame_planar(0.1, -0.2, 0.0);
    const lw_posture_ask *posture = lwt_by_pose(m, &pose, NULL, NULL, NULL);
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, posture);
    assert_true(jacobian->has_inverse);
    double values[2];
    lwt_singular_values(values, jacobian->inverse, 3, 2);
    lwt_near(values[0], r * sqrt(1.5), tol);
    lwt_near(values[1], r * sqrt(1.5), tol);
    lwt_near(jacobian->condition_forward, lwt_number(file, "condition"), 1e-10);
    const lw_margin_answer *margin = lwt_margin(m, posture);
    same_direction(margin->preload, preload, 3, 1e-10);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void four_arms_on_three_freedoms(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("own-2026/cases.json");
    const cJSON *set = lwt_member(file, "four_rrr");
    const cJSON *tolerance = lwt_member(file, "tolerance");
    double base[8];
    double platform[8];
    double theta_ref[4];
    double link = lwt_number(set, "link");
    assert_int_equal(lwt_numbers(set, "base", base, 8), 8);
    assert_int_equal(lwt_numbers(set, "platform", platform, 8), 8);
    const int elbow[4] = {1, 1, 1, 1};
    const double ref[3] = {0.02, 0.01, 0.05};
    lwt_machine *m =
        lwt_kit_planar_rrr("four-rrr", 4, base, platform, link, link, ref, elbow, theta_ref);
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 3);
    assert_int_equal(m->report->redundancy_drives, 1);
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(set, "cases"))
    {
        double pose[3];
        double theta[4];
        double rates[12];
        double singular[3];
        double preload[4];
        (void)lwt_numbers(item, "pose", pose, 3);
        (void)lwt_numbers(item, "theta_deg", theta, 4);
        (void)lwt_numbers(item, "rates", rates, 12);
        (void)lwt_numbers(item, "singular_values", singular, 3);
        (void)lwt_numbers(item, "preload", preload, 4);
        lw_frame frame = lwt_frame_planar(pose[0], pose[1], pose[2]);
        const lw_inverse_answer *inverse = lwt_inverse(m, &frame, NULL, NULL, NULL);
        assert_int_equal(inverse->n_solution, 16);
        assert_true(inverse->complete);
        size_t hit = 16;
        for (size_t k = 0; k < 16; k++) {
            double worst = 0.0;
            for (size_t i = 0; i < 4; i++) {
                double want = theta[i] * LWT_DEG - theta_ref[i];
                worst = fmax(worst, fabs(lwt_wrap(inverse->solution[k].drive[i] - want)));
            }
            hit = worst <= lwt_number(tolerance, "angle_deg") * LWT_DEG ? k : hit;
        }
        assert_true(hit < 16);
        lw_mode mode = inverse->solution[hit].mode;
        const lw_posture_ask *posture = lwt_by_pose(m, &frame, NULL, &mode, NULL);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, posture);
        assert_true(jacobian->has_inverse);
        lwt_near_n(jacobian->inverse, rates, 12, lwt_number(tolerance, "rate"));
        double values[3];
        lwt_singular_values(values, jacobian->inverse, 4, 3);
        lwt_near_n(values, singular, 3, lwt_number(tolerance, "singular_value"));
        const lw_margin_answer *margin = lwt_margin(m, posture);
        same_direction(margin->preload, preload, 4, lwt_number(tolerance, "preload"));
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* Least squares by hand: readings off by d leave r = S^2 n (n d) / (n S^2 n), n the preload
 * (n A = 0) and S the resolutions that weight them. To first order in d. */
static void disagreement_lies_along_the_preload(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("own-2026/cases.json");
    const cJSON *set = lwt_member(file, "four_rrr");
    const cJSON *item = cJSON_GetArrayItem(lwt_member(set, "cases"), 1);
    double base[8];
    double platform[8];
    double preload[4];
    double pose[3];
    double theta_ref[4];
    double link = lwt_number(set, "link");
    (void)lwt_numbers(set, "base", base, 8);
    (void)lwt_numbers(set, "platform", platform, 8);
    (void)lwt_numbers(item, "preload", preload, 4);
    (void)lwt_numbers(item, "pose", pose, 3);
    const int elbow[4] = {1, 1, 1, 1};
    static const double resolution[2][4] = {{1e-3, 1e-3, 1e-3, 1e-3}, {1e-3, 2e-3, 4e-3, 1.5e-3}};
    for (size_t k = 0; k < 2; k++) {
        lwt_machine *m = lwt_kit_planar_rrr("four-rrr", 4, base, platform, link, link, pose, elbow,
                                            theta_ref);
        for (size_t i = 0; i < 4; i++) {
            m->spec->drive[i].has_resolution = true;
            m->spec->drive[i].resolution = resolution[k][i];
        }
        lwt_machine_load(m);
        for (size_t at = 0; at < 4; at++) {
            double drive[4] = {0};
            drive[at] = 1e-5;
            double weight = 0.0;
            for (size_t i = 0; i < 4; i++) {
                double s = resolution[k][i];
                weight += preload[i] * preload[i] * s * s;
            }
            const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
            assert_int_equal(forward->n_disagreement, 4);
            for (size_t i = 0; i < 4; i++) {
                double s = resolution[k][i];
                double want = s * s * preload[i] * preload[at] * drive[at] / weight;
                lwt_near(forward->disagreement[i], want, 1e-9);
                assert_true(forward->allowed[i] > fabs(want));
            }
            assert_true(forward->chi_square > 0.0);
            assert_true(forward->chi_square < forward->chi_square_limit);
        }
        lwt_machine_free(m);
    }
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(four_modes_of_the_pantograph),
        cmocka_unit_test(two_freedoms_on_three_arms),
        cmocka_unit_test(three_ropes_pull_evenly),
        cmocka_unit_test(four_arms_on_three_freedoms),
        cmocka_unit_test(disagreement_lies_along_the_preload),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
