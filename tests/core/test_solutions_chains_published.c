/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All solutions of linkages, arms and three-legged machines, against published counts and published
 * solutions, with sets that the trace test proves complete or an answer that says that they are
 * not. The sources stand in tests/cases/<author-year>/SOURCE.md and beside counts that need no
 * data. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SEED = 3 };

/* ---- seven links ----------------------------------------------------------------------------- */

/* Innocenti 1995: 18; 8 of these lengths are real (recomputed). */
static void seven_links_have_eighteen_assemblies_eight_real(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("innocenti-1995/cases.json");
    double theta[48];
    assert_int_equal(lwt_numbers(file, "assemblies_deg", theta, 48), 48);
    lwt_machine *m = lwt_kit_seven_links(lwt_member(file, "links"), theta);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    assert_int_equal(lw_model_report(m->model)->mobility, 1);
    lwt_expect_closed(lwt_forward_set(m), (size_t)lwt_number(file, "solutions_complex"));
    static const double turns[2] = {0.0, 0.7}; /* the crank's place changes nothing */
    for (size_t k = 0; k < 2; k++) {
        const lw_forward_answer *a = lwt_forward_all(m, &turns[k]);
        lwt_expect_all(m, a, 18);
        assert_int_equal(a->n_solution, 8);
        for (size_t s = 0; s < 8; s++) {
            double best = INFINITY;
            for (size_t i = 0; i < 8; i++) {
                double worst = 0.0;
                for (size_t link = 0; link < 6; link++) {
                    const double *r = a->solution[i].config.body[2 + link].rot;
                    double want = (theta[6 * s + link] - theta[link]) * LWT_DEG + turns[k];
                    worst = fmax(worst, fabs(lwt_wrap(atan2(r[3], r[0]) - want)));
                }
                best = fmin(best, worst);
            }
            lwt_near(best, 0.0, 1e-10);
        }
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* ---- arms ------------------------------------------------------------------------------------ */

static lw_frame pose_of(const cJSON *set)
{
    double rows[12];
    lw_frame pose;
    assert_int_equal(lwt_numbers(set, "pose", rows, 12), 12);
    for (size_t i = 0; i < 3; i++) {
        memcpy(&pose.rot[3 * i], &rows[4 * i], 3 * sizeof(double));
        pose.pos_m[i] = rows[4 * i + 3];
    }
    return pose;
}

/* General arm: 16 (Lee, Liang 1988; Raghavan, Roth 1993, read in Manocha, Canny 1994). */
static void check_arm(const char *file, const double *ref, size_t real, unsigned long paths,
                      bool closed)
{
    cJSON *set = lwt_case_file(file);
    lwt_table table;
    double theta[96];
    assert_int_equal(lwt_numbers(set, "solutions_deg", theta, 96), 6 * real);
    lwt_table_read(&table, set, 1.0);
    lwt_machine *m = lwt_kit_arm("general-arm", &table, ref, "x y z rx ry rz");
    lwt_machine_load_prepared(m, SEED, paths);
    assert_int_equal(lwt_inverse_set(m)->solutions, 16);
    assert_int_equal(lwt_inverse_set(m)->closed, closed);
    lw_frame pose = pose_of(set);
    const lw_inverse_answer *a = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_int_equal(a->complete, closed);
    assert_int_equal(a->basis, closed ? LW_BASIS_TRACE : LW_BASIS_SATURATED);
    assert_int_equal(a->found.complex_count, 16);
    assert_int_equal(a->found.not_converged, 0);
    assert_int_equal(a->n_solution, real);
    lwt_check_solutions(m, a->solution, a->n_solution);
    for (size_t s = 0; s < real; s++) {
        double best = INFINITY;
        for (size_t i = 0; i < real; i++) {
            double worst = 0.0;
            for (size_t j = 0; j < 6; j++) {
                double gap = a->solution[i].drive[j] + ref[j] - theta[6 * s + j] * LWT_DEG;
                worst = fmax(worst, fabs(lwt_wrap(gap)));
            }
            best = fmin(best, worst);
        }
        /* The stored pose has 16 digits; solutions near one another answer to it more sharply. */
        lwt_near(best, 0.0, 1e-9);
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void all_sixteen_of_manseur_and_doty_are_real(void **state)
{
    (void)state;
    /* Twists of one degree put points of the trace test far out: its sums need long doubles. */
    check_arm("manseur-doty-1989/cases.json", (const double[6]){0.3, -0.4, 0.6, -0.2, 0.5, 0.1},
              16, LWT_PATHS, true);
}

static void two_of_raghavan_and_roths_sixteen_are_real(void **state)
{
    (void)state;
    check_arm("raghavan-roth-1990/cases.json", (const double[6]){0.3, -0.4, 0.6, -0.2, 0.5, 0.1},
              2, LWT_PATHS, true);
}

/* The end of a serial arm on a stage that is driven to a place (and, if wanted, an attitude): the
 * stage's forward question is the arm's inverse one, put to the general solver whatever the arm's
 * kind. Returns the stage's last body. */
static size_t add_stage(lwt_machine *m, const lw_frame *tip, size_t *joint, bool turning)
{
    static const double axis[6][3] = {{1, 0, 0}, {0, 1, 0}, {0, 0, 1},
                                      {0, 0, 1}, {0, 1, 0}, {1, 0, 0}};
    size_t body = 0;
    for (size_t i = 0; i < (turning ? 6 : 3); i++) {
        size_t next = lwt_add_body(m);
        joint[i] = i < 3 ? lwt_add_prismatic(m, body, next, axis[i])
                         : lwt_add_revolute(m, body, next, tip->pos_m, axis[i]);
        body = next;
    }
    return body;
}

/* Wenger 2007 (memory, recomputed): 4. */
static void cuspidal_arm_of_wenger_has_four(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("wenger-2007/cases.json");
    double a[3];
    double alpha[3];
    double r[3];
    double point[3];
    double theta[12];
    const double ref[3] = {0.2, -0.3, 1.1};
    (void)lwt_numbers(set, "a", a, 3);
    (void)lwt_numbers(set, "alpha_deg", alpha, 3);
    (void)lwt_numbers(set, "r", r, 3);
    (void)lwt_numbers(set, "point", point, 3);
    assert_int_equal(lwt_numbers(set, "solutions", theta, 12), 12);
    for (size_t i = 0; i < 3; i++) {
        alpha[i] *= LWT_DEG;
    }
    lwt_machine *m = lwt_machine_new("cuspidal-arm");
    lw_frame end;
    size_t last = lwt_add_chain_proximal(m, 0, NULL, 3, a, alpha, r, ref, &end);
    lw_frame tip = lwt_frame_identity();
    lwt_frame_point(tip.pos_m, &end, (const double[3]){lwt_number(set, "tip"), 0, 0});
    size_t joint[6];
    size_t stage = add_stage(m, &tip, joint, false);
    (void)lwt_add_spherical(m, last, stage, tip.pos_m);
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, joint[i]);
    }
    (void)lwt_add_tool(m, stage, &tip);
    lwt_add_outputs(m, "x y z");
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 4);
    double drive[3] = {point[0] - tip.pos_m[0], point[1] - tip.pos_m[1], point[2] - tip.pos_m[2]};
    const lw_forward_answer *answer = lwt_forward_all(m, drive);
    lwt_expect_all(m, answer, 4);
    assert_int_equal(answer->n_solution, 4);
    for (size_t s = 0; s < 4; s++) {
        double best = INFINITY;
        for (size_t i = 0; i < 4; i++) {
            double worst = 0.0;
            for (size_t j = 0; j < 3; j++) {
                double gap = answer->solution[i].config.coord[j] + ref[j] - theta[3 * s + j];
                worst = fmax(worst, fabs(lwt_wrap(gap)));
            }
            best = fmin(best, worst);
        }
        lwt_near(best, 0.0, 1e-6); /* kept to 6 decimals */
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* Arm with a spherical wrist (Pieper 1968, memory): 8, which the explicit solution gives too. */
static void spherical_wrist_has_eight_by_the_general_solver(void **state)
{
    (void)state;
    const lwt_table table = {.n = 6,
                             .a = {0, 0.4318, 0.0203, 0, 0, 0},
                             .alpha = {90 * LWT_DEG, 0, -90 * LWT_DEG, 90 * LWT_DEG,
                                       -90 * LWT_DEG, 0},
                             .d = {0, 0, 0.15005, 0.4318, 0, 0}};
    static const double ref[6] = {0.2, 0.7, -2.6, 0.5, 0.8, -0.3};
    static const double to[6] = {0.1, 0.75, 3.1, 0.1, 0.75, 0.1};
    lwt_machine *arm = lwt_kit_arm("wrist-arm", &table, ref, "x y z rx ry rz");
    lwt_machine_load(arm);
    assert_true(arm->report->explicit_inverse);

    lwt_machine *m = lwt_machine_new("wrist-arm-on-a-stage");
    lw_frame start;
    size_t joint[6];
    size_t last = lwt_add_chain_distal(m, 0, NULL, 6, table.a, table.alpha, table.d, ref, &start);
    size_t stage = add_stage(m, &start, joint, true);
    (void)lwt_add_fixed(m, last, stage);
    for (size_t i = 0; i < 6; i++) {
        (void)lwt_drive_joint(m, joint[i]);
    }
    (void)lwt_add_tool(m, stage, &start);
    lwt_add_outputs(m, "x y z rx ry rz");
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 8);

    lw_frame goal = lwt_table_forward(&table, to);
    lw_frame back = lwt_frame_inverse(&start);
    lw_frame moved = lwt_frame_mul(&goal, &back);
    double drive[6];
    for (size_t i = 0; i < 3; i++) {
        drive[i] = goal.pos_m[i] - start.pos_m[i];
    }
    lw_zyx_from_rot(drive + 3, moved.rot);
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    lwt_expect_all(m, a, 8);
    const lw_inverse_answer *b = lwt_inverse(arm, &goal, NULL, NULL, NULL);
    assert_true(b->complete);
    assert_int_equal(a->n_solution, 8);
    assert_int_equal(b->n_solution, 8);
    for (size_t i = 0; i < a->n_solution; i++) {
        double best = INFINITY;
        for (size_t k = 0; k < b->n_solution; k++) {
            double worst = 0.0;
            for (size_t j = 0; j < 6; j++) {
                worst = fmax(worst, fabs(lwt_wrap(a->solution[i].config.coord[j] -
                                                  b->solution[k].drive[j])));
            }
            best = fmin(best, worst);
        }
        lwt_near(best, 0.0, 1e-9);
    }
    lwt_machine_free(arm);
    lwt_machine_free(m);
}

/* Three legs of hinge, slide and ball: 16 (Lee, Shah 1988; Tsai 1999; memory). Own geometry. */
static void three_rps_has_sixteen(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, "three-rps") != 0) {
            continue;
        }
        lwt_machine *m = lwt_subjects[i].make();
        lwt_machine_load_prepared(m, SEED, LWT_PATHS);
        lwt_expect_closed(lwt_forward_set(m), 16);
        const double drive[3] = {0.03, -0.02, 0.05};
        lwt_expect_all(m, lwt_forward_all(m, drive), 16);
        lwt_machine_free(m);
        return;
    }
    lwt_fail("the subject is gone");
}

/* A budget that is too small for the trace test leaves an answer that says so. */
static void a_set_that_is_not_closed_answers_incomplete(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, "six-struts") != 0) {
            continue;
        }
        lwt_machine *m = lwt_subjects[i].make();
        lwt_machine_load_prepared(m, SEED, 60);
        assert_true(lwt_forward_set(m)->present);
        assert_false(lwt_forward_set(m)->closed);
        assert_true(lwt_forward_set(m)->paths <= 120);
        const double drive[6] = {0.03, -0.02, 0.05, 0, 0.01, 0.02};
        const lw_forward_answer *a = lwt_forward_all(m, drive);
        assert_false(a->complete);
        assert_int_equal(a->basis, LW_BASIS_SATURATED);
        lwt_machine_free(m);
        return;
    }
    lwt_fail("the subject is gone");
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(seven_links_have_eighteen_assemblies_eight_real),
        cmocka_unit_test(all_sixteen_of_manseur_and_doty_are_real),
        cmocka_unit_test(two_of_raghavan_and_roths_sixteen_are_real),
        cmocka_unit_test(cuspidal_arm_of_wenger_has_four),
        cmocka_unit_test(spherical_wrist_has_eight_by_the_general_solver),
        cmocka_unit_test(three_rps_has_sixteen),
        cmocka_unit_test(a_set_that_is_not_closed_answers_incomplete),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
