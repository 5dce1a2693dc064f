/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The singularity part of a margin answer: its kind in words, what is lost or not held as a screw
 * with a sentence a technician can act on, limbs and joints, the way out, drives spent or stuck. */
#include "answer_out.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

/* The step that leads out is told for a hundredth of a characteristic length or of a radian. */
static const double STEP = 0.01;

typedef struct words {
    char text[600];
    size_t len;
} words;

static void say(words *w, const char *format, ...) __attribute__((format(printf, 2, 3)));

static void say(words *w, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    int n = vsnprintf(w->text + w->len, sizeof w->text - w->len, format, args);
    va_end(args);
    w->len += n > 0 ? (size_t)n : 0;
    w->len = w->len < sizeof w->text ? w->len : sizeof w->text - 1;
}

/* Four digits, no "-0". */
static double shown(double value)
{
    return fabs(value) < 5e-10 ? 0.0 : value;
}

static const char *output_name(const lwd_edge *edge, size_t o)
{
    static const char *const name[] = {"x", "y", "z", "rx", "ry", "rz"};
    const lw_spec_output *output = &edge->spec->output[o];
    return output->kind == LW_OUT_COORD ? edge->coord_name[output->coord] : name[output->kind];
}

static bool output_turning(const lwd_edge *edge, size_t o)
{
    const lw_spec_output *output = &edge->spec->output[o];
    return output->kind == LW_OUT_COORD ? edge->coord_turning[output->coord]
                                        : output->kind >= LW_OUT_RX;
}

static void put_xyz(lwd_json *json, const char *key, const double v[3])
{
    lwd_json_put_object(json, key);
    lwd_json_put_number(json, "x", v[0]);
    lwd_json_put_number(json, "y", v[1]);
    lwd_json_put_number(json, "z", v[2]);
    lwd_json_end(json);
}

static void put_screw(lwd_json *json, lwd_units units, const lw_screw *screw)
{
    static const char *const kind[] = {"none", "shift", "turn", "twist"};
    double point[3];
    lwd_json_put_object(json, "screw");
    lwd_json_put_string(json, "kind", kind[screw->kind]);
    if (screw->kind != LW_SCREW_NONE) {
        for (size_t i = 0; i < 3; i++) {
            point[i] = lwd_length_out(units, screw->point_m[i]);
        }
        put_xyz(json, "axis", screw->axis);
        put_xyz(json, "point", point);
        lwd_json_put_number(json, "pitch", lwd_length_out(units, screw->pitch_m));
    }
    lwd_json_end(json);
}

static void say_line(words *w, lwd_units units, const lw_screw *screw, const char *what, bool point)
{
    say(w, "%s", what);
    if (point) {
        say(w, " through (%.4g %.4g %.4g) %s",
            shown(lwd_length_out(units, screw->point_m[0])),
            shown(lwd_length_out(units, screw->point_m[1])),
            shown(lwd_length_out(units, screw->point_m[2])), lwd_length_word(units));
    }
    say(w, " along (%.4g %.4g %.4g)", shown(screw->axis[0]), shown(screw->axis[1]),
        shown(screw->axis[2]));
}

static void say_drives(words *w, lwd_units units, const lw_weak *weak)
{
    if (weak->lost) {
        say(w, "motion no longer held: ");
    } else {
        say(w, "motion held least (%.4g): ", weak->value);
    }
    switch (weak->screw.kind) {
    case LW_SCREW_NONE:
        say(w, "joints move with the tool at rest");
        break;
    case LW_SCREW_SHIFT:
        say_line(w, units, &weak->screw, "shifting", false);
        break;
    case LW_SCREW_TURN:
    case LW_SCREW_TWIST:
        say_line(w, units, &weak->screw, "turning about an axis", true);
        say(w, ", pitch %.4g %s per turn", shown(lwd_length_out(units, weak->screw.pitch_m)),
            lwd_length_word(units));
        break;
    }
}

static void say_tool(words *w, const lwd_edge *edge, lwd_units units, const lw_weak *weak)
{
    if (weak->lost) {
        say(w, "motion lost: ");
    } else {
        say(w, "motion given least (%.4g): ", weak->value);
    }
    switch (weak->screw.kind) {
    case LW_SCREW_NONE: {
        size_t most = 0;
        for (size_t o = 1; o < edge->spec->n_output; o++) {
            most = fabs(weak->output[o]) > fabs(weak->output[most]) ? o : most;
        }
        say(w, "output %s", output_name(edge, most));
        break;
    }
    case LW_SCREW_SHIFT:
        say_line(w, units, &weak->screw, "shifting along the line", true);
        break;
    case LW_SCREW_TURN:
        say_line(w, units, &weak->screw, "turning", false);
        break;
    case LW_SCREW_TWIST:
        say_line(w, units, &weak->screw, "shifting on its own, or turning, on the axis", true);
        say(w, ", where %.4g %s of shift undo one turn",
            shown(-lwd_length_out(units, weak->screw.pitch_m)), lwd_length_word(units));
        break;
    }
    bool first = true;
    for (size_t i = 0; weak->lost && i < edge->report->n_limb; i++) {
        if (weak->limb[i]) {
            say(w, "%s%s", first ? "; moves with the tool at rest: limb " : ", ",
                edge->report->limb[i].name);
            first = false;
        }
    }
}

static void put_shares(lwd_json *json, const lwd_edge *edge, const lw_weak *weak)
{
    lwd_json_put_array(json, "limbs");
    for (size_t i = 0; i < edge->report->n_limb; i++) {
        if (weak->limb[i]) {
            lwd_json_string(json, edge->report->limb[i].name);
        }
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "joints");
    for (size_t c = 0; c < edge->n_coord; c++) {
        if (fabs(weak->coord[c]) > 0.0) {
            lwd_json_put_number(json, edge->coord_name[c], weak->coord[c]);
        }
    }
    for (size_t k = 0; k < edge->n_ball; k++) {
        if (weak->ball[k] > 0.0) {
            lwd_json_put_number(json, edge->spec->joint[edge->ball_joint[k]].name, weak->ball[k]);
        }
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "drives");
    for (size_t d = 0; d < edge->spec->n_drive; d++) {
        if (fabs(weak->drive[d]) > 0.0) {
            lwd_json_put_number(json, edge->spec->drive[d].name, weak->drive[d]);
        }
    }
    lwd_json_end(json);
}

static void put_weak(lwd_json *json, const lwd_answer_head *head, const lw_weak *weak, bool tool)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    words w = {.len = 0};
    lwd_json_object(json);
    lwd_json_put_number(json, "value", weak->value);
    lwd_json_put_bool(json, "lost", weak->lost);
    if (tool) {
        say_tool(&w, edge, units, weak);
    } else {
        say_drives(&w, units, weak);
    }
    lwd_json_put_string(json, "says", w.text);
    put_screw(json, units, &weak->screw);
    lwd_json_put_object(json, "outputs");
    for (size_t o = 0; o < edge->spec->n_output; o++) {
        lwd_json_put_number(json, output_name(edge, o), weak->output[o]);
    }
    lwd_json_end(json);
    if (weak->lost) {
        put_shares(json, edge, weak);
    }
    lwd_json_end(json);
}

static void put_leave(lwd_json *json, const char *key, const lwd_answer_head *head,
                      const lw_leave *leave)
{
    static const char *const by[] = {"tool", "drives", "joints"};
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    if (!leave->known) {
        lwd_json_put_null(json, key);
        return;
    }
    lwd_json_put_object(json, key);
    lwd_json_put_number(json, "growth", STEP * leave->rate);
    lwd_json_put_string(json, "measured_at", by[leave->by]);
    lwd_json_put_bool(json, "either_way", leave->either_way);
    lwd_json_put_object(json, "outputs");
    for (size_t o = 0; o < edge->spec->n_output; o++) {
        double step = STEP * leave->output[o];
        lwd_json_put_number(json, output_name(edge, o),
                            output_turning(edge, o) ? lwd_angle_out(units, step)
                                                    : lwd_length_out(units, step));
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "drives");
    for (size_t d = 0; d < edge->spec->n_drive; d++) {
        lwd_json_put_number(json, edge->spec->drive[d].name,
                            edge->drive[d].slope * STEP * leave->drive[d]);
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_kind(lwd_json *json, unsigned classes)
{
    static const struct {
        unsigned bit;
        const char *word;
    } all[] = {{LW_CLASS_FORWARD, "forward"},
               {LW_CLASS_INVERSE, "inverse"},
               {LW_CLASS_CONSTRAINT, "constraint"}};
    words w = {.len = 0};
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++) {
        if ((classes & all[i].bit) != 0) {
            say(&w, "%s%s", w.len > 0 ? " and " : "", all[i].word);
        }
    }
    lwd_json_put_string(json, "kind", w.len > 0 ? w.text : "regular");
}

/* What the core says in general, with the names of the drives: "still held; drives m1 m4 no longer
 * spare". */
static const char *reason_of(words *w, const lwd_edge *edge, const lw_margin_answer *answer)
{
    size_t n = 0;
    for (size_t d = 0; answer->singular != NULL && d < edge->spec->n_drive; d++) {
        n += answer->singular->no_longer_spare[d];
    }
    if (n == 0 || answer->outcome != LW_OUTCOME_OK) {
        return answer->reason;
    }
    say(w, "%sstill held; drive%s",
        (answer->classes & LW_CLASS_CONSTRAINT) != 0
            ? "constraint singularity: the mechanism gains a freedom here; "
        : (answer->classes & LW_CLASS_INVERSE) != 0
            ? "inverse singularity: a tool direction is lost; "
            : "",
        n > 1 ? "s" : "");
    for (size_t d = 0; d < edge->spec->n_drive; d++) {
        if (answer->singular->no_longer_spare[d]) {
            say(w, " %s", edge->spec->drive[d].name);
        }
    }
    say(w, " no longer spare");
    return w->text;
}

void lwd_answer_margin_begin(lwd_json *json, const lwd_answer_head *head,
                             const lw_margin_answer *answer)
{
    words w = {.len = 0};
    lwd_answer_begin(json, head, answer->outcome, reason_of(&w, head->edge, answer));
    if (answer->solution != NULL) {
        lwd_answer_room(json, head, answer);
    } else {
        lwd_json_put_null(json, "posture");
    }
}

void lwd_answer_margin(lwd_json *json, const lwd_answer_head *head, const lw_margin_answer *answer)
{
    lwd_answer_margin_begin(json, head, answer);
    lwd_answer_end(json);
}

static void put_preloads(lwd_json *json, const lwd_edge *edge, const lw_margin_answer *answer)
{
    const lw_singular_answer *s = answer->singular;
    bool told = false; /* one direction stands in "preload" already */
    for (size_t d = 0; d < answer->n_drive; d++) {
        told = told || fabs(answer->preload[d]) > 0.0;
    }
    if (s->n_preload == 0 || (told && s->n_preload == 1)) {
        return;
    }
    lwd_json_put_array(json, "preload_basis");
    for (size_t i = 0; i < s->n_preload; i++) {
        lwd_json_object(json);
        for (size_t d = 0; d < edge->spec->n_drive; d++) {
            lwd_json_put_number(json, edge->spec->drive[d].name, s->preload[i][d]);
        }
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

void lwd_answer_singular(lwd_json *json, const lwd_answer_head *head,
                         const lw_margin_answer *answer)
{
    const lwd_edge *edge = head->edge;
    const lw_singular_answer *s = answer->singular;
    put_kind(json, answer->classes);
    lwd_json_put_bool(json, "held", answer->held);
    lwd_json_put_int(json, "freedoms", (int64_t)s->freedoms);
    lwd_json_put_array(json, "no_longer_spare");
    for (size_t d = 0; d < edge->spec->n_drive; d++) {
        if (s->no_longer_spare[d]) {
            lwd_json_string(json, edge->spec->drive[d].name);
        }
    }
    lwd_json_end(json);
    lwd_json_put_array(json, "weakest_hold");
    for (size_t i = 0; i < s->n_drives; i++) {
        put_weak(json, head, &s->drives[i], false);
    }
    lwd_json_end(json);
    lwd_json_put_array(json, "weakest_motion");
    for (size_t i = 0; i < s->n_tool; i++) {
        put_weak(json, head, &s->tool[i], true);
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "leave_by");
    put_leave(json, "hold", head, &s->leave_drives);
    put_leave(json, "motion", head, &s->leave_tool);
    lwd_json_end(json);
    put_preloads(json, edge, answer);
}

void lwd_answer_braked(lwd_json *json, const lw_singular_answer *singular, size_t drive)
{
    lwd_json_put_object(json, "braked");
    lwd_json_put_int(json, "freedoms", (int64_t)singular->freedoms_braked[drive]);
    if (singular->freedoms_braked[drive] > 0) {
        lwd_json_put_number(json, "hold", singular->hold_braked[drive]);
    }
    lwd_json_end(json);
}
