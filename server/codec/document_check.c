/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What can be judged only when all parts of the document are known, without any kinematics. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

static lwd_reader member_of(const lwd_reader *element, const char *name)
{
    lwd_reader child;
    (void)lwd_find(element, name, &child);
    return child;
}

/* The limits of a coordinate seen as a change from the reference posture. */
static lw_range coord_range(const lwd_document *doc, size_t coord)
{
    size_t joint = 0;
    size_t part = 0;
    size_t rod = 0;
    (void)lw_spec_coord_owner(&doc->spec, coord, &joint, &part, &rod);
    if (joint != SIZE_MAX) {
        return doc->spec.joint[joint].range[part];
    }
    lw_range range = doc->spec.rod[rod].range_m;
    range.low -= doc->rod_length_m[rod];
    range.high -= doc->rod_length_m[rod];
    return range;
}

/* A drive's range that leaves the range of what it moves: the tightest holds, but drawing and
 * program disagree. */
static void check_drive_range(const lwd_reader *r, const lwd_document *doc, size_t i)
{
    const lw_spec_drive *drive = &doc->spec.drive[i];
    if (drive->n_term != 1) {
        return;
    }
    lw_range own = drive->range;
    lw_range limit = coord_range(doc, drive->term[0].coord);
    double factor = drive->term[0].factor;
    if (factor < 0.0) {
        limit = (lw_range){limit.has_high, limit.has_low, limit.high, limit.low};
    }
    double slack = 1e-9;
    bool low = limit.has_low && own.has_low && own.low < limit.low * factor - slack;
    bool high = limit.has_high && own.has_high && own.high > limit.high * factor + slack;
    if (!low && !high) {
        return;
    }
    lwd_reader range = member_of(r, "range");
    double at = (low ? limit.low : limit.high) * factor;
    char expected[72];
    (void)snprintf(expected, sizeof expected, "a range that ends at %s",
                   lwd_num_short(doc->drive[i].at_reference + doc->drive[i].slope * at).text);
    lwd_tell(&range, LW_WARNING, "range-leaves-joint", expected, NULL,
             "The drive's range goes beyond that of \"%s\", which ends where the encoder shows "
             "%s. The tightest holds.",
             lwd_name_of_coord(doc, drive->term[0].coord).text,
             lwd_num_short(doc->drive[i].at_reference + doc->drive[i].slope * at).text);
}

static void check_drives(lwd_decode *d)
{
    const lw_spec *spec = &d->doc->spec;
    lwd_reader e;
    for (bool more = lwd_first(&d->m[LWD_D_DRIVES], &e); more; more = lwd_next(&e)) {
        const lw_spec_drive *drive = &spec->drive[e.index];
        check_drive_range(&e, d->doc, e.index);
        for (size_t i = 0; i < e.index && drive->n_term == 1; i++) {
            if (spec->drive[i].n_term == 1 &&
                spec->drive[i].term[0].coord == drive->term[0].coord) {
                lwd_reader moves = member_of(&e, "moves");
                lwd_tell(&moves, LW_WARNING, "moved-twice", "a coordinate of its own", NULL,
                         "The drive \"%s\" moves the same coordinate.", spec->drive[i].name);
            }
        }
    }
}

static bool is_driven(const lw_spec *spec, size_t coord)
{
    for (size_t i = 0; i < spec->n_drive; i++) {
        for (size_t t = 0; t < spec->drive[i].n_term; t++) {
            if (spec->drive[i].term[t].coord == coord) {
                return true;
            }
        }
    }
    return false;
}

static bool is_coupled(const lw_spec *spec, size_t coord)
{
    for (size_t i = 0; i < spec->n_coupling; i++) {
        for (size_t t = 0; t < spec->coupling[i].n_term; t++) {
            if (spec->coupling[i].term[t].coord == coord) {
                return true;
            }
        }
    }
    return false;
}

static void check_rods(lwd_decode *d)
{
    const lwd_document *doc = d->doc;
    const lw_figure *need = &doc->spec.needs.position_tolerance_m;
    double tolerance = need->asked ? need->value / 10.0 : 1e-5;
    lwd_reader e;
    for (bool more = lwd_first(&d->m[LWD_D_RODS], &e); more; more = lwd_next(&e)) {
        const lw_spec_rod *rod = &doc->spec.rod[e.index];
        size_t coord = lw_spec_rod_coord(&doc->spec, e.index);
        bool moves = is_driven(&doc->spec, coord) || is_coupled(&doc->spec, coord);
        double off = rod->length_m - doc->rod_length_m[e.index];
        if (rod->has_length && !(fabs(off) <= tolerance)) {
            lwd_reader length = member_of(&e, "length");
            char want[60];
            (void)snprintf(
                want, sizeof want, "%s %s",
                lwd_num_short(lwd_length_out(doc->units, doc->rod_length_m[e.index])).text,
                lwd_length_word(doc->units));
            lwd_tell(&length, LW_WARNING, "length-differs", want, NULL,
                     "The ends of the rod are %s apart, not %s; one of the two is wrong.", want,
                     lwd_num_short(lwd_length_out(doc->units, rod->length_m)).text);
        }
        if (rod->free && moves) {
            lwd_reader is_free = member_of(&e, "free");
            lwd_tell(&is_free, LW_NOTE, "free-and-driven", "false", NULL,
                     "A driven or coupled rod changes its length anyway; \"free\" says nothing.");
        }
        if (!rod->free && !moves && (rod->range_m.has_low || rod->range_m.has_high)) {
            lwd_reader range = member_of(&e, "range");
            lwd_tell(&range, LW_NOTE, "range-unused", "no range, or a drive", NULL,
                     "The rod is not driven and keeps its length, so its range says nothing.");
        }
    }
}

void lwd_decode_cross_checks(lwd_decode *d)
{
    if (d->findings->n_error > 0) {
        return; /* indices may not fit the text */
    }
    check_drives(d);
    check_rods(d);
}
