/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/plate_map.h"

#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "report/colour.h"
#include "report/font.h"

enum { MARGIN = UF_GRID_MARGIN, BAR = 6, GAP = 4, LEGEND_WIDTH = 230 };

enum map_index {
    MAP_PAGE,
    MAP_GRID,
    MAP_EMPTY, /* stroke through wells without anything */
    MAP_TEXT,
    MAP_KEYS = MAP_TEXT + UF_FONT_LEVELS,
    MAP_MOST_KEYS = 200 /* more share colours */
};

/* Where things are. */
typedef struct map_sheet {
    const uf_plate_map *map;
    uf_canvas canvas;
    uf_plate_grid grid;
    int line; /* height of a line of words */
    int legend_columns, legend_rows, legend_top;
    bool names_fit;
} map_sheet;

static void fill_palette(uf_indexed *picture)
{
    uf_colour_put(picture->palette[MAP_PAGE], uf_colour_grey(1.0));
    uf_colour_put(picture->palette[MAP_GRID], uf_colour_grey(0.62));
    uf_colour_put(picture->palette[MAP_EMPTY], uf_colour_grey(0.86));
    for (int k = 0; k < UF_FONT_LEVELS; k++)
        uf_colour_put(picture->palette[MAP_TEXT + k],
                      uf_colour_mix(uf_colour_grey(1.0), uf_colour_grey(0.08), (k + 1.0) / UF_FONT_LEVELS));
    /* Hues a golden angle apart are never close for long; lightness in three steps tells neighbours apart in grey, too. */
    for (int k = 0; k < MAP_MOST_KEYS; k++)
        uf_colour_put(picture->palette[MAP_KEYS + k],
                      uf_colour_lch(0.80 - 0.14 * (k % 3), 0.12, 250.0 + 137.508 * k));
    picture->colours = MAP_KEYS + MAP_MOST_KEYS;
}

static uint8_t key_ink(int key)
{
    return (uint8_t)(MAP_KEYS + key % MAP_MOST_KEYS);
}

/* ---- measuring ------------------------------------------------------------------------------- */

static int clamp(int value, int low, int high)
{
    return value < low ? low : value > high ? high : value;
}

static bool all_names_fit(const map_sheet *s)
{
    for (int k = 0; k < s->map->key_count; k++)
        if (uf_font_width(UF_FONT_SMALL, s->map->keys[k].name) > s->grid.cell_width - 2 * GAP)
            return false;
    return true;
}

static void measure(map_sheet *s, int *width, int *height)
{
    enum { MOST_LEGEND_ROWS = 40 };
    const uf_plate_map *map = s->map;
    s->line = uf_font_line_height(UF_FONT_SMALL);
    s->grid = uf_plate_grid_lay(map->rows, map->columns, uf_font_line_height(UF_FONT_LARGE) + s->line + 2 * GAP);
    s->grid.cell_height = clamp(s->grid.cell_width * 3 / 4, s->line + BAR + GAP, 2 * s->line + BAR + 3 * GAP);
    *width = s->grid.left + map->columns * s->grid.cell_width + MARGIN;
    *width = *width < 2 * LEGEND_WIDTH + 2 * MARGIN ? 2 * LEGEND_WIDTH + 2 * MARGIN : *width;
    s->names_fit = all_names_fit(s);
    s->legend_columns = (*width - 2 * MARGIN) / LEGEND_WIDTH;
    s->legend_rows = (map->key_count + s->legend_columns - 1) / s->legend_columns;
    s->legend_rows = s->legend_rows > MOST_LEGEND_ROWS ? MOST_LEGEND_ROWS : s->legend_rows;
    s->legend_top = s->grid.top + map->rows * s->grid.cell_height + 4 * GAP;
    *height = s->legend_top + (s->legend_rows + 2) * (s->line + GAP) + MARGIN;
}

/* ---- drawing --------------------------------------------------------------------------------- */

static void draw_fitted(uf_canvas canvas, int x, int y, int width, const char *text)
{
    size_t count = uf_font_fit(UF_FONT_SMALL, text, width);
    (void)uf_font_draw_bytes(canvas, UF_FONT_SMALL, x, y, text, count, MAP_TEXT);
}

static void draw_frame(uf_canvas canvas, uf_box box, uf_map_frame frame)
{
    uf_plate_grid_frame(canvas, box, frame, MAP_GRID, MAP_TEXT + UF_FONT_LEVELS - 1);
}

static void draw_words(const map_sheet *s, uf_canvas cell, const uf_map_well *well)
{
    char number[16];
    int width = s->grid.cell_width - 2 * GAP, base = BAR + GAP + uf_font_faces[UF_FONT_SMALL].cap_height + 1;
    bool two = *well->second && s->grid.cell_height >= 2 * s->line + BAR + GAP;
    (void)snprintf(number, sizeof number, "%d", well->key + 1);
    const char *name = s->names_fit ? s->map->keys[well->key].name : number;
    if (!two && !s->names_fit && uf_font_width(UF_FONT_SMALL, name) > width)
        return;
    draw_fitted(cell, GAP, base, width, name);
    if (two)
        draw_fitted(cell, GAP, base + s->line, width, well->second);
}

static void draw_well(const map_sheet *s, int row, int column)
{
    const uf_map_well *well = &s->map->wells[row * s->map->columns + column];
    uf_canvas cell = uf_canvas_part(s->canvas, uf_plate_grid_well(&s->grid, row, column));
    uf_box whole = {0, 0, cell.width, cell.height};
    if (well->key < 0) {
        uf_canvas_line(cell, 0, cell.height - 1, cell.width - 1, 0, MAP_EMPTY);
        uf_canvas_frame(cell, whole, MAP_GRID);
        return;
    }
    uf_canvas_fill(cell, (uf_box){1, 1, cell.width - 1, 1 + BAR}, key_ink(well->key));
    draw_words(s, cell, well);
    draw_frame(cell, (uf_box){1, 1, cell.width - 1, cell.height - 1}, s->map->keys[well->key].frame);
    uf_canvas_frame(cell, whole, MAP_GRID);
}

static void draw_legend(const map_sheet *s)
{
    const uf_plate_map *map = s->map;
    int most = s->legend_rows * s->legend_columns, step = s->line + GAP;
    for (int k = 0; k < map->key_count && k < most; k++) {
        char words[160];
        int x = MARGIN + k / s->legend_rows * LEGEND_WIDTH, y = s->legend_top + k % s->legend_rows * step;
        uf_box box = {x, y, x + 26, y + s->line};
        uf_canvas_fill(s->canvas, (uf_box){x, y, x + 26, y + BAR + 1}, key_ink(k));
        draw_frame(s->canvas, box, map->keys[k].frame);
        if (s->names_fit)
            (void)snprintf(words, sizeof words, "%.150s", map->keys[k].name);
        else
            (void)snprintf(words, sizeof words, "%d  %.140s", k + 1, map->keys[k].name);
        bool last = k == most - 1 && map->key_count > most;
        if (last)
            (void)snprintf(words, sizeof words, "... and %d more", map->key_count - most + 1);
        draw_fitted(s->canvas, x + 34, y + s->line - 4, LEGEND_WIDTH - 40, words);
    }
    int y = s->legend_top + (s->legend_rows + 1) * step;
    draw_fitted(s->canvas, MARGIN, y, s->canvas.width - 2 * MARGIN, map->note);
}

uf_status uf_plate_map_draw(uf_work *work, const uf_plate_map *map, uf_indexed *picture, uf_error *error)
{
    map_sheet s = {.map = map};
    int width, height;
    measure(&s, &width, &height);
    *picture = (uf_indexed){.width = width, .height = height};
    uf_status status = uf_take(work, (size_t)width * (size_t)height, 1, "a plate's map", &picture->data, error);
    if (status != UF_OK)
        return status;
    memset(picture->data, MAP_PAGE, (size_t)width * (size_t)height);
    fill_palette(picture);
    s.canvas = uf_canvas_of(picture);
    (void)uf_font_draw(s.canvas, UF_FONT_LARGE, MARGIN, MARGIN + uf_font_faces[UF_FONT_LARGE].cap_height, map->title,
                       MAP_TEXT);
    uf_plate_grid_names(s.canvas, &s.grid, map->row_names, MAP_TEXT);
    for (int r = 0; r < map->rows; r++)
        for (int c = 0; c < map->columns; c++)
            draw_well(&s, r, c);
    draw_legend(&s);
    return UF_OK;
}
