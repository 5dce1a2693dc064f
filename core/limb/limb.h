/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Limbs: what is left of a mechanism when the tool pose (and output joint coordinates) are known
 * falls into independent pieces. Pieces that can be solved without iteration are recognised at
 * load; the rest are solved by Newton's method from a start.
 *
 * A branch is a number whose bits are the signs of the limb's inverse-singularity factors, relative
 * to the home posture: branch 0 is the default branch. */
#ifndef LWI_LIMB_H
#define LWI_LIMB_H

#include "classes.h"

#include <leeway/model.h>
#include <leeway/query.h>

enum { LWI_MAX_BRANCHES = 8, LWI_LIMB_JOINTS = 16, LWI_LIMB_RODS = 12, LWI_LIMB_BODIES = 16,
       LWI_LIMB_VARS = 40 };

typedef struct lwi_chain_joint {
    size_t joint;
    double sign; /* +1: body[0] stands on the known first body's side */
    size_t next; /* body on the far side */
} lwi_chain_joint;

typedef struct lwi_limb {
    lw_limb_kind kind;
    bool counted;        /* appears in mode texts */
    unsigned branches;   /* 1, 2 or 8; general limbs: classes, or 2 signs known */
    struct lwi_classes *classes; /* general limbs of more than two solutions; owned by the model */
    unsigned home_bits;  /* raw factor bits at home */
    size_t n_joint;
    size_t joint[LWI_LIMB_JOINTS];
    size_t n_rod;
    size_t rod[LWI_LIMB_RODS];
    size_t n_body;       /* unknown bodies */
    size_t body[LWI_LIMB_BODIES];
    size_t anchor[2];    /* known bodies at the ends of a chain */
    size_t n_chain;      /* joints in a row from anchor to anchor; 0 = no chain */
    lwi_chain_joint chain[6];
    int block;           /* general: block of the inverse system, -1 none */
    size_t n_var;        /* general: unknowns of that block */
    int var[LWI_LIMB_VARS];
    size_t n_pick;       /* general: rows picked at home for the determinant */
    int pick[LWI_LIMB_VARS];
} lwi_limb;

/* What one branch of a limb came out as. */
typedef struct lwi_limb_result {
    bool real;
    bool open;           /* the limb can move with its ends at rest: one sample of many */
    double miss_m;       /* how much too short (+) or too long (-) the limb is when not real */
    lw_frame body[LWI_LIMB_BODIES]; /* displacements of the limb's bodies, in limb order */
} lwi_limb_result;

struct lw_model;

/* Finds limbs and recognises their kinds; fills model->limb. Runs at load. */
lw_code lwi_limbs_find(lw_model *model, lw_err *err);
/* Home bits, rows and classes of general limbs, home mode and what the report says of limbs, once
 * home is known. */
lw_code lwi_limbs_home(lw_model *model, lw_err *err);
void lwi_limbs_free(lw_model *model);

/* Solves one branch of an explicit limb; known bodies stand in config->body. */
void lwi_limb_solve(lwi_limb_result *out, const lw_model *model, const lwi_limb *limb,
                    unsigned branch, const lw_config *config);
/* Branch of a limb at a configuration, and the scaled determinant behind its sign (-1..1,
 * positive on the default branch). LWI_BRANCH_OPEN where a general limb's class is not found. */
unsigned lwi_limb_branch(double *value, const lw_model *model, const lwi_limb *limb,
                         const lw_config *config);
/* Mode of a configuration. */
void lwi_mode_of(lw_mode *mode, const lw_model *model, const lw_config *config);
/* Whether a posture's mode belongs to the mode asked for: where a limb's sign is 0 it belongs to
 * the modes on both sides, since touching zero is not yet a change. */
bool lwi_mode_fits(const lw_mode *posture, const lw_mode *asked);
/* Branch number named by a mode entry; false if the entry names no branch of this limb. */
bool lwi_branch_from_entry(unsigned *branch, const lwi_limb *limb, signed char sign,
                           unsigned short number);
/* Refuses a mode whose entries are not those of this model's limbs: how many, and which classes. */
lw_code lwi_mode_check(const lw_model *model, const lw_mode *mode, lw_err *err);
/* Per kind: raw factor bits count from the geometry alone, home_bits is applied by the callers. */
bool lwi_two_link_recognise(const lw_model *model, const lwi_limb *limb);
bool lwi_wrist_arm_recognise(const lw_model *model, const lwi_limb *limb);
void lwi_rail_rod_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                        unsigned bits, const lw_config *config);
void lwi_crank_rod_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                         unsigned bits, const lw_config *config);
void lwi_two_link_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                        unsigned bits, const lw_config *config);
void lwi_wrist_arm_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                         unsigned bits, const lw_config *config);
unsigned lwi_rail_rod_bits(double *value, const lw_model *m, const lwi_limb *limb,
                           const lw_config *config);
unsigned lwi_crank_rod_bits(double *value, const lw_model *m, const lwi_limb *limb,
                            const lw_config *config);
unsigned lwi_two_link_bits(double *value, const lw_model *m, const lwi_limb *limb,
                           const lw_config *config);
unsigned lwi_wrist_arm_bits(double *value, const lw_model *m, const lwi_limb *limb,
                            const lw_config *config);
unsigned lwi_general_bits(double *value, const lw_model *m, const lwi_limb *limb,
                          const lw_config *config);

/* Displacement of `to` from that of `from` through a joint with known coordinates. */
void lwi_joint_carry(lw_frame *to, const lw_spec *spec, size_t joint, const double *coord,
                     const double ball[4], bool forward, const lw_frame *from);

#endif
