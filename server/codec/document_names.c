/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Names of a mechanism: looking them up, and telling what was probably meant when there is nothing
 * of a name. Pure but for the findings told. */
#include <stdio.h>
#include <string.h>

#include "document_internal.h"

/* ---- looking up ------------------------------------------------------------------------------ */

size_t lwd_document_body(const lwd_document *d, const char *name)
{
    for (size_t i = 0; i < d->spec.n_body; i++) {
        if (strcmp(d->spec.body[i], name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_document_joint(const lwd_document *d, const char *name)
{
    for (size_t i = 0; i < d->spec.n_joint; i++) {
        if (strcmp(d->spec.joint[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_document_rod(const lwd_document *d, const char *name)
{
    for (size_t i = 0; i < d->spec.n_rod; i++) {
        if (strcmp(d->spec.rod[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_document_drive_of(const lwd_document *d, const char *name)
{
    for (size_t i = 0; i < d->spec.n_drive; i++) {
        if (strcmp(d->spec.drive[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

size_t lwd_document_tool(const lwd_document *d, const char *name)
{
    for (size_t i = 0; i < d->spec.n_tool; i++) {
        if (strcmp(d->spec.tool[i].name, name) == 0) {
            return i;
        }
    }
    return SIZE_MAX;
}

const char *lwd_part_word(lw_joint_type type, size_t part)
{
    static const char *const cylindrical[] = {"turn", "slide"};
    static const char *const universal[] = {"first", "second"};
    static const char *const planar[] = {"x", "y", "turn"};
    switch (type) {
    case LW_CYLINDRICAL:
        return part < 2 ? cylindrical[part] : "";
    case LW_UNIVERSAL:
        return part < 2 ? universal[part] : "";
    case LW_PLANAR:
        return part < 3 ? planar[part] : "";
    default:
        return "";
    }
}

/* Part of a joint by the text after its name ("" or ".first"); SIZE_MAX if it has none of that. */
static size_t part_of(lw_joint_type type, const char *rest)
{
    size_t n = lw_joint_coords(type);
    if (rest[0] == '\0') {
        return n == 1 ? 0 : SIZE_MAX;
    }
    for (size_t p = 0; p < n && n > 1; p++) {
        if (strcmp(rest + 1, lwd_part_word(type, p)) == 0) {
            return p;
        }
    }
    return SIZE_MAX;
}

size_t lwd_document_coord(const lwd_document *d, const char *name)
{
    size_t stem = strcspn(name, ".");
    for (size_t i = 0; i < d->spec.n_joint; i++) {
        const lw_spec_joint *joint = &d->spec.joint[i];
        if (strncmp(joint->name, name, stem) == 0 && joint->name[stem] == '\0') {
            size_t part = part_of(joint->type, name + stem);
            return part == SIZE_MAX ? SIZE_MAX : lw_spec_joint_coord(&d->spec, i, part);
        }
    }
    size_t rod = lwd_document_rod(d, name);
    return rod == SIZE_MAX ? SIZE_MAX : lw_spec_rod_coord(&d->spec, rod);
}

lwd_coord_name lwd_name_of_coord(const lwd_document *doc, size_t coord)
{
    lwd_coord_name name = {""};
    size_t joint = 0;
    size_t part = 0;
    size_t rod = 0;
    if (!lw_spec_coord_owner(&doc->spec, coord, &joint, &part, &rod)) {
        return name;
    }
    if (joint == SIZE_MAX) {
        lwd_text_copy(name.text, sizeof name.text, doc->spec.rod[rod].name);
        return name;
    }
    const lw_spec_joint *j = &doc->spec.joint[joint];
    const char *word = lwd_part_word(j->type, part);
    (void)snprintf(name.text, sizeof name.text, "%s%s%s", j->name, word[0] != '\0' ? "." : "",
                   word);
    return name;
}

/* ---- telling what is not there --------------------------------------------------------------- */

static void tell_unknown(const lwd_reader *r, const char *name, const char *what,
                         const char *const *word, size_t n)
{
    char got[60];
    char cut[40];
    lwd_text_copy(cut, sizeof cut, name);
    (void)snprintf(got, sizeof got, "\"%s\"", cut);
    const char *near = lwd_nearest(name, word, n);
    if (near != NULL) {
        LWD_TELL(r, "unknown-name", what, got, "There is no \"%s\" here. Is \"%s\" meant?", cut,
                 near);
    } else {
        LWD_TELL(r, "unknown-name", what, got, "There is no \"%s\" here; give %s.", cut, what);
    }
}

/* Every coordinate by its short name: a joint of several coordinates by the joint's own. */
static size_t coord_words(const lwd_document *doc, const char **word)
{
    size_t n = 0;
    for (size_t i = 0; i < doc->spec.n_joint; i++) {
        word[n++] = doc->spec.joint[i].name;
    }
    for (size_t i = 0; i < doc->spec.n_rod; i++) {
        word[n++] = doc->spec.rod[i].name;
    }
    return n;
}

static bool find_coord(const lwd_reader *r, const char *name, const lwd_document *doc, size_t *out)
{
    const char *word[LW_MAX_JOINTS + LW_MAX_RODS];
    size_t coord = lwd_document_coord(doc, name);
    if (coord != SIZE_MAX) {
        *out = coord;
        return true;
    }
    char stem[LW_NAME_SIZE];
    size_t n = strcspn(name, ".");
    if (n < sizeof stem) {
        memcpy(stem, name, n);
        stem[n] = '\0';
        size_t joint = lwd_document_joint(doc, stem);
        if (joint != SIZE_MAX) {
            lw_joint_type type = doc->spec.joint[joint].type;
            size_t coords = lw_joint_coords(type);
            char list[80] = "";
            size_t used = 0;
            for (size_t p = 0; p < coords && coords > 1 && used < sizeof list; p++) {
                int more = snprintf(list + used, sizeof list - used, "%s%.20s.%s",
                                    p > 0 ? " or " : "", stem, lwd_part_word(type, p));
                used += more > 0 ? (size_t)more : 0;
            }
            if (coords == 0) {
                LWD_TELL(r, "no-coordinate", "a joint with a coordinate", NULL,
                         "The joint \"%s\" has no single coordinate that could be named here.",
                         stem);
            } else if (coords == 1) {
                LWD_TELL(r, "unknown-name", stem, NULL,
                         "The joint \"%s\" has one coordinate; write \"%s\" alone.", stem, stem);
            } else {
                LWD_TELL(r, "unknown-name", list, NULL,
                         "The joint \"%s\" has several coordinates; write %s.", stem, list);
            }
            return false;
        }
    }
    tell_unknown(r, name, "a joint coordinate or a rod", word, coord_words(doc, word));
    return false;
}

bool lwd_read_coord(const lwd_reader *r, const lwd_document *doc, size_t *out)
{
    const char *name = NULL;
    return lwd_read_text(r, LWD_COORD_NAME_SIZE - 1, &name) && find_coord(r, name, doc, out);
}

bool lwd_member_coord(const lwd_reader *r, const lwd_document *doc, size_t *out)
{
    return find_coord(r, r->name, doc, out);
}

bool lwd_member_drive(const lwd_reader *r, const lwd_document *doc, size_t *out)
{
    size_t i = lwd_document_drive_of(doc, r->name);
    if (i != SIZE_MAX) {
        *out = i;
        return true;
    }
    const char *word[LW_MAX_DRIVES];
    for (size_t k = 0; k < doc->spec.n_drive; k++) {
        word[k] = doc->spec.drive[k].name;
    }
    tell_unknown(r, r->name, "the name of a drive", word, doc->spec.n_drive);
    return false;
}

bool lwd_read_body(const lwd_reader *r, const lwd_document *doc, size_t *out)
{
    const char *name = NULL;
    if (!lwd_read_text(r, LW_NAME_SIZE - 1, &name)) {
        return false;
    }
    size_t i = lwd_document_body(doc, name);
    if (i != SIZE_MAX) {
        *out = i;
        return true;
    }
    const char *word[LW_MAX_BODIES];
    for (size_t k = 0; k < doc->spec.n_body; k++) {
        word[k] = doc->spec.body[k];
    }
    tell_unknown(r, name, "the name of a body", word, doc->spec.n_body);
    return false;
}

/* ---- giving names ---------------------------------------------------------------------------- */

bool lwd_name_is_reserved(const lwd_reader *r, const char *name)
{
    static const char *const word[] = {"x", "y", "z", "rx", "ry", "rz", "mode", "ref", "tool",
                                       "from"};
    for (size_t i = 0; i < sizeof word / sizeof word[0]; i++) {
        if (strcmp(name, word[i]) == 0) {
            LWD_TELL(r, "reserved-name", "another name", NULL,
                     "\"%s\" has a meaning of its own in questions; choose another name.", name);
            return true;
        }
    }
    return false;
}

bool lwd_read_own_name(const lwd_reader *r, const lwd_document *doc, char out[LW_NAME_SIZE])
{
    if (!lwd_read_name(r, out) || lwd_name_is_reserved(r, out)) {
        return false;
    }
    bool used = lwd_document_joint(doc, out) != SIZE_MAX || lwd_document_rod(doc, out) != SIZE_MAX;
    for (size_t i = 0; i < doc->spec.n_coupling && !used; i++) {
        used = strcmp(doc->spec.coupling[i].name, out) == 0;
    }
    if (used) {
        LWD_TELL(r, "doubled-name", "a name of its own", NULL,
                 "\"%s\" is used already; joints, rods and couplings share their names.", out);
        return false;
    }
    return true;
}
