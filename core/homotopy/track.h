/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Square parametrised systems and paths of their solutions. Parameters are the inputs of a closure
 * system: lengths of driven rods, driven coordinates, poses of given bodies. */
#ifndef LWI_TRACK_H
#define LWI_TRACK_H

#include "../math/linalg.h"
#include "complex.h"

enum {
    LWI_HOM_VARS = 48,
    LWI_HOM_ROWS = 96,
    LWI_HOM_PARAMS = 48,
    LWI_HOM_OBSERVE = 160,
    LWI_HOM_POINTS = 2048 /* most points of one witness set */
};

typedef enum lwi_par_kind { LWI_PAR_ROD, LWI_PAR_SLIDE, LWI_PAR_TURN, LWI_PAR_NODE } lwi_par_kind;

typedef struct lwi_par {
    lwi_par_kind kind;
    size_t index; /* rod, element or node */
    size_t first; /* in the parameter vector; NODE takes 7: position, quaternion of any length */
} lwi_par;

typedef struct lwi_hom {
    const lwi_system *sys;
    size_t n, n_row;
    bool square;
    lwi_cx mix[LWI_HOM_VARS * LWI_HOM_ROWS];
    size_t n_par_group;
    lwi_par group[LWI_HOM_PARAMS];
    size_t n_par;
    size_t n_observe;
} lwi_hom;

/* A point of a path: the state, and s on the parameter line when slices are tracked. */
typedef struct lwi_hpoint {
    lwi_cstate st;
    lwi_cx s;
} lwi_hpoint;

/* Where a path leads from and to. Fibre paths: parameters from p0 to p1, turns as angles. Slice
 * paths: parameters on the line p0 + s (p1 - p0), turns as tangents of half angles, and the
 * hyperplane a . observe + b s = c moves from slice 0 to slice 1. */
typedef struct lwi_slice {
    lwi_cx a[LWI_HOM_OBSERVE];
    lwi_cx b, c;
} lwi_slice;

typedef struct lwi_homotopy {
    const lwi_hom *hom;
    bool slices;
    lwi_cx p0[LWI_HOM_PARAMS], p1[LWI_HOM_PARAMS];
    lwi_slice slice[2];
} lwi_homotopy;

typedef enum lwi_end { LWI_END_GOOD, LWI_END_INFINITE, LWI_END_SINGULAR, LWI_END_LOST } lwi_end;

typedef struct lwi_track_work lwi_track_work;
struct lwi_track_work {
    lwi_cinput in;
    lwi_ceval ev;
    lwi_hpoint stage, next;
    lwi_cx res[LWI_HOM_ROWS], rate[LWI_HOM_ROWS];
    lwi_cx jac[LWI_HOM_ROWS * LWI_HOM_VARS];
    lwi_cx square[(LWI_HOM_VARS + 1) * (LWI_HOM_VARS + 1)];
    lwi_cx rhs[LWI_HOM_VARS + 1];
    lwi_cx k[4][LWI_HOM_VARS + 1];
    lwi_cx observe[LWI_HOM_OBSERVE], gradient[LWI_HOM_VARS + 1];
    double weight[LWI_HOM_VARS + 1]; /* far positions count relative to their distance */
    unsigned long steps; /* work done, counted */
    double noise;
    double extent; /* largest coordinate where the path stands */
};

/* False if the system has more unknowns or rows than served, or screws among its unknowns. */
bool lwi_hom_open(lwi_hom *hom, const lwi_system *sys, size_t rank, lwi_random *random);

/* Follows a path; *at is moved from t = 0 to t = 1. tight: a third of the usual step tolerance. */
lwi_end lwi_track_path(lwi_hpoint *at, const lwi_homotopy *h, int tight, lwi_track_work *w);

/* Newton at fixed t; size of the last step in *last. */
bool lwi_hom_refine(lwi_hpoint *at, const lwi_homotopy *h, double t, int iterations, double tol,
                    double *last, lwi_track_work *w);
/* The Newton step for a right hand side from elsewhere (y, n long, n + 1 on slices, replaced), with
 * the derivative at `at`; also sets w->weight. */
bool lwi_hom_correct(lwi_cx *y, const lwi_homotopy *h, const lwi_hpoint *at, double t,
                     lwi_track_work *w);
/* Worst residual of all rows (not mixed) at t. */
double lwi_hom_residual(const lwi_hpoint *at, const lwi_homotopy *h, double t, lwi_track_work *w);

/* Parameter values that a state's own inputs have: fills p from lengths, coordinates and poses. */
void lwi_hom_params_of(lwi_cx *p, const lwi_hom *hom, const lwi_cinput *in, bool half);
double lwi_hpoint_distance(const lwi_hom *hom, const lwi_hpoint *a, const lwi_hpoint *b,
                           lwi_track_work *w);

#endif
