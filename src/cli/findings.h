/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lists of faults, warnings and notes, as lines for people. */
#ifndef UF_CLI_FINDINGS_H
#define UF_CLI_FINDINGS_H

#include "cli/cli.h"
#include "sheet/fault.h"

/* Appends "FILE:LINE: column: text" a line, of those at least as severe as `least`. Of many of one kind the first dozen are
 * shown and the others counted. */
void uf_findings_put(uf_text *out, const uf_faults *faults, uf_severity least);

/* The same to stderr. */
void uf_findings_print(const uf_faults *faults, uf_severity least);

#endif
