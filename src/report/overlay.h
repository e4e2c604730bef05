/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The overlay: what was decided, beside what was seen. Left panel: the near image in grey with cell
 * outlines, cell numbers, contact regions and spots; right panel: the gap map with outlines, numbers and its
 * colour bar in nm, the contact cutoff marked on it; below: scale bar with its length, legend, and lines of
 * text.
 *
 * Grey is the square root of the near value between background (black) and the 99.7th percentile of the
 * field (white). The gap ramp ends at a round number of at least four cutoffs, the same for every field of a
 * run; gaps beyond its ends are drawn as the ends, and the bar says so.
 */
#ifndef UF_REPORT_OVERLAY_H
#define UF_REPORT_OVERLAY_H

#include "image/indexed.h"
#include "image/plane.h"
#include "record/records.h"

typedef struct uf_overlay_input {
    uf_plane near_adu;    /* corrected near image */
    uf_labels labels;     /* same size */
    uf_plane gap_nm;      /* same size; NaN outside cells and where there is no gap */
    uf_mask contact;      /* same size; data NULL when contact is not reported */
    const uf_cell *cells; /* rows of cells 1 .. labels.count, in order; those not used are numbered in
                             brackets; NULL: no numbers */
    const uf_spot *spots;
    int spot_count;
    double pixel_size_um;
    double near_background_adu;
    double cutoff_nm;
    const char *title;    /* file name; too long, its middle becomes an ellipsis */
    const char *settings; /* one line of settings in force, wrapped where it is too long */
    const char *flags;    /* flags of the field in words, may be empty */
    int full;             /* 1: panels 1:1 whatever the size; else 2:1 above 1024 px */
} uf_overlay_input;

/* Where a panel lies in the picture, for live outlines: pixel (x, y) of the image is drawn with its centre
 * at origin + ((x + 0.5) / reduction - 0.5). */
typedef struct uf_overlay_layout {
    int reduction; /* 1 or 2 image pixels a picture pixel */
    int near_x, near_y, gap_x, gap_y, panel_width, panel_height;
} uf_overlay_layout;

/* Draws into a picture whose data is taken from `work`'s arena. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_overlay_draw(uf_work *work, const uf_overlay_input *input, uf_indexed *picture,
                                      uf_overlay_layout *layout, uf_error *error);

#endif
