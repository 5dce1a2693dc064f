/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Request targets taken apart. Forms: RFC 3986 section 2.1 (percent-encoding); UTF-8: RFC 3629
 * section 4 (the table of well-formed sequences). */
#include "http/uri.h"

#include <stdlib.h>
#include <string.h>

#include "lwt.h"

static lwd_uri_fault parse(lwd_uri *uri, const char *raw)
{
    return lwd_uri_parse(uri, raw, strlen(raw));
}

static void cuts_the_path_before_it_decodes(void **state)
{
    lwd_uri uri;
    (void)state;

    assert_int_equal(parse(&uri, "/a/%62-c%2ED"), LWD_URI_OK);
    assert_int_equal(uri.n_segment, 2);
    assert_string_equal(uri.segment[1], "b-c.D");
    assert_string_equal(uri.path, "/a/b-c.D");
    assert_int_equal(parse(&uri, "/a%2Fb"), LWD_URI_PATH_CHAR);
    assert_int_equal(parse(&uri, "/a%00b"), LWD_URI_PATH_NUL);
    assert_int_equal(parse(&uri, "/a%0"), LWD_URI_PATH_CHAR);
    assert_int_equal(parse(&uri, "/a%"), LWD_URI_PATH_CHAR);
    assert_int_equal(parse(&uri, "/%2e%2E/b"), LWD_URI_PATH_CHAR);
    assert_int_equal(parse(&uri, "/..."), LWD_URI_OK);
    assert_int_equal(parse(&uri, "/"), LWD_URI_OK);
    assert_int_equal(uri.n_segment, 0);
    assert_string_equal(uri.path, "/");
    assert_int_equal(parse(&uri, "/?a"), LWD_URI_OK);
    assert_int_equal(uri.n_query, 1);
}

static void refuses_every_other_byte_in_a_path(void **state)
{
    const char *allowed = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-/?";
    lwd_uri uri;
    (void)state;

    for (int c = 1; c < 256; c++) {
        char raw[] = {'/', 'a', (char)c, 'b', '\0'};
        bool good = strchr(allowed, c) != NULL;
        if ((parse(&uri, raw) == LWD_URI_OK) != good) {
            lwt_fail("byte %d in a path: %s", c, good ? "refused" : "taken");
        }
    }
}

static void takes_the_forms_a_server_must_take(void **state)
{
    lwd_uri uri;
    (void)state;

    assert_int_equal(parse(&uri, "HTTP://host:1/a?b=c"), LWD_URI_OK);
    assert_string_equal(uri.path, "/a");
    assert_string_equal(uri.query[0].value, "c");
    assert_int_equal(parse(&uri, "http://host"), LWD_URI_FORM);
    assert_int_equal(parse(&uri, "*"), LWD_URI_FORM);
    assert_int_equal(parse(&uri, ""), LWD_URI_FORM);
    assert_int_equal(parse(&uri, "?a=1"), LWD_URI_FORM);
}

static void decodes_members_in_order_and_keeps_doubles(void **state)
{
    lwd_uri uri;
    (void)state;

    assert_int_equal(parse(&uri, "/a?x=1&&x=%2B+2&y&=z&q=a%3Db=c&"), LWD_URI_OK);
    assert_int_equal(uri.n_query, 5);
    assert_string_equal(uri.query[0].name, "x");
    assert_string_equal(uri.query[1].value, "+ 2");
    assert_string_equal(uri.query[2].name, "y");
    assert_string_equal(uri.query[2].value, "");
    assert_string_equal(uri.query[3].name, "");
    assert_string_equal(uri.query[4].value, "a=b=c");
    assert_int_equal(parse(&uri, "/a?x=%0"), LWD_URI_QUERY_ESCAPE);
    assert_int_equal(parse(&uri, "/a?%=1"), LWD_URI_QUERY_ESCAPE);
    assert_int_equal(parse(&uri, "/a?x=%00"), LWD_URI_QUERY_NUL);
    assert_int_equal(parse(&uri, "/a?x=%1f"), LWD_URI_QUERY_CHAR);
    assert_int_equal(parse(&uri, "/a?x=%7F"), LWD_URI_QUERY_CHAR);
    assert_int_equal(parse(&uri, "/a?x=%80"), LWD_URI_QUERY_CHAR);
}

/* A text of n copies of `piece` behind `first`. */
static char *repeated(const char *first, const char *piece, size_t n)
{
    size_t len = strlen(first);
    size_t step = strlen(piece);
    char *text = malloc(len + n * step + 1);
    assert_non_null(text);
    memcpy(text, first, len);
    for (size_t i = 0; i < n; i++) {
        memcpy(text + len + i * step, piece, step);
    }
    text[len + n * step] = '\0';
    return text;
}

static void holds_to_its_limits(void **state)
{
    const struct {
        const char *first;
        const char *piece;
        size_t n;
        lwd_uri_fault fault;
    } cases[] = {
        {"", "/a", LWD_SEGMENT_MAX, LWD_URI_OK},
        {"", "/a", LWD_SEGMENT_MAX + 1, LWD_URI_DEPTH},
        {"/a?", "b&", LWD_QUERY_MAX, LWD_URI_OK},
        {"/a?", "b&", LWD_QUERY_MAX + 1, LWD_URI_QUERY_COUNT},
        {"/", "a", LWD_URL_MAX - 1, LWD_URI_OK},
        {"/", "a", LWD_URL_MAX, LWD_URI_TOO_LONG},
        {"/a?", "&", LWD_URL_MAX - 3, LWD_URI_OK},
        {"/a?b", "=", LWD_URL_MAX - 4, LWD_URI_OK},
    };
    lwd_uri uri;
    (void)state;

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char *raw = repeated(cases[i].first, cases[i].piece, cases[i].n);
        lwd_uri_fault fault = parse(&uri, raw);
        if (fault != cases[i].fault) {
            lwt_fail("case %zu: fault %d, not %d", i, (int)fault, (int)cases[i].fault);
        }
        free(raw);
    }
}

static void knows_well_formed_utf8(void **state)
{
    static const struct {
        const char *text;
        bool ok;
    } cases[] = {
        {"", true},
        {"a\x7f", true},
        {"\xc2\x80", true},
        {"\xdf\xbf", true},
        {"\xe0\xa0\x80", true},
        {"\xed\x9f\xbf", true},
        {"\xee\x80\x80", true},
        {"\xf0\x90\x80\x80", true},
        {"\xf4\x8f\xbf\xbf", true},
        {"\x80", false},
        {"\xc0\x80", false},
        {"\xc1\xbf", false},
        {"\xe0\x9f\xbf", false},
        {"\xed\xa0\x80", false},
        {"\xf0\x8f\xbf\xbf", false},
        {"\xf4\x90\x80\x80", false},
        {"\xf5\x80\x80\x80", false},
        {"\xff", false},
        {"\xc2", false},
        {"\xe2\x82", false},
        {"\xe2\x28\xa1", false},
        {"\xf0\x90\x80", false},
        {"\xf0\x90\x80\x28", false},
    };
    (void)state;

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        if (lwd_utf8_ok(cases[i].text, strlen(cases[i].text)) != cases[i].ok) {
            lwt_fail("case %zu: %s", i, cases[i].ok ? "refused" : "taken");
        }
    }
}

/* Random targets: never a crash, and what is taken keeps the rules. */
static void keeps_the_rules_for_random_targets(void **state)
{
    static const char path_bytes[] =
        "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-";
    static const char letters[] = "abAB01/%?&=+.-_25fF\xc3\xa9 #\x01";
    lwt_random random;
    lwd_uri uri;
    size_t taken = 0;
    (void)state;

    lwt_random_init(&random, 20260601);
    for (int round = 0; round < 100000; round++) {
        char raw[64];
        size_t len = 1 + lwt_random_index(&random, sizeof raw - 1);
        raw[0] = '/';
        for (size_t i = 1; i < len; i++) {
            raw[i] = letters[lwt_random_index(&random, sizeof letters - 1)];
        }
        if (lwd_uri_parse(&uri, raw, len) != LWD_URI_OK) {
            continue;
        }
        taken++;
        for (size_t i = 0; i < uri.n_segment; i++) {
            size_t n = strlen(uri.segment[i]);
            assert_int_equal(strspn(uri.segment[i], path_bytes), n);
        }
        for (size_t i = 0; i < uri.n_query; i++) {
            assert_true(lwd_utf8_ok(uri.query[i].value, strlen(uri.query[i].value)));
        }
    }
    assert_in_range(taken, 1000, 100000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(cuts_the_path_before_it_decodes),
        cmocka_unit_test(refuses_every_other_byte_in_a_path),
        cmocka_unit_test(takes_the_forms_a_server_must_take),
        cmocka_unit_test(decodes_members_in_order_and_keeps_doubles),
        cmocka_unit_test(holds_to_its_limits),
        cmocka_unit_test(knows_well_formed_utf8),
        cmocka_unit_test(keeps_the_rules_for_random_targets),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
