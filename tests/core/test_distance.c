/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distances to singular postures and limits: brackets against sampling, against closed forms and
 * against a plain search over all rotations written here. What is checked against is never the code
 * of core/proof/ball*.c: sampled postures are judged by the jacobian and inverse questions. */
#include "lwt.h"
#include "lwt_balls.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include "../bench/demo.h"

#include <math.h>
#include <string.h>

static const double PI = 3.14159265358979323846;

static void sampled_demo(const char *name, double spread_m, size_t budget, size_t samples)
{
    lw_model *model = lwt_bench_demo(name);
    lw_work *work;
    lw_err err = {.code = LW_OK};
    lwt_random random;
    lwt_subject_at s;
    assert_int_equal(lw_work_new(&work, model, &err), LW_OK);
    lwt_random_init(&random, 41);
    (void)lwt_distance_ask(&s, model, work, &lw_model_spec(model)->home, 0);
    lwt_distance_balls(model, work, &lw_model_spec(model)->home, budget, lwt_share_of(samples),
                       &random);
    size_t done = 0;
    for (size_t i = 0; i < 200 && done < 4; i++) {
        lw_posture_ask at = {.kind = LW_BY_POSE, .has_mode = true, .mode = s.mode};
        const lw_posture_answer *got;
        lwt_distance_sample(&at.pose, &s, spread_m, &random);
        if (lw_posture(&got, model, 0, NULL, &at, work, &err) == LW_OK &&
            got->outcome == LW_OUTCOME_OK) {
            lwt_distance_balls(model, work, &at, budget, lwt_share_of(samples), &random);
            done++;
        }
    }
    assert_int_equal(done, 4);
    lw_work_free(work);
    lw_model_free(model);
}

static void six_struts_hold_in_their_balls(void **state)
{
    (void)state;
    sampled_demo("tilt-table", 0.05, 300, 1500);
}

static void four_arms_hold_in_their_balls(void **state)
{
    (void)state;
    sampled_demo("label-stage", 0.1, 1500, 1500);
}

static void carriages_hold_in_their_balls(void **state)
{
    (void)state;
    sampled_demo("belt-hopper", 0.12, 1500, 1500);
}

static void stacked_plates_hold_in_their_balls(void **state)
{
    (void)state;
    sampled_demo("lid-turner", 0.09, 1500, 1500);
}

/* The arm's brackets, and what was found. */
static void check_arm(const lw_model *model, lw_work *work, const lw_posture_ask *at)
{
    lwt_subject_at s;
    lw_err err = {.code = LW_OK};
    lw_distance_answer a = lwt_distance_ask(&s, model, work, at, 0);
    assert_true(a.forward.none);
    assert_true(a.inverse.known_least && a.inverse.known_most && a.inverse.limb == 0);
    assert_true(a.inverse.at_least_m <= a.inverse.at_most_m);
    /* Axes four and six in line (textbook), or the elbow stretched or folded, or the wrist centre
     * over the post: the rates lose rank, and the way there is as long as said. */
    lw_posture_ask found = {.kind = LW_BY_DRIVES};
    for (size_t d = 0; d < 6; d++) {
        found.has_drive[d] = true;
        found.drive[d] = a.inverse.drive[d];
    }
    const lw_margin_answer *margin;
    assert_int_equal(lw_margin(&margin, model, 0, NULL, &found, work, &err), LW_OK);
    assert_non_null(margin->solution);
    /* told 1e-5 of the way before the elbow is straight, where the value grows by a root */
    assert_true(margin->tool.singular[5] < 5e-2 * margin->tool.singular[0]);
    double moved = 0.0;
    for (size_t k = 0; k < 3; k++) {
        moved += pow(margin->solution->tool.pos_m[k] - s.tool.pos_m[k], 2);
    }
    double cosine = -1.0;
    for (size_t k = 0; k < 9; k++) {
        cosine += margin->solution->tool.rot[k] * s.tool.rot[k];
    }
    moved += pow(s.length * acos(fmin(fmax(0.5 * cosine, -1.0), 1.0)), 2);
    lwt_near_rel(sqrt(moved), a.inverse.at_most_m, 1e-4);
}

static void an_arm_with_a_spherical_wrist_holds_in_its_balls(void **state)
{
    (void)state;
    lw_model *model = lwt_bench_demo("case-packer");
    lw_work *work;
    lw_err err = {.code = LW_OK};
    lwt_random random;
    lwt_subject_at s;
    assert_int_equal(lw_work_new(&work, model, &err), LW_OK);
    lwt_random_init(&random, 43);
    const lw_posture_ask *home = &lw_model_spec(model)->home;
    (void)lwt_distance_ask(&s, model, work, home, 0);
    check_arm(model, work, home);
    lwt_distance_balls(model, work, home, 0, lwt_share_of(1000), &random);
    /* Every mode of the document: its example. */
    const lw_spec *spec = lw_model_spec(model);
    for (size_t i = 0; i < spec->n_mode; i++) {
        check_arm(model, work, &spec->mode[i].example);
        lwt_distance_balls(model, work, &spec->mode[i].example, 0, lwt_share_of(300), &random);
    }
    for (size_t i = 0; i < 6; i++) {
        lw_posture_ask at = {.kind = LW_BY_POSE, .has_mode = true, .mode = s.mode};
        const lw_posture_answer *got;
        lwt_distance_sample(&at.pose, &s, 0.2, &random);
        if (lw_posture(&got, model, 0, NULL, &at, work, &err) == LW_OK &&
            got->outcome == LW_OUTCOME_OK) {
            check_arm(model, work, &at);
            lwt_distance_balls(model, work, &at, 0, lwt_share_of(300), &random);
        }
    }
    lw_work_free(work);
    lw_model_free(model);
}

/* ---- three struts in the plane  */

static const double tri_base[6] = {0.0, 0.0, 1.2, 0.1, 0.5, 1.0};
static const double tri_plate[6] = {-0.25, -0.15, 0.3, -0.1, 0.02, 0.28};

/* Determinant of the three lines, each scaled by its strut's length. */
static double three_lines(double x, double y, double turn)
{
    double row[9];
    for (size_t i = 0; i < 3; i++) {
        double bx = cos(turn) * tri_plate[2 * i] - sin(turn) * tri_plate[2 * i + 1];
        double by = sin(turn) * tri_plate[2 * i] + cos(turn) * tri_plate[2 * i + 1];
        double dx = x + bx - tri_base[2 * i];
        double dy = y + by - tri_base[2 * i + 1];
        row[3 * i] = dx;
        row[3 * i + 1] = dy;
        row[3 * i + 2] = bx * dy - by * dx;
    }
    return lwt_det(row, 3);
}

/* Nearest singular pose by a plain search: for each turn the singular positions form a conic
 * (Sefrioui & Gosselin 1995, Mechanism and Machine Theory 30(4); from memory), which every ray
 * meets at most twice. Lengths count over 1 m. Never below the truth, and above it by less than
 * the grid allows. */
static double three_lines_nearest(const double pose[3])
{
    double best = INFINITY;
    for (int a = -240; a <= 240; a++) {
        double turn = a / 160.0;
        for (int k = 0; k < 240 && fabs(turn) < best; k++) {
            double c = cos(2.0 * PI * k / 240.0);
            double s = sin(2.0 * PI * k / 240.0);
            double most = fmin(2.0, sqrt(best * best - turn * turn));
            double f0 = three_lines(pose[0], pose[1], pose[2] + turn);
            for (int t = 1; t <= 24; t++) {
                double high = most * t / 24.0;
                double low = most * (t - 1) / 24.0;
                double f = three_lines(pose[0] + high * c, pose[1] + high * s, pose[2] + turn);
                if ((f > 0.0) == (f0 > 0.0)) {
                    continue;
                }
                for (int i = 0; i < 40; i++) {
                    double mid = 0.5 * (low + high);
                    f = three_lines(pose[0] + mid * c, pose[1] + mid * s, pose[2] + turn);
                    low = (f > 0.0) == (f0 > 0.0) ? mid : low;
                    high = (f > 0.0) == (f0 > 0.0) ? high : mid;
                }
                best = fmin(best, hypot(high, turn));
                break;
            }
        }
    }
    return best;
}

static void brackets_the_conic_of_three_planar_struts(void **state)
{
    (void)state;
    static const double pose[5][3] = {
        {0.55, 0.4, 0.3}, {0.5, 0.35, -0.4}, {0.7, 0.5, 0.9}, {0.4, 0.6, -0.2}, {0.6, 0.2, 0.1}};
    lwt_random random;
    lwt_random_init(&random, 5);
    for (size_t i = 0; i < 5; i++) {
        lwt_machine *m = lwt_kit_planar_struts("struts", tri_base, tri_plate, pose[i]);
        lwt_machine_load(m);
        lw_frame frame = lwt_frame_planar(pose[i][0], pose[i][1], pose[i][2]);
        const lw_posture_ask *at = lwt_by_pose(m, &frame, NULL, NULL, NULL);
        double truth = three_lines_nearest(pose[i]);
        lwt_subject_at s;
        lw_distance_answer once = lwt_distance_ask(&s, m->model, m->work, at, 0);
        lw_distance_answer many = lwt_distance_ask(&s, m->model, m->work, at, 20000);
        assert_true(once.forward.known_least && once.forward.known_most);
        assert_true(once.forward.at_least_m <= truth && many.forward.at_least_m <= truth);
        assert_true(many.forward.at_least_m >= once.forward.at_least_m);
        assert_true(many.forward.at_least_m >= 0.95 * many.forward.at_most_m);
        /* 1/160 rad of turn and 1/240 turn of ray: less than a hundredth of the way */
        assert_true(once.forward.at_most_m <= truth * (1.0 + 1e-6));
        assert_true(once.forward.at_most_m >= 0.99 * truth);
        /* the posture returned is at that distance, and its lines meet in a point */
        const lw_frame *found = &once.forward.tool;
        double turn = lwt_wrap(atan2(found->rot[3], found->rot[0]) - pose[i][2]);
        double far = sqrt(pow(found->pos_m[0] - pose[i][0], 2) +
                          pow(found->pos_m[1] - pose[i][1], 2) + turn * turn);
        lwt_near_rel(far, once.forward.at_most_m, 1e-9);
        lwt_near(three_lines(found->pos_m[0], found->pos_m[1], pose[i][2] + turn), 0.0, 1e-5);
        assert_true(once.inverse.none); /* a strut has no dead point but length zero */
        assert_true(once.limit.none);
        lwt_distance_balls(m->model, m->work, at, 500, lwt_share_of(700), &random);
        lwt_machine_free(m);
    }
}

/* ---- arms in the plane: stretched and folded  */

static const double arm_base[6] = {0.0, 0.0, 1.0, 0.0, 0.5, 0.9};
static const double arm_plate[6] = {-0.15, -0.1, 0.15, -0.1, 0.0, 0.17};

/* For one turn an arm is stretched or folded on two circles about its base: the way to them is
 * straight. Over all turns by a plain scan. (Textbook: a two-link arm reaches an annulus of radii
 * l1 + l2 and |l1 - l2|.) */
static double annulus_nearest(const double pose[3], double l1, double l2)
{
    double best = INFINITY;
    for (int a = -30000; a <= 30000; a++) {
        double turn = a / 30000.0;
        for (size_t i = 0; i < 3; i++) {
            double t = pose[2] + turn;
            double x = pose[0] + cos(t) * arm_plate[2 * i] - sin(t) * arm_plate[2 * i + 1];
            double y = pose[1] + sin(t) * arm_plate[2 * i] + cos(t) * arm_plate[2 * i + 1];
            double d = hypot(x - arm_base[2 * i], y - arm_base[2 * i + 1]);
            double gap = fmin(l1 + l2 - d, d - fabs(l1 - l2));
            best = fmin(best, hypot(fmax(gap, 0.0), turn));
        }
    }
    return best;
}

static void brackets_stretched_and_folded_arms(void **state)
{
    (void)state;
    static const double pose[4][3] = {
        {0.5, 0.3, 0.1}, {0.45, 0.35, -0.5}, {0.55, 0.25, 0.6}, {0.5, 0.45, 0.0}};
    static const int elbow[4][3] = {{1, 1, 1}, {-1, 1, -1}, {1, -1, -1}, {-1, -1, -1}};
    lwt_random random;
    lwt_random_init(&random, 6);
    for (size_t i = 0; i < 4; i++) {
        double theta[3];
        double l1 = i % 2 == 0 ? 0.45 : 0.6;
        double l2 = 0.5;
        lwt_machine *m =
            lwt_kit_planar_rrr("arms", 3, arm_base, arm_plate, l1, l2, pose[i], elbow[i], theta);
        lwt_machine_load(m);
        lw_frame frame = lwt_frame_planar(pose[i][0], pose[i][1], pose[i][2]);
        const lw_mode *mode = &m->report->reference_mode;
        const lw_posture_ask *at = lwt_by_pose(m, &frame, NULL, mode, NULL);
        double truth = annulus_nearest(pose[i], l1, l2);
        lwt_subject_at s;
        lw_distance_answer a = lwt_distance_ask(&s, m->model, m->work, at, 8000);
        assert_true(a.inverse.known_least && a.inverse.known_most);
        assert_true(a.inverse.at_least_m <= truth);
        lwt_near_rel(a.inverse.at_most_m, truth, 1e-4);
        assert_true(a.inverse.at_least_m >= 0.95 * truth);
        assert_true(a.inverse.limb < 3);
        lwt_distance_balls(m->model, m->work, at, 800, lwt_share_of(700), &random);
        lwt_machine_free(m);
    }
}

/* ---- machines that never turn: closed forms  */

/* A rod of a carriage stands square to the rail where its end is as far from the rail's line as the
 * rod is long; the hand does not turn, so the way there is straight. Figures of the belt hopper's
 * document: rods 400 mm, rail through the carriage ball centres. */
static void a_rod_square_to_its_rail_is_a_straight_way_off(void **state)
{
    (void)state;
    static const double rail[3][2] = {{0, 0.3}, {-0.24, -0.18}, {0.24, -0.18}};
    static const double ball[3][2] = {{0, 0.06}, {-0.048, -0.036}, {0.048, -0.036}};
    lw_model *model = lwt_bench_demo("belt-hopper");
    lw_work *work;
    lw_err err = {.code = LW_OK};
    lwt_random random;
    lwt_subject_at s;
    assert_int_equal(lw_work_new(&work, model, &err), LW_OK);
    lwt_random_init(&random, 8);
    (void)lwt_distance_ask(&s, model, work, &lw_model_spec(model)->home, 0);
    for (size_t i = 0; i < 20; i++) {
        lw_posture_ask at = {.kind = LW_BY_POSE, .has_mode = true, .mode = s.mode};
        const lw_posture_answer *got;
        lwt_subject_at here;
        lwt_distance_sample(&at.pose, &s, 0.12, &random);
        if (lw_posture(&got, model, 0, NULL, &at, work, &err) != LW_OK || got->solution == NULL) {
            continue;
        }
        double truth = INFINITY;
        for (size_t k = 0; k < 3; k++) {
            double d = hypot(at.pose.position_m[0] + ball[k][0] - rail[k][0],
                             at.pose.position_m[1] + ball[k][1] - rail[k][1]);
            truth = fmin(truth, 0.4 - d);
        }
        lw_distance_answer a = lwt_distance_ask(&here, model, work, &at, 0);
        lwt_near(a.inverse.at_least_m, truth, 1e-6);
        lwt_near(a.inverse.at_most_m, truth, 1e-6);
    }
    lw_work_free(work);
    lw_model_free(model);
}

/* A crank's rod is at a dead point where its end is as near to, or as far from, the knee's circle
 * as the rod is long. Delta-type machine of the kit; distance of a point to a circle is textbook
 * geometry. */
static void a_crank_in_line_with_its_rod_is_a_straight_way_off(void **state)
{
    (void)state;
    static const double angle[3] = {0.0, 2.0943951023931953, 4.1887902047863905};
    static const double ref[3] = {0.0, 0.0, -0.7};
    const double base = 0.2;
    const double hand = 0.06;
    const double crank = 0.3;
    const double rod = 0.7;
    double theta[3];
    lwt_machine *m = lwt_kit_delta("delta", base, hand, crank, rod, 0.03, angle, ref, theta);
    lwt_machine_load(m);
    lwt_random random;
    lwt_random_init(&random, 9);
    for (size_t i = 0; i < 12; i++) {
        lw_frame frame = lwt_frame_planar(0, 0, 0);
        double truth = INFINITY;
        for (int k = 0; k < 3; k++) {
            frame.pos_m[k] = ref[k] + lwt_random_in(&random, -0.15, 0.15);
        }
        for (size_t k = 0; k < 3; k++) {
            double c = cos(angle[k]);
            double sn = sin(angle[k]);
            double out = frame.pos_m[0] * c + frame.pos_m[1] * sn + hand - base;
            double aside = -frame.pos_m[0] * sn + frame.pos_m[1] * c;
            double reach = hypot(out, frame.pos_m[2]);
            truth = fmin(truth, rod - hypot(reach - crank, aside));
            truth = fmin(truth, hypot(reach + crank, aside) - rod);
        }
        lwt_subject_at s;
        const lw_posture_ask *at = lwt_by_pose(m, &frame, NULL, &m->report->reference_mode, NULL);
        lw_distance_answer a = lwt_distance_ask(&s, m->model, m->work, at, 0);
        lwt_near(a.inverse.at_least_m, truth, 1e-6);
        lwt_near(a.inverse.at_most_m, truth, 1e-5);
        lwt_distance_balls(m->model, m->work, at, 300, lwt_share_of(300), &random);
    }
    lwt_machine_free(m);
}

/* Strut lengths are limited by spheres (in the plane circles) about the base points; over all turns
 * by a plain scan. */
static void brackets_the_limits_of_struts(void **state)
{
    (void)state;
    static const double pose[3] = {0.55, 0.4, 0.3};
    const double low = 0.3;
    const double high = 0.95;
    lwt_machine *m = lwt_kit_planar_struts("struts", tri_base, tri_plate, pose);
    for (size_t i = 0; i < 3; i++) {
        m->spec->rod[i].range_m =
            (lw_range){.has_low = true, .low = low, .has_high = true, .high = high};
    }
    lwt_machine_load(m);
    lwt_random random;
    lwt_random_init(&random, 10);
    for (size_t i = 0; i < 8; i++) {
        double at[3];
        double truth = INFINITY;
        for (size_t k = 0; k < 3; k++) {
            at[k] = pose[k] + lwt_random_in(&random, -0.05, 0.05);
        }
        for (int a = -30000; a <= 30000; a++) {
            double turn = a / 30000.0;
            for (size_t k = 0; k < 3; k++) {
                double t = at[2] + turn;
                double x = at[0] + cos(t) * tri_plate[2 * k] - sin(t) * tri_plate[2 * k + 1];
                double y = at[1] + sin(t) * tri_plate[2 * k] + cos(t) * tri_plate[2 * k + 1];
                double d = hypot(x - tri_base[2 * k], y - tri_base[2 * k + 1]);
                truth = fmin(truth, hypot(fmax(fmin(high - d, d - low), 0.0), turn));
            }
        }
        lw_frame frame = lwt_frame_planar(at[0], at[1], at[2]);
        const lw_posture_ask *posture = lwt_by_pose(m, &frame, NULL, NULL, NULL);
        lwt_subject_at s;
        lw_distance_answer a = lwt_distance_ask(&s, m->model, m->work, posture, 0);
        assert_true(a.limit.known_least && a.limit.known_most);
        assert_true(a.limit.at_least_m <= truth);
        assert_true(a.limit.at_least_m >= 0.6 * truth);
        lwt_near_rel(a.limit.at_most_m, truth, 1e-3);
        assert_int_equal(a.limit.limit.of, LW_LIMIT_ROD);
        assert_true(a.limit.limit.over > 0.0);
    }
    lwt_machine_free(m);
}

/* ---- any mechanism, by its closure rows  */

/* Samples reached from the posture itself: there is no list of modes to go by. */
static void check_any(lwt_machine *m, const lw_posture_ask *at, lwt_random *random)
{
    lwt_subject_at s;
    lw_distance_answer a = lwt_distance_ask(&s, m->model, m->work, at, 0);
    lw_posture_ask start;
    lw_err err = {.code = LW_OK};
    const lw_posture_answer *posture;
    assert_true(a.forward.none || a.forward.known_least);
    assert_true(a.inverse.known_least);
    lwt_distance_bracket(&a.forward);
    lwt_distance_bracket(&a.inverse);
    assert_int_equal(lw_posture(&posture, m->model, 0, NULL, at, m->work, &err), LW_OK);
    lwt_by_bodies(&start, m->spec, posture->solution);
    for (int side = 0; side < 2; side++) {
        double r = side == 0 ? a.forward.at_least_m : a.inverse.at_least_m;
        int sign = 0;
        for (size_t i = 0; i < lwt_share_of(300) && (side == 1 || !a.forward.none); i++) {
            const lw_inverse_answer *found;
            lw_inverse_ask question = {.near = &start};
            lwt_distance_sample(&question.pose, &s, i == 0 ? 0.0 : r, random);
            assert_int_equal(lw_inverse(&found, m->model, &question, m->work, &err), LW_OK);
            assert_true(found->n_solution > 0);
            int here = lwt_rates_sign(&s, &found->solution[0], side == 1);
            sign = i == 0 ? here : sign;
            assert_int_equal(here, sign);
        }
    }
}

/* Two links and a tip in the plane, outputs x y: the tip reaches an annulus (textbook). */
static void a_planar_arm_of_two_links_keeps_off_its_annulus(void **state)
{
    (void)state;
    static const lwt_table table = {.n = 2, .a = {0.6, 0.4}};
    lwt_random random;
    lwt_random_init(&random, 11);
    for (size_t i = 0; i < 6; i++) {
        double theta[2] = {lwt_random_in(&random, -2.0, 2.0), lwt_random_in(&random, 0.4, 2.7)};
        lwt_machine *m = lwt_kit_arm("two links", &table, theta, "x y");
        lwt_machine_load(m);
        double zero[2] = {0, 0};
        const lw_posture_ask *at = lwt_by_drives(m, zero, NULL);
        lwt_subject_at s;
        lw_distance_answer a = lwt_distance_ask(&s, m->model, m->work, at, 0);
        double d = hypot(s.tool.pos_m[0], s.tool.pos_m[1]);
        assert_true(a.forward.none);
        assert_true(a.inverse.known_least);
        assert_true(a.inverse.at_least_m <= fmin(1.0 - d, d - 0.2));
        assert_true(a.inverse.at_least_m >= 0.02 * fmin(1.0 - d, d - 0.2));
        check_any(m, at, &random);
        lwt_machine_free(m);
    }
}

static void two_arms_on_one_pin_hold_in_their_balls(void **state)
{
    (void)state;
    static const double base[4] = {0.0, 0.0, 0.6, 0.0};
    static const double first[2] = {0.5, 0.55};
    static const double second[2] = {0.6, 0.5};
    static const int elbow[2] = {1, -1};
    lwt_random random;
    lwt_random_init(&random, 12);
    for (size_t i = 0; i < 4; i++) {
        double theta[2];
        double point[2] = {lwt_random_in(&random, 0.1, 0.5), lwt_random_in(&random, 0.5, 0.8)};
        lwt_machine *m = lwt_kit_pin_arms("pin", 2, base, first, second, point, elbow, theta);
        lwt_machine_load(m);
        double zero[2] = {0, 0};
        check_any(m, lwt_by_drives(m, zero, NULL), &random);
        lwt_machine_free(m);
    }
}

/* The same question gets the same answer, and takes no memory. */
static void answers_alike_and_allocates_nothing(void **state)
{
    (void)state;
    lw_model *model = lwt_bench_demo("tilt-table");
    lw_work *work[2];
    lw_err err = {.code = LW_OK};
    lwt_subject_at s;
    assert_int_equal(lw_work_new(&work[0], model, &err), LW_OK);
    assert_int_equal(lw_work_new(&work[1], model, &err), LW_OK);
    const lw_posture_ask *home = &lw_model_spec(model)->home;
    lw_distance_answer a = lwt_distance_ask(&s, model, work[0], home, 500);
    lwt_alloc_reset();
    (void)lwt_distance_ask(&s, model, work[0], home, 0);
    lw_distance_answer b = lwt_distance_ask(&s, model, work[0], home, 500);
    assert_int_equal(lwt_alloc_calls(), 0);
    lw_distance_answer c = lwt_distance_ask(&s, model, work[1], home, 500);
    lwt_same(b.forward.at_least_m, a.forward.at_least_m);
    lwt_same(b.forward.at_most_m, a.forward.at_most_m);
    lwt_same(b.limit.at_least_m, a.limit.at_least_m);
    lwt_same(c.forward.at_least_m, a.forward.at_least_m);
    lwt_same(c.limit.at_most_m, a.limit.at_most_m);
    assert_true(a.forward.at_least_m >= 0.4 * a.forward.at_most_m);
    assert_true(a.cells <= 1000);
    assert_true(a.inverse.none);
    lw_work_free(work[0]);
    lw_work_free(work[1]);
    lw_model_free(model);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(six_struts_hold_in_their_balls),
        cmocka_unit_test(four_arms_hold_in_their_balls),
        cmocka_unit_test(carriages_hold_in_their_balls),
        cmocka_unit_test(stacked_plates_hold_in_their_balls),
        cmocka_unit_test(an_arm_with_a_spherical_wrist_holds_in_its_balls),
        cmocka_unit_test(brackets_the_conic_of_three_planar_struts),
        cmocka_unit_test(brackets_stretched_and_folded_arms),
        cmocka_unit_test(a_rod_square_to_its_rail_is_a_straight_way_off),
        cmocka_unit_test(a_crank_in_line_with_its_rod_is_a_straight_way_off),
        cmocka_unit_test(brackets_the_limits_of_struts),
        cmocka_unit_test(a_planar_arm_of_two_links_keeps_off_its_annulus),
        cmocka_unit_test(two_arms_on_one_pin_hold_in_their_balls),
        cmocka_unit_test(answers_alike_and_allocates_nothing),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
