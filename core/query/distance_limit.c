/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The nearest limit: drives, joints, rods, cones.
 *
 * at_least: a quantity x with slope g at the posture and |x''| <= k along any motion of the tool
 * within r stays inside where |g| r + k r^2 / 2 <= what is left. Slopes are central differences of
 * the explicit inverse, taken up by SLOPE_OFF, which is far above their error; bends are bounded
 * from the rods (core/proof/ball.c). at_most: down the slope to the crossing, by Newton's method on
 * the line, and a little beyond, where the posture is judged anew. */
#include "distance.h"

#include "../math/tol.h"
#include "../math/vec3.h"

#include <stdint.h>

#define SLOPE_OFF 1e-6
/* Difference step, of the characteristic length. */
#define SLOPE_STEP 1e-5
#define WHOLE_TURN 6.283185307179586476925

static double cosine(const double a[3], const double b[3])
{
    return lwi_dot(a, b) / (lwi_norm(a) * lwi_norm(b));
}

static double cone_value(const lw_model *m, const lwi_limit_entry *e, const lw_config *c)
{
    double a[3];
    double b[3];
    size_t end = e->part - LW_PART_CONE;
    if (e->of == LW_LIMIT_JOINT) {
        const lw_spec_joint *joint = &m->spec->joint[e->index];
        lwi_rot_apply(a, c->body[joint->body[0]].rot, joint->cone_axis);
        lwi_rot_apply(b, c->body[joint->body[1]].rot, joint->stud_axis);
        return cosine(a, b);
    }
    const lw_spec_rod *rod = &m->spec->rod[e->index];
    double p[3];
    lwi_frame_apply(p, &c->body[rod->body[end]], rod->end_m[end]);
    lwi_frame_apply(b, &c->body[rod->body[1 - end]], rod->end_m[1 - end]);
    lwi_sub(b, b, p);
    lwi_rot_apply(a, c->body[rod->body[end]].rot, rod->swivel[end].axis);
    return cosine(a, b);
}

static double value_of(const lw_model *m, const lwi_limit_entry *e, const lw_solution *sol)
{
    if (e->of == LW_LIMIT_DRIVE) {
        return sol->drive[e->index];
    }
    if (e->part >= LW_PART_CONE) {
        return cone_value(m, e, &sol->config);
    }
    if (e->of == LW_LIMIT_ROD) {
        return m->whole->rod[e->index].length_m +
               sol->config.coord[lw_spec_rod_coord(m->spec, e->index)];
    }
    return sol->config.coord[lw_spec_joint_coord(m->spec, e->index, e->part)];
}

/* Turns come back next to their range: here they are followed from where they were. */
static double followed(const lwi_limit_entry *e, double value, double from)
{
    if (e->period > 0.0) {
        value -= e->period * floor((value - from) / e->period + 0.5);
    }
    return value;
}

/* ---- which quantities, and how they bend ----------------------------------------------------- */

/* The rod of the ball that a limb made, SIZE_MAX none. */
static size_t limb_rod(const lwi_ball *b, size_t limb)
{
    for (size_t i = 0; i < b->n_rod; i++) {
        if (b->rod[i].limb == limb) {
            return i;
        }
    }
    return SIZE_MAX;
}

/* The rod of the ball for a rod of the document. */
static size_t spec_rod(const lwi_ball *b, size_t rod)
{
    for (size_t i = 0; i < b->n_rod; i++) {
        if (b->rod[i].spec_rod == (int)rod) {
            return i;
        }
    }
    return SIZE_MAX;
}

static bool determined(const lw_model *m, size_t coord)
{
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD && m->spec->output[o].coord == coord) {
            return true;
        }
    }
    for (size_t i = 0; i < m->n_determined; i++) {
        if (m->determined[i].coord == coord) {
            return true;
        }
    }
    return false;
}

static void bend_of_joint(lwi_limit_entry *e, const lw_model *m, const lwi_distance_work *w,
                          size_t joint, size_t part)
{
    const lwi_ball *b = w->ball;
    e->bend = LWI_BEND_ANY;
    if (part < LW_PART_CONE && determined(m, lw_spec_joint_coord(m->spec, joint, part))) {
        e->bend = LWI_BEND_NONE;
        return;
    }
    for (size_t k = 0; k < 6 && w->is_arm; k++) {
        if (w->arm.joint[k] == joint) {
            e->bend = LWI_BEND_ARM;
            e->rod = k;
            return;
        }
    }
    for (size_t i = 0; i < m->n_limb && part < LW_PART_CONE; i++) {
        const lwi_limb *limb = &m->limb[i];
        for (size_t k = 0; k < limb->n_chain && k < 3; k++) {
            size_t rod = limb_rod(b, i);
            if (limb->chain[k].joint != joint || rod == SIZE_MAX) {
                continue;
            }
            bool back = m->fused[limb->anchor[0]] != m->fused[m->spec->frame];
            e->rod = rod;
            e->bend = k == 1 ? LWI_BEND_ELBOW : (k == 0) == !back ? LWI_BEND_FOOT : LWI_BEND_UNIT;
        }
    }
}

static void bend_of_rod(lwi_limit_entry *e, const lw_model *m, const lwi_ball *b, size_t r)
{
    size_t rod = spec_rod(b, r);
    e->bend = LWI_BEND_ANY;
    if (rod == SIZE_MAX) {
        return;
    }
    e->rod = rod;
    e->bend = e->part >= LW_PART_CONE ? LWI_BEND_CONE : LWI_BEND_LENGTH;
    if (e->part >= LW_PART_CONE) {
        size_t body = m->fused[m->spec->rod[r].body[e->part - LW_PART_CONE]];
        bool moving = b->rod[rod].limb != SIZE_MAX;
        bool tool = b->rod[rod].slide >= 0 || body == m->fused[m->spec->tool[0].body];
        e->axis_turns = tool;
        e->axis_cranks = !tool && moving && b->rod[rod].foot == LWI_FOOT_CIRCLE;
    } else if (b->rod[rod].foot != LWI_FOOT_POINT) {
        e->bend = LWI_BEND_NONE;
    }
}

static lwi_limit_entry *entry(lwi_distance_work *w, lw_limit_of of, size_t index, size_t part,
                              const lw_range *range)
{
    if ((!range->has_low && !range->has_high) || w->n_entry == LWI_DISTANCE_LIMITS) {
        return NULL;
    }
    lwi_limit_entry *e = &w->entry[w->n_entry++];
    memset(e, 0, sizeof *e);
    e->of = of;
    e->index = index;
    e->part = part;
    e->range = *range;
    e->factor = 1.0;
    return e;
}

static void add_joint(lwi_distance_work *w, const lw_model *m, size_t j)
{
    const lw_spec_joint *joint = &m->spec->joint[j];
    for (size_t k = 0; k < lw_joint_coords(joint->type); k++) {
        lwi_limit_entry *e = entry(w, LW_LIMIT_JOINT, j, k, &joint->range[k]);
        if (e != NULL) {
            bend_of_joint(e, m, w, j, k);
            e->period = lw_spec_coord_turning(m->spec, lw_spec_joint_coord(m->spec, j, k)) &&
                                joint->type != LW_HELICAL
                            ? WHOLE_TURN
                            : 0.0;
        }
    }
    if (joint->type == LW_SPHERICAL && joint->has_cone) {
        lw_range range = {.has_low = true, .low = cos(joint->cone_rad)};
        lwi_limit_entry *e = entry(w, LW_LIMIT_JOINT, j, LW_PART_CONE, &range);
        if (e != NULL) {
            e->bend = LWI_BEND_ANY;
        }
    }
}

static void add_drive(lwi_distance_work *w, const lw_model *m, size_t d)
{
    const lw_spec_drive *drive = &m->spec->drive[d];
    size_t joint;
    size_t part;
    size_t rod;
    lwi_limit_entry *e = entry(w, LW_LIMIT_DRIVE, d, 0, &drive->range);
    if (e == NULL) {
        return;
    }
    e->bend = LWI_BEND_ANY;
    if (drive->n_term == 1 &&
        lw_spec_coord_owner(m->spec, drive->term[0].coord, &joint, &part, &rod)) {
        if (joint == SIZE_MAX) {
            bend_of_rod(e, m, w->ball, rod);
        } else {
            bend_of_joint(e, m, w, joint, part);
        }
        e->factor = fabs(drive->term[0].factor);
        e->period = drive->turning && joint != SIZE_MAX && m->spec->joint[joint].type != LW_HELICAL
                        ? WHOLE_TURN * e->factor
                        : 0.0;
    }
}

static void list_entries(lwi_distance_work *w, const lw_model *m)
{
    const lw_spec *spec = m->spec;
    w->n_entry = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        add_joint(w, m, j);
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        lwi_limit_entry *e = entry(w, LW_LIMIT_ROD, r, 0, &spec->rod[r].range_m);
        if (e != NULL) {
            bend_of_rod(e, m, w->ball, r);
        }
        for (size_t end = 0; end < 2; end++) {
            lw_range range = {.has_low = true, .low = cos(spec->rod[r].swivel[end].cone_rad)};
            e = spec->rod[r].swivel[end].present
                    ? entry(w, LW_LIMIT_ROD, r, LW_PART_CONE + end, &range)
                    : NULL;
            if (e != NULL) {
                bend_of_rod(e, m, w->ball, r);
            }
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        add_drive(w, m, d);
    }
}

/* ---- slopes and bends ------------------------------------------------------------------------ */

static bool values_at(double *out, const lw_model *m, const double *y, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    const lw_solution *sol = lwi_distance_solve(m, y, work);
    for (size_t i = 0; sol != NULL && i < w->n_entry; i++) {
        out[i] = followed(&w->entry[i], value_of(m, &w->entry[i], sol), w->entry[i].value);
    }
    return sol != NULL;
}

static bool slopes(const lw_model *m, const lw_solution *sol, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    double h = SLOPE_STEP * m->length_m;
    for (size_t i = 0; i < w->n_entry; i++) {
        w->entry[i].value = value_of(m, &w->entry[i], sol);
        w->entry[i].steep = 0.0;
    }
    for (size_t k = 0; k < w->ball->n_dir; k++) {
        double y[LWI_BALL_DIRS] = {0};
        y[k] = h;
        if (!values_at(w->plus, m, y, work)) {
            return false;
        }
        y[k] = -h;
        if (!values_at(w->minus, m, y, work)) {
            return false;
        }
        for (size_t i = 0; i < w->n_entry; i++) {
            w->entry[i].slope[k] = (w->plus[i] - w->minus[i]) / (2.0 * h);
            w->entry[i].steep += w->entry[i].slope[k] * w->entry[i].slope[k];
        }
    }
    for (size_t i = 0; i < w->n_entry; i++) {
        w->entry[i].steep = sqrt(w->entry[i].steep);
    }
    return true;
}

/* Bound of the second derivative within r; INFINITY where none is known. */
static double bend_within(const lwi_limit_entry *e, const lwi_ball *b, const lwi_rod_at *at,
                          double r)
{
    lwi_rod_bounds v;
    if (e->bend == LWI_BEND_NONE) {
        return 0.0;
    }
    if (e->bend == LWI_BEND_ANY || e->bend == LWI_BEND_ARM) {
        return INFINITY;
    }
    lwi_ball_bounds(&v, b, &b->rod[e->rod], &at[e->rod], r);
    if (!v.holds) {
        return INFINITY;
    }
    switch (e->bend) {
    case LWI_BEND_LENGTH:
        return e->factor * (v.p2 + v.p1 * v.p1 / v.length_m);
    case LWI_BEND_FOOT:
        return e->factor * v.q2;
    case LWI_BEND_UNIT:
        return e->factor * v.u2;
    case LWI_BEND_ELBOW:
        return e->factor * (v.u2 + v.q2);
    default: {
        /* (u . a)'' with a turning at w' and w'' */
        double w1 = e->axis_turns && b->n_turn > 0 ? 1.0 / b->length_m
                    : e->axis_cranks               ? v.q1
                                                   : 0.0;
        double w2 = e->axis_cranks ? v.q2 : 0.0;
        return v.u2 + 2.0 * v.u1 * w1 + w1 * w1 + w2;
    }
    }
}

static double room_of(const lwi_limit_entry *e)
{
    double low = e->range.has_low ? e->value - e->range.low : INFINITY;
    double high = e->range.has_high ? e->range.high - e->value : INFINITY;
    return fmax(fmin(low, high), 0.0);
}

static bool inside(const lwi_limit_entry *e, const lwi_distance_work *w, const lwi_rod_at *at,
                   double r)
{
    const lwi_ball *b = w->ball;
    double m_length = b->length_m;
    if (e->bend == LWI_BEND_ARM) {
        double turn[6];
        return lwi_ball_arm_turns(turn, &w->arm, r) && e->factor * turn[e->rod] <= room_of(e);
    }
    double unit = e->factor * SLOPE_OFF * (1.0 + 1.0 / m_length);
    double bend = bend_within(e, b, at, r);
    return (e->steep * (1.0 + SLOPE_OFF) + unit) * r + 0.5 * bend * r * r <= room_of(e);
}

/* ---- the nearest ----------------------------------------------------------------------------- */

/* Newton along the entry's own slope to where it crosses `to`. */
static bool crossing(double *y, const lw_model *m, const lwi_limit_entry *e, double to,
                     lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    double slope[LWI_BALL_DIRS];
    double value = e->value;
    lwi_pace pace = {.known = false};
    size_t n = w->ball->n_dir;
    size_t index = (size_t)(e - w->entry);
    memset(y, 0, LWI_BALL_DIRS * sizeof *y);
    memcpy(slope, e->slope, sizeof slope);
    for (int s = 0; s < 20; s++) {
        double square = 0.0;
        double along = 0.0;
        double z[LWI_BALL_DIRS] = {0};
        double h = SLOPE_STEP * m->length_m;
        for (size_t k = 0; k < n; k++) {
            square += slope[k] * slope[k];
            along += slope[k] * y[k];
        }
        if (!(square > 0.0)) {
            return false;
        }
        double step = 0.0;
        for (size_t k = 0; k < n; k++) {
            z[k] = (along + to - value) / square * slope[k] - y[k];
            step += z[k] * z[k];
        }
        step = sqrt(step);
        bool close = step < 1e-6 * m->length_m;
        double share = close ? 1.0 : fmin(lwi_pace_stride(&pace, z, n), m->length_m / step);
        bool solved = false;
        for (int half = 0; half < 6 && !solved; half++, share *= 0.5) {
            for (size_t k = 0; k < n; k++) {
                w->probe[0][k] = y[k] + share * z[k];
            }
            solved = values_at(w->plus, m, w->probe[0], work);
        }
        if (!solved) {
            return false;
        }
        memcpy(y, w->probe[0], n * sizeof *y);
        value = w->plus[index];
        if (close) {
            return true;
        }
        for (size_t k = 0; k < n; k++) {
            memcpy(w->probe[1], y, n * sizeof *y);
            w->probe[1][k] += h;
            if (!values_at(w->plus, m, w->probe[1], work)) {
                return false;
            }
            w->probe[1][k] -= 2.0 * h;
            if (!values_at(w->minus, m, w->probe[1], work)) {
                return false;
            }
            slope[k] = (w->plus[index] - w->minus[index]) / (2.0 * h);
        }
    }
    return false;
}

/* The value at z, followed along the straight way there; false where that is not sure. */
static bool value_along(double *value, const lw_model *m, const lwi_limit_entry *e, const double *z,
                        lw_work *work)
{
    enum { PARTS = 8 };
    lwi_distance_work *w = work->distance_work;
    *value = e->value;
    for (int part = e->period > 0.0 ? 1 : PARTS; part <= PARTS; part++) {
        double y[LWI_BALL_DIRS] = {0};
        for (size_t k = 0; k < w->ball->n_dir; k++) {
            y[k] = z[k] * part / PARTS;
        }
        const lw_solution *sol = lwi_distance_solve(m, y, work);
        if (sol == NULL) {
            return false;
        }
        double next = followed(e, value_of(m, e, sol), *value);
        if (e->period > 0.0 && fabs(next - *value) > 0.2 * e->period) {
            return false;
        }
        *value = next;
    }
    return true;
}

/* Beyond y the posture breaks the limit of the entry; y moves there. */
static double confirmed(double *y, lw_limit *limit, const lw_model *m, const lwi_limit_entry *e,
                        lw_work *work)
{
    const lwi_ball *b = work->distance_work->ball;
    for (double over = 1e-8; over < 2e-3; over *= 10.0) {
        double z[LWI_BALL_DIRS] = {0};
        double size = 0.0;
        double value;
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = y[k] * (1.0 + over);
            size += z[k] * z[k];
        }
        if (!value_along(&value, m, e, z, work) || (b->n_rod > 0 && !lwi_ball_way(b, z))) {
            continue;
        }
        double beyond = fmax(e->range.has_low ? e->range.low - value : -INFINITY,
                             e->range.has_high ? value - e->range.high : -INFINITY);
        if (beyond > LWI_LIMIT_SLACK) {
            bool cone = e->part >= LW_PART_CONE;
            *limit = (lw_limit){.of = e->of,
                                .index = e->index,
                                .part = e->part,
                                .value = value,
                                .range = e->range,
                                .over = beyond};
            if (cone) { /* told as an angle */
                limit->value = acos(fmin(fmax(value, -1.0), 1.0));
                limit->range = (lw_range){.has_high = true, .high = acos(e->range.low)};
                limit->over = limit->value - limit->range.high;
            }
            memcpy(y, z, b->n_dir * sizeof *y);
            return sqrt(size);
        }
    }
    return INFINITY;
}

static void nearest_limit(lw_distance_side *out, const lw_model *m, lw_work *work)
{
    enum { TRIES = 10 };
    lwi_distance_work *w = work->distance_work;
    double best[LWI_BALL_DIRS] = {0};
    double most = INFINITY;
    for (int t = 0; t < TRIES; t++) {
        /* the next by what its slope alone says */
        size_t pick = SIZE_MAX;
        double least = INFINITY;
        for (size_t i = 0; i < w->n_entry; i++) {
            double far = room_of(&w->entry[i]) / w->entry[i].steep;
            if (!w->entry[i].tried && far < least) {
                least = far;
                pick = i;
            }
        }
        if (pick == SIZE_MAX || least > 2.0 * most) {
            break;
        }
        w->entry[pick].tried = true;
        const lwi_limit_entry *e = &w->entry[pick];
        double y[LWI_BALL_DIRS];
        lw_limit limit;
        bool low = e->range.has_low &&
                   (!e->range.has_high || e->value - e->range.low < e->range.high - e->value);
        if (!crossing(y, m, e, low ? e->range.low : e->range.high, work)) {
            continue;
        }
        double size = confirmed(y, &limit, m, e, work);
        if (size < most) {
            most = size;
            out->limit = limit;
            memcpy(best, y, sizeof best);
        }
    }
    if (most < INFINITY) {
        lwi_distance_take(out, m, best, most, work);
    }
}

void lwi_distance_limits(lw_distance_side *out, const lw_model *m, const lw_solution *sol,
                         lw_work *work)
{
    const double zero[LWI_BALL_DIRS] = {0};
    lwi_distance_work *w = work->distance_work;
    const lwi_ball *b = w->ball;
    lwi_rod_at at[LWI_BALL_RODS];
    list_entries(w, m);
    if (w->n_entry == 0) {
        out->none = true;
        return;
    }
    if (!w->explicit_inverse || !slopes(m, sol, work)) {
        return;
    }
    nearest_limit(out, m, work);
    (void)lwi_ball_rods(at, b, zero);
    double least = out->known_most ? out->at_most_m : 40.0 * m->length_m;
    for (size_t i = 0; i < w->n_entry; i++) {
        double low = 0.0;
        double high = least;
        if (inside(&w->entry[i], w, at, least)) {
            continue;
        }
        for (int s = 0; s < 30; s++) {
            double r = 0.5 * (low + high);
            bool good = inside(&w->entry[i], w, at, r);
            low = good ? r : low;
            high = good ? high : r;
        }
        least = low;
    }
    /* Where some quantity is not bounded here, what the closure rows told may be more. */
    out->at_least_m = out->known_least ? fmax(out->at_least_m, least) : least;
    out->known_least = out->at_least_m > 0.0;
}
