/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Options of the daemon, see config.h. One table holds every key that may stand in both places. */
#include "config.h"

#include <errno.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

typedef enum kind { KIND_TEXT, KIND_LISTEN, KIND_PORT, KIND_COUNT, KIND_SECONDS, KIND_LEVEL } kind;

typedef struct key {
    const char *name;
    kind kind;
    size_t offset; /* of the member in lwd_config */
    unsigned min;
    unsigned max;
} key;

static const key keys[] = {
    {"listen", KIND_LISTEN, 0, 0, 0},
    {"port", KIND_PORT, 0, 0, 65535},
    {"unix", KIND_TEXT, offsetof(lwd_config, unix_path), 0, 0},
    {"data", KIND_TEXT, offsetof(lwd_config, data_dir), 0, 0},
    {"token-file", KIND_TEXT, offsetof(lwd_config, token_file), 0, 0},
    {"port-file", KIND_TEXT, offsetof(lwd_config, port_file), 0, 0},
    {"log-level", KIND_LEVEL, offsetof(lwd_config, log_level), 0, 0},
    {"workers", KIND_COUNT, offsetof(lwd_config, http.workers), 1, 64},
    {"queue", KIND_COUNT, offsetof(lwd_config, http.queue_max), 1, 4096},
    {"connections", KIND_COUNT, offsetof(lwd_config, http.connections_max), 1, 4096},
    {"connections-per-address", KIND_COUNT, offsetof(lwd_config, http.address_max), 1, 4096},
    {"head-seconds", KIND_SECONDS, offsetof(lwd_config, http.head_ms), 1, 600},
    {"body-seconds", KIND_SECONDS, offsetof(lwd_config, http.body_ms), 1, 600},
    {"idle-seconds", KIND_COUNT, offsetof(lwd_config, http.idle_s), 1, 3600},
    {"drain-seconds", KIND_SECONDS, offsetof(lwd_config, http.drain_ms), 1, 600},
    {"prepare-paths", KIND_COUNT, offsetof(lwd_config, prepare_paths), 1, 10000000},
};
enum { N_KEYS = sizeof keys / sizeof keys[0] };

static const key *key_find(const char *name, size_t len)
{
    for (size_t i = 0; i < N_KEYS; i++) {
        if (strlen(keys[i].name) == len && memcmp(keys[i].name, name, len) == 0) {
            return &keys[i];
        }
    }
    return NULL;
}

static void *member(lwd_config *config, const key *k)
{
    return (char *)config + k->offset;
}

static bool set_text(char **slot, const char *value)
{
    char *copy = strdup(value);
    if (copy == NULL) {
        return false;
    }
    free(*slot);
    *slot = copy;
    return true;
}

static bool number_parse(unsigned *out, const char *text, unsigned min, unsigned max)
{
    char *end;
    unsigned long value;

    if (text[0] < '0' || text[0] > '9') {
        return false;
    }
    errno = 0;
    value = strtoul(text, &end, 10);
    if (errno != 0 || *end != '\0' || value < min || value > max) {
        return false;
    }
    *out = (unsigned)value;
    return true;
}

static bool add_listen(lwd_config *config, const char *value, const char *where, char *why,
                       size_t why_size)
{
    if (config->n_listen >= LWD_CONFIG_LISTEN_MAX) {
        snprintf(why, why_size, "%s: at most %d addresses", where, LWD_CONFIG_LISTEN_MAX);
        return false;
    }
    if (!set_text(&config->listen[config->n_listen], value)) {
        snprintf(why, why_size, "%s: out of memory", where);
        return false;
    }
    config->n_listen++;
    return true;
}

/* Sets one key that holds a number. */
static bool number_set(lwd_config *config, const key *k, const char *value, const char *where,
                       char *why, size_t why_size)
{
    unsigned number = 0;
    char address[32];

    if (!number_parse(&number, value, k->min, k->max)) {
        snprintf(why, why_size, "%s: must be a whole number from %u to %u, got \"%s\"", where,
                 k->min, k->max, value);
        return false;
    }
    if (k->kind == KIND_PORT) {
        snprintf(address, sizeof address, "127.0.0.1:%u", number);
        return add_listen(config, address, where, why, why_size);
    }
    *(unsigned *)member(config, k) = k->kind == KIND_SECONDS ? number * 1000 : number;
    return true;
}

/* Sets one key. `where` begins the sentence in `why`: "--workers" or "FILE, line 3, workers". */
static bool key_set(lwd_config *config, const key *k, const char *value, const char *where,
                    char *why, size_t why_size)
{
    switch (k->kind) {
    case KIND_LISTEN:
        return add_listen(config, value, where, why, why_size);
    case KIND_TEXT:
        if (value[0] == '\0') {
            snprintf(why, why_size, "%s: must not be empty", where);
            return false;
        }
        if (!set_text(member(config, k), value)) {
            snprintf(why, why_size, "%s: out of memory", where);
            return false;
        }
        return true;
    case KIND_LEVEL:
        if (!lwd_log_level_parse(member(config, k), value)) {
            snprintf(why, why_size, "%s: must be error, warn, info or debug, got \"%s\"", where,
                     value);
            return false;
        }
        return true;
    default:
        return number_set(config, k, value, where, why, why_size);
    }
}

static char *trimmed(char *text)
{
    size_t len;
    text += strspn(text, " \t\r\n");
    len = strlen(text);
    while (len > 0 && strchr(" \t\r\n", text[len - 1]) != NULL) {
        text[--len] = '\0';
    }
    return text;
}

static bool line_read(lwd_config *config, char *line, const char *file, unsigned line_no, char *why,
                      size_t why_size)
{
    char where[320];
    char *equals;
    char *name = trimmed(line);
    const key *k;

    if (name[0] == '\0' || name[0] == '#') {
        return true;
    }
    equals = strchr(name, '=');
    if (equals == NULL) {
        snprintf(why, why_size, "%s, line %u: write key = value", file, line_no);
        return false;
    }
    *equals = '\0';
    name = trimmed(name);
    k = key_find(name, strlen(name));
    if (k == NULL) {
        snprintf(why, why_size, "%s, line %u: there is no key \"%s\"; leewayd --help lists all",
                 file, line_no, name);
        return false;
    }
    snprintf(where, sizeof where, "%s, line %u, %s", file, line_no, name);
    return key_set(config, k, trimmed(equals + 1), where, why, why_size);
}

static bool file_read(lwd_config *config, const char *path, char *why, size_t why_size)
{
    FILE *file = fopen(path, "re");
    char *line = NULL;
    size_t cap = 0;
    unsigned line_no = 0;
    bool ok = true;

    if (file == NULL) {
        snprintf(why, why_size, "the configuration file %s can not be opened: %s", path,
                 strerror(errno));
        return false;
    }
    while (ok && getline(&line, &cap, file) >= 0) {
        ok = line_read(config, line, path, ++line_no, why, why_size);
    }
    if (ok && ferror(file)) {
        snprintf(why, why_size, "the configuration file %s can not be read: %s", path,
                 strerror(errno));
        ok = false;
    }
    free(line);
    fclose(file);
    return ok;
}

static void listen_clear(lwd_config *config)
{
    while (config->n_listen > 0) {
        free(config->listen[--config->n_listen]);
        config->listen[config->n_listen] = NULL;
    }
}

/* The value of an option that stands in the same or the next word; NULL if there is none. */
static const char *option_value(int argc, char **argv, int *i, const char *equals)
{
    if (equals != NULL) {
        return equals + 1;
    }
    return *i + 1 < argc ? argv[++*i] : NULL;
}

/* Options that act at once or stand on the command line only; true if the word was one. */
static bool action_option(lwd_config *config, int argc, char **argv, int *i, const char **wrong)
{
    static const struct {
        const char *name;
        lwd_action action;
    } actions[] = {{"--help", LWD_ACTION_HELP},
                   {"-h", LWD_ACTION_HELP},
                   {"--version", LWD_ACTION_VERSION},
                   {"--quick-check", LWD_ACTION_QUICK_CHECK},
                   {"--backup", LWD_ACTION_BACKUP},
                   {"--make-token", LWD_ACTION_MAKE_TOKEN}};

    for (size_t k = 0; k < sizeof actions / sizeof actions[0]; k++) {
        if (strcmp(argv[*i], actions[k].name) != 0) {
            continue;
        }
        config->action = actions[k].action;
        if (config->action == LWD_ACTION_BACKUP) {
            if (*i + 1 >= argc || argv[*i + 1][0] == '\0' || argv[*i + 1][0] == '-') {
                *wrong = "--backup: needs the file to write, such as: --backup copy.sqlite";
                return true;
            }
            config->backup_file = argv[++*i];
        }
        if (config->action == LWD_ACTION_MAKE_TOKEN) {
            if (*i + 2 >= argc) {
                *wrong = "--make-token: needs a name and a role, such as: --make-token plc query";
                return true;
            }
            config->token_name = argv[++*i];
            config->token_role = argv[++*i];
        }
        return true;
    }
    return false;
}

static bool word_read(lwd_config *config, int argc, char **argv, int *i, bool *listen_seen,
                      char *why, size_t why_size)
{
    const char *word = argv[*i];
    const char *equals = strchr(word, '=');
    size_t len = equals != NULL ? (size_t)(equals - word) : strlen(word);
    const char *wrong = NULL;
    const char *value;
    const key *k;
    char where[64];

    if (action_option(config, argc, argv, i, &wrong)) {
        if (wrong != NULL) {
            snprintf(why, why_size, "%s", wrong);
        }
        return wrong == NULL;
    }
    k = len > 2 && memcmp(word, "--", 2) == 0 ? key_find(word + 2, len - 2) : NULL;
    if (k == NULL && !(len == 8 && memcmp(word, "--config", 8) == 0)) {
        snprintf(why, why_size, "there is no option \"%s\"; leewayd --help lists all", word);
        return false;
    }
    snprintf(where, sizeof where, "%.*s", (int)len, word);
    value = option_value(argc, argv, i, equals);
    if (value == NULL) {
        snprintf(why, why_size, "%s: needs a value", where);
        return false;
    }
    if (k == NULL) {
        return true; /* --config was read before */
    }
    if ((k->kind == KIND_LISTEN || k->kind == KIND_PORT) && !*listen_seen) {
        *listen_seen = true;
        listen_clear(config); /* the command line replaces the file's list */
    }
    return key_set(config, k, value, where, why, why_size);
}

/* The file is read first, wherever --config stands, so that the command line wins. */
static bool config_option(lwd_config *config, int argc, char **argv, char *why, size_t why_size)
{
    for (int i = 1; i < argc; i++) {
        const char *path = NULL;
        if (strncmp(argv[i], "--config=", 9) == 0) {
            path = argv[i] + 9;
        } else if (strcmp(argv[i], "--config") == 0 && i + 1 < argc) {
            path = argv[++i];
        }
        if (path != NULL && !file_read(config, path, why, why_size)) {
            return false;
        }
    }
    return true;
}

bool lwd_config_read(lwd_config *config, int argc, char **argv, char *why, size_t why_size)
{
    static const lwd_http_options http_default = LWD_HTTP_OPTIONS_DEFAULT;
    long cores = sysconf(_SC_NPROCESSORS_ONLN);
    bool listen_seen = false;

    memset(config, 0, sizeof *config);
    config->action = LWD_ACTION_RUN;
    config->log_level = LWD_LOG_INFO;
    config->http = http_default;
    config->http.workers = cores > 64 ? 64u : cores > 2 ? (unsigned)cores : 2u;
    if (!set_text(&config->data_dir, LWD_DEFAULT_DATA)) {
        snprintf(why, why_size, "out of memory");
        return false;
    }
    if (!config_option(config, argc, argv, why, why_size)) {
        return false;
    }
    for (int i = 1; i < argc; i++) {
        if (!word_read(config, argc, argv, &i, &listen_seen, why, why_size)) {
            return false;
        }
    }
    return true;
}

void lwd_config_clear(lwd_config *config)
{
    listen_clear(config);
    free(config->unix_path);
    free(config->data_dir);
    free(config->token_file);
    free(config->port_file);
    memset(config, 0, sizeof *config);
}

void lwd_config_help(FILE *out)
{
    fputs(
        "leewayd answers kinematics questions about mechanism models over HTTP.\n"
        "It advises; it is no safety function.\n"
        "\n"
        "  leewayd --data DIR                     serve this machine, on " LWD_DEFAULT_LISTEN "\n"
        "  leewayd --data DIR --listen 0.0.0.0:8470 --token-file FILE\n"
        "                                         serve the network, to holders of a token\n"
        "  leewayd --quick-check --data DIR ...   try everything a start needs, then leave:\n"
        "                                         exit status 0 if it would start\n"
        "  leewayd --backup FILE --data DIR       copy the catalog to FILE, checked, also while a\n"
        "                                         daemon serves it, then leave\n"
        "  leewayd --make-token NAME ROLE         print a new token, and the line to add to the\n"
        "                                         token file; roles: query, author, admin\n"
        "\n"
        "Where it listens\n"
        "  --listen ADDR:PORT     may be given up to 4 times; port 0 takes a free one; an address\n"
        "                         other than loopback needs --token-file\n"
        "  --port N               short for --listen 127.0.0.1:N\n"
        "  --unix PATH            also (or only) on a Unix socket, for its owner and group\n"
        "  --port-file FILE       write the port really taken to FILE once questions are answered\n"
        "  Sockets of a supervisor (LISTEN_FDS) are used instead of the default address.\n"
        "\n"
        "What it keeps and who may ask\n"
        "  --data DIR             directory of the catalog; default " LWD_DEFAULT_DATA "\n"
        "  --token-file FILE      lines \"name role sha256hex\"; read again on SIGHUP. Without it\n"
        "                         everyone on this machine is an admin called \"local\"\n"
        "\n"
        "How much it takes on\n"
        "  --workers N            threads for long questions; default: one a core, at least 2\n"
        "  --queue N              long questions that may wait; default 64, then 503\n"
        "  --connections N        open at once; default 256, then 503\n"
        "  --connections-per-address N    default 64\n"
        "  --head-seconds N       for a request's head to arrive; default 5\n"
        "  --body-seconds N       for its body; default 15\n"
        "  --idle-seconds N       for a silent connection; default 30\n"
        "  --drain-seconds N      for questions under way when stopping; default 10\n"
        "  --prepare-paths N      work allowed for a new document's list of all solutions;\n"
        "                         default 24000 paths, some seconds. Give the same everywhere\n"
        "\n"
        "Other\n"
        "  --config FILE          lines \"key = value\", keys as above without the dashes; '#'\n"
        "                         begins a comment line; the command line wins\n"
        "  --log-level LEVEL      error, warn, info (default: a line a request) or debug\n"
        "  --version, --help\n"
        "\n"
        "SIGTERM or SIGINT stops it: questions begun are answered first. The log goes to standard\n"
        "error. Exit status: 0 stopped or checked, 1 failed, 2 wrong use or unsafe to start.\n",
        out);
}
