/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The JSON writer: what it writes is read back by the parser, what cannot be written is noticed. */
#include "codec/json_out.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "codec/json_scan.h"
#include "lwt.h"

static lwd_buf buf;
static lwd_json json;

static int start(void **state)
{
    (void)state;
    lwd_buf_init(&buf, 0);
    lwd_json_init(&json, &buf);
    return 0;
}

static int stop(void **state)
{
    (void)state;
    lwd_buf_clear(&buf);
    return 0;
}

static void writes_nested_values_with_their_commas(void **state)
{
    (void)state;
    double v[3] = {1.0, -2.5, 1e-7};
    lwd_json_object(&json);
    lwd_json_put_object(&json, "empty");
    lwd_json_end(&json);
    lwd_json_put_array(&json, "none");
    lwd_json_end(&json);
    lwd_json_put_string(&json, "s", "a\"b\\c\n\t/");
    lwd_json_put_numbers(&json, "v", v, 3);
    lwd_json_put_int(&json, "n", -9007199254740993);
    lwd_json_put_bool(&json, "yes", true);
    lwd_json_put_bool(&json, "no", false);
    lwd_json_put_null(&json, "nil");
    lwd_json_put_string(&json, "missing", NULL);
    lwd_json_put_array(&json, "list");
    lwd_json_object(&json);
    lwd_json_put_number(&json, "x", 0.1);
    lwd_json_end(&json);
    lwd_json_raw(&json, "[1]", 3);
    lwd_json_array(&json);
    lwd_json_end(&json);
    lwd_json_end(&json);
    lwd_json_end(&json);
    assert_true(lwd_json_done(&json));
    assert_string_equal(buf.data,
                        "{\"empty\":{},\"none\":[],\"s\":\"a\\\"b\\\\c\\n\\t/\","
                        "\"v\":[1,-2.5,1e-7],"
                        "\"n\":-9007199254740993,\"yes\":true,\"no\":false,\"nil\":null,"
                        "\"missing\":null,\"list\":[{\"x\":0.1},[1],[]]}");
}

/* Keys made at run time: short and longer than what is written in one go, plain and with something
 * to escape; beside literal ones, while the buffer grows. */
static void key_reads_back(const char *key)
{
    lwd_buf_clear(&buf);
    lwd_json_init(&json, &buf);
    lwd_json_object(&json);
    lwd_json_put_object(&json, key);
    for (int i = 0; i < 12; i++) {
        char numbered[112];
        (void)snprintf(numbered, sizeof numbered, "%s%d", key, i);
        lwd_json_put_int(&json, numbered, i);
    }
    lwd_json_put_number(&json, "a literal", 0.5);
    lwd_json_end(&json);
    lwd_json_put_number(&json, "after it", -0.25);
    lwd_json_end(&json);
    assert_true(lwd_json_done(&json));
    cJSON *back = cJSON_Parse(buf.data);
    assert_non_null(back);
    const cJSON *in = cJSON_GetObjectItemCaseSensitive(back, key);
    assert_int_equal(cJSON_GetArraySize(in), 13);
    lwt_same(cJSON_GetObjectItemCaseSensitive(in, "a literal")->valuedouble, 0.5);
    lwt_same(cJSON_GetObjectItemCaseSensitive(back, "after it")->valuedouble, -0.25);
    cJSON_Delete(back);
}

static void writes_keys_of_every_length_and_kind(void **state)
{
    char key[100];
    (void)state;
    for (size_t n = 0; n < 90; n++) {
        memset(key, 'k', n);
        key[n] = '\0';
        key_reads_back(key);
        for (int c = 1; n > 0 && c < 128; c++) {
            key[n / 2] = (char)c;
            key_reads_back(key);
        }
    }
}

static void writes_ascii_that_reads_back_to_the_same_text(void **state)
{
    (void)state;
    const char *text = "caf\xc3\xa9 \xe2\x82\xac \xf0\x9f\x98\x80 \x7f\x01";
    lwd_json_string(&json, text);
    assert_true(lwd_json_done(&json));
    assert_string_equal(buf.data, "\"caf\\u00e9 \\u20ac \\ud83d\\ude00 \\u007f\\u0001\"");
    cJSON *back = cJSON_Parse(buf.data);
    assert_non_null(back);
    assert_string_equal(back->valuestring, text);
    cJSON_Delete(back);
}

static void replaces_bytes_that_are_no_utf8(void **state)
{
    (void)state;
    lwd_json_string(&json, "a\xff\xc3(\xed\xa0\x80" "b\xc0\x80\xf5");
    assert_true(lwd_json_done(&json));
    assert_string_equal(buf.data,
                        "\"a\\ufffd\\ufffd(\\ufffd\\ufffd\\ufffdb\\ufffd\\ufffd\\ufffd\"");
}

static void never_writes_what_is_not_finite(void **state)
{
    (void)state;
    lwd_json_array(&json);
    lwd_json_number(&json, 1.0);
    lwd_json_number(&json, NAN);
    lwd_json_end(&json);
    assert_false(lwd_json_done(&json));
    assert_null(strstr(buf.data, "nan"));
    lwd_buf_reset(&buf);
    lwd_json_init(&json, &buf);
    lwd_json_number(&json, INFINITY);
    assert_false(lwd_json_done(&json));
    assert_string_equal(buf.data, "0");
}

static void notices_values_without_keys_and_levels_that_do_not_close(void **state)
{
    (void)state;
    lwd_json_object(&json);
    lwd_json_int(&json, 1); /* no key */
    assert_true(json.failed);

    lwd_json_init(&json, &buf);
    lwd_json_object(&json);
    lwd_json_key(&json, "a");
    lwd_json_end(&json); /* no value */
    assert_true(json.failed);

    lwd_json_init(&json, &buf);
    lwd_json_array(&json);
    lwd_json_key(&json, "a"); /* a key in an array */
    assert_true(json.failed);

    lwd_json_init(&json, &buf);
    lwd_json_array(&json);
    assert_false(lwd_json_done(&json)); /* still open */
    lwd_json_end(&json);
    assert_true(lwd_json_done(&json));
    lwd_json_int(&json, 2); /* a second value */
    assert_false(lwd_json_done(&json));

    lwd_json_init(&json, &buf);
    lwd_json_end(&json);
    assert_true(json.failed);

    lwd_json_init(&json, &buf);
    for (int i = 0; i <= LWD_JSON_DEPTH; i++) {
        assert_false(json.failed);
        lwd_json_array(&json);
    }
    assert_true(json.failed);

    lwd_json_init(&json, &buf);
    assert_false(lwd_json_done(&json)); /* nothing written */
}

static void fails_once_when_the_buffer_is_full(void **state)
{
    (void)state;
    lwd_buf_clear(&buf);
    lwd_buf_init(&buf, 64);
    lwd_json_array(&json);
    for (int i = 0; i < 100; i++) {
        lwd_json_int(&json, 1234567);
    }
    lwd_json_end(&json);
    assert_false(lwd_json_done(&json));
    assert_true(buf.failed);
    assert_true(buf.len < 64);
}

static void some_text(void *context, size_t n)
{
    (void)context;
    (void)n;
    lwd_buf b;
    lwd_json j;
    lwd_buf_init(&b, 0);
    lwd_json_init(&j, &b);
    lwd_json_array(&j);
    for (int i = 0; i < 2000; i++) {
        lwd_json_number(&j, i + 0.5);
    }
    lwd_json_end(&j);
    assert_true(lwd_json_done(&j) == !lwt_alloc_failed());
    lwd_buf_clear(&b);
}

static void survives_every_failing_allocation(void **state)
{
    (void)state;
    assert_true(lwt_alloc_sweep(some_text, NULL, 100) >= 3);
}

/* Random trees: the text passes the strict scan and the parser finds every number again. */
static void writes_random_trees_that_read_back(void **state)
{
    (void)state;
    enum { NUMBERS = 2000 };
    static double value[NUMBERS];
    lwt_random rng;
    lwt_random_init(&rng, 11);
    for (int round = 0; round < 50; round++) {
        lwd_buf_reset(&buf);
        lwd_json_init(&json, &buf);
        lwd_json_array(&json);
        size_t n = 0;
        unsigned depth = 0;
        while (n < NUMBERS) {
            size_t what = lwt_random_index(&rng, 8);
            if (what == 0 && depth < 20) {
                lwd_json_array(&json);
                depth++;
            } else if (what == 1 && depth > 0) {
                lwd_json_end(&json);
                depth--;
            } else {
                value[n] = lwt_random_normal(&rng) * pow(10.0, lwt_random_in(&rng, -300.0, 300.0));
                lwd_json_number(&json, value[n++]);
            }
        }
        for (; depth > 0; depth--) {
            lwd_json_end(&json);
        }
        lwd_json_end(&json);
        assert_true(lwd_json_done(&json));
        lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
        lwd_scan_fault fault;
        assert_true(lwd_json_scan(buf.data, buf.len, &limits, &fault));
        size_t k = 0;
        for (const char *p = buf.data; *p != '\0';) {
            if (strchr("[],", *p) != NULL) {
                p++;
            } else {
                char *end = NULL;
                lwt_same(strtod(p, &end), value[k++]);
                p = end;
            }
        }
        assert_int_equal(k, NUMBERS);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(writes_nested_values_with_their_commas, start, stop),
        cmocka_unit_test_setup_teardown(writes_keys_of_every_length_and_kind, start, stop),
        cmocka_unit_test_setup_teardown(writes_ascii_that_reads_back_to_the_same_text, start, stop),
        cmocka_unit_test_setup_teardown(replaces_bytes_that_are_no_utf8, start, stop),
        cmocka_unit_test_setup_teardown(never_writes_what_is_not_finite, start, stop),
        cmocka_unit_test_setup_teardown(
            notices_values_without_keys_and_levels_that_do_not_close, start, stop),
        cmocka_unit_test_setup_teardown(fails_once_when_the_buffer_is_full, start, stop),
        cmocka_unit_test(survives_every_failing_allocation),
        cmocka_unit_test_setup_teardown(writes_random_trees_that_read_back, start, stop),
    };
    return cmocka_run_group_tests_name("json_out", tests, NULL, NULL);
}
