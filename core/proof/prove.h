/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One interval of a move, proved: that every limb has its one solution near the branch followed,
 * that limits hold, that the drives hold the tool, and how large the margins are at least. The
 * driver (drive.h) chooses the intervals. One object a lane, made with the work object; nothing
 * here allocates afterwards.
 *
 * The unknowns of the inverse system fall into blocks, one a limb. On an interval
 *  1. each block is solved in doubles at the nodes, from the left on (follow.c);
 *  2. polynomials through these values are the predictor; the residual r and the derivative J of
 *     the solved rows along it are models; a lower bound s of the least singular value of J on the
 *     whole interval, |r| and a bound of the second derivative prove one root, and only one, within
 *     a radius (Newton-Kantorovich: tube.c). J regular says that no inverse singularity is met;
 *  3. the radius goes into the unknowns as their rest, and everything else is a model of the true
 *     motion: limits (bounds.c), drive rates by output rates (rates_pm.c), margins (least.c). */
#ifndef LWI_PROVE_H
#define LWI_PROVE_H

#include "move.h"
#include "pm_solve.h"
#include "rank.h"

enum { LWI_BLOCK_VARS = 24, LWI_BLOCK_ROWS = 96 };

typedef struct lwi_prove_block {
    size_t n, n_row, limb;
    unsigned short var[LWI_BLOCK_VARS];
    unsigned short row[LWI_BLOCK_ROWS];
    unsigned short pick[LWI_BLOCK_VARS]; /* rows that are solved, drive d being row n_row + d of the
                                          * system; the rest is checked in doubles */
    size_t jac, in;      /* where its matrices begin */
    double sigma;        /* of this interval */
    double radius, unique;
} lwi_prove_block;

/* Values of the unknown elements, and how well they are known, block by block. */
typedef struct lwi_prove_point {
    double *value;       /* [elements] */
    double (*quat)[4];   /* [quats] */
    double (*pos_m)[3];
    double *radius, *unique; /* [blocks] */
} lwi_prove_point;

/* Why an interval was not proved. */
typedef enum lwi_prove_stage {
    LWI_PROVED,
    LWI_STAGE_FOLLOW,    /* Newton lost the branch in doubles: limb */
    LWI_STAGE_BLOCK,     /* no proof of existence: limb */
    LWI_STAGE_BRANCH,    /* the neighbour's root is not surely this one: limb */
    LWI_STAGE_LIMIT,
    LWI_STAGE_HOLD,
    LWI_STAGE_MARGIN,
    LWI_STAGE_UNSUPPORTED
} lwi_prove_stage;

typedef struct lwi_prove {
    const lw_model *model;
    const lwi_system *sys;
    const lw_spec_tool *tool;
    const lw_margin_min *min;
    const lwi_move *move;
    bool joints;                 /* by readings, on the whole system: see below */
    bool borrows;                /* scratch is another's */
    size_t n_lead;
    size_t lead[LW_MAX_OUTPUTS]; /* drives that lead */
    double from[LW_MAX_DRIVES], along[LW_MAX_DRIVES]; /* their readings */
    double t;                    /* where the doubles stand */
    double mid, half;            /* the interval */
    size_t n_block;
    lwi_prove_block *block;
    int *var_block;              /* [unknowns] */
    size_t tool_node;
    double (*given)[2];          /* [elements] value at the start of the move, and along it */
    bool whole_needed;           /* hold is judged on the whole system */
    bool usable;                 /* this mechanism can be proved by its inverse system */
    const char *unusable;        /* why not */
    /* doubles */
    lwi_state *state;
    lwi_eval *ev;
    double *rows, *square, *step, *res;
    size_t *perm;
    double *tau;
    lwi_prove_point left, right, trial, node[LWI_PM_SIZE];
    double *point_store;
    double *coord_left, *coord_right; /* [coords] unwrapped, at the ends of the interval */
    double swing;                     /* largest step of the following, scaled */
    /* models */
    lwi_pm_point *point;
    lwi_pm_eval *eval;
    lwi_pm_eval *whole_eval;
    lwi_pm_point *whole_point;
    lwi_pm_inputs inputs;
    lwi_pm arm[3];
    lwi_pm coord[LW_MAX_OUTPUTS];
    lwi_pm *row, *jac, *in, *solved; /* solved: d unknown / d output, n_var x m */
    lwi_pm *big[3];
    lwi_rank_work *rank;
    lwi_pm_solve_work *solver;
    lwi_pm drive[LW_MAX_DRIVES];
    lwi_pm rod[LW_MAX_RODS];
    /* Rates by m independent parameters, the basis: outputs, or the readings that lead. */
    lwi_pm rates[LW_MAX_DRIVES * LW_MAX_OUTPUTS]; /* of drives, row by row */
    lwi_pm vel[LW_MAX_OUTPUTS][3], turn[LW_MAX_OUTPUTS][3]; /* of the tool */
    lwi_pm coord_rate[LW_MAX_OUTPUTS][LW_MAX_OUTPUTS]; /* of output joints, [output][parameter] */
    lwi_pm by_output[LW_MAX_DRIVES * LW_MAX_OUTPUTS]; /* drives by outputs, where speed is asked */
    /* what came out */
    lwi_prove_stage stage;
    size_t limb;
    int margin;
    double low[LW_MARGIN_COUNT];  /* proved on the interval */
    double met[LW_MARGIN_COUNT];  /* at places looked at: not below the least value */
    double met_at[LW_MARGIN_COUNT];
    double sigma, hold, tube;
    double hold_constant; /* hold where it is the same everywhere, else 0 */
    double drive_low[LW_MAX_DRIVES], drive_high[LW_MAX_DRIVES];
} lwi_prove;

/* For moves of the tool, or (with that one given) for moves by readings: there the whole system is
 * solved in one block, its closure rows and the readings of as many drives as it has freedoms,
 * which lead; the scratch of the other is shared. */
lw_code lwi_prove_new(lwi_prove **out, const lw_model *model, const lwi_prove *tool_moves,
                      lw_err *err);
void lwi_prove_free(lwi_prove *p);

/* Starts a move at a configuration: fills left, picks rows. */
void lwi_prove_begin(lwi_prove *p, const lwi_move *move, const lw_spec_tool *tool,
                     const lw_margin_min *min, const lw_config *start);
/* The same by readings: p->lead, from and along are set. */
void lwi_prove_begin_joints(lwi_prove *p, const lw_spec_tool *tool, const lw_margin_min *min,
                            const lw_config *start);
/* Proves [low, high]; low is where the last proved interval ended, or 0. On success `right` is the
 * end; lwi_prove_accept makes it the left of the next. */
bool lwi_prove_interval(lwi_prove *p, double low, double high);
void lwi_prove_accept(lwi_prove *p);

/* follow.c. The configuration at t in doubles, followed from the last proved end at `low`; false
 * where the branch is lost. */
bool lwi_follow_to(lwi_prove *p, double low, double t, lw_config *config);
bool lwi_follow_nodes(lwi_prove *p, double low, double high);
void lwi_follow_config(lwi_prove *p, lw_config *config);
/* A posture found otherwise, its turns next to those of the last proved end. */
void lwi_follow_take(lwi_prove *p, const lw_config *found, lw_config *config);
void lwi_follow_pick(lwi_prove *p);
void lwi_point_from_state(lwi_prove_point *out, const lwi_prove *p, const lwi_state *state);
/* Whether row i of a block is a drive, and which. */
static inline bool lwi_row_is_drive(const lwi_prove *p, size_t row, size_t *drive)
{
    *drive = row - p->sys->n_row;
    return row >= p->sys->n_row;
}
void lwi_state_from_point(lwi_state *out, const lwi_prove *p, const lwi_prove_point *point);

/* tube.c */
bool lwi_tube(lwi_prove *p, double low, double high);
/* The derivative of a block's solved rows along the motion, tube included, into p->jac. */
void lwi_block_models(lwi_prove *p, const lwi_prove_block *block);

/* bounds.c: limits on the interval. */
bool lwi_bounds_hold(lwi_prove *p);

/* rates_pm.c: drives and all rates of the basis; hold.c. */
bool lwi_rates_model(lwi_prove *p);
bool lwi_rates_by_output(lwi_prove *p);
bool lwi_hold_model(lwi_prove *p);
void lwi_hold_constant(lwi_prove *p);

/* least.c: margins against p->min, into p->low. */
bool lwi_least_hold(lwi_prove *p);

#endif
