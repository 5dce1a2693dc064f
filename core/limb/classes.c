/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branch classes, see classes.h. The chain is opened: any joint values are a configuration of it,
 * and where its far end then stands does not matter for the determinant of its screws, which is
 * what an inverse singularity of the limb is. So the classes are the connected parts of the joint
 * space in which that determinant keeps its sign, found by a map of samples and straight ways
 * between them (a probabilistic roadmap; Kavraki, Svestka, Latombe, Overmars 1996). The samples are
 * the same in every run and depend on the geometry alone. */
#include "classes.h"

#include "../math/linalg.h"
#include "../math/vec3.h"
#include "../model/model.h"

#include <stdlib.h>

static const double TWO_PI = 6.283185307179586476925;

/* Steps of a straight way, rad or characteristic lengths: between two of them a pair of zeros shows
 * as a dip, which is looked into. */
#define STEP 0.06
/* A determinant this small against its typical size is on a border. */
#define BORDER 1e-9

enum { SAMPLES = LWI_CLASS_NODES, NEAREST = 8, POSES = 12, STARTS = 24, ITERATIONS = 30 };

/* ---- the opened chain ------------------------------------------------------------------------ */

static bool add_part(lwi_classes *c, const double axis[3], const double at_m[3], double turn,
                     double slide_m, size_t coord)
{
    if (c->n_part >= 6) {
        return false;
    }
    lwi_class_part *p = &c->part[c->n_part++];
    memcpy(p->axis, axis, sizeof p->axis);
    memcpy(p->at_m, at_m, sizeof p->at_m);
    p->turn = turn;
    p->slide_m = slide_m;
    p->coord = coord;
    return true;
}

/* The screws of one joint in the order met along the chain. */
static bool add_joint(lwi_classes *c, const lw_spec *spec, size_t j, double sign)
{
    const lw_spec_joint *joint = &spec->joint[j];
    size_t coord = lw_spec_joint_coord(spec, j, 0);
    bool ahead = sign > 0.0;
    switch (joint->type) {
    case LW_REVOLUTE:
        return add_part(c, joint->axis, joint->at_m, sign, 0.0, coord);
    case LW_PRISMATIC:
        return add_part(c, joint->axis, joint->at_m, 0.0, sign, coord);
    case LW_HELICAL:
        return add_part(c, joint->axis, joint->at_m, sign, sign * joint->lead_m / TWO_PI, coord);
    case LW_CYLINDRICAL: /* turn and slide about one axis: in any order */
        return add_part(c, joint->axis, joint->at_m, sign, 0.0, coord) &&
               add_part(c, joint->axis, joint->at_m, 0.0, sign, coord + 1);
    case LW_UNIVERSAL:
        return add_part(c, ahead ? joint->axis : joint->second_axis, joint->at_m, sign, 0.0,
                        ahead ? coord : coord + 1) &&
               add_part(c, ahead ? joint->second_axis : joint->axis, joint->at_m, sign, 0.0,
                        ahead ? coord + 1 : coord);
    default:
        return false;
    }
}

/* The limb as a chain of screws, a ball last. */
static bool open_chain(lwi_classes *c, const lw_model *m, const lwi_limb *limb)
{
    const lw_spec *spec = m->spec;
    size_t n = limb->n_chain;
    bool first_ball = n > 0 && spec->joint[limb->chain[0].joint].type == LW_SPHERICAL;
    bool last_ball = n > 0 && spec->joint[limb->chain[n - 1].joint].type == LW_SPHERICAL;
    c->length_m = m->length_m;
    c->ball = first_ball || last_ball;
    if (n == 0 || (first_ball && last_ball)) {
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        const lwi_chain_joint *at = &limb->chain[first_ball ? n - 1 - i : i];
        if (c->ball && i == n - 1) {
            memcpy(c->end_m, spec->joint[at->joint].at_m, sizeof c->end_m);
        } else if (!add_joint(c, spec, at->joint, first_ball ? -at->sign : at->sign)) {
            return false;
        }
    }
    if (!c->ball) {
        memcpy(c->end_m, c->part[c->n_part - 1].at_m, sizeof c->end_m);
    }
    return c->n_part == (c->ball ? 3 : 6);
}

typedef struct opened {
    double w[6][3], v[6][3]; /* each screw: turn, and velocity of the end point over the length */
    lw_frame end;            /* displacement of the last body */
    double point[3];         /* where the end point stands */
} opened;

static void open_at(opened *o, const lwi_classes *c, const double *q)
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
static size_t columns(double *a, const lwi_classes *c, const opened *o)
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

static double det_at(const lwi_classes *c, const double *q)
{
    opened o;
    double a[36];
    double log2_abs;
    size_t piv[6];
    open_at(&o, c, q);
    size_t n = columns(a, c, &o);
    int sign = lwi_lu(a, n, n, piv, &log2_abs);
    return sign == 0 ? 0.0 : sign * exp2(fmax(log2_abs, -1000.0));
}

/* ---- straight ways --------------------------------------------------------------------------- */

/* Difference the short way round; size in radians and characteristic lengths. */
static double apart(double *d, const lwi_classes *c, const double *from, const double *to)
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
    return det_at(c, q);
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
    return a > BORDER * c->scale && b > BORDER * c->scale;
}

/* The determinant keeps its sign all the straight way. */
static bool straight(const lwi_classes *c, const double *from, const double *to, double sign)
{
    double d[6];
    double size = apart(d, c, from, to);
    size_t n = (size_t)ceil(size / STEP) + 1;
    double before = INFINITY;
    double last = sign * det_at(c, from);
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

/* ---- the map --------------------------------------------------------------------------------- */

static void draw_sample(double *q, const lwi_classes *c, lwi_random *random)
{
    for (size_t k = 0; k < 6; k++) {
        double r = 2.0 * lwi_random_unit(random) - 1.0;
        bool turns = k < c->n_part && c->part[k].turn != 0.0;
        q[k] = r * (turns ? 0.5 * TWO_PI : 1.5 * c->length_m);
    }
}

/* Nodes of the sign of `q`, the nearest first; returns their number. */
static size_t by_distance(size_t *order, const lwi_classes *c, const double *q, int sign,
                          size_t n_node)
{
    double far[LWI_CLASS_NODES];
    double d[6];
    size_t n = 0;
    for (size_t i = 0; i < n_node; i++) {
        if (c->node_sign[i] != sign) {
            continue;
        }
        double size = apart(d, c, q, c->node[i]);
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

static void merge(size_t *group, size_t n, size_t a, size_t b)
{
    size_t low = group[a] < group[b] ? group[a] : group[b];
    size_t high = group[a] < group[b] ? group[b] : group[a];
    for (size_t i = 0; i < n; i++) {
        group[i] = group[i] == high ? low : group[i];
    }
}

/* Joins node i with those near it that lie in other groups, at most `tries` attempts. */
static void join(size_t *group, const lwi_classes *c, size_t i, size_t n_node, size_t tries)
{
    size_t order[LWI_CLASS_NODES];
    size_t n = by_distance(order, c, c->node[i], c->node_sign[i], n_node);
    size_t tried = 0;
    for (size_t k = 0; k < n && tried < tries; k++) {
        if (group[order[k]] == group[i]) {
            continue;
        }
        tried++;
        if (straight(c, c->node[i], c->node[order[k]], c->node_sign[i])) {
            merge(group, n_node, i, order[k]);
        }
    }
}

/* Numbers groups in the order of their first sample. A group of one or two may be a corner that no
 * straight way has found into: it is not counted. */
static void number(lwi_classes *c, const size_t *group)
{
    c->n_class = 0;
    for (size_t i = 0; i < c->n_node; i++) {
        size_t size = 0;
        c->node_class[i] = -1;
        for (size_t k = 0; k < c->n_node; k++) {
            size += group[k] == group[i];
        }
        if (group[i] != i) {
            c->node_class[i] = c->node_class[group[i]];
        } else if (size > 2 && c->n_class < LWI_MAX_CLASSES) {
            c->class_sign[c->n_class] = c->node_sign[i];
            c->node_class[i] = (signed char)c->n_class++;
        }
    }
}

static void make_map(lwi_classes *c, lwi_random *random)
{
    size_t group[LWI_CLASS_NODES];
    double sum = 0.0;
    for (size_t i = 0; i < SAMPLES; i++) {
        draw_sample(c->node[i], c, random);
        sum += fabs(det_at(c, c->node[i]));
    }
    c->scale = sum / SAMPLES;
    c->n_node = 0;
    for (size_t i = 0; i < SAMPLES; i++) {
        double det = det_at(c, c->node[i]);
        if (fabs(det) > BORDER * c->scale) {
            memmove(c->node[c->n_node], c->node[i], sizeof c->node[i]);
            c->node_sign[c->n_node++] = det > 0.0 ? 1 : -1;
        }
    }
    for (size_t i = 0; i < c->n_node; i++) {
        group[i] = i;
        join(group, c, i, i + 1, NEAREST);
    }
    /* What is still apart tries harder: every node of the smaller groups, every way. */
    for (size_t i = 0; i < c->n_node; i++) {
        size_t size = 0;
        for (size_t k = 0; k < c->n_node; k++) {
            size += group[k] == group[i];
        }
        if (size <= c->n_node / 8) {
            join(group, c, i, c->n_node, c->n_node);
        } else {
            join(group, c, i, c->n_node, 2);
        }
    }
    number(c, group);
}

/* ---- more than two solutions? ---------------------------------------------------------------- */

/* Newton from q to the end's target; a ball's centre alone counts. */
static bool reach(double *q, const lwi_classes *c, const opened *to)
{
    for (int it = 0; it < ITERATIONS; it++) {
        opened o;
        double a[36];
        double r[6];
        double rest[9];
        double log2_abs;
        size_t piv[6];
        open_at(&o, c, q);
        size_t n = columns(a, c, &o);
        for (size_t i = 0; i < 3; i++) {
            r[i] = (to->point[i] - o.point[i]) / c->length_m;
        }
        if (!c->ball) {
            double local[3];
            lwi_rot_mul_at(rest, o.end.rot, to->end.rot);
            lwi_rot_log(local, rest);
            lwi_rot_apply(r + 3, o.end.rot, local);
        }
        double off = 0.0;
        for (size_t i = 0; i < n; i++) {
            off = fmax(off, fabs(r[i]));
        }
        if (off < 1e-11) {
            return true;
        }
        if (lwi_lu(a, n, n, piv, &log2_abs) == 0) {
            return false;
        }
        lwi_lu_solve(a, n, n, piv, r);
        double size = 0.0;
        for (size_t i = 0; i < n; i++) {
            size = fmax(size, fabs(r[i]) * (c->part[i].turn != 0.0 ? 1.0 : 1.0 / c->length_m));
        }
        if (!(size < 1e6)) {
            return false;
        }
        for (size_t i = 0; i < n; i++) {
            q[i] += r[i] * (size > 0.6 ? 0.6 / size : 1.0);
        }
    }
    return false;
}

/* At some pose the opened chain has three solutions or more. */
static bool more_than_two(const lwi_classes *c, lwi_random *random)
{
    for (int pose = 0; pose < POSES; pose++) {
        double found[3][6];
        double d[6];
        opened to;
        size_t n = 1;
        draw_sample(found[0], c, random);
        open_at(&to, c, found[0]);
        for (int start = 0; start < STARTS; start++) {
            double *q = found[n];
            draw_sample(q, c, random);
            bool fresh = reach(q, c, &to);
            for (size_t i = 0; i < n && fresh; i++) {
                fresh = apart(d, c, q, found[i]) > 1e-4;
            }
            if (fresh && ++n == 3) {
                return true;
            }
        }
    }
    return false;
}

/* ---- what the limbs use ---------------------------------------------------------------------- */

lw_code lwi_classes_find(lwi_classes **out, const lw_model *m, const lwi_limb *limb, lw_err *err)
{
    lwi_random random;
    *out = NULL;
    lwi_classes *c = calloc(1, sizeof *c);
    if (c == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_random_seed(&random, 1); /* the same samples everywhere */
    bool good = open_chain(c, m, limb);
    if (good) {
        make_map(c, &random);
        good = c->n_class > 1 && (c->n_class > 2 || more_than_two(c, &random));
    }
    if (!good) {
        free(c);
        return LW_OK;
    }
    *out = c;
    return LW_OK;
}

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
    size_t n = by_distance(order, c, q, sign, c->n_node);
    for (size_t k = 0; k < n; k++) {
        if (c->node_class[order[k]] >= 0 && straight(c, q, c->node[order[k]], sign)) {
            return c->node_class[order[k]];
        }
    }
    return -1;
}

bool lwi_classes_home(lwi_classes *c, const lw_config *home)
{
    double q[6];
    values_of(q, c, home);
    double det = det_at(c, q);
    int old = c->home < 0 ? -1 : 1; /* signs stand against the home of before */
    c->home = det > 0.0 ? 1 : -1;
    int at = fabs(det) > BORDER * c->scale ? class_at(c, q, c->home) : -1;
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
