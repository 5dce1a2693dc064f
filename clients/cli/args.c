/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Taking the command line apart; see args.h. Options may stand before or after the command,
 * as "--name value" or "--name=value"; "--" ends them. */
#include "args.h"

#include <stdlib.h>
#include <string.h>

#define ONLY(command) (1u << (command))
/* What the three that ask have in common. */
#define ASKING (ONLY(LWC_ASK) | ONLY(LWC_PATH) | ONLY(LWC_TRAVEL))
#define EVERY ((1u << LWC_COMMAND_COUNT) - 1u)
#define AT(member) offsetof(lwc_args, member)

static const char *const COMMAND_NAMES[LWC_COMMAND_COUNT] = {
    [LWC_LOAD] = "load",         [LWC_LIST] = "list",
    [LWC_SHOW] = "show",         [LWC_REPORT] = "report",
    [LWC_HISTORY] = "history",   [LWC_PUBLISH] = "publish",
    [LWC_WITHDRAW] = "withdraw", [LWC_ASK] = "ask",
    [LWC_PATH] = "path",         [LWC_TRAVEL] = "travel",
    [LWC_DIFFERENCE] = "difference", [LWC_HEALTH] = "health",
    [LWC_ABOUT] = "about",       [LWC_REPLAY] = "replay",
    [LWC_COMPLETION] = "completion", [LWC_HELP] = "help",
};

static const lwc_option OPTIONS[] = {
    {"accept", "CODE,...", AT(accept), ONLY(LWC_PUBLISH),
     "publish in spite of these warnings, named one by one"},
    {"reason", "TEXT", AT(reason), ONLY(LWC_PUBLISH) | ONLY(LWC_WITHDRAW),
     "why; kept in the history"},
    {"mode", "SIGNS|NAME", AT(mode), ONLY(LWC_ASK) | ONLY(LWC_TRAVEL),
     "working mode, +-++ or a name from the document; \"any\" with reach"},
    {"near", "WHERE", AT(near), ASKING,
     "posture or pose nearby, \"m1=10 m2=20\" or \"x=0 y=0\""},
    {"from", "WHERE", AT(from), ONLY(LWC_ASK) | ONLY(LWC_PATH),
     "where the move (reach) or the path starts, \"m1=10 m2=20\""},
    {"tool", "NAME", AT(tool), ASKING, "tool of the document; else its first one"},
    {"revision", "N", AT(revision), ASKING | ONLY(LWC_REPLAY),
     "this revision instead of the published one"},
    {"margin-min", "V|NAME=V,...", AT(margin_min), ASKING,
     "least room wanted, for all margins or by name (reach, path, travel)"},
    {"units", "mm|m,deg|rad", AT(units), ASKING, "units of question and answer"},
    {"orientation", "FORM", AT(orientation), ASKING,
     "zyx, quaternion, rotation_vector, direction or rz in the answer"},
    {"all", NULL, AT(all), ONLY(LWC_ASK), "all solutions, not the tracked one (forward)"},
    {"point", "x=..,y=..,z=..", AT(point), ONLY(LWC_ASK), "reference point (jacobian)"},
    {"in", "FRAME", AT(in), ONLY(LWC_ASK), "frame of the rates (jacobian)"},
    {"distance", NULL, AT(distance), ONLY(LWC_ASK), "also the distance to singularities (margin)"},
    {"budget", "N", AT(budget), ASKING, "work allowed (reach, path, travel, margin --distance)"},
    {"timeout-ms", "N", AT(timeout_ms), ASKING, "the service gives up after this; only aborts"},
    {"certificate", NULL, AT(certificate), ONLY(LWC_PATH),
     "list the proved intervals; with --json they are printed"},
    {"reach", "position=V,angle=V", AT(reach), ONLY(LWC_TRAVEL), "how far to look each way"},
    {"ref", "TEXT", AT(ref), ASKING, "at most 32 characters, echoed in the answer"},
    {"expect", "DIGEST", AT(expect), ASKING,
     "refuse unless the revision's digest begins with this"},
    {"json-body", "FILE|-", AT(json_body), ONLY(LWC_ASK), "send this question as it stands"},
    {"record", "FILE", AT(record), ASKING,
     "append the question and its answer, for replay"},
    {"ok-any", NULL, AT(ok_any), ASKING, "exit status 0 whatever the verdict"},
    {"mechanism", "NAME", AT(mechanism), ONLY(LWC_REPLAY), "ask this mechanism instead"},
    {"check", "NAME,...", AT(check), ONLY(LWC_REPLAY),
     "compare these members too: digest, revision, state, ..."},
    {"ignore", "NAME,...", AT(ignore), ONLY(LWC_REPLAY), "leave these members out"},
    {"tolerance", "KIND=V,...", AT(tolerance), ONLY(LWC_REPLAY),
     "length_mm, angle_deg, ratio, reading; beats the file's"},
    {"update", NULL, AT(update), ONLY(LWC_REPLAY), "write the answers got into FILE"},
    {"server", "URL", AT(server), EVERY,
     "the service; else LEEWAY_SERVER, else http://127.0.0.1:8470"},
    {"token-file", "FILE", AT(token_file), EVERY, "file with the token; else LEEWAY_TOKEN_FILE"},
    {"timeout", "SECONDS", AT(timeout), EVERY, "longest wait for one answer, 30"},
    {"json", NULL, AT(json), EVERY, "print the answer as it came"},
    {"help", NULL, AT(help), EVERY, "explain the command"},
    {"version", NULL, AT(version), EVERY, "print the version"},
};

enum { OPTION_COUNT = sizeof OPTIONS / sizeof OPTIONS[0], TYPED_MAX = 24 };

const lwc_option *lwc_options(size_t *count)
{
    *count = OPTION_COUNT;
    return OPTIONS;
}

const char *lwc_command_name(lwc_command command)
{
    return COMMAND_NAMES[command];
}

/* Edit distance of two short words, cut off at TYPED_MAX characters. */
static size_t edit_distance(const char *a, const char *b)
{
    size_t row[TYPED_MAX + 1];
    size_t len_b = strlen(b) < TYPED_MAX ? strlen(b) : TYPED_MAX;
    for (size_t j = 0; j <= len_b; j++) {
        row[j] = j;
    }
    for (size_t i = 0; a[i] != '\0' && i < TYPED_MAX; i++) {
        size_t diagonal = row[0];
        row[0] = i + 1;
        for (size_t j = 0; j < len_b; j++) {
            size_t change = diagonal + (a[i] != b[j]);
            size_t drop = (row[j] < row[j + 1] ? row[j] : row[j + 1]) + 1;
            diagonal = row[j + 1];
            row[j + 1] = change < drop ? change : drop;
        }
    }
    return row[len_b];
}

const char *lwc_nearest(const char *typed, const char *const *known, size_t count)
{
    const char *best = NULL;
    size_t best_distance = strlen(typed) > 4 ? 3 : 2; /* further off is no help */
    for (size_t i = 0; i < count; i++) {
        size_t distance = edit_distance(typed, known[i]);
        if (distance < best_distance) {
            best_distance = distance;
            best = known[i];
        }
    }
    return best;
}

static const lwc_option *find_option(const char *name, size_t len)
{
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (strlen(OPTIONS[i].name) == len && memcmp(OPTIONS[i].name, name, len) == 0) {
            return &OPTIONS[i];
        }
    }
    return NULL;
}

static bool complain_unknown_option(const char *word, size_t len)
{
    const char *names[OPTION_COUNT];
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        names[i] = OPTIONS[i].name;
    }
    char typed[TYPED_MAX + 1] = "";
    for (size_t i = 0; i < len && i < TYPED_MAX; i++) {
        typed[i] = word[2 + i];
    }
    const char *near = lwc_nearest(typed, names, OPTION_COUNT);
    if (near != NULL) {
        lwc_complain("there is no option --%s; did you mean --%s?", typed, near);
    } else {
        lwc_complain("there is no option --%s; see: leeway help", typed);
    }
    return false;
}

/* Takes the option at argv[*at]; moves *at past a value given as its own word. */
static bool take_option(lwc_args *args, const lwc_option **used, size_t *n_used, int argc,
                        char **argv, int *at)
{
    char *word = argv[*at];
    char *equals = strchr(word, '=');
    size_t len = equals != NULL ? (size_t)(equals - word) - 2 : strlen(word) - 2;
    const lwc_option *option = find_option(word + 2, len);
    if (option == NULL) {
        return complain_unknown_option(word, len);
    }
    for (size_t i = 0; i < *n_used; i++) {
        if (used[i] == option) {
            lwc_complain("--%s is given twice; give it once", option->name);
            return false;
        }
    }
    used[(*n_used)++] = option;
    char *member = (char *)args + option->offset;
    if (option->value == NULL) {
        if (equals != NULL) {
            lwc_complain("--%s takes no value; leave out \"%s\"", option->name, equals);
            return false;
        }
        *(bool *)(void *)member = true;
        return true;
    }
    if (equals == NULL && *at + 1 >= argc) {
        lwc_complain("--%s wants a value: --%s %s", option->name, option->name, option->value);
        return false;
    }
    *(const char **)(void *)member = equals != NULL ? equals + 1 : argv[++*at];
    return true;
}

static bool find_command(lwc_args *args, const char *word)
{
    for (int i = 0; i < LWC_COMMAND_COUNT; i++) {
        if (strcmp(COMMAND_NAMES[i], word) == 0) {
            args->command = (lwc_command)i;
            return true;
        }
    }
    const char *near = lwc_nearest(word, COMMAND_NAMES, LWC_COMMAND_COUNT);
    if (near != NULL) {
        lwc_complain("there is no command \"%s\"; did you mean \"%s\"?", word, near);
    } else {
        lwc_complain("there is no command \"%s\"; see: leeway help", word);
    }
    return false;
}

static bool check_options(const lwc_args *args, const lwc_option *const *used, size_t n_used)
{
    for (size_t i = 0; i < n_used; i++) {
        if ((used[i]->commands & ONLY(args->command)) == 0) {
            lwc_complain("\"%s\" takes no option --%s; see: leeway help %s",
                         COMMAND_NAMES[args->command], used[i]->name,
                         COMMAND_NAMES[args->command]);
            return false;
        }
    }
    return true;
}

bool lwc_args_read(lwc_args *args, int argc, char **argv)
{
    *args = (lwc_args){.command = LWC_HELP};
    args->words = lwc_grow(NULL, (size_t)(argc > 0 ? argc : 1) * sizeof(*args->words));
    const lwc_option *used[OPTION_COUNT];
    size_t n_used = 0;
    bool command_known = false;
    bool options_ended = false;
    for (int i = 1; i < argc; i++) {
        if (!options_ended && strcmp(argv[i], "--") == 0) {
            options_ended = true;
        } else if (!options_ended && strcmp(argv[i], "-h") == 0) {
            args->help = true;
        } else if (!options_ended && lwc_starts(argv[i], "--")) {
            if (!take_option(args, used, &n_used, argc, argv, &i)) {
                return false;
            }
        } else if (!command_known) {
            if (!find_command(args, argv[i])) {
                return false;
            }
            command_known = true;
        } else {
            args->words[args->n_words++] = argv[i];
        }
    }
    if (!command_known && !args->help && !args->version) {
        lwc_complain("say what to do, for example: leeway list; all commands: leeway help");
        return false;
    }
    return args->help || check_options(args, used, n_used);
}

void lwc_args_clear(lwc_args *args)
{
    free(args->words);
    args->words = NULL;
    args->n_words = 0;
}
