/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reading Accept and Content-Type is shared by all rooms and lives one folder up. */
#ifndef LWD_HTTP_NEGOTIATE_H
#define LWD_HTTP_NEGOTIATE_H

#include "../negotiate.h"

#endif
