/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a mechanism and what is given to a closure system: fuse, choose the spanning tree, cut,
 * write rows, number and scale the unknowns. Runs at load only, so it may allocate. */
#include "../math/vec3.h"
#include "build.h"

#include <stdlib.h>

static bool number_vars(lwi_builder *b)
{
    lwi_system *sys = b->sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        lwi_element *el = &sys->element[k];
        size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
        if (el->given) {
            continue;
        }
        if (sys->n_var + n > LWI_MAX_VARS) {
            (void)LW_FAIL(b->err, LW_E_LIMIT, "/joints", "more than %d unknowns", LWI_MAX_VARS);
            return false;
        }
        el->var = (int)sys->n_var;
        for (size_t i = 0; i < n; i++) {
            bool length = el->kind == LWI_SLIDE || (el->kind == LWI_FREE && i < 3);
            double scale = length ? sys->length_m : 1.0;
            if (el->kind == LWI_HELIX) {
                /* A screw counts by its travel, so that many turns are not many lengths. */
                scale = fmax(1.0, fmin(sys->length_m / fmax(fabs(el->pitch), 1e-12), 1e3));
            }
            sys->var_element[sys->n_var] = (int)k;
            sys->var_scale[sys->n_var++] = scale;
        }
    }
    return true;
}

/* Linear rows are scaled so that their largest derivative is one, as geometric rows have it. */
static void scale_linear_rows(lwi_system *sys)
{
    for (size_t i = 0; i < sys->n_row; i++) {
        lwi_row *row = &sys->row[i];
        double size = 0.0;
        for (size_t t = 0; t < row->n_term; t++) {
            int var = sys->element[row->term_element[t]].var;
            double scale = var >= 0 ? sys->var_scale[var] : 1.0;
            size = fmax(size, fabs(row->term_factor[t]) * scale);
        }
        for (size_t t = 0; t < row->n_rod_term; t++) {
            size = fmax(size, fabs(row->rod_factor[t]) * sys->length_m);
        }
        for (size_t t = 0; t < row->n_term && size > 0.0; t++) {
            row->term_factor[t] /= size;
        }
        for (size_t t = 0; t < row->n_rod_term && size > 0.0; t++) {
            row->rod_factor[t] /= size;
        }
    }
}

/* Unknowns that enter only sums of coordinates (a spindle, a gear train) are straight: any step
 * along them is exact. */
static void mark_curved(lwi_builder *b)
{
    lwi_system *sys = b->sys;
    bool curved[LWI_MAX_ELEMENTS] = {false};
    for (size_t i = 0; i < sys->n_row; i++) {
        for (size_t k = 0; sys->row[i].kind != LWI_ROW_LINEAR && k < sys->row[i].n_link; k++) {
            curved[sys->link[sys->row[i].link + k].element] = true;
        }
    }
    for (size_t r = 0; r < b->spec->n_rod; r++) {
        for (size_t k = 0; k < sys->rod[r].n_link; k++) {
            curved[sys->link[sys->rod[r].link + k].element] = true;
        }
    }
    for (size_t t = 0; t < b->spec->n_tool; t++) {
        size_t node = sys->body_node[b->spec->tool[t].body];
        for (size_t k = 0; k < sys->n_element; k++) {
            curved[k] = curved[k] || ((b->ancestor[node][k / 64] >> (k % 64)) & 1);
        }
    }
    for (size_t v = 0; v < sys->n_var; v++) {
        sys->var_curved[v] = curved[sys->var_element[v]];
    }
}

lw_code lwi_system_build(lwi_system *out, const lwi_build_ask *ask, lw_err *err)
{
    lwi_builder *b = calloc(1, sizeof *b);
    if (b == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    memset(out, 0, sizeof *out);
    lw_err local = {0};
    b->sys = out;
    b->ask = ask;
    b->spec = ask->spec;
    b->err = err != NULL ? err : &local;
    out->spec = ask->spec;
    out->length_m = ask->length_m;
    for (size_t i = 0; i < LW_MAX_COORDS; i++) {
        out->coord_element[i] = -1;
    }
    for (size_t i = 0; i < LW_MAX_BALLS; i++) {
        out->ball_element[i] = -1;
    }
    lwi_fuse(b->root, ask->spec);
    lwi_builder_known(b);
    lwi_builder_choose(b);
    bool good = lwi_builder_grow(b) && lwi_builder_cuts(b) && lwi_builder_rods(b) &&
                lwi_builder_couplings(b) && lwi_builder_spin_locks(b) && number_vars(b);
    if (good) {
        mark_curved(b);
    }
    free(b);
    if (!good) {
        return err != NULL && err->code != LW_OK ? err->code : LW_E_LIMIT;
    }
    scale_linear_rows(out);
    lwi_system_blocks(out);
    return LW_OK;
}
