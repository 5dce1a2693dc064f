/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The inside of a model and of a work object: what the rooms of the core share. Models are
 * immutable after lw_model_new; a work object belongs to one thread. */
#ifndef LWI_MODEL_H
#define LWI_MODEL_H

#include "../closure/system.h"
#include "../homotopy/sets.h"
#include "../limb/limb.h"
#include "../math/linalg.h"

#include <leeway/model.h>
#include <leeway/path.h>
#include <leeway/query.h>

enum { LWI_MAX_PROPAGATE = LW_MAX_JOINTS, LWI_MAX_SOLUTIONS = 256 };

/* How the orientation of the tool body follows from the outputs; found at load on samples. */
typedef enum lwi_rot_rule {
    LWI_ROT_FULL,  /* three rotation outputs */
    LWI_ROT_CONST, /* never turns */
    LWI_ROT_AXIS,  /* turns about a fixed axis by the one rotation output */
    LWI_ROT_COORD, /* turns about a fixed axis by an output joint coordinate */
    LWI_ROT_NONE   /* follows only by iteration */
} lwi_rot_rule;

typedef struct lwi_completion {
    bool usable;         /* the whole tool pose follows from the outputs */
    lwi_rot_rule rot;
    double axis[3];
    size_t output;       /* AXIS: output index; COORD: output index */
    double factor;       /* COORD: angle = factor * coordinate */
    bool pos_output[3];  /* else: that component of the displacement is constant zero */
} lwi_completion;

/* A coordinate that follows linearly from output coordinates (screws, gears). */
typedef struct lwi_determined {
    size_t coord;
    size_t n;
    size_t from[LW_MAX_OUTPUTS]; /* output index */
    double factor[LW_MAX_OUTPUTS];
} lwi_determined;

/* A body whose pose follows from another through a joint with known coordinates. */
typedef struct lwi_propagate {
    size_t joint;
    size_t from, to; /* bodies */
} lwi_propagate;

struct lw_model {
    lw_spec *spec;
    lw_report report;
    double length_m;
    size_t n_coord, n_ball;
    size_t mobility;        /* idle spins locked */
    size_t rank;            /* generic rank of the closure rows of `whole` */
    lwi_system *whole;      /* nothing given: rates, forward, any posture */
    lwi_system *inverse;    /* tool body and output coordinates given; NULL if not completable */
    lwi_completion completion;
    size_t n_determined;
    lwi_determined determined[LW_MAX_COORDS];
    size_t n_propagate;
    lwi_propagate propagate[LWI_MAX_PROPAGATE];
    size_t fused[LW_MAX_BODIES];
    size_t n_limb;
    lwi_limb limb[LW_MAX_LIMBS];
    bool explicit_inverse;
    size_t max_solutions;
    lwi_set *set[2]; /* forward, inverse; NULL = none prepared */
    lw_config reference, home; /* owned */
    double *config_store;
    lw_mode home_mode;
    bool drive_moves_coord[LW_MAX_COORDS];
    bool drive_spare[LW_MAX_DRIVES]; /* at nearly all postures the others hold the machine alone */
};

/* Buffers of the constrained Gauss-Newton step, sized for one system and its goals. */
struct lwi_goal;

typedef struct lwi_newton_work {
    size_t n_var, n_row, n_goal;
    double *rows;     /* n_row x n_var */
    double *res;      /* n_row */
    double *qr;       /* n_var x n_row, then reflectors of the closure rows */
    double *tau;
    size_t *perm;
    double *goals;    /* n_goal x n_var */
    double *goal_res;
    double *reduced;  /* n_goal x n_var */
    double *tau2;
    size_t *perm2;
    double *step;     /* n_var */
    double *vec;      /* max(n_var, n_row, n_goal) */
} lwi_newton_work;

struct lw_work {
    const lw_model *model;
    lwi_newton_work newton;
    lwi_state state, trial;
    struct lwi_goal *goal, *goal2, *goal3; /* LWI_MAX_GOALS each */
    lwi_eval ev;
    size_t n_solution;
    lw_solution *solution;     /* [max_solutions + LWI_SPARE] */
    double *config_store;
    lw_config scratch, scratch2;
    lwi_limb_result *limb_result; /* [n_limb * LWI_MAX_BRANCHES] */
    double *limb_store;
    /* rates */
    double *k;                 /* n_var x mobility, null space, orthonormal columns, scaled */
    double *ak;                /* drives x mobility */
    double *tk;                /* outputs x mobility */
    double *twist;             /* 6 x mobility */
    double *matrix[4];         /* square-ish scratch, side max(n_var, n_row, 64) */
    double *vector[4];
    size_t *index;
    lwi_set_work *set; /* NULL where the model has no sets */
    lw_inverse_answer inverse;
    lw_forward_answer forward;
    lw_posture_answer posture;
    lw_jacobian_answer jacobian;
    lw_margin_answer margin;
    lw_reach_answer reach;
    lw_distance_answer distance;
    struct lwi_distance_work *distance_work;
    struct lwi_prove *prove; /* core/proof: moves of the tool, */
    struct lwi_prove *prove_joints; /* moves by readings */
    lw_path_answer path;
    lw_travel_answer travel;
    lw_singular_answer singular;
    struct lwi_singular_work *singular_work;
};
enum {
    LWI_SPARE = 7, /* solution slots behind the list: posture, forward fit, start, reach, moves */
    LWI_SLOT_POSTURE = 0,
    LWI_SLOT_FORWARD = 1,
    LWI_SLOT_START = 2,
    LWI_SLOT_REACH = 3,
    LWI_SLOT_MOVE = 4,
    LWI_SLOT_MOVE_START = 5,
    LWI_SLOT_MOVE_AT = 6
};
static inline lw_solution *lwi_slot(lw_work *work, size_t slot)
{
    return &work->solution[work->model->max_solutions + slot];
}

lw_code lwi_work_open(lw_work **out, const lw_model *model, lw_err *err);
size_t lwi_config_doubles(const lw_model *model);
void lwi_config_bind(lw_config *config, const lw_model *model, double *store);
void lwi_config_copy(lw_config *to, const lw_model *model, const lw_config *from);
void lwi_solution_copy(lw_solution *to, const lw_model *model, const lw_solution *from);

/* What the report says of the sets. */
void lwi_sets_report(lw_model *model);

/* Drive coordinates, tool pose, mode and limits of a solution whose config is filled. */
void lwi_solution_finish(lw_solution *sol, const lw_model *model, const lw_spec_tool *tool);
void lwi_limits_judge(lw_solution *sol, const lw_model *model);
void lwi_drive_coords(double *drive, const lw_model *model, const lw_config *config);
const lw_spec_tool *lwi_tool(const lw_model *model, size_t tool, const lw_spec_tool *written,
                             lw_err *err);
void lwi_tool_pose(lw_frame *pose, const lw_spec_tool *tool, const lw_config *config);

#endif
