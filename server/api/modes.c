/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The list of a revision's modes: limbs and what + means, every mode with its register number, the
 * names the document gives. */
#include <stdlib.h>
#include <string.h>

#include "api.h"

enum { MODES_MAX = 512 };

typedef struct mode_row {
    lw_mode mode;
    unsigned number;
} mode_row;

static int by_number(const void *a, const void *b)
{
    unsigned x = ((const mode_row *)a)->number;
    unsigned y = ((const mode_row *)b)->number;
    return x < y ? -1 : x > y ? 1 : 0;
}

/* Choices of one limb: "+", or "+" and "-", or signs with classes. */
static size_t choices(const lw_limb_info *limb)
{
    return limb->branches > 2 ? 2 * limb->branches : limb->branches == 1 ? 1 : 2;
}

static void set_choice(lw_mode *mode, size_t i, const lw_limb_info *limb, size_t choice)
{
    if (limb->branches > 2) {
        mode->sign[i] = choice < limb->branches ? 1 : -1;
        mode->branch[i] = (unsigned short)(choice % limb->branches + 1);
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
        if (*n >= MODES_MAX) {
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

static void put_mode(lwd_json *json, const lwd_held *held, const lw_mode *mode)
{
    char text[LW_MODE_TEXT_SIZE];
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
static void put_named(lwd_json *json, const lwd_held *held)
{
    const lw_report *report = held->edge.report;
    for (size_t i = 0; i < report->n_mode_name; i++) {
        put_mode(json, held, &report->mode_name[i]);
    }
}

static void write(const lwd_held *held, mode_row *row, const lwd_request *request,
                  lwd_reply *reply)
{
    char text[LW_MODE_TEXT_SIZE];
    size_t n = 0;
    lwd_json json;
    const lw_report *report = held->edge.report;
    bool all = enumerate(held->model, row, &n);
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", held->name);
    lwd_json_put_int(&json, "revision", held->number);
    lwd_json_put_string(&json, "digest", held->edge.digest);
    lw_mode_text(text, &report->home_mode);
    lwd_json_put_string(&json, "default_mode", text);
    lw_mode_text(text, &report->reference_mode);
    lwd_json_put_string(&json, "reference_mode", text);
    put_limbs(&json, &held->edge);
    lwd_json_put_bool(&json, "all_listed", all);
    lwd_json_put_array(&json, "modes");
    if (all) {
        for (size_t i = 0; i < n; i++) {
            put_mode(&json, held, &row[i].mode);
        }
    } else {
        put_named(&json, held);
    }
    lwd_json_end(&json);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
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
    lwd_store_result result = lwd_store_get(app->store, mechanism, revision, true, &held, &err);
    if (result != LWD_STORE_OK) {
        lwd_fail_store(reply, request, result, &err);
        return;
    }
    mode_row *row = malloc(MODES_MAX * sizeof *row);
    if (row == NULL) {
        lwd_fail_memory(reply, request);
    } else {
        write(held, row, request, reply);
    }
    free(row);
    lwd_held_drop(held);
}
