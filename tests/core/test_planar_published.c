/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Planar closed-loop machines against published and recomputed values: three struts, 3-RRR in all
 * working modes. Sources: tests/cases. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

static void pose_of(const cJSON *item, double pose[3])
{
    pose[0] = lwt_number(item, "x");
    pose[1] = lwt_number(item, "y");
    pose[2] = lwt_number(item, "theta");
}

static void near_pose(const lw_frame *got, const double want[3], double tol)
{
    lwt_near(got->pos_m[0], want[0], tol);
    lwt_near(got->pos_m[1], want[1], tol);
    lwt_near(lwt_wrap(atan2(got->rot[3], got->rot[0]) - want[2]), 0.0, tol);
}

static double strut_length(const lwt_machine *m, size_t rod, double change)
{
    const lw_spec_rod *r = &m->spec->rod[rod];
    double d[3];
    for (size_t k = 0; k < 3; k++) {
        d[k] = r->end_m[1][k] - r->end_m[0][k];
    }
    return lwt_norm(d) + change;
}

/* ---- three struts ---------------------------------------------------------------------------- */

/* One pose: strut lengths explicit, forward back from a shaken start, determinant if given. */
static void check_strut_pose(lwt_machine *m, const double pose[3], const double *length,
                             const cJSON *determinant, double tol)
{
    lw_frame frame = lwt_frame_planar(pose[0], pose[1], pose[2]);
    const lw_inverse_answer *inverse = lwt_inverse(m, &frame, NULL, NULL, NULL);
    assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
    assert_int_equal(inverse->n_solution, 1);
    assert_true(inverse->complete);
    double drive[3];
    for (size_t i = 0; i < 3; i++) {
        drive[i] = inverse->solution[0].drive[i];
        lwt_near(strut_length(m, i, drive[i]), length[i], tol);
        drive[i] += length[i] - strut_length(m, i, drive[i]);
    }
    const lw_jacobian_answer *jacobian =
        lwt_jacobian(m, lwt_by_pose(m, &frame, NULL, NULL, NULL));
    assert_true(jacobian->has_inverse);
    double det = lwt_det(jacobian->inverse, 3);
    double condition = lwt_condition(jacobian->inverse, 3, 3);
    if (cJSON_IsNumber(determinant)) {
        lwt_near(det, determinant->valuedouble, 1e-9 * fmax(1.0, fabs(det)));
    }
    double by = fmin(0.02, 0.05 / condition);
    lw_frame start = lwt_frame_planar(pose[0] + by, pose[1] - 0.7 * by, pose[2] + 0.5 * by);
    const lw_forward_answer *forward =
        lwt_forward(m, drive, lwt_by_pose(m, &start, NULL, NULL, NULL));
    near_pose(&forward->solution[0].tool, pose, fmax(1e-12, 4e-14 * condition));
}

static void sauer_corners(const cJSON *set, double base[6], double platform[6])
{
    double l2 = lwt_number(set, "L2");
    double l3 = lwt_number(set, "L3");
    double gamma = lwt_number(set, "gamma");
    const double b[6] = {0, 0, lwt_number(set, "x1"), 0, lwt_number(set, "x2"),
                         lwt_number(set, "y2")};
    const double p[6] = {0, 0, l3, 0, l2 * cos(gamma), l2 * sin(gamma)};
    memcpy(base, b, sizeof b);
    memcpy(platform, p, sizeof p);
}

static void every_pose_of_sauer(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sauer-2012/cases.json");
    const cJSON *set = lwt_member(file, "main");
    double tol = lwt_number(lwt_member(file, "tolerance"), "length");
    double base[6];
    double platform[6];
    sauer_corners(set, base, platform);
    const double ref[3] = {0.5, 4.0, 0.2};
    lwt_machine *m = lwt_kit_planar_struts("sauer", base, platform, ref);
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 3);
    assert_int_equal(m->report->motion, LW_MOTION_2T1R);
    size_t count = 0;
    const cJSON *group = NULL;
    cJSON_ArrayForEach(group, lwt_member(set, "sets"))
    {
        const char *p2 = lwt_text(group, "p2");
        const double length[3] = {lwt_number(set, "p1"), lwt_printed(p2, NULL),
                                  lwt_number(set, "p3")};
        const cJSON *item = NULL;
        cJSON_ArrayForEach(item, lwt_member(group, "poses"))
        {
            double pose[3];
            pose_of(item, pose);
            check_strut_pose(m, pose, length, lwt_member(item, "determinant"), tol);
            count++;
        }
    }
    assert_int_equal(count, 18);

    /* The angles printed for p2 = 5, four digits. */
    const cJSON *printed = lwt_member(lwt_member(file, "printed"), "theta");
    const cJSON *first = lwt_member(cJSON_GetArrayItem(lwt_member(set, "sets"), 0), "poses");
    for (int i = 0; i < 4; i++) {
        double half = 0.0;
        double theta = lwt_printed(cJSON_GetArrayItem(printed, i)->valuestring, &half);
        lwt_near(lwt_number(cJSON_GetArrayItem(first, i), "theta"), theta, half);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void both_poses_of_sauers_similar_triangles(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sauer-2012/cases.json");
    const cJSON *set = lwt_member(file, "similar");
    double base[6];
    double platform[6];
    double length[3];
    sauer_corners(set, base, platform);
    assert_int_equal(lwt_numbers(set, "p", length, 3), 3);
    const double ref[3] = {1.2, 1.6, -0.6};
    lwt_machine *m = lwt_kit_planar_struts("sauer-similar", base, platform, ref);
    lwt_machine_load(m);
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(set, "poses"))
    {
        double pose[3];
        pose_of(item, pose);
        check_strut_pose(m, pose, length, NULL, 1e-12);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* Where the number of real poses changes, forward is singular: the pose is found here by Newton on
 * the strut lengths and the determinant, without the core. */
static void borders_of_sauers_intervals_are_singular(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sauer-2012/cases.json");
    const cJSON *set = lwt_member(file, "main");
    const cJSON *singular = lwt_member(file, "singular");
    double base[6];
    double platform[6];
    double p2[8];
    double theta[8];
    sauer_corners(set, base, platform);
    size_t n = lwt_numbers(singular, "p2", p2, 8);
    assert_int_equal(lwt_numbers(singular, "theta", theta, 8), n);
    const double ref[3] = {0.5, 4.0, 0.2};
    lwt_machine *m = lwt_kit_planar_struts("sauer", base, platform, ref);
    lwt_machine_load(m);
    for (size_t k = 0; k < n; k++) {
        /* With theta known, struts 1 and 3 leave two positions: circles about the origin and about
         * the third base point less the turned corner. */
        double c = cos(theta[k]);
        double s = sin(theta[k]);
        double cx = base[4] - (c * platform[4] - s * platform[5]);
        double cy = base[5] - (s * platform[4] + c * platform[5]);
        double d = hypot(cx, cy);
        double along = (25.0 - 9.0 + d * d) / (2.0 * d);
        double across = sqrt(25.0 - along * along);
        double best = INFINITY;
        lw_frame pose = lwt_frame_identity();
        for (int side = -1; side <= 1; side += 2) {
            double x = (along * cx - side * across * cy) / d;
            double y = (along * cy + side * across * cx) / d;
            double x2 = x + c * platform[2] - base[2];
            double y2 = y + s * platform[2];
            double off = fabs(hypot(x2, y2) - p2[k]);
            if (off < best) {
                best = off;
                pose = lwt_frame_planar(x, y, theta[k]);
            }
        }
        /* theta is kept to 6 digits; at the border p2 does not move with it to first order. */
        lwt_near(best, 0.0, 1e-6);
        const lw_margin_answer *margin =
            lwt_margin(m, lwt_by_pose(m, &pose, NULL, NULL, NULL));
        assert_int_equal(margin->drives.n_singular, 3);
        lwt_near(margin->drives.singular[2] / margin->drives.singular[0], 0.0, 5e-6);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* ---- 3-RPR with real joints ------------------------------------------------------------------ */

static const double Z_AXIS[3] = {0, 0, 1};

/* Base pivot, slide along the leg, platform pivot: the limb as it is built, not as a rod. */
static lwt_machine *rpr_machine(const double *base, const double *platform, const double pose[3])
{
    lwt_machine *m = lwt_machine_new("planar-3-rpr");
    lw_frame ref = lwt_frame_planar(pose[0], pose[1], pose[2]);
    size_t plate = lwt_add_body(m);
    size_t slide[3];
    for (size_t i = 0; i < 3; i++) {
        double corner[3];
        lwt_frame_point(corner, &ref, (const double[3]){platform[2 * i], platform[2 * i + 1], 0});
        double foot[3] = {base[2 * i], base[2 * i + 1], 0};
        double along[3] = {corner[0] - foot[0], corner[1] - foot[1], 0};
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        (void)lwt_add_revolute(m, 0, lower, foot, Z_AXIS);
        slide[i] = lwt_add_prismatic(m, lower, upper, along);
        (void)lwt_add_revolute(m, upper, plate, corner, Z_AXIS);
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    (void)lwt_add_tool(m, plate, &ref);
    lwt_add_outputs(m, "x y rz");
    m->spec->needs.characteristic_length_m = (lw_figure){.asked = true, .value = 1.0};
    return m;
}

static void six_real_poses_of_innocenti_and_parenti_castelli(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("innocenti-parenti-1992/cases.json");
    const cJSON *tolerance = lwt_member(file, "tolerance");
    double base[6];
    double platform[6];
    double length[3];
    assert_int_equal(lwt_numbers(file, "base", base, 6), 6);
    assert_int_equal(lwt_numbers(file, "platform", platform, 6), 6);
    assert_int_equal(lwt_numbers(file, "length", length, 3), 3);
    size_t count = 0;
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(file, "poses"))
    {
        double pose[3];
        pose_of(item, pose);
        lwt_machine *m = lwt_kit_planar_struts("rods", base, platform, pose);
        lwt_machine_load(m);
        check_strut_pose(m, pose, length, lwt_member(item, "determinant"),
                         lwt_number(tolerance, "length"));
        lwt_machine_free(m);

        /* The same pose held by pivots and slides, the reference posture a little away. */
        const double ref[3] = {pose[0] + 0.05, pose[1] - 0.04, pose[2] + 0.003};
        m = rpr_machine(base, platform, ref);
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 3);
        assert_int_equal(m->report->mobility_counted, -3);
        double drive[3];
        for (size_t i = 0; i < 3; i++) {
            double c = cos(ref[2]);
            double s = sin(ref[2]);
            double x = ref[0] + c * platform[2 * i] - s * platform[2 * i + 1] - base[2 * i];
            double y = ref[1] + s * platform[2 * i] + c * platform[2 * i + 1] - base[2 * i + 1];
            drive[i] = length[i] - hypot(x, y);
        }
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        near_pose(&forward->solution[0].tool, pose, 1e-11);
        lw_frame frame = lwt_frame_planar(pose[0], pose[1], pose[2]);
        lwt_copy kept;
        lwt_keep(&kept, m, &forward->solution[0]);
        lw_config config = lwt_config_of(&kept);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_config(m, &config));
        assert_true(jacobian->has_inverse);
        lwt_near(lwt_det(jacobian->inverse, 3), lwt_number(item, "determinant"),
                 lwt_number(tolerance, "determinant"));
        const lw_inverse_answer *inverse = lwt_inverse(m, &frame, NULL, NULL, NULL);
        bool found = false;
        for (size_t k = 0; k < inverse->n_solution; k++) {
            const double *got = inverse->solution[k].drive;
            found = found || (fabs(got[0] - drive[0]) < 1e-10 && fabs(got[1] - drive[1]) < 1e-10 &&
                              fabs(got[2] - drive[2]) < 1e-10);
        }
        assert_true(found);
        lwt_machine_free(m);
        count++;
    }
    assert_int_equal(count, 6);
    cJSON_Delete(file);
}

/* ---- 3-RRR ----------------------------------------------------------------------------------- */

typedef struct rrr_case {
    double base[6];
    double platform[6];
    double crank;
    double link;
    double pose[3];
    double theta_ref[3];
    lwt_machine *m;
} rrr_case;

static void rrr_open(rrr_case *c, const cJSON *file)
{
    assert_int_equal(lwt_numbers(file, "base", c->base, 6), 6);
    assert_int_equal(lwt_numbers(file, "platform", c->platform, 6), 6);
    assert_int_equal(lwt_numbers(file, "pose", c->pose, 3), 3);
    c->crank = lwt_number(file, "crank");
    c->link = lwt_number(file, "link");
    const int elbow[3] = {1, 1, 1};
    const double ref[3] = {0.61, 0.36, 0.15};
    c->m = lwt_kit_planar_rrr("three-rrr", 3, c->base, c->platform, c->crank, c->link, ref, elbow,
                              c->theta_ref);
    lwt_machine_load(c->m);
}

/* The inverse solution at `pose` whose crank angles are nearest to theta; off says how near. */
static const lw_solution *nearest_solution(rrr_case *c, const double pose[3],
                                           const double *theta_deg, double *off)
{
    lw_frame frame = lwt_frame_planar(pose[0], pose[1], pose[2]);
    const lw_inverse_answer *inverse = lwt_inverse(c->m, &frame, NULL, NULL, NULL);
    const lw_solution *best = NULL;
    *off = INFINITY;
    for (size_t k = 0; k < inverse->n_solution; k++) {
        double worst = 0.0;
        for (size_t i = 0; i < 3; i++) {
            double want = theta_deg[i] * LWT_DEG - c->theta_ref[i];
            worst = fmax(worst, fabs(lwt_wrap(inverse->solution[k].drive[i] - want)));
        }
        if (worst < *off) {
            *off = worst;
            best = &inverse->solution[k];
        }
    }
    return best;
}

/* From the mode at a shaken pose, forward with the listed inputs comes to the listed pose. */
static void check_rrr_forward(rrr_case *c, const double *theta_deg, const double pose[3],
                              double tol)
{
    double off = 0.0;
    const lw_solution *there = nearest_solution(c, pose, theta_deg, &off);
    assert_non_null(there);
    lwt_near(off, 0.0, 1e-7); /* forward poses are kept to 16 digits, conditions reach 1e3 */
    double drive[3];
    for (size_t i = 0; i < 3; i++) {
        double want = theta_deg[i] * LWT_DEG - c->theta_ref[i];
        drive[i] = there->drive[i] - lwt_wrap(there->drive[i] - want);
    }
    lw_mode mode = there->mode;
    assert_true(there->mode_known);
    /* Some listed poses stand at the edge of reach: shake to where the mode still exists. */
    lw_frame start = lwt_frame_identity();
    size_t exists = 0;
    for (int side = 0; side < 8 && exists == 0; side++) {
        double by = 0.002 * (side & 4 ? -1.0 : 1.0);
        start = lwt_frame_planar(pose[0] + (side & 1 ? by : -by), pose[1] + (side & 2 ? by : -by),
                                 pose[2] + by);
        exists = lwt_inverse(c->m, &start, NULL, &mode, NULL)->n_solution;
    }
    assert_int_equal(exists, 1);
    const lw_forward_answer *forward =
        lwt_forward(c->m, drive, lwt_by_pose(c->m, &start, NULL, &mode, NULL));
    near_pose(&forward->solution[0].tool, pose, tol);
    lwt_near_n(forward->solution[0].drive, drive, 3, 1e-9);
    assert_true(lw_mode_same(&forward->solution[0].mode, &mode));
}

static void eight_working_modes_of_a_3_rrr(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("kotlarski-2008/cases.json");
    rrr_case c;
    rrr_open(&c, file);
    double tol = lwt_number(lwt_member(file, "tolerance"), "angle");
    assert_int_equal(c.m->report->mobility, 3);
    assert_int_equal(c.m->report->mobility_counted, -3);
    assert_int_equal(c.m->report->n_limb, 3);
    assert_true(c.m->report->explicit_inverse);
    lw_frame frame = lwt_frame_planar(c.pose[0], c.pose[1], c.pose[2]);
    const lw_inverse_answer *inverse = lwt_inverse(c.m, &frame, NULL, NULL, NULL);
    assert_int_equal(inverse->n_solution, 8);
    assert_true(inverse->complete);
    assert_int_equal(inverse->basis, LW_BASIS_EXPLICIT);
    assert_int_equal(inverse->found.real, 8);
    for (size_t a = 0; a < 8; a++) {
        for (size_t b = 0; b < a; b++) {
            assert_false(lw_mode_same(&inverse->solution[a].mode, &inverse->solution[b].mode));
        }
    }
    int relation = 0;
    const cJSON *mode = NULL;
    cJSON_ArrayForEach(mode, lwt_member(file, "modes"))
    {
        double theta[3];
        double off = 0.0;
        assert_int_equal(lwt_numbers(mode, "theta_deg", theta, 3), 3);
        const lw_solution *solution = nearest_solution(&c, c.pose, theta, &off);
        lwt_near(off, 0.0, tol * LWT_DEG);
        /* det B is the product of the arms' own determinants: with the signs of the mode it keeps
         * one relation over all eight. */
        int product = 1;
        for (size_t i = 0; i < 3; i++) {
            assert_true(solution->mode.sign[i] == 1 || solution->mode.sign[i] == -1);
            product *= solution->mode.sign[i];
        }
        int sign = lwt_number(mode, "determinant_b") > 0.0 ? 1 : -1;
        assert_true(relation == 0 || relation == product * sign);
        relation = product * sign;

        lw_mode asked = solution->mode;
        const lw_jacobian_answer *jacobian =
            lwt_jacobian(c.m, lwt_by_pose(c.m, &frame, NULL, &asked, NULL));
        assert_true(jacobian->has_inverse);
        double ratio = lwt_number(mode, "determinant_a") / lwt_number(mode, "determinant_b");
        lwt_near_rel(fabs(lwt_det(jacobian->inverse, 3)), fabs(ratio), 1e-9);
    }
    lwt_machine_free(c.m);
    cJSON_Delete(file);
}

static void forward_of_every_working_mode_of_a_3_rrr(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("kotlarski-2008/cases.json");
    rrr_case c;
    rrr_open(&c, file);
    double tol = lwt_number(lwt_member(file, "tolerance"), "length");
    size_t count = 0;
    const cJSON *mode = NULL;
    cJSON_ArrayForEach(mode, lwt_member(file, "modes"))
    {
        double theta[3];
        double pose[18];
        (void)lwt_numbers(mode, "theta_deg", theta, 3);
        size_t n = lwt_numbers(mode, "forward", pose, 18);
        for (size_t k = 0; k < n; k += 3) {
            check_rrr_forward(&c, theta, &pose[k], tol);
            count++;
        }
    }
    assert_int_equal(count, 16);
    const cJSON *four = lwt_member(file, "four");
    double theta[3];
    double pose[12];
    (void)lwt_numbers(four, "theta_deg", theta, 3);
    assert_int_equal(lwt_numbers(four, "forward", pose, 12), 12);
    for (size_t k = 0; k < 12; k += 3) {
        check_rrr_forward(&c, theta, &pose[k], tol);
    }
    lwt_machine_free(c.m);
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_pose_of_sauer),
        cmocka_unit_test(both_poses_of_sauers_similar_triangles),
        cmocka_unit_test(borders_of_sauers_intervals_are_singular),
        cmocka_unit_test(six_real_poses_of_innocenti_and_parenti_castelli),
        cmocka_unit_test(eight_working_modes_of_a_3_rrr),
        cmocka_unit_test(forward_of_every_working_mode_of_a_3_rrr),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
