/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files that put answers into words share. */
#ifndef LWC_ANSWER_PARTS_H
#define LWC_ANSWER_PARTS_H

#include "answer.h"

/* answer.c: one line a limit. */
void lwc_show_limits(lwc_text *out, const cJSON *limits);

/* answer_path.c: the tables of moves and of ways. */
void lwc_show_path(lwc_text *out, const cJSON *answer);
void lwc_show_travel(lwc_text *out, const cJSON *answer);

#endif
