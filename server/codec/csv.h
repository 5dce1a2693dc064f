/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reads a table of comma-separated values (RFC 4180) row by row: quoted fields with doubled quotes,
 * CR LF or LF, a byte order mark in front. Blanks around a field that is not quoted are left out;
 * rows without anything in them are passed over. Bounded; one thread; the text is borrowed. */
#ifndef LWD_CSV_H
#define LWD_CSV_H

#include <stdbool.h>
#include <stddef.h>

enum { LWD_CSV_COLUMNS = 80, LWD_CSV_ROW_MAX = 4096 };

typedef enum lwd_csv_result { LWD_CSV_ROW, LWD_CSV_END, LWD_CSV_FAULT } lwd_csv_result;

typedef struct lwd_csv {
    const char *at;
    const char *end;
    size_t row;         /* number of the row last read, from 1; a quoted line end starts no row */
    size_t n;           /* fields of it; after a fault, the column at fault counts */
    const char *field[LWD_CSV_COLUMNS];
    const char *fault;  /* one sentence */
    size_t used;
    char store[LWD_CSV_ROW_MAX];
} lwd_csv;

void lwd_csv_open(lwd_csv *csv, const char *text, size_t len);
lwd_csv_result lwd_csv_next(lwd_csv *csv);

#endif
