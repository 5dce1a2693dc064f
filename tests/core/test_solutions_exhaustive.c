/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lists of all solutions by identities, over random targets: every solution closes, no two are one,
 * the posture the target was made from is among them, real ones are missing in pairs only, the
 * complex ones keep their number, and an answer has the same bits whenever and wherever it is
 * asked. LWT_SHARE scales the number of targets. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_subjects.h"

#include <math.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

enum { SEED = 3, KEEP = 64, TARGETS = 150 };

static const char *const SUBJECTS[] = {"six-struts", "planar-struts", "three-rrr",
                                       "four-rrr",   "three-rps",     "skew-arm"};
enum { N_SUBJECT = 6 };

typedef struct list {
    size_t n;
    lw_found found;
    bool complete;
    double drive[KEEP][LW_MAX_DRIVES];
    lw_frame tool[KEEP];
} list;

static const lwt_subject *subject(const char *name)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            return &lwt_subjects[i];
        }
    }
    lwt_fail("no subject is called %s", name);
    return NULL;
}

static void keep(list *out, const lw_solution *solution, size_t n, const lw_found *found,
                 bool complete)
{
    assert_true(n <= KEEP);
    memset(out, 0, sizeof *out);
    out->n = n;
    out->found = *found;
    out->complete = complete;
    for (size_t i = 0; i < n; i++) {
        memcpy(out->drive[i], solution[i].drive, sizeof out->drive[i]);
        out->tool[i] = solution[i].tool;
    }
}

/* A target and what it was made from. */
typedef struct target {
    bool inverse;
    lw_frame pose;
    double drive[LW_MAX_DRIVES];
} target;

/* Readings at random; with spare drives those of a random pose, so that they agree. */
static bool make_target(target *out, lwt_machine *m, const lwt_subject *s, lwt_random *rng)
{
    const lw_spec *spec = m->spec;
    out->inverse = lwt_inverse_set(m)->present;
    if (spec->n_drive == (size_t)lw_model_report(m->model)->mobility) {
        for (size_t d = 0; d < spec->n_drive; d++) {
            out->drive[d] = lwt_random_in(rng, -s->span, s->span);
        }
        lw_forward_ask ask = {.readings = lwt_by_drives(m, out->drive, NULL)};
        const lw_forward_answer *a = NULL;
        assert_int_equal(lw_forward(&a, m->model, &ask, m->work, &m->err), LW_OK);
        if (a->n_solution == 0) {
            return false;
        }
        out->pose = a->solution[0].tool;
        return true;
    }
    const double shift[3] = {lwt_random_in(rng, -s->span, s->span),
                             lwt_random_in(rng, -s->span, s->span), 0.0};
    lw_frame turn = lwt_frame_turn((const double[3]){0, 0, 1}, spec->tool[0].frame.pos_m,
                                   lwt_random_in(rng, -s->span, s->span));
    lw_frame pose = lwt_frame_mul(&turn, &spec->tool[0].frame);
    for (size_t i = 0; i < 3; i++) {
        pose.pos_m[i] += shift[i];
    }
    const lw_inverse_answer *b = lwt_inverse(m, &pose, NULL, NULL, NULL);
    if (b->n_solution == 0) {
        return false;
    }
    size_t pick = lwt_random_index(rng, b->n_solution);
    memcpy(out->drive, b->solution[pick].drive, sizeof out->drive);
    out->pose = pose;
    return true;
}

static void ask(list *out, lwt_machine *m, const target *t)
{
    if (t->inverse) {
        const lw_inverse_answer *a = lwt_inverse(m, &t->pose, NULL, NULL, NULL);
        lwt_check_solutions(m, a->solution, a->n_solution);
        keep(out, a->solution, a->n_solution, &a->found, a->complete);
    } else {
        const lw_forward_answer *a = lwt_forward_all(m, t->drive);
        lwt_check_solutions(m, a->solution, a->n_solution);
        keep(out, a->solution, a->n_solution, &a->found, a->complete);
    }
}

/* The posture the target was made from: by its readings for an arm, by its tool pose else. */
static bool holds_origin(const list *l, const target *t, const lw_spec *spec)
{
    for (size_t i = 0; i < l->n; i++) {
        double off = 0.0;
        for (size_t d = 0; d < spec->n_drive; d++) {
            double gap = l->drive[i][d] - t->drive[d];
            off = fmax(off, fabs(spec->drive[d].turning ? lwt_wrap(gap) : gap));
        }
        if (off < 1e-6 && lwt_frame_distance(&l->tool[i], &t->pose) < 1e-6 &&
            lwt_frame_angle(&l->tool[i], &t->pose) < 1e-6) {
            return true;
        }
    }
    return false;
}

typedef struct tally {
    size_t targets, paths, unsettled;
} tally;

static void check_subject(const char *name, tally *sum)
{
    const lwt_subject *s = subject(name);
    lwt_machine *m = s->make();
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    const lw_set_info *set =
        lwt_inverse_set(m)->present ? lwt_inverse_set(m) : lwt_forward_set(m);
    assert_true(set->closed);
    bool spare = m->spec->n_drive > (size_t)lw_model_report(m->model)->mobility;
    list *now = calloc(3, sizeof *now);
    assert_non_null(now);
    target first;
    lwt_random rng;
    lwt_random_init(&rng, 31);
    size_t made = 0;
    for (int k = 0; k < lwt_share(TARGETS); k++) {
        target t;
        if (!make_target(&t, m, s, &rng)) {
            continue;
        }
        ask(&now[0], m, &t);
        sum->targets++;
        sum->paths += set->solutions;
        sum->unsettled += (size_t)now[0].found.not_converged;
        if (made++ == 0) {
            first = t;
            now[2] = now[0];
        }
        ask(&now[1], m, &t);
        assert_memory_equal(&now[0], &now[1], sizeof now[0]);
        if (now[0].found.not_converged > 0) {
            assert_false(now[0].complete);
            continue;
        }
        assert_true(now[0].complete);
        assert_int_equal(now[0].found.complex_count, (int)set->solutions);
        /* Complex ones come in conjugate pairs; what spare readings contradict may be left out. */
        assert_true(spare || (now[0].found.real - now[0].found.complex_count) % 2 == 0);
        if (!holds_origin(&now[0], &t, m->spec)) {
            lwt_fail("%s: the posture of target %d is not among %zu solutions", name, k, now[0].n);
        }
    }
    assert_true(made > 0);
    ask(&now[1], m, &first); /* after all the others */
    assert_memory_equal(&now[2], &now[1], sizeof now[1]);
    free(now);
    lwt_machine_free(m);
}

static void every_list_holds_over_random_targets(void **state)
{
    (void)state;
    tally sum = {0, 0, 0};
    for (size_t i = 0; i < N_SUBJECT; i++) {
        check_subject(SUBJECTS[i], &sum);
    }
    print_message("%zu targets, %zu paths, %zu unsettled\n", sum.targets, sum.paths,
                  sum.unsettled);
    assert_true(sum.unsettled <= 1 + sum.paths / 100000);
}

/* ---- threads --------------------------------------------------------------------------------- */

typedef struct thread_job {
    const lw_model *model;
    lw_work *work;
    list answer[8];
    double drive[8][6];
    bool good;
} thread_job;

static void *run_job(void *context)
{
    thread_job *job = context;
    job->good = true;
    for (size_t k = 0; k < 8; k++) {
        lw_posture_ask readings = {.kind = LW_BY_DRIVES};
        for (size_t d = 0; d < 6; d++) {
            readings.has_drive[d] = true;
            readings.drive[d] = job->drive[k][d];
        }
        lw_forward_ask question = {.readings = &readings, .all = true};
        const lw_forward_answer *a = NULL;
        lw_err err = {0};
        job->good = job->good && lw_forward(&a, job->model, &question, job->work, &err) == LW_OK &&
                    a->n_solution <= KEEP;
        if (job->good) {
            keep(&job->answer[k], a->solution, a->n_solution, &a->found, a->complete);
        }
    }
    return NULL;
}

static void two_threads_get_the_same_bits(void **state)
{
    (void)state;
    lwt_machine *m = subject("six-struts")->make();
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    thread_job *job = calloc(2, sizeof *job);
    assert_non_null(job);
    lwt_random rng;
    lwt_random_init(&rng, 32);
    for (size_t k = 0; k < 8; k++) {
        for (size_t d = 0; d < 6; d++) {
            job[0].drive[k][d] = lwt_random_in(&rng, -0.1, 0.1);
        }
    }
    memcpy(job[1].drive, job[0].drive, sizeof job[0].drive);
    pthread_t thread[2];
    for (size_t i = 0; i < 2; i++) {
        job[i].model = m->model;
        assert_int_equal(lw_work_new(&job[i].work, m->model, &m->err), LW_OK);
    }
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(pthread_create(&thread[i], NULL, run_job, &job[i]), 0);
    }
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(pthread_join(thread[i], NULL), 0);
        assert_true(job[i].good);
    }
    assert_memory_equal(job[0].answer, job[1].answer, sizeof job[0].answer);
    lw_work_free(job[0].work);
    lw_work_free(job[1].work);
    free(job);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_list_holds_over_random_targets),
        cmocka_unit_test(two_threads_get_the_same_bits),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
