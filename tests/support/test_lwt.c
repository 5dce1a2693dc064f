/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Checks of the checks: each comparison must be able to fail, and an allocation must. The first
 * group consists of cases that must all fail; cmocka prints them as failed, which is right. */
#define _POSIX_C_SOURCE 200809L /* strdup */

#include "lwt.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

static void near_sees_a_difference(void **state)
{
    (void)state;
    lwt_near(1.0 + 1e-9, 1.0, 1e-10);
}

static void near_sees_a_nan(void **state)
{
    (void)state;
    lwt_near((double)NAN, 1.0, 1.0);
}

static void near_refuses_an_endless_tolerance(void **state)
{
    (void)state;
    lwt_near(1.0, 2.0, (double)INFINITY);
}

static void near_n_sees_the_last_number(void **state)
{
    (void)state;
    const double got[3] = {1.0, 2.0, 3.0};
    const double want[3] = {1.0, 2.0, 3.5};
    lwt_near_n(got, want, 3, 0.1);
}

static void same_sees_the_sign_of_zero(void **state)
{
    (void)state;
    lwt_same(-0.0, 0.0);
}

static void holds_sees_a_missing_part(void **state)
{
    (void)state;
    lwt_holds("out of reach", "limit");
}

static void a_missing_case_file_fails(void **state)
{
    (void)state;
    cJSON_Delete(lwt_case_file("no-such-folder/cases.json"));
}

static void a_misspelt_member_fails(void **state)
{
    (void)state;
    cJSON empty = {.type = cJSON_Object};
    (void)lwt_number(&empty, "lenght");
}

static void no_allocation(void *context, size_t n)
{
    (void)context;
    (void)n;
}

static void a_sweep_over_nothing_fails(void **state)
{
    (void)state;
    (void)lwt_alloc_sweep(no_allocation, NULL, 10);
}

static void near_accepts_what_is_near(void **state)
{
    (void)state;
    lwt_near(0.70711, 0.7071, 0.00005);
    lwt_near((double)INFINITY, (double)INFINITY, 0.0);
    lwt_near_rel(1000.1, 1000.0, 1.1e-4);
    lwt_same(0.1 + 0.2, 0.30000000000000004);
    lwt_holds("out of reach", "of");
}

/* splitmix64 seeded with 0 gives e220a8397b1dcdaf first, and xoshiro256** from the state 1 2 3 4
 * gives 11520, 0, 1509978240, 1215971899390074240: published test vectors, from memory. */
static void random_numbers_are_the_published_ones(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 0);
    assert_true(rng.state[0] == UINT64_C(0xe220a8397b1dcdaf));
    rng = (lwt_random){{1, 2, 3, 4}};
    const uint64_t want[4] = {11520, 0, 1509978240, UINT64_C(1215971899390074240)};
    for (size_t i = 0; i < 4; i++) {
        assert_true(lwt_random_bits(&rng) == want[i]);
    }
}

static void random_directions_and_rotations_are_balanced(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 7);
    double sum[4] = {0.0, 0.0, 0.0, 0.0};
    enum { COUNT = 20000 };
    for (size_t i = 0; i < COUNT; i++) {
        double q[4];
        double d[3];
        lwt_random_quaternion(&rng, q);
        lwt_random_direction(&rng, d);
        lwt_near(q[0] * q[0] + q[1] * q[1] + q[2] * q[2] + q[3] * q[3], 1.0, 1e-14);
        lwt_near(d[0] * d[0] + d[1] * d[1] + d[2] * d[2], 1.0, 1e-14);
        for (size_t k = 0; k < 4; k++) {
            sum[k] += q[k];
        }
        assert_true(lwt_random_index(&rng, 3) < 3);
    }
    /* One component has deviation 1/2, its mean over n draws 1/(2 sqrt n): five of those. */
    for (size_t k = 0; k < 4; k++) {
        lwt_near(sum[k] / COUNT, 0.0, 5.0 * 0.5 / sqrt((double)COUNT));
    }
}

static void printed_numbers_carry_their_last_digit(void **state)
{
    (void)state;
    double half = 0.0;
    lwt_near(lwt_printed("0.7071", &half), 0.7071, 0.0);
    lwt_near(half, 0.00005, 1e-18);
    lwt_near(lwt_printed("-12", &half), -12.0, 0.0);
    lwt_near(half, 0.5, 0.0);
    lwt_near(lwt_printed("1.50e-3", &half), 0.0015, 0.0);
    lwt_near(half, 5e-6, 1e-18);
}

static void two_allocations(void *context, size_t n)
{
    size_t *seen = context;
    /* volatile: a compiler may leave out an allocation that nobody looks at */
    char *volatile first = malloc(8);
    char *volatile second = strdup("second");
    size_t missing = (first == NULL ? 1u : 0u) + (second == NULL ? 1u : 0u);
    seen[n] = missing;
    free(first);
    free(second);
}

static void every_allocation_is_made_to_fail_once(void **state)
{
    (void)state;
    size_t seen[4] = {9, 9, 9, 9};
    assert_int_equal(lwt_alloc_sweep(two_allocations, seen, 5), 2);
    assert_int_equal(seen[1], 1);
    assert_int_equal(seen[2], 1);
    assert_int_equal(seen[3], 0);
    lwt_alloc_fail_from(1);
    two_allocations(seen, 0);
    lwt_alloc_reset();
    assert_int_equal(seen[0], 2);
}

static void the_allocations_of_cjson_can_fail_too(void **state)
{
    (void)state;
    lwt_alloc_cjson(true);
    lwt_alloc_fail_at(3);
    cJSON *root = cJSON_Parse("{\"a\": [1, 2, 3]}");
    bool met = lwt_alloc_failed();
    lwt_alloc_reset();
    lwt_alloc_cjson(false);
    assert_null(root);
    assert_true(met);
}

int main(void)
{
    const struct CMUnitTest must_fail[] = {
        cmocka_unit_test(near_sees_a_difference),
        cmocka_unit_test(near_sees_a_nan),
        cmocka_unit_test(near_refuses_an_endless_tolerance),
        cmocka_unit_test(near_n_sees_the_last_number),
        cmocka_unit_test(same_sees_the_sign_of_zero),
        cmocka_unit_test(holds_sees_a_missing_part),
        cmocka_unit_test(a_missing_case_file_fails),
        cmocka_unit_test(a_misspelt_member_fails),
        cmocka_unit_test(a_sweep_over_nothing_fails),
    };
    const int count = (int)(sizeof must_fail / sizeof must_fail[0]);
    int did_fail = cmocka_run_group_tests_name("these must all fail", must_fail, NULL, NULL);
    if (did_fail != count) {
        (void)printf("only %d of the %d cases that must fail did\n", did_fail, count);
        return 1;
    }
    const struct CMUnitTest cases[] = {
        cmocka_unit_test(near_accepts_what_is_near),
        cmocka_unit_test(random_numbers_are_the_published_ones),
        cmocka_unit_test(random_directions_and_rotations_are_balanced),
        cmocka_unit_test(printed_numbers_carry_their_last_digit),
        cmocka_unit_test(every_allocation_is_made_to_fail_once),
        cmocka_unit_test(the_allocations_of_cjson_can_fail_too),
    };
    return cmocka_run_group_tests_name("these must hold", cases, NULL, NULL);
}
