/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The closure rows, of which there is one source for all types of number: a third instance over
 * dual numbers, a struct, differentiates them along a random motion of the unknowns and of the
 * inputs (forward mode: a + b eps with eps eps = 0). Held against it: the exact derivatives of the
 * double instance and the rates of the complex one, on the demo mechanisms and on those of
 * lwt_subjects.h, at random points, closed or not. The motion of turns, balls and free bodies is
 * written here from the definition of the unknowns, by quaternions. */
#include "lwt.h"
#include "lwt_subjects.h"

#include "demo.h"

#include "closure/system.h"
#include "homotopy/complex.h"
#include "math/vec3.h"
#include "model/build.h"
#include "model/model.h"

#include <stdlib.h>

typedef struct dual {
    double a, b;
} dual;

LWI_EVAL_TYPES(dual, dual);

typedef dual num;
typedef dual_frame num_frame;
typedef dual_eval num_eval;
typedef dual_point num_point;

#define NUM_WIDE 1
#define NUM_RATES 0
#define NUM_OWN_POINT 0

static inline num num_of(double x)
{
    return (num){x, 0.0};
}

static inline num num_add(num x, num y)
{
    return (num){x.a + y.a, x.b + y.b};
}

static inline num num_sub(num x, num y)
{
    return (num){x.a - y.a, x.b - y.b};
}

static inline num num_mul(num x, num y)
{
    return (num){x.a * y.a, x.a * y.b + x.b * y.a};
}

static inline num num_scale(num x, double y)
{
    return (num){x.a * y, x.b * y};
}

static inline num num_over(num x, double y)
{
    return num_scale(x, 1.0 / y);
}

static inline num num_unit(num f[3])
{
    double length = sqrt(f[0].a * f[0].a + f[1].a * f[1].a + f[2].a * f[2].a);
    double rate = (f[0].a * f[0].b + f[1].a * f[1].b + f[2].a * f[2].b) / length;
    for (int i = 0; i < 3; i++) {
        f[i] = (num){f[i].a / length, f[i].b / length - f[i].a * rate / (length * length)};
    }
    return (num){length, rate};
}

#include "closure/eval.inc"

/* One mechanism at one point: the same in three types of number. */
typedef struct trial {
    const lwi_system *sys;
    bool inputs; /* some node or element is given, and moves too */
    lwt_random rng;
    double y[LWI_MAX_VARS]; /* motion of the scaled unknowns */
    lwi_state state;
    lwi_eval ev;
    dual_point point;
    dual_eval dual;
    lwi_cstate cstate;
    lwi_cinput cinput;
    lwi_ceval cev;
    double res[LWI_MAX_ROWS];
    double jac[LWI_MAX_ROWS * LWI_MAX_VARS];
    lwi_cx cres[LWI_MAX_ROWS];
    lwi_cx cjac[LWI_MAX_ROWS * LWI_MAX_VARS];
    lwi_cx crate[LWI_MAX_ROWS];
    num wide[6 * LWI_MAX_VARS];
    double flat[6 * LWI_MAX_VARS];
    double apart[6 * LWI_MAX_VARS];
} trial;

static const double TOL = 2e-12; /* of rows whose entries are of the order of one to ten */

static double any(trial *t)
{
    return lwt_random_in(&t->rng, -1.0, 1.0);
}

/* q turns at unit rate times w: q' = (0, w) q / 2, or q (0, w) / 2 on its right. */
static void turning(num out[4], const double q[4], const double w[3], bool right)
{
    const double half[4] = {0.0, 0.5 * w[0], 0.5 * w[1], 0.5 * w[2]};
    double rate[4];
    lwi_quat_mul(rate, right ? q : half, right ? half : q);
    for (int i = 0; i < 4; i++) {
        out[i] = (num){q[i], rate[i]};
    }
}

static void random_quat(trial *t, const lwi_element *el)
{
    size_t i = (size_t)el->quat;
    double *q = t->state.quat[i];
    const double *y = t->y + el->var;
    double w[3];
    num moving[4];
    lwt_random_quaternion(&t->rng, q);
    for (int k = 0; k < 3; k++) {
        w[k] = el->kind == LWI_FREE ? y[3 + k] : el->sign * y[k];
        t->state.pos_m[i][k] = any(t);
    }
    turning(moving, q, w, el->kind == LWI_BALL && el->sign < 0.0);
    num_quat_rot(t->point.rot[i], moving);
    for (int k = 0; k < 4; k++) {
        t->cstate.quat[i][k] = q[k];
    }
    for (int k = 0; k < 3; k++) {
        double rate = 0.0;
        if (el->kind == LWI_FREE) { /* the point at `at` shifts, all else turns about it */
            rate = t->sys->var_scale[el->var + k] * y[k];
            for (int c = 0; c < 3; c++) {
                rate -= t->point.rot[i][3 * k + c].b * el->at[c];
            }
        }
        t->point.pos_m[i][k] = (num){t->state.pos_m[i][k], rate};
        t->cstate.pos_m[i][k] = t->state.pos_m[i][k];
    }
}

/* A given node turns with w and its point at the origin moves with v. */
static void random_node(trial *t, size_t n)
{
    lw_frame *x = &t->state.given[n];
    double q[4];
    double w[3];
    double v[3];
    double carried[3];
    num moving[4];
    for (int i = 0; i < 3; i++) {
        w[i] = any(t);
        v[i] = any(t);
        x->pos_m[i] = any(t);
        t->cinput.node_w[n][i] = w[i];
        t->cinput.node_v[n][i] = v[i];
    }
    lwt_random_quaternion(&t->rng, q);
    lw_rot_from_quat(x->rot, q);
    turning(moving, q, w, false);
    num_quat_rot(t->point.given[n].rot, moving);
    lwi_cross(carried, w, x->pos_m);
    for (int i = 0; i < 3; i++) {
        t->point.given[n].pos_m[i] = (num){x->pos_m[i], v[i] + carried[i]};
    }
}

static void random_one(trial *t, size_t k)
{
    const lwi_element *el = &t->sys->element[k];
    double value = any(t);
    double rate = el->given ? any(t) : t->sys->var_scale[el->var] * t->y[el->var];
    double c = cos(value);
    double s = sin(value);
    t->state.value[k] = value;
    t->point.value[k] = (num){value, rate};
    t->point.cs[k][0] = (num){c, -s * rate};
    t->point.cs[k][1] = (num){s, c * rate};
    t->cstate.lin[k] = t->cinput.lin[k] = value;
    t->cstate.cs[k][0] = t->cinput.cs[k][0] = c;
    t->cstate.cs[k][1] = t->cinput.cs[k][1] = s;
    t->cinput.lin_rate[k] = t->cinput.turn_rate[k] = rate;
}

static void random_point(trial *t)
{
    const lwi_system *sys = t->sys;
    lwi_state_reference(&t->state, sys);
    for (size_t i = 0; i < sys->n_var; i++) {
        t->y[i] = any(t);
    }
    for (size_t k = 0; k < sys->n_element; k++) {
        if (sys->element[k].quat >= 0) {
            random_quat(t, &sys->element[k]);
        } else {
            random_one(t, k);
        }
    }
    for (size_t n = 0; n < sys->n_node; n++) {
        for (int i = 0; i < 9; i++) {
            t->point.given[n].rot[i] = num_of(t->state.given[n].rot[i]);
        }
        for (int i = 0; i < 3; i++) {
            t->point.given[n].pos_m[i] = num_of(0.0);
        }
        if (n > 0 && sys->node_given[n]) {
            random_node(t, n);
        }
        for (int i = 0; i < 9; i++) {
            t->cinput.node[n].rot[i] = t->state.given[n].rot[i];
        }
        for (int i = 0; i < 3; i++) {
            t->cinput.node[n].pos_m[i] = t->state.given[n].pos_m[i];
        }
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        double length = sys->rod[r].length_m * (1.0 + 0.3 * any(t));
        double rate = any(t);
        t->state.rod_length_m[r] = length;
        t->point.rod_m[r] = (num){length, rate};
        t->cinput.rod_m[r] = length;
        t->cinput.rod_rate[r] = rate;
    }
    lwi_eval_nodes(&t->ev, sys, &t->state);
    num_eval_nodes(&t->dual, sys, &t->point);
    lwi_ceval_nodes(&t->cev, sys, &t->cstate, &t->cinput);
}

static bool listed(const unsigned short *var, size_t n, size_t i)
{
    for (size_t k = 0; k < n; k++) {
        if (var[k] == i) {
            return true;
        }
    }
    return false;
}

/* Clears what is listed and marks the rest, which must stay as it is. */
static void prepare(num *out, const lwi_system *sys, const unsigned short *var, size_t n)
{
    for (size_t i = 0; i < sys->n_var; i++) {
        out[i] = (num){777.0, 777.0};
    }
    num_clear(out, var, n);
}

/* A derivative: the listed entries are those of the double instance, the others are zero in that
 * and untouched here. */
static void compare(const num *out, const double *want, const lwi_system *sys,
                    const unsigned short *var, size_t n)
{
    for (size_t i = 0; i < sys->n_var; i++) {
        if (listed(var, n, i)) {
            lwt_near(out[i].a, want[i], TOL);
        } else {
            lwt_same(out[i].a, 777.0);
            lwt_same(want[i], 0.0);
        }
    }
}

/* Rates of the sum of derivative times motion, without inputs. */
static double along(const double *row, const trial *t)
{
    double sum = 0.0;
    for (size_t i = 0; i < t->sys->n_var; i++) {
        sum += row[i] * t->y[i];
    }
    return sum;
}

static void rows_agree(trial *t)
{
    const lwi_system *sys = t->sys;
    size_t n = sys->n_var;
    (void)lwi_eval_rows(t->res, t->jac, n, sys, &t->state, &t->ev);
    lwi_ceval_rows(t->cres, t->cjac, t->crate, sys, &t->cstate, &t->cinput, &t->cev);
    for (size_t i = 0; i < sys->n_row; i++) {
        const lwi_row *row = &sys->row[i];
        unsigned short var[LWI_MAX_VARS];
        size_t n_var = lwi_row_vars(var, sys, row);
        prepare(t->wide, sys, var, n_var);
        num res = num_row(t->wide, sys, row, &t->point, &t->dual);
        compare(t->wide, t->jac + i * n, sys, var, n_var);
        lwt_near(res.a, t->res[i], TOL);
        lwt_near(creal(t->cres[i]), t->res[i], TOL);
        if (row->kind == LWI_ROW_SPIN) {
            continue; /* a rate alone, of nothing */
        }
        lwt_near(res.b, along(t->jac + i * n, t) + creal(t->crate[i]), TOL);
        for (size_t v = 0; v < n; v++) {
            lwt_near(creal(t->cjac[i * n + v]), t->jac[i * n + v], TOL);
        }
        num alone = num_row(NULL, sys, row, &t->point, &t->dual);
        lwt_same(alone.a, res.a);
    }
}

/* Six rows of a point at rest in the node's frame: its velocity and the turn of the node. */
static void twists_agree(trial *t)
{
    static const double zero[3] = {0.0, 0.0, 0.0};
    const lwi_system *sys = t->sys;
    size_t n = sys->n_var;
    for (size_t node = 1; node < sys->n_node; node++) {
        const double at[3] = {any(t), any(t), any(t)};
        double now[3];
        num p[3];
        unsigned short var[LWI_MAX_VARS];
        size_t n_var = lwi_node_vars(var, sys, node);
        num_place(p, &t->dual.node[node], at);
        lwi_frame_apply(now, &t->ev.node[node], at);
        for (size_t c = 0; c < 6; c++) {
            prepare(t->wide + c * n, sys, var, n_var);
        }
        num_twist_rows(t->wide, n, sys, &t->dual, node, p);
        lwi_twist_rows(t->flat, sys, &t->ev, node, now);
        for (size_t c = 0; c < 6; c++) {
            const double unit[3] = {c % 3 == 0, c % 3 == 1, c % 3 == 2};
            compare(t->wide + c * n, t->flat + c * n, sys, var, n_var);
            lwi_twist_row(t->apart, sys, &t->ev, node, now, c < 3 ? unit : zero,
                          c < 3 ? zero : unit);
            lwt_near_n(t->apart, t->flat + c * n, n, TOL);
        }
        for (size_t i = 0; i < 3 && !t->inputs; i++) {
            lwt_near(p[i].b, along(t->flat + i * n, t), TOL);
        }
    }
}

/* Rod lengths, and the sums that drives and couplings take. */
static void sums_agree(trial *t)
{
    const lwi_system *sys = t->sys;
    for (size_t d = 0; d < sys->spec->n_drive; d++) {
        const lw_spec_drive *drive = &sys->spec->drive[d];
        unsigned short var[LWI_MAX_VARS];
        double value = 0.0;
        num sum = {0.0, 0.0};
        size_t n_var = lwi_terms_vars(var, sys, drive->term, drive->n_term);
        prepare(t->wide, sys, var, n_var);
        bool carried = lwi_terms(&value, t->flat, sys, &t->state, &t->ev, drive->term,
                                 drive->n_term);
        assert_int_equal(num_terms(&sum, t->wide, sys, &t->point, &t->dual, drive->term,
                                   drive->n_term), carried);
        if (carried) {
            compare(t->wide, t->flat, sys, var, n_var);
            lwt_near(sum.a, value, TOL);
        }
    }
    for (size_t r = 0; r < sys->spec->n_rod; r++) {
        const lw_term term = {.coord = lw_spec_coord_count(sys->spec) - sys->spec->n_rod + r,
                              .factor = 1.0};
        unsigned short var[LWI_MAX_VARS];
        size_t n_var = lwi_terms_vars(var, sys, &term, 1);
        double change = 0.0;
        prepare(t->wide, sys, var, n_var);
        num length = num_rod(t->wide, sys, &t->dual, r);
        assert_true(lwi_terms(&change, t->flat, sys, &t->state, &t->ev, &term, 1));
        compare(t->wide, t->flat, sys, var, n_var);
        lwt_near(length.a, lwi_rod_length(sys, &t->ev, r), TOL);
        lwt_near(length.a - sys->rod[r].length_m, change, TOL);
        lwt_same(num_rod_length(sys, &t->dual, r).b, length.b);
        if (!t->inputs) {
            lwt_near(length.b, along(t->flat, t), TOL);
        }
    }
}

static void check_system(trial *t, const lwi_system *sys)
{
    if (sys == NULL) {
        return;
    }
    t->sys = sys;
    t->inputs = false;
    for (size_t k = 0; k < sys->n_element; k++) {
        t->inputs = t->inputs || sys->element[k].given;
    }
    for (size_t i = 1; i < sys->n_node; i++) {
        t->inputs = t->inputs || sys->node_given[i];
    }
    for (int round = 0; round < 3; round++) {
        random_point(t);
        rows_agree(t);
        twists_agree(t);
        sums_agree(t);
    }
}

/* The mechanism with every drive of a single coordinate given: elements that are inputs, rods that
 * are equations. */
static void check_driven(trial *t, const lw_model *model)
{
    const lw_spec *spec = model->spec;
    bool body[LW_MAX_BODIES] = {false};
    bool given[LW_MAX_COORDS] = {false};
    bool keep[LW_MAX_COORDS] = {false};
    bool lock[LW_MAX_BODIES] = {false};
    double axis[LW_MAX_BODIES][3] = {{0.0, 0.0, 0.0}};
    lwi_system *sys = calloc(1, sizeof *sys);
    assert_non_null(sys);
    lwi_keep_coords(keep, spec);
    (void)lwi_idle_spins(lock, axis, spec, model->fused);
    for (size_t d = 0; d < spec->n_drive; d++) {
        given[spec->drive[d].term[0].coord] = spec->drive[d].n_term == 1;
    }
    lwi_build_ask ask = {.spec = spec,
                         .length_m = model->length_m,
                         .body_given = body,
                         .coord_given = given,
                         .coord_keep = keep,
                         .spin_lock = lock,
                         .spin_axis = (const double (*)[3])axis,
                         .rods_given = false};
    assert_int_equal(lwi_system_build(sys, &ask, NULL), LW_OK);
    for (size_t r = 0; r < spec->n_rod; r++) {
        if (given[lw_spec_rod_coord(spec, r)]) {
            lwi_system_fix_rod(sys, r);
        }
    }
    check_system(t, sys);
    free(sys);
}

static void check_model(trial *t, const char *name, const lw_model *model)
{
    print_message("%s\n", name);
    lwt_random_init(&t->rng, 4711);
    check_system(t, model->whole);
    check_system(t, model->inverse);
    check_driven(t, model);
}

static trial *new_trial(void)
{
    trial *t = calloc(1, sizeof *t);
    assert_non_null(t);
    return t;
}

static void dual_numbers_agree_on_the_demo_line(void **state)
{
    static const char *const name[5] = {"tilt-table", "belt-hopper", "lid-turner", "label-stage",
                                        "case-packer"};
    (void)state;
    trial *t = new_trial();
    for (size_t i = 0; i < 5; i++) {
        lw_model *model = lwt_bench_demo(name[i]);
        check_model(t, name[i], model);
        lw_model_free(model);
    }
    free(t);
}

static void dual_numbers_agree_on_many_kinds(void **state)
{
    (void)state;
    trial *t = new_trial();
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        lwt_machine *m = lwt_subjects[i].make();
        lwt_machine_load(m);
        check_model(t, lwt_subjects[i].name, m->model);
        lwt_machine_free(m);
    }
    free(t);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(dual_numbers_agree_on_the_demo_line),
        cmocka_unit_test(dual_numbers_agree_on_many_kinds),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
