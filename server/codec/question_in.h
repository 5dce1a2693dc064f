/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions in: from a JSON body or from a query string to lwd_question. Two steps, since the
 * mechanism is looked up between them: the head says which revision is asked, the rest is
 * understood with that revision's names and units. Faults are told in the findings with JSON
 * pointers into the body ("/" and the member's name for query strings). One thread a call. */
#ifndef LWD_QUESTION_IN_H
#define LWD_QUESTION_IN_H

#include "../exchange.h"
#include "json_in.h"
#include "question.h"

enum { LWD_QUESTION_MEMBERS = 24 };

/* The members of one question, found but not yet understood. */
typedef struct lwd_question_parts {
    lwd_asked kind;
    lwd_reader self;
    lwd_reader member[LWD_QUESTION_MEMBERS];
} lwd_question_parts;

/* A body: one question, or {"batch": [...]} with members that hold for all of it. */
typedef struct lwd_question_body {
    bool is_batch;
    size_t n_batch;
    lwd_reader batch;           /* go through it with lwd_first and lwd_next */
    lwd_question_parts single;  /* the question, or what a batch gives for all its members */
} lwd_question_body;

/* `body` must stay where it is, and `root` with it, until the last decode: readers point at their
 * parents. False with an error in the findings of `root`. */
bool lwd_question_body_read(const lwd_reader *root, lwd_asked kind, lwd_question_body *body);

/* One member of a batch; revision, tool, units, orientation and expect come from `common` where the
 * member does not give its own. `member` must stay where it is until the decode. */
bool lwd_question_member_read(const lwd_reader *member, const lwd_question_parts *common,
                              lwd_question_parts *parts);

/* First step: ref, revision, expect. */
bool lwd_question_head_read(const lwd_question_parts *parts, lwd_question_head *head);

/* Second step: all the rest, with the names and units of the revision found. */
bool lwd_question_read(const lwd_question_parts *parts, const lwd_question_head *head,
                       const lwd_edge *edge, lwd_question *out);

/* The same for the query string of GET .../margin and GET .../reach, and of a path whose moves come
 * as a table. Pointers are "/<name>". */
bool lwd_query_head_read(const lwd_pair *query, size_t n, lwd_asked kind, lwd_findings *findings,
                         lwd_question_head *head);
bool lwd_query_read(const lwd_pair *query, size_t n, const lwd_question_head *head,
                    const lwd_edge *edge, lwd_asked kind, lwd_findings *findings,
                    lwd_question *out);

/* Whether an answering revision is the one the question expects. */
bool lwd_expect_holds(const lwd_question_head *head, const char *digest);

/* ---- shared by the two decoders ---- */

void lwd_question_clear(lwd_question *q, lwd_asked kind, const lwd_question_head *head,
                        const lwd_edge *edge);
/* Printable ASCII, at most 32. */
bool lwd_ref_ok(const char *text);
/* 8 or 64 hex digits, to lower case. */
bool lwd_expect_parse(const char *text, char out[LWD_EXPECT_MAX + 1]);
/* "accuracy" ... to its number; -1 if there is none. */
int lwd_margin_of(const char *word);

#endif
