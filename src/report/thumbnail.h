/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A field the size of a stamp, for contact sheets: the near image with the cells' outlines. It is made while the field is
 * measured, since the images may be gone later. Its greys are those of the overlay (report/overlay.h), from the background to
 * the field's own white, and its palette is that of overlays, so that a sheet can bring several to one white.
 */
#ifndef UF_REPORT_THUMBNAIL_H
#define UF_REPORT_THUMBNAIL_H

#include "image/indexed.h"
#include "image/plane.h"

enum { UF_THUMBNAIL_SIDE = 256 };

typedef struct uf_thumbnail_input {
    uf_plane near_adu; /* corrected near image */
    uf_labels labels;  /* same size */
    double near_background_adu;
} uf_thumbnail_input;

/* Draws a picture of at most UF_THUMBNAIL_SIDE a side (whole numbers of image pixels are averaged) into memory of `work`'s
 * arena. *white_adu is what white stands for, above background. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_thumbnail_draw(uf_work *work, const uf_thumbnail_input *input, uf_indexed *picture,
                                        double *white_adu, uf_error *error);

#endif
