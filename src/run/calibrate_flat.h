/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `calibrate flat`: a flat field from several images of something even. */
#ifndef UF_RUN_CALIBRATE_FLAT_H
#define UF_RUN_CALIBRATE_FLAT_H

#include "calibrate/flat.h"
#include "run/calibration.h"

typedef struct uf_flat_job {
    uf_calibration_request common; /* images: of the sample; every page of a file is an image */
    uf_channel_name channel;
    uf_flat_sample sample;
    const char *const *darks; /* frames without light; none: the settings' dark image or offset */
    int dark_count;
    double smooth_px;
} uf_flat_job;

/* Appends the report to `out`, writes fragment, flat image beside it, and plot. UF_INPUT, with no file written, when the
 * images do not make a flat, or one whose noise would add to the data. */
UF_MUST_USE uf_status uf_calibrate_flat(const uf_flat_job *request, uf_text *out, uf_error *error);

#endif
