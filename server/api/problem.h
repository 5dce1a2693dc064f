/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Problem replies of the API room; the general writer lwd_problem_reply is in ../exchange.h. */
#ifndef LWD_API_PROBLEM_H
#define LWD_API_PROBLEM_H

#include "../codec/findings.h"
#include "../exchange.h"
#include "problem_codes.h"

/* Status, code, slug and title of the list; detail, pointer and so on are empty. */
lwd_problem lwd_problem_of(lwd_problem_id id);

/* Which problem a decoder's finding is: by its code word, LWD_PROBLEM_VALUE if the word is none of
 * those that have a problem of their own. */
lwd_problem_id lwd_problem_of_finding(const lwd_finding *finding);

/* A reply made of the first error of a list (there must be one, or no_memory). All errors of the
 * list, at most 16, go out as "findings". */
void lwd_problem_reply_findings(lwd_reply *reply, const lwd_request *request,
                                const lwd_findings *findings);
/* The same, but the problem is `id` whatever the first finding says (a refused document). */
void lwd_problem_reply_refused(lwd_reply *reply, const lwd_request *request, lwd_problem_id id,
                               const lwd_findings *findings);

/* True if an Accept value likes text/plain better than JSON. */
bool lwd_prefers_plain(const char *accept);
/* Whether the client wants a table rather than JSON. */
bool lwd_prefers_csv(const char *accept);

#endif
