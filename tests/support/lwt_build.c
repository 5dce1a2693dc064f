/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Building mechanisms for tests, see lwt_build.h. Questions and checks are in lwt_ask.c. */
#include "lwt_build.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "lwt.h"

lwt_machine *lwt_machine_new(const char *name)
{
    lwt_machine *m = calloc(1, sizeof *m);
    assert_non_null(m);
    m->spec = calloc(1, sizeof *m->spec);
    m->report = calloc(1, sizeof *m->report);
    m->ring = calloc(LWT_RING, sizeof *m->ring);
    assert_non_null(m->spec);
    assert_non_null(m->report);
    assert_non_null(m->ring);
    (void)snprintf(m->spec->name, sizeof m->spec->name, "%s", name);
    m->spec->n_body = 1;
    (void)snprintf(m->spec->body[0], LW_NAME_SIZE, "ground");
    return m;
}

void lwt_machine_free(lwt_machine *m)
{
    if (m == NULL) {
        return;
    }
    lw_work_free(m->work);
    lw_model_free(m->model);
    free(m->ring);
    free(m->report);
    free(m->spec);
    free(m);
}

static void unit_axis(double out[3], const double axis[3])
{
    double length = lwt_norm(axis);
    if (!(length > 0.0)) {
        lwt_fail("an axis needs a length above 0, got %g", length);
    }
    for (size_t i = 0; i < 3; i++) {
        out[i] = axis[i] / length;
    }
}

size_t lwt_add_body(lwt_machine *m)
{
    size_t n = m->spec->n_body++;
    assert_true(n < LW_MAX_BODIES);
    (void)snprintf(m->spec->body[n], LW_NAME_SIZE, "body-%zu", n);
    return n;
}

static lw_spec_joint *add_joint(lwt_machine *m, lw_joint_type type, size_t a, size_t b)
{
    lw_spec *spec = m->spec;
    if (spec->n_rod > 0 || spec->n_drive > 0 || spec->n_output > 0 || spec->n_coupling > 0) {
        lwt_fail("joints come before rods, couplings, drives and outputs");
    }
    assert_true(spec->n_joint < LW_MAX_JOINTS);
    lw_spec_joint *joint = &spec->joint[spec->n_joint++];
    (void)snprintf(joint->name, sizeof joint->name, "joint-%zu", spec->n_joint);
    joint->type = type;
    joint->body[0] = a;
    joint->body[1] = b;
    joint->axis[2] = 1.0;
    return joint;
}

static size_t add_axis_joint(lwt_machine *m, lw_joint_type type, size_t a, size_t b,
                             const double at[3], const double axis[3])
{
    lw_spec_joint *joint = add_joint(m, type, a, b);
    memcpy(joint->at_m, at, sizeof joint->at_m);
    unit_axis(joint->axis, axis);
    return m->spec->n_joint - 1;
}

size_t lwt_add_revolute(lwt_machine *m, size_t a, size_t b, const double at[3],
                        const double axis[3])
{
    return add_axis_joint(m, LW_REVOLUTE, a, b, at, axis);
}

size_t lwt_add_prismatic(lwt_machine *m, size_t a, size_t b, const double axis[3])
{
    return add_axis_joint(m, LW_PRISMATIC, a, b, (const double[3]){0, 0, 0}, axis);
}

size_t lwt_add_helical(lwt_machine *m, size_t a, size_t b, const double at[3],
                       const double axis[3], double lead_m)
{
    size_t joint = add_axis_joint(m, LW_HELICAL, a, b, at, axis);
    m->spec->joint[joint].lead_m = lead_m;
    return joint;
}

size_t lwt_add_cylindrical(lwt_machine *m, size_t a, size_t b, const double at[3],
                           const double axis[3])
{
    return add_axis_joint(m, LW_CYLINDRICAL, a, b, at, axis);
}

size_t lwt_add_universal(lwt_machine *m, size_t a, size_t b, const double at[3],
                         const double axis[3], const double second[3])
{
    size_t joint = add_axis_joint(m, LW_UNIVERSAL, a, b, at, axis);
    unit_axis(m->spec->joint[joint].second_axis, second);
    return joint;
}

size_t lwt_add_spherical(lwt_machine *m, size_t a, size_t b, const double at[3])
{
    return add_axis_joint(m, LW_SPHERICAL, a, b, at, (const double[3]){0, 0, 1});
}

size_t lwt_add_planar(lwt_machine *m, size_t a, size_t b, const double at[3],
                      const double normal[3], const double x_axis[3])
{
    size_t joint = add_axis_joint(m, LW_PLANAR, a, b, at, normal);
    unit_axis(m->spec->joint[joint].second_axis, x_axis);
    return joint;
}

size_t lwt_add_fixed(lwt_machine *m, size_t a, size_t b)
{
    (void)add_joint(m, LW_FIXED, a, b);
    return m->spec->n_joint - 1;
}

size_t lwt_add_rod(lwt_machine *m, size_t a, const double end_a[3], size_t b,
                   const double end_b[3])
{
    lw_spec *spec = m->spec;
    if (spec->n_drive > 0 || spec->n_output > 0 || spec->n_coupling > 0) {
        lwt_fail("rods come before couplings, drives and outputs");
    }
    assert_true(spec->n_rod < LW_MAX_RODS);
    lw_spec_rod *rod = &spec->rod[spec->n_rod++];
    (void)snprintf(rod->name, sizeof rod->name, "rod-%zu", spec->n_rod);
    rod->body[0] = a;
    rod->body[1] = b;
    memcpy(rod->end_m[0], end_a, sizeof rod->end_m[0]);
    memcpy(rod->end_m[1], end_b, sizeof rod->end_m[1]);
    return spec->n_rod - 1;
}

/* ---- chains ---------------------------------------------------------------------------------- */

static void revolute_about_z_of(lwt_machine *m, size_t a, size_t b, const lw_frame *frame)
{
    double axis[3] = {frame->rot[2], frame->rot[5], frame->rot[8]};
    (void)lwt_add_revolute(m, a, b, frame->pos_m, axis);
}

size_t lwt_add_chain_distal(lwt_machine *m, size_t base, const lw_frame *base_frame, size_t n,
                            const double *a, const double *alpha, const double *d,
                            const double *theta_ref, lw_frame *end)
{
    lw_frame frame = base_frame == NULL ? lwt_frame_identity() : *base_frame;
    size_t body = base;
    for (size_t i = 0; i < n; i++) {
        size_t next = lwt_add_body(m);
        revolute_about_z_of(m, body, next, &frame);
        lw_frame step = lwt_dh_distal(a[i], alpha[i], d[i], theta_ref[i]);
        frame = lwt_frame_mul(&frame, &step);
        body = next;
    }
    if (end != NULL) {
        *end = frame;
    }
    return body;
}

size_t lwt_add_chain_proximal(lwt_machine *m, size_t base, const lw_frame *base_frame, size_t n,
                              const double *a, const double *alpha, const double *d,
                              const double *theta_ref, lw_frame *end)
{
    lw_frame frame = base_frame == NULL ? lwt_frame_identity() : *base_frame;
    size_t body = base;
    for (size_t i = 0; i < n; i++) {
        size_t next = lwt_add_body(m);
        lw_frame step = lwt_dh_proximal(a[i], alpha[i], d[i], theta_ref[i]);
        frame = lwt_frame_mul(&frame, &step);
        revolute_about_z_of(m, body, next, &frame);
        body = next;
    }
    if (end != NULL) {
        *end = frame;
    }
    return body;
}

void lwt_add_loop_distal(lwt_machine *m, size_t n, const double *a, const double *alpha,
                         const double *d, const double *theta_ref)
{
    lw_frame frame = lwt_frame_identity();
    size_t body = 0;
    for (size_t i = 0; i < n; i++) {
        size_t next = i + 1 < n ? lwt_add_body(m) : 0;
        revolute_about_z_of(m, body, next, &frame);
        lw_frame step = lwt_dh_distal(a[i], alpha[i], d[i], theta_ref[i]);
        frame = lwt_frame_mul(&frame, &step);
        body = next;
    }
    lw_frame unit = lwt_frame_identity();
    lwt_near(lwt_frame_distance(&frame, &unit), 0.0, 1e-12);
    lwt_near(lwt_frame_angle(&frame, &unit), 0.0, 1e-12);
}

/* ---- drives, tools, outputs ------------------------------------------------------------------ */

size_t lwt_coord(const lwt_machine *m, size_t joint, size_t part)
{
    return lw_spec_joint_coord(m->spec, joint, part);
}

size_t lwt_add_coupling(lwt_machine *m, size_t coord_a, double factor_a, size_t coord_b,
                        double factor_b)
{
    lw_spec *spec = m->spec;
    assert_true(spec->n_coupling < LW_MAX_COUPLINGS);
    lw_spec_coupling *coupling = &spec->coupling[spec->n_coupling++];
    (void)snprintf(coupling->name, sizeof coupling->name, "coupling-%zu", spec->n_coupling);
    coupling->n_term = 2;
    coupling->term[0] = (lw_term){.coord = coord_a, .factor = factor_a};
    coupling->term[1] = (lw_term){.coord = coord_b, .factor = factor_b};
    return spec->n_coupling - 1;
}

size_t lwt_add_drive(lwt_machine *m, size_t coord)
{
    lw_spec *spec = m->spec;
    assert_true(spec->n_drive < LW_MAX_DRIVES);
    lw_spec_drive *drive = &spec->drive[spec->n_drive++];
    (void)snprintf(drive->name, sizeof drive->name, "m%zu", spec->n_drive);
    drive->n_term = 1;
    drive->term[0] = (lw_term){.coord = coord, .factor = 1.0};
    drive->turning = lw_spec_coord_turning(spec, coord);
    return spec->n_drive - 1;
}

size_t lwt_drive_joint(lwt_machine *m, size_t joint)
{
    return lwt_add_drive(m, lw_spec_joint_coord(m->spec, joint, 0));
}

size_t lwt_drive_rod(lwt_machine *m, size_t rod)
{
    return lwt_add_drive(m, lw_spec_rod_coord(m->spec, rod));
}

size_t lwt_add_tool(lwt_machine *m, size_t body, const lw_frame *frame)
{
    lw_spec *spec = m->spec;
    assert_true(spec->n_tool < LW_MAX_TOOLS);
    lw_spec_tool *tool = &spec->tool[spec->n_tool++];
    (void)snprintf(tool->name, sizeof tool->name, "tool-%zu", spec->n_tool);
    tool->body = body;
    tool->frame = frame == NULL ? lwt_frame_identity() : *frame;
    return spec->n_tool - 1;
}

void lwt_add_outputs(lwt_machine *m, const char *words)
{
    static const char *const name[] = {"x", "y", "z", "rx", "ry", "rz"};
    static const lw_output_kind kind[] = {LW_OUT_X,  LW_OUT_Y,  LW_OUT_Z,
                                          LW_OUT_RX, LW_OUT_RY, LW_OUT_RZ};
    while (*words != '\0') {
        size_t length = strcspn(words, " ");
        size_t found = 6;
        for (size_t i = 0; i < 6; i++) {
            if (strlen(name[i]) == length && memcmp(name[i], words, length) == 0) {
                found = i;
            }
        }
        if (found == 6) {
            lwt_fail("no output is called %.8s", words);
        }
        assert_true(m->spec->n_output < LW_MAX_OUTPUTS);
        m->spec->output[m->spec->n_output++].kind = kind[found];
        words += length + strspn(words + length, " ");
    }
}

void lwt_add_output_coord(lwt_machine *m, size_t coord)
{
    assert_true(m->spec->n_output < LW_MAX_OUTPUTS);
    m->spec->output[m->spec->n_output++] = (lw_spec_output){.kind = LW_OUT_COORD, .coord = coord};
}

/* ---- loading --------------------------------------------------------------------------------- */

static void print_findings(const lwt_machine *m)
{
    for (size_t i = 0; i < m->report->n_finding; i++) {
        const lw_finding *f = &m->report->finding[i];
        print_message("  %s %s at %s: %s (expected %s, got %s)\n",
                      f->severity == LW_ERROR ? "error" : "finding", f->code, f->where, f->text,
                      f->expected, f->got);
    }
}

lw_code lwt_machine_report(lwt_machine *m)
{
    lw_work_free(m->work);
    lw_model_free(m->model);
    m->work = NULL;
    m->model = NULL;
    memset(&m->err, 0, sizeof m->err);
    lw_code code = lw_model_new(&m->model, m->spec, 0x1eeULL, m->report, &m->err);
    assert_true((code == LW_OK) == (m->model != NULL));
    return code;
}

void lwt_machine_load(lwt_machine *m)
{
    lw_code code = lwt_machine_report(m);
    if (code != LW_OK) {
        print_findings(m);
        lwt_fail("%s was refused: %s: %s", m->spec->name, m->err.where, m->err.msg);
    }
    code = lw_work_new(&m->work, m->model, &m->err);
    if (code != LW_OK) {
        lwt_fail("%s got no work: %s", m->spec->name, m->err.msg);
    }
}

const lw_finding *lwt_finding(const lwt_machine *m, const char *code)
{
    for (size_t i = 0; i < m->report->n_finding; i++) {
        if (strcmp(m->report->finding[i].code, code) == 0) {
            return &m->report->finding[i];
        }
    }
    return NULL;
}
