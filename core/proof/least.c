/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Margins on a whole interval, from below; definitions as in query/margin_*.c, which speak of one
 * posture. They do not depend on the basis of the freedoms: with J the drives by the basis and W
 * the tool twist by it, accuracy is W J^+, load the vertices square to rows of J; speed is of rows
 * of the drives by outputs. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "../query/margin.h"
#include "prove.h"

#include <stdint.h>

enum { EXACT_DRIVES = 12, MOST_SUBSETS = 4096 };

/* Rows and columns of J scaled, so that none is far from one. */
typedef struct scaled {
    size_t n, m;
    size_t drive[LW_MAX_DRIVES];
    double column[LW_MAX_OUTPUTS]; /* output = column * scaled output */
    lwi_pm j[LW_MAX_DRIVES * LW_MAX_OUTPUTS];
} scaled;

static void scale_rates(scaled *s, const lwi_prove *p, const double *row_scale, size_t without)
{
    s->m = p->inputs.m;
    s->n = 0;
    for (size_t d = 0; d < p->model->spec->n_drive; d++) {
        if (d != without) {
            s->drive[s->n++] = d;
        }
    }
    for (size_t j = 0; j < s->m; j++) {
        double sum = 0.0;
        for (size_t i = 0; i < s->n; i++) {
            double v = row_scale[s->drive[i]] * lwi_pm_value(p->rates[s->drive[i] * s->m + j], 0.0);
            sum += v * v;
        }
        s->column[j] = sum > 0.0 ? 1.0 / sqrt(sum) : 1.0;
    }
    for (size_t i = 0; i < s->n; i++) {
        for (size_t j = 0; j < s->m; j++) {
            double k = row_scale[s->drive[i]] * s->column[j];
            s->j[i * s->m + j] = lwi_pm_scale(p->rates[s->drive[i] * s->m + j], k);
        }
    }
}

/* x (m x n): outputs per unit of each scaled drive, by least squares. */
static bool invert_rates(lwi_pm *x, const scaled *s, lwi_prove *p)
{
    lwi_pm *b = p->big[2];
    size_t n = s->n;
    size_t m = s->m;
    if (n < m) {
        return false;
    }
    for (size_t i = 0; i < n * n; i++) {
        b[i] = lwi_pm_const(i % (n + 1) == 0 ? 1.0 : 0.0);
    }
    if (n == m ? !lwi_pm_solve_square(x, s->j, m, b, n, p->solver)
               : !lwi_pm_solve_least(x, s->j, n, m, NULL, b, n, p->solver)) {
        return false;
    }
    for (size_t j = 0; j < m; j++) {
        for (size_t d = 0; d < n; d++) {
            x[j * n + d] = lwi_pm_scale(x[j * n + d], s->column[j]);
        }
    }
    return true;
}

/* Sum of c[j] x[j]; most factors are 0 or 1. */
static lwi_pm combine(const lwi_pm *c, size_t c_step, const lwi_pm *x, size_t x_step, size_t m)
{
    lwi_pm sum = lwi_pm_const(0.0);
    for (size_t j = 0; j < m; j++) {
        lwi_pm k = c[j * c_step];
        if (k.e == 0.0 && lwi_pm_norm(k) == fabs(k.c[0])) {
            if (k.c[0] != 0.0) {
                sum = lwi_pm_axpy(sum, k.c[0], x[j * x_step]);
            }
        } else {
            sum = lwi_pm_add(sum, lwi_pm_mul(k, x[j * x_step]));
        }
    }
    return sum;
}

/* Velocity (half 0) or turn (half 1) of the tool by a column of rates of the basis. */
static void twist_of(lwi_pm out[3], const lwi_prove *p, const lwi_pm *x, size_t step, size_t half)
{
    for (size_t i = 0; i < 3; i++) {
        out[i] = combine(half == 0 ? &p->vel[0][i] : &p->turn[0][i], 3, x, step, p->inputs.m);
    }
}

/* Rate of an output joint. */
static lwi_pm joint_of(const lwi_prove *p, size_t output, const lwi_pm *x, size_t step)
{
    return combine(p->coord_rate[output], 1, x, step, p->inputs.m);
}

/* need / |v| where |v|^2 is a model: takes the least over the interval into low, and what it is
 * where it is looked at into met. */
static void take_ratio(lwi_prove *p, int margin, double need, lwi_pm square)
{
    double lo;
    double hi;
    lwi_pm_range(square, &lo, &hi);
    double least = hi < INFINITY ? need / sqrt(hi) * (1.0 - 1e-14) : 0.0;
    least = hi <= 0.0 || least > LWI_MARGIN_CAP ? LWI_MARGIN_CAP : least;
    if (!(least >= p->low[margin])) {
        p->low[margin] = least;
    }
    for (int i = -1; i <= 1; i++) {
        lwi_pm_at(square, (double)i, &lo, &hi);
        double met = lo > 0.0 ? need / sqrt(lo) : LWI_MARGIN_CAP;
        if (met < p->met[margin]) {
            p->met[margin] = met;
            p->met_at[margin] = (double)i;
        }
    }
}

/* Largest length of rows (three models a drive) over signs. */
static void worst_error(lwi_prove *p, int margin, double tolerance, const lwi_pm (*e)[3], size_t n)
{
    if (n > EXACT_DRIVES) { /* the bound that margin_accuracy.c takes there too */
        double sum = 0.0;
        for (size_t d = 0; d < n; d++) {
            double lo;
            double hi;
            lwi_pm_range(lwi_pm_dot3(e[d], e[d]), &lo, &hi);
            sum += sqrt(hi > 0.0 ? hi : 0.0);
        }
        take_ratio(p, margin, tolerance, lwi_pm_const(sum * sum * (1.0 + 1e-13)));
        return;
    }
    lwi_pm v[3] = {lwi_pm_const(0.0), lwi_pm_const(0.0), lwi_pm_const(0.0)};
    for (size_t d = 0; d < n; d++) {
        for (int i = 0; i < 3; i++) {
            v[i] = lwi_pm_add(v[i], e[d][i]);
        }
    }
    unsigned long total = 1UL << (n - 1);
    bool minus[EXACT_DRIVES] = {false};
    for (unsigned long k = 0;; k++) {
        take_ratio(p, margin, tolerance, lwi_pm_dot3(v, v));
        if (k + 1 >= total) {
            break;
        }
        size_t bit = (size_t)__builtin_ctzl(k + 1);
        double change = minus[bit] ? 2.0 : -2.0;
        minus[bit] = !minus[bit];
        for (int i = 0; i < 3; i++) {
            v[i] = lwi_pm_axpy(v[i], change, e[bit][i]);
        }
    }
}

static double drive_error(const lw_model *m, size_t d)
{
    const lw_spec_drive *drive = &m->spec->drive[d];
    double e = 0.5 * ((drive->has_resolution ? drive->resolution : 0.0) +
                      (drive->has_backlash ? drive->backlash : 0.0));
    double least = 1e-9 * (drive->turning ? 1.0 : m->length_m);
    return e > least ? e : least;
}

static bool accuracy(lwi_prove *p, int margin, size_t without)
{
    const lw_spec *spec = p->model->spec;
    const lw_needs *needs = &spec->needs;
    double weight[LW_MAX_DRIVES];
    scaled s;
    lwi_pm x[LW_MAX_DRIVES * LW_MAX_OUTPUTS];
    lwi_pm e[LW_MAX_DRIVES][3];
    for (size_t d = 0; d < spec->n_drive; d++) {
        weight[d] = 1.0 / drive_error(p->model, d);
    }
    scale_rates(&s, p, weight, without);
    if (!invert_rates(x, &s, p)) {
        return false;
    }
    for (size_t half = 0; half < 2; half++) {
        const lw_figure *need = half == 0 ? &needs->position_tolerance_m
                                          : &needs->angle_tolerance_rad;
        for (size_t d = 0; d < s.n && need->asked; d++) {
            twist_of(e[d], p, x + d, s.n, half);
        }
        if (need->asked) {
            worst_error(p, margin, need->value, (const lwi_pm (*)[3])e, s.n);
        }
    }
    for (size_t k = 0; k < needs->n_joint; k++) {
        for (size_t o = 0; needs->joint[k].tolerance.asked && o < spec->n_output; o++) {
            if (spec->output[o].kind == LW_OUT_COORD &&
                spec->output[o].coord == needs->joint[k].coord) {
                for (size_t d = 0; d < s.n; d++) {
                    e[d][0] = joint_of(p, o, x + d, s.n);
                    e[d][1] = e[d][2] = lwi_pm_const(0.0);
                }
                worst_error(p, margin, needs->joint[k].tolerance.value, (const lwi_pm (*)[3])e,
                            s.n);
            }
        }
    }
    return true;
}

/* |v| as a model, or its largest value where it may vanish. */
static lwi_pm length_of(const lwi_pm v[3])
{
    lwi_pm square = lwi_pm_dot3(v, v);
    lwi_pm root = lwi_pm_sqrt(square);
    if (lwi_pm_ok(root)) {
        return root;
    }
    double lo;
    double hi;
    lwi_pm_range(square, &lo, &hi);
    /* Between zero and its largest value. */
    double half = 0.5 * sqrt(hi > 0.0 ? hi : 0.0) * (1.0 + 1e-14);
    return lwi_pm_widen(lwi_pm_const(half), half);
}

/* Power of the rated load in its worst direction per unit of the output rates x. */
static lwi_pm power_of(const lwi_prove *p, const lwi_pm *x, size_t step)
{
    const lw_spec *spec = p->model->spec;
    const lw_needs *needs = &spec->needs;
    lwi_pm sum = lwi_pm_const(0.0);
    lwi_pm v[3];
    if (needs->force_n.asked) {
        twist_of(v, p, x, step, 0);
        sum = lwi_pm_axpy(sum, needs->force_n.value, length_of(v));
    }
    if (needs->moment_nm.asked) {
        twist_of(v, p, x, step, 1);
        sum = lwi_pm_axpy(sum, needs->moment_nm.value, length_of(v));
    }
    for (size_t k = 0; k < needs->n_joint; k++) {
        for (size_t o = 0; needs->joint[k].effort.asked && o < spec->n_output; o++) {
            if (spec->output[o].kind == LW_OUT_COORD &&
                spec->output[o].coord == needs->joint[k].coord) {
                lwi_pm one[3] = {joint_of(p, o, x, step), lwi_pm_const(0.0), lwi_pm_const(0.0)};
                sum = lwi_pm_axpy(sum, needs->joint[k].effort.value, length_of(one));
            }
        }
    }
    return sum;
}

/* support / power at one vertex, from below on the interval; support itself may be too small. */
static void take_vertex(lwi_prove *p, lwi_pm support, lwi_pm power)
{
    double lo;
    double hi;
    double plo;
    double phi;
    double least;
    lwi_pm_range(power, &plo, &phi);
    lwi_pm_range(support, &lo, &hi);
    least = lo > 0.0 && phi > 0.0 && phi < INFINITY ? lo / phi : phi <= 0.0 ? LWI_MARGIN_CAP : 0.0;
    if (plo > 0.0) {
        double rlo;
        double rhi;
        lwi_pm_range(lwi_pm_div(support, power), &rlo, &rhi);
        least = rlo > least ? rlo : least;
    }
    least = least * (1.0 - 1e-14) > LWI_MARGIN_CAP ? LWI_MARGIN_CAP : least * (1.0 - 1e-14);
    if (!(least >= p->low[LW_MARGIN_LOAD])) {
        p->low[LW_MARGIN_LOAD] = least;
    }
    for (int i = -1; i <= 1; i++) {
        lwi_pm_at(power, (double)i, &plo, &phi);
        lwi_pm_at(support, (double)i, &lo, &hi);
        double met = plo > 0.0 && hi > 0.0 ? hi / plo : LWI_MARGIN_CAP;
        if (met < p->met[LW_MARGIN_LOAD]) {
            p->met[LW_MARGIN_LOAD] = met;
            p->met_at[LW_MARGIN_LOAD] = (double)i;
        }
    }
}

/* y (m long) square to the picked rows of J: one output is 1, the others follow. 0: done; 1: the
 * rows are dependent, as margin_load.c leaves them out; -1: not proved. */
static int square_to(lwi_pm *y, const scaled *s, const size_t *pick, lwi_prove *p)
{
    size_t m = s->m;
    size_t k = m - 1;
    double qr[LW_MAX_OUTPUTS * LW_MAX_OUTPUTS];
    double tau[LW_MAX_OUTPUTS];
    size_t perm[LW_MAX_OUTPUTS];
    lwi_pm a[LW_MAX_OUTPUTS * LW_MAX_OUTPUTS];
    lwi_pm b[LW_MAX_OUTPUTS];
    lwi_pm z[LW_MAX_OUTPUTS];
    for (size_t i = 0; i < k; i++) {
        for (size_t j = 0; j < m; j++) {
            qr[i * m + j] = lwi_pm_value(s->j[pick[i] * m + j], 0.0);
        }
    }
    perm[0] = 0;
    if (k > 0) {
        (void)lwi_qrp(qr, k, m, m, tau, perm);
        if (!(fabs(qr[(k - 1) * m + k - 1]) > 1e-12 * fabs(qr[0]))) {
            return 1;
        }
        for (size_t i = 0; i < k; i++) {
            for (size_t j = 0; j < k; j++) {
                a[i * k + j] = s->j[pick[i] * m + perm[j]];
            }
            b[i] = lwi_pm_neg(s->j[pick[i] * m + perm[k]]);
        }
        if (!lwi_pm_solve_square(z, a, k, b, 1, p->solver)) {
            return -1;
        }
    }
    for (size_t j = 0; j < k; j++) {
        y[perm[j]] = z[j];
    }
    y[perm[k]] = lwi_pm_const(1.0);
    return 0;
}

/* More drives than freedoms: a vertex for each choice of m - 1 rows. */
static bool load_spare(lwi_prove *p, const scaled *s)
{
    size_t pick[LW_MAX_DRIVES] = {0};
    size_t k = s->m - 1;
    size_t tried = 0;
    for (size_t i = 0; i < k; i++) {
        pick[i] = i;
    }
    do {
        lwi_pm y[LW_MAX_OUTPUTS];
        lwi_pm x[LW_MAX_OUTPUTS];
        int how = square_to(y, s, pick, p);
        if (how < 0) {
            return false;
        }
        if (how > 0) {
            continue;
        }
        /* |a| is not below a or -a: the sign of the middle serves. Rows picked give nothing. */
        lwi_pm support = lwi_pm_const(0.0);
        for (size_t d = 0; d < s->n; d++) {
            bool picked = false;
            for (size_t i = 0; i < k; i++) {
                picked = picked || pick[i] == d;
            }
            if (picked) {
                continue;
            }
            lwi_pm sum = lwi_pm_mul(s->j[d * s->m], y[0]);
            for (size_t j = 1; j < s->m; j++) {
                sum = lwi_pm_add(sum, lwi_pm_mul(s->j[d * s->m + j], y[j]));
            }
            support = lwi_pm_axpy(support, lwi_pm_value(sum, 0.0) < 0.0 ? -1.0 : 1.0, sum);
        }
        for (size_t j = 0; j < s->m; j++) {
            x[j] = lwi_pm_scale(y[j], s->column[j]);
        }
        take_vertex(p, support, power_of(p, x, 1));
    } while (++tried < MOST_SUBSETS && lwi_next_subset(pick, k, s->n));
    return tried < MOST_SUBSETS;
}

static bool load(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    double weight[LW_MAX_DRIVES];
    scaled s;
    lwi_pm x[LW_MAX_DRIVES * LW_MAX_OUTPUTS];
    for (size_t d = 0; d < spec->n_drive; d++) {
        weight[d] = spec->drive[d].effort;
        if (!(weight[d] > 0.0)) {
            return false;
        }
    }
    scale_rates(&s, p, weight, SIZE_MAX);
    if (s.n > s.m) {
        return load_spare(p, &s);
    }
    /* As many drives as freedoms: the vertices are the columns of the inverse. */
    if (!invert_rates(x, &s, p)) {
        return false;
    }
    for (size_t d = 0; d < s.n; d++) {
        take_vertex(p, lwi_pm_const(1.0), power_of(p, x + d, s.n));
    }
    return true;
}

static void speed_of(lwi_prove *p, const size_t *column, size_t n, double need)
{
    const lw_spec *spec = p->model->spec;
    for (size_t d = 0; d < spec->n_drive && n > 0; d++) {
        if (!spec->drive[d].has_speed) {
            continue;
        }
        lwi_pm sum = lwi_pm_const(0.0);
        for (size_t i = 0; i < n; i++) {
            sum = lwi_pm_add(sum, lwi_pm_sqr(p->by_output[d * p->inputs.m + column[i]]));
        }
        take_ratio(p, LW_MARGIN_SPEED, spec->drive[d].speed / need, sum);
    }
}

static bool speed(lwi_prove *p)
{
    const lw_spec *spec = p->model->spec;
    const lw_needs *needs = &spec->needs;
    if (!lwi_rates_by_output(p)) {
        return false;
    }
    for (size_t half = 0; half < 2; half++) {
        const lw_figure *need = half == 0 ? &needs->speed_m_s : &needs->turn_rate_rad_s;
        size_t column[LW_MAX_OUTPUTS];
        size_t n = 0;
        for (size_t o = 0; o < spec->n_output; o++) {
            size_t kind = (size_t)spec->output[o].kind;
            if (kind < LW_OUT_COORD && kind / 3 == half) {
                column[n++] = o;
            }
        }
        if (need->asked) {
            speed_of(p, column, n, need->value);
        }
    }
    for (size_t k = 0; k < needs->n_joint; k++) {
        for (size_t o = 0; needs->joint[k].speed.asked && o < spec->n_output; o++) {
            if (spec->output[o].kind == LW_OUT_COORD &&
                spec->output[o].coord == needs->joint[k].coord) {
                speed_of(p, &o, 1, needs->joint[k].speed.value);
            }
        }
    }
    return true;
}

static bool spare(lwi_prove *p)
{
    size_t n = p->model->spec->n_drive;
    if (n <= p->inputs.m) {
        p->low[LW_MARGIN_SPARE] = p->met[LW_MARGIN_SPARE] = 0.0;
        return true;
    }
    for (size_t d = 0; d < n; d++) {
        if (!accuracy(p, LW_MARGIN_SPARE, d)) {
            return false;
        }
    }
    return true;
}

bool lwi_least_hold(lwi_prove *p)
{
    static const int order[] = {LW_MARGIN_SPEED, LW_MARGIN_ACCURACY, LW_MARGIN_LOAD,
                                LW_MARGIN_SPARE, LW_MARGIN_TRAVEL, LW_MARGIN_HOLD};
    for (size_t i = 0; i < sizeof order / sizeof order[0]; i++) {
        int k = order[i];
        bool done = true;
        if (!p->min->asked[k]) {
            continue;
        }
        if (k == LW_MARGIN_SPEED) {
            done = speed(p);
        } else if (k == LW_MARGIN_ACCURACY) {
            done = accuracy(p, k, SIZE_MAX);
        } else if (k == LW_MARGIN_LOAD) {
            done = load(p);
        } else if (k == LW_MARGIN_SPARE) {
            done = spare(p);
        }
        if (!done) {
            p->low[k] = 0.0;
        }
        if (!done || !(p->low[k] >= p->min->value[k])) {
            p->margin = k;
            return false;
        }
    }
    return true;
}
