/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Keeping solution sets: what is saved and loaded answers with the same bits, what is damaged is
 * refused, and sets depend on their seed alone. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_subjects.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { SEED = 11, TARGETS = 5 };

static lwt_machine *subject(const char *name)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            return lwt_subjects[i].make();
        }
    }
    lwt_fail("no subject is called %s", name);
    return NULL;
}

typedef struct blob {
    unsigned char *data;
    size_t size;
} blob;

static blob save(const lwt_machine *m)
{
    blob out = {.size = lw_model_sets_size(m->model)};
    assert_true(out.size > 0);
    out.data = calloc(out.size, 1);
    assert_non_null(out.data);
    lw_model_sets_save(out.data, m->model);
    return out;
}

/* A fresh machine with a kept set; what loading said goes to *code. */
static lwt_machine *loaded(const char *name, unsigned long long seed, const void *data, size_t size,
                           lw_code *code)
{
    lwt_machine *m = subject(name);
    assert_int_equal(lwt_machine_report(m), LW_OK);
    *code = lw_model_sets_load(m->model, seed, data, size, &m->err);
    assert_int_equal(lw_work_new(&m->work, m->model, &m->err), LW_OK);
    return m;
}

static void random_drives(double *drive, lwt_random *rng, const lwt_machine *m)
{
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        drive[d] = lwt_random_in(rng, -0.1, 0.1);
    }
}

/* Both lists of drives, tools and coordinates, bit by bit. */
static void same_lists(const lwt_machine *m, const lw_solution *a, size_t n, const lwt_copy *b,
                       size_t n_b)
{
    assert_int_equal(n, n_b);
    for (size_t i = 0; i < n; i++) {
        assert_memory_equal(a[i].drive, b[i].drive, m->spec->n_drive * sizeof(double));
        assert_memory_equal(&a[i].tool, &b[i].tool, sizeof a[i].tool);
        assert_memory_equal(a[i].config.coord, b[i].coord,
                            lw_spec_coord_count(m->spec) * sizeof(double));
    }
}

static size_t keep_list(lwt_copy *out, const lwt_machine *m, const lw_forward_answer *a)
{
    assert_true(a->n_solution <= 64);
    for (size_t i = 0; i < a->n_solution; i++) {
        lwt_keep(&out[i], m, &a->solution[i]);
    }
    return a->n_solution;
}

static void same_answers(lwt_machine *a, lwt_machine *b)
{
    lwt_copy *kept = calloc(64, sizeof *kept);
    assert_non_null(kept);
    lwt_random rng;
    lwt_random_init(&rng, 5);
    for (int k = 0; k < TARGETS; k++) {
        double drive[LW_MAX_DRIVES];
        random_drives(drive, &rng, a);
        const lw_forward_answer *one = lwt_forward_all(a, drive);
        size_t n = keep_list(kept, a, one);
        lw_found found = one->found;
        bool complete = one->complete;
        const lw_forward_answer *two = lwt_forward_all(b, drive);
        assert_memory_equal(&found, &two->found, sizeof found);
        assert_int_equal(complete, two->complete);
        same_lists(b, two->solution, two->n_solution, kept, n);
    }
    free(kept);
}

static void kept_sets_answer_with_the_same_bits(void **state)
{
    (void)state;
    static const char *const names[] = {"planar-struts", "five-bar", "three-rrr", "six-struts"};
    for (size_t i = 0; i < 4; i++) {
        lwt_machine *m = subject(names[i]);
        lwt_machine_load_prepared(m, SEED, LWT_PATHS);
        blob kept = save(m);
        lw_code code;
        lwt_machine *again = loaded(names[i], SEED, kept.data, kept.size, &code);
        assert_int_equal(code, LW_OK);
        assert_memory_equal(lwt_forward_set(m), lwt_forward_set(again), sizeof(lw_set_info));
        same_answers(m, again);
        blob second = save(again);
        assert_int_equal(second.size, kept.size);
        assert_memory_equal(second.data, kept.data, kept.size);
        free(second.data);
        free(kept.data);
        lwt_machine_free(again);
        lwt_machine_free(m);
    }
}

/* An arm's set is of the inverse kind. */
static void a_kept_inverse_set_answers_with_the_same_bits(void **state)
{
    (void)state;
    lwt_machine *m = subject("skew-arm");
    lwt_machine_load_prepared(m, SEED, 400); /* any members do here, all 16 or fewer */
    assert_true(lwt_inverse_set(m)->present);
    blob kept = save(m);
    lw_code code;
    lwt_machine *again = loaded("skew-arm", SEED, kept.data, kept.size, &code);
    assert_int_equal(code, LW_OK);
    assert_memory_equal(lwt_inverse_set(m), lwt_inverse_set(again), sizeof(lw_set_info));
    lwt_copy *list = calloc(64, sizeof *list);
    assert_non_null(list);
    const double drive[6] = {0.3, -0.2, 0.4, 0.1, -0.5, 0.2};
    lw_frame pose = lwt_forward(m, drive, NULL)->solution[0].tool;
    const lw_inverse_answer *a = lwt_inverse(m, &pose, NULL, NULL, NULL);
    size_t n = a->n_solution;
    assert_true(n <= 64);
    for (size_t i = 0; i < n; i++) {
        lwt_keep(&list[i], m, &a->solution[i]);
    }
    const lw_inverse_answer *b = lwt_inverse(again, &pose, NULL, NULL, NULL);
    same_lists(again, b->solution, b->n_solution, list, n);
    free(list);
    free(kept.data);
    lwt_machine_free(again);
    lwt_machine_free(m);
}

static void the_seed_alone_decides_the_bits(void **state)
{
    (void)state;
    lwt_machine *m[3];
    blob kept[3];
    for (size_t i = 0; i < 3; i++) {
        m[i] = subject("planar-struts");
        lwt_machine_load_prepared(m[i], i < 2 ? SEED : SEED + 1, LWT_PATHS);
        kept[i] = save(m[i]);
    }
    assert_int_equal(kept[0].size, kept[1].size);
    assert_memory_equal(kept[0].data, kept[1].data, kept[0].size);
    assert_int_equal(kept[0].size, kept[2].size);
    assert_true(memcmp(kept[0].data, kept[2].data, kept[0].size) != 0);
    /* Another seed: other members, the same solutions. */
    lwt_random rng;
    lwt_random_init(&rng, 6);
    lwt_copy *list = calloc(64, sizeof *list);
    assert_non_null(list);
    for (int k = 0; k < 4 * TARGETS; k++) {
        double drive[LW_MAX_DRIVES];
        random_drives(drive, &rng, m[0]);
        size_t n = keep_list(list, m[0], lwt_forward_all(m[0], drive));
        const lw_forward_answer *b = lwt_forward_all(m[2], drive);
        assert_int_equal(b->n_solution, n);
        for (size_t i = 0; i < n; i++) {
            assert_true(lwt_find_tool(b->solution, n, &list[i].tool, 1e-9, 1e-9) < n);
        }
    }
    free(list);
    for (size_t i = 0; i < 3; i++) {
        free(kept[i].data);
        lwt_machine_free(m[i]);
    }
}

/* A raised flag ends the work at once; the model then answers without a set. */
static void a_raised_flag_ends_the_making(void **state)
{
    lwt_machine *m = subject("planar-struts");
    atomic_bool flag = true;
    (void)state;
    assert_int_equal(lwt_machine_report(m), LW_OK);
    assert_int_equal(lw_model_prepare(m->model, SEED, 1000000, &flag, &m->err), LW_E_ABORTED);
    assert_int_equal(lw_model_sets_size(m->model), 0);
    atomic_store(&flag, false);
    assert_int_equal(lw_model_prepare(m->model, SEED, 1000000, &flag, &m->err), LW_OK);
    assert_true(lw_model_sets_size(m->model) > 0);
    lwt_machine_free(m);
}

static void a_set_cut_short_is_refused(void **state)
{
    (void)state;
    lwt_machine *m = subject("planar-struts");
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    blob kept = save(m);
    size_t step = kept.size / (size_t)lwt_share(40) + 1;
    for (size_t n = 1; n < kept.size; n += n < 80 ? 7 : step) {
        /* An own block of the exact size, so that reading beyond it is seen. */
        unsigned char *cut = malloc(n);
        assert_non_null(cut);
        memcpy(cut, kept.data, n);
        lw_code code;
        lwt_machine *again = loaded("planar-struts", SEED, cut, n, &code);
        assert_int_equal(code, LW_E_MODEL);
        assert_true(again->err.msg[0] != '\0');
        assert_false(lwt_forward_set(again)->present);
        free(cut);
        lwt_machine_free(again);
    }
    lw_code code; /* nothing at all is no set and no fault */
    lwt_machine *none = loaded("planar-struts", SEED, kept.data, 0, &code);
    assert_int_equal(code, LW_OK);
    assert_false(lwt_forward_set(none)->present);
    lwt_machine_free(none);
    free(kept.data);
    lwt_machine_free(m);
}

static void a_flipped_bit_anywhere_is_refused(void **state)
{
    (void)state;
    lwt_machine *m = subject("planar-struts");
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    blob kept = save(m);
    size_t count = 0;
    size_t step = kept.size / (size_t)lwt_share(400) + 1;
    for (size_t n = 0; n < kept.size; n += n < 96 ? 1 : step) {
        kept.data[n] ^= (unsigned char)(1U << (n % 8));
        lw_code code;
        lwt_machine *again = loaded("planar-struts", SEED, kept.data, kept.size, &code);
        assert_int_equal(code, LW_E_MODEL);
        assert_true(again->err.msg[0] != '\0');
        assert_false(lwt_forward_set(again)->present);
        lwt_machine_free(again);
        kept.data[n] ^= (unsigned char)(1U << (n % 8));
        count++;
    }
    assert_true(count >= 96);
    free(kept.data);
    lwt_machine_free(m);
}

static void the_set_of_another_mechanism_is_refused(void **state)
{
    (void)state;
    lwt_machine *m = subject("planar-struts");
    lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    blob kept = save(m);
    static const char *const others[] = {"five-bar", "six-struts", "three-rrr", "skew-arm"};
    for (size_t i = 0; i < 4; i++) {
        lw_code code;
        lwt_machine *other = loaded(others[i], SEED, kept.data, kept.size, &code);
        assert_int_equal(code, LW_E_MODEL);
        lwt_machine_free(other);
    }
    /* The same kind of mechanism with one rod's foot a millimetre off. */
    lwt_machine *near = subject("planar-struts");
    near->spec->rod[1].end_m[0][0] += 1e-3;
    assert_int_equal(lwt_machine_report(near), LW_OK);
    assert_int_equal(lw_model_sets_load(near->model, SEED, kept.data, kept.size, &near->err),
                     LW_E_MODEL);
    lwt_machine_free(near);
    free(kept.data);
    lwt_machine_free(m);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(kept_sets_answer_with_the_same_bits),
        cmocka_unit_test(a_kept_inverse_set_answers_with_the_same_bits),
        cmocka_unit_test(the_seed_alone_decides_the_bits),
        cmocka_unit_test(a_raised_flag_ends_the_making),
        cmocka_unit_test(a_set_cut_short_is_refused),
        cmocka_unit_test(a_flipped_bit_anywhere_is_refused),
        cmocka_unit_test(the_set_of_another_mechanism_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
