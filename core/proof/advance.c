/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The driver of the proof; see advance.h. Whatever is looked at between proofs is judged as reach
 * judges a posture, in doubles: a limit broken by more than the slack, hold lost, a margin below
 * its threshold. */
#include "advance.h"

#include "../math/tol.h"

#include <stdint.h>
#include <string.h>

#define SMALLEST 0x1p-22
#define LOCATED 0x1p-22
#define LONG 0.2

typedef enum verdict { GOOD, LIMIT, HOLD, MARGIN, NO_REACH, UNKNOWN } verdict;

typedef struct run {
    lw_move_answer *a;
    lwi_prove *p;
    const lwi_advance_ask *ask;
    lw_solution *sol;
    lw_work *work;
    double low;   /* proved so far */
    lw_mode mode;
    int margin;   /* of the last verdict MARGIN */
    size_t limb;  /* of the last verdict NO_REACH */
} run;

bool lwi_inverse_one(lw_solution **sol, bool *open, const lw_model *m, const lw_spec_tool *tool,
                     const lwi_pose_known *pose, const lw_mode *mode, const lw_config *hint,
                     lw_work *work);
size_t lwi_inverse_misses(double *miss_m, const lw_model *m, const lwi_pose_known *pose,
                          const lw_mode *mode, lw_work *work);

/* A margin below its threshold, or hold lost, at the posture in r->sol. */
static verdict judge_margins(run *r)
{
    const lw_margin_min *min = r->ask->min;
    double worst = 1e300;
    lw_margin_answer *margin = &r->work->margin;
    lwi_margin_at(margin, r->p->model, r->ask->tool, r->sol, false, r->work);
    if (!margin->held) {
        return HOLD;
    }
    r->margin = -1;
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        double least = min->value[i];
        double value = margin->margin[i].value;
        double relative = least > 0.0 ? value / least : 1e300;
        if (min->asked[i] && margin->margin[i].asked && !(value >= least) && relative < worst) {
            worst = relative;
            r->margin = i;
        }
    }
    return r->margin >= 0 ? MARGIN : GOOD;
}

/* The posture at t by closed formulas, in the mode of the start: near a fold, where Newton's steps
 * from the last proved end grow too large. GOOD where it was found. */
static verdict by_formula(run *r, double t)
{
    lwi_prove *p = r->p;
    lwi_pose_known pose;
    lw_solution *found;
    double miss = 0.0;
    bool open = false;
    if (p->joints || !p->model->explicit_inverse) {
        return UNKNOWN;
    }
    memset(&pose, 0, sizeof pose);
    lwi_move_at(&pose.body, pose.output_coord, p->move, p->model, t);
    r->limb = lwi_inverse_misses(&miss, p->model, &pose, &r->mode, r->work);
    if (r->limb != SIZE_MAX) {
        /* 0: by how much is not known. */
        return miss == 0.0 || fabs(miss) > 1e-9 ? NO_REACH : UNKNOWN;
    }
    if (!lwi_inverse_one(&found, &open, p->model, r->ask->tool, &pose, &r->mode, &r->sol->config,
                         r->work) ||
        open) {
        return UNKNOWN;
    }
    lwi_follow_take(p, &found->config, &r->sol->config);
    return GOOD;
}

/* The posture at t, followed from where the proof ended; what is wrong with it. */
static verdict look(run *r, double t)
{
    if (!lwi_follow_to(r->p, r->low, t, &r->sol->config)) {
        verdict v = by_formula(r, t);
        if (v != GOOD) {
            return v;
        }
    }
    lwi_solution_finish(r->sol, r->p->model, r->ask->tool);
    if (!r->sol->within_limits) {
        return LIMIT;
    }
    return judge_margins(r);
}

/* Which side of a forward singularity: the sign of the drives' determinant by outputs, which does
 * not depend on the basis of the freedoms. 0: not known, or not square. */
static int side_at(run *r, double t)
{
    const lw_model *m = r->p->model;
    double log2_abs;
    double a[LW_MAX_OUTPUTS * LW_MAX_OUTPUTS];
    size_t piv[LW_MAX_OUTPUTS];
    size_t n = m->mobility;
    if (m->spec->n_drive != n || m->spec->n_output != n ||
        !lwi_follow_to(r->p, r->low, t, &r->sol->config)) {
        return 0;
    }
    lwi_solution_finish(r->sol, m, r->ask->tool);
    lwi_margin_at(&r->work->margin, m, r->ask->tool, r->sol, false, r->work);
    if ((r->work->margin.classes & LW_CLASS_CONSTRAINT) != 0) {
        return 0;
    }
    memcpy(a, r->work->ak, n * n * sizeof *a);
    int sign = lwi_lu(a, n, n, piv, &log2_abs);
    memcpy(a, r->work->tk, n * n * sizeof *a);
    return sign * lwi_lu(a, n, n, piv, &log2_abs);
}

/* From the place where hold counts as lost, which is a little before, to where the determinant
 * changes its sign, if it does so soon. */
static void cross(run *r, double *at)
{
    int before = side_at(r, r->low);
    double step = LOCATED;
    double good = *at;
    double bad = *at;
    for (int i = 0; i < 24 && before != 0 && bad < 1.0; i++) {
        good = bad;
        bad = fmin(bad + step, 1.0);
        step *= 2.0;
        int now = side_at(r, bad);
        if (now == 0) {
            return;
        }
        if (now != before) {
            while (bad - good > 0.25 * LOCATED) {
                double mid = 0.5 * (good + bad);
                *(side_at(r, mid) == before ? &good : &bad) = mid;
            }
            *at = bad;
            return;
        }
    }
}

/* How far the posture in r->sol is on the good side of what `v` found wrong, in one unit: a margin
 * over its threshold, or room to the limit. NAN where that is no number. */
static double room_of(const run *r, verdict v, const lw_limit *limit, int margin)
{
    const lw_spec *spec = r->p->model->spec;
    double x;
    if (v == MARGIN) {
        double least = r->ask->min->value[margin];
        return least > 0.0 ? r->work->margin.margin[margin].value / least - 1.0 : NAN;
    }
    if (v != LIMIT || limit->part >= LW_PART_CONE) {
        return NAN;
    }
    if (limit->of == LW_LIMIT_DRIVE) {
        x = r->sol->drive[limit->index];
    } else if (limit->of == LW_LIMIT_ROD) {
        x = r->p->model->whole->rod[limit->index].length_m +
            r->sol->config.coord[lw_spec_rod_coord(spec, limit->index)];
    } else {
        x = r->sol->config.coord[lw_spec_joint_coord(spec, limit->index, limit->part)];
    }
    return limit->value > limit->range.low && limit->range.has_high ? limit->range.high - x
                                                                    : x - limit->range.low;
}

/* The first place in (r->low, bad] where something is wrong, to LOCATED; its verdict. Where the
 * room is a number on both sides, by false position (Illinois), else by halves. */
static verdict locate(run *r, double *at, double bad, verdict v)
{
    lw_limit limit = r->sol->limit[0];
    int margin = r->margin;
    double good = r->low;
    double f_bad = room_of(r, v, &limit, margin);
    double f_good = NAN;
    for (int turn = 0; bad - good > LOCATED && turn < 60; turn++) {
        double t = 0.5 * (good + bad);
        if (f_good > 0.0 && f_bad < 0.0 && turn % 4 != 3) {
            t = good + (bad - good) * f_good / (f_good - f_bad);
            /* A little to the far side, so that both ends close in. */
            t += t - good < bad - t ? 0.4 * LOCATED : -0.4 * LOCATED;
            t = fmin(fmax(t, good + 0.3 * LOCATED), bad - 0.3 * LOCATED);
        }
        verdict now = look(r, turn == 0 ? good : t);
        if (now == UNKNOWN) {
            break;
        }
        double f = room_of(r, v, &limit, margin);
        if (now == GOOD) {
            f_bad *= turn > 1 && good > r->low ? 0.5 : 1.0;
            good = turn == 0 ? good : t;
            f_good = f;
        } else if (turn == 0) {
            bad = good;
        } else {
            f_good *= 0.5;
            bad = t;
            f_bad = now == v && f < 0.0 ? f : NAN;
            v = now;
            limit = now == LIMIT ? r->sol->limit[0] : limit;
            margin = now == MARGIN ? r->margin : margin;
        }
    }
    verdict found = look(r, bad);
    *at = bad;
    if (found == HOLD) {
        cross(r, at);
        (void)look(r, *at);
    }
    return found;
}

static void take_limits(lw_move_answer *a, const lw_solution *sol)
{
    a->n_limit = sol->n_limit < 4 ? sol->n_limit : 4;
    for (size_t i = 0; i < a->n_limit; i++) {
        a->limit[i] = sol->limit[i];
        if (sol->limit[i].of == LW_LIMIT_DRIVE && a->drive < 0) {
            a->drive = (int)sol->limit[i].index;
        }
    }
}

/* A witness at `at`, which look() has just seen with verdict v. */
static void witness(run *r, verdict v, double at)
{
    lw_move_answer *a = r->a;
    a->at = at;
    switch (v) {
    case LIMIT:
        a->outcome = LW_OUTCOME_LIMIT;
        a->stop = LW_STOP_LIMIT;
        a->reason = "a limit is passed on the way";
        take_limits(a, r->sol);
        break;
    case HOLD:
        a->outcome = LW_OUTCOME_SINGULAR;
        a->stop = LW_STOP_FORWARD;
        a->reason = "hold is lost on the way: with all drives locked something can still move";
        break;
    case MARGIN:
        a->outcome = LW_OUTCOME_LOW_MARGIN;
        a->stop = LW_STOP_MARGIN;
        a->reason = "a margin falls below its threshold on the way";
        a->margin = r->margin;
        a->drive = r->work->margin.margin[r->margin].drive;
        break;
    case NO_REACH:
        a->outcome = LW_OUTCOME_OUT_OF_REACH;
        a->stop = LW_STOP_REACH;
        a->reason = "a limb cannot follow the tool on the way";
        a->limb = r->limb;
        break;
    case GOOD:
    case UNKNOWN:
        break;
    }
}

static void undecided(run *r, lw_stop stop, double high, const char *reason)
{
    lw_move_answer *a = r->a;
    a->outcome = LW_OUTCOME_UNDECIDED;
    a->stop = stop;
    a->reason = reason;
    a->at = r->low;
    a->open_low = r->low;
    a->open_high = high;
}

static void take_piece(run *r, double high)
{
    const lwi_prove *p = r->p;
    lw_move_answer *a = r->a;
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        lw_path_least *least = &a->least[i];
        if (!r->ask->min->asked[i]) {
            continue;
        }
        double at = 0.5 * (r->low + high) + 0.5 * (high - r->low) * p->met_at[i];
        least->at_least = least->known ? fmin(least->at_least, p->low[i]) : p->low[i];
        if (!least->known || p->met[i] < least->value) {
            least->value = p->met[i];
            least->at = at;
        }
        least->known = true;
    }
    if (a->n_piece < r->ask->piece_room && r->ask->piece != NULL) {
        lw_proof_piece *piece = &r->ask->piece[a->n_piece];
        memset(piece, 0, sizeof *piece);
        piece->low = r->low;
        piece->high = high;
        piece->tube = p->tube;
        piece->sigma = p->n_block > 0 ? p->sigma : 0.0;
        piece->hold = p->hold;
        memcpy(piece->drive_low, p->drive_low, sizeof piece->drive_low);
        memcpy(piece->drive_high, p->drive_high, sizeof piece->drive_high);
        for (int i = 0; i < LW_MARGIN_COUNT; i++) {
            piece->margin[i] = r->ask->min->asked[i] ? p->low[i] : 0.0;
        }
    }
    a->n_piece++;
}

/* Readings that can not be followed further: where hold is all but lost, the posture that the
 * drives do not hold is at hand, since its distance goes with the square of what hold is left. */
static void stuck_readings(run *r, double high)
{
    const lw_rank_info *drives = &r->work->margin.drives;
    verdict v = look(r, r->low);
    size_t n = drives->n_singular;
    if (v == HOLD || (v != UNKNOWN && n > 0 && drives->columns <= n &&
                      drives->singular[drives->columns - 1] < 5e-3 * drives->singular[0])) {
        witness(r, HOLD, r->low);
        return;
    }
    undecided(r, LW_STOP_RESOLUTION, high,
              "the readings that lead could not be proved to be followed further, nor that they "
              "cannot: with spare drives, others may lead");
}

/* The smallest interval was not enough. An inverse singularity: beyond it the limb has no solution
 * (found before this), or has one, in another branch. */
static void stuck(run *r, double high)
{
    const lwi_prove *p = r->p;
    bool branch = p->stage == LWI_STAGE_FOLLOW || p->stage == LWI_STAGE_BLOCK ||
                  p->stage == LWI_STAGE_BRANCH;
    if (!branch) {
        undecided(r, LW_STOP_RESOLUTION, high,
                  "the smallest interval was not enough: the way grazes a threshold, a limit or a "
                  "singular posture here; ask for a lower threshold, or move the way aside");
        return;
    }
    if (p->joints) {
        stuck_readings(r, high);
        return;
    }
    for (double beyond = SMALLEST; beyond < 0.01; beyond *= 4.0) {
        double at;
        double t = fmin(r->low + beyond, 1.0);
        verdict v = look(r, t);
        if (v == NO_REACH && (v = locate(r, &at, t, v)) != GOOD && v != UNKNOWN) {
            witness(r, v, at);
            return;
        }
    }
    r->a->limb = p->limb;
    double value = 1.0;
    if (p->limb < p->model->n_limb && lwi_follow_to(r->p, r->low, r->low, &r->sol->config)) {
        (void)lwi_limb_branch(&value, p->model, &p->model->limb[p->limb], &r->sol->config);
    }
    if (fabs(value) < 1e-3) {
        r->a->outcome = LW_OUTCOME_OTHER_MODE;
        r->a->stop = LW_STOP_INVERSE;
        r->a->reason = "a limb comes to an inverse singularity, where its branches meet: beyond it "
                       "the way is not kept in one mode";
        r->a->at = r->low;
        return;
    }
    undecided(r, LW_STOP_RESOLUTION, high,
              "the branch could not be proved to go on here, nor that it ends");
}

/* After a failure on [r->low, r->low + step]: true where that settled the move. */
static bool screen(run *r, double step, double *cap)
{
    double mid = r->low + 0.5 * step;
    double at;
    verdict v = look(r, mid);
    if (v == GOOD || v == UNKNOWN) {
        return false;
    }
    v = locate(r, &at, mid, v);
    if (v == GOOD || v == UNKNOWN) {
        return false;
    }
    witness(r, v, at);
    *cap = at;
    return true;
}

void lwi_advance(lw_move_answer *a, double *proved, lwi_prove *p,
                 const lwi_advance_ask *ask, lw_solution *sol, lw_work *work)
{
    run r = {.a = a, .p = p, .ask = ask, .sol = sol, .work = work, .limb = SIZE_MAX};
    double step = 1.0;
    double cap = 1.0;
    bool settled = false;
    a->outcome = LW_OUTCOME_OK;
    lwi_mode_of(&r.mode, p->model, &sol->config); /* a move by readings may have changed it */
    size_t failed = 0; /* one after another */
    while (r.low < cap) {
        double high = r.low + step < cap ? r.low + step : cap;
        if (ask->abort != NULL && atomic_load_explicit(ask->abort, memory_order_relaxed)) {
            if (!settled) {
                undecided(&r, LW_STOP_ABORT, 1.0, "stopped by the time limit of the question");
            }
            break;
        }
        if (a->boxes >= ask->budget) {
            if (!settled) {
                undecided(&r, LW_STOP_BUDGET, 1.0,
                          "the budget ran out: ask with a larger one, or a lower threshold");
            }
            break;
        }
        a->boxes++;
        if (lwi_prove_interval(p, r.low, high)) {
            take_piece(&r, high);
            lwi_prove_accept(p);
            r.low = high;
            step *= 2.0;
            failed = 0;
            continue;
        }
        if (failed++ == 0 && r.low == 0.0 && !settled) {
            verdict v = look(&r, 0.0);
            if (v != GOOD && v != UNKNOWN) {
                witness(&r, v, 0.0);
                break;
            }
        }
        if (p->stage == LWI_STAGE_UNSUPPORTED) {
            undecided(&r, LW_STOP_UNSUPPORTED, 1.0,
                      "whether the drives hold this mechanism on the way is not proved by this "
                      "version");
            break;
        }
        /* An interval that is too long for its branch says nothing of its middle. */
        bool long_one = p->stage <= LWI_STAGE_BRANCH && high - r.low > LONG;
        if (!settled && !long_one && screen(&r, high - r.low, &cap)) {
            settled = true;
            if (!ask->close_up) {
                break;
            }
            step = 0.5 * (cap - r.low);
            cap -= LOCATED;
            continue;
        }
        step = 0.5 * (high - r.low);
        if (step < SMALLEST) {
            if (!settled) {
                stuck(&r, high);
            }
            break;
        }
    }
    *proved = r.low;
    if (a->outcome == LW_OUTCOME_OK) {
        a->at = 1.0;
        bool followed = lwi_follow_to(p, r.low, r.low, &sol->config);
        lwi_solution_finish(sol, p->model, ask->tool);
        if (!followed) {
            undecided(&r, LW_STOP_RESOLUTION, 1.0, "the end of the move could not be followed");
        }
    }
}
