/* SPDX-License-Identifier: GPL-3.0-or-later */
/* QR, LU, SVD and least squares for small dense matrices. No state, any thread. */
#include "linalg.h"

#include <math.h>
#include <string.h>

enum { SVD_FACTOR_MAX = 32 };

static void swap_columns(double *a, size_t rows, size_t ld, size_t j, size_t k)
{
    for (size_t i = 0; i < rows; i++) {
        double t = a[i * ld + j];
        a[i * ld + j] = a[i * ld + k];
        a[i * ld + k] = t;
    }
}

static double column_square(const double *a, size_t from, size_t rows, size_t ld, size_t j)
{
    double s = 0.0;
    for (size_t i = from; i < rows; i++) {
        s += a[i * ld + j] * a[i * ld + j];
    }
    return s;
}

size_t lwi_qrp(double *a, size_t rows, size_t cols, size_t ld, double *tau, size_t *perm)
{
    size_t steps = rows < cols ? rows : cols;
    for (size_t j = 0; j < cols; j++) {
        perm[j] = j;
    }
    for (size_t k = 0; k < steps; k++) {
        size_t best = k;
        double best_square = -1.0;
        for (size_t j = k; j < cols; j++) {
            double s = column_square(a, k, rows, ld, j);
            if (s > best_square * (1.0 + 1e-12)) {
                best = j;
                best_square = s;
            }
        }
        if (best != k) {
            swap_columns(a, rows, ld, k, best);
            size_t t = perm[k];
            perm[k] = perm[best];
            perm[best] = t;
        }
        double alpha = a[k * ld + k];
        double norm = sqrt(best_square);
        if (!(norm > 0.0)) {
            tau[k] = 0.0;
            continue;
        }
        double beta = alpha > 0.0 ? -norm : norm;
        double head = alpha - beta;
        tau[k] = -head / beta;
        for (size_t i = k + 1; i < rows; i++) {
            a[i * ld + k] /= head;
        }
        a[k * ld + k] = beta;
        for (size_t j = k + 1; j < cols; j++) {
            double s = a[k * ld + j];
            for (size_t i = k + 1; i < rows; i++) {
                s += a[i * ld + k] * a[i * ld + j];
            }
            s *= tau[k];
            a[k * ld + j] -= s;
            for (size_t i = k + 1; i < rows; i++) {
                a[i * ld + j] -= s * a[i * ld + k];
            }
        }
    }
    return steps;
}

static void reflect(const double *a, size_t rows, size_t ld, double tau, size_t k, double *x)
{
    double s = x[k];
    for (size_t i = k + 1; i < rows; i++) {
        s += a[i * ld + k] * x[i];
    }
    s *= tau;
    x[k] -= s;
    for (size_t i = k + 1; i < rows; i++) {
        x[i] -= s * a[i * ld + k];
    }
}

void lwi_qrp_qt(const double *a, size_t rows, size_t steps, size_t ld, const double *tau, double *x)
{
    for (size_t k = 0; k < steps; k++) {
        reflect(a, rows, ld, tau[k], k, x);
    }
}

void lwi_qrp_q(const double *a, size_t rows, size_t steps, size_t ld, const double *tau, double *x)
{
    for (size_t k = steps; k-- > 0;) {
        reflect(a, rows, ld, tau[k], k, x);
    }
}

int lwi_lu(double *a, size_t n, size_t ld, size_t *piv, double *log2_abs)
{
    int sign = 1;
    double log2_sum = 0.0;
    for (size_t k = 0; k < n; k++) {
        size_t p = k;
        for (size_t i = k + 1; i < n; i++) {
            if (fabs(a[i * ld + k]) > fabs(a[p * ld + k])) {
                p = i;
            }
        }
        piv[k] = p;
        if (p != k) {
            sign = -sign;
            for (size_t j = 0; j < n; j++) {
                double t = a[k * ld + j];
                a[k * ld + j] = a[p * ld + j];
                a[p * ld + j] = t;
            }
        }
        double d = a[k * ld + k];
        if (!(fabs(d) > 0.0)) {
            *log2_abs = -1e300;
            return 0;
        }
        if (d < 0.0) {
            sign = -sign;
        }
        log2_sum += log2(fabs(d));
        for (size_t i = k + 1; i < n; i++) {
            double f = a[i * ld + k] / d;
            a[i * ld + k] = f;
            for (size_t j = k + 1; j < n; j++) {
                a[i * ld + j] -= f * a[k * ld + j];
            }
        }
    }
    *log2_abs = log2_sum;
    return sign;
}

void lwi_lu_solve(const double *a, size_t n, size_t ld, const size_t *piv, double *x)
{
    for (size_t k = 0; k < n; k++) {
        if (piv[k] != k) {
            double t = x[k];
            x[k] = x[piv[k]];
            x[piv[k]] = t;
        }
    }
    for (size_t i = 1; i < n; i++) {
        for (size_t j = 0; j < i; j++) {
            x[i] -= a[i * ld + j] * x[j];
        }
    }
    for (size_t i = n; i-- > 0;) {
        for (size_t j = i + 1; j < n; j++) {
            x[i] -= a[i * ld + j] * x[j];
        }
        x[i] /= a[i * ld + i];
    }
}

/* One Jacobi rotation between columns p and q of a and, if given, of v. True if it turned. */
static bool jacobi_pair(double *a, size_t rows, size_t ld, double *v, size_t n, size_t p, size_t q)
{
    double app = 0.0;
    double aqq = 0.0;
    double apq = 0.0;
    for (size_t i = 0; i < rows; i++) {
        double x = a[i * ld + p];
        double y = a[i * ld + q];
        app += x * x;
        aqq += y * y;
        apq += x * y;
    }
    if (!(fabs(apq) > 1e-15 * sqrt(app * aqq)) || !(fabs(apq) > 1e-290)) {
        return false;
    }
    double zeta = (aqq - app) / (2.0 * apq);
    double t = (zeta >= 0.0 ? 1.0 : -1.0) / (fabs(zeta) + sqrt(1.0 + zeta * zeta));
    double c = 1.0 / sqrt(1.0 + t * t);
    double s = c * t;
    for (size_t i = 0; i < rows; i++) {
        double x = a[i * ld + p];
        double y = a[i * ld + q];
        a[i * ld + p] = c * x - s * y;
        a[i * ld + q] = s * x + c * y;
    }
    if (v != NULL) {
        for (size_t i = 0; i < n; i++) {
            double x = v[i * n + p];
            double y = v[i * n + q];
            v[i * n + p] = c * x - s * y;
            v[i * n + q] = s * x + c * y;
        }
    }
    return true;
}

static void svd_tall(double *a, size_t rows, size_t cols, size_t ld, double *sv, double *v)
{
    if (v != NULL) {
        memset(v, 0, cols * cols * sizeof *v);
        for (size_t i = 0; i < cols; i++) {
            v[i * cols + i] = 1.0;
        }
    }
    for (int sweep = 0; sweep < 30; sweep++) {
        bool turned = false;
        for (size_t p = 0; p + 1 < cols; p++) {
            for (size_t q = p + 1; q < cols; q++) {
                turned |= jacobi_pair(a, rows, ld, v, cols, p, q);
            }
        }
        if (!turned) {
            break;
        }
    }
    for (size_t j = 0; j < cols; j++) {
        sv[j] = sqrt(column_square(a, 0, rows, ld, j));
    }
    /* Selection sort, descending, columns of a and v along. */
    for (size_t j = 0; j + 1 < cols; j++) {
        size_t k = j;
        for (size_t i = j + 1; i < cols; i++) {
            if (sv[i] > sv[k]) {
                k = i;
            }
        }
        if (k != j) {
            double t = sv[j];
            sv[j] = sv[k];
            sv[k] = t;
            swap_columns(a, rows, ld, j, k);
            if (v != NULL) {
                swap_columns(v, cols, cols, j, k);
            }
        }
    }
}

/* One Jacobi rotation of two rows. True if it turned. */
static inline bool turn_rows(double *x, double *y, size_t n)
{
    double app = 0.0;
    double aqq = 0.0;
    double apq = 0.0;
    for (size_t i = 0; i < n; i++) {
        app += x[i] * x[i];
        aqq += y[i] * y[i];
        apq += x[i] * y[i];
    }
    if (!(fabs(apq) > 1e-15 * sqrt(app * aqq)) || !(fabs(apq) > 1e-290)) {
        return false;
    }
    double zeta = (aqq - app) / (2.0 * apq);
    double t = (zeta >= 0.0 ? 1.0 : -1.0) / (fabs(zeta) + sqrt(1.0 + zeta * zeta));
    double c = 1.0 / sqrt(1.0 + t * t);
    double s = c * t;
    for (size_t i = 0; i < n; i++) {
        double xi = x[i];
        double yi = y[i];
        x[i] = c * xi - s * yi;
        y[i] = s * xi + c * yi;
    }
    return true;
}

void lwi_svd(double *a, size_t rows, size_t cols, size_t ld, double *sv, double *v)
{
    if (rows >= cols && v == NULL && cols <= SVD_FACTOR_MAX) {
        /* Values alone: rotations on the rows of the triangle of a pivoted QR, which needs two or
         * three sweeps where the matrix itself needs six (Drmac & Veselic 2008, part I). */
        double tau[SVD_FACTOR_MAX];
        size_t perm[SVD_FACTOR_MAX];
        (void)lwi_qrp(a, rows, cols, ld, tau, perm);
        for (size_t i = 1; i < cols; i++) {
            memset(a + i * ld, 0, i * sizeof *a);
        }
        rows = cols;
    } else if (rows >= cols) {
        svd_tall(a, rows, cols, ld, sv, v);
        return;
    }
    /* Wide: rotate rows instead, which is the tall case of the transpose done in place. */
    /* Pairs of a round have no row in common, so that the processor may turn them at once (round
     * robin, Brent & Luk 1985). */
    size_t n = rows + rows % 2;
    for (int sweep = 0; sweep < 30; sweep++) {
        bool turned = false;
        for (size_t round = 0; round + 1 < n; round++) {
            for (size_t i = 0; i < n / 2; i++) {
                size_t p = i == 0 ? n - 1 : round + i;
                size_t q = round + n - 1 - i;
                p -= i > 0 && p >= n - 1 ? n - 1 : 0;
                q -= q >= n - 1 ? n - 1 : 0;
                if (p < rows && q < rows) {
                    turned |= turn_rows(a + (p < q ? p : q) * ld, a + (p < q ? q : p) * ld, cols);
                }
            }
        }
        if (!turned) {
            break;
        }
    }
    for (size_t i = 0; i < rows; i++) {
        double s = 0.0;
        for (size_t j = 0; j < cols; j++) {
            s += a[i * ld + j] * a[i * ld + j];
        }
        sv[i] = sqrt(s);
    }
    for (size_t j = 0; j + 1 < rows; j++) {
        for (size_t i = j + 1; i < rows; i++) {
            if (sv[i] > sv[j]) {
                double t = sv[j];
                sv[j] = sv[i];
                sv[i] = t;
            }
        }
    }
}

size_t lwi_lsq(double *a, size_t rows, size_t cols, size_t ld, double *b, double *x, double rel,
               double *tau, size_t *perm)
{
    size_t steps = lwi_qrp(a, rows, cols, ld, tau, perm);
    size_t rank = 0;
    double first = steps > 0 ? fabs(a[0]) : 0.0;
    while (rank < steps && fabs(a[rank * ld + rank]) > rel * first) {
        rank++;
    }
    lwi_qrp_qt(a, rows, steps, ld, tau, b);
    for (size_t j = 0; j < cols; j++) {
        x[j] = 0.0;
    }
    for (size_t i = rank; i-- > 0;) {
        double s = b[i];
        for (size_t j = i + 1; j < rank; j++) {
            s -= a[i * ld + j] * x[perm[j]];
        }
        x[perm[i]] = s / a[i * ld + i];
    }
    return rank;
}
