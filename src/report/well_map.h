/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What was measured in each well of a plate, as colour by the one ramp of the program (report/palette.h): light is low, dark is
 * high, evenly, so that it keeps its order in grey print and to colour-blind eyes. Wells without a value are hatched, each
 * reason in its own way; wells that are not on the sheet stay bare.
 */
#ifndef UF_REPORT_WELL_MAP_H
#define UF_REPORT_WELL_MAP_H

#include "base/work.h"
#include "image/indexed.h"
#include "report/font.h"
#include "report/plate_grid.h"

typedef enum uf_well_state {
    UF_WELL_ABSENT, /* not on the sheet */
    UF_WELL_MEASURED,
    UF_WELL_EMPTY, /* measured, and there are no cells */
    UF_WELL_FAILED,
    UF_WELL_NOT_IMAGED,
    UF_WELL_STATES
} uf_well_state;

typedef struct uf_value_well {
    uf_well_state state;
    double value;               /* NaN: there is none */
    uf_map_frame frame;         /* heavy: control; double: positive control */
    const char *first, *second; /* treatment and dose; may be empty */
} uf_value_well;

typedef struct uf_well_map {
    const char *title, *metric; /* metric with its unit */
    int rows, columns;
    const char *const *row_names; /* "A" .. */
    const uf_value_well *wells;   /* row by row */
    double least, most;           /* of the values of all plates that are to be compared; NaN: there are none */
} uf_well_map;

/* The ramp is cut into so many steps, each with its own words' greys. */
enum {
    UF_WELL_MAP_STEPS = 25,
    UF_WELL_MAP_STEP = 1 + UF_FONT_LEVELS, /* indices a step: its colour, then its words */
    UF_WELL_MAP_PAGE = UF_WELL_MAP_STEPS * UF_WELL_MAP_STEP
};

/* What the ends of the ramp stand for: round numbers that hold `least` and `most`, and a quarter of what lies between them to
 * both sides, so that wells that hardly differ do not look as if they did. */
void uf_well_map_range(double least, double most, double *from, double *to);

/* The step of a value, 0 .. UF_WELL_MAP_STEPS - 1; its colour is palette index step * UF_WELL_MAP_STEP. */
int uf_well_map_step(double value, double from, double to);

/* Draws the map; the picture's pixels lie in `work`'s arena. `grid` (may be NULL) is where the wells are. UF_MEMORY. */
UF_MUST_USE uf_status uf_well_map_draw(uf_work *work, const uf_well_map *map, uf_indexed *picture,
                                       uf_plate_grid *grid, uf_error *error);

#endif
