/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reading and writing files of recorded questions, format leeway-replay/1: JSON, one value a line.
 * The first line is the head, every other line one question:
 *   {"format":"leeway-replay/1","title":"..","tolerance":{"length_mm":1e-6,..},"at":{..},
 *    "check":[..],"ignore":[..]}
 *   {"method":"POST","path":"/v1/mechanisms/label-stage/inverse","body":{..},"status":200,
 *    "expect":{..},"note":"..","tolerance":{..},"at":{..},"check":[..],"ignore":[..]}
 * Only questions may stand in it: a replay can never change the catalog. Pure, no network. */
#ifndef LWC_REPLAY_FILE_H
#define LWC_REPLAY_FILE_H

#include "compare.h"

#define LWC_REPLAY_FORMAT "leeway-replay/1"

enum { LWC_REPLAY_FILE_MAX = 256 * 1024 * 1024, LWC_REPLAY_PATH_MAX = 2048 };

typedef struct lwc_replay {
    const char *data; /* borrowed */
    size_t len;
    size_t at;   /* where the next line starts */
    size_t line; /* number of the line last read */
    cJSON *head;
} lwc_replay;

typedef struct lwc_replay_entry {
    size_t line;
    const char *text; /* the line as it stands in the file, without its end */
    size_t text_len;
    cJSON *tree;      /* owns what follows */
    const char *method;
    const char *path;
    const cJSON *body;   /* NULL for GET */
    const cJSON *expect; /* object or array */
    long status;
    const char *note;    /* or NULL */
} lwc_replay_entry;

/* Reads the head. False with a sentence ("line 1: ...") in `why`. Close it in every case. */
bool lwc_replay_open(lwc_replay *replay, const char *data, size_t len, lwc_text *why);
void lwc_replay_close(lwc_replay *replay);
/* 1 with an entry (clear it), 0 at the end, -1 with a sentence in `why`. */
int lwc_replay_next(lwc_replay *replay, lwc_replay_entry *entry, lwc_text *why);
void lwc_replay_entry_clear(lwc_replay_entry *entry);

/* Rules for one entry: defaults, the head's, the entry's, then the command line's `tolerance`
 * ("length_mm=0.01,ratio=1e-3"), which lwc_replay_tolerance has checked before. */
void lwc_replay_rules(lwc_compare_rules *out, const lwc_replay *replay,
                      const lwc_replay_entry *entry, const char *tolerance);
bool lwc_replay_tolerance(lwc_tolerance *tolerance, const char *list, lwc_text *why);

/* The path with another mechanism, and for GET with another revision in the query; `mechanism` may
 * be NULL, `revision` 0. */
void lwc_replay_path(lwc_text *out, const lwc_replay_entry *entry, const char *mechanism,
                     long revision);
/* The body, with another revision where `revision` is not 0 (then without "expect", which names a
 * digest, also in a batch's members); NULL for GET. Free with cJSON_Delete. */
cJSON *lwc_replay_body(const lwc_replay_entry *entry, long revision);

/* Appends a head, or a question with its answer, each with a line end. */
void lwc_replay_write_head(lwc_text *out);
void lwc_replay_write(lwc_text *out, const char *path, const cJSON *body, long status,
                      const cJSON *answer);
/* The entry's line with status and expectation replaced. */
void lwc_replay_rewrite(lwc_text *out, const lwc_replay_entry *entry, long status,
                        const cJSON *expect);

#endif
