/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One model asked by several threads at a time, each with a scratch of its own: every number of
 * every answer has the same bits as when one thread asks alone. Under the thread sanitizer this
 * shows too that questions write nothing into the model. */
#include <pthread.h>

#include "demo_model.h"

enum { THREADS = 4, QUESTIONS = 24, NUMBERS = 160 };

/* What came of one question about the k-th posture: every kind, into a row of numbers. */
typedef struct row {
    size_t n;
    double value[NUMBERS];
} row;

typedef struct thread_job {
    const lw_model *model;
    const double (*drive)[LW_MAX_DRIVES];
    row *out; /* [QUESTIONS] */
    size_t first; /* threads begin at different questions */
    bool failed;
} thread_job;

static void keep(row *r, double x)
{
    if (r->n < NUMBERS) {
        r->value[r->n++] = x;
    }
}

static void keep_solution(row *r, const lw_solution *sol, size_t n_drive)
{
    for (size_t d = 0; d < n_drive; d++) {
        keep(r, sol->drive[d]);
    }
    for (size_t i = 0; i < 9; i++) {
        keep(r, sol->tool.rot[i]);
    }
    for (size_t i = 0; i < 3; i++) {
        keep(r, sol->tool.pos_m[i]);
    }
    keep(r, sol->residual_position_m);
}

/* The pose of a tool as far as the outputs name it. */
static void pose_of(lw_pose_ask *out, const lw_spec *spec, const lw_solution *sol)
{
    memset(out, 0, sizeof *out);
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        if (kind <= LW_OUT_Z) {
            out->has_position[kind] = true;
            out->position_m[kind] = sol->tool.pos_m[kind];
        } else if (kind == LW_OUT_COORD) {
            out->joint_coord[out->n_joint] = spec->output[o].coord;
            out->joint_value[out->n_joint++] = sol->config.coord[spec->output[o].coord];
        } else {
            out->orient = LW_ORIENT_QUATERNION;
            lw_quat_from_rot(out->quat, sol->tool.rot);
        }
    }
}

static bool ask_all(row *r, const lw_model *model, const double *drive, lw_work *work)
{
    const lw_spec *spec = lw_model_spec(model);
    static _Thread_local lw_posture_ask readings;
    const lw_forward_answer *forward;
    const lw_inverse_answer *inverse;
    const lw_jacobian_answer *jacobian;
    const lw_margin_answer *margin;
    const lw_reach_answer *reach;
    lw_err err = {.code = LW_OK};
    r->n = 0;
    readings.kind = LW_BY_DRIVES;
    for (size_t d = 0; d < spec->n_drive; d++) {
        readings.has_drive[d] = true;
        readings.drive[d] = drive[d];
    }
    lw_forward_ask forward_ask = {.readings = &readings};
    lw_jacobian_ask jacobian_ask = {.posture = &readings};
    if (lw_forward(&forward, model, &forward_ask, work, &err) != LW_OK) {
        return false;
    }
    keep(r, (double)forward->outcome);
    keep(r, forward->chi_square);
    if (forward->n_solution == 0) {
        return true;
    }
    keep_solution(r, forward->solution, spec->n_drive);
    lw_inverse_ask inverse_ask;
    memset(&inverse_ask, 0, sizeof inverse_ask);
    pose_of(&inverse_ask.pose, spec, forward->solution);
    lw_reach_ask reach_ask = {.pose = inverse_ask.pose};
    lw_margin_min_default(&reach_ask.margin_min, model, false, 0.0);
    if (lw_inverse(&inverse, model, &inverse_ask, work, &err) != LW_OK) {
        return false;
    }
    keep(r, (double)inverse->n_solution);
    for (size_t i = 0; i < inverse->n_solution; i++) {
        keep_solution(r, &inverse->solution[i], spec->n_drive);
    }
    if (lw_jacobian(&jacobian, model, &jacobian_ask, work, &err) != LW_OK) {
        return false;
    }
    for (size_t i = 0; i < jacobian->n_output * jacobian->n_drive; i++) {
        keep(r, jacobian->forward[i]);
    }
    if (lw_margin(&margin, model, 0, NULL, &readings, work, &err) != LW_OK) {
        return false;
    }
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        keep(r, margin->margin[i].value);
    }
    if (lw_reach(&reach, model, &reach_ask, work, &err) != LW_OK) {
        return false;
    }
    keep(r, (double)reach->outcome);
    return true;
}

static void *run(void *context)
{
    thread_job *job = context;
    lw_work *work = NULL;
    job->failed = lw_work_new(&work, job->model, NULL) != LW_OK;
    for (size_t k = 0; k < QUESTIONS && !job->failed; k++) {
        size_t q = (job->first + k) % QUESTIONS;
        job->failed = !ask_all(&job->out[q], job->model, job->drive[q], work);
    }
    lw_work_free(work);
    return NULL;
}

/* Readings about the reference posture; those of spare drives need not agree, which is an
 * answer. */
static void choose(double (*drive)[LW_MAX_DRIVES], const lw_model *model)
{
    const lw_spec *spec = lw_model_spec(model);
    lwt_random random;
    lwt_random_init(&random, 77);
    for (size_t k = 0; k < QUESTIONS; k++) {
        for (size_t d = 0; d < spec->n_drive; d++) {
            drive[k][d] = lwt_random_in(&random, -0.08, 0.08) *
                          (spec->drive[d].turning
                               ? 1.0
                               : lw_model_report(model)->characteristic_length_m);
        }
    }
}

static void ask_in_threads(const char *name)
{
    lwd_document *document = lwt_demo_document(name);
    lw_report *report = calloc(1, sizeof *report);
    row *out = calloc((THREADS + 1) * QUESTIONS, sizeof *out);
    double (*drive)[LW_MAX_DRIVES] = calloc(QUESTIONS, sizeof *drive);
    lw_model *model = NULL;
    thread_job job[THREADS + 1];
    pthread_t thread[THREADS];
    assert_true(report != NULL && out != NULL && drive != NULL);
    assert_int_equal(lw_model_new(&model, &document->spec, 7, report, NULL), LW_OK);
    choose(drive, model);
    for (size_t t = 0; t <= THREADS; t++) {
        job[t] = (thread_job){.model = model,
                              .drive = (const double (*)[LW_MAX_DRIVES])drive,
                              .out = out + t * QUESTIONS,
                              .first = t * QUESTIONS / (THREADS + 1)};
    }
    (void)run(&job[THREADS]); /* alone */
    for (size_t t = 0; t < THREADS; t++) {
        assert_int_equal(pthread_create(&thread[t], NULL, run, &job[t]), 0);
    }
    for (size_t t = 0; t < THREADS; t++) {
        assert_int_equal(pthread_join(thread[t], NULL), 0);
    }
    size_t solved = 0;
    for (size_t t = 0; t < THREADS; t++) {
        assert_false(job[t].failed);
        for (size_t q = 0; q < QUESTIONS; q++) {
            const row *got = &job[t].out[q];
            const row *want = &job[THREADS].out[q];
            assert_int_equal(got->n, want->n);
            assert_memory_equal(got->value, want->value, want->n * sizeof want->value[0]);
            solved += got->n > 10;
        }
    }
    assert_false(job[THREADS].failed);
    assert_true(solved >= THREADS * QUESTIONS / 2); /* most are answered in full */
    lw_model_free(model);
    free(drive);
    free(out);
    free(report);
    lwd_document_free(document);
}

static void threads_get_the_bits_that_one_thread_gets(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_DEMOS; i++) {
        ask_in_threads(lwt_demo_name[i]);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(threads_get_the_bits_that_one_thread_gets),
    };
    lw_init();
    return cmocka_run_group_tests(tests, NULL, NULL);
}
