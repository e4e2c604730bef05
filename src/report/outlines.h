/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Cell outlines as a JSON file beside each overlay, for whatever draws live outlines over it or takes them elsewhere.
 * Polygons are exact (image/outlines.h), in pixels of the image, 0-based, with pixel centres at whole numbers.
 */
#ifndef UF_REPORT_OUTLINES_H
#define UF_REPORT_OUTLINES_H

#include "base/text.h"
#include "image/plane.h"
#include "report/overlay.h"

typedef struct uf_outlines_input {
    uf_labels labels;
    double pixel_size_um;
    const char *overlay_name; /* path of the overlay below the output folder */
    uf_overlay_layout layout;
} uf_outlines_input;

/* Appends the file. The same labels give the same bytes. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_outlines_json(uf_work *work, const uf_outlines_input *input, uf_text *out, uf_error *error);

#endif
