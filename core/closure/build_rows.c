/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Building a closure system, second part: the rows of joints outside the tree, of rods, of
 * couplings and of idle spins. Called by build_new.c, at load only. */
#include "../math/vec3.h"
#include "build.h"

/* Elements that move node v against node u. */
static bool write_links(lwi_builder *b, size_t *link, size_t *n_link, size_t u, size_t v)
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

static lwi_row *new_row(lwi_builder *b, lwi_row_kind kind, size_t u, size_t v)
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

static bool point_row(lwi_builder *b, size_t j, size_t u, size_t v, const double e[3],
                      const double p[3])
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

static bool axis_row(lwi_builder *b, size_t j, size_t u, size_t v, const double e[3],
                     const double w[3])
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
static bool cut_rows(lwi_builder *b, size_t j, size_t u, size_t v)
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
static bool loop_is_coaxial(const lwi_builder *b, const lwi_link *link, size_t n, const double u[3])
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

/* A coaxial loop closes in unwrapped turns and slides: two sums instead of rotation matrices, so
 * that other thread engagements (whole turns apart) are no solutions. */
static bool coaxial_rows(lwi_builder *b, size_t j, const lwi_link *link, size_t n,
                         const double u[3])
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
static bool kept_cut(lwi_builder *b, size_t j)
{
    const lw_spec_joint *joint = &b->spec->joint[j];
    size_t u = (size_t)b->class_node[b->root[joint->body[0]]];
    size_t v = (size_t)b->class_node[b->root[joint->body[1]]];
    int phantom = lwi_builder_node(b);
    if (phantom < 0 || !lwi_builder_joint(b, j, (int)u, phantom, false)) {
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

bool lwi_builder_cuts(lwi_builder *b)
{
    for (size_t j = 0; j < b->spec->n_joint; j++) {
        const lw_spec_joint *joint = &b->spec->joint[j];
        if (joint->type == LW_FIXED || b->in_tree[j]) {
            continue;
        }
        size_t u = (size_t)b->class_node[b->root[joint->body[0]]];
        size_t v = (size_t)b->class_node[b->root[joint->body[1]]];
        bool good = lwi_builder_keeps(b, j) ? kept_cut(b, j) : cut_rows(b, j, u, v);
        if (!good) {
            return false;
        }
    }
    return true;
}

bool lwi_builder_rods(lwi_builder *b)
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

bool lwi_builder_couplings(lwi_builder *b)
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

bool lwi_builder_spin_locks(lwi_builder *b)
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
