/* SPDX-License-Identifier: GPL-3.0-or-later */
/* That equations F(q, d) = 0 have exactly one solution near a predictor q^(d), for every d in
 * [-1, 1]: two tests. Both hold for each d by itself; that the solution is a continuous function of
 * d follows, since it is unique in a neighbourhood that moves continuously and the derivative is
 * regular there. */
#ifndef LWI_PM_ROOT_H
#define LWI_PM_ROOT_H

#include "pm.h"

typedef struct lwi_pm_root {
    bool holds;
    double radius; /* |q - q^| at most, Euclidean, of the solution */
    double unique; /* there is no other with |q - q^| below this */
} lwi_pm_root;

/* Newton and Kantorovich. For all d: |F(q^, d)| <= residual; the derivative J of F by q, square,
 * has sigma_min(J(q^, d)) >= sigma > 0; |J(q) - J(p)| <= lipschitz |q - p| for q, p within `domain`
 * of q^(d), where F is defined. With h = lipschitz residual / sigma^2 <= 1/2 and s = sqrt(1 - 2h)
 *
 *     radius = 2 (residual / sigma) / (1 + s),   unique = (1 + s) sigma / lipschitz,
 *
 * the first to be within the domain, the second cut to it. (Kantorovich 1948; in this form Ortega &
 * Rheinboldt 1970, theorem 12.6.2; sharp, since F = (lipschitz/2) q^2 - sigma q + residual has
 * these two roots.) For h = 1/2 the radii are equal: `unique` says no more than `radius`. */
void lwi_pm_kantorovich(lwi_pm_root *out, double residual, double sigma, double lipschitz,
                        double domain);

enum { LWI_PM_KRAWCZYK = 6 };

/* Krawczyk's test for n equations, 1 to LWI_PM_KRAWCZYK: f[i] models of F(q^, d); jac[i * n + j]
 * models that hold dFi/dqj everywhere in the box |qj - q^j| <= box[j] (the box is in their rests).
 * With C near the inverse of the middle of jac, K = C f and
 *
 *     radius[i] = |K|i + sum |I - C jac|ij box[j] < box[i]   for all i
 *
 * there is exactly one solution in the box, and it is within radius, component by component.
 * (Krawczyk 1969, Moore 1977; Neumaier 1990, theorem 5.1.8.) `radius` may be NULL. */
bool lwi_pm_krawczyk(double *radius, const lwi_pm *f, const lwi_pm *jac, size_t n,
                     const double *box);

#endif
