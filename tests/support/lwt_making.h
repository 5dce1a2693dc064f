/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Steps for lwt_alloc_sweep: a model made from a spec, a work object made for a model. Where an
 * allocation failed, the call says that memory is out and gives nothing; otherwise `good` counts.
 * Included by test_*.c only. */
#ifndef LWT_MAKING_H
#define LWT_MAKING_H

#include <leeway/leeway.h>

#include "lwt.h"

typedef struct lwt_making {
    const lw_spec *spec;
    lw_report *report;
    const lw_model *model;
    size_t good;
} lwt_making;

static inline void lwt_make_model(void *context, size_t n)
{
    lwt_making *it = context;
    lw_err err = {.code = LW_OK};
    lw_model *model = (lw_model *)context; /* anything but NULL */
    lw_code code = lw_model_new(&model, it->spec, 7, it->report, &err);
    if (code == LW_OK) {
        it->good++;
        lw_model_free(model);
        return;
    }
    if (code != LW_E_MEMORY) {
        lwt_fail("allocation %zu: %s, %s", n, lw_code_text(code), err.msg);
    }
    assert_int_equal(err.code, LW_E_MEMORY);
    assert_null(model);
}

static inline void lwt_make_work(void *context, size_t n)
{
    lwt_making *it = context;
    lw_err err = {.code = LW_OK};
    lw_work *work = (lw_work *)context;
    lw_code code = lw_work_new(&work, it->model, &err);
    if (code == LW_OK) {
        it->good++;
        lw_work_free(work);
        return;
    }
    if (code != LW_E_MEMORY) {
        lwt_fail("allocation %zu: %s, %s", n, lw_code_text(code), err.msg);
    }
    assert_null(work);
}

#endif
