/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reads Accept and Content-Type (RFC 9110 sections 12.5.1 and 8.3). Pure functions, no memory. */
#ifndef LWD_NEGOTIATE_H
#define LWD_NEGOTIATE_H

#include <stdbool.h>

/* How welcome `type` ("application/json") is by an Accept value: 0 = refused to 1000 = as good as
 * any. The most specific range decides. NULL or an empty value welcomes everything. */
int lwd_accept_quality(const char *accept, const char *type);

/* Whether a Content-Type value is `type`, parameters apart; a charset other than UTF-8 is not. */
bool lwd_content_type_is(const char *content_type, const char *type);

#endif
