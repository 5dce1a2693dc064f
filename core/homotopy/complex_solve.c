/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dense linear systems over complex numbers, for the tracker's few dozen unknowns. */
#include "complex.h"

static inline double size1(lwi_cx z)
{
    double a = creal(z);
    double b = cimag(z);
    return a * a + b * b;
}

bool lwi_cx_solve(lwi_cx *a, size_t n, lwi_cx *b)
{
    for (size_t k = 0; k < n; k++) {
        size_t p = k;
        double best = size1(a[k * n + k]);
        for (size_t i = k + 1; i < n; i++) {
            double s = size1(a[i * n + k]);
            if (s > best) {
                best = s;
                p = i;
            }
        }
        if (!(best > 1e-280)) {
            return false;
        }
        if (p != k) {
            for (size_t j = k; j < n; j++) {
                lwi_cx t = a[k * n + j];
                a[k * n + j] = a[p * n + j];
                a[p * n + j] = t;
            }
            lwi_cx t = b[k];
            b[k] = b[p];
            b[p] = t;
        }
        lwi_cx inv = 1.0 / a[k * n + k];
        for (size_t i = k + 1; i < n; i++) {
            lwi_cx f = a[i * n + k] * inv;
            if (creal(f) == 0.0 && cimag(f) == 0.0) {
                continue;
            }
            for (size_t j = k + 1; j < n; j++) {
                a[i * n + j] -= f * a[k * n + j];
            }
            b[i] -= f * b[k];
        }
        a[k * n + k] = inv;
    }
    for (size_t k = n; k-- > 0;) {
        lwi_cx s = b[k];
        for (size_t j = k + 1; j < n; j++) {
            s -= a[k * n + j] * b[j];
        }
        b[k] = s * a[k * n + k];
    }
    return true;
}
