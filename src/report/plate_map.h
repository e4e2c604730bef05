/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A plate as a page to print and take to the bench: every well with its words, a bar of colour for each treatment, a heavy
 * frame around controls. Wells stay white, so that it reads in grey print and takes little ink.
 */
#ifndef UF_REPORT_PLATE_MAP_H
#define UF_REPORT_PLATE_MAP_H

#include "base/work.h"
#include "image/indexed.h"
#include "report/plate_grid.h"

/* One line of the legend: a treatment. */
typedef struct uf_map_key {
    const char *name;
    uf_map_frame frame; /* heavy: control; double: positive control */
} uf_map_key;

typedef struct uf_map_well {
    int key;            /* -1: empty */
    const char *second; /* second line of words, a dose; may be empty */
} uf_map_well;

typedef struct uf_plate_map {
    const char *title, *note; /* above and below */
    int rows, columns;
    const char *const *row_names; /* "A" .. */
    const uf_map_well *wells;     /* row by row */
    const uf_map_key *keys;
    int key_count;
} uf_plate_map;

/* Draws the map; the picture's pixels lie in `work`'s arena. Wells too small for a treatment's name hold its number in the
 * legend. UF_MEMORY. */
UF_MUST_USE uf_status uf_plate_map_draw(uf_work *work, const uf_plate_map *map, uf_indexed *picture, uf_error *error);

#endif
