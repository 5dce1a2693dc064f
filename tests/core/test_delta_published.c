/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Delta-type machine against published and recomputed values: both branches of every leg,
 * forward in both halves of space. Source: tests/cases/williams-2016. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_kit.h"

#include <math.h>
#include <string.h>

#include <cjson/cJSON.h>

/* Leg 1 lies at -y, legs 2 and 3 follow. */
static const double LEG_RAD[3] = {-90.0 * LWT_DEG, 30.0 * LWT_DEG, 150.0 * LWT_DEG};

typedef struct delta {
    lwt_machine *m;
    double crank_ref[3];
} delta;

static delta delta_open(const cJSON *file)
{
    delta d;
    double base = lwt_number(file, "base_side") * sqrt(3.0) / 6.0;
    double hand = lwt_number(file, "platform_side") * sqrt(3.0) / 3.0;
    const double point[3] = {0.02, 0.03, -0.95};
    d.m = lwt_kit_delta("delta", base, hand, lwt_number(file, "arm"), lwt_number(file, "forearm"),
                        0.03, LEG_RAD, point, d.crank_ref);
    lwt_machine_load(d.m);
    return d;
}

static lw_frame at_point(const double point[3])
{
    lw_frame frame = lwt_frame_identity();
    memcpy(frame.pos_m, point, sizeof frame.pos_m);
    return frame;
}

static void both_branches_of_every_leg(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("williams-2016/cases.json");
    double tol = lwt_number(lwt_member(file, "tolerance"), "angle_deg");
    delta d = delta_open(file);
    assert_int_equal(d.m->report->mobility, 3);
    assert_true(d.m->report->explicit_inverse);
    assert_int_equal(d.m->report->n_limb, 3);
    assert_int_equal(d.m->report->limb[0].kind, LW_LIMB_CRANK_ROD);
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(file, "inverse"))
    {
        double point[3];
        double theta[6];
        assert_int_equal(lwt_numbers(item, "point", point, 3), 3);
        assert_int_equal(lwt_numbers(item, "theta_deg", theta, 6), 6);
        const cJSON *printed = lwt_member(item, "printed");
        for (int i = 0; i < 3; i++) {
            double half = 0.0;
            double value = lwt_printed(cJSON_GetArrayItem(printed, i)->valuestring, &half);
            lwt_near(theta[2 * i + 1], value, half);
        }
        lw_frame pose = at_point(point);
        const lw_inverse_answer *inverse = lwt_inverse(d.m, &pose, NULL, NULL, NULL);
        assert_int_equal(inverse->n_solution, 8);
        assert_true(inverse->complete);
        assert_int_equal(inverse->basis, LW_BASIS_EXPLICIT);
        unsigned seen = 0;
        for (size_t k = 0; k < 8; k++) {
            const lw_solution *solution = &inverse->solution[k];
            unsigned combination = 0;
            for (size_t i = 0; i < 3; i++) {
                double got = solution->drive[i] + d.crank_ref[i];
                double first = fabs(lwt_wrap(got - theta[2 * i] * LWT_DEG));
                double second = fabs(lwt_wrap(got - theta[2 * i + 1] * LWT_DEG));
                lwt_near(fmin(first, second), 0.0, tol * LWT_DEG);
                combination |= (second < first ? 1u : 0u) << i;
            }
            seen |= 1u << combination;
            double position = 0.0;
            double angle = 0.0;
            lwt_closure(d.m->spec, &solution->config, &position, &angle);
            lwt_near(position, 0.0, 1e-12);
        }
        assert_int_equal(seen, 0xff);
    }
    lwt_machine_free(d.m);
    cJSON_Delete(file);
}

static void forward_above_and_below(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("williams-2016/cases.json");
    double tol = lwt_number(lwt_member(file, "tolerance"), "length");
    double print_tol = lwt_number(lwt_member(file, "printed_tolerance"), "forward");
    delta d = delta_open(file);
    size_t count = 0;
    const cJSON *item = NULL;
    cJSON_ArrayForEach(item, lwt_member(file, "forward"))
    {
        double theta[3];
        double points[6];
        assert_int_equal(lwt_numbers(item, "theta_deg", theta, 3), 3);
        assert_int_equal(lwt_numbers(item, "points", points, 6), 6);
        for (size_t p = 0; p < 2; p++) {
            lw_frame pose = at_point(&points[3 * p]);
            const lw_inverse_answer *inverse = lwt_inverse(d.m, &pose, NULL, NULL, NULL);
            const lw_solution *solution = NULL;
            for (size_t k = 0; k < inverse->n_solution; k++) {
                double worst = 0.0;
                for (size_t i = 0; i < 3; i++) {
                    double want = theta[i] * LWT_DEG - d.crank_ref[i];
                    worst = fmax(worst, fabs(lwt_wrap(inverse->solution[k].drive[i] - want)));
                }
                solution = worst < 1e-8 ? &inverse->solution[k] : solution;
            }
            assert_non_null(solution);
            lw_mode mode = solution->mode;
            double drive[3];
            memcpy(drive, solution->drive, sizeof drive);
            lw_frame start = pose;
            start.pos_m[0] += 0.02;
            start.pos_m[1] -= 0.015;
            start.pos_m[2] += 0.01;
            const lw_forward_answer *forward =
                lwt_forward(d.m, drive, lwt_by_pose(d.m, &start, NULL, &mode, NULL));
            lwt_near_n(forward->solution[0].tool.pos_m, &points[3 * p], 3, tol);
            count++;
            if (points[3 * p + 2] > 0.0) {
                continue;
            }
            const cJSON *printed = lwt_member(item, "printed");
            for (int i = 0; i < 3; i++) {
                double want = lwt_printed(cJSON_GetArrayItem(printed, i)->valuestring, NULL);
                lwt_near(forward->solution[0].tool.pos_m[i], want, print_tol);
            }
        }
    }
    assert_int_equal(count, 4);
    lwt_machine_free(d.m);
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(both_branches_of_every_leg),
        cmocka_unit_test(forward_above_and_below),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
