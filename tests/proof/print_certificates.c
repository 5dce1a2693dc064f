/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random moves of the demo mechanisms with fixed seeds, each proved by lw_path, and what it proved:
 * one JSON line a move, numbers in m and rad, for check_certificate.py. Of the core only public
 * headers are used. Argument: moves a mechanism (default 16); half of them for the arm, whose moves
 * fall into many pieces. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <leeway/path.h>

#include "demo.h"
#include "lwt.h"

enum { PIECES = 512 };

typedef struct machine {
    const char *name;
    double spread_m, spread_rad;
    unsigned long part; /* one in so many of the moves asked for */
    lw_model *model;
    lw_work *work;
    lw_frame home;
    lw_mode in_mode;
} machine;

static machine demo[] = {
    {.name = "tilt-table", .spread_m = 0.04, .spread_rad = 0.2, .part = 1},
    {.name = "label-stage", .spread_m = 0.08, .spread_rad = 0.6, .part = 1},
    {.name = "belt-hopper", .spread_m = 0.15, .part = 1},
    {.name = "lid-turner", .spread_m = 0.09, .spread_rad = 3.0, .part = 1},
    {.name = "case-packer", .spread_m = 0.15, .spread_rad = 0.7, .part = 2},
};

static _Noreturn void stop(const char *name, const char *sentence)
{
    (void)fprintf(stderr, "print_certificates: %s: %s\n", name, sentence);
    exit(1);
}

/* A pose about home, every output given. */
static void random_pose(lw_pose_ask *p, const machine *m, lwt_random *random, double share)
{
    const lw_spec *spec = lw_model_spec(m->model);
    double quat[4];
    double d[4] = {1, 0, 0, 0};
    size_t turns = 0;
    memset(p, 0, sizeof *p);
    for (size_t o = 0; o < spec->n_output; o++) {
        double part = share * lwt_random_in(random, -1.0, 1.0);
        lw_output_kind kind = spec->output[o].kind;
        if (kind <= LW_OUT_Z) {
            p->has_position[kind] = true;
            p->position_m[kind] = m->home.pos_m[kind] + m->spread_m * part;
        } else if (kind < LW_OUT_COORD) {
            turns++;
            d[1 + kind - LW_OUT_RX] = 0.5 * m->spread_rad * part;
        } else {
            p->joint_coord[p->n_joint] = spec->output[o].coord;
            p->joint_value[p->n_joint++] = m->spread_rad * part;
        }
    }
    if (turns == 0) {
        return;
    }
    double size = sqrt(1.0 + d[1] * d[1] + d[2] * d[2] + d[3] * d[3]);
    lw_quat_from_rot(quat, m->home.rot);
    p->orient = LW_ORIENT_QUATERNION;
    p->quat[0] = quat[0] - d[1] * quat[1] - d[2] * quat[2] - d[3] * quat[3];
    p->quat[1] = quat[1] + d[1] * quat[0] + d[2] * quat[3] - d[3] * quat[2];
    p->quat[2] = quat[2] + d[2] * quat[0] + d[3] * quat[1] - d[1] * quat[3];
    p->quat[3] = quat[3] + d[3] * quat[0] + d[1] * quat[2] - d[2] * quat[1];
    for (size_t k = 0; k < 4; k++) {
        p->quat[k] /= size;
    }
}

static void print_list(const char *name, const double *value, size_t n, const char *then)
{
    (void)printf("\"%s\":[", name);
    for (size_t i = 0; i < n; i++) {
        (void)printf("%s%.17g", i > 0 ? "," : "", value[i]);
    }
    (void)printf("]%s", then);
}

static void print_pose(const char *name, const machine *m, const lw_pose_ask *p)
{
    double position[3];
    for (size_t i = 0; i < 3; i++) {
        position[i] = p->has_position[i] ? p->position_m[i] : m->home.pos_m[i];
    }
    (void)printf("\"%s\":{", name);
    print_list("position", position, 3, p->orient == LW_ORIENT_QUATERNION ? "," : "");
    if (p->orient == LW_ORIENT_QUATERNION) {
        print_list("quaternion", p->quat, 4, "");
    }
    if (p->n_joint > 0) {
        (void)printf(",");
        print_list("joints", p->joint_value, p->n_joint, "");
    }
    (void)printf("},");
}

static void print_piece(const machine *m, const lw_proof_piece *p)
{
    size_t n = lw_model_spec(m->model)->n_drive;
    (void)printf("{\"low\":%.17g,\"high\":%.17g,\"hold\":%.17g,", p->low, p->high, p->hold);
    print_list("drive_low", p->drive_low, n, ",");
    print_list("drive_high", p->drive_high, n, ",");
    (void)printf("\"margin\":{");
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        (void)printf("%s\"%s\":%.17g", i > 0 ? "," : "", lw_margin_word((lw_margin_name)i),
                     p->margin[i]);
    }
    (void)printf("}}");
}

/* From a random posture in one of the document's modes (by number) to a random pose, with
 * thresholds; prints what was proved, where it was. */
static bool one_move(const machine *m, lwt_random *random, size_t mode, bool arc,
                     lw_proof_piece *piece)
{
    const lw_spec *spec = lw_model_spec(m->model);
    lw_posture_ask from;
    lw_move move;
    lw_move_answer answer;
    const lw_path_answer *path;
    lw_err err = {.code = LW_OK};
    memset(&from, 0, sizeof from);
    memset(&move, 0, sizeof move);
    from.kind = LW_BY_POSE;
    from.has_mode = true;
    from.mode = mode < spec->n_mode ? lw_model_report(m->model)->mode_name[mode] : m->in_mode;
    random_pose(&from.pose, m, random, 1.0);
    random_pose(&move.pose, m, random, 1.0);
    random_pose(&move.via, m, random, 1.0);
    move.kind = arc ? LW_MOVE_CIRCLE : LW_MOVE_LINE;
    lw_path_ask ask = {.from = &from, .n_move = 1, .move = &move, .store = &answer,
                       .piece = piece, .piece_room = PIECES};
    lw_margin_min *min = &ask.margin_min;
    double low = lwt_random_in(random, 0.2, 1.5);
    min->asked[LW_MARGIN_SPEED] = min->asked[LW_MARGIN_ACCURACY] = true;
    min->value[LW_MARGIN_SPEED] = min->value[LW_MARGIN_ACCURACY] = low;
    if (spec->n_drive == spec->n_output) {
        min->asked[LW_MARGIN_LOAD] = true;
        min->value[LW_MARGIN_LOAD] = low;
    }
    if (lw_path(&path, m->model, &ask, m->work, &err) != LW_OK) {
        stop(m->name, err.msg);
    }
    if (path->outcome != LW_OUTCOME_OK || path->truncated || path->n_piece == 0) {
        return false;
    }
    (void)printf("{\"mechanism\":\"%s\",\"mode\":\"%s\",\"kind\":\"%s\",", m->name,
                 mode < spec->n_mode ? spec->mode[mode].name : "", arc ? "circle" : "line");
    print_pose("from", m, &from.pose);
    if (arc) {
        print_pose("via", m, &move.via);
    }
    print_pose("to", m, &move.pose);
    (void)printf("\"at_least\":{\"speed\":%.17g,\"accuracy\":%.17g,\"load\":%.17g},\"pieces\":[",
                 min->value[LW_MARGIN_SPEED], min->value[LW_MARGIN_ACCURACY],
                 min->value[LW_MARGIN_LOAD]);
    for (size_t i = 0; i < path->n_piece; i++) {
        (void)printf("%s", i > 0 ? "," : "");
        print_piece(m, &path->piece[i]);
    }
    (void)printf("]}\n");
    return true;
}

static void open_machine(machine *m)
{
    lw_err err = {.code = LW_OK};
    const lw_posture_answer *home;
    m->model = lwt_bench_demo(m->name);
    if (lw_work_new(&m->work, m->model, &err) != LW_OK) {
        stop(m->name, err.msg);
    }
    lw_posture_ask at = lw_model_spec(m->model)->home; /* all demo documents have one */
    if (lw_posture(&home, m->model, 0, NULL, &at, m->work, &err) != LW_OK ||
        home->solution == NULL) {
        stop(m->name, "no home posture");
    }
    m->home = home->solution->tool;
    m->in_mode = lw_model_report(m->model)->home_mode;
}

int main(int argc, char **argv)
{
    char *end = NULL;
    unsigned long each = argc > 1 ? strtoul(argv[1], &end, 10) : 16;
    lw_proof_piece *piece = calloc(PIECES, sizeof *piece);
    if (piece == NULL || (end != NULL && *end != '\0')) {
        stop("arguments", "one number is expected: moves a mechanism");
    }
    for (size_t i = 0; i < sizeof demo / sizeof demo[0]; i++) {
        lwt_random random;
        unsigned long done = 0;
        machine *m = &demo[i];
        unsigned long wanted = (each + m->part - 1) / m->part;
        lwt_random_init(&random, 4100 + i);
        open_machine(m);
        for (unsigned long tried = 0; tried < 30 * wanted && done < wanted; tried++) {
            size_t modes = lw_model_spec(m->model)->n_mode;
            done += one_move(m, &random, modes > 0 ? tried % modes : 0, done % 4 == 3, piece);
        }
        if (done < wanted) {
            stop(m->name, "too few moves are proved");
        }
        lw_work_free(m->work);
        lw_model_free(m->model);
    }
    free(piece);
    return 0;
}
