/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Smooth lines and marks: each pixel takes the shade of how much of it is covered, from its distance to the shape. */
#include <math.h>

#include "report/colour.h"
#include "report/plot_parts.h"

static const double line_half_width = 0.9, rim_half_width = 0.8, mark_radius = 4.2, around_radius = 6.2;

/* ---- palette --------------------------------------------------------------------------------- */

void plot_palette(uf_indexed *picture)
{
    /* Lightness falls from ink to ink; hues are those that red-green blindness keeps apart. */
    const uf_oklab inks[UF_PLOT_INKS] = {[UF_PLOT_DARK] = uf_colour_lch(0.27, 0.03, 280),
                                         [UF_PLOT_BLUE] = uf_colour_lch(0.52, 0.17, 262),
                                         [UF_PLOT_AMBER] = uf_colour_lch(0.70, 0.15, 65),
                                         [UF_PLOT_PINE] = uf_colour_lch(0.42, 0.08, 165)};
    const uf_oklab page = uf_colour_grey(1), text = uf_colour_grey(0.10), rule = uf_colour_grey(0.45);
    picture->colours = PLOT_INDICES;
    uf_colour_put(picture->palette[PLOT_PAGE], page);
    uf_colour_put(picture->palette[PLOT_ZONE], uf_colour_grey(0.92));
    uf_colour_put(picture->palette[PLOT_GRID], uf_colour_grey(0.87));
    uf_colour_put(picture->palette[PLOT_FRAME], uf_colour_grey(0.25));
    for (int k = 0; k < UF_FONT_LEVELS; k++)
        uf_colour_put(picture->palette[PLOT_TEXT + k], uf_colour_mix(page, text, (k + 1.0) / UF_FONT_LEVELS));
    for (int k = 0; k < PLOT_SHADES; k++) {
        uf_colour_put(picture->palette[PLOT_RULE + k], uf_colour_mix(page, rule, (k + 1.0) / PLOT_SHADES));
        for (int ink = 0; ink < UF_PLOT_INKS; ink++)
            uf_colour_put(picture->palette[plot_shades((uf_plot_ink)ink) + k],
                          uf_colour_mix(page, inks[ink], (k + 1.0) / PLOT_SHADES));
    }
    for (int ink = 0; ink < UF_PLOT_INKS; ink++)
        uf_colour_put(picture->palette[PLOT_BAND + ink], uf_colour_mix(page, inks[ink], 0.2));
}

/* ---- coverage -------------------------------------------------------------------------------- */

/* Puts the shade of `cover` (0 .. 1) unless what is there is darker already: the same ink, more of it; another ink, when
 * the new one covers less than half. */
static void put_cover(uf_canvas canvas, int x, int y, double cover, uint8_t shades)
{
    int level = (int)(cover * PLOT_SHADES + 0.5);
    if (level < 1 || x < 0 || y < 0 || x >= canvas.width || y >= canvas.height)
        return;
    level = level > PLOT_SHADES ? PLOT_SHADES : level;
    uint8_t *pixel = &uf_canvas_row(canvas, y)[x];
    int same = *pixel >= shades && *pixel < shades + PLOT_SHADES;
    int other = *pixel >= PLOT_TEXT && !same && (*pixel < PLOT_BAND || *pixel >= PLOT_INK);
    if ((same && *pixel >= shades + level - 1) || (other && 2 * level < PLOT_SHADES))
        return;
    *pixel = (uint8_t)(shades + level - 1);
}

static double distance_to_segment(double x, double y, double x0, double y0, double x1, double y1)
{
    double dx = x1 - x0, dy = y1 - y0, length2 = dx * dx + dy * dy;
    double along = length2 > 0 ? ((x - x0) * dx + (y - y0) * dy) / length2 : 0;
    along = along < 0 ? 0 : along > 1 ? 1 : along;
    return hypot(x - x0 - along * dx, y - y0 - along * dy);
}

/* Cuts the segment to the canvas and a margin around it (Liang and Barsky 1984, ACM Trans. Graph. 3:1), so that a point
 * far away costs nothing; 0 when nothing is left. */
static int cut(uf_canvas canvas, double *x0, double *y0, double *x1, double *y1)
{
    const double margin = 8, dx = *x1 - *x0, dy = *y1 - *y0;
    const double p[] = {-dx, dx, -dy, dy};
    const double q[] = {*x0 + margin, canvas.width + margin - *x0, *y0 + margin, canvas.height + margin - *y0};
    double from = 0, to = 1;
    for (int k = 0; k < 4; k++) {
        if (p[k] == 0 && q[k] < 0)
            return 0;
        if (p[k] < 0)
            from = fmax(from, q[k] / p[k]);
        else if (p[k] > 0)
            to = fmin(to, q[k] / p[k]);
    }
    if (!(from <= to))
        return 0;
    double x = *x0, y = *y0;
    *x0 = x + from * dx;
    *y0 = y + from * dy;
    *x1 = x + to * dx;
    *y1 = y + to * dy;
    return 1;
}

void plot_stroke(uf_canvas canvas, double x0, double y0, double x1, double y1, double half_width, uint8_t shades)
{
    if (!cut(canvas, &x0, &y0, &x1, &y1))
        return;
    double reach = half_width + 1;
    for (int y = (int)floor(fmin(y0, y1) - reach); y <= (int)ceil(fmax(y0, y1) + reach); y++)
        for (int x = (int)floor(fmin(x0, x1) - reach); x <= (int)ceil(fmax(x0, x1) + reach); x++)
            put_cover(canvas, x, y, half_width + 0.5 - distance_to_segment(x, y, x0, y0, x1, y1), shades);
}

/* ---- lines ----------------------------------------------------------------------------------- */

typedef struct dashing {
    double on, off; /* off 0: solid */
    double at;      /* where in the period the pen is */
} dashing;

static void dash_segment(uf_canvas canvas, double x0, double y0, double x1, double y1, dashing *d, uint8_t shades)
{
    double length = hypot(x1 - x0, y1 - y0), period = d->on + d->off, done = 0;
    if (!(length < 1e5)) /* far outside: no dashes to be seen */
        return;
    while (done < length) {
        double rest = d->at < d->on ? d->on - d->at : period - d->at, step = fmin(rest, length - done);
        double from = done / length, to = (done + step) / length;
        if (d->at < d->on)
            plot_stroke(canvas, x0 + from * (x1 - x0), y0 + from * (y1 - y0), x0 + to * (x1 - x0),
                        y0 + to * (y1 - y0), line_half_width, shades);
        done += step;
        d->at = fmod(d->at + step, period);
        if (period - d->at < 1e-9)
            d->at = 0;
    }
}

void plot_polyline(uf_canvas canvas, const double *x, const double *y, int count, uf_plot_line line, uint8_t shades)
{
    static const dashing patterns[] = {[UF_LINE_NONE] = {0, 0, 0},
                                       [UF_LINE_SOLID] = {1, 0, 0},
                                       [UF_LINE_DASHED] = {9, 6, 0},
                                       [UF_LINE_DOTTED] = {1.2, 5, 0}};
    dashing d = patterns[line];
    for (int k = 1; line != UF_LINE_NONE && k < count; k++) {
        if (isnan(x[k] + y[k] + x[k - 1] + y[k - 1]))
            continue;
        if (line == UF_LINE_SOLID)
            plot_stroke(canvas, x[k - 1], y[k - 1], x[k], y[k], line_half_width, shades);
        else
            dash_segment(canvas, x[k - 1], y[k - 1], x[k], y[k], &d, shades);
    }
}

/* ---- marks ----------------------------------------------------------------------------------- */

/* Signed distance from the rim of a mark around (0, 0), negative inside; y points down. */
static double mark_distance(uf_plot_mark mark, double x, double y)
{
    switch (mark) {
    case UF_MARK_SQUARE:
        return fmax(fabs(x), fabs(y)) - 0.86 * mark_radius;
    case UF_MARK_DIAMOND:
        return (fabs(x) + fabs(y)) * 0.70710678 - 0.95 * mark_radius;
    case UF_MARK_TRIANGLE:
        return fmax(y - 0.6 * mark_radius, fabs(x) * 0.866 - y * 0.5 - 0.6 * mark_radius);
    case UF_MARK_AROUND:
        return fabs(hypot(x, y) - around_radius) - rim_half_width;
    default:
        return hypot(x, y) - mark_radius;
    }
}

void plot_mark(uf_canvas canvas, double x, double y, uf_plot_mark mark, uint8_t shades)
{
    if (mark == UF_MARK_NONE || !(fabs(x) < 1e6) || !(fabs(y) < 1e6))
        return;
    for (int v = (int)floor(y - 8); v <= (int)ceil(y + 8); v++)
        for (int u = (int)floor(x - 8); u <= (int)ceil(x + 8); u++) {
            double distance = mark_distance(mark, u - x, v - y);
            if (mark == UF_MARK_RING && distance < 0)
                uf_canvas_put(canvas, u, v, PLOT_PAGE);
            put_cover(canvas, u, v, 0.5 + (mark == UF_MARK_RING ? rim_half_width - fabs(distance) : -distance),
                      shades);
        }
}
