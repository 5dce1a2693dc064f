/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shortest decimal of a double. The method is that of R. Giulietti, "The Schubfach way to render
 * doubles" (2020): the rounding interval of v = c * 2^q is scaled by one 128-bit power of ten so
 * that at most one shorter and at most two full candidates lie in it; the scaled products keep
 * their inexactness in the lowest bit (round to odd), which makes all comparisons exact. */
#include "number.h"

#include <math.h>
#include <stdbool.h>
#include <string.h>

#include "number_powers.h"

__extension__ typedef unsigned __int128 u128;

static const char pair_text[] = "0001020304050607080910111213141516171819202122232425262728293031"
                                "3233343536373839404142434445464748495051525354555657585960616263"
                                "6465666768697071727374757677787980818283848586878889909192939495"
                                "96979899";

/* floor(log10(2^q)) and, for the narrower spacing below a power of two, floor(log10(3/4 * 2^q)):
 * exact for -1074 <= q <= 971; floor(log2(10^k)): exact for -324 <= k <= 324. */
static int floor_log10_pow2(int q, bool three_quarters)
{
    return (q * 1262611 - (three_quarters ? 524031 : 0)) >> 22;
}

static int floor_log2_pow10(int k)
{
    return (k * 1741647) >> 19;
}

/* floor(g * cp / 2^128), lowest bit set where something was cut off. A remainder of 1 is the
 * table's own rounding up, not a cut-off part of the product. */
static uint64_t scale(const lwd_power *g, uint64_t cp)
{
    u128 low = (u128)g->low * cp;
    u128 all = (u128)g->high * cp + (uint64_t)(low >> 64);
    return (uint64_t)(all >> 64) | ((uint64_t)all > 1);
}

/* Shortest decimal of c * 2^q, c > 0; `closer`: the neighbour below is at half the distance. */
static lwd_decimal shortest(uint64_t c, int q, bool closer)
{
    int k = floor_log10_pow2(q, closer);
    int h = q + floor_log2_pow10(-k) + 1;
    const lwd_power *g = &lwd_power_table[-k - LWD_POWER_MIN];
    uint64_t odd = c & 1;

    /* Four times the value and the two ends of its rounding interval, in units of 10^k. */
    uint64_t middle = scale(g, (4 * c) << h);
    uint64_t lower = scale(g, (4 * c - 2 + (closer ? 1 : 0)) << h) + odd;
    uint64_t upper = scale(g, (4 * c + 2) << h) - odd;

    uint64_t s = middle / 4;
    if (s >= 10) {
        uint64_t t = s / 10;
        bool below = lower <= 40 * t;
        bool above = 40 * t + 40 <= upper;
        if (below != above) {
            return (lwd_decimal){t + (above ? 1 : 0), k + 1};
        }
    }
    bool below = lower <= 4 * s;
    bool above = 4 * s + 4 <= upper;
    if (below != above) {
        return (lwd_decimal){s + (above ? 1 : 0), k};
    }
    uint64_t half = 4 * s + 2;
    bool up = middle > half || (middle == half && (s & 1) != 0);
    return (lwd_decimal){s + (up ? 1 : 0), k};
}

static lwd_decimal without_trailing_zeros(lwd_decimal d)
{
    while (d.digits >= 100000000 && d.digits % 100000000 == 0) {
        d.digits /= 100000000;
        d.exponent += 8;
    }
    while (d.digits % 10 == 0) {
        d.digits /= 10;
        d.exponent++;
    }
    return d;
}

lwd_decimal lwd_decimal_of(double x)
{
    uint64_t bits;
    memcpy(&bits, &x, sizeof bits);
    uint64_t fraction = bits & ((UINT64_C(1) << 52) - 1);
    int biased = (int)((bits >> 52) & 0x7ff);
    if (biased == 0 && fraction == 0) {
        return (lwd_decimal){0, 0};
    }
    uint64_t c = biased == 0 ? fraction : fraction | UINT64_C(1) << 52;
    int q = biased == 0 ? -1074 : biased - 1075;
    if (q <= 0 && q > -53 && (c & ((UINT64_C(1) << -q) - 1)) == 0) {
        return without_trailing_zeros((lwd_decimal){c >> -q, 0}); /* an integer below 2^53 */
    }
    return without_trailing_zeros(shortest(c, q, fraction == 0 && biased > 1));
}

static const uint64_t ten_to[20] = {
    1, 10, 100, 1000, 10000, 100000, 1000000, 10000000, 100000000, 1000000000, 10000000000,
    100000000000, 1000000000000, 10000000000000, 100000000000000, 1000000000000000,
    10000000000000000, 100000000000000000, 1000000000000000000, UINT64_C(10000000000000000000)};

/* Digits of x, 1 for 0: floor(log10(2^bits)) is right or one too few. */
static int digit_count(uint64_t x)
{
    int n = (64 - __builtin_clzll(x | 1)) * 1233 >> 12;
    return n + ((x | 1) >= ten_to[n] ? 1 : 0);
}

static void put_eight(char *p, uint32_t x)
{
    uint32_t high = x / 10000;
    uint32_t low = x % 10000;
    memcpy(p, pair_text + 2 * (high / 100), 2);
    memcpy(p + 2, pair_text + 2 * (high % 100), 2);
    memcpy(p + 4, pair_text + 2 * (low / 100), 2);
    memcpy(p + 6, pair_text + 2 * (low % 100), 2);
}

/* Writes the n digits of x. */
static void put_digits(char *out, uint64_t x, int n)
{
    char *p = out + n;
    while (x >= 100000000) {
        p -= 8;
        put_eight(p, (uint32_t)(x % 100000000));
        x /= 100000000;
    }
    uint32_t rest = (uint32_t)x;
    while (rest >= 100) {
        p -= 2;
        memcpy(p, pair_text + 2 * (rest % 100), 2);
        rest /= 100;
    }
    if (rest >= 10) {
        memcpy(p - 2, pair_text + 2 * rest, 2);
    } else {
        p[-1] = (char)('0' + rest);
    }
}

static char *put_zeros(char *p, int n)
{
    memset(p, '0', (size_t)n);
    return p + n;
}

/* Digits with a point after the first `whole` of them (whole <= 0: zeros in front). */
static char *put_plain(char *p, uint64_t digits, int n, int whole)
{
    if (whole <= 0) {
        *p++ = '0';
        *p++ = '.';
        p = put_zeros(p, -whole);
        put_digits(p, digits, n);
        return p + n;
    }
    if (whole >= n) {
        put_digits(p, digits, n);
        return put_zeros(p + n, whole - n);
    }
    put_digits(p + 1, digits, n);
    for (int i = 0; i < whole; i++) { /* a few, where the number is of a common size */
        p[i] = p[i + 1];
    }
    p[whole] = '.';
    return p + n + 1;
}

static char *put_exponent(char *p, uint64_t digits, int n, int power, bool plus)
{
    put_digits(p + 1, digits, n);
    p[0] = p[1];
    if (n > 1) {
        p[1] = '.';
        p += n + 1;
    } else {
        p += 1;
    }
    *p++ = 'e';
    if (power < 0) {
        *p++ = '-';
        power = -power;
    } else if (plus) {
        *p++ = '+';
    }
    int m = digit_count((uint64_t)power);
    put_digits(p, (uint64_t)power, m);
    return p + m;
}

/* Plain where low <= position of the point <= high, the point standing after that many digits. */
static size_t put(char *out, double x, int low, int high, bool plus)
{
    if (!isfinite(x)) {
        return 0;
    }
    char *p = out;
    if (x == 0.0) {
        *p = '0';
        return 1;
    }
    if (x < 0.0) {
        *p++ = '-';
    }
    lwd_decimal d = lwd_decimal_of(x);
    int n = digit_count(d.digits);
    int whole = n + d.exponent;
    if (whole >= low && whole <= high) {
        p = put_plain(p, d.digits, n, whole);
    } else {
        p = put_exponent(p, d.digits, n, whole - 1, plus);
    }
    return (size_t)(p - out);
}

size_t lwd_number_put(char out[LWD_NUMBER_SIZE], double x)
{
    return put(out, x, -4, 17, false);
}

size_t lwd_number_put_es(char out[LWD_NUMBER_SIZE], double x)
{
    return put(out, x, -5, 21, true);
}

size_t lwd_number_put_plain(char out[LWD_NUMBER_SIZE], double x)
{
    enum { SIGNIFICANT = 9, DECIMALS = 9 };
    if (!(fabs(x) < 1e15)) {
        return 0;
    }
    lwd_decimal d = lwd_decimal_of(x);
    int n = digit_count(d.digits);
    /* Drop what is beyond the ninth digit or the ninth decimal, whichever comes first. */
    int drop = n - SIGNIFICANT;
    if (-d.exponent - DECIMALS > drop) {
        drop = -d.exponent - DECIMALS;
    }
    if (drop > n) {
        d.digits = 0;
    } else if (drop > 0) {
        uint64_t unit = 1;
        for (int i = 0; i < drop; i++) {
            unit *= 10;
        }
        d.digits = d.digits / unit + (d.digits % unit >= unit - unit / 2 ? 1 : 0);
        d.exponent += drop;
    }
    if (d.digits == 0) {
        out[0] = '0';
        return 1;
    }
    d = without_trailing_zeros(d);
    char *p = out;
    if (x < 0.0) {
        *p++ = '-';
    }
    n = digit_count(d.digits);
    p = put_plain(p, d.digits, n, n + d.exponent);
    return (size_t)(p - out);
}

size_t lwd_number_put_int(char out[LWD_NUMBER_SIZE], int64_t x)
{
    char *p = out;
    uint64_t size = (uint64_t)x;
    if (x < 0) {
        *p++ = '-';
        size = 0 - size;
    }
    int n = digit_count(size);
    put_digits(p, size, n);
    return (size_t)(p - out) + (size_t)n;
}
