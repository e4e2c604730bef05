/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/canvas.h"

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

static int clamp(int value, int low, int high)
{
    return value < low ? low : value > high ? high : value;
}

static uf_box cut(uf_canvas canvas, uf_box box)
{
    box.x0 = clamp(box.x0, 0, canvas.width);
    box.y0 = clamp(box.y0, 0, canvas.height);
    box.x1 = clamp(box.x1, box.x0, canvas.width);
    box.y1 = clamp(box.y1, box.y0, canvas.height);
    return box;
}

uf_canvas uf_canvas_of(const uf_indexed *picture)
{
    return (uf_canvas){picture->data, picture->width, picture->height, picture->width};
}

uf_canvas uf_canvas_part(uf_canvas canvas, uf_box box)
{
    box = cut(canvas, box);
    if (box.x0 == box.x1 || box.y0 == box.y1)
        return (uf_canvas){0};
    return (uf_canvas){uf_canvas_row(canvas, box.y0) + box.x0, box.x1 - box.x0, box.y1 - box.y0, canvas.stride};
}

void uf_canvas_fill(uf_canvas canvas, uf_box box, uint8_t index)
{
    box = cut(canvas, box);
    if (box.x0 == box.x1)
        return;
    for (int y = box.y0; y < box.y1; y++)
        memset(uf_canvas_row(canvas, y) + box.x0, index, (size_t)(box.x1 - box.x0));
}

void uf_canvas_frame(uf_canvas canvas, uf_box box, uint8_t index)
{
    uf_canvas_fill(canvas, (uf_box){box.x0, box.y0, box.x1, box.y0 + 1}, index);
    uf_canvas_fill(canvas, (uf_box){box.x0, box.y1 - 1, box.x1, box.y1}, index);
    uf_canvas_fill(canvas, (uf_box){box.x0, box.y0, box.x0 + 1, box.y1}, index);
    uf_canvas_fill(canvas, (uf_box){box.x1 - 1, box.y0, box.x1, box.y1}, index);
}

void uf_canvas_blit_row(uf_canvas canvas, int x, int y, const uint8_t *indices, int count)
{
    int from = clamp(-x, 0, count), to = clamp(canvas.width - x, from, count);
    if (y < 0 || y >= canvas.height || from == to)
        return;
    memcpy(uf_canvas_row(canvas, y) + x + from, indices + from, (size_t)(to - from));
}

void uf_canvas_line(uf_canvas canvas, int x0, int y0, int x1, int y1, uint8_t index)
{
    if ((x0 < 0 && x1 < 0) || (y0 < 0 && y1 < 0) || (x0 >= canvas.width && x1 >= canvas.width) ||
        (y0 >= canvas.height && y1 >= canvas.height))
        return;
    int across = abs(x1 - x0), down = abs(y1 - y0);
    int step_x = x1 < x0 ? -1 : 1, step_y = y1 < y0 ? -1 : 1;
    int64_t at_x = 0, at_y = 0; /* steps taken; always the axis that lags behind goes next */
    for (int x = x0, y = y0;;) {
        uf_canvas_put(canvas, x, y, index);
        if (x == x1 && y == y1)
            break;
        bool along_x = y == y1 || (x != x1 && (2 * at_x + 1) * down < (2 * at_y + 1) * across);
        at_x += along_x;
        at_y += !along_x;
        x += along_x ? step_x : 0;
        y += along_x ? 0 : step_y;
    }
}

void uf_canvas_diamond(uf_canvas canvas, double x, double y, double along, double across, double angle_deg,
                       uint8_t index)
{
    double far = along + across + 2.0;
    bool near = x > -far && y > -far && x < canvas.width + far && y < canvas.height + far;
    bool drawable = far < 2.0 * (canvas.width + canvas.height) + 64.0; /* larger ones would miss the canvas */
    if (!near || !drawable)                                            /* also when something is NaN */
        return;
    const double angle = angle_deg * (acos(-1.0) / 180.0);
    const double ux = along * cos(angle), uy = -along * sin(angle); /* y runs down */
    const double vx = across * sin(angle), vy = across * cos(angle);
    const int corner_x[4] = {(int)lround(x + ux), (int)lround(x + vx), (int)lround(x - ux), (int)lround(x - vx)};
    const int corner_y[4] = {(int)lround(y + uy), (int)lround(y + vy), (int)lround(y - uy), (int)lround(y - vy)};
    for (int k = 0; k < 4; k++)
        uf_canvas_line(canvas, corner_x[k], corner_y[k], corner_x[(k + 1) % 4], corner_y[(k + 1) % 4], index);
}
