/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Units, readings and names of one loaded mechanism. */
#include "edge.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document.h"
#include "number.h"

static const double deg_per_rad = 57.295779513082320877; /* 180 / pi */
static const double rad_per_deg = 0.017453292519943295769;

double lwd_length_out(lwd_units units, double value_m)
{
    return units.metres ? value_m : value_m * 1000.0;
}

double lwd_angle_out(lwd_units units, double value_rad)
{
    return units.radians ? value_rad : value_rad * deg_per_rad;
}

double lwd_length_in(lwd_units units, double value)
{
    return units.metres ? value : value / 1000.0;
}

double lwd_angle_in(lwd_units units, double value)
{
    return units.radians ? value : value * rad_per_deg;
}

const char *lwd_length_word(lwd_units units)
{
    return units.metres ? "m" : "mm";
}

const char *lwd_angle_word(lwd_units units)
{
    return units.radians ? "rad" : "deg";
}

double lwd_coord_out(const lwd_edge *edge, lwd_units units, size_t coord, double value)
{
    return edge->coord_turning[coord] ? lwd_angle_out(units, value) : lwd_length_out(units, value);
}

double lwd_reading_out(const lwd_edge *edge, size_t drive, double coordinate)
{
    return edge->drive[drive].at_reference + edge->drive[drive].slope * coordinate;
}

double lwd_reading_in(const lwd_edge *edge, size_t drive, double reading)
{
    return (reading - edge->drive[drive].at_reference) / edge->drive[drive].slope;
}

size_t lwd_edge_drive(const lwd_edge *edge, const char *name)
{
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        if (strcmp(edge->spec->drive[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_edge_tool(const lwd_edge *edge, const char *name)
{
    for (size_t i = 0; i < edge->spec->n_tool; i++) {
        if (strcmp(edge->spec->tool[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_edge_coord(const lwd_edge *edge, const char *name)
{
    for (size_t i = 0; i < edge->n_coord; i++) {
        if (strcmp(edge->coord_name[i], name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

const char *lwd_edge_mode_name(const lwd_edge *edge, const lw_mode *mode)
{
    for (size_t i = 0; i < edge->report->n_mode_name && i < edge->spec->n_mode; i++) {
        if (lw_mode_same(&edge->report->mode_name[i], mode)) {
            return edge->spec->mode[i].name;
        }
    }
    return NULL;
}

bool lwd_edge_mode_parse(const lwd_edge *edge, const char *text, lw_mode *out)
{
    for (size_t i = 0; i < edge->report->n_mode_name && i < edge->spec->n_mode; i++) {
        if (strcmp(edge->spec->mode[i].name, text) == 0) {
            *out = edge->report->mode_name[i];
            return true;
        }
    }
    return lw_mode_parse(out, text, edge->report->n_limb);
}

double lwd_tidy(double value)
{
    if (!isfinite(value) || value == 0.0) {
        return value;
    }
    lwd_decimal d = lwd_decimal_of(value);
    if (d.digits < UINT64_C(1000000000000000)) {
        return value; /* fewer than 16 digits: short as it stands */
    }
    uint64_t digits = d.digits;
    int exponent = d.exponent;
    while (digits >= UINT64_C(1000000000000000)) { /* to 15 digits */
        digits = (digits + 5) / 10;
        exponent++;
    }
    while (digits % 10 == 0) {
        digits /= 10;
        exponent++;
    }
    if (digits >= UINT64_C(1000000000000) || exponent < -22 || exponent > 9) {
        return value; /* more than 12 digits: a number of its own */
    }
    /* Both factors are exact, so the result is the double nearest to the decimal. */
    double power = 1.0;
    for (int i = 0; i < (exponent < 0 ? -exponent : exponent); i++) {
        power *= 10.0;
    }
    double tidy = exponent < 0 ? (double)digits / power : (double)digits * power;
    return value < 0.0 ? -tidy : tidy;
}

/* ---- building ------------------------------------------------------------------------------ */

static void name_joint_coords(lwd_edge *edge, size_t joint)
{
    const lw_spec_joint *j = &edge->spec->joint[joint];
    for (size_t p = 0; p < lw_joint_coords(j->type); p++) {
        size_t c = lw_spec_joint_coord(edge->spec, joint, p);
        const char *part = lwd_part_word(j->type, p);
        (void)snprintf(edge->coord_name[c], LWD_COORD_NAME_SIZE, "%s%s%s", j->name,
                       part[0] != '\0' ? "." : "", part);
        edge->coord_shown[c] = true;
        edge->coord_turning[c] = lw_spec_coord_turning(edge->spec, c);
    }
}

static void name_rods(lwd_edge *edge)
{
    const lw_spec *spec = edge->spec;
    for (size_t r = 0; r < spec->n_rod; r++) {
        const lw_spec_rod *rod = &spec->rod[r];
        size_t c = lw_spec_rod_coord(spec, r);
        (void)snprintf(edge->coord_name[c], LWD_COORD_NAME_SIZE, "%s", rod->name);
        edge->coord_shown[c] = rod->free;
    }
    for (size_t i = 0; i < spec->n_drive; i++) {
        for (size_t t = 0; t < spec->drive[i].n_term; t++) {
            edge->coord_shown[spec->drive[i].term[t].coord] = true;
        }
    }
    for (size_t i = 0; i < spec->n_coupling; i++) {
        for (size_t t = 0; t < spec->coupling[i].n_term; t++) {
            edge->coord_shown[spec->coupling[i].term[t].coord] = true;
        }
    }
}

static lwd_form default_form(const lw_spec *spec, lw_motion motion)
{
    bool turns[3] = {false, false, false};
    for (size_t i = 0; i < spec->n_output; i++) {
        if (spec->output[i].kind >= LW_OUT_RX && spec->output[i].kind <= LW_OUT_RZ) {
            turns[spec->output[i].kind - LW_OUT_RX] = true;
        }
    }
    if (turns[0] || turns[1]) {
        return LWD_FORM_QUATERNION;
    }
    if (turns[2] && (motion == LW_MOTION_3T1R || motion == LW_MOTION_2T1R)) {
        return LWD_FORM_RZ;
    }
    return LWD_FORM_QUATERNION;
}

void lwd_edge_init(lwd_edge *edge, const lwd_document *document, const lw_model *model,
                   const char *name, int64_t revision, const char *digest)
{
    memset(edge, 0, sizeof *edge);
    (void)snprintf(edge->name, sizeof edge->name, "%s", name);
    (void)snprintf(edge->digest, sizeof edge->digest, "%s", digest);
    edge->revision = revision;
    edge->model = model;
    edge->spec = lw_model_spec(model);
    edge->report = lw_model_report(model);
    edge->document = document;
    edge->units = document->units;
    edge->form = default_form(edge->spec, edge->report->motion);
    edge->n_coord = lw_spec_coord_count(edge->spec);
    for (size_t j = 0; j < edge->spec->n_joint; j++) {
        name_joint_coords(edge, j);
    }
    name_rods(edge);
    edge->n_ball = document->n_ball;
    for (size_t k = 0; k < document->n_ball; k++) {
        edge->ball_joint[k] = document->ball_joint[k];
    }
    for (size_t r = 0; r < edge->spec->n_rod; r++) {
        edge->rod_length_m[r] = document->rod_length_m[r];
    }
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        edge->drive[i].at_reference = document->drive[i].at_reference;
        edge->drive[i].slope = document->drive[i].slope;
        lwd_text_copy(edge->drive[i].unit, sizeof edge->drive[i].unit, document->drive[i].unit);
    }
}
