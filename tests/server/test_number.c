/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Decimal text of doubles against the C library: reads back to the same bits, and never takes more
 * digits than the shortest of %.15g, %.16g, %.17g that reads back. */
#include "codec/number.h"

#include <float.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "codec/number_powers.h"
#include "lwt.h"

typedef size_t put_function(char *out, double x);

static const char *text_of(put_function *put, double x)
{
    static char text[4][LWD_NUMBER_SIZE + 1];
    static unsigned turn;
    char *out = text[turn++ % 4];
    size_t n = put(out, x);
    assert_true(n <= LWD_NUMBER_SIZE);
    out[n] = '\0';
    return out;
}

/* Significant digits of a decimal text, without zeros at either end. */
static size_t digits_of(const char *text, char *out)
{
    size_t n = 0;
    for (; *text != '\0' && *text != 'e'; text++) {
        if (*text >= '0' && *text <= '9' && (n > 0 || *text != '0')) {
            out[n++] = *text;
        }
    }
    while (n > 0 && out[n - 1] == '0') {
        n--;
    }
    out[n] = '\0';
    return n;
}

static void valid_json_number(const char *text)
{
    const char *p = text;
    p += *p == '-' ? 1 : 0;
    size_t whole = strspn(p, "0123456789");
    assert_true(whole >= 1 && (whole == 1 || *p != '0'));
    p += whole;
    if (*p == '.') {
        size_t decimals = strspn(p + 1, "0123456789");
        assert_true(decimals >= 1);
        p += 1 + decimals;
    }
    if (*p == 'e') {
        p += p[1] == '-' || p[1] == '+' ? 2 : 1;
        size_t power = strspn(p, "0123456789");
        assert_true(power >= 1);
        p += power;
    }
    if (*p != '\0') {
        lwt_fail("'%s' is no JSON number", text);
    }
}

static void check(double x)
{
    char ours[LWD_NUMBER_SIZE + 1];
    char digits[40];
    const char *text = text_of(lwd_number_put, x);
    valid_json_number(text);
    lwt_same(strtod(text, NULL), x);
    size_t n = digits_of(text, ours);
    for (int precision = 15; precision <= 17; precision++) {
        char library[40];
        (void)snprintf(library, sizeof library, "%.*g", precision, x);
        if (strtod(library, NULL) == x) {
            size_t m = digits_of(library, digits);
            if (n > m) {
                lwt_fail("%s has %zu digits, %s has %zu", text, n, library, m);
            }
            /* Where both write plain decimals the text is no longer either. */
            if (fabs(x) >= 1e-4 && fabs(x) < 1e15) {
                assert_true(strlen(text) <= strlen(library));
            }
            break;
        }
    }
    const char *es = text_of(lwd_number_put_es, x);
    valid_json_number(es);
    lwt_same(strtod(es, NULL), x);
    (void)digits_of(es, digits);
    assert_string_equal(digits, ours);
}

static double from_bits(uint64_t bits)
{
    double x;
    memcpy(&x, &bits, sizeof x);
    return x;
}

static void reads_back_a_million_random_bit_patterns(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 20240301);
    for (size_t i = 0; i < 1000000;) {
        double x = from_bits(lwt_random_bits(&rng));
        if (isfinite(x) && x != 0.0) {
            check(x);
            i++;
        }
    }
}

static void reads_back_numbers_as_people_write_them(void **state)
{
    (void)state;
    lwt_random rng;
    lwt_random_init(&rng, 20240302);
    for (size_t i = 0; i < 200000; i++) {
        double unit = pow(10.0, (double)lwt_random_index(&rng, 7));
        double x = round(lwt_random_in(&rng, -1000.0, 1000.0) * unit) / unit;
        if (x != 0.0) {
            check(x);
            check(x * 0.001);
            check(x * 0.017453292519943295);
        }
    }
}

static void reads_back_powers_of_two_and_ten_and_their_neighbours(void **state)
{
    (void)state;
    for (int e = -1074; e <= 1023; e++) {
        double x = ldexp(1.0, e);
        check(x);
        check(nextafter(x, INFINITY));
        if (e > -1074) {
            check(nextafter(x, 0.0));
        }
    }
    for (int e = -323; e <= 308; e++) {
        char text[16];
        (void)snprintf(text, sizeof text, "1e%d", e);
        double x = strtod(text, NULL);
        check(x);
        check(nextafter(x, INFINITY));
        check(nextafter(x, 0.0) == 0.0 ? x : nextafter(x, 0.0));
    }
}

static void reads_back_subnormals_and_the_ends(void **state)
{
    (void)state;
    for (uint64_t bits = 1; bits < 5000; bits++) {
        check(from_bits(bits));
    }
    for (uint64_t step = 1; step < (UINT64_C(1) << 52); step = step * 3 + 1) {
        check(from_bits(step));
    }
    check(DBL_MIN);
    check(nextafter(DBL_MIN, 0.0));
    check(DBL_MAX);
    check(-DBL_MAX);
    check(5e-324);
    for (uint64_t i = 0; i < 2000; i++) { /* whole numbers around the end of the exact ones */
        check((double)((UINT64_C(1) << 53) - 1000 + i));
    }
}

static void writes_the_forms_that_were_agreed(void **state)
{
    (void)state;
    static const struct {
        double x;
        const char *text;
    } row[] = {
        {0.0, "0"}, {-0.0, "0"}, {1.0, "1"}, {-1.0, "-1"}, {0.1, "0.1"}, {360.0, "360"},
        {1e-5, "0.00001"}, {9.9e-6, "9.9e-6"}, {-12.5, "-12.5"}, {1e16, "10000000000000000"},
        {1e17, "1e17"}, {99999999999999984.0, "99999999999999980"}, {1.5e300, "1.5e300"},
        {5e-324, "5e-324"}, {9007199254740992.0, "9007199254740992"}, {0.30000000000000004,
        "0.30000000000000004"}, {100.0, "100"}, {1e15, "1000000000000000"},
    };
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        assert_string_equal(text_of(lwd_number_put, row[i].x), row[i].text);
    }
    char out[LWD_NUMBER_SIZE];
    assert_int_equal(lwd_number_put(out, NAN), 0);
    assert_int_equal(lwd_number_put(out, INFINITY), 0);
    assert_int_equal(lwd_number_put_es(out, -INFINITY), 0);
    assert_int_equal(lwd_number_put_plain(out, NAN), 0);
}

/* Published: RFC 8785 (2020), appendix B, samples of ECMAScript-compatible number serialization;
 * taken down from memory and from the copies that other programs' tests carry. */
static void writes_ecmascript_numbers_as_published(void **state)
{
    (void)state;
    static const struct {
        uint64_t bits;
        const char *text;
    } row[] = {
        {UINT64_C(0x0000000000000000), "0"},
        {UINT64_C(0x8000000000000000), "0"},
        {UINT64_C(0x0000000000000001), "5e-324"},
        {UINT64_C(0x8000000000000001), "-5e-324"},
        {UINT64_C(0x7fefffffffffffff), "1.7976931348623157e+308"},
        {UINT64_C(0xffefffffffffffff), "-1.7976931348623157e+308"},
        {UINT64_C(0x4340000000000000), "9007199254740992"},
        {UINT64_C(0xc340000000000000), "-9007199254740992"},
        {UINT64_C(0x4430000000000000), "295147905179352830000"},
        {UINT64_C(0x44b52d02c7e14af5), "9.999999999999997e+22"},
        {UINT64_C(0x44b52d02c7e14af6), "1e+23"},
        {UINT64_C(0x44b52d02c7e14af7), "1.0000000000000001e+23"},
        {UINT64_C(0x444b1ae4d6e2ef4e), "999999999999999700000"},
        {UINT64_C(0x444b1ae4d6e2ef4f), "999999999999999900000"},
        {UINT64_C(0x444b1ae4d6e2ef50), "1e+21"},
        {UINT64_C(0x3eb0c6f7a0b5ed8c), "9.999999999999997e-7"},
        {UINT64_C(0x3eb0c6f7a0b5ed8d), "0.000001"},
        {UINT64_C(0x41b3de4355555553), "333333333.3333332"},
        {UINT64_C(0x41b3de4355555554), "333333333.33333325"},
        {UINT64_C(0x41b3de4355555555), "333333333.3333333"},
        {UINT64_C(0x41b3de4355555556), "333333333.3333334"},
        {UINT64_C(0x41b3de4355555557), "333333333.33333343"},
        {UINT64_C(0xbecbf647612f3696), "-0.0000033333333333333333"},
        {UINT64_C(0x43143ff3c1cb0959), "1424953923781206.2"},
    };
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        assert_string_equal(text_of(lwd_number_put_es, from_bits(row[i].bits)), row[i].text);
    }
}

static void writes_plain_decimals_for_registers(void **state)
{
    (void)state;
    static const struct {
        double x;
        const char *text;
    } row[] = {
        {0.0, "0"}, {-0.0, "0"}, {12.5, "12.5"}, {-12.5, "-12.5"}, {1.0 / 3.0, "0.333333333"},
        {2.0 / 3.0, "0.666666667"}, {123456789.4, "123456789"}, {123456789.5, "123456790"},
        {1234567891.0, "1234567890"}, {0.9999999999, "1"}, {-2e-7, "-0.0000002"},
        {4.9e-10, "0"}, {-4.9e-10, "0"}, {5e-10, "0.000000001"}, {1e-9, "0.000000001"},
        {1e-300, "0"}, {999999999.6, "1000000000"}, {123456789012345.0, "123456789000000"},
        {1e14, "100000000000000"}, {99.99999999999, "100"}, {0.00012345678949, "0.000123457"},
    };
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        assert_string_equal(text_of(lwd_number_put_plain, row[i].x), row[i].text);
    }
    char out[LWD_NUMBER_SIZE];
    assert_int_equal(lwd_number_put_plain(out, 1e15), 0);
    assert_int_equal(lwd_number_put_plain(out, -1e300), 0);

    lwt_random rng;
    lwt_random_init(&rng, 5);
    for (size_t i = 0; i < 100000; i++) {
        double x = lwt_random_normal(&rng) * pow(10.0, lwt_random_in(&rng, -12.0, 13.0));
        const char *text = text_of(lwd_number_put_plain, x);
        assert_null(strchr(text, 'e'));
        assert_true(strlen(text) <= 17);
        double step = pow(10.0, fmax(-9.0, floor(log10(fabs(x))) - 8.0));
        lwt_near(strtod(text, NULL), x, 0.501 * step);
    }
}

static size_t put_int_of(char *out, double x)
{
    return lwd_number_put_int(out, (int64_t)x);
}

static void writes_whole_numbers(void **state)
{
    (void)state;
    assert_string_equal(text_of(put_int_of, 0), "0");
    assert_string_equal(text_of(put_int_of, -7), "-7");
    assert_string_equal(text_of(put_int_of, 1234567890123.0), "1234567890123");
    char out[LWD_NUMBER_SIZE + 1] = "";
    out[lwd_number_put_int(out, INT64_MIN)] = '\0';
    assert_string_equal(out, "-9223372036854775808");
    out[lwd_number_put_int(out, INT64_MAX)] = '\0';
    assert_string_equal(out, "9223372036854775807");
}

/* ---- the table, recomputed with exact integers ----------------------------------------------- */

enum { LIMBS = 40 }; /* 32 bits each: 10^324 needs 1077 bits, and 128 for the scaling */

typedef struct big {
    uint32_t limb[LIMBS];
} big;

static void big_mul(big *x, uint32_t factor)
{
    uint64_t carry = 0;
    for (size_t i = 0; i < LIMBS; i++) {
        carry += (uint64_t)x->limb[i] * factor;
        x->limb[i] = (uint32_t)carry;
        carry >>= 32;
    }
    assert_int_equal(carry, 0);
}

static int big_bits(const big *x)
{
    for (int i = LIMBS; i-- > 0;) {
        for (int b = 32; b-- > 0;) {
            if (x->limb[i] >> b & 1) {
                return 32 * i + b + 1;
            }
        }
    }
    return 0;
}

static bool big_bit(const big *x, int bit)
{
    return bit >= 0 && (x->limb[bit / 32] >> (bit % 32) & 1) != 0;
}

static void big_shift_in(big *x, bool bit)
{
    uint32_t carry = bit ? 1 : 0;
    for (size_t i = 0; i < LIMBS; i++) {
        uint32_t next = x->limb[i] >> 31;
        x->limb[i] = x->limb[i] << 1 | carry;
        carry = next;
    }
}

static bool big_subtract_if(big *x, const big *y) /* x -= y if x >= y */
{
    big r = *x;
    int64_t borrow = 0;
    for (size_t i = 0; i < LIMBS; i++) {
        int64_t d = (int64_t)x->limb[i] - (int64_t)y->limb[i] - borrow;
        borrow = d < 0 ? 1 : 0;
        r.limb[i] = (uint32_t)(d + (borrow << 32));
    }
    if (borrow == 0) {
        *x = r;
    }
    return borrow == 0;
}

static void same_power(int k, uint64_t high, uint64_t low, bool cut)
{
    if (cut) { /* the table rounds up */
        low++;
        high += low == 0 ? 1 : 0;
    }
    const lwd_power *p = &lwd_power_table[k - LWD_POWER_MIN];
    if (p->high != high || p->low != low) {
        lwt_fail("the table is wrong for the power %d", k);
    }
}

static void has_the_right_powers_of_ten(void **state)
{
    (void)state;
    big ten = {{1}};
    for (int k = 0; k <= LWD_POWER_MAX; k++) {
        /* The leading 128 bits of 10^k. */
        int bits = big_bits(&ten);
        uint64_t half[2] = {0, 0};
        bool cut = false;
        for (int i = 0; i < bits || i < 128; i++) {
            bool bit = big_bit(&ten, bits - 1 - i);
            if (i < 128) {
                half[i / 64] = half[i / 64] << 1 | (bit ? 1 : 0);
            } else {
                cut = cut || bit;
            }
        }
        same_power(k, half[0], half[1], cut);
        if (k > 0 && -k >= LWD_POWER_MIN) {
            /* The leading 128 bits of 10^-k: long division of a power of two. */
            big rest = {{1}};
            uint64_t quotient[2] = {0, 0};
            int got = 0;
            while (got < 128) {
                big_shift_in(&rest, false);
                bool bit = big_subtract_if(&rest, &ten);
                if (got > 0 || bit) {
                    quotient[got / 64] = quotient[got / 64] << 1 | (bit ? 1 : 0);
                    got++;
                }
            }
            same_power(-k, quotient[0], quotient[1], big_bits(&rest) > 0);
        }
        if (k < LWD_POWER_MAX) {
            big_mul(&ten, 10);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(reads_back_a_million_random_bit_patterns),
        cmocka_unit_test(reads_back_numbers_as_people_write_them),
        cmocka_unit_test(reads_back_powers_of_two_and_ten_and_their_neighbours),
        cmocka_unit_test(reads_back_subnormals_and_the_ends),
        cmocka_unit_test(writes_the_forms_that_were_agreed),
        cmocka_unit_test(writes_ecmascript_numbers_as_published),
        cmocka_unit_test(writes_plain_decimals_for_registers),
        cmocka_unit_test(writes_whole_numbers),
        cmocka_unit_test(has_the_right_powers_of_ten),
    };
    return cmocka_run_group_tests_name("number", tests, NULL, NULL);
}
