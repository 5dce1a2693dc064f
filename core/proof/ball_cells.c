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

static double width_of(double half, const lwi_ball_cell *c, size_t k)
{
    return ldexp(half, -(int)c->split[k]);
}

static double near_of(const lwi_ball *b, const lwi_ball_cell *c, double half)
{
    double sum = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        double d = fmax(fabs(c->c[k]) - width_of(half, c, k), 0.0);
        sum += d * d;
    }
    return sqrt(sum) * (1.0 - 1e-14);
}

static double far_of(const lwi_ball *b, const lwi_ball_cell *c, double half)
{
    double sum = 0.0;
    for (size_t k = 0; k < b->n_dir; k++) {
        double d = fabs(c->c[k]) + width_of(half, c, k);
        sum += d * d;
    }
    return sqrt(sum) * (1.0 + 1e-14);
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
static size_t direction(const lwi_ball_work *w, const lwi_ball_cell *c, double half, bool known)
{
    double change[LWI_BALL_DIRS];
    double top = 0.0;
    size_t best = 0;
    double most = -1.0;
    for (size_t k = 0; k < w->ball.n_dir; k++) {
        double sum = 0.0;
        for (size_t i = 0; known && i < w->local.n * w->local.m; i++) {
            sum += w->local.rate[k][i] * w->local.rate[k][i];
        }
        change[k] = known ? sqrt(sum) : 1.0;
        top = fmax(top, change[k]);
    }
    for (size_t k = 0; k < w->ball.n_dir; k++) {
        double value = width_of(half, c, k) * (change[k] + 0.3 * top);
        if (value > most) {
            most = value;
            best = k;
        }
    }
    return best;
}

double lwi_ball_cells(lwi_ball_work *w, lwi_ball_side side, double proved_m, double most_m,
                      size_t budget, size_t *cells, const atomic_bool *abort)
{
    const lwi_ball *b = &w->ball;
    double half = most_m;
    lwi_ball_cell c = {.near = 0.0};
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
        double wide[LWI_BALL_DIRS] = {0};
        for (size_t k = 0; k < b->n_dir; k++) {
            wide[k] = width_of(half, &c, k);
        }
        if (far_of(b, &c, half) <= proved_m) {
            continue;
        }
        budget--;
        (*cells)++;
        lwi_ball_verdict v = lwi_ball_test(&w->local, b, side, c.c, wide);
        if (v != LWI_BALL_OPEN) {
            continue;
        }
        size_t k = direction(w, &c, half, side == LWI_BALL_FORWARD && w->local.regular);
        if (c.split[k] >= 40) {
            put(w, &c);
            break;
        }
        c.split[k]++;
        double width = width_of(half, &c, k);
        lwi_ball_cell other = c;
        c.c[k] -= width;
        other.c[k] += width;
        c.near = near_of(b, &c, half);
        other.near = near_of(b, &other, half);
        put(w, &c);
        put(w, &other);
    }
    return w->n_cell == 0 ? most_m : fmax(proved_m, fmin(w->cell[0].near, most_m));
}
