/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/well_map.h"

#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "base/text.h"
#include "report/palette.h"
#include "report/plot_scale.h"

enum {
    MARGIN = UF_GRID_MARGIN,
    GAP = 4,
    INSET = 5, /* from a well's border to what stands in it: room for the frame of controls */
    BAR_WIDTH = 420,
    BAR_HEIGHT = 16,
    TICK = 4,
    PIECES = 8,      /* of round numbers that the range is made of */
    PX_A_PIECE = 48, /* least distance of labels on the bar */
    SAMPLE = 26,
    LEAST_WIDTH = 2 * MARGIN + 480
};

enum map_index {
    MAP_PAGE = UF_WELL_MAP_PAGE,
    MAP_GRID,
    MAP_HATCH,
    MAP_TEXT,
    MAP_INDICES = MAP_TEXT + UF_FONT_LEVELS
};

enum { NO_VALUE = UF_WELL_STATES, HATCHES };

typedef struct page {
    const uf_well_map *map;
    uf_canvas canvas;
    uf_plate_grid grid;
    int line, bar_top, bar_width, legend_top;
    double from, to;
    bool names_fit, shown[HATCHES], framed[UF_MAP_DOUBLE + 1];
} page;

/* ---- colours --------------------------------------------------------------------------------- */

/* Black words on light steps, white ones on dark steps, in the greys between. */
static void put_step(uf_indexed *picture, int step)
{
    uf_oklab ground = uf_ramp_colour((double)step / (UF_WELL_MAP_STEPS - 1));
    uf_oklab words = uf_colour_grey(ground.L > 0.62 ? 0.04 : 1.0);
    for (int k = 0; k <= UF_FONT_LEVELS; k++)
        uf_colour_put(picture->palette[step * UF_WELL_MAP_STEP + k],
                      uf_colour_mix(ground, words, (double)k / UF_FONT_LEVELS));
}

static void fill_palette(uf_indexed *picture)
{
    for (int step = 0; step < UF_WELL_MAP_STEPS; step++)
        put_step(picture, step);
    uf_colour_put(picture->palette[MAP_PAGE], uf_colour_grey(1.0));
    uf_colour_put(picture->palette[MAP_GRID], uf_colour_grey(0.62));
    uf_colour_put(picture->palette[MAP_HATCH], uf_colour_grey(0.42));
    for (int k = 0; k < UF_FONT_LEVELS; k++)
        uf_colour_put(picture->palette[MAP_TEXT + k],
                      uf_colour_mix(uf_colour_grey(1.0), uf_colour_grey(0.08), (k + 1.0) / UF_FONT_LEVELS));
    picture->colours = MAP_INDICES;
}

void uf_well_map_range(double least, double most, double *from, double *to)
{
    const uf_plot_axis axis = {.from = (double)NAN, .to = (double)NAN};
    double middle = (least + most) / 2;
    if (middle > 0) {
        least = fmin(least, 0.75 * middle);
        most = fmax(most, 1.25 * middle);
    }
    plot_range(&axis, least, most, PIECES, from, to);
}

int uf_well_map_step(double value, double from, double to)
{
    double step = floor((value - from) / (to - from) * UF_WELL_MAP_STEPS);
    return step < 0 ? 0 : step >= UF_WELL_MAP_STEPS ? UF_WELL_MAP_STEPS - 1 : (int)step;
}

/* ---- measuring ------------------------------------------------------------------------------- */

static int hatch_of(const uf_value_well *well)
{
    return well->state == UF_WELL_MEASURED && isnan(well->value) ? NO_VALUE : (int)well->state;
}

static void look_at_wells(page *p)
{
    p->names_fit = true;
    for (int k = 0; k < p->map->rows * p->map->columns; k++) {
        const uf_value_well *well = &p->map->wells[k];
        p->shown[hatch_of(well)] = true;
        p->framed[well->frame] = true;
        if (well->state != UF_WELL_ABSENT &&
            uf_font_width(UF_FONT_SMALL, well->first) > p->grid.cell_width - 2 * (INSET + GAP))
            p->names_fit = false;
    }
}

static void measure(page *p, int *width, int *height)
{
    p->line = uf_font_line_height(UF_FONT_SMALL);
    p->grid =
        uf_plate_grid_lay(p->map->rows, p->map->columns, uf_font_line_height(UF_FONT_LARGE) + 2 * p->line + 3 * GAP);
    *width = p->grid.left + p->grid.columns * p->grid.cell_width + MARGIN;
    *width = *width < LEAST_WIDTH ? LEAST_WIDTH : *width;
    p->bar_width = (*width - 2 * MARGIN) / 2 < BAR_WIDTH ? (*width - 2 * MARGIN) / 2 : BAR_WIDTH;
    p->bar_top = p->grid.top + p->grid.rows * p->grid.cell_height + 5 * GAP;
    p->legend_top = p->bar_top + BAR_HEIGHT + TICK + p->line + 3 * GAP;
    *height = p->legend_top + 3 * (p->line + GAP) + MARGIN;
    uf_well_map_range(p->map->least, p->map->most, &p->from, &p->to);
    look_at_wells(p);
}

/* ---- wells ----------------------------------------------------------------------------------- */

static bool is_hatched(int hatch, int x, int y)
{
    switch (hatch) {
    case UF_WELL_EMPTY: /* wide strokes upwards */
        return (x + y) % 9 == 0;
    case UF_WELL_FAILED: /* a dense cross hatch */
        return (x + y) % 6 == 0 || (x - y + 6000) % 6 == 0;
    case UF_WELL_NOT_IMAGED: /* level lines */
        return y % 5 == 0;
    case NO_VALUE: /* dots */
        return x % 5 == 2 && y % 5 == 2;
    default:
        return false;
    }
}

static void draw_ground(uf_canvas canvas, uf_box box, int hatch, uint8_t ground)
{
    uf_canvas_fill(canvas, box, ground);
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            if (is_hatched(hatch, x - box.x0, y - box.y0))
                uf_canvas_put(canvas, x, y, MAP_HATCH);
}

/* Words on a hatched ground stand on a strip of it without hatching. */
static void draw_word(const page *p, uf_canvas cell, int line, const char *text, bool hatched, uint8_t ground)
{
    const uf_font_face *face = &uf_font_faces[UF_FONT_SMALL];
    int left = INSET + GAP - 1, width = p->grid.cell_width - 2 * left + 1;
    size_t count = uf_font_fit(UF_FONT_SMALL, text, width);
    int base = INSET + 1 + face->cap_height + 2 + line * p->line;
    uint8_t ink = ground == MAP_PAGE ? MAP_TEXT : (uint8_t)(ground + 1);
    if (!count)
        return;
    if (hatched) {
        int across = text[count] ? width : uf_font_width(UF_FONT_SMALL, text);
        uf_canvas_fill(cell, (uf_box){left - 1, base - face->cap_height - 2, left + across + 1, base + 3}, ground);
    }
    (void)uf_font_draw_bytes(cell, UF_FONT_SMALL, left, base, text, count, ink);
}

/* The treatment first, or its beginning; then the value; the dose only where there is room for all three. */
static void draw_words(const page *p, uf_canvas cell, const uf_value_well *well, uint8_t ground)
{
    int room = (p->grid.cell_height - 2 * INSET) / p->line, line = 0;
    bool hatched = hatch_of(well) != UF_WELL_MEASURED;
    char value[UF_NUMBER_TEXT] = "";
    if (!isnan(well->value))
        uf_format_number(value, well->value, 3);
    bool value_fits = uf_font_width(UF_FONT_SMALL, value) <= p->grid.cell_width - 2 * (INSET + GAP) + 3;
    bool has_value = *value && value_fits && room > 1;
    if (*well->first)
        draw_word(p, cell, line++, well->first, hatched, ground);
    if (*well->second && room > line + has_value && p->names_fit)
        draw_word(p, cell, line++, well->second, hatched, ground);
    if (has_value && room > line)
        draw_word(p, cell, line, value, hatched, ground);
}

static uint8_t ground_of(const page *p, const uf_value_well *well)
{
    if (isnan(well->value))
        return MAP_PAGE;
    return (uint8_t)(uf_well_map_step(well->value, p->from, p->to) * UF_WELL_MAP_STEP);
}

/* Dark lines of a frame would be lost on dark steps: a light one goes along them. */
static void draw_frame(uf_canvas cell, uf_box box, uf_map_frame frame)
{
    for (int k = 1; k < 4 && frame != UF_MAP_THIN; k++)
        uf_canvas_frame(cell, (uf_box){box.x0 + k, box.y0 + k, box.x1 - k, box.y1 - k}, MAP_PAGE);
    uf_plate_grid_frame(cell, box, frame, MAP_GRID, MAP_TEXT + UF_FONT_LEVELS - 1);
}

static void draw_well(const page *p, int row, int column)
{
    const uf_value_well *well = &p->map->wells[row * p->map->columns + column];
    uf_canvas cell = uf_canvas_part(p->canvas, uf_plate_grid_well(&p->grid, row, column));
    uf_box whole = {0, 0, cell.width, cell.height};
    if (well->state != UF_WELL_ABSENT) {
        uf_box inner = {1, 1, cell.width - 1, cell.height - 1};
        uint8_t ground = ground_of(p, well);
        draw_ground(cell, inner, hatch_of(well), ground);
        draw_words(p, cell, well, ground);
        draw_frame(cell, inner, well->frame);
    }
    uf_canvas_frame(cell, whole, MAP_GRID);
}

/* ---- words around ---------------------------------------------------------------------------- */

static void draw_bar(const page *p)
{
    plot_tick ticks[PLOT_TICKS];
    int count = plot_ticks(p->from, p->to, 0, p->bar_width / PX_A_PIECE, ticks), y = p->bar_top + BAR_HEIGHT;
    for (int x = 0; x < p->bar_width; x++) {
        int step = x * UF_WELL_MAP_STEPS / p->bar_width;
        uf_canvas_fill(p->canvas, (uf_box){MARGIN + x, p->bar_top, MARGIN + x + 1, y},
                       (uint8_t)(step * UF_WELL_MAP_STEP));
    }
    uf_canvas_frame(p->canvas, (uf_box){MARGIN - 1, p->bar_top - 1, MARGIN + p->bar_width + 1, y + 1}, MAP_GRID);
    for (int k = 0; k < count; k++) {
        int x = MARGIN + (int)floor((ticks[k].at - p->from) / (p->to - p->from) * (p->bar_width - 1) + 0.5);
        int width = uf_font_width(UF_FONT_SMALL, ticks[k].label);
        uf_canvas_fill(p->canvas, (uf_box){x, y, x + 1, y + TICK}, MAP_TEXT + UF_FONT_LEVELS - 1);
        uf_font_draw(p->canvas, UF_FONT_SMALL, x - width / 2 < 2 ? 2 : x - width / 2, y + TICK + p->line - 3,
                     ticks[k].label, MAP_TEXT);
    }
    uf_font_draw(p->canvas, UF_FONT_SMALL, MARGIN + p->bar_width + 4 * GAP, p->bar_top + BAR_HEIGHT - 3,
                 p->map->metric, MAP_TEXT);
}

/* Only what this plate has. */
static void draw_legend(const page *p)
{
    static const char *const words[HATCHES] = {[UF_WELL_EMPTY] = "no cells",
                                               [UF_WELL_FAILED] = "failed",
                                               [UF_WELL_NOT_IMAGED] = "not imaged",
                                               [NO_VALUE] = "no value",
                                               [UF_WELL_ABSENT] = "not on the sheet"};
    static const int order[] = {UF_WELL_EMPTY, UF_WELL_FAILED, UF_WELL_NOT_IMAGED, NO_VALUE, UF_WELL_ABSENT};
    int x = MARGIN, y = p->legend_top;
    for (size_t k = 0; k < sizeof order / sizeof *order; k++) {
        uf_box box = {x, y, x + SAMPLE, y + p->line};
        if (!p->shown[order[k]])
            continue;
        draw_ground(p->canvas, box, order[k], MAP_PAGE);
        uf_canvas_frame(p->canvas, box, MAP_GRID);
        x = uf_font_draw(p->canvas, UF_FONT_SMALL, x + SAMPLE + 2 * GAP, y + p->line - 4, words[order[k]], MAP_TEXT) +
            6 * GAP;
    }
    x = MARGIN;
    y += 2 * (p->line + GAP);
    if (p->framed[UF_MAP_HEAVY])
        x = uf_font_draw(p->canvas, UF_FONT_SMALL, x, y, "Heavy frame: control.", MAP_TEXT) + 2 * GAP;
    if (p->framed[UF_MAP_DOUBLE])
        (void)uf_font_draw(p->canvas, UF_FONT_SMALL, x, y, "Double frame: positive control.", MAP_TEXT);
}

static void draw_title(const page *p)
{
    int base = MARGIN + uf_font_faces[UF_FONT_LARGE].cap_height, width = p->canvas.width - 2 * MARGIN;
    size_t count = uf_font_fit(UF_FONT_LARGE, p->map->title, width);
    uf_font_draw_bytes(p->canvas, UF_FONT_LARGE, MARGIN, base, p->map->title, count, MAP_TEXT);
    count = uf_font_fit(UF_FONT_SMALL, p->map->metric, width);
    uf_font_draw_bytes(p->canvas, UF_FONT_SMALL, MARGIN, base + p->line + 2, p->map->metric, count, MAP_TEXT);
}

uf_status uf_well_map_draw(uf_work *work, const uf_well_map *map, uf_indexed *picture, uf_plate_grid *grid,
                           uf_error *error)
{
    page p = {.map = map};
    int width, height;
    measure(&p, &width, &height);
    *picture = (uf_indexed){.width = width, .height = height};
    uf_status status = uf_take(work, (size_t)width * (size_t)height, 1, "a plate's map", &picture->data, error);
    if (status != UF_OK)
        return status;
    memset(picture->data, MAP_PAGE, (size_t)width * (size_t)height);
    fill_palette(picture);
    p.canvas = uf_canvas_of(picture);
    draw_title(&p);
    uf_plate_grid_names(p.canvas, &p.grid, map->row_names, MAP_TEXT);
    for (int r = 0; r < map->rows; r++)
        for (int c = 0; c < map->columns; c++)
            draw_well(&p, r, c);
    draw_bar(&p);
    draw_legend(&p);
    if (grid)
        *grid = p.grid;
    return UF_OK;
}
