/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where the wells of a plate lie on a page: rows from the top, columns from the left, A1 top left, as ANSI/SLAS has them. */
#ifndef UF_REPORT_PLATE_GRID_H
#define UF_REPORT_PLATE_GRID_H

#include "report/canvas.h"

enum { UF_GRID_MARGIN = 24, UF_GRID_WIDEST = 1180, UF_GRID_SMALLEST = 20, UF_GRID_LARGEST = 92 };

typedef struct uf_plate_grid {
    int rows, columns;
    int cell_width, cell_height, left, top; /* of the wells */
} uf_plate_grid;

typedef enum uf_map_frame { UF_MAP_THIN, UF_MAP_HEAVY, UF_MAP_DOUBLE } uf_map_frame;

/* Square wells, as large as the page's width allows, below `head` pixels of words; callers may make them less high. */
uf_plate_grid uf_plate_grid_lay(int rows, int columns, int head);

/* A well with its borders: the right one of a well is the left one of its neighbour. */
uf_box uf_plate_grid_well(const uf_plate_grid *grid, int row, int column);

/* Numbers above and letters beside the wells. */
void uf_plate_grid_names(uf_canvas canvas, const uf_plate_grid *grid, const char *const *row_names, uint8_t ink);

/* The frame of what stands in a well: thin, three pixels, or two lines. */
void uf_plate_grid_frame(uf_canvas canvas, uf_box box, uf_map_frame frame, uint8_t thin, uint8_t dark);

#endif
