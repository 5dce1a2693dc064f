/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A mechanism made ready for questions: opaque, immutable once built, shared by threads. */
#ifndef LEEWAY_MODEL_H
#define LEEWAY_MODEL_H

#include <stdatomic.h>

#include <leeway/err.h>
#include <leeway/spec.h>

typedef struct lw_model lw_model;
typedef struct lw_work lw_work; /* scratch of one thread for one model: no query allocates */

typedef enum lw_severity { LW_NOTE, LW_WARNING, LW_ERROR } lw_severity;

/* One thing validation found. `code` is a stable word such as "mobility-mismatch". */
typedef struct lw_finding {
    lw_severity severity;
    char code[40];
    char where[96]; /* JSON pointer into the document */
    char text[240];
    char expected[80];
    char got[80];
} lw_finding;

enum { LW_MAX_FINDINGS = 96 };

typedef enum lw_limb_kind {
    LW_LIMB_STRUT,        /* a rod, or any joint, between bodies whose pose is known */
    LW_LIMB_RAIL_ROD,     /* prismatic carriage with rods: line against sphere */
    LW_LIMB_CRANK_ROD,    /* revolute crank with rods: circle against sphere */
    LW_LIMB_TWO_LINK,     /* three parallel revolutes in a row */
    LW_LIMB_WRIST_ARM,    /* six revolutes, the last three through one point */
    LW_LIMB_GENERAL       /* solved by iteration from a start */
} lw_limb_kind;

/* What a limb is, for people and for the list of modes. */
typedef struct lw_limb_info {
    char name[LW_NAME_SIZE];       /* of its first joint or rod in document order */
    lw_limb_kind kind;
    size_t branches;               /* inverse solutions counted: 1, 2, 8; 0 = not known */
    size_t classes;                /* branch classes where they are numbered and not counted so */
    size_t n_drive;
    size_t drive[LW_MAX_DRIVES];   /* drives that move it */
    char plus[96];                 /* what + means, in words */
} lw_limb_info;

/* A prepared solution set: all complex solutions at one generic point, which questions are tracked
 * from. */
typedef struct lw_set_info {
    bool present;
    bool closed;       /* the trace test says that none is missing */
    size_t solutions;  /* isolated complex solutions */
    size_t degree;     /* points of the witness set behind the trace test */
    unsigned long paths; /* work of preparing it */
    size_t n_drive;    /* forward: the drives whose readings are its inputs */
    size_t drive[LW_MAX_DRIVES];
} lw_set_info;

/* What loading found out. */
typedef struct lw_report {
    size_t n_finding;
    lw_finding finding[LW_MAX_FINDINGS];
    size_t findings_lost;          /* beyond LW_MAX_FINDINGS */
    /* rank of the closure derivative, generic; idle spins left out */
    int mobility;
    int mobility_counted;          /* Gruebler-Kutzbach count, 6 (bodies - 1 - joints) + freedoms */
    int idle_spins;
    int redundancy_drives;         /* drives - mobility */
    int redundancy_kinematic;      /* mobility - outputs */
    size_t closure_rows, closure_rank, unknowns;
    double rank_kept, rank_dropped;/* smallest kept, largest dropped relative singular value */
    bool assumes_exact_geometry;   /* overconstrained: the rank holds for the geometry as drawn */
    lw_motion motion;              /* computed pattern of the first tool */
    double characteristic_length_m;
    bool length_from_document;
    size_t n_limb;
    lw_limb_info limb[LW_MAX_LIMBS];
    bool explicit_inverse;         /* every limb is solved without iteration */
    lw_mode home_mode, reference_mode;
    size_t n_mode_name;            /* signs of the document's named modes, document order */
    lw_mode mode_name[LW_MAX_MODES];
    lw_set_info forward_set, inverse_set;
    size_t samples;                /* random configurations the checks were run at */
    double worst_closure;          /* relative closure residual over the samples */
    double worst_derivative;       /* derivative against difference */
    double worst_roundtrip_m;      /* inverse(forward(x)) = x */
} lw_report;

/* Builds and validates. Returns LW_OK with *out set when the report holds no error; LW_E_MODEL with
 * *out = NULL and the findings in the report when the mechanism cannot be used; LW_E_MEMORY.
 * `seed` makes the random configurations of the checks (take it from the document's digest). */
lw_code lw_model_new(lw_model **out, const lw_spec *spec, unsigned long long seed,
                     lw_report *report, lw_err *err);
void lw_model_free(lw_model *model);

/* Solution sets, made before the model is shared and its first work object exists: seconds of
 * work, bounded by the number of paths tracked, the same on every machine for the same seed.
 * Where a set is not served (screws among the unknowns, too large) the model stays without it
 * and answers from starts. `abort` (NULL: none), raised by another thread, ends it within a few
 * paths with LW_E_ABORTED. Sets can be kept and loaded again; damaged ones are refused with
 * LW_E_MODEL. */
lw_code lw_model_prepare(lw_model *model, unsigned long long seed, unsigned long max_paths,
                         const atomic_bool *abort, lw_err *err);
size_t lw_model_sets_size(const lw_model *model);
void lw_model_sets_save(void *out, const lw_model *model); /* lw_model_sets_size bytes */
lw_code lw_model_sets_load(lw_model *model, unsigned long long seed, const void *data, size_t size,
                           lw_err *err);

/* Borrowed until the model is freed. */
const lw_spec *lw_model_spec(const lw_model *model);
const lw_report *lw_model_report(const lw_model *model);

lw_code lw_work_new(lw_work **out, const lw_model *model, lw_err *err);
void lw_work_free(lw_work *work);

/* "+-++" or "+1.-2": contract of mode text. Text needs LW_MODE_TEXT_SIZE bytes. */
void lw_mode_text(char *text, const lw_mode *mode);
/* Parses; false if malformed or the number of entries differs from n_limb. A blank counts as
 * '+'. */
bool lw_mode_parse(lw_mode *out, const char *text, size_t n_limb);
bool lw_mode_same(const lw_mode *a, const lw_mode *b);
/* Small integer of a mode for registers, 1.. in the order of signs and classes; 0 if none. */
unsigned lw_mode_number(const lw_model *model, const lw_mode *mode);

#endif
