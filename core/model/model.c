/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Builds a model step by step; each step may end it with findings. */
#include "../math/vec3.h"
#include "build.h"

#include <stddef.h>
#include <stdlib.h>

static lw_code build_whole(lw_model *m, lw_err *err)
{
    bool none_body[LW_MAX_BODIES] = {false};
    bool none_coord[LW_MAX_COORDS] = {false};
    bool keep[LW_MAX_COORDS] = {false};
    bool lock[LW_MAX_BODIES] = {false};
    double axis[LW_MAX_BODIES][3];
    memset(axis, 0, sizeof axis);
    lwi_keep_coords(keep, m->spec);
    m->report.idle_spins = (int)lwi_idle_spins(lock, axis, m->spec, m->fused);
    lwi_build_ask ask = {.spec = m->spec,
                         .length_m = m->length_m,
                         .body_given = none_body,
                         .coord_given = none_coord,
                         .coord_keep = keep,
                         .spin_lock = lock,
                         .spin_axis = (const double (*)[3])axis,
                         .rods_given = false};
    m->whole = calloc(1, sizeof *m->whole);
    if (m->whole == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    return lwi_system_build(m->whole, &ask, err);
}

static lw_code open_configs(lw_model *m, lw_err *err)
{
    size_t doubles = lwi_config_doubles(m);
    m->config_store = calloc(2 * doubles, sizeof *m->config_store);
    if (m->config_store == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_config_bind(&m->reference, m, m->config_store);
    lwi_config_bind(&m->home, m, m->config_store + doubles);
    for (size_t b = 0; b < m->n_ball; b++) {
        m->reference.ball[b][0] = 1.0;
    }
    for (size_t i = 0; i < m->spec->n_body; i++) {
        lwi_frame_identity(&m->reference.body[i]);
    }
    lwi_config_copy(&m->home, m, &m->reference);
    return LW_OK;
}

static void count_solutions(lw_model *m)
{
    size_t n = 1;
    for (size_t i = 0; i < m->n_limb; i++) {
        size_t b = m->limb[i].branches > 0 ? m->limb[i].branches : 1;
        n = n * b > LWI_MAX_SOLUTIONS ? LWI_MAX_SOLUTIONS : n * b;
    }
    m->max_solutions = m->explicit_inverse && m->completion.usable ? n : n > 16 ? n : 16;
}

static lw_code build_steps(lw_model *m, unsigned long long seed, lw_err *err)
{
    lw_report *report = &m->report;
    const lw_spec *spec = m->spec;
    lwi_fuse(m->fused, spec);
    lwi_check_structure(m, report);
    if (lwi_has_errors(report)) {
        return LW_E_MODEL;
    }
    m->n_coord = lw_spec_coord_count(spec);
    for (size_t j = 0; j < spec->n_joint; j++) {
        m->n_ball += spec->joint[j].type == LW_SPHERICAL;
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            m->drive_moves_coord[spec->drive[d].term[t].coord] = true;
        }
    }
    const lw_figure *length = &spec->needs.characteristic_length_m;
    report->length_from_document = length->asked;
    m->length_m = length->asked ? length->value : lwi_default_length(spec);
    report->characteristic_length_m = m->length_m;
    report->mobility_counted = lwi_counted_mobility(spec, m->fused);
    lwi_samples *samples = NULL;
    lw_code rc = build_whole(m, err);
    if (rc == LW_OK) {
        lwi_check_couplings(m);
        rc = lwi_has_errors(report) ? LW_E_MODEL : LW_OK;
    }
    rc = rc == LW_OK ? open_configs(m, err) : rc;
    rc = rc == LW_OK ? lwi_samples_open(&samples, m, seed, err) : rc;
    rc = rc == LW_OK ? lwi_samples_walk(samples, m, err) : rc;
    if (rc == LW_OK && m->mobility == 0) {
        lwi_find(report, LW_ERROR, "no-mobility", "/joints", "a mechanism that moves",
                 "mobility 0", "The loops leave no freedom: nothing can move (by count %d).",
                 report->mobility_counted);
        rc = LW_E_MODEL;
    }
    if (rc == LW_OK) {
        lwi_find_motion(m, samples);
        lwi_find_determined(m);
        rc = lwi_find_inverse(m, err);
    }
    if (rc == LW_OK) {
        count_solutions(m);
        rc = lwi_validate(m, samples, err);
    }
    lwi_samples_close(samples);
    return rc;
}

/* Copies what is in use: untouched pages of the large tables cost no memory. */
static void copy_used(lw_spec *to, const lw_spec *from)
{
    memcpy(to, from, offsetof(lw_spec, mode));
    memcpy(to->mode, from->mode, from->n_mode * sizeof to->mode[0]);
    to->n_check = from->n_check;
    memcpy(to->check, from->check, from->n_check * sizeof to->check[0]);
}

lw_code lw_model_new(lw_model **out, const lw_spec *spec, unsigned long long seed,
                     lw_report *report, lw_err *err)
{
    *out = NULL;
    memset(report, 0, sizeof *report);
    lw_model *m = calloc(1, sizeof *m);
    lw_spec *copy = calloc(1, sizeof *copy);
    if (m == NULL || copy == NULL) {
        free(m);
        free(copy);
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    copy_used(copy, spec);
    m->spec = copy;
    lw_err local = {0};
    lw_err *e = err != NULL ? err : &local;
    lw_code rc = build_steps(m, seed, e);
    if ((rc == LW_E_LIMIT || rc == LW_E_MODEL) && e->code != LW_OK) {
        lwi_find(&m->report, LW_ERROR, rc == LW_E_LIMIT ? "too-large" : "cannot-be-moved", e->where,
                 NULL, NULL, "%s", e->msg);
    }
    if (rc == LW_E_LIMIT) {
        rc = LW_E_MODEL;
    }
    if (rc == LW_OK && lwi_has_errors(&m->report)) {
        rc = LW_E_MODEL;
    }
    *report = m->report;
    if (rc != LW_OK) {
        lw_model_free(m);
        return rc == LW_E_MODEL ? LW_FAIL(err, rc, "", "the mechanism has errors") : rc;
    }
    *out = m;
    return LW_OK;
}

void lw_model_free(lw_model *m)
{
    if (m == NULL) {
        return;
    }
    free(m->spec);
    free(m->whole);
    free(m->inverse);
    free(m->config_store);
    lwi_limbs_free(m);
    lwi_set_free(m->set[0]);
    lwi_set_free(m->set[1]);
    free(m);
}

const lw_spec *lw_model_spec(const lw_model *model)
{
    return model->spec;
}

const lw_report *lw_model_report(const lw_model *model)
{
    return &model->report;
}
