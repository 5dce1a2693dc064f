/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The problems of the API room: one line each, X(name, code, HTTP status, slug, title). Codes 1001
 * to 1049 belong to the HTTP room. A code, once given out, keeps its meaning for ever; slugs are
 * the last part of "type": "/problems/<slug>". */
#ifndef LWD_API_PROBLEM_CODES_H
#define LWD_API_PROBLEM_CODES_H

#define LWD_PROBLEM_LIST(X)                                                                        \
    X(LWD_PROBLEM_JSON, 1050, 400, "malformed-json", "The body is not well-formed JSON")           \
    X(LWD_PROBLEM_MEMBER_UNKNOWN, 1051, 400, "unknown-member", "A member is not known here")       \
    X(LWD_PROBLEM_MEMBER_MISSING, 1052, 400, "missing-member", "A member is missing")              \
    X(LWD_PROBLEM_TYPE, 1053, 400, "wrong-type", "A member has the wrong type")                    \
    X(LWD_PROBLEM_RANGE, 1054, 400, "out-of-range", "A value is out of range")                     \
    X(LWD_PROBLEM_QUERY, 1055, 400, "bad-query", "A query member can not be understood")           \
    X(LWD_PROBLEM_DOUBLED, 1056, 400, "doubled-member", "A member stands twice")                   \
    X(LWD_PROBLEM_NAME, 1057, 400, "bad-name", "A name is not written as names are")               \
    X(LWD_PROBLEM_BODY_LIMIT, 1058, 413, "body-limit", "The body holds more than is served")       \
    X(LWD_PROBLEM_VALUE, 1059, 400, "bad-value", "A value can not be understood")                  \
    X(LWD_PROBLEM_NO_MECHANISM, 1060, 404, "no-mechanism", "There is no mechanism of this name")   \
    X(LWD_PROBLEM_NO_REVISION, 1061, 404, "no-revision", "There is no revision of this number")    \
    X(LWD_PROBLEM_NONE_PUBLISHED, 1062, 409, "none-published", "No revision is published")         \
    X(LWD_PROBLEM_DIGEST, 1063, 409, "other-revision", "Another revision would answer")            \
    X(LWD_PROBLEM_STATE, 1064, 409, "state", "The revision's state does not allow this")           \
    X(LWD_PROBLEM_WARNINGS, 1065, 409, "warnings-not-accepted",                                    \
      "The revision has warnings that were not accepted")                                          \
    X(LWD_PROBLEM_PRECONDITION, 1066, 412, "precondition-failed",                                  \
      "The revision was changed in the meantime")                                                  \
    X(LWD_PROBLEM_PRECONDITION_NEEDED, 1067, 428, "precondition-required",                         \
      "The request must say what it changes")                                                      \
    X(LWD_PROBLEM_NO_JOB, 1068, 404, "no-job", "There is no job of this number")                   \
    X(LWD_PROBLEM_NO_NAME, 1070, 422, "unknown-name", "The mechanism has nothing of this name")    \
    X(LWD_PROBLEM_QUESTION, 1071, 422, "no-sense", "The question makes no sense here")             \
    X(LWD_PROBLEM_POSTURE, 1072, 422, "posture-undetermined",                                      \
      "The question does not determine a posture")                                                 \
    X(LWD_PROBLEM_NOT_CLOSED, 1073, 422, "posture-not-closed", "The posture does not close")       \
    X(LWD_PROBLEM_DOCUMENT, 1074, 422, "document-refused", "The document has errors")              \
    X(LWD_PROBLEM_NOT_SERVED, 1075, 422, "not-served-yet", "This question is not served yet")      \
    X(LWD_PROBLEM_UNUSABLE, 1076, 422, "unusable-revision",                                        \
      "This program can not use the stored revision")                                              \
    X(LWD_PROBLEM_NAME_DIFFERS, 1077, 422, "name-differs",                                         \
      "The document's name is not that of the URL")                                                \
    X(LWD_PROBLEM_ACCEPT, 1078, 406, "answer-form", "No acceptable form of answer")                \
    X(LWD_PROBLEM_CSV, 1079, 400, "malformed-csv", "The table can not be read")                    \
    X(LWD_PROBLEM_INTERNAL, 1090, 500, "internal", "The service has a fault")                      \
    X(LWD_PROBLEM_MEMORY, 1091, 503, "not-enough-memory", "There is not enough memory")            \
    X(LWD_PROBLEM_OVERLOADED, 1092, 503, "overloaded", "The service has too much to do")           \
    X(LWD_PROBLEM_CATALOG, 1093, 503, "catalog", "The catalog can not be read or written")         \
    X(LWD_PROBLEM_CATALOG_FULL, 1094, 507, "catalog-full", "There is no room to store this")

typedef enum lwd_problem_id {
#define LWD_PROBLEM_ENUM(id, code, status, slug, title) id,
    LWD_PROBLEM_LIST(LWD_PROBLEM_ENUM)
#undef LWD_PROBLEM_ENUM
        LWD_PROBLEM_COUNT
} lwd_problem_id;

#endif
