/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Existence and uniqueness of every limb's solution on an interval, by Newton and Kantorovich's
 * theorem at every point of it at once (Kantorovich 1948; Ortega & Rheinboldt 1970, 12.6):
 *
 * with s below the least singular value of J, r the residual and M a bound of the second derivative
 * around the predictor, b = |r| / s and h = b M / s <= 1/2 prove one root within
 * 2 b / (1 + sqrt(1 - 2 h)) and no other within (1 + sqrt(1 - 2 h)) s / M.
 *
 * The second derivative is bounded from the joints (homotopy/certify.c), with the distances taken
 * over the whole interval. The unknowns are stepped from the predictor as lwi_state_step does it:
 * joints add, rotations by Cayley's map, whose curve turns at |u| at most and bends by |u|^2 |y|
 * more, hence the factor 1 + ROOM. In a ball of radius ROOM / sqrt(n) the steps together move a
 * point by less than exp(ROOM) - 1 of its distances: that is GROW. */
#include "pm_root.h"
#include "prove.h"

#include "../math/tol.h"
#include "../math/vec3.h"

#define ROOM 0.1
#define GROW 1.11
#define OUT (1.0 + 1e-12) /* roundings of the few sums below */

static lwi_pm through_nodes(const lwi_prove *p, size_t k)
{
    double v[LWI_PM_SIZE];
    for (int i = 0; i < LWI_PM_SIZE; i++) {
        v[i] = p->node[i].value[k];
    }
    return lwi_pm_through(v);
}

/* The quaternion through the nodes, of unit length. A tube of radius r turns it by r at most: each
 * member by half of that. */
static void ball_model(lwi_prove *p, size_t q, double radius)
{
    lwi_pm c[4];
    lwi_pm square = lwi_pm_const(0.0);
    for (int i = 0; i < 4; i++) {
        double v[LWI_PM_SIZE];
        for (int k = 0; k < LWI_PM_SIZE; k++) {
            v[k] = p->node[k].quat[q][i];
        }
        c[i] = lwi_pm_through(v);
        square = lwi_pm_add(square, lwi_pm_sqr(c[i]));
    }
    lwi_pm inverse = lwi_pm_rsqrt(square);
    for (int i = 0; i < 4; i++) {
        c[i] = lwi_pm_widen(lwi_pm_mul(c[i], inverse), 0.5 * radius);
    }
    lwi_pm_quat_rot(p->point->rot[q], c);
}

static void element_model(lwi_prove *p, size_t k, double mid, double half, bool tube)
{
    const lwi_element *el = &p->sys->element[k];
    lwi_pm_point *st = p->point;
    if (el->given) {
        st->value[k] = lwi_pm_shift(lwi_pm_scale(lwi_pm_var(mid, half), p->given[k][1]),
                                    p->given[k][0]);
    } else {
        double radius = tube ? p->block[p->var_block[el->var]].radius : 0.0;
        if (el->kind == LWI_BALL || el->kind == LWI_FREE) {
            size_t q = (size_t)el->quat;
            ball_model(p, q, radius);
            for (int i = 0; i < 3 && el->kind == LWI_FREE; i++) {
                double v[LWI_PM_SIZE];
                for (int n = 0; n < LWI_PM_SIZE; n++) {
                    v[n] = p->node[n].pos_m[q][i];
                }
                /* The reference point shifts by radius times scale, the rest by the turn. */
                double far = p->sys->var_scale[el->var] + lwi_norm(el->at);
                st->pos_m[q][i] = lwi_pm_widen(lwi_pm_through(v), radius * far * OUT);
            }
            return;
        }
        st->value[k] = lwi_pm_widen(through_nodes(p, k), radius * p->sys->var_scale[el->var]);
    }
    if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
        lwi_pm_sincos(st->value[k], &st->cs[k][1], &st->cs[k][0]);
    }
}

static void evaluate(lwi_prove *p, double mid, double half, bool tube)
{
    for (size_t k = 0; k < p->sys->n_element; k++) {
        element_model(p, k, mid, half, tube);
    }
    lwi_pm_eval_nodes(p->eval, p->sys, p->point);
}

static double far_from(const lwi_pm a[3], const lwi_pm b[3])
{
    double sum = 0.0;
    for (int i = 0; i < 3; i++) {
        double m = lwi_pm_mag(lwi_pm_sub(a[i], b[i]));
        sum += m * m;
    }
    return sqrt(sum) * OUT;
}

/* What the elements between two points do to a row that sees them. */
typedef struct bend {
    double first;  /* sum of squares of the point's speeds */
    double size;   /* Frobenius bound of the point's, or the axes', second derivative */
} bend;

static bool bend_links(bend *out, const lwi_prove *p, const lwi_pm at[3], size_t link,
                       size_t n_link, bool axes)
{
    const lwi_system *sys = p->sys;
    double turn[LWI_BLOCK_VARS];
    double speed[LWI_BLOCK_VARS];
    size_t n = 0;
    out->first = out->size = 0.0;
    for (size_t i = 0; i < n_link; i++) {
        size_t k = (size_t)sys->link[link + i].element;
        const lwi_element *el = &sys->element[k];
        if (el->var < 0) {
            continue;
        }
        if (n >= LWI_BLOCK_VARS) {
            return false;
        }
        double scale = sys->var_scale[el->var];
        turn[n] = el->kind == LWI_SLIDE ? 0.0 : 1.0 + ROOM;
        if (el->kind == LWI_SLIDE) {
            speed[n] = scale;
        } else {
            double far = GROW * (far_from(at, p->eval->p[k]) + (GROW - 1.0) * sys->length_m);
            far = el->kind == LWI_FREE ? far + scale : far;
            far = el->kind == LWI_HELIX ? (far + fabs(el->pitch)) * scale : far;
            turn[n] *= el->kind == LWI_HELIX ? scale : 1.0;
            speed[n] = far;
        }
        out->first += speed[n] * speed[n];
        n++;
    }
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            double a = axes ? turn[i] * turn[j] : fmax(turn[i] * speed[j], turn[j] * speed[i]);
            out->size += a * a;
        }
    }
    out->size = sqrt(out->size) * OUT;
    return true;
}

/* Bound of a row's second derivative (Frobenius norm over the unknowns) in the room. */
static double bend_of(const lwi_prove *p, const lwi_row *row)
{
    const lwi_system *sys = p->sys;
    bend b;
    lwi_pm at[3];
    lwi_pm from[3];
    if (row->kind == LWI_ROW_SPIN || (row->kind == LWI_ROW_LINEAR && row->n_rod_term == 0)) {
        return 0.0;
    }
    if (row->kind == LWI_ROW_LINEAR) {
        return INFINITY;
    }
    lwi_pm_place(at, &p->eval->node[row->b], row->pb);
    if (!bend_links(&b, p, at, row->link, row->n_link, row->kind == LWI_ROW_AXIS)) {
        return INFINITY;
    }
    if (row->kind == LWI_ROW_AXIS) {
        return b.size;
    }
    if (row->kind == LWI_ROW_POINT) {
        return b.size / sys->length_m * OUT;
    }
    lwi_pm_place(from, &p->eval->node[row->a], row->pa);
    double length = GROW * (far_from(at, from) + (GROW - 1.0) * sys->length_m);
    double scale = 1.0 / (sys->rod[row->rod].length_m * sys->length_m);
    return scale * (b.first + length * b.size) * OUT;
}

/* The same of a reading: rods alone bend it. A length's second derivative is at most that of its
 * vector and the square of its first over the length, which in the room does not fall below its
 * least value less what the ends can move. */
static double bend_of_drive(const lwi_prove *p, const lw_spec_drive *drive)
{
    const lwi_system *sys = p->sys;
    size_t n_scalar = lw_spec_coord_count(sys->spec) - sys->spec->n_rod;
    double sum = 0.0;
    for (size_t t = 0; t < drive->n_term; t++) {
        bend b;
        lwi_pm at[3];
        lwi_pm from[3];
        double lo;
        double hi;
        if (drive->term[t].coord < n_scalar) {
            continue;
        }
        const lwi_rod_info *rod = &sys->rod[drive->term[t].coord - n_scalar];
        lwi_pm_place(at, &p->eval->node[rod->b], rod->end[1]);
        lwi_pm_place(from, &p->eval->node[rod->a], rod->end[0]);
        if (!bend_links(&b, p, at, rod->link, rod->n_link, false)) {
            return INFINITY;
        }
        for (int i = 0; i < 3; i++) {
            from[i] = lwi_pm_sub(at[i], from[i]);
        }
        lwi_pm_range(lwi_pm_dot3(from, from), &lo, &hi);
        double least = (lo > 0.0 ? sqrt(lo) : 0.0) - 2.0 * ROOM * sqrt(b.first);
        if (!(least > 0.0)) {
            return INFINITY;
        }
        sum += fabs(drive->term[t].factor) * (b.size + b.first / least);
    }
    return (drive->turning ? sum : sum / sys->length_m) * OUT;
}

/* Residual of a solved row, its derivative into p->row, its bend. */
static lwi_pm row_model(lwi_prove *p, const lwi_prove_block *block, size_t row, double *bent)
{
    size_t d;
    for (size_t c = 0; c < block->n; c++) {
        p->row[block->var[c]] = lwi_pm_const(0.0);
    }
    if (!lwi_row_is_drive(p, row, &d)) {
        if (bent != NULL) {
            *bent = bend_of(p, &p->sys->row[row]);
        }
        return lwi_pm_row(p->row, NULL, p->sys, &p->sys->row[row], p->point, p->eval, &p->inputs);
    }
    const lw_spec_drive *drive = &p->model->spec->drive[d];
    double scale = drive->turning ? 1.0 : 1.0 / p->sys->length_m;
    lwi_pm value;
    (void)lwi_pm_terms(&value, p->row, NULL, p->sys, p->point, p->eval, drive->term, drive->n_term,
                       &p->inputs);
    for (size_t c = 0; c < block->n && scale != 1.0; c++) {
        p->row[block->var[c]] = lwi_pm_scale(p->row[block->var[c]], scale);
    }
    if (bent != NULL) {
        *bent = bend_of_drive(p, drive);
    }
    lwi_pm target = lwi_pm_shift(lwi_pm_scale(lwi_pm_var(p->mid, p->half), p->along[d]),
                                 p->from[d]);
    return lwi_pm_scale(lwi_pm_sub(value, target), scale);
}

void lwi_block_models(lwi_prove *p, const lwi_prove_block *block)
{
    size_t n = block->n;
    for (size_t i = 0; i < n; i++) {
        (void)row_model(p, block, block->pick[i], NULL);
        for (size_t c = 0; c < n; c++) {
            p->jac[block->jac + i * n + c] = p->row[block->var[c]];
        }
    }
}

static double least_singular(lwi_prove *p, const lwi_prove_block *block, const lwi_pm *j)
{
    size_t n = block->n;
    if (n <= 2) {
        double lo;
        double hi;
        lwi_pm det = n == 1 ? j[0] : lwi_pm_mul_sub(j[0], j[3], j[1], j[2]);
        lwi_pm_range(det, &lo, &hi);
        double least = lo > 0.0 ? lo : -hi;
        double most = 0.0;
        if (n == 1) {
            return least;
        }
        /* sigma_2 = |det| / sigma_1, sigma_1 below the Frobenius norm. */
        for (int i = 0; i < 4; i++) {
            double m = lwi_pm_mag(j[i]);
            most += m * m;
        }
        return least / (sqrt(most) * OUT) / OUT;
    }
    return lwi_rank_prepare(p->rank, j, n, n, n) ? lwi_rank_most(p->rank) : 0.0;
}

static bool prove_block(lwi_prove *p, lwi_prove_block *block)
{
    size_t n = block->n;
    lwi_pm *j = p->jac + block->jac;
    double residual = 0.0;
    double bent = 0.0;
    for (size_t i = 0; i < n; i++) {
        double q;
        lwi_pm res = row_model(p, block, block->pick[i], &q);
        double m = lwi_pm_mag(res);
        for (size_t c = 0; c < n; c++) {
            j[i * n + c] = p->row[block->var[c]];
        }
        residual += m * m;
        bent += q * q;
    }
    double s = least_singular(p, block, j);
    double most = ROOM / sqrt((double)n);
    block->sigma = s;
    if (!(s > 0.0)) {
        return false;
    }
    lwi_pm_root root;
    lwi_pm_kantorovich(&root, sqrt(residual) * OUT, s, sqrt(bent) * OUT, most);
    block->radius = root.radius;
    block->unique = root.unique;
    /* The bound of the predictor, taken to the motion itself, which lies within the radius. */
    block->sigma = s / OUT - sqrt(bent) * OUT * OUT * root.radius;
    return root.holds && block->sigma > 0.0;
}

/* Distance of two points over one block's unknowns, as the step that leads from one to the other;
 * an upper bound for rotations below a tenth of a radian. */
static double gap(const lwi_prove *p, const lwi_prove_block *block, const lwi_prove_point *a,
                  const lwi_prove_point *b)
{
    double sum = 0.0;
    for (size_t i = 0; i < block->n; i++) {
        size_t var = block->var[i];
        size_t k = (size_t)p->sys->var_element[var];
        const lwi_element *el = &p->sys->element[k];
        if (el->kind != LWI_BALL && el->kind != LWI_FREE) {
            double d = (a->value[k] - b->value[k]) / p->sys->var_scale[var];
            sum += d * d;
        } else if ((size_t)el->var == var) {
            size_t q = (size_t)el->quat;
            double dot = 0.0;
            for (int c = 0; c < 4; c++) {
                dot += a->quat[q][c] * b->quat[q][c];
            }
            double away = 0.0;
            for (int c = 0; c < 4; c++) {
                double d = a->quat[q][c] - (dot < 0.0 ? -1.0 : 1.0) * b->quat[q][c];
                away += d * d;
            }
            away *= 4.0 * 1.01; /* chord of the half angle */
            if (el->kind == LWI_FREE) {
                double shift = 0.0;
                for (int c = 0; c < 3; c++) {
                    double d = fabs(a->pos_m[q][c] - b->pos_m[q][c]);
                    shift += d * d;
                }
                double d = (sqrt(shift) + lwi_norm(el->at) * sqrt(away)) / p->sys->var_scale[var];
                away += d * d;
            }
            sum += away;
        }
    }
    return sqrt(sum) * OUT + 1e-14;
}

static void end_point(lwi_prove_point *out, const lwi_prove *p, double d)
{
    double lo;
    double hi;
    for (size_t k = 0; k < p->sys->n_element; k++) {
        const lwi_element *el = &p->sys->element[k];
        if (el->quat < 0) {
            out->value[k] = lwi_pm_value(p->point->value[k], d);
        }
    }
    for (size_t q = 0; q < p->sys->n_quat; q++) {
        double v[LWI_PM_SIZE];
        for (int i = 0; i < 7; i++) {
            for (int n = 0; n < LWI_PM_SIZE; n++) {
                v[n] = i < 4 ? p->node[n].quat[q][i] : p->node[n].pos_m[q][i - 4];
            }
            lwi_pm_at_end(lwi_pm_through(v), d > 0.0, &lo, &hi);
            *(i < 4 ? &out->quat[q][i] : &out->pos_m[q][i - 4]) = 0.5 * (lo + hi);
        }
        lwi_quat_unit(out->quat[q]);
    }
    for (size_t b = 0; b < p->n_block; b++) {
        out->radius[b] = p->block[b].radius;
        out->unique[b] = p->block[b].unique;
    }
}

static bool is_picked(const lwi_prove *p, size_t row)
{
    for (size_t b = 0; b < p->n_block; b++) {
        const lwi_prove_block *block = &p->block[b];
        for (size_t i = 0; i < block->n; i++) {
            if (block->pick[i] == row) {
                return true;
            }
        }
    }
    return false;
}

static bool row_closes(const lwi_prove *p, const lwi_row *row)
{
    lwi_pm r = lwi_pm_row(NULL, NULL, p->sys, row, p->point, p->eval, &p->inputs);
    return lwi_pm_mag(r) <= LWI_CLOSED;
}

/* Rows of overconstrained loops that are not solved hold as well as in every answer, all along. */
static bool rest_closes(const lwi_prove *p)
{
    for (size_t i = 0; i < p->sys->n_row; i++) {
        if (!is_picked(p, i) && !row_closes(p, &p->sys->row[i])) {
            return false;
        }
    }
    for (size_t i = 0; i < p->sys->n_row_dropped; i++) {
        if (!row_closes(p, &p->sys->row_dropped[i])) {
            return false;
        }
    }
    return true;
}

bool lwi_tube(lwi_prove *p, double low, double high)
{
    double mid = 0.5 * (low + high);
    double half = 0.5 * (high - low);
    p->mid = mid;
    p->half = half;
    if (!p->joints) {
        lwi_move_models(&p->point->given[p->tool_node], p->arm, p->coord, p->move, p->model, mid,
                        half);
    }
    evaluate(p, mid, half, false);
    p->sigma = INFINITY;
    p->tube = 0.0;
    for (size_t b = 0; b < p->n_block; b++) {
        lwi_prove_block *block = &p->block[b];
        if (!prove_block(p, block)) {
            p->stage = LWI_STAGE_BLOCK;
            p->limb = block->limb;
            return false;
        }
        p->sigma = fmin(p->sigma, block->sigma);
        p->tube = fmax(p->tube, block->radius);
    }
    /* The root of the neighbour is this one: it lies where only one is, here or there. */
    end_point(&p->trial, p, -1.0);
    for (size_t b = 0; b < p->n_block; b++) {
        double d = gap(p, &p->block[b], &p->trial, &p->left);
        if (!(d + p->left.radius[b] <= p->block[b].unique ||
              d + p->block[b].radius <= p->left.unique[b])) {
            p->stage = LWI_STAGE_BRANCH;
            p->limb = p->block[b].limb;
            return false;
        }
    }
    end_point(&p->right, p, 1.0);
    if (p->n_block > 0) {
        evaluate(p, mid, half, true);
    }
    if (!rest_closes(p)) {
        p->stage = LWI_STAGE_BLOCK;
        return false;
    }
    return true;
}
