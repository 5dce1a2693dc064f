/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solutions enclosed (core/proof/pm_root.h, pm_solve.h): radii where they are known exactly, a
 * planar two-link limb against its closed solution, linear systems and least squares against
 * elimination in numbers of 113 bits, members at the edge of their rests. LWT_SHARE scales the
 * number of rounds. */
#include "proof/pm_root.h"
#include "proof/pm_solve.h"
#include "proof/rank.h"

#include <lwt.h>
#include <quadmath.h>
#include <stdlib.h>
#include <string.h>

__extension__ typedef __float128 quad;

static lwt_random rng;
static lwi_rank_work rank_work;
static lwi_pm_solve_work solve_work;

static long shared(long n)
{
    const char *text = getenv("LWT_SHARE");
    double share = text != NULL ? strtod(text, NULL) : 1.0;
    long scaled = (long)((double)n * (share < 1.0 ? share : 1.0));
    return scaled > 20 ? scaled : 20;
}

static double power_of_ten(double low, double high)
{
    return pow(10.0, lwt_random_in(&rng, low, high));
}

/* ---- one equation --------------------------------------------------------------------------- */

static void radii_are_the_roots_of_the_parabola(void **state)
{
    (void)state;
    lwt_random_init(&rng, 31);
    long held = 0;
    for (long i = 0; i < shared(20000); i++) {
        double sigma = power_of_ten(-4.0, 1.0);
        double lipschitz = power_of_ten(-2.0, 2.0);
        double residual = sigma * sigma / lipschitz * power_of_ten(-8.0, -0.2);
        double domain = power_of_ten(-3.0, 3.0);
        /* F = (lipschitz/2) q^2 - sigma q + residual in numbers of 113 bits. */
        quad disc = (quad)sigma * sigma - 2 * (quad)lipschitz * residual;
        lwi_pm_root root;
        lwi_pm_kantorovich(&root, residual, sigma, lipschitz, domain);
        if (disc < 0) {
            assert_false(root.holds);
            continue;
        }
        quad first = 2 * (quad)residual / (sigma + sqrtq(disc));
        quad second = (sigma + sqrtq(disc)) / lipschitz;
        if (first > domain) {
            assert_false(root.holds);
            continue;
        }
        if (!root.holds) {
            /* Only on the very edge. */
            assert_true((double)(disc / ((quad)sigma * sigma)) < 1e-10 ||
                        first > domain * (1.0 - 1e-10));
            continue;
        }
        held++;
        assert_true(root.radius >= first && root.unique <= second && root.unique <= domain);
        if ((double)(disc / ((quad)sigma * sigma)) > 1e-3) {
            assert_true(root.radius <= (double)first * (1.0 + 1e-10));
            assert_true(root.unique >= domain || root.unique >= (double)second * (1.0 - 1e-10));
        }
    }
    assert_true(held > 10);
    lwi_pm_root root;
    lwi_pm_kantorovich(&root, 0.1, 1.0, 0.0, 1.0);
    assert_true(root.holds && root.unique >= 1.0 && root.radius < 0.1000001);
    lwi_pm_kantorovich(&root, 0.0, 1.0, 1.0, (double)INFINITY);
    assert_true(root.holds && root.radius < 1e-200);
    const double bad[5][4] = {{(double)NAN, 1.0, 1.0, 1.0},
                              {(double)INFINITY, 1.0, 1.0, 1.0},
                              {0.1, 0.0, 1.0, 1.0},
                              {0.1, 1.0, (double)INFINITY, 1.0},
                              {0.1, 1.0, 1.0, 0.05}};
    for (int i = 0; i < 5; i++) {
        lwi_pm_kantorovich(&root, bad[i][0], bad[i][1], bad[i][2], bad[i][3]);
        assert_false(root.holds);
    }
}

/* ---- a planar limb of two links ------------------------------------------------------------- */

/* a (cos p, sin p) + b (cos q, sin q) = (x, y)(d), a tip on a straight line. */
typedef struct two_link {
    double a, b, x, h, y, k;
    double elbow; /* 1 or -1 */
} two_link;

/* The closed solution in numbers of 113 bits. */
static void solve_exactly(const two_link *l, double d, quad *p, quad *q)
{
    quad x = l->x + (quad)l->h * d;
    quad y = l->y + (quad)l->k * d;
    quad a = l->a;
    quad b = l->b;
    quad c = (x * x + y * y - a * a - b * b) / (2 * a * b);
    quad between = l->elbow * acosq(c);
    *p = atan2q(y, x) - atan2q(b * sinq(between), a + b * cosq(between));
    *q = *p + between;
}

/* Residuals and, for angles within the rests of p and q, derivatives. */
static void limb_models(const two_link *l, lwi_pm p, lwi_pm q, lwi_pm f[2], lwi_pm jac[4])
{
    lwi_pm sp;
    lwi_pm cp;
    lwi_pm sq;
    lwi_pm cq;
    lwi_pm_sincos(p, &sp, &cp);
    lwi_pm_sincos(q, &sq, &cq);
    f[0] = lwi_pm_axpy(lwi_pm_sub(lwi_pm_scale(cp, l->a), lwi_pm_var(l->x, l->h)), l->b, cq);
    f[1] = lwi_pm_axpy(lwi_pm_sub(lwi_pm_scale(sp, l->a), lwi_pm_var(l->y, l->k)), l->b, sq);
    jac[0] = lwi_pm_scale(sp, -l->a);
    jac[1] = lwi_pm_scale(sq, -l->b);
    jac[2] = lwi_pm_scale(cp, l->a);
    jac[3] = lwi_pm_scale(cq, l->b);
}

static void a_limb_is_followed_by_both_tests(void **state)
{
    (void)state;
    lwt_random_init(&rng, 32);
    long by_kantorovich = 0;
    long by_krawczyk = 0;
    long n = shared(2500);
    for (long i = 0; i < n; i++) {
        double span = power_of_ten(-3.0, -0.9);
        double reach = lwt_random_in(&rng, 0.4, 0.95);
        double way = lwt_random_in(&rng, -3.1, 3.1);
        two_link l = {0.5, 0.45, reach * 0.95 * cos(way), span * lwt_random_in(&rng, -0.3, 0.3),
                      reach * 0.95 * sin(way), span * lwt_random_in(&rng, -0.3, 0.3),
                      lwt_random_index(&rng, 2) == 0 ? 1.0 : -1.0};
        double vp[LWI_PM_SIZE];
        double vq[LWI_PM_SIZE];
        for (int node = 0; node < LWI_PM_SIZE; node++) {
            quad p;
            quad q;
            solve_exactly(&l, lwi_pm_node(node), &p, &q);
            vp[node] = (double)p;
            vq[node] = (double)q;
            /* No jump between turns. */
            vp[node] -= 6.283185307179586 * round((vp[node] - vp[0]) / 6.283185307179586);
            vq[node] -= 6.283185307179586 * round((vq[node] - vq[0]) / 6.283185307179586);
        }
        lwi_pm p = lwi_pm_through(vp);
        lwi_pm q = lwi_pm_through(vq);
        double spoilt = i % 3 == 0 ? power_of_ten(-6.0, -1.0) : 0.0;
        p.c[0] += spoilt;
        lwi_pm f[2];
        lwi_pm jac[4];
        lwi_pm_root root = {false, 0.0, 0.0};
        limb_models(&l, p, q, f, jac);
        if (lwi_rank_prepare(&rank_work, jac, 2, 2, 2)) {
            double f0 = lwi_pm_mag(f[0]);
            double f1 = lwi_pm_mag(f[1]);
            /* Columns of J turn at unit rate: |J(q) - J(p)| <= max(a, b) |q - p|. */
            lwi_pm_kantorovich(&root, lwi_pm_up(sqrt(f0 * f0 + f1 * f1)),
                               lwi_rank_most(&rank_work), 0.5, (double)INFINITY);
        }
        double box[2];
        double radius[2] = {0.0, 0.0};
        box[0] = box[1] = root.holds ? 2.0 * root.radius + 1e-12 : power_of_ten(-4.0, -1.0);
        limb_models(&l, lwi_pm_widen(p, box[0]), lwi_pm_widen(q, box[1]), (lwi_pm[2]){f[0], f[1]},
                    jac);
        bool boxed = lwi_pm_krawczyk(radius, f, jac, 2, box);
        by_kantorovich += root.holds;
        by_krawczyk += boxed;
        for (int k = 0; k < 8; k++) {
            double d = k < 2 ? 2.0 * k - 1.0 : lwt_random_in(&rng, -1.0, 1.0);
            quad ep;
            quad eq;
            solve_exactly(&l, d, &ep, &eq);
            double before = lwi_pm_value(p, d);
            double off_p = (double)(ep - before);
            double off_q = (double)(eq - lwi_pm_value(q, d));
            off_p -= 6.283185307179586 * round(off_p / 6.283185307179586);
            off_q -= 6.283185307179586 * round(off_q / 6.283185307179586);
            double off = sqrt(off_p * off_p + off_q * off_q);
            if (root.holds) {
                assert_true(off <= root.radius + 1e-15);
                /* The other elbow is not within `unique`. */
                two_link other = l;
                other.elbow = -l.elbow;
                solve_exactly(&other, d, &ep, &eq);
                double to_p = (double)(ep - before);
                double to_q = (double)(eq - lwi_pm_value(q, d));
                to_p -= 6.283185307179586 * round(to_p / 6.283185307179586);
                to_q -= 6.283185307179586 * round(to_q / 6.283185307179586);
                assert_true(sqrt(to_p * to_p + to_q * to_q) >= root.unique * (1.0 - 1e-12));
            }
            if (boxed) {
                assert_true(fabs(off_p) <= radius[0] + 1e-15 && fabs(off_q) <= radius[1] + 1e-15);
            }
        }
        /* A box that does not hold the root is never accepted. */
        lwi_pm away = p;
        away.c[0] += lwt_random_in(&rng, 2.0, 9.0) * box[0] + spoilt;
        if (spoilt <= 0.0) {
            limb_models(&l, away, q, f, jac);
            limb_models(&l, lwi_pm_widen(away, box[0]), lwi_pm_widen(q, box[1]),
                        (lwi_pm[2]){f[0], f[1]}, jac);
            assert_false(lwi_pm_krawczyk(radius, f, jac, 2, box));
        }
    }
    assert_true(by_kantorovich * 10 > n * 8);
    assert_true(by_krawczyk * 10 > n * 7);
}

static void krawczyk_takes_one_to_six_unknowns(void **state)
{
    (void)state;
    lwt_random_init(&rng, 33);
    /* q + small sin of the next = d/10 + c, whose solution is within 0.2 of d/10 + c. */
    for (size_t n = 1; n <= LWI_PM_KRAWCZYK; n++) {
        lwi_pm f[LWI_PM_KRAWCZYK];
        lwi_pm jac[LWI_PM_KRAWCZYK * LWI_PM_KRAWCZYK];
        double box[LWI_PM_KRAWCZYK];
        double radius[LWI_PM_KRAWCZYK];
        double at[LWI_PM_KRAWCZYK];
        for (size_t i = 0; i < n; i++) {
            at[i] = lwt_random_in(&rng, -1.0, 1.0);
            box[i] = 0.2;
        }
        for (size_t i = 0; i < n; i++) {
            size_t next = (i + 1) % n;
            lwi_pm s;
            lwi_pm c;
            lwi_pm_sincos(lwi_pm_var(at[next], 0.1), &s, &c);
            f[i] = lwi_pm_scale(s, 0.1);
            lwi_pm_sincos(lwi_pm_widen(lwi_pm_var(at[next], 0.1), 0.2), &s, &c);
            for (size_t j = 0; j < n; j++) {
                jac[i * n + j] = lwi_pm_const(i == j ? 1.0 : 0.0);
            }
            jac[i * n + next] = lwi_pm_axpy(jac[i * n + next], 0.1, c);
        }
        assert_true(lwi_pm_krawczyk(radius, f, jac, n, box));
        for (int k = 0; k <= 4; k++) {
            double d = 0.5 * k - 1.0;
            quad q[LWI_PM_KRAWCZYK];
            for (size_t i = 0; i < n; i++) {
                q[i] = at[i] + 0.1 * (quad)d;
            }
            /* The map contracts by 0.1. */
            for (int step = 0; step < 60; step++) {
                for (size_t i = 0; i < n; i++) {
                    q[i] = at[i] + (quad)0.1 * d - (quad)0.1 * sinq(q[(i + 1) % n]);
                }
            }
            for (size_t i = 0; i < n; i++) {
                double off = (double)fabsq(q[i] - at[i] - (quad)0.1 * d);
                assert_true(off <= radius[i] && radius[i] < box[i]);
            }
        }
        box[0] = (double)NAN;
        assert_false(lwi_pm_krawczyk(NULL, f, jac, n, box));
        box[0] = 0.01;
        f[n - 1] = lwi_pm_failed();
        assert_false(lwi_pm_krawczyk(NULL, f, jac, n, box));
    }
    double one = 1.0;
    lwi_pm model = lwi_pm_const(0.0);
    assert_false(lwi_pm_krawczyk(NULL, &model, &model, 0, &one));
    assert_false(lwi_pm_krawczyk(NULL, &model, &model, LWI_PM_KRAWCZYK + 1, &one));
    assert_false(lwi_pm_krawczyk(NULL, &model, &model, 1, &one));
}

/* ---- linear systems ------------------------------------------------------------------------- */

enum { MOST = 10 };

/* a x = b by elimination with row exchanges; a, b destroyed. */
static void eliminate(quad *a, quad *b, size_t n)
{
    for (size_t k = 0; k < n; k++) {
        size_t p = k;
        for (size_t i = k + 1; i < n; i++) {
            p = fabsq(a[i * n + k]) > fabsq(a[p * n + k]) ? i : p;
        }
        for (size_t j = 0; j < n; j++) {
            quad t = a[k * n + j];
            a[k * n + j] = a[p * n + j];
            a[p * n + j] = t;
        }
        quad t = b[k];
        b[k] = b[p];
        b[p] = t;
        for (size_t i = k + 1; i < n; i++) {
            quad g = a[i * n + k] / a[k * n + k];
            for (size_t j = k; j < n; j++) {
                a[i * n + j] -= g * a[k * n + j];
            }
            b[i] -= g * b[k];
        }
    }
    for (size_t i = n; i-- > 0;) {
        for (size_t j = i + 1; j < n; j++) {
            b[i] -= a[i * n + j] * b[j];
        }
        b[i] /= a[i * n + i];
    }
}

static lwi_pm random_model(double size, double swing, double rest)
{
    lwi_pm a = {{size * lwt_random_normal(&rng)}, 0.0};
    for (int i = 1; i < LWI_PM_SIZE; i++) {
        a.c[i] = size * swing * lwt_random_in(&rng, -1.0, 1.0);
        swing *= 0.3;
    }
    a.e = size * rest * lwt_random_in(&rng, 0.0, 1.0);
    return a;
}

/* A member at d, on the edge of its rest. */
static quad member(const lwi_pm *a, double d)
{
    quad before = 1;
    quad t = d;
    quad s = a->c[0];
    for (int j = 1; j < LWI_PM_SIZE; j++) {
        s += a->c[j] * t;
        quad next = 2 * (quad)d * t - before;
        before = t;
        t = next;
    }
    return s + (lwt_random_index(&rng, 2) == 0 ? (quad)a->e : -(quad)a->e);
}

static void holds(const lwi_pm *x, quad want, double d)
{
    lwi_pm polynomial = *x;
    polynomial.e = 0.0;
    quad off = fabsq(want - member(&polynomial, d));
    if (!(off <= x->e * (1 + (quad)1e-25))) {
        lwt_fail("a solution is off by %g, %g allowed", (double)off, x->e);
    }
}

static void linear_systems_hold_the_solutions_of_all_members(void **state)
{
    (void)state;
    lwt_random_init(&rng, 34);
    lwi_pm m[MOST * MOST];
    lwi_pm b[MOST * 3];
    lwi_pm x[MOST * 3];
    quad a[MOST * MOST];
    quad c[MOST];
    long solved = 0;
    double loosest = 0.0;
    long rounds = shared(1500);
    for (long i = 0; i < rounds; i++) {
        size_t n = 1 + lwt_random_index(&rng, MOST - 2);
        size_t k = 1 + lwt_random_index(&rng, 3);
        double swing = power_of_ten(-4.0, -1.0);
        double rest = i % 2 == 0 ? 0.0 : power_of_ten(-9.0, -2.5);
        /* Rows and columns of very different units. */
        double row_unit = power_of_ten(-3.0, 3.0);
        for (size_t r = 0; r < n; r++) {
            for (size_t j = 0; j < n; j++) {
                m[r * n + j] = random_model(r % 2 == 0 ? 1.0 : row_unit, swing, rest);
                if (r == j) {
                    m[r * n + j].c[0] += (r % 2 == 0 ? 1.0 : row_unit) * 2.0 * (double)n;
                }
            }
            for (size_t j = 0; j < k; j++) {
                b[r * k + j] = random_model(1.0, swing, rest);
            }
        }
        if (!lwi_pm_solve_square(x, m, n, b, k, &solve_work)) {
            continue;
        }
        solved++;
        for (int place = 0; place < 3; place++) {
            double d = place == 0 ? -1.0 : place == 1 ? 1.0 : lwt_random_in(&rng, -1.0, 1.0);
            for (size_t j = 0; j < k; j++) {
                for (size_t l = 0; l < n * n; l++) {
                    a[l] = member(&m[l], d);
                }
                for (size_t l = 0; l < n; l++) {
                    c[l] = member(&b[l * k + j], d);
                }
                eliminate(a, c, n);
                for (size_t l = 0; l < n; l++) {
                    holds(&x[l * k + j], c[l], d);
                    if (rest <= 0.0 && swing < 1e-3) {
                        double share = x[l * k + j].e / (1.0 + lwi_pm_norm(x[l * k + j]));
                        loosest = share > loosest ? share : loosest;
                    }
                }
            }
        }
    }
    assert_true(solved * 10 > rounds * 9);
    /* Exact polynomials that hardly move, the fifth degree least: hardly a rest. */
    lwt_near(loosest, 0.0, 1e-6);
    /* No solution where a member is singular; x may be b. */
    lwi_pm two[4] = {lwi_pm_const(1.0), lwi_pm_const(1.0), lwi_pm_const(1.0), lwi_pm_var(1.1, 0.2)};
    lwi_pm ones[2] = {lwi_pm_const(1.0), lwi_pm_const(1.0)};
    assert_false(lwi_pm_solve_square(ones, two, 2, ones, 1, &solve_work));
    two[3] = lwi_pm_widen(lwi_pm_const(1.1), 0.1);
    assert_false(lwi_pm_solve_square(ones, two, 2, ones, 1, &solve_work));
    two[3] = lwi_pm_failed();
    assert_false(lwi_pm_solve_square(ones, two, 2, ones, 1, &solve_work));
    two[3] = lwi_pm_const(2.0);
    assert_true(lwi_pm_solve_square(ones, two, 2, ones, 1, &solve_work));
    holds(&ones[0], 1, 0.0);
    holds(&ones[1], 0, 0.0);
}

static void least_squares_hold_the_solutions_of_all_members(void **state)
{
    (void)state;
    enum { ROWS = 9, COLS = 6 };
    lwt_random_init(&rng, 35);
    lwi_pm a[ROWS * COLS];
    lwi_pm b[ROWS * 2];
    lwi_pm x[COLS * 2];
    double weight[ROWS];
    long solved = 0;
    double loosest = 0.0;
    long rounds = shared(500);
    for (long i = 0; i < rounds; i++) {
        size_t cols = 1 + lwt_random_index(&rng, COLS);
        size_t rows = cols + lwt_random_index(&rng, ROWS - cols + 1);
        double swing = power_of_ten(-4.0, -1.5);
        double rest = i % 2 == 0 ? 0.0 : power_of_ten(-9.0, -4.0);
        bool weighted = i % 3 != 0;
        for (size_t r = 0; r < rows; r++) {
            weight[r] = power_of_ten(-3.0, 3.0);
            for (size_t j = 0; j < cols; j++) {
                a[r * cols + j] = random_model(1.0, swing, rest);
            }
            b[r * 2] = random_model(1.0, swing, rest);
            b[r * 2 + 1] = random_model(1.0, swing, rest);
        }
        if (!lwi_pm_solve_least(x, a, rows, cols, weighted ? weight : NULL, b, 2, &solve_work)) {
            continue;
        }
        solved++;
        for (int place = 0; place < 3; place++) {
            double d = place == 0 ? -1.0 : place == 1 ? 1.0 : lwt_random_in(&rng, -1.0, 1.0);
            quad v[ROWS * COLS];
            quad c[ROWS];
            quad n[COLS * COLS];
            quad y[COLS];
            for (size_t l = 0; l < rows * cols; l++) {
                v[l] = member(&a[l], d);
            }
            for (size_t l = 0; l < rows; l++) {
                c[l] = member(&b[l * 2 + 1], d);
            }
            /* Normal equations; 113 bits leave enough of them. */
            for (size_t p = 0; p < cols; p++) {
                y[p] = 0;
                for (size_t r = 0; r < rows; r++) {
                    y[p] += (weighted ? weight[r] : 1.0) * v[r * cols + p] * c[r];
                }
                for (size_t q = 0; q < cols; q++) {
                    quad s = 0;
                    for (size_t r = 0; r < rows; r++) {
                        s += (weighted ? weight[r] : 1.0) * v[r * cols + p] * v[r * cols + q];
                    }
                    n[p * cols + q] = s;
                }
            }
            eliminate(n, y, cols);
            for (size_t p = 0; p < cols; p++) {
                holds(&x[p * 2 + 1], y[p], d);
                double size = 1.0 + lwi_pm_norm(x[p * 2 + 1]);
                if (rest <= 0.0 && swing < 3e-4 && rows > cols + 1 && !weighted &&
                    x[p * 2 + 1].e / size > loosest) {
                    loosest = x[p * 2 + 1].e / size;
                }
            }
        }
    }
    assert_true(solved * 10 > rounds * 8);
    lwt_near(loosest, 0.0, 1e-5);
    weight[0] = -1.0;
    assert_false(lwi_pm_solve_least(x, a, 1, 1, weight, b, 1, &solve_work));
    weight[0] = (double)NAN;
    assert_false(lwi_pm_solve_least(x, a, 1, 1, weight, b, 1, &solve_work));
    assert_false(lwi_pm_solve_least(x, a, 1, 2, NULL, b, 1, &solve_work));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(radii_are_the_roots_of_the_parabola),
        cmocka_unit_test(a_limb_is_followed_by_both_tests),
        cmocka_unit_test(krawczyk_takes_one_to_six_unknowns),
        cmocka_unit_test(linear_systems_hold_the_solutions_of_all_members),
        cmocka_unit_test(least_squares_hold_the_solutions_of_all_members),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
