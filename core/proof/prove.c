/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The prover's object and one interval of a move, stage by stage. */
#include "prove.h"

#include "../math/tol.h"
#include "../math/vec3.h"
#include "../query/margin.h"

#include <stdint.h>
#include <stdlib.h>

static size_t limb_of(const lw_model *m, const lwi_row *row)
{
    for (size_t l = 0; l < m->n_limb; l++) {
        for (size_t j = 0; j < m->limb[l].n_joint; j++) {
            if (row->joint >= 0 && m->limb[l].joint[j] == (size_t)row->joint) {
                return l;
            }
        }
        for (size_t r = 0; r < m->limb[l].n_rod; r++) {
            if (row->rod >= 0 && m->limb[l].rod[r] == (size_t)row->rod) {
                return l;
            }
        }
    }
    return SIZE_MAX;
}

/* Rows and unknowns of each block. */
static void fill_blocks(lwi_prove *p)
{
    const lwi_system *sys = p->sys;
    bool counted = true;
    for (size_t v = 0; v < sys->n_var; v++) {
        p->var_block[v] = -1;
    }
    for (size_t i = 0; i < sys->n_row; i++) {
        unsigned short var[LWI_MAX_VARS];
        const lwi_row *row = &sys->row[i];
        size_t n = lwi_row_vars(var, sys, row);
        if (row->block < 0 || n == 0) {
            continue;
        }
        lwi_prove_block *b = &p->block[row->block];
        b->limb = b->n_row == 0 ? limb_of(p->model, row) : b->limb;
        if (b->n_row >= LWI_BLOCK_ROWS) {
            p->usable = false;
            return;
        }
        b->row[b->n_row++] = (unsigned short)i;
        for (size_t k = 0; k < n; k++) {
            p->var_block[var[k]] = row->block;
        }
    }
    size_t jac = 0;
    size_t in = 0;
    for (size_t v = 0; v < sys->n_var; v++) {
        if (p->var_block[v] < 0) {
            p->usable = false; /* an unknown that no row sees */
            return;
        }
        lwi_prove_block *b = &p->block[p->var_block[v]];
        if (b->n >= LWI_BLOCK_VARS) {
            p->usable = false;
            return;
        }
        b->var[b->n++] = (unsigned short)v;
    }
    for (size_t k = 0; k < p->n_block; k++) {
        lwi_prove_block *b = &p->block[k];
        b->jac = jac;
        b->in = in;
        jac += b->n * b->n;
        in += b->n * p->inputs.m;
        counted = counted && b->n_row == b->n;
        p->usable = p->usable && b->n_row >= b->n;
    }
    /* With all rows solved and the tool free in six directions the drives alone are the question.
     * Else rows that are not solved hold it too, and might cease to. */
    size_t own = 0;
    for (size_t o = 0; o < p->inputs.m; o++) {
        own += p->model->spec->output[o].kind != LW_OUT_COORD;
    }
    p->whole_needed = !(counted && own == 6);
}

static void set_roots(lwi_prove *p)
{
    const lwi_system *sys = p->sys;
    const lw_spec *spec = p->model->spec;
    p->tool_node = sys->body_node[spec->tool[0].body];
    p->inputs.node = p->tool_node;
    for (size_t n = 0; n < sys->n_node; n++) {
        p->inputs.root[n] = (unsigned short)n;
    }
    for (size_t k = 0; k < sys->n_element; k++) { /* parents come first */
        p->inputs.root[sys->element[k].child] = p->inputs.root[sys->element[k].parent];
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        bool known = !el->given;
        for (size_t o = 0; el->given && o < spec->n_output; o++) {
            if (spec->output[o].kind == LW_OUT_COORD && (int)spec->output[o].coord == el->coord) {
                p->inputs.rate[o][k] = 1.0;
                known = true;
            }
        }
        for (size_t d = 0; el->given && d < p->model->n_determined; d++) {
            const lwi_determined *det = &p->model->determined[d];
            for (size_t i = 0; (int)det->coord == el->coord && i < det->n; i++) {
                p->inputs.rate[det->from[i]][k] += det->factor[i];
                known = true;
            }
        }
        p->usable = p->usable && known;
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        size_t n_scalar = lw_spec_coord_count(spec) - spec->n_rod;
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            size_t coord = spec->drive[d].term[t].coord;
            p->usable = p->usable && (coord >= n_scalar || sys->coord_element[coord] >= 0);
        }
    }
}

static bool open_points(lwi_prove *p)
{
    const lwi_system *sys = p->sys;
    size_t each = sys->n_element + 7 * sys->n_quat + 2 * p->n_block + 1;
    lwi_prove_point *all[3 + LWI_PM_SIZE] = {&p->left, &p->right, &p->trial};
    for (size_t i = 0; i < LWI_PM_SIZE; i++) {
        all[3 + i] = &p->node[i];
    }
    p->point_store = calloc(each * (3 + LWI_PM_SIZE) + 2 * p->model->n_coord + 2,
                            sizeof *p->point_store);
    if (p->point_store == NULL) {
        return false;
    }
    double *at = p->point_store;
    for (size_t i = 0; i < 3 + LWI_PM_SIZE; i++) {
        all[i]->value = at;
        all[i]->quat = (double (*)[4])(void *)(at + sys->n_element);
        all[i]->pos_m = (double (*)[3])(void *)(at + sys->n_element + 4 * sys->n_quat);
        all[i]->radius = at + sys->n_element + 7 * sys->n_quat;
        all[i]->unique = all[i]->radius + p->n_block;
        at += each;
    }
    p->coord_left = at;
    p->coord_right = at + p->model->n_coord;
    return true;
}

/* The whole system as one block: its closure rows, and readings that lead. */
static void fill_whole(lwi_prove *p)
{
    const lw_model *m = p->model;
    lwi_prove_block *b = &p->block[0];
    const lwi_system *sys = p->sys;
    p->n_lead = m->mobility;
    p->usable = sys->n_var <= LWI_BLOCK_VARS && sys->n_row <= LWI_BLOCK_ROWS &&
                m->rank + m->mobility == sys->n_var && m->mobility <= LW_MAX_OUTPUTS &&
                m->spec->n_drive >= m->mobility;
    if (!p->usable) {
        return;
    }
    b->limb = SIZE_MAX;
    b->n = sys->n_var;
    b->n_row = sys->n_row;
    for (size_t i = 0; i < sys->n_row; i++) {
        b->row[i] = (unsigned short)i;
    }
    for (size_t v = 0; v < sys->n_var; v++) {
        b->var[v] = (unsigned short)v;
        p->var_block[v] = 0;
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        size_t n_scalar = lw_spec_coord_count(m->spec) - m->spec->n_rod;
        for (size_t t = 0; t < m->spec->drive[d].n_term; t++) {
            size_t coord = m->spec->drive[d].term[t].coord;
            p->usable = p->usable && (coord >= n_scalar || sys->coord_element[coord] >= 0);
        }
    }
}

lw_code lwi_prove_new(lwi_prove **out, const lw_model *m, const lwi_prove *other, lw_err *err)
{
    *out = NULL;
    lwi_prove *p = calloc(1, sizeof *p);
    if (p == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    *out = p;
    p->model = m;
    p->joints = other != NULL;
    p->borrows = p->joints && other->solver != NULL;
    p->sys = p->joints ? m->whole : m->inverse;
    p->usable = p->joints || (m->inverse != NULL && m->completion.usable &&
                              m->spec->n_drive >= m->mobility);
    if (!p->usable) {
        return LW_OK;
    }
    const lwi_system *sys = p->sys;
    size_t n = sys->n_var + 1;
    size_t most = sys->n_row > 48 ? sys->n_row : 48;
    most = sys->n_var > most ? sys->n_var : most;
    most = m->whole->n_row > most ? m->whole->n_row : most;
    most = m->whole->n_var > most ? m->whole->n_var : most;
    size_t side = m->whole->n_var > m->whole->n_row + m->spec->n_drive
                      ? m->whole->n_var
                      : m->whole->n_row + m->spec->n_drive;
    p->inputs.m = p->joints ? m->mobility : m->spec->n_output;
    p->n_block = p->joints ? 1 : sys->n_block;
    p->block = calloc(p->n_block + 1, sizeof *p->block);
    p->var_block = calloc(n, sizeof *p->var_block);
    p->given = calloc(sys->n_element + 1, sizeof *p->given);
    p->state = calloc(1, sizeof *p->state);
    p->ev = malloc(sizeof *p->ev);
    p->rows = calloc(n, sizeof *p->rows);
    p->square = calloc(most * most, sizeof *p->square);
    p->step = calloc(n, sizeof *p->step);
    p->res = calloc(most, sizeof *p->res);
    p->perm = calloc(most, sizeof *p->perm);
    p->tau = calloc(most, sizeof *p->tau);
    p->point = calloc(1, sizeof *p->point);
    p->eval = malloc(sizeof *p->eval);
    p->row = calloc(n > m->whole->n_var ? n : m->whole->n_var + 1, sizeof *p->row);
    if (!p->block || !p->var_block || !p->given || !p->state || !p->ev || !p->rows ||
        !p->square || !p->step || !p->res || !p->perm || !p->tau || !p->point || !p->eval ||
        !p->row || !open_points(p)) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_state_reference(p->state, sys);
    if (p->joints) {
        fill_whole(p);
        p->inputs.node = SIZE_MAX;
    } else {
        fill_blocks(p);
        set_roots(p);
    }
    size_t jac = 1;
    size_t in = 1;
    for (size_t b = 0; b < p->n_block; b++) {
        jac += p->block[b].n * p->block[b].n;
        in += p->block[b].n * p->inputs.m;
    }
    p->jac = calloc(jac, sizeof *p->jac);
    p->in = calloc(in, sizeof *p->in);
    p->solved = calloc(n * p->inputs.m, sizeof *p->solved);
    side = side > 24 ? side : 24;
    for (int i = 0; i < 3; i++) {
        p->big[i] = p->borrows ? other->big[i] : calloc(side * side, sizeof *p->big[i]);
    }
    /* Not cleared: what is not used stays untouched memory. */
    p->rank = p->borrows ? other->rank : malloc(sizeof *p->rank);
    p->solver = p->borrows ? other->solver : malloc(sizeof *p->solver);
    if (!p->joints) {
        p->whole_eval = malloc(sizeof *p->whole_eval);
        p->whole_point = calloc(1, sizeof *p->whole_point);
    }
    if (!p->jac || !p->in || !p->solved || !p->big[0] || !p->big[1] || !p->big[2] || !p->rank ||
        !p->solver || (!p->joints && (!p->whole_eval || !p->whole_point))) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_hold_constant(p);
    for (size_t r = 0; r < m->spec->n_rod; r++) {
        p->point->rod_m[r] = lwi_pm_const(sys->rod[r].length_m);
    }
    for (int i = 0; i < 9; i++) {
        p->point->given[0].rot[i] = lwi_pm_const(i % 4 == 0 ? 1.0 : 0.0);
    }
    return LW_OK;
}

void lwi_prove_free(lwi_prove *p)
{
    if (p == NULL) {
        return;
    }
    free(p->block);
    free(p->var_block);
    free(p->given);
    free(p->state);
    free(p->ev);
    free(p->rows);
    free(p->square);
    free(p->step);
    free(p->res);
    free(p->perm);
    free(p->tau);
    free(p->point);
    free(p->eval);
    free(p->whole_eval);
    free(p->whole_point);
    free(p->row);
    free(p->jac);
    free(p->in);
    free(p->solved);
    for (int i = 0; i < 3 && !p->borrows; i++) {
        free(p->big[i]);
    }
    if (!p->borrows) {
        free(p->rank);
        free(p->solver);
    }
    free(p->point_store);
    free(p);
}

static void open_start(lwi_prove *p, const lw_config *start)
{
    lwi_state_from_config(p->state, p->sys, start);
    lwi_follow_pick(p);
    lwi_point_from_state(&p->left, p, p->state);
    for (size_t b = 0; b < p->n_block; b++) {
        p->left.radius[b] = 1e-8; /* the start is a root as postures are: to Newton's last step */
        p->left.unique[b] = 0.0;
    }
    memcpy(p->coord_left, start->coord, p->model->n_coord * sizeof *p->coord_left);
    memcpy(p->coord_right, start->coord, p->model->n_coord * sizeof *p->coord_right);
}

void lwi_prove_begin(lwi_prove *p, const lwi_move *move, const lw_spec_tool *tool,
                     const lw_margin_min *min, const lw_config *start)
{
    p->move = move;
    p->tool = tool;
    p->min = min;
    for (size_t k = 0; k < p->sys->n_element; k++) {
        p->given[k][0] = p->given[k][1] = 0.0;
        for (size_t o = 0; p->sys->element[k].given && o < p->inputs.m; o++) {
            p->given[k][0] += p->inputs.rate[o][k] * move->coord[o];
            p->given[k][1] += p->inputs.rate[o][k] * move->coord_along[o];
        }
    }
    open_start(p, start);
}

void lwi_prove_begin_joints(lwi_prove *p, const lw_spec_tool *tool, const lw_margin_min *min,
                            const lw_config *start)
{
    p->tool = tool;
    p->min = min;
    open_start(p, start);
}

bool lwi_prove_interval(lwi_prove *p, double low, double high)
{
    p->stage = LWI_PROVED;
    p->limb = SIZE_MAX;
    p->margin = -1;
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        p->low[i] = LWI_MARGIN_CAP;
        p->met[i] = LWI_MARGIN_CAP;
        p->met_at[i] = -1.0;
    }
    if (!lwi_follow_nodes(p, low, high)) {
        p->stage = LWI_STAGE_FOLLOW;
        return false;
    }
    if (!lwi_tube(p, low, high) || !lwi_rates_model(p)) {
        return false;
    }
    if (!lwi_bounds_hold(p)) {
        p->stage = LWI_STAGE_LIMIT;
        return false;
    }
    if (!lwi_hold_model(p)) {
        p->stage = p->stage == LWI_PROVED ? LWI_STAGE_HOLD : p->stage;
        return false;
    }
    if (!lwi_least_hold(p)) {
        p->stage = LWI_STAGE_MARGIN;
        return false;
    }
    return true;
}

void lwi_prove_accept(lwi_prove *p)
{
    lwi_prove_point t = p->left;
    p->left = p->right;
    p->right = t;
    double *c = p->coord_left;
    p->coord_left = p->coord_right;
    p->coord_right = c;
    memcpy(p->coord_right, p->coord_left, p->model->n_coord * sizeof *p->coord_left);
}
