/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Answers, findings and problem documents in words. Members this program does not know are shown
 * by name after those it knows, so nothing the service says gets lost. */
#ifndef LWC_ANSWER_H
#define LWC_ANSWER_H

#include "http.h"
#include "json.h"

/* Meaning of a verdict code (1 to 9) in words, and what to do next; for others a neutral text. */
const char *lwc_verdict_meaning(long code);
const char *lwc_verdict_next(long code);

/* 0 for code 1, 1 for any other verdict, 2 where a member of a batch was refused or no code
 * came. A batch counts as its worst member. */
int lwc_answer_exit(const cJSON *answer);

/* An answer to a question of this kind ("inverse", ...), a batch included. */
void lwc_show_answer(lwc_text *out, const char *kind, const cJSON *answer, bool colour);

/* The array of findings in an answer to load, in a report, or in a problem document; NULL where
 * there is none. */
const cJSON *lwc_findings(const cJSON *answer);
/* The findings one by one, the worst first. Returns their number. */
size_t lwc_show_findings(lwc_text *out, const cJSON *findings);

/* Their codes, each once, with commas between; those of one severity, or all for NULL. */
void lwc_finding_codes(lwc_text *out, const cJSON *findings, const char *severity);

/* A problem document in words, one of a batch for example. */
void lwc_show_problem(lwc_text *out, const cJSON *problem);

/* A refusal in words: sentence, pointer, expected, got, next. `asked` names the command for
 * hints. `problem` is NULL where the body was no JSON. */
void lwc_show_refusal(lwc_text *out, const lwc_http *http, const char *asked,
                      const lwc_reply *reply, const cJSON *problem);

#endif
