/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Singular postures whose lost or unheld motion is known from textbook geometry, and how they are
 * named. Sources, all from memory, each geometry worked out again beside the case:
 * - three lines of force through one point leave the turn about it, parallel ones a shift: K. H.
 *   Hunt, Kinematic Geometry of Mechanisms, 1978; Gosselin & Angeles, IEEE T-RA 6(3) 1990.
 * - six struts in one linear complex leave its screw; all across one line the turn about it: Hunt,
 *   J. Mech. Design 105 1983; Merlet, Int. J. Robotics Research 8(5) 1989.
 * - stretched and folded two-link limbs: Gosselin & Angeles 1990.
 * - arms with a spherical wrist: the lost motion is a wrench reciprocal to all axes: Ball 1900.
 * - constraint singularities: Zlatanov, Bonev & Gosselin, ICRA 2002; with a flat parallelogram. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

static const double Z_AXIS[3] = {0, 0, 1};

static bool one_class(const lw_margin_answer *a, unsigned classes)
{
    return a->classes == classes;
}

/* The line of a screw: through `at`, along +-`axis`. */
static void on_line(const lw_screw *screw, const double at[3], const double axis[3], double tol)
{
    double d[3];
    double off[3];
    for (size_t i = 0; i < 3; i++) {
        d[i] = screw->point_m[i] - at[i];
    }
    lwt_cross(off, d, axis);
    lwt_near(lwt_norm(off) / lwt_norm(axis), 0.0, tol);
    lwt_near(fabs(lwt_dot(screw->axis, axis)) / lwt_norm(axis), 1.0, tol);
}

static const lw_margin_answer *at_reference(lwt_machine *m)
{
    lw_posture_ask *posture = lwt_posture(m);
    posture->kind = LW_BY_POSE;
    lwt_pose_of(m, &m->spec->tool[0].frame, NULL, &posture->pose);
    posture->has_mode = true;
    posture->mode = m->report->reference_mode;
    return lwt_margin(m, posture);
}

/* ---- forward --------------------------------------------------------------------------------- */

/* Planar platform whose rods' lines all pass the point (px, py). */
static lwt_machine *rods_through(double px, double py, const double pose[3])
{
    static const double angle[3] = {0.3, 2.2, 4.4};
    static const double near_end[3] = {0.35, 0.5, 0.42};
    static const double length[3] = {0.9, 0.8, 1.1};
    double base[6];
    double plate[6];
    double c = cos(pose[2]);
    double s = sin(pose[2]);
    for (size_t i = 0; i < 3; i++) {
        double ux = cos(angle[i]);
        double uy = sin(angle[i]);
        double ex = px + near_end[i] * ux - pose[0];
        double ey = py + near_end[i] * uy - pose[1];
        plate[2 * i] = c * ex + s * ey;
        plate[2 * i + 1] = c * ey - s * ex;
        base[2 * i] = px + (near_end[i] + length[i]) * ux;
        base[2 * i + 1] = py + (near_end[i] + length[i]) * uy;
    }
    return lwt_kit_planar_struts("concurrent", base, plate, pose);
}

static void three_lines_through_a_point_leave_a_turn(void **state)
{
    (void)state;
    static const double pose[3] = {0.12, -0.07, 0.4};
    const double point[3] = {0.2, 0.05, 0.0};
    lwt_machine *m = rods_through(point[0], point[1], pose);
    lwt_machine_load(m);
    assert_non_null(lwt_finding(m, "reference-singular-forward"));
    lw_margin_answer a = *at_reference(m);
    assert_int_equal(a.outcome, LW_OUTCOME_SINGULAR);
    lwt_holds(a.reason, "forward singularity");
    assert_true(one_class(&a, LW_CLASS_FORWARD));
    assert_false(a.held);
    assert_int_equal(a.drives.rank, 2);
    const lw_singular_answer *s = a.singular;
    assert_int_equal(s->n_drives, 1);
    assert_true(s->drives[0].lost);
    assert_int_equal(s->drives[0].screw.kind, LW_SCREW_TURN);
    on_line(&s->drives[0].screw, point, Z_AXIS, 1e-9);
    for (size_t d = 0; d < 3; d++) {
        lwt_near(s->drives[0].drive[d], 0.0, 1e-9);
    }
    /* Nothing is lost at the tool, only weakest there. */
    assert_int_equal(s->n_tool, 1);
    assert_false(s->tool[0].lost);

    /* Leaving: the named step raises hold at the named rate, either way. */
    assert_true(s->leave_drives.known && s->leave_drives.either_way);
    assert_int_equal(s->leave_drives.by, LW_LEAVE_TOOL);
    const lw_leave leave = s->leave_drives;
    for (int side = -1; side <= 1; side += 2) {
        const double h = 1e-5 * side;
        lw_frame pose_h = lwt_frame_planar(pose[0] + h * leave.output[0],
                                           pose[1] + h * leave.output[1],
                                           pose[2] + h * leave.output[2]);
        const lw_margin_answer *beside =
            lwt_margin(m, lwt_by_pose(m, &pose_h, NULL, NULL, NULL));
        lwt_near(beside->margin[LW_MARGIN_HOLD].value / fabs(h), leave.rate, 1e-4 * leave.rate);
        /* Seen before it is reached: the weakest motion is nearly that turn. */
        assert_false(beside->singular->drives[0].lost);
        on_line(&beside->singular->drives[0].screw, point, Z_AXIS, 1e-3);
    }
    lwt_machine_free(m);
}

static void three_parallel_lines_leave_a_shift(void **state)
{
    (void)state;
    static const double base[6] = {-0.5, -1.0, 0.1, -1.2, 0.6, -0.9};
    static const double plate[6] = {-0.5, 0.0, 0.1, 0.1, 0.6, -0.05};
    lwt_machine *m = lwt_kit_planar_struts("parallel", base, plate, (const double[3]){0, 0, 0});
    lwt_machine_load(m);
    const lw_margin_answer *a = at_reference(m);
    assert_true(one_class(a, LW_CLASS_FORWARD));
    assert_int_equal(a->singular->drives[0].screw.kind, LW_SCREW_SHIFT);
    lwt_near(fabs(a->singular->drives[0].screw.axis[0]), 1.0, 1e-9);
    lwt_near(fabs(a->singular->drives[0].output[0]), 1.0, 1e-9);
    lwt_machine_free(m);
}

/* Six struts along lines of the linear complex of a screw: each square to the velocity that the
 * screw gives its own platform end. */
static void six_struts_in_a_complex_leave_its_screw(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 21);
    for (int k = 0; k < 40; k++) {
        double axis[3];
        double base[18];
        double top[18];
        const double at[3] = {lwt_random_in(&rng, -0.3, 0.3), lwt_random_in(&rng, -0.3, 0.3),
                              lwt_random_in(&rng, -0.3, 0.3)};
        double pitch = k % 2 == 0 ? 0.0 : lwt_random_in(&rng, 0.1, 0.5); /* m per radian */
        lwt_random_direction(&rng, axis);
        for (size_t i = 0; i < 6; i++) {
            double arm[3];
            double v[3];
            double u[3];
            double line[3];
            for (size_t c = 0; c < 3; c++) {
                top[3 * i + c] = lwt_random_in(&rng, -0.6, 0.6);
                arm[c] = top[3 * i + c] - at[c];
            }
            lwt_cross(v, axis, arm);
            for (size_t c = 0; c < 3; c++) {
                v[c] += pitch * axis[c];
            }
            lwt_random_direction(&rng, u);
            lwt_cross(line, u, v);
            double size = lwt_norm(line);
            for (size_t c = 0; c < 3; c++) {
                base[3 * i + c] = top[3 * i + c] + line[c] / size * (0.8 + 0.1 * (double)i);
            }
        }
        lw_frame ref = lwt_frame_identity();
        lwt_machine *m = lwt_kit_struts("complex", 6, base, top, &ref);
        lwt_machine_load(m);
        lw_posture_ask *posture = lwt_posture(m);
        posture->kind = LW_BY_BODIES;
        posture->has_body[1] = true;
        posture->body[1] = lwt_frame_identity();
        const lw_margin_answer *a = lwt_margin(m, posture);
        assert_true(one_class(a, LW_CLASS_FORWARD));
        const lw_weak *lost = &a->singular->drives[0];
        double tol = 1e-15 * a->drives.singular[0] / a->drives.singular[4] * 1e3;
        assert_int_equal(a->singular->n_drives, 1);
        assert_int_equal(lost->screw.kind, pitch > 0.0 ? LW_SCREW_TWIST : LW_SCREW_TURN);
        on_line(&lost->screw, at, axis, tol);
        if (pitch > 0.0) {
            lwt_near(lost->screw.pitch_m, 2.0 * LWT_PI * pitch, 10.0 * tol);
        }
        lwt_machine_free(m);
    }
}

/* ---- inverse: two-link limbs --------------------------------------------------------------- */

/* Three or four limbs; limb 0 (and 1) stretched (+1) or folded (-1) in the reference posture. */
static lwt_machine *stretched(size_t n, const int *how, double crank, double link)
{
    static const double away[4] = {3.7, 5.6, 0.8, 2.4}; /* towards each shoulder, from the corner */
    static const double plate[8] = {-0.2, -0.15, 0.25, -0.2, 0.2, 0.22, -0.2, 0.2};
    double base[8];
    double theta[4];
    static const int elbow[4] = {1, 1, -1, 1};
    for (size_t i = 0; i < n; i++) {
        double reach = how[i] > 0 ? crank + link : how[i] < 0 ? fabs(crank - link) : 0.9;
        /* Reach exactly: a double root would take the root of the rounding. */
        base[2 * i] = plate[2 * i] + reach * cos(away[i]);
        base[2 * i + 1] = plate[2 * i + 1] + reach * sin(away[i]);
    }
    lwt_machine *m = lwt_machine_new("stretched");
    size_t body = lwt_add_body(m);
    size_t shoulder[4];
    for (size_t i = 0; i < n; i++) {
        const double corner[3] = {plate[2 * i], plate[2 * i + 1], 0};
        const double foot[3] = {base[2 * i], base[2 * i + 1], 0};
        double along = away[i] + LWT_PI;
        theta[i] = how[i] > 0 ? along
                   : how[i] < 0 ? (crank > link ? along : along + LWT_PI)
                                : lwt_two_link(corner[0] - foot[0], corner[1] - foot[1], crank,
                                               link, elbow[i]);
        const double knee[3] = {foot[0] + crank * cos(theta[i]), foot[1] + crank * sin(theta[i]),
                                0};
        size_t first = lwt_add_body(m);
        size_t second = lwt_add_body(m);
        shoulder[i] = lwt_add_revolute(m, 0, first, foot, Z_AXIS);
        (void)lwt_add_revolute(m, first, second, knee, Z_AXIS);
        (void)lwt_add_revolute(m, second, body, corner, Z_AXIS);
    }
    for (size_t i = 0; i < n; i++) {
        (void)lwt_drive_joint(m, shoulder[i]);
    }
    lw_frame tool = lwt_frame_identity();
    (void)lwt_add_tool(m, body, &tool);
    lwt_add_outputs(m, "x y rz");
    m->spec->needs.characteristic_length_m = (lw_figure){.asked = true, .value = 0.5};
    lwt_machine_load(m);
    return m;
}

/* The reference configuration itself: all joints at zero. */
static const lw_margin_answer *at_zero(lwt_machine *m)
{
    lw_posture_ask *posture = lwt_posture(m);
    posture->kind = LW_BY_JOINTS;
    for (size_t c = 0; c < lw_spec_coord_count(m->spec); c++) {
        posture->has_coord[c] = true;
    }
    return lwt_margin(m, posture);
}

/* With the plate at rest a stretched limb's elbow moves across: w1 l1 = (w1 + w2) (-+ l2) ... by
 * hand: crank rate 1, link's absolute rate -l1/l2 (stretched) or +l1/l2 (folded). */
static void check_limb(const lw_weak *w, size_t i, int how, double l1, double l2)
{
    double link = how > 0 ? -l1 / l2 : l1 / l2;
    const double rate[3] = {1.0, link - 1.0, -link};
    double most = 0.0;
    for (size_t k = 0; k < 3; k++) {
        most = fmax(most, fabs(rate[k]));
    }
    double sign = w->coord[3 * i] * rate[0] > 0.0 ? 1.0 : -1.0;
    for (size_t k = 0; k < 3; k++) {
        lwt_near(w->coord[3 * i + k], sign * rate[k] / most, 1e-6);
    }
}

static void stretched_and_folded_limbs(void **state)
{
    (void)state;
    static const double l1 = 0.8;
    static const double l2 = 0.65;
    for (int how = -1; how <= 1; how += 2) {
        const int each[3] = {how, 0, 0};
        lwt_machine *m = stretched(3, each, l1, l2);
        assert_non_null(lwt_finding(m, "reference-singular-inverse"));
        const lw_margin_answer *a = at_zero(m);
        assert_int_equal(a->outcome, LW_OUTCOME_OK);
        lwt_holds(a->reason, "inverse singularity");
        assert_true(one_class(a, LW_CLASS_INVERSE));
        assert_true(a->held);
        assert_true(a->limb_singular[0] && !a->limb_singular[1] && !a->limb_singular[2]);
        const lw_singular_answer *s = a->singular;
        assert_int_equal(s->n_tool, 1);
        assert_true(s->tool[0].lost);
        assert_true(s->tool[0].limb[0] && !s->tool[0].limb[1] && !s->tool[0].limb[2]);
        check_limb(&s->tool[0], 0, how, l1, l2);
        for (size_t c = 3; c < 9; c++) {
            lwt_same(s->tool[0].coord[c], 0.0);
        }
        /* Its own drive moves with it, the others rest. */
        assert_true(fabs(s->tool[0].drive[0]) > 0.1);
        lwt_same(s->tool[0].drive[1], 0.0);
        lwt_same(s->tool[0].drive[2], 0.0);
        /* Lost: shifting along the limb's line through the corner it holds. */
        assert_int_equal(s->tool[0].screw.kind, LW_SCREW_SHIFT);
        on_line(&s->tool[0].screw, (const double[3]){-0.2, -0.15, 0},
                (const double[3]){cos(3.7), sin(3.7), 0}, 1e-6);
        /* The way out is measured at the drives; either way. */
        assert_true(s->leave_tool.known && s->leave_tool.either_way);
        assert_int_equal(s->leave_tool.by, LW_LEAVE_DRIVES);
        assert_true(a->margin[LW_MARGIN_HOLD].value > 0.01);
        lwt_machine_free(m);
    }
}

static void two_stretched_limbs_are_told_apart(void **state)
{
    (void)state;
    const int each[3] = {1, -1, 0};
    lwt_machine *m = stretched(3, each, 0.8, 0.65);
    const lw_margin_answer *a = at_zero(m);
    assert_int_equal(a->tool.rank, 1);
    const lw_singular_answer *s = a->singular;
    assert_int_equal(s->n_tool, 2);
    for (size_t i = 0; i < 2; i++) {
        assert_true(s->tool[i].lost);
        for (size_t limb = 0; limb < 3; limb++) {
            assert_int_equal(s->tool[i].limb[limb], limb == i);
        }
        check_limb(&s->tool[i], i, each[i], 0.8, 0.65);
    }
    /* Both lost directions are of the pencil of the two limbs' lines: wrenches in the plane whose
     * line passes the point where those meet. */
    double d[2][2] = {{cos(3.7), sin(3.7)}, {cos(5.6), sin(5.6)}};
    const double p[2][2] = {{-0.2, -0.15}, {0.25, -0.2}};
    double det = d[0][0] * -d[1][1] + d[1][0] * d[0][1];
    double t = ((p[1][0] - p[0][0]) * -d[1][1] + d[1][0] * (p[1][1] - p[0][1])) / det;
    const double meet[3] = {p[0][0] + t * d[0][0], p[0][1] + t * d[0][1], 0};
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(s->tool[i].screw.kind, LW_SCREW_SHIFT);
        on_line(&s->tool[i].screw, meet, s->tool[i].screw.axis, 1e-6);
    }
    lwt_machine_free(m);
}

/* Four limbs, one stretched: that limb's drive alone moves in its self-motion, so that without it
 * the limb flops: it is indispensable, the machine still held. The others stay spare. */
static void a_posture_that_spends_the_spare_drive(void **state)
{
    (void)state;
    const int each[4] = {0, 0, 1, 0};
    lwt_machine *m = stretched(4, each, 0.8, 0.65);
    const lw_margin_answer *a = at_zero(m);
    assert_int_equal(a->outcome, LW_OUTCOME_OK);
    lwt_holds(a->reason, "no longer spare");
    assert_true(a->held);
    const lw_singular_answer *s = a->singular;
    for (size_t d = 0; d < 4; d++) {
        assert_int_equal(s->no_longer_spare[d], d == 2);
        assert_int_equal(a->indispensable[d], d == 2);
        assert_int_equal(s->freedoms_braked[d], 2);
        assert_true(s->hold_braked[d] > 0.01);
    }
    lwt_near(a->spare_hold, 0.0, 1e-6);
    assert_int_equal(a->spare_hold_drive, 2);
    /* Preload of that drive vanishes there. */
    assert_int_equal(s->n_preload, 1);
    lwt_near(s->preload[0][2], 0.0, 1e-6);
    double size = 0.0;
    for (size_t d = 0; d < 4; d++) {
        size += s->preload[0][d] * s->preload[0][d];
    }
    lwt_near(size, 1.0, 1e-12);
    assert_true(s->tool[0].limb[2]);
    lwt_machine_free(m);
}

/* ---- inverse: arms ------------------------------------------------------------------------- */

static const lw_margin_answer *arm_at(lwt_machine *m, const double *theta, const double *ref)
{
    lw_posture_ask *posture = lwt_posture(m);
    posture->kind = LW_BY_JOINTS;
    for (size_t i = 0; i < 6; i++) {
        posture->has_coord[i] = true;
        posture->coord[i] = theta[i] - ref[i];
    }
    return lwt_margin(m, posture);
}

/* Axes at joint angles, from the table's own steps: z axis and origin of the frame before. */
static void axes_at(const lwt_table *t, const double *theta, double axis[6][3], double at[6][3])
{
    lw_frame f = lwt_frame_identity();
    for (size_t i = 0; i < 6; i++) {
        lwt_frame_vector(axis[i], &f, Z_AXIS);
        memcpy(at[i], f.pos_m, sizeof at[i]);
        lw_frame step = lwt_dh_distal(t->a[i], t->alpha[i], t->d[i], theta[i]);
        f = lwt_frame_mul(&f, &step);
    }
}

/* The lost wrench does no work on any joint. */
static void check_reciprocal(const lw_screw *w, double axis[6][3], double at[6][3])
{
    for (size_t i = 0; i < 6; i++) {
        double arm[3];
        double v[3];
        for (size_t c = 0; c < 3; c++) {
            arm[c] = w->point_m[c] - at[i][c];
        }
        lwt_cross(v, axis[i], arm);
        double shift = lwt_dot(v, w->axis);
        double turn = lwt_dot(axis[i], w->axis);
        double pitch = w->pitch_m / (2.0 * LWT_PI);
        if (w->kind == LW_SCREW_TURN) {
            lwt_near(turn, 0.0, 1e-6);
        } else {
            lwt_near(shift + pitch * turn, 0.0, 1e-6);
        }
    }
}

static void singularities_of_a_wrist_arm(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("corke-2011/cases.json");
    cJSON_Delete(file);
    /* P. Corke, Robotics, Vision and Control: a2 = 0.4318, a3 = 0.0203, d3 = 0.15005, d4 = 0.4318
     * m; |det J| = |a2 (d4 cos t3 + a3 sin t3) (a2 cos t2 - d4 sin(t2+t3) + a3 cos(t2+t3)) sin t5|,
     * so elbow: tan t3 = -d4/a3, shoulder: the second bracket, wrist: t5 = 0. */
    static const lwt_table table = {
        .n = 6,
        .a = {0, 0.4318, 0.0203, 0, 0, 0},
        .alpha = {LWT_PI / 2, 0, -LWT_PI / 2, LWT_PI / 2, -LWT_PI / 2, 0},
        .d = {0, 0, 0.15005, 0.4318, 0, 0},
    };
    static const double ref[6] = {0.2, 0.5, 2.8, 0.3, 0.9, -0.2};
    double elbow = atan2(-0.4318, 0.0203);
    /* a2 cos t2 = d4 sin(t2 + t3) - a3 cos(t2 + t3) at t3 = 2.6: one equation in tan t2. */
    double t3 = 2.6;
    double shoulder = atan2(0.4318 - 0.4318 * sin(t3) + 0.0203 * cos(t3),
                            0.4318 * cos(t3) + 0.0203 * sin(t3));
    const double at[3][6] = {{0.4, 0.7, elbow, 0.6, 0.8, 0.1},
                             {0.4, shoulder, t3, 0.6, 0.8, 0.1},
                             {0.4, 0.7, 2.6, 0.6, 0.0, 0.1}};
    lwt_machine *m = lwt_kit_arm("wrist-arm", &table, ref, "x y z rx ry rz");
    lwt_machine_load(m);
    for (size_t k = 0; k < 3; k++) {
        double axis[6][3];
        double point[6][3];
        const lw_margin_answer *a = arm_at(m, at[k], ref);
        axes_at(&table, at[k], axis, point);
        assert_true(one_class(a, LW_CLASS_INVERSE));
        assert_int_equal(a->tool.rank, 5);
        const lw_weak *lost = &a->singular->tool[0];
        check_reciprocal(&lost->screw, axis, point);
        /* The joints named move with the tool at rest: their screws cancel. */
        double sum[6] = {0};
        for (size_t i = 0; i < 6; i++) {
            double v[3];
            lwt_cross(v, point[i], axis[i]);
            for (size_t c = 0; c < 3; c++) {
                sum[c] += lost->coord[i] * v[c];
                sum[3 + c] += lost->coord[i] * axis[i][c];
            }
        }
        lwt_near_n(sum, (const double[6]){0}, 6, 1e-6);
        assert_true(a->singular->leave_tool.known);
        if (k == 2) { /* wrist: axes 4 and 6 against each other, no other */
            lwt_near(fabs(lost->coord[3]), 1.0, 1e-6);
            lwt_near(lost->coord[5], -lost->coord[3], 1e-6);
            for (size_t i = 0; i < 6; i++) {
                assert_true(i == 3 || i == 5 || fabs(lost->coord[i]) < 1e-6);
            }
        } else if (k == 1) { /* shoulder: axis 1 moves the wrist centre in the arm's own plane */
            assert_true(fabs(lost->coord[0]) > 0.1);
            /* lost: shifting the wrist centre square to the arm's plane */
            assert_int_equal(lost->screw.kind, LW_SCREW_SHIFT);
            on_line(&lost->screw, point[4], axis[1], 1e-6);
        } else { /* elbow: shoulder and elbow of the arm stretched, wrist turned along */
            lwt_near(lost->coord[0], 0.0, 1e-6);
            double line[3];
            double from_first[3];
            for (size_t c = 0; c < 3; c++) {
                line[c] = point[4][c] - point[1][c];
                from_first[c] = point[4][c] - point[0][c];
            }
            /* lost: a shift of the wrist centre that axes 2 and 3 (in one plane with it) do not
             * make, nor axis 1: square to that plane's normal and to the motion by axis 1 */
            double normal[3];
            double by_first[3];
            assert_int_equal(lost->screw.kind, LW_SCREW_SHIFT);
            lwt_cross(normal, axis[1], line);
            lwt_cross(by_first, axis[0], from_first);
            lwt_cross(line, normal, by_first);
            on_line(&lost->screw, point[4], line, 1e-6);
        }
    }
    /* Wrist and elbow at once, axis 5 along axes 2 and 3, or the arm's turn would stand in for the
     * wrist's: two are lost, both named. */
    const double both[6] = {0.4, 0.7, elbow, 0.0, 0.0, 0.1};
    const lw_margin_answer *a = arm_at(m, both, ref);
    assert_int_equal(a->tool.rank, 4);
    assert_int_equal(a->singular->n_tool, 2);
    double axis[6][3];
    double point[6][3];
    axes_at(&table, both, axis, point);
    for (size_t i = 0; i < 2; i++) {
        assert_true(a->singular->tool[i].lost);
        check_reciprocal(&a->singular->tool[i].screw, axis, point);
    }
    lwt_machine_free(m);
}

/* ---- constraints --------------------------------------------------------------------------- */

/* Cranks of length 0.3 at (0, 0) and (1, 0), coupler of length 1, all on one line. */
static lwt_machine *flat_parallelogram(bool both)
{
    lwt_machine *m = lwt_machine_new("parallelogram");
    size_t left = lwt_add_body(m);
    size_t coupler = lwt_add_body(m);
    size_t right = lwt_add_body(m);
    size_t first = lwt_add_revolute(m, 0, left, (const double[3]){0, 0, 0}, Z_AXIS);
    (void)lwt_add_revolute(m, left, coupler, (const double[3]){0.3, 0, 0}, Z_AXIS);
    (void)lwt_add_revolute(m, coupler, right, (const double[3]){1.3, 0, 0}, Z_AXIS);
    size_t last = lwt_add_revolute(m, 0, right, (const double[3]){1, 0, 0}, Z_AXIS);
    (void)lwt_drive_joint(m, first);
    if (both) {
        (void)lwt_drive_joint(m, last);
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0.3, 0, 0}, 0, 0, 0);
    (void)lwt_add_tool(m, left, &tool);
    lwt_add_output_coord(m, lwt_coord(m, first, 0));
    return m;
}

static void a_flat_parallelogram_gains_a_freedom(void **state)
{
    (void)state;
    for (int both = 0; both < 2; both++) {
        lwt_machine *m = flat_parallelogram(both == 1);
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, 1);
        assert_non_null(lwt_finding(m, "reference-singular-constraint"));
        const lw_margin_answer *a = at_zero(m);
        assert_true((a->classes & LW_CLASS_CONSTRAINT) != 0);
        assert_int_equal(a->singular->freedoms, 2);
        assert_int_equal(a->closure.rank + 1, a->closure.rank_generic);
        if (both == 0) {
            /* One driven crank: the rest moves about it, the other crank and the coupler. */
            assert_int_equal(a->outcome, LW_OUTCOME_SINGULAR);
            lwt_holds(a->reason, "constraint singularity");
            assert_false(a->held);
            assert_true((a->classes & LW_CLASS_FORWARD) != 0);
            lwt_near(a->margin[LW_MARGIN_HOLD].value, 0.0, 1e-9);
            const lw_weak *lost = &a->singular->drives[0];
            assert_true(lost->lost);
            lwt_near(lost->coord[0], 0.0, 1e-9);
            /* Coupler turns about the left pin: 1 against -1.3/0.3 = ... of the far crank; by hand:
             * far pin moves 1.0 w = 0.3 w3. */
            double w = lost->coord[1];
            lwt_near(lost->coord[3], w / 0.3, 1e-9);
            assert_int_equal(lost->screw.kind, LW_SCREW_NONE); /* the tool sits on the left crank */
        } else {
            /* Two driven cranks hold both freedoms. */
            assert_int_equal(a->outcome, LW_OUTCOME_OK);
            lwt_holds(a->reason, "the drives hold it");
            assert_true(a->held);
            assert_true(a->margin[LW_MARGIN_HOLD].value > 0.1);
        }
        lwt_machine_free(m);
    }
}

/* Three limbs universal-prismatic-universal, base axes tangential: each limb withholds one couple,
 * square to both of its universal axes, which is along the leg. Three legs in one plane: the
 * couples leave the turn about that plane's normal; the platform gains it. The legs' forces then
 * also lie in the plane and meet, so that the drives hold neither that turn nor the shift along
 * the normal. */
static void legs_in_a_plane_free_the_platform(void **state)
{
    (void)state;
    lwt_machine *m = lwt_machine_new("three-upu");
    size_t plate = lwt_add_body(m);
    size_t slide[3];
    for (size_t i = 0; i < 3; i++) {
        double angle = 120.0 * LWT_DEG * (double)i;
        const double radial[3] = {cos(angle), sin(angle), 0};
        const double tangent[3] = {-sin(angle), cos(angle), 0};
        const double foot[3] = {radial[0], radial[1], 0};
        const double head[3] = {0.4 * radial[0], 0.4 * radial[1], 0};
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        (void)lwt_add_universal(m, 0, lower, foot, tangent, Z_AXIS);
        slide[i] = lwt_add_prismatic(m, lower, upper, radial);
        (void)lwt_add_universal(m, upper, plate, head, Z_AXIS, tangent);
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    lw_frame tool = lwt_frame_identity();
    (void)lwt_add_tool(m, plate, &tool);
    lwt_add_outputs(m, "x y z");
    m->spec->needs.characteristic_length_m = (lw_figure){.asked = true, .value = 0.5};
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 3);
    const lw_margin_answer *a = at_zero(m);
    assert_true((a->classes & LW_CLASS_CONSTRAINT) != 0);
    assert_true((a->classes & LW_CLASS_FORWARD) != 0);
    assert_int_equal(a->singular->freedoms, 4);
    assert_int_equal(a->singular->n_drives, 2);
    for (size_t k = 0; k < 2; k++) {
        const lw_screw *screw = &a->singular->drives[k].screw;
        lwt_near(fabs(screw->axis[2]), 1.0, 1e-6);
        if (screw->kind != LW_SCREW_SHIFT) {
            on_line(screw, (const double[3]){0, 0, 0}, Z_AXIS, 1e-6);
        }
    }
    lwt_machine_free(m);
}

/* ---- architecture -------------------------------------------------------------------------- */

/* Base and platform similar regular hexagons, corner to corner: singular at every pose (Ma &
 * Angeles, Architecture singularities of platform manipulators, ICRA 1991; from memory, see
 * tests/cases/ma-angeles-1991). Found when loaded, and at a posture. */
static void similar_hexagons_are_found_at_load(void **state)
{
    (void)state;
    double base[18];
    double top[18];
    for (size_t i = 0; i < 6; i++) {
        double angle = 60.0 * LWT_DEG * (double)i;
        const double c[3] = {cos(angle), sin(angle), 0};
        for (size_t k = 0; k < 3; k++) {
            base[3 * i + k] = c[k];
            top[3 * i + k] = 0.5 * c[k];
        }
    }
    lw_frame ref = lwt_frame_zyx((const double[3]){0.1, -0.05, 0.9}, 0.2, 0.1, -0.15);
    lwt_machine *m = lwt_kit_struts("hexagons", 6, base, top, &ref);
    lwt_machine_load(m);
    const lw_finding *found = lwt_finding(m, "drives-do-not-hold");
    assert_non_null(found);
    assert_int_equal(found->severity, LW_WARNING);
    lwt_holds(found->text, "5 of 6");
    const lw_margin_answer *a = at_reference(m);
    assert_true((a->classes & LW_CLASS_FORWARD) != 0);
    assert_int_equal(a->singular->n_drives, 1);
    /* At every pose: hold has no direction in which it grows. */
    assert_false(a->singular->leave_drives.known);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(three_lines_through_a_point_leave_a_turn),
        cmocka_unit_test(three_parallel_lines_leave_a_shift),
        cmocka_unit_test(six_struts_in_a_complex_leave_its_screw),
        cmocka_unit_test(stretched_and_folded_limbs),
        cmocka_unit_test(two_stretched_limbs_are_told_apart),
        cmocka_unit_test(a_posture_that_spends_the_spare_drive),
        cmocka_unit_test(singularities_of_a_wrist_arm),
        cmocka_unit_test(a_flat_parallelogram_gains_a_freedom),
        cmocka_unit_test(legs_in_a_plane_free_the_platform),
        cmocka_unit_test(similar_hexagons_are_found_at_load),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
