/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Accuracy and spare. The tool error of drive errors e, servos sharing by least squares weighted
 * with 1/e^2, is E = W K (diag(1/e) A K)^+; the worst case over +-e is a maximum over sign
 * vectors. It needs no inverse of T K, so it stays right at inverse singularities. */
#include "../math/vec3.h"
#include "margin.h"

bool lwi_accuracy_asked(const lw_model *m)
{
    const lw_needs *needs = &m->spec->needs;
    bool need = needs->position_tolerance_m.asked || needs->angle_tolerance_rad.asked;
    bool figures = false;
    for (size_t j = 0; j < needs->n_joint; j++) {
        need = need || needs->joint[j].tolerance.asked;
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        figures = figures || m->spec->drive[d].has_resolution || m->spec->drive[d].has_backlash;
    }
    return need && figures;
}

/* What a reading may be off: half a step and half the backlash. */
static double drive_error(const lw_model *m, size_t d)
{
    const lw_spec_drive *drive = &m->spec->drive[d];
    double e = 0.5 * ((drive->has_resolution ? drive->resolution : 0.0) +
                      (drive->has_backlash ? drive->backlash : 0.0));
    double least = 1e-9 * (drive->turning ? 1.0 : m->length_m);
    return e > least ? e : least;
}

/* Worst length of rows [first, first+n) of E s over sign vectors; exact to 12 drives, a bound
 * beyond. */
static double worst_error(const double *e, size_t first, size_t n, size_t n_drive, double dir[3])
{
    double worst = 0.0;
    if (n_drive > 12) {
        for (size_t d = 0; d < n_drive; d++) {
            double s = 0.0;
            for (size_t i = 0; i < n; i++) {
                s += e[(first + i) * n_drive + d] * e[(first + i) * n_drive + d];
            }
            worst += sqrt(s);
        }
        return worst;
    }
    /* s and -s give the same length: half the vectors. Gray code: one column changes at a time. */
    double v[3] = {0, 0, 0};
    for (size_t i = 0; i < n; i++) {
        for (size_t d = 0; d < n_drive; d++) {
            v[i] += e[(first + i) * n_drive + d];
        }
    }
    unsigned long total = 1UL << (n_drive - 1);
    bool minus[12] = {false};
    for (unsigned long k = 0;; k++) {
        double s = lwi_norm(v);
        if (s > worst) {
            worst = s;
            lwi_copy3(dir, v);
        }
        if (k + 1 >= total) {
            break;
        }
        size_t bit = (size_t)__builtin_ctzl(k + 1);
        double change = minus[bit] ? 2.0 : -2.0;
        minus[bit] = !minus[bit];
        for (size_t i = 0; i < n; i++) {
            v[i] += change * e[(first + i) * n_drive + bit];
        }
    }
    return worst;
}

typedef struct accuracy {
    double ratio;
    double amount;
    bool angle;
    double dir[3];
    int drive;
} accuracy;

static int largest_column(const double *e, size_t first, size_t n, size_t n_drive,
                          const size_t *drive)
{
    int best = -1;
    double most = -1.0;
    for (size_t d = 0; d < n_drive; d++) {
        double s = 0.0;
        for (size_t i = 0; i < n; i++) {
            s += e[(first + i) * n_drive + d] * e[(first + i) * n_drive + d];
        }
        if (s > most) {
            most = s;
            best = (int)drive[d];
        }
    }
    return best;
}

static void take(accuracy *a, double tolerance, double worst, bool angle, const double dir[3],
                 int drive)
{
    double ratio = worst > tolerance / LWI_MARGIN_CAP ? tolerance / worst : LWI_MARGIN_CAP;
    if (!(ratio >= a->ratio)) {
        a->ratio = ratio;
        a->amount = worst;
        a->angle = angle;
        lwi_copy3(a->dir, dir);
        a->drive = drive;
    }
}

/* With the drive `without` left out (SIZE_MAX: none). False if the rest do not hold the
 * platform. */
static bool evaluate(accuracy *a, const lw_model *m, const lwi_rates *r, size_t without,
                     lw_work *work)
{
    const lw_needs *needs = &m->spec->needs;
    double *ak = work->matrix[1];
    double *e = work->matrix[2];
    double *b = work->matrix[3];
    double err[LW_MAX_DRIVES];
    size_t drive[LW_MAX_DRIVES];
    size_t n = 0;
    static const double none[3] = {0, 0, 0};
    for (size_t d = 0; d < r->n_drive; d++) {
        if (d != without) {
            memcpy(ak + n * r->m, work->ak + d * r->m, r->m * sizeof *ak);
            err[n] = drive_error(m, d);
            drive[n++] = d;
        }
    }
    memcpy(b, work->twist, 6 * r->m * sizeof *b);
    size_t rows = 6;
    size_t row_of[LW_MAX_OUTPUTS];
    for (size_t j = 0; j < needs->n_joint; j++) {
        row_of[j] = rows;
        for (size_t o = 0; o < m->spec->n_output; o++) {
            if (m->spec->output[o].kind == LW_OUT_COORD &&
                m->spec->output[o].coord == needs->joint[j].coord) {
                memcpy(b + rows * r->m, work->tk + o * r->m, r->m * sizeof *b);
                rows++;
                break;
            }
        }
    }
    a->ratio = LWI_MARGIN_CAP * 2.0;
    a->drive = -1;
    if (n < r->m || !lwi_solve_through(e, ak, n, b, rows, r->m, err, work)) {
        a->ratio = 0.0;
        return false;
    }
    for (size_t i = 0; i < rows * n; i++) {
        e[i] *= err[i % n];
    }
    double dir[3] = {0, 0, 0};
    if (needs->position_tolerance_m.asked) {
        double w = worst_error(e, 0, 3, n, dir);
        take(a, needs->position_tolerance_m.value, w, false, dir,
             largest_column(e, 0, 3, n, drive));
    }
    if (needs->angle_tolerance_rad.asked) {
        double w = worst_error(e, 3, 3, n, dir);
        take(a, needs->angle_tolerance_rad.value, w, true, dir, largest_column(e, 3, 3, n, drive));
    }
    for (size_t j = 0; j < needs->n_joint; j++) {
        if (needs->joint[j].tolerance.asked && row_of[j] < rows) {
            double w = worst_error(e, row_of[j], 1, n, dir);
            take(a, needs->joint[j].tolerance.value, w,
                 lw_spec_coord_turning(m->spec, needs->joint[j].coord), none,
                 largest_column(e, row_of[j], 1, n, drive));
        }
    }
    a->ratio = fmin(a->ratio, LWI_MARGIN_CAP);
    return true;
}

static void describe(lw_margin_value *value, const accuracy *a)
{
    double u[3];
    value->amount = a->amount;
    value->amount_unit = a->angle ? "rad" : "m";
    value->has_direction = lwi_unit(u, a->dir);
    memset(value->direction, 0, sizeof value->direction);
    if (value->has_direction) {
        lwi_copy3(value->direction + (a->angle ? 3 : 0), u);
    }
}

void lwi_margin_accuracy(lw_margin_answer *out, const lw_model *m, const lwi_rates *r,
                         lw_work *work)
{
    lw_margin_value *value = &out->margin[LW_MARGIN_ACCURACY];
    lw_margin_value *spare = &out->margin[LW_MARGIN_SPARE];
    accuracy a;
    value->drive = spare->drive = -1;
    value->coord = spare->coord = (size_t)-1;
    value->amount_unit = spare->amount_unit = "";
    value->asked = spare->asked = lwi_accuracy_asked(m);
    if (!value->asked) {
        return;
    }
    bool held = (out->classes & LW_CLASS_FORWARD) == 0 &&
                evaluate(&a, m, r, (size_t)-1, work);
    value->value = held ? a.ratio : 0.0;
    if (held) {
        value->drive = a.drive;
        describe(value, &a);
    }
    spare->value = 0.0;
    if (r->n_drive <= r->m || !held) {
        return;
    }
    spare->value = LWI_MARGIN_CAP;
    for (size_t d = 0; d < r->n_drive; d++) {
        double left = 0.0;
        if (!out->indispensable[d] && evaluate(&a, m, r, d, work)) {
            left = a.ratio;
        }
        if (left < spare->value || spare->drive < 0) {
            spare->value = left;
            spare->drive = (int)d;
            spare->has_direction = false;
            spare->amount_unit = "";
            if (left > 0.0) {
                describe(spare, &a);
            }
        }
    }
}
