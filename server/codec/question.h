/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One question as understood: SI numbers and indices of one mechanism, and how its answer is to be
 * written. Filled by question_in.c (JSON), question_query.c (query string), path_in.c and
 * path_table.c (moves), read by api/ask.c and answer_out.c. About 45 kB: it lives in a lane's
 * scratch, never on the stack. */
#ifndef LWD_QUESTION_H
#define LWD_QUESTION_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <leeway/path.h>

#include "edge.h"

typedef enum lwd_asked {
    LWD_ASK_INVERSE,
    LWD_ASK_FORWARD,
    LWD_ASK_JACOBIAN,
    LWD_ASK_MARGIN,
    LWD_ASK_REACH,
    LWD_ASK_PATH,
    LWD_ASK_TRAVEL, /* "free-travel" */
    LWD_ASK_COUNT
} lwd_asked;

/* "inverse", "forward", ...: the last segment of the route. */
const char *lwd_asked_word(lwd_asked kind);

enum {
    LWD_REF_MAX = 32,
    LWD_EXPECT_MAX = 64,
    LWD_BATCH_MAX = 256,
    LWD_TIMEOUT_DEFAULT = 60000, /* ms: paths, moves and distances that say nothing else */
    LWD_TIMEOUT_MOST = 600000,
    LWD_DISTANCE_BUDGET_MOST = 1000000, /* cells */
    LWD_PIECES_MAX = 4096        /* proved intervals that a certificate may list */
};

/* The moves of a path, and room for what is found of each. About 600 kB, and the intervals of a
 * certificate on top: made when a lane gets its first path, see lwd_path_room_new. */
typedef struct lwd_path {
    size_t n;
    lw_move move[LW_MAX_MOVES];
    char line[LW_MAX_MOVES][LWD_REF_MAX + 1]; /* tags, "" where not given */
    size_t row[LW_MAX_MOVES]; /* of the table the moves came in, from 1; 0: not from a table */
    lw_move_answer answer[LW_MAX_MOVES];
    lw_proof_piece *piece;    /* [LWD_PIECES_MAX]; NULL until a certificate is asked for */
} lwd_path;

/* What must be known before the mechanism is looked up. */
typedef struct lwd_question_head {
    bool has_ref;
    char ref[LWD_REF_MAX + 1];
    int64_t revision;                /* 0: the one that answers by default */
    char expect[LWD_EXPECT_MAX + 1]; /* "": not given; else 8 or 64 hex digits, lower case */
} lwd_question_head;

typedef struct lwd_question {
    lwd_asked kind;
    lwd_question_head head;
    lwd_units units;           /* of the question and of its answer */
    size_t tool;
    bool tool_is_written;
    lw_spec_tool tool_written;
    lwd_form form;             /* how poses are written in the answer */
    lw_posture_ask posture;    /* inverse and reach: LW_BY_POSE; forward: LW_BY_DRIVES */
    lw_posture_ask near;       /* what posture.near points at */
    bool has_from;
    lw_posture_ask from;
    lw_posture_ask from_near;
    bool any_mode;             /* reach: "mode": "any" */
    bool all;                  /* forward */
    bool has_point;            /* jacobian */
    double point_m[3];
    bool in_tool;
    bool has_margin_min;       /* reach, path, free-travel */
    bool margin_min_is_number;
    double margin_min_number;
    lw_margin_min margin_min;  /* the members of an object */
    int64_t budget;            /* reach, path, free-travel, distance: 0 = not given */
    int64_t timeout_ms;        /* the same: 0 = not given */
    bool certificate;          /* path */
    lwd_path *path;            /* path: the lane's room; else left alone */
    double travel_m;           /* free-travel: how far is looked, 0 = not given */
    double travel_rad;
    bool has_distance;         /* margin */
} lwd_question;

#endif
