/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Small linear systems of models by one constant approximate inverse C: with q = |1 - C M| < 1 on
 * the whole interval, sigma_min(M) >= (1 - q) / |C|, and M X = B has X = sum (1 - C M)^k C B.
 * Called by the files of this folder only. */
#ifndef LWI_SOLVE_PM_H
#define LWI_SOLVE_PM_H

#include "pm.h"

enum { LWI_SOLVE_MOST = 24, LWI_SOLVE_ROWS = 64 };

/* Bound of the least singular value of a (rows x n, rows >= n); 0 where none is proved. */
double lwi_pm_least_singular(const lwi_pm *a, size_t rows, size_t n);
/* x (n x m) with a x = b; false where that is not proved. rest: n x n, work: n x m models. */
bool lwi_pm_solve(lwi_pm *x, const lwi_pm *a, size_t n, const lwi_pm *b, size_t m, lwi_pm *rest,
                  lwi_pm *work);

#endif
