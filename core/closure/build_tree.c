/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Building a closure system, first part: which bodies are one, which are known, and the spanning
 * tree of elements on which the others hang. Called by build_new.c, at load only. */
#include "../math/vec3.h"
#include "build.h"

#include <stdint.h>

size_t lwi_union_find(size_t *link, size_t i)
{
    while (link[i] != i) {
        link[i] = link[link[i]];
        i = link[i];
    }
    return i;
}

void lwi_fuse(size_t root[LW_MAX_BODIES], const lw_spec *spec)
{
    for (size_t i = 0; i < spec->n_body; i++) {
        root[i] = i;
    }
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        if (joint->type == LW_FIXED) {
            size_t a = lwi_union_find(root, joint->body[0]);
            size_t b = lwi_union_find(root, joint->body[1]);
            root[a > b ? a : b] = a > b ? b : a;
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        root[i] = lwi_union_find(root, i);
    }
}

bool lwi_rod_moves(const lw_spec *spec, size_t rod)
{
    size_t coord = lw_spec_rod_coord(spec, rod);
    if (spec->rod[rod].free) {
        return true;
    }
    for (size_t d = 0; d < spec->n_drive; d++) {
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            if (spec->drive[d].term[t].coord == coord) {
                return true;
            }
        }
    }
    return false;
}

static size_t freedoms(lw_joint_type type)
{
    return type == LW_SPHERICAL ? 3 : lw_joint_coords(type);
}

static bool any_coord(const bool *flag, const lw_spec *spec, size_t joint)
{
    size_t n = lw_joint_coords(spec->joint[joint].type);
    for (size_t k = 0; k < n; k++) {
        if (flag[lw_spec_joint_coord(spec, joint, k)]) {
            return true;
        }
    }
    return false;
}

static bool all_coords(const bool *flag, const lw_spec *spec, size_t joint)
{
    size_t n = lw_joint_coords(spec->joint[joint].type);
    for (size_t k = 0; k < n; k++) {
        if (!flag[lw_spec_joint_coord(spec, joint, k)]) {
            return false;
        }
    }
    return n > 0;
}

bool lwi_builder_keeps(const lwi_builder *b, size_t joint)
{
    return b->spec->joint[joint].type == LW_HELICAL || any_coord(b->ask->coord_keep, b->spec,
                                                                 joint);
}

int lwi_builder_node(lwi_builder *b)
{
    if (b->sys->n_node >= LWI_MAX_NODES) {
        (void)LW_FAIL(b->err, LW_E_LIMIT, "/bodies", "too many bodies and joints to solve for");
        return -1;
    }
    return (int)b->sys->n_node++;
}

static lwi_element *new_element(lwi_builder *b, lwi_kind kind, int parent, int child)
{
    lwi_system *sys = b->sys;
    if (parent < 0 || child < 0 || sys->n_element >= LWI_MAX_ELEMENTS) {
        (void)LW_FAIL(b->err, LW_E_LIMIT, "/joints", "too many joints to solve for");
        return NULL;
    }
    int index = (int)sys->n_element++;
    lwi_element *el = &sys->element[index];
    memset(el, 0, sizeof *el);
    el->kind = kind;
    el->parent = (unsigned short)parent;
    el->child = (unsigned short)child;
    el->sign = 1.0;
    el->var = el->coord = el->ball = el->quat = el->body = -1;
    memcpy(b->ancestor[child], b->ancestor[parent], sizeof b->ancestor[child]);
    b->ancestor[child][index / 64] |= (uint64_t)1 << (index % 64);
    return el;
}

/* One scalar coordinate as an element. */
static bool add_scalar(lwi_builder *b, lwi_kind kind, int parent, int child, double sign,
                       const double axis[3], const double at[3], double pitch, size_t coord)
{
    lwi_element *el = new_element(b, kind, parent, child);
    if (el == NULL) {
        return false;
    }
    el->sign = sign;
    lwi_copy3(el->axis, axis);
    lwi_copy3(el->at, at);
    el->pitch = pitch;
    el->coord = (int)coord;
    el->given = b->ask->coord_given[coord];
    b->sys->coord_element[coord] = (int)(el - b->sys->element);
    return true;
}

typedef struct piece {
    lwi_kind kind;
    double axis[3];
    double pitch;
    size_t part;
} piece;

/* The one-freedom screws of a joint, first body to second. */
static size_t joint_pieces(piece out[3], const lw_spec_joint *joint)
{
    double y[3];
    memset(out, 0, 3 * sizeof *out);
    for (size_t k = 0; k < 3; k++) {
        out[k].part = k;
        lwi_copy3(out[k].axis, joint->axis);
        out[k].kind = LWI_TURN;
    }
    switch (joint->type) {
    case LW_REVOLUTE:
        return 1;
    case LW_PRISMATIC:
        out[0].kind = LWI_SLIDE;
        return 1;
    case LW_HELICAL:
        out[0].kind = LWI_HELIX;
        out[0].pitch = joint->lead_m / 6.283185307179586476925;
        return 1;
    case LW_CYLINDRICAL:
        out[1].kind = LWI_SLIDE;
        return 2;
    case LW_UNIVERSAL:
        lwi_copy3(out[1].axis, joint->second_axis);
        return 2;
    case LW_PLANAR:
        lwi_cross(y, joint->axis, joint->second_axis);
        out[0].kind = LWI_SLIDE;
        lwi_copy3(out[0].axis, joint->second_axis);
        out[1].kind = LWI_SLIDE;
        lwi_copy3(out[1].axis, y);
        return 3;
    case LW_FIXED:
    case LW_SPHERICAL:
        break;
    }
    return 0;
}

static size_t ball_number(const lw_spec *spec, size_t joint)
{
    size_t n = 0;
    for (size_t j = 0; j < joint; j++) {
        n += spec->joint[j].type == LW_SPHERICAL;
    }
    return n;
}

/* Elements of a joint from the node of one body to `child`, which is its other body's node. */
bool lwi_builder_joint(lwi_builder *b, size_t j, int parent, int child, bool reversed)
{
    const lw_spec_joint *joint = &b->spec->joint[j];
    if (joint->type == LW_SPHERICAL) {
        lwi_element *el = new_element(b, LWI_BALL, parent, child);
        if (el == NULL || b->sys->n_quat >= LWI_MAX_QUATS) {
            return false;
        }
        el->sign = reversed ? -1.0 : 1.0;
        lwi_copy3(el->at, joint->at_m);
        el->ball = (int)ball_number(b->spec, j);
        el->quat = (int)b->sys->n_quat++;
        b->sys->ball_element[el->ball] = (int)(el - b->sys->element);
        return true;
    }
    piece part[3];
    size_t n = joint_pieces(part, joint);
    int from = parent;
    for (size_t k = 0; k < n; k++) {
        const piece *pc = &part[reversed ? n - 1 - k : k];
        int to = k + 1 == n ? child : lwi_builder_node(b);
        if (!add_scalar(b, pc->kind, from, to, reversed ? -1.0 : 1.0, pc->axis, joint->at_m,
                        pc->pitch, lw_spec_joint_coord(b->spec, j, pc->part))) {
            return false;
        }
        from = to;
    }
    return true;
}

/* Bodies whose pose is given or follows from given coordinates. */
void lwi_builder_known(lwi_builder *b)
{
    const lw_spec *spec = b->spec;
    bool known[LW_MAX_BODIES] = {false};
    for (size_t i = 0; i < spec->n_body; i++) {
        if (i == spec->frame || b->ask->body_given[i]) {
            known[b->root[i]] = true;
        }
    }
    for (bool more = true; more;) {
        more = false;
        for (size_t j = 0; j < spec->n_joint; j++) {
            const lw_spec_joint *joint = &spec->joint[j];
            if (joint->type == LW_FIXED || !all_coords(b->ask->coord_given, spec, j)) {
                continue;
            }
            size_t u = b->root[joint->body[0]];
            size_t v = b->root[joint->body[1]];
            if (known[u] != known[v]) {
                known[u] = known[v] = true;
                b->in_tree[j] = true;
                more = true;
            }
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        b->sys->body_known[i] = known[b->root[i]];
    }
}

/* Kruskal: kept coordinates first (helical before others), then joints with few freedoms. */
void lwi_builder_choose(lwi_builder *b)
{
    const lw_spec *spec = b->spec;
    for (size_t i = 0; i < spec->n_body; i++) {
        b->group[i] = b->root[i];
    }
    size_t base = b->root[spec->frame];
    for (size_t i = 0; i < spec->n_body; i++) {
        if (b->sys->body_known[i]) {
            size_t g = lwi_union_find(b->group, b->root[i]);
            b->group[g] = lwi_union_find(b->group, base);
        }
    }
    for (size_t pass = 0; pass < 5; pass++) {
        for (size_t j = 0; j < spec->n_joint; j++) {
            lw_joint_type type = spec->joint[j].type;
            size_t weight = type == LW_HELICAL ? 0 : lwi_builder_keeps(b,
                                                                       j) ? 1 : 1 + freedoms(type);
            if (type == LW_FIXED || weight != pass || b->in_tree[j]) {
                continue;
            }
            size_t u = lwi_union_find(b->group, b->root[spec->joint[j].body[0]]);
            size_t v = lwi_union_find(b->group, b->root[spec->joint[j].body[1]]);
            if (u != v) {
                b->group[u] = v;
                b->in_tree[j] = true;
            }
        }
    }
}

static void body_centre(double out[3], const lw_spec *spec, const size_t *root, size_t cls)
{
    size_t n = 0;
    double sum[3] = {0, 0, 0};
    for (size_t r = 0; r < spec->n_rod; r++) {
        for (size_t e = 0; e < 2; e++) {
            if (root[spec->rod[r].body[e]] == cls) {
                lwi_add(sum, sum, spec->rod[r].end_m[e]);
                n++;
            }
        }
    }
    for (size_t i = 0; i < 3; i++) {
        out[i] = n > 0 ? sum[i] / (double)n : 0.0;
    }
}

static bool grow_from(lwi_builder *b, size_t cls)
{
    size_t queue[LW_MAX_BODIES];
    size_t head = 0;
    size_t tail = 0;
    queue[tail++] = cls;
    while (head < tail) {
        size_t u = queue[head++];
        for (size_t j = 0; j < b->spec->n_joint; j++) {
            if (!b->in_tree[j]) {
                continue;
            }
            size_t first = b->root[b->spec->joint[j].body[0]];
            size_t second = b->root[b->spec->joint[j].body[1]];
            if (first != u && second != u) {
                continue;
            }
            size_t v = first == u ? second : first;
            if (b->class_node[v] >= 0) {
                continue;
            }
            b->class_node[v] = lwi_builder_node(b);
            if (!lwi_builder_joint(b, j, b->class_node[u], b->class_node[v], second == u)) {
                return false;
            }
            queue[tail++] = v;
        }
    }
    return true;
}

static size_t rods_at(const lwi_builder *b, size_t cls)
{
    size_t n = 0;
    for (size_t r = 0; r < b->spec->n_rod; r++) {
        n += b->root[b->spec->rod[r].body[0]] == cls;
        n += b->root[b->spec->rod[r].body[1]] == cls;
    }
    return n;
}

/* Nodes in tree order: the frame, given bodies, then what hangs on them, then free components. */
bool lwi_builder_grow(lwi_builder *b)
{
    const lw_spec *spec = b->spec;
    lwi_system *sys = b->sys;
    for (size_t i = 0; i < spec->n_body; i++) {
        b->class_node[i] = -1;
    }
    b->class_node[b->root[spec->frame]] = lwi_builder_node(b);
    sys->node_given[0] = true;
    for (size_t i = 0; i < spec->n_body; i++) {
        if (b->ask->body_given[i] && b->class_node[b->root[i]] < 0) {
            int node = lwi_builder_node(b);
            if (node < 0) {
                return false;
            }
            b->class_node[b->root[i]] = node;
            sys->node_given[node] = true;
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        if (b->class_node[b->root[i]] >= 0 && !grow_from(b, b->root[i])) {
            return false;
        }
    }
    for (;;) {
        size_t best = SIZE_MAX;
        size_t best_score = 0;
        for (size_t i = 0; i < spec->n_body; i++) {
            if (b->root[i] != i || b->class_node[i] >= 0) {
                continue;
            }
            size_t score = 1 + 2 * rods_at(b, i) + (b->root[spec->tool[0].body] == i ? 1000 : 0);
            if (score > best_score) {
                best = i;
                best_score = score;
            }
        }
        if (best == SIZE_MAX) {
            break;
        }
        b->class_node[best] = lwi_builder_node(b);
        lwi_element *el = new_element(b, LWI_FREE, 0, b->class_node[best]);
        if (el == NULL || sys->n_quat >= LWI_MAX_QUATS) {
            return false;
        }
        el->body = (int)best;
        el->quat = (int)sys->n_quat++;
        body_centre(el->at, spec, b->root, best);
        if (!grow_from(b, best)) {
            return false;
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        sys->body_node[i] = (unsigned short)b->class_node[b->root[i]];
    }
    return true;
}
