/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Load and speed margins against their definitions, worked out here from the Jacobian: the worst
 * direction in closed form where drives are as many as freedoms, by search where there is one to
 * spare. Rated figures and postures are random. */
#include "lwt.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

static lwt_machine *machine_called(const char *name, lwt_random *rng, double force, double speed)
{
    lwt_machine *m = NULL;
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            m = lwt_subjects[i].make();
        }
    }
    assert_non_null(m);
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        lw_spec_drive *drive = &m->spec->drive[i];
        drive->has_effort = true;
        drive->effort = lwt_random_in(rng, 5.0, 50.0);
        drive->has_speed = true;
        drive->speed = lwt_random_in(rng, 0.2, 3.0);
    }
    m->spec->needs.force_n = (lw_figure){.asked = true, .value = force};
    m->spec->needs.speed_m_s = (lw_figure){.asked = true, .value = speed};
    lwt_machine_load(m);
    return m;
}

/* A random posture near the reference, its own copy; false if the mechanism says no. */
static bool near_reference(lwt_machine *m, lwt_random *rng, double span, lwt_copy *at)
{
    lw_frame pose = m->spec->tool[0].frame;
    size_t linear = m->spec->output[m->spec->n_output - 1].kind == LW_OUT_RZ &&
                            m->spec->n_output == 3
                        ? 2
                        : 3;
    for (size_t i = 0; i < linear; i++) {
        pose.pos_m[i] += lwt_random_in(rng, -span, span);
    }
    const lw_inverse_answer *inverse =
        lwt_inverse(m, &pose, NULL, &m->report->reference_mode, NULL);
    if (inverse->n_solution == 0) {
        return false;
    }
    lwt_keep(at, m, &inverse->solution[0]);
    return true;
}

/* Columns of the outputs x, y, z; their number. */
static size_t linear_outputs(const lw_spec *spec, size_t column[3])
{
    size_t n = 0;
    for (size_t k = 0; k < spec->n_output; k++) {
        if (spec->output[k].kind <= LW_OUT_Z) {
            column[n++] = k;
        }
    }
    return n;
}

/* The fastest that drives let the tool go without turning, in its worst direction: drive i allows
 * s_i / |row i| along its own row. */
static double speed_by_hand(const lwt_machine *m, const lw_jacobian_answer *j)
{
    size_t column[3];
    size_t n = linear_outputs(m->spec, column);
    double least = INFINITY;
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        double square = 0.0;
        for (size_t k = 0; k < n; k++) {
            double a = j->inverse[i * j->n_output + column[k]];
            square += a * a;
        }
        least = fmin(least, m->spec->drive[i].speed / sqrt(square));
    }
    return least / m->spec->needs.speed_m_s.value;
}

/* Square: drive i needs |force column i of the forward matrix| for the worst unit force. */
static double load_by_hand(const lwt_machine *m, const lw_jacobian_answer *j)
{
    size_t column[3];
    size_t n = linear_outputs(m->spec, column);
    double least = INFINITY;
    for (size_t i = 0; i < m->spec->n_drive; i++) {
        double square = 0.0;
        for (size_t k = 0; k < n; k++) {
            double a = j->forward[column[k] * m->spec->n_drive + i];
            square += a * a;
        }
        least = fmin(least, m->spec->drive[i].effort / sqrt(square));
    }
    return least / m->spec->needs.force_n.value;
}

static void square_machine(const char *name, double span)
{
    lwt_random rng;
    lwt_random_init(&rng, 4);
    lwt_machine *m = machine_called(name, &rng, 12.0, 0.4);
    size_t count = 0;
    for (int k = 0; k < 300; k++) {
        lwt_copy at;
        if (!near_reference(m, &rng, span, &at)) {
            continue;
        }
        lw_config config = lwt_config_of(&at);
        lw_jacobian_answer j = *lwt_jacobian(m, lwt_by_config(m, &config));
        if (!j.has_forward || !j.has_inverse || j.condition_forward > 1e3) {
            continue;
        }
        const lw_margin_answer *margin = lwt_margin(m, lwt_by_config(m, &config));
        assert_true(margin->margin[LW_MARGIN_LOAD].asked);
        assert_true(margin->margin[LW_MARGIN_SPEED].asked);
        assert_false(margin->margin[LW_MARGIN_ACCURACY].asked);
        lwt_near_rel(margin->margin[LW_MARGIN_LOAD].value, load_by_hand(m, &j), 1e-8);
        lwt_near_rel(margin->margin[LW_MARGIN_SPEED].value, speed_by_hand(m, &j), 1e-8);
        /* Nothing to spare: without any one drive nothing holds. */
        for (size_t i = 0; i < m->spec->n_drive; i++) {
            lwt_near(margin->hold_without[i], 0.0, 1e-9);
            assert_true(margin->indispensable[i]);
        }
        count++;
    }
    print_message("%s: %zu postures\n", name, count);
    assert_true(count > 100);
    lwt_machine_free(m);
}

static void six_struts_by_hand(void **state)
{
    (void)state;
    square_machine("six-struts", 0.2);
}

static void three_rrr_by_hand(void **state)
{
    (void)state;
    square_machine("three-rrr", 0.1);
}

static void delta_by_hand(void **state)
{
    (void)state;
    square_machine("delta", 0.15);
}

static void six_cranks_by_hand(void **state)
{
    (void)state;
    square_machine("six-cranks", 0.03);
}

static void wrist_arm_by_hand(void **state)
{
    (void)state;
    square_machine("wrist-arm", 0.2);
}

/* One spare drive: efforts t + c p, p the preload, hold the same force for every c; the least
 * largest share is a minimum over c of a convex function. */
static double least_largest_share(const double *t, const double *p, const lw_spec *spec)
{
    double low = -1e6;
    double high = 1e6;
    double best = INFINITY;
    for (int step = 0; step < 200; step++) {
        double value[2] = {0.0, 0.0};
        const double c[2] = {low + (high - low) / 3.0, high - (high - low) / 3.0};
        for (size_t side = 0; side < 2; side++) {
            for (size_t i = 0; i < spec->n_drive; i++) {
                double share = fabs(t[i] + c[side] * p[i]) / spec->drive[i].effort;
                value[side] = fmax(value[side], share);
            }
            best = fmin(best, value[side]);
        }
        low = value[0] > value[1] ? c[0] : low;
        high = value[0] > value[1] ? high : c[1];
    }
    return best;
}

static void spare_drive_shares_the_load_at_best(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 5);
    lwt_machine *m = machine_called("four-rrr", &rng, 12.0, 0.4);
    size_t n = m->spec->n_drive;
    size_t count = 0;
    for (int k = 0; k < 100; k++) {
        lwt_copy at;
        if (!near_reference(m, &rng, 0.1, &at)) {
            continue;
        }
        lw_config config = lwt_config_of(&at);
        lw_jacobian_answer j = *lwt_jacobian(m, lwt_by_config(m, &config));
        const lw_margin_answer *margin = lwt_margin(m, lwt_by_config(m, &config));
        double worst = 0.0;
        /* Efforts forward^T f hold f; forward inverse = 1 makes them so. */
        for (int d = 0; d < 1440; d++) {
            double angle = LWT_PI * (double)d / 1440.0;
            double t[LW_MAX_DRIVES];
            for (size_t i = 0; i < n; i++) {
                t[i] = 12.0 * (j.forward[i] * cos(angle) + j.forward[n + i] * sin(angle));
            }
            worst = fmax(worst, least_largest_share(t, margin->preload, m->spec));
        }
        /* The search misses the worst direction by at most a quarter of a step of 1/8 deg. */
        lwt_near_rel(margin->margin[LW_MARGIN_LOAD].value, 1.0 / worst, 2e-3);
        assert_true(margin->margin[LW_MARGIN_LOAD].value <= (1.0 + 1e-6) / worst);
        lwt_near_rel(margin->margin[LW_MARGIN_SPEED].value, speed_by_hand(m, &j), 1e-8);
        /* Preload does no work on the platform. */
        for (size_t o = 0; o < j.n_output; o++) {
            double sum = 0.0;
            for (size_t i = 0; i < n; i++) {
                sum += j.inverse[i * j.n_output + o] * margin->preload[i];
            }
            lwt_near(sum, 0.0, 1e-9);
        }
        count++;
    }
    assert_true(count > 80);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(six_struts_by_hand),
        cmocka_unit_test(three_rrr_by_hand),
        cmocka_unit_test(delta_by_hand),
        cmocka_unit_test(six_cranks_by_hand),
        cmocka_unit_test(wrist_arm_by_hand),
        cmocka_unit_test(spare_drive_shares_the_load_at_best),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
