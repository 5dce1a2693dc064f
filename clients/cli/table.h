/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Aligned tables, and any JSON value laid out for reading. All text of the service passes
 * lwc_text_safe on its way here. */
#ifndef LWC_TABLE_H
#define LWC_TABLE_H

#include "json.h"

enum { LWC_DIGITS = 8 /* significant digits shown to people; --json shows all */ };

typedef struct lwc_table {
    size_t n_columns;
    size_t n_cells; /* cells filled so far, the heading's among them */
    size_t cap;
    char **cell;
} lwc_table;

void lwc_table_init(lwc_table *table, size_t n_columns);
void lwc_table_clear(lwc_table *table);
/* Cells go in row by row, the heading first. */
void lwc_table_text(lwc_table *table, const char *text);
/* A scalar as it is, a group on one line. "-" for NULL. */
void lwc_table_value(lwc_table *table, const cJSON *item);
/* Columns of numbers go to the right, others to the left. */
void lwc_table_print(lwc_text *out, const lwc_table *table, size_t indent);

/* A value on one line: "x 1.5, y 2" for an object, "1, 2, 3" for an array. Numbers below 1e-12 are
 * the rounding of something that is zero, and are shown so. */
void lwc_value_line(lwc_text *out, const cJSON *item);
/* Whether lwc_value_block needs no more than one line for it. */
bool lwc_value_is_short(const cJSON *item);
/* Array of objects as a table whose columns are the member names in the order first met; false,
 * with nothing printed, where it is none. */
bool lwc_object_table(lwc_text *out, const cJSON *array, size_t indent);
/* A value on as many lines as it takes, named; arrays of like objects become tables, and objects
 * with "rows", "columns" and an array of arrays become matrices. */
void lwc_value_block(lwc_text *out, const char *name, const cJSON *item, size_t indent);

#endif
