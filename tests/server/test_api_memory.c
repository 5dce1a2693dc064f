/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Memory that runs out at the first, second, ... allocation of a request: the answer is a 503 that
 * says so (or the right answer, where the allocation could be done without), nothing leaks (the
 * leak checker watches), nothing half is stored, and the same request then succeeds. */
#include "api_rig.h"

static const char arm[] =
    "{\"format\":\"leeway-mechanism/1\",\"name\":\"arm\",\"units\":{\"length\":\"mm\",\"angle\":"
    "\"deg\"},\"frame\":\"base\",\"bodies\":[\"base\",\"upper\",\"fore\"],\"joints\":["
    "{\"name\":\"shoulder\",\"type\":\"revolute\",\"between\":[\"base\",\"upper\"],\"at\":[0,0,0],"
    "\"axis\":[0,0,1]},{\"name\":\"elbow\",\"type\":\"revolute\",\"between\":[\"upper\",\"fore\"],"
    "\"at\":[300,0,0],\"axis\":[0,0,1]}],\"drives\":[{\"name\":\"m1\",\"moves\":\"shoulder\","
    "\"reading\":{\"unit\":\"deg\"}},{\"name\":\"m2\",\"moves\":\"elbow\",\"reading\":{\"unit\":"
    "\"deg\"}}],\"tools\":[{\"name\":\"tip\",\"body\":\"fore\",\"at\":[500,200,0]}],"
    "\"outputs\":[\"x\",\"y\"]}";

/* A reply whose buffer has to grow from nothing, as on a new connection. */
static void forget_buffer(rig *r)
{
    cJSON_Delete(r->json);
    r->json = NULL;
    lwd_buf_clear(&r->reply.body);
    lwd_buf_init(&r->reply.body, 0);
}

/* The 503 of this room; its own body may have met the failing allocation and be empty. */
static void is_refusal(const rig *r)
{
    if (r->reply.status != 503) {
        lwt_fail("status %d without memory: %s", r->reply.status,
                 r->reply.body.len > 0 ? r->reply.body.data : "");
    }
    if (r->reply.body.len > 0 && !r->reply.body.failed) {
        lwt_holds(r->reply.body.data, "\"code\":1091");
    }
}

typedef struct ask {
    rig *r;
    lwd_method method;
    const char *target;
    const char *body;
    size_t good;
} ask;

static void step_warm(void *context, size_t n)
{
    ask *a = context;
    (void)n;
    forget_buffer(a->r);
    int status = rig_send(a->r, a->method, a->target, a->body);
    bool failed = lwt_alloc_failed();
    if (status == 200 && !a->r->reply.body.failed) {
        a->good++;
    } else if (failed) {
        is_refusal(a->r);
    } else {
        lwt_fail("status %d with all memory there", status);
    }
}

static void questions_without_memory_are_not_tried(void **state)
{
    static const char *const question[][2] = {
        {"inverse", "{\"pose\":{\"x\":400,\"y\":250},\"ref\":\"q\"}"},
        {"forward", "{\"drives\":{\"m1\":10,\"m2\":20}}"},
        {"jacobian", "{\"drives\":{\"m1\":10,\"m2\":20}}"},
        {"margin", "{\"drives\":{\"m1\":10,\"m2\":20}}"},
        {"reach", "{\"pose\":{\"x\":400,\"y\":250}}"},
        {"inverse", "{\"batch\":[{\"pose\":{\"x\":400,\"y\":250}},{\"pose\":{}}]}"},
    };
    rig r;
    (void)state;
    rig_start(&r);
    rig_wants(&r, 201, rig_send(&r, LWD_PUT, "/v1/mechanisms/arm", arm));
    for (size_t i = 0; i < sizeof question / sizeof question[0]; i++) {
        char target[80];
        char body[200];
        (void)snprintf(target, sizeof target, "/v1/mechanisms/arm/%s", question[i][0]);
        (void)snprintf(body, sizeof body, "{\"revision\":1,%s", question[i][1] + 1);
        rig_wants(&r, 200, rig_post(&r, target, body)); /* loaded from here on */
        ask a = {.r = &r, .method = LWD_POST, .target = target, .body = body};
        lwt_alloc_cjson(true);
        size_t n = lwt_alloc_sweep(step_warm, &a, 500);
        lwt_alloc_cjson(false);
        assert_true(n >= 3);
        rig_wants(&r, 200, rig_post(&r, target, body));
    }
    rig_stop(&r);
}

/* Storing a document: decoding, building, validating, writing the report. */
static void step_put(void *context, size_t n)
{
    ask *a = context;
    (void)n;
    forget_buffer(a->r);
    int status = rig_send(a->r, LWD_PUT, "/v1/mechanisms/arm", arm);
    if ((status == 201 || status == 200) && !a->r->reply.body.failed) {
        a->good++;
    } else {
        is_refusal(a->r);
    }
}

static void a_document_without_memory_is_refused_whole(void **state)
{
    rig r;
    ask a = {.r = &r};
    (void)state;
    rig_start(&r);
    lwt_alloc_cjson(true);
    size_t n = lwt_alloc_sweep(step_put, &a, 5000);
    lwt_alloc_cjson(false);
    assert_true(n > 50);
    assert_true(a.good > 0);
    rig_wants(&r, 200, rig_get(&r, "/v1/mechanisms/arm/revisions"));
    assert_int_equal(cJSON_GetArraySize(rig_at(&r, "revisions")), 1);
    rig_stop(&r);
}

/* Publishing and asking a mechanism that is not loaded; each step has one of its own. */
static void step_first(void *context, size_t n)
{
    ask *a = context;
    rig *r = a->r;
    char target[96];
    char document[2048];
    lwt_alloc_reset();
    (void)snprintf(target, sizeof target, "/v1/mechanisms/arm-%zu", n);
    (void)snprintf(document, sizeof document,
                   "{\"format\":\"leeway-mechanism/1\",\"name\":\"arm-%zu\"%s", n,
                   strstr(arm, ",\"units\""));
    rig_wants(r, 201, rig_send(r, LWD_PUT, target, document));
    forget_buffer(r);
    lwt_alloc_fail_at(n);
    (void)snprintf(target, sizeof target, "/v1/mechanisms/arm-%zu/revisions/1/publish", n);
    int status = rig_post(r, target, "{\"accept\":[\"x\"],\"reason\":\"r\"}");
    if (status != 200) {
        is_refusal(r);
    }
    (void)snprintf(target, sizeof target, "/v1/mechanisms/arm-%zu/reach?revision=1&x=400&y=250", n);
    status = rig_get(r, target);
    if (status != 200) {
        is_refusal(r);
    } else {
        a->good++;
    }
}

static void a_first_question_without_memory_is_not_tried(void **state)
{
    rig r;
    ask a = {.r = &r};
    (void)state;
    rig_start(&r);
    /* The parser's own allocations fail in the case before this one. */
    size_t n = lwt_alloc_sweep(step_first, &a, 5000);
    assert_true(n > 10);
    assert_true(a.good > 0);
    rig_stop(&r);
}

static void step_start(void *context, size_t n)
{
    const lwd_app_options options = {.data_dir = ":memory:", .lanes = 2};
    char why[200] = "";
    size_t *good = context;
    (void)n;
    lwd_app *app = lwd_app_start(&options, why, sizeof why);
    if (app != NULL) {
        ++*good;
        lwd_app_stop(app);
    } else {
        assert_true(strlen(why) > 10); /* the operator is told */
    }
}

static void a_start_without_memory_says_so(void **state)
{
    size_t good = 0;
    (void)state;
    lw_init();
    lwd_log_level_set(LWD_LOG_ERROR);
    assert_true(lwt_alloc_sweep(step_start, &good, 500) >= 4);
    assert_true(good >= 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(questions_without_memory_are_not_tried),
        cmocka_unit_test(a_document_without_memory_is_refused_whole),
        cmocka_unit_test(a_first_question_without_memory_is_not_tried),
        cmocka_unit_test(a_start_without_memory_says_so),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
