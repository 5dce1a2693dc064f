/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the catalog does with revisions, states, events and solution sets, in memory. */
#define _DEFAULT_SOURCE
#include "catalog_lab.h"

static int open_memory(void **state)
{
    lwd_catalog_error err;
    lwd_catalog *c = NULL;
    if (lwd_catalog_open(&c, ":memory:", NULL, &err) != LWD_CATALOG_OK) {
        print_error("%s\n", err.why);
        return -1;
    }
    *state = c;
    return 0;
}

static int close_memory(void **state)
{
    lwd_catalog_close(*state);
    return 0;
}

static void numbers_revisions_from_one_and_keeps_the_text_as_sent(void **state)
{
    lwd_catalog *c = *state;
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lab_digest(digest, 7);
    /* Blanks, line ends and multi-byte characters stay byte for byte. */
    const char text[] = "{ \"name\":\t\"stage\",\r\n \"title\": \"Tr\xc3\xa4ger \xe2\x82\xac\" }\n";
    lwd_catalog_put in = lab_put_of("stage", text, digest);
    in.report = "{\"findings\": []}";
    in.report_len = strlen(in.report);
    lwd_catalog_put_result put;
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 1);
    assert_true(put.created);
    assert_int_equal(put.state, LWD_CATALOG_DRAFT);
    assert_int_equal(put.tag, 0);
    assert_int_equal(lab_put(c, "stage", 8), 2);
    assert_int_equal(lab_put(c, "other", 7), 1);

    lwd_catalog_revision rev;
    lab_is(lwd_catalog_get_revision(c, "stage", 1, &rev, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(rev.document_len, sizeof text - 1);
    assert_memory_equal(rev.document, text, sizeof text);
    assert_string_equal(rev.report, in.report);
    assert_string_equal(rev.info.digest, digest);
    assert_string_equal(rev.info.created_by, "tester");
    assert_int_equal(rev.info.created_ms, LAB_WHEN_MS);
    assert_int_equal(rev.info.number, 1);
    assert_int_equal(rev.info.state, LWD_CATALOG_DRAFT);
    assert_false(rev.info.answers);
    assert_false(rev.info.has_solutions);
    lwd_catalog_revision_clear(&rev);
    lwd_catalog_revision_clear(&rev);
}

static void finds_the_same_content_unless_it_was_withdrawn(void **state)
{
    lwd_catalog *c = *state;
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    assert_int_equal(lab_put(c, "stage", 1), 1);
    assert_int_equal(lab_put(c, "stage", 2), 2);
    lab_digest(digest, 1);
    lwd_catalog_put in = lab_put_of("stage", "{\"n\":1}", digest);
    lwd_catalog_put_result put;
    lwd_catalog_state_result s;
    uint64_t changes = lwd_catalog_changes(c);
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 1);
    assert_false(put.created);
    assert_int_equal(put.state, LWD_CATALOG_DRAFT);
    assert_int_equal(lwd_catalog_changes(c), changes);

    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 1);
    assert_int_equal(put.state, LWD_CATALOG_PUBLISHED);
    assert_int_equal(put.tag, 1);

    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 3);
    assert_true(put.created);
    /* The text of the first sending stays, the new revision has its own. */
    lwd_catalog_revision rev;
    lab_is(lwd_catalog_get_revision(c, "stage", 1, &rev, &lab_err), LWD_CATALOG_OK);
    assert_string_equal(rev.document, "{\"n\": 1}");
    lwd_catalog_revision_clear(&rev);
    lab_is(lwd_catalog_get_revision(c, "stage", 3, &rev, &lab_err), LWD_CATALOG_OK);
    assert_string_equal(rev.document, "{\"n\":1}");
    lwd_catalog_revision_clear(&rev);
}

static void the_revision_published_last_answers(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    lwd_catalog_revision_info info;
    for (unsigned long n = 1; n <= 3; n++)
        (void)lab_put(c, "stage", n);
    lab_is(lwd_catalog_get_revision_info(c, "stage", 0, &info, &lab_err),
           LWD_CATALOG_NONE_PUBLISHED);
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    assert_true(s.changed);
    assert_int_equal(s.answering, 1);
    assert_int_equal(s.tag, 1);
    lab_is(lab_set(c, "stage", 3, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(s.answering, 3);
    /* The earlier one is still published and can be named. */
    lab_is(lwd_catalog_get_revision_info(c, "stage", 1, &info, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(info.state, LWD_CATALOG_PUBLISHED);
    assert_false(info.answers);
    lab_is(lwd_catalog_get_revision_info(c, "stage", 0, &info, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(info.number, 3);
    assert_true(info.answers);
    /* Going back is publishing again. */
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(s.answering, 1);
    assert_int_equal(s.tag, 3);
    /* Publishing the answering one is no event. */
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    assert_false(s.changed);
    assert_int_equal(s.tag, 3);
    /* Withdrawing one that does not answer leaves the answering one. */
    lab_is(lab_set(c, "stage", 3, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(s.answering, 1);
    /* Withdrawing the answering one never lets an older one answer by itself. */
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(s.answering, 0);
    lwd_catalog_revision rev;
    lab_is(lwd_catalog_get_revision(c, "stage", 0, &rev, &lab_err), LWD_CATALOG_NONE_PUBLISHED);
    assert_null(rev.document);
    lwt_holds(lab_err.why, "publish one of 1 to 3");

    lwd_catalog_mechanism m;
    lab_is(lwd_catalog_get_mechanism(c, "stage", &m, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(m.revisions, 3);
    assert_int_equal(m.drafts, 0);
    assert_int_equal(m.published, 1);
    assert_int_equal(m.withdrawn, 2);
    assert_int_equal(m.answering, 0);
    assert_string_equal(m.answering_digest, "");
    assert_int_equal(m.tag, 6);
}

static void a_withdrawn_revision_stays_withdrawn(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    (void)lab_put(c, "stage", 1);
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    assert_int_equal(s.state, LWD_CATALOG_WITHDRAWN);
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_NOT_ALLOWED);
    assert_int_equal(s.state, LWD_CATALOG_WITHDRAWN);
    assert_int_equal(s.tag, 1);
    lwt_holds(lab_err.why, "put the document again");
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    assert_false(s.changed);
    assert_int_equal(s.tag, 1);
}

static void compares_the_state_tag_before_it_sets(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    int64_t tag = 0;
    (void)lab_put(c, "stage", 1);
    (void)lab_put(c, "stage", 2);
    lab_is(lab_set(c, "stage", 1, LWD_CATALOG_PUBLISH, &tag, &s), LWD_CATALOG_OK);
    assert_int_equal(s.tag, 1);
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_PUBLISH, &tag, &s), LWD_CATALOG_CONFLICT);
    assert_int_equal(s.tag, 1);
    assert_int_equal(s.answering, 1);
    assert_int_equal(s.state, LWD_CATALOG_DRAFT);
    assert_false(s.changed);
    tag = s.tag;
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_PUBLISH, &tag, &s), LWD_CATALOG_OK);
    assert_int_equal(s.answering, 2);
    assert_int_equal(s.tag, 2);
}

static void compares_the_digest_before_it_puts(void **state)
{
    lwd_catalog *c = *state;
    char first[LWD_CATALOG_DIGEST_LEN + 1];
    char second[LWD_CATALOG_DIGEST_LEN + 1];
    lab_digest(first, 1);
    lab_digest(second, 2);
    lwd_catalog_put_result put;
    lwd_catalog_put in = lab_put_of("stage", "{}", first);
    in.expect_digest = second;
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_CONFLICT);
    in.expect_digest = "";
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 1);
    in.digest = second;
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_CONFLICT);
    lwt_holds(lab_err.why, first);
    in.expect_digest = first;
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(put.number, 2);
    int64_t n = 0;
    lab_is(lwd_catalog_count_mechanisms(c, &n, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 1);
}

static void lists_mechanisms_page_by_page(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    /* Put in an order that is not the order of names. */
    static const char *const names[] = {"m-3", "a", "m-10", "z9", "0", "m-2", "m"};
    for (size_t i = 0; i < 7; i++)
        (void)lab_put(c, names[i], i + 1);
    lab_is(lab_set(c, "m-10", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    static const char *const want[] = {"0", "a", "m", "m-10", "m-2", "m-3", "z9"};
    lwd_catalog_mechanism page[3];
    char after[LWD_CATALOG_NAME_MAX + 1] = "";
    size_t seen = 0;
    bool more = true;
    while (more) {
        size_t n = 0;
        lab_is(lwd_catalog_list_mechanisms(c, after, page, 3, &n, &more, &lab_err), LWD_CATALOG_OK);
        assert_true(n > 0);
        for (size_t i = 0; i < n; i++) {
            assert_true(seen < 7);
            assert_string_equal(page[i].name, want[seen]);
            assert_int_equal(page[i].answering, seen == 3 ? 1 : 0);
            assert_int_equal(strlen(page[i].answering_digest), seen == 3 ? 64 : 0);
            seen++;
        }
        memcpy(after, page[n - 1].name, sizeof after);
    }
    assert_int_equal(seen, 7);
    size_t n = 9;
    lab_is(lwd_catalog_list_mechanisms(c, "z9", page, 3, &n, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 0);
    assert_false(more);
    /* Exactly a page: nothing more. */
    lab_is(lwd_catalog_list_mechanisms(c, "m-10", page, 3, &n, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 3);
    assert_false(more);
    lab_is(lwd_catalog_list_mechanisms(c, NULL, page, 0, &n, &more, &lab_err),
           LWD_CATALOG_ARGUMENT);
    lab_is(
        lwd_catalog_list_mechanisms(c, NULL, page, LWD_CATALOG_PAGE_MAX + 1, &n, &more, &lab_err),
        LWD_CATALOG_ARGUMENT);
}

static void lists_revisions_and_events_page_by_page(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    for (unsigned long i = 1; i <= 5; i++)
        (void)lab_put(c, "stage", i);
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    lab_is(lab_set(c, "stage", 4, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_OK);
    lab_is(lab_set(c, "stage", 2, LWD_CATALOG_WITHDRAW, NULL, &s), LWD_CATALOG_OK);
    static const lwd_catalog_state want[] = {LWD_CATALOG_DRAFT, LWD_CATALOG_WITHDRAWN,
                                             LWD_CATALOG_DRAFT, LWD_CATALOG_PUBLISHED,
                                             LWD_CATALOG_DRAFT};
    lwd_catalog_revision_info page[2];
    int64_t seen = 0;
    bool more = true;
    while (more) {
        size_t n = 0;
        lab_is(lwd_catalog_list_revisions(c, "stage", seen, page, 2, &n, &more, &lab_err),
               LWD_CATALOG_OK);
        for (size_t i = 0; i < n; i++) {
            assert_int_equal(page[i].number, seen + 1);
            assert_int_equal(page[i].state, want[seen]);
            assert_int_equal(page[i].answers, seen == 3);
            assert_int_equal(page[i].tag, 3);
            seen++;
        }
    }
    assert_int_equal(seen, 5);

    lwd_catalog_event e[2];
    size_t n = 0;
    lab_is(lwd_catalog_list_events(c, "stage", 0, 0, e, 2, &n, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 2);
    assert_true(more);
    assert_int_equal(e[1].serial, 2);
    assert_int_equal(e[1].number, 4);
    assert_int_equal(e[1].action, LWD_CATALOG_PUBLISH);
    assert_int_equal(e[1].at_ms, LAB_WHEN_MS + 4);
    assert_string_equal(e[1].who, "tester");
    assert_string_equal(e[1].reason, "because");
    lab_is(lwd_catalog_list_events(c, "stage", 2, 1, e, 2, &n, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 1);
    assert_false(more);
    assert_int_equal(e[0].serial, 3);
    assert_int_equal(e[0].action, LWD_CATALOG_WITHDRAW);
    lab_is(lwd_catalog_list_events(c, "stage", 5, 0, e, 2, &n, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(n, 0);
}

static void names_what_is_not_there(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_state_result s;
    lwd_catalog_revision rev;
    lwd_catalog_revision_info info;
    lwd_catalog_mechanism m;
    lwd_catalog_event e;
    lwd_catalog_blob blob;
    size_t n;
    bool more;
    lab_is(lwd_catalog_get_mechanism(c, "none", &m, &lab_err), LWD_CATALOG_NOT_FOUND);
    lwt_holds(lab_err.why, "none");
    lab_is(lwd_catalog_get_revision(c, "none", 0, &rev, &lab_err), LWD_CATALOG_NOT_FOUND);
    lab_is(lwd_catalog_list_revisions(c, "none", 0, &info, 1, &n, &more, &lab_err),
           LWD_CATALOG_NOT_FOUND);
    lab_is(lwd_catalog_list_events(c, "none", 0, 0, &e, 1, &n, &more, &lab_err),
           LWD_CATALOG_NOT_FOUND);
    lab_is(lab_set(c, "none", 1, LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_NOT_FOUND);
    lab_is(lwd_catalog_save_solutions(c, "none", 1, "x", 1, 0, &lab_err), LWD_CATALOG_NOT_FOUND);
    (void)lab_put(c, "stage", 1);
    static const int64_t wrong[] = {2, -1, INT64_MAX, INT64_MIN};
    for (size_t i = 0; i < 4; i++) {
        lab_is(lwd_catalog_get_revision(c, "stage", wrong[i], &rev, &lab_err),
               LWD_CATALOG_NOT_FOUND);
        lwt_holds(lab_err.why, "1 to 1");
        lab_is(lwd_catalog_get_revision_info(c, "stage", wrong[i], &info, &lab_err),
               LWD_CATALOG_NOT_FOUND);
        lab_is(lab_set(c, "stage", wrong[i], LWD_CATALOG_PUBLISH, NULL, &s), LWD_CATALOG_NOT_FOUND);
        lab_is(lwd_catalog_list_events(c, "stage", wrong[i], 0, &e, 1, &n, &more, &lab_err),
               LWD_CATALOG_NOT_FOUND);
    }
    lab_is(lwd_catalog_load_solutions(c, "stage", 2, &blob, &lab_err), LWD_CATALOG_NOT_FOUND);
    lab_is(lwd_catalog_load_solutions(c, "stage", 1, &blob, &lab_err), LWD_CATALOG_NO_SOLUTIONS);
    assert_null(blob.data);
}

static void refuses_values_outside_their_bounds(void **state)
{
    lwd_catalog *c = *state;
    char good[LWD_CATALOG_DIGEST_LEN + 1];
    char longest[LWD_CATALOG_ACCEPTED_MAX + 2];
    lab_digest(good, 1);
    memset(longest, 'a', sizeof longest - 1);
    longest[sizeof longest - 1] = '\0';
    const char *at_33 = longest + sizeof longest - 1 - 33;
    const char *at_65 = longest + sizeof longest - 1 - 65;
    const lwd_catalog_put base = lab_put_of("stage", "{}", good);
    lwd_catalog_put bad[20];
    size_t n = 0;
#define BAD(member, value) (bad[n] = base, bad[n].member = (value), n++)
    BAD(name, "");
    BAD(name, NULL);
    BAD(name, at_33);
    BAD(name, "Stage");
    BAD(name, "a/b");
    BAD(name, "caf\xc3\xa9");
    BAD(document, NULL);
    BAD(document_len, 0);
    BAD(document_len, LWD_CATALOG_DOCUMENT_MAX + 1);
    BAD(document_len, 3); /* reaches over the closing NUL */
    BAD(report, NULL);
    BAD(report_len, LWD_CATALOG_REPORT_MAX + 1);
    BAD(digest, NULL);
    BAD(digest, "abc");
    BAD(digest, at_65);
    BAD(expect_digest, "abc");
    BAD(who, "");
    BAD(who, at_65);
    BAD(when_ms, -1);
    BAD(when_ms, INT64_C(253402300800000));
#undef BAD
    lwd_catalog_put_result put = {.number = 99};
    for (size_t i = 0; i < n; i++) {
        lab_is(lwd_catalog_put_revision(c, &bad[i], &put, &lab_err), LWD_CATALOG_ARGUMENT);
        assert_int_equal(put.number, 99);
    }
    lwd_catalog_put upper = base;
    upper.digest = "A000000000000000000000000000000000000000000000000000000000000000";
    lab_is(lwd_catalog_put_revision(c, &upper, &put, &lab_err), LWD_CATALOG_ARGUMENT);
    int64_t count = -1;
    lab_is(lwd_catalog_count_mechanisms(c, &count, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(count, 0);

    (void)lab_put(c, "stage", 1);
    lwd_catalog_state_result s;
    lwd_catalog_set_state_request rq = {.name = "stage",
                                        .number = 1,
                                        .action = LWD_CATALOG_PUBLISH,
                                        .who = "tester",
                                        .when_ms = 0,
                                        .reason = longest + sizeof longest - 1 - 512,
                                        .accepted = ""};
    lab_is(lwd_catalog_set_state(c, &rq, &s, &lab_err), LWD_CATALOG_ARGUMENT);
    rq.reason = longest + sizeof longest - 1 - LWD_CATALOG_REASON_MAX;
    rq.accepted = longest;
    lab_is(lwd_catalog_set_state(c, &rq, &s, &lab_err), LWD_CATALOG_ARGUMENT);
    rq.accepted = longest + 1;
    rq.action = LWD_CATALOG_PUT;
    lab_is(lwd_catalog_set_state(c, &rq, &s, &lab_err), LWD_CATALOG_ARGUMENT);
    rq.action = LWD_CATALOG_PUBLISH;
    lab_is(lwd_catalog_set_state(c, &rq, &s, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_event e;
    size_t got;
    bool more;
    lab_is(lwd_catalog_list_events(c, "stage", 0, 0, &e, 1, &got, &more, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(strlen(e.reason), LWD_CATALOG_REASON_MAX);
    assert_int_equal(strlen(e.accepted), LWD_CATALOG_ACCEPTED_MAX);
}

static void keeps_a_document_of_the_largest_size(void **state)
{
    lwd_catalog *c = *state;
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lab_digest(digest, 1);
    char *text = malloc(LWD_CATALOG_DOCUMENT_MAX);
    assert_non_null(text);
    memset(text, 'x', LWD_CATALOG_DOCUMENT_MAX);
    lwd_catalog_put in = lab_put_of("large", "", digest);
    in.document = text;
    in.document_len = LWD_CATALOG_DOCUMENT_MAX;
    in.report = text;
    in.report_len = LWD_CATALOG_REPORT_MAX;
    lwd_catalog_put_result put;
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_OK);
    lwd_catalog_revision rev;
    lab_is(lwd_catalog_get_revision(c, "large", 1, &rev, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(rev.document_len, LWD_CATALOG_DOCUMENT_MAX);
    assert_memory_equal(rev.document, text, LWD_CATALOG_DOCUMENT_MAX);
    assert_int_equal(rev.report_len, LWD_CATALOG_REPORT_MAX);
    lwd_catalog_revision_clear(&rev);
    free(text);
}

static void keeps_solution_sets_beside_a_revision(void **state)
{
    lwd_catalog *c = *state;
    unsigned char data[5000];
    for (size_t i = 0; i < sizeof data; i++)
        data[i] = (unsigned char)(i * 7);
    (void)lab_put(c, "stage", 1);
    lab_is(lwd_catalog_save_solutions(c, "stage", 1, data, sizeof data, 5, &lab_err),
           LWD_CATALOG_OK);
    lwd_catalog_blob blob;
    lab_is(lwd_catalog_load_solutions(c, "stage", 1, &blob, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(blob.len, sizeof data);
    assert_int_equal(blob.created_ms, 5);
    assert_memory_equal(blob.data, data, sizeof data);
    lwd_catalog_blob_clear(&blob);
    /* Prepared again: the new ones replace the old. */
    lab_is(lwd_catalog_save_solutions(c, "stage", 1, data, 10, 6, &lab_err), LWD_CATALOG_OK);
    lab_is(lwd_catalog_load_solutions(c, "stage", 1, &blob, &lab_err), LWD_CATALOG_OK);
    assert_int_equal(blob.len, 10);
    lwd_catalog_blob_clear(&blob);
    lwd_catalog_revision_info info;
    lab_is(lwd_catalog_get_revision_info(c, "stage", 1, &info, &lab_err), LWD_CATALOG_OK);
    assert_true(info.has_solutions);
    lab_is(lwd_catalog_save_solutions(c, "stage", 1, data, 0, 6, &lab_err), LWD_CATALOG_ARGUMENT);
    lab_is(
        lwd_catalog_save_solutions(c, "stage", 1, data, LWD_CATALOG_SOLUTIONS_MAX + 1, 6, &lab_err),
        LWD_CATALOG_ARGUMENT);
    lab_is(lwd_catalog_load_solutions(c, "stage", 0, &blob, &lab_err), LWD_CATALOG_ARGUMENT);
}

static void stops_at_the_stated_counts(void **state)
{
    (void)state;
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.mechanisms_max = 2;
    o.revisions_max = 3;
    lwd_catalog *c = lab_open(":memory:", &o);
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    lwd_catalog_put_result put;
    for (unsigned long i = 1; i <= 3; i++)
        (void)lab_put(c, "one", i);
    (void)lab_put(c, "two", 1);
    lab_digest(digest, 4);
    lwd_catalog_put in = lab_put_of("one", "{}", digest);
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_LIMIT);
    lwt_holds(lab_err.why, "3 revisions");
    in.name = "three";
    lab_is(lwd_catalog_put_revision(c, &in, &put, &lab_err), LWD_CATALOG_LIMIT);
    /* What is there already is still found. */
    assert_int_equal(lab_put(c, "one", 2), 2);
    assert_int_equal(lab_put(c, "two", 4), 2);
    lwd_catalog_close(c);
}

static void every_code_has_its_text(void **state)
{
    (void)state;
    for (int i = 0; i < LWD_CATALOG_RESULT_COUNT; i++) {
        assert_non_null(lwd_catalog_result_text((lwd_catalog_result)i));
        for (int j = 0; j < i; j++)
            assert_string_not_equal(lwd_catalog_result_text((lwd_catalog_result)i),
                                    lwd_catalog_result_text((lwd_catalog_result)j));
    }
    assert_string_equal(lwd_catalog_result_text((lwd_catalog_result)999),
                        lwd_catalog_result_text(LWD_CATALOG_INTERNAL));
    assert_string_equal(lwd_catalog_state_name(LWD_CATALOG_DRAFT), "draft");
    assert_string_equal(lwd_catalog_state_name(LWD_CATALOG_PUBLISHED), "published");
    assert_string_equal(lwd_catalog_state_name(LWD_CATALOG_WITHDRAWN), "withdrawn");
    assert_string_equal(lwd_catalog_action_name(LWD_CATALOG_PUT), "put");
    assert_string_equal(lwd_catalog_action_name(LWD_CATALOG_WITHDRAW), "withdraw");
}

static void works_without_an_error_record(void **state)
{
    lwd_catalog *c = *state;
    lwd_catalog_mechanism m;
    lwd_catalog_put in = lab_put_of("stage", "{}", "short");
    lwd_catalog_put_result put;
    assert_int_equal(lwd_catalog_put_revision(c, &in, &put, NULL), LWD_CATALOG_ARGUMENT);
    assert_int_equal(lwd_catalog_get_mechanism(c, "stage", &m, NULL), LWD_CATALOG_NOT_FOUND);
    (void)lab_put(c, "stage", 1);
    assert_int_equal(lwd_catalog_get_mechanism(c, "stage", &m, NULL), LWD_CATALOG_OK);
    assert_int_equal(lwd_catalog_verify(c, true, NULL), LWD_CATALOG_OK);
}

#define CASE(f) cmocka_unit_test_setup_teardown(f, open_memory, close_memory)

int main(void)
{
    const struct CMUnitTest tests[] = {
        CASE(numbers_revisions_from_one_and_keeps_the_text_as_sent),
        CASE(finds_the_same_content_unless_it_was_withdrawn),
        CASE(the_revision_published_last_answers),
        CASE(a_withdrawn_revision_stays_withdrawn),
        CASE(compares_the_state_tag_before_it_sets),
        CASE(compares_the_digest_before_it_puts),
        CASE(lists_mechanisms_page_by_page),
        CASE(lists_revisions_and_events_page_by_page),
        CASE(names_what_is_not_there),
        CASE(refuses_values_outside_their_bounds),
        CASE(keeps_a_document_of_the_largest_size),
        CASE(keeps_solution_sets_beside_a_revision),
        cmocka_unit_test(stops_at_the_stated_counts),
        cmocka_unit_test(every_code_has_its_text),
        CASE(works_without_an_error_record),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
