/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The room that solving needs, taken once when a work object or a model is made and given back with
 * it. */
#include "newton.h"

#include <stdlib.h>
#include <string.h>

lw_code lwi_newton_work_open(lwi_newton_work *nw, size_t n_var, size_t n_row, size_t n_goal,
                             lw_err *err)
{
    size_t side = n_var > n_row ? n_var : n_row;
    side = side > n_goal ? side : n_goal;
    memset(nw, 0, sizeof *nw);
    nw->n_var = n_var;
    nw->n_row = n_row;
    nw->n_goal = n_goal;
    nw->rows = calloc(n_row * n_var + 1, sizeof *nw->rows);
    nw->res = calloc(side + 1, sizeof *nw->res);
    nw->qr = calloc(n_row * n_var + 1, sizeof *nw->qr);
    nw->tau = calloc(side + 1, sizeof *nw->tau);
    nw->perm = calloc(side + 1, sizeof *nw->perm);
    nw->goals = calloc(n_goal * n_var + 1, sizeof *nw->goals);
    nw->goal_res = calloc(side + 1, sizeof *nw->goal_res);
    nw->reduced = calloc(n_goal * n_var + 1, sizeof *nw->reduced);
    nw->tau2 = calloc(side + 1, sizeof *nw->tau2);
    nw->perm2 = calloc(side + 1, sizeof *nw->perm2);
    nw->step = calloc(side + 1, sizeof *nw->step);
    nw->vec = calloc(2 * side + 2, sizeof *nw->vec);
    if (!nw->rows || !nw->res || !nw->qr || !nw->tau || !nw->perm || !nw->goals || !nw->goal_res ||
        !nw->reduced || !nw->tau2 || !nw->perm2 || !nw->step || !nw->vec) {
        lwi_newton_work_close(nw);
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    return LW_OK;
}

void lwi_newton_work_close(lwi_newton_work *nw)
{
    free(nw->rows);
    free(nw->res);
    free(nw->qr);
    free(nw->tau);
    free(nw->perm);
    free(nw->goals);
    free(nw->goal_res);
    free(nw->reduced);
    free(nw->tau2);
    free(nw->perm2);
    free(nw->step);
    free(nw->vec);
    memset(nw, 0, sizeof *nw);
}
