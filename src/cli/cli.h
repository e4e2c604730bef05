/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The command line: the one layer that prints and exits. */
#ifndef UF_CLI_CLI_H
#define UF_CLI_CLI_H

#include <stdbool.h>

#include "base/text.h"
#include "settings/settings.h"

/* Exit statuses, as documented in --help. */
enum { EXIT_DONE = 0, EXIT_SOME_FAILED = 1, EXIT_CANNOT = 2, EXIT_NOT_WRITTEN = 3, EXIT_STOPPED = 130 };

/* One option of a command. Its value goes to `text` (last one wins), `list` (repeatable), or sets `flag`. */
typedef struct uf_option {
    const char *name;     /* without the dashes */
    char letter;          /* short form, 0: none */
    const char *argument; /* name of its value in help, NULL for a flag */
    const char *help;
    const char **text;
    bool *flag;
    const char **list;
    int *count, limit;
} uf_option;

/* A list that may hold at least so many takes every argument up to the next option: --dark a.tif b.tif. */
enum { UF_OPTION_TAKES_ALL = 256 };

typedef struct uf_command {
    const char *name, *arguments; /* "NEAR WIDE" */
    const char *summary;          /* one line for the list of commands */
    const char *about;            /* paragraph for --help */
    const char *example;          /* runnable */
    int (*run)(int argc, char **argv);
} uf_command;

/* Sorts argv (after the command's name) into options and operands. UF_USAGE names the option and the nearest
 * known one. *help is set when --help is asked for. */
UF_MUST_USE uf_status uf_options_parse(int argc, char **argv, const uf_option *options, int option_count,
                                       const char **operands, int *operand_count, int operand_limit, bool *help,
                                       uf_error *error);

/* Prints a command's --help to stdout; `more` (may be NULL) follows the options. */
int uf_help_print(const uf_command *command, const uf_option *options, int option_count, const char *more);

/* Prints the error to stderr and gives the exit status for it. */
int uf_report_error(const uf_error *error);

/* Prints `text` to stdout and makes sure that it arrived: EXIT_DONE or EXIT_NOT_WRITTEN. */
int uf_print_all(const uf_text *text);

/* Reads instrument and assay files in order. */
UF_MUST_USE uf_status uf_read_settings(const char **instruments, int instrument_count, const char **assays,
                                       int assay_count, uf_settings **settings, uf_error *error);

/* The command as it was typed, for logs: "underfoot NAME arg arg". */
void uf_join_command(uf_text *out, const char *name, int argc, char **argv);

/* Threads from --threads, or the number of processors. UF_USAGE unless 1 .. 256. */
UF_MUST_USE uf_status uf_threads(const char *text, int *threads, uf_error *error);

extern const uf_command uf_command_calibrate, uf_command_measure, uf_command_optics, uf_command_sheet,
    uf_command_plate, uf_command_merge, uf_command_demo, uf_command_docs;

#endif
