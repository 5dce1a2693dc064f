/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Finds the limbs of a mechanism whose tool pose follows from its outputs, and recognises those
 * that have explicit solutions. Runs at load. */
#include "../math/vec3.h"
#include "../model/model.h"

#include <stdint.h>

/* Component number of each fused body class, SIZE_MAX for known ones. */
static void label_components(size_t label[LW_MAX_BODIES], const lw_model *m)
{
    const lw_spec *spec = m->spec;
    const lwi_system *sys = m->inverse;
    for (size_t i = 0; i < spec->n_body; i++) {
        label[i] = sys->body_known[i] ? SIZE_MAX : m->fused[i];
    }
    for (bool more = true; more;) {
        more = false;
        for (size_t j = 0; j < spec->n_joint + spec->n_rod; j++) {
            const size_t *body = j < spec->n_joint ? spec->joint[j].body
                                                   : spec->rod[j - spec->n_joint].body;
            size_t a = label[body[0]];
            size_t b = label[body[1]];
            if (a == SIZE_MAX || b == SIZE_MAX || a == b) {
                continue;
            }
            size_t low = a < b ? a : b;
            size_t high = a < b ? b : a;
            for (size_t i = 0; i < spec->n_body; i++) {
                label[i] = label[i] == high ? low : label[i];
            }
            more = true;
        }
    }
}

static bool coord_driven(const lw_model *m, size_t first, size_t n)
{
    for (size_t k = 0; k < n; k++) {
        if (m->drive_moves_coord[first + k]) {
            return true;
        }
    }
    return false;
}

static bool joint_propagated(const lw_model *m, size_t j)
{
    for (size_t k = 0; k < m->n_propagate; k++) {
        if (m->propagate[k].joint == j) {
            return true;
        }
    }
    return false;
}

static lwi_limb *new_limb(lw_model *m, lw_err *err)
{
    if (m->n_limb >= LW_MAX_LIMBS) {
        (void)LW_FAIL(err, LW_E_LIMIT, "/joints", "more than %d limbs", LW_MAX_LIMBS);
        return NULL;
    }
    lwi_limb *limb = &m->limb[m->n_limb++];
    memset(limb, 0, sizeof *limb);
    limb->kind = LW_LIMB_GENERAL;
    limb->branches = 1;
    limb->counted = true;
    limb->block = -1;
    return limb;
}

/* Joints and rods that touch bodies of one component; false if there are too many. */
static bool gather(lwi_limb *limb, const lw_model *m, const size_t *label, size_t which)
{
    const lw_spec *spec = m->spec;
    for (size_t i = 0; i < spec->n_body; i++) {
        if (label[i] == which) {
            if (limb->n_body >= LWI_LIMB_BODIES) {
                return false;
            }
            limb->body[limb->n_body++] = i;
        }
    }
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        if (joint->type != LW_FIXED &&
            (label[joint->body[0]] == which || label[joint->body[1]] == which)) {
            if (limb->n_joint >= LWI_LIMB_JOINTS) {
                return false;
            }
            limb->joint[limb->n_joint++] = j;
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        if (label[spec->rod[r].body[0]] == which || label[spec->rod[r].body[1]] == which) {
            if (limb->n_rod >= LWI_LIMB_RODS) {
                return false;
            }
            limb->rod[limb->n_rod++] = r;
        }
    }
    return true;
}

static size_t classes_in(const lw_model *m, const lwi_limb *limb)
{
    size_t n = 0;
    for (size_t i = 0; i < limb->n_body; i++) {
        bool seen = false;
        for (size_t k = 0; k < i; k++) {
            seen = seen || m->fused[limb->body[k]] == m->fused[limb->body[i]];
        }
        n += !seen;
    }
    return n;
}

static bool in_limb(const lw_model *m, const lwi_limb *limb, size_t body)
{
    for (size_t i = 0; i < limb->n_body; i++) {
        if (m->fused[limb->body[i]] == m->fused[body]) {
            return true;
        }
    }
    return false;
}

/* Orders a limb of one-freedom joints as a chain from one known body to another, starting with the
 * joint `start`. */
static bool order_chain(lwi_limb *limb, const lw_model *m, size_t start)
{
    const lw_spec *spec = m->spec;
    bool used[LWI_LIMB_JOINTS] = {false};
    size_t at = SIZE_MAX;
    limb->n_chain = 0;
    for (size_t step = 0; step < limb->n_joint; step++) {
        size_t pick = SIZE_MAX;
        bool flip = false;
        for (size_t k = 0; k < limb->n_joint && pick == SIZE_MAX; k++) {
            const lw_spec_joint *joint = &spec->joint[limb->joint[k]];
            bool known0 = !in_limb(m, limb, joint->body[0]);
            bool known1 = !in_limb(m, limb, joint->body[1]);
            if (used[k] || (step == 0 && limb->joint[k] != start)) {
                continue;
            }
            bool from0 = step == 0 ? known0 : m->fused[joint->body[0]] == at;
            bool from1 = step == 0 ? known1 : m->fused[joint->body[1]] == at;
            if (from0 || from1) {
                pick = k;
                flip = !from0;
            }
        }
        if (pick == SIZE_MAX) {
            return false;
        }
        used[pick] = true;
        const lw_spec_joint *joint = &spec->joint[limb->joint[pick]];
        if (step == 0) {
            limb->anchor[0] = joint->body[flip ? 1 : 0];
        }
        size_t next = joint->body[flip ? 0 : 1];
        bool last = step + 1 == limb->n_joint;
        if (in_limb(m, limb, next) == last || limb->n_chain >= 6) {
            return false;
        }
        limb->chain[limb->n_chain].joint = limb->joint[pick];
        limb->chain[limb->n_chain].sign = flip ? -1.0 : 1.0;
        limb->chain[limb->n_chain++].next = next;
        at = m->fused[next];
        limb->anchor[1] = next;
    }
    return true;
}

static bool all_revolute(const lw_model *m, const lwi_limb *limb)
{
    for (size_t k = 0; k < limb->n_joint; k++) {
        if (m->spec->joint[limb->joint[k]].type != LW_REVOLUTE) {
            return false;
        }
    }
    return true;
}

static bool fixed_rod_first(lwi_limb *limb, const lw_model *m)
{
    for (size_t k = 0; k < limb->n_rod; k++) {
        const lw_spec_rod *rod = &m->spec->rod[limb->rod[k]];
        bool both = in_limb(m, limb, rod->body[0]) && in_limb(m, limb, rod->body[1]);
        if (both) {
            return false;
        }
        if (!lwi_rod_moves(m->spec, limb->rod[k])) {
            size_t t = limb->rod[0];
            limb->rod[0] = limb->rod[k];
            limb->rod[k] = t;
            return true;
        }
    }
    return false;
}

static void recognise(lwi_limb *limb, lw_model *m)
{
    size_t n = classes_in(m, limb);
    if (n == 1 && limb->n_joint == 1 && limb->n_rod > 0 && fixed_rod_first(limb, m)) {
        lw_joint_type type = m->spec->joint[limb->joint[0]].type;
        if ((type == LW_PRISMATIC || type == LW_REVOLUTE) &&
            order_chain(limb, m, limb->joint[0]) == false) {
            /* One joint from a known body to an unknown one: the chain ends in the limb. */
            const lw_spec_joint *joint = &m->spec->joint[limb->joint[0]];
            bool flip = in_limb(m, limb, joint->body[0]);
            limb->anchor[0] = joint->body[flip ? 1 : 0];
            limb->n_chain = 1;
            limb->chain[0].joint = limb->joint[0];
            limb->chain[0].sign = flip ? -1.0 : 1.0;
            limb->chain[0].next = joint->body[flip ? 0 : 1];
            limb->kind = type == LW_PRISMATIC ? LW_LIMB_RAIL_ROD : LW_LIMB_CRANK_ROD;
            limb->branches = 2;
        }
        return;
    }
    if (limb->n_rod > 0) {
        return;
    }
    bool turns = all_revolute(m, limb);
    for (size_t k = 0; turns && k < limb->n_joint; k++) {
        if (!order_chain(limb, m, limb->joint[k])) {
            continue;
        }
        if (n == 2 && limb->n_chain == 3 && lwi_two_link_recognise(m, limb)) {
            limb->kind = LW_LIMB_TWO_LINK;
            limb->branches = 2;
            return;
        }
        if (n == 5 && limb->n_chain == 6 && lwi_wrist_arm_recognise(m, limb)) {
            limb->kind = LW_LIMB_WRIST_ARM;
            limb->branches = 8;
            return;
        }
    }
    /* Any other chain: from the frame on where it stands there, so that the order of the document's
     * rows does not matter. */
    size_t frame = m->fused[m->spec->frame];
    for (size_t k = 0; k < limb->n_joint; k++) {
        if (order_chain(limb, m, limb->joint[k]) && m->fused[limb->anchor[0]] == frame) {
            return;
        }
    }
    limb->n_chain = 0;
}

/* Block and unknowns of a general limb in the inverse system. */
static void find_block(lwi_limb *limb, const lw_model *m)
{
    const lwi_system *sys = m->inverse;
    limb->branches = 2;
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        bool own = false;
        for (size_t i = 0; i < limb->n_body; i++) {
            own = own || sys->body_node[limb->body[i]] == el->child;
        }
        for (size_t i = 0; i < limb->n_joint; i++) {
            /* screws inside a joint of several freedoms end in nodes of their own */
            size_t first =
                el->coord < 0 ? SIZE_MAX : lw_spec_joint_coord(m->spec, limb->joint[i], 0);
            size_t n = lw_joint_coords(m->spec->joint[limb->joint[i]].type);
            own = own || (el->coord >= 0 && (size_t)el->coord >= first &&
                          (size_t)el->coord < first + n);
        }
        size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
        for (size_t i = 0; own && el->var >= 0 && i < n && limb->n_var < LWI_LIMB_VARS; i++) {
            limb->var[limb->n_var++] = el->var + (int)i;
        }
    }
    for (size_t i = 0; i < sys->n_row && limb->block < 0; i++) {
        for (size_t k = 0; k < limb->n_joint; k++) {
            if (sys->row[i].joint == (int)limb->joint[k]) {
                limb->block = sys->row[i].block;
            }
        }
        for (size_t k = 0; k < limb->n_rod; k++) {
            if (sys->row[i].rod == (int)limb->rod[k]) {
                limb->block = sys->row[i].block;
            }
        }
    }
}

static size_t limb_key(const lwi_limb *limb)
{
    return limb->n_joint > 0 ? limb->joint[0] : LW_MAX_JOINTS + limb->rod[0];
}

static void sort_limbs(lw_model *m)
{
    for (size_t i = 1; i < m->n_limb; i++) {
        for (size_t k = i; k > 0 && limb_key(&m->limb[k]) < limb_key(&m->limb[k - 1]); k--) {
            lwi_limb t = m->limb[k];
            m->limb[k] = m->limb[k - 1];
            m->limb[k - 1] = t;
        }
    }
}

lw_code lwi_limbs_find(lw_model *m, lw_err *err)
{
    const lw_spec *spec = m->spec;
    const lwi_system *sys = m->inverse;
    size_t label[LW_MAX_BODIES];
    m->n_limb = 0;
    m->explicit_inverse = true;
    label_components(label, m);
    for (size_t i = 0; i < spec->n_body; i++) {
        if (label[i] != i) {
            continue;
        }
        lwi_limb *limb = new_limb(m, err);
        if (limb == NULL || !gather(limb, m, label, i)) {
            return LW_FAIL(err, LW_E_LIMIT, "/joints", "a limb has more joints than are served");
        }
        if (limb->n_joint + limb->n_rod == 0) {
            m->n_limb--;
            continue;
        }
        recognise(limb, m);
        if (limb->kind == LW_LIMB_GENERAL) {
            find_block(limb, m);
            m->explicit_inverse = false;
        }
    }
    /* What runs between known bodies has its coordinates explicitly: a limb of one branch where a
     * drive moves it. */
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        size_t n = lw_joint_coords(joint->type);
        if (n > 0 && sys->body_known[joint->body[0]] && sys->body_known[joint->body[1]] &&
            !joint_propagated(m, j) && coord_driven(m, lw_spec_joint_coord(spec, j, 0), n)) {
            lwi_limb *limb = new_limb(m, err);
            if (limb == NULL) {
                return LW_E_LIMIT;
            }
            limb->kind = LW_LIMB_STRUT;
            limb->joint[limb->n_joint++] = j;
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        const lw_spec_rod *rod = &spec->rod[r];
        if (sys->body_known[rod->body[0]] && sys->body_known[rod->body[1]] &&
            coord_driven(m, lw_spec_rod_coord(spec, r), 1)) {
            lwi_limb *limb = new_limb(m, err);
            if (limb == NULL) {
                return LW_E_LIMIT;
            }
            limb->kind = LW_LIMB_STRUT;
            limb->rod[limb->n_rod++] = r;
        }
    }
    sort_limbs(m);
    return LW_OK;
}
