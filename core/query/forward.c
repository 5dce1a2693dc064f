/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Forward question: from readings to the posture of the assembly the machine is in. Straight
 * readings are followed from a known configuration in steps that are small enough to stay on the
 * branch; a change of sign of the hold determinant between two steps is a wall. With more drives
 * than freedoms all readings are met by weighted least squares and each one's disagreement is
 * told. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "all.h"

#include <stdint.h>

double lwi_drive_sigma(const lw_model *m, size_t drive)
{
    const lw_spec_drive *d = &m->spec->drive[drive];
    double square = 0.0;
    if (d->has_resolution) {
        square += d->resolution * d->resolution / 12.0;
    }
    if (d->has_backlash) {
        square += d->backlash * d->backlash / 12.0;
    }
    /* A drive without figures counts as good to a millionth of a radian or of the length. */
    double least = 1e-6 * (d->turning ? 1.0 : m->length_m);
    return square > 0.0 ? sqrt(square) : least;
}

static size_t drive_goals(lwi_goal *goal, size_t *drive, const lw_model *m,
                          const lw_posture_ask *ask)
{
    const lw_spec *spec = m->spec;
    size_t n = 0;
    double least = 1e300;
    for (size_t d = 0; d < spec->n_drive; d++) {
        double scale = spec->drive[d].turning ? 1.0 : m->length_m;
        least = fmin(least, lwi_drive_sigma(m, d) / scale);
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        if (!ask->has_drive[d]) {
            continue;
        }
        lwi_goal *g = &goal[n];
        memset(g, 0, sizeof *g);
        g->kind = LWI_GOAL_TERMS;
        g->n_term = spec->drive[d].n_term;
        memcpy(g->term, spec->drive[d].term, sizeof g->term);
        g->value = ask->drive[d];
        /* Relative weights 1 / sigma, scaled so that the best drive weighs one length. */
        g->weight = least / lwi_drive_sigma(m, d);
        drive[n++] = d;
    }
    return n;
}

/* Sign of the hold determinant, made continuous by carrying the null space's orientation from
 * step to step. Zero where it cannot be told. */
typedef struct guard {
    bool active;
    int sign;
    bool have;
} guard;

static int square_sign(double *a, size_t n, lw_work *work)
{
    double log2_abs;
    return lwi_lu(a, n, n, work->index, &log2_abs);
}

static bool guard_passes(guard *g, const lw_model *m, const lwi_goal *goal, size_t n_goal,
                         const lwi_state *state, const lwi_eval *ev, lw_work *work)
{
    const lwi_system *sys = m->whole;
    size_t n = sys->n_var;
    size_t left = m->mobility;
    double *k0 = work->matrix[0];
    double *k1 = work->matrix[1];
    double *a = work->matrix[2];
    double *row = work->vector[0];
    if (!g->active) {
        return true;
    }
    (void)lwi_null_space(k1, sys, m->rank, state, ev, &work->newton);
    for (size_t i = 0; i < n_goal; i++) {
        double unused;
        (void)lwi_goal_eval(&unused, row, &goal[i], sys, state, ev);
        for (size_t j = 0; j < left; j++) {
            double s = 0.0;
            for (size_t v = 0; v < n; v++) {
                s += row[v] * k1[v * left + j];
            }
            a[i * left + j] = s;
        }
    }
    int sign = square_sign(a, left, work);
    if (g->have && sys->n_row > 0) {
        for (size_t i = 0; i < left; i++) {
            for (size_t j = 0; j < left; j++) {
                double s = 0.0;
                for (size_t v = 0; v < n; v++) {
                    s += k0[v * left + i] * k1[v * left + j];
                }
                a[i * left + j] = s;
            }
        }
        sign *= square_sign(a, left, work);
    }
    if (g->have && sign != g->sign) {
        return false;
    }
    /* The new null space becomes the reference; its own sign is remembered relative to itself. */
    if (g->have && sys->n_row > 0) {
        for (size_t i = 0; i < n_goal; i++) {
            double unused;
            (void)lwi_goal_eval(&unused, row, &goal[i], sys, state, ev);
            for (size_t j = 0; j < left; j++) {
                double s = 0.0;
                for (size_t v = 0; v < n; v++) {
                    s += row[v] * k1[v * left + j];
                }
                a[i * left + j] = s;
            }
        }
        sign = square_sign(a, left, work);
    }
    work->matrix[0] = k1;
    work->matrix[1] = k0;
    g->sign = sign;
    g->have = true;
    return sign != 0;
}

void lwi_track(lwi_track_info *info, const lw_model *m, const lw_config *start,
               const lwi_goal *goal, size_t n_goal, lw_work *work)
{
    const lwi_system *sys = m->whole;
    double from[LWI_MAX_GOALS];
    lwi_goal *step_goal = work->goal;
    guard g = {.active = n_goal == m->mobility};
    lwi_newton_info ni;
    memset(info, 0, sizeof *info);
    lwi_state_from_config(&work->state, sys, start);
    lwi_eval_nodes(&work->ev, sys, &work->state);
    for (size_t i = 0; i < n_goal; i++) {
        double r;
        (void)lwi_goal_eval(&r, NULL, &goal[i], sys, &work->state, &work->ev);
        from[i] = goal[i].value - r / goal[i].weight;
        step_goal[i] = goal[i];
    }
    if (!guard_passes(&g, m, goal, n_goal, &work->state, &work->ev, work)) {
        info->wall = true;
        return;
    }
    double done = 0.0;
    double size = 1.0;
    while (done < 1.0) {
        size = fmin(size, 1.0 - done);
        double next = done + size >= 1.0 - 1e-12 ? 1.0 : done + size;
        work->trial = work->state;
        for (size_t i = 0; i < n_goal; i++) {
            step_goal[i].value =
                next == 1.0 ? goal[i].value : from[i] + next * (goal[i].value - from[i]);
        }
        lwi_newton(&ni, sys, m->rank, step_goal, n_goal, 12, &work->trial, &work->ev,
                   &work->newton);
        info->iterations += ni.iterations;
        info->free_left = ni.free_left;
        bool good = ni.converged && ni.contraction < 0.4 && ni.moved <= 2.0 * LWI_TRACK_STEP;
        if (n_goal <= m->mobility) {
            good = good && ni.goal < 1e-9;
        }
        if (good) {
            good = guard_passes(&g, m, goal, n_goal, &work->trial, &work->ev, work);
        }
        if (good) {
            work->state = work->trial;
            done = next;
            size *= 2.0;
        } else {
            size *= 0.5;
            if (size < 1e-6 || info->iterations > 4000) {
                info->wall = true;
                info->at = done;
                return;
            }
        }
    }
    info->arrived = true;
    info->at = 1.0;
    lwi_eval_nodes(&work->ev, sys, &work->state);
}

/* A K in scaled coordinates at work->state for the readings given; returns its least singular value
 * over the largest. work->ak gets n_goal x mobility with goal weights left in. */
static double readings_rate(const lw_model *m, const lwi_goal *goal, size_t n_goal, lw_work *work)
{
    const lwi_system *sys = m->whole;
    size_t left = m->mobility;
    double *row = work->vector[0];
    double *sv = work->vector[1];
    (void)lwi_null_space(work->k, sys, m->rank, &work->state, &work->ev, &work->newton);
    for (size_t i = 0; i < n_goal; i++) {
        double unused;
        (void)lwi_goal_eval(&unused, row, &goal[i], sys, &work->state, &work->ev);
        for (size_t j = 0; j < left; j++) {
            double s = 0.0;
            for (size_t v = 0; v < sys->n_var; v++) {
                s += row[v] * work->k[v * left + j];
            }
            work->ak[i * left + j] = s;
        }
    }
    memcpy(work->matrix[0], work->ak, n_goal * left * sizeof(double));
    lwi_svd(work->matrix[0], n_goal, left, left, sv, NULL);
    size_t n = n_goal < left ? n_goal : left;
    return n_goal < left || !(sv[0] > 0.0) ? 0.0 : sv[n - 1] / sv[0];
}

/* Redundant readings: residuals against what resolution and backlash allow, and which reading alone
 * would explain them. */
static void judge_readings(lw_forward_answer *a, const lw_model *m, const lwi_goal *goal,
                           const size_t *drive, size_t n, lw_work *work)
{
    size_t left = m->mobility;
    double leverage[LW_MAX_DRIVES];
    double resid[LW_MAX_DRIVES];
    a->n_disagreement = m->spec->n_drive;
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        a->disagreement[d] = 0.0;
        a->allowed[d] = 0.0;
    }
    /* Orthonormal basis of the weighted rates: leverage h_ii = row norm squared of Q. */
    double *q = work->matrix[1];
    double *v = work->matrix[2];
    memcpy(q, work->ak, n * left * sizeof *q);
    lwi_svd(q, n, left, left, work->vector[1], v);
    double chi = 0.0;
    for (size_t i = 0; i < n; i++) {
        double h = 0.0;
        for (size_t j = 0; j < left; j++) {
            double s = work->vector[1][j];
            double u = s > 0.0 ? q[i * left + j] / s : 0.0;
            h += u * u;
        }
        double value;
        (void)lwi_terms(&value, NULL, m->whole, &work->state, &work->ev, goal[i].term,
                        goal[i].n_term);
        double sigma = lwi_drive_sigma(m, drive[i]);
        leverage[i] = fmin(h, 1.0);
        resid[i] = (goal[i].value - value) / sigma;
        chi += resid[i] * resid[i];
        a->disagreement[drive[i]] = goal[i].value - value;
        a->allowed[drive[i]] = 3.2905267314918945 * sigma * sqrt(fmax(1.0 - leverage[i], 0.0));
    }
    double spare = (double)(n - left);
    a->chi_square = chi;
    a->chi_square_limit = lwi_chi_square_quantile(0.999, spare);
    if (chi <= a->chi_square_limit) {
        return;
    }
    a->outcome = LW_OUTCOME_INCONSISTENT;
    a->reason = "the readings contradict one another by more than resolution and backlash allow";
    if (spare < 2.0) {
        return; /* one spare reading detects a fault but cannot name it */
    }
    /* Leaving reading i out lowers chi-square by r_i^2 / (1 - h_i). */
    int explains = -1;
    int count = 0;
    double limit = lwi_chi_square_quantile(0.999, spare - 1.0);
    for (size_t i = 0; i < n; i++) {
        double room = 1.0 - leverage[i];
        if (room > 1e-9 && chi - resid[i] * resid[i] / room <= limit) {
            explains = (int)drive[i];
            count++;
        }
    }
    a->suspect = count == 1 ? explains : -1;
}

/* Chi-square of all readings against a solution fitted to them. */
static bool readings_agree(const lw_solution *sol, const lw_model *m, const lwi_goal *goal,
                           const size_t *drive, size_t n)
{
    double chi = 0.0;
    for (size_t i = 0; i < n; i++) {
        double r = (goal[i].value - sol->drive[drive[i]]) / lwi_drive_sigma(m, drive[i]);
        chi += r * r;
    }
    return chi <= lwi_chi_square_quantile(0.999, (double)(n - m->mobility));
}

static lw_code missing_readings(const lw_model *m, const lw_posture_ask *ask, lw_err *err)
{
    size_t n = 0;
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        n += ask->has_drive[d];
    }
    if (n < m->mobility) {
        return LW_FAIL(err, LW_E_POSTURE, "/drives",
                       "%zu reading%s given, at least %zu %s needed to determine the posture", n,
                       n == 1 ? "" : "s", m->mobility, m->mobility == 1 ? "is" : "are");
    }
    return LW_OK;
}

/* A serial chain whose joints are all driven has one posture for its readings: no equation at
 * all. A driven rod is an equation: a body on slides that rods hold is no such chain. */
static bool serial_chain(const lw_model *m)
{
    const lwi_system *sys = m->whole;
    for (size_t k = 0; k < sys->n_element; k++) {
        if (sys->element[k].kind == LWI_BALL || sys->element[k].kind == LWI_FREE) {
            return false;
        }
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        for (size_t t = 0; t < m->spec->drive[d].n_term; t++) {
            if (m->spec->drive[d].term[t].coord >= lw_spec_rod_coord(m->spec, 0)) {
                return false;
            }
        }
    }
    return sys->n_row + sys->n_row_dropped == 0 && m->spec->n_drive == m->mobility;
}

/* Every posture these readings allow, from the prepared set. */
static lw_code all_solutions(lw_forward_answer *a, const lw_model *m, const lw_spec_tool *tool,
                             const lw_forward_ask *ask, const lwi_goal *goal, size_t n,
                             const size_t *drive, const lw_config *start, lw_work *work,
                             lw_err *err)
{
    lwi_all_info info;
    a->found.within_limits = 0;
    if (!lwi_forward_all_ready(m, ask->readings)) {
        return LW_FAIL(err, LW_E_POSTURE, "/drives",
                       "\"all\" needs the readings of the drives named in the report's solution "
                       "set");
    }
    lwi_forward_all(&info, m, tool, ask->readings, goal, n, start, work);
    a->found.complex_count = (int)info.finite;
    a->found.real = (int)info.n;
    a->found.not_converged = (int)info.unsettled;
    a->complete = info.closed;
    a->basis = m->set[0]->fibre.trace_closed ? LW_BASIS_TRACE : LW_BASIS_SATURATED;
    a->n_solution = info.n;
    a->solution = work->solution;
    size_t agree = 0;
    for (size_t i = 0; i < info.n; i++) {
        lw_solution *sol = &work->solution[i];
        a->found.within_limits += sol->within_limits;
        sol->contradicted = n > m->mobility && !readings_agree(sol, m, goal, drive, n);
        agree += sol->within_limits && !sol->contradicted;
    }
    a->dimension = info.dimension;
    a->outcome = agree > 0 ? LW_OUTCOME_OK : LW_OUTCOME_LIMIT;
    a->reason = agree > 0 ? NULL : "every solution is beyond a limit or contradicted by a reading";
    if (info.dimension > 0) {
        a->outcome = info.isolated > 0 && agree > 0 ? LW_OUTCOME_OK : LW_OUTCOME_SINGULAR;
        a->reason = info.n > info.isolated
                        ? "these readings leave the mechanism a motion: the last solution is one "
                          "posture of it, the others are isolated"
                        : "these readings leave the mechanism a motion, of which no real posture "
                          "was found; the solutions listed are isolated";
        return LW_OK;
    }
    if (info.n == 0) {
        a->outcome = a->complete ? LW_OUTCOME_OUT_OF_REACH : LW_OUTCOME_UNDECIDED;
        a->reason = a->complete ? "the mechanism does not assemble with these readings"
                                : "no real solution was found, but not every path was settled";
    }
    return LW_OK;
}

/* All postures were asked for, and there is nothing to find them with. */
static lw_code no_set(lw_forward_answer *a, const lw_model *m)
{
    bool screws = false;
    for (size_t j = 0; j < m->spec->n_joint; j++) {
        screws = screws || m->spec->joint[j].type == LW_HELICAL;
    }
    a->n_solution = 0;
    a->found.within_limits = -1;
    a->outcome = LW_OUTCOME_UNDECIDED;
    a->reason = screws ? "there is no list of all postures for this mechanism: the turns of its "
                         "screws are no finite choice; ask with \"near\" for the posture next to a "
                         "known one"
                       : "no solution set is prepared for this mechanism: ask with \"near\" for "
                         "the posture next to a known one";
    return LW_OK;
}

lw_code lw_forward(const lw_forward_answer **out, const lw_model *m, const lw_forward_ask *ask,
                   lw_work *work, lw_err *err)
{
    lw_forward_answer *a = &work->forward;
    size_t drive[LW_MAX_DRIVES];
    lwi_goal *goal = work->goal2;
    lwi_track_info track;
    lw_code rc = LW_OK;
    *out = NULL;
    const lw_spec_tool *tool = lwi_tool(m, ask->tool, ask->tool_written, err);
    if (tool == NULL) {
        return LW_E_ARGUMENT;
    }
    if (ask->readings == NULL || ask->readings->kind != LW_BY_DRIVES) {
        return LW_FAIL(err, LW_E_ARGUMENT, "/drives", "readings are needed");
    }
    rc = missing_readings(m, ask->readings, err);
    if (rc != LW_OK) {
        return rc;
    }
    /* `near` may itself be a forward question and use the answer's storage: it comes first. */
    lw_outcome outcome = LW_OUTCOME_NONE;
    const char *reason = NULL;
    const lw_config *start = lwi_near_config(m, ask->readings->near, ask->readings, work, &outcome,
                                             &reason, &rc, err);
    if (rc != LW_OK) {
        return rc;
    }
    memset(a, 0, sizeof *a);
    a->suspect = -1;
    a->basis = LW_BASIS_LOCAL;
    a->found.complex_count = a->found.real = a->found.within_limits = -1;
    a->outcome = outcome;
    a->reason = reason;
    *out = a;
    if (start == NULL) {
        return LW_OK;
    }
    size_t n = drive_goals(goal, drive, m, ask->readings);
    bool chain = serial_chain(m) && n == m->mobility;
    if (ask->all && !chain && m->set[0] != NULL) {
        return all_solutions(a, m, tool, ask, goal, n, drive, start, work, err);
    }
    lwi_track(&track, m, start, goal, n, work);
    a->iterations = track.iterations;
    if (!track.arrived) {
        if (ask->all && !chain) {
            return no_set(a, m);
        }
        a->outcome = LW_OUTCOME_UNDECIDED;
        a->reason = "a wall stands on the straight way of the readings: the drives lose hold "
                    "there, so the assembly cannot be told; give \"near\"";
        a->wall_at = track.at;
        return LW_OK;
    }
    lw_solution *sol = lwi_slot(work, LWI_SLOT_FORWARD);
    double hold = readings_rate(m, goal, n, work);
    lwi_solution_from_state(sol, m, tool, &work->state, &work->ev, start);
    a->solution = sol;
    a->n_solution = 1;
    a->outcome = sol->within_limits ? LW_OUTCOME_OK : LW_OUTCOME_LIMIT;
    a->reason = sol->within_limits ? NULL : "the posture is beyond a limit";
    if (chain) {
        a->complete = true;
        a->basis = LW_BASIS_EXPLICIT;
        a->found.complex_count = a->found.real = 1;
        a->found.within_limits = sol->within_limits;
    }
    if (!(hold > LWI_RANK_POSTURE)) {
        a->outcome = LW_OUTCOME_SINGULAR;
        a->reason = "the drives do not hold this posture";
        a->dimension = lwi_open_dimension(m, goal, n, work);
        if (a->dimension > 0) {
            a->reason = "the drives do not hold this posture: with these readings the mechanism "
                        "can still move, and this is one posture of many";
        }
    } else if (n > m->mobility) {
        judge_readings(a, m, goal, drive, n, work);
    }
    /* Without a set the one thing that can be told of all is that they are no list. */
    return ask->all && !chain && a->dimension == 0 ? no_set(a, m) : LW_OK;
}
