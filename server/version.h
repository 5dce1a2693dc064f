/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The daemon's version, for --version, the log, /about and leeway_build_info. */
#ifndef LWD_VERSION_H
#define LWD_VERSION_H

#ifdef LEEWAY_VERSION /* given by the build */
#define LWD_VERSION LEEWAY_VERSION
#else
#define LWD_VERSION "unknown"
#endif

#endif
