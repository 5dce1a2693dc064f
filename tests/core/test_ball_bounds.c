/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The inside of distances: derivatives of wrenches against differences, bounds of derivatives
 * against differences along random motions, and bounds from closure rows against postures found. A
 * false bound would hardly show in a ball, which is proved with room to spare; here it does. */
#include "lwt.h"

#include "../bench/demo.h"

#include <leeway/leeway.h>

#include "proof/ball.h"
#include "proof/ball_any.h"
#include "query/distance.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { SIZE = LWI_BALL_RODS * LWI_BALL_COLS };

typedef struct bench {
    lw_model *model;
    lw_work *work;
    lwt_random random;
} bench;

static void open_bench(bench *b, const char *name)
{
    lw_err err = {.code = LW_OK};
    b->model = lwt_bench_demo(name);
    assert_int_equal(lw_work_new(&b->work, b->model, &err), LW_OK);
    lwt_random_init(&b->random, 17);
}

static void close_bench(bench *b)
{
    lw_work_free(b->work);
    lw_model_free(b->model);
}

/* The demo machine's home and random places about it, one a call; false: try again. */
static bool place(bench *b, lwi_ball *ball, double spread_m)
{
    const lw_distance_answer *a;
    lw_err err = {.code = LW_OK};
    lw_distance_ask question = {.posture = &lw_model_spec(b->model)->home};
    assert_int_equal(lw_distance(&a, b->model, &question, b->work, &err), LW_OK);
    double y[LWI_BALL_DIRS] = {0};
    lwi_distance_work *w = b->work->distance_work;
    for (size_t k = 0; k < w->ball->n_dir; k++) {
        y[k] = spread_m * lwt_random_in(&b->random, -1.0, 1.0);
    }
    const lw_solution *sol = lwi_distance_solve(b->model, y, b->work);
    return sol != NULL && lwi_ball_make(ball, b->model, w->tool, sol);
}

/* Wrenches at s along the unit direction d. */
static bool wrenches(double *out, const lwi_ball *ball, const double *d, double s, size_t *count)
{
    lwi_rod_at at[LWI_BALL_RODS];
    double y[LWI_BALL_DIRS] = {0};
    for (size_t k = 0; k < ball->n_dir; k++) {
        y[k] = s * d[k];
    }
    if (!lwi_ball_rods(at, ball, y)) {
        return false;
    }
    *count = lwi_ball_matrix(out, NULL, ball, at) * ball->n_col;
    return true;
}

static void direction(double *d, bench *b, size_t n)
{
    double sum = 0.0;
    for (size_t k = 0; k < n; k++) {
        d[k] = lwt_random_normal(&b->random);
        sum += d[k] * d[k];
    }
    for (size_t k = 0; k < n; k++) {
        d[k] /= sqrt(sum);
    }
}

/* First and second derivatives of one machine at one place, along one direction. */
static void check_derivatives(const lwi_ball *ball, const double *d)
{
    static const double zero[LWI_BALL_DIRS] = {0};
    double h = 1e-4 * ball->length_m;
    double n[3][SIZE];
    double rate[LWI_BALL_DIRS][SIZE];
    double here[SIZE];
    size_t count = 0;
    lwi_rod_at at[LWI_BALL_RODS];
    if (!lwi_ball_rods(at, ball, zero) || !wrenches(n[0], ball, d, -h, &count) ||
        !wrenches(n[1], ball, d, 0.0, &count) || !wrenches(n[2], ball, d, h, &count)) {
        return;
    }
    (void)lwi_ball_matrix(here, rate, ball, at);
    double first[SIZE] = {0};
    double second[SIZE] = {0};
    for (size_t k = 0; k < ball->n_dir; k++) {
        for (size_t i = 0; i < count; i++) {
            first[i] += d[k] * rate[k][i];
        }
    }
    size_t row = 0;
    for (size_t i = 0; i < ball->n_rod; i++) {
        lwi_rod_rates r;
        if (!ball->rod[i].holds) {
            continue;
        }
        lwi_ball_rates(&r, ball, &ball->rod[i], &at[i]);
        for (size_t k = 0; k < ball->n_dir; k++) {
            for (size_t j = 0; j < ball->n_dir; j++) {
                double bend[LWI_BALL_COLS];
                lwi_ball_bend(bend, ball, &ball->rod[i], &at[i], &r, k, j);
                for (size_t c = 0; c < ball->n_col; c++) {
                    second[row * ball->n_col + c] += d[k] * d[j] * bend[c];
                }
            }
        }
        row++;
    }
    double third = lwi_ball_third(ball, at, h);
    double fourth = third / (0.02 * ball->length_m); /* a guess of what differences leave */
    for (size_t i = 0; i < count && third < INFINITY; i++) {
        lwt_near((n[2][i] - n[0][i]) / (2.0 * h), first[i], third * h * h + 1e-9);
        lwt_near((n[2][i] - 2.0 * n[1][i] + n[0][i]) / (h * h), second[i],
                 fourth * h * h + 1e-6 / (h * h) * 1e-8);
    }
}

/* The third derivative anywhere within r, by differences, is within its bound; how much of the
 * bound is used at most. */
static double check_third(const lwi_ball *ball, const double *d, double r, double at_share)
{
    static const double zero[LWI_BALL_DIRS] = {0};
    double h = 1e-3 * ball->length_m;
    double n[4][SIZE];
    size_t count = 0;
    lwi_rod_at at[LWI_BALL_RODS];
    if (!lwi_ball_rods(at, ball, zero)) {
        return 0.0;
    }
    double bound = lwi_ball_third(ball, at, r);
    double s = r * at_share - 1.5 * h;
    for (int k = 0; k < 4; k++) {
        if (!wrenches(n[k], ball, d, s + k * h, &count)) {
            assert_true(bound == INFINITY);
            return 0.0;
        }
    }
    double sum = 0.0;
    for (size_t i = 0; i < count; i++) {
        double t = (n[3][i] - 3.0 * n[2][i] + 3.0 * n[1][i] - n[0][i]) / (h * h * h);
        sum += t * t;
    }
    assert_true(sqrt(sum) <= bound * (1.0 + 1e-3) + 1e-3);
    return bound < INFINITY ? sqrt(sum) / bound : 0.0;
}

/* Rods' own bounds: unit vector and foot coordinate along one way. */
static void check_rods(const lwi_ball *ball, const double *d, double r, double at_share)
{
    static const double zero[LWI_BALL_DIRS] = {0};
    double h = 1e-4 * ball->length_m;
    lwi_rod_at here[LWI_BALL_RODS];
    lwi_rod_at at[3][LWI_BALL_RODS];
    if (!lwi_ball_rods(here, ball, zero)) {
        return;
    }
    for (int k = 0; k < 3; k++) {
        double y[LWI_BALL_DIRS] = {0};
        for (size_t j = 0; j < ball->n_dir; j++) {
            y[j] = (r * at_share + (k - 1) * h) * d[j];
        }
        if (!lwi_ball_rods(at[k], ball, y)) {
            return;
        }
    }
    for (size_t i = 0; i < ball->n_rod; i++) {
        lwi_rod_bounds v;
        double first = 0.0;
        double second = 0.0;
        double foot = 0.0;
        double moved = 0.0;
        lwi_ball_bounds(&v, ball, &ball->rod[i], &here[i], r + h);
        for (int j = 0; j < 3 && v.holds; j++) {
            double a = at[0][i].u[j];
            double b = at[1][i].u[j];
            double c = at[2][i].u[j];
            first += (c - a) * (c - a);
            second += (c - 2.0 * b + a) * (c - 2.0 * b + a);
            foot += pow(at[2][i].foot[j] - at[0][i].foot[j], 2);
            moved += pow(at[2][i].end[j] - at[0][i].end[j], 2);
        }
        if (!v.holds) {
            continue;
        }
        double radius = ball->rod[i].foot == LWI_FOOT_CIRCLE ? ball->rod[i].radius_m : 1.0;
        assert_true(sqrt(moved) / (2.0 * h) <= v.p1 * (1.0 + 1e-6));
        assert_true(sqrt(first) / (2.0 * h) <= v.u1 * (1.0 + 1e-6));
        assert_true(sqrt(second) / (h * h) <= v.u2 * (1.0 + 1e-3) + 1e-5);
        if (ball->rod[i].foot != LWI_FOOT_POINT) {
            assert_true(sqrt(foot) / (2.0 * h) <= v.q1 * radius * (1.0 + 1e-6));
        }
    }
}

static void check_machine(const char *name, double spread_m, double least_used)
{
    bench b;
    double used = 0.0;
    size_t done = 0;
    open_bench(&b, name);
    for (size_t i = 0; i < 400 && done < 60; i++) {
        lwi_ball ball;
        double d[LWI_BALL_DIRS];
        if (!place(&b, &ball, spread_m)) {
            continue;
        }
        assert_true(ball.forward && ball.inverse);
        for (int k = 0; k < 20; k++) {
            direction(d, &b, ball.n_dir);
            double r = 0.3 * ball.length_m * lwt_random_in(&b.random, 0.05, 1.0);
            double share = lwt_random_in(&b.random, 0.0, 1.0);
            check_derivatives(&ball, d);
            check_rods(&ball, d, r, share);
            used = fmax(used, check_third(&ball, d, r, share));
        }
        done++;
    }
    close_bench(&b);
    assert_int_equal(done, 60);
    print_message("%s: %.2f of the third bound used\n", name, used);
    assert_true(used > least_used); /* a bound that is never near is no check */
}

static void six_struts_keep_their_bounds(void **state)
{
    (void)state;
    check_machine("tilt-table", 0.05, 0.1);
}

static void four_arms_keep_their_bounds(void **state)
{
    (void)state;
    check_machine("label-stage", 0.1, 0.1);
}

static void carriages_keep_their_bounds(void **state)
{
    (void)state;
    check_machine("belt-hopper", 0.12, 0.1);
}

static void stacked_plates_keep_their_bounds(void **state)
{
    (void)state;
    check_machine("lid-turner", 0.09, 0.1);
}

/* What the closure rows alone say never exceeds what was found, also close to singular postures. */
static void closure_rows_say_no_more_than_is_true(void **state)
{
    (void)state;
    static const char *const name[5] = {"tilt-table", "label-stage", "belt-hopper", "lid-turner",
                                        "case-packer"};
    for (size_t i = 0; i < 5; i++) {
        bench b;
        size_t done = 0;
        double used = 0.0;
        open_bench(&b, name[i]);
        const lw_spec *spec = lw_model_spec(b.model);
        for (size_t t = 0; t < 300 && done < 30; t++) {
            const lw_distance_answer *a;
            lw_err err = {.code = LW_OK};
            lw_posture_ask at = {.kind = LW_BY_BODIES};
            lw_distance_ask question = {.posture = &spec->home};
            lwi_ball_any any;
            lwi_rates r;
            double y[LWI_BALL_DIRS] = {0};
            assert_int_equal(lw_distance(&a, b.model, &question, b.work, &err), LW_OK);
            const lwi_distance_work *w = b.work->distance_work;
            for (size_t k = 0; k < w->ball->n_dir; k++) {
                y[k] = 0.12 * lwt_random_in(&b.random, -1.0, 1.0);
            }
            const lw_solution *sol = lwi_distance_solve(b.model, y, b.work);
            if (sol == NULL) {
                continue;
            }
            for (size_t k = 0; k < spec->n_body; k++) {
                at.has_body[k] = k != spec->frame;
                at.body[k] = sol->config.body[k];
            }
            question.posture = &at;
            assert_int_equal(lw_distance(&a, b.model, &question, b.work, &err), LW_OK);
            if (a->solution == NULL) {
                continue;
            }
            lwi_rates_at(&r, b.model, &spec->tool[0], &a->solution->config, a->solution->tool.pos_m,
                         b.work);
            lwi_ball_any_at(&any, b.model, &spec->tool[0], a->solution, b.work);
            if (any.forward && a->forward.known_most) {
                assert_true(any.forward_m <= a->forward.at_most_m);
                used = fmax(used, any.forward_m / a->forward.at_most_m);
            }
            if (any.inverse && a->inverse.known_most) {
                assert_true(any.inverse_m <= a->inverse.at_most_m);
                used = fmax(used, any.inverse_m / a->inverse.at_most_m);
            }
            assert_true(any.inverse);
            done++;
        }
        print_message("%s: closure rows prove up to %.3f\n", name[i], used);
        assert_int_equal(done, 30);
        close_bench(&b);
    }
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(six_struts_keep_their_bounds),
        cmocka_unit_test(four_arms_keep_their_bounds),
        cmocka_unit_test(carriages_keep_their_bounds),
        cmocka_unit_test(stacked_plates_keep_their_bounds),
        cmocka_unit_test(closure_rows_say_no_more_than_is_true),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
