/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The scan before the parser, and the checked readers behind it. */
#include "codec/json_in.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "codec/pointer.h"
#include "lwt.h"

/* ---- the scan -------------------------------------------------------------------------------- */

static lwd_scan_fault scan(const char *text, size_t len)
{
    /* A copy without a NUL behind it: the scan must not look past the end. */
    char *copy = malloc(len == 0 ? 1 : len);
    assert_non_null(copy);
    memcpy(copy, text, len);
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_scan_fault fault;
    bool good = lwd_json_scan(copy, len, &limits, &fault);
    assert_true(good == (fault.kind == LWD_SCAN_OK));
    free(copy);
    return fault;
}

static void accepts_what_rfc_8259_allows(void **state)
{
    (void)state;
    static const char *const good[] = {
        "0", "-0", "1.5e+3", "1E-400", "\"\"", "[]", "{}", " \t\r\n null \n", "true", "false",
        "[[],{},\"a\",1]", "{\"a\":{\"b\":[1,2,{\"c\":null}]}}", "\"\\u00e9\\ud83d\\ude00\\/\"",
        "{\"a\":1,\"A\":2,\"\":3,\"b\":{\"a\":4}}", "[{\"a\":1},{\"a\":1}]", "1e308",
        "\"\xf4\x8f\xbf\xbf\"", "123456789012345678901234567890",
    };
    for (size_t i = 0; i < sizeof good / sizeof good[0]; i++) {
        lwd_scan_fault fault = scan(good[i], strlen(good[i]));
        if (fault.kind != LWD_SCAN_OK) {
            lwt_fail("%s: %s", good[i], fault.text);
        }
    }
}

typedef struct bad_text {
    const char *text;
    lwd_scan_kind kind;
    size_t offset;
    const char *pointer;
} bad_text;

static void refuses_what_the_parser_would_let_through(void **state)
{
    (void)state;
    static const bad_text bad[] = {
        {"", LWD_SCAN_SYNTAX, 0, ""},
        {"   ", LWD_SCAN_SYNTAX, 3, ""},
        {"01", LWD_SCAN_NUMBER, 0, ""},
        {"-01", LWD_SCAN_NUMBER, 0, ""},
        {"[1,00]", LWD_SCAN_NUMBER, 3, "/1"},
        {"1.", LWD_SCAN_NUMBER, 0, ""},
        {"[1.,2]", LWD_SCAN_NUMBER, 1, "/0"},
        {"-.5", LWD_SCAN_NUMBER, 0, ""},
        {".5", LWD_SCAN_SYNTAX, 0, ""},
        {"+1", LWD_SCAN_SYNTAX, 0, ""},
        {"-", LWD_SCAN_NUMBER, 0, ""},
        {"1e", LWD_SCAN_NUMBER, 0, ""},
        {"1e+", LWD_SCAN_NUMBER, 0, ""},
        {"1e999", LWD_SCAN_NUMBER, 0, ""},
        {"-1e309", LWD_SCAN_NUMBER, 0, ""},
        {"1.7976931348623159e308", LWD_SCAN_NUMBER, 0, ""},
        {"{\"x\":{\"y\":[0,1e400]}}", LWD_SCAN_NUMBER, 13, "/x/y/1"},
        {"1111111111111111111111111111111111111111111111111111111111111", LWD_SCAN_NUMBER, 0, ""},
        {"NaN", LWD_SCAN_SYNTAX, 0, ""},
        {"Infinity", LWD_SCAN_SYNTAX, 0, ""},
        {"nul", LWD_SCAN_SYNTAX, 0, ""},
        {"truefalse", LWD_SCAN_SYNTAX, 4, ""},
        {"'a'", LWD_SCAN_SYNTAX, 0, ""},
        {"{a:1}", LWD_SCAN_SYNTAX, 1, ""},
        {"{\"a\" 1}", LWD_SCAN_SYNTAX, 5, "/a"},
        {"{\"a\":1,}", LWD_SCAN_SYNTAX, 7, ""},
        {"{\"a\":}", LWD_SCAN_SYNTAX, 5, "/a"},
        {"[1,]", LWD_SCAN_SYNTAX, 3, "/1"},
        {"[1 2]", LWD_SCAN_SYNTAX, 3, "/0"},
        {"[1}", LWD_SCAN_SYNTAX, 2, "/0"},
        {"[1", LWD_SCAN_SYNTAX, 2, "/0"},
        {"{", LWD_SCAN_SYNTAX, 1, ""},
        {"{\"a\":[", LWD_SCAN_SYNTAX, 6, "/a/0"},
        {"1 2", LWD_SCAN_SYNTAX, 2, ""},
        {"{} x", LWD_SCAN_SYNTAX, 3, ""},
        {"[] // done", LWD_SCAN_SYNTAX, 3, ""},
        {"\"abc", LWD_SCAN_SYNTAX, 0, ""},
        {"\"a\nb\"", LWD_SCAN_TEXT, 2, ""},
        {"\"a\tb\"", LWD_SCAN_TEXT, 2, ""},
        {"\"\\x41\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\\", LWD_SCAN_TEXT, 1, ""},
        {"\"\\u12g4\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\\u12", LWD_SCAN_TEXT, 1, ""},
        {"\"a\\u0000b\"", LWD_SCAN_TEXT, 2, ""},
        {"\"\\ud800\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\\ud800\\u0041\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\\udc00\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\xff\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\xc0\x80\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\xed\xa0\x80\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\xf4\x90\x80\x80\"", LWD_SCAN_TEXT, 1, ""},
        {"\"\xe2\x82\"", LWD_SCAN_TEXT, 1, ""},
        {"\xef\xbb\xbf{}", LWD_SCAN_SYNTAX, 0, ""},
        {"{\"a\":1,\"b\":2,\"a\":3}", LWD_SCAN_DOUBLED, 13, "/a"},
        {"{\"a\":1,\"\\u0061\":3}", LWD_SCAN_DOUBLED, 7, "/a"},
        {"{\"d\":[{\"m~1\":1},{\"m/1\":2,\"m\\/1\":3}]}", LWD_SCAN_DOUBLED, 25, "/d/1/m~11"},
    };
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        lwd_scan_fault fault = scan(bad[i].text, strlen(bad[i].text));
        if (fault.kind != bad[i].kind || fault.offset != bad[i].offset ||
            strcmp(fault.pointer, bad[i].pointer) != 0) {
            lwt_fail("%s: kind %d at %zu '%s' (%s)", bad[i].text, (int)fault.kind, fault.offset,
                     fault.pointer, fault.text);
        }
        assert_true(strlen(fault.text) > 10 && strlen(fault.expected) > 0);
    }
    lwd_scan_fault fault = scan("[1,\0,2]", 7); /* a NUL between values */
    assert_int_equal(fault.kind, LWD_SCAN_SYNTAX);
    assert_int_equal(fault.offset, 3);
}

static void names_line_and_column_in_characters(void **state)
{
    (void)state;
    const char *text = "{\n  \"caf\xc3\xa9\": 1,\n  \"\xe2\x82\xac\": 01\n}";
    lwd_scan_fault fault = scan(text, strlen(text));
    assert_int_equal(fault.line, 3);
    assert_int_equal(fault.column, 8);
    assert_string_equal(fault.pointer, "/\xe2\x82\xac");
}

static void refuses_what_is_beyond_the_bounds(void **state)
{
    (void)state;
    lwd_scan_limits limits = {.size = 100, .depth = 4, .values = 8};
    lwd_scan_fault fault;
    assert_true(lwd_json_scan("[[[[1]]]]", 9, &limits, &fault));
    assert_false(lwd_json_scan("[[[[[1]]]]]", 11, &limits, &fault));
    assert_int_equal(fault.kind, LWD_SCAN_BOUND);
    assert_string_equal(fault.pointer, "/0/0/0/0");
    assert_true(lwd_json_scan("[1,2,3,4,5,6,7]", 15, &limits, &fault));
    assert_false(lwd_json_scan("[1,2,3,4,5,6,7,8]", 17, &limits, &fault));
    assert_int_equal(fault.kind, LWD_SCAN_BOUND);
    char text[102];
    memset(text, ' ', sizeof text);
    text[0] = '1';
    assert_true(lwd_json_scan(text, 100, &limits, &fault));
    assert_false(lwd_json_scan(text, 101, &limits, &fault));
    assert_int_equal(fault.kind, LWD_SCAN_BOUND);
    lwt_holds(fault.got, "101");
}

/* Writes an object of n different keys and, where `twice`, the first of them again. */
static char *many_keys(size_t n, bool twice, size_t *len)
{
    char *text = malloc(n * 16 + 32);
    assert_non_null(text);
    size_t at = 0;
    text[at++] = '{';
    for (size_t i = 0; i < n; i++) {
        at += (size_t)snprintf(text + at, 24, "%s\"k%zu\":1", i > 0 ? "," : "", i);
    }
    at += (size_t)snprintf(text + at, 16, "%s}", twice ? ",\"k0\":1" : "");
    *len = at;
    return text;
}

static void finds_a_doubled_key_among_many_in_linear_time(void **state)
{
    (void)state;
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    lwd_scan_fault fault;
    size_t len = 0;
    char *text = many_keys(50000, false, &len);
    assert_true(lwd_json_scan(text, len, &limits, &fault));
    free(text);
    text = many_keys(50000, true, &len);
    assert_false(lwd_json_scan(text, len, &limits, &fault));
    assert_int_equal(fault.kind, LWD_SCAN_DOUBLED);
    assert_string_equal(fault.pointer, "/k0");
    free(text);
}

/* ---- readers --------------------------------------------------------------------------------- */

static lwd_findings findings;
static struct cJSON *tree;

static lwd_reader open_text(const char *text)
{
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    tree = lwd_json_parse(text, strlen(text), &limits, &findings);
    assert_non_null(tree);
    return lwd_reader_of(tree, &findings);
}

static void close_text(void)
{
    lwd_json_free(tree);
    tree = NULL;
}

static void expect_finding(size_t i, const char *code, const char *pointer, const char *text)
{
    if (i >= findings.n) {
        lwt_fail("only %zu findings, %s at '%s' expected", findings.n, code, pointer);
    }
    assert_string_equal(findings.item[i].code, code);
    assert_string_equal(findings.item[i].pointer, pointer);
    lwt_holds(findings.item[i].text, text);
}

static void sorts_members_and_tells_unknown_and_missing_ones(void **state)
{
    (void)state;
    static const lwd_member table[] = {{"name", true}, {"axis", true}, {"range", false}};
    lwd_reader m[3];
    lwd_reader r = open_text("{\"axes\":[0,0,1],\"name\":\"a\",\"colour\":1,\"a/b~c\":2}");
    assert_true(lwd_read_members(&r, table, 3, m));
    assert_true(lwd_is_given(&m[0]));
    assert_false(lwd_is_given(&m[1]));
    assert_false(lwd_is_given(&m[2]));
    assert_int_equal(findings.n, 4);
    assert_int_equal(findings.n_error, 4);
    expect_finding(0, "unknown-member", "/axes", "Is \"axis\" meant?");
    assert_string_equal(findings.item[0].expected, "one of name axis range");
    expect_finding(1, "unknown-member", "/colour", "\"colour\" is not known");
    assert_null(strstr(findings.item[1].text, "meant"));
    expect_finding(2, "unknown-member", "/a~1b~0c", "not known");
    expect_finding(3, "missing-member", "/axis", "\"axis\" is missing");
    double x = 7.0;
    assert_false(lwd_read_number(&m[2], 0.0, 1.0, &x)); /* absent: silent, untouched */
    lwt_same(x, 7.0);
    assert_int_equal(findings.n, 4);
    close_text();
}

static void reads_typed_values_and_tells_what_is_wrong(void **state)
{
    (void)state;
    enum { N, I, B, T, W, V, R, Q, C };
    static const lwd_member table[] = {{"n", true}, {"i", true}, {"b", true}, {"t", true},
                                       {"w", true}, {"v", true}, {"r", true}, {"q", true},
                                       {"c", true}};
    static const char *const words[] = {"mm", "m"};
    lwd_reader m[9];
    double x = 0.0;
    double v[3];
    double q[4];
    long i = 0;
    bool b = false;
    const char *t = NULL;
    size_t w = 9;
    lw_range range = {0};
    char name[LW_NAME_SIZE];

    lwd_reader r = open_text("{\"n\":2.5,\"i\":-3,\"b\":true,\"t\":\"hello\",\"w\":\"m\","
                             "\"v\":[1,2,3],\"r\":[null,4],\"q\":{\"w\":1.0005,\"x\":0,\"y\":0,"
                             "\"z\":0},\"c\":\"strut-1\"}");
    assert_true(lwd_read_members(&r, table, 9, m));
    assert_true(lwd_read_number(&m[N], 2.5, 2.5, &x) && x == 2.5);
    assert_true(lwd_read_positive(&m[N], 2.5, &x));
    assert_true(lwd_read_int(&m[I], -3, 3, &i) && i == -3);
    assert_true(lwd_read_bool(&m[B], &b) && b);
    assert_true(lwd_read_text(&m[T], 5, &t));
    assert_string_equal(t, "hello");
    assert_true(lwd_read_word(&m[W], words, 2, &w) && w == 1);
    assert_true(lwd_read_vec3(&m[V], 3.0, v) && v[2] == 3.0);
    assert_true(lwd_read_axis(&m[V], v));
    lwt_near(v[0] * v[0] + v[1] * v[1] + v[2] * v[2], 1.0, 1e-15);
    assert_true(lwd_read_range(&m[R], 10.0, &range));
    assert_true(!range.has_low && range.has_high && range.high == 4.0);
    assert_true(lwd_read_quaternion(&m[Q], q));
    lwt_near(q[0], 1.0, 1e-15);
    assert_true(lwd_read_name(&m[C], name));
    assert_string_equal(name, "strut-1");
    assert_int_equal(findings.n, 0);

    assert_false(lwd_read_number(&m[N], 3.0, 4.0, &x));
    assert_false(lwd_read_positive(&m[I], 4.0, &x));
    assert_false(lwd_read_int(&m[N], -9, 9, &i));
    assert_false(lwd_read_bool(&m[N], &b));
    assert_false(lwd_read_text(&m[T], 4, &t));
    assert_false(lwd_read_word(&m[T], words, 2, &w));
    assert_false(lwd_read_vec3(&m[V], 2.5, v));
    assert_false(lwd_read_vec3(&m[R], 2.5, v));
    assert_false(lwd_read_range(&m[V], 2.5, &range));
    assert_false(lwd_read_quaternion(&m[V], q));
    assert_false(lwd_read_name(&m[N], name));
    expect_finding(0, "out-of-range", "/n", "2.5 is not between 3 and 4");
    expect_finding(1, "out-of-range", "/i", "must be above 0");
    expect_finding(2, "wrong-type", "/n", "whole number");
    expect_finding(3, "wrong-type", "/n", "true or false");
    expect_finding(4, "too-long", "/t", "shorten it to 4");
    expect_finding(5, "unknown-word", "/t", "none of the words");
    expect_finding(6, "out-of-range", "/v/2", "3 is not between -2.5 and 2.5");
    expect_finding(7, "too-few", "/r", "");
    expect_finding(8, "too-many", "/v", "");
    expect_finding(9, "wrong-type", "/v", "object");
    expect_finding(10, "wrong-type", "/n", "A name");
    assert_int_equal(findings.n, 11);
    close_text();
}

static void tells_faults_of_groups_at_their_own_place(void **state)
{
    (void)state;
    static const char *const bad[][3] = {
        {"[1,2]", "", "too-few"},
        {"[1,2,3,4]", "", "too-many"},
        {"[1,\"2\",3]", "/1", "wrong-type"},
        {"[1,2,1e9]", "/2", "out-of-range"},
        {"{}", "", "wrong-type"},
    };
    double v[3] = {7.0, 7.0, 7.0};
    for (size_t i = 0; i < 5; i++) {
        lwd_reader r = open_text(bad[i][0]);
        assert_false(lwd_read_vec3(&r, 1e6, v));
        expect_finding(0, bad[i][2], bad[i][1], "");
        assert_int_equal(findings.n, 1);
        lwt_same(v[0], 7.0);
        close_text();
    }
    lwd_reader r = open_text("[0,0,0]");
    assert_false(lwd_read_axis(&r, v));
    expect_finding(0, "zero-axis", "", "zero length");
    close_text();
    r = open_text("[5,5]");
    lw_range range;
    assert_false(lwd_read_range(&r, 10.0, &range));
    expect_finding(0, "empty-range", "", "from 5 to 5 is empty");
    close_text();
    r = open_text("{\"w\":1.002,\"x\":0,\"y\":0,\"z\":0}");
    double q[4];
    assert_false(lwd_read_quaternion(&r, q));
    expect_finding(0, "quaternion-length", "", "length 1.002");
    close_text();
    r = open_text("{\"w\":1,\"x\":0,\"y\":0}");
    assert_false(lwd_read_quaternion(&r, q));
    expect_finding(0, "missing-member", "/z", "");
    close_text();
    r = open_text("\"Strut_1\"");
    char name[LW_NAME_SIZE];
    assert_false(lwd_read_name(&r, name));
    expect_finding(0, "bad-name", "", "lower-case");
    close_text();
    r = open_text("\"abcdefghijklmnopqrstuvwxyz-0123456\"");
    assert_false(lwd_read_name(&r, name));
    close_text();
    r = open_text("\"rad\"");
    static const char *const words[] = {"deg", "rad"};
    size_t w = 0;
    assert_true(lwd_read_word(&r, words, 2, &w) && w == 1);
    close_text();
    r = open_text("\"degg\"");
    assert_false(lwd_read_word(&r, words, 2, &w));
    expect_finding(0, "unknown-word", "", "Is \"deg\" meant?");
    close_text();
}

static void walks_arrays_and_objects_with_free_names(void **state)
{
    (void)state;
    lwd_reader r = open_text("{\"m1\":1,\"m2\":2,\"m3\":3}");
    lwd_reader e;
    double sum = 0.0;
    char names[16] = "";
    for (bool more = lwd_first(&r, &e); more; more = lwd_next(&e)) {
        double x = 0.0;
        assert_true(lwd_read_number(&e, 0.0, 9.0, &x));
        sum += x;
        memcpy(names + 2 * (size_t)(x - 1.0), e.name, 3);
    }
    assert_string_equal(names, "m1m2m3");
    assert_int_equal(lwd_count(&r), 3);
    lwt_same(sum, 6.0);
    close_text();
    r = open_text("[]");
    assert_false(lwd_first(&r, &e));
    assert_int_equal(lwd_count(&r), 0);
    close_text();
}

static void keeps_errors_when_the_list_is_full(void **state)
{
    (void)state;
    lwd_findings_init(&findings);
    for (int i = 0; i < LWD_MAX_FINDINGS; i++) {
        assert_non_null(lwd_findings_add(&findings, LW_NOTE, "note", ""));
    }
    assert_null(lwd_findings_add(&findings, LW_WARNING, "warning", ""));
    assert_null(lwd_findings_first_error(&findings));
    assert_non_null(lwd_findings_add(&findings, LW_ERROR, "error", "/a"));
    assert_string_equal(lwd_findings_first_error(&findings)->pointer, "/a");
    assert_int_equal(findings.n, LWD_MAX_FINDINGS);
    assert_int_equal(findings.lost, 2);
    for (int i = 0; i < 1000; i++) {
        (void)lwd_findings_add(&findings, LW_ERROR, "error", "/b");
    }
    assert_int_equal(findings.n_error, 1001);
    assert_int_equal(findings.n, LWD_MAX_FINDINGS);
}

/* Examples of RFC 6901, section 5 (from memory), for the escaping; the cutting is ours. */
static void escapes_and_cuts_pointers(void **state)
{
    (void)state;
    char text[12];
    lwd_pointer p;
    lwd_pointer_init(&p, text, sizeof text);
    lwd_pointer_name(&p, "a/b");
    assert_string_equal(text, "/a~1b");
    lwd_pointer_name(&p, "m~n");
    assert_string_equal(text, "/a~1b/m~0n");
    lwd_pointer_index(&p, 12);
    assert_string_equal(text, "/a~1b/m~0n"); /* does not fit: left out as a whole */
    lwd_pointer_init(&p, text, sizeof text);
    lwd_pointer_name(&p, "");
    assert_string_equal(text, "/");
    lwd_pointer_init(&p, text, sizeof text);
    lwd_pointer_name(&p, "0123456789");
    assert_string_equal(text, "/0123456789");
}

static void suggests_the_nearest_word_only_if_it_is_near(void **state)
{
    (void)state;
    static const char *const words[] = {"axis", "range", "second_axis", "between"};
    assert_string_equal(lwd_nearest("axes", words, 4), "axis");
    assert_string_equal(lwd_nearest("AXIS", words, 4), "axis");
    assert_string_equal(lwd_nearest("rnage", words, 4), "range");
    assert_string_equal(lwd_nearest("second-axis", words, 4), "second_axis");
    assert_null(lwd_nearest("colour", words, 4));
    assert_null(lwd_nearest("", words, 4));
    assert_null(lwd_nearest("this-is-a-name-of-more-than-thirty-two-letters", words, 4));
}

static void tells_the_scan_s_fault_as_a_finding(void **state)
{
    (void)state;
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    assert_null(lwd_json_parse("{\"a\":\n 1e999}", 13, &limits, &findings));
    expect_finding(0, "malformed-number", "/a", "line 2, column 2, byte 7");
    assert_string_equal(findings.item[0].got, "1e999");
}

static void parse_step(void *context, size_t n)
{
    (void)context;
    (void)n;
    size_t len = 0;
    char *text = many_keys(300, false, &len);
    if (text == NULL) {
        return;
    }
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    struct cJSON *t = lwd_json_parse(text, len, &limits, &findings);
    assert_true((t == NULL) == findings.no_memory);
    lwd_json_free(t);
    free(text);
}

static void parse_all(void *context, size_t n)
{
    static const char text[] = "{\"a\":[1,2,{\"b\":\"c\"}],\"d\":null}";
    (void)context;
    (void)n;
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    struct cJSON *t = lwd_json_parse(text, sizeof text - 1, &limits, &findings);
    assert_true((t == NULL) == lwt_alloc_failed());
    assert_true(findings.no_memory == lwt_alloc_failed());
    lwd_json_free(t);
}

static void survives_every_failing_allocation(void **state)
{
    (void)state;
    lwt_alloc_cjson(true);
    assert_true(lwt_alloc_sweep(parse_all, NULL, 200) >= 8);
    lwt_alloc_cjson(false);
    /* The key table grows once in this text: its allocation is ours. */
    lwt_alloc_fail_at(2);
    parse_step(NULL, 2);
    assert_true(findings.no_memory);
    lwt_alloc_reset();
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(accepts_what_rfc_8259_allows),
        cmocka_unit_test(refuses_what_the_parser_would_let_through),
        cmocka_unit_test(names_line_and_column_in_characters),
        cmocka_unit_test(refuses_what_is_beyond_the_bounds),
        cmocka_unit_test(finds_a_doubled_key_among_many_in_linear_time),
        cmocka_unit_test(sorts_members_and_tells_unknown_and_missing_ones),
        cmocka_unit_test(reads_typed_values_and_tells_what_is_wrong),
        cmocka_unit_test(tells_faults_of_groups_at_their_own_place),
        cmocka_unit_test(walks_arrays_and_objects_with_free_names),
        cmocka_unit_test(keeps_errors_when_the_list_is_full),
        cmocka_unit_test(escapes_and_cuts_pointers),
        cmocka_unit_test(suggests_the_nearest_word_only_if_it_is_near),
        cmocka_unit_test(tells_the_scan_s_fault_as_a_finding),
        cmocka_unit_test(survives_every_failing_allocation),
    };
    return cmocka_run_group_tests_name("json_in", tests, NULL, NULL);
}
