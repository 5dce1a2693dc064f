/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Work objects: every buffer a question needs, allocated once. */
#include "../math/vec3.h"
#include "../proof/prove.h"
#include "../solve/newton.h"
#include "distance.h"
#include "singular.h"

#include <stdlib.h>

size_t lwi_config_doubles(const lw_model *model)
{
    return model->n_coord + 4 * model->n_ball + model->spec->n_body * (sizeof(lw_frame) / 8);
}

void lwi_config_bind(lw_config *config, const lw_model *model, double *store)
{
    config->coord = store;
    config->ball = (double (*)[4])(void *)(store + model->n_coord);
    config->body = (lw_frame *)(void *)(store + model->n_coord + 4 * model->n_ball);
}

void lwi_config_copy(lw_config *to, const lw_model *model, const lw_config *from)
{
    if (to->coord != from->coord) {
        memcpy(to->coord, from->coord, lwi_config_doubles(model) * sizeof(double));
    }
}

void lwi_solution_copy(lw_solution *to, const lw_model *model, const lw_solution *from)
{
    lw_config keep = to->config;
    *to = *from;
    to->config = keep;
    lwi_config_copy(&to->config, model, &from->config);
}

static lw_code open_all(lw_work *w, const lw_model *m, lw_err *err)
{
    size_t n_slot = m->max_solutions + LWI_SPARE;
    size_t doubles = lwi_config_doubles(m);
    size_t n = m->whole->n_var;
    size_t side = n > m->whole->n_row ? n : m->whole->n_row;
    side = side > 64 ? side : 64;
    w->model = m;
    w->solution = calloc(n_slot, sizeof *w->solution);
    w->config_store = calloc((n_slot + 2) * doubles, sizeof *w->config_store);
    w->limb_result = calloc(m->n_limb * LWI_MAX_BRANCHES + 1, sizeof *w->limb_result);
    w->k = calloc(n * n + 1, sizeof *w->k);
    w->ak = calloc(LW_MAX_DRIVES * n + 1, sizeof *w->ak);
    w->tk = calloc(LW_MAX_OUTPUTS * n + 1, sizeof *w->tk);
    w->twist = calloc(6 * n + 1, sizeof *w->twist);
    w->index = calloc(side + 1, sizeof *w->index);
    w->goal = calloc(LWI_MAX_GOALS, sizeof *w->goal);
    w->goal2 = calloc(LWI_MAX_GOALS, sizeof *w->goal2);
    w->goal3 = calloc(LWI_MAX_GOALS, sizeof *w->goal3);
    bool good = w->solution && w->config_store && w->limb_result && w->k && w->ak && w->tk &&
                w->twist && w->index && w->goal && w->goal2 && w->goal3;
    for (size_t i = 0; i < 4; i++) {
        w->matrix[i] = calloc(side * side + 1, sizeof **w->matrix);
        w->vector[i] = calloc(2 * side + 1, sizeof **w->vector);
        good = good && w->matrix[i] && w->vector[i];
    }
    if (!good) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    for (size_t i = 0; i < n_slot; i++) {
        lwi_config_bind(&w->solution[i].config, m, w->config_store + i * doubles);
    }
    lwi_config_bind(&w->scratch, m, w->config_store + n_slot * doubles);
    lwi_config_bind(&w->scratch2, m, w->config_store + (n_slot + 1) * doubles);
    size_t points = 0;
    for (int k = 0; k < 2; k++) {
        const lwi_set *set = m->set[k];
        size_t need = set != NULL ? set->fibre.n_solution * set->fibre.pack + 1 : 0;
        points = points > need ? points : need;
    }
    if (points > 0) {
        w->set = calloc(1, sizeof *w->set);
        if (w->set != NULL) {
            w->set->ends = calloc(points, sizeof *w->set->ends);
        }
        if (w->set == NULL || w->set->ends == NULL) {
            return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
        }
    }
    lw_code rc = lwi_singular_work_open(&w->singular_work, n, err);
    if (rc != LW_OK) {
        return rc;
    }
    w->distance_work = calloc(1, sizeof *w->distance_work);
    if (w->distance_work == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    rc = lwi_prove_new(&w->prove, m, NULL, err);
    if (rc == LW_OK) {
        rc = lwi_prove_new(&w->prove_joints, m, w->prove, err);
    }
    if (rc != LW_OK) {
        return rc;
    }
    return lwi_newton_work_open(&w->newton, n, m->whole->n_row, LWI_MAX_GOALS, err);
}

lw_code lw_work_new(lw_work **out, const lw_model *model, lw_err *err)
{
    *out = NULL;
    lw_work *w = calloc(1, sizeof *w);
    if (w == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lw_code rc = open_all(w, model, err);
    if (rc != LW_OK) {
        lw_work_free(w);
        return rc;
    }
    *out = w;
    return LW_OK;
}

void lw_work_free(lw_work *w)
{
    if (w == NULL) {
        return;
    }
    free(w->solution);
    free(w->config_store);
    free(w->distance_work);
    free(w->limb_result);
    lwi_prove_free(w->prove_joints);
    lwi_prove_free(w->prove);
    lwi_singular_work_close(w->singular_work);
    free(w->k);
    free(w->ak);
    free(w->tk);
    free(w->twist);
    free(w->index);
    free(w->goal);
    free(w->goal2);
    free(w->goal3);
    for (size_t i = 0; i < 4; i++) {
        free(w->matrix[i]);
        free(w->vector[i]);
    }
    lwi_newton_work_close(&w->newton);
    if (w->set != NULL) {
        free(w->set->ends);
        free(w->set);
    }
    free(w);
}

const lw_spec_tool *lwi_tool(const lw_model *model, size_t tool, const lw_spec_tool *written,
                             lw_err *err)
{
    if (written != NULL) {
        return written;
    }
    if (tool >= model->spec->n_tool) {
        (void)LW_FAIL(err, LW_E_ARGUMENT, "/tool", "no such tool");
        return NULL;
    }
    return &model->spec->tool[tool];
}

void lwi_tool_pose(lw_frame *pose, const lw_spec_tool *tool, const lw_config *config)
{
    lwi_frame_mul(pose, &config->body[tool->body], &tool->frame);
}
