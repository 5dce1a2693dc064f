/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Paths through the handlers: as JSON and as a table alike, with certificates, thresholds, time
 * limits; faults of tables at their row and column. What is right about a move itself is checked
 * in tests/core. */
#include <math.h>

#include "api_rig.h"

#define START "\"from\":{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}}"
#define START_QUERY "from.m1=90&from.m2=180&from.m3=270&from.m4=0"
#define PATH "/v1/mechanisms/label-stage/path"
#define N10 "{\"line\":\"N10\",\"move\":\"line\",\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"
#define N20                                                                                        \
    "{\"move\":\"circle\",\"via\":{\"x\":0,\"y\":10},\"pose\":{\"x\":-15,\"y\":-10,\"rz\":0}}"
#define FAR "{\"line\":\"FAR\",\"move\":\"line\",\"pose\":{\"x\":900,\"y\":0,\"rz\":0}}"

static int setup(void **state)
{
    static rig r;
    rig_start(&r);
    rig_demo(&r, "label-stage");
    *state = &r;
    return 0;
}

static int teardown(void **state)
{
    rig_stop(*state);
    return 0;
}

static int post_table(rig *r, const char *query, const char *table)
{
    char target[600];
    (void)snprintf(target, sizeof target, PATH "?%s", query);
    r->content_type = "text/csv";
    int status = rig_post(r, target, table);
    r->content_type = NULL;
    return status;
}

static void moves_one_by_one(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, PATH, "{" START ",\"through\":[" N10 "," N20 "]}"));
    lwt_same(rig_number(r, "code"), 1.0);
    assert_int_equal(r->reply.log_code, 1);
    assert_string_equal(rig_header(r, "Cache-Control"), "no-store");
    assert_string_equal(rig_text(r, "asked/through/1/move"), "circle");
    assert_string_equal(rig_text(r, "start/mode"), "++++");
    assert_string_equal(rig_text(r, "moves/0/line"), "N10");
    assert_null(rig_at(r, "moves/1/line"));
    assert_null(rig_at(r, "certificate"));
    assert_null(rig_at(r, "moves/0/proof"));
    for (int i = 0; i < 2; i++) {
        char way[64];
        (void)snprintf(way, sizeof way, "moves/%d/code", i);
        lwt_same(rig_number(r, way), 1.0);
        (void)snprintf(way, sizeof way, "moves/%d/at", i);
        lwt_same(rig_number(r, way), 1.0);
        (void)snprintf(way, sizeof way, "moves/%d/least/speed/at_least", i);
        double at_least = rig_number(r, way);
        (void)snprintf(way, sizeof way, "moves/%d/least/speed/value", i);
        assert_true(at_least >= 1.0 && at_least <= rig_number(r, way));
    }
    /* A straight line from the middle: by Pythagoras. */
    lwt_near(rig_number(r, "moves/0/length"), sqrt(15.0 * 15.0 + 10.0 * 10.0), 1e-9);
    lwt_near(rig_number(r, "moves/0/turn"), 6.0, 1e-9);
    lwt_near(rig_number(r, "moves/1/end/pose/x"), -15.0, 1e-7);
    lwt_near(rig_number(r, "moves/1/end/pose/y"), -10.0, 1e-7);
}

static void a_break_ends_the_path(void **state)
{
    rig *r = *state;
    rig_wants(r, 200,
              rig_post(r, PATH, "{" START ",\"through\":[" N10 "," FAR "," N20 "],\"ref\":\"p\"}"));
    double code = rig_number(r, "code");
    assert_true(code > 1.0);
    lwt_same(rig_number(r, "moves/1/code"), code);
    assert_string_equal(rig_text(r, "ref"), "p");
    assert_true(rig_number(r, "moves/1/at") < 1.0);
    assert_true(strlen(rig_text(r, "moves/1/reason")) > 10);
    assert_true(strlen(rig_text(r, "moves/1/cause")) > 3);
    assert_true(cJSON_IsNull(rig_at(r, "moves/1/end")));
    assert_true(cJSON_IsFalse(rig_at(r, "moves/2/examined")));
    assert_null(rig_at(r, "moves/2/code"));
}

/* The same question with the same budget: the same bytes but for the time of day. */
static void the_same_answer_every_time(void **state)
{
    rig *r = *state;
    const char *body = "{" START ",\"through\":[" N10 "," N20 "," FAR "],\"certificate\":true}";
    rig_wants(r, 200, rig_post(r, PATH, body));
    char *first = cJSON_PrintUnformatted(rig_at(r, "moves"));
    r->lane = 1;
    rig_wants(r, 200, rig_post(r, PATH, body));
    r->lane = 0;
    char *second = cJSON_PrintUnformatted(rig_at(r, "moves"));
    assert_non_null(first);
    assert_string_equal(first, second);
    free(first);
    free(second);
}

static void a_certificate_covers_the_move(void **state)
{
    rig *r = *state;
    const cJSON *piece = NULL;
    double high = 0.0;
    double n = 0.0;
    rig_wants(r, 200,
              rig_post(r, PATH, "{" START ",\"through\":[" N10 "],\"certificate\":true,"
                                "\"margin_min\":{\"load\":1}}"));
    lwt_same(rig_number(r, "code"), 1.0);
    cJSON_ArrayForEach(piece, rig_at(r, "moves/0/proof"))
    {
        lwt_same(cJSON_GetObjectItem(piece, "low")->valuedouble, high);
        high = cJSON_GetObjectItem(piece, "high")->valuedouble;
        const cJSON *m1 = cJSON_GetObjectItem(cJSON_GetObjectItem(piece, "drives"), "m1");
        assert_true(cJSON_GetArrayItem(m1, 0)->valuedouble
                    <= cJSON_GetArrayItem(m1, 1)->valuedouble);
        const cJSON *margins = cJSON_GetObjectItem(piece, "margins");
        assert_true(cJSON_GetObjectItem(margins, "load")->valuedouble >= 1.0);
        n += 1.0;
    }
    lwt_same(high, 1.0);
    lwt_same(rig_number(r, "certificate/intervals"), n);
    assert_true(cJSON_IsFalse(rig_at(r, "certificate/truncated")));
}

static void the_start_may_have_no_posture(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, PATH, "{\"from\":{\"pose\":{\"x\":900,\"y\":0,\"rz\":0}},"
                                        "\"through\":[" N10 "]}"));
    assert_true(rig_number(r, "code") > 1.0);
    assert_true(cJSON_IsNull(rig_at(r, "start")));
    assert_true(cJSON_IsFalse(rig_at(r, "moves/0/examined")));
    rig_wants(r, 200, rig_post(r, PATH, "{\"from\":{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,"
                                        "\"m4\":8}},\"through\":[" N10 "]}"));
    lwt_same(rig_number(r, "code"), 8.0);
    lwt_same(rig_number(r, "from_readings/code"), 8.0);
}

/* Time only aborts: the answer is undecided and says why. So many moves take longer than the
 * millisecond that is given. */
static void time_aborts_and_says_so(void **state)
{
    static char body[65536];
    rig *r = *state;
    size_t n = (size_t)snprintf(body, sizeof body, "{" START ",\"budget\":262144,\"timeout_ms\":1,"
                                                   "\"through\":[");
    for (int i = 0; i < 256; i++) {
        n += (size_t)snprintf(body + n, sizeof body - n,
                              "%s{\"move\":\"line\",\"pose\":{\"x\":%d,\"y\":%d,\"rz\":%d}}",
                              i > 0 ? "," : "", i % 2 == 0 ? 60 : -60, i % 3 * 20 - 20,
                              i % 5 * 10 - 20);
    }
    (void)snprintf(body + n, sizeof body - n, "]}");
    rig_wants(r, 200, rig_post(r, PATH, body));
    lwt_same(rig_number(r, "code"), 5.0);
    bool told = false;
    const cJSON *move = NULL;
    cJSON_ArrayForEach(move, rig_at(r, "moves"))
    {
        const char *cause = cJSON_GetStringValue(cJSON_GetObjectItem(move, "cause"));
        told = told || (cause != NULL && strcmp(cause, "timeout") == 0);
    }
    assert_true(told);
}

static void a_table_is_the_same_question(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, PATH, "{" START ",\"through\":[" N10 "," N20 "]}"));
    char *json = cJSON_PrintUnformatted(rig_at(r, "moves"));
    rig_wants(r, 200,
              post_table(r, START_QUERY, "line,move,x,y,rz,via.x,via.y\r\nN10,line,15,-10,6,,\r\n"
                                         ",circle,-15,-10,0,0,10\r\n"));
    char *table = cJSON_PrintUnformatted(rig_at(r, "moves"));
    assert_string_equal(json, table);
    free(json);
    free(table);
    /* In metres and radians: the same places. */
    rig_wants(r, 200, post_table(r, START_QUERY "&units.length=m&units.angle=rad",
                                 "move,x,y,rz\nline,.015,-1e-2,0\n"));
    assert_string_equal(rig_text(r, "units/length"), "m");
    lwt_near(rig_number(r, "moves/0/length"), 1e-3 * sqrt(15.0 * 15.0 + 10.0 * 10.0), 1e-12);
}

static void verdicts_as_a_table(void **state)
{
    rig *r = *state;
    r->accept = "text/csv";
    rig_wants(r, 200, post_table(r, START_QUERY "&ref=t 1",
                                 "line,move,x,y,rz\n\"N,\"\"10\",line,15,-10,6\n"
                                 ",line,900,0,0\n,line,0,0,0\n"));
    r->accept = NULL;
    static const char head[] = "line,code,outcome,at,least_margin,least_value,least_at,limit,over,"
                               "at_least,reason\r\n\"N,\"\"10\",1,ok,1,speed,3.0";
    const char *text = r->reply.body.data;
    lwt_holds(r->reply.content_type, "text/csv");
    assert_memory_equal(text, head, sizeof head - 1);
    lwt_holds(text, "\r\n3,,not_examined,,,,,,,,\r\n");
    assert_string_equal(rig_header(r, "Vary"), "Accept");
    assert_string_equal(rig_header(r, "X-Revision"), "1");
    assert_string_equal(rig_header(r, "X-Ref"), "t 1");
    assert_int_equal(strlen(rig_header(r, "X-Digest")), 64);
    assert_int_equal(r->reply.log_code, rig_header(r, "X-Code")[0] - '0');
    assert_true(r->reply.log_code > 1);
}

static void faults_of_tables_have_a_place(void **state)
{
    static const struct {
        const char *query;
        const char *table;
        int status;
        int code;
        const char *pointer;
    } faults[] = {
        {START_QUERY, "", 400, 1052, NULL},
        {START_QUERY, "move,x\n", 400, 1054, ""},
        {START_QUERY, "x,y\n1,2\n", 400, 1052, "/1/move"},
        {START_QUERY, "move;x\nline;1\n", 400, 1079, "/1"},
        {START_QUERY, "move,elbow\nline,1\n", 400, 1051, "/1/2"},
        {START_QUERY, "move,x,joint.elbow-9\nline,1,2\n", 400, 1051, "/1/3"},
        {START_QUERY, "move,x,x\nline,1,1\n", 400, 1056, "/1/x"},
        {START_QUERY, "move,m1,drive.m1\njoints,1,1\n", 400, 1056, "/1/drive.m1"},
        {START_QUERY, "move,x\nline,1,2\n", 400, 1079, "/2"},
        {START_QUERY, "move,x\n\nline,1\nline,\"2\n", 400, 1079, "/4/x"},
        {START_QUERY, "move,x\nline,1e\n", 400, 1053, "/2/x"},
        {START_QUERY, "move,x\nline,1e9\n", 400, 1054, "/2/x"},
        {START_QUERY, "move,x\nLine,1\n", 400, 1059, "/2/move"},
        {START_QUERY, "move,x\n,1\n", 400, 1059, "/2/move"},
        {START_QUERY, "move,x,via.x\nline,1,2\n", 400, 1051, "/2/via.x"},
        {START_QUERY, "move,x,m1\nline,1,2\n", 400, 1051, "/2/m1"},
        {START_QUERY, "move,x,m1\njoints,1,2\n", 400, 1059, "/2"},
        {START_QUERY, "move,x,m1\njoints,,\n", 400, 1052, "/2"},
        {START_QUERY, "move,qw,qx\nline,1,0\n", 400, 1059, "/2/qw"},
        {START_QUERY, "move,x,line\nline,1,N10N10N10N10N10N10N10N10N10N10N10\n", 400, 1059,
         "/2/line"},
        {"", "move,x\nline,1\n", 400, 1055, "/from"},
        {"from.m1=90&from.x=1", "move,x\nline,1\n", 400, 1055, "/from"},
        {"from.m9=1", "move,x\nline,1\n", 400, 1051, "/from.m9"},
        {START_QUERY "&units=mm", "move,x\nline,1\n", 400, 1055, "/units"},
        {START_QUERY "&units.angle=grad", "move,x\nline,1\n", 400, 1055, "/units.angle"},
        {START_QUERY "&budget=0", "move,x\nline,1\n", 400, 1054, "/budget"},
        {START_QUERY "&certificate=yes", "move,x\nline,1\n", 400, 1055, "/certificate"},
        {START_QUERY "&x=1", "move,x\nline,1\n", 400, 1051, "/x"},
        {START_QUERY, "move,x,y\n\nline,1,2\n", 422, 1072, "/3/pose"},
    };
    rig *r = *state;
    for (size_t i = 0; i < sizeof faults / sizeof faults[0]; i++) {
        int status = post_table(r, faults[i].query, faults[i].table);
        if (status != faults[i].status || (int)rig_number(r, "code") != faults[i].code
            || (faults[i].pointer != NULL
                && strcmp(rig_text(r, "pointer"), faults[i].pointer) != 0)) {
            lwt_fail("%s, %s: wanted %d %d at %s, got %d %s", faults[i].query, faults[i].table,
                     faults[i].status, faults[i].code, faults[i].pointer, status,
                     r->reply.body.data);
        }
    }
}

static void a_table_has_at_most_256_moves(void **state)
{
    static char table[16384];
    rig *r = *state;
    size_t n = (size_t)snprintf(table, sizeof table, "move,x,y,rz\n");
    for (int i = 0; i < 257; i++) {
        n += (size_t)snprintf(table + n, sizeof table - n, "line,%d.5,0,0\n", i % 2);
    }
    rig_wants(r, 400, post_table(r, START_QUERY, table));
    rig_problem(r, 400, 1054, "/258");
    table[n - strlen("line,0.5,0,0\n")] = '\0';
    rig_wants(r, 200, post_table(r, START_QUERY, table));
    lwt_same(rig_number(r, "code"), 1.0);
    assert_int_equal(cJSON_GetArraySize(rig_at(r, "moves")), 256);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(moves_one_by_one),
        cmocka_unit_test(a_break_ends_the_path),
        cmocka_unit_test(the_same_answer_every_time),
        cmocka_unit_test(a_certificate_covers_the_move),
        cmocka_unit_test(the_start_may_have_no_posture),
        cmocka_unit_test(time_aborts_and_says_so),
        cmocka_unit_test(a_table_is_the_same_question),
        cmocka_unit_test(verdicts_as_a_table),
        cmocka_unit_test(faults_of_tables_have_a_place),
        cmocka_unit_test(a_table_has_at_most_256_moves),
    };
    return cmocka_run_group_tests(tests, setup, teardown);
}
