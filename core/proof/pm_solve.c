/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Linear systems of models, enclosed; see pm_solve.h. */
#include "pm_solve.h"

#include "../math/linalg.h"

#include <string.h>

/* The sum of k[i] a[i * step], i < n. */
static lwi_pm combined(const double *k, const lwi_pm *a, size_t n, size_t step)
{
    lwi_pm sum = lwi_pm_scale(a[0], k[0]);
    for (size_t i = 1; i < n; i++) {
        sum = lwi_pm_axpy(sum, k[i], a[i * step]);
    }
    return sum;
}

/* The sum of a[i * a_step] b[i * b_step], i < n. */
static lwi_pm product(const lwi_pm *a, size_t a_step, const lwi_pm *b, size_t b_step, size_t n)
{
    lwi_pm sum = lwi_pm_const(0.0);
    size_t i = 0;
    for (; i + 2 <= n; i += 2) {
        sum = lwi_pm_add(sum, lwi_pm_mul2(a[i * a_step], b[i * b_step], a[(i + 1) * a_step],
                                          b[(i + 1) * b_step]));
    }
    if (i < n) {
        sum = lwi_pm_add(sum, lwi_pm_mul(a[i * a_step], b[i * b_step]));
    }
    return sum;
}

/* LU factors at the nodes, the inverse of the middle, R = |I - C M|. */
static bool prepare(lwi_pm_solve_work *w, const lwi_pm *m, size_t n)
{
    double log2_abs;
    for (int node = 0; node < LWI_PM_SIZE; node++) {
        for (size_t i = 0; i < n * n; i++) {
            w->lu[node][i] = lwi_pm_at_node(m[i], node);
        }
        if (lwi_lu(w->lu[node], n, n, w->piv[node], &log2_abs) == 0) {
            return false;
        }
    }
    double *middle = w->away;
    size_t piv[LWI_PM_SOLVE_COLS];
    for (size_t i = 0; i < n * n; i++) {
        middle[i] = m[i].c[0];
    }
    if (lwi_lu(middle, n, n, piv, &log2_abs) == 0) {
        return false;
    }
    for (size_t j = 0; j < n; j++) {
        memset(w->column, 0, n * sizeof *w->column);
        w->column[j] = 1.0;
        lwi_lu_solve(middle, n, n, piv, w->column);
        for (size_t i = 0; i < n; i++) {
            w->inverse[i * n + j] = w->column[i];
        }
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            lwi_pm off = combined(w->inverse + i * n, m + j, n, n);
            off = i == j ? lwi_pm_shift(off, -1.0) : off;
            w->away[i * n + j] = lwi_pm_mag(off);
            if (!(w->away[i * n + j] <= LWI_PM_MOST)) {
                return false;
            }
        }
    }
    return true;
}

/* R e by entries, from above, into w->rest. */
static void away_times(lwi_pm_solve_work *w, const double *e, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        double s = 0.0;
        for (size_t j = 0; j < n; j++) {
            s += w->away[i * n + j] * e[j];
        }
        w->rest[i] = lwi_pm_up(s) + LWI_PM_TINY;
    }
}

/* e > 0 in w->size with z + R e <= e, z = |w->mend|; R e is left in w->rest. */
static bool bound(lwi_pm_solve_work *w, size_t n)
{
    double z[LWI_PM_SOLVE_COLS];
    for (size_t i = 0; i < n; i++) {
        /* A little more than z, so that R e < e strictly. */
        z[i] = lwi_pm_mag(w->mend[i]) * (1.0 + 0x1p-20) + LWI_PM_TINY;
        w->size[i] = z[i];
    }
    for (int step = 0; step < 30; step++) {
        away_times(w, w->size, n);
        bool holds = true;
        for (size_t i = 0; i < n; i++) {
            holds = holds && lwi_pm_up(z[i] + w->rest[i]) <= w->size[i];
        }
        if (holds) {
            return true;
        }
        for (size_t i = 0; i < n; i++) {
            w->size[i] = (z[i] + w->rest[i]) * (step < 4 ? 1.01 : 1.2);
            if (!(w->size[i] <= LWI_PM_MOST)) {
                return false;
            }
        }
    }
    return false;
}

/* One column, step k. */
static bool solve_column(lwi_pm *x, const lwi_pm *m, size_t n, const lwi_pm *b, size_t k,
                         lwi_pm_solve_work *w)
{
    for (int node = 0; node < LWI_PM_SIZE; node++) {
        for (size_t i = 0; i < n; i++) {
            w->column[i] = lwi_pm_at_node(b[i * k], node);
        }
        lwi_lu_solve(w->lu[node], n, n, w->piv[node], w->column);
        for (size_t i = 0; i < n; i++) {
            w->node[i][node] = w->column[i];
        }
    }
    lwi_pm guess[LWI_PM_SOLVE_COLS];
    for (size_t i = 0; i < n; i++) {
        guess[i] = lwi_pm_through(w->node[i]);
    }
    for (size_t i = 0; i < n; i++) {
        w->left[i] = lwi_pm_sub(b[i * k], product(m + i * n, 1, guess, 1, n));
    }
    for (size_t i = 0; i < n; i++) {
        w->mend[i] = combined(w->inverse + i * n, w->left, n, 1);
    }
    if (!bound(w, n)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        x[i * k] = lwi_pm_widen(lwi_pm_add(guess[i], w->mend[i]), w->rest[i]);
        if (!lwi_pm_ok(x[i * k])) {
            return false;
        }
    }
    return true;
}

bool lwi_pm_solve_square(lwi_pm *x, const lwi_pm *m, size_t n, const lwi_pm *b, size_t k,
                         lwi_pm_solve_work *w)
{
    if (n == 0 || n > LWI_PM_SOLVE_COLS || k > LWI_PM_SOLVE_COLS || !prepare(w, m, n)) {
        return false;
    }
    for (size_t j = 0; j < k; j++) {
        if (!solve_column(x + j, m, n, b + j, k, w)) {
            return false;
        }
    }
    return true;
}

/* T near the inverse of the triangle of the weighted middle of a, with the columns' order undone:
 * A T nearly orthonormal. Into w->square, cols x cols. */
static bool straighten(lwi_pm_solve_work *w, const lwi_pm *a, size_t rows, size_t cols,
                       const double *weight)
{
    double *r = w->square;
    for (size_t i = 0; i < rows; i++) {
        double f = weight != NULL ? sqrt(weight[i]) : 1.0;
        for (size_t j = 0; j < cols; j++) {
            r[i * cols + j] = f * a[i * cols + j].c[0];
        }
    }
    lwi_qrp(r, rows, cols, cols, w->tau, w->perm);
    double *t = w->inverse;
    memset(t, 0, cols * cols * sizeof *t);
    for (size_t j = 0; j < cols; j++) {
        /* Column j of R^-1, from the bottom up; its rows go where the pivoting took them from. */
        for (size_t i = j + 1; i-- > 0;) {
            double s = i == j ? 1.0 : 0.0;
            for (size_t l = i + 1; l <= j; l++) {
                s -= r[i * cols + l] * w->column[l];
            }
            w->column[i] = s / r[i * cols + i];
            if (!(fabs(w->column[i]) <= LWI_PM_MOST)) {
                return false;
            }
        }
        for (size_t i = 0; i <= j; i++) {
            t[w->perm[i] * cols + j] = w->column[i];
        }
    }
    memcpy(w->square, t, cols * cols * sizeof *t);
    return true;
}

bool lwi_pm_solve_least(lwi_pm *x, const lwi_pm *a, size_t rows, size_t cols, const double *weight,
                        const lwi_pm *b, size_t k, lwi_pm_solve_work *w)
{
    if (cols == 0 || cols > LWI_PM_SOLVE_COLS || k > LWI_PM_SOLVE_COLS || rows < cols ||
        rows > LWI_PM_SOLVE_ROWS || !straighten(w, a, rows, cols, weight)) {
        return false;
    }
    double column[LWI_PM_SOLVE_COLS];
    for (size_t j = 0; j < cols; j++) {
        for (size_t l = 0; l < cols; l++) {
            column[l] = w->square[l * cols + j];
        }
        for (size_t i = 0; i < rows; i++) {
            w->product[i * cols + j] = combined(column, a + i * cols, cols, 1);
        }
    }
    /* N = P'WP and P'Wb: the weights go to the second factor, exact numbers as they are. */
    lwi_pm weighted[LWI_PM_SOLVE_ROWS];
    for (size_t j = 0; j < cols; j++) {
        for (size_t i = 0; i < rows; i++) {
            lwi_pm p = w->product[i * cols + j];
            if (weight != NULL && !(weight[i] > 0.0)) {
                return false;
            }
            weighted[i] = weight != NULL ? lwi_pm_scale(p, weight[i]) : p;
        }
        for (size_t l = 0; l < cols; l++) {
            w->normal[j * cols + l] = product(weighted, 1, w->product + l, cols, rows);
        }
        for (size_t l = 0; l < k; l++) {
            w->right[j * k + l] = product(weighted, 1, b + l, k, rows);
        }
    }
    if (!lwi_pm_solve_square(w->right, w->normal, cols, w->right, k, w)) {
        return false;
    }
    for (size_t i = 0; i < cols; i++) {
        for (size_t l = 0; l < k; l++) {
            x[i * k + l] = combined(w->square + i * cols, w->right + l, cols, k);
            if (!lwi_pm_ok(x[i * k + l])) {
                return false;
            }
        }
    }
    return true;
}
