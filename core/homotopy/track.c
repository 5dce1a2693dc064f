/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Path tracking: Runge-Kutta of order four in Cayley coordinates (Munthe-Kaas 1998), exact
 * derivatives along the parameters, Newton corrector, step size by the first correction. */
#include "track.h"

#include <math.h>
#include <string.h>

static double square_of(lwi_cx z)
{
    return creal(z) * creal(z) + cimag(z) * cimag(z);
}

static double size_of(const lwi_cx *y, size_t n)
{
    double s = 0.0;
    for (size_t i = 0; i < n; i++) {
        s += square_of(y[i]);
    }
    return sqrt(s);
}

static void add_group(lwi_hom *hom, lwi_par_kind kind, size_t index, size_t width)
{
    lwi_par *g = &hom->group[hom->n_par_group++];
    g->kind = kind;
    g->index = index;
    g->first = hom->n_par;
    hom->n_par += width;
}

static double weighted(const lwi_cx *y, size_t n, const lwi_track_work *w)
{
    double s = 0.0;
    for (size_t i = 0; i < n; i++) {
        s += square_of(y[i]) * w->weight[i] * w->weight[i];
    }
    return sqrt(s);
}

/* Rows are mixed by random unit numbers when there are more than unknowns; orthonormalised. */
static void make_mix(lwi_hom *hom, lwi_random *random)
{
    size_t n = hom->n;
    size_t m = hom->n_row;
    for (size_t i = 0; i < n * m; i++) {
        double a = 6.283185307179586 * lwi_random_unit(random);
        hom->mix[i] = cos(a) + I * sin(a);
    }
    for (size_t i = 0; i < n; i++) {
        lwi_cx *row = hom->mix + i * m;
        for (size_t k = 0; k < i; k++) {
            const lwi_cx *other = hom->mix + k * m;
            lwi_cx d = 0.0;
            for (size_t r = 0; r < m; r++) {
                d += conj(other[r]) * row[r];
            }
            for (size_t r = 0; r < m; r++) {
                row[r] -= d * other[r];
            }
        }
        double norm = size_of(row, m);
        for (size_t r = 0; r < m; r++) {
            row[r] /= norm;
        }
    }
}

bool lwi_hom_open(lwi_hom *hom, const lwi_system *sys, size_t rank, lwi_random *random)
{
    memset(hom, 0, sizeof *hom);
    hom->sys = sys;
    hom->n = sys->n_var;
    hom->n_row = sys->n_row;
    hom->n_observe = lwi_cobserve(NULL, sys, NULL);
    if (rank != sys->n_var || sys->n_row < sys->n_var || sys->n_var > LWI_HOM_VARS ||
        sys->n_row > LWI_HOM_ROWS || hom->n_observe > LWI_HOM_OBSERVE || sys->n_var == 0) {
        return false;
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->kind == LWI_HELIX) {
            return false;
        }
        if (el->given) {
            if (hom->n_par + 1 > LWI_HOM_PARAMS) {
                return false;
            }
            add_group(hom, el->kind == LWI_SLIDE ? LWI_PAR_SLIDE : LWI_PAR_TURN, k, 1);
        }
    }
    for (size_t i = 0; i < sys->n_row; i++) {
        /* Sums of turns have no finite count. */
        for (size_t t = 0; sys->row[i].kind == LWI_ROW_LINEAR && t < sys->row[i].n_term; t++) {
            if (sys->element[sys->row[i].term_element[t]].kind != LWI_SLIDE) {
                return false;
            }
        }
        if (sys->row[i].kind == LWI_ROW_LINEAR && sys->row[i].n_rod_term > 0) {
            return false;
        }
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        if (sys->rod[r].fixed && lwi_rod_moves(sys->spec, r)) {
            if (hom->n_par + 1 > LWI_HOM_PARAMS) {
                return false;
            }
            add_group(hom, LWI_PAR_ROD, r, 1);
        }
    }
    for (size_t n = 1; n < sys->n_node; n++) {
        if (sys->node_given[n]) {
            if (hom->n_par + 7 > LWI_HOM_PARAMS) {
                return false;
            }
            add_group(hom, LWI_PAR_NODE, n, 7);
        }
    }
    hom->square = sys->n_row == sys->n_var;
    if (!hom->square) {
        make_mix(hom, random);
    }
    return true;
}

/* Given node: position and a quaternion of any length; rates from those of the seven numbers. */
static void set_node(lwi_cinput *in, size_t node, const lwi_cx *p, const lwi_cx *dp)
{
    lwi_cframe *x = &in->node[node];
    const lwi_cx *e = p + 3;
    lwi_cx w = e[0];
    lwi_cx a = e[1];
    lwi_cx b = e[2];
    lwi_cx c = e[3];
    lwi_cx n = 1.0 / (w * w + a * a + b * b + c * c);
    lwi_cx d[4] = {dp[3], dp[4], dp[5], dp[6]};
    memcpy(x->pos_m, p, sizeof x->pos_m);
    x->rot[0] = (w * w + a * a - b * b - c * c) * n;
    x->rot[1] = 2.0 * (a * b - w * c) * n;
    x->rot[2] = 2.0 * (a * c + w * b) * n;
    x->rot[3] = 2.0 * (a * b + w * c) * n;
    x->rot[4] = (w * w - a * a + b * b - c * c) * n;
    x->rot[5] = 2.0 * (b * c - w * a) * n;
    x->rot[6] = 2.0 * (a * c - w * b) * n;
    x->rot[7] = 2.0 * (b * c + w * a) * n;
    x->rot[8] = (w * w - a * a - b * b + c * c) * n;
    /* angular velocity 2 vec(e' conj(e)) / (e . e) */
    lwi_cx *o = in->node_w[node];
    o[0] = 2.0 * n * (-d[0] * a + d[1] * w - d[2] * c + d[3] * b);
    o[1] = 2.0 * n * (-d[0] * b + d[1] * c + d[2] * w - d[3] * a);
    o[2] = 2.0 * n * (-d[0] * c - d[1] * b + d[2] * a + d[3] * w);
    in->node_v[node][0] = dp[0] - (o[1] * p[2] - o[2] * p[1]);
    in->node_v[node][1] = dp[1] - (o[2] * p[0] - o[0] * p[2]);
    in->node_v[node][2] = dp[2] - (o[0] * p[1] - o[1] * p[0]);
}

static void set_inputs(lwi_cinput *in, const lwi_hom *hom, const lwi_cx *p0, const lwi_cx *p1,
                       lwi_cx t, bool half)
{
    const lwi_system *sys = hom->sys;
    lwi_cx p[LWI_HOM_PARAMS];
    lwi_cx d[LWI_HOM_PARAMS];
    for (size_t i = 0; i < hom->n_par; i++) {
        d[i] = p1[i] - p0[i];
        p[i] = p0[i] + t * d[i];
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        in->rod_m[r] = sys->rod[r].length_m;
        in->rod_rate[r] = 0.0;
    }
    for (int i = 0; i < 9; i++) {
        in->node[0].rot[i] = i % 4 == 0 ? 1.0 : 0.0;
    }
    memset(in->node[0].pos_m, 0, sizeof in->node[0].pos_m);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        lwi_cx v = p[par->first];
        lwi_cx dv = d[par->first];
        switch (par->kind) {
        case LWI_PAR_ROD:
            in->rod_m[par->index] = v;
            in->rod_rate[par->index] = dv;
            break;
        case LWI_PAR_SLIDE:
            in->lin[par->index] = v;
            in->lin_rate[par->index] = dv;
            break;
        case LWI_PAR_TURN:
            if (half) {
                lwi_cx n = 1.0 / (1.0 + v * v);
                in->cs[par->index][0] = (1.0 - v * v) * n;
                in->cs[par->index][1] = 2.0 * v * n;
                in->turn_rate[par->index] = 2.0 * dv * n;
            } else {
                in->cs[par->index][0] = ccos(v);
                in->cs[par->index][1] = csin(v);
                in->turn_rate[par->index] = dv;
            }
            in->lin[par->index] = v;
            break;
        case LWI_PAR_NODE:
            set_node(in, par->index, p + par->first, d + par->first);
            break;
        }
    }
}

void lwi_hom_params_of(lwi_cx *p, const lwi_hom *hom, const lwi_cinput *in, bool half)
{
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        switch (par->kind) {
        case LWI_PAR_ROD:
            p[par->first] = in->rod_m[par->index];
            break;
        case LWI_PAR_SLIDE:
            p[par->first] = in->lin[par->index];
            break;
        case LWI_PAR_TURN:
            p[par->first] = half ? in->cs[par->index][1] / (1.0 + in->cs[par->index][0])
                                 : in->lin[par->index];
            break;
        case LWI_PAR_NODE:
            break; /* positions and quaternions are set by the caller */
        }
    }
}

/* Square system at (point, t): jac (m x m), rhs = -residual, and rate = -d/dt, with m = n, or n + 1
 * for slices. */
static size_t evaluate(const lwi_homotopy *h, const lwi_hpoint *at, double t, lwi_cx *residual,
                       lwi_cx *jac, lwi_cx *rate, lwi_track_work *w)
{
    const lwi_hom *hom = h->hom;
    const lwi_system *sys = hom->sys;
    size_t n = hom->n;
    size_t m = h->slices ? n + 1 : n;
    set_inputs(&w->in, hom, h->p0, h->p1, h->slices ? at->s : t, h->slices);
    lwi_ceval_nodes(&w->ev, sys, &at->st, &w->in);
    lwi_ceval_rows(w->res, jac != NULL ? w->jac : NULL, w->rate, sys, &at->st, &w->in, &w->ev);
    for (size_t i = 0; i < n; i++) {
        lwi_cx r = 0.0;
        lwi_cx v = 0.0;
        if (hom->square) {
            r = w->res[i];
            v = w->rate[i];
            if (jac != NULL) {
                memcpy(jac + i * m, w->jac + i * n, n * sizeof *jac);
            }
        } else {
            const lwi_cx *mix = hom->mix + i * hom->n_row;
            for (size_t k = 0; k < hom->n_row; k++) {
                r += mix[k] * w->res[k];
                v += mix[k] * w->rate[k];
            }
            for (size_t j = 0; jac != NULL && j < n; j++) {
                lwi_cx sum = 0.0;
                for (size_t k = 0; k < hom->n_row; k++) {
                    sum += mix[k] * w->jac[k * n + j];
                }
                jac[i * m + j] = sum;
            }
        }
        residual[i] = -r;
        if (rate != NULL) {
            rate[i] = h->slices ? 0.0 : -v;
        }
        if (h->slices && jac != NULL) {
            jac[i * m + n] = v;
        }
    }
    if (h->slices) {
        lwi_slice now;
        lwi_cx sum = 0.0;
        lwi_cx moving = 0.0;
        const lwi_slice *s0 = &h->slice[0];
        const lwi_slice *s1 = &h->slice[1];
        (void)lwi_cobserve(w->observe, sys, &at->st);
        for (size_t i = 0; i < hom->n_observe; i++) {
            lwi_cx d = s1->a[i] - s0->a[i];
            now.a[i] = s0->a[i] + t * d;
            sum += now.a[i] * w->observe[i];
            moving += d * w->observe[i];
        }
        now.b = s0->b + t * (s1->b - s0->b);
        now.c = s0->c + t * (s1->c - s0->c);
        residual[n] = -(sum + now.b * at->s - now.c);
        if (rate != NULL) {
            rate[n] = -(moving + (s1->b - s0->b) * at->s - (s1->c - s0->c));
        }
        if (jac != NULL) {
            lwi_cobserve_gradient(jac + n * m, now.a, sys, &at->st);
            jac[n * m + n] = now.b;
        }
    }
    return m;
}

static void move(lwi_hpoint *to, const lwi_hpoint *from, const lwi_homotopy *h, const lwi_cx *y)
{
    lwi_cstate_step(&to->st, &from->st, h->hom->sys, y);
    to->s = h->slices ? from->s + y[h->hom->n] : from->s;
}

static void copy_point(lwi_hpoint *to, const lwi_hpoint *from, const lwi_homotopy *h)
{
    lwi_cstate_copy(&to->st, &from->st, h->hom->sys);
    to->s = from->s;
}

/* Rates of Cayley coordinates at offset d for the tangents k: turns d' = k (1 + d^2/4); rotations
 * d' = k + (k x d)/2 + (k . d) d / 4. */
static void chart_rate(lwi_cx *k, const lwi_cx *d, const lwi_system *sys)
{
    for (size_t e = 0; e < sys->n_element; e++) {
        const lwi_element *el = &sys->element[e];
        if (el->given || el->kind == LWI_SLIDE) {
            continue;
        }
        size_t i = (size_t)el->var;
        if (el->kind == LWI_TURN) {
            double scale = sys->var_scale[i];
            k[i] *= 1.0 + 0.25 * scale * scale * d[i] * d[i];
            continue;
        }
        i += el->kind == LWI_FREE ? 3 : 0;
        lwi_cx a = k[i];
        lwi_cx b = k[i + 1];
        lwi_cx c = k[i + 2];
        lwi_cx dot = 0.25 * (a * d[i] + b * d[i + 1] + c * d[i + 2]);
        k[i] += 0.5 * (b * d[i + 2] - c * d[i + 1]) + dot * d[i];
        k[i + 1] += 0.5 * (c * d[i] - a * d[i + 2]) + dot * d[i + 1];
        k[i + 2] += 0.5 * (a * d[i + 1] - b * d[i]) + dot * d[i + 2];
    }
}

static bool tangent(lwi_cx *k, const lwi_homotopy *h, const lwi_hpoint *at, double t,
                    lwi_track_work *w)
{
    lwi_cx unused[LWI_HOM_VARS + 1];
    size_t m = evaluate(h, at, t, unused, w->square, k, w);
    return lwi_cx_solve(w->square, m, k);
}

static bool predict(lwi_hpoint *next, const lwi_homotopy *h, const lwi_hpoint *at, double t,
                    double step, lwi_track_work *w)
{
    static const double share[4] = {0.0, 0.5, 0.5, 1.0};
    size_t m = h->slices ? h->hom->n + 1 : h->hom->n;
    lwi_cx d[LWI_HOM_VARS + 1];
    for (int s = 0; s < 4; s++) {
        const lwi_hpoint *from = at;
        if (s > 0) {
            for (size_t i = 0; i < m; i++) {
                d[i] = share[s] * step * w->k[s - 1][i];
            }
            if (!(weighted(d, m, w) < 1.0)) {
                return false;
            }
            move(&w->stage, at, h, d);
            from = &w->stage;
        }
        if (!tangent(w->k[s], h, from, t + share[s] * step, w)) {
            return false;
        }
        if (s > 0) {
            chart_rate(w->k[s], d, h->hom->sys);
        }
    }
    for (size_t i = 0; i < m; i++) {
        d[i] = step / 6.0 * (w->k[0][i] + 2.0 * w->k[1][i] + 2.0 * w->k[2][i] + w->k[3][i]);
    }
    if (!(weighted(d, m, w) < 1.0)) {
        return false;
    }
    move(next, at, h, d);
    return true;
}

bool lwi_hom_refine(lwi_hpoint *at, const lwi_homotopy *h, double t, int iterations, double tol,
                    double *last, lwi_track_work *w)
{
    for (int i = 0; i < iterations; i++) {
        size_t m = evaluate(h, at, t, w->rhs, w->square, NULL, w);
        if (!lwi_cx_solve(w->square, m, w->rhs)) {
            return false;
        }
        double size = weighted(w->rhs, m, w);
        *last = size;
        if (!(size < 0.5)) {
            return false;
        }
        copy_point(&w->next, at, h);
        move(at, &w->next, h, w->rhs);
        if (size <= tol) {
            return true;
        }
    }
    return false;
}

static void set_weights(lwi_track_work *w, const lwi_homotopy *h, const lwi_hpoint *at)
{
    const lwi_system *sys = h->hom->sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        double *weight = w->weight + el->var;
        if (el->kind == LWI_SLIDE) {
            weight[0] = 1.0 / (1.0 + sqrt(square_of(at->st.lin[k])) / sys->length_m);
        } else if (el->kind == LWI_FREE) {
            double far = 0.0;
            for (int i = 0; i < 3; i++) {
                far += square_of(at->st.pos_m[el->quat][i]);
            }
            for (int i = 0; i < 6; i++) {
                weight[i] = i < 3 ? 1.0 / (1.0 + sqrt(far) / sys->length_m) : 1.0;
            }
        } else {
            for (int i = 0; i < (el->kind == LWI_BALL ? 3 : 1); i++) {
                weight[i] = 1.0;
            }
        }
    }
    w->weight[h->hom->n] = 1.0 / (1.0 + sqrt(square_of(at->s)));
}

bool lwi_hom_correct(lwi_cx *y, const lwi_homotopy *h, const lwi_hpoint *at, double t,
                     lwi_track_work *w)
{
    size_t m = evaluate(h, at, t, w->rhs, w->square, NULL, w);
    set_weights(w, h, at);
    return lwi_cx_solve(w->square, m, y);
}

static double extent(const lwi_homotopy *h, const lwi_hpoint *at, lwi_track_work *w)
{
    double most = 0.0;
    size_t n = lwi_cobserve(w->observe, h->hom->sys, &at->st);
    for (size_t i = 0; i < n; i++) {
        most = fmax(most, square_of(w->observe[i]));
    }
    return sqrt(most);
}

double lwi_hom_residual(const lwi_hpoint *at, const lwi_homotopy *h, double t, lwi_track_work *w)
{
    double worst = 0.0;
    lwi_cx unused[LWI_HOM_VARS + 1];
    (void)evaluate(h, at, t, unused, NULL, NULL, w);
    for (size_t i = 0; i < h->hom->n_row; i++) {
        worst = fmax(worst, square_of(w->res[i]));
    }
    return sqrt(worst);
}

double lwi_hpoint_distance(const lwi_hom *hom, const lwi_hpoint *a, const lwi_hpoint *b,
                           lwi_track_work *w)
{
    lwi_cx other[LWI_HOM_OBSERVE];
    size_t n = lwi_cobserve(w->observe, hom->sys, &a->st);
    (void)lwi_cobserve(other, hom->sys, &b->st);
    double d = 0.0;
    double size = 1.0;
    for (size_t i = 0; i < n; i++) {
        d += square_of(w->observe[i] - other[i]);
        size += square_of(other[i]);
    }
    return sqrt(d / size);
}

/* What rounding leaves of a Newton step: rotations of size r carry errors of r squared. */
static double noise_at(const lwi_homotopy *h, const lwi_hpoint *at, lwi_track_work *w)
{
    double r = extent(h, at, w);
    w->extent = r;
    return fmin(1e-12 + 1e-14 * r * r, 1e-5);
}

/* Where a path stood when four times as much of the way was left, and before that. */
typedef struct growth {
    double rest[2], extent[2];
} growth;

static void growth_note(growth *g, double rest, double size)
{
    if (rest <= 0.25 * g->rest[1]) {
        g->rest[0] = g->rest[1];
        g->extent[0] = g->extent[1];
        g->rest[1] = rest;
        g->extent[1] = size;
    }
}

/* What a path that cannot go on ends in. Infinity is met at the end of the way alone, by
 * coordinates that grow by a power of what is left of it; a path that runs far out before is lost
 * here. */
static lwi_end stuck(const growth *g, double rest, double size)
{
    double power = rest > 0.0 && rest < g->rest[0]
                       ? log(size / g->extent[0]) / log(g->rest[0] / rest)
                       : 0.0;
    if (!(rest < 1e-2)) {
        return LWI_END_LOST;
    }
    return size > 30.0 && power > 0.15 ? LWI_END_INFINITE : LWI_END_SINGULAR;
}

lwi_end lwi_track_path(lwi_hpoint *at, const lwi_homotopy *h, int tight, lwi_track_work *w)
{
    double tol = tight > 1 ? 1e-8 : tight > 0 ? 1e-5 : 2e-4;
    double t = 0.0;
    double step = 0.1;
    double last = 0.0;
    lwi_hpoint next;
    memset(&next, 0, sizeof next); /* what a kind of joint leaves unused is kept and compared too */
    set_weights(w, h, at);
    w->noise = noise_at(h, at, w);
    growth g = {.rest = {1.0, 1.0}, .extent = {w->extent, w->extent}};
    for (int tries = 0; t < 1.0; tries++) {
        bool final = t + step >= 1.0 - 1e-14;
        if (final) {
            step = 1.0 - t;
        }
        w->steps++;
        bool good = predict(&next, h, at, t, step, w);
        double first = 1.0;
        if (good) {
            double t1 = final ? 1.0 : t + step;
            good = lwi_hom_refine(&next, h, t1, 1, 1.0, &first, w) && first < 10.0 * tol;
            if (good && first > 1e-9 + w->noise) {
                double second = 0.0;
                good = lwi_hom_refine(&next, h, t1, 1, 1.0, &second, w) &&
                       second < 0.05 * first + w->noise;
            }
        }
        if (good) {
            copy_point(at, &next, h);
            t = final ? 1.0 : t + step;
            set_weights(w, h, at);
            w->noise = noise_at(h, at, w);
            growth_note(&g, 1.0 - t, w->extent);
        }
        /* Local error of order five in the step. */
        double grow = good ? 0.9 * pow(tol / fmax(first, 1e-14), 0.2) : 0.4;
        step *= fmin(fmax(grow, 0.25), 3.0);
        step = fmin(step, 0.5);
        /* Far out on a slice steps get tiny long before the end, and nothing is learnt there. */
        bool tired = h->slices && w->extent > 1e4 && 1.0 - t < 0.05 && tries > 200;
        if (step < 1e-10 || tries > 3000 || tired) {
            return stuck(&g, 1.0 - t, w->extent);
        }
        if (good && w->extent > 1e7) {
            return stuck(&g, 1.0 - t, w->extent);
        }
    }
    /* Sharpen as far as doubles go. */
    double before = 1.0;
    for (int i = 0; i < 8; i++) {
        if (!lwi_hom_refine(at, h, 1.0, 1, 1.0, &last, w)) {
            return LWI_END_SINGULAR;
        }
        if (last < 1e-14 || (last < 1e-9 + w->noise && last > 0.5 * before)) {
            break;
        }
        before = last;
    }
    if (!(last < 1e-8 + 10.0 * w->noise)) {
        return LWI_END_SINGULAR;
    }
    return LWI_END_GOOD;
}
