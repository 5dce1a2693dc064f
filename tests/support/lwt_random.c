/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random numbers that are the same on every machine: xoshiro256** with a splitmix64 seed, after
 * Blackman and Vigna, "Scrambled linear pseudorandom number generators", ACM TOMS 47(4), 2021. */
#include "lwt.h"

#include <math.h>

static uint64_t rotated(uint64_t x, unsigned by)
{
    return (x << by) | (x >> (64u - by));
}

void lwt_random_init(lwt_random *rng, uint64_t seed)
{
    for (size_t i = 0; i < 4; i++) {
        seed += UINT64_C(0x9e3779b97f4a7c15);
        uint64_t z = seed;
        z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
        z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
        rng->state[i] = z ^ (z >> 31);
    }
}

uint64_t lwt_random_bits(lwt_random *rng)
{
    uint64_t *s = rng->state;
    uint64_t result = rotated(s[1] * 5u, 7) * 9u;
    uint64_t shifted = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= shifted;
    s[3] = rotated(s[3], 45);
    return result;
}

double lwt_random_in(lwt_random *rng, double low, double high)
{
    double unit = (double)(lwt_random_bits(rng) >> 11) * 0x1p-53;
    return low + (high - low) * unit;
}

size_t lwt_random_index(lwt_random *rng, size_t n)
{
    if (n == 0) {
        lwt_fail("lwt_random_index needs n > 0, got 0");
        return 0;
    }
    /* The values below 2^64 mod n are thrown away, so that each remainder is equally likely. */
    uint64_t range = (uint64_t)n;
    uint64_t least = (0u - range) % range;
    uint64_t bits = 0;
    do {
        bits = lwt_random_bits(rng);
    } while (bits < least);
    return (size_t)(bits % range);
}

double lwt_random_normal(lwt_random *rng)
{
    for (;;) {
        double x = lwt_random_in(rng, -1.0, 1.0);
        double y = lwt_random_in(rng, -1.0, 1.0);
        double square = x * x + y * y;
        if (square > 0.0 && square < 1.0) {
            return x * sqrt(-2.0 * log(square) / square);
        }
    }
}

/* Scales n normal numbers to unit length: uniform on the sphere of any dimension. */
static void unit_vector(lwt_random *rng, double *out, size_t n)
{
    double square = 0.0;
    while (!(square > 1e-12)) {
        square = 0.0;
        for (size_t i = 0; i < n; i++) {
            out[i] = lwt_random_normal(rng);
            square += out[i] * out[i];
        }
    }
    for (size_t i = 0; i < n; i++) {
        out[i] /= sqrt(square);
    }
}

void lwt_random_direction(lwt_random *rng, double out[3])
{
    unit_vector(rng, out, 3);
}

void lwt_random_quaternion(lwt_random *rng, double out[4])
{
    unit_vector(rng, out, 4);
}
