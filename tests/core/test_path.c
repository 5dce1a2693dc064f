/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves proved: held against closed forms (spheres and circles of reach, the determinant of three
 * rods in a plane written out), against dense sampling by the questions about single postures, and
 * at places built to graze. LWT_SHARE scales the number of samples. */
#include "lwt.h"
#include "lwt_kit.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static size_t share(size_t n)
{
    const char *text = getenv("LWT_SHARE");
    double part = text != NULL ? strtod(text, NULL) : 1.0;
    double out = (double)n * part;
    return out < 10.0 ? 10 : (size_t)out;
}

/* One straight move from a frame to a frame, in the mode given (NULL: default). */
typedef struct asked {
    lw_path_answer path;
    lw_move_answer move;
} asked;

static asked run(lwt_machine *m, lw_move *move, const lw_posture_ask *from,
                 const lw_margin_min *min, size_t budget)
{
    static const lw_margin_min none;
    const lw_path_answer *a;
    asked out;
    lw_path_ask ask = {.from = from,
                       .n_move = 1,
                       .move = move,
                       .margin_min = min != NULL ? *min : none,
                       .budget = budget,
                       .store = &out.move};
    lw_code rc = lw_path(&a, m->model, &ask, m->work, &m->err);
    if (rc != LW_OK) {
        lwt_fail("%s: %s", m->err.where, m->err.msg);
    }
    out.path = *a;
    return out;
}

static asked line(lwt_machine *m, const lw_frame *from, const lw_frame *to,
                  const lw_margin_min *min)
{
    lw_move move = {.kind = LW_MOVE_LINE};
    lwt_pose_of(m, to, NULL, &move.pose);
    return run(m, &move, lwt_by_pose(m, from, NULL, NULL, NULL), min, 0);
}

/* ---- six struts ------------------------------------------------------------------------------ */

static const double BASE[18] = {0.30, 0.07,  0.0,  -0.10, 0.30,  0.01, -0.21, 0.24,  0.0,
                                -0.22, -0.23, 0.01, -0.09, -0.31, 0.0,  0.31,  -0.08, 0.01};
static const double PLATE[18] = {0.13,  0.10,  -0.05, 0.03, 0.17,  -0.04, -0.16, 0.06,  -0.05,
                                 -0.15, -0.07, -0.04, 0.02, -0.16, -0.05, 0.13,  -0.11, -0.04};

static lwt_machine *struts(void)
{
    lw_frame ref = lwt_frame_identity();
    ref.pos_m[2] = 0.52;
    return lwt_kit_struts("struts", 6, BASE, PLATE, &ref);
}

/* The tool on a straight line without a turn: strut i grows as |p0 - b + t d| does, so that it
 * meets a length at a root of a quadratic. A strut's upper limit is set above or below what the
 * move needs by 1, 0.1 and 0.01 mm. */
static void a_strut_stops_where_its_sphere_is_met(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 11);
    for (size_t round = 0; round < 18; round++) {
        double d[3];
        double p[3];
        size_t rod = lwt_random_index(&rng, 6);
        double over = round % 3 == 0 ? 1e-3 : round % 3 == 1 ? 1e-4 : 1e-5;
        lwt_random_direction(&rng, d);
        lw_frame from = lwt_frame_identity();
        from.pos_m[2] = 0.52;
        lw_frame to = from;
        for (size_t i = 0; i < 3; i++) {
            d[i] *= 0.1;
            to.pos_m[i] += d[i];
            p[i] = from.pos_m[i] + PLATE[3 * rod + i] - BASE[3 * rod + i];
        }
        double q[3] = {p[0] + d[0], p[1] + d[1], p[2] + d[2]};
        double most = lwt_norm(q);
        if (!(most > lwt_norm(p) + 2e-3)) {
            continue; /* not at its longest at the end */
        }
        for (int beyond = 0; beyond < 2; beyond++) {
            double limit = beyond ? most - over : most + over;
            lwt_machine *m = struts();
            m->spec->rod[rod].range_m = (lw_range){.has_high = true, .high = limit};
            lwt_machine_load(m);
            asked a = line(m, &from, &to, NULL);
            if (!beyond) {
                assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
            } else {
                double half = lwt_dot(p, d) / lwt_dot(d, d);
                double t = -half + sqrt(half * half + (limit * limit - lwt_dot(p, p)) /
                                                          lwt_dot(d, d));
                assert_int_equal(a.path.outcome, LW_OUTCOME_LIMIT);
                assert_int_equal(a.move.limit[0].of, LW_LIMIT_ROD);
                assert_int_equal(a.move.limit[0].index, rod);
                lwt_near(a.move.at, t, 1e-6);
            }
            lwt_machine_free(m);
        }
    }
}

static lwt_machine *struts_with_needs(void)
{
    lwt_machine *m = struts();
    for (size_t d = 0; d < 6; d++) {
        lw_spec_drive *drive = &m->spec->drive[d];
        drive->has_speed = drive->has_effort = drive->has_resolution = true;
        drive->speed = 0.35;
        drive->effort = 1500.0;
        drive->resolution = 1e-5;
    }
    lw_needs *needs = &m->spec->needs;
    needs->position_tolerance_m = (lw_figure){true, 1e-4};
    needs->angle_tolerance_rad = (lw_figure){true, 1e-3};
    needs->force_n = (lw_figure){true, 300.0};
    needs->moment_nm = (lw_figure){true, 60.0};
    needs->speed_m_s = (lw_figure){true, 0.15};
    needs->turn_rate_rad_s = (lw_figure){true, 0.5};
    lwt_machine_load(m);
    return m;
}

/* Frames on the way: evenly in place, one turn about a fixed axis. */
static lw_frame between(const lw_frame *from, const double shift[3], const double axis[3],
                        double turn, double t)
{
    static const double origin[3] = {0, 0, 0};
    lw_frame r = lwt_frame_turn(axis, origin, turn * t);
    lw_frame out = lwt_frame_mul(&r, from);
    for (int i = 0; i < 3; i++) {
        out.pos_m[i] = from->pos_m[i] + t * shift[i];
    }
    return out;
}

/* The least of each margin over `n` places, by the question about one posture; false where one of
 * them has no posture within limits. */
static bool sampled(double least[LW_MARGIN_COUNT], lwt_machine *m, const lw_frame *from,
                    const double shift[3], const double axis[3], double turn, size_t n)
{
    for (int k = 0; k < LW_MARGIN_COUNT; k++) {
        least[k] = 1e300;
    }
    for (size_t i = 0; i <= n; i++) {
        lw_frame at = between(from, shift, axis, turn, (double)i / (double)n);
        const lw_margin_answer *a = lwt_margin(m, lwt_by_pose(m, &at, NULL, NULL, NULL));
        if (a->solution == NULL || !a->solution->within_limits) {
            return false;
        }
        for (int k = 0; k < LW_MARGIN_COUNT; k++) {
            least[k] = fmin(least[k], a->margin[k].value);
        }
    }
    return true;
}

/* Thresholds on either side of the least value met by dense sampling, each margin by itself. */
static void thresholds_near_the_least_value(void **state)
{
    (void)state;
    static const int names[] = {LW_MARGIN_ACCURACY, LW_MARGIN_LOAD, LW_MARGIN_SPEED};
    lwt_machine *m = struts_with_needs();
    lwt_random rng;
    lwt_random_init(&rng, 12);
    for (size_t round = 0; round < 6; round++) {
        double shift[3];
        double axis[3];
        double least[LW_MARGIN_COUNT];
        lw_frame from = lwt_frame_identity();
        from.pos_m[2] = 0.52;
        lwt_random_direction(&rng, shift);
        lwt_random_direction(&rng, axis);
        for (int i = 0; i < 3; i++) {
            shift[i] *= 0.08;
        }
        assert_true(sampled(least, m, &from, shift, axis, 0.25, 400));
        lw_frame to = between(&from, shift, axis, 0.25, 1.0);
        for (size_t k = 0; k < 3; k++) {
            static const double factor[] = {0.9, 0.99, 1.001};
            for (size_t f = 0; f < 3; f++) {
                lw_margin_min min;
                memset(&min, 0, sizeof min);
                min.asked[names[k]] = true;
                min.value[names[k]] = factor[f] * least[names[k]];
                asked a = line(m, &from, &to, &min);
                if (f == 2) {
                    assert_int_equal(a.path.outcome, LW_OUTCOME_LOW_MARGIN);
                    assert_int_equal(a.move.margin, names[k]);
                } else {
                    assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
                    const lw_path_least *l = &a.move.least[names[k]];
                    assert_true(l->known && l->at_least >= min.value[names[k]]);
                    assert_true(l->at_least <= least[names[k]] * (1.0 + 1e-9));
                    assert_true(l->value >= l->at_least);
                }
            }
        }
    }
    lwt_machine_free(m);
}

/* Wherever a move is proved, no sample contradicts, margins included. */
static void dense_sampling_never_contradicts(void **state)
{
    (void)state;
    lwt_machine *m = struts_with_needs();
    lwt_random rng;
    size_t good = 0;
    size_t rounds = share(400);
    lwt_random_init(&rng, 13);
    for (size_t round = 0; round < rounds; round++) {
        double shift[3];
        double axis[3];
        double least[LW_MARGIN_COUNT];
        lw_margin_min min;
        memset(&min, 0, sizeof min);
        for (int k = LW_MARGIN_ACCURACY; k <= LW_MARGIN_SPEED; k++) {
            min.asked[k] = true;
            min.value[k] = 0.5;
        }
        min.asked[LW_MARGIN_HOLD] = true;
        lw_frame from = lwt_frame_identity();
        from.pos_m[2] = lwt_random_in(&rng, 0.4, 0.6);
        lwt_random_direction(&rng, shift);
        lwt_random_direction(&rng, axis);
        for (int i = 0; i < 3; i++) {
            shift[i] *= lwt_random_in(&rng, 0.05, 0.25);
        }
        double turn = lwt_random_in(&rng, 0.0, 0.9);
        lw_frame to = between(&from, shift, axis, turn, 1.0);
        asked a = line(m, &from, &to, &min);
        assert_int_not_equal(a.path.outcome, LW_OUTCOME_UNDECIDED);
        if (a.path.outcome != LW_OUTCOME_OK) {
            continue;
        }
        good++;
        assert_true(sampled(least, m, &from, shift, axis, turn, 100));
        for (int k = 0; k < LW_MARGIN_COUNT; k++) {
            if (a.move.least[k].known) {
                assert_true(least[k] >= a.move.least[k].at_least * (1.0 - 1e-9));
            }
        }
    }
    assert_true(good > rounds / 4);
    lwt_machine_free(m);
}

/* ---- planar platforms ------------------------------------------------------------------------ */

static const double ARM_BASE[6] = {-0.26, -0.19, 0.26, -0.19, 0.0, 0.30};
static const double ARM_PLATE[6] = {-0.06, -0.04, 0.06, -0.04, 0.0, 0.07};
enum { CRANK_MM = 170, LINK_MM = 210 };

/* A platform that does not turn: each arm ends where the circle of its stretched length is met, a
 * root of a quadratic. Lines that touch the circle from inside by 1, 0.1 and 0.01 mm are good to
 * their end, lines that cross it by as much are not. */
static void an_arm_stops_where_it_is_stretched(void **state)
{
    (void)state;
    static const double pose[3] = {0, 0, 0};
    static const int elbow[3] = {1, 1, 1};
    static const double by[] = {1e-3, 1e-4, 1e-5};
    double theta[3];
    const double reach = 1e-3 * (CRANK_MM + LINK_MM);
    lwt_machine *m = lwt_kit_planar_rrr("planar", 3, ARM_BASE, ARM_PLATE, 1e-3 * CRANK_MM,
                                        1e-3 * LINK_MM, pose, elbow, theta);
    lwt_machine_load(m);
    for (size_t k = 0; k < 6; k++) {
        /* Across the circle of arm 0 about its base, seen by the platform's origin. */
        double inside = k < 3 ? by[k] : -by[k - 3];
        double c[2] = {ARM_BASE[0] - ARM_PLATE[0], ARM_BASE[1] - ARM_PLATE[1]};
        double u[2] = {cos(0.75), sin(0.75)};
        double far = reach - inside;
        lw_frame from = lwt_frame_planar(c[0] + far * u[0] + 0.04 * u[1],
                                         c[1] + far * u[1] - 0.04 * u[0], 0.0);
        lw_frame to = lwt_frame_planar(c[0] + far * u[0] - 0.04 * u[1],
                                       c[1] + far * u[1] + 0.04 * u[0], 0.0);
        if (k >= 3) { /* from within, straight out through the circle and beyond by that much */
            from = lwt_frame_planar(c[0] + (reach - 0.05) * u[0], c[1] + (reach - 0.05) * u[1],
                                    0.0);
            to = lwt_frame_planar(c[0] + far * u[0], c[1] + far * u[1], 0.0);
        } else { /* ends on the circle of that radius would lie outside: a shorter line */
            double half = 0.5 * sqrt(reach * reach - far * far);
            from = lwt_frame_planar(c[0] + far * u[0] + half * u[1],
                                    c[1] + far * u[1] - half * u[0], 0.0);
            to = lwt_frame_planar(c[0] + far * u[0] - half * u[1],
                                  c[1] + far * u[1] + half * u[0], 0.0);
        }
        asked a = line(m, &from, &to, NULL);
        if (k < 3) {
            assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
        } else {
            assert_int_equal(a.path.outcome, LW_OUTCOME_OUT_OF_REACH);
            assert_int_equal(a.move.limb, 0);
            lwt_near(a.move.at, 0.05 / (0.05 + by[k - 3]), 1e-6);
        }
    }
    lwt_machine_free(m);
}

static const double ROD_BASE[6] = {-0.3, -0.2, 0.35, -0.15, 0.05, 0.4};
static const double ROD_PLATE[6] = {-0.1, -0.05, 0.12, -0.04, 0.01, 0.1};

/* Three rods in a plane hold the platform unless their lines meet in one point or are parallel: the
 * determinant of the rods' lines, written out. */
static double three_rods(double x, double y, double rz)
{
    double a[9];
    for (size_t i = 0; i < 3; i++) {
        double px = cos(rz) * ROD_PLATE[2 * i] - sin(rz) * ROD_PLATE[2 * i + 1];
        double py = sin(rz) * ROD_PLATE[2 * i] + cos(rz) * ROD_PLATE[2 * i + 1];
        double ux = x + px - ROD_BASE[2 * i];
        double uy = y + py - ROD_BASE[2 * i + 1];
        double n = sqrt(ux * ux + uy * uy);
        a[3 * i] = ux / n;
        a[3 * i + 1] = uy / n;
        a[3 * i + 2] = (px * uy - py * ux) / n;
    }
    return lwt_det(a, 3);
}

/* The platform turns on the spot until the rods' lines meet: SINGULAR, at the root of the
 * determinant found by bisection; short of it by 1, 0.1, 0.01 mm at the platform's rim it is good.
 * No threshold is asked, so that hold alone is in question. */
static void hold_is_lost_where_three_rods_meet(void **state)
{
    (void)state;
    static const double pose[3] = {0.02, 0.01, 0.0};
    lwt_machine *m = lwt_kit_planar_struts("rods", ROD_BASE, ROD_PLATE, pose);
    lwt_machine_load(m);
    double good = 0.0;
    double bad = 0.0;
    double sign = three_rods(pose[0], pose[1], 0.0);
    for (double rz = 0.0; rz < 3.0 && bad == 0.0; rz += 0.01) {
        if (sign * three_rods(pose[0], pose[1], rz) < 0.0) {
            bad = rz;
            good = rz - 0.01;
        }
    }
    assert_true(bad > 0.0);
    for (int i = 0; i < 60; i++) {
        double mid = 0.5 * (good + bad);
        *(sign * three_rods(pose[0], pose[1], mid) < 0.0 ? &bad : &good) = mid;
    }
    lw_frame from = lwt_frame_planar(pose[0], pose[1], 0.0);
    static const double by[] = {1e-2, 1e-3, 1e-4};
    for (size_t k = 0; k < 3; k++) {
        lw_frame to = lwt_frame_planar(pose[0], pose[1], good - by[k]);
        asked a = line(m, &from, &to, NULL);
        assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
        double end = good + by[k];
        to = lwt_frame_planar(pose[0], pose[1], end);
        a = line(m, &from, &to, NULL);
        assert_int_equal(a.path.outcome, LW_OUTCOME_SINGULAR);
        lwt_near(a.move.at, good / end, 1e-6);
    }
    lwt_machine_free(m);
}

/* ---- arms ------------------------------------------------------------------------------------ */

/* In its own plane an arm's wrist goes straight through: on both sides there are postures, but the
 * branches of the wrist meet there, and the mode is not kept. */
static void a_wrist_that_straightens_is_not_clear(void **state)
{
    (void)state;
    static const lwt_table table = {.n = 6,
                                    .a = {0, 0.4, 0.02, 0, 0, 0},
                                    .alpha = {LWT_PI / 2, 0, LWT_PI / 2, -LWT_PI / 2, LWT_PI / 2,
                                              0},
                                    .d = {0.3, 0, 0, 0.4, 0, 0.1}};
    static const double bent[6] = {0.0, 0.9, -0.3, 0.0, 0.3, 0.0};
    static const double over[6] = {0.0, 0.9, -0.3, 0.0, -0.3, 0.0};
    lwt_machine *m = lwt_kit_arm("arm", &table, bent, "x y z rx ry rz");
    lwt_machine_load(m);
    lw_frame from = lwt_table_forward(&table, bent);
    lw_frame to = lwt_table_forward(&table, over);
    asked a = line(m, &from, &to, NULL);
    assert_int_equal(a.path.outcome, LW_OUTCOME_OTHER_MODE);
    assert_int_equal(a.move.stop, LW_STOP_INVERSE);
    assert_true(a.move.at > 0.1 && a.move.at < 0.9);
    /* By readings it goes through: the tool is held there. */
    lw_move move = {.kind = LW_MOVE_JOINTS, .has_drives = true};
    for (size_t d = 0; d < 6; d++) {
        move.has_drive[d] = true;
        move.drive[d] = over[d] - bent[d];
    }
    a = run(m, &move, lwt_by_pose(m, &from, NULL, NULL, NULL), NULL, 0);
    assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
    assert_true(a.move.has_end);
    lwt_near(lwt_frame_distance(&a.move.end_tool, &to), 0.0, 1e-9);
    lwt_near(lwt_frame_angle(&a.move.end_tool, &to), 0.0, 1e-7);
    lwt_machine_free(m);
}

/* Three slides at right angles: everything is plain to see. */
static lwt_machine *gantry(void)
{
    static const double axis[3][3] = {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}};
    lwt_machine *m = lwt_machine_new("gantry");
    size_t body = 0;
    for (size_t i = 0; i < 3; i++) {
        size_t next = lwt_add_body(m);
        size_t joint = lwt_add_prismatic(m, body, next, axis[i]);
        m->spec->joint[joint].range[0] =
            (lw_range){.has_low = true, .has_high = true, .low = -0.1, .high = 0.2};
        body = next;
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, i);
    }
    (void)lwt_add_tool(m, body, NULL);
    lwt_add_outputs(m, "x y z");
    lwt_machine_load(m);
    return m;
}

/* Room on each axis is what its slide has left; nothing turns. */
static void travel_of_three_slides(void **state)
{
    (void)state;
    lwt_machine *m = gantry();
    const lw_travel_answer *a;
    lw_frame here = lwt_frame_identity();
    here.pos_m[0] = 0.05;
    lw_travel_ask ask = {.posture = lwt_by_pose(m, &here, NULL, NULL, NULL), .reach_m = 1.0};
    assert_int_equal(lw_travel(&a, m->model, &ask, m->work, &m->err), LW_OK);
    for (size_t axis = 0; axis < 6; axis++) {
        for (size_t k = 0; k < 2; k++) {
            const lw_travel_way *way = &a->way[axis][k];
            assert_int_equal(way->possible, axis < 3);
            if (axis < 3) {
                double room = (k == 0 ? 0.1 : 0.2) + (axis > 0 ? 0.0 : k == 0 ? 0.05 : -0.05);
                assert_true(way->blocked && way->n_limit > 0);
                assert_int_equal(way->limit[0].index, axis);
                lwt_near(way->blocked_at, room, 1e-6);
                assert_true(way->at_least <= room + 1e-8 && way->at_least > room - 1e-6);
            }
        }
    }
    lwt_machine_free(m);
}

/* ---- moves one after another, circles, budgets ----------------------------------------------- */

static atomic_bool stop_now = true;

static void a_break_ends_the_list(void **state)
{
    (void)state;
    lwt_machine *m = gantry();
    lw_frame at = lwt_frame_identity();
    lw_move move[3] = {{.kind = LW_MOVE_LINE}, {.kind = LW_MOVE_LINE}, {.kind = LW_MOVE_LINE}};
    lw_move_answer store[3];
    lw_proof_piece piece[8];
    const lw_path_answer *a;
    for (size_t i = 0; i < 3; i++) {
        at.pos_m[0] = 0.15 * (double)(i + 1); /* 0.15, 0.3, 0.45: the second is too far */
        lwt_pose_of(m, &at, NULL, &move[i].pose);
    }
    at.pos_m[0] = 0.0;
    lw_path_ask ask = {.from = lwt_by_pose(m, &at, NULL, NULL, NULL),
                       .n_move = 3,
                       .move = move,
                       .store = store,
                       .piece_room = 8,
                       .piece = piece};
    assert_int_equal(lw_path(&a, m->model, &ask, m->work, &m->err), LW_OK);
    assert_int_equal(a->outcome, LW_OUTCOME_LIMIT);
    assert_int_equal(store[0].outcome, LW_OUTCOME_OK);
    lwt_near(store[0].length_m, 0.15, 1e-12);
    lwt_near(store[0].end_drive[0], 0.15, 1e-12);
    assert_int_equal(store[1].outcome, LW_OUTCOME_LIMIT);
    lwt_near(store[1].at, 1.0 / 3.0, 1e-6);
    assert_false(store[2].examined);
    assert_int_equal(store[0].n_piece, 1);
    lwt_near(piece[0].drive_low[0], 0.0, 1e-9);
    lwt_near(piece[0].drive_high[0], 0.15, 1e-9);
    ask.abort = &stop_now;
    assert_int_equal(lw_path(&a, m->model, &ask, m->work, &m->err), LW_OK);
    assert_int_equal(a->outcome, LW_OUTCOME_UNDECIDED);
    assert_int_equal(store[0].stop, LW_STOP_ABORT);
    lwt_machine_free(m);
}

/* A half circle of radius r through (r, r) leaves a slide's range by its bulge alone: length pi r,
 * and the place where sin (pi t) r meets the limit. */
static void a_circle_bulges(void **state)
{
    (void)state;
    lwt_machine *m = gantry();
    lw_frame here = lwt_frame_identity();
    lw_move move = {.kind = LW_MOVE_CIRCLE};
    const double r = 0.09;
    lw_frame at = here;
    at.pos_m[0] = 2.0 * r;
    lwt_pose_of(m, &at, NULL, &move.pose);
    at.pos_m[0] = r;
    at.pos_m[1] = r;
    lwt_pose_of(m, &at, NULL, &move.via);
    asked a = run(m, &move, lwt_by_pose(m, &here, NULL, NULL, NULL), NULL, 0);
    assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
    lwt_near(a.move.length_m, LWT_PI * r, 1e-9);
    here.pos_m[1] = 0.15; /* the bulge would stand at 0.24, the range ends at 0.2 */
    lw_frame end = here;
    end.pos_m[0] = 2.0 * r;
    lwt_pose_of(m, &end, NULL, &move.pose);
    at.pos_m[1] = 0.15 + r;
    lwt_pose_of(m, &at, NULL, &move.via);
    a = run(m, &move, lwt_by_pose(m, &here, NULL, NULL, NULL), NULL, 0);
    assert_int_equal(a.path.outcome, LW_OUTCOME_LIMIT);
    lwt_near(a.move.at, asin(0.05 / r) / LWT_PI, 1e-6);
    /* Points on one line name no circle. */
    const lw_path_answer *none;
    lw_move_answer store;
    at.pos_m[1] = 0.15;
    lwt_pose_of(m, &at, NULL, &move.via);
    lw_path_ask ask = {.from = lwt_by_pose(m, &here, NULL, NULL, NULL),
                       .n_move = 1,
                       .move = &move,
                       .store = &store};
    assert_int_equal(lw_path(&none, m->model, &ask, m->work, &m->err), LW_E_ARGUMENT);
    assert_string_equal(m->err.where, "/through/0/via");
    lwt_machine_free(m);
}

/* Readings of the struts go evenly: every strut's length along the way is known. A limit on one
 * that is passed at a known share. */
static void readings_go_evenly(void **state)
{
    (void)state;
    lwt_machine *m = struts();
    lw_frame from = lwt_frame_identity();
    from.pos_m[2] = 0.52;
    m->spec->drive[2].range = (lw_range){.has_high = true, .high = 0.02};
    lwt_machine_load(m);
    lw_move move = {.kind = LW_MOVE_JOINTS, .has_drives = true};
    for (size_t d = 0; d < 6; d++) {
        move.has_drive[d] = true;
        move.drive[d] = d == 2 ? 0.019 : 0.01 + 0.002 * (double)d;
    }
    const lw_posture_ask *start = lwt_by_pose(m, &from, NULL, NULL, NULL);
    asked a = run(m, &move, start, NULL, 0);
    assert_int_equal(a.path.outcome, LW_OUTCOME_OK);
    for (size_t d = 0; d < 6; d++) {
        lwt_near(a.move.end_drive[d], move.drive[d], 1e-9);
    }
    move.drive[2] = 0.032;
    a = run(m, &move, start, NULL, 0);
    assert_int_equal(a.path.outcome, LW_OUTCOME_LIMIT);
    lwt_near(a.move.at, 0.02 / 0.032, 1e-6);
    a = run(m, &move, start, NULL, 1);
    assert_true(a.move.boxes <= 1);
    lwt_machine_free(m);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_strut_stops_where_its_sphere_is_met),
        cmocka_unit_test(thresholds_near_the_least_value),
        cmocka_unit_test(dense_sampling_never_contradicts),
        cmocka_unit_test(an_arm_stops_where_it_is_stretched),
        cmocka_unit_test(hold_is_lost_where_three_rods_meet),
        cmocka_unit_test(a_wrist_that_straightens_is_not_clear),
        cmocka_unit_test(travel_of_three_slides),
        cmocka_unit_test(a_break_ends_the_list),
        cmocka_unit_test(a_circle_bulges),
        cmocka_unit_test(readings_go_evenly),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
