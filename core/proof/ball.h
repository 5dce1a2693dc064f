/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Balls of tool poses, proved free of singularities. The ball of radius r about a pose holds every
 * pose that a motion of length r reaches, |dx|^2 = |dp|^2 + (length * turn)^2.
 *
 * A machine that can be judged this way is one whose tool body (and bodies sliding on it) hang on
 * rods: each rod ends on a fixed point, on a carriage on a straight rail, or on a crank, and the
 * carriage or crank has a drive of its own. A planar two-link limb is a crank whose second link is
 * the rod. With the drives locked such a rod is a wrench on the tool; the drives hold the tool
 * where the wrenches have full column rank.
 *
 * Callers: core/query/distance*.c. A lwi_ball belongs to one work object. */
#ifndef LWI_BALL_H
#define LWI_BALL_H

#include "../model/model.h"

enum {
    LWI_BALL_RODS = 24,
    LWI_BALL_DIRS = 6, /* freedoms of the tool */
    LWI_BALL_COLS = 8, /* freedoms of the tool body without any limb, and slides on it */
    LWI_BALL_PAIRS = LWI_BALL_DIRS * (LWI_BALL_DIRS + 1) / 2,
    LWI_BALL_WAYS = 3,
    LWI_BALL_CELLS = 3072
};

typedef enum lwi_rod_foot { LWI_FOOT_POINT, LWI_FOOT_LINE, LWI_FOOT_CIRCLE } lwi_rod_foot;

typedef struct lwi_ball_rod {
    lwi_rod_foot foot;
    size_t limb;                    /* SIZE_MAX: none */
    int spec_rod;                   /* rod of the document, -1: a link */
    double at[3];                   /* POINT, a point of the LINE, the centre of the CIRCLE */
    double axis[3];                 /* LINE, CIRCLE */
    double radius_m;                /* CIRCLE */
    bool flat;                      /* CIRCLE: the end keeps its height over the circle's plane */
    double length_m;                /* LINE, CIRCLE */
    double sign;                    /* of the rod along the foot's motion: the branch */
    double arm[3];                  /* from the tool point to the rod's end */
    double shift[LWI_BALL_DIRS][3]; /* motion of the end by each direction, turns left out */
    bool holds;                     /* drive locked: a wrench */
    int slide;                      /* column of the slide its body stands on, -1: the tool body */
    double slide_axis[3];
} lwi_ball_rod;

typedef struct lwi_ball {
    double length_m;
    double tool_m[3]; /* the tool point */
    lw_frame tool;
    size_t n_dir;                      /* directions: orthonormal in the metric */
    double shift[LWI_BALL_DIRS][3];    /* of the tool point, m per m */
    double turn[LWI_BALL_DIRS][3];     /* rad per m */
    int output[LWI_BALL_DIRS];         /* output joint that the direction moves, -1 none */
    double output_rate[LWI_BALL_DIRS]; /* its rate, m or rad per m */
    size_t n_turn;                     /* directions that turn */
    size_t n_col;
    double col[LWI_BALL_COLS][6]; /* twists the tool body is free to make: orthonormal */
    size_t n_twist;               /* rows of col; slides follow */
    size_t n_rod;
    lwi_ball_rod rod[LWI_BALL_RODS];
    bool forward; /* the rods tell the forward side */
    bool inverse; /* the rods tell the inverse side */
} lwi_ball;

/* A rod at a pose. */
typedef struct lwi_rod_at {
    bool real;      /* the foot exists */
    double slack_m; /* how far the end may still move until it does not, < 0: beyond */
    double arm[3], end[3];
    double u[3];   /* unit vector along the rod */
    double tau[3]; /* motion of the foot per unit of its coordinate */
    double foot[3];
    double along; /* u . tau / |tau| */
    double length_m;
} lwi_rod_at;

/* First and second derivatives along directions, and what a ball test needs. */
typedef struct lwi_ball_local {
    lwi_rod_at rod[LWI_BALL_RODS];
    size_t n, m;
    double matrix[LWI_BALL_RODS * LWI_BALL_COLS]; /* n x m */
    double rate[LWI_BALL_DIRS][LWI_BALL_RODS * LWI_BALL_COLS];
    double sigma[LWI_BALL_COLS];
    double left[LWI_BALL_RODS * LWI_BALL_COLS], right[LWI_BALL_COLS * LWI_BALL_COLS];
    double over[LWI_BALL_WAYS][LWI_BALL_COLS]; /* P^-1 */
    /* sums of T P^-1 T over whitened derivatives T */
    double first[LWI_BALL_WAYS][LWI_BALL_COLS * LWI_BALL_COLS];
    double second[LWI_BALL_WAYS][LWI_BALL_COLS * LWI_BALL_COLS];
    double change[LWI_BALL_DIRS]; /* norm of each whitened derivative */
    bool regular;
} lwi_ball_local;

typedef struct lwi_ball_cell {
    double c[LWI_BALL_DIRS], w[LWI_BALL_DIRS]; /* centre and half widths */
    double near;
} lwi_ball_cell;

typedef struct lwi_ball_work {
    lwi_ball ball;
    lwi_ball turned; /* the same with directions turned, while cells are cut */
    lwi_ball_local local;
    size_t n_cell;
    lwi_ball_cell cell[LWI_BALL_CELLS];
} lwi_ball_work;

/* Fills directions and, where the machine is of the kind above, rods. False: the tool's pose does
 * not follow from the outputs. */
bool lwi_ball_make(lwi_ball *out, const lw_model *model, const lw_spec_tool *tool,
                   const lw_solution *sol);

/* Rods at the pose y (one number a direction, m); false where one is not real. */
bool lwi_ball_rods(lwi_rod_at *out, const lwi_ball *ball, const double *y);
/* The wrench matrix, n x m; rates along the directions (NULL: none). */
size_t lwi_ball_matrix(double *matrix, double (*rate)[LWI_BALL_RODS * LWI_BALL_COLS],
                       const lwi_ball *ball, const lwi_rod_at *rod);
/* How far an end moves, at most, while the tool moves by 1. */
double lwi_ball_reach(const lwi_ball *ball, const lwi_ball_rod *rod);

/* Bounds of first and second derivatives along any unit motion within r of the place of `at`. */
typedef struct lwi_rod_bounds {
    bool holds;      /* false: the rod may come to a dead point */
    double p1, p2;   /* of the end, m per m */
    double u1, u2;   /* of the unit vector */
    double q1, q2;   /* of the foot's coordinate, rad or m */
    double length_m; /* least length of a rod on a fixed point */
} lwi_rod_bounds;
void lwi_ball_bounds(lwi_rod_bounds *out, const lwi_ball *ball, const lwi_ball_rod *rod,
                     const lwi_rod_at *at, double r);

/* The same of the wrench matrix, Frobenius norm. */
void lwi_ball_norms(double *first, double *second, const lwi_ball *ball, const lwi_rod_at *at,
                    double r);

/* The largest radius about the posture itself that one evaluation proves. */
double lwi_ball_forward_once(const lwi_ball *ball, lwi_ball_local *local, double most_m);
double lwi_ball_inverse_once(const lwi_ball *ball, size_t *limb);

/* Branch and bound: cells nearest first, until the budget is used or `most_m` reached. Starts from
 * a radius proved already; returns what is proved. `guide`: cells are cut along it and square to
 * it (NULL or zero: along the directions). */
typedef enum lwi_ball_side { LWI_BALL_FORWARD, LWI_BALL_INVERSE } lwi_ball_side;
double lwi_ball_cells(lwi_ball_work *work, lwi_ball_side side, const double *guide, double proved_m,
                      double most_m, size_t budget, size_t *cells, const atomic_bool *abort);

/* Pose of the tool at y. */
void lwi_ball_pose(lw_frame *tool, const lwi_ball *ball, const double *y);
/* True where the straight motion from the posture to y is proved to exist in the same branch. */
bool lwi_ball_way(const lwi_ball *ball, const double *y);

/* For the files of this kind alone. */
/* Frobenius norm of the wrenches' third derivative along any unit motion within r. */
double lwi_ball_third(const lwi_ball *b, const lwi_rod_at *rod, double r);

typedef enum lwi_ball_verdict { LWI_BALL_OPEN, LWI_BALL_PROVED, LWI_BALL_EMPTY } lwi_ball_verdict;
/* The box about y of these half widths, as far as it lies within reach of y. */
lwi_ball_verdict lwi_ball_test(lwi_ball_local *local, const lwi_ball *ball, lwi_ball_side side,
                               const double *y, const double *width, double reach);

/* What ball.c asks of ball_rods.c. */
#define LWI_BALL_UP (1.0 + 1e-9)

typedef struct lwi_rod_rates {
    double end[LWI_BALL_DIRS][3]; /* P' */
    double arm[LWI_BALL_DIRS][3];
    double turned[LWI_BALL_DIRS][3]; /* the part by turning: w x arm */
    double u[LWI_BALL_DIRS][3];
    double foot[LWI_BALL_DIRS]; /* q' */
} lwi_rod_rates;

typedef struct lwi_unit_bounds {
    double u1, u2, u3;
} lwi_unit_bounds;

double lwi_ball_spread(const double (*v)[3], size_t n);
double lwi_ball_lever(const lwi_ball *b, const double arm[3]);
void lwi_ball_wrench(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const double u[3],
                     const double moment[3]);
void lwi_ball_rates(lwi_rod_rates *r, const lwi_ball *b, const lwi_ball_rod *rod,
                    const lwi_rod_at *at);
void lwi_ball_moment(double out[3], const double a[3], const double u[3], double length_m);
void lwi_ball_bend(double *out, const lwi_ball *b, const lwi_ball_rod *rod, const lwi_rod_at *at,
                   const lwi_rod_rates *r, size_t k, size_t l);
double lwi_ball_along(const lwi_ball_rod *rod, const lwi_rod_at *at, double d);
void lwi_ball_unit(lwi_unit_bounds *out, const lwi_ball_rod *rod, double length, double s,
                   double p1, double p2, double p3);

#endif
