/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A closure system once it is built: which unknowns a row sees, which rows share unknowns, rods
 * that become equations, rows that leave the solved ones. Allocates nothing. */
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

static void see_element(bool *seen, const lwi_system *sys, size_t k)
{
    const lwi_element *el = &sys->element[k];
    size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
    for (size_t i = 0; i < n && el->var >= 0; i++) {
        seen[(size_t)el->var + i] = true;
    }
}

static void see_links(bool *seen, const lwi_system *sys, size_t link, size_t n)
{
    for (size_t k = 0; k < n; k++) {
        see_element(seen, sys, (size_t)sys->link[link + k].element);
    }
}

static size_t list_seen(unsigned short *var, const bool *seen, size_t n_var)
{
    size_t n = 0;
    for (size_t i = 0; i < n_var; i++) {
        if (seen[i]) {
            var[n++] = (unsigned short)i;
        }
    }
    return n;
}

size_t lwi_row_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys, const lwi_row *row)
{
    bool seen[LWI_MAX_VARS] = {false};
    see_links(seen, sys, row->link, row->n_link);
    for (size_t t = 0; t < row->n_term; t++) {
        see_element(seen, sys, (size_t)row->term_element[t]);
    }
    for (size_t t = 0; t < row->n_rod_term; t++) {
        const lwi_rod_info *rod = &sys->rod[row->rod_term[t]];
        see_links(seen, sys, rod->link, rod->n_link);
    }
    return list_seen(var, seen, sys->n_var);
}

size_t lwi_node_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys, size_t node)
{
    bool seen[LWI_MAX_VARS] = {false};
    for (size_t k = sys->n_element; k-- > 0;) {
        if (sys->element[k].child == node) {
            see_element(seen, sys, k);
            node = sys->element[k].parent;
        }
    }
    return list_seen(var, seen, sys->n_var);
}

size_t lwi_terms_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys,
                      const lw_term *term, size_t n_term)
{
    bool seen[LWI_MAX_VARS] = {false};
    size_t n_scalar = lw_spec_coord_count(sys->spec) - sys->spec->n_rod;
    for (size_t t = 0; t < n_term; t++) {
        if (term[t].coord >= n_scalar) {
            const lwi_rod_info *rod = &sys->rod[term[t].coord - n_scalar];
            see_links(seen, sys, rod->link, rod->n_link);
        } else if (sys->coord_element[term[t].coord] >= 0) {
            see_element(seen, sys, (size_t)sys->coord_element[term[t].coord]);
        }
    }
    return list_seen(var, seen, sys->n_var);
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
        unsigned short var[LWI_MAX_VARS];
        size_t n = lwi_row_vars(var, sys, &sys->row[i]);
        first[i] = -1;
        for (size_t v = 0; v < n; v++) {
            join(group, &first[i], var[v]);
        }
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
