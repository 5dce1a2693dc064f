/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Polynomial models: reciprocals, roots, sine and cosine. The second half of pm.h, which includes
 * it.
 *
 * A reciprocal or root is guessed through its values at the nodes, in plain arithmetic; then the
 * guess is put into the defining equation, and what does not vanish there bounds how far it is off.
 * sqrt is the processor's and rounds as the other operations do; nothing of libm is relied on. */
#ifndef LWI_PM_FUN_H
#define LWI_PM_FUN_H

#include "pm.h"

/* ---- guesses from values at the nodes ------------------------------------------------------ */

/* The k-th node, k = 0 .. LWI_PM_DEGREE, from the start on. */
static inline double lwi_pm_node(int k)
{
    return lwi_pm_node_basis[k][1];
}

static inline double lwi_pm_at_node(lwi_pm a, int k)
{
    double s = a.c[0];
    LWI_PM_UNROLL
    for (int j = 1; j < LWI_PM_SIZE; j++) {
        s += a.c[j] * lwi_pm_node_basis[k][j];
    }
    return s;
}

/* The polynomial through values at the nodes, up to rounding: a guess, exact in itself (e = 0). */
static inline lwi_pm lwi_pm_through(const double v[LWI_PM_SIZE])
{
    lwi_pm out;
    double size = 0.0;
    LWI_PM_UNROLL
    for (int j = 0; j < LWI_PM_SIZE; j++) {
        double s = 0.0;
        LWI_PM_UNROLL
        for (int k = 0; k < LWI_PM_SIZE; k++) {
            s += v[k] * lwi_pm_node_basis[k][j];
        }
        out.c[j] = s * ((j > 0 ? 2.0 : 1.0) / LWI_PM_SIZE);
        size += fabs(out.c[j]);
    }
    out.e = 0.0;
    if (!(size <= LWI_PM_MOST)) {
        return lwi_pm_failed();
    }
    return out;
}

/* ---- reciprocals and roots ----------------------------------------------------------------- */

/* 1 / a. A guess y; r = 1 - a y, of size q < 1, proves that a is never zero, and 1/a = y / (1 - r)
 * = y + y r / (1 - r). Fails where a may be zero, or its range is so wide that y is no good. */
static inline lwi_pm lwi_pm_recip(lwi_pm a)
{
    double v[LWI_PM_SIZE];
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        v[k] = 1.0 / lwi_pm_at_node(a, k);
    }
    lwi_pm y = lwi_pm_through(v);
    double q = lwi_pm_mag(lwi_pm_shift(lwi_pm_mul(a, y), -1.0));
    if (!(q <= 0.9)) {
        return lwi_pm_failed();
    }
    y.e = lwi_pm_up(LWI_PM_TERM(RECIP, lwi_pm_norm(y) * q / (1.0 - q)));
    return lwi_pm_sealed(y);
}

static inline lwi_pm lwi_pm_div(lwi_pm a, lwi_pm b)
{
    return lwi_pm_mul(a, lwi_pm_recip(b));
}

/* 1 / sqrt(a). A guess y; r = 1 - a y^2 of size q < 1 proves a > 0 and y never zero. With y > 0 at
 * one place, 1/sqrt(a) = y (1 - r)^(-1/2), which is off y by |y| (q/2) (1 - q)^(-3/2) at most. */
static inline lwi_pm lwi_pm_rsqrt(lwi_pm a)
{
    double v[LWI_PM_SIZE];
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        v[k] = 1.0 / sqrt(lwi_pm_at_node(a, k));
    }
    lwi_pm y = lwi_pm_through(v);
    double q = lwi_pm_mag(lwi_pm_shift(lwi_pm_mul(a, lwi_pm_sqr(y)), -1.0));
    double lo;
    double hi;
    lwi_pm_at_end(y, true, &lo, &hi);
    if (!(q <= 0.9 && lo > 0.0)) {
        return lwi_pm_failed();
    }
    double g = 1.0 - q;
    y.e = lwi_pm_up(LWI_PM_TERM(RSQRT, lwi_pm_norm(y) * 0.5 * q / (g * sqrt(g))));
    return lwi_pm_sealed(y);
}

/* sqrt(a). A guess y > 0; sqrt(a) - y = (a - y^2) / (sqrt(a) + y). Fails where a may be negative,
 * or its range is so wide that y may be. */
static inline lwi_pm lwi_pm_sqrt(lwi_pm a)
{
    double v[LWI_PM_SIZE];
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        v[k] = sqrt(lwi_pm_at_node(a, k));
    }
    lwi_pm y = lwi_pm_through(v);
    double lo;
    double y_lo;
    double hi;
    lwi_pm_range(a, &lo, &hi);
    lwi_pm_range(y, &y_lo, &hi);
    if (!(lo >= 0.0 && y_lo > 0.0)) {
        return lwi_pm_failed();
    }
    double off = lwi_pm_mag(lwi_pm_sub(a, lwi_pm_sqr(y)));
    y.e = lwi_pm_up(LWI_PM_TERM(SQRT, off / (sqrt(lo) + y_lo)));
    return lwi_pm_sealed(y);
}

/* ---- sine and cosine ----------------------------------------------------------------------- */

#define LWI_PM_TURN_MOST 1000.0

/* Sine and cosine of x, |x| <= LWI_PM_TURN_MOST, each off by 2^-49 at most, in every rounding mode.
 *
 * x = k pi/2 + r. The first two pieces of pi/2 have 33 bits or fewer, so that k times them is
 * exact, and so is x - k p1: a multiple of the last place of x below 1 in size. Two more roundings
 * of numbers up to pi/4 follow: 1.6 units of 2^-52. What the three pieces leave of pi/2 is below
 * 2^-121. The series end behind r^17 and r^16: 1e-19 and 3e-18. Their own roundings are 1.3 units
 * for the sine, 2 for the cosine; 8 units are allowed. (Cody & Waite 1980.) */
static inline void lwi_pm_turn(double x, double *sine, double *cosine)
{
    const double p1 = 0x1.921fb544p+0;
    const double p2 = 0x1.0b4611a6p-34;
    const double p3 = 0x1.3198a2e037073p-69;
    /* A conversion cuts whatever the rounding mode. */
    int n = (int)(x * 0x1.45f306dc9c883p-1 + (x < 0.0 ? -0.5 : 0.5));
    double k = (double)n;
    double r = ((x - k * p1) - k * p2) - k * p3;
    double z = r * r;
    double s = z * (-1.0 / 1307674368000.0 + z * (1.0 / 355687428096000.0));
    s = z * (-1.0 / 39916800.0 + z * (1.0 / 6227020800.0 + s));
    s = z * (-1.0 / 5040.0 + z * (1.0 / 362880.0 + s));
    s = r + r * (z * (-1.0 / 6.0 + z * (1.0 / 120.0 + s)));
    double c = z * (-1.0 / 87178291200.0 + z * (1.0 / 20922789888000.0));
    c = z * (-1.0 / 3628800.0 + z * (1.0 / 479001600.0 + c));
    c = z * (-1.0 / 720.0 + z * (1.0 / 40320.0 + c));
    c = 1.0 + z * (-0.5 + z * (1.0 / 24.0 + c));
    double swap_s = n & 1 ? c : s;
    double swap_c = n & 1 ? s : c;
    *sine = n & 2 ? -swap_s : swap_s;
    *cosine = (n + 1) & 2 ? -swap_c : swap_c;
}

/* How many powers of p^2 the series of lwi_pm_sincos take, 1 to 5, |p| <= m: what is left out shall
 * be small beside 2^-50, the rest there is anyway and what the degree drops. */
static inline int lwi_pm_series(double m, double e)
{
#ifdef LWI_PM_SERIES
    (void)m;
    (void)e;
    return LWI_PM_SERIES;
#else
    double drop = 1.0;
    for (int i = 1; i <= LWI_PM_SIZE; i++) {
        drop *= 0.5 * m / i;
    }
    double enough = 0x1p-50 + 0.0625 * e + 0.125 * drop;
    double left = m * m / 2.0;
    int n = 1;
    for (; n < 5; n++) {
        left *= m * m / ((2.0 * n + 1.0) * (2.0 * n + 2.0));
        if (left <= enough) {
            break;
        }
    }
    return n;
#endif
}

/* Sine and cosine of a, radians. With c the value of the constant coefficient and p the others:
 * sin a = sin c cos p + cos c sin p, and the series of p with Lagrange's rest. A failed model gives
 * failed ones; where nothing better is known the answer is [-1, 1]. */
static inline void lwi_pm_sincos(lwi_pm a, lwi_pm *sine, lwi_pm *cosine)
{
    static const double sine_factor[6] = {1.0, -1.0 / 6.0, 1.0 / 120.0, -1.0 / 5040.0,
                                          1.0 / 362880.0, -1.0 / 39916800.0};
    static const double cosine_factor[6] = {1.0, -0.5, 1.0 / 24.0, -1.0 / 720.0, 1.0 / 40320.0,
                                            -1.0 / 3628800.0};
    lwi_pm anything = {{0.0}, 1.0};
    lwi_pm p = a;
    p.c[0] = 0.0;
    double m = lwi_pm_mag(p);
    if (!(m <= 2.0 && fabs(a.c[0]) <= LWI_PM_TURN_MOST)) {
        *sine = *cosine = lwi_pm_ok(a) ? anything : lwi_pm_failed();
        return;
    }
    int n = lwi_pm_series(m, a.e);
    lwi_pm power[6];
    power[1] = lwi_pm_sqr(p);
    for (int i = 2; i <= n; i++) {
        power[i] = lwi_pm_mul(power[i / 2], power[i - i / 2]);
    }
    /* The even series over 1, p^2, p^4 ...; sizes are for the rounding. */
    lwi_pm sp = {{1.0}, 0.0};
    lwi_pm cp = {{1.0}, 0.0};
    double sp_size = 1.0;
    double cp_size = 1.0;
    double sine_left = m;
    double cosine_left = 1.0;
    for (int i = 1; i <= n; i++) {
        double mag = lwi_pm_mag(power[i]);
        double s = sine_factor[i];
        double c = cosine_factor[i];
        LWI_PM_UNROLL
        for (int k = 0; k < LWI_PM_SIZE; k++) {
            sp.c[k] += s * power[i].c[k];
            cp.c[k] += c * power[i].c[k];
        }
        sp.e += fabs(s) * power[i].e;
        cp.e += fabs(c) * power[i].e;
        sp_size += fabs(s) * mag;
        cp_size += fabs(c) * mag;
        sine_left *= m * m / ((2.0 * i) * (2.0 * i + 1.0));
        cosine_left *= m * m / ((2.0 * i - 1.0) * (2.0 * i));
    }
    sine_left *= m * m / ((2.0 * n + 2.0) * (2.0 * n + 3.0));
    cosine_left *= m * m / ((2.0 * n + 1.0) * (2.0 * n + 2.0));
    sp.e = lwi_pm_up(sp.e);
    cp.e = lwi_pm_up(cp.e);
    sp = lwi_pm_mul(sp, p);
    double sine_e = sp.e + LWI_PM_TERM(SINE, sine_left);
    double cosine_e = cp.e + LWI_PM_TERM(COSINE, cosine_left);
    double sc;
    double cc;
    lwi_pm_turn(a.c[0], &sc, &cc);
    /* In units of 2^-52 of the sizes: factors and sums n + 2, the sum below 3, lwi_pm_turn 8. */
    double rounding = LWI_PM_TERM(TURN, 20.0 * LWI_PM_EPS * (cp_size + m * sp_size));
    LWI_PM_UNROLL
    for (int k = 0; k < LWI_PM_SIZE; k++) {
        sine->c[k] = sc * cp.c[k] + cc * sp.c[k];
        cosine->c[k] = cc * cp.c[k] - sc * sp.c[k];
    }
    sine->e = lwi_pm_up(fabs(sc) * cosine_e + fabs(cc) * sine_e + rounding) + LWI_PM_TINY;
    cosine->e = lwi_pm_up(fabs(cc) * cosine_e + fabs(sc) * sine_e + rounding) + LWI_PM_TINY;
    if (!(sine->e <= 1.0)) {
        *sine = anything;
    }
    if (!(cosine->e <= 1.0)) {
        *cosine = anything;
    }
}

#endif
