/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Poses and postures as documents and questions write them. One decoder for both: a question gives
 * its own units and a way to understand mode names. */
#ifndef LWD_POSTURE_IN_H
#define LWD_POSTURE_IN_H

#include <leeway/posture.h>

#include "document.h"
#include "json_in.h"

typedef struct lwd_posture_scope {
    const lwd_document *document; /* names, readings, reference lengths */
    lwd_units units;              /* of poses and joints; readings have their own */
    /* Signs or a mode's name to a mode; NULL: signs only, any number of limbs (documents). */
    bool (*mode)(const void *user, const char *text, lw_mode *out);
    const void *user;
} lwd_posture_scope;

/* A posture's members stand first in the table of the object that holds them:
 *     static const lwd_member table[] = {LWD_POSTURE_TABLE, {"point", false}, ...};
 *     lwd_read_members(r, table, n, m); lwd_posture_read(r, m, ...); */
enum {
    LWD_POSTURE_DRIVES,
    LWD_POSTURE_POSE,
    LWD_POSTURE_MODE,
    LWD_POSTURE_JOINTS,
    LWD_POSTURE_BODIES,
    LWD_POSTURE_NEAR,
    LWD_POSTURE_MEMBERS
};
#define LWD_POSTURE_TABLE                                                                          \
    {"drives", false}, {"pose", false}, {"mode", false}, {"joints", false}, {"bodies", false},     \
        {"near", false}

/* Reads the members m[0..LWD_POSTURE_MEMBERS). `near` receives what out->near points at and must
 * live as long as out. None of drives, pose, joints, bodies: kind LW_BY_NOTHING if `optional`, else
 * an error. False if there was an error; out is then not to be used. */
bool lwd_posture_read(const lwd_reader *r, const lwd_reader m[LWD_POSTURE_MEMBERS],
                      const lwd_posture_scope *scope, bool optional, lw_posture_ask *out,
                      lw_posture_ask *near);
/* An object that is a posture and nothing else. */
bool lwd_posture_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out,
                    lw_posture_ask *near);
/* {"x": .., "y": .., "z": .., ORIENTATION, "joints": {..}}. */
bool lwd_pose_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_pose_ask *out);
/* A POSE or a POSTURE that has no "near" of its own. */
bool lwd_near_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out);
/* {"m1": reading, ...} to drive coordinates; the other entries are cleared. */
bool lwd_readings_in(const lwd_reader *r, const lwd_posture_scope *scope, lw_posture_ask *out);
/* Bare orientation {"quaternion"|"zyx"|"rotation_vector"|"rz": ..} that fixes a whole turn, such as
 * a tool's in the reference posture. */
bool lwd_rotation_in(const lwd_reader *r, lwd_units units, double rot[9]);

#endif
