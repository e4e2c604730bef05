/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The decay in force, from settings and, for model = table, the file they name. */
#ifndef UF_RUN_DECAY_LAW_H
#define UF_RUN_DECAY_LAW_H

#include "optics/decay.h"
#include "settings/settings.h"

/* No table is longer; a picture given by mistake is. */
enum { UF_DECAY_FILE_BYTES = 1 << 20 };

/* UF_INPUT names file and line: columns other than gap_nm and relative, gaps that do not rise from 0, an excitation
 * that does not fall or is not above 0. Values are divided by the one at gap 0. */
UF_MUST_USE uf_status uf_decay_law_make(const uf_settings *settings, uf_decay_law *law, uf_error *error);

#endif
