/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `calibrate bead`: the depth of the evanescent field and the stray light, from images of beads. */
#ifndef UF_RUN_CALIBRATE_BEAD_H
#define UF_RUN_CALIBRATE_BEAD_H

#include "run/calibration.h"

typedef struct uf_bead_request {
    uf_calibration_request common; /* images: near images of beads */
    double radius_nm, radius_sd_nm;
    double bead_n;       /* NaN: not given, and frustrated reflection not checked */
    double medium_n;     /* the beads' own medium; NaN: the instrument file's */
    double psf_sigma_nm; /* NaN: from wavelength and aperture */
    int immersed;        /* dye in the medium, not on the beads */
    int with_stray;      /* model = scattered */
    int despite_optics;  /* write the fragment although it contradicts the instrument file */
} uf_bead_request;

/* Appends the report to `out`, writes fragment and plot. UF_INPUT with no fragment when the beads cannot be used. */
UF_MUST_USE uf_status uf_calibrate_bead(const uf_bead_request *request, uf_text *out, uf_error *error);

#endif
