/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The reader of csv.h. */
#include "csv.h"

#include <string.h>

#include "utf8.h"

void lwd_csv_open(lwd_csv *csv, const char *text, size_t len)
{
    static const char mark[] = "\xef\xbb\xbf";
    bool marked = len >= 3 && memcmp(text, mark, 3) == 0;
    csv->at = text + (marked ? 3 : 0);
    csv->end = text + len;
    csv->row = 0;
    csv->n = 0;
    csv->fault = NULL;
    csv->used = 0;
}

static bool fault(lwd_csv *csv, const char *what)
{
    csv->fault = what;
    return false;
}

static bool keep(lwd_csv *csv, const char *bytes, size_t len)
{
    if (csv->used + len >= LWD_CSV_ROW_MAX) {
        return fault(csv, "The row is too long: at most 4095 bytes.");
    }
    memcpy(csv->store + csv->used, bytes, len);
    csv->used += len;
    return true;
}

static bool at_line_end(const lwd_csv *csv)
{
    return csv->at == csv->end || *csv->at == '\n' || *csv->at == '\r';
}

/* One character of a field to the store. */
static bool take(lwd_csv *csv)
{
    uint32_t c = 0;
    size_t n = lwd_utf8_next((const unsigned char *)csv->at, (size_t)(csv->end - csv->at), &c);
    if (n == 0) {
        return fault(csv, "The text is not UTF-8.");
    }
    if (c < 0x20 && c != '\t' && c != '\n' && c != '\r') {
        return fault(csv, "A control character stands in the field.");
    }
    bool kept = keep(csv, csv->at, n);
    csv->at += n;
    return kept;
}

static void skip_blanks(lwd_csv *csv)
{
    while (csv->at < csv->end && (*csv->at == ' ' || *csv->at == '\t')) {
        csv->at++;
    }
}

static bool quoted(lwd_csv *csv)
{
    csv->at++;
    for (;;) {
        if (csv->at == csv->end) {
            return fault(csv, "A quoted field does not end: its closing quote is missing.");
        }
        if (*csv->at != '"') {
            if (!take(csv)) {
                return false;
            }
            continue;
        }
        csv->at++;
        if (csv->at == csv->end || *csv->at != '"') {
            break;
        }
        if (!keep(csv, csv->at++, 1)) {
            return false;
        }
    }
    skip_blanks(csv);
    return at_line_end(csv) || *csv->at == ','
           || fault(csv, "A comma is missing after the closing quote; a quote within a quoted "
                         "field is written twice.");
}

static bool bare(lwd_csv *csv, size_t start)
{
    while (!at_line_end(csv) && *csv->at != ',') {
        if (*csv->at == '"') {
            return fault(csv, "A quote stands inside a field that is not quoted.");
        }
        if (!take(csv)) {
            return false;
        }
    }
    while (csv->used > start
           && (csv->store[csv->used - 1] == ' ' || csv->store[csv->used - 1] == '\t')) {
        csv->used--;
    }
    return true;
}

static bool read_field(lwd_csv *csv)
{
    size_t start = csv->used;
    if (csv->n == LWD_CSV_COLUMNS) {
        return fault(csv, "The row has too many fields: at most 80.");
    }
    csv->field[csv->n++] = csv->store + start;
    skip_blanks(csv);
    bool read = csv->at < csv->end && *csv->at == '"' ? quoted(csv) : bare(csv, start);
    return read && keep(csv, "", 1);
}

static bool read_line_end(lwd_csv *csv)
{
    if (csv->at < csv->end && *csv->at == '\r') {
        csv->at++;
        if (csv->at == csv->end || *csv->at != '\n') {
            return fault(csv, "A carriage return stands without a line feed.");
        }
    }
    csv->at += csv->at < csv->end;
    return true;
}

lwd_csv_result lwd_csv_next(lwd_csv *csv)
{
    bool empty = true;
    while (empty) {
        bool more = true;
        if (csv->at == csv->end) {
            return LWD_CSV_END;
        }
        csv->row++;
        csv->n = 0;
        csv->used = 0;
        while (more) {
            if (!read_field(csv)) {
                return LWD_CSV_FAULT;
            }
            empty = empty && csv->field[csv->n - 1][0] == '\0';
            more = csv->at < csv->end && *csv->at == ',';
            csv->at += more;
        }
        if (!read_line_end(csv)) {
            return LWD_CSV_FAULT;
        }
    }
    return LWD_CSV_ROW;
}
