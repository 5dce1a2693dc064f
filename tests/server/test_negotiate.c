/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Accept and Content-Type. Source: RFC 9110 section 12.5.1 (the example with the quality of seven
 * types is its own) and section 8.3. */
#include "negotiate.h"

#include "lwt.h"

static void weighs_the_example_of_the_rfc(void **state)
{
    const char *accept = "text/*;q=0.3, text/plain;q=0.7, text/plain;format=flowed, "
                         "text/plain;format=fixed;q=0.4, */*;q=0.5";
    (void)state;

    /* Parameters of media types are not told apart here; the most welcome form counts. */
    assert_int_equal(lwd_accept_quality(accept, "text/plain"), 1000);
    assert_int_equal(lwd_accept_quality(accept, "text/html"), 300);
    assert_int_equal(lwd_accept_quality(accept, "image/jpeg"), 500);
}

static void lets_the_most_specific_range_decide(void **state)
{
    (void)state;

    assert_int_equal(lwd_accept_quality(NULL, "text/plain"), 1000);
    assert_int_equal(lwd_accept_quality("", "text/plain"), 1000);
    assert_int_equal(lwd_accept_quality(" , ", "text/plain"), 1000);
    assert_int_equal(lwd_accept_quality("*/*;q=0", "text/plain"), 0);
    assert_int_equal(lwd_accept_quality("*/*, text/plain;q=0", "text/plain"), 0);
    assert_int_equal(lwd_accept_quality("text/plain;q=0, */*", "text/html"), 1000);
    assert_int_equal(lwd_accept_quality("text/*;q=0.2, */*;q=0.9", "text/plain"), 200);
    assert_int_equal(lwd_accept_quality("image/png", "text/plain"), 0);
    assert_int_equal(lwd_accept_quality("text/plain2", "text/plain"), 0);
    assert_int_equal(lwd_accept_quality("text", "text/plain"), 0);
    assert_int_equal(lwd_accept_quality("TEXT/Plain ;Q=0.25", "text/plain"), 250);
    assert_int_equal(lwd_accept_quality("a/b;x=\",text/plain;q=0\", text/plain;q=0.5",
                                        "text/plain"),
                     500);
}

static void reads_qualities(void **state)
{
    (void)state;

    assert_int_equal(lwd_accept_quality("a/b;q=0.001", "a/b"), 1);
    assert_int_equal(lwd_accept_quality("a/b;q=0.999", "a/b"), 999);
    assert_int_equal(lwd_accept_quality("a/b;q=1.000", "a/b"), 1000);
    assert_int_equal(lwd_accept_quality("a/b;q=0.", "a/b"), 0);
    assert_int_equal(lwd_accept_quality("a/b; q=0.5 ;z=1", "a/b"), 500);
    /* What is no quality is taken for the greatest: better an answer than none. */
    assert_int_equal(lwd_accept_quality("a/b;q=-1", "a/b"), 1000);
    assert_int_equal(lwd_accept_quality("a/b;q=", "a/b"), 1000);
    assert_int_equal(lwd_accept_quality("a/b;q=nan", "a/b"), 1000);
    assert_int_equal(lwd_accept_quality("a/b;q=1.9", "a/b"), 1000);
}

static void knows_a_content_type(void **state)
{
    const char *json = "application/json";
    (void)state;

    assert_true(lwd_content_type_is("application/json", json));
    assert_true(lwd_content_type_is(" Application/JSON ; Charset=UTF-8", json));
    assert_true(lwd_content_type_is("application/json;x=\";charset=latin-1\"", json));
    assert_false(lwd_content_type_is("application/json;charset=latin-1", json));
    assert_false(lwd_content_type_is("application/json5", json));
    assert_false(lwd_content_type_is("application/jso", json));
    assert_false(lwd_content_type_is("", json));
    assert_false(lwd_content_type_is(";application/json", json));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(weighs_the_example_of_the_rfc),
        cmocka_unit_test(lets_the_most_specific_range_decide),
        cmocka_unit_test(reads_qualities),
        cmocka_unit_test(knows_a_content_type),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
