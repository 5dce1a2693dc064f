/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shared by the files that make a solution set: the state of the search, and its random points. */
#ifndef LWI_FIBRE_SEED_H
#define LWI_FIBRE_SEED_H

#include "fibre.h"
#include "wide.h"

typedef struct lwi_points {
    size_t n, cap, pack;
    lwi_cx *data; /* n x (pack + 1): packed state, s */
} lwi_points;

typedef struct lwi_prepare {
    lwi_fibre *out;
    const lwi_fibre_limits *limits;
    lwi_random random;
    lwi_homotopy h;
    lwi_track_work w;
    lwi_wide wide;
    lwi_hpoint a, b, c;
    lwi_cx line0[LWI_HOM_PARAMS], line1[LWI_HOM_PARAMS]; /* turns as tangents of half angles */
    lwi_points slice;
    lwi_slice base;
    lwi_points fibre;
    size_t open_seeds; /* random points that were not isolated */
    size_t unsettled; /* slice points that reached neither the fibre nor infinity */
} lwi_prepare;

/* Both parts in (-1, 1); on the unit circle. */
lwi_cx lwi_prepare_complex(lwi_prepare *p);
lwi_cx lwi_prepare_unit(lwi_prepare *p);
/* A random point of the system with its own inputs, which become line0. False if this start did not
 * lead to one. */
bool lwi_prepare_seed(lwi_prepare *p, lwi_hpoint *at);
/* The second point of the line through line0. */
void lwi_prepare_line(lwi_prepare *p);

#endif
