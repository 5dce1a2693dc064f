/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branch classes of limbs that are solved by iteration. Where two inverse solutions share a class
 * a way leads from one to the other without a singularity; where they do not, none does (P. Wenger,
 * cuspidal and noncuspidal robot manipulators, Robotica 25(6), 2007: the arm has four solutions of
 * a point in two aspects, two in each). Determinants here are taken by differences of the table's
 * product, apart from the core. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"

#include "model/model.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SEED = 3, BUDGET = 40000 };

/* The arm of the case, its end by a ball on a stage of three slides: the arm is a limb of its own,
 * with four solutions of every place of the stage. */
typedef struct cuspidal {
    double a[3], alpha[3], r[3], tip, point[3], theta[12];
    lw_frame end; /* where the tip stands in the reference posture */
} cuspidal;

static const double REF[3] = {0.2, -0.3, 1.1};

static void read_case(cuspidal *c)
{
    cJSON *set = lwt_case_file("wenger-2007/cases.json");
    (void)lwt_numbers(set, "a", c->a, 3);
    (void)lwt_numbers(set, "alpha_deg", c->alpha, 3);
    (void)lwt_numbers(set, "r", c->r, 3);
    (void)lwt_numbers(set, "point", c->point, 3);
    assert_int_equal(lwt_numbers(set, "solutions", c->theta, 12), 12);
    c->tip = lwt_number(set, "tip");
    for (size_t i = 0; i < 3; i++) {
        c->alpha[i] *= LWT_DEG;
    }
    cJSON_Delete(set);
}

static lwt_machine *arm_on_a_stage(cuspidal *c)
{
    static const double axis[3][3] = {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}};
    lwt_machine *m = lwt_machine_new("arm-on-a-stage");
    lw_frame end;
    size_t last = lwt_add_chain_proximal(m, 0, NULL, 3, c->a, c->alpha, c->r, REF, &end);
    c->end = lwt_frame_identity();
    lwt_frame_point(c->end.pos_m, &end, (const double[3]){c->tip, 0, 0});
    size_t stage = 0;
    for (size_t i = 0; i < 3; i++) {
        size_t next = lwt_add_body(m);
        (void)lwt_add_prismatic(m, stage, next, axis[i]);
        stage = next;
    }
    (void)lwt_add_spherical(m, last, stage, c->end.pos_m);
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, i);
    }
    (void)lwt_add_tool(m, stage, &c->end);
    lwt_add_outputs(m, "x y z");
    return m;
}

/* Determinant of the tip's derivative by the three angles; the first drops out of its sign. */
static double det_of(const cuspidal *c, const double *theta)
{
    double column[3][3];
    for (size_t k = 0; k < 3; k++) {
        double p[2][3];
        for (size_t side = 0; side < 2; side++) {
            lw_frame at = lwt_frame_identity();
            for (size_t i = 0; i < 3; i++) {
                double t = theta[i] + (i != k ? 0.0 : side == 0 ? -1e-5 : 1e-5);
                lw_frame step = lwt_dh_proximal(c->a[i], c->alpha[i], c->r[i], t);
                at = lwt_frame_mul(&at, &step);
            }
            lwt_frame_point(p[side], &at, (const double[3]){c->tip, 0, 0});
        }
        for (size_t i = 0; i < 3; i++) {
            column[k][i] = (p[1][i] - p[0][i]) / 2e-5;
        }
    }
    return lwt_det(&column[0][0], 3);
}

static const lw_inverse_answer *ask_mode(lwt_machine *m, const lw_frame *pose, const char *mode)
{
    lw_mode wanted;
    assert_true(lw_mode_parse(&wanted, mode, lw_model_report(m->model)->n_limb));
    return lwt_inverse(m, pose, NULL, &wanted, NULL);
}

static void a_cuspidal_arm_has_two_solutions_in_each_of_two_classes(void **state)
{
    (void)state;
    cuspidal c;
    read_case(&c);
    lwt_machine *m = arm_on_a_stage(&c);
    lwt_machine_load_prepared(m, SEED, BUDGET);
    const lw_report *report = lw_model_report(m->model);
    assert_int_equal(report->n_limb, 2); /* the stage's slides have one solution */
    assert_int_equal(report->limb[0].kind, LW_LIMB_GENERAL);
    assert_int_equal(report->limb[0].classes, 2);
    char text[LW_MODE_TEXT_SIZE];
    lw_mode_text(text, &report->home_mode);
    assert_string_equal(text, "+1.+");

    lw_frame pose = c.end;
    memcpy(pose.pos_m, c.point, sizeof c.point);
    const lw_inverse_answer *a = lwt_inverse(m, &pose, NULL, NULL, NULL);
    assert_true(a->complete);
    assert_int_equal(a->n_solution, 4);
    double home = det_of(&c, REF);
    size_t held[2] = {0, 0};
    for (size_t i = 0; i < 4; i++) {
        double theta[3];
        for (size_t k = 0; k < 3; k++) {
            theta[k] = a->solution[i].drive[k] + REF[k];
        }
        bool same = det_of(&c, theta) * home > 0.0;
        lw_mode_text(text, &a->solution[i].mode);
        assert_string_equal(text, same ? "+1.+" : "-2.+");
        held[same]++;
        assert_int_equal(lw_mode_number(m->model, &a->solution[i].mode), same ? 1 : 2);
    }
    assert_int_equal(held[0], 2);
    assert_int_equal(held[1], 2);
    assert_int_equal(ask_mode(m, &pose, "+1.+")->n_solution, 2);
    assert_int_equal(ask_mode(m, &pose, "-2.+")->n_solution, 2);
    /* Entries that name no class are refused, not guessed. */
    static const char *const wrong[] = {"+.+", "-.+", "+2.+", "-1.+", "+3.+"};
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        lw_mode mode;
        const lw_inverse_answer *answer = NULL;
        assert_true(lw_mode_parse(&mode, wrong[i], 2));
        lw_inverse_ask ask = {.has_mode = true, .mode = mode};
        lwt_pose_of(m, &pose, NULL, &ask.pose);
        assert_int_equal(lw_inverse(&answer, m->model, &ask, m->work, &m->err), LW_E_ARGUMENT);
        assert_string_equal(m->err.where, "/mode");
    }
    lwt_machine_free(m);
}

/* A wrist of three axes through one point on the cuspidal arm: the determinant is that of the arm
 * times the sine of the fifth angle, so each sign has two parts that only singularities join. */
static lwt_machine *arm_with_wrist(lwt_table *table, double *ref)
{
    static const double start[6] = {0.2, -0.3, 1.1, 0.4, 0.9, -0.3};
    *table = (lwt_table){.n = 6,
                         .proximal = true,
                         .a = {0, 1, 2, 1.5, 0, 0},
                         .alpha = {0, -90 * LWT_DEG, 90 * LWT_DEG, 40 * LWT_DEG, -90 * LWT_DEG,
                                   90 * LWT_DEG},
                         .d = {0, 1, 0, 0, 0, 0}};
    memcpy(ref, start, sizeof start);
    return lwt_kit_arm("arm-with-wrist", table, ref, "x y z rx ry rz");
}

/* Joint values of a part: the signs of the arm's determinant and of the wrist's sine. */
static int part_of(const cuspidal *c, const double *theta, double *margin)
{
    double det = det_of(c, theta);
    double wrist = sin(theta[4]);
    *margin = fmin(fabs(det), fabs(wrist));
    return (det > 0.0 ? 1 : 0) + (wrist > 0.0 ? 2 : 0);
}

static void parts_of_one_sign_have_their_own_numbers(void **state)
{
    (void)state;
    cuspidal c;
    lwt_table table;
    double ref[6];
    read_case(&c);
    lwt_machine *m = arm_with_wrist(&table, ref);
    lwt_machine_load(m);
    const lw_report *report = lw_model_report(m->model);
    assert_int_equal(report->limb[0].kind, LW_LIMB_GENERAL);
    assert_int_equal(report->limb[0].classes, 4);
    unsigned short number[4] = {0, 0, 0, 0};
    signed char sign[4] = {0, 0, 0, 0};
    lwt_random rng;
    lwt_random_init(&rng, 5);
    size_t named = 0;
    size_t unnamed = 0;
    for (int k = 0; k < lwt_share(1500); k++) {
        double theta[6];
        double drive[6];
        double margin;
        for (size_t i = 0; i < 6; i++) {
            theta[i] = lwt_random_in(&rng, -LWT_PI, LWT_PI);
            drive[i] = theta[i] - ref[i];
        }
        int part = part_of(&c, theta, &margin);
        if (margin < 1e-3) {
            continue;
        }
        const lw_mode *mode = &lwt_forward(m, drive, NULL)->solution[0].mode;
        if (mode->branch[0] == 0) {
            unnamed++;
            continue;
        }
        named++;
        if (number[part] == 0) {
            number[part] = mode->branch[0];
            sign[part] = mode->sign[0];
        }
        assert_int_equal(mode->branch[0], number[part]);
        assert_int_equal(mode->sign[0], sign[part]);
    }
    /* Corners that no straight way from a sample leads into are said to be open, not guessed. */
    print_message("%zu named, %zu not\n", named, unnamed);
    assert_true(named > 0 && unnamed * 200 <= named);
    double margin;
    assert_int_equal(number[part_of(&c, ref, &margin)], 1);
    lwt_machine_free(m);
}

/* The same mechanism under other names, its joints in another order: the same numbers. */
static void numbers_depend_on_the_geometry_alone(void **state)
{
    (void)state;
    lwt_table table;
    double ref[6];
    lwt_machine *m[2] = {arm_with_wrist(&table, ref), arm_with_wrist(&table, ref)};
    lw_spec_joint joint[6];
    memcpy(joint, m[1]->spec->joint, sizeof joint);
    for (size_t i = 0; i < 6; i++) {
        m[1]->spec->joint[5 - i] = joint[i];
        m[1]->spec->joint[5 - i].name[0] = 'q';
        m[1]->spec->drive[i].term[0].coord = 5 - i;
    }
    lwt_machine_load(m[0]);
    lwt_machine_load(m[1]);
    lwt_random rng;
    lwt_random_init(&rng, 6);
    for (int k = 0; k < lwt_share(200); k++) {
        double drive[6];
        for (size_t i = 0; i < 6; i++) {
            drive[i] = lwt_random_in(&rng, -LWT_PI, LWT_PI);
        }
        lw_mode mode = lwt_forward(m[0], drive, NULL)->solution[0].mode;
        assert_true(lw_mode_same(&mode, &lwt_forward(m[1], drive, NULL)->solution[0].mode));
    }
    lwt_machine_free(m[0]);
    lwt_machine_free(m[1]);
}

/* General arms: along random walks the class changes where the sign does, and nowhere else. */
static void classes_change_at_singularities_alone(void **state)
{
    (void)state;
    static const char *const file[] = {"raghavan-roth-1990/cases.json",
                                       "manseur-doty-1989/cases.json"};
    static const double ref[6] = {0.3, -0.4, 0.6, -0.2, 0.5, 0.1};
    for (size_t s = 0; s < 2; s++) {
        cJSON *set = lwt_case_file(file[s]);
        lwt_table table;
        lwt_table_read(&table, set, 1.0);
        lwt_machine *m = lwt_kit_arm("general-arm", &table, ref, "x y z rx ry rz");
        lwt_machine_load(m);
        size_t classes = lw_model_report(m->model)->limb[0].classes;
        assert_true(classes >= 2); /* general arms have more than two solutions */
        lwt_random rng;
        lwt_random_init(&rng, 7);
        size_t changes = 0;
        size_t unnamed = 0;
        size_t seen[LW_MAX_LIMBS] = {0};
        for (int walk = 0; walk < lwt_share(20); walk++) {
            double drive[6];
            double way[6];
            lw_mode last = {.count = 0};
            for (size_t i = 0; i < 6; i++) {
                drive[i] = lwt_random_in(&rng, -LWT_PI, LWT_PI);
                way[i] = lwt_random_in(&rng, -0.02, 0.02);
            }
            for (int k = 0; k < 150; k++) {
                lw_mode mode = lwt_forward(m, drive, NULL)->solution[0].mode;
                bool told = mode.branch[0] > 0 && last.count > 0 && last.branch[0] > 0;
                if (told && mode.sign[0] == last.sign[0]) {
                    assert_int_equal(mode.branch[0], last.branch[0]);
                }
                unnamed += mode.branch[0] == 0 && mode.sign[0] != 0;
                seen[mode.branch[0]]++;
                changes += last.count > 0 && mode.sign[0] != last.sign[0];
                last = mode;
                for (size_t i = 0; i < 6; i++) {
                    drive[i] += way[i];
                }
            }
        }
        print_message("%s: %zu classes, %zu changes, %zu not named\n", file[s], classes, changes,
                      unnamed);
        assert_true(changes > 0 && unnamed <= 30);
        for (size_t k = 1; k <= classes; k++) {
            assert_true(seen[k] > 0 || lwt_share(20) < 20);
        }
        lwt_machine_free(m);
        cJSON_Delete(set);
    }
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_cuspidal_arm_has_two_solutions_in_each_of_two_classes),
        cmocka_unit_test(parts_of_one_sign_have_their_own_numbers),
        cmocka_unit_test(numbers_depend_on_the_geometry_alone),
        cmocka_unit_test(classes_change_at_singularities_alone),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
