/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A mechanism, written down: the mechanism document decoded to SI units and indices. All points
 * and axes stand in the reference posture, in the fixed body's frame. A coordinate is the motion
 * of the second body of `body` seen from the first, zero in the reference posture, never
 * wrapped.
 *
 * Scalar coordinates are numbered through joints in document order (fixed and spherical 0;
 * revolute, prismatic, helical 1; cylindrical 2: turn, slide; universal 2: first, second; planar
 * 3: x, y, turn), then through rods (1 each: change of length). */
#ifndef LEEWAY_SPEC_H
#define LEEWAY_SPEC_H

#include <leeway/posture.h>

typedef struct lw_range {
    bool has_low;
    bool has_high;
    double low;
    double high;
} lw_range;

typedef enum lw_joint_type {
    LW_FIXED,
    LW_REVOLUTE,
    LW_PRISMATIC,
    LW_HELICAL,
    LW_CYLINDRICAL,
    LW_UNIVERSAL,
    LW_SPHERICAL,
    LW_PLANAR
} lw_joint_type;

typedef struct lw_spec_joint {
    char name[LW_NAME_SIZE];
    lw_joint_type type;
    size_t body[2];
    double at_m[3];        /* zero for prismatic joints without "at" */
    double axis[3];        /* unit length from here on */
    double second_axis[3]; /* universal: second axis; planar: x axis */
    double lead_m;         /* helical: slide per full turn, + right hand */
    lw_range range[3];     /* per scalar coordinate, change from the reference posture */
    bool has_cone;         /* spherical */
    double cone_rad;
    double cone_axis[3];
    double stud_axis[3];
} lw_spec_joint;

typedef struct lw_spec_swivel {
    bool present;
    double axis[3];
    double cone_rad;
} lw_spec_swivel;

typedef struct lw_spec_rod {
    char name[LW_NAME_SIZE];
    size_t body[2];
    double end_m[2][3];
    lw_range range_m;      /* absolute length */
    bool free;             /* an undriven rod that may change its length */
    bool has_length;
    double length_m;       /* check value */
    lw_spec_swivel swivel[2];
} lw_spec_rod;

typedef struct lw_term {
    size_t coord;  /* scalar coordinate index */
    double factor; /* SI: coordinate in m or rad */
} lw_term;

typedef struct lw_spec_coupling {
    char name[LW_NAME_SIZE];
    size_t n_term;
    lw_term term[LW_MAX_TERMS];
} lw_spec_coupling;

/* A drive's own coordinate is the sum of its terms, m or rad. All figures in that coordinate. */
typedef struct lw_spec_drive {
    char name[LW_NAME_SIZE];
    size_t n_term;
    lw_term term[LW_MAX_TERMS];
    bool turning;        /* rad and Nm, else m and N */
    lw_range range;      /* low <= high also where per_unit is negative */
    bool has_speed, has_acceleration, has_effort, has_resolution, has_backlash;
    double speed;        /* per second */
    double acceleration; /* per second squared */
    double effort;       /* Nm or N */
    double resolution;
    double backlash;
} lw_spec_drive;

typedef struct lw_spec_tool {
    char name[LW_NAME_SIZE];
    size_t body;
    lw_frame frame; /* in the reference posture */
} lw_spec_tool;

typedef enum lw_output_kind {
    LW_OUT_X,
    LW_OUT_Y,
    LW_OUT_Z,
    LW_OUT_RX, /* roll  of intrinsic z-y'-x'' */
    LW_OUT_RY, /* pitch */
    LW_OUT_RZ, /* yaw   */
    LW_OUT_COORD
} lw_output_kind;

typedef struct lw_spec_output {
    lw_output_kind kind;
    size_t coord; /* LW_OUT_COORD */
} lw_spec_output;

typedef enum lw_motion {
    LW_MOTION_NONE, /* not declared, or none of the patterns */
    LW_MOTION_3T3R,
    LW_MOTION_3T2R,
    LW_MOTION_3T1R,
    LW_MOTION_3T,
    LW_MOTION_2T1R,
    LW_MOTION_2T,
    LW_MOTION_2R1T,
    LW_MOTION_1T2R,
    LW_MOTION_3R,
    LW_MOTION_2R,
    LW_MOTION_1R,
    LW_MOTION_1T
} lw_motion;

typedef struct lw_figure {
    bool asked;
    double value;
} lw_figure;

typedef struct lw_joint_need {
    size_t coord;
    lw_figure tolerance; /* m or rad */
    lw_figure effort;    /* N or Nm */
    lw_figure speed;     /* m/s or rad/s */
} lw_joint_need;

typedef struct lw_needs {
    lw_figure position_tolerance_m;
    lw_figure angle_tolerance_rad;
    lw_figure force_n;
    lw_figure moment_nm;
    lw_figure speed_m_s;
    lw_figure turn_rate_rad_s;
    lw_figure characteristic_length_m;
    lw_figure margin_min;
    size_t n_joint;
    lw_joint_need joint[LW_MAX_OUTPUTS];
} lw_needs;

typedef struct lw_spec_mode {
    char name[LW_NAME_SIZE];
    lw_posture_ask example;
} lw_spec_mode;

typedef struct lw_spec_check {
    lw_posture_ask posture; /* readings */
    lw_pose_ask pose;
    lw_figure within_position_m;
    lw_figure within_angle_rad;
} lw_spec_check;

typedef struct lw_spec {
    char name[LW_NAME_SIZE];
    size_t frame; /* the fixed body */
    size_t n_body;
    char body[LW_MAX_BODIES][LW_NAME_SIZE];
    size_t n_joint;
    lw_spec_joint joint[LW_MAX_JOINTS];
    size_t n_rod;
    lw_spec_rod rod[LW_MAX_RODS];
    size_t n_coupling;
    lw_spec_coupling coupling[LW_MAX_COUPLINGS];
    size_t n_drive;
    lw_spec_drive drive[LW_MAX_DRIVES];
    size_t n_tool;
    lw_spec_tool tool[LW_MAX_TOOLS];
    size_t n_output;
    lw_spec_output output[LW_MAX_OUTPUTS];
    lw_motion motion;
    lw_needs needs;
    lw_posture_ask home; /* LW_BY_NOTHING: the reference posture */
    size_t n_mode;
    lw_spec_mode mode[LW_MAX_MODES];
    size_t n_check;
    lw_spec_check check[LW_MAX_CHECKS];
} lw_spec; /* large (some hundred kB): lives on the heap */

/* Number of scalar coordinates of a joint type. */
size_t lw_joint_coords(lw_joint_type type);
/* Coordinate index of part `part` of joint `joint`; rods by lw_spec_rod_coord. */
size_t lw_spec_joint_coord(const lw_spec *spec, size_t joint, size_t part);
size_t lw_spec_rod_coord(const lw_spec *spec, size_t rod);
size_t lw_spec_coord_count(const lw_spec *spec);
/* Which joint or rod owns a coordinate; false if out of range. For a rod *joint is SIZE_MAX. */
bool lw_spec_coord_owner(const lw_spec *spec, size_t coord, size_t *joint, size_t *part,
                         size_t *rod);
/* True where the coordinate is an angle (rad), false where it is a length (m). */
bool lw_spec_coord_turning(const lw_spec *spec, size_t coord);

#endif
