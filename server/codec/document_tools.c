/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tools, outputs, motion and needs of the mechanism document. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

/* ---- tools ----------------------------------------------------------------------------------- */

static void read_tool(const lwd_reader *r, lwd_decode *d)
{
    static const lwd_member table[4] = {
        {"name", true}, {"body", true}, {"at", true}, {"orientation", false}};
    lwd_document *doc = d->doc;
    lw_spec_tool *tool = &doc->spec.tool[doc->spec.n_tool];
    lwd_reader m[4];
    char name[LW_NAME_SIZE] = "";
    if (!lwd_read_members(r, table, 4, m)) {
        return;
    }
    if (lwd_read_name(&m[0], name) && lwd_document_tool(doc, name) != SIZE_MAX) {
        LWD_TELL(&m[0], "doubled-name", "a name of its own", NULL,
                 "There is a tool \"%s\" already.", name);
    }
    if (d->bodies_known) {
        (void)lwd_read_body(&m[1], doc, &tool->body);
    }
    (void)lwd_read_point(&m[2], doc->units, tool->frame.pos_m);
    tool->frame.rot[0] = tool->frame.rot[4] = tool->frame.rot[8] = 1.0;
    if (lwd_is_given(&m[3])) {
        (void)lwd_rotation_in(&m[3], doc->units, tool->frame.rot);
    }
    memcpy(tool->name, name, sizeof name);
    doc->spec.n_tool++;
}

void lwd_decode_tools(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_TOOLS];
    lwd_reader e;
    if (!lwd_want_array(r, 1, LW_MAX_TOOLS, "tools")) {
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_tool(&e, d);
    }
}

/* ---- outputs and motion ---------------------------------------------------------------------- */

static const char *const output_word[6] = {"x", "y", "z", "rx", "ry", "rz"};

static bool read_output(const lwd_reader *r, const lwd_decode *d, lw_spec_output *out)
{
    const char *text = NULL;
    if (!lwd_read_text(r, LWD_COORD_NAME_SIZE - 1, &text)) {
        return false;
    }
    for (size_t i = 0; i < 6; i++) {
        if (strcmp(text, output_word[i]) == 0) {
            *out = (lw_spec_output){(lw_output_kind)(LW_OUT_X + (int)i), 0};
            return true;
        }
    }
    out->kind = LW_OUT_COORD;
    return d->coords_known && lwd_read_coord(r, d->doc, &out->coord);
}

void lwd_decode_outputs(lwd_decode *d)
{
    static const char *const motion_word[] = {"3T3R", "3T2R", "3T1R", "3T", "2T1R", "2T",
                                              "2R1T", "1T2R", "3R",   "2R", "1R",   "1T"};
    _Static_assert((int)LW_MOTION_1T == sizeof motion_word / sizeof motion_word[0],
                   "motion_word follows lw_motion");
    lw_spec *spec = &d->doc->spec;
    const lwd_reader *r = &d->m[LWD_D_OUTPUTS];
    lwd_reader e;
    size_t word = 0;
    if (lwd_read_word(&d->m[LWD_D_MOTION], motion_word,
                      sizeof motion_word / sizeof motion_word[0], &word)) {
        spec->motion = (lw_motion)(word + 1);
    }
    if (!lwd_want_array(r, 1, LW_MAX_OUTPUTS, "outputs")) {
        return;
    }
    d->outputs_known = true;
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        lw_spec_output out = {LW_OUT_X, 0};
        if (!read_output(&e, d, &out)) {
            d->outputs_known = false;
            continue;
        }
        for (size_t i = 0; i < spec->n_output; i++) {
            if (spec->output[i].kind == out.kind && spec->output[i].coord == out.coord) {
                LWD_TELL(&e, "doubled-output", "each output once", NULL,
                         "This output stands in the list already.");
            }
        }
        spec->output[spec->n_output++] = out;
    }
}

/* ---- needs ----------------------------------------------------------------------------------- */

static void read_figure(const lwd_reader *r, double most, lw_figure *out)
{
    out->asked = lwd_read_positive(r, most, &out->value);
}

static void read_joint_need(const lwd_reader *r, lwd_decode *d)
{
    static const lwd_member table[4] = {
        {"tolerance", false}, {"moment", false}, {"force", false}, {"speed", false}};
    lwd_document *doc = d->doc;
    lwd_units units = doc->units;
    lwd_reader m[4];
    size_t coord = 0;
    if (!lwd_member_coord(r, doc, &coord)) {
        return;
    }
    bool output = false;
    for (size_t i = 0; i < doc->spec.n_output; i++) {
        output = output ||
                 (doc->spec.output[i].kind == LW_OUT_COORD && doc->spec.output[i].coord == coord);
    }
    if (!output && !d->outputs_known) {
        return;
    }
    if (!output) {
        LWD_TELL(r, "not-an-output", "a joint coordinate among the outputs", r->name,
                 "Needs can be stated for outputs only; \"%s\" is not among the outputs.",
                 r->name);
        return;
    }
    if (!lwd_read_members(r, table, 4, m)) {
        return;
    }
    bool turning = lw_spec_coord_turning(&doc->spec, coord);
    double most = turning ? lwd_angle_most(units) : lwd_length_most(units);
    lw_joint_need *need = &doc->spec.needs.joint[doc->spec.needs.n_joint++];
    need->coord = coord;
    read_figure(&m[0], most, &need->tolerance);
    read_figure(&m[3], 1e9, &need->speed);
    need->tolerance.value = turning ? lwd_angle_in(units, need->tolerance.value)
                                    : lwd_length_in(units, need->tolerance.value);
    need->speed.value = turning ? lwd_angle_in(units, need->speed.value)
                                : lwd_length_in(units, need->speed.value);
    const lwd_reader *wrong = turning ? &m[2] : &m[1];
    const lwd_reader *right = turning ? &m[1] : &m[2];
    if (lwd_is_given(wrong)) {
        LWD_TELL(wrong, "wrong-effort", right->name, wrong->name,
                 turning ? "\"%s\" turns: state a \"moment\" in Nm, not a \"force\"."
                         : "\"%s\" slides: state a \"force\" in N, not a \"moment\".",
                 r->name);
    }
    read_figure(right, 1e9, &need->effort);
}

void lwd_decode_needs(lwd_decode *d)
{
    enum {
        N_POSITION, N_ANGLE, N_FORCE, N_MOMENT, N_SPEED, N_TURN_RATE, N_LENGTH, N_MARGIN, N_JOINTS,
        N_MEMBERS
    };
    static const lwd_member table[N_MEMBERS] = {
        {"position_tolerance", false}, {"angle_tolerance", false}, {"force", false},
        {"moment", false},             {"speed", false},           {"turn_rate", false},
        {"characteristic_length", false}, {"margin_min", false},   {"joints", false}};
    lw_needs *needs = &d->doc->spec.needs;
    lwd_units units = d->doc->units;
    const lwd_reader *r = &d->m[LWD_D_NEEDS];
    lwd_reader m[N_MEMBERS];
    lwd_reader e;
    if (!lwd_is_given(r) || !lwd_read_members(r, table, N_MEMBERS, m)) {
        return;
    }
    read_figure(&m[N_POSITION], lwd_length_most(units), &needs->position_tolerance_m);
    read_figure(&m[N_ANGLE], units.radians ? 3.141592653589793 : 180.0,
                &needs->angle_tolerance_rad);
    read_figure(&m[N_FORCE], 1e9, &needs->force_n);
    read_figure(&m[N_MOMENT], 1e9, &needs->moment_nm);
    read_figure(&m[N_SPEED], 1e9, &needs->speed_m_s);
    read_figure(&m[N_TURN_RATE], 1e9, &needs->turn_rate_rad_s);
    read_figure(&m[N_LENGTH], lwd_length_most(units), &needs->characteristic_length_m);
    needs->margin_min.asked = lwd_read_number(&m[N_MARGIN], 0.0, 1e6, &needs->margin_min.value);
    needs->position_tolerance_m.value = lwd_length_in(units, needs->position_tolerance_m.value);
    needs->angle_tolerance_rad.value = lwd_angle_in(units, needs->angle_tolerance_rad.value);
    needs->speed_m_s.value = lwd_length_in(units, needs->speed_m_s.value);
    needs->turn_rate_rad_s.value = lwd_angle_in(units, needs->turn_rate_rad_s.value);
    needs->characteristic_length_m.value =
        lwd_length_in(units, needs->characteristic_length_m.value);
    if (!d->coords_known || !lwd_is_given(&m[N_JOINTS]) || !lwd_want_object(&m[N_JOINTS])) {
        return;
    }
    for (bool more = lwd_first(&m[N_JOINTS], &e); more; more = lwd_next(&e)) {
        read_joint_need(&e, d);
    }
}
