/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branches and modes: which inverse branch each limb is in, and the texts for it. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "../model/model.h"

#include <stdio.h>
#include <stdlib.h>

void lwi_joint_carry(lw_frame *to, const lw_spec *spec, size_t joint, const double *coord,
                     const double ball[4], bool forward, const lw_frame *from)
{
    const lw_spec_joint *j = &spec->joint[joint];
    lw_frame e;
    double moved[3];
    lwi_frame_identity(&e);
    switch (j->type) {
    case LW_FIXED:
        break;
    case LW_PRISMATIC:
        lwi_axpy(e.pos_m, e.pos_m, coord[0], j->axis);
        break;
    case LW_REVOLUTE:
    case LW_HELICAL:
    case LW_CYLINDRICAL:
        lwi_rot_axis(e.rot, j->axis, coord[0]);
        lwi_rot_apply(moved, e.rot, j->at_m);
        lwi_sub(e.pos_m, j->at_m, moved);
        if (j->type == LW_HELICAL) {
            lwi_axpy(e.pos_m, e.pos_m, coord[0] * j->lead_m / 6.283185307179586476925, j->axis);
        } else if (j->type == LW_CYLINDRICAL) {
            lwi_axpy(e.pos_m, e.pos_m, coord[1], j->axis);
        }
        break;
    case LW_UNIVERSAL: {
        double a[9];
        double b[9];
        lwi_rot_axis(a, j->axis, coord[0]);
        lwi_rot_axis(b, j->second_axis, coord[1]);
        lwi_rot_mul(e.rot, a, b);
        lwi_rot_apply(moved, e.rot, j->at_m);
        lwi_sub(e.pos_m, j->at_m, moved);
        break;
    }
    case LW_PLANAR: {
        double y[3];
        lwi_cross(y, j->axis, j->second_axis);
        lwi_rot_axis(e.rot, j->axis, coord[2]);
        lwi_rot_apply(moved, e.rot, j->at_m);
        lwi_sub(e.pos_m, j->at_m, moved);
        lwi_axpy(e.pos_m, e.pos_m, coord[0], j->second_axis);
        lwi_axpy(e.pos_m, e.pos_m, coord[1], y);
        break;
    }
    case LW_SPHERICAL:
        lw_rot_from_quat(e.rot, ball);
        lwi_rot_apply(moved, e.rot, j->at_m);
        lwi_sub(e.pos_m, j->at_m, moved);
        break;
    }
    if (forward) {
        lwi_frame_mul(to, from, &e);
    } else {
        lw_frame back;
        lwi_frame_inverse(&back, &e);
        lwi_frame_mul(to, from, &back);
    }
}

void lwi_limb_solve(lwi_limb_result *out, const lw_model *model, const lwi_limb *limb,
                    unsigned branch, const lw_config *config)
{
    unsigned bits = branch ^ limb->home_bits;
    out->real = false;
    out->open = false;
    out->miss_m = 0.0;
    switch (limb->kind) {
    case LW_LIMB_STRUT:
        out->real = branch == 0;
        break;
    case LW_LIMB_RAIL_ROD:
        lwi_rail_rod_solve(out, model, limb, bits, config);
        break;
    case LW_LIMB_CRANK_ROD:
        lwi_crank_rod_solve(out, model, limb, bits, config);
        break;
    case LW_LIMB_TWO_LINK:
        lwi_two_link_solve(out, model, limb, bits, config);
        break;
    case LW_LIMB_WRIST_ARM:
        lwi_wrist_arm_solve(out, model, limb, bits, config);
        break;
    case LW_LIMB_GENERAL:
        break;
    }
}

/* Determinant of the picked rows over the limb's unknowns at a configuration, each row scaled to
 * unit length; the sign changes only through an inverse singularity of the limb. */
unsigned lwi_general_bits(double *value, const lw_model *m, const lwi_limb *limb,
                          const lw_config *config)
{
    const lwi_system *sys = m->inverse;
    lwi_state state;
    lwi_eval ev;
    double row[LWI_MAX_VARS];
    double a[LWI_LIMB_VARS * LWI_LIMB_VARS];
    size_t piv[LWI_LIMB_VARS];
    size_t n = limb->n_pick;
    *value = 1.0;
    if (n == 0 || n != limb->n_var) {
        return 0;
    }
    memset(&state, 0, sizeof state);
    lwi_state_from_config(&state, sys, config);
    lwi_frame_identity(&state.given[0]);
    lwi_eval_nodes(&ev, sys, &state);
    for (size_t i = 0; i < n; i++) {
        lwi_row_derivative(row, sys, &sys->row[limb->pick[i]], &state, &ev);
        double size = 0.0;
        for (size_t j = 0; j < n; j++) {
            a[i * n + j] = row[limb->var[j]];
            size += a[i * n + j] * a[i * n + j];
        }
        size = sqrt(size);
        for (size_t j = 0; j < n && size > 0.0; j++) {
            a[i * n + j] /= size;
        }
    }
    double log2_abs;
    int sign = lwi_lu(a, n, n, piv, &log2_abs);
    *value = sign == 0 ? 0.0 : sign * exp2(fmax(log2_abs, -1000.0));
    return *value > 0.0 ? 1u : 0u;
}

static unsigned raw_bits(double *value, const lw_model *m, const lwi_limb *limb,
                         const lw_config *config)
{
    *value = 1.0;
    switch (limb->kind) {
    case LW_LIMB_STRUT:
        break;
    case LW_LIMB_RAIL_ROD:
        return lwi_rail_rod_bits(value, m, limb, config);
    case LW_LIMB_CRANK_ROD:
        return lwi_crank_rod_bits(value, m, limb, config);
    case LW_LIMB_TWO_LINK:
        return lwi_two_link_bits(value, m, limb, config);
    case LW_LIMB_WRIST_ARM:
        return lwi_wrist_arm_bits(value, m, limb, config);
    case LW_LIMB_GENERAL:
        return lwi_general_bits(value, m, limb, config);
    }
    return 0;
}

static bool odd(unsigned x)
{
    return ((x ^ (x >> 1) ^ (x >> 2)) & 1u) != 0;
}

unsigned lwi_limb_branch(double *value, const lw_model *model, const lwi_limb *limb,
                         const lw_config *config)
{
    unsigned branch = raw_bits(value, model, limb, config) ^ limb->home_bits;
    *value = odd(branch) ? -fabs(*value) : fabs(*value);
    if (limb->classes != NULL) {
        return lwi_class_of(limb->classes, config, *value > 0.0 ? 1 : -1);
    }
    return branch;
}

bool lwi_branch_from_entry(unsigned *branch, const lwi_limb *limb, signed char sign,
                           unsigned short number)
{
    if (sign == 0) {
        return false; /* on the border of two branches */
    }
    const lwi_classes *c = limb->classes;
    if (c != NULL) {
        *branch = number == 0 ? 0u : (unsigned)number - 1u;
        return number >= 1 && number <= c->n_class && c->class_sign[*branch] == sign;
    }
    if (limb->branches > 2) {
        *branch = number == 0 ? 0u : (unsigned)number - 1u;
        return number >= 1 && number <= limb->branches && odd(*branch) == (sign < 0);
    }
    *branch = sign < 0 ? 1u : 0u;
    return number == 0 && *branch < (limb->branches > 1 ? 2u : 1u);
}

bool lwi_mode_fits(const lw_mode *posture, const lw_mode *asked)
{
    bool fits = posture->count == asked->count;
    for (size_t i = 0; i < posture->count && fits; i++) {
        fits = posture->sign[i] == 0 || (posture->sign[i] == asked->sign[i] &&
                                         posture->branch[i] == asked->branch[i]);
    }
    return fits;
}

lw_code lwi_mode_check(const lw_model *model, const lw_mode *mode, lw_err *err)
{
    if (mode->count != model->n_limb) {
        return LW_FAIL(err, LW_E_ARGUMENT, "/mode",
                       "the mode needs %zu entries, one per limb, and has %zu", model->n_limb,
                       mode->count);
    }
    for (size_t i = 0; i < mode->count; i++) {
        unsigned branch;
        if (mode->sign[i] != 0 &&
            !lwi_branch_from_entry(&branch, &model->limb[i], mode->sign[i], mode->branch[i])) {
            return LW_FAIL(err, LW_E_ARGUMENT, "/mode",
                           "entry %zu of the mode names no branch of limb \"%s\"; the list of "
                           "modes shows those there are",
                           i + 1, model->report.limb[i].name);
        }
    }
    return LW_OK;
}

void lwi_mode_of(lw_mode *mode, const lw_model *model, const lw_config *config)
{
    mode->count = 0;
    for (size_t i = 0; i < model->n_limb; i++) {
        const lwi_limb *limb = &model->limb[i];
        double value;
        unsigned branch = lwi_limb_branch(&value, model, limb, config);
        size_t k = mode->count++;
        bool numbered = limb->branches > 2 || limb->classes != NULL;
        mode->sign[k] = fabs(value) < LWI_SIGN_ZERO ? 0 : value > 0.0 ? 1 : -1;
        mode->branch[k] =
            numbered && branch != LWI_BRANCH_OPEN ? (unsigned short)(branch + 1) : 0;
    }
}

static void describe(lw_limb_info *info, const lw_model *m, const lwi_limb *limb)
{
    const lw_spec *spec = m->spec;
    memset(info, 0, sizeof *info);
    const char *first = limb->n_joint > 0 ? spec->joint[limb->joint[0]].name
                                          : spec->rod[limb->rod[0]].name;
    (void)snprintf(info->name, sizeof info->name, "%s", first);
    info->kind = limb->kind;
    info->branches = limb->kind == LW_LIMB_GENERAL ? 0 : limb->branches;
    info->classes = limb->classes != NULL ? limb->classes->n_class : 0;
    for (size_t d = 0; d < spec->n_drive; d++) {
        bool moves = false;
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            size_t joint = 0;
            size_t part = 0;
            size_t rod = 0;
            if (!lw_spec_coord_owner(spec, spec->drive[d].term[t].coord, &joint, &part, &rod)) {
                continue;
            }
            for (size_t k = 0; k < limb->n_joint; k++) {
                moves = moves || joint == limb->joint[k];
            }
            for (size_t k = 0; k < limb->n_rod && joint == (size_t)-1; k++) {
                moves = moves || rod == limb->rod[k];
            }
        }
        if (moves) {
            info->drive[info->n_drive++] = d;
        }
    }
    bool up = (limb->home_bits & 1u) != 0;
    const char *words = "one inverse solution";
    switch (limb->kind) {
    case LW_LIMB_STRUT:
        break;
    case LW_LIMB_RAIL_ROD:
        words = up ? "carriage ahead of the far rod end along the rail's axis"
                   : "carriage behind the far rod end along the rail's axis";
        break;
    case LW_LIMB_CRANK_ROD:
        words = up ? "crank turned positively past the rod's dead centre"
                   : "crank turned negatively past the rod's dead centre";
        break;
    case LW_LIMB_TWO_LINK:
        words = up ? "elbow bent positively about the first axis"
                   : "elbow bent negatively about the first axis";
        break;
    case LW_LIMB_WRIST_ARM:
        words = "class 1 as at home; classes count shoulder, elbow and wrist turned over";
        break;
    case LW_LIMB_GENERAL:
        words = limb->classes != NULL
                    ? "class 1 as at home; within a class the limb moves past no zero of its "
                      "determinant"
                    : "sign of the limb's determinant as at home";
        break;
    }
    (void)snprintf(info->plus, sizeof info->plus, "%s", words);
}

/* Rows of a general limb that are independent at home: pivots of the transposed block. */
static void pick_rows(lwi_limb *limb, const lw_model *m)
{
    const lwi_system *sys = m->inverse;
    lwi_state state;
    lwi_eval ev;
    double row[LWI_MAX_VARS];
    static const size_t max_rows = LWI_MAX_ROWS;
    double a[LWI_LIMB_VARS * 96];
    double tau[96];
    size_t perm[96];
    int index[96];
    size_t n_row = 0;
    memset(&state, 0, sizeof state);
    lwi_state_from_config(&state, sys, &m->home);
    lwi_frame_identity(&state.given[0]);
    lwi_eval_nodes(&ev, sys, &state);
    for (size_t i = 0; i < sys->n_row && i < max_rows && n_row < 96; i++) {
        if (sys->row[i].block == limb->block && limb->block >= 0) {
            index[n_row++] = (int)i;
        }
    }
    size_t n = limb->n_var;
    for (size_t i = 0; i < n_row; i++) {
        lwi_row_derivative(row, sys, &sys->row[index[i]], &state, &ev);
        for (size_t j = 0; j < n; j++) {
            a[j * n_row + i] = row[limb->var[j]];
        }
    }
    limb->n_pick = 0;
    if (n == 0 || n_row < n) {
        return;
    }
    (void)lwi_qrp(a, n, n_row, n_row, tau, perm);
    if (fabs(a[(n - 1) * n_row + n - 1]) > LWI_RANK_POSTURE * fabs(a[0])) {
        for (size_t i = 0; i < n; i++) {
            limb->pick[i] = index[perm[i]];
        }
        limb->n_pick = n;
    }
}

/* Classes of a general limb, where it has more than two solutions. */
static lw_code find_classes(lwi_limb *limb, const lw_model *model, lw_err *err)
{
    limb->branches = limb->n_pick > 0 ? 2 : 1;
    lw_code rc = LW_OK;
    if (limb->n_pick > 0 && limb->n_chain > 0 && limb->classes == NULL) {
        rc = lwi_classes_find(&limb->classes, model, limb, err);
    }
    if (limb->classes != NULL && limb->n_pick > 0 &&
        lwi_classes_home(limb->classes, &model->home)) {
        limb->branches = (unsigned)limb->classes->n_class;
    } else {
        free(limb->classes);
        limb->classes = NULL;
    }
    return rc;
}

lw_code lwi_limbs_home(lw_model *model, lw_err *err)
{
    for (size_t i = 0; i < model->n_limb; i++) {
        lwi_limb *limb = &model->limb[i];
        double value;
        if (limb->kind == LW_LIMB_GENERAL) {
            pick_rows(limb, model);
            lw_code rc = find_classes(limb, model, err);
            if (rc != LW_OK) {
                return rc;
            }
        }
        limb->home_bits = 0;
        limb->home_bits = raw_bits(&value, model, limb, &model->home);
        describe(&model->report.limb[i], model, limb);
    }
    model->report.n_limb = model->n_limb;
    lwi_mode_of(&model->home_mode, model, &model->home);
    model->report.home_mode = model->home_mode;
    return LW_OK;
}

void lwi_limbs_free(lw_model *model)
{
    for (size_t i = 0; i < model->n_limb; i++) {
        free(model->limb[i].classes);
        model->limb[i].classes = NULL;
    }
}
