/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Scratch of the singularity analysis, allocated with a work object. Called by work.c. */
#include "singular.h"

#include <stdlib.h>

lw_code lwi_singular_work_open(lwi_singular_work **out, size_t n_var, lw_err *err)
{
    size_t rows = n_var > LW_MAX_DRIVES ? n_var : LW_MAX_DRIVES;
    lwi_singular_work *s = calloc(1, sizeof *s);
    *out = s;
    if (s == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    s->store = calloc(2 * (rows * n_var + n_var * n_var) + 1, sizeof *s->store);
    if (s->store == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    for (size_t i = 0; i < 2; i++) {
        s->of[i].u = s->store + i * (rows * n_var + n_var * n_var);
        s->of[i].v = s->of[i].u + rows * n_var;
    }
    return LW_OK;
}

void lwi_singular_work_close(lwi_singular_work *s)
{
    if (s != NULL) {
        free(s->store);
        free(s);
    }
}
