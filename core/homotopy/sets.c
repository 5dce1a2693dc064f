/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Making, keeping and using a model's solution sets. */
#include "sets.h"

#include "../math/tol.h"
#include "../math/vec3.h"
#include "../model/build.h"

#include <stdint.h>
#include <stdlib.h>

void lwi_set_free(lwi_set *set)
{
    if (set != NULL) {
        free(set->sys);
        lwi_fibre_clear(&set->fibre);
        free(set);
    }
}

/* Rows whose derivative vanishes wherever the joints stand (out-of-plane rows of planar limbs). */
static void drop_dead_rows(lwi_system *sys, lwi_random *random)
{
    double most[LWI_MAX_ROWS] = {0};
    double top = 0.0;
    double d[LWI_MAX_VARS];
    lwi_state *state = calloc(1, sizeof *state);
    lwi_eval *ev = calloc(1, sizeof *ev);
    for (int k = 0; state != NULL && ev != NULL && k < 6; k++) {
        lwi_state_reference(state, sys);
        for (size_t e = 0; e < sys->n_element; e++) {
            const lwi_element *el = &sys->element[e];
            double r = 2.0 * lwi_random_unit(random) - 1.0;
            if (el->kind == LWI_BALL || el->kind == LWI_FREE) {
                double v[3] = {r, 0.5 - r, lwi_random_unit(random)};
                lwi_quat_cayley(state->quat[el->quat], v);
            } else {
                state->value[e] = r * (el->kind == LWI_SLIDE ? sys->length_m : 1.5);
            }
        }
        lwi_eval_nodes(ev, sys, state);
        for (size_t i = 0; i < sys->n_row; i++) {
            lwi_row_derivative(d, sys, &sys->row[i], state, ev);
            double s = 0.0;
            for (size_t j = 0; j < sys->n_var; j++) {
                s += d[j] * d[j];
            }
            most[i] = fmax(most[i], sqrt(s));
            top = fmax(top, most[i]);
        }
    }
    for (size_t i = sys->n_row; i-- > 0;) {
        if (most[i] < LWI_RANK_GENERIC * top) {
            lwi_system_drop_row(sys, i);
        }
    }
    free(state);
    free(ev);
}

/* M drives that hold the home posture best: pivots of the scaled drive rates. */
static bool choose_drives(lwi_set *set, const lw_model *m, lw_work *work)
{
    const lw_spec *spec = m->spec;
    size_t n = m->whole->n_var;
    size_t left = m->mobility;
    double at[LW_MAX_DRIVES * LWI_MAX_VARS];
    double tau[LWI_MAX_VARS];
    size_t perm[LWI_MAX_VARS];
    double row[LWI_MAX_VARS];
    if (spec->n_drive < left || left == 0) {
        return false;
    }
    lwi_state_from_config(&work->state, m->whole, &m->home);
    lwi_eval_nodes(&work->ev, m->whole, &work->state);
    (void)lwi_null_space(work->k, m->whole, m->rank, &work->state, &work->ev, &work->newton);
    for (size_t d = 0; d < spec->n_drive; d++) {
        double value;
        if (spec->drive[d].n_term != 1 ||
            !lwi_terms(&value, row, m->whole, &work->state, &work->ev, spec->drive[d].term, 1)) {
            return false;
        }
        for (size_t j = 0; j < left; j++) {
            double s = 0.0;
            for (size_t v = 0; v < n; v++) {
                s += row[v] * work->k[v * left + j];
            }
            at[j * spec->n_drive + d] = spec->drive[d].turning ? s : s / m->length_m;
        }
    }
    (void)lwi_qrp(at, left, spec->n_drive, spec->n_drive, tau, perm);
    set->n_drive = left;
    for (size_t i = 0; i < left; i++) {
        set->drive[i] = perm[i];
    }
    for (size_t i = 1; i < left; i++) { /* document order */
        for (size_t k = i; k > 0 && set->drive[k] < set->drive[k - 1]; k--) {
            size_t t = set->drive[k];
            set->drive[k] = set->drive[k - 1];
            set->drive[k - 1] = t;
        }
    }
    return true;
}

static lw_code build_forward(lwi_set *set, const lw_model *m, lw_err *err)
{
    const lw_spec *spec = m->spec;
    bool body[LW_MAX_BODIES] = {false};
    bool given[LW_MAX_COORDS] = {false};
    bool keep[LW_MAX_COORDS] = {false};
    bool lock[LW_MAX_BODIES] = {false};
    double axis[LW_MAX_BODIES][3];
    memset(axis, 0, sizeof axis);
    lwi_keep_coords(keep, spec);
    (void)lwi_idle_spins(lock, axis, spec, m->fused);
    for (size_t i = 0; i < set->n_drive; i++) {
        given[spec->drive[set->drive[i]].term[0].coord] = true;
    }
    lwi_build_ask ask = {.spec = spec,
                         .length_m = m->length_m,
                         .body_given = body,
                         .coord_given = given,
                         .coord_keep = keep,
                         .spin_lock = lock,
                         .spin_axis = (const double (*)[3])axis,
                         .rods_given = false};
    lw_code rc = lwi_system_build(set->sys, &ask, err);
    if (rc != LW_OK) {
        return rc;
    }
    /* Driven rods of the chosen drives get an equation each. */
    for (size_t i = 0; i < set->n_drive; i++) {
        size_t coord = spec->drive[set->drive[i]].term[0].coord;
        size_t first = lw_spec_rod_coord(spec, 0);
        if (coord >= first) {
            lwi_system_fix_rod(set->sys, coord - first);
        }
    }
    return LW_OK;
}

static lwi_set *new_set(void)
{
    lwi_set *set = calloc(1, sizeof *set);
    lwi_system *sys = calloc(1, sizeof *sys);
    if (set == NULL || sys == NULL) {
        free(set);
        free(sys);
        return NULL;
    }
    set->sys = sys;
    return set;
}

/* Systems only, no solutions yet; *out stays NULL where a set makes no sense or is not served. */
static lw_code open_set(lwi_set **out, lw_model *m, bool forward, unsigned long long seed,
                        lw_work *work, lw_err *err)
{
    lwi_random random;
    *out = NULL;
    lwi_set *set = new_set();
    if (set == NULL) {
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    lwi_random_seed(&random, seed ^ (forward ? 0x66ULL : 0x69ULL));
    bool good = true;
    if (forward) {
        good = choose_drives(set, m, work) && build_forward(set, m, NULL) == LW_OK;
    } else {
        *set->sys = *m->inverse;
        good = m->completion.usable && !m->explicit_inverse;
    }
    if (good) {
        drop_dead_rows(set->sys, &random);
        good = lwi_hom_open(&set->fibre.hom, set->sys, set->sys->n_var, &random);
        set->fibre.pack = lwi_cpack_size(set->sys);
    }
    if (good) {
        *out = set;
    } else {
        lwi_set_free(set);
    }
    return LW_OK;
}

static void raise_solutions(lw_model *m)
{
    for (int k = 0; k < 2; k++) {
        size_t n = m->set[k] != NULL ? m->set[k]->fibre.n_solution : 0;
        n = n < LWI_MAX_SOLUTIONS ? n : LWI_MAX_SOLUTIONS;
        m->max_solutions = m->max_solutions > n ? m->max_solutions : n;
    }
}

lw_code lw_model_prepare(lw_model *m, unsigned long long seed, unsigned long max_paths,
                         const atomic_bool *abort, lw_err *err)
{
    lw_work *work;
    lwi_fibre_limits limits = {.paths = max_paths, .solutions = LWI_MAX_SOLUTIONS,
                               .abort = abort};
    lw_code rc = lw_work_new(&work, m, err);
    for (int k = 0; k < 2 && rc == LW_OK; k++) {
        lwi_set *set;
        rc = open_set(&set, m, k == 0, seed, work, err);
        if (rc != LW_OK || set == NULL) {
            continue;
        }
        rc = lwi_fibre_find(&set->fibre, set->sys, set->sys->n_var, seed + (unsigned)k, &limits,
                            err);
        if (rc == LW_OK && set->fibre.n_solution > 0) {
            lwi_set_free(m->set[k]);
            m->set[k] = set;
        } else {
            lwi_set_free(set);
            rc = rc == LW_E_MODEL ? LW_OK : rc;
        }
    }
    lw_work_free(work);
    if (rc == LW_OK) {
        raise_solutions(m);
        lwi_sets_report(m);
    }
    return rc;
}

void lwi_sets_report(lw_model *m)
{
    for (int k = 0; k < 2; k++) {
        lw_set_info *info = k == 0 ? &m->report.forward_set : &m->report.inverse_set;
        const lwi_set *set = m->set[k];
        memset(info, 0, sizeof *info);
        if (set == NULL) {
            continue;
        }
        info->present = true;
        info->solutions = set->fibre.n_solution;
        info->degree = set->fibre.degree;
        info->closed = set->fibre.trace_closed;
        info->paths = set->fibre.paths;
        info->n_drive = set->n_drive;
        memcpy(info->drive, set->drive, sizeof info->drive);
    }
}

/* ---- keeping -------------------------------------------------------------------------------- */

typedef struct set_head {
    char magic[8];
    unsigned long long kind, n_par, pack, n_solution, closed, open, degree, paths;
    unsigned long long sum; /* of all other bytes of the set */
} set_head;

/* FNV-1a over the head without its sum, and the body: tells flipped bits, guards against no
 * malice. */
static unsigned long long sum_of(set_head head, const unsigned char *body, size_t size)
{
    unsigned long long sum = 0xcbf29ce484222325ULL;
    unsigned char raw[sizeof head];
    head.sum = 0;
    memcpy(raw, &head, sizeof raw);
    for (size_t i = 0; i < sizeof raw + size; i++) {
        sum = (sum ^ (i < sizeof raw ? raw[i] : body[i - sizeof raw])) * 0x100000001b3ULL;
    }
    return sum;
}

static size_t set_size(const lwi_set *set)
{
    return sizeof(set_head) +
           (set->fibre.hom.n_par + set->fibre.n_solution * set->fibre.pack) * sizeof(lwi_cx);
}

size_t lw_model_sets_size(const lw_model *m)
{
    size_t n = 0;
    for (int k = 0; k < 2; k++) {
        n += m->set[k] != NULL ? set_size(m->set[k]) : 0;
    }
    return n;
}

void lw_model_sets_save(void *out, const lw_model *m)
{
    unsigned char *to = out;
    for (int k = 0; k < 2; k++) {
        const lwi_set *set = m->set[k];
        if (set == NULL) {
            continue;
        }
        const lwi_fibre *f = &set->fibre;
        set_head head = {.magic = "LWSET03",
                         .kind = (unsigned)k,
                         .n_par = f->hom.n_par,
                         .pack = f->pack,
                         .n_solution = f->n_solution,
                         .closed = f->trace_closed,
                         .open = f->open,
                         .degree = f->degree,
                         .paths = f->paths};
        unsigned char *body = to + sizeof head;
        size_t params = f->hom.n_par * sizeof(lwi_cx);
        size_t members = f->n_solution * f->pack * sizeof(lwi_cx);
        memcpy(body, f->p, params);
        memcpy(body + params, f->solution, members);
        head.sum = sum_of(head, body, params + members);
        memcpy(to, &head, sizeof head);
        to = body + params + members;
    }
}

/* Every member must solve the system at the kept parameters, and no two may coincide. */
static bool set_holds(const lwi_set *set)
{
    const lwi_fibre *f = &set->fibre;
    lwi_set_work *w = calloc(1, sizeof *w);
    lwi_hpoint *other = calloc(1, sizeof *other);
    bool good = w != NULL && other != NULL && f->n_solution > 0;
    if (good) {
        w->h.hom = &f->hom;
        memcpy(w->h.p0, f->p, sizeof w->h.p0);
        memcpy(w->h.p1, f->p, sizeof w->h.p1);
    }
    for (size_t i = 0; good && i < f->n_solution; i++) {
        lwi_cunpack(&w->end.st, set->sys, f->solution + i * f->pack);
        double r = lwi_hom_residual(&w->end, &w->h, 0.0, &w->track);
        good = r < 1e-6;
        for (size_t k = 0; good && k < i; k++) {
            lwi_cunpack(&other->st, set->sys, f->solution + k * f->pack);
            good = lwi_hpoint_distance(&f->hom, &w->end, other, &w->track) > 1e-7;
        }
    }
    free(w);
    free(other);
    return good;
}

static lw_code load_one(lw_model *m, const set_head *head, const unsigned char *body,
                        unsigned long long seed, lw_work *work, lw_err *err)
{
    lwi_set *set;
    lw_code rc = open_set(&set, m, head->kind == 0, seed, work, err);
    if (rc != LW_OK) {
        return rc;
    }
    if (set == NULL || head->n_par != set->fibre.hom.n_par || head->pack != set->fibre.pack) {
        lwi_set_free(set);
        return LW_FAIL(err, LW_E_MODEL, "", "the kept solution set belongs to another mechanism");
    }
    lwi_fibre *f = &set->fibre;
    f->n_solution = head->n_solution;
    f->trace_closed = head->closed == 1;
    f->open = head->open;
    f->degree = head->degree;
    f->paths = head->paths;
    f->solution = calloc(f->n_solution * f->pack + 1, sizeof *f->solution);
    if (f->solution == NULL) {
        lwi_set_free(set);
        return LW_FAIL(err, LW_E_MEMORY, "", "out of memory");
    }
    memcpy(f->p, body, f->hom.n_par * sizeof(lwi_cx));
    memcpy(f->solution, body + f->hom.n_par * sizeof(lwi_cx),
           f->n_solution * f->pack * sizeof(lwi_cx));
    if (!set_holds(set)) {
        lwi_set_free(set);
        return LW_FAIL(err, LW_E_MODEL, "", "the kept solution set is damaged");
    }
    lwi_set_free(m->set[head->kind]);
    m->set[head->kind] = set;
    return LW_OK;
}

lw_code lw_model_sets_load(lw_model *m, unsigned long long seed, const void *data, size_t size,
                           lw_err *err)
{
    const unsigned char *from = data;
    lw_work *work;
    lw_code rc = lw_work_new(&work, m, err);
    while (rc == LW_OK && size > 0) {
        set_head head;
        if (size < sizeof head) {
            rc = LW_FAIL(err, LW_E_MODEL, "", "the kept solution set is cut short");
            break;
        }
        memcpy(&head, from, sizeof head);
        bool sane = memcmp(head.magic, "LWSET03", 8) == 0 && head.kind < 2 &&
                    head.n_par <= LWI_HOM_PARAMS && head.pack <= LWI_HOM_OBSERVE &&
                    head.n_solution <= LWI_HOM_POINTS;
        size_t need = sane ? sizeof head + (head.n_par + head.n_solution * head.pack) *
                                               sizeof(lwi_cx)
                           : 0;
        sane = sane && need <= size &&
               head.sum == sum_of(head, from + sizeof head, need - sizeof head);
        if (!sane) {
            rc = LW_FAIL(err, LW_E_MODEL, "", "the kept solution set is damaged");
            break;
        }
        rc = load_one(m, &head, from + sizeof head, seed, work, err);
        from += need;
        size -= need;
    }
    lw_work_free(work);
    if (rc == LW_OK) {
        raise_solutions(m);
        lwi_sets_report(m);
    }
    return rc;
}

/* ---- using ---------------------------------------------------------------------------------- */

/* The imaginary parts of an end are rounding. */
static bool is_real(const lwi_system *sys, const lwi_hpoint *end, lwi_track_work *w)
{
    size_t n = lwi_cobserve(w->observe, sys, &end->st);
    for (size_t i = 0; i < n; i++) {
        if (!(fabs(cimag(w->observe[i])) < 1e-6 * (1.0 + fabs(creal(w->observe[i]))))) {
            return false;
        }
    }
    return true;
}

/* Real state of the set's system from the real parts of a complex end. */
static void real_state(lwi_state *state, const lwi_system *sys, const lwi_hpoint *end)
{
    for (size_t k = 0; k < sys->n_element; k++) {
        const lwi_element *el = &sys->element[k];
        if (el->given) {
            continue;
        }
        if (el->kind == LWI_SLIDE) {
            state->value[k] = creal(end->st.lin[k]);
        } else if (el->kind == LWI_TURN || el->kind == LWI_HELIX) {
            state->value[k] = atan2(creal(end->st.cs[k][1]), creal(end->st.cs[k][0]));
        } else {
            /* The quaternion may carry a factor of i: the rotation is real all the same. */
            const lwi_cx *q = end->st.quat[el->quat];
            double rot[9];
            lwi_cx r[9] = {q[0] * q[0] + q[1] * q[1] - q[2] * q[2] - q[3] * q[3],
                           2.0 * (q[1] * q[2] - q[0] * q[3]),
                           2.0 * (q[1] * q[3] + q[0] * q[2]),
                           2.0 * (q[1] * q[2] + q[0] * q[3]),
                           q[0] * q[0] - q[1] * q[1] + q[2] * q[2] - q[3] * q[3],
                           2.0 * (q[2] * q[3] - q[0] * q[1]),
                           2.0 * (q[1] * q[3] - q[0] * q[2]),
                           2.0 * (q[2] * q[3] + q[0] * q[1]),
                           q[0] * q[0] - q[1] * q[1] - q[2] * q[2] + q[3] * q[3]};
            for (int i = 0; i < 9; i++) {
                rot[i] = creal(r[i]);
            }
            lw_quat_from_rot(state->quat[el->quat], rot);
            for (int i = 0; i < 3 && el->kind == LWI_FREE; i++) {
                state->pos_m[el->quat][i] = creal(end->st.pos_m[el->quat][i]);
            }
        }
    }
}

/* True if an end coincides with one that another path reached before: a path has jumped. */
static bool met_before(lwi_set_work *w, const lwi_set *set, lwi_hpoint *scratch)
{
    size_t pack = set->fibre.pack;
    for (size_t i = 0; i < w->n_end; i++) {
        lwi_cunpack(&scratch->st, set->sys, w->ends + i * pack);
        if (lwi_hpoint_distance(&set->fibre.hom, &w->end, scratch, &w->track) < 1e-7) {
            return true;
        }
    }
    return false;
}

/* Ways to a target, tried one after the other until no path is lost and no two end in one place:
 * the straight one, more closely, then around points aside of it. All paths of one try take one
 * way, or they would not end in different solutions. */
typedef struct way {
    int tight;
    bool aside;
    double re, im; /* where the point aside lies, from 0 (start) to 1 (target) */
} way;

static const way ways[] = {
    {0, false, 0.0, 0.0}, {1, false, 0.0, 0.0},  {1, true, 0.5, 0.4},
    {1, true, 0.4, -0.6}, {1, true, 0.7, -0.25}, {2, true, 0.3, 0.9},
};

static lwi_end follow(lwi_set_work *w, const lwi_set *set, size_t i, const way *by, int tight,
                      const lwi_cx *target)
{
    const lwi_fibre *f = &set->fibre;
    lwi_cunpack(&w->end.st, set->sys, f->solution + i * f->pack);
    memcpy(w->h.p0, f->p, sizeof w->h.p0);
    if (by->aside) {
        for (size_t k = 0; k < f->hom.n_par; k++) {
            w->h.p1[k] = f->p[k] + (by->re + by->im * I) * (target[k] - f->p[k]);
        }
        if (lwi_track_path(&w->end, &w->h, tight, &w->track) != LWI_END_GOOD) {
            return LWI_END_LOST;
        }
        memcpy(w->h.p0, w->h.p1, f->hom.n_par * sizeof *target);
    }
    memcpy(w->h.p1, target, f->hom.n_par * sizeof *target);
    return lwi_track_path(&w->end, &w->h, tight, &w->track);
}

/* All paths by one way; returns how many were lost or met another's end. */
static size_t follow_all(lwi_set_count *count, const lwi_set *set, const lwi_cx *target,
                         const way *by, lwi_set_work *w)
{
    const lwi_fibre *f = &set->fibre;
    size_t lost = 0;
    memset(count, 0, sizeof *count);
    w->n_end = w->n_loose = 0;
    for (size_t i = 0; i < f->n_solution; i++) {
        lwi_end end = follow(w, set, i, by, by->tight, target);
        for (int closer = by->tight + 1; end == LWI_END_LOST && closer <= 2; closer++) {
            end = follow(w, set, i, by, closer, target);
        }
        if (end == LWI_END_INFINITE) {
            count->infinite++;
        } else if (end != LWI_END_GOOD) {
            count->unsettled++;
            lost += end == LWI_END_LOST;
            if (end == LWI_END_SINGULAR && w->n_loose < LWI_LOOSE) {
                lwi_cpack(w->loose + w->n_loose++ * f->pack, set->sys, &w->end.st);
            }
        } else if (met_before(w, set, &w->track.stage)) {
            count->unsettled++;
            lost++;
        } else {
            lwi_cpack(w->ends + w->n_end * f->pack, set->sys, &w->end.st);
            w->n_end++;
        }
    }
    return lost;
}

/* At real inputs the conjugate of a solution is one: where a path towards it has failed, or went
 * out so far that it passed for infinite, it is still known by its partner. */
static void add_conjugates(lwi_set_count *count, const lwi_set *set, lwi_set_work *w)
{
    size_t pack = set->fibre.pack;
    size_t n = w->n_end;
    for (size_t i = 0; i < n && count->infinite + count->unsettled > 0; i++) {
        const lwi_cx *from = w->ends + i * pack;
        lwi_cx *to = w->ends + w->n_end * pack;
        for (size_t k = 0; k < pack; k++) {
            to[k] = conj(from[k]);
        }
        lwi_cunpack(&w->end.st, set->sys, to);
        if (!met_before(w, set, &w->track.stage)) {
            w->n_end++;
            *(count->unsettled > 0 ? &count->unsettled : &count->infinite) -= 1;
        }
    }
}

void lwi_set_solve(lwi_set_count *count, const lwi_set *set, const lwi_cx *target,
                   lwi_set_take take, void *context, lwi_set_work *w)
{
    const lwi_fibre *f = &set->fibre;
    w->h.hom = &f->hom;
    w->h.slices = false;
    /* Ends at infinity count where two ways agree on how many there are: doubles may give up on a
     * solution that is only far away. */
    bool settled = false;
    size_t infinite = SIZE_MAX;
    for (size_t k = 0; k < sizeof ways / sizeof ways[0] && !settled; k++) {
        size_t lost = follow_all(count, set, target, &ways[k], w);
        settled = lost == 0 && (count->infinite == 0 || count->infinite == infinite);
        infinite = lost == 0 ? count->infinite : infinite;
    }
    if (!settled) {
        count->unsettled += count->infinite;
        count->infinite = 0;
    }
    if (count->infinite > 0 || count->unsettled > 0) {
        add_conjugates(count, set, w);
    }
    count->finite = w->n_end;
    for (size_t i = 0; i < w->n_end; i++) {
        lwi_cunpack(&w->end.st, set->sys, w->ends + i * f->pack);
        if (is_real(set->sys, &w->end, &w->track)) {
            real_state(&w->state, set->sys, &w->end);
            count->real += take(context, set, w);
        }
    }
}

bool lwi_set_loose(const lwi_set *set, lwi_set_take take, void *context, lwi_set_work *w)
{
    for (size_t i = 0; i < w->n_loose; i++) {
        lwi_cunpack(&w->end.st, set->sys, w->loose + i * set->fibre.pack);
        real_state(&w->state, set->sys, &w->end);
        if (take(context, set, w)) {
            return true;
        }
    }
    return false;
}
