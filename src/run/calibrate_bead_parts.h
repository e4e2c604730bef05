/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What `calibrate bead` found, shared by its job, its words and its plot. */
#ifndef UF_RUN_CALIBRATE_BEAD_PARTS_H
#define UF_RUN_CALIBRATE_BEAD_PARTS_H

#include "calibrate/bead.h"
#include "optics/evanescent.h"
#include "run/calibrate_bead.h"

typedef enum uf_bead_verdict {
    UF_BEADS_GOOD,
    UF_BEADS_ROUGH,   /* the depth is known to no better than a twentieth */
    UF_BEADS_MISFIT,  /* the profile is not quite a sphere's */
    UF_BEADS_DISAGREE /* with the optics of the instrument file */
} uf_bead_verdict;

typedef struct uf_bead_findings {
    const uf_bead_request *request;
    uf_bench bench; /* with the beads' own medium; na_effective NaN when the instrument file gives no angle */
    uf_bead_setup setup;
    uf_bead_set set;
    uf_bead_result fit;
    double computed_depth_nm,
        computed_sd_nm; /* from the instrument file, in the beads' medium; NaN without an angle */
    /* Parts of the depth's sd, nm. */
    double by_beads_nm, by_psf_nm, by_radius_nm, depth_sd_nm;
    double na_effective, na_effective_sd;
    uf_bead_verdict verdict;
} uf_bead_findings;

void uf_bead_words(uf_text *out, const uf_bead_findings *f);
UF_MUST_USE uf_status uf_bead_json(uf_text *out, const uf_bead_findings *f, uf_error *error);
UF_MUST_USE uf_status uf_bead_plot(const uf_bead_findings *f, const char *path, uf_error *error);

#endif
