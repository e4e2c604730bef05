/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/plot.h"

#include <math.h>
#include <string.h>

#include "report/plot_parts.h"
#include "report/plot_scale.h"

enum {
    MARGIN = 14,       /* around everything and between panels */
    TICK = 5,          /* length of a tick */
    GAP = 6,           /* between things that belong together */
    SAMPLE = 30,       /* length of a line in the legend */
    LEGEND_INSET = 60, /* from the panel's left */
    PX_A_PIECE_X = 75, /* least distance of labelled ticks */
    PX_A_PIECE_Y = 45
};

typedef struct sheet {
    uf_canvas canvas;
    const uf_plot_panel *panel;
    uf_box cell;         /* the panel with its words */
    uf_plot_frame frame; /* the plotting area */
    plot_tick x_ticks[PLOT_TICKS], y_ticks[PLOT_TICKS];
    int x_count, y_count;
    int legend_rows; /* of the longest legend, so that axes stand level */
    double *points;  /* scratch for the longest series, twice */
} sheet;

/* ---- measuring ------------------------------------------------------------------------------- */

static void widen(double value, int is_log10, double *least, double *most)
{
    if (!isfinite(value) || (is_log10 && value <= 0))
        return;
    *least = isnan(*least) || value < *least ? value : *least;
    *most = isnan(*most) || value > *most ? value : *most;
}

static void data_range(const uf_plot_panel *panel, int of_y, double *least, double *most)
{
    int is_log10 = of_y ? panel->y.log10 : panel->x.log10;
    *least = *most = (double)NAN;
    for (int k = 0; k < panel->series_count; k++) {
        const uf_plot_series *s = &panel->series[k];
        for (int i = 0; i < s->count; i++) {
            widen(of_y ? s->y[i] : s->x[i], is_log10, least, most);
            if (of_y && s->spread != UF_SPREAD_NONE) {
                widen(s->low[i], is_log10, least, most);
                widen(s->high[i], is_log10, least, most);
            }
        }
    }
}

static int widest_label(const plot_tick *ticks, int count)
{
    int most = 0;
    for (int k = 0; k < count; k++) {
        int width = ticks[k].labelled ? uf_font_width(UF_FONT_SMALL, ticks[k].label) : 0;
        most = width > most ? width : most;
    }
    return most;
}

/* Lays the legend's entries in rows of `width`; draws when the canvas has pixels. Returns how many rows. */
static int lay_legend(sheet *s, uf_canvas canvas, int x0, int y0, int width)
{
    int x = x0, rows = 0, line = uf_font_line_height(UF_FONT_SMALL);
    for (int k = 0; k < s->panel->series_count; k++) {
        const uf_plot_series *series = &s->panel->series[k];
        if (!series->name)
            continue;
        int needed = SAMPLE + GAP + uf_font_width(UF_FONT_SMALL, series->name) + 3 * GAP;
        if (!rows || x + needed > x0 + width) {
            rows++;
            x = x0;
        }
        int base = y0 + rows * line - 3, middle = base - 4;
        const double sample_x[] = {x, x + SAMPLE}, sample_y[] = {middle, middle};
        if (canvas.data) {
            if (series->spread == UF_SPREAD_BAND)
                uf_canvas_fill(canvas, (uf_box){x, middle - 4, x + SAMPLE, middle + 5},
                               (uint8_t)(PLOT_BAND + (int)series->ink));
            plot_polyline(canvas, sample_x, sample_y, 2, series->line, plot_shades(series->ink));
            plot_mark(canvas, x + SAMPLE / 2.0, middle, series->mark, plot_shades(series->ink));
            uf_font_draw(canvas, UF_FONT_SMALL, x + SAMPLE + GAP, base, series->name, PLOT_TEXT);
        }
        x += needed;
    }
    return rows;
}

/* Heights first, since they do not depend on widths; then the room that the labels of the y axis take. */
static void lay_out(sheet *s)
{
    const uf_plot_panel *p = s->panel;
    uf_plot_frame *f = &s->frame;
    int small = uf_font_line_height(UF_FONT_SMALL), large = uf_font_line_height(UF_FONT_LARGE);
    double least, most;
    f->box.y0 = s->cell.y0 + (p->title ? large + GAP : GAP);
    f->box.y1 = s->cell.y1 - s->legend_rows * small - (s->legend_rows ? GAP : 0) - 2 * small - TICK - GAP;
    f->box.y1 = f->box.y1 > f->box.y0 + 20 ? f->box.y1 : f->box.y0 + 20;
    int pieces_y = (f->box.y1 - f->box.y0) / PX_A_PIECE_Y;
    data_range(p, 1, &least, &most);
    plot_range(&p->y, least, most, pieces_y, &f->y_from, &f->y_to);
    s->y_count = plot_ticks(f->y_from, f->y_to, p->y.log10, pieces_y, s->y_ticks);
    f->box.x0 = s->cell.x0 + small + GAP + widest_label(s->y_ticks, s->y_count) + TICK + GAP;
    f->box.x1 = s->cell.x1 - 2 * GAP; /* room for half of the last label */
    f->box.x1 = f->box.x1 > f->box.x0 + 20 ? f->box.x1 : f->box.x0 + 20;
    int pieces_x = (f->box.x1 - f->box.x0) / PX_A_PIECE_X;
    data_range(p, 0, &least, &most);
    plot_range(&p->x, least, most, pieces_x, &f->x_from, &f->x_to);
    s->x_count = plot_ticks(f->x_from, f->x_to, p->x.log10, pieces_x, s->x_ticks);
    f->x_log10 = p->x.log10;
    f->y_log10 = p->y.log10;
}

/* ---- axes ------------------------------------------------------------------------------------ */

static int rounded(double pixel)
{
    return (int)floor(pixel + 0.5);
}

static void draw_grid(sheet *s)
{
    const uf_plot_frame *f = &s->frame;
    for (int k = 0; k < s->x_count; k++) {
        int x = rounded(uf_plot_x(f, s->x_ticks[k].at));
        if (s->x_ticks[k].labelled)
            uf_canvas_fill(s->canvas, (uf_box){x, f->box.y0, x + 1, f->box.y1}, PLOT_GRID);
    }
    for (int k = 0; k < s->y_count; k++) {
        int y = rounded(uf_plot_y(f, s->y_ticks[k].at));
        if (s->y_ticks[k].labelled)
            uf_canvas_fill(s->canvas, (uf_box){f->box.x0, y, f->box.x1, y + 1}, PLOT_GRID);
    }
}

static void draw_x_axis(sheet *s)
{
    const uf_plot_frame *f = &s->frame;
    int base = f->box.y1 + TICK + uf_font_line_height(UF_FONT_SMALL), free_from = s->cell.x0 - 1000;
    for (int k = 0; k < s->x_count; k++) {
        const plot_tick *tick = &s->x_ticks[k];
        int x = rounded(uf_plot_x(f, tick->at)), width = uf_font_width(UF_FONT_SMALL, tick->label);
        uf_canvas_fill(s->canvas, (uf_box){x, f->box.y1, x + 1, f->box.y1 + (tick->labelled ? TICK : TICK / 2)},
                       PLOT_FRAME);
        if (!tick->labelled || x - width / 2 < free_from)
            continue;
        uf_font_draw(s->canvas, UF_FONT_SMALL, x - width / 2, base - 3, tick->label, PLOT_TEXT);
        free_from = x + width / 2 + GAP;
    }
    int width = uf_font_width(UF_FONT_SMALL, s->panel->x.title);
    uf_font_draw(s->canvas, UF_FONT_SMALL, (f->box.x0 + f->box.x1 - width) / 2,
                 base + uf_font_line_height(UF_FONT_SMALL) - 2, s->panel->x.title, PLOT_TEXT);
}

static void draw_y_axis(sheet *s)
{
    const uf_plot_frame *f = &s->frame;
    int half = uf_font_faces[UF_FONT_SMALL].cap_height / 2;
    for (int k = 0; k < s->y_count; k++) {
        const plot_tick *tick = &s->y_ticks[k];
        int y = rounded(uf_plot_y(f, tick->at)), length = tick->labelled ? TICK : TICK / 2;
        uf_canvas_fill(s->canvas, (uf_box){f->box.x0 - length, y, f->box.x0, y + 1}, PLOT_FRAME);
        if (tick->labelled)
            uf_font_draw(s->canvas, UF_FONT_SMALL, f->box.x0 - TICK - 2 - uf_font_width(UF_FONT_SMALL, tick->label),
                         y + half + 1, tick->label, PLOT_TEXT);
    }
    int length = uf_font_width(UF_FONT_SMALL, s->panel->y.title);
    uf_font_draw_up(s->canvas, UF_FONT_SMALL, s->cell.x0 + uf_font_faces[UF_FONT_SMALL].ascent,
                    (f->box.y0 + f->box.y1 + length) / 2, s->panel->y.title, PLOT_TEXT);
}

static void draw_words(sheet *s)
{
    const uf_plot_frame *f = &s->frame;
    if (s->panel->title)
        uf_font_draw(s->canvas, UF_FONT_LARGE, f->box.x0, s->cell.y0 + uf_font_faces[UF_FONT_LARGE].ascent,
                     s->panel->title, PLOT_TEXT);
    int below = f->box.y1 + TICK + 2 * uf_font_line_height(UF_FONT_SMALL) + GAP;
    lay_legend(s, s->canvas, s->cell.x0 + LEGEND_INSET, below, s->cell.x1 - s->cell.x0 - LEGEND_INSET);
}

/* ---- data ------------------------------------------------------------------------------------ */

/* Values as pixels of the plotting area's own canvas. */
static void to_pixels(const sheet *s, const double *values, int count, int of_y, double *out)
{
    const uf_plot_frame *f = &s->frame;
    for (int k = 0; k < count; k++) {
        int drawable = isfinite(values[k]) && (!(of_y ? f->y_log10 : f->x_log10) || values[k] > 0);
        double pixel = of_y ? uf_plot_y(f, values[k]) - f->box.y0 : uf_plot_x(f, values[k]) - f->box.x0;
        out[k] = drawable ? pixel : (double)NAN;
    }
}

/* The light area between low and high, a column of pixels at a time. */
static void draw_band(const sheet *s, uf_canvas area, const uf_plot_series *series)
{
    const uf_plot_frame *f = &s->frame;
    for (int k = 1; k < series->count; k++) {
        double x0 = uf_plot_x(f, series->x[k - 1]) - f->box.x0, x1 = uf_plot_x(f, series->x[k]) - f->box.x0;
        const double ends[] = {series->low[k - 1], series->low[k], series->high[k - 1], series->high[k]};
        double y[4];
        to_pixels(s, ends, 4, 1, y);
        if (!(x1 > x0) || isnan(y[0] + y[1] + y[2] + y[3]))
            continue;
        for (int x = (int)fmax(0, ceil(x0)); x <= fmin(area.width - 1, floor(x1)); x++) {
            double share = (x - x0) / (x1 - x0), low = y[0] + share * (y[1] - y[0]),
                   high = y[2] + share * (y[3] - y[2]);
            int from = rounded(fmax(0, fmin(low, high))), to = rounded(fmin(area.height - 1, fmax(low, high)));
            for (int row = from; row <= to; row++)
                if (uf_canvas_row(area, row)[x] < PLOT_TEXT)
                    uf_canvas_put(area, x, row, (uint8_t)(PLOT_BAND + (int)series->ink));
        }
    }
}

static void draw_bars(uf_canvas area, const double *x, const double *low, const double *high, int count,
                      uint8_t shades)
{
    const double cap = 3.5, half_width = 0.6;
    for (int k = 0; k < count; k++) {
        if (isnan(x[k] + low[k] + high[k]))
            continue;
        plot_stroke(area, x[k], low[k], x[k], high[k], half_width, shades);
        plot_stroke(area, x[k] - cap, low[k], x[k] + cap, low[k], half_width, shades);
        plot_stroke(area, x[k] - cap, high[k], x[k] + cap, high[k], half_width, shades);
    }
}

static void draw_series(const sheet *s, uf_canvas area, const uf_plot_series *series)
{
    double *x = s->points, *y = x + series->count, *low = y + series->count, *high = low + series->count;
    uint8_t shades = plot_shades(series->ink);
    to_pixels(s, series->x, series->count, 0, x);
    to_pixels(s, series->y, series->count, 1, y);
    if (series->spread == UF_SPREAD_BARS) {
        to_pixels(s, series->low, series->count, 1, low);
        to_pixels(s, series->high, series->count, 1, high);
        draw_bars(area, x, low, high, series->count, shades);
    }
    plot_polyline(area, x, y, series->count, series->line, shades);
    for (int k = 0; k < series->count; k++)
        if (!isnan(x[k] + y[k]))
            plot_mark(area, x[k], y[k], series->mark, shades);
}

/* ---- rules and zones ------------------------------------------------------------------------- */

static int inked_pixels(uf_canvas area, uf_box box)
{
    int count = 0;
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            count += x < 0 || y < 0 || x >= area.width || y >= area.height || uf_canvas_row(area, y)[x] >= PLOT_TEXT;
    return count;
}

/* Writes upwards beside the column `x`, on whichever side and at whichever height the least lies under it. */
static void label_beside(uf_canvas area, int x, const char *label)
{
    const uf_font_face *face = &uf_font_faces[UF_FONT_SMALL];
    int length = uf_font_width(UF_FONT_SMALL, label), thick = face->ascent + face->descent, least = 1 << 30;
    uf_box best = {0};
    for (int side = 0; side < 2; side++)
        for (int step = 0; step < 6; step++) {
            int left = side ? x + 3 : x - 3 - thick, top = 6 + step * (area.height - length - 12) / 5;
            uf_box box = {left, top, left + thick, top + length};
            int inked = inked_pixels(area, box);
            if (inked < least) {
                least = inked;
                best = box;
            }
        }
    uf_font_draw_up(area, UF_FONT_SMALL, best.x0 + face->ascent, best.y1, label, PLOT_TEXT);
}

static void draw_zones(const sheet *s, uf_canvas area)
{
    for (int k = 0; k < s->panel->zone_count; k++) {
        const uf_plot_zone *zone = &s->panel->zones[k];
        double from = uf_plot_x(&s->frame, zone->from) - s->frame.box.x0;
        double to = uf_plot_x(&s->frame, zone->to) - s->frame.box.x0;
        from = fmax(0, fmin(from, area.width));
        to = fmax(0, fmin(to, area.width));
        uf_canvas_fill(area, (uf_box){rounded(from), 0, rounded(to), area.height}, PLOT_ZONE);
    }
}

static void label_zones(const sheet *s, uf_canvas area)
{
    for (int k = 0; k < s->panel->zone_count; k++) {
        const uf_plot_zone *zone = &s->panel->zones[k];
        double from = fmax(0, uf_plot_x(&s->frame, zone->from) - s->frame.box.x0);
        double to = fmin(area.width, uf_plot_x(&s->frame, zone->to) - s->frame.box.x0);
        if (zone->label && to - from >= uf_font_line_height(UF_FONT_SMALL))
            label_beside(area, rounded((from + to) / 2) + uf_font_line_height(UF_FONT_SMALL) / 2, zone->label);
    }
}

static void draw_rules(const sheet *s, uf_canvas area)
{
    for (int k = 0; k < s->panel->rule_count; k++) {
        double x = rounded(uf_plot_x(&s->frame, s->panel->rules[k].x)) - s->frame.box.x0;
        plot_stroke(area, x, 0, x, area.height, 0.5, PLOT_RULE);
    }
}

static void label_rules(const sheet *s, uf_canvas area)
{
    for (int k = 0; k < s->panel->rule_count; k++) {
        double x = uf_plot_x(&s->frame, s->panel->rules[k].x) - s->frame.box.x0;
        if (s->panel->rules[k].label && x >= 0 && x <= area.width)
            label_beside(area, rounded(x), s->panel->rules[k].label);
    }
}

/* ---- all of it ------------------------------------------------------------------------------- */

static void draw_panel(sheet *s)
{
    lay_out(s);
    uf_box box = s->frame.box;
    uf_canvas area = uf_canvas_part(s->canvas, box);
    draw_zones(s, area);
    draw_grid(s);
    for (int k = 0; k < s->panel->series_count; k++)
        if (s->panel->series[k].spread == UF_SPREAD_BAND)
            draw_band(s, area, &s->panel->series[k]);
    draw_rules(s, area);
    for (int k = 0; k < s->panel->series_count; k++)
        draw_series(s, area, &s->panel->series[k]);
    label_rules(s, area);
    label_zones(s, area);
    uf_canvas_frame(s->canvas, (uf_box){box.x0 - 1, box.y0 - 1, box.x1 + 1, box.y1 + 1}, PLOT_FRAME);
    draw_x_axis(s);
    draw_y_axis(s);
    draw_words(s);
}

static size_t longest_series(const uf_plot_panel *panels, int count)
{
    int most = 1;
    for (int p = 0; p < count; p++)
        for (int k = 0; k < panels[p].series_count; k++)
            most = panels[p].series[k].count > most ? panels[p].series[k].count : most;
    return (size_t)most;
}

uf_status uf_plot_draw(uf_work *work, const uf_plot_panel *panels, int count, int width, int height,
                       uf_indexed *picture, uf_plot_frame *frames, uf_error *error)
{
    return uf_plot_rows(work, panels, count, count, width, height, picture, frames, error);
}

uf_status uf_plot_rows(uf_work *work, const uf_plot_panel *panels, int count, int columns, int width, int height,
                       uf_indexed *picture, uf_plot_frame *frames, uf_error *error)
{
    sheet s = {0};
    *picture = (uf_indexed){.width = width, .height = height};
    uf_status status = uf_take(work, (size_t)width * (size_t)height, 1, "a plot", &picture->data, error);
    if (status == UF_OK)
        status = uf_take(work, 4 * longest_series(panels, count), sizeof *s.points, "a plot", &s.points, error);
    if (status != UF_OK)
        return status;
    plot_palette(picture);
    memset(picture->data, PLOT_PAGE, (size_t)width * (size_t)height);
    s.canvas = uf_canvas_of(picture);
    int rows_of_panels = (count + columns - 1) / columns;
    int each = (width - MARGIN * (columns + 1)) / columns,
        high = (height - MARGIN * (rows_of_panels + 1)) / rows_of_panels;
    for (int k = 0; k < count; k++) {
        s.panel = &panels[k];
        int rows = lay_legend(&s, (uf_canvas){0}, 0, 0, each - LEGEND_INSET);
        s.legend_rows = rows > s.legend_rows ? rows : s.legend_rows;
    }
    for (int k = 0; k < count; k++) {
        int left = MARGIN + k % columns * (each + MARGIN), top = MARGIN + k / columns * (high + MARGIN);
        s.panel = &panels[k];
        s.cell = (uf_box){left, top, left + each, top + high};
        draw_panel(&s);
        if (frames)
            frames[k] = s.frame;
    }
    return UF_OK;
}
