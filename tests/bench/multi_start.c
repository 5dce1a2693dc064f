/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Multi-start over GSL's multiroots, see multi_start.h. Unknowns are the platform's centre and a
 * quaternion w, v whose norm is the seventh equation (planar: x, y and an angle); equation i is
 * |p + R a - b|^2 - l^2, its derivative by formula. */
#include "multi_start.h"

#include <math.h>
#include <string.h>

#include <gsl/gsl_errno.h>
#include <gsl/gsl_multiroots.h>

#include "lwt.h"
#include "lwt_geom.h"

enum { MOST_KNOWN = 64, MOST_STEPS = 100 };

/* The point R a + p and, if wanted, its derivatives by the unknowns after the position. */
static void place(double out[3], double by[4][3], const lwt_rods *rods, const double *x,
                  const double a[3])
{
    if (rods->planar) {
        double c = cos(x[2]);
        double s = sin(x[2]);
        out[0] = x[0] + c * a[0] - s * a[1];
        out[1] = x[1] + s * a[0] + c * a[1];
        out[2] = 0.0;
        if (by != NULL) {
            by[0][0] = -s * a[0] - c * a[1];
            by[0][1] = c * a[0] - s * a[1];
            by[0][2] = 0.0;
        }
        return;
    }
    double w = x[3];
    const double *v = &x[4];
    double dot = v[0] * a[0] + v[1] * a[1] + v[2] * a[2];
    double square = v[0] * v[0] + v[1] * v[1] + v[2] * v[2];
    double cross[3] = {v[1] * a[2] - v[2] * a[1], v[2] * a[0] - v[0] * a[2],
                       v[0] * a[1] - v[1] * a[0]};
    for (size_t c = 0; c < 3; c++) {
        out[c] = x[c] + (w * w - square) * a[c] + 2.0 * v[c] * dot + 2.0 * w * cross[c];
    }
    if (by == NULL) {
        return;
    }
    /* e_k x a, row k. */
    const double turn[3][3] = {{0, -a[2], a[1]}, {a[2], 0, -a[0]}, {-a[1], a[0], 0}};
    for (size_t c = 0; c < 3; c++) {
        by[0][c] = 2.0 * (w * a[c] + cross[c]);
        for (size_t k = 0; k < 3; k++) {
            by[1 + k][c] = 2.0 * (v[c] * a[k] - v[k] * a[c] + w * turn[k][c] +
                                  (c == k ? dot : 0.0));
        }
    }
}

static int both(const gsl_vector *at, void *param, gsl_vector *f, gsl_matrix *j)
{
    const lwt_rods *rods = param;
    size_t space = rods->planar ? 2 : 3;
    size_t turns = rods->planar ? 1 : 4;
    const double *x = gsl_vector_const_ptr(at, 0);
    for (size_t i = 0; i < rods->n; i++) {
        double d[3];
        double by[4][3];
        place(d, j != NULL ? by : NULL, rods, x, rods->plate[i]);
        for (size_t c = 0; c < 3; c++) {
            d[c] -= rods->base[i][c];
        }
        if (f != NULL) {
            gsl_vector_set(f, i, d[0] * d[0] + d[1] * d[1] + d[2] * d[2] -
                                     rods->length_m[i] * rods->length_m[i]);
        }
        for (size_t c = 0; j != NULL && c < space; c++) {
            gsl_matrix_set(j, i, c, 2.0 * d[c]);
        }
        for (size_t k = 0; j != NULL && k < turns; k++) {
            gsl_matrix_set(j, i, space + k,
                           2.0 * (d[0] * by[k][0] + d[1] * by[k][1] + d[2] * by[k][2]));
        }
    }
    if (!rods->planar) {
        if (f != NULL) {
            gsl_vector_set(f, 6, x[3] * x[3] + x[4] * x[4] + x[5] * x[5] + x[6] * x[6] - 1.0);
        }
        for (size_t c = 0; j != NULL && c < 7; c++) {
            gsl_matrix_set(j, 6, c, c < 3 ? 0.0 : 2.0 * x[c]);
        }
    }
    return GSL_SUCCESS;
}

static int only_f(const gsl_vector *x, void *param, gsl_vector *f)
{
    return both(x, param, f, NULL);
}

static int only_df(const gsl_vector *x, void *param, gsl_matrix *j)
{
    return both(x, param, NULL, j);
}

/* Every centre lies within length + |a| of each base point: the common part of those cubes. */
static void box_of(double low[3], double high[3], const lwt_rods *rods)
{
    for (size_t c = 0; c < 3; c++) {
        low[c] = -INFINITY;
        high[c] = INFINITY;
        for (size_t i = 0; i < rods->n; i++) {
            double reach = rods->length_m[i] + lwt_norm(rods->plate[i]);
            low[c] = fmax(low[c], rods->base[i][c] - reach);
            high[c] = fmin(high[c], rods->base[i][c] + reach);
        }
    }
}

/* Which member of `known` has its rod ends where the root has them, n_known if none. */
static size_t member(const lwt_rods *rods, const double *x, const double known[][6][3],
                     size_t n_known)
{
    double end[6][3];
    for (size_t i = 0; i < rods->n; i++) {
        place(end[i], NULL, rods, x, rods->plate[i]);
    }
    for (size_t k = 0; k < n_known; k++) {
        double worst = 0.0;
        for (size_t i = 0; i < rods->n && worst < 1e-6; i++) {
            for (size_t c = 0; c < 3; c++) {
                worst = fmax(worst, fabs(end[i][c] - known[k][i][c]));
            }
        }
        if (worst < 1e-6) {
            return k;
        }
    }
    return n_known;
}

static bool reaches_root(gsl_multiroot_fdfsolver *solver)
{
    for (int step = 0; step < MOST_STEPS; step++) {
        if (gsl_multiroot_fdfsolver_iterate(solver) != GSL_SUCCESS) {
            break; /* no progress, which at a root rounding may also cause */
        }
        if (gsl_multiroot_test_residual(solver->f, 1e-13) == GSL_SUCCESS) {
            return true;
        }
    }
    return gsl_multiroot_test_residual(solver->f, 1e-12) == GSL_SUCCESS;
}

lwt_starts lwt_multi_start(const lwt_rods *rods, lwt_local method, const double known[][6][3],
                           size_t n_known, size_t enough, size_t most,
                           unsigned long long seed)
{
    (void)gsl_set_error_handler_off();
    lwt_rods own = *rods;
    size_t n = rods->planar ? 3 : 7;
    gsl_multiroot_function_fdf f = {only_f, only_df, both, n, &own};
    gsl_multiroot_fdfsolver *solver = gsl_multiroot_fdfsolver_alloc(
        method == LWT_HYBRIDSJ ? gsl_multiroot_fdfsolver_hybridsj
                               : gsl_multiroot_fdfsolver_gnewton,
        n);
    gsl_vector *x = gsl_vector_alloc(n);
    lwt_starts out = {0, 0, 0, 0};
    bool seen[MOST_KNOWN] = {false};
    double low[3];
    double high[3];
    box_of(low, high, rods);
    lwt_random rng;
    lwt_random_init(&rng, seed);
    while (out.starts < most && out.seen < enough && n_known <= MOST_KNOWN) {
        double at[7];
        for (size_t c = 0; c < (rods->planar ? 2u : 3u); c++) {
            at[c] = lwt_random_in(&rng, low[c], high[c]);
        }
        if (rods->planar) {
            at[2] = lwt_random_in(&rng, -LWT_PI, LWT_PI);
        } else {
            lwt_random_quaternion(&rng, &at[3]);
        }
        memcpy(gsl_vector_ptr(x, 0), at, n * sizeof *at);
        out.starts++;
        if (gsl_multiroot_fdfsolver_set(solver, &f, x) != GSL_SUCCESS || !reaches_root(solver)) {
            continue;
        }
        out.roots++;
        size_t k = member(rods, gsl_vector_const_ptr(solver->x, 0), known, n_known);
        if (k == n_known) {
            out.strangers++;
        } else if (!seen[k]) {
            seen[k] = true;
            out.seen++;
        }
    }
    gsl_vector_free(x);
    gsl_multiroot_fdfsolver_free(solver);
    return out;
}
