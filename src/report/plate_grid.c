/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/plate_grid.h"

#include <stdio.h>

#include "report/font.h"

enum { ROW_NAMES = 30, GAP = 4 };

uf_plate_grid uf_plate_grid_lay(int rows, int columns, int head)
{
    int side = (UF_GRID_WIDEST - 2 * UF_GRID_MARGIN - ROW_NAMES) / columns;
    side = side < UF_GRID_SMALLEST ? UF_GRID_SMALLEST : side > UF_GRID_LARGEST ? UF_GRID_LARGEST : side;
    return (uf_plate_grid){rows, columns, side, side, UF_GRID_MARGIN + ROW_NAMES, UF_GRID_MARGIN + head};
}

uf_box uf_plate_grid_well(const uf_plate_grid *grid, int row, int column)
{
    int x = grid->left + column * grid->cell_width, y = grid->top + row * grid->cell_height;
    return (uf_box){x, y, x + grid->cell_width + 1, y + grid->cell_height + 1};
}

void uf_plate_grid_names(uf_canvas canvas, const uf_plate_grid *grid, const char *const *row_names, uint8_t ink)
{
    for (int c = 0; c < grid->columns; c++) {
        char number[16];
        (void)snprintf(number, sizeof number, "%d", c + 1);
        int x = grid->left + c * grid->cell_width + (grid->cell_width - uf_font_width(UF_FONT_SMALL, number)) / 2;
        (void)uf_font_draw(canvas, UF_FONT_SMALL, x, grid->top - GAP, number, ink);
    }
    for (int r = 0; r < grid->rows; r++) {
        int x = grid->left - 2 * GAP - uf_font_width(UF_FONT_SMALL, row_names[r]);
        int y = grid->top + r * grid->cell_height + (grid->cell_height + uf_font_faces[UF_FONT_SMALL].cap_height) / 2;
        (void)uf_font_draw(canvas, UF_FONT_SMALL, x, y, row_names[r], ink);
    }
}

void uf_plate_grid_frame(uf_canvas canvas, uf_box box, uf_map_frame frame, uint8_t thin, uint8_t dark)
{
    uf_canvas_frame(canvas, box, frame == UF_MAP_THIN ? thin : dark);
    for (int k = 1; k < 3 && frame != UF_MAP_THIN; k++) {
        uf_box inner = {box.x0 + k, box.y0 + k, box.x1 - k, box.y1 - k};
        if (frame == UF_MAP_HEAVY || k == 2)
            uf_canvas_frame(canvas, inner, dark);
    }
}
