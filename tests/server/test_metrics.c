/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The figures as written, and out of memory while writing. Source of the format: Prometheus text
 * exposition format 0.0.4. (tests/http checks them with promtool.) */
#include "metrics.h"

#include <stdio.h>
#include <string.h>

#include "http/trace.h"
#include "lwt.h"

static void handler(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    (void)reply;
}

static const lwd_route routes[] = {
    {LWD_GET, "/a", handler, LWD_ROLE_NONE, false, 0, "a", false},
    {LWD_GET, "/b", handler, LWD_ROLE_NONE, false, 0, "b", false},
    {LWD_POST, "/a", handler, LWD_ROLE_NONE, false, 0, "a", false},
};

static int setup(void **state)
{
    (void)state;
    lwd_metrics_routes(routes, 3);
    return 0;
}

static void counts_routes_of_one_name_together(void **state)
{
    lwd_buf out;
    (void)state;

    lwd_metrics_request(&routes[0], 200, 50);
    lwd_metrics_request(&routes[2], 204, 100);
    lwd_metrics_request(&routes[2], 404, 101);
    lwd_metrics_request(&routes[1], 503, 31000000);
    lwd_metrics_request(NULL, 404, -5);
    lwd_metrics_refused(LWD_REFUSED_QUEUE);
    lwd_buf_init(&out, 0);
    lwd_metrics_write(&out);
    assert_false(out.failed);
    lwt_holds(out.data, "\nleeway_http_requests_total{route=\"a\",status=\"2xx\"} 2\n");
    lwt_holds(out.data, "\nleeway_http_requests_total{route=\"a\",status=\"4xx\"} 1\n");
    lwt_holds(out.data, "\nleeway_http_requests_total{route=\"b\",status=\"5xx\"} 1\n");
    lwt_holds(out.data, "\nleeway_http_requests_total{route=\"none\",status=\"4xx\"} 1\n");
    /* A bound belongs to its bucket ("le" is less or equal), and buckets add up. */
    lwt_holds(out.data, "_bucket{route=\"a\",le=\"0.0001\"} 2\n");
    lwt_holds(out.data, "_bucket{route=\"a\",le=\"0.00025\"} 3\n");
    lwt_holds(out.data, "_bucket{route=\"b\",le=\"30\"} 0\n");
    lwt_holds(out.data, "_bucket{route=\"b\",le=\"+Inf\"} 1\n");
    lwt_holds(out.data, "_sum{route=\"a\"} 0.000251\n");
    lwt_holds(out.data, "_sum{route=\"b\"} 31.000000\n");
    lwt_holds(out.data, "_count{route=\"none\"} 1\n");
    lwt_holds(out.data, "leeway_http_refused_total{reason=\"queue_full\"} 1\n");
    lwd_buf_clear(&out);
}

static void write_all(void *context, size_t n)
{
    lwd_buf out;
    (void)context;
    (void)n;

    lwd_buf_init(&out, 0);
    lwd_metrics_write(&out);
    assert_true(out.failed == lwt_alloc_failed());
    lwd_buf_clear(&out);
}

static void says_that_memory_ran_out(void **state)
{
    (void)state;
    assert_in_range(lwt_alloc_sweep(write_all, NULL, 40), 1, 40);
}

static void tells_readiness(void **state)
{
    (void)state;
    assert_false(lwd_ready_get());
    lwd_ready_set(true);
    assert_true(lwd_ready_get());
    lwd_ready_set(false);
    assert_false(lwd_ready_get());
}

static void makes_ids_that_differ(void **state)
{
    static char ids[5000][LWD_ID_SIZE];
    (void)state;

    for (size_t i = 0; i < 5000; i++) {
        lwd_trace_new(ids[i]);
        assert_int_equal(strspn(ids[i], "0123456789abcdef"), 32);
        for (size_t k = i < 50 ? 0 : i - 50; k < i; k++) {
            assert_string_not_equal(ids[i], ids[k]);
        }
    }
}

/* The example of W3C Trace Context, section 3.2, and what its section 3.2.2 calls invalid. */
static void takes_well_formed_traces_only(void **state)
{
    char id[LWD_ID_SIZE] = "untouched";
    static const char *const bad[] = {
        "",
        "00-0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-0",
        "00-0AF7651916CD43DD8448EB211C80319C-b7ad6b7169203331-01",
        "00-00000000000000000000000000000000-b7ad6b7169203331-01",
        "00-0af7651916cd43dd8448eb211c80319c-0000000000000000-01",
        "ff-0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01",
        "00-0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01-x",
        "00_0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01",
        "01-0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01x",
    };
    (void)state;

    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        if (lwd_trace_parse(id, bad[i])) {
            lwt_fail("taken: %s", bad[i]);
        }
    }
    assert_string_equal(id, "untouched");
    assert_true(
        lwd_trace_parse(id, "00-0af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01"));
    assert_string_equal(id, "0af7651916cd43dd8448eb211c80319c");
    assert_true(
        lwd_trace_parse(id, "01-1af7651916cd43dd8448eb211c80319c-b7ad6b7169203331-01-more"));
    assert_string_equal(id, "1af7651916cd43dd8448eb211c80319c");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(counts_routes_of_one_name_together),
        cmocka_unit_test(says_that_memory_ran_out),
        cmocka_unit_test(tells_readiness),
        cmocka_unit_test(makes_ids_that_differ),
        cmocka_unit_test(takes_well_formed_traces_only),
    };
    return cmocka_run_group_tests(tests, setup, NULL);
}
