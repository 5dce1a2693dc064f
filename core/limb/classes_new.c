/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Finds the branch classes of a limb, at load: a map of samples of its joint space and straight
 * ways between them (a probabilistic roadmap; Kavraki, Svestka, Latombe, Overmars 1996). The
 * samples are the same in every run and depend on the geometry alone. */
#include "classes.h"

#include "../math/linalg.h"
#include "../math/vec3.h"
#include "../model/model.h"

#include <stdlib.h>

static const double TWO_PI = 6.283185307179586476925;

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

/* ---- the map --------------------------------------------------------------------------------- */

static void draw_sample(double *q, const lwi_classes *c, lwi_random *random)
{
    for (size_t k = 0; k < 6; k++) {
        double r = 2.0 * lwi_random_unit(random) - 1.0;
        bool turns = k < c->n_part && c->part[k].turn != 0.0;
        q[k] = r * (turns ? 0.5 * TWO_PI : 1.5 * c->length_m);
    }
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
    size_t n = lwi_chain_near(order, c, c->node[i], c->node_sign[i], n_node);
    size_t tried = 0;
    for (size_t k = 0; k < n && tried < tries; k++) {
        if (group[order[k]] == group[i]) {
            continue;
        }
        tried++;
        if (lwi_chain_straight(c, c->node[i], c->node[order[k]], c->node_sign[i])) {
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
        sum += fabs(lwi_chain_det(c, c->node[i]));
    }
    c->scale = sum / SAMPLES;
    c->n_node = 0;
    for (size_t i = 0; i < SAMPLES; i++) {
        double det = lwi_chain_det(c, c->node[i]);
        if (fabs(det) > LWI_CLASS_BORDER * c->scale) {
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
static bool reach(double *q, const lwi_classes *c, const lwi_chain_state *to)
{
    for (int it = 0; it < ITERATIONS; it++) {
        lwi_chain_state o;
        double a[36];
        double r[6];
        double rest[9];
        double log2_abs;
        size_t piv[6];
        lwi_chain_open(&o, c, q);
        size_t n = lwi_chain_columns(a, c, &o);
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
        lwi_chain_state to;
        size_t n = 1;
        draw_sample(found[0], c, random);
        lwi_chain_open(&to, c, found[0]);
        for (int start = 0; start < STARTS; start++) {
            double *q = found[n];
            draw_sample(q, c, random);
            bool fresh = reach(q, c, &to);
            for (size_t i = 0; i < n && fresh; i++) {
                fresh = lwi_chain_apart(d, c, q, found[i]) > 1e-4;
            }
            if (fresh && ++n == 3) {
                return true;
            }
        }
    }
    return false;
}

/* ---------------------------------------------------------------------------------------------- */

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
