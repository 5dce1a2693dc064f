/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the operator says: command line and configuration file, the same keys in both; the command
 * line wins. Used by main.c only. */
#ifndef LWD_CONFIG_H
#define LWD_CONFIG_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>

#include "http/http.h"
#include "log.h"

enum { LWD_CONFIG_LISTEN_MAX = 4 };

#define LWD_DEFAULT_LISTEN "127.0.0.1:8470"
#define LWD_DEFAULT_DATA "/var/lib/leeway"

typedef enum lwd_action {
    LWD_ACTION_RUN,
    LWD_ACTION_HELP,
    LWD_ACTION_VERSION,
    LWD_ACTION_MAKE_TOKEN,
    LWD_ACTION_QUICK_CHECK,
    LWD_ACTION_BACKUP
} lwd_action;

typedef struct lwd_config {
    lwd_action action;
    char *listen[LWD_CONFIG_LISTEN_MAX];
    size_t n_listen; /* 0: the default, unless a supervisor hands sockets over */
    char *unix_path;
    char *data_dir;
    char *token_file;
    char *port_file;
    lwd_log_level log_level;
    lwd_http_options http;
    unsigned prepare_paths; /* 0: the default */
    const char *backup_file; /* of --backup; from argv */
    const char *token_name; /* of --make-token; from argv */
    const char *token_role;
} lwd_config;

/* Reads the command line and the file it names. False with one sentence in `why`, naming the
 * option, or the file and line, at fault. Clear the config in both cases. */
bool lwd_config_read(lwd_config *config, int argc, char **argv, char *why, size_t why_size);
void lwd_config_clear(lwd_config *config);

void lwd_config_help(FILE *out);

#endif
