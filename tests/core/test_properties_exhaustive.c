/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Identities that hold for every mechanism, over thousands of random postures of many kinds:
 * inverse(forward(x)) = x, closure of every returned solution from the definition of the joints,
 * Jacobians against central differences both ways, virtual work, and the same answers wherever the
 * whole mechanism stands. */
#include "lwt.h"
#include "lwt_all.h"
#include "lwt_build.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>

static const double ORIGIN[3] = {0, 0, 0};

/* ---- random postures ------------------------------------------------------------------------- */

/* Moves output k of the pose by `by`; turns are about the fixed axes. */
static void nudge(const lw_spec *spec, size_t k, double by, lw_frame *tool, double *coord)
{
    const lw_spec_output *output = &spec->output[k];
    if (output->kind == LW_OUT_COORD) {
        coord[output->coord] += by;
    } else if (output->kind <= LW_OUT_Z) {
        tool->pos_m[output->kind - LW_OUT_X] += by;
    } else {
        double axis[3] = {0, 0, 0};
        axis[output->kind - LW_OUT_RX] = 1.0;
        lw_frame turn = lwt_frame_turn(axis, ORIGIN, by);
        lw_frame turned = lwt_frame_mul(&turn, tool);
        memcpy(tool->rot, turned.rot, sizeof turned.rot);
    }
}

/* Drives as many as freedoms: random readings, forward by the default branch. Otherwise a random
 * pose, inverse in the reference's mode. False where the mechanism says no. */
static bool random_posture(lwt_machine *m, lwt_random *rng, double span, lwt_copy *out)
{
    if (m->report->redundancy_drives == 0) {
        double drive[LW_MAX_DRIVES];
        for (size_t i = 0; i < m->spec->n_drive; i++) {
            drive[i] = lwt_random_in(rng, -span, span);
        }
        lw_forward_ask ask;
        memset(&ask, 0, sizeof ask);
        ask.readings = lwt_by_drives(m, drive, NULL);
        const lw_forward_answer *answer = NULL;
        assert_int_equal(lw_forward(&answer, m->model, &ask, m->work, &m->err), LW_OK);
        if (answer->outcome != LW_OUTCOME_OK) {
            return false;
        }
        lwt_keep(out, m, &answer->solution[0]);
        for (size_t i = 0; i < m->spec->n_drive; i++) {
            lwt_near(out->drive[i], drive[i], 1e-10);
        }
        return true;
    }
    lw_frame pose = m->spec->tool[0].frame;
    double coord[LW_MAX_COORDS] = {0};
    for (size_t k = 0; k < m->spec->n_output; k++) {
        /* A turn of a spindle is worth little way. */
        double by = m->spec->output[k].kind == LW_OUT_COORD ? 50.0 * span : span;
        nudge(m->spec, k, lwt_random_in(rng, -by, by), &pose, coord);
    }
    const lw_inverse_answer *inverse =
        lwt_inverse(m, &pose, coord, &m->report->reference_mode, NULL);
    if (inverse->outcome != LW_OUTCOME_OK || inverse->n_solution == 0) {
        return false;
    }
    lwt_keep(out, m, &inverse->solution[0]);
    return true;
}

static double largest(const double *a, size_t n)
{
    double big = 0.0;
    for (size_t i = 0; i < n; i++) {
        big = fmax(big, fabs(a[i]));
    }
    return big;
}

/* Drives agree, turning ones modulo a turn. */
static double drives_apart(const lw_spec *spec, const double *a, const double *b)
{
    double worst = 0.0;
    for (size_t i = 0; i < spec->n_drive; i++) {
        double d = a[i] - b[i];
        worst = fmax(worst, fabs(spec->drive[i].turning ? lwt_wrap(d) : d));
    }
    return worst;
}

static void closure_holds(const lwt_machine *m, const lw_config *config)
{
    double position = 0.0;
    double angle = 0.0;
    lwt_closure(m->spec, config, &position, &angle);
    lwt_near(position, 0.0, 1e-10);
    lwt_near(angle, 0.0, 1e-10);
}

/* No solution stands twice in a list: scalar coordinates tell them apart (turns modulo a turn);
 * what differs by the idle spin of a ball-ended member alone is the same solution. */
static void check_listed_once(const lwt_machine *m, const lw_inverse_answer *inverse)
{
    size_t n = lw_spec_coord_count(m->spec);
    for (size_t a = 0; a < inverse->n_solution; a++) {
        for (size_t b = 0; b < a; b++) {
            double worst = 0.0;
            for (size_t i = 0; i < n; i++) {
                double d = inverse->solution[a].config.coord[i] -
                           inverse->solution[b].config.coord[i];
                bool turning = lw_spec_coord_turning(m->spec, i);
                worst = fmax(worst, fabs(turning ? lwt_wrap(d) : d));
            }
            if (!(worst > 1e-7)) {
                lwt_fail("solutions %zu and %zu of %zu are the same", b, a, inverse->n_solution);
            }
        }
    }
}

/* ---- inverse and forward undo each other ----------------------------------------------------- */

/* `condition` scales what a closure error of 1e-12 may do to the drives or the pose. */
static void check_round_trip(lwt_machine *m, lwt_copy *at, double condition)
{
    double slack = 1e-9 + 1e-11 * condition;
    lw_config config = lwt_config_of(at);
    closure_holds(m, &config);
    const lw_posture_ask *near = lwt_by_config(m, &config);
    const lw_inverse_answer *inverse = lwt_inverse(m, &at->tool, at->coord, NULL, near);
    assert_int_equal(inverse->outcome, LW_OUTCOME_OK);
    assert_true(inverse->n_solution >= 1);
    lwt_near(drives_apart(m->spec, inverse->solution[0].drive, at->drive), 0.0, slack);

    inverse = lwt_inverse(m, &at->tool, at->coord, NULL, NULL);
    double off = INFINITY;
    for (size_t k = 0; k < inverse->n_solution; k++) {
        const lw_solution *solution = &inverse->solution[k];
        closure_holds(m, &solution->config);
        assert_true(solution->residual_position_m <= 1e-9);
        assert_true(solution->residual_angle_rad <= 1e-9);
        lw_pose_ask asked;
        lwt_pose_of(m, &at->tool, at->coord, &asked);
        for (size_t i = 0; i < 3; i++) {
            if (asked.has_position[i]) {
                lwt_near(solution->tool.pos_m[i], at->tool.pos_m[i], 1e-10);
            }
        }
        if (asked.orient == LW_ORIENT_QUATERNION) {
            lwt_near(lwt_frame_angle(&solution->tool, &at->tool), 0.0, 1e-10);
        }
        off = fmin(off, drives_apart(m->spec, solution->drive, at->drive));
    }
    check_listed_once(m, inverse);
    /* A complete list holds the posture that we came from. */
    if (inverse->complete) {
        lwt_near(off, 0.0, slack);
    }

    const lw_forward_answer *forward = lwt_forward(m, at->drive, lwt_by_config(m, &config));
    bool spare = m->report->redundancy_drives > 0;
    assert_int_equal(forward->n_disagreement, spare ? m->spec->n_drive : 0);
    for (size_t i = 0; i < forward->n_disagreement; i++) {
        lwt_near(forward->disagreement[i], 0.0, slack);
    }
    lwt_near(lwt_frame_distance(&forward->solution[0].tool, &at->tool), 0.0, slack);
    lwt_near(lwt_frame_angle(&forward->solution[0].tool, &at->tool), 0.0, slack);
}

/* ---- derivatives ----------------------------------------------------------------------------- */

/* Differences at -2, -1, 1, 2 steps; the combination is exact up to the fourth order, so that what
 * is left near a singular posture stays small. */
static const double STEP = 1e-4;
enum { SIDES = 4 };
static const double SIDE[SIDES] = {-2, -1, 1, 2};

static double slope(const double value[SIDES])
{
    return (8.0 * (value[2] - value[1]) - (value[3] - value[0])) / (12.0 * STEP);
}

/* Rates of the tool: velocity of its origin, then rate of turning. */
static void twist_of(double out[6], const lw_frame tool[SIDES])
{
    double outer[3];
    double inner[3];
    lwt_frame_turn_between(outer, &tool[0], &tool[3]);
    lwt_frame_turn_between(inner, &tool[1], &tool[2]);
    for (size_t i = 0; i < 3; i++) {
        const double position[SIDES] = {tool[0].pos_m[i], tool[1].pos_m[i], tool[2].pos_m[i],
                                        tool[3].pos_m[i]};
        out[i] = slope(position);
        out[3 + i] = (8.0 * inner[i] - outer[i]) / (12.0 * STEP);
    }
}

/* Rounding of 1e-13 over the step, and a fifth derivative that grows faster than the first. */
static double difference_slack(double big)
{
    return 1e-7 * big * big * big * big;
}

/* Columns of the forward matrix and the tool twists against forward at shifted readings. */
static void check_forward_derivative(lwt_machine *m, lwt_copy *at, const lw_jacobian_answer *j)
{
    size_t n = m->spec->n_drive;
    size_t n_out = m->spec->n_output;
    double big = fmax(1.0, fmax(largest(j->forward, n_out * n), largest(j->twist, 6 * n)));
    double tol = difference_slack(big);
    lw_config config = lwt_config_of(at);
    for (size_t d = 0; d < n; d++) {
        lw_frame tool[SIDES];
        double coord[LW_MAX_OUTPUTS][SIDES] = {{0}};
        for (size_t side = 0; side < SIDES; side++) {
            double drive[LW_MAX_DRIVES];
            memcpy(drive, at->drive, n * sizeof *drive);
            drive[d] += SIDE[side] * STEP;
            const lw_forward_answer *answer = lwt_forward(m, drive, lwt_by_config(m, &config));
            tool[side] = answer->solution[0].tool;
            for (size_t k = 0; k < n_out; k++) {
                if (m->spec->output[k].kind == LW_OUT_COORD) {
                    coord[k][side] = answer->solution[0].config.coord[m->spec->output[k].coord];
                }
            }
        }
        double rate[6];
        twist_of(rate, tool);
        for (size_t r = 0; r < 6; r++) {
            lwt_near(j->twist[r * n + d], rate[r], tol);
        }
        for (size_t k = 0; k < n_out; k++) {
            lw_output_kind kind = m->spec->output[k].kind;
            double want = kind == LW_OUT_COORD ? slope(coord[k])
                          : kind <= LW_OUT_Z   ? rate[kind - LW_OUT_X]
                                               : rate[3 + kind - LW_OUT_RX];
            lwt_near(j->forward[k * n + d], want, tol);
        }
    }
}

/* Columns of the inverse matrix against inverse at shifted poses, and virtual work: drive efforts
 * do the work of the tool force f = inverse^T efforts along every motion. */
static void check_inverse_derivative(lwt_machine *m, lwt_copy *at, const lw_jacobian_answer *j,
                                     lwt_random *rng)
{
    size_t n = m->spec->n_drive;
    size_t n_out = j->n_output;
    double tol = difference_slack(fmax(1.0, largest(j->inverse, n * n_out)));
    lw_config config = lwt_config_of(at);
    double effort[LW_MAX_DRIVES];
    for (size_t i = 0; i < n; i++) {
        effort[i] = lwt_random_in(rng, -1.0, 1.0);
    }
    for (size_t k = 0; k < n_out; k++) {
        double drive[LW_MAX_DRIVES][SIDES];
        for (size_t side = 0; side < SIDES; side++) {
            lwt_copy moved = *at;
            nudge(m->spec, k, SIDE[side] * STEP, &moved.tool, moved.coord);
            const lw_inverse_answer *answer =
                lwt_inverse(m, &moved.tool, moved.coord, NULL, lwt_by_config(m, &config));
            assert_true(answer->n_solution >= 1);
            for (size_t i = 0; i < n; i++) {
                double change = answer->solution[0].drive[i] - at->drive[i];
                drive[i][side] = m->spec->drive[i].turning ? lwt_wrap(change) : change;
            }
        }
        double force = 0.0;
        double work = 0.0;
        for (size_t i = 0; i < n; i++) {
            double rate = slope(drive[i]);
            lwt_near(j->inverse[i * n_out + k], rate, tol);
            force += j->inverse[i * n_out + k] * effort[i];
            work += effort[i] * rate;
        }
        lwt_near(work, force, (double)n * tol);
    }
}

/* The same rates about another point, and seen in the tool's own frame. */
static void check_reference_point(lwt_machine *m, lwt_copy *at, const lw_jacobian_answer *j,
                                  lwt_random *rng)
{
    size_t n = m->spec->n_drive;
    lw_config config = lwt_config_of(at);
    lw_jacobian_ask ask;
    memset(&ask, 0, sizeof ask);
    ask.posture = lwt_by_config(m, &config);
    ask.has_point = true;
    double local[3];
    double arm[3];
    for (size_t i = 0; i < 3; i++) {
        local[i] = lwt_random_in(rng, -1.0, 1.0);
    }
    lwt_frame_vector(arm, &at->tool, local);
    lw_frame back = lwt_frame_inverse(&at->tool);
    double tol = 1e-12 * fmax(1.0, largest(j->twist, 6 * n));
    for (int in_tool = 0; in_tool < 2; in_tool++) {
        ask.in_tool = in_tool == 1;
        for (size_t i = 0; i < 3; i++) {
            ask.point_m[i] = in_tool ? local[i] : at->tool.pos_m[i] + arm[i];
        }
        const lw_jacobian_answer *other = NULL;
        assert_int_equal(lw_jacobian(&other, m->model, &ask, m->work, &m->err), LW_OK);
        for (size_t d = 0; d < n; d++) {
            double v[3];
            double w[3];
            double across[3];
            for (size_t i = 0; i < 3; i++) {
                v[i] = j->twist[i * n + d];
                w[i] = j->twist[(3 + i) * n + d];
            }
            lwt_cross(across, w, arm);
            for (size_t i = 0; i < 3; i++) {
                v[i] += across[i];
            }
            if (in_tool) {
                lwt_frame_vector(v, &back, v);
                lwt_frame_vector(w, &back, w);
            }
            for (size_t i = 0; i < 3; i++) {
                lwt_near(other->twist[i * n + d], v[i], 10.0 * tol);
                lwt_near(other->twist[(3 + i) * n + d], w[i], tol);
            }
        }
    }
}

static void check_derivatives(lwt_machine *m, lwt_copy *at, lwt_random *rng)
{
    lw_config config = lwt_config_of(at);
    const lw_jacobian_answer *j = lwt_jacobian(m, lwt_by_config(m, &config));
    assert_int_equal(j->n_output, m->spec->n_output);
    assert_int_equal(j->n_drive, m->spec->n_drive);
    lw_jacobian_answer kept = *j;
    if (kept.has_forward && kept.has_inverse) {
        /* Back and forth is nothing, also where spare drives share. */
        double product[LW_MAX_OUTPUTS * LW_MAX_OUTPUTS];
        lwt_mat_mul(product, kept.forward, kept.inverse, kept.n_output, kept.n_drive,
                    kept.n_output);
        double size = fmax(1.0, largest(kept.forward, kept.n_output * kept.n_drive) *
                                    largest(kept.inverse, kept.n_output * kept.n_drive));
        for (size_t r = 0; r < kept.n_output; r++) {
            for (size_t c = 0; c < kept.n_output; c++) {
                lwt_near(product[r * kept.n_output + c], r == c ? 1.0 : 0.0, 1e-10 * size);
            }
        }
    }
    if (kept.has_forward) {
        check_reference_point(m, at, &kept, rng);
    }
    bool square = m->report->redundancy_drives == 0;
    if (square && kept.has_forward &&
        largest(kept.forward, kept.n_output * kept.n_drive) < 8.0) {
        check_forward_derivative(m, at, &kept);
    }
    if (kept.has_inverse && largest(kept.inverse, kept.n_output * kept.n_drive) < 8.0) {
        check_inverse_derivative(m, at, &kept, rng);
    }
}

/* ---- the place of the mechanism does not matter ---------------------------------------------- */

/* q -> D q D^-1 for the displacements of bodies and the turns of balls. */
static void carry(const lw_spec *spec, const lw_frame *by, const lwt_copy *at, lwt_copy *out)
{
    *out = *at;
    lw_frame back = lwt_frame_inverse(by);
    for (size_t i = 0; i < spec->n_body; i++) {
        lw_frame half = lwt_frame_mul(by, &at->body[i]);
        out->body[i] = lwt_frame_mul(&half, &back);
    }
    size_t ball = 0;
    for (size_t i = 0; i < spec->n_joint; i++) {
        if (spec->joint[i].type == LW_SPHERICAL) {
            lwt_frame_vector(&out->ball[ball][1], by, &at->ball[ball][1]);
            ball++;
        }
    }
    out->tool = lwt_frame_mul(by, &at->tool);
}

static lwt_machine *carried_machine(const lwt_subject *s, const lw_frame *by)
{
    lwt_machine *m = s->make();
    lwt_spec_move(m->spec, by);
    lwt_machine_load(m);
    return m;
}

static void check_carried(lwt_machine *m, lwt_machine *moved, const lw_frame *by, lwt_copy *at,
                          double condition)
{
    double slack = 1e-9 + 1e-11 * condition;
    lw_config config = lwt_config_of(at);
    const lw_jacobian_answer *j = lwt_jacobian(m, lwt_by_config(m, &config));
    double twist[6 * LW_MAX_DRIVES];
    size_t n = m->spec->n_drive;
    bool has = j->has_forward;
    memcpy(twist, j->twist, 6 * n * sizeof *twist);

    lwt_copy there;
    carry(m->spec, by, at, &there);
    lw_config there_config = lwt_config_of(&there);
    const lw_forward_answer *forward =
        lwt_forward(moved, at->drive, lwt_by_config(moved, &there_config));
    lwt_near(lwt_frame_distance(&forward->solution[0].tool, &there.tool), 0.0, slack);
    lwt_near(lwt_frame_angle(&forward->solution[0].tool, &there.tool), 0.0, slack);
    assert_int_equal(forward->solution[0].mode_known, at->mode_known);
    if (at->mode_known) {
        assert_true(lw_mode_same(&forward->solution[0].mode, &at->mode));
    }
    const lw_jacobian_answer *again = lwt_jacobian(moved, lwt_by_config(moved, &there_config));
    assert_int_equal(again->has_forward, has);
    if (!has) {
        return;
    }
    double big = fmax(1.0, largest(twist, 6 * n));
    for (size_t d = 0; d < n; d++) {
        for (size_t half = 0; half < 2; half++) {
            double here[3];
            double want[3];
            for (size_t i = 0; i < 3; i++) {
                here[i] = twist[(3 * half + i) * n + d];
            }
            lwt_frame_vector(want, by, here);
            for (size_t i = 0; i < 3; i++) {
                lwt_near(again->twist[(3 * half + i) * n + d], want[i], 1e-9 * big * big);
            }
        }
    }
}

/* ---- one subject after the other ------------------------------------------------------------- */

static double condition_at(lwt_machine *m, lwt_copy *at)
{
    lw_config config = lwt_config_of(at);
    const lw_jacobian_answer *j = lwt_jacobian(m, lwt_by_config(m, &config));
    double worst = 1.0;
    if (j->has_forward) {
        worst = fmax(worst, largest(j->forward, j->n_output * j->n_drive));
    }
    if (j->has_inverse) {
        worst = fmax(worst, largest(j->inverse, j->n_output * j->n_drive));
    }
    return j->has_forward && j->has_inverse ? worst : 1e9;
}

static void check_subject(const lwt_subject *s)
{
    lwt_random rng;
    lwt_random_init(&rng, 0x5eed);
    lwt_machine *m = s->make();
    lwt_machine_load(m);
    double axis[3] = {0, 0, 1};
    if (!s->planar_moves) {
        lwt_random_direction(&rng, axis);
    }
    lw_frame by = lwt_frame_turn(axis, ORIGIN, 0.9);
    for (size_t i = 0; i < (s->planar_moves ? 2u : 3u); i++) {
        by.pos_m[i] = lwt_random_in(&rng, -2.0, 2.0);
    }
    /* Outputs that name single axes of a slide hold for a shift alone. */
    if (strcmp(s->name, "spindle") == 0 || strcmp(s->name, "sarrus") == 0) {
        lw_frame unit = lwt_frame_identity();
        memcpy(by.rot, unit.rot, sizeof unit.rot);
    }
    lwt_machine *moved = carried_machine(s, &by);
    int reached = 0;
    int count = lwt_share(s->count);
    for (int k = 0; k < count; k++) {
        lwt_copy at;
        if (!random_posture(m, &rng, s->span, &at)) {
            continue;
        }
        reached++;
        double condition = condition_at(m, &at);
        if (condition > 1e4) {
            continue; /* so near a singular posture, inverse and forward need not agree */
        }
        check_round_trip(m, &at, condition);
        if (k % 3 == 0) {
            check_derivatives(m, &at, &rng);
        }
        if (k % 5 == 0) {
            check_carried(m, moved, &by, &at, condition);
        }
    }
    /* The spans are chosen so that nearly all of them exist. */
    print_message("%s: %d of %d postures\n", s->name, reached, count);
    assert_true(reached >= count * 8 / 10);
    lwt_machine_free(moved);
    lwt_machine_free(m);
}

static void run_subject(void **state)
{
    check_subject(*state);
}

int main(void)
{
    lw_init();
    struct CMUnitTest tests[LWT_SUBJECTS];
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        tests[i] = (struct CMUnitTest){.name = lwt_subjects[i].name,
                                       .test_func = run_subject,
                                       .initial_state = (void *)(uintptr_t)&lwt_subjects[i]};
    }
    return cmocka_run_group_tests(tests, NULL, NULL);
}
