/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A lane's scratch for models: the core's work objects, one a model, the least recently used given
 * up when there are too many. Each keeps its model alive. Called by the lane's thread only. */
#include "../codec/path_in.h"
#include "api.h"

static void slot_clear(lwd_lane_work *slot)
{
    lw_work_free(slot->work);
    lwd_held_drop(slot->held);
    *slot = (lwd_lane_work){.held = NULL};
}

void lwd_lane_clear(lwd_lane *lane)
{
    for (size_t i = 0; i < LWD_LANE_WORKS; i++) {
        slot_clear(&lane->work[i]);
    }
    lwd_buf_clear(&lane->scrap.body);
    lwd_path_room_free(lane->path);
    lane->path = NULL;
}

lw_work *lwd_lane_work_of(lwd_lane *lane, lwd_held *held)
{
    lwd_lane_work *slot = &lane->work[lane->last];
    lwd_lane_work *oldest = &lane->work[0];
    lw_work *work = NULL;
    lane->tick++;
    for (size_t i = 0; slot->held != held && i < LWD_LANE_WORKS; i++) {
        slot = &lane->work[i];
        if (slot->used < oldest->used) {
            oldest = slot;
        }
    }
    if (slot->held == held) {
        slot->used = lane->tick;
        lane->last = (size_t)(slot - lane->work);
        return slot->work;
    }
    if (lw_work_new(&work, held->model, NULL) != LW_OK) {
        return NULL;
    }
    slot_clear(oldest);
    *oldest = (lwd_lane_work){.held = lwd_held_keep(held), .work = work, .used = lane->tick};
    lane->last = (size_t)(oldest - lane->work);
    return work;
}
