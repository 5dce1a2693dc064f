/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Leeway's kinematics core: everything a caller needs. */
#ifndef LEEWAY_LEEWAY_H
#define LEEWAY_LEEWAY_H
#include <leeway/err.h>
#include <leeway/model.h>
#include <leeway/path.h>
#include <leeway/posture.h>
#include <leeway/query.h>
#include <leeway/spec.h>
#endif
