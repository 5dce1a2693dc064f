/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The table of routes: which route a path and method find, and which tables are refused. */
#include "http/router.h"

#include <string.h>

#include "http/uri.h"
#include "lwt.h"

static void handler(void *context, const lwd_request *request, lwd_reply *reply)
{
    (void)context;
    (void)request;
    (void)reply;
}

#define R(method, pattern) {method, pattern, handler, LWD_ROLE_NONE, false, 0, pattern, false}

static const lwd_route table[] = {
    R(LWD_GET, "/v1/{}/{}"),         R(LWD_GET, "/v1/mechanisms"),
    R(LWD_GET, "/v1/mechanisms/{}"), R(LWD_PUT, "/v1/mechanisms/{}"),
    R(LWD_GET, "/v1/jobs/events"),   R(LWD_POST, "/v1/jobs/{}"),
    R(LWD_GET, "/"),                 R(LWD_POST, "/v1/mechanisms/{}/revisions/{}/publish"),
    R(LWD_GET, "/v1/{}/events"),     R(LWD_DELETE, "/v1/jobs/{}"),
};
enum { TABLE_SIZE = sizeof table / sizeof table[0] };

static lwd_router *make(void)
{
    char why[256] = "";
    lwd_router *router = lwd_router_new(table, TABLE_SIZE, why, sizeof why);
    assert_string_equal(why, "");
    assert_non_null(router);
    return router;
}

/* Looks a raw path up; the captures stay valid until the next call. */
static lwd_match find(lwd_hit *hit, const lwd_router *router, lwd_method method, const char *path)
{
    static lwd_uri uri;
    assert_int_equal(lwd_uri_parse(&uri, path, strlen(path)), LWD_URI_OK);
    return lwd_router_find(hit, router, true, method, uri.segment, uri.n_segment);
}

static void finds_the_route_and_its_captures(void **state)
{
    lwd_router *router = make();
    lwd_hit hit;
    (void)state;

    assert_int_equal(find(&hit, router, LWD_GET, "/"), LWD_MATCH_FOUND);
    assert_string_equal(hit.route->pattern, "/");
    assert_int_equal(hit.n_param, 0);
    assert_int_equal(find(&hit, router, LWD_PUT, "/v1/mechanisms/m-1"), LWD_MATCH_FOUND);
    assert_ptr_equal(hit.route, &table[3]);
    assert_string_equal(hit.param[0], "m-1");
    assert_int_equal(find(&hit, router, LWD_POST, "/v1/mechanisms/m/revisions/12/publish"),
                     LWD_MATCH_FOUND);
    assert_int_equal(hit.n_param, 2);
    assert_string_equal(hit.param[0], "m");
    assert_string_equal(hit.param[1], "12");
    lwd_router_free(router);
}

static void prefers_what_is_written_at_the_first_difference(void **state)
{
    lwd_router *router = make();
    lwd_hit hit;
    (void)state;

    assert_int_equal(find(&hit, router, LWD_GET, "/v1/mechanisms/events"), LWD_MATCH_FOUND);
    assert_string_equal(hit.route->pattern, "/v1/mechanisms/{}");
    assert_int_equal(find(&hit, router, LWD_GET, "/v1/other/events"), LWD_MATCH_FOUND);
    assert_string_equal(hit.route->pattern, "/v1/{}/events");
    assert_int_equal(find(&hit, router, LWD_GET, "/v1/other/x"), LWD_MATCH_FOUND);
    assert_string_equal(hit.route->pattern, "/v1/{}/{}");
    assert_int_equal(hit.n_param, 2);
    assert_int_equal(find(&hit, router, LWD_GET, "/v1/jobs/events"), LWD_MATCH_FOUND);
    assert_string_equal(hit.route->pattern, "/v1/jobs/events");
    lwd_router_free(router);
}

static void names_the_methods_of_the_best_pattern(void **state)
{
    lwd_router *router = make();
    lwd_hit hit;
    (void)state;

    assert_int_equal(find(&hit, router, LWD_DELETE, "/v1/mechanisms/m"), LWD_MATCH_NO_METHOD);
    assert_string_equal(hit.allow, "GET, HEAD, PUT");
    assert_int_equal(find(&hit, router, LWD_GET, "/v1/jobs/7"), LWD_MATCH_NO_METHOD);
    assert_string_equal(hit.allow, "POST, DELETE");
    assert_int_equal(
        lwd_router_find(&hit, router, false, LWD_GET, (const char *const[]){"v1", "mechanisms"}, 2),
        LWD_MATCH_NO_METHOD);
    assert_string_equal(hit.allow, "GET, HEAD");
    lwd_router_free(router);
}

static void head_finds_get(void **state)
{
    lwd_router *router = make();
    lwd_hit hit;
    (void)state;

    assert_int_equal(find(&hit, router, LWD_HEAD, "/v1/mechanisms"), LWD_MATCH_FOUND);
    assert_ptr_equal(hit.route, &table[1]);
    assert_int_equal(find(&hit, router, LWD_HEAD, "/v1/jobs/7"), LWD_MATCH_NO_METHOD);
    lwd_router_free(router);
}

static void finds_nothing_at_other_paths(void **state)
{
    static const char *const paths[] = {
        "/v1",   "/v1/mechanisms/m/revisions", "/v1/mechanisms/", "/v2/mechanisms",
        "/v1//", "/v1/mechanisms/m/x/1/publish"};
    lwd_router *router = make();
    lwd_hit hit;
    (void)state;

    for (size_t i = 0; i < sizeof paths / sizeof paths[0]; i++) {
        if (find(&hit, router, LWD_GET, paths[i]) != LWD_MATCH_NO_PATH) {
            lwt_fail("%s finds %s", paths[i], hit.route != NULL ? hit.route->pattern : hit.allow);
        }
    }
    lwd_router_free(router);
}

static void refuses(const lwd_route *routes, size_t n, const char *part)
{
    char why[256] = "";
    assert_null(lwd_router_new(routes, n, why, sizeof why));
    lwt_holds(why, part);
}

static void refuses_tables_that_contradict_themselves(void **state)
{
    const lwd_route twice[] = {R(LWD_GET, "/a/{}"), R(LWD_PUT, "/a/{}"), R(LWD_GET, "/a/{}")};
    const lwd_route captures[] = {R(LWD_GET, "/{}/{}/{}/{}/{}")};
    const lwd_route half[] = {R(LWD_GET, "/a{b}")};
    const lwd_route relative[] = {R(LWD_GET, "a")};
    const lwd_route slash[] = {R(LWD_GET, "/a/")};
    const lwd_route head[] = {R(LWD_HEAD, "/a")};
    const lwd_route deep[] = {R(LWD_GET, "/1/2/3/4/5/6/7/8/9/10/11/12/13")};
    (void)state;

    refuses(twice, 3, "two routes serve GET /a/{}");
    refuses(captures, 1, "not well formed");
    refuses(half, 1, "/a{b}");
    refuses(relative, 1, "not well formed");
    refuses(slash, 1, "not well formed");
    refuses(head, 1, "not well formed");
    refuses(deep, 1, "not well formed");
}

static void reads_methods_as_they_are_written(void **state)
{
    lwd_method method;
    (void)state;

    for (int i = LWD_GET; i <= LWD_DELETE; i++) {
        assert_true(lwd_method_parse(&method, lwd_method_text((lwd_method)i)));
        assert_int_equal(method, i);
    }
    assert_false(lwd_method_parse(&method, "get"));
    assert_false(lwd_method_parse(&method, "PATCH"));
    assert_false(lwd_method_parse(&method, ""));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(finds_the_route_and_its_captures),
        cmocka_unit_test(prefers_what_is_written_at_the_first_difference),
        cmocka_unit_test(names_the_methods_of_the_best_pattern),
        cmocka_unit_test(head_finds_get),
        cmocka_unit_test(finds_nothing_at_other_paths),
        cmocka_unit_test(refuses_tables_that_contradict_themselves),
        cmocka_unit_test(reads_methods_as_they_are_written),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
