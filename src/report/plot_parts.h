/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Between the files of a plot: its palette, and smooth lines and marks. */
#ifndef UF_REPORT_PLOT_PARTS_H
#define UF_REPORT_PLOT_PARTS_H

#include "report/font.h"
#include "report/plot.h"

/* Each ink fades to the page in so many steps, for smooth edges. */
enum { PLOT_SHADES = 8 };

enum plot_index {
    PLOT_PAGE,
    PLOT_ZONE,
    PLOT_GRID,
    PLOT_FRAME,
    PLOT_TEXT,
    PLOT_RULE = PLOT_TEXT + UF_FONT_LEVELS, /* PLOT_SHADES shades */
    PLOT_BAND = PLOT_RULE + PLOT_SHADES,    /* one light tone an ink */
    PLOT_INK = PLOT_BAND + UF_PLOT_INKS,    /* PLOT_SHADES shades an ink */
    PLOT_INDICES = PLOT_INK + UF_PLOT_INKS * PLOT_SHADES
};

void plot_palette(uf_indexed *picture);

/* First shade of an ink. */
static inline uint8_t plot_shades(uf_plot_ink ink)
{
    return (uint8_t)(PLOT_INK + (int)ink * PLOT_SHADES);
}

/* Canvas coordinates: pixel centres are whole numbers. */
void plot_stroke(uf_canvas canvas, double x0, double y0, double x1, double y1, double half_width, uint8_t shades);

/* A polyline through `count` points, broken at NaN. */
void plot_polyline(uf_canvas canvas, const double *x, const double *y, int count, uf_plot_line line, uint8_t shades);

void plot_mark(uf_canvas canvas, double x, double y, uf_plot_mark mark, uint8_t shades);

#endif
