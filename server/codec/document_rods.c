/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rods and couplings of the mechanism document. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

/* ---- rods ------------------------------------------------------------------------------------ */

enum { R_NAME, R_BETWEEN, R_ENDS, R_RANGE, R_LENGTH, R_SWIVELS, R_FREE, R_MEMBERS };
static const lwd_member rod_table[R_MEMBERS] = {
    {"name", true},    {"between", true},  {"ends", true}, {"range", false},
    {"length", false}, {"swivels", false}, {"free", false}};

/* The two ends; *length is the distance as written, in document units. */
static bool read_ends(const lwd_reader *r, const lwd_document *doc, lw_spec_rod *rod,
                      double *length)
{
    double end[2][3];
    lwd_reader e;
    bool good = lwd_want_array(r, 2, 2, "points");
    if (!good) {
        return false;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        good = lwd_read_vec3(&e, lwd_length_most(doc->units), end[e.index]) && good;
    }
    if (!good) {
        return false;
    }
    double square = 0.0;
    for (int i = 0; i < 3; i++) {
        double step = end[1][i] - end[0][i];
        square += step * step;
        rod->end_m[0][i] = lwd_length_in(doc->units, end[0][i]);
        rod->end_m[1][i] = lwd_length_in(doc->units, end[1][i]);
    }
    *length = sqrt(square);
    if (!(lwd_length_in(doc->units, *length) >= 1e-6)) {
        LWD_TELL(r, "zero-length", "two points apart", NULL,
                 "The two ends of the rod lie at the same point in the reference posture.");
        return false;
    }
    return true;
}

static void read_rod_range(const lwd_reader *r, const lwd_document *doc, double length,
                           lw_spec_rod *rod)
{
    lw_range written;
    if (!lwd_read_range(r, lwd_length_most(doc->units), &written)) {
        return;
    }
    if ((written.has_low && written.low < 0.0) || (written.has_high && written.high <= 0.0)) {
        LWD_TELL(r, "out-of-range", "lengths above 0", NULL,
                 "The range of a rod is of its whole length, which can not be negative.");
        return;
    }
    if ((written.has_low && length < written.low) || (written.has_high && length > written.high)) {
        char got[60];
        (void)snprintf(got, sizeof got, "%s %s", lwd_num_short(length).text,
                       lwd_length_word(doc->units));
        LWD_TELL(r, "reference-outside", "a range that holds the reference length", got,
                 "In the reference posture the rod is %s long, outside its range. The range of a "
                 "rod is of its whole length.", got);
        return;
    }
    rod->range_m = lwd_range_in(written, doc->units, false);
}

/* A swivel's axis is the line of its pin; whichever way it is written, it is kept pointing along
 * the rod as the rod leaves this end, and the angle between the two must be within the cone. */
static void read_swivel(const lwd_reader *r, const lwd_document *doc, lw_spec_rod *rod, size_t k)
{
    static const lwd_member table[2] = {{"axis", true}, {"cone", true}};
    lw_spec_swivel *swivel = &rod->swivel[k];
    lwd_reader m[2];
    double cone = 0.0;
    if (lwd_is_null(r) || !lwd_read_members(r, table, 2, m)) {
        return;
    }
    bool has_axis = lwd_read_axis(&m[0], swivel->axis);
    bool has_cone =
        lwd_read_positive(&m[1], doc->units.radians ? 1.5707963267948966 : 90.0, &cone);
    if (!has_axis || !has_cone) {
        return;
    }
    swivel->present = true;
    swivel->cone_rad = lwd_angle_in(doc->units, cone);
    double along[3];
    double dot = 0.0;
    for (int i = 0; i < 3; i++) {
        along[i] = rod->end_m[1 - k][i] - rod->end_m[k][i];
        dot += along[i] * swivel->axis[i];
    }
    for (int i = 0; i < 3 && dot < 0.0; i++) {
        swivel->axis[i] = -swivel->axis[i];
    }
    double at = lwd_angle_between(swivel->axis, along);
    if (!(at <= swivel->cone_rad)) {
        char got[48];
        (void)snprintf(got, sizeof got, "%s %s",
                       lwd_num_short(lwd_angle_out(doc->units, at)).text,
                       lwd_angle_word(doc->units));
        LWD_TELL(r, "reference-outside", "a cone that holds the reference posture", got,
                 "In the reference posture the rod stands at %s to the swivel's axis, outside its "
                 "cone.", got);
    }
}

static void read_rod(const lwd_reader *r, lwd_decode *d)
{
    lwd_document *doc = d->doc;
    lw_spec_rod *rod = &doc->spec.rod[doc->spec.n_rod];
    lwd_reader m[R_MEMBERS];
    lwd_reader e;
    double length = 0.0;
    if (!lwd_read_members(r, rod_table, R_MEMBERS, m)) {
        d->coords_known = false;
        return;
    }
    if (!lwd_read_own_name(&m[R_NAME], doc, rod->name)) {
        rod->name[0] = '\0';
        d->coords_known = false;
    }
    (void)lwd_read_between(&m[R_BETWEEN], d, rod->body);
    bool has_ends = read_ends(&m[R_ENDS], doc, rod, &length);
    if (has_ends) {
        doc->rod_length_m[doc->spec.n_rod] = lwd_length_in(doc->units, length);
        d->rod_length[doc->spec.n_rod] = length;
        read_rod_range(&m[R_RANGE], doc, length, rod);
    }
    double check = 0.0;
    if (lwd_read_positive(&m[R_LENGTH], lwd_length_most(doc->units), &check)) {
        rod->has_length = true;
        rod->length_m = lwd_length_in(doc->units, check);
    }
    (void)lwd_read_bool(&m[R_FREE], &rod->free);
    if (has_ends && lwd_want_array(&m[R_SWIVELS], 2, 2, "swivels or null")) {
        for (bool more = lwd_first(&m[R_SWIVELS], &e); more; more = lwd_next(&e)) {
            read_swivel(&e, doc, rod, e.index);
        }
    }
    doc->spec.n_rod++;
}

void lwd_decode_rods(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_RODS];
    lwd_reader e;
    if (!lwd_is_given(r)) {
        return;
    }
    if (!lwd_want_array(r, 0, LW_MAX_RODS, "rods")) {
        d->coords_known = false;
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_rod(&e, d);
    }
}

/* ---- sums and couplings ---------------------------------------------------------------------- */

bool lwd_read_sum(const lwd_reader *r, const lwd_document *doc, size_t least, size_t *n,
                  lw_term term[LW_MAX_TERMS])
{
    lwd_reader e;
    bool good = true;
    *n = 0;
    if (!lwd_want_object(r)) {
        return false;
    }
    size_t count = lwd_count(r);
    if (count < least || count > LW_MAX_TERMS) {
        char expected[48];
        char got[24];
        (void)snprintf(expected, sizeof expected, "%zu to %d members", least, LW_MAX_TERMS);
        (void)snprintf(got, sizeof got, "%zu", count);
        LWD_TELL(r, count < least ? "too-few" : "too-many", expected, got,
                 "A sum has %zu to %d members, here stand %zu.", least, LW_MAX_TERMS, count);
        return false;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        lw_term t = {0, 0.0};
        if (!lwd_member_coord(&e, doc, &t.coord) || !lwd_read_number(&e, -1e9, 1e9, &t.factor)) {
            good = false;
        } else if (!(fabs(t.factor) >= 1e-12)) {
            LWD_TELL(&e, "zero-factor", "a factor other than 0", NULL,
                     "A factor of 0 takes no part in the sum; leave the member out.");
            good = false;
        } else {
            term[(*n)++] = t;
        }
    }
    return good;
}

/* From factors per document unit to factors per SI unit, divided by the angle's (or, without an
 * angle, the length's) conversion: factors between turns stay as they are written. */
static void convert_terms(const lwd_document *doc, size_t n, lw_term *term)
{
    double per_m = lwd_length_out(doc->units, 1.0);
    double per_rad = lwd_angle_out(doc->units, 1.0);
    bool any_turn = false;
    bool any_slide = false;
    for (size_t i = 0; i < n; i++) {
        bool turning = lw_spec_coord_turning(&doc->spec, term[i].coord);
        any_turn = any_turn || turning;
        any_slide = any_slide || !turning;
    }
    for (size_t i = 0; i < n && any_turn && any_slide; i++) {
        if (!lw_spec_coord_turning(&doc->spec, term[i].coord)) {
            term[i].factor *= per_m / per_rad;
        }
    }
}

static void read_coupling(const lwd_reader *r, lwd_decode *d)
{
    static const lwd_member table[2] = {{"name", true}, {"sum", true}};
    lwd_document *doc = d->doc;
    lw_spec_coupling *coupling = &doc->spec.coupling[doc->spec.n_coupling];
    lwd_reader m[2];
    char name[LW_NAME_SIZE] = "";
    if (!lwd_read_members(r, table, 2, m)) {
        return;
    }
    (void)lwd_read_own_name(&m[0], doc, name);
    if (d->coords_known && lwd_read_sum(&m[1], doc, 2, &coupling->n_term, coupling->term)) {
        convert_terms(doc, coupling->n_term, coupling->term);
    }
    memcpy(coupling->name, name, sizeof name);
    doc->spec.n_coupling++;
}

void lwd_decode_couplings(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_COUPLINGS];
    lwd_reader e;
    if (!lwd_is_given(r) || !lwd_want_array(r, 0, LW_MAX_COUPLINGS, "couplings")) {
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_coupling(&e, d);
    }
}
