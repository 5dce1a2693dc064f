/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A mechanism of the demo line, from its document through the codec to a model, as the daemon loads
 * it. Ends the program with a sentence where that fails. */
#ifndef LWT_BENCH_DEMO_H
#define LWT_BENCH_DEMO_H

#include <leeway/leeway.h>

/* "tilt-table", ...; to be freed with lw_model_free. */
lw_model *lwt_bench_demo(const char *name);

#endif
