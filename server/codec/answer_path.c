/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What was proved of moves: path (JSON and table), free-travel, distance. */
#include <float.h>
#include <math.h>
#include <string.h>

#include "answer_out.h"
#include "number.h"
#include "path_in.h"

static const char *cause_word(lw_stop stop)
{
    static const char *const word[] = {"none",  "limit",  "margin",     "forward", "inverse",
                                       "reach", "budget", "resolution", "timeout", "unsupported"};
    return (unsigned)stop < sizeof word / sizeof word[0] ? word[stop] : "none";
}

/* What a move or a way was stopped by. */
typedef struct stopped {
    lw_stop stop;
    size_t limb;
    int drive;
    int margin;
    size_t n_limit;
    const lw_limit *limit;
} stopped;

static void put_stopped(lwd_json *json, const lwd_answer_head *head, const stopped *by)
{
    const lwd_edge *edge = head->edge;
    if (by->stop != LW_STOP_NONE) {
        lwd_json_put_string(json, "cause", cause_word(by->stop));
    }
    if (by->limb < edge->report->n_limb) {
        lwd_json_put_string(json, "limb", edge->report->limb[by->limb].name);
    }
    if (by->drive >= 0 && (size_t)by->drive < edge->spec->n_drive) {
        lwd_json_put_string(json, "drive", edge->spec->drive[by->drive].name);
    }
    if (by->margin >= 0 && by->margin < LW_MARGIN_COUNT) {
        lwd_json_put_string(json, "margin", lw_margin_word((lw_margin_name)by->margin));
    }
    lwd_json_put_array(json, "limits_broken");
    for (size_t i = 0; i < by->n_limit && i < 4; i++) {
        lwd_answer_limit(json, head, &by->limit[i]);
    }
    lwd_json_end(json);
}

/* ---- moves --------------------------------------------------------------------------------- */

static void put_least(lwd_json *json, const lw_move_answer *move)
{
    lwd_json_put_object(json, "least");
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        const lw_path_least *least = &move->least[i];
        if (least->known) {
            lwd_json_put_object(json, lw_margin_word((lw_margin_name)i));
            lwd_json_put_number(json, "at_least", least->at_least);
            if (least->value < LW_MARGIN_CAP) { /* else it was met nowhere, only proved */
                lwd_json_put_number(json, "value", least->value);
                lwd_json_put_number(json, "at", least->at);
            }
            lwd_json_end(json);
        }
    }
    lwd_json_end(json);
}

static void put_end(lwd_json *json, const lwd_answer_head *head, const lw_move_answer *move)
{
    const lwd_edge *edge = head->edge;
    if (!move->has_end) {
        lwd_json_put_null(json, "end");
        return;
    }
    lwd_json_put_object(json, "end");
    lwd_json_put_object(json, "drives");
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        lwd_json_put_number(json, edge->spec->drive[i].name,
                            lwd_reading_out(edge, i, move->end_drive[i]));
    }
    lwd_json_end(json);
    lwd_answer_pose(json, head, &move->end_tool, NULL);
    lwd_json_end(json);
}

/* A proved range of a drive in its readings, widened by what the conversion may round away. */
static void put_range(lwd_json *json, const lwd_edge *edge, size_t drive, double low, double high)
{
    const lwd_drive_edge *d = &edge->drive[drive];
    double a = lwd_reading_out(edge, drive, low);
    double b = lwd_reading_out(edge, drive, high);
    double size = fabs(low) > fabs(high) ? fabs(low) : fabs(high);
    double slack = 4.0 * DBL_EPSILON * (fabs(d->at_reference) + fabs(d->slope) * size);
    lwd_json_put_array(json, edge->spec->drive[drive].name);
    lwd_json_number(json, (a < b ? a : b) - slack);
    lwd_json_number(json, (a < b ? b : a) + slack);
    lwd_json_end(json);
}

static void put_piece(lwd_json *json, const lwd_edge *edge, const lw_move_answer *move,
                      const lw_proof_piece *piece)
{
    lwd_json_object(json);
    lwd_json_put_number(json, "low", piece->low);
    lwd_json_put_number(json, "high", piece->high);
    lwd_json_put_number(json, "tube", piece->tube);
    lwd_json_put_number(json, "sigma", piece->sigma);
    lwd_json_put_number(json, "hold", piece->hold);
    lwd_json_put_object(json, "drives");
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        put_range(json, edge, i, piece->drive_low[i], piece->drive_high[i]);
    }
    lwd_json_end(json);
    lwd_json_put_object(json, "margins");
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        if (move->least[i].known) {
            lwd_json_put_number(json, lw_margin_word((lw_margin_name)i), piece->margin[i]);
        }
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_proof(lwd_json *json, const lwd_answer_head *head, const lw_path_answer *answer,
                      const lw_move_answer *move)
{
    lwd_json_put_array(json, "proof");
    for (size_t i = 0; i < move->n_piece && move->first_piece + i < answer->n_piece; i++) {
        put_piece(json, head->edge, move, &answer->piece[move->first_piece + i]);
    }
    lwd_json_end(json);
}

static void put_place(lwd_json *json, const lwd_answer_head *head, const lw_move_answer *move)
{
    stopped by = {.stop = move->stop, .limb = move->limb, .drive = move->drive,
                  .margin = move->margin, .n_limit = move->n_limit, .limit = move->limit};
    lwd_json_put_number(json, "at", move->at);
    if (move->outcome == LW_OUTCOME_UNDECIDED) {
        const double open[2] = {move->open_low, move->open_high};
        lwd_json_put_numbers(json, "open", open, 2);
    }
    put_stopped(json, head, &by);
    put_least(json, move);
}

static void put_move(lwd_json *json, const lwd_answer_head *head, const lw_path_answer *answer,
                     size_t i)
{
    const lw_move_answer *move = &answer->move[i];
    const lwd_path *path = head->question->path;
    lwd_units units = head->question->units;
    lwd_json_object(json);
    lwd_json_put_int(json, "no", (int64_t)i + 1);
    if (path->line[i][0] != '\0') {
        lwd_json_put_string(json, "line", path->line[i]);
    }
    lwd_json_put_string(json, "move", lwd_move_word(path->move[i].kind));
    lwd_json_put_bool(json, "examined", move->examined);
    if (move->examined) {
        lwd_json_put_int(json, "code", (int64_t)move->outcome);
        lwd_json_put_string(json, "outcome", lw_outcome_word(move->outcome));
        if (move->reason != NULL) {
            lwd_json_put_string(json, "reason", move->reason);
        }
        put_place(json, head, move);
        lwd_json_put_number(json, "length", lwd_length_out(units, move->length_m));
        lwd_json_put_number(json, "turn", lwd_angle_out(units, move->turn_rad));
        put_end(json, head, move);
        lwd_json_put_int(json, "boxes", (int64_t)move->boxes);
        if (head->question->certificate) {
            put_proof(json, head, answer, move);
        }
    }
    lwd_json_end(json);
}

void lwd_answer_path(lwd_json *json, const lwd_answer_head *head, const lw_path_answer *answer)
{
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    lwd_json_key(json, "start");
    if (answer->start != NULL) {
        lwd_answer_solution(json, head, answer->start);
    } else {
        lwd_json_null(json);
    }
    lwd_answer_from_readings(json, head->edge, answer->from);
    lwd_json_put_array(json, "moves");
    for (size_t i = 0; i < answer->n_move; i++) {
        put_move(json, head, answer, i);
    }
    lwd_json_end(json);
    lwd_json_put_int(json, "boxes", (int64_t)answer->boxes);
    if (head->question->certificate) {
        lwd_json_put_object(json, "certificate");
        lwd_json_put_int(json, "intervals", (int64_t)answer->n_piece);
        lwd_json_put_int(json, "most", LWD_PIECES_MAX);
        lwd_json_put_bool(json, "truncated", answer->truncated);
        lwd_json_end(json);
    }
    lwd_answer_end(json);
}

/* ---- the table ----------------------------------------------------------------------------- */

static void csv_text(lwd_buf *buf, const char *text, bool last)
{
    if (text[strcspn(text, ",\"\r\n")] == '\0') {
        (void)lwd_buf_puts(buf, text);
    } else {
        (void)lwd_buf_put(buf, "\"", 1);
        for (const char *p = text; *p != '\0'; p++) {
            (void)lwd_buf_put(buf, *p == '"' ? "\"\"" : p, *p == '"' ? 2 : 1);
        }
        (void)lwd_buf_put(buf, "\"", 1);
    }
    (void)lwd_buf_puts(buf, last ? "\r\n" : ",");
}

/* Empty where the number is not known, or not finite. */
static void csv_number(lwd_buf *buf, bool known, double value)
{
    char text[LWD_NUMBER_SIZE + 1] = "";
    if (known) {
        text[lwd_number_put(text, value)] = '\0';
    }
    csv_text(buf, text, false);
}

/* The margin with the least value among the ratios; else the least of the others. */
static const lw_path_least *least_of(const lw_move_answer *move, const char **name)
{
    static const lw_margin_name order[2][4] = {
        {LW_MARGIN_ACCURACY, LW_MARGIN_LOAD, LW_MARGIN_SPEED, LW_MARGIN_SPARE},
        {LW_MARGIN_TRAVEL, LW_MARGIN_HOLD, LW_MARGIN_HOLD, LW_MARGIN_HOLD}};
    const lw_path_least *least = NULL;
    *name = "";
    for (size_t k = 0; k < 2 && least == NULL; k++) {
        for (size_t i = 0; i < 4; i++) {
            const lw_path_least *candidate = &move->least[order[k][i]];
            if (candidate->known && (least == NULL || candidate->value < least->value)) {
                least = candidate;
                *name = lw_margin_word(order[k][i]);
            }
        }
    }
    return least;
}

static void csv_row(lwd_buf *buf, const lwd_answer_head *head, const char *line,
                    const lw_move_answer *move)
{
    static const lw_path_least nothing = {.known = false};
    const char *margin = "";
    const lw_path_least *least = move->examined ? least_of(move, &margin) : NULL;
    const lw_limit *limit = move->examined && move->n_limit > 0 ? &move->limit[0] : NULL;
    least = least != NULL ? least : &nothing;
    csv_text(buf, line, false);
    csv_number(buf, move->examined, (double)move->outcome);
    csv_text(buf, move->examined ? lw_outcome_word(move->outcome) : "not_examined", false);
    csv_number(buf, move->examined, move->at);
    csv_text(buf, margin, false);
    csv_number(buf, least->known, least->value);
    csv_number(buf, least->known, least->at);
    csv_text(buf, limit != NULL ? lwd_limit_name(head->edge, limit) : "", false);
    csv_number(buf, limit != NULL,
               limit != NULL ? lwd_limit_over(head->edge, head->question->units, limit) : 0.0);
    csv_number(buf, least->known, least->at_least);
    csv_text(buf, move->examined && move->reason != NULL ? move->reason : "", true);
}

void lwd_table_path(lwd_buf *buf, const lwd_answer_head *head, const lw_path_answer *answer)
{
    (void)lwd_buf_puts(buf, "line,code,outcome,at,least_margin,least_value,least_at,limit,over,"
                            "at_least,reason\r\n");
    for (size_t i = 0; i < answer->n_move; i++) {
        char no[LWD_NUMBER_SIZE + 1];
        const char *line = head->question->path->line[i];
        no[lwd_number_put_int(no, (int64_t)i + 1)] = '\0';
        csv_row(buf, head, line[0] != '\0' ? line : no, &answer->move[i]);
    }
}

/* ---- free travel --------------------------------------------------------------------------- */

static void put_way(lwd_json *json, const lwd_answer_head *head, const char *key, bool turning,
                    const lw_travel_way *way)
{
    lwd_units units = head->question->units;
    double unit = turning ? lwd_angle_out(units, 1.0) : lwd_length_out(units, 1.0);
    stopped by = {.stop = way->stop, .limb = way->limb, .drive = way->drive,
                  .margin = way->margin, .n_limit = way->n_limit, .limit = way->limit};
    if (!way->possible) {
        lwd_json_put_null(json, key);
        return;
    }
    lwd_json_put_object(json, key);
    lwd_json_put_number(json, "at_least", unit * way->at_least);
    if (way->blocked) {
        lwd_json_put_number(json, "blocked_at", unit * way->blocked_at);
    } else {
        lwd_json_put_null(json, "blocked_at");
    }
    lwd_json_put_int(json, "code", (int64_t)way->outcome);
    lwd_json_put_string(json, "outcome", lw_outcome_word(way->outcome));
    put_stopped(json, head, &by);
    lwd_json_end(json);
}

void lwd_answer_travel(lwd_json *json, const lwd_answer_head *head,
                       const lw_travel_answer *answer)
{
    static const char *const part[2] = {"along", "about"};
    static const char *const axis[3] = {"x", "y", "z"};
    lwd_answer_begin(json, head, answer->outcome, answer->reason);
    lwd_json_key(json, "start");
    if (answer->start != NULL) {
        lwd_answer_solution(json, head, answer->start);
    } else {
        lwd_json_null(json);
    }
    for (size_t p = 0; p < 2 && answer->start != NULL; p++) {
        lwd_json_put_object(json, part[p]);
        for (size_t i = 0; i < 3; i++) {
            const lw_travel_way *way = answer->way[3 * p + i];
            lwd_json_put_object(json, axis[i]);
            put_way(json, head, "minus", p == 1, &way[0]);
            put_way(json, head, "plus", p == 1, &way[1]);
            lwd_json_end(json);
        }
        lwd_json_end(json);
    }
    lwd_json_put_int(json, "boxes", (int64_t)answer->boxes);
    lwd_answer_end(json);
}

/* ---- distance ------------------------------------------------------------------------------ */

static void put_bound(lwd_json *json, lwd_units units, const char *key, bool known, double value_m)
{
    if (known) {
        lwd_json_put_number(json, key, lwd_length_out(units, value_m));
    } else {
        lwd_json_put_null(json, key);
    }
}

static void put_side(lwd_json *json, const lwd_answer_head *head, const char *key,
                     const lw_distance_side *side)
{
    const lwd_edge *edge = head->edge;
    lwd_units units = head->question->units;
    lwd_json_put_object(json, key);
    lwd_json_put_bool(json, "none", side->none);
    put_bound(json, units, "at_least", side->known_least, side->at_least_m);
    put_bound(json, units, "at_most", side->known_most, side->at_most_m);
    if (side->known_most) {
        if (side->limb < edge->report->n_limb) {
            lwd_json_put_string(json, "limb", edge->report->limb[side->limb].name);
        }
        if (strcmp(key, "limit") == 0) {
            lwd_json_key(json, "limit");
            lwd_answer_limit(json, head, &side->limit);
        }
        lwd_json_put_object(json, "drives");
        for (size_t i = 0; i < edge->spec->n_drive; i++) {
            lwd_json_put_number(json, edge->spec->drive[i].name,
                                lwd_reading_out(edge, i, side->drive[i]));
        }
        lwd_json_end(json);
        lwd_answer_pose(json, head, &side->tool, NULL);
    }
    lwd_json_end(json);
}

void lwd_answer_distance(lwd_json *json, const lwd_answer_head *head,
                         const lw_distance_answer *answer)
{
    lwd_json_put_object(json, "distance");
    if (answer->reason != NULL) {
        lwd_json_put_string(json, "reason", answer->reason);
    }
    lwd_json_put_number(json, "characteristic_length",
                        lwd_length_out(head->question->units, answer->length_m));
    put_side(json, head, "forward", &answer->forward);
    put_side(json, head, "inverse", &answer->inverse);
    put_side(json, head, "limit", &answer->limit);
    lwd_json_put_int(json, "cells", (int64_t)answer->cells);
    lwd_json_end(json);
}
