/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Six-strut platforms against published and recomputed values: strut lengths, tracked forward,
 * determinant and condition of the strut matrix, singular platforms, statics. The sources stand in
 * tests/cases/<author-year>/SOURCE.md. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { POSES_MAX = 64 };

static lw_frame posture_frame(const cJSON *posture)
{
    double position[3];
    double rotation[9];
    lw_frame frame;
    assert_int_equal(lwt_numbers(posture, "position", position, 3), 3);
    if (cJSON_HasObjectItem(posture, "rotation")) {
        assert_int_equal(lwt_numbers(posture, "rotation", rotation, 9), 9);
        memcpy(frame.rot, rotation, sizeof rotation);
        memcpy(frame.pos_m, position, sizeof position);
        return frame;
    }
    double quat[4];
    assert_int_equal(lwt_numbers(posture, "quaternion", quat, 4), 4);
    return lwt_frame_quat(position, quat);
}

/* Strut lengths of the one inverse solution at a pose. */
static void lengths_at(lwt_machine *m, const lw_frame *pose, double *length)
{
    const lw_inverse_answer *answer = lwt_inverse(m, pose, NULL, NULL, NULL);
    assert_int_equal(answer->outcome, LW_OUTCOME_OK);
    assert_true(answer->complete);
    assert_int_equal(answer->basis, LW_BASIS_EXPLICIT);
    assert_int_equal(answer->n_solution, 1);
    double position = 0.0;
    double angle = 0.0;
    lwt_closure(m->spec, &answer->solution[0].config, &position, &angle);
    lwt_near(position, 0.0, 1e-12);
    for (size_t i = 0; i < m->spec->n_rod; i++) {
        const lw_spec_rod *rod = &m->spec->rod[i];
        double d[3];
        for (size_t k = 0; k < 3; k++) {
            d[k] = rod->end_m[1][k] - rod->end_m[0][k];
        }
        length[i] = lwt_norm(d) + answer->solution[0].drive[i];
    }
}

/* The pose shifted and turned by a random amount of size `by` (m and rad). */
static lw_frame shaken(lwt_random *rng, const lw_frame *pose, double by)
{
    double axis[3];
    double shift[3];
    lwt_random_direction(rng, axis);
    lwt_random_direction(rng, shift);
    lw_frame turn = lwt_frame_turn(axis, (const double[3]){0, 0, 0}, by);
    lw_frame out = lwt_frame_mul(&turn, pose);
    for (size_t i = 0; i < 3; i++) {
        out.pos_m[i] = pose->pos_m[i] + by * shift[i];
    }
    return out;
}

static size_t best_posture(const cJSON *postures)
{
    size_t best = 0;
    double least = INFINITY;
    size_t i = 0;
    const cJSON *posture = NULL;
    cJSON_ArrayForEach(posture, postures)
    {
        double condition = lwt_number(posture, "condition");
        if (condition < least) {
            least = condition;
            best = i;
        }
        i++;
    }
    return best;
}

/* Every posture of a case: strut lengths, forward from a shaken start, determinant, condition. */
static void check_platform(const char *file)
{
    cJSON *set = lwt_case_file(file);
    const cJSON *postures = lwt_member(set, "postures");
    double tol = lwt_number(lwt_member(set, "tolerance"), "length");
    double want[6];
    assert_int_equal(lwt_numbers(set, "length", want, 6), 6);
    lw_frame ref = posture_frame(cJSON_GetArrayItem(postures, (int)best_posture(postures)));
    lwt_machine *m = lwt_kit_struts_case(set, &ref);
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 6);
    assert_int_equal(m->report->mobility_counted, 6);
    assert_true(m->report->explicit_inverse);
    lwt_random rng;
    lwt_random_init(&rng, 1998);
    int positive = 0;
    const cJSON *posture = NULL;
    cJSON_ArrayForEach(posture, postures)
    {
        lw_frame pose = posture_frame(posture);
        double got[6];
        lengths_at(m, &pose, got);
        lwt_near_n(got, want, 6, tol);

        /* Other assemblies lie as near as the posture is close to singular, so the start is shaken
         * by less where the condition number is large. */
        double condition = lwt_number(posture, "condition");
        lw_frame start = shaken(&rng, &pose, fmin(1e-2, 0.02 / condition));
        double drive[6];
        for (size_t i = 0; i < 6; i++) {
            double d[3];
            for (size_t k = 0; k < 3; k++) {
                d[k] = m->spec->rod[i].end_m[1][k] - m->spec->rod[i].end_m[0][k];
            }
            drive[i] = want[i] - lwt_norm(d);
        }
        const lw_forward_answer *forward =
            lwt_forward(m, drive, lwt_by_pose(m, &start, NULL, NULL, NULL));
        const lw_frame *tool = &forward->solution[0].tool;
        /* A strut error of 4e-15 may move the platform by condition times as much. */
        double slack = fmax(1e-12, 2e-14 * condition);
        lwt_near(lwt_frame_distance(tool, &pose), 0.0, slack);
        lwt_near(lwt_frame_angle(tool, &pose), 0.0, slack);

        const lw_jacobian_answer *jacobian =
            lwt_jacobian(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
        assert_true(jacobian->has_inverse);
        assert_int_equal(jacobian->n_output, 6);
        assert_int_equal(jacobian->n_drive, 6);
        double determinant = lwt_number(posture, "determinant");
        double scale = fmax(1.0, fabs(determinant));
        lwt_near(lwt_det(jacobian->inverse, 6), determinant, 1e-9 * scale);
        lwt_near_rel(lwt_condition(jacobian->inverse, 6, 6), condition, 1e-7);
        assert_true(jacobian->has_forward);
        lwt_near_rel(jacobian->condition_forward, condition, 1e-7);
        positive += determinant > 0.0;
    }
    /* Assemblies of one set of struts come in equal numbers of either sign here. */
    assert_int_equal(2 * positive, cJSON_GetArraySize(postures));
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void forty_real_postures_of_dietmaier(void **state)
{
    (void)state;
    check_platform("dietmaier-1998/cases.json");
}

static void four_real_postures_of_mourrain(void **state)
{
    (void)state;
    check_platform("mourrain-1993/cases.json");
}

static void eight_real_postures_of_bellido(void **state)
{
    (void)state;
    check_platform("bellido-1992/cases.json");
}

/* ---- Rusin 1999: three corners --------------------------------------------------------------- */

/* Frame with its origin in the first corner, x towards the second, the third in the xy plane. */
static lw_frame corner_frame(const double corner[9])
{
    double x[3];
    double y[3];
    double z[3];
    for (size_t k = 0; k < 3; k++) {
        x[k] = corner[3 + k] - corner[k];
        y[k] = corner[6 + k] - corner[k];
    }
    lwt_cross(z, x, y);
    lwt_cross(y, z, x);
    lw_frame out;
    double nx = lwt_norm(x);
    double ny = lwt_norm(y);
    double nz = lwt_norm(z);
    for (size_t k = 0; k < 3; k++) {
        out.rot[3 * k] = x[k] / nx;
        out.rot[3 * k + 1] = y[k] / ny;
        out.rot[3 * k + 2] = z[k] / nz;
        out.pos_m[k] = corner[k];
    }
    return out;
}

static lwt_machine *three_corners(const cJSON *set, const double corner[9], double *want)
{
    double base[9];
    double strut_base[18];
    double strut_top[18];
    lw_frame frame = corner_frame(corner);
    lw_frame back = lwt_frame_inverse(&frame);
    assert_int_equal(lwt_numbers(set, "base", base, 9), 9);
    size_t n = 0;
    const cJSON *strut = NULL;
    cJSON_ArrayForEach(strut, lwt_member(set, "struts"))
    {
        size_t top = (size_t)lwt_number(strut, "corner") - 1;
        size_t foot = (size_t)lwt_number(strut, "base") - 1;
        memcpy(&strut_base[3 * n], &base[3 * foot], 3 * sizeof(double));
        lwt_frame_point(&strut_top[3 * n], &back, &corner[3 * top]);
        want[n++] = lwt_number(strut, "length");
    }
    assert_int_equal(n, 6);
    return lwt_kit_struts("three-corners", 6, strut_base, strut_top, &frame);
}

static void four_real_postures_of_three_corners(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("rusin-1999/cases.json");
    double tol = lwt_number(lwt_member(set, "tolerance"), "length");
    double corners[36];
    double want[6];
    double side[3];
    assert_int_equal(lwt_numbers(set, "corners", corners, 36), 36);
    assert_int_equal(lwt_numbers(set, "sides_12_23_31", side, 3), 3);
    lwt_machine *m = three_corners(set, corners, want);
    lwt_machine_load(m);
    lwt_random rng;
    lwt_random_init(&rng, 1999);
    for (size_t s = 0; s < 4; s++) {
        lw_frame pose = corner_frame(&corners[9 * s]);
        double got[6];
        lengths_at(m, &pose, got);
        lwt_near_n(got, want, 6, 10.0 * tol);
        lw_frame start = shaken(&rng, &pose, 0.02);
        double drive[6];
        for (size_t i = 0; i < 6; i++) {
            drive[i] = want[i] - got[i];
        }
        /* Readings are changes from the reference posture; got - drive(pose) is its length. */
        const lw_inverse_answer *inverse = lwt_inverse(m, &pose, NULL, NULL, NULL);
        for (size_t i = 0; i < 6; i++) {
            drive[i] += inverse->solution[0].drive[i];
        }
        const lw_forward_answer *forward =
            lwt_forward(m, drive, lwt_by_pose(m, &start, NULL, NULL, NULL));
        for (size_t c = 0; c < 3; c++) {
            double local[3];
            double corner[3];
            lw_frame back = lwt_frame_inverse(&pose);
            lwt_frame_point(local, &back, &corners[9 * s + 3 * c]);
            lwt_frame_point(corner, &forward->solution[0].tool, local);
            lwt_near_n(corner, &corners[9 * s + 3 * c], 3, 1e-10);
        }
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* ---- singular platforms ---------------------------------------------------------------------- */

static lw_frame lifted(double turn_rad, double height_m)
{
    return lwt_frame_zyx((const double[3]){0, 0, height_m}, turn_rad, 0, 0);
}

static void quarter_turn_of_fichter_is_singular_at_any_height(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("fichter-1986/cases.json");
    const cJSON *tolerance = lwt_member(set, "tolerance");
    const cJSON *layout = NULL;
    cJSON_ArrayForEach(layout, lwt_member(set, "layouts"))
    {
        double height = lwt_number(layout, "height");
        lw_frame ref = lifted(0.0, height);
        lwt_machine *m = lwt_kit_struts_case(layout, &ref);
        lwt_machine_load(m);
        const cJSON *row = NULL;
        cJSON_ArrayForEach(row, lwt_member(layout, "rows"))
        {
            double turn = lwt_number(row, "turn_deg");
            lw_frame pose = lifted(turn * LWT_DEG, height);
            const lw_jacobian_answer *jacobian =
                lwt_jacobian(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
            assert_true(jacobian->has_inverse);
            lwt_near(lwt_det(jacobian->inverse, 6), lwt_number(row, "determinant"),
                     lwt_number(tolerance, "determinant"));
            bool singular = cJSON_IsNull(lwt_member(row, "condition"));
            if (!singular) {
                assert_int_equal(jacobian->outcome, LW_OUTCOME_OK);
                lwt_near(jacobian->condition_forward, lwt_number(row, "condition"),
                         lwt_number(tolerance, "condition"));
                continue;
            }
            assert_int_equal(jacobian->outcome, LW_OUTCOME_SINGULAR);
            assert_false(jacobian->has_forward);
            assert_true(jacobian->condition_forward == 0.0);
        }
        for (double h = 0.3; h < 1.6; h += 0.25) {
            lw_frame pose = lifted((h < 0.9 ? 90.0 : -90.0) * LWT_DEG, h);
            const lw_margin_answer *margin =
                lwt_margin(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
            assert_int_equal(margin->outcome, LW_OUTCOME_SINGULAR);
            assert_int_equal(margin->classes, LW_CLASS_FORWARD);
            assert_int_equal(margin->drives.rank, 5);
            assert_int_equal(margin->drives.rank_generic, 6);
            assert_true(margin->margin[LW_MARGIN_HOLD].value < 1e-9);
        }
        lwt_machine_free(m);
    }
    cJSON_Delete(set);
}

static void similar_hexagons_of_ma_and_angeles_never_hold(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("ma-angeles-1991/cases.json");
    double tol = lwt_number(lwt_member(set, "tolerance"), "relative_singular_value");
    lwt_random rng;
    lwt_random_init(&rng, 1991);
    const cJSON *layout = NULL;
    cJSON_ArrayForEach(layout, lwt_member(set, "layouts"))
    {
        lw_frame ref = lifted(0.3, 0.8);
        lwt_machine *m = lwt_kit_struts_case(layout, &ref);
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 6);
        bool singular = cJSON_IsTrue(lwt_member(layout, "singular"));
        for (int i = 0; i < 50; i++) {
            lw_frame pose = shaken(&rng, &ref, 0.2);
            const lw_margin_answer *margin =
                lwt_margin(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
            assert_int_equal(margin->drives.n_singular, 6);
            double relative = margin->drives.singular[5] / margin->drives.singular[0];
            if (singular) {
                assert_true(relative <= tol);
                assert_int_equal(margin->drives.rank, 5);
                assert_true((margin->classes & LW_CLASS_FORWARD) != 0);
                assert_int_equal(margin->outcome, LW_OUTCOME_SINGULAR);
            } else {
                assert_true(relative > 1e-6);
                assert_int_equal(margin->drives.rank, 6);
            }
        }
        lwt_machine_free(m);
    }
    cJSON_Delete(set);
}

static void equal_triangles_of_griffis_and_duffy_move_when_locked(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("griffis-duffy-1993/cases.json");
    double tol = lwt_number(lwt_member(set, "tolerance"), "length");
    double want[6];
    assert_int_equal(lwt_numbers(set, "length", want, 6), 6);
    lw_frame home = posture_frame(lwt_member(set, "home"));
    lwt_machine *driven = lwt_kit_struts_case(set, &home);
    lwt_machine_load(driven);
    size_t count = 0;
    const cJSON *posture = NULL;
    cJSON_ArrayForEach(posture, lwt_member(set, "postures"))
    {
        lw_frame pose = posture_frame(posture);
        double got[6];
        lengths_at(driven, &pose, got);
        lwt_near_n(got, want, 6, tol);
        const lw_margin_answer *margin =
            lwt_margin(driven, lwt_by_pose(driven, &pose, NULL, NULL, NULL));
        assert_int_equal(margin->drives.rank, 5);
        assert_true((margin->classes & LW_CLASS_FORWARD) != 0);
        count++;
    }
    assert_true(count >= 4);
    lwt_machine_free(driven);

    /* The same platform with rods in place of the struts: one freedom where the count says none. A
     * seventh member, free to change its length, is what can be driven and read. */
    double base[18];
    double platform[18];
    (void)lwt_numbers(set, "base", base, 18);
    (void)lwt_numbers(set, "platform", platform, 18);
    lw_frame ref = posture_frame(cJSON_GetArrayItem(lwt_member(set, "postures"), 1));
    lwt_machine *locked = lwt_machine_new("locked-struts");
    size_t plate = lwt_add_body(locked);
    for (size_t i = 0; i < 6; i++) {
        double end[3];
        lwt_frame_point(end, &ref, &platform[3 * i]);
        (void)lwt_add_rod(locked, 0, &base[3 * i], plate, end);
    }
    size_t probe = lwt_add_rod(locked, 0, (const double[3]){0.3, 0.2, -0.5}, plate, ref.pos_m);
    (void)lwt_drive_rod(locked, probe);
    (void)lwt_add_tool(locked, plate, &ref);
    lwt_add_outputs(locked, "rz");
    lwt_machine_load(locked);
    assert_int_equal(locked->report->mobility, 1);
    assert_int_equal(locked->report->mobility_counted, 0);
    lwt_machine_free(locked);
    cJSON_Delete(set);
}

/* ---- statics --------------------------------------------------------------------------------- */

/* A level octahedral platform carries 600 N: every strut carries W / (6 cos gamma). Own number, by
 * symmetry; see own-2026. */
static void load_on_an_octahedron_is_shared_by_its_struts(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("own-2026/cases.json");
    const cJSON *octahedron = lwt_member(set, "octahedron");
    double height = lwt_number(octahedron, "height");
    double load = lwt_number(octahedron, "load_n");
    double want = lwt_number(octahedron, "strut_force_n");
    double tol = lwt_number(lwt_member(set, "tolerance"), "force");
    lw_frame ref = lifted(0.0, height);
    lwt_machine *m = lwt_kit_struts_case(octahedron, &ref);
    for (size_t i = 0; i < 6; i++) {
        m->spec->drive[i].has_effort = true;
        m->spec->drive[i].effort = 1000.0;
    }
    m->spec->needs.force_n = (lw_figure){.asked = true, .value = load};
    lwt_machine_load(m);
    const lw_posture_ask *posture = lwt_by_pose(m, &ref, NULL, NULL, NULL);
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, posture);
    assert_true(jacobian->has_forward);
    for (size_t i = 0; i < 6; i++) {
        /* Drive thrust that holds the wrench (0, 0, -W): power of thrust and load cancel. */
        double thrust = jacobian->forward[2 * 6 + i] * load;
        lwt_near(thrust, want, tol);
    }

    /* The load margin: rated thrust over the largest one that a force of 600 N can call for in
     * any direction, from the same matrix: row i of forward^T, its three force columns. */
    double worst = 0.0;
    for (size_t i = 0; i < 6; i++) {
        double row[3] = {jacobian->forward[i], jacobian->forward[6 + i],
                         jacobian->forward[12 + i]};
        worst = fmax(worst, lwt_norm(row) * load);
    }
    const lw_margin_answer *margin = lwt_margin(m, posture);
    assert_int_equal(margin->outcome, LW_OUTCOME_OK);
    assert_true(margin->margin[LW_MARGIN_LOAD].asked);
    lwt_near_rel(margin->margin[LW_MARGIN_LOAD].value, 1000.0 / worst, 1e-9);
    lwt_machine_free(m);
    cJSON_Delete(set);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(forty_real_postures_of_dietmaier),
        cmocka_unit_test(four_real_postures_of_mourrain),
        cmocka_unit_test(eight_real_postures_of_bellido),
        cmocka_unit_test(four_real_postures_of_three_corners),
        cmocka_unit_test(quarter_turn_of_fichter_is_singular_at_any_height),
        cmocka_unit_test(similar_hexagons_of_ma_and_angeles_never_hold),
        cmocka_unit_test(equal_triangles_of_griffis_and_duffy_move_when_locked),
        cmocka_unit_test(load_on_an_octahedron_is_shared_by_its_struts),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
