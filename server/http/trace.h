/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Request ids: 32 lower-case hexadecimal digits, the client's trace id where it sends a well-formed
 * traceparent (W3C Trace Context, level 1), one of ours otherwise. */
#ifndef LWD_HTTP_TRACE_H
#define LWD_HTTP_TRACE_H

#include <stdbool.h>

enum { LWD_ID_SIZE = 33 };

/* Takes the trace id out of a traceparent value; false (out untouched) if it is malformed. */
bool lwd_trace_parse(char out[LWD_ID_SIZE], const char *traceparent);
/* A new id, different for each call of this process and, in all likelihood, for all others. Any
 * thread. */
void lwd_trace_new(char out[LWD_ID_SIZE]);

#endif
