/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Drawing on a picture of palette indices. A canvas is a view of a rectangle of the picture with its own
 * (0, 0); whatever falls outside it is not drawn, so a mark in a panel can never spill out of the panel. The
 * zeroed canvas has no pixels: drawing on it is how a layout is measured.
 */
#ifndef UF_REPORT_CANVAS_H
#define UF_REPORT_CANVAS_H

#include <stddef.h>
#include <stdint.h>

#include "image/indexed.h"
#include "image/plane.h"

typedef struct uf_canvas {
    uint8_t *data; /* row y starts at data + y * stride */
    int width, height;
    ptrdiff_t stride;
} uf_canvas;

/* The whole picture. */
uf_canvas uf_canvas_of(const uf_indexed *picture);

/* The part of a canvas inside `box`, which is cut to the canvas first. */
uf_canvas uf_canvas_part(uf_canvas canvas, uf_box box);

static inline uint8_t *uf_canvas_row(uf_canvas canvas, int y)
{
    return canvas.data + (ptrdiff_t)y * canvas.stride;
}

static inline void uf_canvas_put(uf_canvas canvas, int x, int y, uint8_t index)
{
    if (x >= 0 && x < canvas.width && y >= 0 && y < canvas.height)
        uf_canvas_row(canvas, y)[x] = index;
}

/* Fills a half-open box. */
void uf_canvas_fill(uf_canvas canvas, uf_box box, uint8_t index);

/* A line of one pixel just inside the border of a half-open box. */
void uf_canvas_frame(uf_canvas canvas, uf_box box, uint8_t index);

/* Copies `count` indices to row y from x on. */
void uf_canvas_blit_row(uf_canvas canvas, int x, int y, const uint8_t *indices, int count);

/* A line with both ends, 4-connected: each step goes along one axis, so that it stays closed to the eye on
 * noise. A line far outside costs nothing. */
void uf_canvas_line(uf_canvas canvas, int x0, int y0, int x1, int y1, uint8_t index);

/* An open rhombus around (x, y): half diagonals `along` and `across` pixels, the first turned `angle_deg`
 * counter-clockwise (as seen) from the x axis. NaN, or a size beyond all the canvas could show, draws
 * nothing. */
void uf_canvas_diamond(uf_canvas canvas, double x, double y, double along, double across, double angle_deg,
                       uint8_t index);

#endif
