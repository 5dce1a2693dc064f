/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The direction to leave a singularity by: along which motion of unit size the smallest singular
 * value grows fastest. Simple values have a gradient; a lost one grows as the size of what its
 * derivative puts into the left null space; where several values coincide (symmetric postures,
 * several lost at once) the best of a fixed set of directions is taken, with its own exact rate. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "singular.h"

enum { MAX_TOGETHER = 4, MAX_LEFT = 8 };

/* Motions z of unit size in a metric: z = V S^-1 w with |w| = 1, where M = U S V^T is measured. */
typedef struct measure {
    lw_leave_by by;
    const lwi_factors *of; /* NULL: the size of z itself */
} measure;

static measure measure_for(const lwi_singular_place *at, lwi_of of)
{
    const lwi_factors *f = at->work->singular_work->of;
    /* What is judged shrinks here itself, so the other matrix measures. */
    lwi_of other = of == LWI_OF_DRIVES ? LWI_OF_TOOL : LWI_OF_DRIVES;
    measure m = {.by = LW_LEAVE_JOINTS, .of = NULL};
    if (f[other].rows >= f[other].cols &&
        f[other].sv[f[other].cols - 1] > LWI_STEP_SEEN * f[other].sv[0]) {
        m.by = other == LWI_OF_TOOL ? LW_LEAVE_TOOL : LW_LEAVE_DRIVES;
        m.of = &f[other];
    }
    return m;
}

/* Gradient over z to gradient over w. */
static void to_measure(double *g, const measure *by, size_t m)
{
    double w[LWI_MAX_VARS];
    if (by->of == NULL) {
        return;
    }
    for (size_t i = 0; i < m; i++) {
        w[i] = 0.0;
        for (size_t j = 0; j < m; j++) {
            w[i] += by->of->v[j * m + i] * g[j];
        }
        w[i] /= by->of->sv[i];
    }
    memcpy(g, w, m * sizeof *g);
}

static void from_measure(double *z, const measure *by, size_t m, const double *w)
{
    for (size_t j = 0; j < m; j++) {
        z[j] = w[j];
        for (size_t i = 0; by->of != NULL && i < m; i++) {
            z[j] = (i == 0 ? 0.0 : z[j]) + by->of->v[j * m + i] * w[i] / by->of->sv[i];
        }
    }
}

/* Derivatives of the block of values that are zero or equal: n_u x n_v numbers for each of the m
 * directions. */
typedef struct block {
    size_t n_u, n_v, m;
    bool lost;
    double slope[MAX_LEFT][MAX_TOGETHER][LWI_MAX_VARS];
} block;

static bool fill(block *b, const lwi_singular_place *at, lwi_of of, const measure *by)
{
    const lwi_factors *f = &at->work->singular_work->of[of];
    size_t last = f->rank_generic; /* one past */
    size_t first;
    b->m = f->cols;
    b->lost = f->rank < f->rank_generic;
    if (b->lost) {
        first = f->rank;
        last = f->cols;
        b->n_u = f->n_left;
    } else {
        first = last - 1;
        while (first > 0 && f->sv[first - 1] < f->sv[last - 1] * (1.0 + LWI_SAME_VALUE)) {
            first--;
        }
        b->n_u = last - first;
    }
    b->n_v = last - first;
    if (b->n_v > MAX_TOGETHER || b->n_u > MAX_LEFT) {
        return false;
    }
    for (size_t i = 0; i < b->n_u; i++) {
        double u[LWI_MAX_VARS];
        for (size_t k = 0; k < f->rows; k++) {
            u[k] = b->lost ? f->left[i][k] : f->u[k * f->cols + first + i];
        }
        for (size_t j = 0; j < b->n_v; j++) {
            double v[LWI_MAX_VARS];
            for (size_t k = 0; k < f->cols; k++) {
                v[k] = f->v[k * f->cols + first + j];
            }
            if (!lwi_singular_slope(b->slope[i][j], at, of, u, v)) {
                return false;
            }
            to_measure(b->slope[i][j], by, b->m);
        }
    }
    return true;
}

/* Growth of the smallest value along w. */
static double growth(const block *b, const double *w)
{
    double a[MAX_LEFT * MAX_LEFT] = {0};
    double sv[MAX_LEFT];
    size_t n = b->n_u > b->n_v ? b->n_u : b->n_v;
    size_t least = (b->n_u < b->n_v ? b->n_u : b->n_v) - 1;
    double size = 0.0;
    for (size_t i = 0; i < b->n_u; i++) {
        for (size_t j = 0; j < b->n_v; j++) {
            double sum = 0.0;
            for (size_t k = 0; k < b->m; k++) {
                /* Equal values: the symmetric part turns them among themselves, no more. */
                double s = b->lost ? b->slope[i][j][k]
                                   : 0.5 * (b->slope[i][j][k] + b->slope[j][i][k]);
                sum += s * w[k];
            }
            a[i * n + j] = sum;
            size += fabs(sum);
        }
    }
    if (!b->lost && n == 2) {
        return 0.5 * (a[0] + a[3]) - hypot(0.5 * (a[0] - a[3]), a[1]);
    }
    for (size_t i = 0; !b->lost && i < n; i++) {
        a[i * n + i] += size; /* makes all eigenvalues of the symmetric part singular values */
    }
    lwi_svd(a, n, n, n, sv, NULL);
    return b->lost ? sv[least] : sv[n - 1] - size;
}

/* The best of +-e_i and +-e_i +- e_j. */
static double search(double *best, const block *b)
{
    double w[LWI_MAX_VARS];
    double most = 0.0;
    for (size_t i = 0; i < b->m; i++) {
        for (size_t j = i; j < b->m; j++) {
            for (unsigned sign = 0; sign < (j == i ? 2U : 4U); sign++) {
                memset(w, 0, b->m * sizeof *w);
                double part = j == i ? 1.0 : sqrt(0.5);
                w[j] = (sign & 2U) != 0 ? -part : part;
                w[i] = (sign & 1U) != 0 ? -part : part;
                double g = growth(b, w);
                if (g > most + LWI_MOTION_ZERO) {
                    most = g;
                    memcpy(best, w, b->m * sizeof *w);
                }
            }
        }
    }
    return most;
}

/* One value: along its gradient; with several left null vectors along the largest stretch of what
 * they see. */
static double steepest(double *best, const block *b, lw_work *work)
{
    double *a = work->matrix[2];
    double *v = work->matrix[3];
    double sv[LWI_MAX_VARS];
    size_t rows = b->n_u > b->m ? b->n_u : b->m;
    memset(a, 0, rows * b->m * sizeof *a);
    for (size_t i = 0; i < b->n_u; i++) {
        memcpy(a + i * b->m, b->slope[i][0], b->m * sizeof *a);
    }
    if (b->n_u > 1) {
        lwi_svd(a, rows, b->m, b->m, sv, v);
        for (size_t k = 0; k < b->m; k++) {
            best[k] = v[k * b->m];
        }
        return sv[0];
    }
    double size = 0.0;
    for (size_t k = 0; k < b->m; k++) {
        size += a[k] * a[k];
    }
    size = sqrt(size);
    for (size_t k = 0; k < b->m && size > 0.0; k++) {
        best[k] = a[k] / size;
    }
    return size;
}

void lwi_leave_by(lw_leave *out, const lwi_singular_place *at, lwi_of of)
{
    const lwi_rates *r = at->rates;
    const lw_work *work = at->work;
    measure by = measure_for(at, of);
    block b;
    double w[LWI_MAX_VARS] = {0};
    double z[LWI_MAX_VARS];
    memset(out, 0, sizeof *out);
    out->by = by.by;
    if (!fill(&b, at, of, &by)) {
        return;
    }
    out->rate = b.n_v == 1 ? steepest(w, &b, at->work) : search(w, &b);
    out->known = out->rate > LWI_MOTION_ZERO;
    if (!out->known) {
        out->rate = 0.0;
        return;
    }
    out->either_way = b.lost;
    from_measure(z, &by, b.m, w);
    for (size_t d = 0; d < r->n_drive; d++) {
        for (size_t j = 0; j < r->m; j++) {
            out->drive[d] += work->ak[d * r->m + j] * z[j];
        }
    }
    for (size_t o = 0; o < r->n_output; o++) {
        for (size_t j = 0; j < r->m; j++) {
            out->output[o] += work->tk[o * r->m + j] * z[j];
        }
    }
}
