/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distances of the five demo mechanisms over random postures inside their limits: what a question
 * takes, and how near at_least comes to at_most, by quantiles of the postures where both are known.
 * LW_BENCH_CELLS sets the budget of the second round (default 0: none). */
#include "bench.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "demo.h"
#include "lwt.h"
#include "query/distance.h"

enum { PLACES = 60, MACHINES = 6 };

typedef struct machine {
    const char *name;
    double spread_m, spread_rad;
    lw_model *model;
    lw_work *work;
    size_t n;
    lw_posture_ask at[PLACES];
    size_t budget;
    double near_low_m, near_high_m; /* not 0: moved this near to the forward singularity found */
} machine;

static machine demo[MACHINES] = {
    {.name = "tilt-table", .spread_m = 0.05, .spread_rad = 0.25},
    {.name = "tilt-table",
     .spread_m = 0.05,
     .spread_rad = 0.25,
     .near_low_m = 0.003,
     .near_high_m = 0.03},
    {.name = "label-stage", .spread_m = 0.09, .spread_rad = 0.6},
    {.name = "belt-hopper", .spread_m = 0.15, .spread_rad = 0.0},
    {.name = "lid-turner", .spread_m = 0.10, .spread_rad = 3.0},
    {.name = "case-packer", .spread_m = 0.15, .spread_rad = 0.7},
};

static const lw_distance_answer *ask(const machine *m, size_t i, size_t budget)
{
    const lw_distance_answer *answer;
    lw_err err = {.code = LW_OK};
    lw_distance_ask question = {.posture = &m->at[i], .budget = budget};
    if (lw_distance(&answer, m->model, &question, m->work, &err) != LW_OK) {
        (void)fprintf(stderr, "bench_distance: %s: %s\n", m->name, err.msg);
        exit(1);
    }
    return answer;
}

/* Poses about home, those out of reach or beyond limits left out. */
static void places(machine *m)
{
    lwt_random random;
    lw_err err = {.code = LW_OK};
    const lw_spec *spec = lw_model_spec(m->model);
    const lw_posture_answer *home;
    lw_posture_ask nothing = spec->home; /* all demo documents have one */
    lwt_random_init(&random, 12);
    if (lw_posture(&home, m->model, 0, NULL, &nothing, m->work, &err) != LW_OK ||
        home->solution == NULL) {
        (void)fprintf(stderr, "bench_distance: %s: no home posture\n", m->name);
        exit(1);
    }
    lw_frame tool = home->solution->tool;
    for (size_t t = 0; t < 50 * PLACES && m->n < PLACES; t++) {
        lw_posture_ask *ask_at = &m->at[m->n];
        lw_pose_ask *p = &ask_at->pose;
        const lw_posture_answer *got;
        double quat[4];
        double d[4] = {1, 0, 0, 0};
        memset(ask_at, 0, sizeof *ask_at);
        ask_at->kind = LW_BY_POSE;
        ask_at->has_mode = true;
        ask_at->mode = lw_model_report(m->model)->home_mode;
        size_t turns = 0;
        for (size_t o = 0; o < spec->n_output; o++) {
            double part = lwt_random_in(&random, -1.0, 1.0);
            lw_output_kind kind = spec->output[o].kind;
            if (kind <= LW_OUT_Z) {
                p->has_position[kind] = true;
                p->position_m[kind] = tool.pos_m[kind] + m->spread_m * part;
            } else if (kind < LW_OUT_COORD) {
                turns++;
                d[1 + kind - LW_OUT_RX] = 0.5 * m->spread_rad * part;
            } else {
                p->joint_coord[p->n_joint] = spec->output[o].coord;
                p->joint_value[p->n_joint++] = m->spread_rad * part;
            }
        }
        if (turns > 0) {
            double size = sqrt(1.0 + d[1] * d[1] + d[2] * d[2] + d[3] * d[3]);
            lw_quat_from_rot(quat, tool.rot);
            p->orient = LW_ORIENT_QUATERNION;
            p->quat[0] = quat[0] - d[1] * quat[1] - d[2] * quat[2] - d[3] * quat[3];
            p->quat[1] = quat[1] + d[1] * quat[0] + d[2] * quat[3] - d[3] * quat[2];
            p->quat[2] = quat[2] + d[2] * quat[0] + d[3] * quat[1] - d[1] * quat[3];
            p->quat[3] = quat[3] + d[3] * quat[0] + d[1] * quat[2] - d[2] * quat[1];
            for (size_t k = 0; k < 4; k++) {
                p->quat[k] /= size;
            }
        }
        if (lw_posture(&got, m->model, 0, NULL, ask_at, m->work, &err) == LW_OK &&
            got->outcome == LW_OUTCOME_OK) {
            m->n++;
        }
    }
}

/* Each posture moved towards the singular one that was found, until it is near. */
static void go_near(machine *m)
{
    lwt_random random;
    lwt_random_init(&random, 13);
    for (size_t i = 0; i < m->n; i++) {
        const lw_distance_answer *a = ask(m, i, 0);
        lw_pose_ask *p = &m->at[i].pose;
        double near = lwt_random_in(&random, m->near_low_m, m->near_high_m);
        double part = 1.0 - near / a->forward.at_most_m;
        double quat[4];
        double size = 0.0;
        double same = 0.0;
        lw_quat_from_rot(quat, a->forward.tool.rot);
        for (size_t k = 0; k < 4; k++) {
            same += quat[k] * p->quat[k];
        }
        for (size_t k = 0; k < 4; k++) {
            p->quat[k] += part * ((same < 0.0 ? -quat[k] : quat[k]) - p->quat[k]);
            size += p->quat[k] * p->quat[k];
        }
        for (size_t k = 0; k < 4; k++) {
            p->quat[k] /= sqrt(size);
        }
        for (size_t k = 0; k < 3; k++) {
            p->position_m[k] += part * (a->forward.tool.pos_m[k] - p->position_m[k]);
        }
    }
}

static int by_size(const void *a, const void *b)
{
    const double *x = a;
    const double *y = b;
    return *x < *y ? -1 : *x > *y ? 1 : 0;
}

static void ratios(const machine *m, size_t budget)
{
    static const char *const side[4] = {"forward", "inverse", "limit", "nearest singular"};
    for (size_t s = 0; s < 4; s++) {
        double ratio[PLACES];
        double most[PLACES];
        size_t n = 0;
        size_t least_known = 0;
        size_t most_known = 0;
        size_t none = 0;
        for (size_t i = 0; i < m->n; i++) {
            const lw_distance_answer *a = ask(m, i, budget);
            const lw_distance_side *sides[3] = {&a->forward, &a->inverse, &a->limit};
            lw_distance_side d = s < 3 ? *sides[s] : a->forward;
            if (s == 3 && !a->inverse.none) {
                d.at_least_m =
                    fmin(a->forward.none ? INFINITY : a->forward.at_least_m, a->inverse.at_least_m);
                d.known_least =
                    (a->forward.none || a->forward.known_least) && a->inverse.known_least;
                d.at_most_m = fmin(a->forward.known_most ? a->forward.at_most_m : INFINITY,
                                   a->inverse.known_most ? a->inverse.at_most_m : INFINITY);
                d.known_most = d.at_most_m < INFINITY;
                d.none = false;
            }
            least_known += d.known_least;
            most_known += d.known_most;
            none += d.none;
            if (d.known_least && d.known_most) {
                ratio[n] = d.at_most_m > 0.0 ? d.at_least_m / d.at_most_m : 1.0;
                most[n++] = d.at_most_m;
            }
        }
        (void)printf("# %s %s, budget %zu: least known %zu, most known %zu, none %zu of %zu",
                     m->name, side[s], budget, least_known, most_known, none, m->n);
        if (n > 0) {
            qsort(ratio, n, sizeof *ratio, by_size);
            qsort(most, n, sizeof *most, by_size);
            (void)printf("; ratio %.3f %.3f %.3f, at_most %.1f %.1f %.1f mm", ratio[0],
                         ratio[n / 2], ratio[n - 1], 1e3 * most[0], 1e3 * most[n / 2],
                         1e3 * most[n - 1]);
        }
        (void)printf("\n");
    }
}

/* Parts of the question at the posture asked about last. */
static void least_alone(void *context, size_t turn)
{
    const machine *m = context;
    lwi_distance_work *w = m->work->distance_work;
    (void)turn;
    lwt_bench_keep(lwi_ball_forward_once(w->ball, &w->balls.local, 8.0 * w->ball->length_m));
}

static void most_alone(void *context, size_t turn)
{
    const machine *m = context;
    lw_distance_side side = {.known_most = false};
    (void)turn;
    lwi_distance_forward_most(&side, m->model, m->work);
    lwt_bench_keep(side.at_most_m);
}

static void one(void *context, size_t turn)
{
    const machine *m = context;
    lwt_bench_keep(ask(m, turn % m->n, m->budget)->forward.at_least_m);
}

int main(void)
{
    lwt_bench bench = lwt_bench_begin("distance");
    const char *text = getenv("LW_BENCH_CELLS");
    size_t cells = text != NULL ? (size_t)strtoul(text, NULL, 10) : 0;
    for (size_t i = 0; i < MACHINES; i++) {
        machine *m = &demo[i];
        char name[64];
        lw_err err = {.code = LW_OK};
        m->model = lwt_bench_demo(m->name);
        if (lw_work_new(&m->work, m->model, &err) != LW_OK) {
            return 1;
        }
        places(m);
        if (m->n == 0) {
            (void)fprintf(stderr, "bench_distance: %s: no posture\n", m->name);
            return 1;
        }
        if (m->near_high_m > 0.0) {
            go_near(m);
        }
        for (int round = 0; round < (cells > 0 ? 2 : 1); round++) {
            m->budget = round == 0 ? 0 : cells;
            (void)snprintf(name, sizeof name, "%s%s distance, %zu cells", m->name,
                           m->near_high_m > 0.0 ? " near" : "", m->budget);
            (void)lwt_bench_case(&bench, name, one, m, 0.0);
            ratios(m, m->budget);
            if (round == 0 && m->work->distance_work->ball->forward) {
                (void)snprintf(name, sizeof name, "%s forward at_least alone", m->name);
                (void)lwt_bench_case(&bench, name, least_alone, m, 500.0);
                (void)snprintf(name, sizeof name, "%s forward at_most alone", m->name);
                (void)lwt_bench_case(&bench, name, most_alone, m, 2000.0);
            }
        }
        lw_work_free(m->work);
        lw_model_free(m->model);
    }
    return lwt_bench_end(&bench);
}
