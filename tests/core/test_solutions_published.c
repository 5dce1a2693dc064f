/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All solutions, from sets that the trace test proves complete, against published counts and
 * published postures. The sources stand in tests/cases/<author-year>/SOURCE.md and beside counts
 * that need no data. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SEED = 3 };

static lw_frame posture_frame(const cJSON *posture)
{
    double position[3];
    double quat[4];
    assert_int_equal(lwt_numbers(posture, "position", position, 3), 3);
    assert_int_equal(lwt_numbers(posture, "quaternion", quat, 4), 4);
    return lwt_frame_quat(position, quat);
}

/* ---- six struts ------------------------------------------------------------------------------ */

/* All 40 are found, the real ones are the listed postures and no others. */
static void check_platform(const char *file, size_t real)
{
    cJSON *set = lwt_case_file(file);
    const cJSON *postures = lwt_member(set, "postures");
    assert_int_equal(cJSON_GetArraySize(postures), real);
    double length[6];
    double drive[6];
    assert_int_equal(lwt_numbers(set, "length", length, 6), 6);
    lw_frame ref = lwt_frame_zyx((const double[3]){0.4, 0.3, 0.8}, 0.3, -0.2, 0.4);
    lwt_machine *m = lwt_kit_struts_case(set, &ref);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 40);
    lwt_readings_of_lengths(drive, m, length);
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    lwt_expect_all(m, a, 40);
    assert_int_equal(a->n_solution, real);
    bool taken[64] = {false};
    const cJSON *posture = NULL;
    cJSON_ArrayForEach(posture, postures)
    {
        lw_frame pose = posture_frame(posture);
        /* Struts met to 4e-15 leave the pose uncertain by that times the condition number. */
        double slack = fmax(1e-11, 1e-13 * lwt_number(posture, "condition"));
        size_t found = lwt_find_tool(a->solution, a->n_solution, &pose, slack, slack);
        assert_true(found < a->n_solution);
        assert_false(taken[found]);
        taken[found] = true;
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void all_forty_of_dietmaier_are_real_and_found(void **state)
{
    (void)state;
    check_platform("dietmaier-1998/cases.json", 40);
}

static void four_of_mourrains_forty_are_real(void **state)
{
    (void)state;
    check_platform("mourrain-1993/cases.json", 4);
}

static void eight_of_bellidos_forty_are_real(void **state)
{
    (void)state;
    check_platform("bellido-1992/cases.json", 8);
}

/* Special classes by shared ball points. Counts: general platform 40 (Raghavan 1993, Mourrain 1993,
 * Husty 1996; memory); 6-3 and octahedral 16 (Griffis, Duffy 1989; Nanua, Waldron, Murthy 1990;
 * memory; degree 16 read in Rusin 1999); the others recomputed by homotopy continuation from random
 * geometries, three each, classes after Faugere and Lazard 1995 (memory). */
typedef struct platform_class {
    const char *name;
    size_t base[6], plate[6];
    bool planar_base, planar_plate;
    size_t count;
    unsigned seed; /* 0: SEED; others where that one needs far more paths to close */
} platform_class;

static const platform_class CLASSES[] = {
    {"6-6 general", {0, 1, 2, 3, 4, 5}, {0, 1, 2, 3, 4, 5}, false, false, 40, 0},
    {"6-6 planar platform", {0, 1, 2, 3, 4, 5}, {0, 1, 2, 3, 4, 5}, false, true, 40, 0},
    {"6-6 planar both", {0, 1, 2, 3, 4, 5}, {0, 1, 2, 3, 4, 5}, true, true, 40, 0},
    {"6-5", {0, 1, 2, 3, 4, 5}, {0, 0, 1, 2, 3, 4}, false, false, 40, 0},
    {"6-4", {0, 1, 2, 3, 4, 5}, {0, 0, 1, 1, 2, 3}, false, false, 32, 0},
    {"6-4 planar base", {0, 1, 2, 3, 4, 5}, {0, 0, 1, 1, 2, 3}, true, false, 32, 0},
    {"6-3", {0, 1, 2, 3, 4, 5}, {0, 0, 1, 1, 2, 2}, false, false, 16, 0},
    {"6-3 planar base", {0, 1, 2, 3, 4, 5}, {0, 0, 1, 1, 2, 2}, true, false, 16, 5},
    {"3-3 octahedral", {0, 1, 1, 2, 2, 0}, {0, 0, 1, 1, 2, 2}, true, true, 16, 0},
    {"6-3 with a triple point", {0, 1, 2, 3, 4, 5}, {0, 0, 0, 1, 1, 2}, false, false, 8, 5},
    {"5-5 apart", {0, 0, 1, 2, 3, 4}, {0, 1, 2, 2, 3, 4}, false, false, 24, 0},
    {"5-5 with a common leg", {0, 0, 1, 2, 3, 4}, {0, 1, 1, 2, 3, 4}, false, false, 40, 0},
    {"5-4", {0, 0, 1, 2, 3, 4}, {0, 1, 1, 2, 2, 3}, false, false, 24, 0},
    {"4-4", {0, 0, 1, 1, 2, 3}, {0, 1, 1, 2, 2, 3}, false, false, 24, 0},
};

static void shared_ball_points_have_the_counts_of_their_class(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 1995);
    for (size_t c = 0; c < sizeof CLASSES / sizeof CLASSES[0]; c++) {
        const platform_class *k = &CLASSES[c];
        double points[2][18];
        double base[18];
        double plate[18];
        for (size_t i = 0; i < 6; i++) {
            double angle = 60.0 * LWT_DEG * (double)i;
            for (size_t side = 0; side < 2; side++) {
                double r = side == 0 ? 1.0 : 0.6;
                bool flat = side == 0 ? k->planar_base : k->planar_plate;
                double z = lwt_random_in(&rng, -0.3, 0.3);
                points[side][3 * i] = r * cos(angle) + lwt_random_in(&rng, -0.3, 0.3);
                points[side][3 * i + 1] = r * sin(angle) + lwt_random_in(&rng, -0.3, 0.3);
                points[side][3 * i + 2] = flat ? 0.0 : z;
            }
        }
        for (size_t i = 0; i < 6; i++) {
            memcpy(&base[3 * i], &points[0][3 * k->base[i]], 3 * sizeof(double));
            memcpy(&plate[3 * i], &points[1][3 * k->plate[i]], 3 * sizeof(double));
        }
        lw_frame ref = lwt_frame_zyx((const double[3]){0.1, -0.05, 1.1}, 0.3, 0.1, -0.15);
        lwt_machine *m = lwt_kit_struts(k->name, 6, base, plate, &ref);
        lwt_machine_load_prepared(m, k->seed > 0 ? k->seed : SEED, LWT_PATHS);
        const lw_set_info *set = lwt_forward_set(m);
        if (!set->closed || set->solutions != k->count) {
            lwt_fail("%s: %zu solutions, closed %d, want %zu", k->name, set->solutions,
                     set->closed, k->count);
        }
        double drive[6];
        for (size_t i = 0; i < 6; i++) {
            drive[i] = lwt_random_in(&rng, -0.05, 0.05);
        }
        lwt_expect_all(m, lwt_forward_all(m, drive), (int)k->count);
        lwt_machine_free(m);
    }
}

/* Frame with its origin in the first corner, x towards the second, the third in the xy plane. */
static lw_frame corner_frame(const double corner[9])
{
    double axis[3][3];
    for (size_t k = 0; k < 3; k++) {
        axis[0][k] = corner[3 + k] - corner[k];
        axis[1][k] = corner[6 + k] - corner[k];
    }
    lwt_cross(axis[2], axis[0], axis[1]);
    lwt_cross(axis[1], axis[2], axis[0]);
    lw_frame out;
    for (size_t c = 0; c < 3; c++) {
        double n = lwt_norm(axis[c]);
        for (size_t k = 0; k < 3; k++) {
            out.rot[3 * k + c] = axis[c][k] / n;
        }
    }
    memcpy(out.pos_m, corner, sizeof out.pos_m);
    return out;
}

static void four_of_rusins_sixteen_are_real(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("rusin-1999/cases.json");
    double corners[36];
    double base[9];
    double foot[18];
    double top[18];
    double length[6];
    double drive[6];
    assert_int_equal(lwt_numbers(set, "corners", corners, 36), 36);
    assert_int_equal(lwt_numbers(set, "base", base, 9), 9);
    lw_frame ref = corner_frame(corners);
    lw_frame back = lwt_frame_inverse(&ref);
    size_t n = 0;
    const cJSON *strut = NULL;
    cJSON_ArrayForEach(strut, lwt_member(set, "struts"))
    {
        size_t corner = (size_t)lwt_number(strut, "corner") - 1;
        memcpy(&foot[3 * n], &base[3 * ((size_t)lwt_number(strut, "base") - 1)],
               3 * sizeof(double));
        lwt_frame_point(&top[3 * n], &back, &corners[3 * corner]);
        length[n++] = lwt_number(strut, "length");
    }
    assert_int_equal(n, 6);
    lwt_machine *m = lwt_kit_struts("three-corners", 6, foot, top, &ref);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), (size_t)lwt_number(set, "solutions_complex"));
    lwt_readings_of_lengths(drive, m, length);
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    lwt_expect_all(m, a, 16);
    assert_int_equal(a->n_solution, 4);
    for (size_t s = 0; s < 4; s++) {
        lw_frame pose = corner_frame(&corners[9 * s]);
        assert_true(lwt_find_tool(a->solution, 4, &pose, 1e-10, 1e-10) < 4);
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* ---- planar platforms ------------------------------------------------------------------------ */

/* Exactly these n poses (x, y, theta). */
static void expect_poses(const lw_forward_answer *a, const double *pose, size_t n, double tol)
{
    assert_int_equal(a->n_solution, n);
    for (size_t i = 0; i < n; i++) {
        lw_frame frame = lwt_frame_planar(pose[3 * i], pose[3 * i + 1], pose[3 * i + 2]);
        assert_true(lwt_find_tool(a->solution, n, &frame, tol, tol) < n);
    }
}

static size_t read_poses(double *pose, const cJSON *list)
{
    size_t n = 0;
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, list)
    {
        pose[3 * n] = lwt_number(item, "x");
        pose[3 * n + 1] = lwt_number(item, "y");
        pose[3 * n + 2] = lwt_number(item, "theta");
        n++;
    }
    return n;
}

static lwt_machine *sauer(const cJSON *set)
{
    double l2 = lwt_number(set, "L2");
    double gamma = lwt_number(set, "gamma");
    const double base[6] = {0, 0, lwt_number(set, "x1"), 0, lwt_number(set, "x2"),
                            lwt_number(set, "y2")};
    const double plate[6] = {0, 0, lwt_number(set, "L3"), 0, l2 * cos(gamma), l2 * sin(gamma)};
    lwt_machine *m =
        lwt_kit_planar_struts("sauer", base, plate, (const double[3]){0.5, 4.0, 0.2});
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    return m;
}

/* General planar platform on three legs: 6 (Hunt 1983; Gosselin, Sefrioui, Richard 1992;
 * memory). */
static void real_poses_of_sauer_change_at_his_boundaries(void **state)
{
    (void)state;
    static const int real[7] = {0, 2, 4, 6, 4, 2, 0}; /* recomputed with the boundaries */
    cJSON *file = lwt_case_file("sauer-2012/cases.json");
    const cJSON *set = lwt_member(file, "main");
    lwt_machine *m = sauer(set);
    lwt_expect_closed(lwt_forward_set(m), 6);
    double border[8] = {0};
    assert_int_equal(lwt_numbers(lwt_member(file, "singular"), "p2", border + 1, 6), 6);
    border[7] = 11.0;
    for (int k = 0; k < 7; k++) {
        static const double place[3] = {1e-5, 0.5, -1e-5}; /* beside both borders, and between */
        for (int i = 0; i < 3; i++) {
            double p2 = i == 1 ? 0.5 * (border[k] + border[k + 1])
                               : border[i == 0 ? k : k + 1] + place[i];
            const double length[3] = {lwt_number(set, "p1"), p2, lwt_number(set, "p3")};
            double drive[3];
            lwt_readings_of_lengths(drive, m, length);
            const lw_forward_answer *a = lwt_forward_all(m, drive);
            lwt_expect_all(m, a, 6);
            assert_int_equal(a->found.real, real[k]);
        }
    }
    const cJSON *group = NULL;
    cJSON_ArrayForEach(group, lwt_member(set, "sets"))
    {
        double pose[18];
        double drive[3];
        const double length[3] = {lwt_number(set, "p1"),
                                  lwt_printed(lwt_text(group, "p2"), NULL),
                                  lwt_number(set, "p3")};
        size_t n = read_poses(pose, lwt_member(group, "poses"));
        lwt_readings_of_lengths(drive, m, length);
        expect_poses(lwt_forward_all(m, drive), pose, n, 1e-10);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void similar_triangles_have_two_finite_poses(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sauer-2012/cases.json");
    const cJSON *set = lwt_member(file, "similar");
    lwt_machine *m = sauer(set);
    double length[3];
    double drive[3];
    double pose[6];
    /* Similar triangles have at most 4 (Kong, Gosselin 2001, memory); with these equal lengths two
     * of them lie at infinity (recomputed). */
    lwt_expect_closed(lwt_forward_set(m), 4);
    assert_int_equal(lwt_numbers(set, "p", length, 3), 3);
    assert_int_equal(read_poses(pose, lwt_member(set, "poses")), 2);
    lwt_readings_of_lengths(drive, m, length);
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    lwt_expect_all(m, a, 2);
    expect_poses(a, pose, 2, 1e-10);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void all_six_of_innocenti_and_parenti_castelli_are_real(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("innocenti-parenti-1992/cases.json");
    double base[6];
    double plate[6];
    double length[3];
    double drive[3];
    double pose[18];
    assert_int_equal(lwt_numbers(file, "base", base, 6), 6);
    assert_int_equal(lwt_numbers(file, "platform", plate, 6), 6);
    assert_int_equal(lwt_numbers(file, "length", length, 3), 3);
    assert_int_equal(read_poses(pose, lwt_member(file, "poses")), 6);
    lwt_machine *m =
        lwt_kit_planar_struts("six-real", base, plate, (const double[3]){3.0, 4.0, 0.6});
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 6);
    lwt_readings_of_lengths(drive, m, length);
    const lw_forward_answer *a = lwt_forward_all(m, drive);
    lwt_expect_all(m, a, 6);
    expect_poses(a, pose, 6, 1e-10);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void three_rrr_of_kotlarski_has_six(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("kotlarski-2008/cases.json");
    double base[6];
    double plate[6];
    double pose[3];
    double ref[3];
    double theta[3];
    assert_int_equal(lwt_numbers(file, "base", base, 6), 6);
    assert_int_equal(lwt_numbers(file, "platform", plate, 6), 6);
    assert_int_equal(lwt_numbers(file, "pose", pose, 3), 3);
    lwt_machine *m =
        lwt_kit_planar_rrr("3-rrr", 3, base, plate, lwt_number(file, "crank"),
                           lwt_number(file, "link"), pose, (const int[3]){1, -1, 1}, ref);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 6);
    size_t count = 0;
    const cJSON *mode = NULL;
    cJSON_ArrayForEach(mode, lwt_member(file, "modes"))
    {
        double drive[3];
        double want[18];
        assert_int_equal(lwt_numbers(mode, "theta_deg", theta, 3), 3);
        size_t n = lwt_numbers(mode, "forward", want, 18) / 3;
        for (size_t i = 0; i < 3; i++) {
            drive[i] = theta[i] * LWT_DEG - ref[i];
        }
        const lw_forward_answer *a = lwt_forward_all(m, drive);
        lwt_expect_all(m, a, 6);
        expect_poses(a, want, n, 1e-9);
        count++;
    }
    assert_int_equal(count, 8);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* Two circles meet in two points: elementary. The case's point is one of them. */
static void five_bar_has_two(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("campion-2005/cases.json");
    double point[2];
    double theta[2];
    double ref[2];
    assert_int_equal(lwt_numbers(file, "point", point, 2), 2);
    double offset = lwt_number(file, "a5");
    lwt_machine *m = lwt_kit_pin_arms(
        "five-bar", 2, (const double[4]){0, 0, -offset, 0},
        (const double[2]){lwt_number(file, "a1"), lwt_number(file, "a4")},
        (const double[2]){lwt_number(file, "a2"), lwt_number(file, "a3")},
        (const double[2]){-9.0, 95.0}, (const int[2]){-1, 1}, ref);
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    lwt_expect_closed(lwt_forward_set(m), 2);
    const cJSON *mode = NULL;
    cJSON_ArrayForEach(mode, lwt_member(file, "modes"))
    {
        assert_int_equal(lwt_numbers(mode, "theta_deg", theta, 2), 2);
        double drive[2] = {theta[0] * LWT_DEG - ref[0], theta[1] * LWT_DEG - ref[1]};
        const lw_forward_answer *a = lwt_forward_all(m, drive);
        assert_true(a->complete);
        assert_int_equal(a->found.complex_count, 2);
        assert_int_equal(a->n_solution, 2);
        double off = INFINITY;
        for (size_t i = 0; i < 2; i++) {
            const double *p = a->solution[i].tool.pos_m;
            off = fmin(off, hypot(p[0] - point[0], p[1] - point[1]));
        }
        lwt_near(off, 0.0, 1e-10);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(all_forty_of_dietmaier_are_real_and_found),
        cmocka_unit_test(four_of_mourrains_forty_are_real),
        cmocka_unit_test(eight_of_bellidos_forty_are_real),
        cmocka_unit_test(shared_ball_points_have_the_counts_of_their_class),
        cmocka_unit_test(four_of_rusins_sixteen_are_real),
        cmocka_unit_test(real_poses_of_sauer_change_at_his_boundaries),
        cmocka_unit_test(similar_triangles_have_two_finite_poses),
        cmocka_unit_test(all_six_of_innocenti_and_parenti_castelli_are_real),
        cmocka_unit_test(three_rrr_of_kotlarski_has_six),
        cmocka_unit_test(five_bar_has_two),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
