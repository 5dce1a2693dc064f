/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions with one fault each: refused with the right status, code and pointer, a sentence, and
 * nothing answered. Table-driven; to add a fault is to add a line. */
#include "api/problem_codes.h"
#include "api_rig.h"
#include "http/problems.h"

typedef struct fault {
    const char *question;
    const char *body;
    int status;
    int code;
    const char *pointer;
} fault;

#define POSE "\"pose\":{\"x\":15,\"y\":-10,\"rz\":6}"
#define DRIVES "\"drives\":{\"m1\":90,\"m2\":180,\"m3\":270,\"m4\":0}"
#define FROM "\"from\":{" DRIVES "}"
#define LINE "\"move\":\"line\"," POSE

static const fault faults[] = {
    /* the text */
    {"inverse", "", 400, 1050, ""},
    {"inverse", "[]", 400, 1053, ""},
    {"inverse", "{" POSE ",}", 400, 1050, NULL},
    {"inverse", "{\"pose\":{\"x\":015}}", 400, 1050, "/pose/x"},
    {"inverse", "{\"pose\":{\"x\":1e999}}", 400, 1050, "/pose/x"},
    {"inverse", "{\"pose\":{\"x\":NaN}}", 400, 1050, "/pose/x"},
    {"inverse", "{\"pose\":{\"x\":1,\"x\":2}}", 400, 1056, "/pose/x"},
    {"inverse", "{" POSE "} {}", 400, 1050, NULL},
    /* the head */
    {"inverse", "{" POSE ",\"ref\":\"\"}", 400, 1059, "/ref"},
    {"inverse", "{" POSE ",\"ref\":\"123456789012345678901234567890123\"}", 400, 1054, "/ref"},
    {"inverse", "{" POSE ",\"ref\":\"\\u00e4\"}", 400, 1059, "/ref"},
    {"inverse", "{" POSE ",\"ref\":7}", 400, 1053, "/ref"},
    {"inverse", "{" POSE ",\"revision\":0}", 400, 1054, "/revision"},
    {"inverse", "{" POSE ",\"revision\":1.5}", 400, 1053, "/revision"},
    {"inverse", "{" POSE ",\"revision\":9}", 404, 1061, NULL},
    {"inverse", "{" POSE ",\"expect\":\"12345\"}", 400, 1059, "/expect"},
    {"inverse", "{" POSE ",\"expect\":\"1234567g\"}", 400, 1059, "/expect"},
    {"inverse", "{" POSE ",\"expect\":\"00000000\"}", 409, 1063, NULL},
    {"inverse", "{" POSE ",\"units\":{\"length\":\"inch\"}}", 400, 1059, "/units/length"},
    {"inverse", "{" POSE ",\"units\":{\"angles\":\"deg\"}}", 400, 1051, "/units/angles"},
    {"inverse", "{" POSE ",\"units\":\"mm\"}", 400, 1053, "/units"},
    {"inverse", "{" POSE ",\"orientation\":\"euler\"}", 400, 1059, "/orientation"},
    {"inverse", "{" POSE ",\"tool\":\"torch\"}", 422, 1070, "/tool"},
    {"inverse", "{" POSE ",\"tool\":{\"body\":\"plate\"}}", 400, 1052, "/tool/at"},
    {"inverse", "{" POSE ",\"tool\":{\"body\":\"plat\",\"at\":[0,0,0]}}", 422, 1070, "/tool/body"},
    {"inverse", "{" POSE ",\"tool\":{\"body\":\"plate\",\"at\":[0,0]}}", 400, 1054, "/tool/at"},
    {"inverse", "{" POSE ",\"tool\":{\"body\":\"bed\",\"at\":[0,0,0]}}", 422, 1071, "/tool/body"},
    {"inverse", "{" POSE ",\"tool\":3}", 400, 1053, "/tool"},
    /* poses */
    {"inverse", "{}", 400, 1052, "/pose"},
    {"inverse", "{\"pose\":[1,2,3]}", 400, 1053, "/pose"},
    {"inverse", "{\"pose\":{\"x\":\"15\"}}", 400, 1053, "/pose/x"},
    {"inverse", "{\"pose\":{\"X\":15}}", 400, 1051, "/pose/X"},
    {"inverse", "{\"pose\":{\"x\":15,\"rz\":1,\"zyx\":{\"yaw\":1}}}", 400, 1059, NULL},
    {"inverse", "{\"pose\":{\"x\":15,\"quaternion\":{\"w\":1,\"x\":0,\"y\":0}}}", 400, 1052,
     "/pose/quaternion/z"},
    {"inverse", "{\"pose\":{\"x\":15,\"quaternion\":{\"w\":1,\"x\":0.1,\"y\":0,\"z\":0}}}", 400,
     1059, "/pose/quaternion"},
    {"inverse", "{\"pose\":{\"joints\":{\"elbow-9\":1}}}", 422, 1070, "/pose/joints/elbow-9"},
    {"inverse", "{" POSE ",\"mode\":\"+++\"}", 400, 1059, "/mode"},
    {"inverse", "{" POSE ",\"mode\":\"sideways\"}", 400, 1059, "/mode"},
    {"inverse", "{" POSE ",\"mode\":5}", 400, 1053, "/mode"},
    {"inverse", "{" POSE ",\"near\":{\"x\":\"a\"}}", 400, 1053, "/near/x"},
    {"inverse", "{" POSE ",\"near\":{}}", 422, 1072, "/near"},
    {"inverse", "{" POSE ",\"near\":{\"x\":1}}", 422, 1072, "/near"},
    {"inverse", "{" POSE ",\"near\":{\"pose\":{\"x\":1}}}", 422, 1072, "/near/pose"},
    {"reach", "{" POSE ",\"from\":{" DRIVES ",\"near\":{\"y\":3}}}", 422, 1072, "/from/near"},
    /* members of other questions */
    {"inverse", "{" POSE "," DRIVES "}", 400, 1051, "/drives"},
    {"inverse", "{" POSE ",\"all\":true}", 400, 1051, "/all"},
    {"forward", "{" POSE "}", 400, 1051, "/pose"},
    {"reach", "{" POSE ",\"near\":{\"x\":1}}", 400, 1051, "/near"},
    {"margin", "{" POSE ",\"margin_min\":1}", 400, 1051, "/margin_min"},
    /* readings */
    {"forward", "{}", 400, 1052, "/drives"},
    {"forward", "{\"drives\":{\"m9\":1}}", 422, 1070, "/drives/m9"},
    {"forward", "{\"drives\":{\"m1\":true}}", 400, 1053, "/drives/m1"},
    {"forward", "{" DRIVES ",\"all\":1}", 400, 1053, "/all"},
    {"forward", "{\"drives\":{\"m1\":90}}", 422, 1072, NULL},
    /* jacobian */
    {"jacobian", "{" POSE "," DRIVES "}", 400, 1059, NULL},
    {"jacobian", "{}", 422, 1072, ""},
    {"jacobian", "{" POSE ",\"point\":{\"x\":1}}", 400, 1053, "/point"},
    {"jacobian", "{" POSE ",\"point\":[1,2,\"3\"]}", 400, 1053, "/point/2"},
    {"jacobian", "{" POSE ",\"in\":\"flange\"}", 400, 1059, "/in"},
    /* reach */
    {"reach", "{" POSE ",\"margin_min\":-1}", 400, 1054, "/margin_min"},
    {"reach", "{" POSE ",\"margin_min\":{\"lod\":1}}", 400, 1051, "/margin_min/lod"},
    {"reach", "{" POSE ",\"margin_min\":\"1\"}", 400, 1053, "/margin_min"},
    {"reach", "{" POSE ",\"from\":{}}", 422, 1072, "/from"},
    {"reach", "{" POSE ",\"from\":{\"drives\":{\"m7\":1}}}", 422, 1070, "/from/drives/m7"},
    {"reach", "{" POSE ",\"budget\":0}", 400, 1054, "/budget"},
    {"reach", "{" POSE ",\"timeout_ms\":1.5}", 400, 1053, "/timeout_ms"},
    {"reach", "{" POSE ",\"through\":[]}", 400, 1051, "/through"},
    {"reach", "{" POSE ",\"budget\":262145}", 400, 1054, "/budget"},
    {"margin", "{" POSE ",\"distance\":true}", 400, 1053, "/distance"},
    {"margin", "{" POSE ",\"distance\":{\"budget\":0}}", 400, 1054, "/distance/budget"},
    /* moves */
    {"path", "{\"through\":[{" LINE "}]}", 400, 1052, "/from"},
    {"path", "{" FROM "}", 400, 1052, "/through"},
    {"path", "{" FROM ",\"through\":{}}", 400, 1053, "/through"},
    {"path", "{" FROM ",\"through\":[]}", 400, 1054, "/through"},
    {"path", "{" FROM ",\"through\":[{" LINE "},7]}", 400, 1053, "/through/1"},
    {"path", "{" FROM ",\"through\":[{" LINE ",\"speed\":5}]}", 400, 1051, "/through/0/speed"},
    {"path", "{" FROM ",\"through\":[{" POSE "}]}", 400, 1052, "/through/0/move"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"spline\"}]}", 400, 1059, "/through/0/move"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"line\"}]}", 400, 1052, "/through/0/pose"},
    {"path", "{" FROM ",\"through\":[{" LINE "," DRIVES "}]}", 400, 1051, "/through/0/drives"},
    {"path", "{" FROM ",\"through\":[{" LINE ",\"via\":{\"x\":1}}]}", 400, 1051,
     "/through/0/via"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"circle\"," POSE "}]}", 400, 1052,
     "/through/0/via"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"circle\"," POSE ",\"via\":{\"x\":1,\"rz\":2}}]}",
     400, 1059, "/through/0/via"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"circle\"," POSE ",\"via\":{\"x\":\"1\"}}]}", 400,
     1053, "/through/0/via/x"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"joints\"}]}", 400, 1052, "/through/0/drives"},
    {"path", "{" FROM ",\"through\":[{\"move\":\"joints\"," POSE "," DRIVES "}]}", 400, 1059,
     "/through/0/drives"},
    {"path", "{" FROM ",\"through\":[{" LINE ",\"line\":\"\"}]}", 400, 1059, "/through/0/line"},
    {"path", "{" FROM ",\"through\":[{" LINE ",\"line\":10}]}", 400, 1053, "/through/0/line"},
    {"path", "{" FROM ",\"through\":[{" LINE "}],\"certificate\":1}", 400, 1053, "/certificate"},
    {"path", "{" FROM ",\"through\":[{" LINE "}],\"budget\":262145}", 400, 1054, "/budget"},
    {"path", "{" FROM ",\"through\":[{" LINE "}],\"timeout_ms\":600001}", 400, 1054,
     "/timeout_ms"},
    {"path", "{" FROM ",\"through\":[{" LINE "}]," POSE "}", 400, 1051, "/pose"},
    {"path", "{" FROM ",\"through\":[{" LINE "}],\"batch\":[]}", 400, 1051, "/batch"},
    {"path", "{\"from\":{},\"through\":[{" LINE "}]}", 422, 1072, "/from"},
    {"free-travel", "{}", 422, 1072, ""},
    {"free-travel", "{" DRIVES ",\"reach\":5}", 400, 1053, "/reach"},
    {"free-travel", "{" DRIVES ",\"reach\":{\"position\":-5}}", 400, 1054, "/reach/position"},
    {"free-travel", "{" DRIVES ",\"reach\":{\"angle\":361}}", 400, 1054, "/reach/angle"},
    {"free-travel", "{" DRIVES ",\"reach\":{\"turn\":5}}", 400, 1051, "/reach/turn"},
    {"free-travel", "{" DRIVES ",\"batch\":[]}", 400, 1051, "/batch"},
    /* batches */
    {"inverse", "{\"batch\":{}}", 400, 1053, "/batch"},
    {"inverse", "{\"batch\":[]}", 400, 1054, "/batch"},
    {"inverse", "{\"batch\":[{" POSE "}]," POSE "}", 400, 1059, "/pose"},
};

/* In the member of a batch a fault has the same code and its pointer begins with the member's. */
static void in_a_batch(rig *r, const fault *f)
{
    char target[80];
    char body[600];
    char pointer[120];
    (void)snprintf(target, sizeof target, "/v1/mechanisms/label-stage/%s", f->question);
    (void)snprintf(body, sizeof body, "{\"batch\":[%s,%s]}", f->body, f->body);
    rig_wants(r, 200, rig_post(r, target, body));
    lwt_same(rig_number(r, "answers/1/status"), (double)f->status);
    if (f->code != 0) {
        lwt_same(rig_number(r, "answers/1/code"), (double)f->code);
    }
    if (f->pointer != NULL) {
        (void)snprintf(pointer, sizeof pointer, "/batch/1%s", f->pointer);
        assert_string_equal(rig_text(r, "answers/1/pointer"), pointer);
    }
}

static void every_fault_is_told_at_its_place(void **state)
{
    rig r;
    (void)state;
    rig_start(&r);
    rig_demo(&r, "label-stage");
    for (size_t i = 0; i < sizeof faults / sizeof faults[0]; i++) {
        const fault *f = &faults[i];
        char target[80];
        (void)snprintf(target, sizeof target, "/v1/mechanisms/label-stage/%s", f->question);
        int status = rig_post(&r, target, f->body);
        const char *text = r.reply.body.len > 0 ? r.reply.body.data : "";
        if (status != f->status
            || (f->code != 0 && (int)rig_number(&r, "code") != f->code)
            || (f->pointer != NULL && strcmp(rig_text(&r, "pointer"), f->pointer) != 0)) {
            lwt_fail("%s %s: wanted %d, %d at %s, got %d %s", f->question, f->body, f->status,
                     f->code, f->pointer != NULL ? f->pointer : "any place", status, text);
        }
        assert_string_equal(r.reply.content_type, "application/problem+json");
        assert_true(strlen(rig_text(&r, "detail")) > 15);
        assert_int_equal(r.reply.log_code, (int)rig_number(&r, "code"));
        bool alone = strcmp(f->question, "path") == 0 || strcmp(f->question, "free-travel") == 0;
        if (!alone && f->body[0] == '{' && f->code != 1050 && f->code != 1056
            && strstr(f->body, "batch") == NULL) {
            in_a_batch(&r, f);
        }
    }
    rig_stop(&r);
}

/* Each problem that can be sent explains itself. */
static void every_problem_has_a_help_text(void **state)
{
    static const char *const slug[] = {
#define SLUG(id, code, status, slug, title) slug,
        LWD_PROBLEM_LIST(SLUG) LWD_HTTP_PROBLEM_LIST(SLUG)
#undef SLUG
    };
    rig r;
    (void)state;
    rig_start(&r);
    for (size_t i = 0; i < sizeof slug / sizeof slug[0]; i++) {
        char target[80];
        (void)snprintf(target, sizeof target, "/problems/%s", slug[i]);
        rig_wants(&r, 200, rig_get(&r, target));
        assert_string_equal(rig_text(&r, "slug"), slug[i]);
        assert_true(strlen(rig_text(&r, "what_to_do")) > 15);
    }
    rig_wants(&r, 404, rig_get(&r, "/problems/none"));
    rig_stop(&r);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_fault_is_told_at_its_place),
        cmocka_unit_test(every_problem_has_a_help_text),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
