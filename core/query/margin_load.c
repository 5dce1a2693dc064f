/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Load: the least largest share of rated effort with which the drives carry the rated load in its
 * worst direction. With more drives than freedoms the share is a linear programme; its dual
 * polytope { y : sum f_i |b_i y| <= 1 } (b_i = rows of A K) has its vertices on lines square to
 * M - 1 of the rows, so the worst direction of a force of given size has a closed form: the largest
 * |W y| over those few vertices. */
#include "../math/vec3.h"
#include "margin.h"

enum { MAX_SUBSETS = 4096 };

bool lwi_load_asked(const lw_model *m)
{
    const lw_needs *needs = &m->spec->needs;
    bool need = needs->force_n.asked || needs->moment_nm.asked;
    for (size_t j = 0; j < needs->n_joint; j++) {
        need = need || needs->joint[j].effort.asked;
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        if (!m->spec->drive[d].has_effort) {
            return false;
        }
    }
    return need;
}

typedef struct load {
    double share;
    double dir[6];
    int drive;
} load;

/* Share at the vertex along y; y is scaled inside. */
static void try_vertex(load *worst, const lw_model *m, const lwi_rates *r, const double *y,
                       const lw_work *work)
{
    const lw_needs *needs = &m->spec->needs;
    double support = 0.0;
    double most = -1.0;
    int drive = -1;
    for (size_t d = 0; d < r->n_drive; d++) {
        double s = 0.0;
        for (size_t j = 0; j < r->m; j++) {
            s += work->ak[d * r->m + j] * y[j];
        }
        double part = m->spec->drive[d].effort * fabs(s);
        support += part;
        if (part > most) {
            most = part;
            drive = (int)d;
        }
    }
    double v[6];
    for (size_t c = 0; c < 6; c++) {
        v[c] = 0.0;
        for (size_t j = 0; j < r->m; j++) {
            v[c] += work->twist[c * r->m + j] * y[j];
        }
    }
    double power = (needs->force_n.asked ? needs->force_n.value * lwi_norm(v) : 0.0) +
                   (needs->moment_nm.asked ? needs->moment_nm.value * lwi_norm(v + 3) : 0.0);
    for (size_t k = 0; k < needs->n_joint; k++) {
        for (size_t o = 0; needs->joint[k].effort.asked && o < m->spec->n_output; o++) {
            if (m->spec->output[o].kind == LW_OUT_COORD &&
                m->spec->output[o].coord == needs->joint[k].coord) {
                double s = 0.0;
                for (size_t j = 0; j < r->m; j++) {
                    s += work->tk[o * r->m + j] * y[j];
                }
                power += needs->joint[k].effort.value * fabs(s);
            }
        }
    }
    double share = support > 0.0 ? power / support : 0.0;
    if (share > worst->share) {
        worst->share = share;
        worst->drive = drive;
        double u[3];
        memset(worst->dir, 0, sizeof worst->dir);
        if (needs->force_n.asked && lwi_unit(u, v)) {
            lwi_copy3(worst->dir, u);
        }
        if (needs->moment_nm.asked && lwi_unit(u, v + 3)) {
            lwi_copy3(worst->dir + 3, u);
        }
    }
}

/* Vector square to n - 1 rows of length n, by elimination with complete pivoting; false where
 * the rows are dependent, since such vertices are met by other subsets. */
static bool square_to(double *y, double *a, size_t n)
{
    size_t col[LWI_MAX_VARS];
    double first = 0.0;
    for (size_t j = 0; j < n; j++) {
        col[j] = j;
    }
    for (size_t k = 0; k + 1 < n; k++) {
        size_t pi = k;
        size_t pj = k;
        for (size_t i = k; i + 1 < n; i++) {
            for (size_t j = k; j < n; j++) {
                if (fabs(a[i * n + j]) > fabs(a[pi * n + pj])) {
                    pi = i;
                    pj = j;
                }
            }
        }
        double p = fabs(a[pi * n + pj]);
        first = k == 0 ? p : first;
        if (!(p > 1e-12 * first)) {
            return false;
        }
        for (size_t j = 0; pi != k && j < n; j++) {
            double t = a[k * n + j];
            a[k * n + j] = a[pi * n + j];
            a[pi * n + j] = t;
        }
        for (size_t i = 0; pj != k && i + 1 < n; i++) {
            double t = a[i * n + k];
            a[i * n + k] = a[i * n + pj];
            a[i * n + pj] = t;
        }
        size_t t = col[k];
        col[k] = col[pj];
        col[pj] = t;
        for (size_t i = k + 1; i + 1 < n; i++) {
            double f = a[i * n + k] / a[k * n + k];
            for (size_t j = k; j < n; j++) {
                a[i * n + j] -= f * a[k * n + j];
            }
        }
    }
    y[col[n - 1]] = 1.0;
    for (size_t k = n - 1; k-- > 0;) {
        double s = 0.0;
        for (size_t j = k + 1; j < n; j++) {
            s -= a[k * n + j] * y[col[j]];
        }
        y[col[k]] = s / a[k * n + k];
    }
    return true;
}

bool lwi_next_subset(size_t *pick, size_t k, size_t n)
{
    for (size_t i = k; i-- > 0;) {
        if (pick[i] + (k - i) < n) {
            pick[i]++;
            for (size_t j = i + 1; j < k; j++) {
                pick[j] = pick[j - 1] + 1;
            }
            return true;
        }
    }
    return false;
}

void lwi_margin_load(lw_margin_answer *out, const lw_model *m, const lwi_rates *r, lw_work *work)
{
    lw_margin_value *value = &out->margin[LW_MARGIN_LOAD];
    load worst = {.share = 0.0, .drive = -1};
    size_t pick[LW_MAX_DRIVES];
    double y[LWI_MAX_VARS];
    double *a = work->matrix[1];
    size_t k = r->m - 1;
    value->drive = -1;
    value->coord = (size_t)-1;
    value->amount_unit = "";
    value->asked = lwi_load_asked(m);
    if (!value->asked) {
        return;
    }
    if ((out->classes & LW_CLASS_FORWARD) != 0 || r->n_drive < r->m) {
        value->value = 0.0;
        return;
    }
    for (size_t i = 0; i < k; i++) {
        pick[i] = i;
    }
    size_t tried = 0;
    do {
        for (size_t i = 0; i < k; i++) {
            memcpy(a + i * r->m, work->ak + pick[i] * r->m, r->m * sizeof *a);
        }
        if (square_to(y, a, r->m)) {
            try_vertex(&worst, m, r, y, work);
        }
    } while (++tried < MAX_SUBSETS && lwi_next_subset(pick, k, r->n_drive));
    if (tried >= MAX_SUBSETS) {
        value->asked = false; /* too many vertices: no figure rather than a wrong one */
        return;
    }
    value->value = worst.share > 1.0 / LWI_MARGIN_CAP ? 1.0 / worst.share : LWI_MARGIN_CAP;
    value->drive = worst.drive;
    value->has_direction = true;
    memcpy(value->direction, worst.dir, sizeof worst.dir);
    bool force = m->spec->needs.force_n.asked;
    bool moment = m->spec->needs.moment_nm.asked;
    value->amount = value->value * (force ? m->spec->needs.force_n.value
                                    : moment ? m->spec->needs.moment_nm.value
                                             : 0.0);
    value->amount_unit = force ? "N" : moment ? "Nm" : "";
}
