/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The mechanism document: JSON text to lw_spec in SI units, with what the spec does not keep but
 * the edge needs (units, drive readings, titles). Structural faults are told here with the pointer
 * of the member that was sent; kinematic ones (mobility, closure, hold) are the core's. Indices
 * into bodies, joints, rods, couplings, drives, tools, outputs, modes and checks are those of the
 * document, so the core's pointers fit the text as well. */
#ifndef LWD_DOCUMENT_H
#define LWD_DOCUMENT_H

#include <leeway/spec.h>

#include "../exchange.h"
#include "edge.h"
#include "findings.h"
#include "json_in.h"

enum { LWD_TITLE_SIZE = 121, LWD_NOTES_MAX = 16384 };

/* reading = at_reference + slope * coordinate; slope = per_unit * document units per m or rad. */
typedef struct lwd_document_drive {
    double at_reference;
    double per_unit;
    double slope;
    char unit[LWD_UNIT_SIZE];
    lw_range range; /* as written, in reading units */
} lwd_document_drive;

typedef struct lwd_document {
    lw_spec spec;
    lwd_units units;
    char title[LWD_TITLE_SIZE];
    char drawing[LWD_TITLE_SIZE];
    char measured_by[LWD_TITLE_SIZE];
    char *notes; /* owned, NULL where there are none */
    lwd_document_drive drive[LW_MAX_DRIVES];
    char mode_title[LW_MAX_MODES][LWD_TITLE_SIZE];
    double rod_length_m[LW_MAX_RODS];  /* in the reference posture */
    size_t n_ball;
    size_t ball_joint[LW_MAX_BALLS];   /* joint index of the k-th spherical joint */
    size_t n_near;
    lw_posture_ask **near;             /* owned: what the "near" of home, modes, checks point at */
} lwd_document; /* some hundred kB: on the heap */

/* Decodes a tree that has passed the scan. NULL if there is an error in `findings` (which may also
 * hold warnings and notes about a document that is returned) or no memory (findings->no_memory). */
lwd_document *lwd_document_read(const struct cJSON *tree, lwd_findings *findings);

/* Scan, parse, decode; `digest` gets the hex digest of the canonical form where the text is JSON,
 * else "". `canonical` (may be NULL) gets the canonical text. */
lwd_document *lwd_document_read_text(const char *text, size_t len, lwd_findings *findings,
                                     char digest[LWD_DIGEST_SIZE], lwd_buf *canonical);
void lwd_document_free(lwd_document *document);

/* ---- names ----------------------------------------------------------------------------------- */

/* Index of a name, SIZE_MAX if there is none. */
size_t lwd_document_body(const lwd_document *d, const char *name);
size_t lwd_document_joint(const lwd_document *d, const char *name);
size_t lwd_document_rod(const lwd_document *d, const char *name);
size_t lwd_document_drive_of(const lwd_document *d, const char *name);
size_t lwd_document_tool(const lwd_document *d, const char *name);
/* A scalar coordinate by name: "elbow", "wrist.first", "strut-1". */
size_t lwd_document_coord(const lwd_document *d, const char *name);
/* "turn", "slide", "first", ...; "" where the type has one coordinate. */
const char *lwd_part_word(lw_joint_type type, size_t part);

#endif
