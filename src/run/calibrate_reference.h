/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `calibrate reference`: the near/wide ratio that stands for a known gap. */
#ifndef UF_RUN_CALIBRATE_REFERENCE_H
#define UF_RUN_CALIBRATE_REFERENCE_H

#include "run/calibration.h"

typedef struct uf_reference_request {
    uf_calibration_request common; /* images: NEAR WIDE, or several such pairs; none with a sheet */
    int kind;                      /* UF_REFERENCE_FILM or UF_REFERENCE_CELL; not with a sheet */
    double gap_nm, gap_sd_nm;      /* of that film, or of those cells; NaN with a sheet: the settings' assumed gap */
    const char *blank_near,
        *blank_wide;                 /* images of bare substrate, what shines without a film; NULL: nothing does */
    double exposure_ms[UF_CHANNELS]; /* NaN: the settings' */
    const char *sheet_path;          /* take reference wells (else controls) of a sheet; NULL: pairs */
} uf_reference_request;

/*
 * Appends the report to `out`, writes the fragment, and beside it a CSV with one row a plate and session. With a sheet of
 * several plates or sessions there is one fragment each, named by them. UF_INPUT, with no file written, when there is no
 * ratio to be had.
 */
UF_MUST_USE uf_status uf_calibrate_reference(const uf_reference_request *request, uf_text *out, uf_error *error);

#endif
