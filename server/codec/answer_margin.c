/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Room left: the margin figures, ranks and classes, drives left out one by one. */
#include "answer_out.h"

#include <string.h>

/* The figure behind a margin, from SI to the units of the answer. */
static void put_amount(lwd_json *json, lwd_units units, const lw_margin_value *value)
{
    const char *unit = value->amount_unit != NULL ? value->amount_unit : "";
    double amount = value->amount;
    char word[16];
    size_t n = strlen(unit);
    if (unit[0] == '\0') {
        return;
    }
    bool per_second = n > 2 && strcmp(unit + n - 2, "/s") == 0;
    size_t stem = per_second ? n - 2 : n;
    if (stem == 1 && unit[0] == 'm') {
        amount = lwd_length_out(units, amount);
        unit = lwd_length_word(units);
    } else if (stem == 3 && memcmp(unit, "rad", 3) == 0) {
        amount = lwd_angle_out(units, amount);
        unit = lwd_angle_word(units);
    } else {
        per_second = false; /* newtons and such stay, whole */
    }
    n = strlen(unit);
    if (n + 3 > sizeof word) {
        return;
    }
    memcpy(word, unit, n);
    memcpy(word + n, "/s", 2);
    word[per_second ? n + 2 : n] = '\0';
    lwd_json_put_object(json, "amount");
    lwd_json_put_number(json, "value", amount);
    lwd_json_put_string(json, "unit", word);
    lwd_json_end(json);
}

static void put_direction(lwd_json *json, const double direction[6])
{
    static const char *const axis[3] = {"x", "y", "z"};
    static const char *const part[2] = {"along", "about"};
    lwd_json_put_object(json, "direction");
    for (size_t p = 0; p < 2; p++) {
        lwd_json_put_object(json, part[p]);
        for (size_t i = 0; i < 3; i++) {
            lwd_json_put_number(json, axis[i], direction[3 * p + i]);
        }
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

/* spare_hold: spare alone has it, NULL for the others. */
static void put_margin(lwd_json *json, const lwd_answer_head *head, const char *name,
                       const lw_margin_value *value, const lw_margin_answer *spare_hold)
{
    const lwd_edge *edge = head->edge;
    lwd_json_put_object(json, name);
    lwd_json_put_bool(json, "asked", value->asked);
    if (value->asked) {
        lwd_json_put_number(json, "value", value->value);
        if (value->drive >= 0 && (size_t)value->drive < edge->spec->n_drive) {
            lwd_json_put_string(json, "drive", edge->spec->drive[value->drive].name);
        }
        if (value->coord < edge->n_coord) {
            lwd_json_put_string(json, "nearest", edge->coord_name[value->coord]);
        }
        if (value->has_direction) {
            put_direction(json, value->direction);
        }
        put_amount(json, head->question->units, value);
        if (spare_hold != NULL && spare_hold->spare_hold_drive >= 0) {
            lwd_json_put_object(json, "hold");
            lwd_json_put_number(json, "value", spare_hold->spare_hold);
            lwd_json_put_string(json, "drive",
                                edge->spec->drive[spare_hold->spare_hold_drive].name);
            lwd_json_end(json);
        }
    }
    lwd_json_end(json);
}

void lwd_answer_margins(lwd_json *json, const lwd_answer_head *head,
                        const lw_margin_answer *margin)
{
    lwd_json_put_object(json, "margins");
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        put_margin(json, head, lw_margin_word((lw_margin_name)i), &margin->margin[i],
                   i == LW_MARGIN_SPARE ? margin : NULL);
    }
    lwd_json_end(json);
    if (margin->least >= 0 && margin->least < LW_MARGIN_COUNT) {
        lwd_json_put_object(json, "least");
        lwd_json_put_string(json, "name", lw_margin_word((lw_margin_name)margin->least));
        lwd_json_put_number(json, "value", margin->margin[margin->least].value);
        lwd_json_end(json);
    } else {
        lwd_json_put_null(json, "least");
    }
}

static void put_rank(lwd_json *json, const char *key, const lw_rank_info *rank)
{
    lwd_json_put_object(json, key);
    lwd_json_put_int(json, "rows", (int64_t)rank->rows);
    lwd_json_put_int(json, "columns", (int64_t)rank->columns);
    lwd_json_put_int(json, "rank", (int64_t)rank->rank);
    lwd_json_put_int(json, "rank_generic", (int64_t)rank->rank_generic);
    lwd_json_put_numbers(json, "singular_values", rank->singular, rank->n_singular);
    lwd_json_put_number(json, "threshold", rank->threshold);
    lwd_json_end(json);
}

static void put_ranks(lwd_json *json, const lw_margin_answer *answer)
{
    lwd_json_put_object(json, "ranks");
    put_rank(json, "drives", &answer->drives);
    put_rank(json, "tool", &answer->tool);
    lwd_json_put_object(json, "closure");
    lwd_json_put_int(json, "rows", (int64_t)answer->closure.rows);
    lwd_json_put_int(json, "columns", (int64_t)answer->closure.columns);
    lwd_json_put_int(json, "rank", (int64_t)answer->closure.rank);
    lwd_json_put_int(json, "rank_generic", (int64_t)answer->closure.rank_generic);
    lwd_json_put_number(json, "smallest", answer->closure_smallest);
    lwd_json_put_number(json, "smallest_generic", answer->closure_generic);
    lwd_json_put_number(json, "threshold", answer->closure.threshold);
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_classes(lwd_json *json, unsigned classes)
{
    lwd_json_put_array(json, "classes");
    if (classes & LW_CLASS_FORWARD) {
        lwd_json_string(json, "forward");
    }
    if (classes & LW_CLASS_INVERSE) {
        lwd_json_string(json, "inverse");
    }
    if (classes & LW_CLASS_CONSTRAINT) {
        lwd_json_string(json, "constraint");
    }
    lwd_json_end(json);
}

static void put_limbs(lwd_json *json, const lwd_edge *edge, const lw_margin_answer *answer)
{
    lwd_json_put_array(json, "limbs");
    for (size_t i = 0; i < answer->n_limb && i < edge->report->n_limb; i++) {
        lwd_json_object(json);
        lwd_json_put_string(json, "name", edge->report->limb[i].name);
        lwd_json_put_number(json, "value", answer->limb_value[i]);
        lwd_json_put_bool(json, "singular", answer->limb_singular[i]);
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

static void put_left_out(lwd_json *json, const lwd_edge *edge, const lw_margin_answer *answer)
{
    bool preload = false;
    lwd_json_put_array(json, "without_drive");
    for (size_t i = 0; i < answer->n_drive && i < edge->spec->n_drive; i++) {
        lwd_json_object(json);
        lwd_json_put_string(json, "drive", edge->spec->drive[i].name);
        lwd_json_put_number(json, "hold", answer->hold_without[i]);
        lwd_json_put_bool(json, "indispensable", answer->indispensable[i]);
        if (answer->singular != NULL) {
            lwd_answer_braked(json, answer->singular, i);
        }
        lwd_json_end(json);
        preload = preload || answer->preload[i] != 0.0;
    }
    lwd_json_end(json);
    if (preload) {
        lwd_json_put_object(json, "preload");
        for (size_t i = 0; i < answer->n_drive && i < edge->spec->n_drive; i++) {
            lwd_json_put_number(json, edge->spec->drive[i].name, answer->preload[i]);
        }
        lwd_json_end(json);
    }
}

void lwd_answer_room(lwd_json *json, const lwd_answer_head *head, const lw_margin_answer *answer)
{
    const lwd_edge *edge = head->edge;
    lwd_answer_margins(json, head, answer);
    put_classes(json, answer->classes);
    if (answer->singular != NULL) {
        lwd_answer_singular(json, head, answer);
    }
    put_ranks(json, answer);
    put_limbs(json, edge, answer);
    put_left_out(json, edge, answer);
    lwd_json_put_number(json, "hold_length",
                        lwd_length_out(head->question->units, answer->hold_length_m));
    lwd_json_key(json, "posture");
    lwd_answer_solution(json, head, answer->solution);
}
