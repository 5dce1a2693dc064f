/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Monodromy and trace. The incidence curve over a generic line of parameters is cut by
 * hyperplanes in solution coordinates and the line's parameter together: on such slices the
 * plain linear trace test holds (Sommese, Verschelde, Wampler 2002; for sums over fibres
 * themselves it would not, Leykin, Rodriguez, Sottile 2018). The closed slice is then tracked to
 * the fibre over one parameter point, which gives every solution there. */
#include "fibre_seed.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Relative second difference of a trace that counts as zero. */
#define TRACE_LINEAR 2e-9
/* A path that stops with a coordinate larger than this has stopped far out. */
#define FAR_OUT 100.0

static void load(lwi_hpoint *to, const lwi_prepare *p, const lwi_points *set, size_t i)
{
    const lwi_cx *d = set->data + i * (set->pack + 1);
    lwi_cunpack(&to->st, p->out->hom.sys, d);
    to->s = d[set->pack];
}

static bool store(lwi_prepare *p, lwi_points *set, const lwi_hpoint *from)
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

static bool known(lwi_prepare *p, const lwi_points *set, const lwi_hpoint *at)
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

static bool aborted(const lwi_prepare *p)
{
    return p->limits->abort != NULL && atomic_load_explicit(p->limits->abort, memory_order_relaxed);
}

/* No work is left for `more` paths. */
static bool spent(const lwi_prepare *p, unsigned long more)
{
    return p->out->paths + more > p->limits->paths || aborted(p);
}

/* Tracks `from` between two slices. */
static lwi_end between(lwi_prepare *p, lwi_hpoint *at, const lwi_slice *from, const lwi_slice *to)
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

static void random_slice(lwi_prepare *p, lwi_slice *s)
{
    for (size_t i = 0; i < p->out->hom.n_observe; i++) {
        s->a[i] = lwi_prepare_unit(p);
    }
    s->b = lwi_prepare_unit(p) * (double)p->out->hom.n_observe * 0.5;
    s->c = lwi_prepare_complex(p) * (double)p->out->hom.n_observe * 0.5;
}

/* One monodromy loop over slices base -> x -> y -> base. */
static bool loop_slices(lwi_prepare *p, size_t *fresh)
{
    lwi_slice x;
    lwi_slice y;
    size_t count = p->slice.n;
    *fresh = 0;
    random_slice(p, &x);
    random_slice(p, &y);
    for (size_t i = 0; i < count; i++) {
        if (spent(p, 3)) {
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

/* Sums of a random linear function over the slice points, with the slice moved in parallel:
 * linear in the shift exactly when no point is missing. */
static double trace_error(lwi_prepare *p)
{
    lwi_cx weight[LWI_HOM_OBSERVE + 1];
    lwi_wx sum[3] = {0.0L, 0.0L, 0.0L};
    double size = 1e-30;
    size_t n = p->out->hom.n_observe;
    lwi_cx shift = lwi_prepare_unit(p) * 0.3 * (double)n * 0.5;
    for (size_t i = 0; i <= n; i++) {
        weight[i] = lwi_prepare_unit(p);
    }
    for (size_t i = 0; i < p->slice.n; i++) {
        lwi_wx value[3];
        for (int k = 0; k < 3; k++) {
            lwi_slice to = p->base;
            to.c += (double)(k - 1) * shift;
            load(&p->a, p, &p->slice, i);
            p->h.slice[1] = to;
            if ((k != 1 && between(p, &p->a, &p->base, &to) != LWI_END_GOOD) ||
                !lwi_wide_sharpen(&p->wide, &p->h, &p->a, &p->w)) {
                return 1.0;
            }
            value[k] = weight[n] * p->wide.s;
            for (size_t j = 0; j < n; j++) {
                value[k] += weight[j] * p->wide.value[j];
            }
            sum[k] += value[k];
        }
        size += (double)cabsl(value[2] - value[0]);
    }
    return (double)cabsl(sum[0] - 2.0L * sum[1] + sum[2]) / size;
}

/* One try of fibre_from_slice: *ends arrived, *far stopped far out without a sign of why, *near did
 * so elsewhere. New ends join the fibre. False: out of memory. */
static bool go_to_fibre(lwi_prepare *p, size_t *ends, size_t *far, size_t *near)
{
    lwi_slice to;
    memset(&to, 0, sizeof to);
    to.b = lwi_prepare_unit(p); /* s = 0, approached with a random twist */
    *ends = *far = *near = 0;
    for (size_t i = 0; i < p->slice.n; i++) {
        load(&p->a, p, &p->slice, i);
        lwi_end end = between(p, &p->a, &p->base, &to);
        if (end != LWI_END_GOOD) {
            /* Near t = 1 the slice reads s = 0 up to what grows without bound: a point that
             * still has s is on its way to infinity. */
            bool away = end == LWI_END_INFINITE ||
                        (end == LWI_END_SINGULAR && cabs(p->a.s) > 0.02);
            *far += !away && p->w.extent > FAR_OUT;
            *near += !away && !(p->w.extent > FAR_OUT);
            continue;
        }
        if (cabs(p->a.s) < 1e-8 && lwi_hom_residual(&p->a, &p->h, 1.0, &p->w) < 1e-7) {
            ++*ends;
            if (!known(p, &p->fibre, &p->a) && !store(p, &p->fibre, &p->a)) {
                return false;
            }
        }
    }
    return true;
}

/* Every slice point goes to the fibre over the line's first point or to infinity, all by one
 * homotopy, so that no two end in one place. Paths that stop far out count as infinite where three
 * tries, each by other ways, agree on the finite ends: one of these would have to be missed in each
 * of them. False: out of memory. */
static bool fibre_from_slice(lwi_prepare *p)
{
    size_t agree = 0;
    p->fibre.n = 0;
    for (int tries = 0; tries < 6; tries++) {
        size_t ends;
        size_t far;
        size_t near;
        size_t before = p->fibre.n;
        if (!go_to_fibre(p, &ends, &far, &near)) {
            return false;
        }
        agree = p->fibre.n == before ? agree : 0;
        agree += near == 0 && ends == p->fibre.n;
        p->unsettled = near + far + p->fibre.n - ends;
        if (p->unsettled == 0 || agree >= 3) {
            p->unsettled = 0;
            return true;
        }
    }
    return true;
}

/* Takes the points known over to another random slice. Points that do not arrive are dropped and
 * counted; loops find them again. */
static bool change_slice(lwi_prepare *p, size_t *dropped)
{
    lwi_slice to;
    lwi_points old = p->slice;
    *dropped = 0;
    random_slice(p, &to);
    p->slice = (lwi_points){.pack = old.pack};
    bool good = true;
    for (size_t i = 0; i < old.n && good; i++) {
        load(&p->a, p, &old, i);
        if (between(p, &p->a, &p->base, &to) != LWI_END_GOOD || known(p, &p->slice, &p->a)) {
            ++*dropped;
            continue;
        }
        good = store(p, &p->slice, &p->a);
    }
    free(old.data);
    p->base = to;
    return good;
}

/* The trace test, twice: a point that is missing because it lies far out on the slice is nearly
 * linear there and may pass for rounding; on another slice it lies elsewhere. */
static bool test_trace(lwi_prepare *p, bool *closed)
{
    size_t dropped;
    *closed = false;
    p->out->trace_error = trace_error(p);
    if (!(p->out->trace_error < TRACE_LINEAR)) {
        return true;
    }
    if (!change_slice(p, &dropped)) {
        return false;
    }
    if (dropped == 0) {
        p->out->trace_error = trace_error(p);
        *closed = p->out->trace_error < TRACE_LINEAR;
    }
    return true;
}

static bool grow(lwi_prepare *p, lw_err *err)
{
    size_t stale = 0;
    size_t most = 0;
    size_t moves = 0; /* slices changed since more points than ever were known */
    for (int loop = 0; loop < 400 && moves < 6; loop++) {
        size_t fresh;
        size_t dropped;
        bool good = loop_slices(p, &fresh);
        if (p->slice.n > most) {
            most = p->slice.n;
            moves = 0;
        }
        stale = fresh == 0 ? stale + 1 : 0;
        /* Once more only where a path was lost: nothing else can change. */
        if (good && (stale == 2 || (stale == 4 && p->out->trace_error == 1.0))) {
            good = test_trace(p, &p->out->trace_closed);
            if (good && p->out->trace_closed) {
                return true;
            }
        }
        /* Quiet and yet not closed: perhaps a point lies too far out here to be met. */
        if (good && stale >= 4) {
            good = change_slice(p, &dropped);
            stale = 0;
            moves++;
        }
        if (!good) {
            return LW_FAIL(err, LW_E_MEMORY, "", "out of memory") == LW_OK;
        }
        if (spent(p, 1) || p->slice.n > LWI_HOM_POINTS) {
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

/* Another random point of the incidence variety, tracked to the fibre's parameters. Points that
 * lie on a component not met so far come out new. */
static bool probe(lwi_prepare *p, lwi_hpoint *at)
{
    lwi_homotopy keep = p->h;
    lwi_cx line0[LWI_HOM_PARAMS];
    memcpy(line0, p->line0, sizeof line0);
    bool good = lwi_prepare_seed(p, at);
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

static bool slice_through_line(lwi_prepare *p, const lwi_hpoint *fibre_point)
{
    lwi_slice from;
    memset(&from, 0, sizeof from);
    from.b = lwi_prepare_unit(p);
    lwi_cstate_copy(&p->a.st, &fibre_point->st, p->out->hom.sys);
    p->a.s = 0.0;
    return between(p, &p->a, &from, &p->base) == LWI_END_GOOD && !known(p, &p->slice, &p->a) &&
           store(p, &p->slice, &p->a);
}

/* Components beyond the first: random points until a dozen in a row bring nothing new. */
static bool explore(lwi_prepare *p, lw_err *err)
{
    int quiet = 0;
    for (int tries = 0; tries < 60 && quiet < 12; tries++) {
        lwi_hpoint *at = &p->c;
        size_t open = p->open_seeds;
        quiet++;
        if (spent(p, 1)) {
            return true;
        }
        bool found = probe(p, at);
        quiet -= p->open_seeds > open; /* of isolated solutions that one says nothing */
        if (!found || known(p, &p->fibre, at)) {
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

/* The fibre found becomes the answer, unless an earlier one that did not close either is larger. */
static bool keep_fibre(lwi_prepare *p)
{
    lwi_fibre *out = p->out;
    bool closed = out->trace_closed && p->unsettled == 0;
    out->trace_closed = closed;
    if (!closed && p->fibre.n <= out->n_solution) {
        return true;
    }
    lwi_cx *solution = calloc(p->fibre.n * out->pack + 1, sizeof *solution);
    if (solution == NULL) {
        return false;
    }
    for (size_t i = 0; i < p->fibre.n; i++) {
        memcpy(solution + i * out->pack, p->fibre.data + i * (out->pack + 1),
               out->pack * sizeof *solution);
    }
    free(out->solution);
    out->solution = solution;
    out->n_solution = p->fibre.n;
    out->degree = p->slice.n;
    angles_from_half(out->p, &out->hom, p->line0);
    return true;
}

/* One search from a seed of its own, over a line of its own. */
static lw_code attempt(lwi_prepare *p, lw_err *err)
{
    lwi_fibre *out = p->out;
    bool seeded = false;
    p->slice.n = p->fibre.n = p->unsettled = 0;
    for (int tries = 0; tries < 40 && !seeded; tries++) {
        seeded = lwi_prepare_seed(p, &p->a);
    }
    if (!seeded) {
        return LW_OK;
    }
    lwi_prepare_line(p);
    p->h.slices = true;
    memcpy(p->h.p0, p->line0, sizeof p->h.p0);
    memcpy(p->h.p1, p->line1, sizeof p->h.p1);
    random_slice(p, &p->base);
    /* The slice through the seed. */
    (void)lwi_cobserve(p->w.observe, out->hom.sys, &p->a.st);
    p->base.c = p->base.b * p->a.s;
    for (size_t i = 0; i < out->hom.n_observe; i++) {
        p->base.c += p->base.a[i] * p->w.observe[i];
    }
    if (!store(p, &p->slice, &p->a) || !grow(p, err) || !fibre_from_slice(p) || !explore(p, err) ||
        !keep_fibre(p)) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    return LW_OK;
}

lw_code lwi_fibre_find(lwi_fibre *out, const lwi_system *sys, size_t rank, unsigned long long seed,
                       const lwi_fibre_limits *limits, lw_err *err)
{
    memset(out, 0, sizeof *out);
    lwi_prepare *p = calloc(1, sizeof *p);
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
    rc = LW_OK;
    for (int tries = 0; tries < 6 && rc == LW_OK && !out->trace_closed; tries++) {
        if (tries == 0 || !spent(p, 1)) {
            rc = attempt(p, err);
        }
    }
    if (rc == LW_OK && aborted(p)) {
        rc = LW_FAIL(err, LW_E_ABORTED, "", "ended before all solutions were found");
    }
    if (rc == LW_OK && out->n_solution == 0) {
        rc = LW_E_MODEL;
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
