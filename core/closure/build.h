/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files that build a closure system share: the scratch of one build. Owned by
 * build_new.c. */
#ifndef LWI_CLOSURE_BUILD_H
#define LWI_CLOSURE_BUILD_H

#include "system.h"

#include <stdint.h>

typedef struct lwi_builder {
    lwi_system *sys;
    const lwi_build_ask *ask;
    const lw_spec *spec;
    lw_err *err;
    size_t root[LW_MAX_BODIES];  /* fused class of a body */
    size_t group[LW_MAX_BODIES]; /* union-find over classes while choosing the tree */
    bool in_tree[LW_MAX_JOINTS];
    int class_node[LW_MAX_BODIES];
    uint64_t ancestor[LWI_MAX_NODES][LWI_MAX_ELEMENTS / 64];
} lwi_builder;

/* The representative of i in a union-find forest. */
size_t lwi_union_find(size_t *link, size_t i);

/* The tree, in this order. False: a limit was met, *err says which. */
void lwi_builder_known(lwi_builder *b);
void lwi_builder_choose(lwi_builder *b);
bool lwi_builder_grow(lwi_builder *b);
/* True where some coordinate of the joint must appear as an element. */
bool lwi_builder_keeps(const lwi_builder *b, size_t joint);
/* A new node, -1 where there is no room. */
int lwi_builder_node(lwi_builder *b);
/* Elements of joint j from the node of one body to `child`, which is its other body's node. */
bool lwi_builder_joint(lwi_builder *b, size_t j, int parent, int child, bool reversed);

/* The rows. False as above. */
bool lwi_builder_cuts(lwi_builder *b);
bool lwi_builder_rods(lwi_builder *b);
bool lwi_builder_couplings(lwi_builder *b);
bool lwi_builder_spin_locks(lwi_builder *b);

#endif
