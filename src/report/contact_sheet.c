/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/contact_sheet.h"

#include <math.h>
#include <string.h>

#include "report/overlay_parts.h"

enum { MARGIN = 14, GAP = 10, LEAST_SIDE = 192, LEAST_WIDTH = 420, FLAG_LINES = 2, WHY_LINES = 8 };

typedef struct page {
    const uf_contact_sheet *sheet;
    uf_canvas canvas;
    uf_contact_layout at;
    int tile_width, tile_height, rows, line;
} page;

/* ---- measuring ------------------------------------------------------------------------------- */

static int larger(int a, int b)
{
    return a > b ? a : b;
}

/* As wide as high, or a little wider: pages of it are looked at on screens. */
static int columns_for(int count)
{
    int columns = 1;
    while (columns * columns < count)
        columns++;
    return columns;
}

static void measure(page *p, int *width, int *height)
{
    p->tile_width = p->tile_height = LEAST_SIDE;
    for (int k = 0; k < p->sheet->count; k++) {
        p->tile_width = larger(p->tile_width, p->sheet->tiles[k].thumbnail.width);
        p->tile_height = larger(p->tile_height, p->sheet->tiles[k].thumbnail.height);
    }
    p->line = uf_font_line_height(UF_FONT_SMALL);
    p->at.columns = columns_for(p->sheet->count);
    p->rows = (p->sheet->count + p->at.columns - 1) / p->at.columns;
    p->at.x = MARGIN;
    p->at.y = MARGIN + uf_font_line_height(UF_FONT_LARGE) + GAP;
    p->at.step_x = p->tile_width + GAP;
    p->at.step_y = p->tile_height + (2 + FLAG_LINES) * p->line + GAP;
    *width = larger(LEAST_WIDTH, 2 * MARGIN + p->at.columns * p->at.step_x - GAP);
    int below = p->at.y + p->rows * p->at.step_y;
    *height = overlay_draw_wrapped((uf_canvas){0}, MARGIN, below, *width - 2 * MARGIN, p->sheet->note) + MARGIN;
}

/* ---- tiles ----------------------------------------------------------------------------------- */

/* Greys are square roots of the signal, so that another white is another factor. */
static void fill_levels(double white_adu, double common_adu, uint8_t levels[256])
{
    double factor = white_adu > 0 && common_adu > 0 ? sqrt(white_adu / common_adu) : 1;
    for (int k = 0; k < 256; k++)
        levels[k] = (uint8_t)k;
    for (int k = 0; k < UF_NEAR_LEVELS; k++)
        levels[UF_INK_NEAR + k] = (uint8_t)(UF_INK_NEAR + (int)fmin(UF_NEAR_LEVELS - 1, k * factor + 0.5));
}

static void draw_thumbnail(const page *p, const uf_contact_tile *tile, uf_box box)
{
    uint8_t levels[256];
    fill_levels(tile->white_adu, p->sheet->white_adu, levels);
    for (int y = 0; y < tile->thumbnail.height; y++) {
        const uint8_t *from = tile->thumbnail.data + (size_t)y * (size_t)tile->thumbnail.width;
        for (int x = 0; x < tile->thumbnail.width; x++)
            uf_canvas_put(p->canvas, box.x0 + x, box.y0 + y, levels[from[x]]);
    }
}

/* At most `lines` of them: the rest of a long reason stands in the table. */
static void draw_lines(uf_canvas canvas, int x, int y, int width, int lines, const char *text)
{
    uf_canvas part =
        uf_canvas_part(canvas, (uf_box){x, y, x + width, y + lines * uf_font_line_height(UF_FONT_SMALL)});
    (void)overlay_draw_wrapped(part, 0, 0, width, text);
}

static void draw_missing(const page *p, const uf_contact_tile *tile, uf_box box)
{
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            if ((x + y) % 6 == 0)
                uf_canvas_put(p->canvas, x, y, UF_INK_NO_GAP);
    int width = p->tile_width - 2 * GAP, bottom = overlay_draw_wrapped((uf_canvas){0}, 0, 0, width, tile->why);
    int rows = bottom < WHY_LINES * p->line ? bottom : WHY_LINES * p->line;
    uf_canvas_fill(p->canvas, (uf_box){box.x0 + GAP / 2, box.y0 + GAP / 2, box.x1 - GAP / 2, box.y0 + GAP + rows},
                   UF_INK_PAGE);
    draw_lines(p->canvas, box.x0 + GAP, box.y0 + GAP / 2, width, WHY_LINES, tile->why);
}

static void draw_frame(const page *p, uf_box box, int is_heavy)
{
    for (int k = 1; k <= (is_heavy ? 3 : 1); k++)
        uf_canvas_frame(p->canvas, (uf_box){box.x0 - k, box.y0 - k, box.x1 + k, box.y1 + k},
                        is_heavy ? UF_INK_CUTOFF : UF_INK_LINE);
}

static void draw_tile(const page *p, int k)
{
    const uf_contact_tile *tile = &p->sheet->tiles[k];
    int x = p->at.x + k % p->at.columns * p->at.step_x, y = p->at.y + k / p->at.columns * p->at.step_y;
    int has = tile->thumbnail.data != NULL;
    uf_box box = {x, y, x + (has ? tile->thumbnail.width : p->tile_width),
                  y + (has ? tile->thumbnail.height : p->tile_height)};
    if (has)
        draw_thumbnail(p, tile, box);
    else
        draw_missing(p, tile, box);
    draw_frame(p, box, *tile->flags != '\0');
    y += p->tile_height + 3;
    overlay_draw_line(p->canvas, UF_FONT_SMALL, x, y + p->line - 3, p->tile_width, tile->name);
    overlay_draw_line(p->canvas, UF_FONT_SMALL, x, y + 2 * p->line - 3, p->tile_width, tile->numbers);
    draw_lines(p->canvas, x, y + 2 * p->line, p->tile_width, FLAG_LINES, tile->flags);
}

uf_status uf_contact_sheet_draw(uf_work *work, const uf_contact_sheet *sheet, uf_indexed *picture,
                                uf_contact_layout *layout, uf_error *error)
{
    page p = {.sheet = sheet};
    int width, height;
    measure(&p, &width, &height);
    *picture = (uf_indexed){.width = width, .height = height};
    uf_palette_fill(picture);
    uf_status status = uf_take(work, (size_t)width * (size_t)height, 1, "a contact sheet", &picture->data, error);
    if (status != UF_OK)
        return status;
    memset(picture->data, UF_INK_PAGE, (size_t)width * (size_t)height);
    p.canvas = uf_canvas_of(picture);
    overlay_draw_line(p.canvas, UF_FONT_LARGE, MARGIN, MARGIN + uf_font_faces[UF_FONT_LARGE].cap_height,
                      width - 2 * MARGIN, sheet->title);
    for (int k = 0; k < sheet->count; k++)
        draw_tile(&p, k);
    (void)overlay_draw_wrapped(p.canvas, MARGIN, p.at.y + p.rows * p.at.step_y, width - 2 * MARGIN, sheet->note);
    if (layout)
        *layout = p.at;
    return UF_OK;
}
