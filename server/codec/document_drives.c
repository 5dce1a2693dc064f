/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Drives of the mechanism document: what they move, what their encoders show, what they can do.
 * Readings keep the drive's own units; all that the core gets is per m or rad of the coordinate. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

enum {
    V_NAME, V_MOVES, V_READING, V_RANGE, V_SPEED, V_ACCELERATION, V_TORQUE, V_THRUST, V_RESOLUTION,
    V_BACKLASH, V_MEMBERS
};
static const lwd_member drive_table[V_MEMBERS] = {
    {"name", true},          {"moves", true},   {"reading", false}, {"range", false},
    {"speed", false},        {"acceleration", false}, {"torque", false}, {"thrust", false},
    {"resolution", false},   {"backlash", false}};

static const double figure_most = 1e9;

/* "moves": a coordinate, or a sum of coordinates of one kind. */
static bool read_moves(const lwd_reader *r, const lwd_document *doc, lw_spec_drive *drive)
{
    static const lwd_member table[1] = {{"sum", true}};
    lwd_reader sum;
    if (lwd_is_text(r)) {
        drive->n_term = 1;
        drive->term[0].factor = 1.0;
        if (!lwd_read_coord(r, doc, &drive->term[0].coord)) {
            return false;
        }
    } else if (lwd_is_object(r)) {
        if (!lwd_read_members(r, table, 1, &sum) ||
            !lwd_read_sum(&sum, doc, 1, &drive->n_term, drive->term)) {
            return false;
        }
    } else {
        if (lwd_is_given(r)) {
            LWD_TELL(r, "wrong-type", "a coordinate's name or {\"sum\": ..}", NULL,
                     "A drive moves a joint coordinate, a rod or a sum of coordinates.");
        }
        return false;
    }
    drive->turning = lw_spec_coord_turning(&doc->spec, drive->term[0].coord);
    for (size_t i = 1; i < drive->n_term; i++) {
        if (lw_spec_coord_turning(&doc->spec, drive->term[i].coord) != drive->turning) {
            LWD_TELL(&sum, "mixed-sum", "turns alone or slides alone", NULL,
                     "A drive's sum can not mix turns with slides; \"%s\" is of the other kind.",
                     lwd_name_of_coord(doc, drive->term[i].coord).text);
            return false;
        }
    }
    return true;
}

/* The reading a drive shows in the reference posture unless it says otherwise: the lengths of the
 * rods it moves. False if such a length is not known (told where the rod is read). */
static bool default_reference(const lwd_decode *d, const lw_spec_drive *drive, double *out)
{
    bool known = true;
    double sum = 0.0;
    for (size_t i = 0; i < drive->n_term; i++) {
        size_t joint = 0;
        size_t part = 0;
        size_t rod = 0;
        if (lw_spec_coord_owner(&d->doc->spec, drive->term[i].coord, &joint, &part, &rod) &&
            joint == SIZE_MAX) {
            sum += drive->term[i].factor * d->rod_length[rod];
            known = known && d->rod_length[rod] > 0.0;
        }
    }
    *out = sum;
    return known;
}

static bool read_reading(const lwd_reader *r, const lwd_decode *d, const lw_spec_drive *drive,
                         lwd_document_drive *out)
{
    static const lwd_member table[3] = {
        {"at_reference", false}, {"per_unit", false}, {"unit", false}};
    lwd_units units = d->doc->units;
    lwd_reader m[3];
    const char *unit = NULL;
    bool good = default_reference(d, drive, &out->at_reference);
    out->per_unit = 1.0;
    if (lwd_is_given(r)) {
        if (!lwd_read_members(r, table, 3, m)) {
            return false;
        }
        if (lwd_is_given(&m[0])) {
            good = lwd_read_number(&m[0], -figure_most, figure_most, &out->at_reference);
        }
        good = (lwd_read_number(&m[1], -figure_most, figure_most, &out->per_unit) ||
                !lwd_is_given(&m[1])) && good;
        if (good && !(fabs(out->per_unit) >= 1e-9)) {
            LWD_TELL(&m[1], "zero-factor", "a factor other than 0", NULL,
                     "A reading that does not change says nothing: per_unit must not be 0.");
            good = false;
        }
        (void)lwd_read_text(&m[2], LWD_UNIT_SIZE - 1, &unit);
    }
    if (unit == NULL && out->per_unit == 1.0) {
        unit = drive->turning ? lwd_angle_word(units) : lwd_length_word(units);
    }
    lwd_text_copy(out->unit, sizeof out->unit, unit != NULL ? unit : "");
    out->slope = out->per_unit *
                 (drive->turning ? lwd_angle_out(units, 1.0) : lwd_length_out(units, 1.0));
    return good;
}

static void read_drive_range(const lwd_reader *r, lwd_document_drive *reading, lw_spec_drive *drive)
{
    lw_range written;
    if (!lwd_read_range(r, figure_most, &written)) {
        return;
    }
    double shown = reading->at_reference;
    if ((written.has_low && shown < written.low) || (written.has_high && shown > written.high)) {
        char got[64];
        (void)snprintf(got, sizeof got, "%s%s%s", lwd_num_short(shown).text,
                       reading->unit[0] != '\0' ? " " : "", reading->unit);
        LWD_TELL(r, "reference-outside", "a range that holds the reference reading", got,
                 "In the reference posture the encoder would show %s, outside the drive's range. "
                 "Check at_reference.", got);
        return;
    }
    reading->range = written;
    lw_range si = {written.has_low, written.has_high, 0.0, 0.0};
    si.low = (written.low - shown) / reading->slope;
    si.high = (written.high - shown) / reading->slope;
    if (reading->slope < 0.0) {
        si = (lw_range){written.has_high, written.has_low, si.high, si.low};
    }
    drive->range.has_low = si.has_low;
    drive->range.has_high = si.has_high;
    drive->range.low = si.has_low ? si.low : 0.0;
    drive->range.high = si.has_high ? si.high : 0.0;
}

static void read_figures(const lwd_reader m[V_MEMBERS], double slope, lw_spec_drive *drive)
{
    double x = 0.0;
    if (lwd_read_positive(&m[V_SPEED], figure_most, &x)) {
        drive->has_speed = true;
        drive->speed = x / fabs(slope);
    }
    if (lwd_read_positive(&m[V_ACCELERATION], figure_most, &x)) {
        drive->has_acceleration = true;
        drive->acceleration = x / fabs(slope);
    }
    if (lwd_read_positive(&m[V_RESOLUTION], figure_most, &x)) {
        drive->has_resolution = true;
        drive->resolution = x / fabs(slope);
    }
    if (lwd_read_number(&m[V_BACKLASH], 0.0, figure_most, &x)) {
        drive->has_backlash = true;
        drive->backlash = x / fabs(slope);
    }
    size_t right = drive->turning ? V_TORQUE : V_THRUST;
    size_t wrong = drive->turning ? V_THRUST : V_TORQUE;
    if (lwd_is_given(&m[wrong])) {
        LWD_TELL(&m[wrong], "wrong-effort", m[right].name, m[wrong].name,
                 drive->turning ? "This drive turns: give \"torque\" in Nm, not \"thrust\"."
                                : "This drive slides: give \"thrust\" in N, not \"torque\".");
    }
    drive->has_effort = lwd_read_positive(&m[right], figure_most, &drive->effort);
}

static void read_drive(const lwd_reader *r, lwd_decode *d)
{
    lwd_document *doc = d->doc;
    lw_spec_drive *drive = &doc->spec.drive[doc->spec.n_drive];
    lwd_document_drive *reading = &doc->drive[doc->spec.n_drive];
    lwd_reader m[V_MEMBERS];
    char name[LW_NAME_SIZE] = "";
    if (!lwd_read_members(r, drive_table, V_MEMBERS, m)) {
        d->drives_known = false;
        return;
    }
    if (!lwd_read_name(&m[V_NAME], name) || lwd_name_is_reserved(&m[V_NAME], name)) {
        d->drives_known = false;
    } else if (lwd_document_drive_of(doc, name) != SIZE_MAX) {
        LWD_TELL(&m[V_NAME], "doubled-name", "a name of its own", NULL,
                 "There is a drive \"%s\" already.", name);
        d->drives_known = false;
    }
    reading->slope = 1.0;
    if (d->coords_known && read_moves(&m[V_MOVES], doc, drive) &&
        read_reading(&m[V_READING], d, drive, reading)) {
        read_drive_range(&m[V_RANGE], reading, drive);
        read_figures(m, reading->slope, drive);
    } else {
        d->drives_known = false;
    }
    memcpy(drive->name, name, sizeof name);
    doc->spec.n_drive++;
}

void lwd_decode_drives(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_DRIVES];
    lwd_reader e;
    d->drives_known = true;
    if (!lwd_want_array(r, 1, LW_MAX_DRIVES, "drives")) {
        d->drives_known = false;
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_drive(&e, d);
    }
}
