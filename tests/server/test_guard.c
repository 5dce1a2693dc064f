/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The judges of a request's head, without a socket. Framing: RFC 9112 section 6. */
#include "http/guard.h"

#include <string.h>

#include "lwt.h"

static lwd_refusal refusal;

/* A head of headers given as name, value, name, value, ..., NULL. */
static lwd_head head_of(const char *const *text)
{
    lwd_head head;
    memset(&head, 0, sizeof head);
    for (; *text != NULL; text += 2) {
        lwd_head_add(&head, text[0], strlen(text[0]), text[1], strlen(text[1]));
    }
    return head;
}
#define HEAD(...) head_of((const char *const[]){__VA_ARGS__, NULL})

static void reads_a_length(void **state)
{
    static const struct {
        const char *text;
        bool ok;
        uint64_t value;
    } cases[] = {
        {"0", true, 0},
        {"17", true, 17},
        {"007", true, 7},
        {"999999999999999999", true, 999999999999999999u},
        {"9999999999999999999", false, 0},
        {"", false, 0},
        {"-1", false, 0},
        {"+1", false, 0},
        {"1 ", false, 0},
        {"1,1", false, 0},
        {"0x1", false, 0},
        {"1.0", false, 0},
    };
    (void)state;

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        lwd_head head = HEAD("content-LENGTH", cases[i].text);
        bool ok = lwd_guard_framing(&refusal, &head);
        if (ok != cases[i].ok || (ok && head.body_len != cases[i].value)) {
            lwt_fail("\"%s\": %s", cases[i].text, ok ? "taken" : "refused");
        }
        assert_true(ok || refusal.at_once);
    }
}

static void refuses_unclear_ends(void **state)
{
    lwd_head heads[] = {
        HEAD("Content-Length", "1", "content-length", "1"),
        HEAD("Content-Length", "1", "Transfer-Encoding", "chunked"),
        HEAD("Transfer-Encoding", "chunked", "Transfer-Encoding", "chunked"),
        HEAD("Transfer-Encoding", "gzip"),
        HEAD("Transfer-Encoding", "chunked, gzip"),
        HEAD("Transfer-Encoding", ""),
        HEAD("Content-Length ", "1"),
        HEAD("X", "a\x01"),
        HEAD("", "a"),
        HEAD("Host", "a", "host", "b"),
    };
    (void)state;

    for (size_t i = 0; i < sizeof heads / sizeof heads[0]; i++) {
        if (lwd_guard_framing(&refusal, &heads[i])) {
            lwt_fail("head %zu is taken", i);
        }
        assert_int_equal(refusal.problem, LWD_P_FRAMING);
        assert_true(refusal.at_once);
    }
}

static void sees_a_nul_in_a_value(void **state)
{
    lwd_head head;
    (void)state;

    memset(&head, 0, sizeof head);
    lwd_head_add(&head, "X-A", 3, "a\0b", 3);
    assert_false(lwd_guard_framing(&refusal, &head));
}

static void takes_clear_ends(void **state)
{
    lwd_head chunked = HEAD("Transfer-Encoding", "CHUNKED");
    lwd_head none = HEAD("X-Content-Length", "x", "X", "a\tb\xe9");
    lwd_head expects = HEAD("Expect", "100-Continue", "Content-Length", "5");
    (void)state;

    assert_true(lwd_guard_framing(&refusal, &chunked));
    assert_true(chunked.chunked);
    assert_true(lwd_guard_framing(&refusal, &none));
    assert_false(none.chunked);
    assert_int_equal(none.body_len, 0);
    assert_true(lwd_guard_framing(&refusal, &expects));
    chunked.http_1_0 = true;
    assert_false(lwd_guard_framing(&refusal, &chunked));
}

static void knows_loopback_names(void **state)
{
    static const struct {
        const char *host;
        bool ok;
    } cases[] = {
        {"localhost", true},      {"LocalHost:80", true},    {"127.0.0.1", true},
        {"127.255.255.254", true}, {"[::1]", true},          {"[::1]:8470", true},
        {"", false},              {"localhost.", false},     {"localhostx", false},
        {"127.0.0.1.x", false},   {"128.0.0.1", false},      {"127.", false},
        {"[::1", false},          {"[::1]x", false},         {"::1", false},
        {"0.0.0.0", false},       {"127.0.0.1@x", false},    {"127.0.0.1.1.1.1.1.1", false},
    };
    lwd_head head;
    (void)state;

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        head = HEAD("Host", cases[i].host);
        if (lwd_guard_host(&refusal, &head) != cases[i].ok) {
            lwt_fail("\"%s\": %s", cases[i].host, cases[i].ok ? "refused" : "taken");
        }
    }
    head = HEAD("X", "no host at all, as in HTTP/1.0");
    assert_true(lwd_guard_host(&refusal, &head));
}

static void judges_bodies_by_the_route(void **state)
{
    const lwd_route takes = {.method = LWD_POST, .body_max = 10};
    const lwd_route none = {.method = LWD_POST, .body_max = 0};
    lwd_head head = HEAD("Content-Length", "10", "Content-Type", "application/json");
    lwd_head untyped = HEAD("Content-Length", "10");
    lwd_head empty = HEAD("Content-Length", "0");
    (void)state;

    assert_true(lwd_guard_framing(&refusal, &head));
    assert_true(lwd_guard_body(&refusal, &head, &takes));
    assert_false(lwd_guard_body(&refusal, &head, &none));
    assert_int_equal(refusal.problem, LWD_P_SIZE);
    head.body_len = 11;
    assert_false(lwd_guard_body(&refusal, &head, &takes));
    lwt_holds(refusal.got, "11 bytes");
    assert_true(lwd_guard_framing(&refusal, &untyped));
    assert_false(lwd_guard_body(&refusal, &untyped, &takes));
    assert_int_equal(refusal.problem, LWD_P_MEDIA);
    assert_true(lwd_guard_framing(&refusal, &empty));
    assert_true(lwd_guard_body(&refusal, &empty, &takes));
    assert_true(lwd_guard_body(&refusal, &empty, &none));
}

/* What a client sent goes back as printable ASCII only, and not without end. */
static void quotes_foreign_text_safely(void **state)
{
    char host[400];
    lwd_head head;
    (void)state;

    memset(host, 'a', sizeof host - 1);
    host[sizeof host - 1] = '\0';
    host[0] = '\xff';
    head = HEAD("Host", host);
    assert_false(lwd_guard_host(&refusal, &head));
    assert_int_equal(refusal.got[0], '?');
    assert_int_equal(strlen(refusal.got), sizeof refusal.got - 1);
}

static void has_a_status_and_a_code_of_its_own_for_each_problem(void **state)
{
    lwd_problem problem;
    (void)state;

    for (int i = 0; i < LWD_P_COUNT; i++) {
        lwd_http_problem_fill(&problem, (lwd_http_problem)i);
        assert_int_equal(problem.code, 1001 + i);
        assert_in_range(problem.status, 400, 599);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(reads_a_length),
        cmocka_unit_test(refuses_unclear_ends),
        cmocka_unit_test(sees_a_nul_in_a_value),
        cmocka_unit_test(takes_clear_ends),
        cmocka_unit_test(knows_loopback_names),
        cmocka_unit_test(judges_bodies_by_the_route),
        cmocka_unit_test(quotes_foreign_text_safely),
        cmocka_unit_test(has_a_status_and_a_code_of_its_own_for_each_problem),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
