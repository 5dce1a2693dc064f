/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The growable buffer and a reply's headers, and both when memory or room runs out. */
#include "exchange.h"

#include <string.h>

#include "lwt.h"

static void grows_and_stays_terminated(void **state)
{
    lwd_buf buf;
    (void)state;

    lwd_buf_init(&buf, 0);
    for (size_t i = 0; i < 5000; i++) {
        assert_true(lwd_buf_puts(&buf, "abc"));
        assert_int_equal(buf.len, 3 * (i + 1));
        assert_int_equal(buf.data[buf.len], '\0');
    }
    assert_int_equal(strspn(buf.data, "abc"), buf.len);
    assert_true(lwd_buf_put(&buf, "x\0y", 3));
    assert_memory_equal(buf.data + buf.len - 3, "x\0y", 3);
    lwd_buf_reset(&buf);
    assert_int_equal(buf.len, 0);
    assert_string_equal(buf.data, "");
    lwd_buf_clear(&buf);
    assert_null(buf.data);
    assert_true(lwd_buf_put(&buf, "", 0));
    assert_string_equal(buf.data, "");
    lwd_buf_clear(&buf);
}

static void stops_at_its_bound(void **state)
{
    lwd_buf buf;
    (void)state;

    lwd_buf_init(&buf, 11); /* ten bytes and the NUL */
    assert_true(lwd_buf_puts(&buf, "0123456789"));
    assert_false(lwd_buf_puts(&buf, "x"));
    assert_true(buf.failed);
    assert_string_equal(buf.data, "0123456789");
    assert_false(lwd_buf_put(&buf, "", 0));
    lwd_buf_reset(&buf);
    assert_true(lwd_buf_puts(&buf, "again"));
    lwd_buf_clear(&buf);
    assert_int_equal(buf.cap_max, 11);
    assert_false(lwd_buf_put(&buf, "x", SIZE_MAX));
    assert_true(buf.failed);
    lwd_buf_clear(&buf);
}

static void write_much(void *context, size_t n)
{
    lwd_buf buf;
    (void)context;
    (void)n;

    lwd_buf_init(&buf, 0);
    for (int i = 0; i < 500; i++) {
        lwd_buf_puts(&buf, "0123456789");
    }
    assert_true(buf.failed == lwt_alloc_failed());
    assert_true(buf.failed || buf.len == 5000);
    lwd_buf_clear(&buf);
}

static void says_once_at_the_end_that_memory_ran_out(void **state)
{
    (void)state;
    assert_in_range(lwt_alloc_sweep(write_much, NULL, 20), 3, 20);
}

static void takes_headers_that_can_not_split_the_answer(void **state)
{
    lwd_reply reply;
    char value[200];
    (void)state;

    memset(&reply, 0, sizeof reply);
    assert_true(lwd_reply_header(&reply, "ETag", "\"abc\""));
    assert_string_equal(reply.header[0].name, "ETag");
    assert_string_equal(reply.header[0].value, "\"abc\"");
    assert_false(lwd_reply_header(&reply, "X", "a\r\nY: b"));
    assert_false(lwd_reply_header(&reply, "X\r\nY", "a"));
    assert_false(lwd_reply_header(&reply, "X", "a\x7f"));
    assert_false(lwd_reply_header(&reply, "", "a"));
    memset(value, 'a', sizeof value);
    value[128] = '\0';
    assert_false(lwd_reply_header(&reply, "X", value));
    assert_false(lwd_reply_header(&reply, value + 96, "a"));
    value[127] = '\0';
    assert_true(lwd_reply_header(&reply, "X", value));
    assert_int_equal(reply.n_header, 2);
    while (reply.n_header < LWD_HEADER_MAX) {
        assert_true(lwd_reply_header(&reply, "Y", ""));
    }
    assert_false(lwd_reply_header(&reply, "Z", ""));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(grows_and_stays_terminated),
        cmocka_unit_test(stops_at_its_bound),
        cmocka_unit_test(says_once_at_the_end_that_memory_ran_out),
        cmocka_unit_test(takes_headers_that_can_not_split_the_answer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
