/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branch classes of a limb that is solved by iteration: two of its inverse solutions are in one
 * class if the limb can go from one to the other without its determinant changing sign. Found at
 * load, with bounded work; immutable afterwards. For limbs that are chains of six freedoms between
 * two known bodies, a ball counting three and standing at the end; other limbs have none. */
#ifndef LWI_CLASSES_H
#define LWI_CLASSES_H

#include <leeway/err.h>
#include <leeway/query.h>

enum { LWI_MAX_CLASSES = 16, LWI_CLASS_NODES = 128 };
#define LWI_BRANCH_OPEN (~0u) /* the class of a configuration was not found */

typedef struct lwi_class_part {
    double axis[3], at_m[3]; /* as drawn */
    double turn, slide_m;    /* of one unit of the coordinate: rad, m */
    size_t coord;
} lwi_class_part;

typedef struct lwi_classes {
    size_t n_part;
    lwi_class_part part[6];
    bool ball;         /* the chain ends in a ball */
    double end_m[3];   /* its centre as drawn; else a point of the last body */
    double length_m;
    size_t n_node;     /* sample configurations, joined where a straight way keeps the sign */
    double node[LWI_CLASS_NODES][6];
    signed char node_sign[LWI_CLASS_NODES];
    signed char node_class[LWI_CLASS_NODES]; /* -1: in none that is counted */
    size_t n_class;    /* 0: not numbered, the limb has at most two solutions or one cannot say */
    signed char class_sign[LWI_MAX_CLASSES]; /* against home; class 0 is home's, +1 */
    size_t n_same[2];  /* classes of sign -1, +1 */
    size_t n_open[2];  /* samples of sign -1, +1 in none that is counted */
    signed char home;  /* raw sign of the determinant at home */
    double scale;      /* typical size of the determinant */
} lwi_classes;

struct lw_model;
struct lwi_limb;

/* Samples the limb's configurations and joins them. *out stays NULL where the limb is not served or
 * has no more than two solutions. */
lw_code lwi_classes_find(lwi_classes **out, const struct lw_model *model,
                         const struct lwi_limb *limb, lw_err *err);
/* Numbers the classes from home on: home's is the first, the others in the order of the samples.
 * False if home lies on a border, or in none of them. */
bool lwi_classes_home(lwi_classes *c, const lw_config *home);
/* Class of a configuration, whose sign against home is given; LWI_BRANCH_OPEN if none of the
 * samples can be reached. */
unsigned lwi_class_of(const lwi_classes *c, const lw_config *config, int sign);

/* ---- shared by the files of the classes ------------------------------------------------------ */

/* A determinant this small against its typical size is on a border. */
#define LWI_CLASS_BORDER 1e-9

typedef struct lwi_chain_state {
    double w[6][3], v[6][3]; /* each screw: turn, and velocity of the end point over the length */
    lw_frame end;            /* displacement of the last body */
    double point[3];         /* where the end point stands */
} lwi_chain_state;

void lwi_chain_open(lwi_chain_state *o, const lwi_classes *c, const double *q);
/* One column a screw; a ball leaves the velocity of its centre alone. Returns the side. */
size_t lwi_chain_columns(double *a, const lwi_classes *c, const lwi_chain_state *o);
double lwi_chain_det(const lwi_classes *c, const double *q);
/* Difference the short way round; its size in radians and characteristic lengths. */
double lwi_chain_apart(double *d, const lwi_classes *c, const double *from, const double *to);
/* The determinant keeps its sign all the straight way. */
bool lwi_chain_straight(const lwi_classes *c, const double *from, const double *to, double sign);
/* Nodes of the sign of `q` among the first n_node, the nearest first; returns their number. */
size_t lwi_chain_near(size_t *order, const lwi_classes *c, const double *q, int sign,
                      size_t n_node);

#endif
