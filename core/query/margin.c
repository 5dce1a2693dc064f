/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Margin question: classes, ranks, each drive left out in turn, and the six margins. No single
 * index can serve: an inverse singularity kills only speed, a forward one only accuracy and
 * load. */
#include "margin.h"

#include "../math/tol.h"
#include "../math/vec3.h"
#include "singular.h"

#include <stdint.h>

bool lwi_speed_asked(const lw_model *m)
{
    const lw_needs *needs = &m->spec->needs;
    bool need = needs->speed_m_s.asked || needs->turn_rate_rad_s.asked;
    for (size_t j = 0; j < needs->n_joint; j++) {
        need = need || needs->joint[j].speed.asked;
    }
    bool figures = false;
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        figures = figures || m->spec->drive[d].has_speed;
    }
    return need && figures && m->mobility == m->spec->n_output;
}

/* Speed in the worst direction with the other outputs at rest: min over drives of v_i / |G_i|. */
typedef struct speed {
    double ratio;
    double amount;
    const char *unit;
    int drive;
    double dir[6];
} speed;

static void try_speed(speed *s, const lw_model *m, const double *g, const size_t *column, size_t n,
                      double need, const char *unit, size_t first_axis)
{
    size_t n_out = m->spec->n_output;
    for (size_t d = 0; d < m->spec->n_drive && n > 0; d++) {
        double size = 0.0;
        if (!m->spec->drive[d].has_speed) {
            continue;
        }
        for (size_t i = 0; i < n; i++) {
            size += g[d * n_out + column[i]] * g[d * n_out + column[i]];
        }
        size = sqrt(size);
        double v = m->spec->drive[d].speed;
        double can = size > v / (need * LWI_MARGIN_CAP) ? v / size : need * LWI_MARGIN_CAP;
        if (can / need < s->ratio) {
            s->ratio = can / need;
            s->amount = can;
            s->unit = unit;
            s->drive = (int)d;
            memset(s->dir, 0, sizeof s->dir);
            for (size_t i = 0; i < n && first_axis < 6; i++) {
                size_t axis = (size_t)m->spec->output[column[i]].kind;
                s->dir[axis] = size > 0.0 ? g[d * n_out + column[i]] / size : 0.0;
            }
        }
    }
}

void lwi_margin_speed(lw_margin_answer *out, const lw_model *m, const lwi_rates *r, lw_work *work)
{
    lw_margin_value *value = &out->margin[LW_MARGIN_SPEED];
    const lw_needs *needs = &m->spec->needs;
    double *g = work->matrix[1];
    size_t column[LW_MAX_OUTPUTS] = {0};
    value->drive = -1;
    value->coord = SIZE_MAX;
    value->amount_unit = "";
    value->asked = lwi_speed_asked(m);
    if (!value->asked) {
        return;
    }
    value->value = 0.0;
    if ((out->classes & LW_CLASS_INVERSE) != 0 ||
        !lwi_solve_through(g, work->tk, r->n_output, work->ak, r->n_drive, r->m, NULL, work)) {
        return;
    }
    speed s = {.ratio = LWI_MARGIN_CAP, .drive = -1, .unit = ""};
    for (size_t half = 0; half < 2; half++) {
        const lw_figure *need = half == 0 ? &needs->speed_m_s : &needs->turn_rate_rad_s;
        size_t n = 0;
        for (size_t o = 0; o < m->spec->n_output; o++) {
            size_t kind = (size_t)m->spec->output[o].kind;
            if (kind < LW_OUT_COORD && kind / 3 == half) {
                column[n++] = o;
            }
        }
        if (need->asked) {
            try_speed(&s, m, g, column, n, need->value, half == 0 ? "m/s" : "rad/s", 3 * half);
        }
    }
    for (size_t j = 0; j < needs->n_joint; j++) {
        for (size_t o = 0; needs->joint[j].speed.asked && o < m->spec->n_output; o++) {
            if (m->spec->output[o].kind == LW_OUT_COORD &&
                m->spec->output[o].coord == needs->joint[j].coord) {
                column[0] = o;
                bool turning = lw_spec_coord_turning(m->spec, needs->joint[j].coord);
                try_speed(&s, m, g, column, 1, needs->joint[j].speed.value,
                          turning ? "rad/s" : "m/s", 6);
            }
        }
    }
    value->value = s.ratio;
    value->amount = s.amount;
    value->amount_unit = s.unit;
    value->drive = s.drive;
    value->has_direction = s.drive >= 0;
    memcpy(value->direction, s.dir, sizeof s.dir);
}

static void try_travel(lw_margin_value *v, double x, const lw_range *range, size_t coord, int drive)
{
    if (!range->has_low || !range->has_high || !(range->high > range->low)) {
        return;
    }
    double room = fmin(x - range->low, range->high - x);
    double share = fmax(room / (range->high - range->low), 0.0);
    if (!v->asked || share < v->value) {
        v->value = share;
        v->amount = fmax(room, 0.0);
        v->coord = coord;
        v->drive = drive;
    }
    v->asked = true;
}

void lwi_margin_travel(lw_margin_answer *out, const lw_model *m, const lw_solution *sol)
{
    const lw_spec *spec = m->spec;
    lw_margin_value *v = &out->margin[LW_MARGIN_TRAVEL];
    size_t coord = 0;
    v->drive = -1;
    v->coord = SIZE_MAX;
    for (size_t j = 0; j < spec->n_joint; j++) {
        size_t n = lw_joint_coords(spec->joint[j].type);
        for (size_t k = 0; k < n; k++) {
            try_travel(v, sol->config.coord[coord + k], &spec->joint[j].range[k], coord + k, -1);
        }
        coord += n;
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        try_travel(v, m->whole->rod[r].length_m + sol->config.coord[coord + r],
                   &spec->rod[r].range_m, coord + r, -1);
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        try_travel(v, sol->drive[d], &spec->drive[d].range, spec->drive[d].term[0].coord, (int)d);
    }
    v->amount_unit = v->coord == SIZE_MAX ? ""
                     : lw_spec_coord_turning(spec, v->coord) ? "rad"
                                                             : "m";
}

static void rank_info(lw_rank_info *info, const double *sv, size_t rows, size_t cols)
{
    size_t n = rows < cols ? rows : cols;
    info->rows = rows;
    info->columns = cols;
    info->threshold = LWI_RANK_POSTURE;
    info->n_singular = n < LW_MAX_OUTPUTS ? n : LW_MAX_OUTPUTS;
    info->rank = 0;
    for (size_t i = 0; i < n; i++) {
        if (i < info->n_singular) {
            info->singular[i] = sv[i];
        }
        info->rank += sv[0] > 0.0 && sv[i] > LWI_RANK_POSTURE * sv[0];
    }
}

/* Singular values of the scaled A K, which is left in matrix[3], and T K; with their vectors where
 * they are to be analysed. Returns the smallest of A K. */
static double ranks(lw_margin_answer *out, const lw_model *m, const lwi_rates *r, bool analysed,
                    lw_work *work)
{
    double sv[LWI_MAX_VARS];
    double *scaled = work->matrix[3];
    double *a = work->matrix[1];
    lwi_factors *f = work->singular_work->of;
    lwi_scaled_drives(scaled, m, r, work);
    if (analysed) {
        memcpy(f[LWI_OF_DRIVES].u, scaled, r->n_drive * r->m * sizeof *scaled);
        lwi_decompose(&f[LWI_OF_DRIVES], r->n_drive, r->m, work);
        lwi_scaled_outputs(f[LWI_OF_TOOL].u, m, r, work);
        lwi_decompose(&f[LWI_OF_TOOL], r->n_output, r->m, work);
        rank_info(&out->tool, f[LWI_OF_TOOL].sv, r->n_output, r->m);
        memcpy(sv, f[LWI_OF_DRIVES].sv, r->m * sizeof *sv);
    } else {
        lwi_scaled_outputs(a, m, r, work);
        lwi_svd(a, r->n_output, r->m, r->m, sv, NULL);
        rank_info(&out->tool, sv, r->n_output, r->m);
        memcpy(a, scaled, r->n_drive * r->m * sizeof *scaled);
        lwi_svd(a, r->n_drive, r->m, r->m, sv, NULL);
    }
    rank_info(&out->drives, sv, r->n_drive, r->m);
    return r->n_drive >= r->m ? sv[r->m - 1] : 0.0;
}

/* Each drive left out in turn, free to move. */
static void leave_out(lw_margin_answer *out, const lwi_rates *r, const double *scaled,
                      lw_work *work)
{
    double *a = work->matrix[2];
    double sv[LWI_MAX_VARS];
    out->n_drive = r->n_drive;
    for (size_t d = 0; d < r->n_drive; d++) {
        size_t n = 0;
        for (size_t i = 0; i < r->n_drive; i++) {
            if (i != d) {
                memcpy(a + n++ * r->m, scaled + i * r->m, r->m * sizeof *a);
            }
        }
        out->hold_without[d] = 0.0;
        out->indispensable[d] = true;
        if (n >= r->m) {
            lwi_svd(a, n, r->m, r->m, sv, NULL);
            out->hold_without[d] = sv[r->m - 1];
            out->indispensable[d] = !(sv[r->m - 1] > LWI_RANK_POSTURE * sv[0]);
        }
    }
    if (r->n_drive == r->m + 1) {
        /* Left null vector: the last column of Q. */
        double *tau = work->vector[0];
        double *q = work->vector[1];
        memcpy(a, scaled, r->n_drive * r->m * sizeof *a);
        size_t steps = lwi_qrp(a, r->n_drive, r->m, r->m, tau, work->index);
        memset(q, 0, r->n_drive * sizeof *q);
        q[r->m] = 1.0;
        lwi_qrp_q(a, r->n_drive, steps, r->m, tau, q);
        size_t big = 0;
        for (size_t d = 0; d < r->n_drive; d++) {
            big = fabs(q[d]) > fabs(q[big]) + 1e-9 ? d : big;
        }
        for (size_t d = 0; d < r->n_drive; d++) {
            out->preload[d] = q[big] < 0.0 ? -q[d] : q[d];
        }
    }
}

static void name_outcome(lw_margin_answer *out, const lw_model *m)
{
    bool spent = false; /* a drive that is spare elsewhere is needed here */
    for (size_t d = 0; d < out->n_drive; d++) {
        spent = spent || (m->drive_spare[d] && out->indispensable[d]);
    }
    bool inverse = (out->classes & LW_CLASS_INVERSE) != 0;
    bool constraint = (out->classes & LW_CLASS_CONSTRAINT) != 0;
    if (!out->held) {
        out->outcome = LW_OUTCOME_SINGULAR;
        out->reason =
            constraint && inverse ? "constraint and inverse singularity: the mechanism gains a "
                                    "freedom that the drives do not hold, and a tool direction is "
                                    "lost"
            : constraint ? "constraint singularity: the mechanism gains a freedom here, and the "
                           "drives do not hold it"
            : inverse ? "forward and inverse singularity: with all drives locked something can "
                        "still move, and a tool direction is lost"
                      : "forward singularity: with all drives locked something can still move";
    } else if (!out->solution->within_limits) {
        out->outcome = LW_OUTCOME_LIMIT;
        out->reason = "the posture is beyond a limit";
    } else {
        out->outcome = LW_OUTCOME_OK;
        out->reason =
            constraint ? "constraint singularity: the mechanism gains a freedom here; the drives "
                         "hold it"
            : inverse && spent ? "inverse singularity: a tool direction is lost; still held, but "
                                 "drives are no longer spare"
            : inverse ? "inverse singularity: a tool direction is lost; the drives hold"
            : spent   ? "still held, but drives are no longer spare"
                      : NULL;
    }
}

static void hold_of(lw_margin_answer *out, const lw_model *m, const lwi_rates *r,
                    double smallest)
{
    lw_margin_value *hold = &out->margin[LW_MARGIN_HOLD];
    hold->asked = true;
    hold->value = smallest;
    hold->drive = -1;
    hold->coord = SIZE_MAX;
    hold->amount_unit = "";
    out->hold_length_m = m->length_m;
    out->spare_hold_drive = -1;
    for (size_t d = 0; d < r->n_drive; d++) {
        if (out->spare_hold_drive < 0 || out->hold_without[d] < out->spare_hold) {
            out->spare_hold = out->hold_without[d];
            out->spare_hold_drive = (int)d;
        }
    }
}

void lwi_margin_at(lw_margin_answer *out, const lw_model *m, const lw_spec_tool *tool,
                   const lw_solution *sol, bool analysed, lw_work *work)
{
    lwi_rates r;
    memset(out, 0, sizeof *out);
    out->solution = sol;
    lwi_rates_at(&r, m, tool, &sol->config, sol->tool.pos_m, work);
    bool lost = m->rank > 0 && !(r.closure_ratio > LWI_RANK_POSTURE);
    if (lost) {
        lwi_rates_widen(&r, m, tool, sol->tool.pos_m, LWI_RANK_POSTURE, work);
    }
    double smallest = ranks(out, m, &r, analysed, work);
    out->drives.rank_generic = m->mobility;
    out->tool.rank_generic = r.n_output < m->mobility ? r.n_output : m->mobility;
    out->closure.rows = m->whole->n_row;
    out->closure.columns = m->whole->n_var;
    out->closure.rank_generic = m->rank;
    out->closure.threshold = LWI_RANK_POSTURE;
    out->closure_smallest = r.closure_ratio;
    out->closure_generic = m->report.rank_kept;
    out->closure.rank = m->whole->n_var - r.m;
    out->held = out->drives.rank == r.m;
    out->classes = (out->held ? 0U : LW_CLASS_FORWARD) |
                   (out->tool.rank < out->tool.rank_generic ? LW_CLASS_INVERSE : 0U) |
                   (lost ? LW_CLASS_CONSTRAINT : 0U);
    leave_out(out, &r, work->matrix[3], work);
    out->n_limb = m->n_limb;
    for (size_t i = 0; i < m->n_limb; i++) {
        (void)lwi_limb_branch(&out->limb_value[i], m, &m->limb[i], &sol->config);
        out->limb_singular[i] = !(fabs(out->limb_value[i]) > LWI_SIGN_ZERO);
    }
    hold_of(out, m, &r, smallest);
    lwi_margin_accuracy(out, m, &r, work);
    lwi_margin_load(out, m, &r, work);
    lwi_margin_speed(out, m, &r, work);
    lwi_margin_travel(out, m, sol);
    out->least = -1;
    for (int i = LW_MARGIN_ACCURACY; i <= LW_MARGIN_SPEED; i++) {
        if (out->margin[i].asked &&
            (out->least < 0 || out->margin[i].value < out->margin[out->least].value)) {
            out->least = i;
        }
    }
    name_outcome(out, m);
    if (analysed) {
        lwi_singular_place at = {m, tool, sol, &r, work};
        lwi_singular_at(&work->singular, out, &at);
        out->singular = &work->singular;
    }
}

lw_code lw_margin(const lw_margin_answer **out, const lw_model *m, size_t tool,
                  const lw_spec_tool *written, const lw_posture_ask *ask, lw_work *work,
                  lw_err *err)
{
    const lw_posture_answer *posture;
    *out = NULL;
    const lw_spec_tool *t = lwi_tool(m, tool, written, err);
    if (t == NULL) {
        return LW_E_ARGUMENT;
    }
    lw_code rc = lw_posture(&posture, m, tool, written, ask, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    *out = &work->margin;
    if (posture->solution == NULL) {
        memset(&work->margin, 0, sizeof work->margin);
        work->margin.outcome = posture->outcome;
        work->margin.reason = posture->reason;
        work->margin.least = -1;
        return LW_OK;
    }
    lw_outcome before = posture->outcome;
    const char *reason = posture->reason;
    lwi_margin_at(&work->margin, m, t, posture->solution, true, work);
    if (before == LW_OUTCOME_INCONSISTENT) {
        work->margin.outcome = before;
        work->margin.reason = reason;
    }
    return LW_OK;
}

void lw_margin_min_default(lw_margin_min *out, const lw_model *m, bool has_number, double number)
{
    const lw_figure *own = &m->spec->needs.margin_min;
    double least = has_number ? number : own->asked ? own->value : 1.0;
    memset(out, 0, sizeof *out);
    out->asked[LW_MARGIN_ACCURACY] = lwi_accuracy_asked(m);
    out->asked[LW_MARGIN_LOAD] = lwi_load_asked(m);
    out->asked[LW_MARGIN_SPEED] = lwi_speed_asked(m);
    for (int i = LW_MARGIN_ACCURACY; i <= LW_MARGIN_SPEED; i++) {
        out->value[i] = least;
    }
}
