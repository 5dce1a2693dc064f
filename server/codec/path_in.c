/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Moves as JSON, and the room that a path takes. See path_in.h. */
#include "path_in.h"

#include <stdlib.h>
#include <string.h>

#include "question_in.h"

lwd_path *lwd_path_room_new(void)
{
    return calloc(1, sizeof(lwd_path));
}

bool lwd_path_room_pieces(lwd_path *path)
{
    if (path->piece == NULL) {
        path->piece = calloc(LWD_PIECES_MAX, sizeof *path->piece);
    }
    return path->piece != NULL;
}

void lwd_path_room_free(lwd_path *path)
{
    if (path != NULL) {
        free(path->piece);
        free(path);
    }
}

static const char *const kind_word[] = {"line", "circle", "joints"};
enum { KINDS = sizeof kind_word / sizeof kind_word[0] };

const char *lwd_move_word(lw_move_kind kind)
{
    return (unsigned)kind < KINDS ? kind_word[kind] : "?";
}

/* Absent, and told so, where `needed`; present, and told so, where it has no use. */
static void want(const lwd_reader *r, bool needed, lw_move_kind kind)
{
    if (needed && !lwd_is_given(r)) {
        LWD_TELL(r, "missing-member", r->name, "nothing",
                 "A move of the kind %s needs the member \"%s\".", lwd_move_word(kind), r->name);
    } else if (!needed && lwd_is_given(r)) {
        LWD_TELL(r, "unknown-member", kind == LW_MOVE_JOINTS ? "drives or pose" : "pose", NULL,
                 "A move of the kind %s takes no \"%s\".", lwd_move_word(kind), r->name);
    }
}

/* A point on the way: its turn would say nothing, so it is refused rather than ignored. */
static void read_via(const lwd_reader *r, const lwd_posture_scope *scope, lw_pose_ask *out)
{
    if (lwd_is_given(r) && lwd_pose_in(r, scope, out)
        && (out->orient != LW_ORIENT_NONE || out->n_joint > 0)) {
        LWD_TELL(r, "bad-via", "x, y and z alone", NULL,
                 "The circle passes through the point via, and the tool turns evenly from the "
                 "start to the end: give x, y and z alone.");
    }
}

static void read_ends(const lwd_reader *m, const lwd_posture_scope *scope, lw_move *move)
{
    enum { POSE, VIA, DRIVES };
    lw_move_kind kind = move->kind;
    if (kind != LW_MOVE_JOINTS) {
        want(&m[POSE], true, kind);
        want(&m[DRIVES], false, kind);
    } else if (lwd_is_given(&m[POSE]) && lwd_is_given(&m[DRIVES])) {
        LWD_TELL(&m[DRIVES], "two-postures", "drives or pose", NULL,
                 "The move's end is given by \"pose\" already; leave one of the two out.");
    } else if (!lwd_is_given(&m[POSE])) {
        want(&m[DRIVES], true, kind);
    }
    want(&m[VIA], kind == LW_MOVE_CIRCLE, kind);
    read_via(&m[VIA], scope, &move->via);
    if (lwd_is_given(&m[POSE])) {
        (void)lwd_pose_in(&m[POSE], scope, &move->pose);
    }
    if (lwd_is_given(&m[DRIVES])) {
        lw_posture_ask readings;
        move->has_drives = lwd_readings_in(&m[DRIVES], scope, &readings);
        memcpy(move->has_drive, readings.has_drive, sizeof move->has_drive);
        memcpy(move->drive, readings.drive, sizeof move->drive);
    }
}

static void read_move(const lwd_reader *r, const lwd_posture_scope *scope, lw_move *move,
                      char line[LWD_REF_MAX + 1])
{
    static const lwd_member table[] = {
        {"line", false}, {"move", true}, {"pose", false}, {"via", false}, {"drives", false}};
    lwd_reader m[5];
    const char *text = NULL;
    size_t kind = 0;
    memset(move, 0, sizeof *move);
    line[0] = '\0';
    if (!lwd_read_members(r, table, 5, m)) {
        return;
    }
    if (lwd_read_text(&m[0], LWD_REF_MAX, &text)) {
        if (lwd_ref_ok(text)) {
            lwd_text_copy(line, LWD_REF_MAX + 1, text);
        } else {
            LWD_TELL(&m[0], "bad-line", "1 to 32 printable ASCII characters", NULL,
                     "A line's tag is 1 to 32 printable ASCII characters; it is sent back "
                     "unchanged.");
        }
    }
    if (lwd_read_word(&m[1], kind_word, KINDS, &kind)) {
        move->kind = (lw_move_kind)kind;
        read_ends(&m[2], scope, move);
    }
}

void lwd_path_in(const lwd_reader *through, const lwd_posture_scope *scope, lwd_path *path)
{
    lwd_reader child;
    path->n = 0;
    if (!lwd_is_given(through) || !lwd_want_array(through, 1, LW_MAX_MOVES, "moves")) {
        return;
    }
    for (bool more = lwd_first(through, &child); more; more = lwd_next(&child)) {
        path->row[path->n] = 0;
        read_move(&child, scope, &path->move[path->n], path->line[path->n]);
        path->n++;
    }
}
