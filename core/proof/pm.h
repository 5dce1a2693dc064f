/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Polynomial models: the numbers that proofs along a move are made of.
 *
 * A model stands for every function f of one variable d in [-1, 1] with
 *
 *     |f(d) - sum c[i] T_i(d)| <= e      for each d, T_i the Chebyshev polynomials.
 *
 * If a, b are models of f, g, then lwi_pm_mul(a, b) is a model of f g, and so on: what an operation
 * drops of higher degree, and what it rounds, is added to e. (Makino & Berz 2003; in this basis
 * Brisebarre & Joldes 2010.)
 *
 * Rounding. Every bound rests on one rule: for + - * / and the square root,
 *
 *     |computed - exact| <= 2^-52 |computed| + 2^-1074,
 *
 * which holds in each of the four rounding modes, and a fused multiply-add keeps it. So nothing
 * here depends on the rounding mode, on contraction, or on directed rounding being believed; only
 * -ffast-math and flushing of small numbers are out. Sums of errors, none negative, are taken up by
 * 1 + 2^-44, which covers 200 roundings downward.
 *
 * Failure (a quotient by what may be zero, the root of what may be negative, sizes above 2^900) is
 * e = +infinity with all coefficients zero. It propagates and is never NaN: a model has finite
 * coefficients always. "Proved" is to be written so that infinity fails.
 *
 * Parameters are doubles and taken as exact: an uncertainty is added by lwi_pm_widen.
 *
 * Any thread; no state. LWI_PM_DEGREE is one for all that is linked together. For the tests alone:
 * LWI_PM_MUTANT leaves out the error term of that number, LWI_PM_SERIES fixes the length of the
 * sine's series. */
#ifndef LWI_PM_H
#define LWI_PM_H

#include <float.h>
#include <math.h>
#include <stdbool.h>
#include <stddef.h>

/* Measured: see core/MAP.md. */
#ifndef LWI_PM_DEGREE
#define LWI_PM_DEGREE 4
#endif

#include "pm_tables.h"

#if !defined(FLT_EVAL_METHOD) || FLT_EVAL_METHOD != 0
#error "proofs need arithmetic in double, not in a wider type"
#endif
#ifdef __FAST_MATH__
#error "proofs need IEEE arithmetic: no -ffast-math"
#endif

#if defined(__GNUC__) && !defined(__clang__)
#define LWI_PM_UNROLL _Pragma("GCC unroll 16")
#else
#define LWI_PM_UNROLL
#endif

/* The error terms by name; a test leaves out each and must see it missed. */
enum lwi_pm_term {
    LWI_PM_TERM_NONE,
    LWI_PM_TERM_UP,         /* sums of errors taken up */
    LWI_PM_TERM_ADD,        /* rounding of sums */
    LWI_PM_TERM_SCALE,      /* rounding of multiples */
    LWI_PM_TERM_AXPY,       /* rounding of a sum with a multiple */
    LWI_PM_TERM_TINY,       /* products below the smallest double */
    LWI_PM_TERM_MUL_LEFT,   /* rest of the right factor, size of the left */
    LWI_PM_TERM_MUL_RIGHT,  /* the other way round */
    LWI_PM_TERM_MUL_BOTH,   /* rest times rest */
    LWI_PM_TERM_MUL_DROP,   /* degrees above LWI_PM_DEGREE */
    LWI_PM_TERM_MUL_ROUND,  /* rounding of products */
    LWI_PM_TERM_RANGE,      /* rounding of a range by sizes */
    LWI_PM_TERM_BERNSTEIN,  /* rounding of Bernstein coefficients */
    LWI_PM_TERM_AT,         /* rounding of a value */
    LWI_PM_TERM_RECIP,      /* what the guess of a reciprocal is off */
    LWI_PM_TERM_RSQRT,      /* the same of a reciprocal root */
    LWI_PM_TERM_SQRT,       /* the same of a root */
    LWI_PM_TERM_SINE,       /* rest of the sine's series */
    LWI_PM_TERM_COSINE,     /* rest of the cosine's series */
    LWI_PM_TERM_TURN,       /* rounding of both, and of the angle's reduction */
    LWI_PM_TERMS
};

#ifdef LWI_PM_MUTANT
#define LWI_PM_TERM(name, x) ((LWI_PM_MUTANT) == LWI_PM_TERM_##name ? 0.0 : (x))
#else
#define LWI_PM_TERM(name, x) (x)
#endif

#define LWI_PM_EPS 0x1p-52
#define LWI_PM_TINY 0x1p-960
/* Sizes above it count as overflow: squares and their sums stay finite. */
#define LWI_PM_MOST 0x1p900

typedef struct lwi_pm {
    double c[LWI_PM_SIZE];
    double e;
} lwi_pm;

/* ---- made and judged ----------------------------------------------------------------------- */

/* An upper bound of a sum of up to 200 terms, none negative, from its computed value. */
static inline double lwi_pm_up(double x)
{
    return x * (1.0 + LWI_PM_TERM(UP, 0x1p-44));
}

static inline lwi_pm lwi_pm_failed(void)
{
    lwi_pm out = {{0.0}, (double)INFINITY};
    return out;
}

static inline bool lwi_pm_ok(lwi_pm a)
{
    return a.e <= LWI_PM_MOST;
}

/* Makes a result whose rest is too large, infinite or NaN the failed model. Each operation's rest
 * holds at least 2^-52 of its coefficients, so these are finite where the rest is. */
static inline lwi_pm lwi_pm_sealed(lwi_pm a)
{
    if (!(a.e <= LWI_PM_MOST)) {
        return lwi_pm_failed();
    }
    return a;
}

static inline lwi_pm lwi_pm_const(double x)
{
    lwi_pm out = {{x}, 0.0};
    if (!(fabs(x) <= LWI_PM_MOST)) {
        return lwi_pm_failed();
    }
    return out;
}

/* mid + half d. */
static inline lwi_pm lwi_pm_var(double mid, double half)
{
    lwi_pm out = {{mid, half}, 0.0};
    if (!(fabs(mid) <= LWI_PM_MOST && fabs(half) <= LWI_PM_MOST)) {
        return lwi_pm_failed();
    }
    return out;
}

/* The set of a and all within `by` of it; `by` is not negative. */
static inline lwi_pm lwi_pm_widen(lwi_pm a, double by)
{
    a.e = lwi_pm_up(a.e + by);
    return lwi_pm_sealed(a);
}

/* Sum of the sizes of the coefficients, as computed. */
static inline double lwi_pm_norm(lwi_pm a)
{
    double s = fabs(a.c[0]);
    LWI_PM_UNROLL
    for (int i = 1; i < LWI_PM_SIZE; i++) {
        s += fabs(a.c[i]);
    }
    return s;
}

/* An upper bound of |a| for all d. */
static inline double lwi_pm_mag(lwi_pm a)
{
    return lwi_pm_up(lwi_pm_norm(a) + a.e);
}

/* ---- sums and multiples -------------------------------------------------------------------- */

static inline lwi_pm lwi_pm_neg(lwi_pm a)
{
    LWI_PM_UNROLL
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        a.c[i] = -a.c[i];
    }
    return a;
}

static inline lwi_pm lwi_pm_add(lwi_pm a, lwi_pm b)
{
    LWI_PM_UNROLL
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        a.c[i] += b.c[i];
    }
    a.e = lwi_pm_up(a.e + b.e + LWI_PM_TERM(ADD, LWI_PM_EPS * lwi_pm_norm(a)));
    return lwi_pm_sealed(a);
}

static inline lwi_pm lwi_pm_sub(lwi_pm a, lwi_pm b)
{
    return lwi_pm_add(a, lwi_pm_neg(b));
}

/* a + k, k exact. */
static inline lwi_pm lwi_pm_shift(lwi_pm a, double k)
{
    a.c[0] += k;
    a.e = lwi_pm_up(a.e + LWI_PM_TERM(ADD, LWI_PM_EPS * fabs(a.c[0])));
    return lwi_pm_sealed(a);
}

/* k a, k exact. */
static inline lwi_pm lwi_pm_scale(lwi_pm a, double k)
{
    LWI_PM_UNROLL
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        a.c[i] *= k;
    }
    a.e = lwi_pm_up(fabs(k) * a.e + LWI_PM_TERM(SCALE, LWI_PM_EPS * lwi_pm_norm(a))) +
          LWI_PM_TERM(TINY, LWI_PM_TINY);
    return lwi_pm_sealed(a);
}

/* y + k a, k exact. */
static inline lwi_pm lwi_pm_axpy(lwi_pm y, double k, lwi_pm a)
{
    double parts = 0.0;
    LWI_PM_UNROLL
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        double p = k * a.c[i];
        parts += fabs(p);
        y.c[i] += p;
    }
    y.e = lwi_pm_up(y.e + fabs(k) * a.e +
                    LWI_PM_TERM(AXPY, LWI_PM_EPS * (parts + lwi_pm_norm(y)))) +
          LWI_PM_TERM(TINY, LWI_PM_TINY);
    return lwi_pm_sealed(y);
}

/* k[0] a[0] + k[1] a[1] + k[2] a[2], k exact: a row of a constant rotation on a vector. */
static inline lwi_pm lwi_pm_dot3k(const double k[3], const lwi_pm a[3])
{
    lwi_pm out;
    double parts = 0.0;
    LWI_PM_UNROLL
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        double p = k[0] * a[0].c[i];
        double q = k[1] * a[1].c[i];
        double r = k[2] * a[2].c[i];
        parts += fabs(p) + fabs(q) + fabs(r);
        out.c[i] = p + q + r;
    }
    /* Three roundings at most on the way of each product. */
    out.e = lwi_pm_up(fabs(k[0]) * a[0].e + fabs(k[1]) * a[1].e + fabs(k[2]) * a[2].e +
                      LWI_PM_TERM(AXPY, 4.0 * LWI_PM_EPS * parts)) +
            LWI_PM_TERM(TINY, LWI_PM_TINY);
    return lwi_pm_sealed(out);
}

/* ---- products ------------------------------------------------------------------------------ */

/* Twice the product's coefficients, by T_i T_j = (T_(i+j) + T_|i-j|) / 2. */
static inline void lwi_pm_twice(double r[2 * LWI_PM_SIZE - 1], const lwi_pm *a, const lwi_pm *b)
{
    double a0 = 2.0 * a->c[0];
    double b0 = 2.0 * b->c[0];
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        r[k] = a0 * b->c[k];
    }
    LWI_PM_UNROLL
    for (int i = 1; i < LWI_PM_SIZE; i++) {
        r[i] += a->c[i] * b0;
        LWI_PM_UNROLL
        for (int j = LWI_PM_DEGREE; j >= 1; j--) {
            double p = a->c[i] * b->c[j];
            if (j == LWI_PM_DEGREE) {
                r[i + j] = p;
            } else {
                r[i + j] += p;
            }
            r[i > j ? i - j : j - i] += p;
        }
    }
}

/* From twice the coefficients of a sum of `products` products to a model of degree LWI_PM_DEGREE.
 * `rest` is what the factors' rests make, `size` the sum of the products of the factors' norms.
 *
 * A coefficient is a sum of at most 2 LWI_PM_DEGREE terms a product, whose sizes sum to `size` over
 * all coefficients; each passes as many additions and one product, hence the factor (two more for
 * the terms of second order and the rounding of size itself). */
static inline lwi_pm lwi_pm_gathered(const double r[2 * LWI_PM_SIZE - 1], double rest, double size,
                                     int products)
{
    lwi_pm out;
    double dropped = 0.0;
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        out.c[k] = 0.5 * r[k];
    }
    LWI_PM_UNROLL
    for (int k = LWI_PM_SIZE; k < 2 * LWI_PM_SIZE - 1; k++) {
        dropped += fabs(r[k]);
    }
    double rounding = (2.0 * LWI_PM_DEGREE * products + 2.0) * LWI_PM_EPS * size;
    out.e = lwi_pm_up(rest + LWI_PM_TERM(MUL_DROP, 0.5 * dropped) +
                      LWI_PM_TERM(MUL_ROUND, rounding)) +
            LWI_PM_TERM(TINY, LWI_PM_TINY);
    return lwi_pm_sealed(out);
}

/* What the rests of two factors make, given their norms. */
static inline double lwi_pm_rests(lwi_pm a, lwi_pm b, double na, double nb)
{
    return LWI_PM_TERM(MUL_LEFT, na * b.e) + LWI_PM_TERM(MUL_RIGHT, nb * a.e) +
           LWI_PM_TERM(MUL_BOTH, a.e * b.e);
}

static inline lwi_pm lwi_pm_mul(lwi_pm a, lwi_pm b)
{
    double r[2 * LWI_PM_SIZE - 1];
    double na = lwi_pm_norm(a);
    double nb = lwi_pm_norm(b);
    lwi_pm_twice(r, &a, &b);
    return lwi_pm_gathered(r, lwi_pm_rests(a, b, na, nb), na * nb, 1);
}

static inline lwi_pm lwi_pm_sqr(lwi_pm a)
{
    return lwi_pm_mul(a, a);
}

/* a0 b0 + a1 b1 and a0 b0 - a1 b1: what is dropped may cancel, and it is rounded up once. */
static inline lwi_pm lwi_pm_mul2(lwi_pm a0, lwi_pm b0, lwi_pm a1, lwi_pm b1)
{
    double r[2 * LWI_PM_SIZE - 1];
    double s[2 * LWI_PM_SIZE - 1];
    double na0 = lwi_pm_norm(a0);
    double nb0 = lwi_pm_norm(b0);
    double na1 = lwi_pm_norm(a1);
    double nb1 = lwi_pm_norm(b1);
    lwi_pm_twice(r, &a0, &b0);
    lwi_pm_twice(s, &a1, &b1);
    LWI_PM_UNROLL
    for (int k = 0; k < 2 * LWI_PM_SIZE - 1; k++) {
        r[k] += s[k];
    }
    double rest = lwi_pm_rests(a0, b0, na0, nb0) + lwi_pm_rests(a1, b1, na1, nb1);
    return lwi_pm_gathered(r, rest, na0 * nb0 + na1 * nb1, 2);
}

static inline lwi_pm lwi_pm_mul_sub(lwi_pm a0, lwi_pm b0, lwi_pm a1, lwi_pm b1)
{
    return lwi_pm_mul2(a0, b0, lwi_pm_neg(a1), b1);
}

/* a . b; out of vectors of three. */
static inline lwi_pm lwi_pm_dot3(const lwi_pm a[3], const lwi_pm b[3])
{
    double r[2 * LWI_PM_SIZE - 1];
    double s[2 * LWI_PM_SIZE - 1];
    double t[2 * LWI_PM_SIZE - 1];
    lwi_pm_twice(r, &a[0], &b[0]);
    lwi_pm_twice(s, &a[1], &b[1]);
    lwi_pm_twice(t, &a[2], &b[2]);
    double rest = 0.0;
    double size = 0.0;
    LWI_PM_UNROLL
    for (int i = 0; i < 3; i++) {
        double na = lwi_pm_norm(a[i]);
        double nb = lwi_pm_norm(b[i]);
        rest += lwi_pm_rests(a[i], b[i], na, nb);
        size += na * nb;
    }
    LWI_PM_UNROLL
    for (int k = 0; k < 2 * LWI_PM_SIZE - 1; k++) {
        r[k] += s[k] + t[k];
    }
    return lwi_pm_gathered(r, rest, size, 3);
}

/* out = a x b; out may not be a or b. */
static inline void lwi_pm_cross(lwi_pm out[3], const lwi_pm a[3], const lwi_pm b[3])
{
    out[0] = lwi_pm_mul_sub(a[1], b[2], a[2], b[1]);
    out[1] = lwi_pm_mul_sub(a[2], b[0], a[0], b[2]);
    out[2] = lwi_pm_mul_sub(a[0], b[1], a[1], b[0]);
}

/* ---- ranges and values --------------------------------------------------------------------- */

/* lo <= a <= hi for all d, from the sizes of the coefficients. Of a failed model: all numbers. */
static inline void lwi_pm_range_cheap(lwi_pm a, double *lo, double *hi)
{
    double spread = fabs(a.c[1]);
    LWI_PM_UNROLL
    for (int i = 2; i < LWI_PM_SIZE; i++) {
        spread += fabs(a.c[i]);
    }
    double rounding = 2.0 * LWI_PM_EPS * (fabs(a.c[0]) + spread + a.e);
    double w = lwi_pm_up(spread + a.e + LWI_PM_TERM(RANGE, rounding));
    *lo = a.c[0] - w;
    *hi = a.c[0] + w;
}

/* The same by the Bernstein coefficients, between which a polynomial lies, where they say more. */
static inline void lwi_pm_range(lwi_pm a, double *lo, double *hi)
{
    double low = (double)INFINITY;
    double high = -(double)INFINITY;
    LWI_PM_UNROLL
    for (int l = 0; l < LWI_PM_SIZE; l++) {
        double b = 0.0;
        LWI_PM_UNROLL
        for (int j = 0; j < LWI_PM_SIZE; j++) {
            b += lwi_pm_bernstein[l][j] * a.c[j];
        }
        low = b < low ? b : low;
        high = b > high ? b : high;
    }
    /* Rounding of the table, the products, the sums and of adding w. */
    double rounding = (LWI_PM_DEGREE + 5.0) * LWI_PM_BERNSTEIN_MOST * LWI_PM_EPS * lwi_pm_norm(a);
    double w = lwi_pm_up(a.e + LWI_PM_TERM(BERNSTEIN, rounding + 2.0 * LWI_PM_EPS * a.e)) +
               LWI_PM_TERM(TINY, LWI_PM_TINY);
    lwi_pm_range_cheap(a, lo, hi);
    low -= w;
    high += w;
    *lo = low > *lo ? low : *lo;
    *hi = high < *hi ? high : *hi;
}

/* The polynomial at d, rounded; no bound. */
static inline double lwi_pm_value(lwi_pm a, double d)
{
    double before = 1.0;
    double t = d;
    double s = a.c[0];
    LWI_PM_UNROLL
    for (int j = 1; j < LWI_PM_SIZE; j++) {
        s += a.c[j] * t;
        double next = 2.0 * d * t - before;
        before = t;
        t = next;
    }
    return s;
}

/* lo <= a <= hi at one d in [-1, 1]. T_j comes by its recurrence, three roundings a step of numbers
 * up to one; a step's error reaches T_j multiplied by j - i + 1 at most, so T_j is off by
 * 2 j (j + 1) 2^-52 at most. */
static inline void lwi_pm_at(lwi_pm a, double d, double *lo, double *hi)
{
    if (!(fabs(d) <= 1.0)) {
        *lo = -(double)INFINITY;
        *hi = (double)INFINITY;
        return;
    }
    double s = lwi_pm_value(a, d);
    double factor = 2.0 * LWI_PM_DEGREE * (LWI_PM_DEGREE + 1.0) + LWI_PM_DEGREE + 6.0;
    double rounding = LWI_PM_EPS * (factor * lwi_pm_norm(a) + 2.0 * a.e);
    double w = lwi_pm_up(a.e + LWI_PM_TERM(AT, rounding)) + LWI_PM_TERM(TINY, LWI_PM_TINY);
    *lo = s - w;
    *hi = s + w;
}

/* The same at the start (d = -1) or the end (d = 1). */
static inline void lwi_pm_at_end(lwi_pm a, bool end, double *lo, double *hi)
{
    double s = a.c[0];
    LWI_PM_UNROLL
    for (int j = 1; j < LWI_PM_SIZE; j++) {
        s += end || j % 2 == 0 ? a.c[j] : -a.c[j];
    }
    double rounding = LWI_PM_EPS * ((LWI_PM_DEGREE + 2.0) * lwi_pm_norm(a) + 2.0 * a.e);
    double w = lwi_pm_up(a.e + LWI_PM_TERM(AT, rounding));
    *lo = s - w;
    *hi = s + w;
}

#include "pm_fun.h"

#endif
