/* SPDX-License-Identifier: GPL-3.0-or-later */
/* run.json of a plate run. */
#ifndef UF_RUN_PLATE_JSON_H
#define UF_RUN_PLATE_JSON_H

#include "io/output.h"
#include "run/plate.h"
#include "run/plate_plan.h"

/* Appends it: settings in force and where they came from, references, inputs with checksums, warnings with how many fields
 * they concern, methods. What may differ between runs stands under "varies_between_runs" only. */
UF_MUST_USE uf_status uf_plate_json(uf_text *out, const uf_output *output, const uf_plate_plan *plan,
                                    const uf_plate_summary *summary, const char *command, uf_error *error);

#endif
