/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The list of a revision's modes: limbs and what + means, every mode with its register number, the
 * names the document gives, a posture in it and how much of a sample of poses it holds. Written
 * once for a loaded revision and kept with it. */
#include <stdlib.h>
#include <string.h>

#include "api.h"
#include "mode_sample.h"

typedef lwd_mode_row mode_row;

static int by_number(const void *a, const void *b)
{
    unsigned x = ((const mode_row *)a)->number;
    unsigned y = ((const mode_row *)b)->number;
    return x < y ? -1 : x > y ? 1 : 0;
}

/* Classes that stand in mode texts, 0 where signs alone do. */
static size_t numbered(const lw_limb_info *limb)
{
    return limb->branches > 2 ? limb->branches : limb->classes;
}

/* Choices of one limb: "+", or "+" and "-", or signs with classes. */
static size_t choices(const lw_limb_info *limb)
{
    return numbered(limb) > 0 ? 2 * numbered(limb) : limb->branches == 1 ? 1 : 2;
}

static void set_choice(lw_mode *mode, size_t i, const lw_limb_info *limb, size_t choice)
{
    size_t n = numbered(limb);
    if (n > 0) {
        mode->sign[i] = choice < n ? 1 : -1;
        mode->branch[i] = (unsigned short)(choice % n + 1);
    } else {
        mode->sign[i] = choice == 0 ? 1 : -1;
        mode->branch[i] = 0;
    }
}

/* All combinations that the model numbers; false if there are too many to list. */
static bool enumerate(const lw_model *model, mode_row *row, size_t *n)
{
    const lw_report *report = lw_model_report(model);
    size_t total = 1;
    *n = 0;
    for (size_t i = 0; i < report->n_limb; i++) {
        total *= choices(&report->limb[i]);
        if (total > 65536) {
            return false;
        }
    }
    for (size_t k = 0; k < total; k++) {
        lw_mode mode = {.count = report->n_limb};
        size_t rest = k;
        for (size_t i = 0; i < report->n_limb; i++) {
            size_t c = choices(&report->limb[i]);
            set_choice(&mode, i, &report->limb[i], rest % c);
            rest /= c;
        }
        unsigned number = lw_mode_number(model, &mode);
        if (number == 0) {
            continue;
        }
        if (*n >= LWD_MODES_MAX) {
            return false;
        }
        row[(*n)++] = (mode_row){.mode = mode, .number = number};
    }
    qsort(row, *n, sizeof *row, by_number);
    return true;
}

static const char *title_of(const lwd_held *held, const char *name)
{
    for (size_t i = 0; name != NULL && i < held->edge.spec->n_mode; i++) {
        if (strcmp(held->edge.spec->mode[i].name, name) == 0) {
            const char *title = held->document->mode_title[i];
            return title[0] != '\0' ? title : NULL;
        }
    }
    return NULL;
}

/* A posture of the mode, in the document's units; the first that the sample met. */
static void put_example(lwd_json *json, const lwd_answer_head *head, const mode_row *row)
{
    const lwd_edge *edge = head->edge;
    lwd_json_put_object(json, "example");
    lwd_json_put_object(json, "drives");
    for (size_t i = 0; i < edge->spec->n_drive; i++) {
        lwd_json_put_number(json, edge->spec->drive[i].name,
                            lwd_reading_out(edge, i, row->drive[i]));
    }
    lwd_json_end(json);
    lwd_answer_pose(json, head, &row->tool, row->coord);
    lwd_json_end(json);
}

static void put_mode(lwd_json *json, const lwd_answer_head *head, const lwd_held *held,
                     const mode_row *row, const lwd_mode_sample *sample)
{
    char text[LW_MODE_TEXT_SIZE];
    const lw_mode *mode = &row->mode;
    const char *name = lwd_edge_mode_name(&held->edge, mode);
    const char *title = title_of(held, name);
    lw_mode_text(text, mode);
    lwd_json_object(json);
    lwd_json_put_string(json, "mode", text);
    lwd_json_put_int(json, "mode_no", (int64_t)lw_mode_number(held->model, mode));
    if (name != NULL) {
        lwd_json_put_string(json, "mode_name", name);
    }
    if (title != NULL) {
        lwd_json_put_string(json, "title", title);
    }
    lwd_json_put_int(json, "held", (int64_t)row->held);
    if (sample->reached > 0) {
        lwd_json_put_number(json, "share", (double)row->held / (double)sample->reached);
    } else {
        lwd_json_put_null(json, "share");
    }
    if (row->held > 0) {
        put_example(json, head, row);
    }
    lwd_json_end(json);
}

static void put_sample(lwd_json *json, const lwd_mode_sample *sample)
{
    lwd_json_put_object(json, "sample");
    lwd_json_put_int(json, "poses", (int64_t)sample->poses);
    lwd_json_put_int(json, "reached", (int64_t)sample->reached);
    lwd_json_put_string(json, "how", lwd_mode_sample_how);
    lwd_json_end(json);
}

static void put_limbs(lwd_json *json, const lwd_edge *edge)
{
    lwd_json_put_array(json, "limbs");
    for (size_t i = 0; i < edge->report->n_limb; i++) {
        const lw_limb_info *limb = &edge->report->limb[i];
        lwd_json_object(json);
        lwd_json_put_int(json, "no", (int64_t)i + 1);
        lwd_json_put_string(json, "name", limb->name);
        lwd_json_put_string(json, "kind", lwd_limb_word(limb->kind));
        lwd_json_put_array(json, "drives");
        for (size_t k = 0; k < limb->n_drive && k < LW_MAX_DRIVES; k++) {
            lwd_json_string(json, edge->spec->drive[limb->drive[k]].name);
        }
        lwd_json_end(json);
        lwd_json_put_string(json, "plus_means", limb->plus);
        lwd_json_end(json);
    }
    lwd_json_end(json);
}

/* Where there are too many to list, those that have a name. */
static size_t take_named(const lw_report *report, mode_row *row)
{
    for (size_t i = 0; i < report->n_mode_name; i++) {
        row[i] = (mode_row){.mode = report->mode_name[i]};
    }
    return report->n_mode_name;
}

static void write(lwd_json *json, const lwd_held *held, mode_row *row, lw_work *work)
{
    char text[LW_MODE_TEXT_SIZE];
    size_t n = 0;
    lwd_mode_sample sample;
    const lw_report *report = held->edge.report;
    lwd_question question = {.units = held->edge.units};
    const lwd_answer_head head = {.edge = &held->edge, .question = &question};
    bool all = enumerate(held->model, row, &n);
    if (!all) {
        n = take_named(report, row);
    }
    lwd_mode_sample_run(&sample, row, n, held, work);
    lwd_json_object(json);
    lwd_json_put_string(json, "mechanism", held->name);
    lwd_json_put_int(json, "revision", held->number);
    lwd_json_put_string(json, "digest", held->edge.digest);
    lw_mode_text(text, &report->home_mode);
    lwd_json_put_string(json, "default_mode", text);
    lw_mode_text(text, &report->reference_mode);
    lwd_json_put_string(json, "reference_mode", text);
    put_limbs(json, &held->edge);
    put_sample(json, &sample);
    lwd_json_put_bool(json, "all_listed", all);
    lwd_json_put_array(json, "modes");
    for (size_t i = 0; i < n; i++) {
        put_mode(json, &head, held, &row[i], &sample);
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

/* The text of the list, made at the first call for a loaded revision. Two that come at once both
 * make it, the same to the last digit; one text is kept. NULL without memory. */
static const lwd_buf *list_of(lwd_lane *lane, lwd_held *held)
{
    lwd_buf *made = atomic_load(&held->modes);
    if (made != NULL) {
        return made;
    }
    lw_work *work = lwd_lane_work_of(lane, held);
    mode_row *row = calloc(LWD_MODES_MAX, sizeof *row);
    made = calloc(1, sizeof *made);
    if (work != NULL && row != NULL && made != NULL) {
        lwd_json json;
        lwd_buf *before = NULL;
        lwd_buf_init(made, 0);
        lwd_json_init(&json, made);
        write(&json, held, row, work);
        if (!lwd_json_done(&json)) {
            lwd_buf_clear(made);
        } else if (atomic_compare_exchange_strong(&held->modes, &before, made)) {
            free(row);
            return made;
        } else {
            lwd_buf_clear(made);
            free(made);
            free(row);
            return before;
        }
    }
    free(made);
    free(row);
    return NULL;
}

void lwd_get_modes(void *context, const lwd_request *request, lwd_reply *reply)
{
    static const char *const name[] = {"revision"};
    lwd_app *app = context;
    const char *value[1];
    const char *mechanism = NULL;
    lwd_held *held = NULL;
    lwd_catalog_error err;
    if (!lwd_query_members(reply, request, name, value, 1) || !lwd_takes_json(reply, request)
        || !lwd_path_name(reply, request, &mechanism)) {
        return;
    }
    int64_t revision = value[0] != NULL ? lwd_count_of(value[0]) : 0;
    if (value[0] != NULL && revision == 0) {
        lwd_fail(reply, request, LWD_PROBLEM_QUERY, NULL, "a whole number from 1", value[0],
                 "revision takes the number of a revision.");
        return;
    }
    if (request->lane >= app->n_lanes) {
        lwd_fail(reply, request, LWD_PROBLEM_INTERNAL, NULL, NULL, NULL,
                 "The service has too few lanes for its threads.");
        return;
    }
    lwd_store_result result = lwd_store_get(app->store, mechanism, revision, true, &held, &err);
    if (result != LWD_STORE_OK) {
        lwd_fail_store(reply, request, result, &err);
        return;
    }
    const lwd_buf *list = list_of(&app->lane[request->lane], held);
    if (list == NULL) {
        lwd_fail_memory(reply, request);
    } else {
        lwd_reply_text(reply, request, 200, "application/json", list->data, list->len);
    }
    lwd_held_drop(held);
}
