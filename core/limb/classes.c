/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branch classes, see classes.h. The chain is opened: any joint values are a configuration of it,
 * and where its far end then stands does not matter for the determinant of its screws, which is
 * what an inverse singularity of the limb is. So the classes are the connected parts of the joint
 * space in which that determinant keeps its sign. */
#include "classes.h"

#include "../math/linalg.h"
#include "../math/vec3.h"
#include "../model/model.h"

static const double TWO_PI = 6.283185307179586476925;

/* Steps of a straight way, rad or characteristic lengths: between two of them a pair of zeros shows
 * as a dip, which is looked into. */
#define STEP 0.06

/* ---- the opened chain ------------------------------------------------------------------------ */

void lwi_chain_open(lwi_chain_state *o, const lwi_classes *c, const double *q)
{
    double p[6][3];
    lwi_frame_identity(&o->end);
    for (size_t k = 0; k < c->n_part; k++) {
        const lwi_class_part *part = &c->part[k];
        double turn[9];
        double next[9];
        double arm[3];
        lwi_rot_apply(o->w[k], o->end.rot, part->axis);
        lwi_frame_apply(p[k], &o->end, part->at_m);
        /* X E: the turn about the drawn axis, then along it. */
        lwi_rot_axis(turn, part->axis, q[k] * part->turn);
        lwi_rot_mul(next, o->end.rot, turn);
        lwi_rot_apply(arm, next, part->at_m);
        lwi_sub(o->end.pos_m, p[k], arm);
        lwi_axpy(o->end.pos_m, o->end.pos_m, q[k] * part->slide_m, o->w[k]);
        memcpy(o->end.rot, next, sizeof next);
    }
    lwi_frame_apply(o->point, &o->end, c->end_m);
    for (size_t k = 0; k < c->n_part; k++) {
        const lwi_class_part *part = &c->part[k];
        double arm[3];
        lwi_sub(arm, o->point, p[k]);
        lwi_cross(o->v[k], o->w[k], arm);
        for (size_t i = 0; i < 3; i++) {
            o->v[k][i] = (part->turn * o->v[k][i] + part->slide_m * o->w[k][i]) / c->length_m;
            o->w[k][i] *= part->turn;
        }
    }
}

/* One column a screw; a ball leaves the velocity of its centre alone. Returns the side. */
size_t lwi_chain_columns(double *a, const lwi_classes *c, const lwi_chain_state *o)
{
    size_t n = c->n_part;
    for (size_t k = 0; k < n; k++) {
        for (size_t i = 0; i < 3; i++) {
            a[i * n + k] = o->v[k][i];
            if (!c->ball) {
                a[(i + 3) * n + k] = o->w[k][i];
            }
        }
    }
    return n;
}

double lwi_chain_det(const lwi_classes *c, const double *q)
{
    lwi_chain_state o;
    double a[36];
    double log2_abs;
    size_t piv[6];
    lwi_chain_open(&o, c, q);
    size_t n = lwi_chain_columns(a, c, &o);
    int sign = lwi_lu(a, n, n, piv, &log2_abs);
    return sign == 0 ? 0.0 : sign * exp2(fmax(log2_abs, -1000.0));
}

/* ---- straight ways --------------------------------------------------------------------------- */

/* Difference the short way round; size in radians and characteristic lengths. */
double lwi_chain_apart(double *d, const lwi_classes *c, const double *from, const double *to)
{
    double most = 0.0;
    for (size_t k = 0; k < c->n_part; k++) {
        d[k] = to[k] - from[k];
        if (c->part[k].turn != 0.0 && c->part[k].slide_m == 0.0) {
            d[k] -= TWO_PI * round(d[k] / TWO_PI);
            most = fmax(most, fabs(d[k]));
        } else {
            most = fmax(most, fabs(d[k] * c->part[k].slide_m) / c->length_m);
        }
    }
    return most;
}

static double along(const lwi_classes *c, const double *from, const double *d, double t)
{
    double q[6];
    for (size_t k = 0; k < c->n_part; k++) {
        q[k] = from[k] + t * d[k];
    }
    return lwi_chain_det(c, q);
}

/* The least of |det| between t0 and t2 keeps the sign of det(from): golden sections. */
static bool dip_keeps(const lwi_classes *c, const double *from, const double *d, double t0,
                      double t2, double sign)
{
    const double part = 0.381966011250105;
    double ta = t0 + part * (t2 - t0);
    double tb = t2 - part * (t2 - t0);
    double a = sign * along(c, from, d, ta);
    double b = sign * along(c, from, d, tb);
    for (int i = 0; i < 24 && a > 0.0 && b > 0.0; i++) {
        if (a < b) {
            t2 = tb;
            tb = ta;
            b = a;
            ta = t0 + part * (t2 - t0);
            a = sign * along(c, from, d, ta);
        } else {
            t0 = ta;
            ta = tb;
            a = b;
            tb = t2 - part * (t2 - t0);
            b = sign * along(c, from, d, tb);
        }
    }
    return a > LWI_CLASS_BORDER * c->scale && b > LWI_CLASS_BORDER * c->scale;
}

/* The determinant keeps its sign all the straight way. */
bool lwi_chain_straight(const lwi_classes *c, const double *from, const double *to, double sign)
{
    double d[6];
    double size = lwi_chain_apart(d, c, from, to);
    size_t n = (size_t)ceil(size / STEP) + 1;
    double before = INFINITY;
    double last = sign * lwi_chain_det(c, from);
    for (size_t i = 1; i <= n; i++) {
        double t = (double)i / (double)n;
        double now = sign * along(c, from, d, t);
        if (!(now > 0.0)) {
            return false;
        }
        if (i > 1 && last <= before && last <= now && last < 0.2 * c->scale &&
            !dip_keeps(c, from, d, t - 2.0 / (double)n, t, sign)) {
            return false;
        }
        before = last;
        last = now;
    }
    return true;
}

/* Nodes of the sign of `q`, the nearest first; returns their number. */
size_t lwi_chain_near(size_t *order, const lwi_classes *c, const double *q, int sign,
                          size_t n_node)
{
    double far[LWI_CLASS_NODES];
    double d[6];
    size_t n = 0;
    for (size_t i = 0; i < n_node; i++) {
        if (c->node_sign[i] != sign) {
            continue;
        }
        double size = lwi_chain_apart(d, c, q, c->node[i]);
        size_t k = n++;
        for (; k > 0 && far[k - 1] > size; k--) {
            far[k] = far[k - 1];
            order[k] = order[k - 1];
        }
        far[k] = size;
        order[k] = i;
    }
    return n;
}

/* ---- what the limbs use ---------------------------------------------------------------------- */

static void values_of(double *q, const lwi_classes *c, const lw_config *config)
{
    for (size_t k = 0; k < c->n_part; k++) {
        q[k] = config->coord[c->part[k].coord];
    }
}

/* Raw class of joint values with a raw sign, -1 if no sample is reached. */
static int class_at(const lwi_classes *c, const double *q, int sign)
{
    size_t order[LWI_CLASS_NODES];
    size_t n = lwi_chain_near(order, c, q, sign, c->n_node);
    for (size_t k = 0; k < n; k++) {
        if (c->node_class[order[k]] >= 0 && lwi_chain_straight(c, q, c->node[order[k]], sign)) {
            return c->node_class[order[k]];
        }
    }
    return -1;
}

bool lwi_classes_home(lwi_classes *c, const lw_config *home)
{
    double q[6];
    values_of(q, c, home);
    double det = lwi_chain_det(c, q);
    int old = c->home < 0 ? -1 : 1; /* signs stand against the home of before */
    c->home = det > 0.0 ? 1 : -1;
    int at = fabs(det) > LWI_CLASS_BORDER * c->scale ? class_at(c, q, c->home) : -1;
    if (at < 0) {
        return false;
    }
    /* The classes before home's move up by one. */
    memset(c->n_open, 0, sizeof c->n_open);
    for (size_t i = 0; i < c->n_node; i++) {
        int k = c->node_class[i];
        c->node_class[i] = (signed char)(k == at ? 0 : k >= 0 && k < at ? k + 1 : k);
        c->n_open[c->node_sign[i] * c->home > 0] += k < 0;
    }
    signed char moved = c->class_sign[at];
    memmove(&c->class_sign[1], &c->class_sign[0], (size_t)at);
    c->class_sign[0] = moved;
    c->n_same[0] = c->n_same[1] = 0;
    for (size_t i = 0; i < c->n_class; i++) {
        c->class_sign[i] = (signed char)(c->class_sign[i] * old * c->home);
        c->n_same[c->class_sign[i] > 0]++;
    }
    return true;
}

unsigned lwi_class_of(const lwi_classes *c, const lw_config *config, int sign)
{
    if (c->n_same[sign > 0] == 1 && c->n_open[sign > 0] == 0) {
        for (size_t i = 0; i < c->n_class; i++) {
            if (c->class_sign[i] == sign) {
                return (unsigned)i;
            }
        }
    }
    double q[6];
    values_of(q, c, config);
    int at = class_at(c, q, sign * c->home);
    return at < 0 ? LWI_BRANCH_OPEN : (unsigned)at;
}
