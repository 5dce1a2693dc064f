/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Laying out tables and values; see table.h. */
#include "table.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { COLUMNS_MAX = 64, LINE_COMFORT = 88, NAME_WIDTH = 14 };

void lwc_table_init(lwc_table *table, size_t n_columns)
{
    *table = (lwc_table){.n_columns = n_columns > COLUMNS_MAX ? COLUMNS_MAX : n_columns};
}

void lwc_table_clear(lwc_table *table)
{
    for (size_t i = 0; i < table->n_cells; i++) {
        free(table->cell[i]);
    }
    free(table->cell);
    *table = (lwc_table){0};
}

void lwc_table_text(lwc_table *table, const char *text)
{
    if (table->n_cells == table->cap) {
        table->cap = table->cap > 0 ? table->cap * 2 : 64;
        table->cell = lwc_grow(table->cell, table->cap * sizeof(*table->cell));
    }
    lwc_text safe = {0};
    lwc_text_safe(&safe, text, strlen(text));
    table->cell[table->n_cells++] = lwc_copy(lwc_text_string(&safe));
    lwc_text_clear(&safe);
}

void lwc_table_value(lwc_table *table, const cJSON *item)
{
    lwc_text text = {0};
    lwc_value_line(&text, item);
    lwc_table_text(table, lwc_text_string(&text));
    lwc_text_clear(&text);
}

/* Numbers and the dashes that stand for missing ones. */
static bool is_numeric_column(const lwc_table *table, size_t column)
{
    bool any = false;
    for (size_t i = table->n_columns + column; i < table->n_cells; i += table->n_columns) {
        double value = 0.0;
        bool number = lwc_read_number(table->cell[i], &value);
        if (!number && strcmp(table->cell[i], "-") != 0) {
            return false;
        }
        any = any || number;
    }
    return any;
}

static void trim_blanks(lwc_text *out)
{
    while (out->len > 0 && out->data[out->len - 1] == ' ') {
        out->data[--out->len] = '\0';
    }
}

void lwc_table_print(lwc_text *out, const lwc_table *table, size_t indent)
{
    size_t width[COLUMNS_MAX] = {0};
    bool right[COLUMNS_MAX] = {false};
    for (size_t c = 0; c < table->n_columns; c++) {
        right[c] = is_numeric_column(table, c);
        for (size_t i = c; i < table->n_cells; i += table->n_columns) {
            size_t columns = lwc_columns(table->cell[i]);
            width[c] = columns > width[c] ? columns : width[c];
        }
    }
    for (size_t i = 0; i < table->n_cells; i++) {
        size_t c = i % table->n_columns;
        bool last = c + 1 == table->n_columns || i + 1 == table->n_cells;
        size_t fill = width[c] - lwc_columns(table->cell[i]);
        lwc_text_fill(out, ' ', c == 0 ? indent : 2);
        if (right[c]) {
            lwc_text_fill(out, ' ', fill);
        }
        lwc_text_puts(out, table->cell[i]);
        if (!right[c] && !last) {
            lwc_text_fill(out, ' ', fill);
        }
        if (last) {
            trim_blanks(out);
            lwc_text_putc(out, '\n');
        }
    }
}

static bool is_scalar(const cJSON *item)
{
    return !cJSON_IsObject(item) && !cJSON_IsArray(item);
}

void lwc_value_line(lwc_text *out, const cJSON *item)
{
    if (item == NULL || cJSON_IsNull(item)) {
        lwc_text_puts(out, "-");
    } else if (cJSON_IsString(item)) {
        lwc_text_safe(out, item->valuestring, strlen(item->valuestring));
    } else if (cJSON_IsNumber(item)) {
        double value = item->valuedouble;
        lwc_text_number(out, fabs(value) < 1e-12 ? 0.0 : value, LWC_DIGITS);
    } else if (cJSON_IsBool(item)) {
        lwc_text_puts(out, cJSON_IsTrue(item) ? "yes" : "no");
    } else if (item->child == NULL) {
        lwc_text_puts(out, "none");
    } else {
        bool object = cJSON_IsObject(item);
        const cJSON *child = NULL;
        cJSON_ArrayForEach(child, item)
        {
            if (child != item->child) {
                lwc_text_puts(out, ", ");
            }
            if (object) {
                lwc_text_safe(out, child->string, strlen(child->string));
                lwc_text_putc(out, ' ');
            }
            bool deep = !is_scalar(child) && child->child != NULL;
            if (deep) {
                lwc_text_putc(out, '(');
            }
            lwc_value_line(out, child);
            if (deep) {
                lwc_text_putc(out, ')');
            }
        }
    }
}

bool lwc_value_is_short(const cJSON *item)
{
    if (is_scalar(item)) {
        return true;
    }
    lwc_text line = {0};
    lwc_value_line(&line, item);
    bool fits = lwc_columns(lwc_text_string(&line)) <= LINE_COMFORT;
    lwc_text_clear(&line);
    return fits && !(cJSON_IsArray(item) && cJSON_IsObject(item->child));
}

/* All members are objects: then their member names are the columns, in the order first met. */
static size_t object_columns(const cJSON *array, const char **names)
{
    size_t n = 0;
    const cJSON *row = NULL;
    const cJSON *cell = NULL;
    cJSON_ArrayForEach(row, array)
    {
        if (!cJSON_IsObject(row)) {
            return 0;
        }
        cJSON_ArrayForEach(cell, row)
        {
            size_t i = 0;
            while (i < n && strcmp(names[i], cell->string) != 0) {
                i++;
            }
            if (i == n) {
                if (n == COLUMNS_MAX) {
                    return 0;
                }
                names[n++] = cell->string;
            }
        }
    }
    return n;
}

bool lwc_object_table(lwc_text *out, const cJSON *array, size_t indent)
{
    const char *names[COLUMNS_MAX];
    size_t n = object_columns(array, names);
    if (n == 0) {
        return false;
    }
    lwc_table table;
    lwc_table_init(&table, n);
    for (size_t i = 0; i < n; i++) {
        lwc_table_text(&table, names[i]);
    }
    const cJSON *row = NULL;
    cJSON_ArrayForEach(row, array)
    {
        for (size_t i = 0; i < n; i++) {
            lwc_table_value(&table, lwc_json_get(row, names[i]));
        }
    }
    lwc_table_print(out, &table, indent);
    lwc_table_clear(&table);
    return true;
}

/* "name [unit]" of a row or column given as a string or as {"name", "unit"}. */
static void heading(lwc_text *out, const cJSON *item)
{
    const char *name = lwc_json_string(item, "name");
    const char *unit = lwc_json_string(item, "unit");
    if (name != NULL) {
        lwc_text_printf(out, unit != NULL ? "%s [%s]" : "%s", name, unit);
    } else {
        lwc_value_line(out, item);
    }
}

static const cJSON *matrix_values(const cJSON *item)
{
    const cJSON *child = NULL;
    if (!cJSON_IsArray(lwc_json_get(item, "rows")) ||
        !cJSON_IsArray(lwc_json_get(item, "columns"))) {
        return NULL;
    }
    cJSON_ArrayForEach(child, item)
    {
        if (cJSON_IsArray(child) && cJSON_IsArray(child->child)) {
            return child;
        }
    }
    return NULL;
}

/* The matrix with its row and column names, then what else the object says of it. */
static void matrix_table(lwc_text *out, const cJSON *item, const cJSON *values, size_t indent)
{
    const cJSON *columns = lwc_json_get(item, "columns");
    const cJSON *row_name = lwc_json_get(item, "rows")->child;
    size_t n = (size_t)cJSON_GetArraySize(columns);
    lwc_table table;
    lwc_table_init(&table, n + 1);
    lwc_table_text(&table, "");
    lwc_text text = {0};
    const cJSON *child = NULL;
    cJSON_ArrayForEach(child, columns)
    {
        lwc_text_reset(&text);
        heading(&text, child);
        lwc_table_text(&table, lwc_text_string(&text));
    }
    const cJSON *row = NULL;
    cJSON_ArrayForEach(row, values)
    {
        lwc_text_reset(&text);
        if (row_name != NULL) {
            heading(&text, row_name);
            row_name = row_name->next;
        }
        lwc_table_text(&table, lwc_text_string(&text));
        const cJSON *cell = row->child;
        for (size_t i = 0; i < n; i++) {
            lwc_table_value(&table, cell);
            cell = cell != NULL ? cell->next : NULL;
        }
    }
    lwc_table_print(out, &table, indent);
    lwc_table_clear(&table);
    lwc_text_clear(&text);
    cJSON_ArrayForEach(child, item)
    {
        if (child != values && child != columns && strcmp(child->string, "rows") != 0) {
            lwc_value_block(out, child->string, child, indent);
        }
    }
}

static void put_name(lwc_text *out, const char *name, size_t indent)
{
    lwc_text safe = {0};
    lwc_text_safe(&safe, name, strlen(name));
    for (size_t i = 0; i < safe.len; i++) {
        if (safe.data[i] == '_') {
            safe.data[i] = ' ';
        }
    }
    lwc_text_fill(out, ' ', indent);
    lwc_text_puts(out, lwc_text_string(&safe));
    size_t columns = lwc_columns(lwc_text_string(&safe));
    lwc_text_fill(out, ' ', columns < NAME_WIDTH ? NAME_WIDTH - columns : 1);
    lwc_text_clear(&safe);
}

void lwc_value_block(lwc_text *out, const char *name, const cJSON *item, size_t indent)
{
    bool rows = cJSON_IsArray(item) && cJSON_IsObject(item->child);
    const cJSON *values = matrix_values(item);
    put_name(out, name, indent);
    if (values != NULL && cJSON_GetArraySize(lwc_json_get(item, "columns")) < COLUMNS_MAX) {
        trim_blanks(out);
        lwc_text_putc(out, '\n');
        matrix_table(out, item, values, indent + 2);
    } else if (lwc_value_is_short(item)) {
        lwc_value_line(out, item);
        lwc_text_putc(out, '\n');
    } else {
        trim_blanks(out);
        lwc_text_putc(out, '\n');
        const cJSON *child = NULL;
        if (!rows || !lwc_object_table(out, item, indent + 2)) {
            size_t no = 0;
            cJSON_ArrayForEach(child, item)
            {
                char number[24];
                (void)snprintf(number, sizeof number, "%zu", ++no);
                lwc_value_block(out, child->string != NULL ? child->string : number, child,
                                indent + 2);
            }
        }
    }
}
