/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `optics`: the numbers of an evanescent set-up. */
#ifndef UF_RUN_OPTICS_H
#define UF_RUN_OPTICS_H

#include "optics/evanescent.h"
#include "settings/settings.h"

/* Appends the report in words, or as one JSON object. UF_INPUT when the set-up is not totally reflected (the
 * error gives the smallest angle that would be) or lacks a number. */
UF_MUST_USE uf_status uf_optics_report(const uf_settings *settings, int as_json, uf_text *out, uf_error *error);

#endif
