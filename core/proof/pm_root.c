/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One solution near a predictor; see pm_root.h. Any thread. */
#include "pm_root.h"

#include "../math/linalg.h"

#include <string.h>

void lwi_pm_kantorovich(lwi_pm_root *out, double residual, double sigma, double lipschitz,
                        double domain)
{
    memset(out, 0, sizeof *out);
    if (!(residual >= 0.0 && sigma > 0.0 && lipschitz >= 0.0 && domain > 0.0)) {
        return;
    }
    double h = lwi_pm_up((lipschitz / sigma) * (residual / sigma)) + LWI_PM_TINY;
    if (!(h <= 0.5)) {
        return;
    }
    /* s from below. */
    double s = sqrt(1.0 - 2.0 * h) * (1.0 - 0x1p-44);
    double radius = lwi_pm_up(2.0 * (residual / sigma) / (1.0 + s)) + LWI_PM_TINY;
    double unique = (1.0 + s) * (sigma / lipschitz) * (1.0 - 0x1p-44);
    if (!(radius <= domain)) {
        return;
    }
    out->holds = true;
    out->radius = radius;
    out->unique = unique < domain ? unique : domain;
    if (!(out->unique >= LWI_PM_TINY)) {
        out->unique = 0.0;
    }
}

/* c: nearly the inverse of the middle of jac, n x n. */
static bool middle_inverse(double *c, const lwi_pm *jac, size_t n)
{
    double lu[LWI_PM_KRAWCZYK * LWI_PM_KRAWCZYK];
    double column[LWI_PM_KRAWCZYK];
    size_t piv[LWI_PM_KRAWCZYK];
    double log2_abs;
    for (size_t i = 0; i < n * n; i++) {
        lu[i] = jac[i].c[0];
    }
    if (lwi_lu(lu, n, n, piv, &log2_abs) == 0) {
        return false;
    }
    for (size_t j = 0; j < n; j++) {
        for (size_t i = 0; i < n; i++) {
            column[i] = i == j ? 1.0 : 0.0;
        }
        lwi_lu_solve(lu, n, n, piv, column);
        for (size_t i = 0; i < n; i++) {
            c[i * n + j] = column[i];
        }
    }
    return true;
}

/* The sum of k[i] a[i * step]. */
static lwi_pm combined(const double *k, const lwi_pm *a, size_t n, size_t step)
{
    lwi_pm sum = lwi_pm_scale(a[0], k[0]);
    for (size_t i = 1; i < n; i++) {
        sum = lwi_pm_axpy(sum, k[i], a[i * step]);
    }
    return sum;
}

bool lwi_pm_krawczyk(double *radius, const lwi_pm *f, const lwi_pm *jac, size_t n,
                     const double *box)
{
    double c[LWI_PM_KRAWCZYK * LWI_PM_KRAWCZYK];
    if (n == 0 || n > LWI_PM_KRAWCZYK || !middle_inverse(c, jac, n)) {
        return false;
    }
    bool inside = true;
    for (size_t i = 0; i < n; i++) {
        double r = lwi_pm_mag(combined(c + i * n, f, n, 1));
        for (size_t j = 0; j < n; j++) {
            lwi_pm off = combined(c + i * n, jac + j, n, n);
            off = i == j ? lwi_pm_shift(off, -1.0) : off;
            r += lwi_pm_mag(off) * box[j];
        }
        r = lwi_pm_up(r) + LWI_PM_TINY;
        if (radius != NULL) {
            radius[i] = r;
        }
        /* box[j] = 0 makes NaN of an infinite size, which fails here too. */
        inside = inside && r < box[i];
    }
    return inside;
}
