/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Memory that runs out while a mechanism is made ready for questions: at every single allocation
 * the call says so, gives nothing out and leaves nothing behind (the leak checker watches); with
 * memory there again the same call succeeds. The mechanisms are of every kind the core tells
 * apart; the documents of the demo line go the same way in tests/server. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_subjects.h"

#include <stdlib.h>
#include <string.h>

typedef struct making {
    const lw_spec *spec;
    lw_report *report;
    lw_model *model;
    size_t good;
} making;

static void make_model(void *context, size_t n)
{
    making *it = context;
    lw_err err = {.code = LW_OK};
    lw_model *model = (lw_model *)context; /* anything but NULL */
    (void)n;
    lw_code code = lw_model_new(&model, it->spec, 7, it->report, &err);
    if (code == LW_OK) {
        it->good++;
        lw_model_free(model);
    } else {
        assert_int_equal(code, LW_E_MEMORY);
        assert_int_equal(err.code, LW_E_MEMORY);
        assert_null(model);
    }
}

static void make_work(void *context, size_t n)
{
    making *it = context;
    lw_err err = {.code = LW_OK};
    lw_work *work = (lw_work *)context;
    (void)n;
    lw_code code = lw_work_new(&work, it->model, &err);
    if (code == LW_OK) {
        it->good++;
        lw_work_free(work);
    } else {
        assert_int_equal(code, LW_E_MEMORY);
        assert_null(work);
    }
}

static void a_model_without_memory_is_not_made(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_SUBJECTS; i += 4) {
        lwt_machine *m = lwt_subjects[i].make();
        making it = {.spec = m->spec, .report = m->report};
        assert_true(lwt_alloc_sweep(make_model, &it, 2000) >= 5);
        assert_true(it.good >= 1);
        lwt_machine_free(m);
    }
}

static void a_work_object_without_memory_is_not_made(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        lwt_machine *m = lwt_subjects[i].make();
        lwt_machine_load(m);
        making it = {.model = m->model};
        assert_true(lwt_alloc_sweep(make_work, &it, 200) >= 10);
        assert_int_equal(it.good, 1);
        lwt_machine_free(m);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_model_without_memory_is_not_made),
        cmocka_unit_test(a_work_object_without_memory_is_not_made),
    };
    lw_init();
    return cmocka_run_group_tests(tests, NULL, NULL);
}
