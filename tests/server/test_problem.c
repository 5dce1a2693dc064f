/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Problem replies: the list of codes, the JSON form and the two lines for a PLC. */
#include "api/problem.h"

#include <string.h>

#include <cjson/cJSON.h>

#include "codec/json_scan.h"
#include "http/problems.h"
#include "lwt.h"

static void has_a_code_slug_and_title_of_its_own_for_every_problem(void **state)
{
    (void)state;
    static const lwd_problem all[] = {
#define ROW(name, number, http, word, sentence)                                                    \
    {.status = http, .code = number, .slug = word, .title = sentence},
        LWD_HTTP_PROBLEM_LIST(ROW) LWD_PROBLEM_LIST(ROW)
#undef ROW
    };
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++) {
        assert_in_range(all[i].code, 1001, 1099);
        assert_in_range(all[i].status, 400, 599);
        size_t n = strlen(all[i].slug);
        assert_true(n > 0 && strspn(all[i].slug, "abcdefghijklmnopqrstuvwxyz-") == n);
        assert_true(strlen(all[i].title) > 10);
        for (size_t k = 0; k < i; k++) {
            assert_int_not_equal(all[i].code, all[k].code);
            if (strcmp(all[i].slug, all[k].slug) == 0) {
                lwt_fail("%s stands twice", all[i].slug);
            }
        }
    }
    for (int i = 0; i < LWD_PROBLEM_COUNT; i++) {
        assert_in_range(lwd_problem_of((lwd_problem_id)i).code, 1050, 1099);
    }
}

static lwd_reply reply_to(const char *accept, const lwd_problem *problem)
{
    lwd_request request = {.accept = accept, .request_id = "r-17"};
    lwd_reply reply = {0};
    lwd_buf_init(&reply.body, 0);
    lwd_problem_reply(&reply, &request, problem);
    return reply;
}

static void writes_a_problem_document(void **state)
{
    (void)state;
    lwd_problem problem = lwd_problem_of(LWD_PROBLEM_RANGE);
    problem.detail = "The number 9 is not between 0 and \"1\".";
    problem.pointer = "/pose/x";
    problem.expected = "0 to 1";
    problem.got = "9";
    lwd_reply reply = reply_to("application/json", &problem);
    assert_int_equal(reply.status, 400);
    assert_int_equal(reply.log_code, 1054);
    assert_string_equal(reply.content_type, "application/problem+json");
    assert_string_equal(reply.body.data,
                        "{\"type\":\"/problems/out-of-range\","
                        "\"title\":\"A value is out of range\",\"status\":400,"
                        "\"detail\":\"The number 9 is not between 0 and \\\"1\\\".\","
                        "\"instance\":\"urn:leeway:request:r-17\",\"code\":1054,"
                        "\"pointer\":\"/pose/x\",\"expected\":\"0 to 1\",\"got\":\"9\"}");
    lwd_buf_clear(&reply.body);
}

static void writes_two_short_lines_where_text_is_preferred(void **state)
{
    (void)state;
    lwd_problem problem = lwd_problem_of(LWD_PROBLEM_RANGE);
    problem.detail = "The number 9 is\nnot good for caf\xc3\xa9.";
    problem.pointer = "/x";
    lwd_reply reply = reply_to("text/plain", &problem);
    assert_string_equal(reply.content_type, "text/plain; charset=us-ascii");
    assert_string_equal(reply.body.data,
                        "code=1054\nwhat=The number 9 is not good for caf?. At /x\n");
    lwd_buf_clear(&reply.body);

    char longer[600];
    memset(longer, 'x', sizeof longer - 1);
    longer[sizeof longer - 1] = '\0';
    problem.detail = longer;
    reply = reply_to("text/plain", &problem);
    assert_int_equal(reply.body.len, 255);
    assert_int_equal(reply.body.data[254], '\n');
    lwd_buf_clear(&reply.body);

    problem.detail = NULL; /* the title stands in */
    problem.pointer = NULL;
    reply = reply_to("text/plain", &problem);
    assert_string_equal(reply.body.data, "code=1054\nwhat=A value is out of range\n");
    lwd_buf_clear(&reply.body);
}

static void prefers_text_only_where_it_is_liked_better(void **state)
{
    (void)state;
    static const char *const yes[] = {"text/plain", "TEXT/PLAIN;charset=utf-8", "text/*",
                                      "text/plain, */*;q=0.1", "application/json;q=0.5, text/plain",
                                      "application/*;q=0.2,text/plain;q=0.25",
                                      "application/json;q=0, application/problem+json;q=0,*/*",
                                      " text/plain ; q=0.8 , application/json ; q=0.7"};
    static const char *const no[] = {"", "*/*", "application/json", "text/html", "text/plain;q=0",
                                     "text/plain, application/json", "application/json,*/*",
                                     "text/plain;q=0.5,application/json;q=0.75",
                                     "text/plainx", "text",
                                     "application/problem+json, text/*;q=0.9",
                                     ",,,", ";q=1"};
    assert_false(lwd_prefers_plain(NULL));
    for (size_t i = 0; i < sizeof yes / sizeof yes[0]; i++) {
        if (!lwd_prefers_plain(yes[i])) {
            lwt_fail("'%s' prefers text", yes[i]);
        }
    }
    for (size_t i = 0; i < sizeof no / sizeof no[0]; i++) {
        if (lwd_prefers_plain(no[i])) {
            lwt_fail("'%s' does not prefer text", no[i]);
        }
    }
}

static void tells_all_errors_of_a_refused_document(void **state)
{
    (void)state;
    lwd_findings findings;
    lwd_findings_init(&findings);
    lwd_finding *f = lwd_findings_add(&findings, LW_WARNING, "w", "/w");
    lwd_text_copy(f->text, sizeof f->text, "Only a warning.");
    for (int i = 0; i < 20; i++) {
        f = lwd_findings_add(&findings, LW_ERROR, "unknown-member", "/axes");
        lwd_text_copy(f->text, sizeof f->text, "Not known.");
    }
    lwd_request request = {0};
    lwd_reply reply = {0};
    lwd_buf_init(&reply.body, 0);
    lwd_problem_reply_refused(&reply, &request, LWD_PROBLEM_DOCUMENT, &findings);
    assert_int_equal(reply.status, 422);
    cJSON *tree = cJSON_Parse(reply.body.data);
    assert_non_null(tree);
    assert_string_equal(lwt_text(tree, "detail"), "Not known.");
    assert_string_equal(lwt_text(tree, "pointer"), "/axes");
    lwt_same(lwt_number(tree, "errors"), 20.0);
    assert_int_equal(cJSON_GetArraySize(lwt_member(tree, "findings")), 16);
    cJSON_Delete(tree);

    lwd_problem_reply_findings(&reply, &request, &findings);
    assert_int_equal(reply.log_code, lwd_problem_of(LWD_PROBLEM_MEMBER_UNKNOWN).code);

    lwd_findings_init(&findings);
    findings.no_memory = true;
    lwd_problem_reply_refused(&reply, &request, LWD_PROBLEM_DOCUMENT, &findings);
    assert_int_equal(reply.status, 503);
    lwd_buf_clear(&reply.body);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(has_a_code_slug_and_title_of_its_own_for_every_problem),
        cmocka_unit_test(writes_a_problem_document),
        cmocka_unit_test(writes_two_short_lines_where_text_is_preferred),
        cmocka_unit_test(prefers_text_only_where_it_is_liked_better),
        cmocka_unit_test(tells_all_errors_of_a_refused_document),
    };
    return cmocka_run_group_tests_name("problem", tests, NULL, NULL);
}
