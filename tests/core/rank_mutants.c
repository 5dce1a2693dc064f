/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A second copy of core/proof/rank.c, under other names, whose error terms can be left out one at a
 * time: test_proof_rank.c must see false proofs then. */
extern int rank_mutant;
int rank_mutant;

#define LWI_RANK_MUTANT rank_mutant
#define lwi_rank_prepare mutant_rank_prepare
#define lwi_rank_prepare_with mutant_rank_prepare_with
#define lwi_rank_at_least mutant_rank_at_least
#define lwi_rank_most mutant_rank_most
#define lwi_rank_above mutant_rank_above
#include "proof/rank.c"
