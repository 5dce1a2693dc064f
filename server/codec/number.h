/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Doubles as decimal text, without locale: the shortest digits that read back to the same bits.
 * Pure functions, callable from any thread; none writes a NUL. */
#ifndef LWD_NUMBER_H
#define LWD_NUMBER_H

#include <stddef.h>
#include <stdint.h>

enum { LWD_NUMBER_SIZE = 32 }; /* room every function below may use */

/* |x| = digits * 10^exponent, no trailing zero in digits; digits = 0 for zero. */
typedef struct lwd_decimal {
    uint64_t digits;
    int exponent;
} lwd_decimal;
/* x must be finite; its sign is dropped. */
lwd_decimal lwd_decimal_of(double x);

/* JSON number: plain decimals where 1e-5 <= |x| < 1e17, else with an exponent; -0 is "0".
 * Returns the length, 0 (and writes nothing) if x is not finite. */
size_t lwd_number_put(char out[LWD_NUMBER_SIZE], double x);

/* As ECMAScript's Number::toString, which RFC 8785 asks for. Returns 0 if x is not finite. */
size_t lwd_number_put_es(char out[LWD_NUMBER_SIZE], double x);

/* For registers and PLC text: no exponent, at most 9 significant digits and at most 9 decimals,
 * half rounded away from zero. Returns 0 if x is not finite or |x| >= 1e15: leave the key out. */
size_t lwd_number_put_plain(char out[LWD_NUMBER_SIZE], double x);

size_t lwd_number_put_int(char out[LWD_NUMBER_SIZE], int64_t x);

#endif
