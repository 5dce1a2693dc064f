/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How questions name poses and postures. Plain values, SI units, fixed frame of the mechanism. */
#ifndef LEEWAY_POSTURE_H
#define LEEWAY_POSTURE_H

#include <stdbool.h>
#include <stddef.h>

enum {
    LW_MAX_BODIES = 64,
    LW_MAX_JOINTS = 96,
    LW_MAX_RODS = 64,
    LW_MAX_COORDS = 192, /* scalar coordinates of joints and rods together */
    LW_MAX_COUPLINGS = 32,
    LW_MAX_DRIVES = 24,
    LW_MAX_TOOLS = 16,
    LW_MAX_OUTPUTS = 16,
    LW_MAX_TERMS = 8,    /* members of one sum */
    LW_MAX_LIMBS = 32,
    LW_MAX_MODES = 64,
    LW_MAX_CHECKS = 64,
    LW_MAX_BALLS = 48,   /* spherical joints */
    LW_NAME_SIZE = 33,
    LW_MODE_TEXT_SIZE = 128
};

/* Rigid displacement or pose: x -> rot x + pos. Rotation row-major. */
typedef struct lw_frame {
    double rot[9];
    double pos_m[3];
} lw_frame;

/* One entry a limb, document order of limbs. sign -1, 0 (within tolerance) or +1; class from 1,
 * 0 where the limb has at most two inverse solutions. */
typedef struct lw_mode {
    size_t count;
    signed char sign[LW_MAX_LIMBS];
    unsigned short branch[LW_MAX_LIMBS];
} lw_mode;

typedef enum lw_orient_form {
    LW_ORIENT_NONE,      /* left out: what is an output is then missing */
    LW_ORIENT_QUATERNION,/* quat */
    LW_ORIENT_ZYX,       /* zyx_rad with has_zyx: yaw, pitch, roll, intrinsic z-y'-x'' */
    LW_ORIENT_DIRECTION  /* tool z axis only, the turn about it is free */
} lw_orient_form;

/* A tool pose as far as it was given. Rotation vectors become quaternions and "rz" becomes yaw
 * with pitch and roll missing in the decoder. */
typedef struct lw_pose_ask {
    bool has_position[3];
    double position_m[3];
    lw_orient_form orient;
    double quat[4];      /* w x y z, unit length */
    bool has_zyx[3];
    double zyx_rad[3];   /* yaw, pitch, roll */
    double direction[3]; /* unit length */
    size_t n_joint;      /* joint coordinates given with the pose: outputs such as a gripper turn */
    size_t joint_coord[LW_MAX_OUTPUTS]; /* scalar coordinate index, see spec.h */
    double joint_value[LW_MAX_OUTPUTS]; /* m or rad, change from the reference posture, unwrapped */
} lw_pose_ask;

typedef enum lw_posture_kind {
    LW_BY_NOTHING, /* not given */
    LW_BY_DRIVES,
    LW_BY_POSE,
    LW_BY_JOINTS,
    LW_BY_BODIES
} lw_posture_kind;

typedef struct lw_posture_ask lw_posture_ask;
struct lw_posture_ask {
    lw_posture_kind kind;
    /* LW_BY_DRIVES: drive coordinates in m or rad (readings already converted) */
    bool has_drive[LW_MAX_DRIVES];
    double drive[LW_MAX_DRIVES];
    /* LW_BY_POSE */
    lw_pose_ask pose;
    bool has_mode;
    lw_mode mode;
    /* LW_BY_JOINTS: scalar coordinates (rod: change of length) and quaternions of spherical
     * joints */
    bool has_coord[LW_MAX_COORDS];
    double coord[LW_MAX_COORDS];
    bool has_ball[LW_MAX_BALLS];    /* by ball number: the k-th spherical joint in document order */
    double ball[LW_MAX_BALLS][4];
    /* LW_BY_BODIES: pose of a body's displacement from the reference posture is not asked for; the
     * given frame is that of the body's own axes, which coincide with the fixed frame in the
     * reference posture */
    bool has_body[LW_MAX_BODIES];
    lw_frame body[LW_MAX_BODIES];
    /* picks the assembly; NULL = the default branch. Same kinds again, never nested deeper. */
    const lw_posture_ask *near;
};

#endif
