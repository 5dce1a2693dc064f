/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Polynomial models (core/proof/pm.h). Operation by operation against numbers of 113 bits, in the
 * four rounding modes, for every degree and several sets of compiler flags; each error term left
 * out must be missed; whole expressions beside ball arithmetic of 128 bits by another library
 * (Debian: libflint-arb-dev). LWT_SHARE scales the number of rounds. */
#include "pm_contained.h"
#include "proof/pm.h"

#include <arb.h>
#include <fenv.h>
#include <lwt.h>
#include <quadmath.h>
#include <stdio.h>
#include <stdlib.h>

pm_check pm_degree_2;
pm_check pm_degree_3;
pm_check pm_degree_4;
pm_check pm_degree_5;
pm_check pm_degree_6;
pm_check pm_fused;
pm_check pm_rounding_math;
pm_check pm_unoptimised;
pm_check pm_mutants_2;
pm_check pm_mutants_4;
pm_check pm_mutants_6;

static long shared(long n)
{
    const char *text = getenv("LWT_SHARE");
    double share = text != NULL ? strtod(text, NULL) : 1.0;
    long scaled = (long)((double)n * (share < 1.0 ? share : 1.0));
    return scaled > 4 ? scaled : 4;
}

static void contains(const char *name, pm_check *check, uint64_t seed)
{
    pm_report r = check(seed, shared(90), 0, false);
    if (r.outside > 0) {
        lwt_fail("%s: %ld of %ld values outside, the first by %s", name, r.outside, r.checked,
                 r.first);
    }
    /* The check must have looked at models that say something, and at their very edge. */
    assert_true(r.failed * 100 < r.done);
    assert_true(r.checked > 25 * r.done);
    assert_true(r.tightest > 0.99);
}

static void every_operation_holds_its_members_in_every_degree(void **state)
{
    (void)state;
    contains("degree 2", pm_degree_2, 1);
    contains("degree 3", pm_degree_3, 2);
    contains("degree 4", pm_degree_4, 3);
    contains("degree 5", pm_degree_5, 4);
    contains("degree 6", pm_degree_6, 5);
}

static void no_compiler_flag_lets_a_member_out(void **state)
{
    (void)state;
    contains("fused and vectorised", pm_fused, 6);
    contains("-frounding-math", pm_rounding_math, 7);
    contains("-O0", pm_unoptimised, 8);
}

static void each_error_term_left_out_is_missed(void **state)
{
    (void)state;
    pm_check *const copies[3] = {pm_mutants_2, pm_mutants_4, pm_mutants_6};
    for (int i = 0; i < 3; i++) {
        for (int term = 1; term < LWI_PM_TERMS; term++) {
            /* What the degree drops hides the sine's own rest; the third copy drops nothing. */
            if (i < 2 && (term == LWI_PM_TERM_SINE || term == LWI_PM_TERM_COSINE)) {
                continue;
            }
            pm_report r = copies[i](9, 400, term, true);
            assert_int_equal(r.terms, LWI_PM_TERMS);
            if (r.outside == 0) {
                lwt_fail("error term %d can be left out of copy %d unseen", term, i);
            }
        }
        pm_report whole = copies[i](10, 10, 0, false);
        assert_int_equal(whole.outside, 0);
    }
}

/* ---- the sine and cosine of a number -------------------------------------------------------- */

/* Global, so that no arithmetic crosses a change of the rounding mode. */
extern double turn_x;
extern double turn_sine;
extern double turn_cosine;
double turn_x;
double turn_sine;
double turn_cosine;

static void sine_and_cosine_are_within_their_bound(void **state)
{
    (void)state;
    static const int modes[4] = {FE_TONEAREST, FE_DOWNWARD, FE_UPWARD, FE_TOWARDZERO};
    lwt_random rng;
    double worst = 0.0;
    lwt_random_init(&rng, 11);
    for (long i = 0; i < shared(60000); i++) {
        double x = lwt_random_in(&rng, -1000.0, 1000.0);
        if (i % 3 == 1) {
            /* Next to multiples of pi/4, where the reduction cancels or its choice changes. */
            double k = floor(lwt_random_in(&rng, -1273.0, 1274.0));
            x = k * 0.7853981633974483 * (1.0 + lwt_random_in(&rng, -4.0, 4.0) * 0x1p-52);
        } else if (i % 3 == 2) {
            x = ldexp(lwt_random_in(&rng, -1.0, 1.0), -(int)lwt_random_index(&rng, 80));
        }
        x = x > 1000.0 ? 1000.0 : x < -1000.0 ? -1000.0 : x;
        turn_x = x;
        assert_int_equal(fesetround(modes[i % 4]), 0);
        lwi_pm_turn(turn_x, &turn_sine, &turn_cosine);
        assert_int_equal(fesetround(FE_TONEAREST), 0);
        double s = (double)fabsq(sinq(x) - turn_sine);
        double c = (double)fabsq(cosq(x) - turn_cosine);
        worst = s > worst ? s : worst;
        worst = c > worst ? c : worst;
        if (!(s <= 0x1p-49 && c <= 0x1p-49)) {
            lwt_fail("at %a, mode %d: sine off %g, cosine off %g", x, (int)(i % 4), s, c);
        }
    }
    assert_true(worst > 0x1p-54);
}

/* ---- failure -------------------------------------------------------------------------------- */

static void is_failed(lwi_pm a)
{
    double lo;
    double hi;
    assert_false(lwi_pm_ok(a));
    assert_true(a.e > LWI_PM_MOST);
    lwi_pm_range(a, &lo, &hi);
    assert_true(lo < -DBL_MAX && hi > DBL_MAX);
    lwi_pm_at(a, 0.3, &lo, &hi);
    assert_true(lo < -DBL_MAX && hi > DBL_MAX);
    lwi_pm_at_end(a, true, &lo, &hi);
    assert_true(lo < -DBL_MAX && hi > DBL_MAX);
    assert_true(lwi_pm_mag(a) > DBL_MAX);
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        assert_true(a.c[i] >= 0.0 && a.c[i] <= 0.0);
    }
}

static void failure_is_infinite_and_stays(void **state)
{
    (void)state;
    lwi_pm one = lwi_pm_const(1.0);
    lwi_pm nought = lwi_pm_const(0.0);
    lwi_pm across = lwi_pm_var(0.1, 0.2);
    is_failed(lwi_pm_const((double)NAN));
    is_failed(lwi_pm_const((double)INFINITY));
    is_failed(lwi_pm_const(-0x1p901));
    is_failed(lwi_pm_var(0.0, (double)NAN));
    is_failed(lwi_pm_recip(nought));
    is_failed(lwi_pm_recip(across));
    is_failed(lwi_pm_rsqrt(across));
    is_failed(lwi_pm_rsqrt(lwi_pm_neg(one)));
    is_failed(lwi_pm_sqrt(across));
    is_failed(lwi_pm_sqrt(lwi_pm_const(-1e-300)));
    is_failed(lwi_pm_sqrt(lwi_pm_widen(lwi_pm_const(1.0), 1.1)));
    is_failed(lwi_pm_recip(lwi_pm_widen(lwi_pm_const(1.0), 1.0)));
    is_failed(lwi_pm_mul(lwi_pm_const(0x1p800), lwi_pm_const(0x1p800)));
    is_failed(lwi_pm_scale(one, (double)INFINITY));
    is_failed(lwi_pm_scale(nought, (double)INFINITY));
    is_failed(lwi_pm_scale(one, (double)NAN));
    is_failed(lwi_pm_shift(one, (double)NAN));
    is_failed(lwi_pm_widen(one, (double)NAN));
    lwi_pm bad = lwi_pm_failed();
    lwi_pm three[3] = {one, nought, bad};
    lwi_pm noughts[3] = {nought, nought, nought};
    lwi_pm crossed[3];
    lwi_pm s;
    lwi_pm c;
    is_failed(lwi_pm_add(one, bad));
    is_failed(lwi_pm_sub(bad, bad));
    is_failed(lwi_pm_mul(bad, nought));
    is_failed(lwi_pm_mul(nought, bad));
    is_failed(lwi_pm_sqr(bad));
    is_failed(lwi_pm_scale(bad, 0.0));
    is_failed(lwi_pm_axpy(one, 0.0, bad));
    is_failed(lwi_pm_axpy(bad, 1.0, one));
    is_failed(lwi_pm_mul_sub(one, one, bad, nought));
    is_failed(lwi_pm_dot3(three, noughts));
    is_failed(lwi_pm_dot3k((const double[3]){0.0, 0.0, 0.0}, three));
    lwi_pm_cross(crossed, three, noughts);
    is_failed(crossed[0]);
    is_failed(lwi_pm_recip(bad));
    is_failed(lwi_pm_rsqrt(bad));
    is_failed(lwi_pm_sqrt(bad));
    is_failed(lwi_pm_neg(bad));
    lwi_pm_sincos(bad, &s, &c);
    is_failed(s);
    is_failed(c);
    /* An angle known not at all has a sine between -1 and 1. */
    double lo;
    double hi;
    lwi_pm_sincos(lwi_pm_widen(one, 50.0), &s, &c);
    lwi_pm_range(s, &lo, &hi);
    assert_true(lo <= -1.0 && hi >= 1.0 && lo > -1.001 && hi < 1.001);
    /* Outside [-1, 1] there is no value. */
    lwi_pm_at(one, 1.5, &lo, &hi);
    assert_true(lo < -DBL_MAX && hi > DBL_MAX);
}

/* ---- beside ball arithmetic ------------------------------------------------------------------ */

enum { BITS = 128, PIECES = 48 };

/* One random closed expression of a planar limb and a strut, over models and over balls:
 *   u = x + h d - a cos(p + w d),  v = y + k d - a sin(p + w d),
 *   g = sqrt(u^2 + v^2 + b),  f = (u sin q + v cos q) / g + 1/sqrt(g),  q = u v. */
typedef struct limb {
    double x, y, h, k, a, p, w, b;
} limb;

static lwi_pm limb_model(const limb *l)
{
    lwi_pm s;
    lwi_pm c;
    lwi_pm_sincos(lwi_pm_var(l->p, l->w), &s, &c);
    lwi_pm u = lwi_pm_axpy(lwi_pm_var(l->x, l->h), -l->a, c);
    lwi_pm v = lwi_pm_axpy(lwi_pm_var(l->y, l->k), -l->a, s);
    lwi_pm g = lwi_pm_sqrt(lwi_pm_shift(lwi_pm_mul2(u, u, v, v), l->b));
    lwi_pm_sincos(lwi_pm_mul(u, v), &s, &c);
    return lwi_pm_add(lwi_pm_div(lwi_pm_mul2(u, s, v, c), g), lwi_pm_rsqrt(g));
}

static void line(arb_t out, double at, double slope, const arb_t d)
{
    arb_t k;
    arb_init(k);
    arb_set_d(k, slope);
    arb_mul(out, k, d, BITS);
    arb_set_d(k, at);
    arb_add(out, out, k, BITS);
    arb_clear(k);
}

static void limb_ball(arb_t f, const limb *l, const arb_t d)
{
    arb_t u, v, s, c, g, t;
    arb_init(u);
    arb_init(v);
    arb_init(s);
    arb_init(c);
    arb_init(g);
    arb_init(t);
    line(t, l->p, l->w, d);
    arb_sin_cos(s, c, t, BITS);
    line(u, l->x, l->h, d);
    line(v, l->y, l->k, d);
    arb_set_d(t, l->a);
    arb_submul(u, t, c, BITS);
    arb_submul(v, t, s, BITS);
    arb_set_d(g, l->b);
    arb_addmul(g, u, u, BITS);
    arb_addmul(g, v, v, BITS);
    arb_sqrt(g, g, BITS);
    arb_mul(t, u, v, BITS);
    arb_sin_cos(s, c, t, BITS);
    arb_mul(f, u, s, BITS);
    arb_addmul(f, v, c, BITS);
    arb_div(f, f, g, BITS);
    arb_rsqrt(t, g, BITS);
    arb_add(f, f, t, BITS);
    arb_clear(u);
    arb_clear(v);
    arb_clear(s);
    arb_clear(c);
    arb_clear(g);
    arb_clear(t);
}

/* The whole ball lies in [lo, hi]. */
static bool ball_within(const arb_t ball, double lo, double hi)
{
    arb_t end;
    arb_init(end);
    arb_set_d(end, lo);
    bool within = arb_ge(ball, end);
    arb_set_d(end, hi);
    within = within && arb_le(ball, end);
    arb_clear(end);
    return within;
}

static double ball_end(const arb_t ball, bool upper)
{
    arf_t end;
    arf_init(end);
    if (upper) {
        arb_get_ubound_arf(end, ball, BITS);
    } else {
        arb_get_lbound_arf(end, ball, BITS);
    }
    double x = arf_get_d(end, upper ? ARF_RND_CEIL : ARF_RND_FLOOR);
    arf_clear(end);
    return x;
}

static void expressions_agree_with_ball_arithmetic(void **state)
{
    (void)state;
    lwt_random rng;
    long told = 0;
    double loosest = 0.0;
    lwt_random_init(&rng, 12);
    long n = shared(600);
    for (long i = 0; i < n; i++) {
        double span = lwt_random_in(&rng, 0.0, 0.4);
        limb l = {lwt_random_in(&rng, -1.0, 1.0),   lwt_random_in(&rng, -1.0, 1.0),
                  lwt_random_in(&rng, -span, span), lwt_random_in(&rng, -span, span),
                  lwt_random_in(&rng, 0.2, 1.0),    lwt_random_in(&rng, -4.0, 4.0),
                  lwt_random_in(&rng, -span, span), lwt_random_in(&rng, 0.3, 1.0)};
        lwi_pm f = limb_model(&l);
        if (!lwi_pm_ok(f)) {
            continue;
        }
        told++;
        double lo;
        double hi;
        double least = (double)INFINITY;
        double most = -(double)INFINITY;
        arb_t d;
        arb_t ball;
        arb_init(d);
        arb_init(ball);
        lwi_pm_range(f, &lo, &hi);
        for (int piece = 0; piece < PIECES; piece++) {
            /* On a piece the two enclosures of the same values must meet; at a point the ball is
             * as good as exact and must lie inside. */
            double mid = (2.0 * piece + 1.0) / PIECES - 1.0;
            double at_lo;
            double at_hi;
            arb_set_d(d, mid);
            limb_ball(ball, &l, d);
            lwi_pm_at(f, mid, &at_lo, &at_hi);
            assert_true(ball_within(ball, at_lo, at_hi));
            assert_true(ball_within(ball, lo, hi));
            mag_set_d(arb_radref(d), 1.0 / PIECES);
            limb_ball(ball, &l, d);
            double from = ball_end(ball, false);
            double to = ball_end(ball, true);
            assert_true(from <= hi && to >= lo);
            least = from < least ? from : least;
            most = to > most ? to : most;
        }
        for (int end = 0; end < 2; end++) {
            double at_lo;
            double at_hi;
            arb_set_d(d, end ? 1.0 : -1.0);
            limb_ball(ball, &l, d);
            lwi_pm_at_end(f, end, &at_lo, &at_hi);
            assert_true(ball_within(ball, at_lo, at_hi));
        }
        arb_clear(d);
        arb_clear(ball);
        if (span < 0.1) {
            double ratio = (hi - lo) / (most - least);
            loosest = ratio > loosest ? ratio : loosest;
        }
    }
    /* Models are to be useful as well as true: on short pieces not much wider than the balls of 48
     * pieces together. */
    assert_true(told * 10 >= n * 9);
    if (!(loosest < 1.2)) {
        lwt_fail("a range %g times as wide as the reference", loosest);
    }
    flint_cleanup();
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_operation_holds_its_members_in_every_degree),
        cmocka_unit_test(no_compiler_flag_lets_a_member_out),
        cmocka_unit_test(each_error_term_left_out_is_missed),
        cmocka_unit_test(sine_and_cosine_are_within_their_bound),
        cmocka_unit_test(failure_is_infinite_and_stays),
        cmocka_unit_test(expressions_agree_with_ball_arithmetic),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
