/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the margin files share: margin.c asks the others, one file a margin, at a finished solution.
 * Called by the query functions only. */
#ifndef LWI_MARGIN_H
#define LWI_MARGIN_H

#include "rates.h"

/* Which margins the document's needs and drive figures make answerable. */
bool lwi_accuracy_asked(const lw_model *model);
bool lwi_load_asked(const lw_model *model);
bool lwi_speed_asked(const lw_model *model);

/* All margins and classes at a finished solution; `analysed`: the singularity part as well. */
void lwi_margin_at(lw_margin_answer *out, const lw_model *model, const lw_spec_tool *tool,
                   const lw_solution *solution, bool analysed, lw_work *work);

/* One file a margin. They read the rates in work and write out->margin[...]. */
void lwi_margin_accuracy(lw_margin_answer *out, const lw_model *model, const lwi_rates *rates,
                         lw_work *work);
void lwi_margin_load(lw_margin_answer *out, const lw_model *model, const lwi_rates *rates,
                     lw_work *work);
void lwi_margin_speed(lw_margin_answer *out, const lw_model *model, const lwi_rates *rates,
                      lw_work *work);
void lwi_margin_travel(lw_margin_answer *out, const lw_model *model, const lw_solution *solution);

/* The next choice of k of n in order of their numbers, ascending in pick; false after the last. */
bool lwi_next_subset(size_t *pick, size_t k, size_t n);

#define LWI_MARGIN_CAP LW_MARGIN_CAP

#endif
