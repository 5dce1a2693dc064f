/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The description of the interface (openapi.json), embedded by the build. Valid for ever. */
#ifndef LWD_API_OPENAPI_H
#define LWD_API_OPENAPI_H

#include <stddef.h>

extern const char lwd_openapi_text[];
extern const size_t lwd_openapi_len;

#endif
