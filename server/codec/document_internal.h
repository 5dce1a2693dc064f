/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the parts of the document decoder share. Only document*.c and posture_in.c include this. */
#ifndef LWD_DOCUMENT_INTERNAL_H
#define LWD_DOCUMENT_INTERNAL_H

#include "document.h"
#include "json_in.h"
#include "posture_in.h"

/* Members of the document, in the order of the table in document.c. */
enum {
    LWD_D_FORMAT,
    LWD_D_NAME,
    LWD_D_TITLE,
    LWD_D_UNITS,
    LWD_D_FRAME,
    LWD_D_BODIES,
    LWD_D_JOINTS,
    LWD_D_RODS,
    LWD_D_COUPLINGS,
    LWD_D_DRIVES,
    LWD_D_TOOLS,
    LWD_D_OUTPUTS,
    LWD_D_MOTION,
    LWD_D_NEEDS,
    LWD_D_HOME,
    LWD_D_MODES,
    LWD_D_CHECKS,
    LWD_D_NOTES,
    LWD_D_DRAWING,
    LWD_D_MEASURED_BY,
    LWD_D_MEMBERS
};

typedef struct lwd_decode {
    lwd_document *doc;
    lwd_findings *findings;
    lwd_reader root;
    lwd_reader m[LWD_D_MEMBERS];
    bool bodies_known; /* every body has a name, so references can be looked up */
    bool coords_known; /* every joint has a name and a type, every rod a name */
    bool drives_known; /* every drive has a name and a reading */
    bool outputs_known; /* every output was understood */
    double rod_length[LW_MAX_RODS]; /* reference length as written, document units; 0 = not known */
} lwd_decode;

/* ---- sizes that are still believed, in document units ---------------------------------------- */

double lwd_length_most(lwd_units units); /* 1 km */
double lwd_angle_most(lwd_units units);  /* about 16,000 turns */

/* ---- names (document_names.c) ---------------------------------------------------------------- */

/* These read a text and look it up; false with an error told if there is nothing of this name. */
bool lwd_read_body(const lwd_reader *r, const lwd_document *doc, size_t *out);
bool lwd_read_coord(const lwd_reader *r, const lwd_document *doc, size_t *out);
/* The same for the name of a member of an object (r->name). */
bool lwd_member_coord(const lwd_reader *r, const lwd_document *doc, size_t *out);
bool lwd_member_drive(const lwd_reader *r, const lwd_document *doc, size_t *out);
/* [a-z0-9-], not a reserved word, not yet used among joints, rods and couplings. */
bool lwd_read_own_name(const lwd_reader *r, const lwd_document *doc, char out[LW_NAME_SIZE]);
/* True (and told) if the word is one a query string uses itself. */
bool lwd_name_is_reserved(const lwd_reader *r, const char *name);
/* "wrist.first" of a coordinate. */
typedef struct lwd_coord_name {
    char text[LWD_COORD_NAME_SIZE];
} lwd_coord_name;
lwd_coord_name lwd_name_of_coord(const lwd_document *doc, size_t coord);

/* ---- the parts ------------------------------------------------------------------------------- */

void lwd_decode_bodies(lwd_decode *d);
void lwd_decode_joints(lwd_decode *d);
void lwd_decode_rods(lwd_decode *d);
void lwd_decode_couplings(lwd_decode *d);
void lwd_decode_drives(lwd_decode *d);
void lwd_decode_tools(lwd_decode *d);
void lwd_decode_outputs(lwd_decode *d);
void lwd_decode_needs(lwd_decode *d);
void lwd_decode_examples(lwd_decode *d); /* home, modes, checks */
/* What can be judged only when all parts are known. */
void lwd_decode_cross_checks(lwd_decode *d);

/* Two different bodies by name. */
bool lwd_read_between(const lwd_reader *r, const lwd_decode *d, size_t body[2]);
/* [x, y, z] in document units to m. */
bool lwd_read_point(const lwd_reader *r, lwd_units units, double out_m[3]);
/* {"coordinate": factor, ...} with factors as written, 1 to LW_MAX_TERMS of them. */
bool lwd_read_sum(const lwd_reader *r, const lwd_document *doc, size_t least, size_t *n,
                  lw_term term[LW_MAX_TERMS]);
/* A range in document units to SI. */
lw_range lwd_range_in(lw_range written, lwd_units units, bool turning);
/* Makes `second` square to `first` (both of unit length): up to 0.1 degree off is told as a note,
 * beyond it is an error and false. */
bool lwd_make_square(const lwd_reader *r, const double first[3], double second[3]);
double lwd_angle_between(const double a[3], const double b[3]); /* of unit vectors, rad */

#endif
