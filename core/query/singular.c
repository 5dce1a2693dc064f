/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The singularity part of a margin answer: which motion is no longer held (forward), which is lost
 * and which limb's joints then move with the tool at rest (inverse), as screws; the weakest one
 * where none is lost, so that a singularity is seen coming. Drives that stick, drives no longer
 * spare, preload directions. Screws: Ball 1900; the classes: Gosselin & Angeles 1990, Zlatanov,
 * Fenton & Benhabib 1995. */
#include "singular.h"

#include "../math/tol.h"
#include "../math/vec3.h"

/* ---- decomposition -------------------------------------------------------------------------- */

/* Orthonormal basis of what the first `rank` columns of u do not span: unit vectors, the one with
 * most left first, made square to all before it. */
static void complete_left(lwi_factors *f)
{
    size_t n = f->rows;
    f->n_left = 0;
    while (f->n_left < n - f->rank && f->n_left < LW_MAX_DRIVES) {
        size_t best = 0;
        double most = -1.0;
        for (size_t e = 0; e < n; e++) {
            double rest = 1.0;
            for (size_t j = 0; j < f->rank; j++) {
                rest -= f->u[e * f->cols + j] * f->u[e * f->cols + j];
            }
            for (size_t j = 0; j < f->n_left; j++) {
                rest -= f->left[j][e] * f->left[j][e];
            }
            best = rest > most + 1e-9 ? e : best;
            most = rest > most + 1e-9 ? rest : most;
        }
        double *q = f->left[f->n_left];
        memset(q, 0, n * sizeof *q);
        q[best] = 1.0;
        for (int twice = 0; twice < 2; twice++) {
            for (size_t j = 0; j < f->rank + f->n_left; j++) {
                double dot = 0.0;
                for (size_t i = 0; i < n; i++) {
                    dot += q[i] * (j < f->rank ? f->u[i * f->cols + j] : f->left[j - f->rank][i]);
                }
                for (size_t i = 0; i < n; i++) {
                    q[i] -= dot * (j < f->rank ? f->u[i * f->cols + j] : f->left[j - f->rank][i]);
                }
            }
        }
        double size = 0.0;
        for (size_t i = 0; i < n; i++) {
            size += q[i] * q[i];
        }
        for (size_t i = 0; i < n; i++) {
            q[i] /= sqrt(size);
        }
        f->n_left++;
    }
}

/* Columns of v for lost values: what is square to the others, as above. */
static void complete_right(lwi_factors *f)
{
    size_t n = f->cols;
    for (size_t c = f->rank; c < n; c++) {
        size_t best = 0;
        double most = -1.0;
        for (size_t e = 0; e < n; e++) {
            double rest = 1.0;
            for (size_t j = 0; j < c; j++) {
                rest -= f->v[e * n + j] * f->v[e * n + j];
            }
            best = rest > most + 1e-9 ? e : best;
            most = rest > most + 1e-9 ? rest : most;
        }
        for (size_t i = 0; i < n; i++) {
            f->v[i * n + c] = i == best ? 1.0 : 0.0;
        }
        for (int twice = 0; twice < 2; twice++) {
            for (size_t j = 0; j < c; j++) {
                double dot = 0.0;
                for (size_t i = 0; i < n; i++) {
                    dot += f->v[i * n + j] * f->v[i * n + c];
                }
                for (size_t i = 0; i < n; i++) {
                    f->v[i * n + c] -= dot * f->v[i * n + j];
                }
            }
        }
        double size = 0.0;
        for (size_t i = 0; i < n; i++) {
            size += f->v[i * n + c] * f->v[i * n + c];
        }
        for (size_t i = 0; i < n; i++) {
            f->v[i * n + c] /= sqrt(size);
        }
    }
}

/* f->u holds the matrix A and becomes U. A P = Q R, then R^T W = X S by rotations, two or three
 * sweeps on the triangle where A itself takes six (Drmac & Veselic 2008, part I): U = Q W,
 * V = P X. */
void lwi_decompose(lwi_factors *f, size_t rows, size_t cols, lw_work *work)
{
    size_t padded = rows > cols ? rows : cols;
    double *w = work->matrix[0];
    double *rt = work->matrix[1];
    double *column = work->vector[1];
    f->rows = rows;
    f->cols = cols;
    f->rank_generic = rows < cols ? rows : cols;
    for (size_t i = rows * cols; i < padded * cols; i++) {
        f->u[i] = 0.0;
    }
    (void)lwi_qrp(f->u, padded, cols, cols, work->vector[0], work->index);
    for (size_t i = 0; i < cols; i++) {
        for (size_t j = 0; j < cols; j++) {
            rt[j * cols + i] = j >= i ? f->u[i * cols + j] : 0.0;
        }
    }
    lwi_svd(rt, cols, cols, cols, f->sv, w);
    f->rank = 0;
    while (f->rank < f->rank_generic && f->sv[f->rank] > LWI_RANK_POSTURE * f->sv[0]) {
        f->rank++;
    }
    for (size_t j = 0; j < cols; j++) {
        for (size_t i = 0; i < cols; i++) {
            f->v[work->index[i] * cols + j] = j < f->rank ? rt[i * cols + j] / f->sv[j] : 0.0;
        }
    }
    /* The reflectors stand below the diagonal of f->u, where U is to go: by way of rt. */
    memcpy(rt, f->u, padded * cols * sizeof *rt);
    for (size_t j = 0; j < cols; j++) {
        memset(column, 0, padded * sizeof *column);
        for (size_t i = 0; i < cols; i++) {
            column[i] = w[i * cols + j];
        }
        lwi_qrp_q(rt, padded, cols, cols, work->vector[0], column);
        for (size_t i = 0; i < padded; i++) {
            f->u[i * cols + j] = column[i];
        }
    }
    complete_left(f);
    complete_right(f);
}

static const double *column(double *out, const double *a, size_t n, size_t ld, size_t j)
{
    for (size_t i = 0; i < n; i++) {
        out[i] = a[i * ld + j];
    }
    return out;
}

/* ---- screws and joints ----------------------------------------------------------------------- */

/* From a pair (w at the point, v at the point): turn w about an axis with shift v, or force w and
 * moment v. */
static void screw_of(lw_screw *out, const double w[3], const double v[3], const double at_m[3],
                     double length_m, bool wrench)
{
    double turn = lwi_norm(w) * (wrench ? length_m : 1.0);
    double shift = lwi_norm(v) / (wrench ? 1.0 : length_m);
    memset(out, 0, sizeof *out);
    lwi_copy3(out->point_m, at_m);
    if (!(turn > LWI_MOTION_ZERO) && !(shift > LWI_MOTION_ZERO)) {
        out->kind = LW_SCREW_NONE;
        return;
    }
    if (!(turn > LWI_MOTION_ZERO * shift)) {
        (void)lwi_unit(out->axis, v);
        out->kind = wrench ? LW_SCREW_TURN : LW_SCREW_SHIFT;
        return;
    }
    double square = lwi_dot(w, w);
    double foot[3];
    double pitch = lwi_dot(w, v) / square;
    (void)lwi_unit(out->axis, w);
    lwi_cross(foot, w, v);
    lwi_axpy(out->point_m, at_m, 1.0 / square, foot);
    if (fabs(pitch) > LWI_MOTION_ZERO * length_m) {
        out->kind = LW_SCREW_TWIST;
        out->pitch_m = 6.283185307179586476925 * pitch;
    } else {
        out->kind = wrench ? LW_SCREW_SHIFT : LW_SCREW_TURN;
    }
}

static void point_velocity(double out[3], const lwi_twist *t, const double p[3])
{
    lwi_cross(out, t->w, p);
    lwi_add(out, out, t->v);
}

/* Rates of one joint from the twists of its bodies, at the present displacements. */
static void joint_rates(double *rate, double *ball, const lw_spec_joint *j, const lw_frame *xa,
                        const lw_frame *xb, const lwi_twist *a, const lwi_twist *b)
{
    double w[3];
    double p[3];
    double va[3];
    double v[3];
    double u[3];
    double u2[3];
    lwi_sub(w, b->w, a->w);
    lwi_frame_apply(p, xb, j->at_m);
    point_velocity(va, a, p);
    point_velocity(v, b, p);
    lwi_sub(v, v, va);
    lwi_rot_apply(u, xa->rot, j->axis);
    switch (j->type) {
    case LW_FIXED:
        break;
    case LW_REVOLUTE:
    case LW_HELICAL:
        rate[0] = lwi_dot(u, w);
        break;
    case LW_PRISMATIC:
        rate[0] = lwi_dot(u, v);
        break;
    case LW_CYLINDRICAL:
        rate[0] = lwi_dot(u, w);
        rate[1] = lwi_dot(u, v);
        break;
    case LW_UNIVERSAL: {
        lwi_rot_apply(u2, xb->rot, j->second_axis);
        double c = lwi_dot(u, u2);
        double first = lwi_dot(u, w);
        double second = lwi_dot(u2, w);
        rate[0] = (first - c * second) / (1.0 - c * c);
        rate[1] = (second - c * first) / (1.0 - c * c);
        break;
    }
    case LW_SPHERICAL:
        *ball = lwi_norm(w);
        break;
    case LW_PLANAR: {
        double y[3];
        lwi_rot_apply(u2, xa->rot, j->second_axis);
        lwi_cross(y, u, u2);
        rate[0] = lwi_dot(u2, v);
        rate[1] = lwi_dot(y, v);
        rate[2] = lwi_dot(u, w);
        break;
    }
    }
}

/* Scaled rates of all joints and rods along the motion in s->y. Returns the largest. */
static double all_rates(lw_weak *out, const lw_model *m, const lw_work *work)
{
    const lw_spec *spec = m->spec;
    const lwi_system *sys = m->whole;
    const lwi_twist *t = work->singular_work->y;
    size_t coord = 0;
    size_t n_ball = 0;
    double most = 0.0;
    memset(out->coord, 0, m->n_coord * sizeof *out->coord);
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        size_t a = sys->body_node[joint->body[0]];
        size_t b = sys->body_node[joint->body[1]];
        double ball = 0.0;
        joint_rates(out->coord + coord, &ball, joint, &work->ev.node[a], &work->ev.node[b], &t[a],
                    &t[b]);
        coord += lw_joint_coords(joint->type);
        if (joint->type == LW_SPHERICAL) {
            out->ball[n_ball++] = ball;
            most = fabs(ball) > fabs(most) + LWI_MOTION_ZERO ? ball : most;
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        const lwi_rod_info *rod = &sys->rod[r];
        double pa[3];
        double pb[3];
        double va[3];
        double vb[3];
        double d[3];
        lwi_frame_apply(pa, &work->ev.node[rod->a], rod->end[0]);
        lwi_frame_apply(pb, &work->ev.node[rod->b], rod->end[1]);
        point_velocity(va, &t[rod->a], pa);
        point_velocity(vb, &t[rod->b], pb);
        lwi_sub(d, pb, pa);
        lwi_sub(vb, vb, va);
        out->coord[coord + r] = lwi_dot(d, vb) / lwi_norm(d);
    }
    for (size_t c = 0; c < m->n_coord; c++) {
        out->coord[c] /= lw_spec_coord_turning(spec, c) ? 1.0 : m->length_m;
        most = fabs(out->coord[c]) > fabs(most) + LWI_MOTION_ZERO ? out->coord[c] : most;
    }
    return most;
}

/* The same as shares of the largest; what they were divided by is returned, with its sign. */
static double joint_shares(lw_weak *out, const lw_model *m, const lw_work *work)
{
    double most = all_rates(out, m, work);
    double by = fabs(most) > 0.0 ? most : 1.0;
    for (size_t c = 0; c < m->n_coord; c++) {
        out->coord[c] /= by;
        if (!(fabs(out->coord[c]) > LWI_MOTION_ZERO)) {
            out->coord[c] = 0.0;
        }
    }
    for (size_t k = 0; k < m->n_ball; k++) {
        out->ball[k] /= fabs(by);
        if (!(out->ball[k] > LWI_MOTION_ZERO)) {
            out->ball[k] = 0.0;
        }
    }
    return by;
}

static void mark_limbs(lw_weak *out, const lw_model *m)
{
    for (size_t i = 0; i < m->n_limb; i++) {
        const lwi_limb *limb = &m->limb[i];
        out->limb[i] = false;
        for (size_t k = 0; k < limb->n_joint; k++) {
            size_t joint = limb->joint[k];
            size_t first = lw_spec_joint_coord(m->spec, joint, 0);
            size_t n = lw_joint_coords(m->spec->joint[joint].type);
            for (size_t c = first; c < first + n; c++) {
                out->limb[i] = out->limb[i] || fabs(out->coord[c]) > 0.0;
            }
        }
        for (size_t k = 0; k < limb->n_rod; k++) {
            size_t c = lw_spec_rod_coord(m->spec, limb->rod[k]);
            out->limb[i] = out->limb[i] || fabs(out->coord[c]) > 0.0;
        }
    }
}

/* Twists of the nodes along the motion v (of K). */
static void move(const lwi_singular_place *at, const double *v)
{
    lwi_singular_work *s = at->work->singular_work;
    size_t m = at->rates->m;
    for (size_t i = 0; i < at->model->whole->n_var; i++) {
        double sum = 0.0;
        for (size_t j = 0; j < m; j++) {
            sum += at->work->k[i * m + j] * v[j];
        }
        s->motion[i] = sum;
    }
    lwi_node_twists(s->y, at->model->whole, &at->work->ev, s->motion);
}

/* Everything about the motion v (of K): joints, limbs, drives, outputs, the tool's screw. */
static void motion_of(lw_weak *out, const lwi_singular_place *at, const double *v)
{
    const lw_model *m = at->model;
    const lwi_rates *r = at->rates;
    const lw_work *work = at->work;
    double twist[6];
    move(at, v);
    double by = joint_shares(out, m, work);
    mark_limbs(out, m);
    for (size_t d = 0; d < r->n_drive; d++) {
        double scale = m->spec->drive[d].turning ? 1.0 : 1.0 / m->length_m;
        double sum = 0.0;
        for (size_t j = 0; j < r->m; j++) {
            sum += work->ak[d * r->m + j] * v[j];
        }
        out->drive[d] = scale * sum / by;
        out->drive[d] = fabs(out->drive[d]) > LWI_MOTION_ZERO ? out->drive[d] : 0.0;
    }
    for (size_t c = 0; c < 6; c++) {
        double sum = 0.0;
        for (size_t j = 0; j < r->m; j++) {
            sum += work->twist[c * r->m + j] * v[j];
        }
        twist[c] = sum / by;
    }
    screw_of(&out->screw, twist + 3, twist, at->solution->tool.pos_m, m->length_m, false);
    double size = 0.0;
    for (size_t o = 0; o < r->n_output; o++) {
        double sum = 0.0;
        for (size_t j = 0; j < r->m; j++) {
            sum += work->tk[o * r->m + j] * v[j];
        }
        out->output[o] = lwi_output_scale(m, o) * sum / by;
        size += out->output[o] * out->output[o];
    }
    size = sqrt(size);
    for (size_t o = 0; o < r->n_output; o++) {
        out->output[o] = size > LWI_MOTION_ZERO ? out->output[o] / size : 0.0;
    }
}

/* ---- what is lost, or weakest ---------------------------------------------------------------- */

static void weak_drives(lw_singular_answer *out, const lwi_singular_place *at)
{
    lwi_factors *f = &at->work->singular_work->of[LWI_OF_DRIVES];
    double v[LWI_MAX_VARS];
    size_t first = f->rank < f->cols ? f->rank : f->cols - 1;
    out->n_drives = 0;
    for (size_t j = first; j < f->cols && out->n_drives < LW_MAX_WEAK; j++) {
        lw_weak *w = &out->drives[out->n_drives++];
        w->value = f->sv[j];
        w->lost = j >= f->rank;
        motion_of(w, at, column(v, f->v, f->cols, f->cols, j));
    }
}

/* A coordinate that belongs to a limb. */
static bool in_limb(const lw_model *m, const lwi_limb *limb, size_t coord)
{
    size_t joint = 0;
    size_t part = 0;
    size_t rod = 0;
    bool in = false;
    (void)lw_spec_coord_owner(m->spec, coord, &joint, &part, &rod);
    for (size_t k = 0; k < limb->n_joint; k++) {
        in = in || joint == limb->joint[k];
    }
    for (size_t k = 0; k < limb->n_rod && joint == (size_t)-1; k++) {
        in = in || rod == limb->rod[k];
    }
    return in;
}

/* Where several limbs have lost something at once, the motions with the tool at rest come mixed. A
 * limb's own is the combination in which no joint outside it moves. One entry a limb; false where
 * that does not account for all of them. */
static bool limb_by_limb(lw_singular_answer *out, const lwi_singular_place *at,
                         const lwi_factors *f)
{
    const lw_model *m = at->model;
    size_t d = f->cols - f->rank;
    double *rate = at->work->matrix[2]; /* coordinates x d */
    double *outside = at->work->matrix[3];
    double v[LWI_MAX_VARS];
    double z[LW_MAX_WEAK * LW_MAX_WEAK];
    double sv[LW_MAX_WEAK];
    size_t found = 0;
    if (d < 2 || d > LW_MAX_WEAK) {
        return false;
    }
    for (size_t j = 0; j < d; j++) {
        move(at, column(v, f->v, f->cols, f->cols, f->rank + j));
        (void)all_rates(&out->tool[0], m, at->work);
        for (size_t c = 0; c < m->n_coord; c++) {
            rate[c * d + j] = out->tool[0].coord[c];
        }
    }
    for (size_t i = 0; i < m->n_limb && found < d; i++) {
        size_t rows = d; /* zeros first, so that there are rows enough */
        memset(outside, 0, d * d * sizeof *outside);
        for (size_t c = 0; c < m->n_coord; c++) {
            if (!in_limb(m, &m->limb[i], c)) {
                memcpy(outside + rows++ * d, rate + c * d, d * sizeof *outside);
            }
        }
        lwi_svd(outside, rows, d, d, sv, z);
        if (sv[d - 1] > LWI_OWN_MOTION || !(sv[d - 2] > LWI_OWN_MOTION)) {
            continue;
        }
        for (size_t k = 0; k < f->cols; k++) {
            v[k] = 0.0;
            for (size_t j = 0; j < d; j++) {
                v[k] += f->v[k * f->cols + f->rank + j] * z[j * d + d - 1];
            }
        }
        motion_of(&out->tool[found++], at, v);
    }
    return found == d;
}

static void weak_tool(lw_singular_answer *out, const lwi_singular_place *at)
{
    lwi_factors *f = &at->work->singular_work->of[LWI_OF_TOOL];
    double v[LWI_MAX_VARS];
    size_t first = f->rank < f->rank_generic ? f->rank : f->rank_generic - 1;
    bool parted = f->rows == f->cols && limb_by_limb(out, at, f);
    out->n_tool = 0;
    for (size_t j = first; j < f->rank_generic && out->n_tool < LW_MAX_WEAK; j++) {
        size_t i = out->n_tool++;
        lw_weak *w = &out->tool[i];
        double force[3];
        double moment[3];
        w->value = f->sv[j];
        w->lost = j >= f->rank;
        if (!parted) {
            motion_of(w, at, column(v, f->v, f->cols, f->cols, j));
        }
        const double *u = w->lost ? f->left[j - f->rank] : column(v, f->u, f->rows, f->cols, j);
        memcpy(w->output, u, f->rows * sizeof *u);
        lwi_output_wrench(force, moment, at, u);
        screw_of(&w->screw, force, moment, at->solution->tool.pos_m, at->model->length_m, true);
    }
}

/* ---- drives that stick or are lost ----------------------------------------------------------- */

/* Least |A z| over unit z square to row a of A: with A = U S V^T and c = V^T a, the smallest root
 * of sum c_i^2 / (s_i^2 - t) = 0, between the two smallest s^2 (Golub 1973, section 5). */
static double hold_with_row_zero(const lwi_factors *f, const double *c)
{
    size_t m = f->cols;
    double low = f->sv[m - 1] * f->sv[m - 1];
    double high = f->sv[m - 2] * f->sv[m - 2];
    double a = c[m - 1] * c[m - 1];
    double b = c[m - 2] * c[m - 2];
    double t = low;
    /* The far terms vary little over the interval: held, they leave a quadratic. */
    for (int i = 0; i < 40; i++) {
        double far = 0.0;
        for (size_t j = 0; j + 2 < m; j++) {
            double gap = f->sv[j] * f->sv[j] - t;
            if (!(gap > 1e-14 * high)) {
                return sqrt(t); /* three values that coincide */
            }
            far += c[j] * c[j] / gap;
        }
        double sum = a + b + far * (low + high);
        double product = a * high + b * low + far * low * high;
        double last = t;
        t = 2.0 * product / (sum + sqrt(fmax(sum * sum - 4.0 * far * product, 0.0)));
        if (fabs(t - last) <= 1e-14 * high) {
            break;
        }
    }
    return sqrt(t);
}

static void braked(lw_singular_answer *out, const lwi_singular_place *at)
{
    const lwi_factors *f = &at->work->singular_work->of[LWI_OF_DRIVES];
    double c[LWI_MAX_VARS];
    for (size_t d = 0; d < f->rows; d++) {
        double size = 0.0;
        for (size_t j = 0; j < f->cols; j++) {
            c[j] = j < f->rank ? f->u[d * f->cols + j] * f->sv[j] : 0.0; /* of A V */
            size += c[j] * c[j];
        }
        bool moves = sqrt(size) > LWI_RANK_POSTURE * f->sv[0];
        bool square_to_last = !(fabs(c[f->cols - 1]) > LWI_RANK_POSTURE * f->sv[0]);
        out->freedoms_braked[d] = moves ? f->cols - 1 : f->cols;
        out->hold_braked[d] = out->freedoms_braked[d] == 0 ? 0.0
                              : square_to_last             ? f->sv[f->cols - 1]
                                                           : hold_with_row_zero(f, c);
    }
}

void lwi_singular_at(lw_singular_answer *out, const lw_margin_answer *margin,
                     const lwi_singular_place *at)
{
    const lw_model *m = at->model;
    const lwi_factors *f = at->work->singular_work->of;
    out->freedoms = at->rates->m;
    weak_drives(out, at);
    weak_tool(out, at);
    braked(out, at);
    for (size_t d = 0; d < at->rates->n_drive; d++) {
        out->no_longer_spare[d] = margin->held && m->drive_spare[d] && margin->indispensable[d];
    }
    out->n_preload = f[LWI_OF_DRIVES].n_left;
    for (size_t i = 0; i < out->n_preload; i++) {
        memcpy(out->preload[i], f[LWI_OF_DRIVES].left[i],
               at->rates->n_drive * sizeof *out->preload[i]);
    }
    lwi_leave_by(&out->leave_drives, at, LWI_OF_DRIVES);
    lwi_leave_by(&out->leave_tool, at, LWI_OF_TOOL);
}
