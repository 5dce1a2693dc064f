/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random points to start from: a state and parameters at random, moved onto the system together.
 * Heap while preparing only. */
#include "fibre_seed.h"

#include "../math/vec3.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

lwi_cx lwi_prepare_complex(lwi_prepare *p)
{
    double re = 2.0 * lwi_random_unit(&p->random) - 1.0;
    double im = 2.0 * lwi_random_unit(&p->random) - 1.0;
    return re + I * im;
}

lwi_cx lwi_prepare_unit(lwi_prepare *p)
{
    double a = 6.283185307179586 * lwi_random_unit(&p->random);
    return cos(a) + I * sin(a);
}

/* A random complex state; turns by tangents of half angles so that they are everywhere. */
static void random_state(lwi_prepare *p, lwi_cstate *st)
{
    const lwi_system *sys = p->out->hom.sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_SLIDE) {
            st->lin[k] = sys->length_m * lwi_prepare_complex(p);
        } else if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
            lwi_cx u = lwi_prepare_complex(p);
            st->cs[k][0] = (1.0 - u * u) / (1.0 + u * u);
            st->cs[k][1] = 2.0 * u / (1.0 + u * u);
            st->lin[k] = 0.0;
        } else {
            lwi_cx *q = st->quat[el->quat];
            lwi_cx norm = 0.0;
            for (int i = 0; i < 4; i++) {
                q[i] = lwi_prepare_complex(p) + (i == 0 ? 1.0 : 0.0);
                norm += q[i] * q[i];
            }
            norm = csqrt(norm);
            for (int i = 0; i < 4; i++) {
                q[i] /= norm;
            }
            for (int i = 0; i < 3; i++) {
                st->pos_m[el->quat][i] = sys->length_m * lwi_prepare_complex(p);
            }
        }
    }
}

static void random_params(lwi_prepare *p, lwi_cx *v)
{
    const lwi_hom *hom = &p->out->hom;
    const lwi_system *sys = hom->sys;
    for (size_t g = 0; g < hom->n_par_group; g++) {
        const lwi_par *par = &hom->group[g];
        switch (par->kind) {
        case LWI_PAR_ROD:
            v[par->first] = sys->rod[par->index].length_m * (1.0 + 0.6 * lwi_prepare_complex(p));
            break;
        case LWI_PAR_SLIDE:
            v[par->first] = sys->length_m * lwi_prepare_complex(p);
            break;
        case LWI_PAR_TURN:
            v[par->first] = lwi_prepare_complex(p);
            break;
        case LWI_PAR_NODE:
            for (int i = 0; i < 3; i++) {
                v[par->first + (size_t)i] = sys->length_m * lwi_prepare_complex(p);
            }
            for (int i = 3; i < 7; i++) {
                v[par->first + (size_t)i] = lwi_prepare_complex(p) + (i == 3 ? 1.0 : 0.0);
            }
            break;
        }
    }
}

/* A joint outside the tree keeps its axes in line by dot products, which its axis turned around
 * meets as well. Such points are no assemblies; they fill components of their own, so that no path
 * leads there from a good seed. */
static bool turned_around(const lwi_prepare *p)
{
    const lwi_system *sys = p->out->hom.sys;
    const lwi_ceval *ev = &p->w.ev; /* of the state, left by the residual just taken */
    for (size_t i = 0; i < sys->n_row; i++) {
        const lwi_row *row = &sys->row[i];
        if (row->kind != LWI_ROW_AXIS || row->joint < 0) {
            continue;
        }
        const lw_spec_joint *joint = &sys->spec->joint[row->joint];
        if (joint->type == LW_UNIVERSAL) {
            continue;
        }
        double e[3][3];
        memcpy(e[0], joint->axis, sizeof e[0]);
        lwi_perpendicular(e[1], e[2], joint->axis);
        for (int k = 0; k < 3; k++) { /* where the joint turns freely, -1 is met by no chance */
            const lwi_cx *ra = ev->node[row->a].rot;
            const lwi_cx *rb = ev->node[row->b].rot;
            lwi_cx dot = 0.0;
            for (int r = 0; r < 3; r++) {
                lwi_cx va = ra[3 * r] * e[k][0] + ra[3 * r + 1] * e[k][1] + ra[3 * r + 2] * e[k][2];
                lwi_cx vb = rb[3 * r] * e[k][0] + rb[3 * r + 1] * e[k][1] + rb[3 * r + 2] * e[k][2];
                dot += va * vb;
            }
            if (cabs(dot + 1.0) < 1e-6) {
                return true;
            }
        }
    }
    return false;
}

/* One least-norm Newton step for [unknowns, parameters] of the complex rows. j: rows x columns,
 * gram: rows x rows, rhs: rows. */
static bool seed_step(lwi_prepare *p, lwi_hpoint *at, lwi_cx *j, lwi_cx *gram, lwi_cx *rhs)
{
    const lwi_hom *hom = &p->out->hom;
    const lwi_system *sys = hom->sys;
    size_t n = hom->n;
    size_t m = hom->n_row;
    size_t cols = n + hom->n_par;
    /* Columns: unknowns, then each parameter by a line along it. */
    for (size_t c = 0; c < hom->n_par; c++) {
        memcpy(p->h.p1, p->h.p0, sizeof p->h.p1);
        p->h.p1[c] += 1.0;
        (void)lwi_hom_residual(at, &p->h, 0.0, &p->w);
        for (size_t r = 0; r < m; r++) {
            j[r * cols + n + c] = p->w.rate[r];
        }
    }
    memcpy(p->h.p1, p->h.p0, sizeof p->h.p1);
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
    if (!lwi_cx_solve(gram, m, rhs)) {
        return false;
    }
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
    return true;
}

/* How many singular values the derivative by the unknowns lacks at a point, whose rows were just
 * evaluated: there the solution is not isolated. As a real matrix, each value comes twice. */
static size_t rank_missing(lwi_prepare *p, const lwi_hpoint *at, double *room)
{
    const lwi_hom *hom = &p->out->hom;
    size_t n = hom->n;
    size_t m = hom->n_row;
    double sv[2 * LWI_HOM_VARS];
    lwi_ceval_rows(p->w.res, p->w.jac, NULL, hom->sys, &at->st, &p->w.in, &p->w.ev);
    for (size_t r = 0; r < m; r++) {
        for (size_t c = 0; c < n; c++) {
            lwi_cx z = p->w.jac[r * n + c];
            room[2 * r * (2 * n) + 2 * c] = room[(2 * r + 1) * (2 * n) + 2 * c + 1] = creal(z);
            room[(2 * r + 1) * (2 * n) + 2 * c] = cimag(z);
            room[2 * r * (2 * n) + 2 * c + 1] = -cimag(z);
        }
    }
    lwi_svd(room, 2 * m, 2 * n, 2 * n, sv, NULL);
    size_t rank = 0;
    while (rank < 2 * n && sv[rank] > 1e-9 * sv[0]) {
        rank++;
    }
    return (2 * n - rank + 1) / 2;
}

bool lwi_prepare_seed(lwi_prepare *p, lwi_hpoint *at)
{
    const lwi_hom *hom = &p->out->hom;
    size_t m = hom->n_row;
    size_t cols = hom->n + hom->n_par;
    /* The steps' matrices, and after the last one the derivative as a real matrix: 4 m n. */
    lwi_cx *room = calloc(m * cols + m * m + m + 2 * m * hom->n, sizeof *room);
    bool found = false;
    if (room == NULL) {
        return false;
    }
    random_state(p, &at->st);
    random_params(p, p->h.p0);
    memcpy(p->h.p1, p->h.p0, sizeof p->h.p1);
    at->s = 0.0;
    p->h.slices = true; /* half-angle parameters */
    for (int it = 0; it < 60; it++) {
        double worst = lwi_hom_residual(at, &p->h, 0.0, &p->w);
        if (worst < 1e-12) {
            found = !turned_around(p);
            size_t open = found ? rank_missing(p, at, (double *)room) : 0;
            if (open > 0) { /* at general parameters: a motion that no input takes away */
                p->out->open = open > p->out->open ? open : p->out->open;
                p->open_seeds++;
                found = false;
            }
            memcpy(p->line0, p->h.p0, sizeof p->line0);
            break;
        }
        if (!(worst < 1e6) ||
            !seed_step(p, at, room, room + m * cols, room + m * cols + m * m)) {
            break;
        }
    }
    free(room);
    return found;
}

/* The line's second point. Poses are shifted only, with the first point's turn kept: the curve over
 * such a line has a fraction of the degree, and its fibres are the same. Should it fall apart where
 * the whole variety does not, `explore` finds the other parts. */
void lwi_prepare_line(lwi_prepare *p)
{
    const lwi_hom *hom = &p->out->hom;
    random_params(p, p->line1);
    for (size_t g = 0; g < hom->n_par_group; g++) {
        if (hom->group[g].kind == LWI_PAR_NODE) {
            size_t turn = hom->group[g].first + 3;
            memcpy(p->line1 + turn, p->line0 + turn, 4 * sizeof p->line1[0]);
        }
    }
}
