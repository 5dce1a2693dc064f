/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The tests' own tools: geometry against numbers worked out by hand, every ready mechanism closed
 * in its reference posture, and the closure check seeing a body that is out of place. */
#include "lwt.h"
#include "lwt_kit.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

static void turns_and_quaternions_agree(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 7);
    for (int k = 0; k < 1000; k++) {
        double quat[4];
        double back[4];
        double pos[3] = {0.1, -0.2, 0.3};
        lwt_random_quaternion(&rng, quat);
        lw_frame frame = lwt_frame_quat(pos, quat);
        lwt_quat_of(back, &frame);
        double sign = quat[0] < 0.0 ? -1.0 : 1.0;
        for (size_t i = 0; i < 4; i++) {
            lwt_near(back[i], sign * quat[i], 1e-14);
        }
        double angle = 2.0 * acos(fmin(1.0, fabs(quat[0])));
        lw_frame unit = lwt_frame_identity();
        lwt_near(lwt_frame_angle(&unit, &frame), angle, 1e-7);
        lw_frame inverse = lwt_frame_inverse(&frame);
        lw_frame product = lwt_frame_mul(&frame, &inverse);
        lwt_near(lwt_frame_distance(&product, &unit), 0.0, 1e-15);
        lwt_near(lwt_frame_angle(&product, &unit), 0.0, 1e-14);
    }
    /* A quarter about z through (1, 0, 0) takes the origin to (1, -1, 0). */
    double moved[3];
    lw_frame quarter = lwt_frame_turn((const double[3]){0, 0, 2}, (const double[3]){1, 0, 0},
                                      0.5 * LWT_PI);
    lwt_frame_point(moved, &quarter, (const double[3]){0, 0, 0});
    lwt_near_n(moved, ((const double[3]){1, -1, 0}), 3, 1e-15);
    /* Yaw 90, then roll 90: x to y, y to z, z to x. */
    lw_frame both = lwt_frame_zyx((const double[3]){0, 0, 0}, 0.5 * LWT_PI, 0, 0.5 * LWT_PI);
    lwt_near_n(both.rot, ((const double[9]){0, 0, 1, 1, 0, 0, 0, 1, 0}), 9, 1e-15);
}

static void table_steps_match_their_written_matrices(void **state)
{
    (void)state;
    const double a = 0.7;
    const double al = 0.4;
    const double d = -0.3;
    const double th = 1.1;
    const double ct = cos(th);
    const double st = sin(th);
    const double ca = cos(al);
    const double sa = sin(al);
    lw_frame distal = lwt_dh_distal(a, al, d, th);
    lwt_near_n(distal.rot,
               ((const double[9]){ct, -st * ca, st * sa, st, ct * ca, -ct * sa, 0, sa, ca}), 9,
               1e-15);
    lwt_near_n(distal.pos_m, ((const double[3]){a * ct, a * st, d}), 3, 1e-15);
    lw_frame proximal = lwt_dh_proximal(a, al, d, th);
    lwt_near_n(proximal.rot,
               ((const double[9]){ct, -st, 0, st * ca, ct * ca, -sa, st * sa, ct * sa, ca}), 9,
               1e-15);
    lwt_near_n(proximal.pos_m, ((const double[3]){a, -d * sa, d * ca}), 3, 1e-15);
}

static void singular_values_and_determinants_of_known_matrices(void **state)
{
    (void)state;
    double value[3];
    /* Diagonal 3, 2, 1 between two turns. */
    lw_frame u = lwt_frame_zyx((const double[3]){0, 0, 0}, 0.3, -0.8, 1.4);
    lw_frame v = lwt_frame_zyx((const double[3]){0, 0, 0}, -1.3, 0.2, 0.9);
    const double s[9] = {2, 0, 0, 0, 3, 0, 0, 0, 1};
    double half[9];
    double m[9];
    lwt_mat_mul(half, u.rot, s, 3, 3, 3);
    lwt_mat_mul(m, half, v.rot, 3, 3, 3);
    lwt_singular_values(value, m, 3, 3);
    lwt_near_n(value, ((const double[3]){3, 2, 1}), 3, 1e-14);
    lwt_near(lwt_det(m, 3), 6.0, 1e-14);
    lwt_near(lwt_condition(m, 3, 3), 3.0, 1e-14);
    const double wide[6] = {3, 0, 0, 0, 0, 4};
    lwt_singular_values(value, wide, 2, 3);
    lwt_near_n(value, ((const double[2]){4, 3}), 2, 1e-15);
    const double flat[4] = {1, 2, 2, 4};
    lwt_near(lwt_det(flat, 2), 0.0, 0.0);
    assert_true(lwt_condition(flat, 2, 2) > 1e15);
}

static void every_subject_is_closed_in_its_reference_posture(void **state)
{
    (void)state;
    for (size_t s = 0; s < LWT_SUBJECTS; s++) {
        lwt_machine *m = lwt_subjects[s].make();
        lwt_copy at;
        memset(&at, 0, sizeof at);
        for (size_t i = 0; i < m->spec->n_body; i++) {
            at.body[i] = lwt_frame_identity();
        }
        for (size_t i = 0; i < LW_MAX_BALLS; i++) {
            at.ball[i][0] = 1.0;
        }
        lw_config config = lwt_config_of(&at);
        double position = 1.0;
        double angle = 1.0;
        lwt_closure(m->spec, &config, &position, &angle);
        lwt_near(position, 0.0, 1e-15);
        lwt_near(angle, 0.0, 0.0);

        /* Any single body moved by a skew millimetre and milliradian is seen. */
        for (size_t i = 1; i < m->spec->n_body; i++) {
            at.body[i] = lwt_frame_turn((const double[3]){0.5, 0.6, 0.4},
                                        (const double[3]){3, -1, 2}, 1e-3);
            lwt_closure(m->spec, &config, &position, &angle);
            assert_true(position > 1e-6 || angle > 1e-6);
            at.body[i] = lwt_frame_identity();
        }
        /* So is a coordinate that tells another story than the bodies. */
        size_t n = lw_spec_coord_count(m->spec);
        for (size_t i = 0; i < n; i++) {
            at.coord[i] = 1e-3;
            lwt_closure(m->spec, &config, &position, &angle);
            assert_true(position > 5e-4 || angle > 5e-4);
            at.coord[i] = 0.0;
        }
        lwt_machine_free(m);
    }
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(turns_and_quaternions_agree),
        cmocka_unit_test(table_steps_match_their_written_matrices),
        cmocka_unit_test(singular_values_and_determinants_of_known_matrices),
        cmocka_unit_test(every_subject_is_closed_in_its_reference_posture),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
