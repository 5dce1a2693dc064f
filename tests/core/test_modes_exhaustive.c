/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Working-mode labels along random walks on the configuration manifold: every change of a label is
 * bracketed down to a posture where that limb's scaled determinant vanishes, and none occurs
 * elsewhere. Identity behind it: a determinant changes its sign only through zero. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_subjects.h"
#include "lwt_all.h"

#include "model/model.h"
#include "solve/newton.h"

#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

typedef struct walker {
    const lw_model *m;
    lwi_newton_work nw;
    lwi_eval *ev;
    lwi_state *at, *trial, *low, *high;
    double *k;
    double y[LWI_MAX_VARS];
    lw_config config;
    double *store;
} walker;

static void open_walker(walker *w, const lw_model *m)
{
    memset(w, 0, sizeof *w);
    w->m = m;
    size_t n = m->whole->n_var;
    assert_int_equal(lwi_newton_work_open(&w->nw, n, m->whole->n_row, 1, NULL), LW_OK);
    w->ev = calloc(1, sizeof *w->ev);
    w->at = calloc(4, sizeof *w->at);
    w->trial = w->at + 1;
    w->low = w->at + 2;
    w->high = w->at + 3;
    w->k = calloc(n * n + 1, sizeof *w->k);
    w->store = calloc(lwi_config_doubles(m), sizeof *w->store);
    lwi_config_bind(&w->config, m, w->store);
    lwi_state_from_config(w->at, m->whole, &m->home);
}

static void close_walker(walker *w)
{
    lwi_newton_work_close(&w->nw);
    free(w->ev);
    free(w->at);
    free(w->k);
    free(w->store);
}

/* *to = `from` moved by share * w->y and put back on the manifold. */
static bool moved(walker *w, lwi_state *to, const lwi_state *from, double share)
{
    double y[LWI_MAX_VARS];
    lwi_newton_info info;
    for (size_t i = 0; i < w->m->whole->n_var; i++) {
        y[i] = share * w->y[i];
    }
    *to = *from;
    lwi_state_step(to, w->m->whole, y);
    lwi_newton(&info, w->m->whole, w->m->rank, NULL, 0, 30, to, w->ev, &w->nw);
    return info.converged && info.moved < 0.05;
}

static void labels(walker *w, const lwi_state *state, unsigned *branch, double *value)
{
    lwi_eval_nodes(w->ev, w->m->whole, state);
    lwi_config_from_eval(&w->config, w->m->whole, state, w->ev, &w->m->home);
    for (size_t i = 0; i < w->m->n_limb; i++) {
        branch[i] = lwi_limb_branch(&value[i], w->m, &w->m->limb[i], &w->config);
    }
}

static void random_direction(walker *w, lwt_random *rng, double size)
{
    size_t n = w->m->whole->n_var;
    size_t left = w->m->mobility;
    double norm = 0.0;
    lwi_eval_nodes(w->ev, w->m->whole, w->at);
    (void)lwi_null_space(w->k, w->m->whole, w->m->rank, w->at, w->ev, &w->nw);
    memset(w->y, 0, sizeof w->y);
    for (size_t c = 0; c < left; c++) {
        double g = lwt_random_in(rng, -1.0, 1.0);
        norm += g * g;
        for (size_t i = 0; i < n; i++) {
            w->y[i] += g * w->k[i * left + c];
        }
    }
    for (size_t i = 0; i < n; i++) {
        w->y[i] *= size / sqrt(norm);
    }
}

/* The label of limb i differs between shares 0 and 1 of the step: halve down to where the
 * determinant vanishes. */
static void bracket(walker *w, size_t limb, unsigned before)
{
    unsigned branch[LW_MAX_LIMBS];
    double value[LW_MAX_LIMBS];
    double low = 0.0;
    double high = 1.0;
    double least = 1.0;
    for (int i = 0; i < 60; i++) {
        double middle = 0.5 * (low + high);
        if (!moved(w, w->low, w->at, middle)) {
            return; /* no closed posture right there: seen at a constraint singularity only */
        }
        labels(w, w->low, branch, value);
        least = fmin(least, fabs(value[limb]));
        if (branch[limb] == before) {
            low = middle;
        } else {
            high = middle;
        }
    }
    lwt_near(least, 0.0, 1e-8);
}

static void walk(const lwt_subject *subject)
{
    lwt_machine *m = subject->make();
    lwt_machine_load(m);
    walker w;
    lwt_random rng;
    unsigned before[LW_MAX_LIMBS];
    unsigned after[LW_MAX_LIMBS];
    double value[LW_MAX_LIMBS];
    int changes = 0;
    open_walker(&w, m->model);
    lwt_random_init(&rng, 0x600d);
    int steps = lwt_share(50000);
    for (int step = 0; step < steps; step++) {
        if (step % 7 == 0) {
            random_direction(&w, &rng, 0.03);
        }
        labels(&w, w.at, before, value);
        if (!moved(&w, w.trial, w.at, 1.0)) {
            random_direction(&w, &rng, 0.03);
            continue;
        }
        labels(&w, w.trial, after, value);
        for (size_t i = 0; i < m->model->n_limb; i++) {
            if (before[i] != after[i]) {
                changes++;
                bracket(&w, i, before[i]);
            }
        }
        *w.at = *w.trial;
        if (step % 500 == 499) {
            lwi_state_from_config(w.at, m->model->whole, &m->model->home);
            random_direction(&w, &rng, 0.03);
        }
    }
    print_message("%s: %d steps, %d changes of a label\n", subject->name, steps, changes);
    assert_true(changes > 0);
    close_walker(&w);
    lwt_machine_free(m);
}

static void run(void **state)
{
    walk(*state);
}

int main(void)
{
    static const char *const with_modes[] = {"three-rrr", "four-rrr", "delta",     "rails",
                                             "wrist-arm", "two-stages", "skew-arm"};
    struct CMUnitTest tests[sizeof with_modes / sizeof with_modes[0]];
    size_t n = 0;
    lw_init();
    for (size_t i = 0; i < sizeof with_modes / sizeof with_modes[0]; i++) {
        for (size_t s = 0; s < LWT_SUBJECTS; s++) {
            if (strcmp(lwt_subjects[s].name, with_modes[i]) == 0) {
                /* cmocka hands initial_state to the test as *state */
                void *subject = (void *)(uintptr_t)&lwt_subjects[s];
                tests[n++] = (struct CMUnitTest){
                    .name = with_modes[i], .test_func = run, .initial_state = subject};
            }
        }
    }
    return n == sizeof with_modes / sizeof with_modes[0] ? cmocka_run_group_tests(tests, NULL, NULL)
                                                         : 1;
}
