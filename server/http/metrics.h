/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The registry is shared by all rooms and lives one folder up; this is its name from in here. */
#ifndef LWD_HTTP_METRICS_H
#define LWD_HTTP_METRICS_H

#include "../metrics.h"

#endif
