/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mechanisms of many kinds, see lwt_subjects.h. */
#include "lwt_subjects.h"

#include <math.h>

#include "lwt_kit.h"

static const double X_AXIS[3] = {1, 0, 0};
static const double Y_AXIS[3] = {0, 1, 0};
static const double Z_AXIS[3] = {0, 0, 1};
static const double ORIGIN[3] = {0, 0, 0};

static const double SQUARE_BASE[8] = {-1, -1, 1, -1, 1, 1, -1, 1};
static const double SQUARE_PLATE[8] = {-0.25, -0.2, 0.3, -0.25, 0.25, 0.22, -0.2, 0.25};

static lwt_machine *make_three_rrr(void)
{
    double theta[3];
    return lwt_kit_planar_rrr("three-rrr", 3, SQUARE_BASE, SQUARE_PLATE, 0.8, 0.75,
                              (const double[3]){0.03, 0.02, 0.6}, (const int[3]){1, 1, 1}, theta);
}

static lwt_machine *make_four_rrr(void)
{
    double theta[4];
    return lwt_kit_planar_rrr("four-rrr", 4, SQUARE_BASE, SQUARE_PLATE, 0.8, 0.75,
                              (const double[3]){0.03, 0.02, 0.1}, (const int[4]){1, 1, -1, 1},
                              theta);
}

static lwt_machine *make_planar_struts(void)
{
    static const double base[6] = {-1, -0.8, 1.1, -0.7, 0.1, 1.2};
    static const double plate[6] = {-0.3, -0.1, 0.35, -0.15, 0.05, 0.3};
    return lwt_kit_planar_struts("planar-struts", base, plate, (const double[3]){0.05, 0.1, -1.3});
}

static lwt_machine *make_five_bar(void)
{
    double theta[2];
    return lwt_kit_pin_arms("five-bar", 2, (const double[4]){0, 0, 0.4, 0.05},
                            (const double[2]){0.3, 0.32}, (const double[2]){0.4, 0.38},
                            (const double[2]){0.22, 0.5}, (const int[2]){1, -1}, theta);
}

static lwt_machine *make_six_struts(void)
{
    static const double foot_deg[6] = {10, 110, 130, 230, 250, 350};
    static const double top_deg[6] = {50, 70, 170, 190, 290, 310};
    double base[18];
    double top[18];
    for (size_t i = 0; i < 6; i++) {
        base[3 * i] = cos(foot_deg[i] * LWT_DEG);
        base[3 * i + 1] = sin(foot_deg[i] * LWT_DEG);
        base[3 * i + 2] = 0.03 * (double)i;
        top[3 * i] = 0.6 * cos(top_deg[i] * LWT_DEG);
        top[3 * i + 1] = 0.6 * sin(top_deg[i] * LWT_DEG);
        top[3 * i + 2] = -0.02 * (double)i;
    }
    lw_frame ref = lwt_frame_zyx((const double[3]){0.05, -0.04, 1.1}, 0.1, 0.05, -0.08);
    return lwt_kit_struts("six-struts", 6, base, top, &ref);
}

static lwt_machine *make_delta(void)
{
    static const double angle[3] = {0, 120.0 * LWT_DEG, 240.0 * LWT_DEG};
    double crank[3];
    return lwt_kit_delta("delta", 0.2, 0.06, 0.35, 0.8, 0.04, angle,
                         (const double[3]){0.05, -0.03, -0.75}, crank);
}

/* Three rails with carriages, a pair of rods from each. */
static lwt_machine *make_rails(void)
{
    lwt_machine *m = lwt_machine_new("rails");
    size_t hand = lwt_add_body(m);
    size_t carriage[3];
    size_t slide[3];
    for (size_t i = 0; i < 3; i++) {
        carriage[i] = lwt_add_body(m);
        slide[i] = lwt_add_prismatic(m, 0, carriage[i], Z_AXIS);
    }
    for (size_t i = 0; i < 3; i++) {
        double c = cos(120.0 * LWT_DEG * (double)i);
        double s = sin(120.0 * LWT_DEG * (double)i);
        for (int k = -1; k <= 1; k += 2) {
            double w = 0.05 * k;
            const double top[3] = {0.4 * c - w * s, 0.4 * s + w * c, 0.5};
            const double end[3] = {0.02 + 0.1 * c - w * s, 0.01 + 0.1 * s + w * c, 0.0};
            (void)lwt_add_rod(m, carriage[i], top, hand, end);
        }
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0.02, 0.01, 0.0}, 0, 0, 0);
    (void)lwt_add_tool(m, hand, &tool);
    lwt_add_outputs(m, "x y z");
    return m;
}

/* Two sets of three parallel hinges at right angles. */
static lwt_machine *make_sarrus(void)
{
    lwt_machine *m = lwt_machine_new("sarrus");
    size_t plate = lwt_add_body(m);
    size_t first = 0;
    for (size_t i = 0; i < 2; i++) {
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        double at[3][3] = {{0, 0, 0}, {0, 0, 0.5}, {0, 0, 1.0}};
        at[0][i] = 0.4;
        at[1][i] = 0.9;
        at[2][i] = 0.4;
        const double *axis = i == 0 ? Y_AXIS : X_AXIS;
        size_t hinge = lwt_add_revolute(m, 0, lower, at[0], axis);
        (void)lwt_add_revolute(m, lower, upper, at[1], axis);
        (void)lwt_add_revolute(m, upper, plate, at[2], axis);
        first = i == 0 ? hinge : first;
    }
    (void)lwt_drive_joint(m, first);
    (void)lwt_add_tool(m, plate, NULL);
    lwt_add_outputs(m, "z");
    return m;
}

static lwt_machine *make_wrist_arm(void)
{
    lwt_table table = {.n = 6,
                       .a = {0.15, 0.61, 0.11, 0, 0, 0},
                       .alpha = {-90 * LWT_DEG, 0, -90 * LWT_DEG, 90 * LWT_DEG, -90 * LWT_DEG, 0},
                       .d = {0.45, 0, 0, 0.66, 0, 0.12}};
    static const double ref[6] = {0.2, -1.0, 0.3, 0.4, 0.8, -0.3};
    return lwt_kit_arm("wrist-arm", &table, ref, "x y z rx ry rz");
}

static lwt_machine *make_skew_arm(void)
{
    lwt_table table = {.n = 6,
                       .a = {0.3, 0.2, 0.25, 0.1, 0.22, 0.17},
                       .alpha = {0.6, -1.2, 1.9, 0.8, -1.1, 0.3},
                       .d = {0.1, -0.12, 0.2, 0.31, -0.05, 0.09}};
    static const double ref[6] = {0.2, -1.0, 0.3, 0.4, 0.8, -0.3};
    return lwt_kit_arm("skew-arm", &table, ref, "x y z rx ry rz");
}

/* An open chain of the joints with several freedoms; every coordinate is driven and is an
 * output. */
static lwt_machine *make_open_chain(void)
{
    lwt_machine *m = lwt_machine_new("open-chain");
    size_t a = lwt_add_body(m);
    size_t b = lwt_add_body(m);
    size_t c = lwt_add_body(m);
    size_t d = lwt_add_body(m);
    size_t joint[4];
    joint[0] = lwt_add_cylindrical(m, 0, a, (const double[3]){0.1, 0.2, 0}, X_AXIS);
    joint[1] = lwt_add_universal(m, a, b, (const double[3]){0.3, 0.1, 0.2}, Y_AXIS,
                                 (const double[3]){1, 0, 1});
    joint[2] = lwt_add_planar(m, b, c, (const double[3]){0.5, 0, 0.3}, (const double[3]){1, 1, 0},
                              Z_AXIS);
    joint[3] = lwt_add_helical(m, c, d, (const double[3]){0.6, 0.1, 0.3},
                               (const double[3]){0.2, 1, 0.4}, 0.05);
    for (size_t i = 0; i < 4; i++) {
        for (size_t p = 0; p < lw_joint_coords(m->spec->joint[joint[i]].type); p++) {
            (void)lwt_add_drive(m, lwt_coord(m, joint[i], p));
        }
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0.7, 0.2, 0.4}, 0.3, 0.2, 0.1);
    (void)lwt_add_tool(m, d, &tool);
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        lwt_add_output_coord(m, m->spec->drive[i].term[0].coord);
    }
    return m;
}

/* Four skew lines, one revolute and three cylindrical joints: the general closed loop of one
 * freedom. */
static lwt_machine *make_cylinder_loop(void)
{
    lwt_machine *m = lwt_machine_new("cylinder-loop");
    size_t a = lwt_add_body(m);
    size_t b = lwt_add_body(m);
    size_t c = lwt_add_body(m);
    size_t input = lwt_add_revolute(m, 0, a, ORIGIN, Z_AXIS);
    (void)lwt_add_cylindrical(m, a, b, (const double[3]){0.3, 0.1, 0.1},
                              (const double[3]){0.2, 0.4, 1});
    (void)lwt_add_cylindrical(m, b, c, (const double[3]){0.9, 0.5, 0.2},
                              (const double[3]){-0.5, 0.6, 1});
    size_t last = lwt_add_cylindrical(m, 0, c, (const double[3]){0.8, -0.2, 0},
                                      (const double[3]){0.5, 0, 1});
    (void)lwt_drive_joint(m, input);
    (void)lwt_add_tool(m, c, NULL);
    lwt_add_output_coord(m, lwt_coord(m, last, 0));
    return m;
}

/* Revolute, two balls, revolute: the coupler's own spin is idle. */
static lwt_machine *make_ball_loop(void)
{
    lwt_machine *m = lwt_machine_new("ball-loop");
    size_t crank = lwt_add_body(m);
    size_t coupler = lwt_add_body(m);
    size_t rocker = lwt_add_body(m);
    size_t input = lwt_add_revolute(m, 0, crank, ORIGIN, Z_AXIS);
    (void)lwt_add_spherical(m, crank, coupler, (const double[3]){0.1, 0.05, 0.2});
    (void)lwt_add_spherical(m, coupler, rocker, (const double[3]){0.7, 0.3, 0.4});
    size_t output = lwt_add_revolute(m, 0, rocker, (const double[3]){0.8, 0, 0.1},
                                     (const double[3]){1, 0.1, 0.2});
    (void)lwt_drive_joint(m, input);
    (void)lwt_add_tool(m, rocker, NULL);
    lwt_add_output_coord(m, lwt_coord(m, output, 0));
    return m;
}

/* Revolute, slide, ball on three legs: height and two tilts, with their small sideways motions. The
 * outputs are the feet's turns, so that no axis of space is named. */
static lwt_machine *make_three_rps(void)
{
    size_t hinge[3];
    size_t plate;
    lwt_machine *m = lwt_kit_three_rps(0.1, &plate, hinge);
    (void)lwt_add_tool(m, plate, NULL);
    for (size_t i = 0; i < 3; i++) {
        lwt_add_output_coord(m, lwt_coord(m, hinge[i], 0));
    }
    return m;
}

/* A driven shaft turns two others by gears, one of them a crank with a slider. */
static lwt_machine *make_gears(void)
{
    lwt_machine *m = lwt_machine_new("gears");
    size_t shaft = lwt_add_body(m);
    size_t crank = lwt_add_body(m);
    size_t rod = lwt_add_body(m);
    size_t slider = lwt_add_body(m);
    size_t rack = lwt_add_body(m);
    size_t a = lwt_add_revolute(m, 0, shaft, (const double[3]){-0.3, 0, 0}, Z_AXIS);
    size_t b = lwt_add_revolute(m, 0, crank, ORIGIN, Z_AXIS);
    (void)lwt_add_revolute(m, crank, rod, (const double[3]){0.1, 0.15, 0}, Z_AXIS);
    (void)lwt_add_revolute(m, rod, slider, (const double[3]){0.6, 0, 0}, Z_AXIS);
    size_t s = lwt_add_prismatic(m, 0, slider, X_AXIS);
    size_t r = lwt_add_prismatic(m, 0, rack, Y_AXIS);
    (void)lwt_add_coupling(m, lwt_coord(m, a, 0), 2.0, lwt_coord(m, b, 0), 3.0);
    (void)lwt_add_coupling(m, lwt_coord(m, b, 0), 0.05, lwt_coord(m, r, 0), -1.0);
    (void)lwt_drive_joint(m, a);
    (void)lwt_add_tool(m, slider, NULL);
    lwt_add_output_coord(m, lwt_coord(m, s, 0));
    return m;
}

/* Two nuts held against each other by a guide and one spindle in both, on an xy stage. */
static lwt_machine *make_spindle(void)
{
    lwt_machine *m = lwt_machine_new("spindle");
    size_t cross = lwt_add_body(m);
    size_t upper = lwt_add_body(m);
    size_t lower = lwt_add_body(m);
    size_t spindle = lwt_add_body(m);
    size_t x = lwt_add_prismatic(m, 0, cross, X_AXIS);
    size_t z1 = lwt_add_prismatic(m, cross, upper, Z_AXIS);
    size_t z2 = lwt_add_prismatic(m, cross, lower, Z_AXIS);
    size_t h = lwt_add_helical(m, upper, spindle, (const double[3]){0.1, 0, 0}, Z_AXIS, 0.016);
    (void)lwt_add_helical(m, lower, spindle, (const double[3]){0.1, 0, -0.2}, Z_AXIS, 0.012);
    (void)lwt_drive_joint(m, x);
    (void)lwt_drive_joint(m, z1);
    (void)lwt_drive_joint(m, z2);
    lw_frame tool = lwt_frame_zyx((const double[3]){0.1, 0, -0.4}, 0, 0, 0);
    (void)lwt_add_tool(m, spindle, &tool);
    lwt_add_outputs(m, "x z");
    lwt_add_output_coord(m, lwt_coord(m, h, 0));
    return m;
}

/* One stage of the two: carriages on three columns, a pair of rods from each to a plate. */
static void add_stage_rods(lwt_machine *m, size_t plate, const size_t carriage[3], double column_m,
                           double plate_m, double rod_m, double height_m)
{
    double rise = sqrt(rod_m * rod_m - (column_m - plate_m) * (column_m - plate_m));
    for (size_t i = 0; i < 3; i++) {
        double c = cos(120.0 * LWT_DEG * (double)i);
        double s = sin(120.0 * LWT_DEG * (double)i);
        for (int k = -1; k <= 1; k += 2) {
            double w = 0.05 * k;
            const double top[3] = {column_m * c - w * s, column_m * s + w * c, height_m + rise};
            const double end[3] = {plate_m * c - w * s, plate_m * s + w * c, height_m};
            (void)lwt_add_rod(m, carriage[i], top, plate, end);
        }
    }
}

/* Two plates on one guide, each hung from three carriages; both engage one spindle with different
 * leads: six drives for x, y, z and the spindle's turn. */
static lwt_machine *make_two_stages(void)
{
    lwt_machine *m = lwt_machine_new("two-stages");
    size_t upper = lwt_add_body(m);
    size_t lower = lwt_add_body(m);
    size_t spindle = lwt_add_body(m);
    size_t carriage[6];
    size_t slide[6];
    for (size_t i = 0; i < 6; i++) {
        carriage[i] = lwt_add_body(m);
        slide[i] = lwt_add_prismatic(m, 0, carriage[i], Z_AXIS);
    }
    (void)lwt_add_prismatic(m, upper, lower, Z_AXIS);
    size_t turn = lwt_add_helical(m, upper, spindle, (const double[3]){0, 0, 0.3}, Z_AXIS, 0.02);
    (void)lwt_add_helical(m, lower, spindle, ORIGIN, Z_AXIS, 0.012);
    add_stage_rods(m, upper, carriage, 0.55, 0.38, 0.27, 0.3);
    add_stage_rods(m, lower, carriage + 3, 0.55, 0.16, 0.52, 0.0);
    for (size_t i = 0; i < 6; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0, 0, -0.2}, 0, 0, 0);
    (void)lwt_add_tool(m, spindle, &tool);
    lwt_add_outputs(m, "x y z");
    lwt_add_output_coord(m, lwt_coord(m, turn, 0));
    return m;
}

/* Six driven carriages or cranks, one rod each, to a platform with six freedoms: 64 inverse
 * solutions. */
static lwt_machine *make_six_rods(bool cranks)
{
    static const double foot_deg[6] = {5, 115, 125, 235, 245, 355};
    static const double top_deg[6] = {45, 75, 165, 195, 285, 315};
    lwt_machine *m = lwt_machine_new(cranks ? "six-cranks" : "six-rails");
    lw_frame ref = lwt_frame_zyx((const double[3]){0.02, -0.01, 0.8}, 0.05, 0.04, -0.03);
    size_t plate = lwt_add_body(m);
    size_t mover[6];
    size_t joint[6];
    double tip[6][3];
    for (size_t i = 0; i < 6; i++) {
        double c = cos(foot_deg[i] * LWT_DEG);
        double s = sin(foot_deg[i] * LWT_DEG);
        mover[i] = lwt_add_body(m);
        if (cranks) {
            double t = 0.4 + 0.1 * (double)i; /* the crank's rise */
            joint[i] = lwt_add_revolute(m, 0, mover[i], (const double[3]){0.7 * c, 0.7 * s, 0},
                                        (const double[3]){-s, c, 0.1 * (double)(i % 2)});
            tip[i][0] = (0.7 + 0.25 * cos(t)) * c;
            tip[i][1] = (0.7 + 0.25 * cos(t)) * s;
            tip[i][2] = 0.25 * sin(t);
        } else {
            joint[i] = lwt_add_prismatic(m, 0, mover[i], (const double[3]){-0.3 * c, -0.3 * s, 1});
            tip[i][0] = 0.8 * c;
            tip[i][1] = 0.8 * s;
            tip[i][2] = 0.1 * (double)(i % 3);
        }
    }
    for (size_t i = 0; i < 6; i++) {
        const double local[3] = {0.3 * cos(top_deg[i] * LWT_DEG), 0.3 * sin(top_deg[i] * LWT_DEG),
                                 0.02 * (double)i};
        double top[3];
        lwt_frame_point(top, &ref, local);
        (void)lwt_add_rod(m, mover[i], tip[i], plate, top);
    }
    for (size_t i = 0; i < 6; i++) {
        (void)lwt_drive_joint(m, joint[i]);
    }
    (void)lwt_add_tool(m, plate, &ref);
    lwt_add_outputs(m, "x y z rx ry rz");
    return m;
}

static lwt_machine *make_six_rails(void)
{
    return make_six_rods(false);
}

static lwt_machine *make_six_cranks(void)
{
    return make_six_rods(true);
}

/* A wrist of skew twists on an arm with every offset there is. */
static lwt_machine *make_offset_arm(void)
{
    lwt_table table = {.n = 6,
                       .a = {0.12, 0.5, 0.09, 0, 0, 0},
                       .alpha = {-90 * LWT_DEG, 0, 90 * LWT_DEG, -70 * LWT_DEG, 65 * LWT_DEG, 0},
                       .d = {0.4, 0.15, -0.06, 0.55, 0, 0.1}};
    static const double ref[6] = {0.2, -1.0, 0.3, 0.4, 0.8, -0.3};
    return lwt_kit_arm("offset-arm", &table, ref, "x y z rx ry rz");
}

const lwt_subject lwt_subjects[LWT_SUBJECTS] = {
    {"three-rrr", make_three_rrr, 0.3, true, 1500},
    {"four-rrr", make_four_rrr, 0.15, true, 1500},
    {"planar-struts", make_planar_struts, 0.2, true, 1500},
    {"five-bar", make_five_bar, 0.4, true, 1000},
    {"six-struts", make_six_struts, 0.15, false, 1500},
    {"delta", make_delta, 0.4, false, 1500},
    {"rails", make_rails, 0.1, false, 1500},
    {"sarrus", make_sarrus, 0.5, true, 500},
    {"wrist-arm", make_wrist_arm, 2.5, false, 1500},
    {"offset-arm", make_offset_arm, 2.5, false, 1000},
    {"six-rails", make_six_rails, 0.08, false, 500},
    {"six-cranks", make_six_cranks, 0.2, false, 500},
    {"skew-arm", make_skew_arm, 2.5, false, 1000},
    {"open-chain", make_open_chain, 0.8, false, 1000},
    {"cylinder-loop", make_cylinder_loop, 0.1, false, 500},
    {"ball-loop", make_ball_loop, 0.2, false, 500},
    {"three-upu", lwt_kit_three_upu, 0.12, false, 500},
    {"three-rps", make_three_rps, 0.12, false, 500},
    {"gears", make_gears, 0.6, false, 500},
    {"spindle", make_spindle, 0.05, true, 1000},
    {"two-stages", make_two_stages, 0.06, false, 1000},
};
