/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The mechanism document as a whole: the order in which its parts are read. Names come before what
 * refers to them, so that a fault in one part is not told again by every part that uses it. */
#include "document.h"

#include <stdlib.h>
#include <string.h>

#include "canonical.h"
#include "document_internal.h"

static const lwd_member document_table[LWD_D_MEMBERS] = {
    [LWD_D_FORMAT] = {"format", true},       [LWD_D_NAME] = {"name", true},
    [LWD_D_TITLE] = {"title", false},        [LWD_D_UNITS] = {"units", true},
    [LWD_D_FRAME] = {"frame", true},         [LWD_D_BODIES] = {"bodies", true},
    [LWD_D_JOINTS] = {"joints", false},      [LWD_D_RODS] = {"rods", false},
    [LWD_D_COUPLINGS] = {"couplings", false}, [LWD_D_DRIVES] = {"drives", true},
    [LWD_D_TOOLS] = {"tools", true},         [LWD_D_OUTPUTS] = {"outputs", true},
    [LWD_D_MOTION] = {"motion", false},      [LWD_D_NEEDS] = {"needs", false},
    [LWD_D_HOME] = {"home", false},          [LWD_D_MODES] = {"modes", false},
    [LWD_D_CHECKS] = {"checks", false},      [LWD_D_NOTES] = {"notes", false},
    [LWD_D_DRAWING] = {"drawing", false},    [LWD_D_MEASURED_BY] = {"measured_by", false},
};

static void read_title(const lwd_reader *r, char out[LWD_TITLE_SIZE])
{
    const char *text = NULL;
    if (lwd_read_text(r, LWD_TITLE_SIZE - 1, &text)) {
        lwd_text_copy(out, LWD_TITLE_SIZE, text);
    }
}

/* False if the units are not known: then no number could be converted. */
static bool read_units(const lwd_reader *r, lwd_units *units)
{
    static const lwd_member table[2] = {{"length", true}, {"angle", true}};
    static const char *const length_word[2] = {"mm", "m"};
    static const char *const angle_word[2] = {"deg", "rad"};
    lwd_reader m[2];
    size_t length = 0;
    size_t angle = 0;
    if (!lwd_read_members(r, table, 2, m)) {
        return false;
    }
    bool has_length = lwd_read_word(&m[0], length_word, 2, &length);
    bool has_angle = lwd_read_word(&m[1], angle_word, 2, &angle);
    units->metres = length == 1;
    units->radians = angle == 1;
    return has_length && has_angle;
}

static void read_head(lwd_decode *d)
{
    lwd_document *doc = d->doc;
    const char *text = NULL;
    if (lwd_read_text(&d->m[LWD_D_FORMAT], 64, &text) &&
        strcmp(text, "leeway-mechanism/1") != 0) {
        LWD_TELL(&d->m[LWD_D_FORMAT], "unknown-format", "leeway-mechanism/1", NULL,
                 "This edition reads documents of the format \"leeway-mechanism/1\" only.");
    }
    (void)lwd_read_name(&d->m[LWD_D_NAME], doc->spec.name);
    read_title(&d->m[LWD_D_TITLE], doc->title);
    read_title(&d->m[LWD_D_DRAWING], doc->drawing);
    read_title(&d->m[LWD_D_MEASURED_BY], doc->measured_by);
    if (lwd_read_text(&d->m[LWD_D_NOTES], LWD_NOTES_MAX, &text)) {
        size_t n = strlen(text);
        doc->notes = malloc(n + 1);
        if (doc->notes == NULL) {
            d->findings->no_memory = true;
        } else {
            memcpy(doc->notes, text, n + 1);
        }
    }
}

/* Counts that only all joints and rods together can break. */
static void check_counts(lwd_decode *d)
{
    const lw_spec *spec = &d->doc->spec;
    if (!d->coords_known) {
        return;
    }
    if (spec->n_joint + spec->n_rod == 0) {
        LWD_TELL(&d->root, "too-few", "joints or rods", "none",
                 "A mechanism needs at least one joint or rod.");
        d->coords_known = false;
    } else if (lw_spec_coord_count(spec) > LW_MAX_COORDS) {
        LWD_TELL(&d->m[LWD_D_JOINTS], "too-many", "at most 192 coordinates", NULL,
                 "Joints and rods have more than %d coordinates together.", LW_MAX_COORDS);
        d->coords_known = false;
    }
}

static void decode(lwd_decode *d)
{
    if (!lwd_read_members(&d->root, document_table, LWD_D_MEMBERS, d->m)) {
        return;
    }
    read_head(d);
    if (!read_units(&d->m[LWD_D_UNITS], &d->doc->units)) {
        return;
    }
    d->coords_known = true;
    lwd_decode_bodies(d);
    lwd_decode_joints(d);
    lwd_decode_rods(d);
    check_counts(d);
    lwd_decode_couplings(d);
    lwd_decode_drives(d);
    lwd_decode_tools(d);
    lwd_decode_outputs(d);
    lwd_decode_needs(d);
    lwd_decode_examples(d);
    lwd_decode_cross_checks(d);
}

lwd_document *lwd_document_read(const struct cJSON *tree, lwd_findings *findings)
{
    size_t errors = findings->n_error;
    lwd_decode *d = calloc(1, sizeof *d);
    lwd_document *doc = calloc(1, sizeof *doc);
    if (d == NULL || doc == NULL) {
        findings->no_memory = true;
        free(d);
        free(doc);
        return NULL;
    }
    d->doc = doc;
    d->findings = findings;
    d->root = lwd_reader_of(tree, findings);
    decode(d);
    free(d);
    if (findings->n_error > errors || findings->no_memory) {
        lwd_document_free(doc);
        return NULL;
    }
    return doc;
}

lwd_document *lwd_document_read_text(const char *text, size_t len, lwd_findings *findings,
                                     char digest[LWD_DIGEST_SIZE], lwd_buf *canonical)
{
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    digest[0] = '\0';
    struct cJSON *tree = lwd_json_parse(text, len, &limits, findings);
    if (tree == NULL) {
        return NULL;
    }
    lwd_buf own;
    lwd_buf *out = canonical != NULL ? canonical : &own;
    lwd_document *doc = NULL;
    lwd_buf_init(&own, 0);
    size_t start = out->len;
    if (lwd_canonical(tree, out)) {
        lwd_sha256_text(digest, out->data + start, out->len - start);
        doc = lwd_document_read(tree, findings);
    } else {
        findings->no_memory = true;
    }
    lwd_buf_clear(&own);
    lwd_json_free(tree);
    return doc;
}

void lwd_document_free(lwd_document *document)
{
    if (document == NULL) {
        return;
    }
    for (size_t i = 0; i < document->n_near; i++) {
        free(document->near[i]);
    }
    free(document->near);
    free(document->notes);
    free(document);
}
