/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Errors of calls: a code from one list, the place at fault and one sentence. Outcomes of a
 * question (out of reach, singular, undecided) are no errors; they stand in answers. */
#ifndef LEEWAY_ERR_H
#define LEEWAY_ERR_H

#define LW_CODE_LIST(X)                                                                            \
    X(LW_OK, "ok")                                                                                 \
    X(LW_E_ARGUMENT, "argument out of range")                                                      \
    X(LW_E_MODEL, "inconsistent mechanism")                                                        \
    X(LW_E_POSTURE, "the question does not determine a posture")                                   \
    X(LW_E_NOT_CLOSED, "the posture given does not close")                                         \
    X(LW_E_MEMORY, "out of memory")                                                                \
    X(LW_E_LIMIT, "a count is beyond what is served")                                              \
    X(LW_E_INTERNAL, "internal error")                                                             \
    X(LW_E_ABORTED, "ended by the caller's flag")

typedef enum lw_code {
#define LW_CODE_ENUM(name, text) name,
    LW_CODE_LIST(LW_CODE_ENUM)
#undef LW_CODE_ENUM
        LW_CODE_COUNT
} lw_code;

typedef struct lw_err {
    lw_code code;
    const char *file; /* raise site: for the log, never sent to a client */
    int line;
    char where[96];   /* JSON pointer of the element at fault, relative to document or question */
    char msg[224];    /* one line: what was expected, what came */
} lw_err;             /* caller-owned, no allocation; every function accepts NULL */

const char *lw_code_text(lw_code code);

/* Fills err unless it already holds a failure (the first failure wins); returns code. */
lw_code lw_fail_at(lw_err *err, lw_code code, const char *file, int line, const char *where,
                   const char *format, ...) __attribute__((format(printf, 6, 7)));

#define LW_FAIL(err, code, where, ...)                                                             \
    lw_fail_at((err), (code), __FILE__, __LINE__, (where), __VA_ARGS__)

/* Call once in main before any thread starts: switches GSL's aborting error handler off. */
void lw_init(void);

#endif
