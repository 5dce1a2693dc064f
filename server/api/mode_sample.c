/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tool poses around home and the modes that reach them. */
#include "mode_sample.h"

#include <stdint.h>
#include <string.h>

#include <leeway/query.h>

const char lwd_mode_sample_how[] =
    "tool poses drawn evenly around the home posture, in four nested boxes of up to 1.5 "
    "characteristic lengths to each side and 90 deg about each axis; joint outputs half a turn or "
    "one characteristic length each way; a mode holds a pose if it has a solution there within "
    "all limits";

static const double BOX_LENGTHS = 1.5;
static const double BOX_TURN_RAD = 1.5707963267948966;
static const double HALF_TURN_RAD = 3.1415926535897932;
enum { BOXES = 4 };

/* The generator's whole state; a fixed sequence for a seed (splitmix64). */
typedef struct draw {
    uint64_t state;
} draw;

/* Evenly from -1 to 1. */
static double next(draw *d)
{
    uint64_t z = d->state += 0x9E3779B97F4A7C15ULL;
    z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9ULL;
    z = (z ^ (z >> 27)) * 0x94D049BB133111EBULL;
    z ^= z >> 31;
    return (double)(z >> 11) * 0x1p-52 - 1.0;
}

/* Where the boxes have their middle: the tool and the joint outputs at home. */
typedef struct middle {
    lw_frame tool;
    double coord[LW_MAX_OUTPUTS]; /* by output, joint outputs only */
} middle;

static void find_middle(middle *out, const lwd_held *held, lw_work *work)
{
    const lw_spec *spec = held->edge.spec;
    const lw_posture_answer *answer = NULL;
    memset(out, 0, sizeof *out);
    out->tool = spec->tool[0].frame;
    if (spec->home.kind == LW_BY_NOTHING
        || lw_posture(&answer, held->model, 0, NULL, &spec->home, work, NULL) != LW_OK
        || answer->solution == NULL) {
        return;
    }
    out->tool = answer->solution->tool;
    for (size_t i = 0; i < spec->n_output; i++) {
        if (spec->output[i].kind == LW_OUT_COORD) {
            out->coord[i] = answer->solution->config.coord[spec->output[i].coord];
        }
    }
}

static void multiply(double out[9], const double a[9], const double b[9])
{
    for (size_t i = 0; i < 3; i++) {
        for (size_t j = 0; j < 3; j++) {
            out[3 * i + j] = a[3 * i] * b[j] + a[3 * i + 1] * b[3 + j] + a[3 * i + 2] * b[6 + j];
        }
    }
}

/* All three turns: a turn of the middle; else the angles that are outputs. */
static void draw_turn(lw_pose_ask *pose, const middle *m, const bool output[3],
                      const double angle_rad[3])
{
    double turn[9];
    double rot[9];
    if (output[0] && output[1] && output[2]) {
        lw_rot_from_zyx(turn, angle_rad);
        multiply(rot, turn, m->tool.rot);
        pose->orient = LW_ORIENT_QUATERNION;
        lw_quat_from_rot(pose->quat, rot);
        return;
    }
    if (output[0] || output[1] || output[2]) {
        double zyx_rad[3];
        lw_zyx_from_rot(zyx_rad, m->tool.rot);
        pose->orient = LW_ORIENT_ZYX;
        for (size_t i = 0; i < 3; i++) {
            pose->has_zyx[i] = output[i];
            pose->zyx_rad[i] = zyx_rad[i] + angle_rad[i];
        }
    }
}

/* Every pose draws a number for every output, so that the sequence does not depend on them. */
static void draw_pose(lw_pose_ask *pose, draw *d, double share, const middle *m,
                      const lwd_held *held)
{
    const lwd_edge *edge = &held->edge;
    const lw_spec *spec = edge->spec;
    const double length_m = edge->report->characteristic_length_m;
    bool turns[3] = {false};
    double angle_rad[3] = {0.0};
    memset(pose, 0, sizeof *pose);
    for (size_t i = 0; i < spec->n_output; i++) {
        const lw_spec_output *o = &spec->output[i];
        double r = share * next(d);
        if (o->kind <= LW_OUT_Z) {
            size_t k = (size_t)o->kind;
            pose->has_position[k] = true;
            pose->position_m[k] = m->tool.pos_m[k] + BOX_LENGTHS * length_m * r;
        } else if (o->kind == LW_OUT_COORD) {
            size_t k = pose->n_joint++;
            double span = edge->coord_turning[o->coord] ? HALF_TURN_RAD : length_m;
            pose->joint_coord[k] = o->coord;
            pose->joint_value[k] = m->coord[i] + span * r;
        } else {
            size_t k = o->kind == LW_OUT_RZ ? 0 : o->kind == LW_OUT_RY ? 1 : 2;
            turns[k] = true;
            angle_rad[k] = BOX_TURN_RAD * r;
        }
    }
    draw_turn(pose, m, turns, angle_rad);
}

static lwd_mode_row *find_row(lwd_mode_row *row, size_t n, const lw_mode *mode)
{
    for (size_t i = 0; i < n; i++) {
        if (lw_mode_same(&row[i].mode, mode)) {
            return &row[i];
        }
    }
    return NULL;
}

static void keep_posture(lwd_mode_row *row, const lw_solution *solution, const lwd_edge *edge)
{
    memcpy(row->drive, solution->drive, sizeof row->drive);
    row->tool = solution->tool;
    memcpy(row->coord, solution->config.coord, edge->n_coord * sizeof row->coord[0]);
}

/* True if the pose is held by any mode. */
static bool count_pose(lwd_mode_row *row, size_t n, size_t pose_no,
                       const lw_inverse_answer *answer, const lwd_edge *edge)
{
    bool reached = false;
    for (size_t i = 0; i < answer->n_solution; i++) {
        const lw_solution *solution = &answer->solution[i];
        if (!solution->within_limits) {
            continue;
        }
        reached = true;
        lwd_mode_row *at = solution->mode_known ? find_row(row, n, &solution->mode) : NULL;
        if (at == NULL || at->last_pose == pose_no) {
            continue;
        }
        if (at->held++ == 0) {
            keep_posture(at, solution, edge);
        }
        at->last_pose = pose_no;
    }
    return reached;
}

void lwd_mode_sample_run(lwd_mode_sample *out, lwd_mode_row *row, size_t n, const lwd_held *held,
                         lw_work *work)
{
    draw d = {.state = lwd_seed_of(held->edge.digest)};
    middle m;
    lw_inverse_ask ask;
    find_middle(&m, held, work);
    *out = (lwd_mode_sample){.poses = held->edge.report->explicit_inverse ? LWD_SAMPLE_EXPLICIT
                                                                           : LWD_SAMPLE_TRACKED};
    memset(&ask, 0, sizeof ask);
    for (size_t k = 0; k < out->poses; k++) {
        const lw_inverse_answer *answer = NULL;
        draw_pose(&ask.pose, &d, (double)(k % BOXES + 1) / BOXES, &m, held);
        if (lw_inverse(&answer, held->model, &ask, work, NULL) == LW_OK
            && count_pose(row, n, k + 1, answer, &held->edge)) {
            out->reached++;
        }
    }
}
