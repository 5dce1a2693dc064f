/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Support for the tests: comparing in double, random numbers that are the same on every machine,
 * published cases from files, allocations that fail on demand. Every check that does not hold ends
 * the running cmocka case with the file and line of the caller. Includes cmocka itself, so a test
 * needs this header alone. */
#ifndef LWT_H
#define LWT_H

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

struct cJSON;

/* ---- comparing ----------------------------------------------------------------------------- */

/* |got - want| <= tol, else prints got, want and off-by with 17 digits. Equal infinities agree, a
 * NaN agrees with nothing. cmocka's own float check casts to float and must not be used. */
#define lwt_near(got, want, tol) lwt_near_at((got), (want), (tol), #got, __FILE__, __LINE__)
/* The same for n numbers; says which index is off. */
#define lwt_near_n(got, want, n, tol) \
    lwt_near_n_at((got), (want), (n), (tol), #got, __FILE__, __LINE__)
/* |got - want| <= rel * max(|got|, |want|). */
#define lwt_near_rel(got, want, rel) lwt_near_rel_at((got), (want), (rel), #got, __FILE__, __LINE__)
/* Same bits: exact round trips, equal answers on every run. */
#define lwt_same(got, want) lwt_same_at((got), (want), #got, __FILE__, __LINE__)
/* The text holds the part; prints both if not. */
#define lwt_holds(text, part) lwt_holds_at((text), (part), __FILE__, __LINE__)
/* Ends the case with a sentence. */
#define lwt_fail(...) lwt_fail_at(__FILE__, __LINE__, __VA_ARGS__)

void lwt_near_at(double got, double want, double tol, const char *what, const char *file, int line);
void lwt_near_n_at(const double *got, const double *want, size_t n, double tol, const char *what,
                   const char *file, int line);
void lwt_near_rel_at(double got, double want, double rel, const char *what, const char *file,
                     int line);
void lwt_same_at(double got, double want, const char *what, const char *file, int line);
void lwt_holds_at(const char *text, const char *part, const char *file, int line);
void lwt_fail_at(const char *file, int line, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* ---- random numbers ------------------------------------------------------------------------ */

/* xoshiro256** seeded by splitmix64 (Blackman, Vigna 2021, ACM TOMS 47(4) article 36). */
typedef struct lwt_random {
    uint64_t state[4];
} lwt_random;

void lwt_random_init(lwt_random *rng, uint64_t seed);
uint64_t lwt_random_bits(lwt_random *rng);
/* Uniform in [low, high). */
double lwt_random_in(lwt_random *rng, double low, double high);
/* 0 .. n-1, every value equally likely; n > 0. */
size_t lwt_random_index(lwt_random *rng, size_t n);
/* Mean 0, deviation 1 (polar method). */
double lwt_random_normal(lwt_random *rng);
/* Uniform on the unit sphere, and over all rotations as (w, x, y, z). */
void lwt_random_direction(lwt_random *rng, double out[3]);
void lwt_random_quaternion(lwt_random *rng, double out[4]);

/* ---- published cases ----------------------------------------------------------------------- */

/* Reads tests/cases/<name>; the caller frees with cJSON_Delete. A file that is missing or no JSON
 * fails the case. */
#define lwt_case_file(name) lwt_case_file_at((name), __FILE__, __LINE__)
/* A member, an element, a number, a text of a case; what is missing fails the running test. */
#define lwt_member(object, name) lwt_member_at((object), (name), __FILE__, __LINE__)
#define lwt_number(object, name) lwt_number_at((object), (name), __FILE__, __LINE__)
#define lwt_text(object, name) lwt_text_at((object), (name), __FILE__, __LINE__)
/* Fills out[0..max) from an array of numbers, nested ones row by row; returns the count. */
#define lwt_numbers(object, name, out, max) \
    lwt_numbers_at((object), (name), (out), (max), __FILE__, __LINE__)
/* A value as printed in its source, kept as text: "0.7071" is 0.7071 and half a last digit is
 * 0.00005, the default tolerance. */
#define lwt_printed(text, half_digit) lwt_printed_at((text), (half_digit), __FILE__, __LINE__)

struct cJSON *lwt_case_file_at(const char *name, const char *file, int line);
const struct cJSON *lwt_member_at(const struct cJSON *object, const char *name, const char *file,
                                  int line);
double lwt_number_at(const struct cJSON *object, const char *name, const char *file, int line);
const char *lwt_text_at(const struct cJSON *object, const char *name, const char *file, int line);
size_t lwt_numbers_at(const struct cJSON *object, const char *name, double *out, size_t max,
                      const char *file, int line);
double lwt_printed_at(const char *text, double *half_digit, const char *file, int line);

/* ---- allocations ---------------------------------------------------------------------------- */

/* Counts malloc, calloc, realloc, strdup, strndup and aligned_alloc called from our own code (the
 * linker sends them here); what GSL, cJSON or SQLite allocate inside is not seen, but see
 * lwt_alloc_cjson. The counters are one set for all threads. */
void lwt_alloc_reset(void);
size_t lwt_alloc_calls(void);          /* since the last reset */
void lwt_alloc_fail_at(size_t n);      /* resets; the n-th call from now (from 1) fails, alone */
void lwt_alloc_fail_from(size_t n);    /* resets; the n-th and every later one fail */
bool lwt_alloc_failed(void);           /* one has failed since */
/* Sends the allocations of cJSON through the same counters (or back to its own). */
void lwt_alloc_cjson(bool counted);

/* Runs `step` with the first allocation failing, then the second, and so on until it runs without
 * meeting one; `step` is told which fails and must leave nothing behind. Returns the last that
 * failed; meeting more than `limit` fails the case, and so does meeting none. Under a sanitizer a
 * long sweep goes on in strides. */
size_t lwt_alloc_sweep(void (*step)(void *context, size_t n), void *context, size_t limit);

#endif
