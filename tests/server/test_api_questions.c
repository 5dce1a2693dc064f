/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The questions over the demo line, without a socket: what every answer carries, units, batches,
 * forms, the PLC's lines. What the numbers mean is checked at core level; here the way in and out
 * is, by asking the same thing in two ways. */
#include "api_rig.h"

#include <math.h>

#define STAGE "/v1/mechanisms/label-stage/"
#define PACKER "/v1/mechanisms/case-packer/"
#define TURNER "/v1/mechanisms/lid-turner/"

static int setup(void **state)
{
    rig *r = calloc(1, sizeof *r);
    rig_start(r);
    rig_demo(r, "label-stage");
    rig_demo(r, "lid-turner");
    rig_demo(r, "case-packer");
    *state = r;
    return 0;
}

static int teardown(void **state)
{
    rig *r = *state;
    rig_stop(r);
    free(r);
    return 0;
}

/* The members of the last reply, in their order, as "a b c". */
static void members(const rig *r, char *out, size_t size)
{
    const cJSON *child;
    size_t len = 0;
    out[0] = '\0';
    cJSON_ArrayForEach(child, r->json)
    {
        len += (size_t)snprintf(out + len, size - len, "%s%s", len > 0 ? " " : "", child->string);
    }
}

static void every_answer_carries_its_head_in_a_fixed_order(void **state)
{
    static const char *const question[][2] = {
        {STAGE "inverse", "{\"ref\":\"n 7\",\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"},
        {STAGE "forward",
         "{\"ref\":\"n 7\",\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}}"},
        {STAGE "jacobian", "{\"ref\":\"n 7\",\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"},
        {STAGE "margin", "{\"ref\":\"n 7\",\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"},
        {STAGE "reach", "{\"ref\":\"n 7\",\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"},
    };
    rig *r = *state;
    for (size_t i = 0; i < sizeof question / sizeof question[0]; i++) {
        char got[512];
        rig_wants(r, 200, rig_post(r, question[i][0], question[i][1]));
        members(r, got, sizeof got);
        assert_memory_equal(got, "mechanism revision state digest tool units ref asked served_at "
                                 "code outcome", 75);
        assert_string_equal(rig_text(r, "mechanism"), "label-stage");
        assert_string_equal(rig_text(r, "state"), "published");
        assert_int_equal(strlen(rig_text(r, "digest")), 64);
        assert_string_equal(rig_text(r, "tool"), "camera");
        assert_string_equal(rig_text(r, "ref"), "n 7");
        assert_string_equal(rig_text(r, "units/length"), "mm");
        assert_string_equal(rig_text(r, "not_looked_at/0"), "collisions");
        assert_string_equal(rig_header(r, "Cache-Control"), "no-store");
        int code = (int)rig_number(r, "code");
        assert_true(code >= 1 && code <= 9);
        assert_int_equal(r->reply.log_code, code);
    }
}

static void says_back_what_it_understood_in_the_digits_sent(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15.1,\"y\":-10.07,\"rz\":6.3},\"near\":{\"x\":0.7,"
                               "\"y\":0.1,\"rz\":-29.9}}"));
    lwt_same(rig_number(r, "asked/pose/x"), 15.1);
    lwt_same(rig_number(r, "asked/pose/y"), -10.07);
    lwt_same(rig_number(r, "asked/pose/rz"), 6.3);
    lwt_same(rig_number(r, "asked/near/pose/rz"), -29.9);
    rig_wants(r, 200, rig_post(r, STAGE "forward",
                               "{\"drives\":{\"m1\":90.1,\"m2\":180.3,\"m3\":270.7,\"m4\":0.9}}"));
    lwt_same(rig_number(r, "asked/drives/m1"), 90.1);
    lwt_same(rig_number(r, "asked/drives/m4"), 0.9);
    rig_wants(r, 200, rig_post(r, TURNER "inverse",
                               "{\"pose\":{\"x\":20,\"y\":-15,\"z\":420,"
                               "\"joints\":{\"shaft\":360}}}"));
    lwt_same(rig_number(r, "asked/pose/joints/shaft"), 360.0);
}

/* The same pose in metres and radians: the answer in metres and radians is the same posture, and
 * the readings keep the units of their encoders. */
static void units_of_the_question_are_those_of_the_answer(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"++++\"}"));
    double m1 = rig_number(r, "solutions/0/drives/m1");
    double elbow = rig_number(r, "solutions/0/joints/elbow-1");
    double x = rig_number(r, "solutions/0/pose/x");
    double rz = rig_number(r, "solutions/0/pose/rz");
    lwt_near(x, 15.0, 1e-9);
    lwt_near(rz, 6.0, 1e-9);
    rig_wants(r, 200,
              rig_post(r, STAGE "inverse",
                       "{\"pose\":{\"x\":0.015,\"y\":-0.01,\"rz\":0.10471975511965977},"
                       "\"mode\":\"++++\",\"units\":{\"length\":\"m\",\"angle\":\"rad\"}}"));
    assert_string_equal(rig_text(r, "units/angle"), "rad");
    lwt_near(rig_number(r, "solutions/0/drives/m1"), m1, 1e-9);
    lwt_near(rig_number(r, "solutions/0/joints/elbow-1"), elbow * 0.017453292519943295, 1e-12);
    lwt_near(rig_number(r, "solutions/0/pose/x"), 0.001 * x, 1e-12);
    lwt_near(rig_number(r, "solutions/0/pose/rz"), rz * 0.017453292519943295, 1e-12);
}

/* One orientation in every form there is, all of them the turn by 6 deg about z. */
static void reads_and_writes_every_form_of_orientation(void **state)
{
    static const char *const form[] = {
        "\"rz\":6", "\"zyx\":{\"yaw\":6,\"pitch\":0,\"roll\":0}",
        "\"quaternion\":{\"w\":0.9986295347545738,\"x\":0,\"y\":0,\"z\":0.052335956242943835}",
        "\"rotation_vector\":{\"x\":0,\"y\":0,\"z\":6}"};
    rig *r = *state;
    for (size_t i = 0; i < 4; i++) {
        char body[256];
        (void)snprintf(body, sizeof body, "{\"pose\":{\"x\":15,\"y\":-10,%s},\"mode\":\"++++\"}",
                       form[i]);
        rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
        /* It is answered in the form asked in. */
        switch (i) {
        case 0:
            lwt_near(rig_number(r, "solutions/0/pose/rz"), 6.0, 1e-9);
            break;
        case 1:
            lwt_near(rig_number(r, "solutions/0/pose/zyx/yaw"), 6.0, 1e-9);
            lwt_near(rig_number(r, "solutions/0/pose/zyx/roll"), 0.0, 1e-9);
            break;
        case 2:
            lwt_near(rig_number(r, "solutions/0/pose/quaternion/z"), 0.052335956242943835, 1e-12);
            break;
        default:
            lwt_near(rig_number(r, "solutions/0/pose/rotation_vector/z"), 6.0, 1e-9);
            break;
        }
    }
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},"
                               "\"orientation\":\"direction\",\"mode\":\"++++\"}"));
    lwt_near(rig_number(r, "solutions/0/pose/direction/z"), 1.0, 1e-12);
}

static void a_mode_is_named_by_signs_or_by_its_name(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},"
                               "\"mode\":\"elbows-left\"}"));
    char signs[64];
    (void)snprintf(signs, sizeof signs, "%s", rig_text(r, "asked/mode"));
    assert_string_equal(rig_text(r, "solutions/0/mode"), signs);
    assert_string_equal(rig_text(r, "solutions/0/mode_name"), "elbows-left");
    double m1 = rig_number(r, "solutions/0/drives/m1");
    char body[160];
    (void)snprintf(body, sizeof body, "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"%s\"}",
                   signs);
    rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
    lwt_same(rig_number(r, "solutions/0/drives/m1"), m1);
}

static void a_tool_may_be_written_out(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"++++\"}"));
    double m1 = rig_number(r, "solutions/0/drives/m1");
    /* A tool 10 mm along the plate's x stands at x + 10 cos 6 deg, y + 10 sin 6 deg. */
    rig_wants(r, 200,
              rig_post(r, STAGE "inverse",
                       "{\"pose\":{\"x\":24.945218953682733,\"y\":-8.954715367323468,\"rz\":6},"
                       "\"mode\":\"++++\",\"tool\":{\"body\":\"plate\",\"at\":[10,0,0]}}"));
    assert_string_equal(rig_text(r, "tool"), "written");
    lwt_near(rig_number(r, "solutions/0/drives/m1"), m1, 1e-9);
    /* It is said back, in the units of the question. */
    assert_string_equal(rig_text(r, "asked/tool/name"), "written");
    assert_string_equal(rig_text(r, "asked/tool/body"), "plate");
    lwt_same(rig_number(r, "asked/tool/at/0"), 10.0);
    lwt_same(rig_number(r, "asked/tool/orientation/quaternion/w"), 1.0);
    rig_wants(r, 200,
              rig_post(r, STAGE "inverse",
                       "{\"pose\":{\"x\":0.015,\"y\":-0.01,\"rz\":6},\"units\":{\"length\":\"m\"},"
                       "\"tool\":{\"name\":\"pen\",\"body\":\"plate\",\"at\":[0.01,0,0.002],"
                       "\"orientation\":{\"zyx\":{\"yaw\":180}}}}"));
    assert_string_equal(rig_text(r, "asked/tool/name"), "pen");
    lwt_same(rig_number(r, "asked/tool/at/2"), 0.002);
    lwt_near(rig_number(r, "asked/tool/orientation/quaternion/z"), 1.0, 1e-15);
    rig_wants(r, 200, rig_post(r, STAGE "inverse", "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"));
    assert_null(rig_at(r, "asked/tool"));
}

static void a_batch_keeps_its_order_and_one_bad_member_spoils_no_other(void **state)
{
    rig *r = *state;
    rig_wants(r, 200,
              rig_post(r, STAGE "inverse",
                       "{\"units\":{\"length\":\"m\"},\"ref\":\"all\",\"batch\":["
                       "{\"pose\":{\"x\":0.015,\"y\":-0.01,\"rz\":6},\"ref\":\"a\"},"
                       "{\"pose\":{\"x\":\"far\",\"y\":0,\"rz\":0},\"ref\":\"b\"},"
                       "{\"pose\":{\"x\":16,\"y\":-10,\"rz\":6},\"units\":{\"length\":\"mm\"}},"
                       "{\"pose\":{\"x\":0,\"y\":0,\"rz\":0},\"revision\":77}]}"));
    lwt_same(rig_number(r, "count"), 4.0);
    assert_string_equal(rig_text(r, "ref"), "all");
    assert_string_equal(rig_text(r, "answers/0/ref"), "a");
    lwt_near(rig_number(r, "answers/0/solutions/0/pose/x"), 0.015, 1e-12);
    lwt_same(rig_number(r, "answers/1/code"), 1053.0);
    assert_string_equal(rig_text(r, "answers/1/pointer"), "/batch/1/pose/x");
    lwt_near(rig_number(r, "answers/2/solutions/0/pose/x"), 16.0, 1e-9);
    lwt_same(rig_number(r, "answers/3/code"), 1061.0);
}

static void a_batch_has_a_bound(void **state)
{
    rig *r = *state;
    char *body = calloc(1, 1 << 16);
    size_t n = (size_t)snprintf(body, 64, "{\"batch\":[");
    for (int i = 0; i < 257; i++) {
        n += (size_t)snprintf(body + n, 64, "%s{\"pose\":{\"x\":%d,\"y\":0,\"rz\":0}}",
                              i > 0 ? "," : "", i % 20);
    }
    (void)snprintf(body + n, 8, "]}");
    rig_wants(r, 400, rig_post(r, STAGE "inverse", body));
    assert_string_equal(rig_text(r, "pointer"), "/batch");
    /* One fewer is served, all of them. */
    char *last = strrchr(body, ',');
    while (last[1] != '{') {
        *last = '\0';
        last = strrchr(body, ',');
    }
    (void)snprintf(last, 8, "]}");
    rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
    assert_int_equal(cJSON_GetArraySize(rig_at(r, "answers")), 256);
    for (int i = 0; i < 256; i += 51) {
        char way[64];
        (void)snprintf(way, sizeof way, "answers/%d/asked/pose/x", i);
        lwt_same(rig_number(r, way), (double)(i % 20));
    }
    free(body);
}

static void expects_a_digest(void **state)
{
    rig *r = *state;
    char body[256];
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage"));
    char digest[65];
    (void)snprintf(digest, sizeof digest, "%s", rig_text(r, "digest"));
    (void)snprintf(body, sizeof body, "{\"expect\":\"%.8s\",\"pose\":{\"x\":1,\"y\":2,\"rz\":3}}",
                   digest);
    rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
    (void)snprintf(body, sizeof body, "{\"expect\":\"%s\",\"pose\":{\"x\":1,\"y\":2,\"rz\":3}}",
                   digest);
    rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
    digest[0] = digest[0] == '0' ? '1' : '0';
    (void)snprintf(body, sizeof body, "{\"expect\":\"%.8s\",\"pose\":{\"x\":1,\"y\":2,\"rz\":3}}",
                   digest);
    rig_wants(r, 409, rig_post(r, STAGE "inverse", body));
    rig_problem(r, 409, 1063, NULL);
}

/* Everything but the time of the answer. */
static void without_time(const rig *r, char *out, size_t size)
{
    (void)snprintf(out, size, "%s", r->reply.body.data);
    char *at = strstr(out, "\"served_at\":\"");
    assert_non_null(at);
    memset(at + 13, '-', 24);
}

static void a_query_string_asks_the_same_as_a_body(void **state)
{
    static const char *const pair[][3] = {
        {STAGE "reach", "x=15&y=-10&rz=6&margin_min.travel=0.01",
         "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"margin_min\":{\"travel\":0.01}}"},
        {STAGE "reach", "x=15&y=-10&rz=6&mode=elbows-left&margin_min=0.5&ref=q",
         "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"elbows-left\",\"margin_min\":0.5,"
         "\"ref\":\"q\"}"},
        {STAGE "reach", "x=1.5E+1&y=-1.0e 01&qw=0.99862953475457&qx=0&qy=0&qz=.052335956242944",
         "{\"pose\":{\"x\":15,\"y\":-10,\"quaternion\":{\"w\":0.99862953475457,\"x\":0,\"y\":0,"
         "\"z\":0.052335956242944}}}"},
        {STAGE "reach", "x=15&y=-10&rvx=0&rvy=0&rvz=6",
         "{\"pose\":{\"x\":15,\"y\":-10,\"rotation_vector\":{\"x\":0,\"y\":0,\"z\":6}}}"},
        {STAGE "reach", "x=15&y=-10&yaw=6&orientation=quaternion",
         "{\"pose\":{\"x\":15,\"y\":-10,\"zyx\":{\"yaw\":6}},\"orientation\":\"quaternion\"}"},
        {STAGE "reach", "x=15&y=-10&rz=6&from.m1=90&from.m2=180&from.m3=270&from.m4=0",
         "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"from\":{\"drives\":{\"m1\":90,\"m2\":180,"
         "\"m3\":270,\"m4\":0}}}"},
        {STAGE "reach", "x=15&y=-10&rz=6&mode=any",
         "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"any\"}"},
        {TURNER "reach", "x=20&y=-15&z=420&joint.shaft=360",
         "{\"pose\":{\"x\":20,\"y\":-15,\"z\":420,\"joints\":{\"shaft\":360}}}"},
        {STAGE "reach", "x=.015&y=-.01&rz=0.1&units.angle=rad&units.length=m",
         "{\"pose\":{\"x\":0.015,\"y\":-0.01,\"rz\":0.1},"
         "\"units\":{\"length\":\"m\",\"angle\":\"rad\"}}"},
        {STAGE "margin", "m1=90&m2=180&m3=270&m4=0&units.length=m",
         "{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0},\"units\":{\"length\":\"m\"}}"},
        {STAGE "margin", "m1=90&m2=180&m3=270&drive.m4=0",
         "{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}}"},
    };
    rig *r = *state;
    char *one = malloc(20000);
    char *two = malloc(20000);
    for (size_t i = 0; i < sizeof pair / sizeof pair[0]; i++) {
        char target[256];
        (void)snprintf(target, sizeof target, "%s?%s", pair[i][0], pair[i][1]);
        rig_wants(r, 200, rig_get(r, target));
        without_time(r, one, 20000);
        rig_wants(r, 200, rig_post(r, pair[i][0], pair[i][2]));
        without_time(r, two, 20000);
        assert_string_equal(one, two);
    }
    free(one);
    free(two);
    rig_wants(r, 400, rig_get(r, STAGE "reach?x=15&y=-10&rz=6&units=m"));
    rig_problem(r, 400, 1055, "/units");
    rig_wants(r, 400, rig_get(r, STAGE "reach?x=15&y=-10&rz=6&units.length=inch"));
    rig_problem(r, 400, 1055, "/units.length");
    rig_wants(r, 400, rig_get(r, STAGE "margin?m1=90&units.angle=grad"));
    rig_problem(r, 400, 1055, "/units.angle");
}

/* Of several limits broken the PLC sees the one furthest over, as a share of its range. */
static void the_plc_sees_the_worst_limit(void **state)
{
    static const char query[] = TURNER "reach?x=-47&y=64&z=553&joint.shaft=264";
    rig *r = *state;
    rig_wants(r, 200, rig_get(r, query));
    const cJSON *limit = rig_at(r, "solution/limits_broken");
    char worst[64] = "";
    double over = 0.0;
    double most = 0.0;
    assert_true(cJSON_GetArraySize(limit) >= 2);
    for (int i = 0; i < cJSON_GetArraySize(limit); i++) {
        const cJSON *one = cJSON_GetArrayItem(limit, i);
        const cJSON *range = cJSON_GetObjectItem(one, "range");
        double by = cJSON_GetObjectItem(one, "over")->valuedouble;
        double share = by
                       / (cJSON_GetArrayItem(range, 1)->valuedouble
                          - cJSON_GetArrayItem(range, 0)->valuedouble);
        if (share > most) {
            most = share;
            (void)snprintf(worst, sizeof worst, "limit=%s\n",
                           cJSON_GetObjectItem(one, "name")->valuestring);
            over = by;
        }
    }
    /* Else the first would do as well, and this check could not fail. */
    const cJSON *first = cJSON_GetObjectItem(cJSON_GetArrayItem(limit, 0), "name");
    assert_null(strstr(worst, first->valuestring));
    r->accept = "text/plain";
    rig_wants(r, 200, rig_get(r, query));
    r->accept = NULL;
    lwt_holds(r->reply.body.data, worst);
    lwt_near(strtod(strstr(r->reply.body.data, "over=") + 5, NULL), over, 1e-6);
}

static void a_blank_in_a_mode_is_a_plus(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_get(r, STAGE "reach?x=15&y=-10&rz=6&mode= +  "));
    assert_string_equal(rig_text(r, "asked/mode"), "++++");
    rig_wants(r, 200, rig_get(r, STAGE "reach?x=15&y=-10&rz=6&mode=-  -"));
    assert_string_equal(rig_text(r, "asked/mode"), "-++-");
}

/* Until moves are proved, a move is undecided and never a yes. */
static void a_straight_move_is_proved(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "reach",
                               "{\"pose\":{\"x\":1,\"y\":1,\"rz\":1},\"from\":{\"drives\":{"
                               "\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}},\"margin_min\":0}"));
    lwt_same(rig_number(r, "code"), 1.0);
    assert_string_equal(rig_text(r, "checked"), "move");
    lwt_same(rig_number(r, "at"), 1.0);
    /* The PLC's form: the same move, the same verdict. */
    rig_wants(r, 200, rig_get(r, STAGE "reach?x=1&y=1&rz=1&from.m1=90&from.m2=180&from.m3=270"
                                       "&from.m4=0&margin_min=0&budget=64&timeout_ms=60000"));
    assert_string_equal(rig_text(r, "checked"), "move");
    lwt_same(rig_number(r, "code"), 1.0);
    /* Without the start the posture alone is judged. */
    rig_wants(r, 200, rig_get(r, STAGE "reach?x=1&y=1&rz=1"));
    assert_string_equal(rig_text(r, "checked"), "posture");
    assert_null(rig_at(r, "at"));
}

static void the_plc_gets_short_lines_in_a_fixed_order(void **state)
{
    static const char *const key[] = {"ref=",       "code=",  "outcome=", "mode=",     "mode_no=",
                                      "margin=",    "margin_of=", "limit=", "over=", "revision=",
                                      "tag="};
    static const char *const query[] = {"x=15&y=-10&rz=6", "x=15&y=-10&rz=170", "x=400&y=0&rz=0",
                                        "x=5000&y=0&rz=0", "x=15&y=-10&rz=6&mode=any",
                                        "x=15&y=-10&rz=6&margin_min.travel=0.49"};
    rig *r = *state;
    r->accept = "text/plain";
    for (size_t i = 0; i < sizeof query / sizeof query[0]; i++) {
        char target[200];
        (void)snprintf(target, sizeof target,
                       STAGE "reach?%s&ref=A23456789012345678901234567890BC", query[i]);
        rig_wants(r, 200, rig_get(r, target));
        assert_string_equal(r->reply.content_type, "text/plain; charset=us-ascii");
        assert_true(r->reply.body.len <= 255);
        size_t at = 0;
        bool seen[11] = {false};
        for (const char *line = r->reply.body.data; *line != '\0';) {
            size_t len = strcspn(line, "\n");
            assert_int_equal(line[len], '\n');
            while (at < 11 && strncmp(line, key[at], strlen(key[at])) != 0) {
                at++;
            }
            if (at == 11) {
                lwt_fail("a key is unknown or out of order: %.*s", (int)len, line);
            }
            seen[at++] = true;
            line += len + 1;
        }
        assert_true(seen[0] && seen[1] && seen[2] && seen[9] && seen[10]);
    }
    lwt_holds(r->reply.body.data, "ref=A23456789012345678901234567890BC\n");
    rig_wants(r, 400, rig_get(r, STAGE "reach?x=15&y=-10&rz=6&speed=3"));
    lwt_holds(r->reply.body.data, "code=1051\nwhat=");
    assert_true(r->reply.body.len <= 255);
    rig_wants(r, 404, rig_get(r, "/v1/mechanisms/no-such/reach?x=15"));
    lwt_holds(r->reply.body.data, "code=1060\nwhat=");
    rig_wants(r, 406, rig_post(r, STAGE "inverse", "{\"pose\":{\"x\":1,\"y\":1,\"rz\":0}}"));
    r->accept = NULL;
}

/* On the event thread nothing slow is done: the listener is asked to come again in a worker. */
static void slow_requests_leave_the_event_thread(void **state)
{
    rig *r = *state;
    rig fresh;
    rig_start(&fresh);
    char *text = rig_file("deploy/demo/label-stage.json");
    rig_wants(&fresh, 201, rig_send(&fresh, LWD_PUT, "/v1/mechanisms/label-stage", text));
    free(text);
    const char *question = "{\"revision\":1,\"pose\":{\"x\":1,\"y\":1,\"rz\":0}}";
    fresh.may_defer = true;
    assert_int_equal(rig_post(&fresh, STAGE "inverse", question), LWD_DEFER);
    assert_int_equal(fresh.reply.body.len, 0);
    fresh.may_defer = false;
    fresh.lane = 1;
    rig_wants(&fresh, 200, rig_post(&fresh, STAGE "inverse", question));
    fresh.may_defer = true;
    fresh.lane = 0;
    rig_wants(&fresh, 200, rig_post(&fresh, STAGE "inverse", question));
    rig_stop(&fresh);
    char body[2048] = "{\"batch\":[";
    for (int i = 0; i < 17; i++) {
        size_t n = strlen(body);
        (void)snprintf(body + n, sizeof body - n, "%s{\"pose\":{\"x\":1,\"y\":1,\"rz\":0}}",
                       i > 0 ? "," : "");
    }
    (void)snprintf(body + strlen(body), 8, "]}");
    r->may_defer = true;
    assert_int_equal(rig_post(r, STAGE "inverse", body), LWD_DEFER);
    r->may_defer = false;
    rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
}

/* Rows times columns of the two matrices are one another's inverse where drives = outputs, and
 * inverse times forward is the identity on the outputs in any case. */
static void the_matrices_fit_their_names_and_units(void **state)
{
    rig *r = *state;
    rig_wants(r, 200,
              rig_post(r, STAGE "jacobian", "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}}"));
    assert_string_equal(rig_text(r, "forward/rows/0/name"), "x");
    assert_string_equal(rig_text(r, "forward/rows/0/unit"), "mm/s");
    assert_string_equal(rig_text(r, "forward/rows/2/unit"), "deg/s");
    assert_string_equal(rig_text(r, "forward/columns/3/name"), "m4");
    assert_string_equal(rig_text(r, "twist/rows/5/name"), "wz");
    for (int i = 0; i < 3; i++) {
        for (int k = 0; k < 3; k++) {
            double sum = 0.0;
            for (int d = 0; d < 4; d++) {
                char way[64];
                (void)snprintf(way, sizeof way, "forward/values/%d/%d", i, d);
                double a = rig_number(r, way);
                (void)snprintf(way, sizeof way, "inverse/values/%d/%d", d, k);
                sum += a * rig_number(r, way);
            }
            lwt_near(sum, i == k ? 1.0 : 0.0, 1e-9);
        }
    }
}

static void forward_of_the_readings_found_is_the_pose_asked(void **state)
{
    rig *r = *state;
    char body[400];
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"rz\":6},\"mode\":\"++++\"}"));
    char *drives = cJSON_PrintUnformatted(rig_at(r, "solutions/0/drives"));
    (void)snprintf(body, sizeof body, "{\"drives\":%s,\"near\":{\"x\":10,\"y\":0,\"rz\":0}}",
                   drives);
    free(drives);
    rig_wants(r, 200, rig_post(r, STAGE "forward", body));
    lwt_same(rig_number(r, "code"), 1.0);
    lwt_near(rig_number(r, "solutions/0/pose/x"), 15.0, 1e-6);
    lwt_near(rig_number(r, "solutions/0/pose/y"), -10.0, 1e-6);
    lwt_near(rig_number(r, "solutions/0/pose/rz"), 6.0, 1e-6);
    assert_non_null(rig_at(r, "disagreement/m1"));
    assert_non_null(rig_at(r, "allowed/m4"));
}

/* Postures on the border of two modes, and what is free to move there. */
static void a_border_belongs_to_both_modes_and_a_free_limb_has_no_list(void **state)
{
    /* Arm 1 stretched: pivot 350 (crank 150 and link 200) from the shoulder, 150 of it across. */
    static const char *const border = "\"pose\":{\"x\":116.22776601683796,\"y\":0,\"rz\":0}";
    static const char *const mode[] = {"++++", "-+++"};
    rig *r = *state;
    char body[200];
    for (size_t i = 0; i < 2; i++) {
        (void)snprintf(body, sizeof body, "{%s,\"mode\":\"%s\"}", border, mode[i]);
        rig_wants(r, 200, rig_post(r, STAGE "inverse", body));
        lwt_same(rig_number(r, "code"), 1.0);
        assert_string_equal(rig_text(r, "solutions/0/mode"), "0+++");
        assert_true(cJSON_IsTrue(rig_at(r, "complete")));
    }
    /* Axes four and six of the arm in line: only the sum of their turns is determined. */
    rig_wants(r, 200, rig_post(r, PACKER "inverse",
                               "{\"pose\":{\"x\":550,\"y\":0,\"z\":820,\"quaternion\":"
                               "{\"w\":0,\"x\":0.7071067811865475,\"y\":0,"
                               "\"z\":0.7071067811865475}}}"));
    lwt_same(rig_number(r, "dimension"), 1.0);
    assert_true(cJSON_IsFalse(rig_at(r, "complete")));
    assert_true(cJSON_IsNull(rig_at(r, "found/real")));
}

static void says_how_far_off_a_pose_is(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_post(r, STAGE "inverse",
                               "{\"pose\":{\"x\":15,\"y\":-10,\"zyx\":{\"yaw\":6,\"roll\":30}}}"));
    lwt_same(rig_number(r, "code"), 4.0);
    lwt_near(rig_number(r, "off_by/angle"), 30.0, 1e-9);
    /* Wrist at (2000, 0, 510), shoulder at (80, 0, 420), arms 360 and hypot(360, 40). */
    rig_wants(r, 200, rig_post(r, PACKER "reach",
                               "{\"pose\":{\"x\":2000,\"y\":0,\"z\":400,\"zyx\":"
                               "{\"yaw\":0,\"pitch\":0,\"roll\":180}}}"));
    lwt_same(rig_number(r, "code"), 4.0);
    lwt_near(rig_number(r, "off_by/limb_by"), hypot(1920, 90) - 360.0 - hypot(360, 40), 1e-6);
}

static void points_into_the_member_at_fault(void **state)
{
    rig *r = *state;
    (void)rig_post(r, STAGE "reach",
                   "{\"pose\":{\"x\":15,\"y\":3,\"rz\":0},\"from\":{\"drives\":{\"m1\":90}}}");
    rig_problem(r, 422, 1072, "/from/drives");
    (void)rig_post(r, STAGE "inverse",
                   "{\"pose\":{\"x\":15,\"y\":3,\"rz\":0},\"near\":{\"joints\":{\"elbow-1\":0}}}");
    rig_problem(r, 422, 1072, "/near/joints");
}

/* Last: it stores a second revision of the stage. */
static void a_threshold_that_can_not_be_judged_is_no_yes(void **state)
{
    static const char *const ask = "{\"revision\":2,\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}%s}";
    rig *r = *state;
    char body[200];
    char *text = rig_file("deploy/demo/label-stage.json");
    cJSON *document = cJSON_Parse(text);
    free(text);
    cJSON *needs = cJSON_GetObjectItem(document, "needs");
    cJSON_DeleteItemFromObject(needs, "force");
    cJSON_DeleteItemFromObject(needs, "moment");
    text = cJSON_PrintUnformatted(document);
    cJSON_Delete(document);
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    free(text);
    (void)snprintf(body, sizeof body, ask, "");
    rig_wants(r, 200, rig_post(r, STAGE "reach", body));
    lwt_same(rig_number(r, "code"), 1.0);
    (void)snprintf(body, sizeof body, ask, ",\"margin_min\":{\"load\":1.5}");
    rig_wants(r, 200, rig_post(r, STAGE "reach", body));
    lwt_same(rig_number(r, "code"), 5.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_answer_carries_its_head_in_a_fixed_order),
        cmocka_unit_test(says_back_what_it_understood_in_the_digits_sent),
        cmocka_unit_test(units_of_the_question_are_those_of_the_answer),
        cmocka_unit_test(reads_and_writes_every_form_of_orientation),
        cmocka_unit_test(a_mode_is_named_by_signs_or_by_its_name),
        cmocka_unit_test(a_tool_may_be_written_out),
        cmocka_unit_test(a_batch_keeps_its_order_and_one_bad_member_spoils_no_other),
        cmocka_unit_test(a_batch_has_a_bound),
        cmocka_unit_test(expects_a_digest),
        cmocka_unit_test(a_query_string_asks_the_same_as_a_body),
        cmocka_unit_test(a_blank_in_a_mode_is_a_plus),
        cmocka_unit_test(a_straight_move_is_proved),
        cmocka_unit_test(the_plc_sees_the_worst_limit),
        cmocka_unit_test(the_plc_gets_short_lines_in_a_fixed_order),
        cmocka_unit_test(slow_requests_leave_the_event_thread),
        cmocka_unit_test(the_matrices_fit_their_names_and_units),
        cmocka_unit_test(forward_of_the_readings_found_is_the_pose_asked),
        cmocka_unit_test(a_border_belongs_to_both_modes_and_a_free_limb_has_no_list),
        cmocka_unit_test(says_how_far_off_a_pose_is),
        cmocka_unit_test(points_into_the_member_at_fault),
        cmocka_unit_test(a_threshold_that_can_not_be_judged_is_no_yes),
    };
    return cmocka_run_group_tests(tests, setup, teardown);
}
