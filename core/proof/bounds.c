/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Limits on a whole interval: drives, joints, rods, cones and swivels, as query/finish.c judges
 * them at one posture. The travel margin comes along. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "prove.h"

static bool within(lwi_prove *p, double lo, double hi, const lw_range *range)
{
    if (range->has_low && range->has_high && range->high > range->low) {
        double room = fmin(lo - range->low, range->high - hi);
        double share = room / (range->high - range->low) - 1e-15;
        double *least = &p->low[LW_MARGIN_TRAVEL];
        *least = share < *least ? fmax(share, 0.0) : *least;
    }
    return (!range->has_low || lo >= range->low - LWI_LIMIT_SLACK) &&
           (!range->has_high || hi <= range->high + LWI_LIMIT_SLACK);
}

static bool model_within(lwi_prove *p, lwi_pm a, const lw_range *range)
{
    double lo;
    double hi;
    lwi_pm_range(a, &lo, &hi);
    return within(p, lo, hi, range);
}


/* The angle whose cosine and sine are given, unwrapped next to its value at the interval's start:
 * seen from its value in the middle it stays within a right angle, and its sine tells how far it
 * goes. */
static bool angle_range(double *lo, double *hi, double *end, lwi_pm c, lwi_pm s, double start)
{
    const double whole = 6.283185307179586476925;
    double low;
    double high;
    double mid = atan2(lwi_pm_value(s, 0.0), lwi_pm_value(c, 0.0));
    double k = cos(mid);
    double l = sin(mid);
    lwi_pm sine = lwi_pm_axpy(lwi_pm_scale(s, k), -l, c);
    lwi_pm cosine = lwi_pm_axpy(lwi_pm_scale(c, k), l, s);
    mid += whole * round((start - mid) / whole);
    lwi_pm_range(cosine, &low, &high);
    if (!(low > 0.0)) {
        return false;
    }
    lwi_pm_range(sine, &low, &high);
    if (!(low > -1.0 && high < 1.0)) {
        return false;
    }
    *lo = mid + asin(low) - 1e-14;
    *hi = mid + asin(high) + 1e-14;
    *end = mid + atan2(lwi_pm_value(sine, 1.0), lwi_pm_value(cosine, 1.0));
    return true;
}

static const lwi_pm_frame *frame_of(const lwi_prove *p, size_t body)
{
    return &p->eval->node[p->sys->body_node[body]];
}

/* The shift of the joint's point along an axis of its first body. */
static lwi_pm slide_of(const lwi_prove *p, const lw_spec_joint *joint, const double axis[3])
{
    const lwi_pm_frame *a = frame_of(p, joint->body[0]);
    const lwi_pm_frame *b = frame_of(p, joint->body[1]);
    lwi_pm from[3];
    lwi_pm to[3];
    lwi_pm w[3];
    lwi_pm_place(from, a, joint->at_m);
    lwi_pm_place(to, b, joint->at_m);
    lwi_pm_rotate(w, a->rot, axis);
    for (int i = 0; i < 3; i++) {
        to[i] = lwi_pm_sub(to[i], from[i]);
    }
    return lwi_pm_dot3(to, w);
}

/* Cosine and sine of the turn that takes u (seen from a) to v (seen from b) about w. */
static void turn_of(lwi_pm *c, lwi_pm *s, const lwi_pm u[3], const lwi_pm v[3], const lwi_pm w[3])
{
    lwi_pm x[3];
    lwi_pm_cross(x, u, v);
    *c = lwi_pm_dot3(u, v);
    *s = lwi_pm_dot3(x, w);
}

/* Part k of a joint that no element carries. */
static bool cut_within(lwi_prove *p, const lw_spec_joint *joint, size_t part, size_t coord)
{
    const lw_range *range = &joint->range[part];
    const lwi_pm_frame *a = frame_of(p, joint->body[0]);
    const lwi_pm_frame *b = frame_of(p, joint->body[1]);
    double e1[3];
    double e2[3];
    lwi_pm u[3];
    lwi_pm v[3];
    lwi_pm w[3];
    lwi_pm c;
    lwi_pm s;
    double lo;
    double hi;
    if (joint->type == LW_PRISMATIC || (joint->type == LW_CYLINDRICAL && part == 1)) {
        return model_within(p, slide_of(p, joint, joint->axis), range);
    }
    if (joint->type == LW_PLANAR && part < 2) {
        lwi_cross(e1, joint->axis, joint->second_axis);
        return model_within(p, slide_of(p, joint, part == 0 ? joint->second_axis : e1), range);
    }
    if (joint->type == LW_HELICAL) {
        if (!(fabs(joint->lead_m) > 0.0)) {
            return false;
        }
        lwi_pm slide = slide_of(p, joint, joint->axis);
        return model_within(p, lwi_pm_scale(slide, 6.283185307179586476925 / joint->lead_m), range);
    }
    if (joint->type == LW_UNIVERSAL) {
        lwi_pm_rotate(w, a->rot, joint->axis);
        lwi_pm_rotate(v, b->rot, joint->second_axis);
        lwi_pm_rotate(u, a->rot, joint->second_axis);
        if (part == 1) {
            /* About the second axis, from the first axis as the second body sees it. */
            lwi_pm_rotate(u, b->rot, joint->axis);
            turn_of(&c, &s, u, w, v);
            s = lwi_pm_neg(s);
        } else {
            turn_of(&c, &s, u, v, w);
        }
    } else {
        lwi_perpendicular(e1, e2, joint->axis);
        lwi_pm_rotate(w, a->rot, joint->axis);
        lwi_pm_rotate(u, a->rot, e1);
        lwi_pm_rotate(v, b->rot, e1);
        turn_of(&c, &s, u, v, w);
    }
    return angle_range(&lo, &hi, &p->coord_right[coord], c, s, p->coord_left[coord]) &&
           within(p, lo, hi, range);
}

static bool bounded(const lw_range *range)
{
    return range->has_low || range->has_high;
}

/* Cosine of the angle between unit vectors a and b (length |b|: len) against the cone. */
static bool cone_within(const lwi_pm a[3], const lwi_pm b[3], const lwi_pm *len, double cone_rad)
{
    double lo;
    double hi;
    double angle = cone_rad + LWI_LIMIT_SLACK;
    double least = angle < 3.14159265358979 ? cos(angle) + 1e-15 : -2.0;
    lwi_pm along = lwi_pm_dot3(a, b);
    if (len != NULL) {
        along = lwi_pm_axpy(along, -least, *len);
        least = 0.0;
    }
    lwi_pm_range(along, &lo, &hi);
    return lo >= least;
}

static bool ball_within(const lwi_prove *p, const lw_spec_joint *joint)
{
    lwi_pm a[3];
    lwi_pm b[3];
    lwi_pm_rotate(a, frame_of(p, joint->body[0])->rot, joint->cone_axis);
    lwi_pm_rotate(b, frame_of(p, joint->body[1])->rot, joint->stud_axis);
    return cone_within(a, b, NULL, joint->cone_rad);
}

static bool joint_within(lwi_prove *p, size_t j, size_t first)
{
    const lw_spec_joint *joint = &p->model->spec->joint[j];
    size_t n = lw_joint_coords(joint->type);
    bool carried = n > 0;
    for (size_t k = 0; k < n; k++) {
        carried = carried && p->sys->coord_element[first + k] >= 0;
    }
    for (size_t k = 0; k < n; k++) {
        if (carried) {
            lwi_pm value = p->point->value[p->sys->coord_element[first + k]];
            p->coord_right[first + k] = lwi_pm_value(value, 1.0);
            if (bounded(&joint->range[k]) && !model_within(p, value, &joint->range[k])) {
                return false;
            }
        } else if (bounded(&joint->range[k]) && !cut_within(p, joint, k, first + k)) {
            return false;
        }
    }
    return joint->type != LW_SPHERICAL || !joint->has_cone || ball_within(p, joint);
}

/* Length of a rod that may move, and where its ends look. */
static bool rod_within(lwi_prove *p, size_t r)
{
    const lw_spec_rod *rod = &p->model->spec->rod[r];
    bool swivels = rod->swivel[0].present || rod->swivel[1].present;
    lwi_pm length = lwi_pm_const(p->sys->rod[r].length_m);
    lwi_pm a[3];
    lwi_pm b[3];
    if (!swivels && (p->sys->rod[r].fixed || !bounded(&rod->range_m))) {
        return true;
    }
    const lwi_pm_frame *xa = frame_of(p, rod->body[0]);
    const lwi_pm_frame *xb = frame_of(p, rod->body[1]);
    lwi_pm_place(a, xa, rod->end_m[0]);
    lwi_pm_place(b, xb, rod->end_m[1]);
    for (int i = 0; i < 3; i++) {
        b[i] = lwi_pm_sub(b[i], a[i]);
    }
    if (!p->sys->rod[r].fixed) {
        length = lwi_pm_sqrt(lwi_pm_dot3(b, b));
    }
    if (bounded(&rod->range_m) && !model_within(p, length, &rod->range_m)) {
        return false;
    }
    for (size_t e = 0; e < 2 && swivels; e++) {
        if (!rod->swivel[e].present) {
            continue;
        }
        double axis[3];
        for (int i = 0; i < 3; i++) { /* the rod leaves its second end backwards */
            axis[i] = e == 0 ? rod->swivel[e].axis[i] : -rod->swivel[e].axis[i];
        }
        lwi_pm_rotate(a, e == 0 ? xa->rot : xb->rot, axis);
        if (!cone_within(a, b, &length, rod->swivel[e].cone_rad)) {
            return false;
        }
    }
    return true;
}

bool lwi_bounds_hold(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    size_t coord = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        if (!joint_within(p, j, coord)) {
            return false;
        }
        coord += lw_joint_coords(spec->joint[j].type);
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        if (!rod_within(p, r)) {
            return false;
        }
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        lwi_pm_range(p->drive[d], &p->drive_low[d], &p->drive_high[d]);
        if (!within(p, p->drive_low[d], p->drive_high[d], &spec->drive[d].range)) {
            return false;
        }
    }
    return true;
}
