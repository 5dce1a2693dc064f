/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which machines are judged by their rods, and their rods at a posture.
 *
 * With the drives locked such a machine moves exactly where its wrenches leave a twist: carriages
 * and cranks stand still, a rod turns about its balls, and what is left is the tool body with what
 * slides on it. With the tool at rest a limb moves exactly at a dead point of its rod. */
#include "ball.h"

#include "../math/vec3.h"

#include <stdint.h>

typedef struct making {
    lwi_ball *b;
    const lw_model *m;
    const lw_solution *sol;
    size_t tool, frame; /* fused */
    bool planar;
    double normal[3];
    size_t n_slide;
    size_t slide_body[2];
    double slide_axis[2][3];
    double slide_rate[2][LWI_BALL_DIRS];
    bool drive_used[LW_MAX_DRIVES];
    bool joint_used[LW_MAX_JOINTS];
} making;

static void add_direction(lwi_ball *b, const double *shift, const double *turn, int output,
                          double rate)
{
    size_t k = b->n_dir++;
    memset(b->shift[k], 0, sizeof b->shift[k]);
    memset(b->turn[k], 0, sizeof b->turn[k]);
    if (shift != NULL) {
        lwi_copy3(b->shift[k], shift);
    }
    if (turn != NULL) {
        for (int i = 0; i < 3; i++) {
            b->turn[k][i] = turn[i] / b->length_m;
        }
        b->n_turn++;
    }
    b->output[k] = output;
    b->output_rate[k] = rate;
}

static bool directions(lwi_ball *b, const lw_model *m)
{
    static const double unit[3][3] = {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}};
    const lw_spec *spec = m->spec;
    const lwi_completion *c = &m->completion;
    if (!c->usable || spec->n_output > LWI_BALL_DIRS) {
        return false;
    }
    for (size_t o = 0; o < spec->n_output; o++) {
        lw_output_kind kind = spec->output[o].kind;
        if (kind <= LW_OUT_Z) {
            add_direction(b, unit[kind], NULL, -1, 0.0);
        } else if (kind < LW_OUT_COORD && c->rot == LWI_ROT_FULL) {
            add_direction(b, NULL, unit[kind - LW_OUT_RX], -1, 0.0);
        } else if (kind < LW_OUT_COORD) {
            add_direction(b, NULL, c->axis, -1, 0.0);
        } else {
            bool turning = lw_spec_coord_turning(spec, spec->output[o].coord);
            double turn[3];
            for (int i = 0; i < 3; i++) {
                turn[i] = c->factor * c->axis[i];
            }
            add_direction(b, NULL, c->rot == LWI_ROT_COORD && c->output == o ? turn : NULL, (int)o,
                          turning ? 1.0 / b->length_m : 1.0);
        }
    }
    return true;
}

/* The drive that moves a coordinate and nothing else, -1 none, -2 one that moves more. */
static int drive_of(making *k, size_t coord)
{
    const lw_spec *spec = k->m->spec;
    int found = -1;
    for (size_t d = 0; d < spec->n_drive; d++) {
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            if (spec->drive[d].term[t].coord == coord) {
                if (spec->drive[d].n_term != 1) {
                    return -2;
                }
                k->drive_used[d] = true;
                found = (int)d;
            }
        }
    }
    return found;
}

/* Motion of the tool body's own slide by each direction, from the outputs. */
static void slide_rates(making *k, size_t coord, double *rate)
{
    const lw_model *m = k->m;
    for (size_t d = 0; d < k->b->n_dir; d++) {
        rate[d] = 0.0;
        if (k->b->output[d] >= 0 && m->spec->output[k->b->output[d]].coord == coord) {
            rate[d] = k->b->output_rate[d];
        }
    }
    for (size_t i = 0; i < m->n_determined; i++) {
        const lwi_determined *det = &m->determined[i];
        for (size_t j = 0; j < det->n && det->coord == coord; j++) {
            for (size_t d = 0; d < k->b->n_dir; d++) {
                if (k->b->output[d] == (int)det->from[j]) {
                    rate[d] += det->factor[j] * k->b->output_rate[d];
                }
            }
        }
    }
}

/* Slides between the tool body and another body known with it: only in machines that never turn,
 * where their axes stand. */
static bool find_slides(making *k)
{
    const lw_model *m = k->m;
    for (size_t i = 0; i < m->n_propagate; i++) {
        const lw_spec_joint *joint = &m->spec->joint[m->propagate[i].joint];
        size_t a = m->fused[joint->body[0]];
        size_t b = m->fused[joint->body[1]];
        k->joint_used[m->propagate[i].joint] = true;
        if (k->b->n_turn > 0) {
            return false;
        }
        if (joint->type != LW_PRISMATIC || (a != k->tool && b != k->tool)) {
            continue; /* bears no rod, or the rod's body is not known and refused there */
        }
        if (k->n_slide == 2) {
            return false;
        }
        double sign = b == k->tool ? -1.0 : 1.0;
        size_t s = k->n_slide++;
        k->slide_body[s] = b == k->tool ? a : b;
        lwi_rot_apply(k->slide_axis[s], k->sol->config.body[joint->body[0]].rot, joint->axis);
        for (int j = 0; j < 3; j++) {
            k->slide_axis[s][j] *= sign;
        }
        slide_rates(k, lw_spec_joint_coord(m->spec, m->propagate[i].joint, 0), k->slide_rate[s]);
    }
    return true;
}

/* A rod to add: its end on a body of the tool side. False: no such body, or no room. */
static lwi_ball_rod *new_rod(making *k, size_t body, const double end[3])
{
    lwi_ball *b = k->b;
    int slide = -1;
    for (size_t s = 0; s < k->n_slide; s++) {
        if (k->m->fused[body] == k->slide_body[s]) {
            slide = (int)s;
        }
    }
    if ((k->m->fused[body] != k->tool && slide < 0) || b->n_rod == LWI_BALL_RODS) {
        return NULL;
    }
    lwi_ball_rod *rod = &b->rod[b->n_rod++];
    memset(rod, 0, sizeof *rod);
    rod->limb = SIZE_MAX;
    rod->spec_rod = -1;
    rod->slide = slide; /* numbered behind the twists at the end */
    lwi_sub(rod->arm, end, b->tool_m);
    memcpy(rod->shift, b->shift, sizeof rod->shift);
    if (slide >= 0) {
        lwi_copy3(rod->slide_axis, k->slide_axis[slide]);
        for (size_t d = 0; d < b->n_dir; d++) {
            lwi_axpy(rod->shift[d], rod->shift[d], k->slide_rate[slide][d], rod->slide_axis);
        }
    }
    return rod;
}

static void circle(lwi_ball_rod *rod, const lwi_ball *b, const double centre[3],
                   const double axis[3], const double foot[3], const double end[3])
{
    double e[3];
    double t[3];
    double u[3];
    rod->foot = LWI_FOOT_CIRCLE;
    lwi_copy3(rod->axis, axis);
    lwi_sub(e, foot, centre);
    lwi_axpy(rod->at, centre, lwi_dot(e, axis), axis);
    lwi_sub(e, foot, rod->at);
    rod->radius_m = lwi_norm(e);
    lwi_sub(u, end, foot);
    rod->length_m = lwi_norm(u);
    lwi_cross(t, axis, e);
    rod->sign = lwi_dot(u, t) < 0.0 ? -1.0 : 1.0;
    rod->flat = true;
    for (size_t k = 0; k < b->n_dir; k++) {
        double c[3];
        lwi_cross(c, b->turn[k], axis);
        rod->flat = rod->flat && lwi_norm(c) * b->length_m < 1e-14 &&
                    fabs(lwi_dot(rod->shift[k], axis)) < 1e-14;
    }
}

static bool two_link(making *k, size_t index)
{
    const lw_model *m = k->m;
    const lwi_limb *limb = &m->limb[index];
    const lw_config *c = &k->sol->config;
    bool back = m->fused[limb->anchor[0]] != k->frame;
    size_t ground = limb->chain[back ? 2 : 0].joint;
    size_t top = limb->chain[back ? 0 : 2].joint;
    const lw_spec_joint *ja = &m->spec->joint[ground];
    double elbow[3];
    double end[3];
    double centre[3];
    double n[3];
    if (m->fused[limb->anchor[back ? 1 : 0]] != k->frame) {
        return false;
    }
    lwi_cross(n, k->normal, ja->axis);
    if (k->planar && lwi_norm(n) > 1e-12) {
        return false;
    }
    if (!k->planar) {
        lwi_copy3(k->normal, ja->axis);
        k->planar = true;
    }
    lwi_frame_apply(elbow, &c->body[limb->chain[0].next],
                    m->spec->joint[limb->chain[1].joint].at_m);
    lwi_frame_apply(end, &c->body[limb->anchor[back ? 0 : 1]], m->spec->joint[top].at_m);
    lwi_ball_rod *rod = new_rod(k, limb->anchor[back ? 0 : 1], end);
    if (rod == NULL) {
        return false;
    }
    /* All in the plane of the end. */
    lwi_sub(n, end, ja->at_m);
    lwi_axpy(centre, ja->at_m, lwi_dot(n, ja->axis), ja->axis);
    lwi_sub(n, end, elbow);
    lwi_axpy(elbow, elbow, lwi_dot(n, ja->axis), ja->axis);
    circle(rod, k->b, centre, ja->axis, elbow, end);
    rod->limb = index;
    int drive = drive_of(k, lw_spec_joint_coord(m->spec, ground, 0));
    rod->holds = drive >= 0;
    for (size_t i = 0; i < 3; i++) {
        k->joint_used[limb->chain[i].joint] = true;
    }
    return drive != -2;
}

/* Rods of a carriage or crank. */
static bool foot_rods(making *k, size_t index)
{
    const lw_model *m = k->m;
    const lwi_limb *limb = &m->limb[index];
    const lw_config *c = &k->sol->config;
    size_t j = limb->chain[0].joint;
    const lw_spec_joint *joint = &m->spec->joint[j];
    size_t moving = m->fused[limb->chain[0].next];
    if (m->fused[limb->anchor[0]] != k->frame) {
        return false;
    }
    int drive = drive_of(k, lw_spec_joint_coord(m->spec, j, 0));
    k->joint_used[j] = true;
    for (size_t r = 0; r < limb->n_rod; r++) {
        const lw_spec_rod *spec = &m->spec->rod[limb->rod[r]];
        size_t own = m->fused[spec->body[0]] == moving ? 0 : 1;
        double foot[3];
        double end[3];
        double d[3];
        if (lwi_rod_moves(m->spec, limb->rod[r])) {
            return false;
        }
        lwi_frame_apply(foot, &c->body[spec->body[own]], spec->end_m[own]);
        lwi_frame_apply(end, &c->body[spec->body[1 - own]], spec->end_m[1 - own]);
        lwi_ball_rod *rod = new_rod(k, spec->body[1 - own], end);
        if (rod == NULL) {
            return false;
        }
        lwi_sub(d, end, foot);
        rod->length_m = lwi_norm(d);
        if (joint->type == LW_PRISMATIC) {
            rod->foot = LWI_FOOT_LINE;
            lwi_copy3(rod->at, foot);
            lwi_copy3(rod->axis, joint->axis);
            rod->sign = lwi_dot(d, joint->axis) < 0.0 ? -1.0 : 1.0;
        } else {
            circle(rod, k->b, joint->at_m, joint->axis, foot, end);
            if (!(rod->radius_m > 1e-9)) {
                return false;
            }
        }
        rod->limb = index;
        rod->spec_rod = (int)limb->rod[r];
        rod->holds = drive >= 0;
    }
    return drive != -2;
}

/* Rods between the fixed frame and the tool's side. */
static bool struts(making *k)
{
    const lw_model *m = k->m;
    for (size_t r = 0; r < m->spec->n_rod; r++) {
        const lw_spec_rod *spec = &m->spec->rod[r];
        size_t a = m->fused[spec->body[0]];
        size_t b = m->fused[spec->body[1]];
        if (a != k->frame && b != k->frame) {
            continue; /* a limb's, or refused below */
        }
        size_t own = a == k->frame ? 1 : 0;
        double end[3];
        lwi_frame_apply(end, &k->sol->config.body[spec->body[own]], spec->end_m[own]);
        lwi_ball_rod *rod = new_rod(k, spec->body[own], end);
        int drive = drive_of(k, lw_spec_rod_coord(m->spec, r));
        if (rod == NULL || drive == -2) {
            return false;
        }
        rod->spec_rod = (int)r;
        lwi_copy3(rod->at, spec->end_m[1 - own]);
        rod->holds = drive >= 0 || !lwi_rod_moves(m->spec, r);
    }
    return true;
}

static bool joints_told(making *k)
{
    const lw_model *m = k->m;
    for (size_t j = 0; j < m->spec->n_joint; j++) {
        const lw_spec_joint *joint = &m->spec->joint[j];
        size_t a = m->fused[joint->body[0]];
        size_t b = m->fused[joint->body[1]];
        bool grounded = a == k->frame || b == k->frame;
        if (k->joint_used[j] || a == b) {
            continue;
        }
        if (joint->type == LW_PLANAR && grounded && (a == k->tool || b == k->tool)) {
            lwi_copy3(k->normal, joint->axis);
            k->planar = true;
            continue;
        }
        /* Screws and slides among the bodies that go with the tool: what freedom they leave is
         * the same everywhere in a machine that never turns. */
        if (k->b->n_turn > 0 || grounded || !m->inverse->body_known[joint->body[0]] ||
            !m->inverse->body_known[joint->body[1]]) {
            return false;
        }
    }
    return true;
}

static void columns(making *k)
{
    lwi_ball *b = k->b;
    memset(b->col, 0, sizeof b->col);
    if (k->planar) {
        lwi_perpendicular(b->col[0], b->col[1], k->normal);
        lwi_copy3(b->col[2] + 3, k->normal);
        b->n_twist = 3;
    } else {
        for (size_t i = 0; i < 6; i++) {
            b->col[i][i] = 1.0;
        }
        b->n_twist = 6;
    }
    b->n_col = b->n_twist + k->n_slide;
    for (size_t i = 0; i < b->n_rod; i++) {
        b->rod[i].slide += b->rod[i].slide >= 0 ? (int)b->n_twist : 0;
    }
}

static bool rods(making *k)
{
    const lw_model *m = k->m;
    if (!m->explicit_inverse || m->spec->n_coupling > 0 || !find_slides(k)) {
        return false;
    }
    for (size_t i = 0; i < m->n_limb; i++) {
        lw_limb_kind kind = m->limb[i].kind;
        bool good = kind == LW_LIMB_STRUT      ? m->limb[i].n_joint == 0
                    : kind == LW_LIMB_TWO_LINK ? two_link(k, i)
                    : kind == LW_LIMB_RAIL_ROD || kind == LW_LIMB_CRANK_ROD ? foot_rods(k, i)
                                                                            : false;
        if (!good) {
            return false;
        }
    }
    return struts(k) && joints_told(k);
}

bool lwi_ball_make(lwi_ball *b, const lw_model *m, const lw_spec_tool *tool, const lw_solution *sol)
{
    making k = {.b = b,
                .m = m,
                .sol = sol,
                .tool = m->fused[m->spec->tool[0].body],
                .frame = m->fused[m->spec->frame]};
    memset(b, 0, sizeof *b);
    b->length_m = m->length_m;
    b->tool = sol->tool;
    lwi_copy3(b->tool_m, sol->tool.pos_m);
    if (!directions(b, m) || m->fused[tool->body] != k.tool) {
        return false;
    }
    if (!rods(&k)) {
        b->n_rod = 0;
        return true;
    }
    columns(&k);
    size_t held = 0;
    bool all = true;
    for (size_t i = 0; i < b->n_rod; i++) {
        held += b->rod[i].holds;
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        all = all && k.drive_used[d];
    }
    b->inverse = true;
    b->forward = all && held >= b->n_col;
    return true;
}
