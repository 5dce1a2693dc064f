/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Documents in, revisions, states, tags, pages, differences: the catalog routes, no socket. */
#include "api_rig.h"

static int setup(void **state)
{
    rig *r = calloc(1, sizeof *r);
    rig_start(r);
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

/* The label stage with one text replaced; free it. */
static char *changed(const char *from, const char *to)
{
    char *text = rig_file("deploy/demo/label-stage.json");
    char *at = strstr(text, from);
    if (at == NULL) {
        lwt_fail("the label stage does not say %s", from);
    }
    char *out = calloc(1, strlen(text) + strlen(to) + 1);
    memcpy(out, text, (size_t)(at - text));
    memcpy(out + (at - text), to, strlen(to));
    size_t n = strlen(out);
    memcpy(out + n, at + strlen(from), strlen(at + strlen(from)) + 1);
    free(text);
    return out;
}

static void stores_a_document_as_a_draft_with_its_digest(void **state)
{
    rig *r = *state;
    char *text = rig_file("deploy/demo/label-stage.json");
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    assert_string_equal(rig_text(r, "state"), "draft");
    lwt_same(rig_number(r, "revision"), 1.0);
    assert_string_equal(rig_header(r, "Location"), "/v1/mechanisms/label-stage/revisions/1");
    char tag[80];
    (void)snprintf(tag, sizeof tag, "\"%s\"", rig_text(r, "digest"));
    assert_string_equal(rig_header(r, "ETag"), tag);
    /* The same content again is the same revision. */
    rig_wants(r, 200, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    lwt_same(rig_number(r, "revision"), 1.0);
    assert_true(cJSON_IsFalse(rig_at(r, "created")));
    /* The text comes back as it was sent. */
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/revisions/1"));
    assert_int_equal(r->reply.body.len, strlen(text));
    assert_memory_equal(r->reply.body.data, text, strlen(text));
    assert_string_equal(rig_header(r, "ETag"), tag);
    r->if_none_match = tag;
    rig_wants(r, 304, rig_get(r, "/v1/mechanisms/label-stage/revisions/1"));
    assert_int_equal(r->reply.body.len, 0);
    r->if_none_match = NULL;
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/revisions/1/report"));
    assert_string_equal(rig_text(r, "mechanism"), "label-stage");
    lwt_same(rig_number(r, "mobility/computed"), 3.0);
    free(text);
}

static void refuses_a_document_with_a_fault_and_stores_nothing(void **state)
{
    rig *r = *state;
    char *text = changed("\"frame\": \"bed\"", "\"frame\": \"bett\"");
    rig_wants(r, 422, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    rig_problem(r, 422, 1074, "/frame");
    assert_true(cJSON_GetArraySize(rig_at(r, "findings")) >= 1);
    free(text);
    rig_wants(r, 404, rig_get(r, "/v1/mechanisms/label-stage"));
    rig_problem(r, 404, 1060, NULL);
    rig_wants(r, 400, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", "{\"name\": 01}"));
    rig_problem(r, 400, 1050, NULL);
    text = changed("\"name\": \"label-stage\"", "\"name\": \"label-stall\"");
    rig_wants(r, 422, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    rig_problem(r, 422, 1077, "/name");
    free(text);
    rig_wants(r, 404, rig_send(r, LWD_PUT, "/v1/mechanisms/Label_Stage", "{}"));
}

static void honours_conditions_on_a_put(void **state)
{
    rig *r = *state;
    char *text = rig_file("deploy/demo/label-stage.json");
    char *next = changed("Label inspection stage", "Label inspection stage, measured");
    r->if_match = "\"0000000000000000000000000000000000000000000000000000000000000000\"";
    rig_wants(r, 412, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    r->if_match = NULL;
    r->if_none_match = "*";
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    char tag[80];
    (void)snprintf(tag, sizeof tag, "\"%s\"", rig_text(r, "digest"));
    rig_wants(r, 412, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", next));
    rig_problem(r, 412, 1066, NULL);
    r->if_none_match = NULL;
    r->if_match = tag;
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", next));
    lwt_same(rig_number(r, "revision"), 2.0);
    rig_wants(r, 412, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    r->if_match = NULL;
    free(text);
    free(next);
}

static void publishes_withdraws_and_tells_the_history(void **state)
{
    rig *r = *state;
    rig_demo(r, "label-stage");
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/state"));
    lwt_same(rig_number(r, "answering"), 1.0);
    assert_string_equal(rig_header(r, "ETag"), "\"state-1\"");
    r->if_match = "\"state-0\"";
    rig_wants(r, 412, rig_post(r, "/v1/mechanisms/label-stage/revisions/1/withdraw", NULL));
    r->if_match = "\"state-1\"";
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/revisions/1/withdraw",
                               "{\"reason\":\"rod 2 was measured wrongly\"}"));
    assert_string_equal(rig_text(r, "state"), "withdrawn");
    assert_true(cJSON_IsNull(rig_at(r, "answering")));
    r->if_match = NULL;
    const char *question = "{\"pose\":{\"x\":5,\"y\":5,\"rz\":1}}";
    rig_wants(r, 409, rig_post(r, "/v1/mechanisms/label-stage/inverse", question));
    rig_problem(r, 409, 1062, NULL);
    rig_wants(r, 409, rig_post(r, "/v1/mechanisms/label-stage/inverse",
                               "{\"revision\":1,\"pose\":{\"x\":5,\"y\":5,\"rz\":1}}"));
    rig_problem(r, 409, 1064, NULL);
    rig_wants(r, 409, rig_post(r, "/v1/mechanisms/label-stage/revisions/1/publish",
                               "{\"accept\":[\"x\"]}"));
    rig_wants(r, 404, rig_post(r, "/v1/mechanisms/label-stage/revisions/9/publish", NULL));
    rig_problem(r, 404, 1061, NULL);
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/history"));
    assert_int_equal(cJSON_GetArraySize(rig_at(r, "events")), 2);
    assert_string_equal(rig_text(r, "events/0/action"), "publish");
    assert_string_equal(rig_text(r, "events/1/reason"), "rod 2 was measured wrongly");
    assert_string_equal(rig_text(r, "events/1/by"), "local");
}

/* The tag of a mechanism changes with its state and with each new draft, else it stays. */
static void a_mechanism_has_a_tag(void **state)
{
    static const char path[] = "/v1/mechanisms/label-stage";
    rig *r = *state;
    char before[80];
    rig_demo(r, "label-stage");
    rig_wants(r, 200, rig_get(r, path));
    (void)snprintf(before, sizeof before, "%s", rig_header(r, "ETag"));
    r->if_none_match = before;
    rig_wants(r, 304, rig_get(r, path));
    assert_int_equal(r->reply.body.len, 0);
    assert_string_equal(rig_header(r, "ETag"), before);
    char *text = rig_file("deploy/demo/label-stage.json");
    cJSON *document = cJSON_Parse(text);
    free(text);
    cJSON_DeleteItemFromObject(document, "notes");
    cJSON_AddStringToObject(document, "notes", "another draft");
    text = cJSON_PrintUnformatted(document);
    cJSON_Delete(document);
    r->if_none_match = NULL;
    rig_wants(r, 201, rig_send(r, LWD_PUT, path, text));
    free(text);
    r->if_none_match = before;
    rig_wants(r, 200, rig_get(r, path));
    assert_string_not_equal(rig_header(r, "ETag"), before);
    (void)snprintf(before, sizeof before, "%s", rig_header(r, "ETag"));
    r->if_none_match = NULL;
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/revisions/1/withdraw", NULL));
    r->if_none_match = before;
    rig_wants(r, 200, rig_get(r, path));
    r->if_none_match = NULL;
}

/* Whether a label-stage whose one check is off by `off` (mm in x) is found to miss it. */
static bool check_missed(rig *r, double off, const char *within)
{
    char *text = rig_file("deploy/demo/label-stage.json");
    cJSON *document = cJSON_Parse(text);
    free(text);
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/forward",
                               "{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}}"));
    char check[300];
    (void)snprintf(check, sizeof check,
                   "[{\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0},"
                   "\"pose\":{\"x\":%.17g,\"y\":%.17g,\"rz\":%.17g}%s}]",
                   rig_number(r, "solutions/0/pose/x") + off, rig_number(r, "solutions/0/pose/y"),
                   rig_number(r, "solutions/0/pose/rz"), within);
    cJSON_DeleteItemFromObject(document, "checks");
    cJSON_AddItemToObject(document, "checks", cJSON_Parse(check));
    text = cJSON_PrintUnformatted(document);
    cJSON_Delete(document);
    int status = rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text);
    assert_true(status == 200 || status == 201);
    bool missed = strstr(r->reply.body.data, "\"check-missed\"") != NULL;
    free(text);
    return missed;
}

/* label-stage needs 0.08 mm: what a check leaves open is held to that, an empty "within" too. */
static void a_check_without_figures_is_held_to_the_needs(void **state)
{
    rig *r = *state;
    rig_demo(r, "label-stage");
    assert_false(check_missed(r, 0.07, ""));
    assert_false(check_missed(r, 0.07, ",\"within\":{}"));
    assert_true(check_missed(r, 0.09, ",\"within\":{}"));
    assert_true(check_missed(r, 0.09, ""));
    assert_true(check_missed(r, 0.07, ",\"within\":{\"position\":0.05}"));
    assert_false(check_missed(r, 0.09, ",\"within\":{\"position\":0.2}"));
}

static void a_published_revision_takes_over_at_once(void **state)
{
    rig *r = *state;
    const char *question = "{\"pose\":{\"x\":5,\"y\":5,\"rz\":1}}";
    rig_demo(r, "label-stage");
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/inverse", question));
    lwt_same(rig_number(r, "revision"), 1.0);
    char *next = changed("Label inspection stage", "Another title");
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", next));
    free(next);
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/inverse", question));
    lwt_same(rig_number(r, "revision"), 1.0); /* a draft does not answer by default */
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/inverse",
                               "{\"revision\":2,\"pose\":{\"x\":5,\"y\":5,\"rz\":1}}"));
    assert_string_equal(rig_text(r, "state"), "draft");
    char body[600] = "";
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/history"));
    char *accepted = cJSON_PrintUnformatted(rig_at(r, "events/0/accepted"));
    (void)snprintf(body, sizeof body, "{\"accept\":%s}", accepted);
    free(accepted);
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/revisions/2/publish", body));
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/inverse", question));
    lwt_same(rig_number(r, "revision"), 2.0);
    assert_string_equal(rig_text(r, "state"), "published");
    /* Going back is publishing the earlier one again. */
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/revisions/1/publish", body));
    rig_wants(r, 200, rig_post(r, "/v1/mechanisms/label-stage/inverse", question));
    lwt_same(rig_number(r, "revision"), 1.0);
}

static void lists_in_pages(void **state)
{
    rig *r = *state;
    for (int i = 0; i < 5; i++) {
        char name[40];
        char target[80];
        (void)snprintf(name, sizeof name, "\"name\": \"stage-%d\"", i);
        (void)snprintf(target, sizeof target, "/v1/mechanisms/stage-%d", i);
        char *text = changed("\"name\": \"label-stage\"", name);
        rig_wants(r, 201, rig_send(r, LWD_PUT, target, text));
        free(text);
    }
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms?limit=2"));
    assert_int_equal(cJSON_GetArraySize(rig_at(r, "mechanisms")), 2);
    assert_string_equal(rig_text(r, "mechanisms/1/mechanism"), "stage-1");
    assert_true(cJSON_IsNull(rig_at(r, "mechanisms/1/answering")));
    lwt_holds(rig_header(r, "Link"), "rel=\"next\"");
    char target[80];
    (void)snprintf(target, sizeof target, "/v1/mechanisms?limit=9&cursor=%s", rig_text(r, "next"));
    rig_wants(r, 200, rig_get(r, target));
    assert_int_equal(cJSON_GetArraySize(rig_at(r, "mechanisms")), 3);
    assert_true(cJSON_IsNull(rig_at(r, "next")));
    assert_null(rig_header(r, "Link"));
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms?limit=0"));
    rig_problem(r, 400, 1055, NULL);
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms?limit=201"));
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms?limits=2"));
    rig_problem(r, 400, 1051, NULL);
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms?limit=2&limit=2"));
    rig_problem(r, 400, 1056, NULL);
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms?cursor=%"));
}

/* The change of this name in the last reply, NULL if there is none. */
static const cJSON *change(const rig *r, const char *of, const char *name, const char *what)
{
    const cJSON *c;
    cJSON_ArrayForEach(c, rig_at(r, "changes"))
    {
        const char *its = cJSON_GetStringValue(cJSON_GetObjectItem(c, "name"));
        if (strcmp(cJSON_GetStringValue(cJSON_GetObjectItem(c, "of")), of) == 0
            && strcmp(its != NULL ? its : "", name) == 0
            && strcmp(cJSON_GetStringValue(cJSON_GetObjectItem(c, "what")), what) == 0) {
            return c;
        }
    }
    return NULL;
}

static void tells_what_changed_in_words_and_numbers(void **state)
{
    rig *r = *state;
    rig_demo(r, "label-stage");
    /* A tool moved 3 mm and 4 mm stands 5 mm from where it stood. */
    char *text = changed("\"body\": \"plate\", \"at\": [0, 0, 0]",
                         "\"body\": \"plate\", \"at\": [3, 4, 0]");
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    free(text);
    text = changed("\"torque\": 8", "\"torque\": 9.5");
    rig_wants(r, 201, rig_send(r, LWD_PUT, "/v1/mechanisms/label-stage", text));
    free(text);
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/difference?from=1&to=2"));
    const cJSON *c = change(r, "tool", "camera", "point");
    assert_non_null(c);
    lwt_same(cJSON_GetObjectItem(c, "change")->valuedouble, 5.0);
    assert_string_equal(cJSON_GetStringValue(cJSON_GetObjectItem(c, "unit")), "mm");
    assert_string_equal(cJSON_GetStringValue(cJSON_GetObjectItem(c, "text")),
                        "tool camera: point moved by 5 mm");
    lwt_same(rig_number(r, "count"), 1.0);
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/difference?from=1&to=3"));
    c = change(r, "drive", "m1", "torque");
    assert_non_null(c);
    lwt_same(cJSON_GetObjectItem(c, "old")->valuedouble, 8.0);
    lwt_same(cJSON_GetObjectItem(c, "new")->valuedouble, 9.5);
    lwt_same(cJSON_GetObjectItem(c, "change")->valuedouble, 1.5);
    lwt_same(rig_number(r, "count"), 1.0);
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/difference?from=1"));
    lwt_same(rig_number(r, "count"), 0.0);
    assert_true(cJSON_IsTrue(rig_at(r, "same_digest")));
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms/label-stage/difference?to=1"));
    rig_wants(r, 404, rig_get(r, "/v1/mechanisms/label-stage/difference?from=1&to=8"));
}

static void lists_modes_with_names_and_numbers(void **state)
{
    rig *r = *state;
    rig_demo(r, "label-stage");
    rig_wants(r, 200, rig_get(r, "/v1/mechanisms/label-stage/modes"));
    const cJSON *mode;
    bool seen[65] = {false};
    int n_named = 0;
    cJSON_ArrayForEach(mode, rig_at(r, "modes"))
    {
        int no = cJSON_GetObjectItem(mode, "mode_no")->valueint;
        assert_true(no >= 1 && no <= 64);
        assert_false(seen[no]); /* a number names one mode */
        seen[no] = true;
        n_named += cJSON_GetObjectItem(mode, "mode_name") != NULL ? 1 : 0;
    }
    assert_true(n_named >= 1);
    assert_non_null(rig_at(r, "limbs/0/plus_means"));
    rig_wants(r, 400, rig_get(r, "/v1/mechanisms/label-stage/modes?revision=x"));
}

static void serves_itself(void **state)
{
    rig *r = *state;
    rig_wants(r, 200, rig_get(r, "/healthz"));
    rig_wants(r, 200, rig_get(r, "/about"));
    lwt_holds(r->reply.body.data, "no safety function");
    rig_wants(r, 200, rig_get(r, "/metrics"));
    lwt_holds(r->reply.body.data, "leeway_models_loaded 0");
    r->accept = "text/html";
    rig_wants(r, 406, rig_get(r, "/about"));
    r->accept = NULL;
    rig_wants(r, 400, rig_get(r, "/healthz?deep=1"));
}

/* Every route of the daemon stands in the description, with its method. */
static void the_description_knows_every_route(void **state)
{
    static const char *const word[] = {"get", "head", "post", "put", "delete"};
    rig *r = *state;
    size_t n = 0;
    const lwd_route *route = lwd_app_routes(&n);
    rig_wants(r, 200, rig_get(r, "/openapi.json"));
    for (size_t i = 0; i < n; i++) {
        bool found = false;
        const cJSON *path;
        cJSON_ArrayForEach(path, rig_at(r, "paths"))
        {
            /* {name} in the description is {} in the table. */
            char pattern[160];
            size_t len = 0;
            for (const char *p = path->string; *p != '\0'; p++) {
                pattern[len++] = *p;
                if (*p == '{') {
                    p += strcspn(p, "}");
                    pattern[len++] = '}';
                }
            }
            pattern[len] = '\0';
            found = found || (strcmp(pattern, route[i].pattern) == 0
                              && cJSON_GetObjectItem(path, word[route[i].method]) != NULL);
        }
        if (!found) {
            lwt_fail("the description lacks %s %s", word[route[i].method], route[i].pattern);
        }
    }
}

int main(void)
{
#define CASE(f) cmocka_unit_test_setup_teardown(f, setup, teardown)
    const struct CMUnitTest tests[] = {
        CASE(stores_a_document_as_a_draft_with_its_digest),
        CASE(refuses_a_document_with_a_fault_and_stores_nothing),
        CASE(honours_conditions_on_a_put),
        CASE(publishes_withdraws_and_tells_the_history),
        CASE(a_mechanism_has_a_tag),
        CASE(a_check_without_figures_is_held_to_the_needs),
        CASE(a_published_revision_takes_over_at_once),
        CASE(lists_in_pages),
        CASE(tells_what_changed_in_words_and_numbers),
        CASE(lists_modes_with_names_and_numbers),
        CASE(serves_itself),
        CASE(the_description_knows_every_route),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
