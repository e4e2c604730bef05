/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <signal.h>
#include <stdio.h>
#include <string.h>

#include "cli/cli.h"

static const uf_command *const commands[] = {&uf_command_optics,  &uf_command_calibrate, &uf_command_sheet,
                                             &uf_command_measure, &uf_command_plate,     &uf_command_merge,
                                             &uf_command_demo,    &uf_command_docs};
enum { COMMANDS = sizeof commands / sizeof commands[0] };

static int print_overview(void)
{
    uf_text out = {0};
    uf_text_add(&out,
                "underfoot " UF_VERSION ": how closely, over how much area and at how many points cells hold on to "
                "their substrate\n\nUsage: underfoot COMMAND [arguments]\n\nCommands:\n");
    for (int k = 0; k < COMMANDS; k++)
        uf_text_printf(&out, "  %-10s %s\n", commands[k]->name, commands[k]->summary);
    uf_text_add(&out, "\nunderfoot COMMAND --help explains one, with an example.\n\n"
                      "Exit status: 0 all done; 1 done, but some fields failed; 2 wrong usage or unusable input;\n"
                      "3 results could not be written; 130 stopped by the user.\n\n"
                      "For research use. The gap is a model's estimate, not a diagnosis.\n");
    int status = uf_print_all(&out);
    uf_text_free(&out);
    return status;
}

static int unknown_command(const char *typed)
{
    const char *nearest = commands[0]->name;
    for (int k = 1; k < COMMANDS; k++)
        if (uf_edit_distance(typed, commands[k]->name) < uf_edit_distance(typed, nearest))
            nearest = commands[k]->name;
    uf_error error;
    uf_fail(&error, UF_USAGE, "unknown command '%.60s'; the nearest is '%s' (underfoot --help lists all)", typed,
            nearest);
    return uf_report_error(&error);
}

/* `underfoot help COMMAND`, as `underfoot COMMAND --help`. */
static int help_for(const char *typed)
{
    char option[] = "--help", *arguments[] = {option};
    for (int k = 0; k < COMMANDS; k++)
        if (strcmp(typed, commands[k]->name) == 0)
            return commands[k]->run(1, arguments);
    return unknown_command(typed);
}

int main(int argc, char **argv)
{
    /* A reader that closes the pipe early, or a limit on file sizes, is an error to report, not a reason to die
     * without a word. */
    (void)signal(SIGPIPE, SIG_IGN);
    (void)signal(SIGXFSZ, SIG_IGN);
    if (argc < 2 || strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "-h") == 0) {
        int status = print_overview();
        return argc < 2 && status == EXIT_DONE ? EXIT_CANNOT : status;
    }
    if (strcmp(argv[1], "--version") == 0) {
        uf_text out = {0};
        uf_text_printf(&out, "underfoot %s\nGPL-3.0-or-later; no warranty.\n", uf_version());
        int status = uf_print_all(&out);
        uf_text_free(&out);
        return status;
    }
    if (strcmp(argv[1], "help") == 0 && argc == 2)
        return print_overview();
    for (int k = 0; k < COMMANDS; k++)
        if (strcmp(argv[1], commands[k]->name) == 0)
            return commands[k]->run(argc - 2, argv + 2);
    if (strcmp(argv[1], "help") == 0)
        return help_for(argv[2]);
    return unknown_command(argv[1]);
}
