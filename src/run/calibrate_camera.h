/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The job `calibrate camera`: offset, gain, noise, range and defects by photon transfer. */
#ifndef UF_RUN_CALIBRATE_CAMERA_H
#define UF_RUN_CALIBRATE_CAMERA_H

#include "run/calibration.h"
#include "settings/settings.h"

/* One set of frames; every page of a file is a frame. */
typedef struct uf_camera_frames {
    const char *const *darks, *const *flats; /* flats in pairs of one exposure: first, second, first, second .. */
    int dark_count, flat_count;
    uf_reals exposures_ms; /* one a pair; count 0: unknown */
} uf_camera_frames;

typedef struct uf_camera_request {
    uf_calibration_request common;
    uf_channel_name channel;
    uf_camera_frames frames;
    uf_camera_frames plain; /* the same light without multiplication, to tell the excess noise; flat_count 0: none */
    double excess_noise;    /* as known; 1 for cameras that do not multiply */
} uf_camera_request;

/* Appends the report to `out`, writes fragment, dark image and defect map beside it, and plot. UF_INPUT, with no file
 * written, when the frames do not tell the camera. */
UF_MUST_USE uf_status uf_calibrate_camera(const uf_camera_request *request, uf_text *out, uf_error *error);

#endif
