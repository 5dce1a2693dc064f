/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Linear systems whose matrices are polynomial models: solutions enclosed as models.
 *
 * M X = B, M square. A guess x for a column of X goes through the solutions at the nodes, C is near
 * the inverse of the middle matrix, and
 *
 *     X - x = (C M)^-1 C (B - M x).
 *
 * With R >= |I - C M| and z >= |C (B - M x)|, both by entries and for all d, any positive e with
 * z + R e <= e bounds |X - x| by entries: R e < e makes R's spectral radius less than one
 * (Collatz), so that C M, and hence M, is regular and (I - R)^-1 is not negative. Then C (B - M x)
 * is added to x as a model and only R e is left of the rest. Nothing is squared, and neither units
 * of the unknowns nor of the equations matter. (Rump 2010, Acta Numerica 19, section 10.)
 *
 * Least squares with positive weights: min sum_k w_k (A x - b)_k^2. With T near the inverse of the
 * triangle of the weighted middle matrix, A T is nearly orthonormal and x = T y with
 * (A T)' W (A T) y = (A T)' W b, which is solved as above: the condition of A is not squared.
 *
 * No allocation; the work object is the caller's, one a thread. */
#ifndef LWI_PM_SOLVE_H
#define LWI_PM_SOLVE_H

#include "pm.h"

enum { LWI_PM_SOLVE_ROWS = 96, LWI_PM_SOLVE_COLS = 64 };

typedef struct lwi_pm_solve_work {
    double lu[LWI_PM_SIZE][LWI_PM_SOLVE_COLS * LWI_PM_SOLVE_COLS]; /* at the nodes */
    size_t piv[LWI_PM_SIZE][LWI_PM_SOLVE_COLS];
    double inverse[LWI_PM_SOLVE_COLS * LWI_PM_SOLVE_COLS];
    double away[LWI_PM_SOLVE_COLS * LWI_PM_SOLVE_COLS]; /* R */
    double node[LWI_PM_SOLVE_COLS][LWI_PM_SIZE];
    double column[LWI_PM_SOLVE_ROWS];
    double size[LWI_PM_SOLVE_COLS], rest[LWI_PM_SOLVE_COLS];
    lwi_pm left[LWI_PM_SOLVE_COLS], mend[LWI_PM_SOLVE_COLS];
    /* of least squares */
    double square[LWI_PM_SOLVE_ROWS * LWI_PM_SOLVE_COLS];
    double tau[LWI_PM_SOLVE_COLS];
    size_t perm[LWI_PM_SOLVE_COLS];
    lwi_pm product[LWI_PM_SOLVE_ROWS * LWI_PM_SOLVE_COLS];
    lwi_pm normal[LWI_PM_SOLVE_COLS * LWI_PM_SOLVE_COLS];
    lwi_pm right[LWI_PM_SOLVE_ROWS * LWI_PM_SOLVE_COLS];
} lwi_pm_solve_work;

/* x (n x k, ld k) with M x = b; m is n x n (ld n), b n x k (ld k). True proves that M is regular
 * for all d and fills x; x may be b. k is at most LWI_PM_SOLVE_COLS, as n is. */
bool lwi_pm_solve_square(lwi_pm *x, const lwi_pm *m, size_t n, const lwi_pm *b, size_t k,
                         lwi_pm_solve_work *w);

/* x (cols x k, ld k) least with weights weight[rows] > 0, or NULL for ones; a is rows x cols (ld
 * cols), rows >= cols; b rows x k (ld k). True proves full column rank for all d and fills x. */
bool lwi_pm_solve_least(lwi_pm *x, const lwi_pm *a, size_t rows, size_t cols, const double *weight,
                        const lwi_pm *b, size_t k, lwi_pm_solve_work *w);

#endif
