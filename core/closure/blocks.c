/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A closure system once it is built: which rows share unknowns, rods that become equations, rows
 * that leave the solved ones. Called while a model is loaded; allocates nothing. */
#include "../math/vec3.h"
#include "build.h"

static void join(size_t *group, int *first, int var)
{
    if (var < 0) {
        return;
    }
    if (*first < 0) {
        *first = var;
        return;
    }
    size_t a = lwi_union_find(group, (size_t)*first);
    size_t b = lwi_union_find(group, (size_t)var);
    group[a > b ? a : b] = a > b ? b : a;
}

static int row_vars(const lwi_system *sys, const lwi_row *row, size_t *group)
{
    int first = -1;
    for (size_t k = 0; k < row->n_link; k++) {
        join(group, &first, sys->element[sys->link[row->link + k].element].var);
    }
    for (size_t t = 0; t < row->n_term; t++) {
        join(group, &first, sys->element[row->term_element[t]].var);
    }
    for (size_t t = 0; t < row->n_rod_term; t++) {
        const lwi_rod_info *rod = &sys->rod[row->rod_term[t]];
        for (size_t k = 0; k < rod->n_link; k++) {
            join(group, &first, sys->element[sys->link[rod->link + k].element].var);
        }
    }
    return first;
}

void lwi_system_blocks(lwi_system *sys)
{
    size_t group[LWI_MAX_VARS];
    int number[LWI_MAX_VARS];
    for (size_t i = 0; i < sys->n_var; i++) {
        group[i] = i;
        number[i] = -1;
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        /* The tangents of one ball or free body belong together. */
        const lwi_element *el = &sys->element[k];
        int first = -1;
        size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
        for (size_t i = 0; i < n && el->var >= 0; i++) {
            join(group, &first, el->var + (int)i);
        }
    }
    int first[LWI_MAX_ROWS];
    for (size_t i = 0; i < sys->n_row; i++) {
        first[i] = row_vars(sys, &sys->row[i], group);
    }
    sys->n_block = 0;
    for (size_t i = 0; i < sys->n_row; i++) {
        if (first[i] < 0) {
            sys->row[i].block = -1;
            continue;
        }
        size_t g = lwi_union_find(group, (size_t)first[i]);
        if (number[g] < 0) {
            number[g] = (int)sys->n_block++;
        }
        sys->row[i].block = number[g];
    }
}

void lwi_system_fix_rod(lwi_system *sys, size_t r)
{
    lwi_rod_info *info = &sys->rod[r];
    if (info->fixed || sys->n_row >= LWI_MAX_ROWS) {
        return;
    }
    lwi_row *row = &sys->row[sys->n_row++];
    memset(row, 0, sizeof *row);
    row->kind = LWI_ROW_ROD;
    row->a = info->a;
    row->b = info->b;
    row->rod = (int)r;
    row->joint = row->coupling = -1;
    lwi_copy3(row->pa, info->end[0]);
    lwi_copy3(row->pb, info->end[1]);
    row->link = info->link;
    row->n_link = info->n_link;
    info->fixed = true;
    lwi_system_blocks(sys);
}

void lwi_system_drop_row(lwi_system *sys, size_t i)
{
    sys->row_dropped[sys->n_row_dropped++] = sys->row[i];
    memmove(&sys->row[i], &sys->row[i + 1], (sys->n_row - i - 1) * sizeof sys->row[0]);
    sys->n_row--;
}
