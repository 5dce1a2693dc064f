/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Linear systems of models; see solve_pm.h. */
#include "solve_pm.h"

#include "../math/linalg.h"

#include <string.h>

/* c = approximate inverse of a at d = 0. */
static bool invert_mid(double *c, const lwi_pm *a, size_t n, size_t ld)
{
    double lu[LWI_SOLVE_MOST * LWI_SOLVE_MOST];
    size_t piv[LWI_SOLVE_MOST];
    double col[LWI_SOLVE_MOST];
    double log2_abs;
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            lu[i * n + j] = lwi_pm_value(a[i * ld + j], 0.0);
        }
    }
    if (n > LWI_SOLVE_MOST || lwi_lu(lu, n, n, piv, &log2_abs) == 0) {
        return false;
    }
    for (size_t j = 0; j < n; j++) {
        memset(col, 0, n * sizeof *col);
        col[j] = 1.0;
        lwi_lu_solve(lu, n, n, piv, col);
        for (size_t i = 0; i < n; i++) {
            if (!(fabs(col[i]) <= LWI_PM_MOST)) {
                return false;
            }
            c[i * n + j] = col[i];
        }
    }
    return true;
}

static lwi_pm mix(const double *k, const lwi_pm *a, size_t n, size_t step)
{
    lwi_pm sum = lwi_pm_scale(a[0], k[0]);
    for (size_t i = 1; i < n; i++) {
        sum = lwi_pm_axpy(sum, k[i], a[i * step]);
    }
    return sum;
}

/* c (n x rows): approximate left inverse of a at d = 0, by its normal equations. */
static bool left_inverse(double *c, const lwi_pm *a, size_t rows, size_t n)
{
    double normal[LWI_SOLVE_MOST * LWI_SOLVE_MOST];
    double mid[LWI_SOLVE_ROWS * LWI_SOLVE_MOST];
    double col[LWI_SOLVE_MOST];
    size_t piv[LWI_SOLVE_MOST];
    double log2_abs;
    if (n > LWI_SOLVE_MOST || rows > LWI_SOLVE_ROWS || rows < n) {
        return false;
    }
    for (size_t i = 0; i < rows * n; i++) {
        mid[i] = lwi_pm_value(a[i], 0.0);
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j <= i; j++) {
            double sum = 0.0;
            for (size_t r = 0; r < rows; r++) {
                sum += mid[r * n + i] * mid[r * n + j];
            }
            normal[i * n + j] = normal[j * n + i] = sum;
        }
    }
    if (lwi_lu(normal, n, n, piv, &log2_abs) == 0) {
        return false;
    }
    for (size_t r = 0; r < rows; r++) {
        memcpy(col, mid + r * n, n * sizeof *col);
        lwi_lu_solve(normal, n, n, piv, col);
        for (size_t i = 0; i < n; i++) {
            if (!(fabs(col[i]) <= LWI_PM_MOST)) {
                return false;
            }
            c[i * rows + r] = col[i];
        }
    }
    return true;
}

double lwi_pm_least_singular(const lwi_pm *a, size_t rows, size_t n)
{
    double c[LWI_SOLVE_MOST * LWI_SOLVE_ROWS];
    double q = 0.0;
    double size = 0.0;
    if (rows == n ? !invert_mid(c, a, n, n) : !left_inverse(c, a, rows, n)) {
        return 0.0;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            lwi_pm r = mix(c + i * rows, a + j, rows, n);
            double m = lwi_pm_mag(i == j ? lwi_pm_shift(r, -1.0) : r);
            q += m * m;
        }
        for (size_t r = 0; r < rows; r++) {
            size += c[i * rows + r] * c[i * rows + r];
        }
    }
    q = sqrt(q) * (1.0 + 1e-12);
    return q < 1.0 ? (1.0 - q) / (sqrt(size) * (1.0 + 1e-12)) : 0.0;
}

bool lwi_pm_solve(lwi_pm *x, const lwi_pm *a, size_t n, const lwi_pm *b, size_t m, lwi_pm *rest,
                  lwi_pm *work)
{
    double c[LWI_SOLVE_MOST * LWI_SOLVE_MOST];
    double norm[LWI_SOLVE_MOST];
    double q = 0.0;
    if (m > LWI_SOLVE_MOST || !invert_mid(c, a, n, n)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            lwi_pm r = mix(c + i * n, a + j, n, n);
            rest[i * n + j] = lwi_pm_neg(i == j ? lwi_pm_shift(r, -1.0) : r);
            double size = lwi_pm_mag(rest[i * n + j]);
            q += size * size;
        }
    }
    q = sqrt(q) * (1.0 + 1e-12);
    if (!(q < 0.9)) {
        return false;
    }
    for (size_t j = 0; j < m; j++) {
        norm[j] = 0.0;
        for (size_t i = 0; i < n; i++) {
            x[i * m + j] = mix(c + i * n, b + j, n, m);
            double size = lwi_pm_mag(x[i * m + j]);
            norm[j] += size * size;
        }
        norm[j] = sqrt(norm[j]) * (1.0 + 1e-12);
    }
    /* x <- c b + rest x, from x = c b: each round gains a factor q. */
    double left = q / (1.0 - q);
    memcpy(work, x, n * m * sizeof *x);
    for (int round = 0; round < 6 && left > 1e-9; round++) {
        lwi_pm col[LWI_SOLVE_MOST];
        for (size_t j = 0; j < m; j++) {
            for (size_t i = 0; i < n; i++) {
                col[i] = x[i * m + j];
            }
            for (size_t i = 0; i < n; i++) {
                lwi_pm sum = work[i * m + j];
                for (size_t k = 0; k < n; k++) {
                    sum = lwi_pm_add(sum, lwi_pm_mul(rest[i * n + k], col[k]));
                }
                x[i * m + j] = sum;
            }
        }
        left *= q;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < m; j++) {
            x[i * m + j] = lwi_pm_widen(x[i * m + j], left * norm[j] * (1.0 + 1e-12));
        }
    }
    return true;
}
