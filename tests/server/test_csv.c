/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The reader of tables against RFC 4180, section 2, and what it refuses. */
#include <string.h>

#include "codec/csv.h"
#include "lwt.h"

static lwd_csv csv;

static void row(size_t n, const char *const *want)
{
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_ROW);
    assert_int_equal(csv.n, n);
    for (size_t i = 0; i < n; i++) {
        assert_string_equal(csv.field[i], want[i]);
    }
}

static void the_examples_of_the_standard(void **state)
{
    /* RFC 4180, section 2, rules 1, 2, 5, 6 and 7: the examples as they stand there. */
    static const char text[] = "aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n\"aaa\",\"bbb\",\"ccc\"\r\n"
                               "\"aaa\",\"b\r\nbb\",\"ccc\"\r\n\"aaa\",\"b\"\"bb\",\"ccc\"\r\n"
                               "zzz,yyy,xxx";
    (void)state;
    lwd_csv_open(&csv, text, sizeof text - 1);
    row(3, (const char *const[]){"aaa", "bbb", "ccc"});
    row(3, (const char *const[]){"zzz", "yyy", "xxx"});
    row(3, (const char *const[]){"aaa", "bbb", "ccc"});
    row(3, (const char *const[]){"aaa", "b\r\nbb", "ccc"});
    row(3, (const char *const[]){"aaa", "b\"bb", "ccc"});
    assert_int_equal(csv.row, 5);
    row(3, (const char *const[]){"zzz", "yyy", "xxx"});
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_END);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_END);
}

static void blanks_marks_and_empty_rows(void **state)
{
    static const char text[] = "\xef\xbb\xbf a , b\t,\"  c \" , \n\n,,\n\"\",\"\"\nd,\xc3\xa4,\n";
    (void)state;
    lwd_csv_open(&csv, text, sizeof text - 1);
    row(4, (const char *const[]){"a", "b", "  c ", ""});
    assert_int_equal(csv.row, 1);
    row(3, (const char *const[]){"d", "\xc3\xa4", ""});
    assert_int_equal(csv.row, 5); /* empty rows are passed over, and counted */
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_END);
    lwd_csv_open(&csv, "", 0);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_END);
}

static void faults_are_told_with_their_column(void **state)
{
    static const struct {
        const char *text;
        size_t column;
        const char *says;
    } faults[] = {
        {"a,\"b", 2, "closing quote"},       {"a,\"b\"c", 2, "after the closing quote"},
        {"a,b\"c\"", 2, "inside a field"},   {"a\rb", 1, "carriage return"},
        {"a,b,\x01", 3, "control"},          {"a,\xff", 2, "UTF-8"},
        {"a,\"\xc3\"", 2, "UTF-8"},          {"a\"", 1, "inside a field"},
    };
    (void)state;
    for (size_t i = 0; i < sizeof faults / sizeof faults[0]; i++) {
        lwd_csv_open(&csv, faults[i].text, strlen(faults[i].text));
        assert_int_equal(lwd_csv_next(&csv), LWD_CSV_FAULT);
        assert_int_equal(csv.n, faults[i].column);
        lwt_holds(csv.fault, faults[i].says);
    }
    lwd_csv_open(&csv, "a,\0b", 4);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_FAULT);
}

static void rows_are_bounded(void **state)
{
    static char text[2 * LWD_CSV_ROW_MAX];
    (void)state;
    memset(text, ',', sizeof text);
    lwd_csv_open(&csv, text, LWD_CSV_COLUMNS - 1);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_END); /* 80 empty fields */
    lwd_csv_open(&csv, text, LWD_CSV_COLUMNS);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_FAULT);
    lwt_holds(csv.fault, "80");
    memset(text, 'x', sizeof text);
    lwd_csv_open(&csv, text, LWD_CSV_ROW_MAX - 1);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_FAULT); /* no room for its end */
    lwd_csv_open(&csv, text, LWD_CSV_ROW_MAX - 2);
    assert_int_equal(lwd_csv_next(&csv), LWD_CSV_ROW);
    assert_int_equal(strlen(csv.field[0]), LWD_CSV_ROW_MAX - 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_examples_of_the_standard),
        cmocka_unit_test(blanks_marks_and_empty_rows),
        cmocka_unit_test(faults_are_told_with_their_column),
        cmocka_unit_test(rows_are_bounded),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
