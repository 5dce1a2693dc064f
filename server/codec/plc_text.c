/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The verdict of reach for a PLC: key=value lines in a fixed order, plain decimals, at most 255
 * bytes in all. Keys without a value are left out; a line that would not fit is left out whole, so
 * that no value is ever cut short. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "answer_out.h"
#include "number.h"

/* The revision and tag come last and must not be crowded out: room kept for them. */
enum { TAIL_ROOM = 48 };

static void line_text(lwd_buf *buf, size_t room, const char *key, const char *value)
{
    size_t nk = strlen(key);
    size_t nv = strlen(value);
    if (buf->len + nk + nv + 2 > room) {
        return;
    }
    (void)(lwd_buf_put(buf, key, nk) && lwd_buf_put(buf, "=", 1) && lwd_buf_put(buf, value, nv)
           && lwd_buf_put(buf, "\n", 1));
}

static void line_int(lwd_buf *buf, size_t room, const char *key, int64_t value)
{
    char text[LWD_NUMBER_SIZE + 1];
    text[lwd_number_put_int(text, value)] = '\0';
    line_text(buf, room, key, text);
}

static void line_number(lwd_buf *buf, size_t room, const char *key, double value)
{
    char text[LWD_NUMBER_SIZE + 1];
    size_t n = lwd_number_put_plain(text, value);
    if (n > 0) {
        text[n] = '\0';
        line_text(buf, room, key, text);
    }
}

/* The margin a PLC should look at: the one that failed, else the least. */
static int margin_shown(const lw_reach_answer *answer)
{
    if (answer->margin == NULL) {
        return -1;
    }
    return answer->failed_margin >= 0 ? answer->failed_margin : answer->margin->least;
}

/* How far a limit is overrun, as a share of its range; of the bound itself where the other side is
 * open. Limits of different kinds are held against one another so. */
static double overrun(const lw_limit *limit)
{
    const lw_range *range = &limit->range;
    double width = range->has_low && range->has_high ? range->high - range->low
                   : range->has_low                  ? fabs(range->low)
                                                     : fabs(range->high);
    return width > 0.0 ? limit->over / width : limit->over;
}

static const lw_limit *worst_limit(const lw_solution *solution)
{
    const lw_limit *worst = &solution->limit[0];
    for (size_t i = 1; i < solution->n_limit && i < LW_MAX_LIMITS_BROKEN; i++) {
        worst = overrun(&solution->limit[i]) > overrun(worst) ? &solution->limit[i] : worst;
    }
    return worst;
}

void lwd_plc_reach(lwd_buf *buf, const lwd_answer_head *head, const lw_reach_answer *answer)
{
    const lwd_edge *edge = head->edge;
    const size_t room = LWD_PLC_MAX - TAIL_ROOM;
    if (head->question->head.has_ref) {
        line_text(buf, room, "ref", head->question->head.ref);
    }
    line_int(buf, room, "code", (int64_t)answer->outcome);
    line_text(buf, room, "outcome", lw_outcome_word(answer->outcome));
    const lw_solution *solution = answer->solution;
    if (solution != NULL && solution->mode_known) {
        char text[LW_MODE_TEXT_SIZE];
        lw_mode_text(text, &solution->mode);
        line_text(buf, room, "mode", text);
        unsigned number = lw_mode_number(edge->model, &solution->mode);
        if (number != 0) {
            line_int(buf, room, "mode_no", (int64_t)number);
        }
    }
    int shown = margin_shown(answer);
    if (shown >= 0 && shown < LW_MARGIN_COUNT && answer->margin->margin[shown].asked) {
        line_number(buf, room, "margin", answer->margin->margin[shown].value);
        line_text(buf, room, "margin_of", lw_margin_word((lw_margin_name)shown));
    }
    if (solution != NULL && solution->n_limit > 0) {
        const lw_limit *limit = worst_limit(solution);
        line_text(buf, room, "limit", lwd_limit_name(edge, limit));
        line_number(buf, room, "over", lwd_limit_over(edge, head->question->units, limit));
    }
    char tag[9];
    memcpy(tag, edge->digest, 8);
    tag[8] = '\0';
    line_int(buf, LWD_PLC_MAX, "revision", edge->revision);
    line_text(buf, LWD_PLC_MAX, "tag", tag);
}
