/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How fast the smallest singular values grow, and in which direction: against differences of the
 * values themselves over small steps of each drive. Screws and joint shares of the weakest motion
 * against small steps along it. Machines of many kinds, random postures. */
#include "lwt.h"
#include "lwt_build.h"
#include "lwt_subjects.h"

#include <math.h>
#include <string.h>


enum { POSTURES = 6 };

typedef struct place {
    lwt_copy at;
    double drive[LW_MAX_DRIVES];
} place;

/* A random posture by readings; false where that names none. */
static bool random_place(place *out, lwt_machine *m, const lwt_subject *subject, lwt_random *rng)
{
    const lw_posture_answer *posture;
    double drive[LW_MAX_DRIVES];
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        drive[d] = lwt_random_in(rng, -subject->span, subject->span);
    }
    assert_int_equal(lw_posture(&posture, m->model, 0, NULL, lwt_by_drives(m, drive, NULL),
                                m->work, &m->err),
                     LW_OK);
    if (posture->solution == NULL) {
        return false;
    }
    memcpy(out->drive, posture->solution->drive, sizeof out->drive);
    lwt_keep(&out->at, m, posture->solution);
    return true;
}

static const lw_margin_answer *stepped(lwt_machine *m, place *from, size_t d, double by)
{
    double drive[LW_MAX_DRIVES];
    lw_config config = lwt_config_of(&from->at);
    memcpy(drive, from->drive, sizeof drive);
    drive[d] += by;
    return lwt_margin(m, lwt_by_drives(m, drive, lwt_by_config(m, &config)));
}

static double last_of(const lw_margin_answer *a, bool tool)
{
    const lw_rank_info *info = tool ? &a->tool : &a->drives;
    return info->singular[info->n_singular - 1];
}

/* Gap to the next singular value; where it is small, differences see both. */
static bool simple(const lw_rank_info *info)
{
    size_t n = info->n_singular;
    return n < 2 || info->singular[n - 2] > 1.05 * info->singular[n - 1];
}

static double output_scale(const lwt_machine *m, size_t o)
{
    const lw_spec_output *out = &m->spec->output[o];
    bool length = out->kind <= LW_OUT_Z || (out->kind == LW_OUT_COORD &&
                                            !lw_spec_coord_turning(m->spec, out->coord));
    return length ? 1.0 / m->report->characteristic_length_m : 1.0;
}

/* The gradient by differences, over drives, then over outputs where the step is measured there. */
static void check_leave(lwt_machine *m, place *from, const lw_leave *leave, bool tool,
                        const lw_jacobian_answer *j)
{
    size_t n = m->spec->n_drive;
    double length = m->report->characteristic_length_m;
    double g[LW_MAX_DRIVES];
    for (size_t d = 0; d < n; d++) {
        double h = m->spec->drive[d].turning ? 1e-5 : 1e-5 * length;
        double up = last_of(stepped(m, from, d, h), tool);
        double down = last_of(stepped(m, from, d, -h), tool);
        g[d] = (up - down) / (2.0 * h);
    }
    double size = 0.0;
    double sum = 0.0;
    if (leave->by == LW_LEAVE_DRIVES) {
        for (size_t d = 0; d < n; d++) {
            double scale = m->spec->drive[d].turning ? 1.0 : 1.0 / length;
            size += g[d] * g[d] / (scale * scale);
        }
    } else {
        assert_int_equal(leave->by, LW_LEAVE_TOOL);
        for (size_t o = 0; o < j->n_output; o++) {
            double along = 0.0;
            for (size_t d = 0; d < n; d++) {
                along += g[d] * j->inverse[d * j->n_output + o];
            }
            along /= output_scale(m, o);
            size += along * along;
        }
    }
    for (size_t d = 0; d < n; d++) {
        sum += g[d] * leave->drive[d];
    }
    size = sqrt(size);
    assert_true(leave->known || size < 1e-4);
    /* Along the direction named it grows at the rate named, and nowhere faster. */
    lwt_near(leave->rate, size, 2e-6 * fmax(1.0, size));
    lwt_near(leave->rate, sum, 2e-6 * fmax(1.0, size));
}

/* Joints, tool and outputs move along the weakest motion as its shares and its screw say. */
static void check_motion(lwt_machine *m, place *from, const lw_weak *weak)
{
    const double h = 1e-5;
    double drive[LW_MAX_DRIVES];
    double length = m->report->characteristic_length_m;
    lw_config config = lwt_config_of(&from->at);
    lwt_copy end[2];
    for (size_t side = 0; side < 2; side++) {
        for (size_t d = 0; d < m->spec->n_drive; d++) {
            double scale = m->spec->drive[d].turning ? 1.0 : length;
            drive[d] = from->drive[d] + (side == 0 ? -h : h) * scale * weak->drive[d];
        }
        lwt_keep(&end[side], m,
                 lwt_margin(m, lwt_by_drives(m, drive, lwt_by_config(m, &config)))->solution);
    }
    for (size_t c = 0; c < lw_spec_coord_count(m->spec); c++) {
        double scale = lw_spec_coord_turning(m->spec, c) ? 1.0 : length;
        double rate = (end[1].coord[c] - end[0].coord[c]) / (2.0 * h * scale);
        lwt_near(weak->coord[c], rate, 2e-6);
    }
    size_t body = m->spec->tool[0].body;
    double turn[3];
    lwt_frame_turn_between(turn, &end[0].body[body], &end[1].body[body]);
    double angle = lwt_norm(turn) / (2.0 * h);
    if (weak->screw.kind == LW_SCREW_NONE) {
        return;
    }
    /* The axis' own point moves along the axis only. */
    double before[3];
    double after[3];
    lw_frame at = lwt_frame_inverse(&from->at.body[body]);
    double point[3];
    lwt_frame_point(point, &at, weak->screw.point_m);
    lwt_frame_point(before, &end[0].body[body], point);
    lwt_frame_point(after, &end[1].body[body], point);
    double moved[3];
    for (size_t i = 0; i < 3; i++) {
        moved[i] = (after[i] - before[i]) / (2.0 * h);
    }
    double along = lwt_dot(moved, weak->screw.axis);
    double reach = fmax(1.0, lwt_norm(weak->screw.point_m));
    for (size_t i = 0; i < 3; i++) {
        lwt_near(moved[i], along * weak->screw.axis[i], 2e-6 * reach);
    }
    if (weak->screw.kind == LW_SCREW_SHIFT) {
        lwt_near(angle, 0.0, 2e-6);
    } else {
        double about = lwt_dot(turn, weak->screw.axis) / (2.0 * h);
        lwt_near(fabs(about), angle, 2e-6);
        double pitch = weak->screw.kind == LW_SCREW_TWIST ? weak->screw.pitch_m : 0.0;
        lwt_near(along, pitch / (2.0 * LWT_PI) * about, 4e-6 * reach);
    }
}

/* A drive that sticks leaves one freedom less, which the others hold: by interlacing no worse than
 * all hold their least. With two drives for two freedoms, the motion that drive 1 leaves is square
 * to its row a1, so h1 = s1 s2 / |a1|, and |a1|^2 + |a2|^2 = s1^2 + s2^2. */
static void check_braked(lwt_machine *m, const lw_margin_answer *a)
{
    const lw_singular_answer *s = a->singular;
    if (m->spec->n_drive == 2) {
        double sum = 0.0;
        double want = 0.0;
        for (size_t d = 0; d < 2; d++) {
            sum += 1.0 / (s->hold_braked[d] * s->hold_braked[d]);
            want += 1.0 / (a->drives.singular[d] * a->drives.singular[d]);
        }
        lwt_near_rel(sum, want, 1e-9);
    }
    for (size_t d = 0; d < m->spec->n_drive; d++) {
        assert_int_equal(s->freedoms_braked[d] + 1, (size_t)m->report->mobility);
        if (s->freedoms_braked[d] > 0) {
            /* Interlacing: between the two smallest of all. */
            size_t n = a->drives.n_singular;
            assert_true(s->hold_braked[d] >= a->drives.singular[n - 1] * (1.0 - 1e-9));
            assert_true(s->hold_braked[d] <= a->drives.singular[n - 2] * (1.0 + 1e-9));
        }
    }
}

static void values_grow_as_said(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 11);
    size_t slopes = 0;
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        lwt_machine *m = lwt_subjects[i].make();
        lwt_machine_load(m);
        if (m->report->redundancy_drives != 0 || m->report->redundancy_kinematic != 0) {
            lwt_machine_free(m);
            continue;
        }
        for (size_t k = 0; k < POSTURES; k++) {
            place from;
            if (!random_place(&from, m, &lwt_subjects[i], &rng)) {
                continue;
            }
            lw_config config = lwt_config_of(&from.at);
            lw_jacobian_answer j = *lwt_jacobian(m, lwt_by_config(m, &config));
            const lw_margin_answer *a = lwt_margin(m, lwt_by_config(m, &config));
            if (!j.has_inverse || j.condition_forward > 50.0 || a->classes != 0) {
                continue;
            }
            lw_singular_answer s = *a->singular;
            bool both[2] = {simple(&a->drives), simple(&a->tool)};
            assert_int_equal(s.n_drives, 1);
            assert_false(s.drives[0].lost);
            lwt_same(s.drives[0].value, a->margin[LW_MARGIN_HOLD].value);
            check_braked(m, a);
            check_motion(m, &from, &s.drives[0]);
            for (size_t t = 0; t < 2; t++) {
                const lw_leave *leave = t == 0 ? &s.leave_drives : &s.leave_tool;
                if (both[t] && leave->by != LW_LEAVE_JOINTS) {
                    check_leave(m, &from, leave, t == 1, &j);
                    slopes++;
                }
            }
        }
        lwt_machine_free(m);
    }
    print_message("%zu gradients\n", slopes);
    assert_true(slopes > 80);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(values_grow_as_said),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
