/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A serial chain, the case-packer: tool pose and Jacobian from joint values, numbers only, side
 * by side in one run with KDL's solvers (serial_kdl.cpp) on the same chain and the same values;
 * and the whole Jacobian question, which judges limits, modes, ranks and conditions besides. The
 * two are compared with each other before they are timed. */
#include "bench.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "closure/system.h"
#include "math/vec3.h"
#include "model/model.h"
#include "demo.h"
#include "lwt.h"
#include "serial_kdl.h"

enum { JOINTS_MAX = 8, POSTURES = 256 };

typedef struct chain {
    lw_model *model;
    lw_work *work;
    size_t n;
    lwi_state state;
    lwi_eval ev;
    lw_posture_ask *posture; /* [POSTURES], by joints' readings */
    double q[POSTURES][JOINTS_MAX];
    double tool[12];         /* rotation row by row, position */
    double jacobian[6 * JOINTS_MAX];
} chain;

static void our_pose(chain *c, size_t turn)
{
    const lwi_system *sys = c->model->whole;
    const lw_spec_tool *tool = &c->model->spec->tool[0];
    lw_frame pose;
    for (size_t k = 0; k < c->n; k++) {
        c->state.value[sys->coord_element[k]] = c->q[turn % POSTURES][k];
    }
    lwi_eval_nodes(&c->ev, sys, &c->state);
    lwi_frame_mul(&pose, &c->ev.node[sys->body_node[tool->body]], &tool->frame);
    for (size_t i = 0; i < 9; i++) {
        c->tool[i] = pose.rot[i];
    }
    for (size_t i = 0; i < 3; i++) {
        c->tool[9 + i] = pose.pos_m[i];
    }
}

/* Rows vx vy vz wx wy wz at the tool point, fixed frame; one column a joint. */
static void our_jacobian(chain *c)
{
    const lwi_system *sys = c->model->whole;
    lwi_twist_rows(c->jacobian, sys, &c->ev, sys->body_node[c->model->spec->tool[0].body],
                   c->tool + 9);
}

static void ours(void *context, size_t turn)
{
    chain *c = context;
    our_pose(c, turn);
    our_jacobian(c);
    lwt_bench_keep(c->jacobian[0] + c->tool[9]);
}

static void ours_pose_alone(void *context, size_t turn)
{
    chain *c = context;
    our_pose(c, turn);
    lwt_bench_keep(c->tool[9]);
}

static void kdl(void *context, size_t turn)
{
    chain *c = context;
    kdl_both(c->q[turn % POSTURES], c->tool, c->jacobian);
    lwt_bench_keep(c->jacobian[0] + c->tool[9]);
}

static void kdl_pose_alone(void *context, size_t turn)
{
    chain *c = context;
    kdl_pose(c->q[turn % POSTURES], c->tool);
    lwt_bench_keep(c->tool[9]);
}

static void question(void *context, size_t turn)
{
    chain *c = context;
    const lw_jacobian_answer *answer;
    lw_jacobian_ask ask = {.posture = &c->posture[turn % POSTURES]};
    lw_err err = {.code = LW_OK};
    if (lw_jacobian(&answer, c->model, &ask, c->work, &err) != LW_OK || answer->solution == NULL) {
        (void)fprintf(stderr, "bench_serial: the question was not answered: %s\n", err.msg);
        exit(1);
    }
    lwt_bench_keep(answer->twist[0]);
}

/* The chain of the document handed to KDL, and random values inside the joints' ranges. */
static void set_up(chain *c)
{
    const lw_spec *spec = c->model->spec;
    lwt_random random;
    double at[JOINTS_MAX][3];
    double axis[JOINTS_MAX][3];
    bool slides[JOINTS_MAX];
    c->n = spec->n_joint;
    for (size_t j = 0; j < c->n; j++) {
        slides[j] = spec->joint[j].type == LW_PRISMATIC;
        for (size_t i = 0; i < 3; i++) {
            at[j][i] = spec->joint[j].at_m[i];
            axis[j][i] = spec->joint[j].axis[i];
        }
    }
    kdl_chain(c->n, (const double *)at, (const double *)axis, slides, spec->tool[0].frame.rot,
              spec->tool[0].frame.pos_m);
    lwt_random_init(&random, 7);
    for (size_t k = 0; k < POSTURES; k++) {
        c->posture[k].kind = LW_BY_JOINTS;
        for (size_t j = 0; j < c->n; j++) {
            const lw_range *range = &spec->joint[j].range[0];
            double low = range->has_low ? range->low : -2.0;
            double high = range->has_high ? range->high : 2.0;
            c->q[k][j] = lwt_random_in(&random, low, high);
            c->posture[k].has_coord[j] = true;
            c->posture[k].coord[j] = c->q[k][j];
        }
    }
    lwi_state_reference(&c->state, c->model->whole);
}

static double apart(const double *a, const double *b, size_t n)
{
    double worst = 0.0;
    for (size_t i = 0; i < n; i++) {
        worst = fmax(worst, fabs(a[i] - b[i]));
    }
    return worst;
}

static double difference(chain *c)
{
    double tool[12];
    double jacobian[6 * JOINTS_MAX];
    double worst = 0.0;
    for (size_t k = 0; k < POSTURES; k++) {
        our_pose(c, k);
        our_jacobian(c);
        kdl_both(c->q[k], tool, jacobian);
        worst = fmax(worst, apart(c->tool, tool, 12));
        worst = fmax(worst, apart(c->jacobian, jacobian, 6 * c->n));
    }
    return worst;
}

int main(void)
{
    lw_err err = {.code = LW_OK};
    lw_init();
    chain *c = calloc(1, sizeof *c);
    if (c == NULL) {
        return 1;
    }
    c->model = lwt_bench_demo("case-packer");
    c->posture = calloc(POSTURES, sizeof *c->posture);
    if (c->posture == NULL || c->model->spec->n_joint > JOINTS_MAX ||
        lw_work_new(&c->work, c->model, &err) != LW_OK) {
        return 1;
    }
    set_up(c);
    double worst = difference(c);
    if (!(worst < 1e-12)) {
        (void)fprintf(stderr, "bench_serial: ours and KDL's differ by %g\n", worst);
        return 1;
    }
    lwt_bench bench = lwt_bench_begin("serial: tool pose and Jacobian of the case-packer");
    (void)lwt_bench_pair(&bench, "ours: pose", ours_pose_alone, c, "KDL: pose", kdl_pose_alone, c,
                         1.0);
    (void)lwt_bench_pair(&bench, "ours: pose and Jacobian", ours, c, "KDL: pose and Jacobian", kdl,
                         c, 1.0);
    (void)lwt_bench_case(&bench, "ours: the whole Jacobian question", question, c, 0.0);
    kdl_end();
    lw_work_free(c->work);
    lw_model_free(c->model);
    free(c->posture);
    free(c);
    return lwt_bench_end(&bench);
}
