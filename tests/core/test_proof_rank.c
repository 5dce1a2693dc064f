/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Least singular values proved (core/proof/rank.h): on matrices whose singular values are known by
 * construction, at thresholds close to them, no false proof and no useless one; on members at the
 * edge of their rests; on matrices that are exactly singular; each error term left out is missed.
 * LWT_SHARE scales the number of matrices. */
#include "math/linalg.h"
#include "proof/rank.h"

#include <fenv.h>
#include <lwt.h>
#include <quadmath.h>
#include <stdlib.h>
#include <string.h>

/* rank_mutants.c */
extern int rank_mutant;
bool mutant_rank_prepare(lwi_rank_work *w, const lwi_pm *a, size_t rows, size_t cols, size_t ld);
bool mutant_rank_prepare_with(lwi_rank_work *w, const double *q, const lwi_pm *a, size_t rows,
                              size_t cols, size_t ld);
bool mutant_rank_at_least(lwi_rank_work *w, double s0);
double mutant_rank_above(lwi_rank_work *w, double *v, const lwi_pm *a, size_t rows, size_t cols,
                         size_t ld, double d);

__extension__ typedef __float128 quad;

static lwi_rank_work work;
static lwt_random rng;

static long shared(long n)
{
    const char *text = getenv("LWT_SHARE");
    double share = text != NULL ? strtod(text, NULL) : 1.0;
    long scaled = (long)((double)n * (share < 1.0 ? share : 1.0));
    return scaled > 20 ? scaled : 20;
}

/* ---- matrices of known singular values ------------------------------------------------------ */

/* a (n x m) <- H a, H a random reflection of order n; and a H of order m. */
static void reflect(double *a, size_t n, size_t m, bool left)
{
    double v[LWI_RANK_ROWS];
    size_t order = left ? n : m;
    double size = 0.0;
    for (size_t i = 0; i < order; i++) {
        v[i] = lwt_random_normal(&rng);
        size += v[i] * v[i];
    }
    for (size_t j = 0; j < (left ? m : n); j++) {
        double s = 0.0;
        for (size_t i = 0; i < order; i++) {
            s += v[i] * (left ? a[i * m + j] : a[j * m + i]);
        }
        s *= 2.0 / size;
        for (size_t i = 0; i < order; i++) {
            double *x = left ? &a[i * m + j] : &a[j * m + i];
            *x -= s * v[i];
        }
    }
}

/* n x m with least singular value s and others up to `most`, some equal; known to 1e-14 most. */
static void with_singular_values(double *a, size_t n, size_t m, double s, double most)
{
    double value = s;
    memset(a, 0, n * m * sizeof *a);
    for (size_t j = 0; j < m; j++) {
        if (j > 0 && lwt_random_index(&rng, 3) != 0) {
            value = s * pow(most / s, lwt_random_in(&rng, 0.0, 1.0));
        }
        a[j * m + j] = value;
    }
    for (int i = 0; i < 3; i++) {
        reflect(a, n, m, true);
        reflect(a, n, m, false);
    }
}

static void as_models(lwi_pm *out, const double *a, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        out[i] = lwi_pm_const(a[i]);
    }
}

static void pick_size(size_t *n, size_t *m)
{
    static const size_t sizes[8][2] = {{6, 6}, {3, 3}, {4, 3}, {8, 7},
                                       {6, 6}, {2, 2}, {1, 1}, {9, 4}};
    size_t i = lwt_random_index(&rng, 8);
    *n = sizes[i][0];
    *m = sizes[i][1];
}

static void constant_matrices_are_judged_to_seven_digits(void **state)
{
    (void)state;
    lwt_random_init(&rng, 21);
    double a[LWI_RANK_ROWS * 16];
    static lwi_pm model[LWI_RANK_ROWS * 16];
    for (long i = 0; i < shared(12000); i++) {
        size_t n;
        size_t m;
        pick_size(&n, &m);
        double s = pow(10.0, lwt_random_in(&rng, -6.0, 0.0));
        double v[16];
        with_singular_values(a, n, m, s, lwt_random_in(&rng, 1.0, 3.0));
        as_models(model, a, n * m);
        assert_true(lwi_rank_prepare(&work, model, n, m, m));
        assert_true(lwi_rank_at_least(&work, 0.0));
        assert_true(lwi_rank_at_least(&work, 0.9 * s));
        assert_true(lwi_rank_at_least(&work, (1.0 - 1e-4) * s));
        assert_true(lwi_rank_at_least(&work, (1.0 - 1e-7) * s));
        assert_false(lwi_rank_at_least(&work, (1.0 + 1e-7) * s));
        assert_false(lwi_rank_at_least(&work, (1.0 + 1e-4) * s));
        assert_false(lwi_rank_at_least(&work, 1.01 * s));
        double most = lwi_rank_most(&work);
        assert_true(most <= s * (1.0 + 1e-7) && most >= s * (1.0 - 0.01));
        double above = lwi_rank_above(&work, v, model, n, m, m, 0.3);
        assert_true(above >= s * (1.0 - 1e-7) && above <= s * (1.0 + 1e-7));
    }
}

/* M(d) = G(d) A p(d): G a turn in a plane, p a polynomial. Its singular values are those of A times
 * |p(d)|, and so least where |p| is. */
typedef struct moving {
    lwi_pm m[81];
    size_t rows, cols;
    double least; /* over all d */
    double at;    /* where */
} moving;

static void make_moving(moving *out, double s, double swing)
{
    double a[81];
    pick_size(&out->rows, &out->cols);
    size_t rows = out->rows;
    size_t cols = out->cols;
    with_singular_values(a, rows, cols, s, 2.0);
    as_models(out->m, a, rows * cols);
    if (rows > 1) {
        size_t i = lwt_random_index(&rng, rows);
        size_t k = (i + 1 + lwt_random_index(&rng, rows - 1)) % rows;
        lwi_pm sine;
        lwi_pm cosine;
        double angle = lwt_random_in(&rng, -3.0, 3.0);
        lwi_pm_sincos(lwi_pm_var(angle, swing * lwt_random_in(&rng, -1.0, 1.0)), &sine, &cosine);
        for (size_t j = 0; j < cols; j++) {
            lwi_pm x = out->m[i * cols + j];
            lwi_pm y = out->m[k * cols + j];
            out->m[i * cols + j] = lwi_pm_mul_sub(cosine, x, sine, y);
            out->m[k * cols + j] = lwi_pm_mul2(sine, x, cosine, y);
        }
    }
    lwi_pm p = lwi_pm_var(1.0, swing * lwt_random_in(&rng, -1.0, 1.0));
    p.c[2] = swing * lwt_random_in(&rng, -0.5, 0.5);
    for (size_t i = 0; i < rows * cols; i++) {
        out->m[i] = lwi_pm_mul(p, out->m[i]);
    }
    /* p = 1 - c2 + c1 d + 2 c2 d^2. */
    double c1 = p.c[1];
    double c2 = p.c[2];
    double at = fabs(c2) > 0.0 ? -c1 / (4.0 * c2) : 2.0;
    out->at = c1 > 0.0 ? -1.0 : 1.0;
    double least = 1.0 - fabs(c1) + c2;
    if (fabs(at) <= 1.0 && c2 > 0.0) {
        least = 1.0 - c2 + c1 * at + 2.0 * c2 * at * at;
        out->at = at;
    }
    out->least = s * least;
}

static void moving_matrices_are_never_said_to_keep_more_than_they_do(void **state)
{
    (void)state;
    static const double over[4] = {1.0 + 1e-9, 1.0 + 1e-7, 1.0 + 1e-4, 1.01};
    lwt_random_init(&rng, 22);
    moving mv;
    double v[9];
    long small_moves = 0;
    long proved = 0;
    for (long i = 0; i < shared(60000); i++) {
        double swing = pow(10.0, lwt_random_in(&rng, -4.0, -0.4));
        double s = pow(10.0, lwt_random_in(&rng, -3.0, 0.0));
        make_moving(&mv, s, swing);
        if (!lwi_rank_prepare(&work, mv.m, mv.rows, mv.cols, mv.cols)) {
            lwt_fail("a matrix of full rank could not be prepared");
        }
        /* Four thresholds above the true least value. */
        for (int k = 0; k < 4; k++) {
            assert_false(lwi_rank_at_least(&work, over[k] * mv.least));
        }
        double most = lwi_rank_most(&work);
        assert_true(most <= mv.least * (1.0 + 1e-12));
        assert_true(most == 0.0 || !lwi_rank_at_least(&work, most * 1.5 + mv.least));
        if (swing < 0.02 * s) {
            small_moves++;
            proved += most >= 0.97 * mv.least;
        }
        double above = lwi_rank_above(&work, v, mv.m, mv.rows, mv.cols, mv.cols, mv.at);
        assert_true(above >= mv.least * (1.0 - 1e-12) && above >= most);
        assert_true(above <= mv.least * (1.0 + 1e-6) + 0.1 * swing * swing);
    }
    /* Moves that are small beside the least singular value lose little. */
    assert_true(small_moves > 0);
    assert_true(proved * 100 >= small_moves * 90);
}

static void members_at_the_edge_are_counted(void **state)
{
    (void)state;
    lwt_random_init(&rng, 23);
    double a[81];
    double member[81];
    double sv[9];
    lwi_pm m[81];
    for (long i = 0; i < shared(4000); i++) {
        size_t rows;
        size_t cols;
        pick_size(&rows, &cols);
        double s = lwt_random_in(&rng, 0.1, 1.0);
        double rest = s * pow(10.0, lwt_random_in(&rng, -4.0, -0.5));
        with_singular_values(a, rows, cols, s, 2.0);
        for (size_t k = 0; k < rows * cols; k++) {
            m[k] = lwi_pm_widen(lwi_pm_const(a[k]), rest * lwt_random_in(&rng, 0.0, 1.0));
            for (int l = 1; l < LWI_PM_SIZE; l++) {
                m[k].c[l] = rest * lwt_random_in(&rng, -0.5, 0.5);
            }
        }
        if (!lwi_rank_prepare(&work, m, rows, cols, cols)) {
            continue;
        }
        double most = lwi_rank_most(&work);
        for (int k = 0; k < 6; k++) {
            double d = k < 2 ? 2.0 * k - 1.0 : lwt_random_in(&rng, -1.0, 1.0);
            for (size_t l = 0; l < rows * cols; l++) {
                member[l] = lwi_pm_value(m[l], d) +
                            (lwt_random_index(&rng, 2) == 0 ? m[l].e : -m[l].e);
            }
            lwi_svd(member, rows, cols, cols, sv, NULL);
            assert_true(sv[cols - 1] >= most * (1.0 - 1e-12));
        }
    }
}

/* ---- exactly singular ----------------------------------------------------------------------- */

/* n x n of rank n - 1 in whole numbers, exact in doubles, its columns of very different lengths. */
static void singular(lwi_pm *m, size_t n)
{
    double left[64];
    double right[64];
    for (size_t i = 0; i < n * (n - 1); i++) {
        left[i] = floor(lwt_random_in(&rng, -500.0, 500.0));
        right[i] = floor(lwt_random_in(&rng, -500.0, 500.0));
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            double s = 0.0;
            for (size_t k = 0; k + 1 < n; k++) {
                s += left[i * (n - 1) + k] * right[k * n + j];
            }
            m[i * n + j] = lwi_pm_const(ldexp(s, (int)j * 2));
        }
    }
}

static void singular_matrices_are_never_proved_regular(void **state)
{
    (void)state;
    static const int modes[4] = {FE_TONEAREST, FE_DOWNWARD, FE_UPWARD, FE_TOWARDZERO};
    lwi_pm m[64];
    long prepared = 0;
    lwt_random_init(&rng, 24);
    for (long i = 0; i < shared(20000); i++) {
        size_t n = 2 + lwt_random_index(&rng, 7);
        singular(m, n);
        assert_int_equal(fesetround(modes[i % 4]), 0);
        bool ready = lwi_rank_prepare(&work, m, n, n, n);
        bool proved = ready && lwi_rank_at_least(&work, 0.0);
        assert_int_equal(fesetround(FE_TONEAREST), 0);
        prepared += ready;
        assert_false(proved);
    }
    assert_true(prepared > 10);
}

static void other_q_and_odd_input_prove_nothing_false(void **state)
{
    (void)state;
    lwt_random_init(&rng, 25);
    double a[36];
    double q[36];
    lwi_pm m[36];
    for (long i = 0; i < shared(3000); i++) {
        double s = lwt_random_in(&rng, 0.1, 1.0);
        with_singular_values(a, 6, 6, s, 2.0);
        as_models(m, a, 36);
        assert_true(lwi_rank_prepare(&work, m, 6, 6, 6));
        memcpy(q, work.q, sizeof q);
        assert_true(lwi_rank_prepare_with(&work, q, m, 6, 6, 6));
        assert_true(lwi_rank_at_least(&work, 0.999 * s));
        double off = pow(10.0, lwt_random_in(&rng, -6.0, 1.0));
        for (int k = 0; k < 36; k++) {
            q[k] = 3.0 * (q[k] + off * lwt_random_normal(&rng));
        }
        assert_true(lwi_rank_prepare_with(&work, q, m, 6, 6, 6));
        assert_false(lwi_rank_at_least(&work, s * (1.0 + 1e-9)));
    }
    q[7] = (double)NAN;
    assert_false(lwi_rank_prepare_with(&work, q, m, 6, 6, 6) && lwi_rank_at_least(&work, 0.0));
    m[3] = lwi_pm_failed();
    assert_false(lwi_rank_prepare(&work, m, 6, 6, 6));
    assert_false(lwi_rank_at_least(&work, 0.0));
    assert_true(lwi_rank_most(&work) <= 0.0);
    double v[6];
    assert_true(lwi_rank_above(&work, v, m, 6, 6, 6, 0.0) > DBL_MAX);
    assert_false(lwi_rank_prepare(&work, m, 2, 3, 3));
    assert_false(lwi_rank_prepare(&work, m, 0, 0, 1));
    as_models(m, a, 36);
    assert_true(lwi_rank_prepare(&work, m, 6, 6, 6));
    assert_false(lwi_rank_at_least(&work, -1.0));
    assert_false(lwi_rank_at_least(&work, (double)NAN));
    assert_false(lwi_rank_at_least(&work, (double)INFINITY));
    /* Numbers whose squares vanish. */
    for (int k = 0; k < 36; k++) {
        m[k] = lwi_pm_widen(lwi_pm_const(ldexp(k % 7 == 0 ? 1.0 : 0.0, -620)), 0x1p-619);
    }
    assert_false(lwi_rank_prepare(&work, m, 6, 6, 6) && lwi_rank_at_least(&work, 0.0));
    assert_true(lwi_rank_above(&work, v, m, 6, 6, 6, 0.0) >= 0x1p-620);
}

static void large_matrices_fit(void **state)
{
    (void)state;
    static double a[LWI_RANK_ROWS * LWI_RANK_COLS];
    static lwi_pm m[LWI_RANK_ROWS * LWI_RANK_COLS];
    double v[LWI_RANK_COLS];
    lwt_random_init(&rng, 26);
    with_singular_values(a, LWI_RANK_ROWS, LWI_RANK_COLS, 0.01, 2.0);
    as_models(m, a, LWI_RANK_ROWS * LWI_RANK_COLS);
    assert_true(lwi_rank_prepare(&work, m, LWI_RANK_ROWS, LWI_RANK_COLS, LWI_RANK_COLS));
    assert_true(lwi_rank_at_least(&work, 0.01 * (1.0 - 1e-7)));
    assert_false(lwi_rank_at_least(&work, 0.01 * (1.0 + 1e-7)));
    double most = lwi_rank_most(&work);
    lwt_near_rel(most, 0.01, 0.01);
    double above = lwi_rank_above(&work, v, m, LWI_RANK_ROWS, LWI_RANK_COLS, LWI_RANK_COLS, 0.0);
    assert_true(above >= 0.01 * (1.0 - 1e-9) && above < 0.0105);
}

/* ---- the witness against numbers of 113 bits ------------------------------------------------ */

/* The least singular value of [a b; c d]: |det| / largest. */
static quad least_of_two(quad a, quad b, quad c, quad d)
{
    quad half = (a * a + b * b + c * c + d * d) / 2;
    quad det = a * d - b * c;
    return fabsq(det) / sqrtq(half + sqrtq(half * half - det * det));
}

/* Near-singular pairs of columns: how often the upper bound lies below a member's true value. */
static long witness_faults(double (*above)(lwi_rank_work *, double *, const lwi_pm *, size_t,
                                           size_t, size_t, double),
                           long rounds)
{
    long faults = 0;
    for (long i = 0; i < rounds; i++) {
        double x[4];
        lwi_pm m[4];
        double v[2];
        for (int k = 0; k < 3; k++) {
            x[k] = lwt_random_in(&rng, 0.5, 1.0);
        }
        x[3] = x[1] * x[2] / x[0] + lwt_random_in(&rng, -4e-16, 4e-16);
        bool thick = i % 2 == 1;
        for (int k = 0; k < 4; k++) {
            m[k] = lwi_pm_const(x[k]);
            m[k].e = thick ? 1e-9 : 0.0;
        }
        double bound = above(&work, v, m, 2, 2, 2, 1.0);
        for (int signs = 0; signs < 16; signs++) {
            quad y[4];
            for (int k = 0; k < 4; k++) {
                y[k] = (quad)x[k] + (signs >> k & 1 ? (quad)m[k].e : -(quad)m[k].e);
            }
            faults += !(least_of_two(y[0], y[1], y[2], y[3]) <= bound);
        }
    }
    return faults;
}

static void witnesses_bound_every_member(void **state)
{
    (void)state;
    lwt_random_init(&rng, 27);
    assert_int_equal(witness_faults(lwi_rank_above, shared(3000)), 0);
}

/* ---- mutants -------------------------------------------------------------------------------- */

/* How often something false was proved with this error term left out. */
static long false_proofs(int term)
{
    static double a[9];
    lwi_pm m[64];
    double q[9];
    long faults = 0;
    rank_mutant = term;
    lwt_random_init(&rng, 28);
    for (int i = 0; i < 400; i++) {
        size_t n = 2 + lwt_random_index(&rng, 7);
        singular(m, n);
        faults += mutant_rank_prepare(&work, m, n, n, n) && mutant_rank_at_least(&work, 0.0);
    }
    for (int i = 0; i < 100; i++) {
        double s = lwt_random_in(&rng, 0.5, 1.0);
        with_singular_values(a, 3, 3, s, 1.0);
        as_models(m, a, 9);
        /* |Q| = 2. */
        faults += !mutant_rank_prepare(&work, m, 3, 3, 3);
        for (int k = 0; k < 9; k++) {
            q[k] = 2.0 * work.q[k];
        }
        faults += mutant_rank_prepare_with(&work, q, m, 3, 3, 3) &&
                  mutant_rank_at_least(&work, 1.01 * s);
        /* A member loses all there is. */
        for (size_t k = 0; k < 9; k++) {
            m[k] = lwi_pm_widen(lwi_pm_const(k % 4 == 0 ? s : 0.0), 0.9 * s);
        }
        faults += mutant_rank_prepare(&work, m, 3, 3, 3) && mutant_rank_at_least(&work, 0.2 * s);
        /* T3 takes half. */
        for (size_t k = 0; k < 9; k++) {
            m[k] = lwi_pm_const(k % 4 == 0 ? s : 0.0);
            m[k].c[3] = 0.5 * m[k].c[0];
        }
        faults += mutant_rank_prepare(&work, m, 3, 3, 3) && mutant_rank_at_least(&work, 0.6 * s);
    }
    faults += witness_faults(mutant_rank_above, 200);
    rank_mutant = 0;
    return faults;
}

static void each_error_term_left_out_proves_something_false(void **state)
{
    (void)state;
    assert_int_equal(false_proofs(0), 0);
    for (int term = 1; term <= 5; term++) {
        if (false_proofs(term) == 0) {
            lwt_fail("error term %d can be left out unseen", term);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(constant_matrices_are_judged_to_seven_digits),
        cmocka_unit_test(moving_matrices_are_never_said_to_keep_more_than_they_do),
        cmocka_unit_test(members_at_the_edge_are_counted),
        cmocka_unit_test(singular_matrices_are_never_proved_regular),
        cmocka_unit_test(other_q_and_odd_input_prove_nothing_false),
        cmocka_unit_test(large_matrices_fit),
        cmocka_unit_test(witnesses_bound_every_member),
        cmocka_unit_test(each_error_term_left_out_proves_something_false),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
