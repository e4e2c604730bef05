/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What `calibrate reference` found, shared by its job and its report. */
#ifndef UF_RUN_CALIBRATE_REFERENCE_PARTS_H
#define UF_RUN_CALIBRATE_REFERENCE_PARTS_H

#include "calibrate/reference.h"
#include "run/calibrate_reference.h"

enum { UF_REFERENCE_GROUPS = 64, UF_REFERENCE_WELLS = 2048 };

/* One plate in one session; pairs of images are one group of their own. */
typedef struct uf_reference_group {
    const char *plate, *session; /* "" where there is none */
    const uf_settings *settings;
    uf_reference_unit *units; /* of its fields */
    int unit_count;
    const char *well_names[UF_REFERENCE_WELLS];
    int well_count, cells;
    double exposure_ms[UF_CHANNELS];
    char flat[UF_CHANNELS][24]; /* fingerprints, or none */
    uf_reference_pool pool;
    double near_adu, wide_adu; /* of the last film */
    double saturated_fraction; /* largest */
} uf_reference_group;

typedef struct uf_reference_findings {
    const uf_reference_request *request;
    uf_reference_group *groups; /* UF_REFERENCE_GROUPS of them */
    int group_count;
    int is_film;
    const char *role; /* of the sheet's rows: reference, or control */
} uf_reference_findings;

void uf_reference_words(uf_text *out, const uf_reference_findings *f);
UF_MUST_USE uf_status uf_reference_json(uf_text *out, const uf_reference_findings *f, uf_error *error);
/* reference.csv: one row a plate and session. */
void uf_reference_csv(uf_text *out, const uf_reference_findings *f);

/* Name of the fragment of group k: out_path, with plate and session in it where there are several. */
void uf_reference_path(uf_text *out, const uf_reference_findings *f, int k, const char *ending);

#endif
