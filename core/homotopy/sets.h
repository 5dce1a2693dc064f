/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solution sets of a model: one for forward questions (a square choice of drives given), one for
 * inverse questions of limbs without explicit solutions (tool pose given). Made or loaded before
 * the model is shared, immutable afterwards. */
#ifndef LWI_SETS_H
#define LWI_SETS_H

#include "certify.h"
#include "fibre.h"

#include <leeway/model.h>
#include <leeway/query.h>

typedef struct lwi_set {
    lwi_system *sys;
    lwi_fibre fibre;
    size_t n_drive; /* forward: the drives whose readings are inputs */
    size_t drive[LW_MAX_DRIVES];
} lwi_set;

enum { LWI_LOOSE = 6 };

/* Buffers of a question that tracks a set. */
typedef struct lwi_set_work {
    lwi_homotopy h;
    lwi_track_work track;
    lwi_hpoint end;
    lwi_state state;
    lwi_eval ev;
    lwi_certify_work certify;
    size_t n_loose; /* ends of paths that did not settle, kept in part */
    lwi_cx loose[LWI_LOOSE * LWI_HOM_OBSERVE];
    size_t n_end;
    lwi_cx *ends; /* packed ends of this question, LWI_HOM_POINTS at most */
} lwi_set_work;

void lwi_set_free(lwi_set *set);

/* Tracks the set to a target; real ends go to `take` as real states of set->sys (its inputs are in
 * work->state.given, value and rod_length_m already). take returns false if the end is no real
 * solution after all. */
typedef bool (*lwi_set_take)(void *context, const lwi_set *set, lwi_set_work *work);
typedef struct lwi_set_count {
    size_t finite, real, infinite, unsettled;
} lwi_set_count;
void lwi_set_solve(lwi_set_count *count, const lwi_set *set, const lwi_cx *target,
                   lwi_set_take take, void *context, lwi_set_work *work);
/* After lwi_set_solve: real states next to ends that did not settle, until take returns true. */
bool lwi_set_loose(const lwi_set *set, lwi_set_take take, void *context, lwi_set_work *work);

#endif
