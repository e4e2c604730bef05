/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The commands of `underfoot sheet`, and what they share. */
#ifndef UF_CLI_SHEET_COMMANDS_H
#define UF_CLI_SHEET_COMMANDS_H

#include "cli/cli.h"
#include "sheet/fault.h"

extern const uf_command uf_command_sheet_build, uf_command_sheet_check, uf_command_sheet_layout;

/* A whole number from 1 to `most`; 0 when the option was not given. */
UF_MUST_USE uf_status uf_option_whole(const char *option, const char *text, int most, int *value, uf_error *error);

/* Faults end in exit status 2, with one line that says how many of them `what` has. */
int uf_close_with_faults(const char *what, const uf_faults *faults, const char *mend);

#endif
