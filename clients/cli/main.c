/* SPDX-License-Identifier: GPL-3.0-or-later */
/* leeway, the command line of Leeway: reads the arguments, finds the server and the token, runs one
 * command. Talks HTTP only; knows nothing of the service's inside. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "commands.h"

#ifndef LEEWAY_VERSION
#define LEEWAY_VERSION "0"
#endif

static const char DEFAULT_SERVER[] = "http://127.0.0.1:8470";

/* The option, else the environment, else `fallback`; empty counts as not given. */
static const char *choose(const char *option, const char *variable, const char *fallback)
{
    const char *value = getenv(variable);
    return option != NULL                       ? option
           : value != NULL && value[0] != '\0' ? value
                                                : fallback;
}

static bool read_settings(const lwc_args *args, lwc_http_settings *settings)
{
    settings->server = choose(args->server, "LEEWAY_SERVER", DEFAULT_SERVER);
    settings->token_file = choose(args->token_file, "LEEWAY_TOKEN_FILE", NULL);
    settings->timeout_s = 30.0;
    if (args->timeout != NULL &&
        (!lwc_read_number(args->timeout, &settings->timeout_s) ||
         !(settings->timeout_s >= 0.001 && settings->timeout_s <= 86400.0))) {
        lwc_complain("--timeout \"%s\": expected seconds, 0.001 to 86400", args->timeout);
        return false;
    }
    return true;
}

static int run(const lwc_args *args)
{
    static int (*const COMMANDS[LWC_COMMAND_COUNT])(lwc_session *) = {
        [LWC_LOAD] = lwc_cmd_load,         [LWC_LIST] = lwc_cmd_list,
        [LWC_SHOW] = lwc_cmd_show,         [LWC_REPORT] = lwc_cmd_report,
        [LWC_HISTORY] = lwc_cmd_history,   [LWC_PUBLISH] = lwc_cmd_publish,
        [LWC_WITHDRAW] = lwc_cmd_withdraw, [LWC_ASK] = lwc_cmd_ask,
        [LWC_PATH] = lwc_cmd_path,         [LWC_TRAVEL] = lwc_cmd_travel,
        [LWC_DIFFERENCE] = lwc_cmd_difference, [LWC_HEALTH] = lwc_cmd_health,
        [LWC_ABOUT] = lwc_cmd_about,       [LWC_REPLAY] = lwc_cmd_replay,
    };
    lwc_session session = {.args = args};
    lwc_http_settings settings;
    if (!read_settings(args, &settings)) {
        return LWC_EXIT_ERROR;
    }
    session.http = lwc_http_new(&settings);
    if (session.http == NULL) {
        return LWC_EXIT_ERROR;
    }
    lwc_interrupt_watch();
    int status = COMMANDS[args->command](&session);
    lwc_http_free(session.http);
    return status;
}

static int completion(const lwc_args *args)
{
    if (args->n_words != 1 || strcmp(args->words[0], "bash") != 0) {
        lwc_complain("there is a completion for bash: leeway completion bash");
        return LWC_EXIT_ERROR;
    }
    (void)fputs(lwc_completion_text, stdout);
    return LWC_EXIT_YES;
}

static int dispatch(const lwc_args *args, bool help_only)
{
    if (args->version) {
        (void)puts("leeway " LEEWAY_VERSION);
        return LWC_EXIT_YES;
    }
    if (args->command == LWC_HELP) {
        return lwc_help(args->n_words > 0 ? args->words[0] : NULL);
    }
    if (help_only) {
        lwc_help_command(args->command);
        return LWC_EXIT_YES;
    }
    return args->command == LWC_COMPLETION ? completion(args) : run(args);
}

int main(int argc, char **argv)
{
    lwc_args args;
    int status = LWC_EXIT_ERROR;
    if (lwc_args_read(&args, argc, argv)) {
        status = dispatch(&args, args.help);
    }
    lwc_args_clear(&args);
    if (fflush(stdout) != 0 || ferror(stdout)) {
        lwc_complain("the output could not be written; is the disk full?");
        status = LWC_EXIT_ERROR;
    }
    lwc_interrupt_finish();
    return status;
}
