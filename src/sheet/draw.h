/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Where on a plate what should go: randomised in complete blocks (Fisher 1935, The Design of Experiments). The wells are cut
 * into blocks of neighbouring columns, as many as the rarest treatment has wells; each block gets its share of every
 * treatment, at random. Wells are then swapped within their blocks, at random, whenever that spreads what is alike: over rows
 * and columns, controls over the four quarters, the plate's edge over all.
 */
#ifndef UF_SHEET_DRAW_H
#define UF_SHEET_DRAW_H

#include <stdint.h>

#include "sheet/columns.h"
#include "sheet/well.h"

/* One thing to be put into wells: a treatment at one dose, on one coating. */
typedef struct uf_arm {
    const char *treatment, *coating; /* "" where there is none */
    double dose;                     /* NaN: none */
    const char *unit;                /* "" without a dose */
    uf_role role;
    int wells;           /* on each plate, at least 1 */
    int treatment_index; /* the same for all doses of one treatment, from 0; filled in by uf_draw_plate's caller */
} uf_arm;

typedef enum uf_edge_use {
    UF_EDGE_AUTO, /* left out where all fits inside */
    UF_EDGE_USE,
    UF_EDGE_LEAVE
} uf_edge_use;

typedef struct uf_drawing {
    uf_vessel vessel;
    int arm[UF_MOST_ROWS][UF_MOST_COLUMNS];   /* -1: nothing */
    int block[UF_MOST_ROWS][UF_MOST_COLUMNS]; /* from 0, -1: not used */
    int blocks;
    bool edge_used;
} uf_drawing;

/* Draws plate number `plate` (from 0) of a seed: the same every time, on every machine. UF_USAGE: more wells than the plate
 * has, with both counts. UF_MEMORY. */
UF_MUST_USE uf_status uf_draw_plate(const uf_arm *arms, int arm_count, uf_vessel vessel, uf_edge_use edge,
                                    uint64_t seed, int plate, uf_drawing *drawing, uf_error *error);

/* How many of the plate's four quarters hold no well of that role. */
int uf_quarters_without(const uf_drawing *drawing, const uf_arm *arms, uf_role role);

#endif
