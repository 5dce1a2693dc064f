/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The edge and the answer writer alone, over a spec made by hand: units, readings that run back,
 * names of limits, the PLC's bound. Expected numbers are worked out beside the checks. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "codec/answer_out.h"
#include "lwt.h"

typedef struct table {
    lw_spec *spec;
    lw_report *report;
    lwd_edge *edge;
    lwd_question *question;
    lwd_answer_head head;
    lwd_buf buf;
} table;

/* A universal joint, a ball, a rod; two drives, the second read backwards. */
static int setup(void **state)
{
    table *t = calloc(1, sizeof *t);
    t->spec = calloc(1, sizeof *t->spec);
    t->report = calloc(1, sizeof *t->report);
    t->edge = calloc(1, sizeof *t->edge);
    t->question = calloc(1, sizeof *t->question);
    lw_spec *s = t->spec;
    s->n_joint = 2;
    s->joint[0].type = LW_UNIVERSAL;
    memcpy(s->joint[0].name, "wrist", 6);
    s->joint[1].type = LW_SPHERICAL;
    memcpy(s->joint[1].name, "ball", 5);
    s->n_rod = 1;
    memcpy(s->rod[0].name, "strut", 6);
    s->n_drive = 2;
    memcpy(s->drive[0].name, "m1", 3);
    memcpy(s->drive[1].name, "m2", 3);
    lwd_edge *e = t->edge;
    e->spec = s;
    e->report = t->report;
    e->n_coord = 3;
    memcpy(e->coord_name[0], "wrist.first", 12);
    memcpy(e->coord_name[1], "wrist.second", 13);
    memcpy(e->coord_name[2], "strut", 6);
    e->coord_turning[0] = e->coord_turning[1] = true;
    e->drive[0] = (lwd_drive_edge){.at_reference = 0.0, .slope = 57.29577951308232};
    e->drive[1] = (lwd_drive_edge){.at_reference = 10.0, .slope = -2000.0};
    memset(e->digest, 'a', 64);
    e->revision = 999999999;
    t->head = (lwd_answer_head){
        .edge = e, .question = t->question, .state = "published", .served_at = "t"};
    t->question->kind = LWD_ASK_REACH;
    lwd_buf_init(&t->buf, 0);
    *state = t;
    return 0;
}

static int teardown(void **state)
{
    table *t = *state;
    lwd_buf_clear(&t->buf);
    free(t->question);
    free(t->edge);
    free(t->report);
    free(t->spec);
    free(t);
    return 0;
}

static const char *limit_text(table *t, const lw_limit *limit)
{
    lwd_json json;
    lwd_buf_reset(&t->buf);
    lwd_json_init(&json, &t->buf);
    lwd_answer_limit(&json, &t->head, limit);
    assert_true(lwd_json_done(&json));
    return t->buf.data;
}

/* reading = 10 - 2000 * coordinate: 0.003 m reads 4, the range 0.001 to 0.005 m reads 0 to 8, and
 * 0.0005 m beyond is 1 beyond. */
static void a_drive_that_reads_backwards_keeps_its_range_in_order(void **state)
{
    const lw_limit limit = {.of = LW_LIMIT_DRIVE, .index = 1, .value = 0.003, .over = 0.0005,
                            .range = {.has_low = true, .low = 0.001, .has_high = true,
                                      .high = 0.005}};
    assert_string_equal(limit_text(*state, &limit),
                        "{\"of\":\"drive\",\"name\":\"m2\",\"no\":2,\"value\":4,\"range\":[0,8],"
                        "\"over\":1}");
    table *t = *state;
    lwt_near(lwd_limit_over(t->edge, t->question->units, &limit), 1.0, 1e-12);
    lwt_near(lwd_reading_in(t->edge, 1, 4.0), 0.003, 1e-15);
}

static void limits_are_named_by_their_part(void **state)
{
    table *t = *state;
    const lw_limit second = {.of = LW_LIMIT_JOINT, .index = 0, .part = 1,
                             .value = 0.5235987755982988, .over = 0.08726646259971647,
                             .range = {.has_high = true, .high = 0.4363323129985824}};
    const char *text = limit_text(t, &second);
    lwt_holds(text, "\"of\":\"joint\",\"name\":\"wrist.second\",\"no\":1,");
    lwt_holds(text, "\"range\":[null,25]");
    const lw_limit cone = {.of = LW_LIMIT_JOINT, .index = 1, .part = LW_PART_CONE, .value = 0.6,
                           .over = 0.1, .range = {.has_high = true, .high = 0.5}};
    lwt_holds(limit_text(t, &cone), "\"name\":\"ball\",\"no\":2,\"cause\":\"cone\"");
    const lw_limit rod = {.of = LW_LIMIT_ROD, .index = 0, .value = 0.62, .over = 0.01,
                          .range = {.has_low = true, .low = 0.43, .has_high = true, .high = 0.61}};
    assert_string_equal(limit_text(t, &rod),
                        "{\"of\":\"rod\",\"name\":\"strut\",\"no\":1,\"value\":620,"
                        "\"range\":[430,610],\"over\":10}");
    const lw_limit swivel = {.of = LW_LIMIT_ROD, .index = 0, .part = LW_PART_CONE + 1, .value = 0.6,
                             .over = 0.1, .range = {.has_high = true, .high = 0.5}};
    lwt_holds(limit_text(t, &swivel), "\"cause\":\"cone\",\"end\":2");
    t->question->units = (lwd_units){.metres = true, .radians = true};
    lwt_holds(limit_text(t, &rod), "\"range\":[0.43,0.61]");
}

static void short_numbers_come_back_short(void **state)
{
    (void)state;
    lwt_same(lwd_tidy(29.999999999999996), 30.0);
    lwt_same(lwd_tidy(0.1 + 0.2), 0.3);
    lwt_same(lwd_tidy(-0.30000000000000004), -0.3);
    lwt_same(lwd_tidy(123456.78900000001), 123456.789);
    lwt_same(lwd_tidy(0.0), 0.0);
    /* Numbers of their own stay as they are, to the last bit. */
    lwt_same(lwd_tidy(3.141592653589793), 3.141592653589793);
    lwt_same(lwd_tidy(1.0 / 3.0), 1.0 / 3.0);
    lwt_same(lwd_tidy(1e300), 1e300);
    lwt_same(lwd_tidy(5e-324), 5e-324);
}

/* Every number of up to 9 digits that a client may write survives the way to SI and back. */
static void what_was_sent_is_said_back(void **state)
{
    lwt_random rng;
    (void)state;
    lwt_random_init(&rng, 4);
    for (int i = 0; i < 20000; i++) {
        double power = 1.0;
        for (size_t k = lwt_random_index(&rng, 7); k > 0; k--) {
            power *= 10.0;
        }
        double sent = ((double)lwt_random_index(&rng, 1999999999) - 999999999.0) / power;
        const lwd_units units = {.metres = false, .radians = false};
        lwt_same(lwd_tidy(lwd_length_out(units, lwd_length_in(units, sent))), sent);
        lwt_same(lwd_tidy(lwd_angle_out(units, lwd_angle_in(units, sent))), sent);
    }
}

static void units_have_words_and_factors(void **state)
{
    const lwd_units fine = {.metres = false, .radians = false};
    const lwd_units si = {.metres = true, .radians = true};
    (void)state;
    lwt_same(lwd_length_out(fine, 0.25), 250.0);
    lwt_near(lwd_angle_out(fine, 3.141592653589793), 180.0, 1e-12);
    lwt_same(lwd_length_out(si, 0.25), 0.25);
    assert_string_equal(lwd_length_word(fine), "mm");
    assert_string_equal(lwd_angle_word(si), "rad");
}

static void the_plc_text_keeps_revision_and_tag_whatever_else(void **state)
{
    table *t = *state;
    lw_solution solution = {.n_limit = 1};
    lw_margin_answer margin = {.least = LW_MARGIN_ACCURACY};
    lw_reach_answer answer = {.outcome = LW_OUTCOME_OUT_OF_REACH, .solution = &solution,
                              .margin = &margin, .failed_margin = -1};
    solution.limit[0] = (lw_limit){.of = LW_LIMIT_DRIVE, .index = 0, .over = 0.123456789012345};
    margin.margin[LW_MARGIN_ACCURACY] = (lw_margin_value){.asked = true, .value = 1e6 / 3.0};
    memset(t->spec->drive[0].name, 'n', LW_NAME_SIZE - 1);
    t->question->head.has_ref = true;
    memset(t->question->head.ref, 'r', LWD_REF_MAX);
    lwd_plc_reach(&t->buf, &t->head, &answer);
    assert_false(t->buf.failed);
    assert_true(t->buf.len <= LWD_PLC_MAX);
    lwt_holds(t->buf.data, "\ncode=4\noutcome=out_of_reach\n");
    lwt_holds(t->buf.data, "\nrevision=999999999\ntag=aaaaaaaa\n");
    lwt_holds(t->buf.data, "\nmargin=333333.333\nmargin_of=accuracy\n");
    /* No value, no key. */
    const lw_reach_answer bare = {.outcome = LW_OUTCOME_UNDECIDED, .failed_margin = -1};
    t->question->head.has_ref = false;
    lwd_buf_reset(&t->buf);
    lwd_plc_reach(&t->buf, &t->head, &bare);
    assert_string_equal(t->buf.data,
                        "code=5\noutcome=undecided\nrevision=999999999\ntag=aaaaaaaa\n");
}

/* A number that is not finite must never go out: the writer says so, the caller makes a problem. */
static void a_number_that_is_not_finite_fails_the_answer(void **state)
{
    table *t = *state;
    lwd_json json;
    const lw_limit limit = {.of = LW_LIMIT_DRIVE, .index = 0, .value = NAN, .over = 1.0};
    lwd_json_init(&json, &t->buf);
    lwd_answer_limit(&json, &t->head, &limit);
    assert_false(lwd_json_done(&json));
    assert_null(strstr(t->buf.data, "nan"));
}

int main(void)
{
#define CASE(f) cmocka_unit_test_setup_teardown(f, setup, teardown)
    const struct CMUnitTest tests[] = {
        CASE(a_drive_that_reads_backwards_keeps_its_range_in_order),
        CASE(limits_are_named_by_their_part),
        CASE(short_numbers_come_back_short),
        CASE(what_was_sent_is_said_back),
        CASE(units_have_words_and_factors),
        CASE(the_plc_text_keeps_revision_and_tag_whatever_else),
        CASE(a_number_that_is_not_finite_fails_the_answer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
