/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Screws and gears written twice: a coupling beside screw joints that tie the same coordinates
 * either agrees with them or locks what it ties. Runs at load, on the linear rows of the whole
 * system. */
#include "build.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

enum { ROWS = 40, COLS = 64 };

typedef struct sums {
    size_t n_row, n_col;
    int element[COLS];
    double a[ROWS][COLS];
} sums;

static size_t column(sums *s, int element)
{
    for (size_t c = 0; c < s->n_col; c++) {
        if (s->element[c] == element) {
            return c;
        }
    }
    if (s->n_col >= COLS) {
        return COLS;
    }
    s->element[s->n_col] = element;
    return s->n_col++;
}

/* Adds the row, in scaled unknowns; false if the table is full. */
static bool add_row(sums *s, const lwi_system *sys, const lwi_row *row)
{
    if (s->n_row >= ROWS) {
        return false;
    }
    for (size_t t = 0; t < row->n_term; t++) {
        size_t c = column(s, row->term_element[t]);
        int var = sys->element[row->term_element[t]].var;
        if (c >= COLS) {
            return false;
        }
        s->a[s->n_row][c] += row->term_factor[t] * (var >= 0 ? sys->var_scale[var] : 1.0);
    }
    s->n_row++;
    return true;
}

static size_t rank_of(const sums *s)
{
    sums w = *s;
    size_t r = 0;
    for (size_t c = 0; c < w.n_col && r < w.n_row; c++) {
        size_t p = r;
        for (size_t i = r; i < w.n_row; i++) {
            p = fabs(w.a[i][c]) > fabs(w.a[p][c]) ? i : p;
        }
        if (!(fabs(w.a[p][c]) > 1e-6)) {
            continue;
        }
        for (size_t k = 0; k < w.n_col; k++) {
            double t = w.a[p][k];
            w.a[p][k] = w.a[r][k];
            w.a[r][k] = t;
        }
        for (size_t i = r + 1; i < w.n_row; i++) {
            double f = w.a[i][c] / w.a[r][c];
            for (size_t k = c; k < w.n_col; k++) {
                w.a[i][k] -= f * w.a[r][k];
            }
        }
        r++;
    }
    return r;
}

static void check_one(lw_model *m, const lwi_row *coupling)
{
    const lwi_system *sys = m->whole;
    sums loops;
    memset(&loops, 0, sizeof loops);
    for (size_t i = 0; i < sys->n_row; i++) {
        const lwi_row *row = &sys->row[i];
        if (row->kind == LWI_ROW_LINEAR && row->coupling < 0 && !add_row(&loops, sys, row)) {
            return;
        }
    }
    size_t columns = loops.n_col;
    if (loops.n_row == 0) {
        return;
    }
    size_t before = rank_of(&loops);
    if (!add_row(&loops, sys, coupling) || loops.n_col > columns) {
        return; /* it ties something the loops do not know: not said twice */
    }
    const char *name = m->spec->coupling[coupling->coupling].name;
    char where[96];
    (void)snprintf(where, sizeof where, "/couplings/%d", coupling->coupling);
    size_t after = rank_of(&loops);
    if (after == before) {
        lwi_find(&m->report, LW_WARNING, "screw-said-twice", where, NULL, NULL,
                 "Coupling \"%s\" says again what screw joints say already; the two agree.", name);
    } else if (after == columns) {
        lwi_find(&m->report, LW_ERROR, "screw-contradicts", where,
                 "the relation that the screw joints' leads give", NULL,
                 "Coupling \"%s\" contradicts the screw joints: together they lock every joint of "
                 "that loop. Keep one of the two.",
                 name);
    }
}

void lwi_check_couplings(lw_model *m)
{
    for (size_t i = 0; i < m->whole->n_row; i++) {
        const lwi_row *row = &m->whole->row[i];
        if (row->coupling >= 0 && row->n_rod_term == 0) {
            check_one(m, row);
        }
    }
}
