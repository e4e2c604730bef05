/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What `calibrate camera` found, shared by its job, its words and its plot. */
#ifndef UF_RUN_CALIBRATE_CAMERA_PARTS_H
#define UF_RUN_CALIBRATE_CAMERA_PARTS_H

#include "calibrate/camera.h"
#include "run/calibrate_camera.h"

typedef struct uf_camera_findings {
    const uf_camera_request *request;
    uf_dark_frames dark_frames;
    uf_dark dark;
    uf_response response;
    uf_photon_point points[UF_REALS_LIMIT];
    uf_point_fit fits[UF_REALS_LIMIT];
    int point_count;
    uf_photon_transfer transfer;
    int has_excess; /* measured against a set without multiplication */
    uf_excess excess;
    uf_plane defects; /* the map */
    uf_defect_counts counts;
    int keeps_dark; /* the fixed pattern exceeds the dark image's own noise: it is written */
} uf_camera_findings;

void uf_camera_words(uf_text *out, const uf_camera_findings *f);
UF_MUST_USE uf_status uf_camera_json(uf_text *out, const uf_camera_findings *f, uf_error *error);
UF_MUST_USE uf_status uf_camera_plot(const uf_camera_findings *f, const char *path, uf_error *error);

#endif
