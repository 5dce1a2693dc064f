/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the user typed, taken apart: one table of options says which command takes which, and the
 * help and the completion check read the same table. */
#ifndef LWC_ARGS_H
#define LWC_ARGS_H

#include "text.h"

typedef enum lwc_command {
    LWC_LOAD,
    LWC_LIST,
    LWC_SHOW,
    LWC_REPORT,
    LWC_HISTORY,
    LWC_PUBLISH,
    LWC_WITHDRAW,
    LWC_ASK,
    LWC_PATH,
    LWC_TRAVEL,
    LWC_DIFFERENCE,
    LWC_HEALTH,
    LWC_ABOUT,
    LWC_REPLAY,
    LWC_COMPLETION,
    LWC_HELP,
    LWC_COMMAND_COUNT
} lwc_command;

typedef struct lwc_args {
    lwc_command command;
    const char **words; /* what follows the command and is no option */
    size_t n_words;
    /* every command */
    const char *server;
    const char *token_file;
    const char *timeout;
    bool json;
    bool help;
    bool version;
    /* publish, withdraw */
    const char *accept;
    const char *reason;
    /* ask, path, travel */
    const char *mode;
    const char *tool;
    const char *revision; /* replay too */
    const char *margin_min;
    const char *units;
    const char *near;
    const char *from;
    const char *ref;
    const char *expect;
    const char *orientation;
    const char *point;
    const char *in;
    const char *budget;
    const char *timeout_ms;
    const char *reach; /* travel */
    const char *json_body;
    const char *record;
    bool all;
    bool distance;
    bool certificate; /* path */
    bool ok_any;
    /* replay */
    const char *mechanism;
    const char *check;
    const char *ignore;
    const char *tolerance;
    bool update;
} lwc_args;

typedef struct lwc_option {
    const char *name;    /* without the two hyphens */
    const char *value;   /* what to write for the value; NULL for a switch */
    size_t offset;       /* of the member in lwc_args */
    unsigned commands;   /* bit 1 << lwc_command for each that takes it */
    const char *meaning;
} lwc_option;

const lwc_option *lwc_options(size_t *count);
const char *lwc_command_name(lwc_command command);

/* False after a complaint on stderr. The words point into argv; free with lwc_args_clear. */
bool lwc_args_read(lwc_args *args, int argc, char **argv);
void lwc_args_clear(lwc_args *args);

/* The word of `known` nearest to `typed`, or NULL where none is near; for "did you mean". */
const char *lwc_nearest(const char *typed, const char *const *known, size_t count);

#endif
