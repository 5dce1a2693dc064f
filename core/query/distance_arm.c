/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Nearest inverse singularities of the arm with a spherical wrist.
 *
 * Shoulder and elbow: least |y| where the wrist centre is at the distance that makes them singular,
 * by the iteration of distance_most.c, proved by the formula having no solution just beyond. Wrist:
 * for each place of the wrist centre the sixth axis is turned onto the nearest singular direction
 * about the fourth, the shortest way and with a further turn about the fourth; over these four
 * numbers the least distance by a pattern search (Hooke & Jeeves 1961, from memory). Such a posture
 * is singular by its making, so nothing is left to prove. */
#include "distance.h"

#include "../math/tol.h"
#include "../math/vec3.h"

#include <stdint.h>

#define CLOSE 1e-6

typedef struct wrist_search {
    const lw_model *m;
    lw_work *work;
    const lwi_ball_arm *arm;
    double goal_rad;
    double y[LWI_BALL_DIRS]; /* of the last evaluation */
} wrist_search;

static double size_of(const double *y)
{
    double sum = 0.0;
    for (size_t k = 0; k < LWI_BALL_DIRS; k++) {
        sum += y[k] * y[k];
    }
    return sqrt(sum);
}

/* The tool's rotation vector and place as numbers of the ball's directions. */
static void to_directions(double *y, const lwi_ball *b, const double shift[3], const double turn[3])
{
    for (size_t k = 0; k < b->n_dir; k++) {
        y[k] = lwi_dot(b->shift[k], shift) + b->length_m * b->length_m * lwi_dot(b->turn[k], turn);
    }
}

/* Distance of the singular posture with the wrist centre moved by x[0..2] and a further turn of
 * x[3]; INFINITY where there is none. */
static double wrist_distance(wrist_search *s, const double x[4])
{
    const lwi_ball *b = s->work->distance_work->ball;
    const lwi_ball_arm *a = s->arm;
    double y[LWI_BALL_DIRS];
    double fourth[3];
    double n[3];
    double r1[9];
    double r2[9];
    double rot[9];
    double w[3];
    double arm[3];
    static const double none[3] = {0, 0, 0};
    to_directions(y, b, x, none);
    const lw_solution *sol = lwi_distance_solve(s->m, y, s->work);
    if (sol == NULL) {
        return INFINITY;
    }
    lwi_rot_apply(fourth, sol->config.body[s->m->limb[a->limb].chain[2].next].rot,
                  s->m->spec->joint[a->joint[3]].axis);
    lwi_cross(n, fourth, a->sixth);
    double angle = atan2(lwi_norm(n), lwi_dot(fourth, a->sixth));
    if (!lwi_unit(n, n)) {
        double unused[3];
        lwi_perpendicular(n, unused, fourth);
    }
    lwi_rot_axis(r1, n, s->goal_rad - angle);
    lwi_rot_axis(r2, fourth, x[3]);
    lwi_rot_mul(rot, r2, r1);
    lwi_rot_log(w, rot);
    lwi_rot_apply(arm, rot, a->arm_m);
    double shift[3];
    for (int i = 0; i < 3; i++) {
        shift[i] = x[i] + a->arm_m[i] - arm[i];
    }
    to_directions(s->y, b, shift, w);
    return size_of(s->y);
}

static double wrist_nearest(double *y, wrist_search *s)
{
    enum { TURNS = 60 };
    double x[4] = {0, 0, 0, 0};
    double step = 0.1 * s->arm->length_m;
    double best = wrist_distance(s, x);
    memcpy(y, s->y, sizeof s->y);
    for (int t = 0; t < TURNS && best < INFINITY && step > 1e-4 * s->arm->length_m; t++) {
        double before[4];
        bool better = false;
        memcpy(before, x, sizeof before);
        for (size_t k = 0; k < 4; k++) {
            for (int sign = -1; sign <= 1; sign += 2) {
                double trial[4];
                memcpy(trial, x, sizeof trial);
                trial[k] += sign * (k < 3 ? step : step / s->arm->length_m);
                double d = wrist_distance(s, trial);
                if (d < best) {
                    best = d;
                    memcpy(x, trial, sizeof x);
                    memcpy(y, s->y, sizeof s->y);
                    better = true;
                    break;
                }
            }
        }
        double ahead[4];
        for (size_t k = 0; k < 4; k++) {
            ahead[k] = 2.0 * x[k] - before[k];
        }
        double d = better ? wrist_distance(s, ahead) : INFINITY;
        if (d < best) {
            best = d;
            memcpy(x, ahead, sizeof x);
            memcpy(y, s->y, sizeof s->y);
        }
        step *= better ? 1.0 : 0.4;
    }
    return best;
}

/* What is left until the wrist centre's distance makes the arm singular: 0 shoulder, 1 stretched, 2
 * folded; and how the distance grows with the wrist centre. */
static double room_of(double grows[3], const lwi_ball_arm *a, const lwi_arm_place *p, int which)
{
    const double *from = which == 0 ? p->radius_grows : p->reach_grows;
    lwi_copy3(grows, from);
    return which == 0   ? p->radius_m - a->aside_m
           : which == 1 ? p->reach_m - (a->upper_m + a->fore_m)
                        : p->reach_m - fabs(a->upper_m - a->fore_m);
}

static double place_nearest(double *y, const lwi_ball *b, const lwi_ball_arm *a, int which)
{
    enum { STEPS = 40 };
    memset(y, 0, LWI_BALL_DIRS * sizeof *y);
    double share = 1.0;
    double last = INFINITY;
    for (int s = 0; s < STEPS; s++) {
        lw_frame tool;
        lwi_arm_place p;
        double rot[9];
        double arm[3];
        double wrist[3];
        double grows[3];
        double slope[LWI_BALL_DIRS];
        double square = 0.0;
        double along = 0.0;
        double step = 0.0;
        lwi_ball_pose(&tool, b, y);
        double back[3];
        lwi_rot_back(back, b->tool.rot, a->arm_m);
        memcpy(rot, tool.rot, sizeof rot);
        lwi_rot_apply(arm, rot, back);
        lwi_add(wrist, tool.pos_m, arm);
        lwi_ball_arm_place(&p, a, wrist);
        double off = room_of(grows, a, &p, which);
        /* Turns are about the posture's own coordinates; near enough to steer by, and the end is
         * judged by itself. */
        for (size_t k = 0; k < b->n_dir; k++) {
            double v[3];
            lwi_cross(v, b->turn[k], arm);
            lwi_add(v, v, b->shift[k]);
            slope[k] = lwi_dot(grows, v);
            square += slope[k] * slope[k];
            along += slope[k] * y[k];
        }
        if (!(square > 1e-12)) {
            return INFINITY;
        }
        for (size_t k = 0; k < b->n_dir; k++) {
            slope[k] = (along - off) / square * slope[k] - y[k];
            step += slope[k] * slope[k];
        }
        step = sqrt(step);
        if (step > 0.8 * last) {
            share = fmax(0.5 * share, 0.1);
        }
        last = step;
        double part = fmin(share, 0.7 * b->length_m / step);
        bool close = step < CLOSE * b->length_m;
        for (size_t k = 0; k < b->n_dir; k++) {
            y[k] += (close ? 1.0 : part) * slope[k];
        }
        if (close) {
            return size_of(y);
        }
    }
    return INFINITY;
}

/* Beyond y the wrist centre has passed the distance. */
static double passed(double *y, const lwi_ball *b, const lwi_ball_arm *a, int which)
{
    for (double over = 1e-10; over < 2e-4; over *= 10.0) {
        lw_frame tool;
        lwi_arm_place p;
        double z[LWI_BALL_DIRS];
        double back[3];
        double arm[3];
        double unused[3];
        for (size_t k = 0; k < b->n_dir; k++) {
            z[k] = y[k] * (1.0 + over);
        }
        lwi_ball_pose(&tool, b, z);
        lwi_rot_back(back, b->tool.rot, a->arm_m);
        lwi_rot_apply(arm, tool.rot, back);
        lwi_add(arm, arm, tool.pos_m);
        lwi_ball_arm_place(&p, a, arm);
        double off = room_of(unused, a, &p, which);
        if (which == 1 ? off > 1e-13 : off < -1e-13) {
            memcpy(y, z, sizeof z);
            return size_of(y);
        }
    }
    return INFINITY;
}

void lwi_distance_arm_most(lw_distance_side *out, const lw_model *m, lw_work *work)
{
    lwi_distance_work *w = work->distance_work;
    const lwi_ball *b = w->ball;
    const lwi_ball_arm *a = &w->arm;
    double best[LWI_BALL_DIRS] = {0};
    double most = INFINITY;
    double inner = 1.0;
    for (int which = 0; which < 3; which++) {
        double y[LWI_BALL_DIRS] = {0};
        if ((which == 0 && !(a->aside_m > 1e-9)) ||
            (which == 2 && !(fabs(a->upper_m - a->fore_m) > 1e-9))) {
            /* A wrist centre that reaches the axis itself, or folds onto itself, does not go past
             * it: the posture is the singular one. */
            double d = place_nearest(y, b, a, which);
            if (d < most && d < 3.14 * b->length_m) {
                most = d * (1.0 + 1e-6);
                inner = 1.0 - 1e-6;
                memcpy(best, y, sizeof best);
            }
            continue;
        }
        if (place_nearest(y, b, a, which) < 3.14 * b->length_m) {
            double d = passed(y, b, a, which);
            if (d < most) {
                most = d;
                inner = 1.0 - 1e-5;
                memcpy(best, y, sizeof best);
            }
        }
    }
    wrist_search s = {.m = m, .work = work, .arm = a};
    for (int end = 0; end < 2; end++) {
        double y[LWI_BALL_DIRS] = {0};
        s.goal_rad = end == 0 ? a->least_rad : a->most_rad;
        double d = wrist_nearest(y, &s);
        if (d < most) {
            most = d * (1.0 + 1e-12);
            inner = 1.0;
            memcpy(best, y, sizeof best);
        }
    }
    if (most < INFINITY) {
        for (size_t k = 0; k < b->n_dir; k++) {
            best[k] *= inner;
        }
        out->limb = a->limb;
        lwi_distance_take(out, m, best, most, work);
    }
}
