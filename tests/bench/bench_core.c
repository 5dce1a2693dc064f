/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The five demo mechanisms, read from their documents, asked every question of the core in one
 * thread over many different targets inside their workspaces. A question that allocates fails the
 * run. The bars are those of a small server's one core; only the least times are worth quoting on a
 * machine with other work. */
#include "bench.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "demo.h"
#include "lwt.h"

enum { TARGETS = 64, DEMOS = 5 };

typedef struct bars {
    const char *name;
    double inverse, track, jacobian, margin; /* us, 0 = none */
} bars;

static const bars demo[DEMOS] = {
    {"tilt-table", 2.0, 15.0, 5.0, 25.0}, {"belt-hopper", 0, 0, 0, 0},
    {"lid-turner", 0, 0, 0, 200.0},       {"label-stage", 0, 0, 0, 0},
    {"case-packer", 0, 0, 0, 0},
};

/* One place in the workspace, asked about in several ways. */
typedef struct target {
    lw_inverse_ask all;         /* every solution */
    lw_inverse_ask one;         /* in the default mode */
    lw_posture_ask pose;        /* the tool pose in the default mode */
    lw_posture_ask beside;      /* 1 to 5 mm and degrees away, in the same mode */
    lw_posture_ask drives;      /* readings, followed from `beside` */
    lw_posture_ask from_home;   /* readings, followed from home */
    lw_reach_ask reach;
} target;

typedef struct machine {
    const bars *bar;
    lw_model *model;
    lw_work *work;
    target *at;
    size_t strayed; /* forward from home that did not arrive */
} machine;

static _Noreturn void stop(const char *name, const char *sentence)
{
    (void)fprintf(stderr, "bench_core: %s: %s\n", name, sentence);
    exit(1);
}

static void load(machine *m, const bars *bar)
{
    lw_err err = {.code = LW_OK};
    *m = (machine){.bar = bar, .model = lwt_bench_demo(bar->name)};
    if (lw_work_new(&m->work, m->model, &err) != LW_OK) {
        stop(bar->name, err.msg);
    }
    m->at = calloc(TARGETS, sizeof *m->at);
    if (m->at == NULL) {
        stop(bar->name, "out of memory");
    }
}

/* The tool pose of a solution as far as the outputs name it, moved by random amounts. */
static void pose_beside(lw_pose_ask *out, const machine *m, const lw_solution *from,
                        lwt_random *random, double shift_m, double turn_rad, double joint_share)
{
    const lw_spec *spec = lw_model_spec(m->model);
    double quat[4];
    double delta[3];
    size_t turns = 0;
    memset(out, 0, sizeof *out);
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        double part = lwt_random_in(random, -1.0, 1.0);
        turns += kind >= LW_OUT_RX && kind <= LW_OUT_RZ;
        if (kind <= LW_OUT_Z) {
            out->has_position[kind] = true;
            out->position_m[kind] = from->tool.pos_m[kind] + shift_m * part;
        } else if (kind == LW_OUT_COORD) {
            bool turning = lw_spec_coord_turning(spec, spec->output[o].coord);
            out->joint_coord[out->n_joint] = spec->output[o].coord;
            out->joint_value[out->n_joint++] = from->config.coord[spec->output[o].coord] +
                                               joint_share * part * (turning ? turn_rad : shift_m);
        }
    }
    if (turns == 3) {
        for (size_t i = 0; i < 3; i++) {
            delta[i] = 0.5 * turn_rad * lwt_random_in(random, -1.0, 1.0);
        }
        double size = sqrt(1.0 + delta[0] * delta[0] + delta[1] * delta[1] + delta[2] * delta[2]);
        lw_quat_from_rot(quat, from->tool.rot);
        out->orient = LW_ORIENT_QUATERNION;
        out->quat[0] = quat[0] - delta[0] * quat[1] - delta[1] * quat[2] - delta[2] * quat[3];
        out->quat[1] = quat[1] + delta[0] * quat[0] + delta[1] * quat[3] - delta[2] * quat[2];
        out->quat[2] = quat[2] + delta[1] * quat[0] + delta[2] * quat[1] - delta[0] * quat[3];
        out->quat[3] = quat[3] + delta[2] * quat[0] + delta[0] * quat[2] - delta[1] * quat[1];
        for (size_t i = 0; i < 4; i++) {
            out->quat[i] /= size;
        }
        return;
    }
    for (size_t o = 0; turns > 0 && o < spec->n_output; o++) {
        if (spec->output[o].kind >= LW_OUT_RX && spec->output[o].kind <= LW_OUT_RZ) {
            double zyx[3];
            size_t k = (size_t)LW_OUT_RZ - (size_t)spec->output[o].kind;
            lw_zyx_from_rot(zyx, from->tool.rot);
            out->orient = LW_ORIENT_ZYX;
            out->has_zyx[k] = true;
            out->zyx_rad[k] = zyx[k] + turn_rad * lwt_random_in(random, -1.0, 1.0);
        }
    }
}

/* The solution of a pose in the default mode and within limits, NULL if there is none. */
static const lw_solution *solve(const machine *m, const lw_pose_ask *pose)
{
    const lw_inverse_answer *answer;
    lw_err err = {.code = LW_OK};
    lw_inverse_ask ask = {
        .pose = *pose, .has_mode = true, .mode = lw_model_report(m->model)->home_mode};
    if (lw_inverse(&answer, m->model, &ask, m->work, &err) != LW_OK) {
        stop(m->bar->name, err.msg);
    }
    return answer->outcome == LW_OUTCOME_OK ? answer->solution : NULL;
}

static void by_readings(lw_posture_ask *out, const machine *m, const lw_solution *at)
{
    out->kind = LW_BY_DRIVES;
    for (size_t d = 0; d < lw_model_spec(m->model)->n_drive; d++) {
        out->has_drive[d] = true;
        out->drive[d] = at->drive[d];
    }
}

static void by_pose(lw_posture_ask *out, const machine *m, const lw_pose_ask *pose)
{
    out->kind = LW_BY_POSE;
    out->pose = *pose;
    out->has_mode = true;
    out->mode = lw_model_report(m->model)->home_mode;
}

/* Random places about home, wide enough that some are out of reach and are not taken. */
static void choose_targets(machine *m)
{
    const lw_spec *spec = lw_model_spec(m->model);
    const lw_report *report = lw_model_report(m->model);
    const lw_posture_answer *home;
    const lw_solution *found;
    lw_posture_ask *ask = calloc(1, sizeof *ask);
    lw_solution *base = calloc(1, sizeof *base);
    double *coord = calloc(LW_MAX_COORDS, sizeof *coord);
    lw_err err = {.code = LW_OK};
    lwt_random random;
    if (ask == NULL || base == NULL || coord == NULL) {
        stop(m->bar->name, "out of memory");
    }
    *ask = spec->home;
    if (ask->kind == LW_BY_NOTHING) { /* the reference posture */
        ask->kind = LW_BY_JOINTS;
        for (size_t c = 0; c < lw_spec_coord_count(spec); c++) {
            ask->has_coord[c] = true;
        }
    }
    if (lw_posture(&home, m->model, 0, NULL, ask, m->work, &err) != LW_OK ||
        home->solution == NULL) {
        stop(m->bar->name, err.code != LW_OK ? err.msg : "no home posture");
    }
    *base = *home->solution;
    memcpy(coord, base->config.coord, lw_spec_coord_count(spec) * sizeof *coord);
    base->config.coord = coord;
    lwt_random_init(&random, 20261);
    size_t n = 0;
    for (size_t tries = 0; n < TARGETS; tries++) {
        target *t = &m->at[n];
        lw_pose_ask pose;
        lw_pose_ask near;
        double step = lwt_random_in(&random, 1.0, 5.0);
        if (tries > 200 * (size_t)TARGETS) {
            stop(m->bar->name, "hardly any random target is within reach");
        }
        pose_beside(&pose, m, base, &random, 0.5 * report->characteristic_length_m, 0.5, 2.0);
        found = solve(m, &pose);
        if (found == NULL) {
            continue;
        }
        *t = (target){.all = {.pose = pose}};
        by_readings(&t->drives, m, found);
        t->from_home = t->drives;
        pose_beside(&near, m, found, &random, 1e-3 * step, step * 0.017453292519943295, 1.0);
        if (solve(m, &near) == NULL) {
            continue;
        }
        by_pose(&t->beside, m, &near);
        by_pose(&t->pose, m, &pose);
        t->one = (lw_inverse_ask){.pose = pose, .has_mode = true, .mode = report->home_mode};
        t->drives.near = &t->beside;
        t->reach.pose = pose;
        lw_margin_min_default(&t->reach.margin_min, m->model, false, 0.0);
        n++;
    }
    free(coord);
    free(base);
    free(ask);
}

/* ---- the questions -------------------------------------------------------------------------- */

static const target *next(const machine *m, size_t turn)
{
    return &m->at[turn % TARGETS];
}

static void check(const machine *m, lw_code rc, bool good, const lw_err *err)
{
    if (rc != LW_OK || !good) {
        stop(m->bar->name, rc != LW_OK ? err->msg : "a question in the bench got no solution");
    }
}

static void inverse_of(const machine *m, const lw_inverse_ask *ask)
{
    const lw_inverse_answer *a;
    lw_err err = {.code = LW_OK};
    lw_code rc = lw_inverse(&a, m->model, ask, m->work, &err);
    check(m, rc, rc == LW_OK && a->n_solution > 0, &err);
    lwt_bench_keep(a->solution[0].drive[0]);
}

static void ask_inverse_all(void *context, size_t turn)
{
    const machine *m = context;
    inverse_of(m, &next(m, turn)->all);
}

static void ask_inverse_one(void *context, size_t turn)
{
    const machine *m = context;
    inverse_of(m, &next(m, turn)->one);
}

static bool forward_of(machine *m, const lw_posture_ask *readings)
{
    const lw_forward_answer *a;
    lw_err err = {.code = LW_OK};
    lw_forward_ask ask = {.readings = readings};
    lw_code rc = lw_forward(&a, m->model, &ask, m->work, &err);
    check(m, rc, rc == LW_OK, &err);
    lwt_bench_keep(a->n_solution > 0 ? a->solution[0].tool.pos_m[0] : 0.0);
    return a->n_solution > 0;
}

static void ask_forward_near(void *context, size_t turn)
{
    machine *m = context;
    if (!forward_of(m, &next(m, turn)->drives)) {
        stop(m->bar->name, "a posture 5 mm and 5 degrees away was not reached");
    }
}

/* A wall between home and the target is an answer too. */
static void ask_forward_home(void *context, size_t turn)
{
    machine *m = context;
    m->strayed += forward_of(m, &next(m, turn)->from_home) ? 0u : 1u;
}

static void jacobian_of(const machine *m, const lw_posture_ask *posture)
{
    const lw_jacobian_answer *a;
    lw_err err = {.code = LW_OK};
    lw_jacobian_ask ask = {.posture = posture};
    lw_code rc = lw_jacobian(&a, m->model, &ask, m->work, &err);
    check(m, rc, rc == LW_OK && a->solution != NULL, &err);
    lwt_bench_keep(a->forward[0]);
}

static void ask_jacobian_pose(void *context, size_t turn)
{
    const machine *m = context;
    jacobian_of(m, &next(m, turn)->pose);
}

static void ask_jacobian_readings(void *context, size_t turn)
{
    const machine *m = context;
    jacobian_of(m, &next(m, turn)->drives);
}

static void margin_of(const machine *m, const lw_posture_ask *posture)
{
    const lw_margin_answer *a;
    lw_err err = {.code = LW_OK};
    lw_code rc = lw_margin(&a, m->model, 0, NULL, posture, m->work, &err);
    check(m, rc, rc == LW_OK && a->solution != NULL, &err);
    lwt_bench_keep(a->margin[LW_MARGIN_HOLD].value);
}

static void ask_margin_pose(void *context, size_t turn)
{
    const machine *m = context;
    margin_of(m, &next(m, turn)->pose);
}

static void ask_margin_readings(void *context, size_t turn)
{
    const machine *m = context;
    margin_of(m, &next(m, turn)->drives);
}

static void ask_reach(void *context, size_t turn)
{
    const machine *m = context;
    const lw_reach_answer *a;
    lw_err err = {.code = LW_OK};
    lw_code rc = lw_reach(&a, m->model, &next(m, turn)->reach, m->work, &err);
    check(m, rc, rc == LW_OK && a->solution != NULL, &err);
    lwt_bench_keep(a->solution->drive[0]);
}

/* Only the cases whose name holds `part`. */
static size_t measure(lwt_bench *bench, machine *m, const char *part)
{
    const bars *bar = m->bar;
    const struct {
        const char *name;
        lwt_bench_call call;
        double bar_us;
    } question[] = {
        {"inverse in a mode", ask_inverse_one, bar->inverse},
        {"inverse all modes", ask_inverse_all, 0.0},
        {"forward near", ask_forward_near, bar->track},
        {"forward from home", ask_forward_home, 0.0},
        {"jacobian at a pose", ask_jacobian_pose, bar->jacobian},
        {"jacobian at readings", ask_jacobian_readings, 0.0},
        {"margin at a pose", ask_margin_pose, bar->margin},
        {"margin at readings", ask_margin_readings, 0.0},
        {"reach by pose", ask_reach, 0.0},
    };
    size_t allocations = 0;
    for (size_t i = 0; i < sizeof question / sizeof question[0]; i++) {
        char name[96];
        (void)snprintf(name, sizeof name, "%s %s", bar->name, question[i].name);
        if (strstr(name, part) != NULL) {
            allocations +=
                lwt_bench_case(bench, name, question[i].call, m, question[i].bar_us).allocations;
        }
    }
    return allocations;
}

/* bench_core [PART]: all, or the cases whose name holds PART. */
int main(int argc, char **argv)
{
    size_t allocations = 0;
    lw_init();
    lwt_bench bench = lwt_bench_begin("core: questions about the demo mechanisms");
    for (size_t i = 0; i < DEMOS; i++) {
        machine m;
        load(&m, &demo[i]);
        choose_targets(&m);
        allocations += measure(&bench, &m, argc > 1 ? argv[1] : "");
        free(m.at);
        lw_work_free(m.work);
        lw_model_free(m.model);
    }
    if (allocations > 0) {
        (void)fprintf(stderr, "bench_core: a question allocates\n");
        return 1;
    }
    return lwt_bench_end(&bench);
}
