/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What can be said of a mechanism without solving: connections, counts, lengths, idle spins. */
#include "../math/vec3.h"
#include "build.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>

void lwi_find(lw_report *report, lw_severity severity, const char *code, const char *where,
              const char *expected, const char *got, const char *format, ...)
{
    if (report->n_finding >= LW_MAX_FINDINGS) {
        report->findings_lost++;
        return;
    }
    lw_finding *f = &report->finding[report->n_finding++];
    memset(f, 0, sizeof *f);
    f->severity = severity;
    (void)snprintf(f->code, sizeof f->code, "%s", code);
    (void)snprintf(f->where, sizeof f->where, "%s", where != NULL ? where : "");
    (void)snprintf(f->expected, sizeof f->expected, "%s", expected != NULL ? expected : "");
    (void)snprintf(f->got, sizeof f->got, "%s", got != NULL ? got : "");
    va_list args;
    va_start(args, format);
    (void)vsnprintf(f->text, sizeof f->text, format, args);
    va_end(args);
}

bool lwi_has_errors(const lw_report *report)
{
    for (size_t i = 0; i < report->n_finding; i++) {
        if (report->finding[i].severity == LW_ERROR) {
            return true;
        }
    }
    return false;
}

static void check_bodies(const lw_model *m, lw_report *report)
{
    const lw_spec *spec = m->spec;
    size_t group[LW_MAX_BODIES];
    for (size_t i = 0; i < spec->n_body; i++) {
        group[i] = i;
    }
    for (bool more = true; more;) {
        more = false;
        for (size_t j = 0; j < spec->n_joint + spec->n_rod; j++) {
            const size_t *body = j < spec->n_joint ? spec->joint[j].body
                                                   : spec->rod[j - spec->n_joint].body;
            size_t a = group[body[0]];
            size_t b = group[body[1]];
            if (a != b) {
                group[body[0]] = group[body[1]] = a < b ? a : b;
                more = true;
            }
        }
    }
    for (size_t i = 0; i < spec->n_body; i++) {
        char where[96];
        if (group[i] != group[spec->frame]) {
            (void)snprintf(where, sizeof where, "/bodies/%zu", i);
            lwi_find(report, LW_ERROR, "body-hangs-free", where,
                     "a chain of joints or rods to the frame", spec->body[i],
                     "Body \"%s\" is not connected to the frame \"%s\" by any joint or rod.",
                     spec->body[i], spec->body[spec->frame]);
        }
    }
}

void lwi_check_structure(const lw_model *m, lw_report *report)
{
    const lw_spec *spec = m->spec;
    char where[96];
    if (spec->n_tool == 0) {
        lwi_find(report, LW_ERROR, "no-tool", "/tools", "at least one tool", "none",
                 "The document names no tool, so there is no pose to ask about.");
    }
    for (size_t t = 0; t < spec->n_tool; t++) {
        if (m->fused[spec->tool[t].body] == m->fused[spec->frame]) {
            (void)snprintf(where, sizeof where, "/tools/%zu/body", t);
            lwi_find(report, LW_ERROR, "tool-on-frame", where, "a moving body",
                     spec->body[spec->tool[t].body],
                     "Tool \"%s\" sits on the fixed body and can never move.", spec->tool[t].name);
        }
    }
    if (spec->n_output == 0) {
        lwi_find(report, LW_ERROR, "no-outputs", "/outputs", "at least one output", "none",
                 "The document does not say what the mechanism moves.");
    }
    if (spec->n_drive == 0) {
        lwi_find(report, LW_ERROR, "no-drives", "/drives", "at least one drive", "none",
                 "Nothing is driven.");
    }
    for (size_t j = 0; j < spec->n_joint; j++) {
        const lw_spec_joint *joint = &spec->joint[j];
        if (joint->type != LW_FIXED &&
            m->fused[joint->body[0]] == m->fused[joint->body[1]]) {
            (void)snprintf(where, sizeof where, "/joints/%zu/between", j);
            lwi_find(report, LW_ERROR, "joint-locked-by-fixed", where, "two separate bodies",
                     joint->name, "Joint \"%s\" connects two bodies that fixed joints already "
                     "make one.", joint->name);
        }
    }
    check_bodies(m, report);
}

double lwi_default_length(const lw_spec *spec)
{
    double low[3] = {1e300, 1e300, 1e300};
    double high[3] = {-1e300, -1e300, -1e300};
    size_t n = 0;
    for (size_t i = 0; i < spec->n_joint + 2 * spec->n_rod + spec->n_tool; i++) {
        const double *p;
        if (i < spec->n_joint) {
            if (spec->joint[i].type == LW_PRISMATIC || spec->joint[i].type == LW_FIXED) {
                continue;
            }
            p = spec->joint[i].at_m;
        } else if (i < spec->n_joint + 2 * spec->n_rod) {
            size_t k = i - spec->n_joint;
            p = spec->rod[k / 2].end_m[k % 2];
        } else {
            p = spec->tool[i - spec->n_joint - 2 * spec->n_rod].frame.pos_m;
        }
        n++;
        for (int c = 0; c < 3; c++) {
            low[c] = fmin(low[c], p[c]);
            high[c] = fmax(high[c], p[c]);
        }
    }
    double d[3];
    lwi_sub(d, high, low);
    double size = n > 1 ? lwi_norm(d) / 4.0 : 0.0;
    return size > 1e-6 ? size : 0.25;
}

static bool parallel(const double a[3], const double b[3])
{
    double c[3];
    lwi_cross(c, a, b);
    return lwi_norm(c) < 1e-6;
}

void lwi_keep_coords(bool *keep, const lw_spec *spec)
{
    size_t n_scalar = lw_spec_rod_coord(spec, 0);
    for (size_t d = 0; d < spec->n_drive; d++) {
        for (size_t t = 0; t < spec->drive[d].n_term; t++) {
            keep[spec->drive[d].term[t].coord] = true;
        }
    }
    for (size_t c = 0; c < spec->n_coupling; c++) {
        for (size_t t = 0; t < spec->coupling[c].n_term; t++) {
            keep[spec->coupling[c].term[t].coord] = true;
        }
    }
    for (size_t o = 0; o < spec->n_output; o++) {
        if (spec->output[o].kind == LW_OUT_COORD) {
            keep[spec->output[o].coord] = true;
        }
    }
    for (size_t j = 0; j < spec->needs.n_joint; j++) {
        keep[spec->needs.joint[j].coord] = true;
    }
    /* Screws close in whole turns only when every joint in line with them keeps its turn count. */
    for (size_t h = 0; h < spec->n_joint; h++) {
        if (spec->joint[h].type != LW_HELICAL) {
            continue;
        }
        for (size_t j = 0; j < spec->n_joint; j++) {
            const lw_spec_joint *joint = &spec->joint[j];
            size_t n = lw_joint_coords(joint->type);
            bool line = joint->type == LW_HELICAL || joint->type == LW_REVOLUTE ||
                        joint->type == LW_PRISMATIC || joint->type == LW_CYLINDRICAL;
            for (size_t k = 0; line && k < n && parallel(joint->axis, spec->joint[h].axis); k++) {
                keep[lw_spec_joint_coord(spec, j, k)] = true;
            }
        }
    }
    for (size_t i = n_scalar; i < LW_MAX_COORDS; i++) {
        keep[i] = false;
    }
}

size_t lwi_idle_spins(bool *lock, double (*axis)[3], const lw_spec *spec, const size_t *fused)
{
    size_t group[LW_MAX_BODIES];
    size_t found = 0;
    for (size_t i = 0; i < spec->n_body; i++) {
        group[i] = fused[i];
        lock[i] = false;
    }
    for (bool more = true; more;) {
        more = false;
        for (size_t j = 0; j < spec->n_joint; j++) {
            const lw_spec_joint *joint = &spec->joint[j];
            size_t a = group[joint->body[0]];
            size_t b = group[joint->body[1]];
            if (joint->type == LW_SPHERICAL || a == b) {
                continue;
            }
            for (size_t i = 0; i < spec->n_body; i++) {
                group[i] = group[i] == (a > b ? a : b) ? (a > b ? b : a) : group[i];
            }
            more = true;
        }
    }
    for (size_t g = 0; g < spec->n_body; g++) {
        const double *centre[2] = {NULL, NULL};
        size_t at_body = 0;
        size_t balls = 0;
        size_t rods = 0;
        if (group[g] != g || group[spec->frame] == g || group[spec->tool[0].body] == g) {
            continue;
        }
        for (size_t j = 0; j < spec->n_joint; j++) {
            const lw_spec_joint *joint = &spec->joint[j];
            bool in0 = group[joint->body[0]] == g;
            bool in1 = group[joint->body[1]] == g;
            if (joint->type == LW_SPHERICAL && in0 != in1) {
                if (balls < 2) {
                    centre[balls] = joint->at_m;
                }
                if (balls == 0) {
                    at_body = fused[joint->body[in0 ? 0 : 1]];
                }
                balls++;
            }
        }
        for (size_t r = 0; r < spec->n_rod; r++) {
            rods += group[spec->rod[r].body[0]] == g || group[spec->rod[r].body[1]] == g;
        }
        double d[3];
        if (balls == 2 && rods == 0) {
            lwi_sub(d, centre[1], centre[0]);
            if (lwi_unit(axis[at_body], d)) {
                lock[at_body] = true;
                found++;
            }
        }
    }
    return found;
}

int lwi_counted_mobility(const lw_spec *spec, const size_t *fused)
{
    int bodies = 0;
    for (size_t i = 0; i < spec->n_body; i++) {
        bodies += fused[i] == i;
    }
    int count = 6 * (bodies - 1);
    for (size_t j = 0; j < spec->n_joint; j++) {
        lw_joint_type type = spec->joint[j].type;
        if (type != LW_FIXED) {
            count -= 6 - (type == LW_SPHERICAL ? 3 : (int)lw_joint_coords(type));
        }
    }
    for (size_t r = 0; r < spec->n_rod; r++) {
        count -= lwi_rod_moves(spec, r) ? 0 : 1;
    }
    return count - (int)spec->n_coupling;
}
