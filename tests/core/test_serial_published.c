/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Serial arms against published and recomputed values: forward, Jacobians, condition numbers, all
 * inverse solutions of wrist arms, local inverse of general arms. Sources: tests/cases. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SOLUTIONS_MAX = 16, JOINTS = 6 };

static lw_frame read_pose(const cJSON *set, const char *name)
{
    double t[12];
    lw_frame frame;
    assert_int_equal(lwt_numbers(set, name, t, 12), 12);
    for (size_t r = 0; r < 3; r++) {
        memcpy(&frame.rot[3 * r], &t[4 * r], 3 * sizeof(double));
        frame.pos_m[r] = t[4 * r + 3];
    }
    return frame;
}

/* Compares a frame with one printed as text, each number to half of its last digit. */
static void near_printed(const lw_frame *got, const cJSON *printed, double scale, double least)
{
    for (int r = 0; r < 3; r++) {
        const cJSON *row = cJSON_GetArrayItem(printed, r);
        assert_int_equal(cJSON_GetArraySize(row), 4);
        for (int c = 0; c < 4; c++) {
            double half = 0.0;
            const char *text = cJSON_GetArrayItem(row, c)->valuestring;
            double want = lwt_printed(text, &half);
            /* A whole number stands for an exact one. */
            double tol = strchr(text, '.') == NULL ? least : half + least;
            lwt_near((c < 3 ? got->rot[3 * r + c] : got->pos_m[r] / scale), want, tol);
        }
    }
}

static void frames_agree(const lw_frame *got, const lw_frame *want, double position_m,
                         double angle_rad)
{
    lwt_near(lwt_frame_distance(got, want), 0.0, position_m);
    lwt_near(lwt_frame_angle(got, want), 0.0, angle_rad);
}

static void drives_from(const double *theta, const double *theta_ref, size_t n, double *drive)
{
    for (size_t i = 0; i < n; i++) {
        drive[i] = theta[i] - theta_ref[i];
    }
}

/* Largest difference of joint angles, each modulo a turn. */
static double apart(const double *drive, const double *theta, const double *theta_ref, size_t n)
{
    double worst = 0.0;
    for (size_t i = 0; i < n; i++) {
        worst = fmax(worst, fabs(lwt_wrap(drive[i] + theta_ref[i] - theta[i])));
    }
    return worst;
}

static const double WRIST_REF[JOINTS] = {0.2, 0.5, 2.8, 0.3, 0.9, -0.2};

/* ---- wrist arms ------------------------------------------------------------------------------ */

static lwt_machine *textbook_arm(const cJSON *set, lwt_table *table)
{
    lwt_table_read(table, set, 1.0);
    lwt_machine *m = lwt_kit_arm("textbook-arm", table, WRIST_REF, "x y z rx ry rz");
    lwt_machine_load(m);
    return m;
}

static void forward_and_jacobian_of_corkes_arm(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("corke-2011/cases.json");
    const cJSON *tolerance = lwt_member(set, "tolerance");
    const cJSON *printed = lwt_member(set, "printed");
    lwt_table table;
    lwt_machine *m = textbook_arm(set, &table);
    double q[JOINTS];
    double drive[JOINTS];
    double want[36];
    (void)lwt_numbers(set, "q", q, JOINTS);
    assert_int_equal(lwt_numbers(set, "jacobian", want, 36), 36);
    drives_from(q, WRIST_REF, JOINTS, drive);
    lw_frame pose = read_pose(set, "pose");
    const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
    frames_agree(&forward->solution[0].tool, &pose, lwt_number(tolerance, "position"), 1e-12);
    const cJSON *position = lwt_member(printed, "position");
    for (int i = 0; i < 3; i++) {
        double half = 0.0;
        double value = lwt_printed(cJSON_GetArrayItem(position, i)->valuestring, &half);
        lwt_near(forward->solution[0].tool.pos_m[i], value, half * (1.0 + 1e-9));
    }
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
    assert_int_equal(jacobian->outcome, LW_OUTCOME_OK);
    lwt_near_n(jacobian->twist, want, 36, lwt_number(tolerance, "jacobian"));
    lwt_near_n(jacobian->forward, want, 36, lwt_number(tolerance, "jacobian"));
    lwt_near(jacobian->condition_forward, lwt_number(set, "condition"),
             lwt_number(tolerance, "condition"));
    double half = 0.0;
    double manipulability = lwt_printed(lwt_text(printed, "manipulability"), &half);
    lwt_near(fabs(lwt_det(jacobian->forward, 6)), manipulability, half);

    /* The printed left-arm solution, four digits: half a digit in every joint moves the wrist of a
     * 0.9 m arm by up to 2e-4 m; 6.5e-5 was found. */
    const cJSON *left = lwt_member(printed, "left_arm");
    for (int i = 0; i < JOINTS; i++) {
        q[i] = lwt_printed(cJSON_GetArrayItem(left, i)->valuestring, NULL);
    }
    drives_from(q, WRIST_REF, JOINTS, drive);
    forward = lwt_forward(m, drive, NULL);
    frames_agree(&forward->solution[0].tool, &pose, 7e-5, 2e-4);
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void eight_solutions_of_corkes_arm(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("corke-2011/cases.json");
    lwt_table table;
    lwt_machine *m = textbook_arm(set, &table);
    double want[8 * JOINTS];
    assert_int_equal(lwt_numbers(set, "inverse", want, 8 * JOINTS), 8 * JOINTS);
    lw_frame pose = read_pose(set, "pose");
    assert_true(m->report->explicit_inverse);
    assert_int_equal(m->report->limb[0].kind, LW_LIMB_WRIST_ARM);
    assert_int_equal(m->report->limb[0].branches, 8);
    const lw_inverse_answer *inverse = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_int_equal(inverse->n_solution, 8);
    assert_int_equal(inverse->found.real, 8);
    assert_true(inverse->complete);
    assert_int_equal(inverse->basis, LW_BASIS_EXPLICIT);
    bool used[8] = {false};
    for (size_t k = 0; k < 8; k++) {
        frames_agree(&inverse->solution[k].tool, &pose, 1e-12, 1e-12);
        size_t hit = 8;
        for (size_t w = 0; w < 8; w++) {
            if (apart(inverse->solution[k].drive, &want[JOINTS * w], WRIST_REF, JOINTS) <
                lwt_number(lwt_member(set, "tolerance"), "angle")) {
                hit = w;
            }
        }
        assert_true(hit < 8);
        assert_false(used[hit]);
        used[hit] = true;
        for (size_t j = 0; j < k; j++) {
            assert_false(lw_mode_same(&inverse->solution[j].mode, &inverse->solution[k].mode));
        }
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void determinant_of_corkes_arm_has_three_factors(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("corke-2011/cases.json");
    lwt_table table;
    lwt_machine *m = textbook_arm(set, &table);
    double a2 = table.a[1];
    double a3 = table.a[2];
    double d4 = table.d[3];
    lwt_random rng;
    lwt_random_init(&rng, 2011);
    for (int k = 0; k < 1000; k++) {
        double q[JOINTS];
        double drive[JOINTS];
        for (size_t i = 0; i < JOINTS; i++) {
            q[i] = lwt_random_in(&rng, -3.1, 3.1);
        }
        drives_from(q, WRIST_REF, JOINTS, drive);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
        double elbow = a2 * (d4 * cos(q[2]) + a3 * sin(q[2]));
        double shoulder = a2 * cos(q[1]) - d4 * sin(q[1] + q[2]) + a3 * cos(q[1] + q[2]);
        lwt_near(fabs(lwt_det(jacobian->twist, 6)), fabs(elbow * shoulder * sin(q[4])), 1e-14);
    }
    /* Each factor at zero alone: the margin must say inverse-side loss for none, and rank 5 for
     * the tool. A serial arm's drives always hold it. */
    const double at[3][JOINTS] = {
        {0.3, 0.4, atan2(-d4, a3), 0.5, 0.7, 0.1},
        {0.3, 0.0, 0.2, 0.5, 0.7, 0.1},
        {0.3, 0.4, 2.5, 0.5, 0.0, 0.1},
    };
    for (size_t k = 0; k < 3; k++) {
        double q[JOINTS];
        double drive[JOINTS];
        memcpy(q, at[k], sizeof q);
        if (k == 1) {
            /* tan q2 from the shoulder factor set to zero. */
            q[1] = atan2(a2 + a3 * cos(q[2]) - d4 * sin(q[2]), d4 * cos(q[2]) + a3 * sin(q[2]));
        }
        drives_from(q, WRIST_REF, JOINTS, drive);
        const lw_margin_answer *margin = lwt_margin(m, lwt_by_drives(m, drive, NULL));
        assert_int_equal(margin->drives.rank, 6);
        assert_int_equal(margin->tool.rank, 5);
        assert_int_equal(margin->classes, LW_CLASS_INVERSE);
        assert_int_equal(margin->outcome, LW_OUTCOME_OK); /* the drives hold: no code 7 */
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void pose_printed_by_paul_and_zhang(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("paul-zhang-1986/cases.json");
    lwt_table table;
    double theta[JOINTS];
    double drive[JOINTS];
    lwt_table_read(&table, set, 0.01);
    (void)lwt_numbers(set, "theta_deg", theta, JOINTS);
    for (size_t i = 0; i < JOINTS; i++) {
        theta[i] *= LWT_DEG;
    }
    lwt_machine *m = lwt_kit_arm("paul-zhang", &table, WRIST_REF, "x y z rx ry rz");
    lwt_machine_load(m);
    drives_from(theta, WRIST_REF, JOINTS, drive);
    const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
    lw_frame pose = forward->solution[0].tool;
    near_printed(&pose, lwt_member(set, "pose"), 0.01,
                 lwt_number(lwt_member(set, "tolerance"), "rotation"));
    const lw_inverse_answer *inverse = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_true(inverse->complete);
    bool found = false;
    for (size_t k = 0; k < inverse->n_solution; k++) {
        frames_agree(&inverse->solution[k].tool, &pose, 1e-12, 1e-12);
        found = found || apart(inverse->solution[k].drive, theta, WRIST_REF, JOINTS) < 1e-7;
    }
    assert_true(found);
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* ---- general arms ---------------------------------------------------------------------------- */

/* Forward of each listed solution gives the pose; inverse from joints shaken a little gives the
 * solution back. */
static void check_general_arm(const char *file, size_t count, double position_tol)
{
    cJSON *set = lwt_case_file(file);
    double angle_tol = lwt_number(lwt_member(set, "tolerance"), "angle_deg") * LWT_DEG;
    lwt_table table;
    double theta[SOLUTIONS_MAX * JOINTS];
    lwt_table_read(&table, set, 1.0);
    assert_int_equal(lwt_numbers(set, "solutions_deg", theta, SOLUTIONS_MAX * JOINTS),
                     count * JOINTS);
    for (size_t i = 0; i < count * JOINTS; i++) {
        theta[i] *= LWT_DEG;
    }
    lw_frame pose = read_pose(set, "pose");
    const double ref[JOINTS] = {0.3, 0.4, -0.5, 0.7, -0.6, 0.2};
    lwt_machine *m = lwt_kit_arm("general-arm", &table, ref, "x y z rx ry rz");
    lwt_machine_load(m);
    lwt_random rng;
    lwt_random_init(&rng, 6);
    for (size_t s = 0; s < count; s++) {
        double drive[JOINTS];
        drives_from(&theta[JOINTS * s], ref, JOINTS, drive);
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        frames_agree(&forward->solution[0].tool, &pose, position_tol, 1e-11);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
        double condition = lwt_condition(jacobian->twist, 6, 6);
        double by = fmin(1e-2, 0.1 / condition);
        double start[JOINTS];
        for (size_t i = 0; i < JOINTS; i++) {
            start[i] = drive[i] + lwt_random_in(&rng, -by, by);
        }
        const lw_inverse_answer *inverse =
            lwt_inverse(m, &pose, NULL, NULL, lwt_by_drives(m, start, NULL));
        assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
        assert_true(inverse->n_solution >= 1);
        double off = INFINITY;
        for (size_t k = 0; k < inverse->n_solution; k++) {
            off = fmin(off, apart(inverse->solution[k].drive, &theta[JOINTS * s], ref, JOINTS));
        }
        lwt_near(off, 0.0, angle_tol + 1e-14 * condition);
        /* What is found by iteration is never called complete before all of it is known. */
        assert_true(!inverse->complete || inverse->basis != LW_BASIS_LOCAL);
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void sixteen_solutions_of_manseur_and_doty(void **state)
{
    (void)state;
    check_general_arm("manseur-doty-1989/cases.json", 16, 1e-12);
}

static void both_real_solutions_of_raghavan_and_roth(void **state)
{
    (void)state;
    check_general_arm("raghavan-roth-1990/cases.json", 2, 1e-11);
}

static void four_solutions_of_wengers_cuspidal_arm(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("wenger-2007/cases.json");
    const cJSON *tolerance = lwt_member(set, "tolerance");
    double a[3];
    double alpha[3];
    double r[3];
    double point[3];
    double theta[12];
    double determinant[4];
    (void)lwt_numbers(set, "a", a, 3);
    (void)lwt_numbers(set, "alpha_deg", alpha, 3);
    (void)lwt_numbers(set, "r", r, 3);
    (void)lwt_numbers(set, "point", point, 3);
    assert_int_equal(lwt_numbers(set, "solutions", theta, 12), 12);
    assert_int_equal(lwt_numbers(set, "determinants", determinant, 4), 4);
    lwt_machine *m = lwt_machine_new("cuspidal-arm");
    const double ref[3] = {0.2, -0.3, 1.1};
    for (size_t i = 0; i < 3; i++) {
        alpha[i] *= LWT_DEG;
    }
    lw_frame end;
    size_t last = lwt_add_chain_proximal(m, 0, NULL, 3, a, alpha, r, ref, &end);
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, i);
    }
    lw_frame tip = lwt_frame_identity();
    tip.pos_m[0] = lwt_number(set, "tip");
    lw_frame tool = lwt_frame_mul(&end, &tip);
    (void)lwt_add_tool(m, last, &tool);
    lwt_add_outputs(m, "x y z");
    lwt_machine_load(m);
    for (size_t s = 0; s < 4; s++) {
        double drive[3];
        drives_from(&theta[3 * s], ref, 3, drive);
        const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
        lwt_near_n(forward->solution[0].tool.pos_m, point, 3, lwt_number(tolerance, "position"));
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
        assert_true(jacobian->has_forward);
        lwt_near(lwt_det(jacobian->forward, 3), determinant[s],
                 lwt_number(tolerance, "determinant"));
        double start[3] = {drive[0] + 0.01, drive[1] - 0.01, drive[2] + 0.01};
        lw_frame pose = lwt_frame_identity();
        memcpy(pose.pos_m, point, sizeof point);
        const lw_inverse_answer *inverse =
            lwt_inverse(m, &pose, NULL, NULL, lwt_by_drives(m, start, NULL));
        double off = INFINITY;
        for (size_t k = 0; k < inverse->n_solution; k++) {
            off = fmin(off, apart(inverse->solution[k].drive, &theta[3 * s], ref, 3));
        }
        lwt_near(off, 0.0, 2e-6); /* listed to 6 decimals, see the why of the case */
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

/* ---- screw axes ------------------------------------------------------------------------------ */

/* A joint from a screw axis (omega, v): v = -omega x q + h omega. */
static void add_screw(lwt_machine *m, size_t a, size_t b, const double s[6])
{
    if (lwt_norm(s) == 0.0) {
        (void)lwt_add_prismatic(m, a, b, &s[3]);
        return;
    }
    double at[3];
    double pitch = lwt_dot(s, &s[3]);
    lwt_cross(at, s, &s[3]);
    if (pitch == 0.0) {
        (void)lwt_add_revolute(m, a, b, at, s);
    } else {
        (void)lwt_add_helical(m, a, b, at, s, 2.0 * LWT_PI * pitch);
    }
}

static lwt_machine *screw_arm(const double *axes, size_t n, const lw_frame *home,
                              const char *outputs)
{
    lwt_machine *m = lwt_machine_new("screw-arm");
    size_t body = 0;
    for (size_t i = 0; i < n; i++) {
        size_t next = lwt_add_body(m);
        add_screw(m, body, next, &axes[6 * i]);
        body = next;
    }
    for (size_t i = 0; i < n; i++) {
        (void)lwt_drive_joint(m, i);
    }
    (void)lwt_add_tool(m, body, home);
    if (outputs != NULL) {
        lwt_add_outputs(m, outputs);
    } else {
        for (size_t i = 0; i < n; i++) {
            lwt_add_output_coord(m, lwt_coord(m, i, 0));
        }
    }
    lwt_machine_load(m);
    return m;
}

static void forward_and_inverse_of_lynch_and_park(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("lynch-park-2017/cases.json");
    const cJSON *set = lwt_member(file, "forward");
    double axes[18];
    double q[3];
    double start[3];
    assert_int_equal(lwt_numbers(set, "space_axes", axes, 18), 18);
    (void)lwt_numbers(set, "q", q, 3);
    (void)lwt_numbers(set, "inverse_start", start, 3);
    lw_frame home = read_pose(set, "home");
    lwt_machine *m = screw_arm(axes, 3, &home, "x y rz");
    const lw_forward_answer *forward = lwt_forward(m, q, NULL);
    near_printed(&forward->solution[0].tool, lwt_member(set, "pose_printed"), 1.0, 1e-12);

    lw_frame pose = forward->solution[0].tool;
    pose.pos_m[2] = lwt_number(set, "inverse_pose_z");
    const lw_inverse_answer *inverse =
        lwt_inverse(m, &pose, NULL, NULL, lwt_by_drives(m, start, NULL));
    assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
    assert_true(inverse->n_solution >= 1);
    const cJSON *printed = lwt_member(set, "inverse_printed");
    for (int i = 0; i < 3; i++) {
        double want = lwt_printed(cJSON_GetArrayItem(printed, i)->valuestring, NULL);
        lwt_near(inverse->solution[0].drive[i], want, lwt_number(set, "inverse_tolerance"));
        lwt_near(inverse->solution[0].drive[i], q[i], 1e-11);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* Rows of the source are angular first; ours are linear first. */
static void twist_agrees(const double *twist, const double *want, size_t n, double tol)
{
    for (size_t r = 0; r < 6; r++) {
        lwt_near_n(&twist[r * n], &want[((r + 3) % 6) * n], n, tol);
    }
}

static void space_and_body_jacobian_of_lynch_and_park(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("lynch-park-2017/cases.json");
    const cJSON *set = lwt_member(file, "jacobian");
    double axes[24];
    double q[4];
    double space[24];
    double body[24];
    assert_int_equal(lwt_numbers(set, "axes", axes, 24), 24);
    (void)lwt_numbers(set, "q", q, 4);
    assert_int_equal(lwt_numbers(set, "space", space, 24), 24);
    assert_int_equal(lwt_numbers(set, "body", body, 24), 24);
    const char *const names[2] = {"space_column_2_printed", "body_column_1_printed"};
    /* With the tool frame at home on the fixed frame, space axes and body axes are the same, so one
     * arm gives both matrices: about the fixed origin, and about the tool's in its own frame. */
    lw_frame home = lwt_frame_identity();
    lwt_machine *m = screw_arm(axes, 4, &home, NULL);
    lw_jacobian_ask ask;
    memset(&ask, 0, sizeof ask);
    ask.posture = lwt_by_drives(m, q, NULL);
    ask.has_point = true;
    const lw_jacobian_answer *jacobian = NULL;
    assert_int_equal(lw_jacobian(&jacobian, m->model, &ask, m->work, &m->err), LW_OK);
    twist_agrees(jacobian->twist, space, 4, 1e-12);
    const cJSON *column = lwt_member(set, names[0]);
    for (int r = 0; r < 6; r++) {
        double half = 0.0;
        double want = lwt_printed(cJSON_GetArrayItem(column, r)->valuestring, &half);
        lwt_near(jacobian->twist[4 * ((r + 3) % 6) + 1], want, half);
    }
    ask.in_tool = true;
    assert_int_equal(lw_jacobian(&jacobian, m->model, &ask, m->work, &m->err), LW_OK);
    twist_agrees(jacobian->twist, body, 4, 1e-12);
    column = lwt_member(set, names[1]);
    for (int r = 0; r < 6; r++) {
        double half = 0.0;
        double want = lwt_printed(cJSON_GetArrayItem(column, r)->valuestring, &half);
        lwt_near(jacobian->twist[4 * ((r + 3) % 6)], want, half);
    }
    lwt_machine_free(m);
    cJSON_Delete(file);
}

static void six_revolutes_of_lynch_and_park(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("lynch-park-2017/cases.json");
    const cJSON *set = lwt_member(file, "arm");
    double axes[36];
    double q[JOINTS];
    assert_int_equal(lwt_numbers(set, "space_axes", axes, 36), 36);
    (void)lwt_numbers(set, "q", q, JOINTS);
    lw_frame home = read_pose(set, "home");
    lwt_machine *m = screw_arm(axes, 6, &home, "x y z rx ry rz");
    const lw_forward_answer *forward = lwt_forward(m, q, NULL);
    near_printed(&forward->solution[0].tool, lwt_member(set, "pose_printed"), 1.0, 1e-12);
    lwt_machine_free(m);
    cJSON_Delete(file);
}

/* ---- condition number 1 ---------------------------------------------------------------------- */

static void two_links_of_salisbury_and_craig_are_isotropic(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("salisbury-craig-1982/cases.json");
    lwt_table table = {.n = 2, .a = {lwt_number(set, "l1"), lwt_number(set, "l2")}};
    const double ref[2] = {0.1, 0.8};
    lwt_machine *m = lwt_kit_arm("two-links", &table, ref, "x y");
    lwt_machine_load(m);
    for (double theta = -3.0; theta < 3.1; theta += 0.5) {
        const double q[2] = {theta, lwt_number(set, "theta2_deg") * LWT_DEG};
        double drive[2];
        drives_from(q, ref, 2, drive);
        const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
        lwt_near(jacobian->condition_forward, lwt_number(set, "condition"),
                 lwt_number(lwt_member(set, "tolerance"), "condition"));
    }
    lwt_machine_free(m);
    cJSON_Delete(set);
}

static void six_revolutes_of_angeles_are_isotropic(void **state)
{
    (void)state;
    cJSON *set = lwt_case_file("angeles-2003/cases.json");
    lwt_table table;
    double theta[JOINTS];
    lwt_table_read(&table, set, 1e-3);
    (void)lwt_numbers(set, "theta_deg", theta, JOINTS);
    for (size_t i = 0; i < JOINTS; i++) {
        theta[i] *= LWT_DEG;
    }
    const double ref[JOINTS] = {0.2, 1.2, -1.1, 1.3, -1.0, 2.5};
    lwt_machine *m = lwt_kit_arm("isotropic", &table, ref, "x y z rx ry rz");
    m->spec->needs.characteristic_length_m.value =
        1e-3 * lwt_number(set, "characteristic_length");
    lwt_machine_load(m);
    double drive[JOINTS];
    drives_from(theta, ref, JOINTS, drive);
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
    assert_true(jacobian->has_forward);
    lwt_near(jacobian->condition_forward, lwt_number(set, "condition"),
             lwt_number(lwt_member(set, "tolerance"), "condition"));
    lwt_machine_free(m);
    cJSON_Delete(set);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(forward_and_jacobian_of_corkes_arm),
        cmocka_unit_test(eight_solutions_of_corkes_arm),
        cmocka_unit_test(determinant_of_corkes_arm_has_three_factors),
        cmocka_unit_test(pose_printed_by_paul_and_zhang),
        cmocka_unit_test(sixteen_solutions_of_manseur_and_doty),
        cmocka_unit_test(both_real_solutions_of_raghavan_and_roth),
        cmocka_unit_test(four_solutions_of_wengers_cuspidal_arm),
        cmocka_unit_test(forward_and_inverse_of_lynch_and_park),
        cmocka_unit_test(space_and_body_jacobian_of_lynch_and_park),
        cmocka_unit_test(six_revolutes_of_lynch_and_park),
        cmocka_unit_test(two_links_of_salisbury_and_craig_are_isotropic),
        cmocka_unit_test(six_revolutes_of_angeles_are_isotropic),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
