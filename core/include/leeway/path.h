/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves proved, not sampled: a path is a list of moves from a posture; "ok" is said only where
 * every point of the move is proved to exist in the branch it started in, within limits, held by
 * the drives, and above the thresholds. Work is counted in boxes (intervals tried), so that the
 * same question gets the same answer everywhere. Conventions are those of query.h: answers live
 * in the work object until the next query with it, and no query allocates. */
#ifndef LEEWAY_PATH_H
#define LEEWAY_PATH_H

#include <stdatomic.h>

#include <leeway/query.h>

enum {
    LW_MAX_MOVES = 256,
    LW_PATH_BUDGET = 4096,       /* boxes a move, when the question names none */
    LW_PATH_BUDGET_MOST = 262144
};

typedef enum lw_move_kind {
    LW_MOVE_LINE,   /* tool point on a straight line, orientation by one turn about a fixed axis,
                     * output joints evenly */
    LW_MOVE_CIRCLE, /* tool point on the circle through start, via and end; orientation as LINE */
    LW_MOVE_JOINTS  /* readings evenly; with spare drives the best-held set leads, the others
                     * follow */
} lw_move_kind;

typedef struct lw_move {
    lw_move_kind kind;
    lw_pose_ask pose;    /* LINE, CIRCLE: the end; JOINTS: unless has_drives */
    lw_pose_ask via;     /* CIRCLE: only its position counts */
    bool has_drives;     /* JOINTS: the end by readings */
    bool has_drive[LW_MAX_DRIVES];
    double drive[LW_MAX_DRIVES]; /* drive coordinates, m or rad */
} lw_move;

struct lw_move_answer;
struct lw_proof_piece;

typedef struct lw_path_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    const lw_posture_ask *from;
    size_t n_move;
    const lw_move *move;
    lw_margin_min margin_min;
    size_t budget;       /* boxes a move; 0: LW_PATH_BUDGET */
    struct lw_move_answer *store; /* the caller's room for n_move answers */
    size_t piece_room;            /* certificate: the caller's room for proved intervals, 0 none */
    struct lw_proof_piece *piece;
    const atomic_bool *abort; /* NULL, or set by the caller's clock from another thread: the answer
                               * is then undecided and says so */
} lw_path_ask;

/* Least value of a margin along the part of a move that was proved. */
typedef struct lw_path_least {
    bool known;          /* asked for by a threshold or by the document's needs */
    double at_least;     /* proved for every point of the proved part */
    double value;        /* least value met at the points looked at: at_least <= true <= value */
    double at;           /* where that is, 0..1 of the move */
} lw_path_least;

/* What stopped a move. */
typedef enum lw_stop {
    LW_STOP_NONE,
    LW_STOP_LIMIT,       /* n_limit, limit */
    LW_STOP_MARGIN,      /* margin */
    LW_STOP_FORWARD,     /* hold is lost */
    LW_STOP_INVERSE,     /* a limb comes to an inverse singularity: limb */
    LW_STOP_REACH,       /* a limb cannot follow: limb */
    LW_STOP_BUDGET,      /* boxes ran out */
    LW_STOP_RESOLUTION,  /* the smallest interval was not enough */
    LW_STOP_ABORT,       /* the caller's clock */
    LW_STOP_UNSUPPORTED  /* reason says what is not proved by this version */
} lw_stop;

typedef struct lw_move_answer {
    bool examined;       /* false after a break */
    lw_outcome outcome;  /* OK: proved. LOW_MARGIN, LIMIT, OUT_OF_REACH, SINGULAR, OTHER_MODE: a
                          * witness at `at`. UNDECIDED: the interval in open_low..open_high */
    const char *reason;  /* one sentence, what would help; NULL where OK */
    lw_stop stop;
    double at;           /* 0..1; 1 where OK; the witness, or how far the proof came */
    double open_low, open_high;
    size_t limb;         /* SIZE_MAX: none */
    int drive;           /* -1: none */
    int margin;          /* lw_margin_name, -1: none */
    size_t n_limit;
    lw_limit limit[4];
    lw_path_least least[LW_MARGIN_COUNT];
    double length_m, turn_rad; /* of the tool along the move */
    size_t boxes;        /* intervals tried */
    bool has_end;              /* the end was reached: its readings and tool pose */
    double end_drive[LW_MAX_DRIVES];
    lw_frame end_tool;
    size_t first_piece, n_piece; /* certificate: pieces of this move */
} lw_move_answer;

/* One proved interval: what an independent checker needs to see it again. */
typedef struct lw_proof_piece {
    double low, high;    /* of the move, 0..1, dyadic */
    double tube;         /* radius about the predictor, scaled */
    double sigma;        /* proved bound of the solved rows' least singular value */
    double hold;         /* proved bound of the drive rates' least singular value */
    double drive_low[LW_MAX_DRIVES], drive_high[LW_MAX_DRIVES]; /* proved ranges, m or rad */
    double margin[LW_MARGIN_COUNT]; /* proved bounds, 0 where not asked */
} lw_proof_piece;

typedef struct lw_path_answer {
    lw_outcome outcome;  /* the worst of the moves; of `from` where that has no posture */
    const char *reason;
    const lw_solution *start; /* NULL where `from` names no posture */
    const lw_forward_answer *from; /* readings of `from` as fitted; NULL without drives */
    bool truncated;      /* certificate: more pieces than are kept */
    size_t n_move;
    const lw_move_answer *move;
    size_t n_piece;
    const lw_proof_piece *piece;
    size_t boxes;
} lw_path_answer;

lw_code lw_path(const lw_path_answer **out, const lw_model *model, const lw_path_ask *ask,
                lw_work *work, lw_err *err);

/* How far the tool can go along and about each of its own axes from a posture, straight, both ways.
 * Each way is a LINE move of the given reach, proved as far as it goes. */
typedef struct lw_travel_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    const lw_posture_ask *posture;
    double reach_m, reach_rad; /* how far is looked; 0: twice the characteristic length, pi / 2 */
    lw_margin_min margin_min;
    size_t budget;             /* boxes a way */
    const atomic_bool *abort;
} lw_travel_ask;

typedef struct lw_travel_way {
    bool possible;      /* false: the tool has no such freedom here */
    double at_least;    /* proved, m or rad */
    bool blocked;       /* a witness was found at blocked_at; else nothing blocks up to the reach
                         * where at_least equals it, or it is undecided in between */
    double blocked_at;
    lw_outcome outcome; /* of the way: OK, or what stopped it */
    lw_stop stop;
    size_t limb;
    int drive;
    int margin;
    size_t n_limit;
    lw_limit limit[4];
} lw_travel_way;

typedef struct lw_travel_answer {
    lw_outcome outcome;
    const char *reason;
    const lw_solution *start;
    lw_travel_way way[6][2]; /* x y z, about x y z of the tool; against and along the axis */
    size_t boxes;
} lw_travel_answer;

lw_code lw_travel(const lw_travel_answer **out, const lw_model *model, const lw_travel_ask *ask,
                  lw_work *work, lw_err *err);

/* How far the nearest singular postures and limits are, as a ball in tool space: |dx|^2 = |dp|^2 +
 * (characteristic length * rotation)^2. */
typedef struct lw_distance_side {
    bool none;           /* proved that there is none anywhere; then nothing else is known */
    bool known_least;    /* at_least_m was proved */
    double at_least_m;
    bool known_most;     /* a posture at at_most_m was found and proved to lie beyond */
    double at_most_m;
    lw_frame tool;       /* the tool there */
    double drive[LW_MAX_DRIVES];
    size_t limb;         /* inverse side: which limb; SIZE_MAX: none */
    lw_limit limit;      /* limit side */
} lw_distance_side;

typedef struct lw_distance_ask {
    size_t tool;
    const lw_spec_tool *tool_written;
    const lw_posture_ask *posture;
    size_t budget;       /* cells; 0: one evaluation */
    const atomic_bool *abort;
} lw_distance_ask;

typedef struct lw_distance_answer {
    lw_outcome outcome;
    const char *reason;
    const lw_solution *solution;
    double length_m;     /* characteristic length */
    lw_distance_side forward, inverse, limit;
    size_t cells;
} lw_distance_answer;

lw_code lw_distance(const lw_distance_answer **out, const lw_model *model,
                    const lw_distance_ask *ask, lw_work *work, lw_err *err);

#endif
