/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves proved: microseconds of a straight move of 100 mm from postures about home, with the
 * thresholds that hold by default. Each call asks for the next of a fixed list of moves: those that
 * are proved, and those with a witness, by themselves. The median over the list and its 95th
 * percentile are printed behind each mechanism's case. */
#define _POSIX_C_SOURCE 200809L

#include "bench.h"
#include "demo.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "math/vec3.h"
#include "model/model.h"

enum { MOVES = 64 };

typedef struct setup {
    lw_model *model;
    lw_work *work;
    size_t n;
    lw_posture_ask from[MOVES];
    lw_move move[MOVES];
    lw_margin_min min;
    lw_move_answer store;
} setup;

static const lw_path_answer *ask(setup *s, size_t i)
{
    const lw_path_answer *a;
    lw_err err = {.code = LW_OK};
    lw_path_ask question = {.from = &s->from[i],
                            .n_move = 1,
                            .move = &s->move[i],
                            .margin_min = s->min,
                            .store = &s->store};
    if (lw_path(&a, s->model, &question, s->work, &err) != LW_OK) {
        (void)fprintf(stderr, "bench_path: %s %s\n", err.where, err.msg);
        exit(1);
    }
    return a;
}

static void one(void *context, size_t turn)
{
    setup *s = context;
    lwt_bench_keep(ask(s, turn % s->n)->move[0].at);
}

/* A direction within what the tool can do, and a turn. */
static void step(lw_pose_ask *pose, const lw_model *m, lwi_random *random, double far,
                 double most_turn)
{
    double v[3] = {0, 0, 0};
    double w[3] = {0, 0, 0};
    for (int i = 0; i < 3; i++) {
        v[i] = m->completion.pos_output[i] ? 2.0 * lwi_random_unit(random) - 1.0 : 0.0;
        w[i] = m->completion.rot == LWI_ROT_FULL   ? 2.0 * lwi_random_unit(random) - 1.0
               : m->completion.rot == LWI_ROT_AXIS ? m->completion.axis[i]
                                                   : 0.0;
    }
    double length = lwi_norm(v);
    for (int i = 0; i < 3 && length > 0.0; i++) {
        pose->position_m[i] += far * v[i] / length;
    }
    double angle = most_turn * (2.0 * lwi_random_unit(random) - 1.0);
    double size = lwi_norm(w);
    if (size > 0.0) {
        double turn[4] = {cos(0.5 * angle), 0, 0, 0};
        double before[4];
        for (int i = 0; i < 3; i++) {
            turn[i + 1] = sin(0.5 * angle) * w[i] / size;
        }
        memcpy(before, pose->quat, sizeof before);
        lwi_quat_mul(pose->quat, turn, before);
        lwi_quat_unit(pose->quat);
    }
    for (size_t i = 0; i < pose->n_joint; i++) {
        pose->joint_value[i] += 2.0 * lwi_random_unit(random) - 1.0;
    }
}

static void home_pose(lw_pose_ask *pose, const lw_model *m)
{
    lw_frame tool;
    memset(pose, 0, sizeof *pose);
    lwi_tool_pose(&tool, &m->spec->tool[0], &m->home);
    for (int i = 0; i < 3; i++) {
        pose->has_position[i] = true;
        pose->position_m[i] = tool.pos_m[i];
    }
    pose->orient = LW_ORIENT_QUATERNION;
    lw_quat_from_rot(pose->quat, tool.rot);
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind == LW_OUT_COORD) {
            size_t coord = m->spec->output[o].coord;
            pose->joint_coord[pose->n_joint] = coord;
            pose->joint_value[pose->n_joint++] = m->home.coord[coord];
        }
    }
}

/* The moves with a wanted kind of answer: proved, or broken on the way (not at its start). */
static void collect(setup *s, bool proved)
{
    lwi_random random;
    lwi_random_seed(&random, 7);
    s->n = 0;
    for (size_t tried = 0; tried < 4000 && s->n < MOVES; tried++) {
        lw_posture_ask *from = &s->from[s->n];
        lw_move *move = &s->move[s->n];
        memset(from, 0, sizeof *from);
        memset(move, 0, sizeof *move);
        from->kind = LW_BY_POSE;
        home_pose(&from->pose, s->model);
        step(&from->pose, s->model, &random, 0.08 * lwi_random_unit(&random), 0.2);
        move->kind = LW_MOVE_LINE;
        move->pose = from->pose;
        step(&move->pose, s->model, &random, 0.1, 0.2);
        const lw_path_answer *a = ask(s, s->n);
        if (a->start != NULL && (a->outcome == LW_OUTCOME_OK) == proved &&
            a->outcome != LW_OUTCOME_UNDECIDED && a->move[0].at > 0.0) {
            s->n++;
        }
    }
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a;
    double y = *(const double *)b;
    return x < y ? -1 : x > y;
}

static double now_us(void)
{
    struct timespec t;
    (void)clock_gettime(CLOCK_THREAD_CPUTIME_ID, &t);
    return (double)t.tv_sec * 1e6 + (double)t.tv_nsec * 1e-3;
}

/* Least of five for each move, over the list. */
static void spread(setup *s, const char *name)
{
    double best[MOVES];
    for (size_t i = 0; i < s->n; i++) {
        best[i] = 1e300;
        for (int k = 0; k < 5; k++) {
            double before = now_us();
            (void)ask(s, i);
            best[i] = fmin(best[i], now_us() - before);
        }
    }
    if (s->n > 0) {
        qsort(best, s->n, sizeof *best, by_value);
        (void)printf("# %s: %zu moves, median %.1f us, p95 %.1f us, greatest %.1f us\n", name, s->n,
                     best[s->n / 2], best[s->n * 95 / 100], best[s->n - 1]);
    }
}

int main(void)
{
    static const char *const names[] = {"tilt-table", "label-stage", "case-packer", "lid-turner",
                                        "belt-hopper"};
    lwt_bench bench = lwt_bench_begin("path, straight 100 mm");
    setup *s = calloc(1, sizeof *s);
    if (s == NULL) {
        return 1;
    }
    for (size_t k = 0; k < sizeof names / sizeof names[0]; k++) {
        lw_err err = {.code = LW_OK};
        s->model = lwt_bench_demo(names[k]);
        if (lw_work_new(&s->work, s->model, &err) != LW_OK) {
            return 1;
        }
        lw_margin_min_default(&s->min, s->model, false, 0.0);
        for (int proved = 1; proved >= 0; proved--) {
            char name[64];
            collect(s, proved == 1);
            (void)snprintf(name, sizeof name, "%s %s", names[k], proved == 1 ? "proved" : "broken");
            if (s->n > 0) {
                (void)lwt_bench_case(&bench, name, one, s, 0.0);
                spread(s, name);
            }
        }
        lw_work_free(s->work);
        lw_model_free(s->model);
    }
    free(s);
    return lwt_bench_end(&bench);
}
