/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The canonical form against the examples of RFC 8785, and what must hold for every text. */
#include "codec/canonical.h"

#include <stdio.h>
#include <string.h>

#include "codec/json_in.h"
#include "lwt.h"

static char text_out[8192];

static const char *canonical(const char *text)
{
    lwd_findings findings;
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    lwd_buf buf;
    lwd_findings_init(&findings);
    lwd_buf_init(&buf, 0);
    struct cJSON *tree = lwd_json_parse(text, strlen(text), &limits, &findings);
    assert_non_null(tree);
    assert_true(lwd_canonical(tree, &buf));
    assert_true(buf.len < sizeof text_out);
    memcpy(text_out, buf.data, buf.len + 1);
    lwd_buf_clear(&buf);
    lwd_json_free(tree);
    return text_out;
}

static void digest_of(const char *text, char digest[LWD_SHA256_HEX_SIZE])
{
    lwd_findings findings;
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    lwd_findings_init(&findings);
    struct cJSON *tree = lwd_json_parse(text, strlen(text), &limits, &findings);
    assert_non_null(tree);
    assert_true(lwd_canonical_digest(tree, digest));
    lwd_json_free(tree);
}

/* Published: RFC 8785 (2020), section 3.2.2, the sample with numbers, string and literals; from
 * memory, and as other programs' tests carry it. */
static void agrees_with_the_published_sample(void **state)
{
    (void)state;
    assert_string_equal(
        canonical("{\n"
                  "  \"numbers\": [333333333.33333329, 1E30, 4.50, 2e-3,\n"
                  "              0.000000000000000000000000001],\n"
                  "  \"string\": \"\\u20ac$\\u000F\\u000aA'\\u0042\\u0022\\u005c\\\\\\\"\\/\",\n"
                  "  \"literals\": [null, true, false]\n"
                  "}"),
        "{\"literals\":[null,true,false],\"numbers\":[333333333.3333333,1e+30,4.5,0.002,1e-27],"
        "\"string\":\"\xe2\x82\xac$\\u000f\\nA'B\\\"\\\\\\\\\\\"/\"}");
}

/* Published: RFC 8785, section 3.2.3, the sorting sample; from memory likewise. */
static void sorts_by_utf16_units_as_published(void **state)
{
    (void)state;
    assert_string_equal(
        canonical("{\"\\u20ac\":\"Euro Sign\",\"\\r\":\"Carriage Return\","
                  "\"\\ufb33\":\"Hebrew Letter Dalet With Dagesh\",\"1\":\"One\","
                  "\"\\ud83d\\ude00\":\"Emoji: Grinning Face\",\"\\u0080\":\"Control\","
                  "\"\\u00f6\":\"Latin Small Letter O With Diaeresis\"}"),
        "{\"\\r\":\"Carriage Return\",\"1\":\"One\",\"\xc2\x80\":\"Control\","
        "\"\xc3\xb6\":\"Latin Small Letter O With Diaeresis\",\"\xe2\x82\xac\":\"Euro Sign\","
        "\"\xf0\x9f\x98\x80\":\"Emoji: Grinning Face\","
        "\"\xef\xac\xb3\":\"Hebrew Letter Dalet With Dagesh\"}");
}

static void writes_the_fewest_escapes(void **state)
{
    (void)state;
    assert_string_equal(
        canonical("\"\\u0001\\u001f\\b\\t\\n\\f\\r\\u0022\\u005c\\u002f\\u007f\\u00e9\""),
        "\"\\u0001\\u001f\\b\\t\\n\\f\\r\\\"\\\\/\x7f\xc3\xa9\"");
    assert_string_equal(canonical("[ 1.0 , -0 , 1e2, 100e-2 ]"), "[1,0,100,1]");
    assert_string_equal(canonical("{ }"), "{}");
    assert_string_equal(canonical("[ ]"), "[]");
}

static void sorts_more_members_than_the_stack_holds(void **state)
{
    (void)state;
    char text[2048];
    size_t n = 0;
    n += (size_t)snprintf(text + n, sizeof text - n, "{");
    for (int i = 99; i >= 0; i--) {
        n += (size_t)snprintf(text + n, sizeof text - n, "\"k%02d\":%d%s", i, i, i > 0 ? "," : "}");
    }
    const char *got = canonical(text);
    n = 0;
    n += (size_t)snprintf(text + n, sizeof text - n, "{");
    for (int i = 0; i < 100; i++) {
        n += (size_t)snprintf(text + n, sizeof text - n, "\"k%02d\":%d%s", i, i,
                              i < 99 ? "," : "}");
    }
    assert_string_equal(got, text);
}

/* A random tree, its members in the order of `order`; the same seed makes the same tree. */
static size_t write_tree(char *out, size_t size, lwt_random *rng, unsigned depth, bool backwards)
{
    size_t n = 0;
    size_t count = 1 + lwt_random_index(rng, 4);
    if (depth == 0) {
        return (size_t)snprintf(out, size, "%.17g", lwt_random_normal(rng));
    }
    char part[4][1024];
    for (size_t i = 0; i < count; i++) {
        size_t at = (size_t)snprintf(part[i], sizeof part[i], "\"%c%zu\" : ",
                                     (int)('a' + (int)lwt_random_index(rng, 26)), i);
        (void)write_tree(part[i] + at, sizeof part[i] - at, rng, depth - 1, backwards);
    }
    n += (size_t)snprintf(out + n, size - n, "{");
    for (size_t i = 0; i < count; i++) {
        n += (size_t)snprintf(out + n, size - n, "%s%s", i > 0 ? " , " : "",
                              part[backwards ? count - 1 - i : i]);
    }
    n += (size_t)snprintf(out + n, size - n, "}");
    return n;
}

static void is_idempotent_and_blind_to_the_order_of_members(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 300; seed++) {
        char one[4096];
        char two[4096];
        char first[8192];
        lwt_random rng;
        lwt_random_init(&rng, seed);
        (void)write_tree(one, sizeof one, &rng, 3, false);
        lwt_random_init(&rng, seed);
        (void)write_tree(two, sizeof two, &rng, 3, true);
        (void)snprintf(first, sizeof first, "%s", canonical(one));
        assert_string_equal(canonical(two), first);
        assert_string_equal(canonical(first), first);
        char a[LWD_SHA256_HEX_SIZE];
        char b[LWD_SHA256_HEX_SIZE];
        digest_of(one, a);
        digest_of(two, b);
        assert_string_equal(a, b);
        lwd_sha256_text(b, first, strlen(first));
        assert_string_equal(a, b);
    }
}

static void tells_different_documents_apart(void **state)
{
    (void)state;
    static const char *const text[] = {"{\"a\":1}", "{\"a\":1.0000000000000002}", "{\"a\":\"1\"}",
                                       "{\"A\":1}", "{\"a\":[1]}", "[{\"a\":1}]", "{\"a\":true}"};
    char digest[7][LWD_SHA256_HEX_SIZE];
    for (size_t i = 0; i < 7; i++) {
        digest_of(text[i], digest[i]);
        for (size_t k = 0; k < i; k++) {
            assert_string_not_equal(digest[i], digest[k]);
        }
    }
}

static const struct cJSON *sweep_tree;

static void digest_step(void *context, size_t n)
{
    char digest[LWD_SHA256_HEX_SIZE];
    (void)context;
    (void)n;
    assert_true(lwd_canonical_digest(sweep_tree, digest) == !lwt_alloc_failed());
}

static void survives_every_failing_allocation(void **state)
{
    (void)state;
    char text[2048] = "{";
    size_t n = 1;
    for (int i = 0; i < 100; i++) {
        n += (size_t)snprintf(text + n, sizeof text - n, "\"k%02d\":%d%s", i, i,
                              i < 99 ? "," : "}");
    }
    lwd_findings findings;
    lwd_scan_limits limits = LWD_SCAN_DOCUMENT;
    lwd_findings_init(&findings);
    struct cJSON *tree = lwd_json_parse(text, strlen(text), &limits, &findings);
    assert_non_null(tree);
    sweep_tree = tree;
    assert_true(lwt_alloc_sweep(digest_step, NULL, 20) >= 2);
    lwd_json_free(tree);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(agrees_with_the_published_sample),
        cmocka_unit_test(sorts_by_utf16_units_as_published),
        cmocka_unit_test(writes_the_fewest_escapes),
        cmocka_unit_test(sorts_more_members_than_the_stack_holds),
        cmocka_unit_test(is_idempotent_and_blind_to_the_order_of_members),
        cmocka_unit_test(tells_different_documents_apart),
        cmocka_unit_test(survives_every_failing_allocation),
    };
    return cmocka_run_group_tests_name("canonical", tests, NULL, NULL);
}
