/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the document decoder makes of a good document: SI numbers, defaults, readings, postures. The
 * refusals are in test_document_faults.c. Expected numbers are worked out by hand from the text. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "codec/document.h"
#include "codec/posture_in.h"
#include "lwt.h"

static const double deg = 0.017453292519943295;

static lwd_findings findings;

static lwd_document *read_text(const char *text)
{
    char digest[LWD_DIGEST_SIZE];
    lwd_findings_init(&findings);
    lwd_document *doc = lwd_document_read_text(text, strlen(text), &findings, digest, NULL);
    if (doc == NULL) {
        const lwd_finding *f = lwd_findings_first_error(&findings);
        lwt_fail("refused: %s at '%s'", f != NULL ? f->text : "no memory",
                 f != NULL ? f->pointer : "");
    }
    assert_int_equal(strlen(digest), 64);
    return doc;
}

static char *read_file(const char *path)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL) {
        lwt_fail("no file %s", path);
    }
    enum { MOST = 1 << 20 };
    char *text = malloc(MOST);
    assert_non_null(text);
    size_t n = fread(text, 1, MOST - 1, file);
    text[n] = '\0';
    (void)fclose(file);
    return text;
}

static lwd_document *read_everything(void)
{
    char *text = read_file(LWT_CASES_DIR "/faults/everything.json");
    lwd_document *doc = read_text(text);
    free(text);
    return doc;
}

/* ---- the whole document ---------------------------------------------------------------------- */

static void converts_everything_to_si(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    const lw_spec *s = &doc->spec;
    assert_string_equal(s->name, "everything");
    assert_string_equal(doc->drawing, "L-0001-03");
    assert_non_null(doc->notes);
    assert_false(doc->units.metres || doc->units.radians);
    assert_int_equal(s->frame, 0);
    assert_int_equal(s->n_body, 9);
    assert_int_equal(s->n_joint, 8);
    assert_int_equal(lw_spec_coord_count(s), 13);

    const lw_spec_joint *elbow = &s->joint[0];
    assert_int_equal(elbow->type, LW_REVOLUTE);
    assert_int_equal(elbow->body[1], 1);
    lwt_near(elbow->at_m[0], 0.1, 1e-16);
    lwt_near(elbow->range[0].low, -170.0 * deg, 1e-15);
    lwt_near(s->joint[1].range[0].high, 0.25, 1e-16);
    const lw_spec_joint *screw = &s->joint[2];
    lwt_near(screw->lead_m, 0.004, 1e-18);
    assert_true(!screw->range[0].has_low && screw->range[0].has_high);
    lwt_near(screw->range[0].high, 3600.0 * deg, 1e-13);
    lwt_near(s->joint[3].range[1].high, 0.4, 1e-16); /* slide */
    lwt_near(s->joint[3].range[0].high, 90.0 * deg, 1e-15); /* turn */
    lwt_near(s->joint[4].range[1].low, -45.0 * deg, 1e-15);
    const lw_spec_joint *ball = &s->joint[5];
    assert_true(ball->has_cone);
    lwt_near(ball->cone_rad, 30.0 * deg, 1e-15);
    lwt_near(ball->stud_axis[1], 0.1 / sqrt(1.01), 1e-15);
    lwt_near(s->joint[6].range[0].low, -0.05, 1e-16);
    assert_false(s->joint[6].range[1].has_low);
    lwt_near(s->joint[6].range[2].high, 10.0 * deg, 1e-15);
    assert_int_equal(doc->n_ball, 1);
    assert_int_equal(doc->ball_joint[0], 5);

    const lw_spec_rod *strut = &s->rod[0];
    lwt_near(strut->range_m.low, 0.43, 1e-16);
    lwt_near(doc->rod_length_m[0], 0.5, 1e-15);
    lwt_near(strut->swivel[0].axis[2], 0.8, 1e-15);
    lwt_near(strut->swivel[0].cone_rad, 30.0 * deg, 1e-15);
    assert_false(strut->swivel[1].present);
    assert_true(s->rod[1].free && !s->rod[2].free);
    assert_true(strut->has_length && !s->rod[1].has_length);

    lwt_near(s->needs.position_tolerance_m.value, 1e-4, 1e-18);
    lwt_near(s->needs.angle_tolerance_rad.value, 0.05 * deg, 1e-17);
    lwt_near(s->needs.speed_m_s.value, 0.5, 1e-15);
    lwt_near(s->needs.turn_rate_rad_s.value, 180.0 * deg, 1e-14);
    assert_int_equal(s->needs.n_joint, 2);
    lwt_near(s->needs.joint[0].tolerance.value, 2.0 * deg, 1e-16);
    lwt_near(s->needs.joint[1].tolerance.value, 5e-4, 1e-18);
    lwt_near(s->needs.joint[1].effort.value, 30.0, 0.0);
    assert_int_equal(s->motion, LW_MOTION_3T1R);
    assert_int_equal(s->n_output, 6);
    assert_int_equal(s->output[3].kind, LW_OUT_RZ);
    assert_int_equal(s->output[4].kind, LW_OUT_COORD);
    assert_int_equal(s->output[4].coord, lwd_document_coord(doc, "screw"));
    lwd_document_free(doc);
}

/* Couplings: the sum in document units stays zero when the coordinates, in SI, keep the law. */
static void keeps_couplings_in_document_units(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    const lw_spec_coupling *gear = &doc->spec.coupling[0];
    lwt_same(gear->term[0].factor, 2.0); /* turns alone: as written */
    lwt_same(gear->term[1].factor, -1.0);
    const lw_spec_coupling *spindle = &doc->spec.coupling[1];
    /* 90 deg per mm: 3 mm of slide are 270 deg of turn. */
    lwt_near(spindle->term[0].factor * 0.003 + spindle->term[1].factor * 270.0 * deg, 0.0, 1e-14);
    assert_int_equal(spindle->term[0].coord, lwd_document_coord(doc, "post.slide"));
    lwd_document_free(doc);
}

static void keeps_readings_as_the_encoder_shows_them(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    const lw_spec_drive *m1 = &doc->spec.drive[0];
    assert_true(m1->turning);
    /* reading = 12.5 - coordinate: -150 deg shown is +162.5 deg of turn, 160 shown is -147.5. */
    lwt_near(m1->range.low, -147.5 * deg, 1e-14);
    lwt_near(m1->range.high, 162.5 * deg, 1e-14);
    lwt_near(m1->speed, 360.0 * deg, 1e-14);
    lwt_near(m1->acceleration, 2000.0 * deg, 1e-13);
    lwt_near(m1->effort, 12.0, 0.0);
    lwt_near(m1->resolution, 0.001 * deg, 1e-19);
    assert_true(m1->has_backlash && m1->backlash == 0.0);
    assert_string_equal(doc->drive[0].unit, "deg");
    lwt_same(doc->drive[0].range.low, -150.0);
    const lw_spec_drive *m2 = &doc->spec.drive[1];
    assert_false(m2->turning);
    lwt_near(m2->range.low, -0.3, 1e-16);
    lwt_near(m2->backlash, 2e-5, 1e-20);
    assert_string_equal(doc->drive[1].unit, "mm");
    /* A strut's reading is its length unless said otherwise. */
    lwt_same(doc->drive[2].at_reference, 500.0);
    lwt_near(doc->spec.drive[2].range.low, -0.06, 1e-15);
    lwt_near(doc->spec.drive[2].range.high, 0.1, 1e-15);
    assert_int_equal(doc->spec.drive[3].n_term, 2);
    lwt_same(doc->spec.drive[3].term[1].factor, -0.02);
    lwd_document_free(doc);
}

static void reads_home_modes_and_checks(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    const lw_posture_ask *home = &doc->spec.home;
    assert_int_equal(home->kind, LW_BY_DRIVES);
    lwt_near(home->drive[0], 2.5 * deg, 1e-15);
    assert_true(home->has_drive[2] && home->drive[2] == 0.0);
    assert_non_null(home->near);
    assert_int_equal(home->near->kind, LW_BY_POSE);
    lwt_near(home->near->pose.position_m[1], 0.21, 1e-16);
    assert_int_equal(home->near->pose.n_joint, 1);

    assert_int_equal(doc->spec.n_mode, 2);
    assert_string_equal(doc->spec.mode[1].name, "elbow-right");
    assert_string_equal(doc->mode_title[1], "elbow right of the post");
    const lw_posture_ask *right = &doc->spec.mode[1].example;
    assert_int_equal(right->kind, LW_BY_POSE);
    assert_true(right->pose.has_zyx[0] && !right->pose.has_zyx[1]);
    lwt_near(right->pose.zyx_rad[0], 15.0 * deg, 1e-16);
    assert_true(right->has_mode && right->mode.count == 2 && right->mode.sign[1] == -1);
    assert_int_equal(right->near->kind, LW_BY_JOINTS);
    lwt_near(right->near->coord[lwd_document_coord(doc, "strut-1")], 0.01, 1e-15);
    assert_true(right->near->has_ball[0] && right->near->ball[0][0] == 1.0);

    const lw_spec_check *check = &doc->spec.check[0];
    assert_false(check->posture.has_drive[3]);
    assert_true(check->posture.has_drive[0] && check->posture.drive[0] == 0.0);
    lwt_near(check->within_position_m.value, 2e-4, 1e-18);
    lwt_near(check->within_angle_rad.value, 0.1 * deg, 1e-17);
    lwd_document_free(doc);
}

static void makes_rotations_of_tools(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    /* yaw 90, roll 180: Rz(90) Rx(180) = columns y, x, -z. */
    static const double want[9] = {0, 1, 0, 1, 0, 0, 0, 0, -1};
    lwt_near_n(doc->spec.tool[1].frame.rot, want, 9, 1e-15);
    lwt_near(doc->spec.tool[1].frame.pos_m[2], 0.17, 1e-16);
    lwd_document_free(doc);
}

/* ---- one member at a time -------------------------------------------------------------------- */

/* A small machine; %s stand for units, the joint's extra members, the drive's, and further ones. */
static char small_text[4096];

static const char *small(const char *length, const char *angle, const char *joint,
                         const char *drive, const char *more)
{
    int n = snprintf(small_text, sizeof small_text,
                     "{\"format\":\"leeway-mechanism/1\",\"name\":\"small\","
                     "\"units\":{\"length\":\"%s\",\"angle\":\"%s\"},\"frame\":\"bed\","
                     "\"bodies\":[\"bed\",\"arm\"],\"joints\":[{\"name\":\"j\","
                     "\"between\":[\"bed\",\"arm\"]%s}],\"drives\":[{\"name\":\"m\"%s}],"
                     "\"tools\":[{\"name\":\"t\",\"body\":\"arm\",\"at\":[1,2,3]}],"
                     "\"outputs\":[\"rz\"]%s}",
                     length, angle, joint, drive, more);
    assert_true(n > 0 && (size_t)n < sizeof small_text);
    return small_text;
}

static const char turn[] = ",\"type\":\"revolute\",\"at\":[1,2,3],\"axis\":[0,3,4]";

static void takes_metres_and_radians_as_they_are(void **state)
{
    (void)state;
    lwd_document *doc = read_text(small("m", "rad", turn, ",\"moves\":\"j\",\"range\":[-2,2]", ""));
    lwt_same(doc->spec.joint[0].at_m[2], 3.0);
    lwt_near(doc->spec.joint[0].axis[1], 0.6, 1e-16);
    lwt_same(doc->spec.drive[0].range.high, 2.0);
    lwt_same(doc->spec.tool[0].frame.rot[8], 1.0);
    assert_string_equal(doc->drive[0].unit, "rad");
    assert_int_equal(doc->spec.home.kind, LW_BY_NOTHING);
    assert_int_equal(findings.n, 0);
    lwd_document_free(doc);
}

static void reads_gears_and_open_ranges_of_drives(void **state)
{
    (void)state;
    lwd_document *doc = read_text(
        small("mm", "deg", turn,
              ",\"moves\":\"j\",\"reading\":{\"at_reference\":1000,\"per_unit\":-20,"
              "\"unit\":\"counts\"},\"range\":[null,2000],\"speed\":40",
              ""));
    const lw_spec_drive *m = &doc->spec.drive[0];
    /* 2000 counts are (2000 - 1000) / -20 = -50 deg; the open side is the other one. */
    assert_true(m->range.has_low && !m->range.has_high);
    lwt_near(m->range.low, -50.0 * deg, 1e-15);
    lwt_near(m->speed, 2.0 * deg, 1e-16);
    assert_string_equal(doc->drive[0].unit, "counts");
    lwd_document_free(doc);

    doc = read_text(small("mm", "deg", turn,
                          ",\"moves\":\"j\",\"reading\":{\"per_unit\":2}", ""));
    assert_string_equal(doc->drive[0].unit, ""); /* not the document's unit, and not named */
    lwd_document_free(doc);
}

static void straightens_axes_up_to_a_tenth_of_a_degree(void **state)
{
    (void)state;
    lwd_document *doc = read_text(small(
        "mm", "deg",
        ",\"type\":\"universal\",\"at\":[0,0,0],\"axis\":[1,0,0],\"second_axis\":[0.0015,1,0]",
        ",\"moves\":\"j.first\"", ""));
    assert_int_equal(findings.n, 1);
    assert_int_equal(findings.item[0].severity, LW_NOTE);
    assert_string_equal(findings.item[0].code, "axes-straightened");
    assert_string_equal(findings.item[0].pointer, "/joints/0/second_axis");
    lwt_near(doc->spec.joint[0].second_axis[0], 0.0, 1e-15);
    lwt_near(doc->spec.joint[0].second_axis[1], 1.0, 1e-15);
    lwd_document_free(doc);
}

static void expect_one(lw_severity severity, const char *code, const char *pointer,
                       const char *words)
{
    assert_int_equal(findings.n, 1);
    assert_int_equal(findings.item[0].severity, severity);
    assert_string_equal(findings.item[0].code, code);
    assert_string_equal(findings.item[0].pointer, pointer);
    lwt_holds(findings.item[0].text, words);
}

static void warns_where_parts_disagree(void **state)
{
    (void)state;
    lwd_document *doc = read_text(
        small("mm", "deg", ",\"type\":\"revolute\",\"at\":[0,0,0],\"axis\":[0,0,1],"
              "\"range\":[-90,90]", ",\"moves\":\"j\",\"reading\":{\"at_reference\":10},"
              "\"range\":[-80,120]", ""));
    expect_one(LW_WARNING, "range-leaves-joint", "/drives/0/range", "shows 100");
    lwd_document_free(doc);
    doc = read_text(
        small("mm", "deg", ",\"type\":\"revolute\",\"at\":[0,0,0],\"axis\":[0,0,1],"
              "\"range\":[-90,90]", ",\"moves\":{\"sum\":{\"j\":-2}},\"range\":[-181,180]", ""));
    expect_one(LW_WARNING, "range-leaves-joint", "/drives/0/range", "shows -180");
    lwd_document_free(doc);

    static const char rod[] =
        ",\"rods\":[{\"name\":\"r\",\"between\":[\"bed\",\"arm\"],\"ends\":[[0,0,0],[0,0,300]]%s}]";
    char more[512];
    (void)snprintf(more, sizeof more, rod, ",\"length\":300.02");
    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"", more));
    expect_one(LW_WARNING, "length-differs", "/rods/0/length", "300 mm apart, not 300.02");
    lwd_document_free(doc);

    (void)snprintf(more, sizeof more, "%s%s", rod, ",\"needs\":{\"position_tolerance\":0.3}");
    char text[1024];
    (void)snprintf(text, sizeof text, more, ",\"length\":300.02"); /* within a tenth of 0.3 mm */
    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"", text));
    assert_int_equal(findings.n, 0);
    lwd_document_free(doc);

    (void)snprintf(text, sizeof text, more, ",\"length\":299.96"); /* beyond it */
    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"", text));
    expect_one(LW_WARNING, "length-differs", "/rods/0/length", "not 299.96");
    lwd_document_free(doc);

    (void)snprintf(more, sizeof more, rod, ",\"range\":[200,400]");
    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"", more));
    expect_one(LW_NOTE, "range-unused", "/rods/0/range", "keeps its length");
    lwd_document_free(doc);

    (void)snprintf(more, sizeof more, rod, ",\"free\":true");
    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"r\"", more));
    expect_one(LW_NOTE, "free-and-driven", "/rods/0/free", "says nothing");
    lwd_document_free(doc);

    doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"},{\"name\":\"n\",\"moves\":\"j\"",
                          ""));
    expect_one(LW_WARNING, "moved-twice", "/drives/1/moves", "\"m\"");
    lwd_document_free(doc);
}

static void takes_a_swivel_s_axis_either_way_round(void **state)
{
    (void)state;
    static const char rod[] =
        ",\"rods\":[{\"name\":\"r\",\"between\":[\"bed\",\"arm\"],\"ends\":[[0,0,0],[0,0,300]],"
        "\"swivels\":[{\"axis\":[0,0,%d],\"cone\":5},{\"axis\":[0,0,%d],\"cone\":5}]}]";
    for (int way = -1; way <= 1; way += 2) {
        char more[512];
        (void)snprintf(more, sizeof more, rod, way, way);
        lwd_document *doc = read_text(small("mm", "deg", turn, ",\"moves\":\"j\"", more));
        lwt_same(doc->spec.rod[0].swivel[0].axis[2], 1.0); /* away from its own end */
        lwt_same(doc->spec.rod[0].swivel[1].axis[2], -1.0);
        lwd_document_free(doc);
    }
}

static void tells_several_faults_at_once(void **state)
{
    (void)state;
    char digest[LWD_DIGEST_SIZE];
    const char *text = small("mm", "deg", ",\"type\":\"revolute\",\"at\":[1,2],\"axis\":[0,0,0]",
                             ",\"moves\":\"k\",\"sped\":3", ",\"home\":5");
    lwd_findings_init(&findings);
    assert_null(lwd_document_read_text(text, strlen(text), &findings, digest, NULL));
    static const char *const want[] = {"/joints/0/at", "/joints/0/axis", "/drives/0/sped",
                                       "/drives/0/moves"};
    assert_int_equal(findings.n, 4);
    for (size_t i = 0; i < 4; i++) {
        assert_string_equal(findings.item[i].pointer, want[i]);
    }
    assert_int_equal(strlen(digest), 64); /* the text is JSON, so it has a digest */
}

static void counts_what_is_more_than_is_served(void **state)
{
    (void)state;
    static char text[32768];
    size_t n = (size_t)snprintf(text, sizeof text,
                                "{\"format\":\"leeway-mechanism/1\",\"name\":\"many\",\"units\":"
                                "{\"length\":\"m\",\"angle\":\"rad\"},\"frame\":\"a\",\"bodies\":"
                                "[\"a\",\"b\"],\"joints\":[");
    for (int i = 0; i < 65; i++) { /* 65 planar joints: 195 coordinates */
        n += (size_t)snprintf(text + n, sizeof text - n,
                              "%s{\"name\":\"j%d\",\"type\":\"planar\",\"between\":[\"a\",\"b\"],"
                              "\"at\":[0,0,0],\"axis\":[0,0,1],\"x_axis\":[1,0,0]}",
                              i > 0 ? "," : "", i);
    }
    (void)snprintf(text + n, sizeof text - n,
                   "],\"drives\":[{\"name\":\"m\",\"moves\":\"j0.x\"}],\"tools\":[{\"name\":\"t\","
                   "\"body\":\"b\",\"at\":[0,0,0]}],\"outputs\":[\"x\"]}");
    char digest[LWD_DIGEST_SIZE];
    lwd_findings_init(&findings);
    assert_null(lwd_document_read_text(text, strlen(text), &findings, digest, NULL));
    assert_int_equal(findings.n, 1);
    assert_string_equal(findings.item[0].code, "too-many");
    assert_string_equal(findings.item[0].pointer, "/joints");
}

/* ---- postures of questions ------------------------------------------------------------------- */

static bool posture(const lwd_document *doc, const char *text, lw_posture_ask *out,
                    lw_posture_ask *near)
{
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    struct cJSON *tree = lwd_json_parse(text, strlen(text), &limits, &findings);
    assert_non_null(tree);
    lwd_reader r = lwd_reader_of(tree, &findings);
    /* The question's own units, not the document's. */
    const lwd_posture_scope scope = {.document = doc, .units = {.metres = true, .radians = true}};
    bool good = lwd_posture_in(&r, &scope, out, near);
    assert_true(good == (findings.n_error == 0));
    lwd_json_free(tree);
    return good;
}

static void reads_postures_in_the_question_s_units(void **state)
{
    (void)state;
    lwd_document *doc = read_everything();
    static lw_posture_ask out;
    static lw_posture_ask near;
    /* Readings never convert. */
    assert_true(posture(doc, "{\"drives\":{\"m1\":10,\"a1\":510}}", &out, &near));
    lwt_near(out.drive[0], 2.5 * deg, 1e-15);
    lwt_near(out.drive[2], 0.01, 1e-15);
    assert_true(!out.has_drive[1] && out.near == NULL);

    assert_true(posture(doc, "{\"joints\":{\"elbow\":0.5,\"strut-1\":0.52,\"cross.second\":-1,"
                             "\"ball\":{\"rotation_vector\":{\"x\":0,\"y\":0,\"z\":1}}}}",
                        &out, &near));
    lwt_same(out.coord[lwd_document_coord(doc, "elbow")], 0.5);
    lwt_near(out.coord[lwd_document_coord(doc, "strut-1")], 0.02, 1e-15);
    lwt_near(out.ball[0][3], sin(0.5), 1e-15);

    assert_true(posture(doc, "{\"bodies\":{\"plate\":{\"x\":1,\"y\":2,\"z\":3,\"rz\":1.5707963267"
                             "948966}}}", &out, &near));
    assert_int_equal(out.kind, LW_BY_BODIES);
    static const double quarter[9] = {0, -1, 0, 1, 0, 0, 0, 0, 1};
    lwt_near_n(out.body[4].rot, quarter, 9, 1e-15);

    assert_true(posture(doc, "{\"pose\":{\"x\":1,\"direction\":{\"x\":0,\"y\":0,\"z\":-2},"
                             "\"joints\":{\"screw\":12.5}},\"mode\":\"+1.-2\",\"near\":{\"joints\""
                             ":{\"elbow\":1}}}", &out, &near));
    assert_int_equal(out.pose.orient, LW_ORIENT_DIRECTION);
    lwt_same(out.pose.direction[2], -1.0);
    assert_true(out.pose.has_position[0] && !out.pose.has_position[1]);
    lwt_same(out.pose.joint_value[0], 12.5);
    assert_int_equal(out.mode.branch[1], 2);
    assert_ptr_equal(out.near, &near);
    assert_int_equal(near.kind, LW_BY_JOINTS); /* "joints" alone is a posture, not a pose */

    assert_true(posture(doc, "{\"drives\":{\"m1\":1},\"near\":{\"joints\":{\"screw\":1},\"z\":1}}",
                        &out, &near));
    assert_int_equal(near.kind, LW_BY_POSE); /* with a z it is a pose */
    lwd_document_free(doc);
}

static void refuses_postures_that_say_too_little_or_too_much(void **state)
{
    (void)state;
    static const char *const bad[][3] = {
        {"{}", "no-posture", ""},
        {"{\"mode\":\"+\"}", "no-posture", ""},
        {"{\"drives\":{}}", "too-few", "/drives"},
        {"{\"drives\":{\"m9\":1}}", "unknown-name", "/drives/m9"},
        {"{\"drives\":{\"m1\":\"1\"}}", "wrong-type", "/drives/m1"},
        {"{\"drives\":{\"m1\":1},\"joints\":{\"elbow\":1}}", "two-postures", "/joints"},
        {"{\"joints\":{}}", "too-few", "/joints"},
        {"{\"joints\":{\"weld\":1}}", "no-coordinate", "/joints/weld"},
        {"{\"joints\":{\"cross\":1}}", "unknown-name", "/joints/cross"},
        {"{\"joints\":{\"elbow.turn\":1}}", "unknown-name", "/joints/elbow.turn"},
        {"{\"bodies\":{\"bed\":{\"x\":0}}}", "unknown-name", "/bodies/bed"},
        {"{\"bodies\":{\"plate\":{\"x\":0,\"y\":0,\"rz\":0}}}", "missing-member",
         "/bodies/plate/z"},
        {"{\"bodies\":{\"plate\":{\"x\":0,\"y\":0,\"z\":0}}}", "no-orientation", "/bodies/plate"},
        {"{\"pose\":{}}", "empty-pose", "/pose"},
        {"{\"pose\":{\"x\":1,\"rx\":2}}", "unknown-member", "/pose/rx"},
        {"{\"pose\":{\"x\":1e9}}", "out-of-range", "/pose/x"},
        {"{\"pose\":{\"rz\":1,\"zyx\":{\"yaw\":1}}}", "two-orientations", "/pose/rz"},
        {"{\"pose\":{\"quaternion\":{\"w\":0,\"x\":0,\"y\":0,\"z\":0}}}", "quaternion-length",
         "/pose/quaternion"},
        {"{\"pose\":{\"direction\":{\"x\":0,\"y\":0,\"z\":0}}}", "zero-axis", "/pose/direction"},
        {"{\"pose\":{\"x\":1},\"mode\":\"left\"}", "unknown-mode", "/mode"},
        {"{\"pose\":{\"x\":1},\"mode\":7}", "wrong-type", "/mode"},
        {"{\"drives\":{\"m1\":1},\"near\":7}", "wrong-type", "/near"},
        {"{\"drives\":{\"m1\":1},\"near\":{}}", "no-posture", "/near"},
        {"{\"drives\":{\"m1\":1},\"near\":{\"drives\":{\"m1\":1},\"near\":{\"x\":1}}}",
         "nested-near", "/near/near"},
    };
    lwd_document *doc = read_everything();
    static lw_posture_ask out;
    static lw_posture_ask near;
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        if (posture(doc, bad[i][0], &out, &near) || strcmp(findings.item[0].code, bad[i][1]) != 0 ||
            strcmp(findings.item[0].pointer, bad[i][2]) != 0) {
            lwt_fail("%s: %s at '%s'", bad[i][0], findings.item[0].code, findings.item[0].pointer);
        }
    }
    lwd_document_free(doc);
}

/* ---- the demo line, and memory --------------------------------------------------------------- */

static void reads_the_demo_line(void **state)
{
    (void)state;
    static const struct {
        const char *name;
        size_t joints, rods, drives, outputs, modes;
    } demo[] = {
        {"tilt-table", 0, 6, 6, 6, 0},   {"belt-hopper", 3, 6, 3, 3, 2},
        {"lid-turner", 9, 12, 6, 4, 4},  {"label-stage", 12, 0, 4, 3, 2},
        {"case-packer", 6, 0, 6, 6, 8},
    };
    for (size_t i = 0; i < sizeof demo / sizeof demo[0]; i++) {
        char path[512];
        (void)snprintf(path, sizeof path, "%s/deploy/demo/%s.json", LWT_SOURCE_DIR, demo[i].name);
        char *text = read_file(path);
        lwd_document *doc = read_text(text);
        free(text);
        assert_int_equal(findings.n, 0);
        assert_string_equal(doc->spec.name, demo[i].name);
        assert_int_equal(doc->spec.n_rod, demo[i].rods);
        assert_int_equal(doc->spec.n_drive, demo[i].drives);
        assert_int_equal(doc->spec.n_output, demo[i].outputs);
        assert_true(doc->spec.n_joint >= demo[i].joints);
        assert_true(doc->spec.n_mode >= demo[i].modes);
        lwd_document_free(doc);
    }
}

static const char *sweep_text;

static void read_step(void *context, size_t n)
{
    char digest[LWD_DIGEST_SIZE];
    (void)context;
    (void)n;
    lwd_findings_init(&findings);
    lwd_document *doc =
        lwd_document_read_text(sweep_text, strlen(sweep_text), &findings, digest, NULL);
    assert_true((doc == NULL) == lwt_alloc_failed());
    assert_true(findings.no_memory == lwt_alloc_failed());
    lwd_document_free(doc);
}

static void survives_every_failing_allocation(void **state)
{
    (void)state;
    char *text = read_file(LWT_CASES_DIR "/faults/everything.json");
    sweep_text = text;
    assert_true(lwt_alloc_sweep(read_step, NULL, 1000) >= 8); /* ours */
    lwt_alloc_cjson(true);
    assert_true(lwt_alloc_sweep(read_step, NULL, 5000) >= 500); /* and the parser's */
    lwt_alloc_cjson(false);
    free(text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(converts_everything_to_si),
        cmocka_unit_test(keeps_couplings_in_document_units),
        cmocka_unit_test(keeps_readings_as_the_encoder_shows_them),
        cmocka_unit_test(reads_home_modes_and_checks),
        cmocka_unit_test(makes_rotations_of_tools),
        cmocka_unit_test(takes_metres_and_radians_as_they_are),
        cmocka_unit_test(reads_gears_and_open_ranges_of_drives),
        cmocka_unit_test(straightens_axes_up_to_a_tenth_of_a_degree),
        cmocka_unit_test(warns_where_parts_disagree),
        cmocka_unit_test(takes_a_swivel_s_axis_either_way_round),
        cmocka_unit_test(tells_several_faults_at_once),
        cmocka_unit_test(counts_what_is_more_than_is_served),
        cmocka_unit_test(reads_postures_in_the_question_s_units),
        cmocka_unit_test(refuses_postures_that_say_too_little_or_too_much),
        cmocka_unit_test(reads_the_demo_line),
        cmocka_unit_test(survives_every_failing_allocation),
    };
    return cmocka_run_group_tests_name("document", tests, NULL, NULL);
}
