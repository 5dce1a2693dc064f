/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Complete solution sets in tests: mechanisms loaded with their sets prepared, questions for all
 * solutions, and what every list of solutions must satisfy. */
#ifndef LWT_ALL_H
#define LWT_ALL_H

#include "lwt_build.h"

enum { LWT_PATHS = 200000 }; /* a budget that every mechanism of the tests keeps well below */

/* Like lwt_machine_load, with the solution sets made before the work object. */
void lwt_machine_load_prepared(lwt_machine *m, unsigned long long seed, unsigned long max_paths);
/* What the model now says of its sets; borrowed until the model is freed. */
const lw_set_info *lwt_forward_set(const lwt_machine *m);
const lw_set_info *lwt_inverse_set(const lwt_machine *m);

/* Every forward solution; outcome and counts are left to the caller. lwt_inverse without mode and
 * `near` is its counterpart. */
const lw_forward_answer *lwt_forward_all(lwt_machine *m, const double *drive);

/* Readings that these lengths of the driven rods stand for, one drive a rod. */
void lwt_readings_of_lengths(double *drive, const lwt_machine *m, const double *length_m);

/* Two solutions are one posture where tool, joints, rods and drives stand in the same places, up to
 * `tol` (over 1 m, or rad): written apart from the core's own comparison. */
bool lwt_same_posture(const lw_spec *spec, const lw_solution *a, const lw_solution *b, double tol);
/* Fails the case unless each solution closes and no two are one. */
void lwt_check_solutions(const lwt_machine *m, const lw_solution *solution, size_t n);
/* A set with so many solutions that the trace test closed; a complete answer with so many finite
 * complex solutions. */
void lwt_expect_closed(const lw_set_info *set, size_t solutions);
void lwt_expect_all(const lwt_machine *m, const lw_forward_answer *a, int complex_count);
/* Index of the solution whose tool stands in `tool` within the tolerances, n if there is none. */
size_t lwt_find_tool(const lw_solution *solution, size_t n, const lw_frame *tool, double tol_m,
                     double tol_rad);

/* Share of the usual number of random targets, from the environment variable LWT_SHARE (0..1000,
 * 1 without it): sanitizer runs take less, long runs more. */
int lwt_share(int count);

#endif
