/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reads parsed JSON with checks. A reader is a cursor on one value that knows the way to it, so
 * every fault is told with its JSON pointer; a reader of a member that is absent has no node and is
 * read as "not given": getters then return false, leave the output alone and say nothing. Readers
 * live on the stack; a child must not outlive its parent, and strings are borrowed from the tree.
 * One thread; no locale. */
#ifndef LWD_JSON_IN_H
#define LWD_JSON_IN_H

#include <stdbool.h>
#include <stddef.h>

#include "findings.h"

struct cJSON;

typedef struct lwd_reader {
    const struct cJSON *node;        /* NULL: not given */
    const struct lwd_reader *parent; /* NULL: the whole text */
    const char *name;                /* of the member; NULL for an array element */
    size_t index;                    /* of the array element */
    lwd_findings *findings;
} lwd_reader;

/* Scans and parses. NULL with an error in `findings` if the text may not be read. Free with
 * lwd_json_free. */
struct cJSON *lwd_json_parse(const char *text, size_t len, const lwd_scan_limits *limits,
                             lwd_findings *findings);
void lwd_json_free(struct cJSON *tree);
lwd_reader lwd_reader_of(const struct cJSON *tree, lwd_findings *findings);

/* ---- objects and arrays ---------------------------------------------------------------------- */

typedef struct lwd_member {
    const char *name;
    bool required;
} lwd_member;

/* Sorts the members of an object into out[0..n) by the table; members that are not in the table
 * and required ones that are missing are errors (told, not returned). False if the value is absent
 * or no object (told); every out[i] is then absent. */
bool lwd_read_members(const lwd_reader *r, const lwd_member *table, size_t n, lwd_reader *out);

/* Goes through the elements of an array or the members of an object with free names (then
 * child->name is the name, as decoded):
 *     for (bool more = lwd_first(r, &child); more; more = lwd_next(&child)) */
bool lwd_first(const lwd_reader *r, lwd_reader *child);
bool lwd_next(lwd_reader *child);
/* Elements or members; 0 for anything else. */
size_t lwd_count(const lwd_reader *r);

/* The member of an object by name, without telling anything; false, no node, if there is none. */
bool lwd_find(const lwd_reader *r, const char *name, lwd_reader *child);

bool lwd_is_given(const lwd_reader *r);
bool lwd_is_object(const lwd_reader *r);
bool lwd_is_null(const lwd_reader *r);
bool lwd_is_text(const lwd_reader *r);
/* Tell a wrong type; true if it is right. */
bool lwd_want_array(const lwd_reader *r, size_t least, size_t most, const char *of_what);
bool lwd_want_object(const lwd_reader *r);

/* ---- values ---------------------------------------------------------------------------------- */

/* low <= value <= high. */
bool lwd_read_number(const lwd_reader *r, double low, double high, double *out);
/* 0 < value <= high. */
bool lwd_read_positive(const lwd_reader *r, double high, double *out);
bool lwd_read_int(const lwd_reader *r, long low, long high, long *out);
bool lwd_read_bool(const lwd_reader *r, bool *out);
/* At most `most` bytes of UTF-8; borrowed. */
bool lwd_read_text(const lwd_reader *r, size_t most, const char **out);
/* [a-z0-9-], 1 to 32 characters. */
bool lwd_read_name(const lwd_reader *r, char out[LW_NAME_SIZE]);
/* One of n words; tells the list and the nearest. */
bool lwd_read_word(const lwd_reader *r, const char *const *word, size_t n, size_t *out);
/* Three numbers, each at most `most` in size. */
bool lwd_read_vec3(const lwd_reader *r, double most, double out[3]);
/* Three numbers, not all zero; returned with unit length. */
bool lwd_read_axis(const lwd_reader *r, double out[3]);
/* [low, high], null = open on that side; low < high where both are given. Not converted. */
bool lwd_read_range(const lwd_reader *r, double most, lw_range *out);
/* {"x": .., "y": .., "z": ..}, each at most `most` in size. */
bool lwd_read_xyz(const lwd_reader *r, double most, double out[3]);
/* {"w": .., "x": .., "y": .., "z": ..}; off unit length by more than 1e-3 is an error, within it is
 * normalised. */
bool lwd_read_quaternion(const lwd_reader *r, double out[4]);

/* ---- telling --------------------------------------------------------------------------------- */

/* A finding at this reader's place. expected may be NULL; got = NULL describes the value. */
void lwd_tell(const lwd_reader *r, lw_severity severity, const char *code, const char *expected,
              const char *got, const char *format, ...) __attribute__((format(printf, 6, 7)));
/* An error. */
#define LWD_TELL(r, code, expected, got, ...)                                                      \
    lwd_tell((r), LW_ERROR, (code), (expected), (got), __VA_ARGS__)
void lwd_reader_pointer(const lwd_reader *r, char out[LWD_POINTER_SIZE]);
/* "the number 12", "the text \"mm\"", "an array of 3", ... */
void lwd_describe(const lwd_reader *r, char *out, size_t size);
/* The word of the list that is nearest to `name` by edit distance, NULL if none is near. */
const char *lwd_nearest(const char *name, const char *const *word, size_t n);
/* Shortest decimal of x, for sentences: never %g, whose point depends on the locale. */
typedef struct lwd_num {
    char text[32];
} lwd_num;
lwd_num lwd_num_of(double x);
/* The same with at most 9 digits, for numbers that come from a conversion. */
lwd_num lwd_num_short(double x);

#endif
