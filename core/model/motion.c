/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the tool can do: its motion pattern, how its whole pose follows from the outputs, and which
 * joint coordinates follow from output coordinates. Found on random configurations at load. */
#include "../math/tol.h"
#include "../math/vec3.h"
#include "build.h"

#include <stdint.h>
#include <stdlib.h>

typedef struct motion_facts {
    bool turns;          /* the tool body turns at all */
    bool one_axis;       /* always about one fixed axis */
    double axis[3];
    bool still[3];       /* components of the displacement that stay zero */
    double out_of_plane; /* worst displacement along the axis */
    bool fixed_point;    /* some point of the body never moves */
} motion_facts;

static void gather_facts(motion_facts *f, const lw_model *m, lwi_samples *s)
{
    size_t node = m->whole->body_node[m->spec->tool[0].body];
    double tol = 1e-7;
    memset(f, 0, sizeof *f);
    f->one_axis = true;
    for (int i = 0; i < 3; i++) {
        f->still[i] = true;
    }
    for (size_t k = 0; k < s->n; k++) {
        lwi_eval_nodes(&s->ev, m->whole, &s->state[k]);
        const lw_frame *x = &s->ev.node[node];
        double v[3];
        double u[3] = {0, 0, 0};
        lwi_rot_log(v, x->rot);
        if (lwi_norm(v) > 1e-4) {
            (void)lwi_unit(u, v);
            if (!f->turns) {
                /* Sign so that the largest component is positive. */
                int big = fabs(u[0]) > fabs(u[1]) ? 0 : 1;
                big = fabs(u[2]) > fabs(u[big]) ? 2 : big;
                for (int i = 0; i < 3; i++) {
                    f->axis[i] = u[big] < 0.0 ? -u[i] : u[i];
                }
            }
            f->turns = true;
            double c[3];
            lwi_cross(c, u, f->axis);
            f->one_axis = f->one_axis && lwi_norm(c) < 1e-6;
        } else if (lwi_norm(v) > 1e-7) {
            f->turns = f->turns || lwi_norm(v) > 1e-5;
        }
        for (int i = 0; i < 3; i++) {
            f->still[i] = f->still[i] && fabs(x->pos_m[i]) <= tol * m->length_m;
        }
    }
    /* Snap an axis that is a coordinate axis up to rounding. */
    for (int i = 0; i < 3 && f->turns; i++) {
        if (f->axis[i] > 1.0 - 1e-12) {
            f->axis[0] = f->axis[1] = f->axis[2] = 0.0;
            f->axis[i] = 1.0;
        }
    }
    double worst = 0.0;
    for (size_t k = 0; k < s->n && f->turns && f->one_axis; k++) {
        lwi_eval_nodes(&s->ev, m->whole, &s->state[k]);
        worst = fmax(worst, fabs(lwi_dot(s->ev.node[node].pos_m, f->axis)));
    }
    f->out_of_plane = worst;
}

/* Least-squares point c with R c + t = c over all samples: 3R and 1R patterns. */
static bool has_fixed_point(const lw_model *m, lwi_samples *s)
{
    size_t node = m->whole->body_node[m->spec->tool[0].body];
    double a[LWI_SAMPLES * 3 * 3];
    double b[LWI_SAMPLES * 3];
    double c[3];
    double tau[3];
    size_t perm[3];
    size_t rows = 3 * s->n;
    for (size_t k = 0; k < s->n; k++) {
        lwi_eval_nodes(&s->ev, m->whole, &s->state[k]);
        const lw_frame *x = &s->ev.node[node];
        for (size_t i = 0; i < 3; i++) {
            for (size_t j = 0; j < 3; j++) {
                a[(3 * k + i) * 3 + j] = (i == j ? 1.0 : 0.0) - x->rot[3 * i + j];
            }
            b[3 * k + i] = x->pos_m[i];
        }
    }
    (void)lwi_lsq(a, rows, 3, 3, b, c, 1e-9, tau, perm);
    for (size_t k = 0; k < s->n; k++) {
        double p[3];
        lwi_eval_nodes(&s->ev, m->whole, &s->state[k]);
        lwi_frame_apply(p, &s->ev.node[node], c);
        lwi_sub(p, p, c);
        if (!(lwi_norm(p) < 1e-6 * m->length_m)) {
            return false;
        }
    }
    return true;
}

/* Rank of the tool twist over the null space: freedoms of the platform, generic. */
static size_t platform_freedoms(const lw_model *m, lwi_samples *s, double *translation_rank)
{
    const lwi_system *sys = m->whole;
    size_t n = sys->n_var;
    size_t left = m->mobility;
    size_t most = 0;
    *translation_rank = 0.0;
    for (size_t k = 0; k < s->n; k++) {
        double t[6 * LWI_MAX_VARS];
        double row[LWI_MAX_VARS];
        double sv[LWI_MAX_VARS];
        double p[3];
        size_t node = sys->body_node[m->spec->tool[0].body];
        lwi_eval_nodes(&s->ev, sys, &s->state[k]);
        (void)lwi_null_space(s->k, sys, m->rank, &s->state[k], &s->ev, &s->nw);
        lwi_frame_apply(p, &s->ev.node[node], m->spec->tool[0].frame.pos_m);
        for (size_t c = 0; c < 6; c++) {
            double f[3] = {0, 0, 0};
            double w[3] = {0, 0, 0};
            if (c < 3) {
                f[c] = 1.0 / m->length_m;
            } else {
                w[c - 3] = 1.0;
            }
            lwi_twist_row(row, sys, &s->ev, node, p, f, w);
            for (size_t j = 0; j < left; j++) {
                double sum = 0.0;
                for (size_t i = 0; i < n; i++) {
                    sum += row[i] * s->k[i * left + j];
                }
                t[c * left + j] = sum;
            }
        }
        double lin[3 * LWI_MAX_VARS];
        memcpy(lin, t, 3 * left * sizeof *lin);
        lwi_svd(lin, 3, left, left, sv, NULL);
        double r = 0.0;
        for (size_t i = 0; i < 3 && i < left; i++) {
            r += sv[i] > 1e-5;
        }
        *translation_rank = fmax(*translation_rank, r);
        lwi_svd(t, 6, left, left, sv, NULL);
        size_t rank = 0;
        while (rank < 6 && rank < left && sv[rank] > 1e-5) {
            rank++;
        }
        most = rank > most ? rank : most;
    }
    return most;
}

static lw_motion pattern_of(const motion_facts *f, size_t freedoms, double translation,
                            lw_motion declared)
{
    int t = (int)translation;
    if (freedoms == 6) {
        return LW_MOTION_3T3R;
    }
    if (!f->turns) {
        return freedoms == 3 ? LW_MOTION_3T : freedoms == 2 ? LW_MOTION_2T : LW_MOTION_1T;
    }
    if (f->fixed_point) {
        return freedoms == 3 ? LW_MOTION_3R : freedoms == 2 ? LW_MOTION_2R : LW_MOTION_1R;
    }
    if (f->one_axis && freedoms == 4 && t == 3) {
        return LW_MOTION_3T1R;
    }
    if (f->one_axis && freedoms == 3 && f->out_of_plane < 1e-6) {
        return LW_MOTION_2T1R;
    }
    /* Mixed patterns are told by count only: the declared one stands if its count fits. */
    static const struct {
        lw_motion motion;
        size_t n;
    } mixed[] = {{LW_MOTION_3T2R, 5}, {LW_MOTION_2R1T, 3}, {LW_MOTION_1T2R, 3}};
    for (size_t i = 0; i < sizeof mixed / sizeof mixed[0]; i++) {
        if (declared == mixed[i].motion && freedoms == mixed[i].n) {
            return declared;
        }
    }
    return LW_MOTION_NONE;
}

static int output_of(const lw_spec *spec, lw_output_kind kind)
{
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == kind) {
            return (int)o;
        }
    }
    return -1;
}

/* A joint output whose coordinate equals the turn about the axis, up to sign and whole turns. */
static bool turn_by_coord(lwi_completion *c, const lw_model *m, lwi_samples *s,
                          const motion_facts *f)
{
    size_t node = m->whole->body_node[m->spec->tool[0].body];
    for (size_t o = 0; o < m->spec->n_output; o++) {
        if (m->spec->output[o].kind != LW_OUT_COORD) {
            continue;
        }
        int k = m->whole->coord_element[m->spec->output[o].coord];
        for (int sign = -1; sign <= 1 && k >= 0; sign += 2) {
            bool same = true;
            for (size_t i = 0; i < s->n && same; i++) {
                lwi_eval_nodes(&s->ev, m->whole, &s->state[i]);
                double a = lwi_rot_angle_about(s->ev.node[node].rot, f->axis);
                double d = a - sign * s->state[i].value[k];
                same = fabs(sin(0.5 * d)) < 1e-7;
            }
            if (same) {
                c->rot = LWI_ROT_COORD;
                c->output = o;
                c->factor = sign;
                return true;
            }
        }
    }
    return false;
}

static void find_completion(lw_model *m, lwi_samples *s, const motion_facts *f)
{
    static const lw_output_kind turn[3] = {LW_OUT_RX, LW_OUT_RY, LW_OUT_RZ};
    lwi_completion *c = &m->completion;
    const lw_spec *spec = m->spec;
    int n_turn = 0;
    c->rot = LWI_ROT_NONE;
    lwi_copy3(c->axis, f->axis);
    for (int i = 0; i < 3; i++) {
        n_turn += output_of(spec, turn[i]) >= 0;
    }
    if (n_turn == 3) {
        c->rot = LWI_ROT_FULL;
    } else if (n_turn == 0 && !f->turns) {
        c->rot = LWI_ROT_CONST;
    } else if (n_turn == 1 && f->turns && f->one_axis) {
        for (int i = 0; i < 3; i++) {
            int o = output_of(spec, turn[i]);
            /* Roll, pitch or yaw alone is the turn about x, y or z. */
            if (o >= 0 && f->axis[i] == 1.0) {
                c->rot = LWI_ROT_AXIS;
                c->output = (size_t)o;
            }
        }
    } else if (n_turn == 0 && f->turns && f->one_axis) {
        (void)turn_by_coord(c, m, s, f);
    }
    c->usable = c->rot != LWI_ROT_NONE;
    for (int i = 0; i < 3; i++) {
        c->pos_output[i] = output_of(spec, (lw_output_kind)(LW_OUT_X + i)) >= 0;
        c->usable = c->usable && (c->pos_output[i] || f->still[i]);
    }
    c->usable = c->usable && m->mobility == spec->n_output;
}

void lwi_find_motion(lw_model *m, lwi_samples *s)
{
    motion_facts f;
    double translation;
    gather_facts(&f, m, s);
    f.fixed_point = f.turns && has_fixed_point(m, s);
    size_t freedoms = platform_freedoms(m, s, &translation);
    m->report.motion = pattern_of(&f, freedoms, translation, m->spec->motion);
    find_completion(m, s, &f);
}

/* Reduced row echelon of the linear rows: coordinates that are no outputs first. */
void lwi_find_determined(lw_model *m)
{
    enum { ROWS = 48, COLS = 80 };
    const lwi_system *sys = m->whole;
    double a[ROWS][COLS];
    size_t col_coord[COLS];
    size_t n_row = 0;
    size_t n_col = 0;
    size_t n_free = 0;
    memset(a, 0, sizeof a);
    m->n_determined = 0;
    for (int pass = 0; pass < 2; pass++) {
        for (size_t i = 0; i < sys->n_row; i++) {
            const lwi_row *row = &sys->row[i];
            bool sums = row->kind == LWI_ROW_LINEAR && row->n_rod_term == 0;
            for (size_t t = 0; sums && t < row->n_term; t++) {
                size_t coord = (size_t)sys->element[row->term_element[t]].coord;
                bool output = false;
                bool seen = false;
                for (size_t o = 0; o < m->spec->n_output; o++) {
                    output = output || (m->spec->output[o].kind == LW_OUT_COORD &&
                                        m->spec->output[o].coord == coord);
                }
                for (size_t k = 0; k < n_col; k++) {
                    seen = seen || col_coord[k] == coord;
                }
                if (!seen && output == (pass == 1) && n_col < COLS) {
                    col_coord[n_col++] = coord;
                }
            }
        }
        n_free = pass == 0 ? n_col : n_free;
    }
    for (size_t i = 0; i < sys->n_row && n_row < ROWS; i++) {
        const lwi_row *row = &sys->row[i];
        if (row->kind != LWI_ROW_LINEAR || row->n_rod_term > 0) {
            continue;
        }
        for (size_t t = 0; t < row->n_term; t++) {
            size_t coord = (size_t)sys->element[row->term_element[t]].coord;
            for (size_t k = 0; k < n_col; k++) {
                a[n_row][k] += col_coord[k] == coord ? row->term_factor[t] : 0.0;
            }
        }
        n_row++;
    }
    size_t r = 0;
    size_t pivot_col[ROWS];
    for (size_t c = 0; c < n_free && r < n_row; c++) {
        size_t p = r;
        for (size_t i = r; i < n_row; i++) {
            p = fabs(a[i][c]) > fabs(a[p][c]) ? i : p;
        }
        if (!(fabs(a[p][c]) > 1e-9)) {
            continue;
        }
        for (size_t k = 0; k < n_col; k++) {
            double t = a[p][k];
            a[p][k] = a[r][k];
            a[r][k] = t;
        }
        double d = a[r][c];
        for (size_t k = 0; k < n_col; k++) {
            a[r][k] /= d;
        }
        for (size_t i = 0; i < n_row; i++) {
            double g = a[i][c];
            for (size_t k = 0; i != r && g != 0.0 && k < n_col; k++) {
                a[i][k] -= g * a[r][k];
            }
        }
        pivot_col[r++] = c;
    }
    for (size_t i = 0; i < r; i++) {
        bool alone = true;
        for (size_t k = 0; k < n_free; k++) {
            alone = alone && (k == pivot_col[i] || fabs(a[i][k]) < 1e-12);
        }
        if (!alone || m->n_determined >= LW_MAX_COORDS) {
            continue;
        }
        lwi_determined *d = &m->determined[m->n_determined++];
        d->coord = col_coord[pivot_col[i]];
        d->n = 0;
        for (size_t k = n_free; k < n_col; k++) {
            for (size_t o = 0; o < m->spec->n_output && fabs(a[i][k]) > 0.0; o++) {
                if (m->spec->output[o].kind == LW_OUT_COORD &&
                    m->spec->output[o].coord == col_coord[k] && d->n < LW_MAX_OUTPUTS) {
                    d->from[d->n] = o;
                    d->factor[d->n++] = -a[i][k];
                }
            }
        }
    }
}

static void find_propagation(lw_model *m, const bool *coord_given)
{
    const lw_spec *spec = m->spec;
    bool known[LW_MAX_BODIES] = {false};
    known[m->fused[spec->frame]] = true;
    known[m->fused[spec->tool[0].body]] = true;
    m->n_propagate = 0;
    for (bool more = true; more;) {
        more = false;
        for (size_t j = 0; j < spec->n_joint; j++) {
            const lw_spec_joint *joint = &spec->joint[j];
            size_t n = lw_joint_coords(joint->type);
            size_t a = m->fused[joint->body[0]];
            size_t b = m->fused[joint->body[1]];
            bool all = n > 0;
            for (size_t k = 0; k < n; k++) {
                all = all && coord_given[lw_spec_joint_coord(spec, j, k)];
            }
            if (all && known[a] != known[b]) {
                lwi_propagate *p = &m->propagate[m->n_propagate++];
                p->joint = j;
                p->from = known[a] ? joint->body[0] : joint->body[1];
                p->to = known[a] ? joint->body[1] : joint->body[0];
                known[a] = known[b] = true;
                more = true;
            }
        }
    }
}

lw_code lwi_find_inverse(lw_model *m, lw_err *err)
{
    const lw_spec *spec = m->spec;
    bool body_given[LW_MAX_BODIES] = {false};
    bool coord_given[LW_MAX_COORDS] = {false};
    bool keep[LW_MAX_COORDS] = {false};
    bool lock[LW_MAX_BODIES] = {false};
    double axis[LW_MAX_BODIES][3];
    body_given[spec->tool[0].body] = true;
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == LW_OUT_COORD) {
            coord_given[spec->output[o].coord] = true;
        }
    }
    for (size_t d = 0; d < m->n_determined; d++) {
        coord_given[m->determined[d].coord] = true;
    }
    lwi_keep_coords(keep, spec);
    (void)lwi_idle_spins(lock, axis, spec, m->fused);
    lwi_build_ask ask = {.spec = spec,
                         .length_m = m->length_m,
                         .body_given = body_given,
                         .coord_given = coord_given,
                         .coord_keep = keep,
                         .spin_lock = lock,
                         .spin_axis = (const double (*)[3])axis,
                         .rods_given = false};
    m->inverse = calloc(1, sizeof *m->inverse);
    if (m->inverse == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lw_code rc = lwi_system_build(m->inverse, &ask, err);
    if (rc != LW_OK) {
        return rc;
    }
    find_propagation(m, coord_given);
    return lwi_limbs_find(m, err);
}
