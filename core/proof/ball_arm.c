/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Bounds for the arm with a spherical wrist. With r the wrist centre's distance from the first
 * axis, d that of its plane, x = sqrt(r^2 - d^2) its way out and D its distance from the second
 * axis, a step of the wrist centre of 1 changes r by at most 1, x and D by g = r / x, the first
 * joint by 1 / x, upper arm and forearm in their plane by g / (l1 s) and g / (l2 s), s the sine at
 * the elbow (law of cosines). The forearm's turn is that of the first joint and that in the plane,
 * which are square to each other, and where d = 0 answer to steps that are square to each other as
 * well. The fourth axis turns with the forearm, the sixth with the tool. */
#include "ball_arm.h"

#include "../math/vec3.h"

#include <stdint.h>

#define UP (1.0 + 1e-9)

static double angle_of(const double a[3], const double b[3])
{
    double c[3];
    lwi_cross(c, a, b);
    return atan2(lwi_norm(c), lwi_dot(a, b));
}

static bool wrist_centre(double at[3], const lw_spec *spec, const lwi_limb *limb)
{
    const lw_spec_joint *j4 = &spec->joint[limb->chain[3].joint];
    const lw_spec_joint *j5 = &spec->joint[limb->chain[4].joint];
    double n[3];
    double d[3];
    double t[3];
    lwi_cross(n, j4->axis, j5->axis);
    double s = lwi_dot(n, n);
    if (s < 1e-12) {
        return false;
    }
    lwi_sub(d, j5->at_m, j4->at_m);
    lwi_cross(t, d, j5->axis);
    lwi_axpy(at, j4->at_m, lwi_dot(t, n) / s, j4->axis);
    return true;
}

static bool own_drives(const lw_model *m, const lwi_ball_arm *arm)
{
    const lw_spec *spec = m->spec;
    for (size_t k = 0; k < 6; k++) {
        size_t coord = lw_spec_joint_coord(spec, arm->joint[k], 0);
        bool found = false;
        for (size_t d = 0; d < spec->n_drive; d++) {
            found = found || (spec->drive[d].n_term == 1 && spec->drive[d].term[0].coord == coord &&
                              spec->drive[d].term[0].factor != 0.0);
        }
        if (!found) {
            return false;
        }
    }
    return true;
}

static double in_plane(const double v[3], const double y[3])
{
    double h[3];
    lwi_axpy(h, v, -lwi_dot(v, y), y);
    return lwi_norm(h);
}

bool lwi_ball_arm_make(lwi_ball_arm *a, const lw_model *m, const lw_spec_tool *tool,
                       const lw_solution *sol)
{
    const lw_spec *spec = m->spec;
    memset(a, 0, sizeof *a);
    if (m->n_limb != 1 || m->limb[0].kind != LW_LIMB_WRIST_ARM || m->n_propagate > 0 ||
        spec->n_rod > 0 || spec->n_coupling > 0 || m->completion.rot != LWI_ROT_FULL) {
        return false;
    }
    const lwi_limb *limb = &m->limb[0];
    if (m->fused[limb->anchor[0]] != m->fused[spec->frame] ||
        m->fused[limb->anchor[1]] != m->fused[tool->body]) {
        return false;
    }
    double w[3];
    double d[3];
    if (!wrist_centre(w, spec, limb)) {
        return false;
    }
    for (size_t k = 0; k < 6; k++) {
        a->joint[k] = limb->chain[k].joint;
    }
    const lw_spec_joint *j1 = &spec->joint[a->joint[0]];
    const lw_spec_joint *j2 = &spec->joint[a->joint[1]];
    const lw_spec_joint *j3 = &spec->joint[a->joint[2]];
    double x[3];
    lwi_cross(x, j2->axis, j1->axis);
    a->length_m = m->length_m;
    lwi_copy3(a->axis, j1->axis);
    lwi_copy3(a->at, j1->at_m);
    lwi_sub(d, w, j1->at_m);
    a->aside_m = fabs(lwi_dot(d, j2->axis));
    lwi_sub(d, j2->at_m, j1->at_m);
    a->out_m = lwi_dot(d, x);
    a->height_m = lwi_dot(d, j1->axis);
    lwi_sub(d, j3->at_m, j2->at_m);
    a->upper_m = in_plane(d, j2->axis);
    lwi_sub(d, w, j3->at_m);
    a->fore_m = in_plane(d, j2->axis);
    const lw_frame *fore = &sol->config.body[limb->chain[2].next];
    const lw_frame *first = &sol->config.body[limb->chain[0].next];
    lwi_frame_apply(a->wrist_m, fore, w);
    lwi_sub(a->arm_m, a->wrist_m, sol->tool.pos_m);
    lwi_rot_apply(a->fourth, fore->rot, spec->joint[a->joint[3]].axis);
    lwi_rot_apply(a->sixth, sol->config.body[limb->chain[4].next].rot,
                  spec->joint[a->joint[5]].axis);
    lwi_rot_apply(d, first->rot, x);
    lwi_sub(w, a->wrist_m, j1->at_m);
    a->side = lwi_dot(d, w) < 0.0 ? -1.0 : 1.0;
    double first_bend = angle_of(spec->joint[a->joint[3]].axis, spec->joint[a->joint[4]].axis);
    double second_bend = angle_of(spec->joint[a->joint[4]].axis, spec->joint[a->joint[5]].axis);
    const double pi = 3.14159265358979323846;
    a->least_rad = fabs(first_bend - second_bend);
    a->most_rad = fmin(first_bend + second_bend, 2.0 * pi - first_bend - second_bend);
    a->square = fabs(first_bend - 0.5 * pi) < 1e-9 && fabs(second_bend - 0.5 * pi) < 1e-9;
    a->all_driven = own_drives(m, a);
    return true;
}

void lwi_ball_arm_place(lwi_arm_place *p, const lwi_ball_arm *a, const double wrist[3])
{
    double d[3];
    double h[3];
    lwi_sub(d, wrist, a->at);
    double height = lwi_dot(d, a->axis) - a->height_m;
    lwi_axpy(h, d, -lwi_dot(d, a->axis), a->axis);
    p->radius_m = lwi_norm(h);
    double square = p->radius_m * p->radius_m - a->aside_m * a->aside_m;
    p->real = square > 0.0;
    p->out_m = a->side * sqrt(fmax(square, 0.0));
    double along = p->out_m - a->out_m;
    p->reach_m = hypot(along, height);
    for (int i = 0; i < 3; i++) {
        p->radius_grows[i] = p->radius_m > 0.0 ? h[i] / p->radius_m : 0.0;
        double out = p->out_m != 0.0 ? h[i] / p->out_m : 0.0;
        p->reach_grows[i] = (along * out + height * a->axis[i]) / p->reach_m;
    }
}

typedef struct arm_rates {
    double first, upper, elbow, turn; /* rad per m of the wrist centre */
} arm_rates;

/* Bounds over all places of the wrist centre within d; false where shoulder or elbow may become
 * singular. */
static bool rates_within(arm_rates *out, const lwi_ball_arm *a, const lwi_arm_place *p, double d)
{
    double radius = p->radius_m - d * UP;
    if (!(radius > a->aside_m)) {
        return false;
    }
    double x = sqrt(radius * radius - a->aside_m * a->aside_m);
    double g = radius / x;
    double low = p->reach_m - g * d * UP;
    double high = p->reach_m + g * d * UP;
    double l1 = a->upper_m;
    double l2 = a->fore_m;
    if (!(low > fabs(l1 - l2)) || !(high < l1 + l2)) {
        return false;
    }
    double c0 = (low * low - l1 * l1 - l2 * l2) / (2.0 * l1 * l2);
    double c1 = (high * high - l1 * l1 - l2 * l2) / (2.0 * l1 * l2);
    double s = sqrt(fmax(fmin(1.0 - c0 * c0, 1.0 - c1 * c1), 0.0));
    if (!(s > 0.0)) {
        return false;
    }
    out->first = UP / x;
    out->upper = UP * g / (l1 * s);
    out->elbow = UP * g * high / (l1 * l2 * s);
    double fore = UP * g / (l2 * s);
    out->turn = a->aside_m > 0.0 ? hypot(out->first, fore) : fmax(out->first, fore);
    return true;
}

/* How far the forearm turns, at most, on a way of the wrist centre of length d. */
static bool fore_turn(double *out, const lwi_ball_arm *a, const lwi_arm_place *p, double d)
{
    enum { PARTS = 6 };
    arm_rates r;
    *out = 0.0;
    for (int i = 1; i <= PARTS; i++) {
        if (!rates_within(&r, a, p, d * i / PARTS)) {
            return false;
        }
        *out += r.turn * d / PARTS;
    }
    return true;
}

/* The angle between fourth and sixth axis changes by less than `room` on any way of length r. */
static bool wrist_holds(const lwi_ball_arm *a, const lwi_arm_place *p, double r, double room)
{
    enum { SLICES = 12 };
    double lever = lwi_norm(a->arm_m) / a->length_m;
    for (int q = 0; q < SLICES; q++) {
        double low = (double)q / SLICES;
        double high = (double)(q + 1) / SLICES;
        double turn = high * r / a->length_m;
        double moved = (sqrt(1.0 - low * low) + high * lever) * r;
        double fore;
        if (!fore_turn(&fore, a, p, fmin(moved, r * hypot(1.0, lever)) * UP) ||
            !((turn + fore) * UP < room)) {
            return false;
        }
    }
    return true;
}

static bool holds(const lwi_ball_arm *a, const lwi_arm_place *p, double r)
{
    arm_rates unused;
    double lever = lwi_norm(a->arm_m) / a->length_m;
    double angle = angle_of(a->fourth, a->sixth);
    return rates_within(&unused, a, p, r * hypot(1.0, lever) * UP) &&
           wrist_holds(a, p, r, fmin(angle - a->least_rad, a->most_rad - angle));
}

double lwi_ball_arm_once(const lwi_ball_arm *a, double most_m)
{
    lwi_arm_place p;
    double low = 0.0;
    double high = fmin(most_m, 3.14 * a->length_m);
    lwi_ball_arm_place(&p, a, a->wrist_m);
    if (!p.real) {
        return 0.0;
    }
    if (holds(a, &p, high)) {
        return high;
    }
    for (int i = 0; i < 26; i++) {
        double r = 0.5 * (low + high);
        bool good = holds(a, &p, r);
        low = good ? r : low;
        high = good ? high : r;
    }
    return low;
}

bool lwi_ball_arm_turns(double turn[6], const lwi_ball_arm *a, double r)
{
    enum { PARTS = 6 };
    lwi_arm_place p;
    double lever = lwi_norm(a->arm_m) / a->length_m;
    double reach = hypot(1.0, lever) * UP;
    double room = angle_of(a->fourth, a->sixth);
    double changed = 0.0;
    lwi_ball_arm_place(&p, a, a->wrist_m);
    for (size_t k = 0; k < 6; k++) {
        turn[k] = 0.0;
    }
    for (int i = 1; i <= PARTS && a->square; i++) {
        arm_rates v;
        double part = r / PARTS;
        if (!rates_within(&v, a, &p, reach * r * i / PARTS)) {
            return false;
        }
        double relative = UP * (1.0 / a->length_m + v.turn * reach);
        changed += relative * part;
        double s = fmin(sin(fmin(fmax(room - changed, 0.0), 1.57)),
                        sin(fmax(fmin(room + changed, 3.14159265358979), 1.57)));
        if (!(s > 1e-9)) {
            return false;
        }
        turn[0] += v.first * reach * part;
        turn[1] += v.upper * reach * part;
        turn[2] += v.elbow * reach * part;
        turn[3] += relative / s * part;
        turn[4] += relative * part;
        turn[5] += relative / s * part;
    }
    return a->square;
}
