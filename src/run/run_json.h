/* SPDX-License-Identifier: GPL-3.0-or-later */
/* run.json: exactly how the numbers were made. */
#ifndef UF_RUN_RUN_JSON_H
#define UF_RUN_RUN_JSON_H

#include <stdint.h>

#include "optics/plan.h"
#include "settings/settings.h"

typedef struct uf_run_input {
    const char *role; /* "near", "wide", "near flat" .. */
    const char *path;
    uint64_t bytes, fingerprint;
} uf_run_input;

typedef struct uf_run_story {
    const uf_settings *settings;
    const uf_plan *plan;
    const uf_run_input *inputs;
    int input_count;
    const char *warnings; /* one a line */
    const char *command;  /* may be NULL; goes into the part that may vary */
    double seconds;       /* the same */
} uf_run_story;

/* Appends run.json. What may differ between runs stands under "varies_between_runs" only. UF_MEMORY. */
UF_MUST_USE uf_status uf_run_json(uf_text *out, const uf_run_story *story, uf_error *error);

/* Appends the methods paragraph for a paper. */
void uf_methods_paragraph(uf_text *out, const uf_settings *settings, const uf_plan *plan);

#endif
