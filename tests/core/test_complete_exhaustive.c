/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lists that are called complete miss nothing, and walls stand where they are said to stand. Both
 * are judged by calculations of the test's own: Newton from many random starts, and the closed form
 * of a linkage. */
#include "lwt.h"
#include "lwt_kit.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

enum { N = 6 };

static const lwt_subject *subject_called(const char *name)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            return &lwt_subjects[i];
        }
    }
    lwt_fail("no subject is called %s", name);
    return NULL;
}

/* Frame of the tool and, per joint, axis and point carried along: product of turns. */
static lw_frame chain_at(const lw_spec *spec, const double *q, double axis[N][3], double at[N][3])
{
    lw_frame frame = lwt_frame_identity();
    for (size_t i = 0; i < N; i++) {
        const lw_spec_joint *joint = &spec->joint[i];
        lwt_frame_vector(axis[i], &frame, joint->axis);
        lwt_frame_point(at[i], &frame, joint->at_m);
        lw_frame turn = lwt_frame_turn(joint->axis, joint->at_m, q[i]);
        frame = lwt_frame_mul(&frame, &turn);
    }
    return lwt_frame_mul(&frame, &spec->tool[0].frame);
}

/* Solves a x = b in place by elimination with row exchange; false if a pivot vanishes. */
static bool solve6(double a[N][N], double b[N])
{
    for (size_t c = 0; c < N; c++) {
        size_t best = c;
        for (size_t r = c + 1; r < N; r++) {
            best = fabs(a[r][c]) > fabs(a[best][c]) ? r : best;
        }
        if (!(fabs(a[best][c]) > 1e-12)) {
            return false;
        }
        for (size_t k = 0; k < N; k++) {
            double keep = a[c][k];
            a[c][k] = a[best][k];
            a[best][k] = keep;
        }
        double keep = b[c];
        b[c] = b[best];
        b[best] = keep;
        for (size_t r = c + 1; r < N; r++) {
            double f = a[r][c] / a[c][c];
            for (size_t k = c; k < N; k++) {
                a[r][k] -= f * a[c][k];
            }
            b[r] -= f * b[c];
        }
    }
    for (size_t c = N; c-- > 0;) {
        for (size_t k = c + 1; k < N; k++) {
            b[c] -= a[c][k] * b[k];
        }
        b[c] /= a[c][c];
    }
    return true;
}

/* Plain Newton on the pose; true if it ends on the goal. */
static bool newton(const lw_spec *spec, const lw_frame *goal, double *q)
{
    for (int step = 0; step < 60; step++) {
        double axis[N][3];
        double at[N][3];
        double a[N][N];
        double b[N];
        lw_frame now = chain_at(spec, q, axis, at);
        lwt_frame_turn_between(&b[3], &now, goal);
        for (size_t k = 0; k < 3; k++) {
            b[k] = goal->pos_m[k] - now.pos_m[k];
        }
        double off = lwt_norm(b) + lwt_norm(&b[3]);
        if (off < 1e-12) {
            return true;
        }
        for (size_t i = 0; i < N; i++) {
            double arm[3];
            double v[3];
            for (size_t k = 0; k < 3; k++) {
                arm[k] = now.pos_m[k] - at[i][k];
            }
            lwt_cross(v, axis[i], arm);
            for (size_t k = 0; k < 3; k++) {
                a[k][i] = v[k];
                a[3 + k][i] = axis[i][k];
            }
        }
        if (!solve6(a, b)) {
            return false;
        }
        double size = 0.0;
        for (size_t i = 0; i < N; i++) {
            size = fmax(size, fabs(b[i]));
        }
        double scale = size > 1.0 ? 1.0 / size : 1.0;
        for (size_t i = 0; i < N; i++) {
            q[i] += scale * b[i];
        }
    }
    return false;
}

static bool listed(const lw_inverse_answer *inverse, const double *q, double tol)
{
    for (size_t k = 0; k < inverse->n_solution; k++) {
        double worst = 0.0;
        for (size_t i = 0; i < N; i++) {
            worst = fmax(worst, fabs(lwt_wrap(inverse->solution[k].drive[i] - q[i])));
        }
        if (worst < tol) {
            return true;
        }
    }
    return false;
}

static void misses_nothing(const char *name)
{
    lwt_machine *m = subject_called(name)->make();
    lwt_machine_load(m);
    assert_true(m->report->explicit_inverse);
    lwt_random rng;
    lwt_random_init(&rng, 16);
    size_t found = 0;
    size_t real = 0;
    for (int pose = 0; pose < 60; pose++) {
        double q[N];
        double axis[N][3];
        double at[N][3];
        for (size_t i = 0; i < N; i++) {
            q[i] = lwt_random_in(&rng, -3.0, 3.0);
        }
        lw_frame goal = chain_at(m->spec, q, axis, at);
        const lw_inverse_answer *inverse = lwt_inverse(m, &goal, NULL, NULL, NULL);
        assert_true(inverse->complete);
        assert_true(inverse->n_solution <= 8);
        assert_true(listed(inverse, q, 1e-6));
        real += inverse->n_solution;
        for (int start = 0; start < 120; start++) {
            for (size_t i = 0; i < N; i++) {
                q[i] = lwt_random_in(&rng, -LWT_PI, LWT_PI);
            }
            if (!newton(m->spec, &goal, q)) {
                continue;
            }
            found++;
            if (!listed(inverse, q, 1e-5)) {
                lwt_fail("%s, pose %d: a solution is missing from a list of %zu called complete:"
                         " %.9g %.9g %.9g %.9g %.9g %.9g",
                         name, pose, inverse->n_solution, q[0], q[1], q[2], q[3], q[4], q[5]);
            }
        }
    }
    print_message("%s: %zu solutions listed, Newton ended %zu times on one of them\n", name, real,
                  found);
    assert_true(found > 1000);
    assert_true(real > 60 * 2);
    lwt_machine_free(m);
}

static void wrist_arm_lists_miss_nothing(void **state)
{
    (void)state;
    misses_nothing("wrist-arm");
}

static void offset_arm_lists_miss_nothing(void **state)
{
    (void)state;
    misses_nothing("offset-arm");
}

/* ---- the closed form of crank, two balls, rocker --------------------------------------------- */

/* Rocker angle for a crank angle on branch +1 or -1: the rocker's ball moves on a circle and keeps
 * its distance from the crank's. `room` is positive where a real solution exists. */
static double rocker_angle(const lw_spec *spec, double crank, int branch, double *room)
{
    const lw_spec_joint *input = &spec->joint[0];
    const lw_spec_joint *first = &spec->joint[1];
    const lw_spec_joint *second = &spec->joint[2];
    const lw_spec_joint *output = &spec->joint[3];
    double coupler[3];
    double radius[3];
    double ball[3];
    double side[3];
    lw_frame turn = lwt_frame_turn(input->axis, input->at_m, crank);
    lwt_frame_point(ball, &turn, first->at_m);
    double along = 0.0;
    for (size_t k = 0; k < 3; k++) {
        coupler[k] = second->at_m[k] - first->at_m[k];
        radius[k] = second->at_m[k] - output->at_m[k];
        ball[k] -= output->at_m[k];
        along += radius[k] * output->axis[k];
    }
    for (size_t k = 0; k < 3; k++) {
        radius[k] -= along * output->axis[k];
        ball[k] -= along * output->axis[k];
    }
    lwt_cross(side, output->axis, radius);
    /* |radius cos + side sin - ball|^2 = |coupler|^2 */
    double x = 2.0 * lwt_dot(ball, radius);
    double y = 2.0 * lwt_dot(ball, side);
    double c = lwt_dot(radius, radius) + lwt_dot(ball, ball) - lwt_dot(coupler, coupler);
    *room = hypot(x, y) - fabs(c);
    return atan2(y, x) + branch * acos(fmax(-1.0, fmin(1.0, c / hypot(x, y))));
}

static void walls_stand_where_the_closed_form_ends(void **state)
{
    (void)state;
    lwt_machine *m = subject_called("ball-loop")->make();
    lwt_machine_load(m);
    double room = 0.0;
    int branch = fabs(lwt_wrap(rocker_angle(m->spec, 0.0, 1, &room))) < 1e-9 ? 1 : -1;
    lwt_near(lwt_wrap(rocker_angle(m->spec, 0.0, branch, &room)), 0.0, 1e-12);
    size_t beyond = 0;
    size_t within = 0;
    for (double target = -1.5; target < 1.5; target += 0.0037) {
        /* The nearest end of the range on the way. */
        double wall = 2.0;
        for (int k = 1; k <= 2000 && wall > 1.0; k++) {
            double share = (double)k / 2000.0;
            (void)rocker_angle(m->spec, share * target, branch, &room);
            wall = room > 0.0 ? wall : share;
        }
        lw_forward_ask ask;
        memset(&ask, 0, sizeof ask);
        ask.readings = lwt_by_drives(m, &target, NULL);
        const lw_forward_answer *answer = NULL;
        assert_int_equal(lw_forward(&answer, m->model, &ask, m->work, &m->err), LW_OK);
        if (wall > 1.0 && room > 1e-4) {
            assert_int_equal(answer->outcome, LW_OUTCOME_OK);
            double want = rocker_angle(m->spec, target, branch, &room);
            lwt_near(lwt_wrap(answer->solution[0].config.coord[lwt_coord(m, 3, 0)] - want), 0.0,
                     1e-9);
            within++;
        } else if (wall < 0.99) {
            assert_true(answer->outcome == LW_OUTCOME_UNDECIDED ||
                        answer->outcome == LW_OUTCOME_OUT_OF_REACH);
            assert_int_equal(answer->n_solution, 0);
            beyond++;
        }
    }
    assert_true(within > 100);
    assert_true(beyond > 100);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(wrist_arm_lists_miss_nothing),
        cmocka_unit_test(offset_arm_lists_miss_nothing),
        cmocka_unit_test(walls_stand_where_the_closed_form_ends),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
