/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Memory that runs out while a mechanism is made ready for questions: at every single allocation
 * the call says so, gives nothing out and leaves nothing behind (the leak checker watches); with
 * memory there again the same call succeeds. The mechanisms are of every kind the core tells
 * apart; the documents of the demo line go the same way in tests/server. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_making.h"
#include "lwt_subjects.h"

static void a_model_without_memory_is_not_made(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_SUBJECTS; i += 4) {
        lwt_machine *m = lwt_subjects[i].make();
        lwt_making it = {.spec = m->spec, .report = m->report};
        assert_true(lwt_alloc_sweep(lwt_make_model, &it, 2000) >= 5);
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
        lwt_making it = {.model = m->model};
        assert_true(lwt_alloc_sweep(lwt_make_work, &it, 200) >= 10);
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
