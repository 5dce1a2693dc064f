/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Walks two documents side by side. Parts are matched by name; what has no partner is new or gone.
 */
#include <stdio.h>
#include <string.h>

#include "difference.h"

/* One kind of named parts: how to find, name and compare them. */
typedef struct part_kind {
    const char *of;
    size_t (*count)(const lw_spec *spec);
    const char *(*name)(const lw_spec *spec, size_t i);
    void (*compare)(lwd_diff *d, size_t a, size_t b); /* NULL: names are all there is */
} part_kind;

static size_t find(const part_kind *kind, const lw_spec *spec, const char *name)
{
    size_t n = kind->count(spec);
    for (size_t i = 0; i < n; i++) {
        if (strcmp(kind->name(spec, i), name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

static void walk(lwd_diff *d, const part_kind *kind)
{
    const lw_spec *a = d->a->edge.spec;
    const lw_spec *b = d->b->edge.spec;
    d->of = kind->of;
    for (size_t i = 0; i < kind->count(b); i++) {
        d->name = kind->name(b, i);
        size_t k = find(kind, a, d->name);
        if (k == SIZE_MAX) {
            lwd_diff_there(d, true);
        } else if (kind->compare != NULL) {
            kind->compare(d, k, i);
        }
    }
    for (size_t i = 0; i < kind->count(a); i++) {
        d->name = kind->name(a, i);
        if (find(kind, b, d->name) == SIZE_MAX) {
            lwd_diff_there(d, false);
        }
    }
}

static const char *unit_of(const lwd_diff *d, bool turning)
{
    return turning ? lwd_angle_word(d->units) : lwd_length_word(d->units);
}

static double factor_of(const lwd_diff *d, bool turning)
{
    return turning ? lwd_angle_out(d->units, 1.0) : lwd_length_out(d->units, 1.0);
}

static void compare_between(lwd_diff *d, const size_t a[2], const size_t b[2])
{
    char old_text[2 * LW_NAME_SIZE + 8];
    char new_text[2 * LW_NAME_SIZE + 8];
    const lw_spec *sa = d->a->edge.spec;
    const lw_spec *sb = d->b->edge.spec;
    (void)snprintf(old_text, sizeof old_text, "%s, %s", sa->body[a[0]], sa->body[a[1]]);
    (void)snprintf(new_text, sizeof new_text, "%s, %s", sb->body[b[0]], sb->body[b[1]]);
    lwd_diff_text(d, "between", old_text, new_text);
}

/* ---- bodies, joints, rods -------------------------------------------------------------------- */

static size_t body_count(const lw_spec *spec)
{
    return spec->n_body;
}

static const char *body_name(const lw_spec *spec, size_t i)
{
    return spec->body[i];
}

static size_t joint_count(const lw_spec *spec)
{
    return spec->n_joint;
}

static const char *joint_name(const lw_spec *spec, size_t i)
{
    return spec->joint[i].name;
}

static const char *type_word(lw_joint_type type)
{
    static const char *const word[] = {"fixed",       "revolute",  "prismatic", "helical",
                                       "cylindrical", "universal", "spherical", "planar"};
    return word[type];
}

static void compare_joint_ranges(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_joint *ja = &d->a->edge.spec->joint[a];
    const lw_spec_joint *jb = &d->b->edge.spec->joint[b];
    for (size_t p = 0; p < lw_joint_coords(jb->type); p++) {
        size_t c = lw_spec_joint_coord(d->b->edge.spec, b, p);
        bool turning = d->b->edge.coord_turning[c];
        const char *part = lwd_part_word(jb->type, p);
        char what[40];
        double factor = factor_of(d, turning);
        (void)snprintf(what, sizeof what, "range%s%s", part[0] != '\0' ? " of " : "", part);
        lwd_diff_range(d, what, &ja->range[p], &jb->range[p], factor, 0.0, factor, 0.0,
                       unit_of(d, turning));
    }
}

static void compare_joints(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_joint *ja = &d->a->edge.spec->joint[a];
    const lw_spec_joint *jb = &d->b->edge.spec->joint[b];
    compare_between(d, ja->body, jb->body);
    lwd_diff_text(d, "type", type_word(ja->type), type_word(jb->type));
    if (ja->type != jb->type) {
        return; /* the rest would compare unlike with unlike */
    }
    if (jb->type == LW_FIXED) {
        return;
    }
    lwd_diff_point(d, "point", ja->at_m, jb->at_m);
    if (jb->type != LW_SPHERICAL) {
        lwd_diff_axis(d, "axis", ja->axis, jb->axis);
    }
    if (jb->type == LW_UNIVERSAL || jb->type == LW_PLANAR) {
        lwd_diff_axis(d, jb->type == LW_PLANAR ? "x axis" : "second axis", ja->second_axis,
                      jb->second_axis);
    }
    if (jb->type == LW_HELICAL) {
        lwd_diff_number(d, "lead", lwd_length_out(d->units, ja->lead_m),
                        lwd_length_out(d->units, jb->lead_m), lwd_length_word(d->units));
    }
    if (jb->type == LW_SPHERICAL) {
        lwd_diff_optional(d, "cone", ja->has_cone, lwd_angle_out(d->units, ja->cone_rad),
                          jb->has_cone, lwd_angle_out(d->units, jb->cone_rad),
                          lwd_angle_word(d->units));
        if (ja->has_cone && jb->has_cone) {
            lwd_diff_axis(d, "cone axis", ja->cone_axis, jb->cone_axis);
            lwd_diff_axis(d, "stud axis", ja->stud_axis, jb->stud_axis);
        }
    }
    compare_joint_ranges(d, a, b);
}

static size_t rod_count(const lw_spec *spec)
{
    return spec->n_rod;
}

static const char *rod_name(const lw_spec *spec, size_t i)
{
    return spec->rod[i].name;
}

static void compare_rods(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_rod *ra = &d->a->edge.spec->rod[a];
    const lw_spec_rod *rb = &d->b->edge.spec->rod[b];
    double factor = factor_of(d, false);
    const char *unit = lwd_length_word(d->units);
    compare_between(d, ra->body, rb->body);
    lwd_diff_point(d, "first end", ra->end_m[0], rb->end_m[0]);
    lwd_diff_point(d, "second end", ra->end_m[1], rb->end_m[1]);
    lwd_diff_number(d, "length in the reference posture",
                    lwd_length_out(d->units, d->a->edge.rod_length_m[a]),
                    lwd_length_out(d->units, d->b->edge.rod_length_m[b]), unit);
    lwd_diff_range(d, "range", &ra->range_m, &rb->range_m, factor, 0.0, factor, 0.0, unit);
    lwd_diff_text(d, "free", ra->free ? "yes" : "no", rb->free ? "yes" : "no");
    for (size_t i = 0; i < 2; i++) {
        const lw_spec_swivel *sa = &ra->swivel[i];
        const lw_spec_swivel *sb = &rb->swivel[i];
        lwd_diff_optional(d, i == 0 ? "cone of the first end" : "cone of the second end",
                          sa->present, lwd_angle_out(d->units, sa->cone_rad), sb->present,
                          lwd_angle_out(d->units, sb->cone_rad), lwd_angle_word(d->units));
        if (sa->present && sb->present) {
            lwd_diff_axis(d, i == 0 ? "axis of the first end" : "axis of the second end", sa->axis,
                          sb->axis);
        }
    }
}

/* ---- couplings and drives -------------------------------------------------------------------- */

/* "0.5 nut + -1 shaft" with SI factors, long sums cut short. */
static void sum_text(const lwd_edge *edge, const lw_term *term, size_t n, char *out, size_t size)
{
    size_t len = 0;
    out[0] = '\0';
    for (size_t i = 0; i < n && len < size; i++) {
        int k = snprintf(out + len, size - len, "%s%s %s", i > 0 ? " + " : "",
                         lwd_num_short(term[i].factor).text, edge->coord_name[term[i].coord]);
        len += k > 0 ? (size_t)k : 0;
    }
}

static void compare_sums(lwd_diff *d, const char *what, const lw_term *a, size_t n_a,
                         const lw_term *b, size_t n_b)
{
    char old_text[320];
    char new_text[320];
    sum_text(&d->a->edge, a, n_a, old_text, sizeof old_text);
    sum_text(&d->b->edge, b, n_b, new_text, sizeof new_text);
    lwd_diff_text(d, what, old_text, new_text);
}

static size_t coupling_count(const lw_spec *spec)
{
    return spec->n_coupling;
}

static const char *coupling_name(const lw_spec *spec, size_t i)
{
    return spec->coupling[i].name;
}

static void compare_couplings(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_coupling *ca = &d->a->edge.spec->coupling[a];
    const lw_spec_coupling *cb = &d->b->edge.spec->coupling[b];
    compare_sums(d, "sum (in m and rad)", ca->term, ca->n_term, cb->term, cb->n_term);
}

static size_t drive_count(const lw_spec *spec)
{
    return spec->n_drive;
}

static const char *drive_name(const lw_spec *spec, size_t i)
{
    return spec->drive[i].name;
}

static double size_of(double x)
{
    return x < 0.0 ? -x : x;
}

static void compare_drives(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_drive *da = &d->a->edge.spec->drive[a];
    const lw_spec_drive *db = &d->b->edge.spec->drive[b];
    const lwd_document_drive *ea = &d->a->document->drive[a];
    const lwd_document_drive *eb = &d->b->document->drive[b];
    char rate[LWD_UNIT_SIZE + 8];
    double sa = size_of(ea->slope);
    double sb = size_of(eb->slope);
    compare_sums(d, "moves (in m and rad)", da->term, da->n_term, db->term, db->n_term);
    lwd_diff_text(d, "unit of the reading", ea->unit, eb->unit);
    lwd_diff_number(d, "reading at the reference posture", ea->at_reference, eb->at_reference,
                    eb->unit);
    lwd_diff_number(d, "per_unit", ea->per_unit, eb->per_unit, "");
    lwd_diff_range(d, "range", &da->range, &db->range, ea->slope, ea->at_reference, eb->slope,
                   eb->at_reference, eb->unit);
    (void)snprintf(rate, sizeof rate, "%s/s", eb->unit);
    lwd_diff_optional(d, "speed", da->has_speed, sa * da->speed, db->has_speed, sb * db->speed,
                      rate);
    (void)snprintf(rate, sizeof rate, "%s/s2", eb->unit);
    lwd_diff_optional(d, "acceleration", da->has_acceleration, sa * da->acceleration,
                      db->has_acceleration, sb * db->acceleration, rate);
    lwd_diff_optional(d, db->turning ? "torque" : "thrust", da->has_effort, da->effort,
                      db->has_effort, db->effort, db->turning ? "Nm" : "N");
    lwd_diff_optional(d, "resolution", da->has_resolution, sa * da->resolution,
                      db->has_resolution, sb * db->resolution, eb->unit);
    lwd_diff_optional(d, "backlash", da->has_backlash, sa * da->backlash, db->has_backlash,
                      sb * db->backlash, eb->unit);
}

/* ---- tools, outputs, needs ------------------------------------------------------------------- */

static size_t tool_count(const lw_spec *spec)
{
    return spec->n_tool;
}

static const char *tool_name(const lw_spec *spec, size_t i)
{
    return spec->tool[i].name;
}

static void compare_tools(lwd_diff *d, size_t a, size_t b)
{
    const lw_spec_tool *ta = &d->a->edge.spec->tool[a];
    const lw_spec_tool *tb = &d->b->edge.spec->tool[b];
    lwd_diff_text(d, "body", d->a->edge.spec->body[ta->body], d->b->edge.spec->body[tb->body]);
    lwd_diff_point(d, "point", ta->frame.pos_m, tb->frame.pos_m);
    lwd_diff_turn(d, "orientation", ta->frame.rot, tb->frame.rot);
}

static void outputs_text(const lwd_edge *edge, char *out, size_t size)
{
    static const char *const word[] = {"x", "y", "z", "rx", "ry", "rz"};
    size_t len = 0;
    out[0] = '\0';
    for (size_t i = 0; i < edge->spec->n_output && len < size; i++) {
        const lw_spec_output *o = &edge->spec->output[i];
        int k = snprintf(out + len, size - len, "%s%s", i > 0 ? " " : "",
                         o->kind == LW_OUT_COORD ? edge->coord_name[o->coord] : word[o->kind]);
        len += k > 0 ? (size_t)k : 0;
    }
}

static void compare_figure(lwd_diff *d, const char *what, const lw_figure *a, const lw_figure *b,
                           double factor, const char *unit)
{
    lwd_diff_optional(d, what, a->asked, factor * a->value, b->asked, factor * b->value, unit);
}

static void compare_needs(lwd_diff *d)
{
    const lw_needs *a = &d->a->edge.spec->needs;
    const lw_needs *b = &d->b->edge.spec->needs;
    double length = factor_of(d, false);
    double angle = factor_of(d, true);
    char rate[16];
    char turn[16];
    (void)snprintf(rate, sizeof rate, "%s/s", lwd_length_word(d->units));
    (void)snprintf(turn, sizeof turn, "%s/s", lwd_angle_word(d->units));
    d->of = "needs";
    d->name = "";
    compare_figure(d, "position tolerance", &a->position_tolerance_m, &b->position_tolerance_m,
                   length, lwd_length_word(d->units));
    compare_figure(d, "angle tolerance", &a->angle_tolerance_rad, &b->angle_tolerance_rad, angle,
                   lwd_angle_word(d->units));
    compare_figure(d, "force", &a->force_n, &b->force_n, 1.0, "N");
    compare_figure(d, "moment", &a->moment_nm, &b->moment_nm, 1.0, "Nm");
    compare_figure(d, "speed", &a->speed_m_s, &b->speed_m_s, length, rate);
    compare_figure(d, "turn rate", &a->turn_rate_rad_s, &b->turn_rate_rad_s, angle, turn);
    compare_figure(d, "characteristic length", &a->characteristic_length_m,
                   &b->characteristic_length_m, length, lwd_length_word(d->units));
    compare_figure(d, "margin_min", &a->margin_min, &b->margin_min, 1.0, "");
}

static const lw_joint_need *need_of(const lwd_edge *edge, const char *coord)
{
    static const lw_joint_need none;
    const lw_needs *needs = &edge->spec->needs;
    for (size_t i = 0; i < needs->n_joint; i++) {
        if (strcmp(edge->coord_name[needs->joint[i].coord], coord) == 0) {
            return &needs->joint[i];
        }
    }
    return &none;
}

/* Needs of joint coordinates, matched by the coordinate's name. */
static void compare_joint_needs(lwd_diff *d)
{
    const lwd_edge *edge[2] = {&d->a->edge, &d->b->edge};
    for (size_t side = 0; side < 2; side++) {
        const lw_needs *needs = &edge[side]->spec->needs;
        for (size_t i = 0; i < needs->n_joint; i++) {
            size_t c = needs->joint[i].coord;
            const lw_joint_need *a = need_of(edge[0], edge[side]->coord_name[c]);
            const lw_joint_need *b = need_of(edge[1], edge[side]->coord_name[c]);
            bool turning = edge[side]->coord_turning[c];
            char rate[16];
            if (side == 0 && b->tolerance.asked + b->effort.asked + b->speed.asked > 0) {
                continue; /* told with the other side */
            }
            d->name = edge[side]->coord_name[c];
            compare_figure(d, "tolerance", &a->tolerance, &b->tolerance, factor_of(d, turning),
                           unit_of(d, turning));
            compare_figure(d, turning ? "moment" : "force", &a->effort, &b->effort, 1.0,
                           turning ? "Nm" : "N");
            (void)snprintf(rate, sizeof rate, "%s/s", unit_of(d, turning));
            compare_figure(d, "speed", &a->speed, &b->speed, factor_of(d, turning), rate);
        }
    }
    d->name = "";
}

/* ---- home ------------------------------------------------------------------------------------ */

static void compare_home(lwd_diff *d)
{
    static const char *const way[] = {"the reference posture", "readings", "a pose", "joints",
                                      "bodies"};
    const lw_posture_ask *a = &d->a->edge.spec->home;
    const lw_posture_ask *b = &d->b->edge.spec->home;
    d->of = "home";
    d->name = "";
    lwd_diff_text(d, "given by", way[a->kind], way[b->kind]);
    if (a->kind != b->kind) {
        return;
    }
    if (b->kind == LW_BY_POSE) {
        lwd_diff_point(d, "point", a->pose.position_m, b->pose.position_m);
    }
    for (size_t i = 0; b->kind == LW_BY_DRIVES && i < d->b->edge.spec->n_drive; i++) {
        d->name = d->b->edge.spec->drive[i].name;
        size_t k = lwd_edge_drive(&d->a->edge, d->name);
        if (k != SIZE_MAX) {
            lwd_diff_optional(d, "reading", a->has_drive[k],
                              lwd_reading_out(&d->a->edge, k, a->drive[k]), b->has_drive[i],
                              lwd_reading_out(&d->b->edge, i, b->drive[i]),
                              d->b->edge.drive[i].unit);
        }
    }
}

/* ---- modes ----------------------------------------------------------------------------------- */

static size_t mode_count(const lw_spec *spec)
{
    return spec->n_mode;
}

static const char *mode_name(const lw_spec *spec, size_t i)
{
    return spec->mode[i].name;
}

static void compare_modes(lwd_diff *d, size_t a, size_t b)
{
    char old_text[LW_MODE_TEXT_SIZE];
    char new_text[LW_MODE_TEXT_SIZE];
    lw_mode_text(old_text, &d->a->edge.report->mode_name[a]);
    lw_mode_text(new_text, &d->b->edge.report->mode_name[b]);
    lwd_diff_text(d, "signs", old_text, new_text);
    lwd_diff_text(d, "title", d->a->document->mode_title[a], d->b->document->mode_title[b]);
}

static void compare_branches(lwd_diff *d)
{
    char old_text[LW_MODE_TEXT_SIZE];
    char new_text[LW_MODE_TEXT_SIZE];
    const lw_report *a = d->a->edge.report;
    const lw_report *b = d->b->edge.report;
    d->of = "modes";
    d->name = "";
    lw_mode_text(old_text, &a->home_mode);
    lw_mode_text(new_text, &b->home_mode);
    lwd_diff_text(d, "default mode", old_text, new_text);
    lw_mode_text(old_text, &a->reference_mode);
    lw_mode_text(new_text, &b->reference_mode);
    lwd_diff_text(d, "mode of the reference posture", old_text, new_text);
}

/* ---- all of it ------------------------------------------------------------------------------- */

static void compare_document(lwd_diff *d)
{
    static const char *const none = "";
    const lwd_document *a = d->a->document;
    const lwd_document *b = d->b->document;
    char old_text[512];
    char new_text[512];
    d->of = "document";
    d->name = "";
    lwd_diff_text(d, "title", a->title, b->title);
    lwd_diff_text(d, "drawing", a->drawing, b->drawing);
    lwd_diff_text(d, "measured by", a->measured_by, b->measured_by);
    lwd_diff_text(d, "notes", a->notes != NULL ? a->notes : none,
                  b->notes != NULL ? b->notes : none);
    lwd_diff_text(d, "unit of length", lwd_length_word(a->units), lwd_length_word(b->units));
    lwd_diff_text(d, "unit of angle", lwd_angle_word(a->units), lwd_angle_word(b->units));
    lwd_diff_text(d, "frame", a->spec.body[a->spec.frame], b->spec.body[b->spec.frame]);
    outputs_text(&d->a->edge, old_text, sizeof old_text);
    outputs_text(&d->b->edge, new_text, sizeof new_text);
    lwd_diff_text(d, "outputs", old_text, new_text);
    const char *motion_a = lwd_motion_word(a->spec.motion);
    const char *motion_b = lwd_motion_word(b->spec.motion);
    lwd_diff_text(d, "motion", motion_a != NULL ? motion_a : none,
                  motion_b != NULL ? motion_b : none);
    lwd_diff_number(d, "checks", (double)a->spec.n_check, (double)b->spec.n_check, "");
}

void lwd_diff_documents(lwd_diff *d)
{
    static const part_kind kinds[] = {
        {"body", body_count, body_name, NULL},
        {"joint", joint_count, joint_name, compare_joints},
        {"rod", rod_count, rod_name, compare_rods},
        {"coupling", coupling_count, coupling_name, compare_couplings},
        {"drive", drive_count, drive_name, compare_drives},
        {"tool", tool_count, tool_name, compare_tools},
        {"mode", mode_count, mode_name, compare_modes},
    };
    compare_document(d);
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++) {
        walk(d, &kinds[i]);
    }
    compare_needs(d);
    compare_joint_needs(d);
    compare_home(d);
    compare_branches(d);
}
