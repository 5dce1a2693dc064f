/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The canonical form of a JSON text after RFC 8785: members sorted by UTF-16 code units, numbers as
 * ECMAScript writes them, the fewest escapes, no blanks. A document's digest is the SHA-256 of it,
 * so order, layout and the way numbers are written do not change the digest. Any thread. */
#ifndef LWD_CANONICAL_H
#define LWD_CANONICAL_H

#include <stdbool.h>

#include "../exchange.h"
#include "sha256.h"

struct cJSON;

/* Appends the canonical text; false without memory. The tree is not changed; its text must have
 * passed the scan (no doubled members, finite numbers, depth). */
bool lwd_canonical(const struct cJSON *tree, lwd_buf *out);
/* Digest of the canonical form as hex. */
bool lwd_canonical_digest(const struct cJSON *tree, char digest[LWD_SHA256_HEX_SIZE]);

#endif
