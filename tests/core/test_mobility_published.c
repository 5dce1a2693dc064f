/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mobility of linkages where the count of freedoms fails and where it does not: single loops,
 * parallel machines, the seven-bar that moves. The motion is followed as well, with closure checked
 * from the definition of the joints, so that a finite mobility is shown and not only a nullity.
 * Sources: tests/cases/gogu-2005, innocenti-1995, sommese-2001. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

static const double Z_AXIS[3] = {0, 0, 1};

/* Follows the motion by the first drive in small steps; closure holds all the way. */
static void follow(lwt_machine *m, double step, int count, double tol)
{
    lwt_copy kept;
    const double zero[1] = {0.0};
    const lw_forward_answer *forward = lwt_forward(m, zero, NULL);
    lwt_keep(&kept, m, &forward->solution[0]);
    for (int i = 1; i <= count; i++) {
        const double drive[1] = {step * i};
        lw_config config = lwt_config_of(&kept);
        forward = lwt_forward(m, drive, lwt_by_config(m, &config));
        const lw_solution *solution = &forward->solution[0];
        double position = 0.0;
        double angle = 0.0;
        lwt_closure(m->spec, &solution->config, &position, &angle);
        lwt_near(position, 0.0, tol);
        lwt_near(angle, 0.0, tol);
        lwt_near(solution->drive[0], drive[0], 1e-12);
        lwt_keep(&kept, m, solution);
    }
}

static void single_loops_move_though_counted_stiff(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("gogu-2005/cases.json");
    size_t count = 0;
    const cJSON *loop = NULL;
    cJSON_ArrayForEach(loop, lwt_member(file, "loops"))
    {
        lwt_table table;
        double theta[12];
        lwt_table_read(&table, loop, 1.0);
        assert_int_equal(lwt_numbers(loop, "theta_deg", theta, 12), table.n);
        for (size_t i = 0; i < table.n; i++) {
            theta[i] *= LWT_DEG;
        }
        print_message("%s\n", lwt_text(loop, "name"));
        lwt_machine *m = lwt_machine_new("single-loop");
        lwt_add_loop_distal(m, table.n, table.a, table.alpha, table.d, theta);
        (void)lwt_drive_joint(m, 0);
        (void)lwt_add_tool(m, 1, NULL);
        lwt_add_output_coord(m, lwt_coord(m, 0, 0));
        lwt_machine_load(m);
        assert_int_equal(m->report->mobility, (int)lwt_number(loop, "mobility"));
        assert_int_equal(m->report->mobility_counted, (int)lwt_number(loop, "counted"));
        assert_int_equal(m->report->idle_spins, 0);
        assert_true(m->report->assumes_exact_geometry);
        /* The Bricard trihedral loop turns back at +0.27 rad of its first joint, all others go on
         * past 0.3 either way (followed apart from the core). */
        bool turns_back = strstr(lwt_text(loop, "name"), "trihedral") != NULL;
        follow(m, 0.01, turns_back ? 25 : 30, 1e-11);
        follow(m, -0.01, 30, 1e-11);
        if (turns_back) {
            const double beyond[1] = {0.29};
            lw_forward_ask ask;
            memset(&ask, 0, sizeof ask);
            ask.readings = lwt_by_drives(m, beyond, NULL);
            const lw_forward_answer *answer = NULL;
            assert_int_equal(lw_forward(&answer, m->model, &ask, m->work, &m->err), LW_OK);
            assert_true(answer->outcome == LW_OUTCOME_UNDECIDED ||
                        answer->outcome == LW_OUTCOME_OUT_OF_REACH);
        }
        lwt_machine_free(m);
        count++;
    }
    assert_int_equal(count, 7);
    cJSON_Delete(file);
}

/* ---- parallel machines ----------------------------------------------------------------------- */

static void on_circle(double out[3], double radius, double angle_rad, double z)
{
    out[0] = radius * cos(angle_rad);
    out[1] = radius * sin(angle_rad);
    out[2] = z;
}

static void between(double out[3], const double from[3], const double to[3])
{
    for (size_t i = 0; i < 3; i++) {
        out[i] = to[i] - from[i];
    }
}

/* Six legs universal (or spherical), prismatic, spherical. */
static lwt_machine *six_legs(bool universal_foot)
{
    static const double foot_deg[6] = {10, 110, 130, 230, 250, 350};
    static const double top_deg[6] = {50, 70, 170, 190, 290, 310};
    lwt_machine *m = lwt_machine_new(universal_foot ? "six-ups" : "six-sps");
    size_t plate = lwt_add_body(m);
    size_t slide[6];
    for (size_t i = 0; i < 6; i++) {
        double foot[3];
        double top[3];
        double along[3];
        double first[3];
        double second[3];
        on_circle(foot, 1.0, foot_deg[i] * LWT_DEG, 0.0);
        on_circle(top, 0.6, top_deg[i] * LWT_DEG, 0.9);
        between(along, foot, top);
        lwt_cross(first, along, Z_AXIS);
        lwt_cross(second, along, first);
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        if (universal_foot) {
            (void)lwt_add_universal(m, 0, lower, foot, first, second);
        } else {
            (void)lwt_add_spherical(m, 0, lower, foot);
        }
        slide[i] = lwt_add_prismatic(m, lower, upper, along);
        (void)lwt_add_spherical(m, upper, plate, top);
    }
    for (size_t i = 0; i < 6; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0, 0, 0.9}, 0, 0, 0);
    (void)lwt_add_tool(m, plate, &tool);
    lwt_add_outputs(m, "x y z rx ry rz");
    return m;
}

static lwt_machine *three_rps(void)
{
    size_t hinge[3];
    size_t plate;
    lwt_machine *m = lwt_kit_three_rps(0.0, &plate, hinge);
    lw_frame tool = lwt_frame_zyx((const double[3]){0, 0, 0.8}, 0, 0, 0);
    (void)lwt_add_tool(m, plate, &tool);
    lwt_add_outputs(m, "z rx ry");
    return m;
}

/* Slides along x, y, z, each with three revolutes parallel to its slide. */
static lwt_machine *three_prrr(void)
{
    lwt_machine *m = lwt_machine_new("three-prrr");
    size_t plate = lwt_add_body(m);
    size_t slide[3];
    for (size_t i = 0; i < 3; i++) {
        double axis[3] = {0, 0, 0};
        double at[3][3] = {{0, 0, 0}, {0, 0, 0}, {0, 0, 0}};
        const double in_plane[3][2] = {{0.6, -0.1}, {0.45, 0.3}, {0.1, 0.08}};
        axis[i] = 1.0;
        for (size_t k = 0; k < 3; k++) {
            at[k][i] = 0.1;
            at[k][(i + 1) % 3] = in_plane[k][0];
            at[k][(i + 2) % 3] = in_plane[k][1];
        }
        size_t carriage = lwt_add_body(m);
        size_t inner = lwt_add_body(m);
        size_t outer = lwt_add_body(m);
        slide[i] = lwt_add_prismatic(m, 0, carriage, axis);
        (void)lwt_add_revolute(m, carriage, inner, at[0], axis);
        (void)lwt_add_revolute(m, inner, outer, at[1], axis);
        (void)lwt_add_revolute(m, outer, plate, at[2], axis);
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    (void)lwt_add_tool(m, plate, NULL);
    lwt_add_outputs(m, "x y z");
    return m;
}

/* The Delta-type machine with its rods as bodies of their own between two ball joints. */
static lwt_machine *delta_of_bodies(void)
{
    lwt_machine *m = lwt_machine_new("delta-of-bodies");
    size_t hand = lwt_add_body(m);
    size_t crank[3];
    const double point[3] = {0.05, -0.03, -0.7};
    for (size_t i = 0; i < 3; i++) {
        double angle = 120.0 * LWT_DEG * (double)i;
        double c = cos(angle);
        double s = sin(angle);
        double turn = lwt_delta_crank(0.2, 0.06, 0.35, 0.8, angle, point, -1);
        size_t arm = lwt_add_body(m);
        crank[i] = lwt_add_revolute(m, 0, arm, (const double[3]){0.2 * c, 0.2 * s, 0},
                                    (const double[3]){-s, c, 0});
        double out = 0.2 + 0.35 * cos(turn);
        for (int k = -1; k <= 1; k += 2) {
            double w = 0.04 * k;
            const double knee[3] = {out * c - w * s, out * s + w * c, -0.35 * sin(turn)};
            const double end[3] = {point[0] + 0.06 * c - w * s, point[1] + 0.06 * s + w * c,
                                   point[2]};
            size_t rod = lwt_add_body(m);
            (void)lwt_add_spherical(m, arm, rod, knee);
            (void)lwt_add_spherical(m, rod, hand, end);
        }
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, crank[i]);
    }
    lw_frame tool = lwt_frame_zyx(point, 0, 0, 0);
    (void)lwt_add_tool(m, hand, &tool);
    lwt_add_outputs(m, "x y z");
    return m;
}

/* A coupler on three cranks; the third is parallel to the others and as long, or not. */
static lwt_machine *three_cranks(bool parallel)
{
    static const double foot[3][3] = {{0, 0, 0}, {1, 0, 0}, {1.8, 0.4, 0}};
    lwt_machine *m = lwt_machine_new("three-cranks");
    size_t coupler = lwt_add_body(m);
    for (size_t i = 0; i < 3; i++) {
        double angle = i == 2 && !parallel ? 0.6 : 1.1;
        double length = i == 2 && !parallel ? 0.7 : 0.5;
        const double top[3] = {foot[i][0] + length * cos(angle), foot[i][1] + length * sin(angle),
                               0};
        size_t crank = lwt_add_body(m);
        (void)lwt_add_revolute(m, 0, crank, foot[i], Z_AXIS);
        (void)lwt_add_revolute(m, crank, coupler, top, Z_AXIS);
    }
    (void)lwt_drive_joint(m, 0);
    (void)lwt_add_tool(m, coupler, NULL);
    lwt_add_output_coord(m, lwt_coord(m, 0, 0));
    return m;
}

static lwt_machine *planar_arms(size_t n)
{
    static const double base[8] = {-1, -1, 1, -1, 1, 1, -1, 1};
    static const double platform[8] = {-0.25, -0.25, 0.25, -0.25, 0.25, 0.25, -0.25, 0.25};
    static const double pose[3] = {0.03, 0.02, 0.1};
    const int elbow[4] = {1, 1, 1, 1};
    double theta[4];
    return lwt_kit_planar_rrr(n == 3 ? "three-rrr" : "four-rrr", n, base, platform, 0.8, 0.8, pose,
                              elbow, theta);
}

static lwt_machine *five_bar(void)
{
    static const double base[4] = {0, 0, 0.4, 0};
    static const double first[2] = {0.3, 0.32};
    static const double second[2] = {0.4, 0.38};
    static const double point[2] = {0.22, 0.5};
    const int elbow[2] = {1, -1};
    double theta[2];
    return lwt_kit_pin_arms("five-bar", 2, base, first, second, point, elbow, theta);
}

static lwt_machine *machine_called(const char *name)
{
    static const char *const names[] = {"6-UPS",
                                        "6-SPS",
                                        "3-RPS",
                                        "3-UPU",
                                        "planar 3-RRR",
                                        "planar 4-RRR",
                                        "3-PRRR",
                                        "delta 3-R(SS)2",
                                        "double parallelogram",
                                        "third crank not parallel",
                                        "planar five-bar"};
    size_t which = 0;
    while (which < sizeof names / sizeof names[0] && strcmp(names[which], name) != 0) {
        which++;
    }
    switch (which) {
    case 0:
    case 1:
        return six_legs(which == 0);
    case 2:
        return three_rps();
    case 3:
        return lwt_kit_three_upu();
    case 4:
    case 5:
        return planar_arms(which - 1);
    case 6:
        return three_prrr();
    case 7:
        return delta_of_bodies();
    case 8:
    case 9:
        return three_cranks(which == 8);
    case 10:
        return five_bar();
    default:
        lwt_fail("no machine is built for %s", name);
        return NULL;
    }
}

static size_t freedoms_of(const lw_spec *spec)
{
    size_t sum = 0;
    for (size_t i = 0; i < spec->n_joint; i++) {
        sum += spec->joint[i].type == LW_SPHERICAL ? 3 : lw_joint_coords(spec->joint[i].type);
    }
    return sum;
}

static void parallel_machines_have_the_mobility_of_the_table(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("gogu-2005/cases.json");
    size_t count = 0;
    const cJSON *row = NULL;
    cJSON_ArrayForEach(row, lwt_member(file, "parallel"))
    {
        const char *name = lwt_text(row, "name");
        print_message("%s\n", name);
        lwt_machine *m = machine_called(name);
        /* The table's own columns first: what is built is what is meant. */
        assert_int_equal(m->spec->n_body, (size_t)lwt_number(row, "bodies"));
        assert_int_equal(m->spec->n_joint, (size_t)lwt_number(row, "joints"));
        assert_int_equal(freedoms_of(m->spec), (size_t)lwt_number(row, "freedoms"));
        int mobility = (int)lwt_number(row, "mobility");
        lw_code code = lwt_machine_report(m);
        assert_int_equal(m->report->mobility, mobility);
        assert_int_equal(m->report->mobility_counted, (int)lwt_number(row, "counted"));
        assert_int_equal(m->report->idle_spins, (int)lwt_number(row, "idle_spins"));
        /* A structure that cannot move is refused; everything else is accepted. */
        assert_int_equal(code == LW_OK, mobility > 0);
        lwt_machine_free(m);
        count++;
    }
    assert_int_equal(count, 11);
    cJSON_Delete(file);
}

static void rods_count_as_one_constraint_each(void **state)
{
    (void)state;
    /* The same Delta-type machine by rods: 6 (5 - 1 - 3) + 3 - 6 = 3, no idle spins to report. */
    const double angle[3] = {0, 120.0 * LWT_DEG, 240.0 * LWT_DEG};
    const double point[3] = {0.05, -0.03, -0.7};
    double crank[3];
    lwt_machine *m = lwt_kit_delta("delta", 0.2, 0.06, 0.35, 0.8, 0.04, angle, point, crank);
    lwt_machine_load(m);
    assert_int_equal(m->report->mobility, 3);
    assert_int_equal(m->report->mobility_counted, 3);
    assert_int_equal(m->report->motion, LW_MOTION_3T);
    lwt_machine_free(m);
}

/* ---- the seven-bar --------------------------------------------------------------------------- */

typedef struct vec2 {
    double x, y;
} vec2;

static vec2 link_of(const cJSON *links, const char *name, double turn_rad)
{
    double v[2];
    assert_int_equal(lwt_numbers(links, name, v, 2), 2);
    double c = cos(turn_rad);
    double s = sin(turn_rad);
    return (vec2){c * v[0] - s * v[1], s * v[0] + c * v[1]};
}

static void step(double out[3], const double from[3], vec2 by)
{
    out[0] = from[0] + by.x;
    out[1] = from[1] + by.y;
    out[2] = 0.0;
}

/* Loops a1 t1 + a2 t2 = a0 + a3 t3; a3 t3 + b2 t2 + a5 t5 = b0 + a4 t4; a4 t4 + b5 t5 = c0 + a6 t6.
 * Bodies 1..6 turn by theta 1..6. */
static lwt_machine *seven_bar(const cJSON *links, const double *theta_deg)
{
    double t[7];
    for (size_t i = 0; i < 6; i++) {
        t[i + 1] = theta_deg[i] * LWT_DEG;
    }
    const double origin[3] = {0, 0, 0};
    double ground3[3];
    double ground4[3];
    double ground6[3];
    double at12[3];
    double at23[3];
    double at25[3];
    double at45[3];
    double at56[3];
    double other[3];
    step(ground3, origin, link_of(links, "a0", 0));
    step(ground4, ground3, link_of(links, "b0", 0));
    step(ground6, ground4, link_of(links, "c0", 0));
    step(at12, origin, link_of(links, "a1", t[1]));
    step(at23, at12, link_of(links, "a2", t[2]));
    step(at25, at23, link_of(links, "b2", t[2]));
    step(at45, at25, link_of(links, "a5", t[5]));
    step(at56, at45, link_of(links, "b5", t[5]));
    /* The listed assembly closes all three loops. */
    step(other, ground3, link_of(links, "a3", t[3]));
    lwt_near_n(other, at23, 3, 1e-12);
    step(other, ground4, link_of(links, "a4", t[4]));
    lwt_near_n(other, at45, 3, 1e-12);
    step(other, ground6, link_of(links, "a6", t[6]));
    lwt_near_n(other, at56, 3, 1e-12);

    lwt_machine *m = lwt_machine_new("seven-bar");
    size_t body[7] = {0};
    for (size_t i = 1; i < 7; i++) {
        body[i] = lwt_add_body(m);
    }
    (void)lwt_add_revolute(m, 0, body[1], origin, Z_AXIS);
    (void)lwt_add_revolute(m, body[1], body[2], at12, Z_AXIS);
    (void)lwt_add_revolute(m, body[2], body[3], at23, Z_AXIS);
    (void)lwt_add_revolute(m, 0, body[3], ground3, Z_AXIS);
    (void)lwt_add_revolute(m, body[2], body[5], at25, Z_AXIS);
    (void)lwt_add_revolute(m, body[4], body[5], at45, Z_AXIS);
    (void)lwt_add_revolute(m, 0, body[4], ground4, Z_AXIS);
    (void)lwt_add_revolute(m, body[5], body[6], at56, Z_AXIS);
    (void)lwt_add_revolute(m, 0, body[6], ground6, Z_AXIS);
    /* Along the curve of the special lengths bodies 2 and 3 turn fast against each other, while
     * body 1 is close to its dead points at some of the listed assemblies. */
    (void)lwt_drive_joint(m, 2);
    (void)lwt_add_tool(m, body[2], NULL);
    lwt_add_output_coord(m, lwt_coord(m, 2, 0));
    return m;
}

static size_t each_assembly(const cJSON *links, const cJSON *assemblies, int counted, int mobility)
{
    size_t count = 0;
    const cJSON *assembly = NULL;
    cJSON_ArrayForEach(assembly, assemblies)
    {
        double theta[6];
        for (int i = 0; i < 6; i++) {
            theta[i] = cJSON_GetArrayItem(assembly, i)->valuedouble;
        }
        lwt_machine *m = seven_bar(links, theta);
        lw_code code = lwt_machine_report(m);
        assert_int_equal(m->report->mobility_counted, counted);
        assert_int_equal(m->report->mobility, mobility);
        assert_int_equal(code == LW_OK, mobility > 0);
        if (mobility > 0) {
            lwt_machine_load(m);
            follow(m, 0.004, 20, 1e-11);
        }
        lwt_machine_free(m);
        count++;
    }
    return count;
}

static void seven_bar_of_generic_lengths_is_a_structure(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("innocenti-1995/cases.json");
    assert_int_equal(each_assembly(lwt_member(file, "links"), lwt_member(file, "assemblies_deg"),
                                   (int)lwt_number(file, "mobility_counted"),
                                   (int)lwt_number(file, "mobility")),
                     8);
    cJSON_Delete(file);
}

static void seven_bar_of_special_lengths_moves_on_its_curve_alone(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("sommese-2001/cases.json");
    const cJSON *links = lwt_member(file, "links");
    int counted = (int)lwt_number(file, "mobility_counted");
    assert_int_equal(each_assembly(links, lwt_member(file, "on_the_curve_deg"), counted,
                                   (int)lwt_number(file, "mobility")),
                     5);
    assert_int_equal(each_assembly(links, lwt_member(file, "isolated_deg"), counted, 0), 2);
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(single_loops_move_though_counted_stiff),
        cmocka_unit_test(parallel_machines_have_the_mobility_of_the_table),
        cmocka_unit_test(rods_count_as_one_constraint_each),
        cmocka_unit_test(seven_bar_of_generic_lengths_is_a_structure),
        cmocka_unit_test(seven_bar_of_special_lengths_moves_on_its_curve_alone),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
