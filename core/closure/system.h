/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A closure system: a mechanism seen from one kind of question. Some bodies and coordinates are
 * given (the fixed frame always; the tool pose for inverse questions), the rest is unknown.
 * Bodies hang on a spanning tree of one-freedom screws, balls and free bodies; every joint or
 * rod outside the tree gives scalar rows. All geometry stands in the reference posture, so a
 * node's displacement X is the identity there and X_child = X_parent E(q) (product of
 * exponentials, Brockett 1984).
 *
 * Each row is a functional (f at point p, m) on the twist of node b seen from node a, which
 * makes its derivative by any tree screw exact: w . ((p - P) x f + m). Rows are dimensionless:
 * lengths over the characteristic length. Immutable once built. */
#ifndef LWI_SYSTEM_H
#define LWI_SYSTEM_H

#include <leeway/err.h>
#include <leeway/query.h>
#include <leeway/spec.h>

enum {
    LWI_MAX_NODES = 192,
    LWI_MAX_ELEMENTS = 192,
    LWI_MAX_VARS = 160,
    LWI_MAX_ROWS = 288,
    LWI_MAX_LINKS = 4096, /* chain entries of all rows together */
    LWI_MAX_QUATS = 96
};

typedef enum lwi_kind { LWI_TURN, LWI_SLIDE, LWI_HELIX, LWI_BALL, LWI_FREE } lwi_kind;

typedef struct lwi_element {
    lwi_kind kind;
    unsigned short parent, child; /* nodes */
    double sign;    /* -1 where the tree runs from the joint's second body to its first */
    double axis[3];
    double at[3];   /* ball centre; free: a point of the body near its joints */
    double pitch;   /* helix: m per rad */
    bool given;     /* an input, no unknown */
    int var;        /* first unknown, -1 if given */
    int coord;      /* scalar coordinate, -1 for ball and free */
    int ball;       /* spherical joint number, -1 else */
    int quat;       /* index into the state's quaternions for ball and free, -1 else */
    int body;       /* free: the body */
} lwi_element;

typedef enum lwi_row_kind {
    LWI_ROW_ROD,    /* (|d|^2 - L^2) / (2 L length) */
    LWI_ROW_POINT,  /* e . R_a^T (X_b p - X_a p) / length */
    LWI_ROW_AXIS,   /* (R_a e) . (R_b u) - value */
    LWI_ROW_LINEAR, /* sum of factor * coordinate */
    LWI_ROW_SPIN    /* no residual: locks an idle spin about u of node b */
} lwi_row_kind;

typedef struct lwi_row {
    lwi_row_kind kind;
    unsigned short a, b;
    double e[3], u[3];
    double pa[3], pb[3];
    double value;
    int rod;             /* LWI_ROW_ROD */
    int joint;           /* owner, -1 for rods and couplings */
    int coupling;
    size_t n_term;       /* LINEAR: element terms */
    int term_element[LW_MAX_TERMS * 2];
    double term_factor[LW_MAX_TERMS * 2];
    size_t n_rod_term;   /* LINEAR: rod length terms */
    int rod_term[LW_MAX_TERMS];
    double rod_factor[LW_MAX_TERMS];
    size_t link, n_link; /* elements that move b against a, in lwi_system.link */
    int block;
} lwi_row;

typedef struct lwi_link {
    short element;
    signed char sign; /* +1 moves b, -1 moves a */
} lwi_link;

typedef struct lwi_rod_info {
    unsigned short a, b; /* nodes */
    double end[2][3];
    double length_m;     /* reference length */
    bool fixed;          /* length is an equation */
    size_t link, n_link;
} lwi_rod_info;

typedef struct lwi_system {
    const lw_spec *spec;
    double length_m;     /* characteristic length */
    size_t n_node;
    size_t n_element;
    lwi_element element[LWI_MAX_ELEMENTS]; /* parents before children */
    size_t n_var;
    double var_scale[LWI_MAX_VARS]; /* physical step = scale * scaled step */
    int var_element[LWI_MAX_VARS];
    bool var_curved[LWI_MAX_VARS]; /* moves something that rows, rods or tools see */
    size_t n_row;
    lwi_row row[LWI_MAX_ROWS];
    size_t n_row_dropped;
    lwi_row row_dropped[LWI_MAX_ROWS]; /* rows that never matter; still checked in every answer */
    size_t n_link;
    lwi_link link[LWI_MAX_LINKS];
    lwi_rod_info rod[LW_MAX_RODS];
    unsigned short body_node[LW_MAX_BODIES];
    bool node_given[LWI_MAX_NODES]; /* pose is an input */
    size_t n_quat;
    size_t n_block;
    int coord_element[LW_MAX_COORDS]; /* element that carries a coordinate, -1 */
    int ball_element[LW_MAX_BALLS];
    bool body_known[LW_MAX_BODIES];   /* known without solving */
} lwi_system;

/* Values of all elements: the point on the configuration manifold. */
typedef struct lwi_state {
    double value[LWI_MAX_ELEMENTS];
    double quat[LWI_MAX_QUATS][4];
    double pos_m[LWI_MAX_QUATS][3]; /* free bodies: displacement */
    lw_frame given[LWI_MAX_NODES];  /* poses of given nodes; the frame's is the identity */
    double rod_length_m[LW_MAX_RODS];
} lwi_state;

/* Displacements of nodes and world screws of elements at a state. */
typedef struct lwi_eval {
    lw_frame node[LWI_MAX_NODES];
    double w[LWI_MAX_ELEMENTS][3]; /* axis direction, sign included */
    double p[LWI_MAX_ELEMENTS][3]; /* point on the axis, ball centre, free reference point */
} lwi_eval;

/* The same for another type of number, for an instance of eval.inc: prefix_frame; prefix_eval as
 * lwi_eval; prefix_point as lwi_state, but that turns and helices also have cosine and sine (value
 * is read for slides, helices and what stands in sums), balls and free bodies a rotation (a ball's
 * as its joint says, from its first body to its second). Large: never on the stack. */
#define LWI_EVAL_TYPES(prefix, number)        \
    typedef struct prefix##_frame {           \
        number rot[9];                        \
        number pos_m[3];                      \
    } prefix##_frame;                         \
    typedef struct prefix##_eval {            \
        prefix##_frame node[LWI_MAX_NODES];   \
        number w[LWI_MAX_ELEMENTS][3];        \
        number p[LWI_MAX_ELEMENTS][3];        \
    } prefix##_eval;                          \
    typedef struct prefix##_point {           \
        number value[LWI_MAX_ELEMENTS];       \
        number cs[LWI_MAX_ELEMENTS][2];       \
        number rot[LWI_MAX_QUATS][9];         \
        number pos_m[LWI_MAX_QUATS][3];       \
        prefix##_frame given[LWI_MAX_NODES];  \
        number rod_m[LW_MAX_RODS];            \
    } prefix##_point

typedef struct lwi_build_ask {
    const lw_spec *spec;
    double length_m;
    const bool *body_given;  /* [bodies] besides the frame */
    const bool *coord_given; /* [coords] */
    const bool *coord_keep;  /* [coords] must appear as an element */
    const bool *spin_lock;   /* [bodies] bodies whose idle spin is locked */
    const double (*spin_axis)[3];
    bool rods_given;         /* driven rods have given lengths */
} lwi_build_ask;

/* Fused bodies: joints of type fixed. root[body] is the smallest body of its class. */
void lwi_fuse(size_t root[LW_MAX_BODIES], const lw_spec *spec);
/* True where some drive's sum or a "free" flag lets the rod change its length. */
bool lwi_rod_moves(const lw_spec *spec, size_t rod);

lw_code lwi_system_build(lwi_system *out, const lwi_build_ask *ask, lw_err *err);
/* Recomputes blocks after rows were dropped. */
void lwi_system_blocks(lwi_system *sys);
/* Makes a rod that moves an equation with a given length. */
void lwi_system_fix_rod(lwi_system *sys, size_t rod);
/* Takes row i out of the solved rows; it stays checked. */
void lwi_system_drop_row(lwi_system *sys, size_t i);

/* State at the reference posture. */
void lwi_state_reference(lwi_state *state, const lwi_system *sys);
/* From a full configuration (coordinates, balls, bodies). */
void lwi_state_from_config(lwi_state *state, const lwi_system *sys, const lw_config *config);
/* Full configuration: bodies, then every joint coordinate; turns next to `hint` (NULL:
 * (-pi, pi]). */
void lwi_config_from_eval(lw_config *config, const lwi_system *sys, const lwi_state *state,
                          const lwi_eval *ev, const lw_config *hint);
/* Coordinates of one joint from the displacements of its two bodies. */
void lwi_joint_from_frames(const lw_spec_joint *joint, const lw_frame *a, const lw_frame *b,
                           const double *hint, double *coord, double ball[4]);
/* state <- state moved by the scaled tangent step y (Cayley on rotations). */
void lwi_state_step(lwi_state *state, const lwi_system *sys, const double *y);

/* The unknowns that the derivative of a row, of the twist of a node against what it hangs on, or
 * of a sum of coordinates can see, ascending; all others are zero in it. Returns their number. */
size_t lwi_row_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys, const lwi_row *row);
size_t lwi_node_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys, size_t node);
size_t lwi_terms_vars(unsigned short var[LWI_MAX_VARS], const lwi_system *sys,
                      const lw_term *term, size_t n_term);

void lwi_eval_nodes(lwi_eval *ev, const lwi_system *sys, const lwi_state *state);
/* Residuals of all rows [and derivatives, ld columns, scaled; NULL: none]. Returns the number of
 * rows. */
size_t lwi_eval_rows(double *res, double *jac, size_t ld, const lwi_system *sys,
                     const lwi_state *state, const lwi_eval *ev);
double lwi_row_residual(const lwi_system *sys, const lwi_row *row, const lwi_state *state,
                        const lwi_eval *ev);
void lwi_row_derivative(double *out, const lwi_system *sys, const lwi_row *row,
                        const lwi_state *state, const lwi_eval *ev);
/* Worst residuals over all rows, dropped ones included: lengths in m, angles in rad. */
void lwi_closure_error(double *position_m, double *angle_rad, const lwi_system *sys,
                       const lwi_state *state, const lwi_eval *ev);

/* Derivative of the functional (f at p, m) on the twist of node b against the frame. */
void lwi_twist_row(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                   const double p[3], const double f[3], const double m[3]);
/* All six at once, 6 x n_var: velocity of the point p of the node, then its turn. */
void lwi_twist_rows(double *out, const lwi_system *sys, const lwi_eval *ev, size_t node,
                    const double p[3]);
/* Value and scaled derivative (NULL: none) of a sum of coordinates; false if a coordinate is not
 * carried by an element. Rod coordinates are changes of length. */
bool lwi_terms(double *value, double *out, const lwi_system *sys, const lwi_state *state,
               const lwi_eval *ev, const lw_term *term, size_t n_term);
double lwi_rod_length(const lwi_system *sys, const lwi_eval *ev, size_t rod);

#endif
