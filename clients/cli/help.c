/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Help that teaches: what a command is for, how it is written, an example, what comes next. The
 * list of options comes from the table in args.c. */
#include <stdio.h>
#include <string.h>

#include "commands.h"
#include "table.h"

static const struct topic {
    const char *usage;
    const char *text; /* purpose, examples, next step */
} TOPICS[LWC_COMMAND_COUNT] = {
    [LWC_LOAD] = {"load FILE...",
                  "Stores a mechanism document as a new draft revision, under the name it gives\n"
                  "itself, and lists the findings: what, where (a JSON pointer), how grave. A\n"
                  "document with an error is refused and nothing of it is stored. Loading the\n"
                  "same content again changes nothing. \"-\" reads standard input.\n\n"
                  "  leeway load label-stage.json\n\n"
                  "Next: leeway report label-stage 1; leeway publish label-stage 1\n"},
    [LWC_LIST] = {"list",
                  "Lists the mechanisms of the catalog and which revision answers.\n\n"
                  "  leeway list\n\n"
                  "Next: leeway show NAME; leeway ask margin NAME m1=0 m2=0\n"},
    [LWC_SHOW] = {"show NAME [REV]",
                  "Shows a revision's document; without REV the mechanism's entry and the\n"
                  "document that answers.\n\n"
                  "  leeway show label-stage\n"
                  "  leeway show label-stage 2 --json > label-stage-2.json\n\n"
                  "Next: leeway report NAME [REV]\n"},
    [LWC_REPORT] = {"report NAME [REV]",
                    "Shows what was found when a revision was loaded: findings, mobility, limbs,\n"
                    "modes and the signs of their names. Without REV: the one that answers.\n\n"
                    "  leeway report label-stage 2\n\n"
                    "Next: leeway publish label-stage 2 --accept CODE (where warnings stand)\n"},
    [LWC_HISTORY] = {"history NAME",
                     "Lists the revisions of a mechanism and what happened to them.\n\n"
                     "  leeway history label-stage\n\n"
                     "Next: leeway difference NAME A B\n"},
    [LWC_PUBLISH] = {"publish NAME REV",
                     "Lets a revision answer from now on. Warnings of its report must be accepted\n"
                     "by name. Publishing an older revision again is the way back. Wants a token\n"
                     "of role admin where the service asks for tokens.\n\n"
                     "  leeway publish label-stage 2 --reason \"offsets measured 12 May\"\n"
                     "  leeway publish lid-turner 1 --accept singular-reference\n\n"
                     "Next: leeway replay questions.replay (are the answers still the same?)\n"},
    [LWC_WITHDRAW] = {"withdraw NAME REV",
                      "Takes a revision out of use for good. No other revision answers by itself\n"
                      "then; publish one.\n\n"
                      "  leeway withdraw label-stage 2 --reason \"crank 3 measured wrongly\"\n"},
    [LWC_ASK] =
        {"ask inverse|forward|jacobian|margin|reach|free-travel NAME VALUE...",
         "Asks one question.\n"
         "  inverse    which drive readings take the tool to a pose: all solutions, or --mode\n"
         "  forward    where the tool is at these drive readings\n"
         "  jacobian   tool rates per drive rate and back, at a posture\n"
         "  margin     how much room is left at a posture, and which drive runs out first\n"
         "  reach      can the tool get there, with the margins asked for; from.NAME= proves the\n"
         "             straight move from there\n"
         "  free-travel  how far it can go from here; the same as leeway travel\n\n"
         "Values, in the document's units unless --units says otherwise:\n"
         "  x= y= z=                 tool position      yaw= pitch= roll=   intrinsic z-y'-x''\n"
         "  rz=                      turn in the plane  qw= qx= qy= qz=     quaternion\n"
         "  dx= dy= dz=              tool z axis        rvx= rvy= rvz=      rotation vector\n"
         "  joint.NAME=              joint coordinate   NAME= or drive.NAME=  drive reading\n"
         "  from.NAME= near.NAME=    the same for where a move starts, and for a posture nearby\n\n"
         "  leeway ask inverse label-stage x=10 y=-20 rz=5 --mode elbows-left\n"
         "  leeway ask forward tilt-table m1=520 m2=515 m3=522 m4=520 m5=518 m6=520\n"
         "  leeway ask margin lid-turner x=0 y=0 z=400 joint.spindle=90 --mode ++++++\n"
         "  leeway ask reach case-packer x=600 y=0 z=400 yaw=0 pitch=90 roll=0 --margin-min 1.2\n"
         "  leeway ask inverse label-stage --json-body question.json\n\n"
         "The exit status is 0 for verdict 1, 1 for any other verdict, 2 for errors, 3 where\n"
         "nobody answers; --ok-any makes every verdict 0.\n"
         "Next: add --record questions.replay, and later leeway replay questions.replay\n"},
    [LWC_PATH] =
        {"path NAME FILE from.NAME=...",
         "Proves a list of moves, one after the other: every point between is proved clear, not\n"
         "sampled, or the move says where it breaks and what stops it. FILE is JSON (the\n"
         "question, or the list of moves alone) or a table of comma-separated values whose\n"
         "header names the columns: line, move (line, circle or joints), x y z, an orientation,\n"
         "via.x via.y via.z, joint.NAME, drives by name. \"-\" reads standard input.\n\n"
         "  leeway path label-stage job.csv --from \"m1=90 m2=180 m3=270 m4=0\"\n"
         "  leeway path label-stage job.json --margin-min 1.5 --record job.replay\n\n"
         "  with job.csv:  line,move,x,y,rz,via.x,via.y\n"
         "                 N10,line,15,-10,6,,\n"
         "                 N20,circle,-15,-10,0,0,10\n\n"
         "Proved is the geometry as documented: no collisions, no servo errors, no wear.\n"
         "Next: leeway replay job.replay after each change of the document\n"},
    [LWC_TRAVEL] =
        {"travel NAME VALUE...",
         "How far the tool can go from a posture, along and about each of its own axes: proved\n"
         "free at least, and blocked at. Each way alone; two at once may be blocked sooner.\n\n"
         "  leeway travel label-stage m1=90 m2=180 m3=270 m4=0\n"
         "  leeway travel tilt-table x=0 y=0 z=520 yaw=0 pitch=0 roll=0 --reach \\\n"
         "    position=50,angle=10\n\n"
         "Next: leeway path NAME FILE for the moves themselves\n"},
    [LWC_DIFFERENCE] = {"difference NAME A B",
                        "Says what changed between two revisions, in words and numbers.\n\n"
                        "  leeway difference label-stage 1 2\n\n"
                        "Next: leeway replay questions.replay --revision 2\n"},
    [LWC_HEALTH] = {"health",
                    "Says whether the service is alive and ready. Exit status 0 only if both.\n\n"
                    "  leeway health --server http://cell-7:8470\n"},
    [LWC_ABOUT] = {"about",
                   "Shows what the service says of itself: versions, and what it is not.\n"},
    [LWC_REPLAY] =
        {"replay FILE",
         "Asks the questions of a file again, compares the answers with those recorded and\n"
         "tells every difference: pointer, expected, got, off by, tolerance. Members that\n"
         "change by themselves (served_at, digest, revision, state) are left out unless\n"
         "--check names them. A replay only asks; it never changes the catalog.\n\n"
         "  leeway ask inverse label-stage x=10 y=0 rz=0 --record yesterday.replay\n"
         "  leeway replay yesterday.replay                     against what is published\n"
         "  leeway replay yesterday.replay --revision 3        before publishing revision 3\n"
         "  leeway replay yesterday.replay --tolerance length_mm=0.01,angle_deg=0.01\n"
         "  leeway replay yesterday.replay --update            take the new answers as expected\n\n"
         "The exit status is 0 if all is the same, 1 for differences, 2 for errors, 3 where\n"
         "nobody answers. The format is told in the manual page, leeway(1).\n"},
    [LWC_COMPLETION] = {"completion bash",
                        "Prints the completion for bash.\n\n"
                        "  source <(leeway completion bash)\n"},
    [LWC_HELP] = {"help [COMMAND]", "Explains a command, or lists them all.\n"},
};

static const char OVERVIEW[] =
    "leeway asks a Leeway service where a machine's tool is, whether it can get somewhere, in\n"
    "which modes, and how much room is left. Leeway advises; it is no safety function.\n\n"
    "usage: leeway COMMAND ... [--server URL] [--token-file FILE] [--json] [--timeout SECONDS]\n\n"
    "  ask         inverse, forward, jacobian, margin or reach of a mechanism\n"
    "  path        prove a list of moves           travel      how far the tool can go from here\n"
    "  list        mechanisms of the catalog\n"
    "  show        a mechanism or one revision of it\n"
    "  load        store a document as a draft and list its findings\n"
    "  report      what was found in a revision\n"
    "  history     revisions and what happened to them\n"
    "  publish     let a revision answer          withdraw    take one out of use\n"
    "  difference  what changed between two revisions\n"
    "  replay      ask recorded questions again and tell what differs\n"
    "  health      is the service alive and ready  about       what it says of itself\n"
    "  completion  for bash                        help        more about a command\n\n"
    "First steps:\n"
    "  leeway health\n"
    "  leeway load label-stage.json        then: leeway publish label-stage 1\n"
    "  leeway ask reach label-stage x=10 y=0 rz=0\n"
    "  leeway help ask\n\n"
    "Exit status: 0 yes (verdict 1) or done, 1 another verdict or differences, 2 an error of use\n"
    "or of the service, 3 nobody answers.\n"
    "Environment: LEEWAY_SERVER, LEEWAY_TOKEN_FILE, NO_COLOR.\n";

static void show_options(lwc_command command)
{
    size_t count = 0;
    const lwc_option *options = lwc_options(&count);
    lwc_table table;
    lwc_text text = {0};
    lwc_table_init(&table, 2);
    for (size_t i = 0; i < count; i++) {
        if ((options[i].commands & (1u << command)) != 0) {
            lwc_text_reset(&text);
            lwc_text_printf(&text, "--%s%s%s", options[i].name, options[i].value != NULL ? " " : "",
                            options[i].value != NULL ? options[i].value : "");
            lwc_table_text(&table, text.data);
            lwc_table_text(&table, options[i].meaning);
        }
    }
    lwc_text_reset(&text);
    lwc_table_print(&text, &table, 2);
    (void)printf("\noptions\n%s", lwc_text_string(&text));
    lwc_text_clear(&text);
    lwc_table_clear(&table);
}

void lwc_help_command(lwc_command command)
{
    (void)printf("usage: leeway %s\n\n%s", TOPICS[command].usage, TOPICS[command].text);
    show_options(command);
}

int lwc_help(const char *command)
{
    if (command == NULL) {
        (void)fputs(OVERVIEW, stdout);
        return LWC_EXIT_YES;
    }
    const char *names[LWC_COMMAND_COUNT];
    for (int i = 0; i < LWC_COMMAND_COUNT; i++) {
        names[i] = lwc_command_name((lwc_command)i);
        if (strcmp(names[i], command) == 0) {
            lwc_help_command((lwc_command)i);
            return LWC_EXIT_YES;
        }
    }
    const char *near = lwc_nearest(command, names, LWC_COMMAND_COUNT);
    if (near != NULL) {
        lwc_complain("there is no command \"%s\"; did you mean \"%s\"?", command, near);
    } else {
        lwc_complain("there is no command \"%s\"; all commands: leeway help", command);
    }
    return LWC_EXIT_ERROR;
}
