/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How far a matrix of polynomial models is from losing rank, proved: lower bounds of its least
 * singular value for all d in [-1, 1], upper bounds at one d with a witness.
 *
 * Lower bound. For a matrix M with n >= m and any matrix Q of the same shape, and any unit v,
 * |M v| |Q v| >= v' Q' M v, so that
 *
 *     sigma_min(M) >= lambda_min(sym(Q' M)) / |Q|.
 *
 * With Q the polar factor of the middle matrix this is nearly an equation there. sym(Q' M(d)) is
 * linear in M: with M(d) = C0 + C1 T1(d) + C2 T2(d) + R(d), |R| <= a matrix of sizes, the first
 * three terms are convex combinations of four vertex matrices (the Bernstein form of degree 3), and
 * positive definite matrices are a convex cone. So it is enough that each vertex less
 * (s0 |Q| + |Q| |R| + rounding) I is positive definite. Higher terms than T2 are in R, where they
 * count once; the vertices of T3 and T4 would make 5 and 12 times of them.
 *
 * Q may be any matrix: it is made in plain arithmetic, and only |Q| is bounded, by
 * |Q|^2 <= 1 + |Q'Q - I|.
 *
 * Positive definite. Higham (2002, theorem 10.3): if Cholesky's factorisation of A in floating
 * point runs to its end, its factor satisfies R'R = A + D with |D| <= g |R'||R|, g = k u/(1 - k u),
 * k = n + 1. Hence |D|_F <= g |R|_F^2, and |R|_F^2 <= trace(A)/(1 - g), so that lambda_min(A) >=
 * -g/(1 - g) trace(A). (The idea is Demmel's, 1989, and Rump's, BIT 46, 2006.) Here u = 2^-52,
 * good for every rounding mode; k = n + 4, because columns are multiplied by reciprocals of the
 * diagonal, which have four roundings of its square; subtracting the shift makes n + 5, and n + 6
 * is taken.
 *
 * No allocation: the work object is the caller's, one a thread. */
#ifndef LWI_RANK_H
#define LWI_RANK_H

#include "pm.h"

enum { LWI_RANK_ROWS = 96, LWI_RANK_COLS = 64, LWI_RANK_VERTICES = 4 };

typedef struct lwi_rank_work {
    size_t n, m;
    double q_norm; /* |Q| at most */
    double slack;  /* what rests and rounding take off the vertices */
    double q[LWI_RANK_COLS * LWI_RANK_ROWS];     /* Q by columns: q[j * n + i] */
    double vertex[LWI_RANK_VERTICES][LWI_RANK_COLS * LWI_RANK_COLS]; /* lower triangles, ld m */
    double part[3][LWI_RANK_COLS * LWI_RANK_ROWS];
    double square[3][LWI_RANK_COLS * LWI_RANK_COLS];
    double column[LWI_RANK_ROWS + LWI_RANK_COLS];
    double tau[LWI_RANK_COLS];
    size_t perm[LWI_RANK_COLS];
} lwi_rank_work;

/* Makes a matrix ready for the two questions below: rows x cols, rows >= cols, entry (i, j) at
 * a[i * ld + j]. False where nothing can be proved: sizes beyond the largest, a failed model, a
 * middle matrix without rank. */
bool lwi_rank_prepare(lwi_rank_work *w, const lwi_pm *a, size_t rows, size_t cols, size_t ld);

/* The same with Q given, by columns (q[j * rows + i]), for example that of a neighbouring interval,
 * which is left in w->q: any matrix may be given, a good one is near the polar factor. */
bool lwi_rank_prepare_with(lwi_rank_work *w, const double *q, const lwi_pm *a, size_t rows,
                           size_t cols, size_t ld);

/* Proves sigma_min >= s0 for all d, s0 >= 0; sigma_min > 0 with s0 = 0. */
bool lwi_rank_at_least(lwi_rank_work *w, double s0);

/* The largest lower bound that can be proved this way, within one per cent; 0 if none. */
double lwi_rank_most(lwi_rank_work *w);

/* An upper bound of sigma_min at d, with the vector v[cols], not of unit length, for which |M v| is
 * that small; +infinity if there is none. `w` needs no preparation and loses what it held. */
double lwi_rank_above(lwi_rank_work *w, double *v, const lwi_pm *a, size_t rows, size_t cols,
                      size_t ld, double d);

#endif
