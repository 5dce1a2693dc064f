/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a mechanism and what is given to a closure system: fuse, choose the spanning tree, cut, write
 * rows. Runs at load only. */
#include "../math/vec3.h"
#include "system.h"

#include <stdint.h>
#include <stdlib.h>

typedef struct builder {
    lwi_system *sys;
    const lwi_build_ask *ask;
    const lw_spec *spec;
    lw_err *err;
    size_t root[LW_MAX_BODIES];  /* fused class of a body */
    size_t group[LW_MAX_BODIES]; /* union-find over classes while choosing the tree */
    bool in_tree[LW_MAX_JOINTS];
    int class_node[LW_MAX_BODIES];
    uint64_t ancestor[LWI_MAX_NODES][LWI_MAX_ELEMENTS / 64];
} builder;

static size_t find(size_t *link, size_t i)
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
            size_t a = find(root, joint->body[0]);
            size_t b = find(root, joint->body[1]);
            root[a > b ? a : b] = a > b ? b : a;
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        root[i] = find(root, i);
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

static bool joint_kept(const builder *b, size_t joint)
{
    return b->spec->joint[joint].type == LW_HELICAL || any_coord(b->ask->coord_keep, b->spec, joint);
}

static int new_node(builder *b)
{
    if (b->sys->n_node >= LWI_MAX_NODES) {
        (void)LW_FAIL(b->err, LW_E_LIMIT, "/bodies", "too many bodies and joints to solve for");
        return -1;
    }
    return (int)b->sys->n_node++;
}

static lwi_element *new_element(builder *b, lwi_kind kind, int parent, int child)
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
static bool add_scalar(builder *b, lwi_kind kind, int parent, int child, double sign,
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
static bool add_joint_elements(builder *b, size_t j, int parent, int child, bool reversed)
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
        int to = k + 1 == n ? child : new_node(b);
        if (!add_scalar(b, pc->kind, from, to, reversed ? -1.0 : 1.0, pc->axis, joint->at_m,
                        pc->pitch, lw_spec_joint_coord(b->spec, j, pc->part))) {
            return false;
        }
        from = to;
    }
    return true;
}

/* Bodies whose pose is given or follows from given coordinates. */
static void mark_known(builder *b)
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
static void choose_tree(builder *b)
{
    const lw_spec *spec = b->spec;
    for (size_t i = 0; i < spec->n_body; i++) {
        b->group[i] = b->root[i];
    }
    size_t base = b->root[spec->frame];
    for (size_t i = 0; i < spec->n_body; i++) {
        if (b->sys->body_known[i]) {
            size_t g = find(b->group, b->root[i]);
            b->group[g] = find(b->group, base);
        }
    }
    for (size_t pass = 0; pass < 5; pass++) {
        for (size_t j = 0; j < spec->n_joint; j++) {
            lw_joint_type type = spec->joint[j].type;
            size_t weight = type == LW_HELICAL ? 0 : joint_kept(b, j) ? 1 : 1 + freedoms(type);
            if (type == LW_FIXED || weight != pass || b->in_tree[j]) {
                continue;
            }
            size_t u = find(b->group, b->root[spec->joint[j].body[0]]);
            size_t v = find(b->group, b->root[spec->joint[j].body[1]]);
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

static bool grow_from(builder *b, size_t cls)
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
            b->class_node[v] = new_node(b);
            if (!add_joint_elements(b, j, b->class_node[u], b->class_node[v], second == u)) {
                return false;
            }
            queue[tail++] = v;
        }
    }
    return true;
}

static size_t rods_at(const builder *b, size_t cls)
{
    size_t n = 0;
    for (size_t r = 0; r < b->spec->n_rod; r++) {
        n += b->root[b->spec->rod[r].body[0]] == cls;
        n += b->root[b->spec->rod[r].body[1]] == cls;
    }
    return n;
}

/* Nodes in tree order: the frame, given bodies, then what hangs on them, then free components. */
static bool grow_tree(builder *b)
{
    const lw_spec *spec = b->spec;
    lwi_system *sys = b->sys;
    for (size_t i = 0; i < spec->n_body; i++) {
        b->class_node[i] = -1;
    }
    b->class_node[b->root[spec->frame]] = new_node(b);
    sys->node_given[0] = true;
    for (size_t i = 0; i < spec->n_body; i++) {
        if (b->ask->body_given[i] && b->class_node[b->root[i]] < 0) {
            int node = new_node(b);
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
        b->class_node[best] = new_node(b);
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

/* Elements that move node v against node u. */
static bool write_links(builder *b, size_t *link, size_t *n_link, size_t u, size_t v)
{
    lwi_system *sys = b->sys;
    *link = sys->n_link;
    for (size_t k = 0; k < sys->n_element; k++) {
        bool in_u = (b->ancestor[u][k / 64] >> (k % 64)) & 1;
        bool in_v = (b->ancestor[v][k / 64] >> (k % 64)) & 1;
        if (in_u == in_v) {
            continue;
        }
        if (sys->n_link >= LWI_MAX_LINKS) {
            (void)LW_FAIL(b->err, LW_E_LIMIT, "/joints", "loops are too long to solve for");
            return false;
        }
        sys->link[sys->n_link].element = (short)k;
        sys->link[sys->n_link++].sign = in_v ? 1 : -1;
    }
    *n_link = sys->n_link - *link;
    return true;
}

static lwi_row *new_row(builder *b, lwi_row_kind kind, size_t u, size_t v)
{
    if (b->sys->n_row >= LWI_MAX_ROWS) {
        (void)LW_FAIL(b->err, LW_E_LIMIT, "/joints", "too many loops to solve for");
        return NULL;
    }
    lwi_row *row = &b->sys->row[b->sys->n_row++];
    memset(row, 0, sizeof *row);
    row->kind = kind;
    row->a = (unsigned short)u;
    row->b = (unsigned short)v;
    row->rod = row->joint = row->coupling = -1;
    if (kind != LWI_ROW_LINEAR && !write_links(b, &row->link, &row->n_link, u, v)) {
        return NULL;
    }
    return row;
}

static bool point_row(builder *b, size_t j, size_t u, size_t v, const double e[3], const double p[3])
{
    lwi_row *row = new_row(b, LWI_ROW_POINT, u, v);
    if (row == NULL) {
        return false;
    }
    row->joint = (int)j;
    lwi_copy3(row->e, e);
    lwi_copy3(row->pa, p);
    lwi_copy3(row->pb, p);
    return true;
}

static bool axis_row(builder *b, size_t j, size_t u, size_t v, const double e[3], const double w[3])
{
    lwi_row *row = new_row(b, LWI_ROW_AXIS, u, v);
    if (row == NULL) {
        return false;
    }
    row->joint = (int)j;
    lwi_copy3(row->e, e);
    lwi_copy3(row->u, w);
    row->value = lwi_dot(e, w);
    return true;
}

/* Rows of a joint that is cut and whose coordinates are not kept. */
static bool cut_rows(builder *b, size_t j, size_t u, size_t v)
{
    const lw_spec_joint *joint = &b->spec->joint[j];
    static const double ex[3] = {1, 0, 0};
    static const double ey[3] = {0, 1, 0};
    static const double ez[3] = {0, 0, 1};
    const double *w = joint->axis;
    const double *p = joint->at_m;
    double e1[3];
    double e2[3];
    lwi_perpendicular(e1, e2, w);
    switch (joint->type) {
    case LW_SPHERICAL:
        return point_row(b, j, u, v, ex, p) && point_row(b, j, u, v, ey, p) &&
               point_row(b, j, u, v, ez, p);
    case LW_UNIVERSAL:
        return point_row(b, j, u, v, ex, p) && point_row(b, j, u, v, ey, p) &&
               point_row(b, j, u, v, ez, p) && axis_row(b, j, u, v, w, joint->second_axis);
    case LW_REVOLUTE:
        return point_row(b, j, u, v, e1, p) && point_row(b, j, u, v, e2, p) &&
               point_row(b, j, u, v, w, p) && axis_row(b, j, u, v, e1, w) &&
               axis_row(b, j, u, v, e2, w);
    case LW_CYLINDRICAL:
        return point_row(b, j, u, v, e1, p) && point_row(b, j, u, v, e2, p) &&
               axis_row(b, j, u, v, e1, w) && axis_row(b, j, u, v, e2, w);
    case LW_PRISMATIC:
        return point_row(b, j, u, v, e1, p) && point_row(b, j, u, v, e2, p) &&
               axis_row(b, j, u, v, e1, w) && axis_row(b, j, u, v, e2, w) &&
               axis_row(b, j, u, v, e1, e2);
    case LW_PLANAR:
        return point_row(b, j, u, v, w, p) && axis_row(b, j, u, v, e1, w) &&
               axis_row(b, j, u, v, e2, w);
    case LW_HELICAL:
    case LW_FIXED:
        break;
    }
    return true;
}

/* True where every element of the loop turns about, or slides along, one line of direction u. */
static bool loop_is_coaxial(const builder *b, const lwi_link *link, size_t n, const double u[3])
{
    const double *p = NULL; /* a point of the line: on the first turning axis */
    for (size_t k = 0; k < n && p == NULL; k++) {
        const lwi_element *el = &b->sys->element[link[k].element];
        p = el->kind == LWI_SLIDE ? NULL : el->at;
    }
    for (size_t k = 0; k < n; k++) {
        const lwi_element *el = &b->sys->element[link[k].element];
        double c[3];
        double d[3];
        if (el->kind == LWI_BALL || el->kind == LWI_FREE) {
            return false;
        }
        lwi_cross(c, el->axis, u);
        if (lwi_norm(c) > 1e-6) {
            return false;
        }
        if (el->kind != LWI_SLIDE) {
            lwi_sub(d, el->at, p);
            lwi_cross(c, d, u);
            if (lwi_norm(c) > 1e-6 * b->sys->length_m) {
                return false;
            }
        }
    }
    return true;
}

/* A coaxial loop closes in unwrapped turns and slides: two sums instead of rotation matrices, so that
 * other thread engagements (whole turns apart) are no solutions. */
static bool coaxial_rows(builder *b, size_t j, const lwi_link *link, size_t n, const double u[3])
{
    if (n > LW_MAX_TERMS * 2) {
        return LW_FAIL(b->err, LW_E_LIMIT, "/joints", "a screw loop has more than %d joints",
                       LW_MAX_TERMS * 2) == LW_OK;
    }
    for (int slide = 0; slide < 2; slide++) {
        lwi_row *row = new_row(b, LWI_ROW_LINEAR, 0, 0);
        if (row == NULL) {
            return false;
        }
        row->joint = (int)j;
        for (size_t k = 0; k < n; k++) {
            const lwi_element *el = &b->sys->element[link[k].element];
            double along = lwi_dot(el->axis, u) > 0.0 ? 1.0 : -1.0;
            double factor = el->sign * link[k].sign * along;
            if (slide) {
                factor *= el->kind == LWI_SLIDE ? 1.0 : el->kind == LWI_HELIX ? el->pitch : 0.0;
                factor /= b->sys->length_m;
            } else if (el->kind == LWI_SLIDE) {
                factor = 0.0;
            }
            if (factor != 0.0) {
                row->term_element[row->n_term] = link[k].element;
                row->term_factor[row->n_term++] = factor;
            }
        }
        if (row->n_term == 0) {
            b->sys->n_row--;
        }
    }
    return true;
}

/* A cut joint whose coordinates are needed: its screws lead to a node of their own, which must
 * coincide with the second body. */
static bool kept_cut(builder *b, size_t j)
{
    const lw_spec_joint *joint = &b->spec->joint[j];
    size_t u = (size_t)b->class_node[b->root[joint->body[0]]];
    size_t v = (size_t)b->class_node[b->root[joint->body[1]]];
    int phantom = new_node(b);
    if (phantom < 0 || !add_joint_elements(b, j, (int)u, phantom, false)) {
        return false;
    }
    size_t link;
    size_t n_link;
    if (!write_links(b, &link, &n_link, v, (size_t)phantom)) {
        return false;
    }
    bool given_apart = false; /* two given roots cannot close by sums alone */
    size_t root_u = u;
    size_t root_v = v;
    for (size_t k = b->sys->n_element; k-- > 0;) {
        root_u = b->sys->element[k].child == root_u ? b->sys->element[k].parent : root_u;
        root_v = b->sys->element[k].child == root_v ? b->sys->element[k].parent : root_v;
    }
    given_apart = root_u != root_v;
    if (!given_apart &&
        loop_is_coaxial(b, b->sys->link + link, n_link, joint->axis)) {
        return coaxial_rows(b, j, b->sys->link + link, n_link, joint->axis);
    }
    double e1[3];
    double e2[3];
    const double *w = joint->axis;
    const double *p = joint->at_m;
    size_t x = (size_t)phantom;
    lwi_perpendicular(e1, e2, w);
    return point_row(b, j, x, v, e1, p) && point_row(b, j, x, v, e2, p) &&
           point_row(b, j, x, v, w, p) && axis_row(b, j, x, v, e1, w) &&
           axis_row(b, j, x, v, e2, w) && axis_row(b, j, x, v, e1, e2);
}

static bool add_cuts(builder *b)
{
    for (size_t j = 0; j < b->spec->n_joint; j++) {
        const lw_spec_joint *joint = &b->spec->joint[j];
        if (joint->type == LW_FIXED || b->in_tree[j]) {
            continue;
        }
        size_t u = (size_t)b->class_node[b->root[joint->body[0]]];
        size_t v = (size_t)b->class_node[b->root[joint->body[1]]];
        bool good = joint_kept(b, j) ? kept_cut(b, j) : cut_rows(b, j, u, v);
        if (!good) {
            return false;
        }
    }
    return true;
}

static bool add_rods(builder *b)
{
    for (size_t r = 0; r < b->spec->n_rod; r++) {
        const lw_spec_rod *rod = &b->spec->rod[r];
        lwi_rod_info *info = &b->sys->rod[r];
        size_t u = (size_t)b->class_node[b->root[rod->body[0]]];
        size_t v = (size_t)b->class_node[b->root[rod->body[1]]];
        double d[3];
        info->a = (unsigned short)u;
        info->b = (unsigned short)v;
        memcpy(info->end, rod->end_m, sizeof info->end);
        lwi_sub(d, rod->end_m[1], rod->end_m[0]);
        info->length_m = lwi_norm(d);
        info->fixed = !lwi_rod_moves(b->spec, r) || b->ask->rods_given;
        if (!write_links(b, &info->link, &info->n_link, u, v)) {
            return false;
        }
        if (info->fixed) {
            lwi_row *row = new_row(b, LWI_ROW_ROD, u, v);
            if (row == NULL) {
                return false;
            }
            row->rod = (int)r;
            lwi_copy3(row->pa, rod->end_m[0]);
            lwi_copy3(row->pb, rod->end_m[1]);
        }
    }
    return true;
}

static bool add_couplings(builder *b)
{
    size_t n_scalar = lw_spec_coord_count(b->spec) - b->spec->n_rod;
    for (size_t c = 0; c < b->spec->n_coupling; c++) {
        const lw_spec_coupling *coupling = &b->spec->coupling[c];
        lwi_row *row = new_row(b, LWI_ROW_LINEAR, 0, 0);
        if (row == NULL) {
            return false;
        }
        row->coupling = (int)c;
        double size = 0.0;
        for (size_t t = 0; t < coupling->n_term; t++) {
            double scale = lw_spec_coord_turning(b->spec, coupling->term[t].coord)
                               ? 1.0
                               : b->sys->length_m;
            size = fmax(size, fabs(coupling->term[t].factor) * scale);
        }
        for (size_t t = 0; t < coupling->n_term; t++) {
            size_t coord = coupling->term[t].coord;
            double factor = coupling->term[t].factor / size;
            if (coord >= n_scalar) {
                row->rod_term[row->n_rod_term] = (int)(coord - n_scalar);
                row->rod_factor[row->n_rod_term++] = factor;
            } else {
                row->term_element[row->n_term] = b->sys->coord_element[coord];
                row->term_factor[row->n_term++] = factor;
            }
        }
    }
    return true;
}

static bool add_spin_locks(builder *b)
{
    for (size_t i = 0; i < b->spec->n_body; i++) {
        if (!b->ask->spin_lock[i] || b->sys->body_known[i]) {
            continue;
        }
        lwi_row *row = new_row(b, LWI_ROW_SPIN, 0, b->sys->body_node[i]);
        if (row == NULL) {
            return false;
        }
        lwi_copy3(row->u, b->ask->spin_axis[i]);
    }
    return true;
}

static bool number_vars(builder *b)
{
    lwi_system *sys = b->sys;
    for (size_t k = 0; k < sys->n_element; k++) {
        lwi_element *el = &sys->element[k];
        size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
        if (el->given) {
            continue;
        }
        if (sys->n_var + n > LWI_MAX_VARS) {
            (void)LW_FAIL(b->err, LW_E_LIMIT, "/joints", "more than %d unknowns", LWI_MAX_VARS);
            return false;
        }
        el->var = (int)sys->n_var;
        for (size_t i = 0; i < n; i++) {
            bool length = el->kind == LWI_SLIDE || (el->kind == LWI_FREE && i < 3);
            double scale = length ? sys->length_m : 1.0;
            if (el->kind == LWI_HELIX) {
                /* A screw counts by its travel, so that many turns are not many lengths. */
                scale = fmax(1.0, fmin(sys->length_m / fmax(fabs(el->pitch), 1e-12), 1e3));
            }
            sys->var_element[sys->n_var] = (int)k;
            sys->var_scale[sys->n_var++] = scale;
        }
    }
    return true;
}

/* Linear rows are scaled so that their largest derivative is one, as geometric rows have it. */
static void scale_linear_rows(lwi_system *sys)
{
    for (size_t i = 0; i < sys->n_row; i++) {
        lwi_row *row = &sys->row[i];
        double size = 0.0;
        for (size_t t = 0; t < row->n_term; t++) {
            int var = sys->element[row->term_element[t]].var;
            double scale = var >= 0 ? sys->var_scale[var] : 1.0;
            size = fmax(size, fabs(row->term_factor[t]) * scale);
        }
        for (size_t t = 0; t < row->n_rod_term; t++) {
            size = fmax(size, fabs(row->rod_factor[t]) * sys->length_m);
        }
        for (size_t t = 0; t < row->n_term && size > 0.0; t++) {
            row->term_factor[t] /= size;
        }
        for (size_t t = 0; t < row->n_rod_term && size > 0.0; t++) {
            row->rod_factor[t] /= size;
        }
    }
}

/* Unknowns that enter only sums of coordinates (a spindle, a gear train) are straight: any step along
 * them is exact. */
static void mark_curved(builder *b)
{
    lwi_system *sys = b->sys;
    bool curved[LWI_MAX_ELEMENTS] = {false};
    for (size_t i = 0; i < sys->n_row; i++) {
        for (size_t k = 0; sys->row[i].kind != LWI_ROW_LINEAR && k < sys->row[i].n_link; k++) {
            curved[sys->link[sys->row[i].link + k].element] = true;
        }
    }
    for (size_t r = 0; r < b->spec->n_rod; r++) {
        for (size_t k = 0; k < sys->rod[r].n_link; k++) {
            curved[sys->link[sys->rod[r].link + k].element] = true;
        }
    }
    for (size_t t = 0; t < b->spec->n_tool; t++) {
        size_t node = sys->body_node[b->spec->tool[t].body];
        for (size_t k = 0; k < sys->n_element; k++) {
            curved[k] = curved[k] || ((b->ancestor[node][k / 64] >> (k % 64)) & 1);
        }
    }
    for (size_t v = 0; v < sys->n_var; v++) {
        sys->var_curved[v] = curved[sys->var_element[v]];
    }
}

lw_code lwi_system_build(lwi_system *out, const lwi_build_ask *ask, lw_err *err)
{
    builder *b = calloc(1, sizeof *b);
    if (b == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    memset(out, 0, sizeof *out);
    lw_err local = {0};
    b->sys = out;
    b->ask = ask;
    b->spec = ask->spec;
    b->err = err != NULL ? err : &local;
    out->spec = ask->spec;
    out->length_m = ask->length_m;
    for (size_t i = 0; i < LW_MAX_COORDS; i++) {
        out->coord_element[i] = -1;
    }
    for (size_t i = 0; i < LW_MAX_BALLS; i++) {
        out->ball_element[i] = -1;
    }
    lwi_fuse(b->root, ask->spec);
    mark_known(b);
    choose_tree(b);
    bool good = grow_tree(b) && add_cuts(b) && add_rods(b) && add_couplings(b) &&
                add_spin_locks(b) && number_vars(b);
    if (good) {
        mark_curved(b);
    }
    free(b);
    if (!good) {
        return err != NULL && err->code != LW_OK ? err->code : LW_E_LIMIT;
    }
    scale_linear_rows(out);
    lwi_system_blocks(out);
    return LW_OK;
}

static void join(size_t *group, int *first, int var)
{
    if (var < 0) {
        return;
    }
    if (*first < 0) {
        *first = var;
        return;
    }
    size_t a = find(group, (size_t)*first);
    size_t b = find(group, (size_t)var);
    group[a > b ? a : b] = a > b ? b : a;
}

static int row_vars(const lwi_system *sys, const lwi_row *row, size_t *group)
{
    int first = -1;
    for (size_t k = 0; k < row->n_link; k++) {
        join(group, &first, sys->element[sys->link[row->link + k].element].var);
    }
    for (size_t t = 0; t < row->n_term; t++) {
        join(group, &first, sys->element[row->term_element[t]].var);
    }
    for (size_t t = 0; t < row->n_rod_term; t++) {
        const lwi_rod_info *rod = &sys->rod[row->rod_term[t]];
        for (size_t k = 0; k < rod->n_link; k++) {
            join(group, &first, sys->element[sys->link[rod->link + k].element].var);
        }
    }
    return first;
}

void lwi_system_blocks(lwi_system *sys)
{
    size_t group[LWI_MAX_VARS];
    int number[LWI_MAX_VARS];
    for (size_t i = 0; i < sys->n_var; i++) {
        group[i] = i;
        number[i] = -1;
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        /* The tangents of one ball or free body belong together. */
        const lwi_element *el = &sys->element[k];
        int first = -1;
        size_t n = el->kind == LWI_FREE ? 6 : el->kind == LWI_BALL ? 3 : 1;
        for (size_t i = 0; i < n && el->var >= 0; i++) {
            join(group, &first, el->var + (int)i);
        }
    }
    int first[LWI_MAX_ROWS];
    for (size_t i = 0; i < sys->n_row; i++) {
        first[i] = row_vars(sys, &sys->row[i], group);
    }
    sys->n_block = 0;
    for (size_t i = 0; i < sys->n_row; i++) {
        if (first[i] < 0) {
            sys->row[i].block = -1;
            continue;
        }
        size_t g = find(group, (size_t)first[i]);
        if (number[g] < 0) {
            number[g] = (int)sys->n_block++;
        }
        sys->row[i].block = number[g];
    }
}

void lwi_system_fix_rod(lwi_system *sys, size_t r)
{
    lwi_rod_info *info = &sys->rod[r];
    if (info->fixed || sys->n_row >= LWI_MAX_ROWS) {
        return;
    }
    lwi_row *row = &sys->row[sys->n_row++];
    memset(row, 0, sizeof *row);
    row->kind = LWI_ROW_ROD;
    row->a = info->a;
    row->b = info->b;
    row->rod = (int)r;
    row->joint = row->coupling = -1;
    lwi_copy3(row->pa, info->end[0]);
    lwi_copy3(row->pb, info->end[1]);
    row->link = info->link;
    row->n_link = info->n_link;
    info->fixed = true;
    lwi_system_blocks(sys);
}

void lwi_system_drop_row(lwi_system *sys, size_t i)
{
    sys->row_dropped[sys->n_row_dropped++] = sys->row[i];
    memmove(&sys->row[i], &sys->row[i + 1], (sys->n_row - i - 1) * sizeof sys->row[0]);
    sys->n_row--;
}
