/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Home, modes and checks of the mechanism document: the postures it gives. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "document_internal.h"

/* Room for what a posture's "near" points at; kept by the document. NULL without memory (told). */
static lw_posture_ask *new_near(const lwd_reader *r, lwd_decode *d)
{
    lwd_document *doc = d->doc;
    lw_posture_ask *near = calloc(1, sizeof *near);
    lw_posture_ask **list = near == NULL
                                ? NULL
                                : realloc(doc->near, (doc->n_near + 1) * sizeof *list);
    if (list == NULL) {
        free(near);
        d->findings->no_memory = true;
        LWD_TELL(r, "no-memory", "", "", "There is not enough memory to read the document.");
        return NULL;
    }
    doc->near = list;
    doc->near[doc->n_near++] = near;
    return near;
}

static void read_posture(const lwd_reader *r, lwd_decode *d, lw_posture_ask *out)
{
    const lwd_posture_scope scope = {.document = d->doc, .units = d->doc->units};
    lwd_reader near;
    lw_posture_ask *room = NULL;
    if (lwd_find(r, "near", &near)) {
        room = new_near(r, d);
        if (room == NULL) {
            return;
        }
    }
    (void)lwd_posture_in(r, &scope, out, room);
}

/* ---- modes ----------------------------------------------------------------------------------- */

static void read_mode(const lwd_reader *r, lwd_decode *d)
{
    static const lwd_member table[2] = {{"title", false}, {"example", true}};
    lwd_document *doc = d->doc;
    lw_spec_mode *mode = &doc->spec.mode[doc->spec.n_mode];
    lwd_reader m[2];
    const char *title = NULL;
    size_t n = strlen(r->name);
    bool letter = strpbrk(r->name, "abcdefghijklmnopqrstuvwxyz") != NULL;
    if (n >= LW_NAME_SIZE || !letter || strcmp(r->name, "any") == 0 ||
        strspn(r->name, "abcdefghijklmnopqrstuvwxyz0123456789-") != n) {
        char got[48];
        lwd_text_copy(got, sizeof got, r->name);
        LWD_TELL(r, "bad-name", "1 to 32 of a-z 0-9 -, with a letter, not \"any\"", got,
                 "A mode's name is written with lower-case letters, digits and hyphens, at most "
                 "32, with at least one letter; \"any\" is taken.");
        return;
    }
    memcpy(mode->name, r->name, n + 1);
    if (!lwd_read_members(r, table, 2, m)) {
        return;
    }
    if (lwd_read_text(&m[0], LWD_TITLE_SIZE - 1, &title)) {
        lwd_text_copy(doc->mode_title[doc->spec.n_mode], LWD_TITLE_SIZE, title);
    }
    if (d->drives_known && lwd_is_given(&m[1])) {
        read_posture(&m[1], d, &mode->example);
    }
    doc->spec.n_mode++;
}

static void read_modes(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_MODES];
    lwd_reader e;
    if (!lwd_is_given(r) || !lwd_want_object(r)) {
        return;
    }
    if (lwd_count(r) > LW_MAX_MODES) {
        LWD_TELL(r, "too-many", "at most 64 modes", NULL, "At most %d modes may be named.",
                 LW_MAX_MODES);
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_mode(&e, d);
    }
}

/* ---- checks ---------------------------------------------------------------------------------- */

static void read_check(const lwd_reader *r, lwd_decode *d)
{
    static const lwd_member table[3] = {{"drives", true}, {"pose", true}, {"within", false}};
    static const lwd_member within_table[2] = {{"position", false}, {"angle", false}};
    lwd_document *doc = d->doc;
    lwd_units units = doc->units;
    const lwd_posture_scope scope = {.document = doc, .units = units};
    lw_spec_check *check = &doc->spec.check[doc->spec.n_check];
    lwd_reader m[3];
    lwd_reader w[2];
    if (!lwd_read_members(r, table, 3, m)) {
        return;
    }
    if (lwd_is_given(&m[0])) {
        (void)lwd_readings_in(&m[0], &scope, &check->posture);
    }
    if (lwd_is_given(&m[1])) {
        (void)lwd_pose_in(&m[1], &scope, &check->pose);
    }
    if (lwd_is_given(&m[2]) && lwd_read_members(&m[2], within_table, 2, w)) {
        lw_figure *position = &check->within_position_m;
        lw_figure *angle = &check->within_angle_rad;
        position->asked = lwd_read_positive(&w[0], lwd_length_most(units), &position->value);
        angle->asked = lwd_read_positive(&w[1], lwd_angle_most(units), &angle->value);
        position->value = lwd_length_in(units, position->value);
        angle->value = lwd_angle_in(units, angle->value);
    }
    doc->spec.n_check++;
}

static void read_checks(lwd_decode *d)
{
    const lwd_reader *r = &d->m[LWD_D_CHECKS];
    lwd_reader e;
    if (!lwd_is_given(r) || !lwd_want_array(r, 0, LW_MAX_CHECKS, "checks") || !d->drives_known) {
        return;
    }
    for (bool more = lwd_first(r, &e); more; more = lwd_next(&e)) {
        read_check(&e, d);
    }
}

void lwd_decode_examples(lwd_decode *d)
{
    const lwd_reader *home = &d->m[LWD_D_HOME];
    if (lwd_is_given(home) && d->drives_known) {
        read_posture(home, d, &d->doc->spec.home);
    }
    read_modes(d);
    read_checks(d);
}
