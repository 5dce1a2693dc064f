/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Branch and bound over a ball of tool poses, in coordinates y about the posture: p = p0 + shift,
 * rotation = exp(turn) R0. Cells are boxes in y; the true distance of two poses is no more than
 * that of their coordinates (turns: the exponential map of the rotations does not lengthen, since
 * their curvature is not negative), so a ball about a cell's centre of its half diagonal holds the
 * cell.
 *
 * Cells are taken nearest first, so that what is proved at any time is the distance of the nearest
 * open cell. A proof in each cell is of that cell's own continuation from its centre; the centre is
 * solved by formula in the branch of the posture (the sign of each rod along its foot's motion),
 * and in a proved cell no rod changes that sign. One pose has one such solution, so neighbours
 * agree where they meet, and all together speak of one continuous branch. Cells where some rod
 * cannot reach hold no posture. */
#include "ball.h"

#include "../math/vec3.h"

static double near_of(const lwi_ball *b, const lwi_ball_cell *c)
{
    double sum = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        double d = fmax(fabs(c->c[k]) - c->w[k], 0.0);
        sum += d * d;
    }
    return sqrt(sum) * (1.0 - 1e-14);
}

static double far_of(const lwi_ball *b, const lwi_ball_cell *c)
{
    double sum = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        double d = fabs(c->c[k]) + c->w[k];
        sum += d * d;
    }
    return sqrt(sum) * (1.0 + 1e-14);
}

/* Makes a cell smaller, but no smaller than what of it lies within `most`. */
static void trim(const lwi_ball *b, lwi_ball_cell *c, double most)
{
    double least[LWI_BALL_DIRS];
    double sum = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        double d = fmax(fabs(c->c[k]) - c->w[k], 0.0);
        least[k] = d * d;
        sum += least[k];
    }
    for (size_t k = 0; k < b->n_dir; k++) {
        double room = most * most - (sum - least[k]);
        double limit = sqrt(fmax(room, 0.0)) * (1.0 + 1e-12) + 1e-12 * most;
        double low = fmax(c->c[k] - c->w[k], -limit);
        double high = fmin(c->c[k] + c->w[k], limit);
        if (low < high) {
            c->c[k] = 0.5 * (low + high);
            c->w[k] = 0.5 * (high - low) * (1.0 + 1e-12);
        }
    }
}

/* How far from the centre what lies within `most` can be: |y - c|^2 = |y|^2 - 2 y.c + |c|^2. */
static double reach_of(const lwi_ball *b, const lwi_ball_cell *c, double most)
{
    double square = most * most;
    for (size_t k = 0; k < b->n_dir; k++) {
        square += 2.0 * fabs(c->c[k]) * c->w[k] - c->c[k] * c->c[k];
    }
    return sqrt(fmax(square, 0.0)) * (1.0 + 1e-12) + 1e-12 * most;
}

/* The same machine with orthonormal directions of which the first is along the guide. */
static void turn(lwi_ball *out, const lwi_ball *b, const double *guide)
{
    double e[LWI_BALL_DIRS][LWI_BALL_DIRS] = {{0}};
    size_t n = b->n_dir;
    size_t count = 0;
    *out = *b;
    for (size_t q = 0; q <= n && count < n && guide != NULL; q++) {
        double *x = e[count];
        double size = 0.0;
        for (size_t k = 0; k < n; k++) {
            x[k] = q == 0 ? guide[k] : (double)(k == q - 1);
            size += x[k] * x[k];
        }
        if (!(size > 0.0)) {
            return;
        }
        for (size_t k = 0; k < n; k++) {
            x[k] /= sqrt(size);
        }
        for (int pass = 0; pass < 2; pass++) {
            for (size_t j = 0; j < count; j++) {
                double dot = 0.0;
                for (size_t k = 0; k < n; k++) {
                    dot += e[j][k] * x[k];
                }
                for (size_t k = 0; k < n; k++) {
                    x[k] -= dot * e[j][k];
                }
            }
        }
        size = 0.0;
        for (size_t k = 0; k < n; k++) {
            size += x[k] * x[k];
        }
        for (size_t k = 0; k < n && size > 0.01; k++) {
            x[k] /= sqrt(size);
        }
        count += size > 0.01;
    }
    for (size_t k = 0; k < n && count == n; k++) {
        memset(out->shift[k], 0, sizeof out->shift[k]);
        memset(out->turn[k], 0, sizeof out->turn[k]);
        for (size_t j = 0; j < n; j++) {
            lwi_axpy(out->shift[k], out->shift[k], e[k][j], b->shift[j]);
            lwi_axpy(out->turn[k], out->turn[k], e[k][j], b->turn[j]);
        }
        for (size_t i = 0; i < b->n_rod; i++) {
            memset(out->rod[i].shift[k], 0, sizeof out->rod[i].shift[k]);
            for (size_t j = 0; j < n; j++) {
                lwi_axpy(out->rod[i].shift[k], out->rod[i].shift[k], e[k][j], b->rod[i].shift[j]);
            }
        }
    }
}

static void sift_up(lwi_ball_work *w, size_t i)
{
    while (i > 0 && w->cell[i].near < w->cell[(i - 1) / 2].near) {
        lwi_ball_cell t = w->cell[i];
        w->cell[i] = w->cell[(i - 1) / 2];
        w->cell[(i - 1) / 2] = t;
        i = (i - 1) / 2;
    }
}

static void put(lwi_ball_work *w, const lwi_ball_cell *c)
{
    w->cell[w->n_cell] = *c;
    sift_up(w, w->n_cell++);
}

static lwi_ball_cell take(lwi_ball_work *w)
{
    lwi_ball_cell top = w->cell[0];
    size_t i = 0;
    w->cell[0] = w->cell[--w->n_cell];
    for (;;) {
        size_t child = 2 * i + 1;
        if (child >= w->n_cell) {
            break;
        }
        if (child + 1 < w->n_cell && w->cell[child + 1].near < w->cell[child].near) {
            child++;
        }
        if (!(w->cell[child].near < w->cell[i].near)) {
            break;
        }
        lwi_ball_cell t = w->cell[i];
        w->cell[i] = w->cell[child];
        w->cell[child] = t;
        i = child;
    }
    return top;
}

/* The direction in which halving helps most: where the matrix changes most over the width. All
 * count for what is left out at the third order, so none is quite without weight. */
static size_t direction(const lwi_ball_work *w, const lwi_ball_cell *c, bool known)
{
    double change[LWI_BALL_DIRS];
    double top = 0.0;
    size_t best = 0;
    double most = -1.0;
    for (size_t k = 0; k < w->ball.n_dir; k++) {
        change[k] = known ? w->local.change[k] : 1.0;
        top = fmax(top, change[k]);
    }
    for (size_t k = 0; k < w->ball.n_dir; k++) {
        double value = c->w[k] * (change[k] + 0.15 * top);
        if (value > most) {
            most = value;
            best = k;
        }
    }
    return best;
}

double lwi_ball_cells(lwi_ball_work *w, lwi_ball_side side, const double *guide, double proved_m,
                      double most_m, size_t budget, size_t *cells, const atomic_bool *abort)
{
    const lwi_ball *b = &w->turned;
    lwi_ball_cell c = {.near = 0.0};
    turn(&w->turned, &w->ball, guide);
    for (size_t k = 0; k < b->n_dir; k++) {
        c.w[k] = most_m;
    }
    w->n_cell = 0;
    put(w, &c);
    while (w->n_cell > 0) {
        if (w->cell[0].near >= most_m) {
            return most_m;
        }
        if (budget == 0 || w->n_cell + 2 > LWI_BALL_CELLS ||
            (abort != NULL && atomic_load_explicit(abort, memory_order_relaxed))) {
            break;
        }
        c = take(w);
        double near = c.near;
        trim(b, &c, most_m);
        if (far_of(b, &c) <= proved_m) {
            continue;
        }
        budget--;
        (*cells)++;
        lwi_ball_verdict v = lwi_ball_test(&w->local, b, side, c.c, c.w, reach_of(b, &c, most_m));
        if (v != LWI_BALL_OPEN) {
            continue;
        }
        size_t k = direction(w, &c, side == LWI_BALL_FORWARD && w->local.regular);
        if (!(c.w[k] > 1e-9 * most_m)) {
            put(w, &c);
            break;
        }
        double half = 0.5 * c.w[k] * (1.0 + 1e-15);
        lwi_ball_cell other = c;
        other.w[k] = half;
        c.w[k] = half;
        c.c[k] -= half;
        other.c[k] += half;
        c.near = fmax(near, near_of(b, &c));
        other.near = fmax(near, near_of(b, &other));
        put(w, &c);
        put(w, &other);
    }
    return w->n_cell == 0 ? most_m : fmax(proved_m, fmin(w->cell[0].near, most_m));
}
