/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The questions: inverse, forward, jacobian, margin, reach. SI units, fixed frame. A query returns
 * LW_OK whatever the mechanism says; LW_E_POSTURE, LW_E_NOT_CLOSED or LW_E_ARGUMENT when the
 * question itself makes no sense (err->where points into the question). Answers live in the work
 * object and are borrowed until the next query with the same work. No query allocates. */
#ifndef LEEWAY_QUERY_H
#define LEEWAY_QUERY_H

#include <leeway/model.h>

#include <stdatomic.h>

typedef enum lw_outcome { /* the numbers of the contract */
    LW_OUTCOME_NONE = 0,
    LW_OUTCOME_OK = 1,
    LW_OUTCOME_LOW_MARGIN = 2,
    LW_OUTCOME_LIMIT = 3,
    LW_OUTCOME_OUT_OF_REACH = 4,
    LW_OUTCOME_UNDECIDED = 5,
    LW_OUTCOME_OTHER_MODE = 6,
    LW_OUTCOME_SINGULAR = 7,
    LW_OUTCOME_INCONSISTENT = 8,
    LW_OUTCOME_BLOCKED = 9
} lw_outcome;
const char *lw_outcome_word(lw_outcome outcome); /* "ok", "low_margin", ... */

typedef enum lw_basis {
    LW_BASIS_LOCAL,
    LW_BASIS_EXPLICIT,
    LW_BASIS_TRACE,
    LW_BASIS_SATURATED
} lw_basis;

typedef enum lw_limit_of { LW_LIMIT_JOINT, LW_LIMIT_ROD, LW_LIMIT_DRIVE } lw_limit_of;

typedef struct lw_limit {
    lw_limit_of of;
    size_t index;   /* joint, rod or drive, from 0 in document order */
    size_t part;    /* joint part; LW_PART_CONE + end for cone and swivel limits */
    double value;   /* m or rad; rods: absolute length; drives: drive coordinate; cones: angle */
    lw_range range;
    double over;    /* how far beyond, m or rad, > 0 */
} lw_limit;
enum { LW_PART_CONE = 8, LW_MAX_LIMITS_BROKEN = 32 };

/* A configuration of the mechanism, every number it has. Arrays sized by the model, owned by the
 * work object. */
typedef struct lw_config {
    double *coord;      /* [coords] change from the reference posture, unwrapped */
    double (*ball)[4];  /* [spherical joints] quaternion of the second body seen from the first */
    lw_frame *body;     /* [bodies] displacement from the reference posture */
} lw_config;

typedef struct lw_solution {
    lw_mode mode;
    bool mode_known;            /* false where a limb's sign could not be told (iterated limbs) */
    lw_config config;
    double drive[LW_MAX_DRIVES];/* drive coordinates, m or rad */
    /* readings within the drive's range that name this posture, whole turns apart: 1 where there is
     * one, 0 where it is out of range */
    unsigned turns[LW_MAX_DRIVES];
    lw_frame tool;              /* pose of the tool asked for */
    /* by Newton-Kantorovich: one solution lies within the radius, scaled */
    bool certified;
    double certified_radius;    /* (1 = one radian or one characteristic length) */
    bool contradicted;          /* forward, all: spare readings disagree with this posture */
    bool within_limits;
    size_t n_limit;             /* limits broken, the first LW_MAX_LIMITS_BROKEN */
    lw_limit limit[LW_MAX_LIMITS_BROKEN];
    double residual_position_m; /* worst closure error */
    double residual_angle_rad;
} lw_solution;

typedef struct lw_found { /* -1 = not known */
    int complex_count;
    int real;
    int within_limits;
    int not_converged;
} lw_found;

typedef struct lw_inverse_ask {
    size_t tool;
    const lw_spec_tool *tool_written; /* overrides `tool` unless NULL */
    lw_pose_ask pose;
    bool has_mode;
    lw_mode mode;
    const lw_posture_ask *near; /* NULL: none */
} lw_inverse_ask;

typedef struct lw_inverse_answer {
    lw_outcome outcome; /* OK within limits; LIMIT, OUT_OF_REACH, OTHER_MODE, UNDECIDED */
    const char *reason; /* one sentence for outcomes other than OK, static; may be NULL */
    lw_found found;
    bool complete;
    lw_basis basis;
    size_t n_solution;  /* after the filters mode and near */
    const lw_solution *solution;
    /* freedoms the pose leaves open (a redundant arm): the list holds samples */
    size_t dimension;
    double off_by_position_m; /* OUT_OF_REACH by members that contradict: how far the nearest is */
    double off_by_angle_rad;
    size_t off_by_limb;       /* limb that cannot reach; SIZE_MAX if not one limb */
    double off_by_limb_m;     /* by how much it is too short or too long, 0 if not known */
} lw_inverse_answer;

lw_code lw_inverse(const lw_inverse_answer **out, const lw_model *model, const lw_inverse_ask *ask,
                   lw_work *work, lw_err *err);

typedef struct lw_forward_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    const lw_posture_ask *readings; /* LW_BY_DRIVES, its near picks the assembly */
    bool all;
} lw_forward_ask;

typedef struct lw_forward_answer {
    lw_outcome outcome; /* OK, LIMIT, OUT_OF_REACH (does not assemble), UNDECIDED (a wall on the
                         * way), SINGULAR, INCONSISTENT */
    const char *reason;
    lw_found found;
    bool complete;
    lw_basis basis;
    size_t n_solution;
    const lw_solution *solution;
    /* freedoms that the readings leave open; the last solution is then one posture of a motion */
    size_t dimension;
    /* more drives than freedoms: reading minus fitted reading, and what resolution and backlash
     * allow at 99.9 %; n_disagreement = 0 otherwise */
    size_t n_disagreement;
    double disagreement[LW_MAX_DRIVES];
    double allowed[LW_MAX_DRIVES];
    double chi_square, chi_square_limit;
    int suspect;        /* drive number, -1 = none can be named */
    double wall_at;     /* UNDECIDED by a wall: share of the way, 0..1 */
    int iterations;
} lw_forward_answer;

lw_code lw_forward(const lw_forward_answer **out, const lw_model *model, const lw_forward_ask *ask,
                   lw_work *work, lw_err *err);

/* Any posture to one configuration: the common first step of jacobian, margin and reach. outcome is
 * OK or the reason why there is none. The returned solution is borrowed until the next query. */
typedef struct lw_posture_answer {
    lw_outcome outcome;
    const char *reason;
    const lw_solution *solution; /* NULL unless outcome is OK or LIMIT */
} lw_posture_answer;
lw_code lw_posture(const lw_posture_answer **out, const lw_model *model, size_t tool,
                   const lw_spec_tool *tool_written, const lw_posture_ask *ask, lw_work *work,
                   lw_err *err);

typedef struct lw_jacobian_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    const lw_posture_ask *posture;
    bool has_point;
    double point_m[3];   /* reference point on the tool body, in the frame named by in_tool */
    bool in_tool;        /* twists and point in the tool frame; else fixed frame */
} lw_jacobian_ask;

typedef struct lw_jacobian_answer {
    /* OK; SINGULAR when one of the two matrices does not exist (which: flags) */
    lw_outcome outcome;
    const char *reason;
    const lw_solution *solution;
    size_t n_output;     /* mobility: rows are output rates */
    size_t n_drive;
    /* d output / d drive, n_output x n_drive row-major: servos share by least squares weighted by
     * 1/resolution when there are more drives than freedoms. Output rates: m/s of the reference
     * point, rad/s, joint rates. */
    bool has_forward;
    double forward[LW_MAX_OUTPUTS * LW_MAX_DRIVES];
    /* d drive / d output, n_drive x n_output */
    bool has_inverse;
    double inverse[LW_MAX_DRIVES * LW_MAX_OUTPUTS];
    /* full tool twist (vx vy vz wx wy wz at the reference point) per drive rate, 6 x n_drive */
    double twist[6 * LW_MAX_DRIVES];
    double condition_forward; /* with lengths over the characteristic length; 0 = not finite */
} lw_jacobian_answer;

lw_code lw_jacobian(const lw_jacobian_answer **out, const lw_model *model,
                    const lw_jacobian_ask *ask, lw_work *work, lw_err *err);

typedef enum lw_margin_name {
    LW_MARGIN_ACCURACY,
    LW_MARGIN_LOAD,
    LW_MARGIN_SPEED,
    LW_MARGIN_SPARE,
    LW_MARGIN_TRAVEL,
    LW_MARGIN_HOLD,
    LW_MARGIN_COUNT
} lw_margin_name;
const char *lw_margin_word(lw_margin_name name); /* "accuracy" ... */

#define LW_MARGIN_CAP 1e6 /* no margin is answered greater */

typedef struct lw_margin_value {
    bool asked;        /* false: the document states no need, value means nothing */
    double value;      /* accuracy, load, speed, spare: ratio, 1 = just enough; travel: share of the
                        * range left 0..0.5; hold: 0..1. Never infinite: capped at 1e6. */
    int drive;         /* the drive that sets it, -1 = none */
    size_t coord;      /* travel: the coordinate nearest to its limit; SIZE_MAX = none */
    bool has_direction;
    double direction[6]; /* worst direction: unit force/speed/error in x y z, then about x y z */
    double amount;     /* the physical figure behind: m, N or Nm, m/s ... see `amount_unit` */
    const char *amount_unit; /* "m", "rad", "N", "Nm", "m/s", "rad/s", "" */
} lw_margin_value;

typedef struct lw_margin_min { /* thresholds */
    bool asked[LW_MARGIN_COUNT];
    double value[LW_MARGIN_COUNT];
} lw_margin_min;

typedef struct lw_rank_info {
    size_t rows, columns, rank, rank_generic;
    size_t n_singular;
    double singular[LW_MAX_OUTPUTS]; /* descending, dimensionless */
    double threshold;                /* relative to the largest */
} lw_rank_info;

enum { LW_CLASS_FORWARD = 1, LW_CLASS_INVERSE = 2, LW_CLASS_CONSTRAINT = 4 };

/* A motion of the tool, or a motion that is lost, as a screw of the fixed frame. */
typedef enum lw_screw_kind {
    LW_SCREW_NONE,  /* the tool has no part in it */
    LW_SCREW_SHIFT, /* along the axis */
    LW_SCREW_TURN,  /* about the axis */
    LW_SCREW_TWIST  /* both at once */
} lw_screw_kind;

typedef struct lw_screw {
    lw_screw_kind kind;
    double axis[3];    /* unit */
    double point_m[3]; /* point of the axis nearest to the tool point */
    double pitch_m;    /* TWIST: shift along the axis per full turn */
} lw_screw;

/* One singular value of a rate matrix and what belongs to it. Shares are dimensionless, lengths
 * over the characteristic length, the largest joint share is 1. */
typedef struct lw_weak {
    double value;
    bool lost; /* below the threshold: counts as zero */
    /* Drives: the motion that the drives hold least (lost: not at all). Tool: the motion that the
     * joints give least (lost: not at all). A lost motion is a shift along this very line, a turn
     * about this direction, or, with a pitch, every motion with shift + pitch * turns not zero. */
    lw_screw screw;
    double output[LW_MAX_OUTPUTS]; /* the same in outputs: unit vector, lengths scaled */
    double drive[LW_MAX_DRIVES];   /* drive shares */
    double coord[LW_MAX_COORDS];   /* joint shares; tool, lost: joints that move with it at rest */
    double ball[LW_MAX_BALLS];     /* turning shares of spherical joints, >= 0 */
    bool limb[LW_MAX_LIMBS];       /* limbs with a joint that moves */
} lw_weak;
enum { LW_MAX_WEAK = 6 };

/* How to get away from a singularity: the motion in which the smallest singular value grows
 * fastest, exact to first order (second derivatives of the closure rows). */
typedef enum lw_leave_by {
    LW_LEAVE_TOOL,   /* the unit step is measured at the outputs */
    LW_LEAVE_DRIVES, /* at the drives, where the outputs can not tell */
    LW_LEAVE_JOINTS  /* over all joints, where neither can */
} lw_leave_by;

typedef struct lw_leave {
    bool known; /* false: to first order no direction makes it grow */
    lw_leave_by by;
    bool either_way; /* lost: the opposite direction leaves as well */
    double rate;     /* growth per unit step; 1 = one radian or one characteristic length */
    double output[LW_MAX_OUTPUTS]; /* the unit step, m or rad */
    double drive[LW_MAX_DRIVES];
} lw_leave;

typedef struct lw_singular_answer {
    size_t freedoms;          /* of the posture: more than the mobility where constraints fail */
    size_t n_drives, n_tool;  /* all that are lost, else the one that is weakest */
    lw_weak drives[LW_MAX_WEAK];
    lw_weak tool[LW_MAX_WEAK];
    lw_leave leave_drives, leave_tool;
    double hold_braked[LW_MAX_DRIVES]; /* a drive stuck: hold of the others over what it leaves */
    size_t freedoms_braked[LW_MAX_DRIVES];
    bool no_longer_spare[LW_MAX_DRIVES];
    size_t n_preload;         /* every preload direction: an orthonormal basis, Nm and N times the
                               * characteristic length */
    double preload[LW_MAX_DRIVES][LW_MAX_DRIVES];
} lw_singular_answer;

typedef struct lw_margin_answer {
    lw_outcome outcome;  /* OK, or SINGULAR where hold is lost; posture outcomes otherwise */
    const char *reason;
    const lw_solution *solution;
    unsigned classes;    /* LW_CLASS_ bits, 0 = regular */
    bool held;           /* with all drives locked nothing moves, to first order */
    lw_rank_info drives; /* A K */
    lw_rank_info tool;   /* T K */
    lw_rank_info closure;/* G: singular values of the kept rows: smallest only */
    double closure_smallest, closure_generic;
    size_t n_limb;       /* limbs at an inverse singularity are flagged */
    bool limb_singular[LW_MAX_LIMBS];
    double limb_value[LW_MAX_LIMBS]; /* scaled determinant -1..1 */
    /* each drive left out in turn (free): hold that remains, and the signed minor */
    size_t n_drive;
    double hold_without[LW_MAX_DRIVES];
    bool indispensable[LW_MAX_DRIVES];
    double preload[LW_MAX_DRIVES];   /* unit preload direction where redundancy is 1, else 0 */
    lw_margin_value margin[LW_MARGIN_COUNT];
    double spare_hold;   /* hold after losing the drive whose loss costs most of it, */
    int spare_hold_drive;/* and that drive; -1 without drives */
    const lw_singular_answer *singular; /* NULL in answers of reach */
    int least;           /* lw_margin_name of the least ratio margin asked, -1 = none asked */
    double hold_length_m;/* characteristic length behind hold */
} lw_margin_answer;

lw_code lw_margin(const lw_margin_answer **out, const lw_model *model, size_t tool,
                  const lw_spec_tool *tool_written, const lw_posture_ask *posture, lw_work *work,
                  lw_err *err);

/* Thresholds that hold when the question gives none: needs.margin_min, else 1 where a need is
 * stated. `number` (has_number) replaces them for accuracy, load and speed. */
void lw_margin_min_default(lw_margin_min *out, const lw_model *model, bool has_number,
                           double number);

typedef struct lw_reach_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    lw_pose_ask pose;
    const lw_posture_ask *from; /* NULL: the posture alone is judged */
    bool has_mode;              /* else the mode of `from`, else the default mode */
    bool any_mode;
    lw_mode mode;
    lw_margin_min margin_min;
    size_t budget;              /* with `from`: boxes of the proof; 0: the default of moves */
    const atomic_bool *abort;   /* NULL, or set by the caller's clock: see path.h */
} lw_reach_ask;

typedef struct lw_reach_answer {
    lw_outcome outcome;
    const char *reason;
    bool move_checked;            /* with `from`: the straight move was examined, and outcome is
                                   * OK only where it is proved; false: the posture alone */
    double move_at;               /* how far the move is good, 0..1 */
    lw_found found;
    bool complete;
    lw_basis basis;
    lw_mode asked_mode;
    const lw_solution *solution;  /* the posture judged, NULL if none */
    const lw_margin_answer *margin; /* at that posture, NULL if none */
    int failed_margin;            /* lw_margin_name below its threshold, -1 none */
    size_t n_other;               /* other modes that would do (within limits) */
    lw_mode other[LW_MAX_MODES];
    double off_by_position_m, off_by_angle_rad, off_by_limb_m;
    size_t off_by_limb;
    const lw_forward_answer *from; /* the readings of `from` as fitted; NULL without drives */
} lw_reach_answer;

lw_code lw_reach(const lw_reach_answer **out, const lw_model *model, const lw_reach_ask *ask,
                 lw_work *work, lw_err *err);

/* Pose helpers for the edge. */
void lw_quat_from_rot(double quat[4], const double rot[9]); /* w >= 0 */
void lw_rot_from_quat(double rot[9], const double quat[4]);
void lw_zyx_from_rot(double zyx_rad[3], const double rot[9]); /* yaw, pitch, roll */
void lw_rot_from_zyx(double rot[9], const double zyx_rad[3]);

#endif
