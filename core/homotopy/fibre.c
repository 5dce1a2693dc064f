/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Monodromy and trace. The incidence curve over a generic line of parameters is cut by hyperplanes in
 * solution coordinates and the line's parameter together: on such slices the plain linear trace test
 * holds (Sommese, Verschelde, Wampler 2002; for sums over fibres themselves it would not, Leykin,
 * Rodriguez, Sottile 2018). The closed slice is then tracked to the fibre over one parameter point,
 * which gives every solution there. */
#include "fibre.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

typedef struct point_set {
    size_t n, cap, pack;
    lwi_cx *data; /* n x (pack + 1): packed state, s */
} point_set;

typedef struct prepare {
    lwi_fibre *out;
    const lwi_fibre_limits *limits;
    lwi_random random;
    lwi_homotopy h;
    lwi_track_work w;
    lwi_hpoint a, b, c;
    lwi_cx line0[LWI_HOM_PARAMS], line1[LWI_HOM_PARAMS]; /* turns as tangents of half angles */
    point_set slice;
    lwi_slice base;
    point_set fibre;
    size_t unsettled; /* slice points that reached neither the fibre nor infinity */
} prepare;

static lwi_cx random_complex(prepare *p)
{
    double re = 2.0 * lwi_random_unit(&p->random) - 1.0;
    double im = 2.0 * lwi_random_unit(&p->random) - 1.0;
    return re + I * im;
}

static lwi_cx random_unit(prepare *p)
{
    double a = 6.283185307179586 * lwi_random_unit(&p->random);
    return cos(a) + I * sin(a);
}

static void load(lwi_hpoint *to, const prepare *p, const point_set *set, size_t i)
{
    const lwi_cx *d = set->data + i * (set->pack + 1);
    lwi_cunpack(&to->st, p->out->hom.sys, d);
    to->s = d[set->pack];
}

static bool store(prepare *p, point_set *set, const lwi_hpoint *from)
{
    if (set->n == set->cap) {
        size_t cap = set->cap > 0 ? 2 * set->cap : 64;
        lwi_cx *more = realloc(set->data, cap * (set->pack + 1) * sizeof *more);
        if (more == NULL) {
            return false;
        }
        set->data = more;
        set->cap = cap;
    }
    lwi_cx *d = set->data + set->n * (set->pack + 1);
    lwi_cpack(d, p->out->hom.sys, &from->st);
    d[set->pack] = from->s;
    set->n++;
    return true;
}

static bool known(prepare *p, const point_set *set, const lwi_hpoint *at)
{
    lwi_hpoint *other = &p->b;
    for (size_t i = 0; i < set->n; i++) {
        load(other, p, set, i);
        double ds = cabs(other->s - at->s) / (1.0 + cabs(at->s));
        if (ds < 1e-6 && lwi_hpoint_distance(&p->out->hom, other, at, &p->w) < 1e-6) {
            return true;
        }
    }
    return false;
}

/* A random complex state; turns by tangents of half angles so that they are everywhere. */
static void random_state(prepare *p, lwi_cstate *st)
{
    const lwi_system *sys = p->out->hom.sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_SLIDE) {
            st->lin[k] = sys->length_m * random_complex(p);
        } else if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
            lwi_cx u = random_complex(p);
            st->cs[k][0] = (1.0 - u * u) / (1.0 + u * u);
            st->cs[k][1] = 2.0 * u / (1.0 + u * u);
            st->lin[k] = 0.0;
        } else {
            lwi_cx *q = st->quat[el->quat];
            lwi_cx norm = 0.0;
            for (int i = 0; i < 4; i++) {
                q[i] = random_complex(p) + (i == 0 ? 1.0 : 0.0);
                norm += q[i] * q[i];
            }
            norm = csqrt(norm);
            for (int i = 0; i < 4; i++) {
                q[i] /= norm;
            }
            for (int i = 0; i < 3; i++) {
                st->pos_m[el->quat][i] = sys->length_m * random_complex(p);
            }
        }
    }
}

static void random_params(prepare *p, lwi_cx *v)
{
    const lwi_hom *hom = &p->out->hom;
    const lwi_system *sys = hom->sys;
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        switch (par->kind) {
        case LWI_PAR_ROD:
            v[par->first] = sys->rod[par->index].length_m * (1.0 + 0.6 * random_complex(p));
            break;
        case LWI_PAR_SLIDE:
            v[par->first] = sys->length_m * random_complex(p);
            break;
        case LWI_PAR_TURN:
            v[par->first] = random_complex(p);
            break;
        case LWI_PAR_NODE:
            for (int i = 0; i < 3; i++) {
                v[par->first + (size_t)i] = sys->length_m * random_complex(p);
            }
            for (int i = 3; i < 7; i++) {
                v[par->first + (size_t)i] = random_complex(p) + (i == 3 ? 1.0 : 0.0);
            }
            break;
        }
    }
}

/* A seed: Newton on the unknowns and as many parameters as are needed, from a random state. The rows
 * are met by moving unknowns and parameters together in the least-norm sense. */
static bool find_seed(prepare *p, lwi_hpoint *at);

/* Tracks `from` between two slices. */
static lwi_end between(prepare *p, lwi_hpoint *at, const lwi_slice *from, const lwi_slice *to)
{
    p->h.slice[0] = *from;
    p->h.slice[1] = *to;
    p->out->paths++;
    lwi_end end = lwi_track_path(at, &p->h, 1, &p->w);
    if (end == LWI_END_LOST || end == LWI_END_SINGULAR) {
        p->out->lost++;
    }
    return end;
}

static void random_slice(prepare *p, lwi_slice *s)
{
    for (size_t i = 0; i < p->out->hom.n_observe; i++) {
        s->a[i] = random_unit(p);
    }
    s->b = random_unit(p) * (double)p->out->hom.n_observe * 0.5;
    s->c = random_complex(p) * (double)p->out->hom.n_observe * 0.5;
}

/* One monodromy loop over slices base -> x -> y -> base. */
static bool loop_slices(prepare *p, size_t *fresh)
{
    lwi_slice x;
    lwi_slice y;
    size_t count = p->slice.n;
    *fresh = 0;
    random_slice(p, &x);
    random_slice(p, &y);
    for (size_t i = 0; i < count; i++) {
        if (p->out->paths + 3 > p->limits->paths) {
            return true;
        }
        load(&p->a, p, &p->slice, i);
        if (between(p, &p->a, &p->base, &x) != LWI_END_GOOD ||
            between(p, &p->a, &x, &y) != LWI_END_GOOD ||
            between(p, &p->a, &y, &p->base) != LWI_END_GOOD) {
            continue;
        }
        if (lwi_hom_residual(&p->a, &p->h, 1.0, &p->w) < 1e-7 && !known(p, &p->slice, &p->a)) {
            if (!store(p, &p->slice, &p->a)) {
                return false;
            }
            ++*fresh;
        }
    }
    return true;
}

/* Sums of a random linear function over the slice points, with the slice moved in parallel: linear in
 * the shift exactly when no point is missing. */
static double trace_error(prepare *p)
{
    lwi_cx weight[LWI_HOM_OBSERVE + 1];
    lwi_cx sum[3] = {0.0, 0.0, 0.0};
    double size = 1e-30;
    size_t n = p->out->hom.n_observe;
    lwi_cx shift = random_unit(p) * 0.3 * (double)n * 0.5;
    for (size_t i = 0; i <= n; i++) {
        weight[i] = random_unit(p);
    }
    for (size_t i = 0; i < p->slice.n; i++) {
        lwi_cx value[3];
        for (int k = 0; k < 3; k++) {
            lwi_slice to = p->base;
            to.c += (double)(k - 1) * shift;
            load(&p->a, p, &p->slice, i);
            if (k != 1 && between(p, &p->a, &p->base, &to) != LWI_END_GOOD) {
                return 1.0;
            }
            (void)lwi_cobserve(p->w.observe, p->out->hom.sys, &p->a.st);
            value[k] = weight[n] * p->a.s;
            for (size_t j = 0; j < n; j++) {
                value[k] += weight[j] * p->w.observe[j];
            }
            sum[k] += value[k];
        }
        size += cabs(value[2] - value[0]);
    }
    return cabs(sum[0] - 2.0 * sum[1] + sum[2]) / size;
}

/* Every slice point goes to the fibre over the line's first point or to infinity, all by one homotopy,
 * so that no two end in one place. Lost paths: all are tried again by another. False: out of memory. */
static bool fibre_from_slice(prepare *p)
{
    for (int tries = 0; tries < 5; tries++) {
        lwi_slice to;
        size_t ends = 0;
        memset(&to, 0, sizeof to);
        to.b = random_unit(p); /* s = 0, approached with a random twist */
        p->fibre.n = 0;
        p->unsettled = 0;
        for (size_t i = 0; i < p->slice.n; i++) {
            load(&p->a, p, &p->slice, i);
            lwi_end end = between(p, &p->a, &p->base, &to);
            if (end != LWI_END_GOOD) {
                /* Near t = 1 the slice reads s = 0 up to what grows without bound: a point that still
                 * has s is on its way to infinity. */
                bool away = end == LWI_END_SINGULAR && cabs(p->a.s) > 0.02;
                p->unsettled += end != LWI_END_INFINITE && !away;
                continue;
            }
            if (cabs(p->a.s) < 1e-8 && lwi_hom_residual(&p->a, &p->h, 1.0, &p->w) < 1e-7) {
                ends++;
                if (!known(p, &p->fibre, &p->a) && !store(p, &p->fibre, &p->a)) {
                    return false;
                }
            }
        }
        if (p->unsettled == 0 && ends == p->fibre.n) {
            return true;
        }
        p->unsettled += ends - p->fibre.n;
    }
    return true;
}

/* Least-norm Newton for [unknowns, parameters] of the complex rows. */
static bool find_seed(prepare *p, lwi_hpoint *at)
{
    const lwi_hom *hom = &p->out->hom;
    const lwi_system *sys = hom->sys;
    lwi_cx v[LWI_HOM_PARAMS];
    random_state(p, &at->st);
    random_params(p, v);
    at->s = 0.0;
    /* Where every parameter is a rod's length between points the unknowns move, lengths follow from the
     * state: no iteration. */
    memcpy(p->h.p0, v, sizeof v);
    memcpy(p->h.p1, v, sizeof v);
    p->h.slices = true; /* half-angle parameters */
    for (int it = 0; it < 60; it++) {
        double worst = lwi_hom_residual(at, &p->h, 0.0, &p->w);
        if (worst < 1e-12) {
            memcpy(p->line0, p->h.p0, sizeof p->line0);
            return true;
        }
        if (!(worst < 1e6)) {
            return false;
        }
        /* Columns: unknowns, then each parameter by a one-parameter line. */
        size_t n = hom->n;
        size_t m = hom->n_row;
        size_t cols = n + hom->n_par;
        lwi_cx *j = calloc(m * cols, sizeof *j);
        lwi_cx *gram = calloc(m * m, sizeof *gram);
        lwi_cx *rhs = calloc(m, sizeof *rhs);
        bool good = j != NULL && gram != NULL && rhs != NULL;
        for (size_t c = 0; good && c < hom->n_par; c++) {
            memcpy(p->h.p1, p->h.p0, sizeof p->h.p1);
            p->h.p1[c] += 1.0;
            (void)lwi_hom_residual(at, &p->h, 0.0, &p->w);
            for (size_t r = 0; r < m; r++) {
                j[r * cols + n + c] = p->w.rate[r];
            }
        }
        memcpy(p->h.p1, p->h.p0, sizeof p->h.p1);
        if (good) {
            lwi_ceval_rows(p->w.res, p->w.jac, NULL, sys, &at->st, &p->w.in, &p->w.ev);
            for (size_t r = 0; r < m; r++) {
                memcpy(j + r * cols, p->w.jac + r * n, n * sizeof *j);
                rhs[r] = -p->w.res[r];
            }
            double ridge = 0.0;
            for (size_t a = 0; a < m; a++) {
                for (size_t b = 0; b < m; b++) {
                    lwi_cx s = 0.0;
                    for (size_t c = 0; c < cols; c++) {
                        s += j[a * cols + c] * conj(j[b * cols + c]);
                    }
                    gram[a * m + b] = s;
                }
                ridge = fmax(ridge, creal(gram[a * m + a]));
            }
            for (size_t a = 0; a < m; a++) {
                gram[a * m + a] += 1e-13 * ridge;
            }
            good = lwi_cx_solve(gram, m, rhs);
        }
        if (good) {
            lwi_cx y[LWI_HOM_VARS + LWI_HOM_PARAMS];
            double size = 0.0;
            for (size_t c = 0; c < cols; c++) {
                y[c] = 0.0;
                for (size_t r = 0; r < m; r++) {
                    y[c] += conj(j[r * cols + c]) * rhs[r];
                }
                size += creal(y[c]) * creal(y[c]) + cimag(y[c]) * cimag(y[c]);
            }
            double share = size > 0.25 ? 0.5 / sqrt(size) : 1.0;
            for (size_t c = 0; c < cols; c++) {
                y[c] *= share;
            }
            lwi_cstate_copy(&p->b.st, &at->st, sys);
            lwi_cstate_step(&at->st, &p->b.st, sys, y);
            for (size_t c = 0; c < hom->n_par; c++) {
                p->h.p0[c] += y[n + c];
                p->h.p1[c] = p->h.p0[c];
            }
        }
        free(j);
        free(gram);
        free(rhs);
        if (!good) {
            return false;
        }
    }
    return false;
}

static bool grow(prepare *p, lw_err *err)
{
    size_t stale = 0;
    for (int loop = 0; loop < 400 && stale < 40; loop++) {
        size_t fresh;
        if (!loop_slices(p, &fresh)) {
            return LW_FAIL(err, LW_E_MEMORY, "", "out of memory") == LW_OK;
        }
        stale = fresh == 0 ? stale + 1 : 0;
        if (stale >= 2 && (stale & (stale - 1)) == 0) { /* after 2, 4, 8 ... quiet loops */
            p->out->trace_error = trace_error(p);
            if (p->out->trace_error < 1e-8) {
                p->out->trace_closed = true;
                return true;
            }
        }
        if (p->out->paths >= p->limits->paths || p->slice.n > LWI_HOM_POINTS) {
            return true;
        }
    }
    return true;
}

static void angles_from_half(lwi_cx *angle, const lwi_hom *hom, const lwi_cx *half)
{
    memcpy(angle, half, hom->n_par * sizeof *angle);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        if (par->kind == LWI_PAR_TURN) {
            angle[par->first] = 2.0 * catan(half[par->first]);
        }
    }
}

/* Another random point of the incidence variety, tracked to the fibre's parameters. Points that lie on
 * a component not met so far come out new. */
static bool probe(prepare *p, lwi_hpoint *at)
{
    lwi_homotopy keep = p->h;
    lwi_cx line0[LWI_HOM_PARAMS];
    memcpy(line0, p->line0, sizeof line0);
    bool good = find_seed(p, at);
    if (good) {
        p->h.slices = false;
        angles_from_half(p->h.p0, &p->out->hom, p->line0);
        angles_from_half(p->h.p1, &p->out->hom, line0);
        p->out->paths++;
        good = lwi_track_path(at, &p->h, 1, &p->w) == LWI_END_GOOD &&
               lwi_hom_residual(at, &p->h, 1.0, &p->w) < 1e-7;
        at->s = 0.0;
    }
    memcpy(p->line0, line0, sizeof line0);
    p->h = keep;
    return good;
}

static bool slice_through_line(prepare *p, const lwi_hpoint *fibre_point)
{
    lwi_slice from;
    memset(&from, 0, sizeof from);
    from.b = random_unit(p);
    lwi_cstate_copy(&p->a.st, &fibre_point->st, p->out->hom.sys);
    p->a.s = 0.0;
    return between(p, &p->a, &from, &p->base) == LWI_END_GOOD && !known(p, &p->slice, &p->a) &&
           store(p, &p->slice, &p->a);
}

/* Components beyond the first: random points until a dozen in a row bring nothing new. */
static bool explore(prepare *p, lw_err *err)
{
    int quiet = 0;
    for (int tries = 0; tries < 60 && quiet < 12; tries++) {
        lwi_hpoint *at = &p->c;
        quiet++;
        if (p->out->paths >= p->limits->paths) {
            return true;
        }
        if (!probe(p, at) || known(p, &p->fibre, at)) {
            continue;
        }
        quiet = 0;
        p->out->trace_closed = false;
        if (!slice_through_line(p, at)) {
            continue;
        }
        if (!grow(p, err) || !fibre_from_slice(p)) {
            return false;
        }
    }
    return true;
}

lw_code lwi_fibre_find(lwi_fibre *out, const lwi_system *sys, size_t rank, unsigned long long seed,
                       const lwi_fibre_limits *limits, lw_err *err)
{
    memset(out, 0, sizeof *out);
    prepare *p = calloc(1, sizeof *p);
    if (p == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lw_code rc = LW_E_MODEL;
    p->out = out;
    p->limits = limits;
    lwi_random_seed(&p->random, seed);
    if (!lwi_hom_open(&out->hom, sys, rank, &p->random)) {
        free(p);
        return LW_E_MODEL;
    }
    out->pack = lwi_cpack_size(sys);
    p->slice.pack = p->fibre.pack = out->pack;
    p->h.hom = &out->hom;
    bool seeded = false;
    for (int tries = 0; tries < 20 && !seeded; tries++) {
        seeded = find_seed(p, &p->a);
    }
    if (seeded) {
        random_params(p, p->line1);
        p->h.slices = true;
        memcpy(p->h.p0, p->line0, sizeof p->h.p0);
        memcpy(p->h.p1, p->line1, sizeof p->h.p1);
        random_slice(p, &p->base);
        /* The slice through the seed. */
        (void)lwi_cobserve(p->w.observe, sys, &p->a.st);
        p->base.c = p->base.b * p->a.s;
        for (size_t i = 0; i < out->hom.n_observe; i++) {
            p->base.c += p->base.a[i] * p->w.observe[i];
        }
        rc = store(p, &p->slice, &p->a) && grow(p, err) && fibre_from_slice(p) && explore(p, err)
                 ? LW_OK
                 : LW_E_MEMORY;
    }
    if (rc == LW_OK) {
        out->degree = p->slice.n;
        out->n_solution = p->fibre.n;
        out->solution = calloc(p->fibre.n * out->pack + 1, sizeof *out->solution);
        for (size_t i = 0; out->solution != NULL && i < p->fibre.n; i++) {
            memcpy(out->solution + i * out->pack, p->fibre.data + i * (out->pack + 1),
                   out->pack * sizeof *out->solution);
        }
        angles_from_half(out->p, &out->hom, p->line0);
        out->trace_closed = out->trace_closed && p->unsettled == 0;
        rc = out->solution == NULL ? LW_E_MEMORY : LW_OK;
    }
    free(p->slice.data);
    free(p->fibre.data);
    free(p);
    return rc;
}

void lwi_fibre_clear(lwi_fibre *fibre)
{
    free(fibre->solution);
    fibre->solution = NULL;
    fibre->n_solution = 0;
}

void lwi_fibre_solve(lwi_fibre_count *count, const lwi_fibre *fibre, const lwi_cx *target,
                     lwi_fibre_each each, void *context, lwi_homotopy *h, lwi_track_work *w,
                     lwi_hpoint *ends)
{
    memset(count, 0, sizeof *count);
    h->hom = &fibre->hom;
    h->slices = false;
    memcpy(h->p0, fibre->p, sizeof h->p0);
    memcpy(h->p1, target, fibre->hom.n_par * sizeof *target);
    for (size_t i = 0; i < fibre->n_solution; i++) {
        lwi_cunpack(&ends[0].st, fibre->hom.sys, fibre->solution + i * fibre->pack);
        lwi_end end = lwi_track_path(&ends[0], h, 0, w);
        if (end == LWI_END_LOST) {
            lwi_cunpack(&ends[0].st, fibre->hom.sys, fibre->solution + i * fibre->pack);
            end = lwi_track_path(&ends[0], h, 1, w);
        }
        count->good += end == LWI_END_GOOD;
        count->infinite += end == LWI_END_INFINITE;
        count->singular += end == LWI_END_SINGULAR;
        count->lost += end == LWI_END_LOST;
        if (end == LWI_END_GOOD || end == LWI_END_SINGULAR) {
            each(context, &ends[0], i);
        }
    }
}
