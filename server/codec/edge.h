/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The edge between a model's SI numbers and indices and the numbers and names people read: units,
 * drive readings, coordinate names. Built once when a model is loaded, immutable from then on,
 * shared by threads. */
#ifndef LWD_EDGE_H
#define LWD_EDGE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <leeway/model.h>
#include <leeway/query.h>

typedef struct lwd_document lwd_document;

typedef struct lwd_units {
    bool metres;  /* else millimetres */
    bool radians; /* else degrees */
} lwd_units;

/* How an orientation is written. */
typedef enum lwd_form {
    LWD_FORM_DEFAULT, /* rz where the motion is planar or Schoenflies, else quaternion */
    LWD_FORM_QUATERNION,
    LWD_FORM_ZYX,
    LWD_FORM_ROTATION_VECTOR,
    LWD_FORM_DIRECTION,
    LWD_FORM_RZ
} lwd_form;

enum {
    LWD_COORD_NAME_SIZE = LW_NAME_SIZE + 8, /* "wrist.second" */
    LWD_DIGEST_SIZE = 65,
    LWD_UNIT_SIZE = 17
};

/* reading = at_reference + slope * coordinate (m or rad). */
typedef struct lwd_drive_edge {
    double at_reference;
    double slope;
    char unit[LWD_UNIT_SIZE];
} lwd_drive_edge;

typedef struct lwd_edge {
    char name[LW_NAME_SIZE];
    int64_t revision;
    char digest[LWD_DIGEST_SIZE];
    const lw_model *model;   /* borrowed, as are the next three */
    const lwd_document *document;
    const lw_spec *spec;
    const lw_report *report;
    lwd_units units;         /* the document's */
    lwd_form form;           /* what LWD_FORM_DEFAULT means here */
    size_t n_coord;
    char coord_name[LW_MAX_COORDS][LWD_COORD_NAME_SIZE];
    bool coord_turning[LW_MAX_COORDS];
    bool coord_shown[LW_MAX_COORDS]; /* false: a rod of fixed length */
    double rod_length_m[LW_MAX_RODS]; /* in the reference posture */
    size_t n_ball;
    size_t ball_joint[LW_MAX_BALLS];  /* the k-th spherical joint in document order */
    lwd_drive_edge drive[LW_MAX_DRIVES];
} lwd_edge;

void lwd_edge_init(lwd_edge *edge, const lwd_document *document, const lw_model *model,
                   const char *name, int64_t revision, const char *digest);

/* Lengths and angles to the units given; "mm", "deg" and so on. */
double lwd_length_out(lwd_units units, double value_m);
double lwd_angle_out(lwd_units units, double value_rad);
double lwd_length_in(lwd_units units, double value);
double lwd_angle_in(lwd_units units, double value);
const char *lwd_length_word(lwd_units units);
const char *lwd_angle_word(lwd_units units);

/* A joint coordinate, or a rod's change of length, in the units given. */
double lwd_coord_out(const lwd_edge *edge, lwd_units units, size_t coord, double value);

double lwd_reading_out(const lwd_edge *edge, size_t drive, double coordinate);
double lwd_reading_in(const lwd_edge *edge, size_t drive, double reading);

/* Index of a name, SIZE_MAX if there is none. */
size_t lwd_edge_drive(const lwd_edge *edge, const char *name);
size_t lwd_edge_tool(const lwd_edge *edge, const char *name);
size_t lwd_edge_coord(const lwd_edge *edge, const char *name);
/* Name of a mode in the document, NULL if it has none. */
const char *lwd_edge_mode_name(const lwd_edge *edge, const lw_mode *mode);
/* Signs ("+-+", blanks read as '+') or a mode's name to the mode; false if neither. */
bool lwd_edge_mode_parse(const lwd_edge *edge, const char *text, lw_mode *out);

/* A number that was written in few digits and has been to SI and back: the same few digits again
 * (29.999999999999996 gives 30). Others pass unchanged. */
double lwd_tidy(double value);

#endif
