/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Serial chains against an independent library: positions and Jacobians of thousands of random
 * configurations from the Orocos kinematics library (KDL, Debian liborocos-kdl-dev), read from the
 * helper program kdl_reference. The lengths are our own. */
#define _POSIX_C_SOURCE 200809L

#include "lwt.h"
#include "lwt_all.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { JOINTS_MAX = 8, CONFIGURATIONS = 2000, NUMBERS_MAX = 12 + 6 * JOINTS_MAX };

typedef struct chain {
    const char *name;
    bool proximal;
    size_t n;
    const char *type; /* R or P a joint */
    double a_m[JOINTS_MAX];
    double alpha_deg[JOINTS_MAX];
    double d_m[JOINTS_MAX];
    const char *outputs; /* NULL: one output a joint coordinate */
} chain;

static const chain CHAINS[] = {
    {"wrist-arm", false, 6, "RRRRRR", {0.15, 0.61, 0.11, 0, 0, 0}, {-90, 0, -90, 90, -90, 0},
     {0.45, 0, 0, 0.66, 0, 0.12}, "x y z rx ry rz"},
    {"scara", false, 4, "RRPR", {0.32, 0.28, 0, 0}, {0, 180, 0, 0}, {0.4, 0, 0.1, 0.05},
     "x y z rz"},
    {"seven-revolutes", true, 7, "RRRRRRR", {0, 0, 0.04, 0.05, -0.05, 0, 0.08},
     {0, -90, 90, 90, -90, 90, 90}, {0.36, 0, 0.42, 0, 0.4, 0, 0.11}, NULL},
    {"skew", false, 6, "RRRRRR", {0.3, 0.2, 0.25, 0.1, 0.22, 0.17}, {35, -72, 110, 48, -63, 17},
     {0.1, -0.12, 0.2, 0.31, -0.05, 0.09}, "x y z rx ry rz"},
    {"slide-and-turn", true, 5, "PRRPR", {0.1, 0.2, 0, 0.15, 0.05}, {20, 90, -45, 60, -90},
     {0.2, 0.1, 0.15, 0.05, 0.1}, NULL},
};

static lw_frame step_of(const chain *c, size_t i, double q)
{
    double theta = c->type[i] == 'R' ? q : 0.0;
    double d = c->d_m[i] + (c->type[i] == 'P' ? q : 0.0);
    double alpha = c->alpha_deg[i] * LWT_DEG;
    return c->proximal ? lwt_dh_proximal(c->a_m[i], alpha, d, theta)
                       : lwt_dh_distal(c->a_m[i], alpha, d, theta);
}

/* The chain with q_ref as its reference posture. */
static lwt_machine *machine_of(const chain *c, const double *q_ref)
{
    lwt_machine *m = lwt_machine_new(c->name);
    lw_frame frame = lwt_frame_identity();
    size_t body = 0;
    for (size_t i = 0; i < c->n; i++) {
        lw_frame step = step_of(c, i, q_ref[i]);
        lw_frame after = lwt_frame_mul(&frame, &step);
        /* A joint acts about z of the frame before a distal step, of the frame after a proximal. */
        const lw_frame *at = c->proximal ? &after : &frame;
        double axis[3] = {at->rot[2], at->rot[5], at->rot[8]};
        size_t next = lwt_add_body(m);
        if (c->type[i] == 'R') {
            (void)lwt_add_revolute(m, body, next, at->pos_m, axis);
        } else {
            (void)lwt_add_prismatic(m, body, next, axis);
        }
        frame = after;
        body = next;
    }
    for (size_t i = 0; i < c->n; i++) {
        (void)lwt_drive_joint(m, i);
    }
    (void)lwt_add_tool(m, body, &frame);
    if (c->outputs != NULL) {
        lwt_add_outputs(m, c->outputs);
    } else {
        for (size_t i = 0; i < c->n; i++) {
            lwt_add_output_coord(m, lwt_coord(m, i, 0));
        }
    }
    lwt_machine_load(m);
    return m;
}

static void random_configuration(lwt_random *rng, const chain *c, double *q)
{
    for (size_t i = 0; i < c->n; i++) {
        q[i] = c->type[i] == 'R' ? lwt_random_in(rng, -3.0, 3.0) : lwt_random_in(rng, -0.3, 0.5);
    }
}

static void write_request(const char *path, const chain *c, double (*q)[JOINTS_MAX], size_t count)
{
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    (void)fprintf(file, "%s %zu\n", c->proximal ? "proximal" : "distal", c->n);
    for (size_t i = 0; i < c->n; i++) {
        (void)fprintf(file, "%c %.17g %.17g %.17g 0\n", c->type[i], c->a_m[i],
                      c->alpha_deg[i] * LWT_DEG, c->d_m[i]);
    }
    (void)fprintf(file, "%zu\n", count);
    for (size_t k = 0; k < count; k++) {
        for (size_t i = 0; i < c->n; i++) {
            (void)fprintf(file, "%.17g ", q[k][i]);
        }
        (void)fputc('\n', file);
    }
    assert_int_equal(fclose(file), 0);
}

static void compare(lwt_machine *m, const chain *c, const double *drive, const double *want)
{
    const lw_jacobian_answer *jacobian = lwt_jacobian(m, lwt_by_drives(m, drive, NULL));
    assert_non_null(jacobian->solution);
    const lw_frame *tool = &jacobian->solution->tool;
    lwt_near_n(tool->rot, want, 9, 1e-13);
    lwt_near_n(tool->pos_m, want + 9, 3, 1e-13);
    for (size_t r = 0; r < 6; r++) {
        lwt_near_n(&jacobian->twist[r * c->n], want + 12 + r * c->n, c->n, 2e-13);
    }
    const lw_forward_answer *forward = lwt_forward(m, drive, NULL);
    lwt_near_n(forward->solution[0].tool.rot, want, 9, 1e-13);
    lwt_near_n(forward->solution[0].tool.pos_m, want + 9, 3, 1e-13);
}

static void compare_chain(const chain *c, uint64_t seed)
{
    lwt_random rng;
    lwt_random_init(&rng, seed);
    size_t n = (size_t)lwt_share(CONFIGURATIONS);
    double(*q)[JOINTS_MAX] = calloc(n, sizeof *q);
    assert_non_null(q);
    for (size_t k = 0; k < n; k++) {
        random_configuration(&rng, c, q[k]);
    }
    char path[] = "/tmp/leeway-chain-XXXXXX";
    int descriptor = mkstemp(path);
    assert_true(descriptor >= 0);
    (void)close(descriptor);
    write_request(path, c, q, n);
    char command[1024];
    (void)snprintf(command, sizeof command, "'%s' '%s'", LWT_KDL_REFERENCE, path);
    FILE *pipe = popen(command, "r");
    assert_non_null(pipe);

    /* The reference posture is a random one too: coordinates are counted from it. */
    double q_ref[JOINTS_MAX];
    random_configuration(&rng, c, q_ref);
    lwt_machine *m = machine_of(c, q_ref);
    assert_int_equal(m->report->mobility, c->n);
    size_t numbers = 12 + 6 * c->n;
    for (size_t k = 0; k < n; k++) {
        double want[NUMBERS_MAX];
        for (size_t i = 0; i < numbers; i++) {
            assert_int_equal(fscanf(pipe, "%lf", &want[i]), 1);
        }
        double drive[JOINTS_MAX];
        for (size_t i = 0; i < c->n; i++) {
            drive[i] = q[k][i] - q_ref[i];
        }
        compare(m, c, drive, want);
    }
    assert_int_equal(pclose(pipe), 0);
    assert_int_equal(unlink(path), 0);
    lwt_machine_free(m);
    free(q);
}

static void wrist_arm_agrees_with_the_library(void **state)
{
    (void)state;
    compare_chain(&CHAINS[0], 11);
}

static void scara_agrees_with_the_library(void **state)
{
    (void)state;
    compare_chain(&CHAINS[1], 12);
}

static void seven_revolutes_agree_with_the_library(void **state)
{
    (void)state;
    compare_chain(&CHAINS[2], 13);
}

static void skew_axes_agree_with_the_library(void **state)
{
    (void)state;
    compare_chain(&CHAINS[3], 14);
}

static void slides_and_turns_agree_with_the_library(void **state)
{
    (void)state;
    compare_chain(&CHAINS[4], 15);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(wrist_arm_agrees_with_the_library),
        cmocka_unit_test(scara_agrees_with_the_library),
        cmocka_unit_test(seven_revolutes_agree_with_the_library),
        cmocka_unit_test(skew_axes_agree_with_the_library),
        cmocka_unit_test(slides_and_turns_agree_with_the_library),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
