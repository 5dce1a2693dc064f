/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dense linear algebra of the sizes kinematics needs. Matrices are row-major with a leading
 * dimension; workspaces are passed in; nothing allocates except where said. Own code in the hot
 * path because GSL's LU costs three times as much at n = 6; GSL for what runs once at load. */
#ifndef LWI_LINALG_H
#define LWI_LINALG_H

#include <stdbool.h>
#include <stddef.h>

/* Householder QR with column pivoting of a (rows x cols, leading dimension ld), in place: R
 * above the diagonal, reflector tails below, tau[min], perm[cols]. Returns the number of steps
 * min(rows, cols). Businger & Golub 1965. */
size_t lwi_qrp(double *a, size_t rows, size_t cols, size_t ld, double *tau, size_t *perm);
/* x <- Q^T x (rows long), and x <- Q x. */
void lwi_qrp_qt(const double *a, size_t rows, size_t steps, size_t ld, const double *tau,
                double *x);
void lwi_qrp_q(const double *a, size_t rows, size_t steps, size_t ld, const double *tau, double *x);

/* LU with partial pivoting in place; returns the determinant's sign and log2 of its size through
 * *log2_abs (-1e300 when singular exactly). piv needs n entries. */
int lwi_lu(double *a, size_t n, size_t ld, size_t *piv, double *log2_abs);
void lwi_lu_solve(const double *a, size_t n, size_t ld, const size_t *piv, double *x);

/* Singular values, descending, of a (rows x cols); a is destroyed. One-sided Jacobi (Hestenes
 * 1958) on the smaller side: small values keep their relative accuracy. `v`, if not NULL,
 * (cols x cols, ld cols) gets the right singular vectors in columns; needs rows >= cols then. */
void lwi_svd(double *a, size_t rows, size_t cols, size_t ld, double *sv, double *v);

/* Least squares min |a x - b| with full column rank assumed above rel; a and b destroyed, x gets
 * cols values (basic solution, dropped columns zero). Returns the rank. scratch: 2*cols doubles. */
size_t lwi_lsq(double *a, size_t rows, size_t cols, size_t ld, double *b, double *x, double rel,
               double *tau, size_t *perm);

/* Quantile of the chi-square distribution, by GSL. */
double lwi_chi_square_quantile(double probability, double freedoms);

/* xoshiro256** (Blackman & Vigna 2018): same numbers on every machine. */
typedef struct lwi_random {
    unsigned long long s[4];
} lwi_random;
void lwi_random_seed(lwi_random *r, unsigned long long seed);
double lwi_random_unit(lwi_random *r);   /* [0, 1) */
double lwi_random_normal(lwi_random *r); /* mean 0, deviation 1 */

#endif
