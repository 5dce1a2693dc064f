/* SPDX-License-Identifier: GPL-3.0-or-later */
/* SHA-256 (FIPS 180-4) of a block of bytes: digests of documents and of tokens. Pure functions,
 * callable from any thread. */
#ifndef LWD_SHA256_H
#define LWD_SHA256_H

#include <stddef.h>

enum { LWD_SHA256_SIZE = 32, LWD_SHA256_HEX_SIZE = 65 };

void lwd_sha256(unsigned char out[LWD_SHA256_SIZE], const void *data, size_t len);
/* 64 lower-case hex digits and a NUL. */
void lwd_sha256_hex(char out[LWD_SHA256_HEX_SIZE], const unsigned char digest[LWD_SHA256_SIZE]);
/* Both in one call. */
void lwd_sha256_text(char out[LWD_SHA256_HEX_SIZE], const void *data, size_t len);

#endif
