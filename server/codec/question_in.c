/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions as JSON bodies. Every member is either understood or refused. */
#include "question_in.h"

#include <string.h>

#include "path_in.h"
#include "posture_in.h"

enum {
    M_TOOL = LWD_POSTURE_MEMBERS,
    M_UNITS,
    M_REF,
    M_REVISION,
    M_EXPECT,
    M_ORIENTATION,
    M_BATCH,
    M_OWN /* the members of one kind of question start here */
};
#define COMMON_TABLE                                                                               \
    LWD_POSTURE_TABLE, {"tool", false}, {"units", false}, {"ref", false}, {"revision", false},     \
        {"expect", false}, {"orientation", false}, {"batch", false}

static const lwd_member inverse_table[] = {COMMON_TABLE};

enum { M_ALL = M_OWN };
static const lwd_member forward_table[] = {COMMON_TABLE, {"all", false}};

enum { M_POINT = M_OWN, M_IN };
static const lwd_member jacobian_table[] = {COMMON_TABLE, {"point", false}, {"in", false}};

/* How far one looks and how long one works stand at the same places in all that take them. */
enum { M_TIMEOUT = M_OWN, M_BUDGET, M_MARGIN_MIN, M_FROM, M_THROUGH, M_CERTIFICATE };
enum { M_DISTANCE = M_BUDGET, M_REACH = M_FROM };
static const lwd_member margin_table[] = {COMMON_TABLE, {"timeout_ms", false}, {"distance", false}};
#define EFFORT_TABLE COMMON_TABLE, {"timeout_ms", false}, {"budget", false}, {"margin_min", false}
static const lwd_member reach_table[] = {EFFORT_TABLE, {"from", false}};
static const lwd_member path_table[] = {
    EFFORT_TABLE, {"from", true}, {"through", true}, {"certificate", false}};
static const lwd_member travel_table[] = {EFFORT_TABLE, {"reach", false}};

typedef struct kind_table {
    const lwd_member *member;
    size_t n;
    bool posture[LWD_POSTURE_MEMBERS]; /* which members of a posture the question takes */
    const char *takes;                 /* the same in words */
    bool alone;                        /* takes no batch */
} kind_table;

#define TABLE(t) (t), sizeof(t) / sizeof((t)[0])
static const kind_table kinds[LWD_ASK_COUNT] = {
    [LWD_ASK_INVERSE] = {TABLE(inverse_table), {false, true, true, false, false, true},
                         "a pose, a mode, near", false},
    [LWD_ASK_FORWARD] = {TABLE(forward_table), {true, false, false, false, false, true},
                         "drives, near, all", false},
    [LWD_ASK_JACOBIAN] = {TABLE(jacobian_table), {true, true, true, true, true, true},
                          "a posture, point, in", false},
    [LWD_ASK_MARGIN] = {TABLE(margin_table), {true, true, true, true, true, true},
                        "a posture, distance", false},
    [LWD_ASK_REACH] = {TABLE(reach_table), {false, true, true, false, false, false},
                       "a pose, from, mode, margin_min", false},
    [LWD_ASK_PATH] = {TABLE(path_table), {false, false, false, false, false, false},
                      "from, through, margin_min, certificate", true},
    [LWD_ASK_TRAVEL] = {TABLE(travel_table), {true, true, true, true, true, true},
                        "a posture, reach, margin_min", true},
};
_Static_assert((int)M_CERTIFICATE < (int)LWD_QUESTION_MEMBERS, "room for every member");

static bool clean(const lwd_reader *r)
{
    return r->findings->n_error == 0 && !r->findings->no_memory;
}

static bool parts_read(lwd_question_parts *parts)
{
    const kind_table *table = &kinds[parts->kind];
    for (size_t i = 0; i < LWD_QUESTION_MEMBERS; i++) {
        parts->member[i].node = NULL;
    }
    return lwd_read_members(&parts->self, table->member, table->n, parts->member)
           && clean(&parts->self);
}

/* ---- bodies and batches -------------------------------------------------------------------- */

/* What a batch's envelope may give for all its members. */
static bool member_is_common(size_t i)
{
    return i == M_TOOL || i == M_UNITS || i == M_REVISION || i == M_EXPECT || i == M_ORIENTATION;
}

bool lwd_question_body_read(const lwd_reader *root, lwd_asked kind, lwd_question_body *body)
{
    body->is_batch = false;
    body->n_batch = 0;
    body->single.kind = kind;
    body->single.self = *root;
    if (!parts_read(&body->single)) {
        return false;
    }
    const lwd_reader *member = body->single.member;
    if (!lwd_is_given(&member[M_BATCH])) {
        return true;
    }
    if (kinds[kind].alone) {
        LWD_TELL(&member[M_BATCH], "unknown-member", kinds[kind].takes, NULL,
                 "The question %s takes no batch; ask one after the other.", lwd_asked_word(kind));
        return false;
    }
    body->is_batch = true;
    body->batch = member[M_BATCH];
    if (!lwd_want_array(&body->batch, 1, LWD_BATCH_MAX, "questions")) {
        return false;
    }
    body->n_batch = lwd_count(&body->batch);
    for (size_t i = 0; i < kinds[kind].n; i++) {
        if (i != M_BATCH && i != M_REF && lwd_is_given(&member[i]) && !member_is_common(i)) {
            LWD_TELL(&member[i], "beside-batch", "the member inside each question of the batch",
                     NULL, "Beside \"batch\" only tool, units, revision, expect, orientation and "
                           "ref may stand; put this into the questions of the batch.");
        }
    }
    return clean(root);
}

bool lwd_question_member_read(const lwd_reader *member, const lwd_question_parts *common,
                              lwd_question_parts *parts)
{
    parts->kind = common->kind;
    parts->self = *member;
    if (!parts_read(parts)) {
        return false;
    }
    if (lwd_is_given(&parts->member[M_BATCH])) {
        LWD_TELL(&parts->member[M_BATCH], "batch-in-batch", "one question", NULL,
                 "A batch holds single questions, not further batches.");
        return false;
    }
    for (size_t i = 0; i < M_OWN; i++) {
        if (member_is_common(i) && !lwd_is_given(&parts->member[i])) {
            parts->member[i] = common->member[i];
        }
    }
    return true;
}

/* ---- the head ------------------------------------------------------------------------------ */

bool lwd_ref_ok(const char *text)
{
    size_t n = strlen(text);
    for (size_t i = 0; i < n; i++) {
        if ((unsigned char)text[i] < 0x20 || (unsigned char)text[i] > 0x7e) {
            return false;
        }
    }
    return n >= 1 && n <= LWD_REF_MAX;
}

bool lwd_expect_parse(const char *text, char out[LWD_EXPECT_MAX + 1])
{
    size_t n = strlen(text);
    if (n != 8 && n != LWD_EXPECT_MAX) {
        return false;
    }
    for (size_t i = 0; i <= n; i++) {
        char c = text[i];
        if (c >= 'A' && c <= 'F') {
            c = (char)(c - 'A' + 'a');
        }
        if (i < n && !((c >= '0' && c <= '9') || (c >= 'a' && c <= 'f'))) {
            return false;
        }
        out[i] = c;
    }
    return true;
}

bool lwd_expect_holds(const lwd_question_head *head, const char *digest)
{
    return strncmp(head->expect, digest, strlen(head->expect)) == 0;
}

bool lwd_question_head_read(const lwd_question_parts *parts, lwd_question_head *head)
{
    const lwd_reader *m = parts->member;
    const char *text = NULL;
    long revision = 0;
    head->has_ref = false;
    head->ref[0] = '\0';
    head->expect[0] = '\0';
    if (lwd_read_text(&m[M_REF], LWD_REF_MAX, &text)) {
        if (lwd_ref_ok(text)) {
            head->has_ref = true;
            lwd_text_copy(head->ref, sizeof head->ref, text);
        } else {
            LWD_TELL(&m[M_REF], "bad-ref", "1 to 32 printable ASCII characters", NULL,
                     "A ref is 1 to 32 printable ASCII characters; it is sent back unchanged.");
        }
    }
    (void)lwd_read_int(&m[M_REVISION], 1, 1000000000, &revision);
    head->revision = revision;
    if (lwd_read_text(&m[M_EXPECT], LWD_EXPECT_MAX, &text)
        && !lwd_expect_parse(text, head->expect)) {
        head->expect[0] = '\0';
        LWD_TELL(&m[M_EXPECT], "bad-digest", "8 or 64 hex digits", NULL,
                 "expect takes a digest as answers show it, or its first 8 digits.");
    }
    return clean(&parts->self);
}

/* ---- the rest ------------------------------------------------------------------------------ */

void lwd_question_clear(lwd_question *q, lwd_asked kind, const lwd_question_head *head,
                        const lwd_edge *edge)
{
    q->kind = kind;
    q->head = *head;
    q->units = edge->units;
    q->tool = 0;
    q->tool_is_written = false;
    q->form = LWD_FORM_DEFAULT;
    q->posture.kind = LW_BY_NOTHING;
    q->posture.has_mode = false;
    q->posture.near = NULL;
    q->has_from = false;
    q->from.near = NULL;
    q->any_mode = false;
    q->all = false;
    q->has_point = false;
    q->in_tool = false;
    q->has_margin_min = false;
    q->margin_min_is_number = false;
    q->margin_min_number = 0.0;
    memset(&q->margin_min, 0, sizeof q->margin_min);
    q->budget = 0;
    q->timeout_ms = 0;
    q->certificate = false;
    q->travel_m = 0.0;
    q->travel_rad = 0.0;
    q->has_distance = false;
}

static bool mode_of(const void *user, const char *text, lw_mode *out)
{
    return lwd_edge_mode_parse(user, text, out);
}

static void read_units(const lwd_reader *r, lwd_units *units)
{
    static const lwd_member table[] = {{"length", false}, {"angle", false}};
    static const char *const length[] = {"mm", "m"};
    static const char *const angle[] = {"deg", "rad"};
    lwd_reader m[2];
    size_t i = 0;
    if (!lwd_is_given(r) || !lwd_read_members(r, table, 2, m)) {
        return;
    }
    if (lwd_read_word(&m[0], length, 2, &i)) {
        units->metres = i == 1;
    }
    if (lwd_read_word(&m[1], angle, 2, &i)) {
        units->radians = i == 1;
    }
}

enum { LENGTH_MOST = 1000000 }; /* of a written tool's or a point's coordinates */

static void read_tool_written(const lwd_reader *r, const lwd_edge *edge, lwd_question *q)
{
    static const lwd_member table[] = {
        {"name", false}, {"body", true}, {"at", true}, {"orientation", false}};
    lw_spec_tool *tool = &q->tool_written;
    const char *body = NULL;
    double at[3];
    lwd_reader m[4];
    if (!lwd_read_members(r, table, 4, m)) {
        return;
    }
    memset(tool, 0, sizeof *tool);
    lwd_text_copy(tool->name, sizeof tool->name, "written");
    (void)lwd_read_name(&m[0], tool->name);
    if (lwd_read_text(&m[1], LW_NAME_SIZE - 1, &body)) {
        tool->body = lwd_document_body(edge->document, body);
        if (tool->body == SIZE_MAX) {
            LWD_TELL(&m[1], "unknown-name", "the name of a body", NULL,
                     "The mechanism has no body of this name.");
        } else if (tool->body == edge->spec->frame) {
            LWD_TELL(&m[1], "fixed-body", "the name of a moving body", NULL,
                     "This body is the fixed one: a tool on it never moves. Name the body that "
                     "carries the tool.");
        }
    }
    if (lwd_read_vec3(&m[2], LENGTH_MOST, at)) {
        for (size_t i = 0; i < 3; i++) {
            tool->frame.pos_m[i] = lwd_length_in(q->units, at[i]);
        }
    }
    tool->frame.rot[0] = tool->frame.rot[4] = tool->frame.rot[8] = 1.0;
    if (lwd_is_given(&m[3])) {
        (void)lwd_rotation_in(&m[3], q->units, tool->frame.rot);
    }
    q->tool_is_written = true;
}

static void read_tool(const lwd_reader *r, const lwd_edge *edge, lwd_question *q)
{
    const char *name = NULL;
    if (!lwd_is_given(r)) {
        return;
    }
    if (!lwd_is_text(r)) {
        read_tool_written(r, edge, q);
        return;
    }
    if (lwd_read_text(r, LW_NAME_SIZE - 1, &name)) {
        q->tool = lwd_edge_tool(edge, name);
        if (q->tool == SIZE_MAX) {
            q->tool = 0;
            LWD_TELL(r, "unknown-name", "the name of a tool", NULL,
                     "This revision has no tool of this name; its first tool is \"%s\".",
                     edge->spec->tool[0].name);
        }
    }
}

static const char *const form_word[] = {"quaternion", "zyx", "rotation_vector", "direction", "rz"};
enum { FORM_WORDS = sizeof form_word / sizeof form_word[0] };

/* The form a pose was asked in is the form it is answered in. */
static lwd_form form_of_pose(const lwd_reader *pose)
{
    lwd_reader child;
    for (bool more = lwd_first(pose, &child); more; more = lwd_next(&child)) {
        for (size_t i = 0; i < FORM_WORDS; i++) {
            if (child.name != NULL && strcmp(child.name, form_word[i]) == 0) {
                return (lwd_form)(LWD_FORM_QUATERNION + i);
            }
        }
    }
    return LWD_FORM_DEFAULT;
}

/* That of the first move which has one. */
static lwd_form form_of_moves(const lwd_reader *through)
{
    lwd_form form = LWD_FORM_DEFAULT;
    lwd_reader move;
    lwd_reader pose;
    for (bool more = lwd_first(through, &move); more && form == LWD_FORM_DEFAULT;
         more = lwd_next(&move)) {
        if (lwd_find(&move, "pose", &pose)) {
            form = form_of_pose(&pose);
        }
    }
    return form;
}

static void read_form(const lwd_question_parts *parts, lwd_question *q)
{
    size_t i = 0;
    if (lwd_read_word(&parts->member[M_ORIENTATION], form_word, FORM_WORDS, &i)) {
        q->form = (lwd_form)(LWD_FORM_QUATERNION + i);
    } else if (parts->kind == LWD_ASK_PATH) {
        q->form = form_of_moves(&parts->member[M_THROUGH]);
    } else {
        q->form = form_of_pose(&parts->member[LWD_POSTURE_POSE]);
    }
}

int lwd_margin_of(const char *word)
{
    for (int i = 0; i < LW_MARGIN_COUNT; i++) {
        if (strcmp(lw_margin_word((lw_margin_name)i), word) == 0) {
            return i;
        }
    }
    return -1;
}

enum { MARGIN_MOST = 1000000 };

static void read_margin_min(const lwd_reader *r, lwd_question *q)
{
    lwd_member table[LW_MARGIN_COUNT];
    lwd_reader m[LW_MARGIN_COUNT];
    if (!lwd_is_given(r)) {
        return;
    }
    q->has_margin_min = true;
    if (lwd_count(r) == 0 && lwd_read_number(r, 0.0, MARGIN_MOST, &q->margin_min_number)) {
        q->margin_min_is_number = true;
        return;
    }
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        table[i] = (lwd_member){lw_margin_word((lw_margin_name)i), false};
    }
    if (!clean(r) || !lwd_read_members(r, table, LW_MARGIN_COUNT, m)) {
        return;
    }
    for (size_t i = 0; i < LW_MARGIN_COUNT; i++) {
        q->margin_min.asked[i] = lwd_read_number(&m[i], 0.0, MARGIN_MOST, &q->margin_min.value[i]);
    }
}

static void read_whole(const lwd_reader *r, long most, int64_t *out)
{
    long n = 0;
    if (lwd_read_int(r, 1, most, &n)) {
        *out = n;
    }
}

/* Members that stand at the same places in reach, path and free-travel. */
static void read_effort(const lwd_reader *m, lwd_question *q)
{
    read_margin_min(&m[M_MARGIN_MIN], q);
    read_whole(&m[M_BUDGET], LW_PATH_BUDGET_MOST, &q->budget);
    read_whole(&m[M_TIMEOUT], LWD_TIMEOUT_MOST, &q->timeout_ms);
}

/* {"position": .., "angle": ..}: how far free-travel looks. */
static void read_travel(const lwd_reader *r, lwd_question *q)
{
    static const lwd_member table[] = {{"position", false}, {"angle", false}};
    const double turn_most = 6.283185307179586;
    double value = 0.0;
    lwd_reader m[2];
    if (!lwd_is_given(r) || !lwd_read_members(r, table, 2, m)) {
        return;
    }
    if (lwd_read_positive(&m[0], lwd_length_out(q->units, 1e3), &value)) {
        q->travel_m = lwd_length_in(q->units, value);
    }
    if (lwd_read_positive(&m[1], lwd_angle_out(q->units, turn_most), &value)) {
        q->travel_rad = lwd_angle_in(q->units, value);
    }
}

static void read_distance(const lwd_reader *m, lwd_question *q)
{
    static const lwd_member table[] = {{"budget", false}};
    lwd_reader budget;
    q->has_distance = lwd_is_given(&m[M_DISTANCE])
                      && lwd_read_members(&m[M_DISTANCE], table, 1, &budget);
    if (q->has_distance) {
        read_whole(&budget, LWD_DISTANCE_BUDGET_MOST, &q->budget);
    }
    read_whole(&m[M_TIMEOUT], LWD_TIMEOUT_MOST, &q->timeout_ms);
}

static void read_own(const lwd_question_parts *parts, const lwd_posture_scope *scope,
                     lwd_question *q)
{
    static const char *const in_word[] = {"fixed", "tool"};
    const lwd_reader *m = parts->member;
    double point[3];
    size_t i = 0;
    switch (parts->kind) {
    case LWD_ASK_INVERSE:
    case LWD_ASK_COUNT:
        break;
    case LWD_ASK_FORWARD:
        (void)lwd_read_bool(&m[M_ALL], &q->all);
        break;
    case LWD_ASK_JACOBIAN:
        if (lwd_read_vec3(&m[M_POINT], LENGTH_MOST, point)) {
            q->has_point = true;
            for (size_t k = 0; k < 3; k++) {
                q->point_m[k] = lwd_length_in(q->units, point[k]);
            }
        }
        q->in_tool = lwd_read_word(&m[M_IN], in_word, 2, &i) && i == 1;
        break;
    case LWD_ASK_MARGIN:
        read_distance(m, q);
        break;
    case LWD_ASK_REACH:
        q->has_from = lwd_is_given(&m[M_FROM])
                      && lwd_posture_in(&m[M_FROM], scope, &q->from, &q->from_near);
        read_effort(m, q);
        break;
    case LWD_ASK_PATH:
        q->has_from = lwd_is_given(&m[M_FROM])
                      && lwd_posture_in(&m[M_FROM], scope, &q->from, &q->from_near);
        read_effort(m, q);
        (void)lwd_read_bool(&m[M_CERTIFICATE], &q->certificate);
        lwd_path_in(&m[M_THROUGH], scope, q->path);
        break;
    case LWD_ASK_TRAVEL:
        read_effort(m, q);
        read_travel(&m[M_REACH], q);
        break;
    }
}

/* Tells members of a posture that this question does not take. */
static void refuse_others(const lwd_question_parts *parts)
{
    const kind_table *table = &kinds[parts->kind];
    for (size_t i = 0; i < LWD_POSTURE_MEMBERS; i++) {
        if (!table->posture[i] && lwd_is_given(&parts->member[i])) {
            LWD_TELL(&parts->member[i], "unknown-member", table->takes, NULL,
                     "The question %s takes %s, not \"%s\".", lwd_asked_word(parts->kind),
                     table->takes, table->member[i].name);
        }
    }
}

static void read_posture(const lwd_question_parts *parts, const lwd_posture_scope *scope,
                         lwd_question *q)
{
    const lwd_reader *m = parts->member;
    lwd_reader part[LWD_POSTURE_MEMBERS];
    const char *text = NULL;
    refuse_others(parts);
    if (!clean(&parts->self) || parts->kind == LWD_ASK_PATH) {
        return;
    }
    memcpy(part, m, sizeof part);
    if (parts->kind == LWD_ASK_REACH && lwd_is_text(&part[LWD_POSTURE_MODE])
        && lwd_read_text(&part[LWD_POSTURE_MODE], LW_MODE_TEXT_SIZE - 1, &text)
        && strcmp(text, "any") == 0) {
        q->any_mode = true;
        part[LWD_POSTURE_MODE].node = NULL;
    }
    size_t needed = parts->kind == LWD_ASK_FORWARD ? LWD_POSTURE_DRIVES : LWD_POSTURE_POSE;
    bool whole = parts->kind == LWD_ASK_JACOBIAN || parts->kind == LWD_ASK_MARGIN
                 || parts->kind == LWD_ASK_TRAVEL;
    if (!whole && !lwd_is_given(&part[needed])) {
        const char *name = kinds[parts->kind].member[needed].name;
        LWD_TELL(&part[needed], "missing-member", name, "nothing",
                 "The question %s needs the member \"%s\".", lwd_asked_word(parts->kind), name);
        return;
    }
    (void)lwd_posture_read(&parts->self, part, scope, false, &q->posture, &q->near);
}

bool lwd_question_read(const lwd_question_parts *parts, const lwd_question_head *head,
                       const lwd_edge *edge, lwd_question *out)
{
    lwd_question_clear(out, parts->kind, head, edge);
    read_units(&parts->member[M_UNITS], &out->units);
    lwd_posture_scope scope = {
        .document = edge->document, .units = out->units, .mode = mode_of, .user = edge};
    read_tool(&parts->member[M_TOOL], edge, out);
    read_form(parts, out);
    read_posture(parts, &scope, out);
    read_own(parts, &scope, out);
    return clean(&parts->self);
}
