/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Newton-Kantorovich (Kantorovich 1948; Ortega & Rheinboldt, Iterative Solution of Nonlinear
 * Equations, 12.6): with b = |J^-1 F|, g = |J^-1| and a bound m on the second derivative near
 * the state, h = b g m <= 1/2 proves one solution within (1 - sqrt(1 - 2h)) / (g m) and no other
 * within (1 + sqrt(1 - 2h)) / (g m).
 *
 * The second derivative of every row by two tangents is bounded from the joints: by a turn and
 * what follows it a point moves along a circle, so |d2 p| <= its distance from the outer axis;
 * directions have unit length. Distances are taken at the state and doubled, which holds while
 * the state moves by less than `room`. Bounds are evaluated in doubles with a factor 1.01 for
 * rounding, far above what rounding can do at these sizes. */
#include "certify.h"

#include "../math/linalg.h"
#include "../math/vec3.h"

enum { MOST = 48 };

/* First-derivative bound (m per scaled unit) of a point seen through one element. */
static double speed_of(const lwi_system *sys, const lwi_eval *ev, size_t k, const double p[3])
{
    const lwi_element *el = &sys->element[k];
    double d[3];
    if (el->kind == LWI_SLIDE) {
        return sys->length_m;
    }
    lwi_sub(d, p, ev->p[k]);
    double far = 2.0 * lwi_norm(d) + (el->kind == LWI_HELIX ? fabs(el->pitch) : 0.0);
    if (el->kind == LWI_FREE) {
        far = hypot(far, sys->length_m);
    }
    return far * (el->kind == LWI_TURN || el->kind == LWI_HELIX ? sys->var_scale[el->var] : 1.0);
}

/* Frobenius bound of a row's second derivative. */
static double bend_of(const lwi_system *sys, const lwi_row *row, const lwi_eval *ev)
{
    double p[3];
    double d[3];
    double q[3];
    double sum = 0.0;
    double count = 0.0;
    double first = 0.0;
    if (row->kind == LWI_ROW_LINEAR || row->kind == LWI_ROW_SPIN) {
        return 0.0;
    }
    lwi_frame_apply(p, &ev->node[row->b], row->pb);
    for (size_t k = 0; k < row->n_link; k++) {
        size_t e = (size_t)sys->link[row->link + k].element;
        const lwi_element *el = &sys->element[e];
        if (el->var < 0) {
            continue;
        }
        double width = el->kind == LWI_FREE || el->kind == LWI_BALL ? 3.0 : 1.0;
        double v = speed_of(sys, ev, e, p);
        count += width;
        sum += width * v * v;
        first += width * v * v;
    }
    /* sqrt of sum over pairs of (distance from the outer axis)^2 */
    double size = sqrt(sum * count);
    if (row->kind == LWI_ROW_AXIS) {
        return 2.0 * count;
    }
    if (row->kind == LWI_ROW_POINT) {
        /* e . R_a^T (p_b - p_a): turns of a's side count like turns of b's. */
        return 2.0 * size / sys->length_m;
    }
    lwi_frame_apply(q, &ev->node[row->a], row->pa);
    lwi_sub(d, p, q);
    double scale = 1.0 / (sys->rod[row->rod].length_m * sys->length_m);
    return scale * (first + 2.0 * lwi_norm(d) * size);
}

static void invert_norms(double *b, double *g, const lwi_system *sys, lwi_certify_work *w)
{
    size_t n = sys->n_var;
    double log2_abs;
    double sum = 0.0;
    *b = *g = INFINITY;
    if (lwi_lu(w->square, n, n, w->piv, &log2_abs) == 0) {
        return;
    }
    for (size_t c = 0; c < n; c++) {
        memset(w->inverse, 0, n * sizeof w->inverse[0]);
        w->inverse[c] = 1.0;
        lwi_lu_solve(w->square, n, n, w->piv, w->inverse);
        for (size_t i = 0; i < n; i++) {
            sum += w->inverse[i] * w->inverse[i];
        }
    }
    *g = sqrt(sum);
    for (size_t i = 0; i < n; i++) {
        w->inverse[i] = w->res[w->perm[i]];
    }
    lwi_lu_solve(w->square, n, n, w->piv, w->inverse);
    sum = 0.0;
    for (size_t i = 0; i < n; i++) {
        sum += w->inverse[i] * w->inverse[i];
    }
    /* The residual itself is known to about 1e-15 of lengths and directions of size one. */
    *b = sqrt(sum) + *g * 4e-15 * sqrt((double)n);
}

void lwi_certify(lwi_certificate *out, const lwi_system *sys, const lwi_state *state, lwi_eval *ev,
                 lwi_certify_work *w)
{
    size_t n = sys->n_var;
    size_t m = sys->n_row;
    memset(out, 0, sizeof *out);
    if (n == 0 || n > MOST || m < n || m > LWI_MAX_ROWS) {
        return;
    }
    lwi_eval_nodes(ev, sys, state);
    (void)lwi_eval_rows(w->res, w->rows, n, sys, state, ev);
    /* n independent rows: pivots of the transposed matrix; what they prove, the rest has
     * checked. */
    for (size_t i = 0; i < m; i++) {
        for (size_t j = 0; j < n; j++) {
            w->qr[j * m + i] = w->rows[i * n + j];
        }
    }
    (void)lwi_qrp(w->qr, n, m, m, w->tau, w->perm);
    double bend = 0.0;
    for (size_t i = 0; i < n; i++) {
        memcpy(w->square + i * n, w->rows + w->perm[i] * n, n * sizeof *w->square);
        double s = bend_of(sys, &sys->row[w->perm[i]], ev);
        bend += s * s;
    }
    double b;
    double g;
    invert_norms(&b, &g, sys, w);
    double gm = 1.01 * g * sqrt(bend);
    double h = 1.01 * b * gm;
    if (!(h <= 0.5) || !(gm > 0.0)) {
        return;
    }
    double root = sqrt(1.0 - 2.0 * h);
    out->radius = 2.0 * b / (1.0 + root);
    /* Distances double at most while turns together stay below half a radian. */
    out->unique = fmin((1.0 + root) / gm, 0.25);
    out->holds = out->radius < out->unique;
}
