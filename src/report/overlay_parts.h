/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the overlay share: the scene, and who draws which part of the page. */
#ifndef UF_REPORT_OVERLAY_PARTS_H
#define UF_REPORT_OVERLAY_PARTS_H

#include <stdbool.h>

#include "report/canvas.h"
#include "report/overlay.h"
#include "report/palette.h"

/* The input, and what is decided before anything is drawn. */
typedef struct overlay_scene {
    const uf_overlay_input *input;
    int reduction;      /* image pixels a picture pixel, along each axis */
    int width, height;  /* of a panel */
    float black, white; /* near values drawn black and white */
    float gap_max_nm;   /* far end of the gap ramp, a round number */
    bool has_cutoff;    /* the cutoff is a number above 0 */
    uf_gap_kind gap_kind;
} overlay_scene;

/* Image position to panel position, along one axis. */
static inline double overlay_at(const overlay_scene *scene, double px)
{
    return (px + 0.5) / scene->reduction - 0.5;
}

/* Sets black and white: background, and the 99.7th percentile of what the panel shows. Takes scratch. */
UF_MUST_USE uf_status overlay_measure_near(uf_work *work, overlay_scene *scene, uf_error *error);

/* Indices of one row of near values; `contact` may be NULL. */
void overlay_near_inks(const overlay_scene *scene, const float *near, const uint8_t *contact, uint8_t *out);

/* Draws both panels, each on a canvas of its own size, with outlines, spots and numbers. Takes scratch. */
UF_MUST_USE uf_status overlay_draw_panels(uf_work *work, const overlay_scene *scene, uf_canvas near, uf_canvas gap,
                                          uf_error *error);

/* The far end of the gap ramp for a cutoff: a round number, at least four times as far. */
double overlay_gap_end_nm(double cutoff_nm, bool has_cutoff);

/* Pixels that the colour bar takes across with its ticks and numbers. */
int overlay_bar_width(const overlay_scene *scene);

/* Draws the colour bar with its left edge at x: row `bottom` is gap 0, row `top` the far end. */
void overlay_draw_bar(uf_canvas canvas, const overlay_scene *scene, int x, int top, int bottom);

/* Draws one line with the baseline y; the middle of what is too long becomes an ellipsis. */
void overlay_draw_line(uf_canvas canvas, uf_font font, int x, int y, int width, const char *text);

/* Draws text below row y in lines of at most `width` pixels and returns the row below it. */
int overlay_draw_wrapped(uf_canvas canvas, int x, int y, int width, const char *text);

/* Draws scale bar, legend, near scale, settings and flags below row y, wrapped to `width`, and returns the
 * row below them. On the zeroed canvas it only measures. */
int overlay_draw_footer(uf_canvas canvas, const overlay_scene *scene, int x, int y, int width);

#endif
