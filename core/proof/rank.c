/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Bounds of the least singular value of a matrix of models; the method is in rank.h. Proofs rest on
 * what is written here and on pm.h; core/math only helps to guess. */
#include "rank.h"

#include "../math/linalg.h"

#include <string.h>

/* Error terms by number; a test leaves out each and must see a false proof: 1 rounding, which hides
 * behind itself if left out in one place, 2 |Q|, 3 rests, 4 higher terms, 5 rests and rounding of
 * the witness. */
#ifdef LWI_RANK_MUTANT
#define TERM(number, x) ((LWI_RANK_MUTANT) == (number) ? 0.0 : (x))
#else
#define TERM(number, x) (x)
#endif

/* Bernstein coefficients of degree 3 of T0, T1, T2. */
static const double vertex_of[LWI_RANK_VERTICES][3] = {
    {1.0, -1.0, 1.0},
    {1.0, -1.0 / 3.0, -5.0 / 3.0},
    {1.0, 1.0 / 3.0, -5.0 / 3.0},
    {1.0, 1.0, 1.0},
};
static const double vertex_most[3] = {1.0, 1.0, 5.0 / 3.0};

/* Sums of squares below it say nothing: squares may have vanished. */
#define SQUARES_LEAST 0x1p-1000

static double dot(const double *a, const double *b, size_t n)
{
    double s = 0.0;
    for (size_t i = 0; i < n; i++) {
        s += a[i] * b[i];
    }
    return s;
}

/* ---- guesses, in plain arithmetic ----------------------------------------------------------- */

/* Inverse of x (m x m) into y by Gauss and Jordan with row exchanges, x destroyed. */
static bool invert(double *x, double *y, size_t m)
{
    memset(y, 0, m * m * sizeof *y);
    for (size_t i = 0; i < m; i++) {
        y[i * m + i] = 1.0;
    }
    for (size_t k = 0; k < m; k++) {
        size_t p = k;
        for (size_t i = k + 1; i < m; i++) {
            p = fabs(x[i * m + k]) > fabs(x[p * m + k]) ? i : p;
        }
        if (!(fabs(x[p * m + k]) > 0.0)) {
            return false;
        }
        double f = 1.0 / x[p * m + k];
        for (size_t j = 0; j < m; j++) {
            double a = x[p * m + j];
            double b = y[p * m + j];
            x[p * m + j] = x[k * m + j];
            y[p * m + j] = y[k * m + j];
            x[k * m + j] = a * f;
            y[k * m + j] = b * f;
        }
        for (size_t i = 0; i < m; i++) {
            double g = x[i * m + k];
            if (i == k || fabs(g) <= 0.0) {
                continue;
            }
            for (size_t j = k + 1; j < m; j++) {
                x[i * m + j] -= g * x[k * m + j];
            }
            for (size_t j = 0; j < m; j++) {
                y[i * m + j] -= g * y[k * m + j];
            }
        }
    }
    return true;
}

/* x (m x m) becomes its orthogonal polar factor: Newton's iteration, scaled (Higham 1986). */
static bool polar(lwi_rank_work *w, double *x, size_t m)
{
    double *copy = w->square[1];
    double *inverse = w->square[2];
    for (int step = 0; step < 24; step++) {
        memcpy(copy, x, m * m * sizeof *x);
        if (!invert(copy, inverse, m)) {
            return false;
        }
        double size = dot(x, x, m * m);
        double inverse_size = dot(inverse, inverse, m * m);
        double both = size * inverse_size / (double)(m * m);
        if (!(both < 1e300)) {
            return false;
        }
        /* At the end both sizes are sqrt(m): no scaling then. */
        double g = both > 1.05 ? sqrt(sqrt(inverse_size / size)) : 1.0;
        double change = 0.0;
        for (size_t i = 0; i < m; i++) {
            for (size_t j = 0; j < m; j++) {
                double next = 0.5 * (g * x[i * m + j] + inverse[j * m + i] / g);
                double off = next - x[i * m + j];
                change += off * off;
                x[i * m + j] = next;
            }
        }
        if (change <= 1e-12) {
            return true;
        }
    }
    return true;
}

/* w->q from the middle matrix, which is in w->part[0] by columns. */
static bool guess_q(lwi_rank_work *w)
{
    size_t n = w->n;
    size_t m = w->m;
    double *x = w->square[0];
    if (n == m) {
        for (size_t i = 0; i < m; i++) {
            for (size_t j = 0; j < m; j++) {
                x[i * m + j] = w->part[0][j * n + i];
            }
        }
        if (!polar(w, x, m)) {
            return false;
        }
        for (size_t i = 0; i < m; i++) {
            for (size_t j = 0; j < m; j++) {
                w->q[j * n + i] = x[i * m + j];
            }
        }
        return true;
    }
    /* The polar factor of the triangle, turned back by the reflectors of the QR factors. */
    double *a = w->part[1];
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < m; j++) {
            a[i * m + j] = w->part[0][j * n + i];
        }
    }
    lwi_qrp(a, n, m, m, w->tau, w->perm);
    memset(x, 0, m * m * sizeof *x);
    for (size_t i = 0; i < m; i++) {
        for (size_t j = i; j < m; j++) {
            x[i * m + j] = a[i * m + j];
        }
    }
    if (!polar(w, x, m)) {
        return false;
    }
    for (size_t j = 0; j < m; j++) {
        double *column = w->q + w->perm[j] * n;
        memset(column, 0, n * sizeof *column);
        for (size_t i = 0; i < m; i++) {
            column[i] = x[i * m + j];
        }
        lwi_qrp_q(a, n, m, m, w->tau, column);
    }
    return true;
}

/* ---- what is proved -------------------------------------------------------------------------- */

/* Bounds of |Q| and, returned, of its Frobenius norm. */
static double bound_q(lwi_rank_work *w)
{
    size_t n = w->n;
    size_t m = w->m;
    double off = 0.0;
    double size = dot(w->q, w->q, n * m) + SQUARES_LEAST;
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j <= i; j++) {
            double g = dot(w->q + i * n, w->q + j * n, n) - (i == j ? 1.0 : 0.0);
            off += (i == j ? 1.0 : 2.0) * g * g;
        }
    }
    double rounding = TERM(1, ((double)n + 4.0) * LWI_PM_EPS * (size + (double)m));
    double square = 1.0 + TERM(2, sqrt(off)) + rounding;
    /* More than 200 terms may have been summed. */
    double many = 1.0 + (double)(n * m) * 2.0 * LWI_PM_EPS;
    w->q_norm = lwi_pm_up(sqrt(lwi_pm_up(square * many)));
    return lwi_pm_up(sqrt(size) * many);
}

/* An upper bound of |R|, R what is neither T0, T1 nor T2: by sizes, |R|^2 at most the largest row
 * sum times the largest column sum, and at most the sum of squares. */
static double bound_rest(lwi_rank_work *w, const lwi_pm *a, size_t ld)
{
    double *column = w->column;
    double largest_row = 0.0;
    double squares = 0.0;
    memset(column, 0, w->m * sizeof *column);
    for (size_t i = 0; i < w->n; i++) {
        double row = 0.0;
        for (size_t j = 0; j < w->m; j++) {
            double r = TERM(3, a[i * ld + j].e);
            for (int k = 3; k < LWI_PM_SIZE; k++) {
                r += TERM(4, fabs(a[i * ld + j].c[k]));
            }
            row += r;
            column[j] += r;
            squares += r * r;
        }
        largest_row = row > largest_row ? row : largest_row;
    }
    double largest_column = 0.0;
    for (size_t j = 0; j < w->m; j++) {
        largest_column = column[j] > largest_column ? column[j] : largest_column;
    }
    double many = 1.0 + (double)(w->n * w->m) * 2.0 * LWI_PM_EPS;
    double norm = sqrt(largest_row) * sqrt(largest_column);
    double frobenius = sqrt(squares);
    bool squares_hold = squares > SQUARES_LEAST && frobenius < norm;
    return lwi_pm_up((squares_hold ? frobenius : norm) * many) + LWI_PM_TINY;
}

/* Coefficients of T0, T1, T2 by columns into w->part, and the sums of their squares. */
static bool take(lwi_rank_work *w, const lwi_pm *a, size_t rows, size_t cols, size_t ld,
                 double size[3])
{
    w->n = 0;
    w->m = 0;
    if (!(rows <= LWI_RANK_ROWS && cols <= LWI_RANK_COLS && cols <= rows && cols > 0)) {
        return false;
    }
    for (size_t k = 0; k < 3; k++) {
        size[k] = SQUARES_LEAST;
    }
    for (size_t i = 0; i < rows; i++) {
        for (size_t j = 0; j < cols; j++) {
            const lwi_pm *x = &a[i * ld + j];
            if (!lwi_pm_ok(*x)) {
                return false;
            }
            for (size_t k = 0; k < 3; k++) {
                w->part[k][j * rows + i] = x->c[k];
                size[k] += x->c[k] * x->c[k];
            }
        }
    }
    w->n = rows;
    w->m = cols;
    return true;
}

/* The vertices, with w->q and w->part made. */
static bool make_vertices(lwi_rank_work *w, const lwi_pm *a, size_t ld, const double size[3])
{
    size_t rows = w->n;
    size_t cols = w->m;
    double q_size = bound_q(w);
    double rest = w->q_norm * bound_rest(w, a, ld);
    /* sym(Q' Ck): n products and sums an entry, whose sizes make at most |Q|_F |Ck|_F in the
     * Frobenius norm; then two sums and the vertices, five roundings more. */
    double rounding = 0.0;
    for (int k = 0; k < 3; k++) {
        rounding += vertex_most[k] * sqrt(size[k]);
    }
    rounding *= TERM(1, ((double)rows + 9.0) * LWI_PM_EPS * q_size * (1.0 + 0x1p-36));
    w->slack = lwi_pm_up(rest + rounding) + LWI_PM_TINY;
    if (!(w->slack <= LWI_PM_MOST && q_size <= 0x1p100)) {
        w->n = 0;
        return false;
    }
    for (size_t i = 0; i < cols; i++) {
        for (size_t j = 0; j <= i; j++) {
            double s[3];
            for (size_t k = 0; k < 3; k++) {
                s[k] = 0.5 * (dot(w->q + i * rows, w->part[k] + j * rows, rows) +
                              dot(w->q + j * rows, w->part[k] + i * rows, rows));
            }
            for (size_t l = 0; l < LWI_RANK_VERTICES; l++) {
                w->vertex[l][i * cols + j] =
                    s[0] + vertex_of[l][1] * s[1] + vertex_of[l][2] * s[2];
            }
        }
    }
    return true;
}

bool lwi_rank_prepare(lwi_rank_work *w, const lwi_pm *a, size_t rows, size_t cols, size_t ld)
{
    double size[3];
    if (!take(w, a, rows, cols, ld, size)) {
        return false;
    }
    if (!guess_q(w)) {
        w->n = 0;
        return false;
    }
    if (rows != cols) {
        /* guess_q took it as scratch. */
        for (size_t i = 0; i < rows; i++) {
            for (size_t j = 0; j < cols; j++) {
                w->part[1][j * rows + i] = a[i * ld + j].c[1];
            }
        }
    }
    return make_vertices(w, a, ld, size);
}

bool lwi_rank_prepare_with(lwi_rank_work *w, const double *q, const lwi_pm *a, size_t rows,
                           size_t cols, size_t ld)
{
    double size[3];
    if (!take(w, a, rows, cols, ld, size)) {
        return false;
    }
    if (q != w->q) {
        memcpy(w->q, q, rows * cols * sizeof *q);
    }
    return make_vertices(w, a, ld, size);
}

/* Cholesky's factor of b - shift I into l, both lower triangles of order m; l's diagonal holds
 * reciprocals. True proves, see the head of rank.h, that b's least eigenvalue is above
 * shift - (m + 5) 2^-52 trace(b - shift I), and so above `above` for the shift taken here. */
static bool definite(const double *b, double *l, size_t m, double above)
{
    double trace = 0.0;
    for (size_t i = 0; i < m; i++) {
        trace += fabs(b[i * m + i]);
    }
    double shift = lwi_pm_up(above + TERM(1, ((double)m + 6.0) * LWI_PM_EPS * trace)) +
                   LWI_PM_TINY * (1.0 + trace);
    if (!(shift >= 0.0 && shift <= LWI_PM_MOST)) {
        return false;
    }
    for (size_t i = 0; i < m; i++) {
        double *li = l + i * m;
        for (size_t j = 0; j < i; j++) {
            li[j] = (b[i * m + j] - dot(li, l + j * m, j)) * l[j * m + j];
        }
        double d = (b[i * m + i] - shift) - dot(li, li, i);
        if (!(d > 0.0)) {
            return false;
        }
        li[i] = 1.0 / sqrt(d);
    }
    return true;
}

bool lwi_rank_at_least(lwi_rank_work *w, double s0)
{
    if (!(w->n > 0 && s0 >= 0.0)) {
        return false;
    }
    double above = lwi_pm_up(s0 * w->q_norm + w->slack);
    for (int l = 0; l < LWI_RANK_VERTICES; l++) {
        if (!definite(w->vertex[l], w->square[0], w->m, above)) {
            return false;
        }
    }
    return true;
}

/* `steps` of inverse iteration from x on, with the factor l that `definite` left; returns a guess
 * of the least eigenvalue of l l', from above: Rayleigh's quotient. 0 where numbers run out. */
static double least_eigenvalue(const double *l, double *x, size_t m, int steps)
{
    double least = 0.0;
    for (int step = 0; step < steps; step++) {
        for (size_t i = 0; i < m; i++) {
            x[i] = (x[i] - dot(l + i * m, x, i)) * l[i * m + i];
        }
        double middle = dot(x, x, m);
        for (size_t i = m; i-- > 0;) {
            x[i] *= l[i * m + i];
            for (size_t j = 0; j < i; j++) {
                x[j] -= l[i * m + j] * x[i];
            }
        }
        double after = dot(x, x, m);
        if (!(after > 0.0 && middle < 1e300 && after < 1e300)) {
            return 0.0;
        }
        /* For y = B^-1 x: y'By / y'y = y'x / y'y = |L^-1 x|^2 / |y|^2. */
        least = middle / after;
        double f = 1.0 / sqrt(after);
        for (size_t i = 0; i < m; i++) {
            x[i] *= f;
        }
    }
    return least;
}

double lwi_rank_most(lwi_rank_work *w)
{
    static const double part[] = {1.0 - 1e-12, 1.0 - 1e-7, 0.999, 0.99, 0.96,
                                  0.85,        0.6,        0.3,   0.1,  0.01};
    double least = (double)INFINITY;
    if (!(w->n > 0)) {
        return 0.0;
    }
    for (size_t i = 0; i < w->m; i++) {
        w->column[i] = i % 2 == 0 ? 1.0 : -0.7;
    }
    /* The vertices have nearly the same eigenvector, which is carried on. */
    for (int l = 0; l < LWI_RANK_VERTICES; l++) {
        if (!definite(w->vertex[l], w->square[0], w->m, w->slack)) {
            return 0.0;
        }
        double guess = least_eigenvalue(w->square[0], w->column, w->m, l == 0 ? 4 : 2);
        least = guess < least ? guess : least;
    }
    double last = least / w->q_norm;
    for (size_t i = 0; i < sizeof part / sizeof part[0]; i++) {
        double s0 = part[i] * least / w->q_norm;
        if (lwi_rank_at_least(w, s0)) {
            /* A coarse step may have passed better ones. */
            while (last - s0 > 0.005 * last) {
                double between = 0.5 * (s0 + last);
                if (lwi_rank_at_least(w, between)) {
                    s0 = between;
                } else {
                    last = between;
                }
            }
            return s0;
        }
        last = s0;
    }
    return 0.0;
}

/* ---- witnesses ------------------------------------------------------------------------------ */

enum { SVD_COLS = 8, WITNESS_STEPS = 16 };

/* v: nearly the right singular vector of the least singular value of the matrix in w->part[0]
 * (rows, ld m), which is destroyed: by singular values if it is small, else by inverse iteration
 * with the triangle of its QR factors. */
static void guess_v(lwi_rank_work *w, double *v)
{
    size_t m = w->m;
    double *a = w->part[0];
    double *x = w->column;
    if (m <= SVD_COLS) {
        lwi_svd(a, w->n, m, m, w->tau, w->square[0]);
        for (size_t i = 0; i < m; i++) {
            v[i] = w->square[0][i * m + m - 1];
        }
        return;
    }
    lwi_qrp(a, w->n, m, m, w->tau, w->perm);
    double floor = 1e-18 * fabs(a[0]) + 1e-300;
    for (size_t i = 0; i < m; i++) {
        double *r = &a[i * m + i];
        *r = fabs(*r) > floor ? *r : floor;
        x[i] = i % 2 == 0 ? 1.0 : -0.7;
    }
    for (int step = 0; step < WITNESS_STEPS; step++) {
        /* R'R y = x. */
        for (size_t i = 0; i < m; i++) {
            for (size_t k = 0; k < i; k++) {
                x[i] -= a[k * m + i] * x[k];
            }
            x[i] /= a[i * m + i];
        }
        for (size_t i = m; i-- > 0;) {
            x[i] = (x[i] - dot(a + i * m + i + 1, x + i + 1, m - i - 1)) / a[i * m + i];
        }
        double largest = 0.0;
        for (size_t i = 0; i < m; i++) {
            largest = fabs(x[i]) > largest ? fabs(x[i]) : largest;
        }
        for (size_t i = 0; i < m; i++) {
            x[i] /= largest;
        }
    }
    for (size_t i = 0; i < m; i++) {
        v[w->perm[i]] = x[i];
    }
}

double lwi_rank_above(lwi_rank_work *w, double *v, const lwi_pm *a, size_t rows, size_t cols,
                      size_t ld, double d)
{
    if (!(rows <= LWI_RANK_ROWS && cols <= LWI_RANK_COLS && cols <= rows && cols > 0)) {
        return (double)INFINITY;
    }
    w->n = rows;
    w->m = cols;
    for (size_t i = 0; i < rows; i++) {
        for (size_t j = 0; j < cols; j++) {
            double lo;
            double hi;
            lwi_pm_at(a[i * ld + j], d, &lo, &hi);
            if (!(hi - lo <= LWI_PM_MOST)) {
                w->n = 0;
                return (double)INFINITY;
            }
            double mid = 0.5 * lo + 0.5 * hi;
            double over = hi - mid;
            double under = mid - lo;
            w->part[0][i * cols + j] = mid;
            w->part[1][i * cols + j] = mid;
            w->part[2][i * cols + j] = lwi_pm_up(over > under ? over : under);
        }
    }
    guess_v(w, v);
    w->n = 0;
    /* |M v| from above, |v| from below: cols + 1 roundings an entry. */
    double above = SQUARES_LEAST;
    double below = 0.0;
    for (size_t j = 0; j < cols; j++) {
        below += v[j] * v[j];
    }
    for (size_t i = 0; i < rows; i++) {
        const double *mid = w->part[1] + i * cols;
        const double *rest = w->part[2] + i * cols;
        double y = 0.0;
        double rests = 0.0;
        double sizes = 0.0;
        for (size_t j = 0; j < cols; j++) {
            y += mid[j] * v[j];
            rests += rest[j] * fabs(v[j]);
            sizes += fabs(mid[j] * v[j]);
        }
        double rounding = ((double)cols + 2.0) * LWI_PM_EPS * sizes;
        double most = fabs(y) + TERM(5, rests + rounding) + LWI_PM_TINY;
        above += most * most;
    }
    double bound = lwi_pm_up(lwi_pm_up(sqrt(above)) / sqrt(below));
    return bound <= LWI_PM_MOST ? bound : (double)INFINITY;
}
