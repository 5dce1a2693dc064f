/* SPDX-License-Identifier: GPL-3.0-or-later */
/* SHA-256 after FIPS 180-4, sections 4.1.2, 4.2.2, 5.3.3 and 6.2. Formula locals a..h, W, T1, T2
 * are the standard's. */
#include "sha256.h"

#include <stdint.h>
#include <string.h>

/* First 32 bits of the fractional parts of the cube roots of the first 64 primes. */
static const uint32_t round_constant[64] = {
    0x428a2f98u, 0x71374491u, 0xb5c0fbcfu, 0xe9b5dba5u,
    0x3956c25bu, 0x59f111f1u, 0x923f82a4u, 0xab1c5ed5u,
    0xd807aa98u, 0x12835b01u, 0x243185beu, 0x550c7dc3u,
    0x72be5d74u, 0x80deb1feu, 0x9bdc06a7u, 0xc19bf174u,
    0xe49b69c1u, 0xefbe4786u, 0x0fc19dc6u, 0x240ca1ccu,
    0x2de92c6fu, 0x4a7484aau, 0x5cb0a9dcu, 0x76f988dau,
    0x983e5152u, 0xa831c66du, 0xb00327c8u, 0xbf597fc7u,
    0xc6e00bf3u, 0xd5a79147u, 0x06ca6351u, 0x14292967u,
    0x27b70a85u, 0x2e1b2138u, 0x4d2c6dfcu, 0x53380d13u,
    0x650a7354u, 0x766a0abbu, 0x81c2c92eu, 0x92722c85u,
    0xa2bfe8a1u, 0xa81a664bu, 0xc24b8b70u, 0xc76c51a3u,
    0xd192e819u, 0xd6990624u, 0xf40e3585u, 0x106aa070u,
    0x19a4c116u, 0x1e376c08u, 0x2748774cu, 0x34b0bcb5u,
    0x391c0cb3u, 0x4ed8aa4au, 0x5b9cca4fu, 0x682e6ff3u,
    0x748f82eeu, 0x78a5636fu, 0x84c87814u, 0x8cc70208u,
    0x90befffau, 0xa4506cebu, 0xbef9a3f7u, 0xc67178f2u,
};

/* First 32 bits of the fractional parts of the square roots of the first 8 primes. */
static const uint32_t start[8] = {
    0x6a09e667u, 0xbb67ae85u, 0x3c6ef372u, 0xa54ff53au,
    0x510e527fu, 0x9b05688cu, 0x1f83d9abu, 0x5be0cd19u,
};

static uint32_t rotr(uint32_t x, unsigned n)
{
    return (x >> n) | (x << (32 - n));
}

static void block(uint32_t hash[8], const unsigned char *p)
{
    uint32_t W[64];
    for (unsigned t = 0; t < 16; t++) {
        W[t] = (uint32_t)p[4 * t] << 24 | (uint32_t)p[4 * t + 1] << 16 |
               (uint32_t)p[4 * t + 2] << 8 | (uint32_t)p[4 * t + 3];
    }
    for (unsigned t = 16; t < 64; t++) {
        uint32_t s0 = rotr(W[t - 15], 7) ^ rotr(W[t - 15], 18) ^ (W[t - 15] >> 3);
        uint32_t s1 = rotr(W[t - 2], 17) ^ rotr(W[t - 2], 19) ^ (W[t - 2] >> 10);
        W[t] = s1 + W[t - 7] + s0 + W[t - 16];
    }
    uint32_t a = hash[0], b = hash[1], c = hash[2], d = hash[3];
    uint32_t e = hash[4], f = hash[5], g = hash[6], h = hash[7];
    for (unsigned t = 0; t < 64; t++) {
        uint32_t T1 = h + (rotr(e, 6) ^ rotr(e, 11) ^ rotr(e, 25)) + ((e & f) ^ (~e & g)) +
                      round_constant[t] + W[t];
        uint32_t T2 = (rotr(a, 2) ^ rotr(a, 13) ^ rotr(a, 22)) + ((a & b) ^ (a & c) ^ (b & c));
        h = g;
        g = f;
        f = e;
        e = d + T1;
        d = c;
        c = b;
        b = a;
        a = T1 + T2;
    }
    hash[0] += a;
    hash[1] += b;
    hash[2] += c;
    hash[3] += d;
    hash[4] += e;
    hash[5] += f;
    hash[6] += g;
    hash[7] += h;
}

void lwd_sha256(unsigned char out[LWD_SHA256_SIZE], const void *data, size_t len)
{
    uint32_t hash[8];
    memcpy(hash, start, sizeof hash);
    const unsigned char *p = data;
    size_t left = len;
    for (; left >= 64; left -= 64, p += 64) {
        block(hash, p);
    }
    /* The rest, a one bit, zeros, and the length in bits: one block or two. */
    unsigned char tail[128] = {0};
    if (left > 0) {
        memcpy(tail, p, left);
    }
    tail[left] = 0x80;
    size_t tail_len = left < 56 ? 64 : 128;
    uint64_t bits = (uint64_t)len * 8;
    for (unsigned i = 0; i < 8; i++) {
        tail[tail_len - 1 - i] = (unsigned char)(bits >> (8 * i));
    }
    block(hash, tail);
    if (tail_len == 128) {
        block(hash, tail + 64);
    }
    for (unsigned i = 0; i < 8; i++) {
        for (unsigned k = 0; k < 4; k++) {
            out[4 * i + k] = (unsigned char)(hash[i] >> (24 - 8 * k));
        }
    }
}

void lwd_sha256_hex(char out[LWD_SHA256_HEX_SIZE], const unsigned char digest[LWD_SHA256_SIZE])
{
    static const char digit[] = "0123456789abcdef";
    for (unsigned i = 0; i < LWD_SHA256_SIZE; i++) {
        out[2 * i] = digit[digest[i] >> 4];
        out[2 * i + 1] = digit[digest[i] & 15];
    }
    out[2 * LWD_SHA256_SIZE] = '\0';
}

void lwd_sha256_text(char out[LWD_SHA256_HEX_SIZE], const void *data, size_t len)
{
    unsigned char digest[LWD_SHA256_SIZE];
    lwd_sha256(digest, data, len);
    lwd_sha256_hex(out, digest);
}
