/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The one palette of all overlays. Ramps lie in order of lightness, so that neighbouring pixels have
 * neighbouring indices, which is what makes the PNG small.
 *
 * The gap ramp is light at the substrate and dark far from it, evenly in OKLab lightness, so that it keeps
 * its order in grey print and to colour-blind eyes; its hue runs from aqua through blue and violet to wine.
 * The contact tint has about the hue of the ramp at its close end: light blue means close in both panels. Outlines are
 * orange and spots yellow, which occur nowhere else.
 */
#ifndef UF_REPORT_PALETTE_H
#define UF_REPORT_PALETTE_H

#include "image/indexed.h"
#include "report/colour.h"
#include "report/font.h"

enum { UF_NEAR_LEVELS = 76, UF_GAP_LEVELS = 80 };

enum uf_ink {
    UF_INK_NEAR = 0,                               /* near image, black to white */
    UF_INK_CONTACT = UF_INK_NEAR + UF_NEAR_LEVELS, /* the same levels, tinted */
    UF_INK_GAP = UF_INK_CONTACT + UF_NEAR_LEVELS,  /* close to far */
    UF_INK_PAGE = UF_INK_GAP + UF_GAP_LEVELS,
    UF_INK_TEXT,                                     /* text on the page, by grey level */
    UF_INK_HALO = UF_INK_TEXT + UF_FONT_LEVELS,      /* around numbers */
    UF_INK_NUMBER,                                   /* numbers on their halo, by grey level */
    UF_INK_OUTSIDE = UF_INK_NUMBER + UF_FONT_LEVELS, /* gap panel: no cell */
    UF_INK_NO_GAP,                                   /* gap panel: hatching of cells without a gap */
    UF_INK_OUTLINE,
    UF_INK_SPOT,
    UF_INK_LINE,   /* frames, ticks, scale bar */
    UF_INK_CUTOFF, /* contact cutoff on the colour bar */
    UF_INK_COUNT
};

/* The gap ramp, t from 0 (light) to 1 (dark): whatever is drawn by value is drawn by it. */
uf_oklab uf_ramp_colour(double t);

/* Fills in palette and number of colours. */
void uf_palette_fill(uf_indexed *picture);

/* The index a gap is drawn with when the ramp ends at `max_nm`: gaps below 0 as 0, beyond the end as the
 * end. `gap_nm` is not NaN. */
static inline uint8_t uf_gap_ink(float gap_nm, float max_nm)
{
    float level = gap_nm * ((float)(UF_GAP_LEVELS - 1) / max_nm) + 0.5f;
    level = level < 0.0f ? 0.0f : level > (float)(UF_GAP_LEVELS - 1) ? (float)(UF_GAP_LEVELS - 1) : level;
    return (uint8_t)(UF_INK_GAP + (int)level);
}

#endif
