/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the mechanism document: any text is refused with an error that has a place and a sentence,
 * or is read, has a digest, and reads to the same digest again from its canonical text. */
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "codec/document.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static lwd_findings findings;

static void must(bool holds)
{
    if (!holds) {
        abort();
    }
}

static void check_findings(const lwd_document *doc)
{
    must((doc == NULL) == (findings.n_error > 0));
    must(findings.n <= LWD_MAX_FINDINGS);
    for (size_t i = 0; i < findings.n; i++) {
        const lwd_finding *f = &findings.item[i];
        must(f->code[0] != '\0' && f->text[0] != '\0');
        must(f->pointer[0] == '\0' || f->pointer[0] == '/');
    }
}

/* What the core takes for granted. */
static void check_spec(const lwd_document *doc)
{
    const lw_spec *s = &doc->spec;
    must(s->n_body >= 2 && s->frame < s->n_body && s->n_drive >= 1 && s->n_tool >= 1);
    must(lw_spec_coord_count(s) <= LW_MAX_COORDS);
    for (size_t i = 0; i < s->n_joint; i++) {
        const lw_spec_joint *j = &s->joint[i];
        must(j->body[0] < s->n_body && j->body[1] < s->n_body && j->body[0] != j->body[1]);
        must(isfinite(j->at_m[0] + j->at_m[1] + j->at_m[2] + j->lead_m));
        double size = j->axis[0] * j->axis[0] + j->axis[1] * j->axis[1] + j->axis[2] * j->axis[2];
        must(j->type == LW_FIXED || j->type == LW_SPHERICAL || fabs(size - 1.0) < 1e-9);
        for (size_t p = 0; p < lw_joint_coords(j->type); p++) {
            must(!j->range[p].has_low || j->range[p].low <= 0.0);
            must(!j->range[p].has_high || j->range[p].high >= 0.0);
        }
    }
    for (size_t i = 0; i < s->n_rod; i++) {
        must(s->rod[i].body[0] < s->n_body && s->rod[i].body[1] < s->n_body);
        must(doc->rod_length_m[i] >= 1e-6 && isfinite(doc->rod_length_m[i]));
    }
    for (size_t i = 0; i < s->n_drive; i++) {
        must(s->drive[i].n_term >= 1 && s->drive[i].n_term <= LW_MAX_TERMS);
        must(isfinite(doc->drive[i].slope) && doc->drive[i].slope != 0.0);
        must(s->drive[i].range.low <= 0.0 && s->drive[i].range.high >= 0.0);
        for (size_t t = 0; t < s->drive[i].n_term; t++) {
            must(s->drive[i].term[t].coord < lw_spec_coord_count(s));
        }
    }
    for (size_t i = 0; i < s->n_output; i++) {
        must(s->output[i].kind != LW_OUT_COORD || s->output[i].coord < lw_spec_coord_count(s));
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char digest[LWD_DIGEST_SIZE];
    char again[LWD_DIGEST_SIZE];
    lwd_buf canonical;
    lwd_buf second;
    lwd_buf_init(&canonical, 0);
    lwd_buf_init(&second, 0);
    lwd_findings_init(&findings);
    lwd_document *doc =
        lwd_document_read_text((const char *)data, size, &findings, digest, &canonical);
    check_findings(doc);
    if (digest[0] != '\0') {
        lwd_findings_init(&findings);
        lwd_document *other =
            lwd_document_read_text(canonical.data, canonical.len, &findings, again, &second);
        must(strcmp(digest, again) == 0);
        must(canonical.len == second.len &&
             memcmp(canonical.data, second.data, second.len) == 0);
        must((other == NULL) == (doc == NULL));
        lwd_document_free(other);
    }
    if (doc != NULL) {
        check_spec(doc);
    }
    lwd_document_free(doc);
    lwd_buf_clear(&canonical);
    lwd_buf_clear(&second);
    return 0;
}
