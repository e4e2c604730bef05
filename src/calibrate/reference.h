/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Many measured ratios into one reference: fields in wells, wells into the whole. */
#ifndef UF_CALIBRATE_REFERENCE_H
#define UF_CALIBRATE_REFERENCE_H

#include "image/plane.h"

/* One field's ratio; fields of one well have one number. */
typedef struct uf_reference_unit {
    int well;
    double ratio,
        spread; /* spread: relative 1 sigma within the field (over its parts, or its cells); NaN: not known */
} uf_reference_unit;

typedef struct uf_reference_pool {
    int fields, wells;
    double ratio;       /* geometric mean over wells of the geometric mean over their fields */
    double ratio_sd;    /* 1 sigma of it; see below */
    double spread;      /* median of the fields' */
    int sd_from_fields; /* fewer than three wells: the sd is the spread within fields, which one field alone can tell */
    int worst_well;     /* whose absence moves the ratio most; -1 with one well */
    double worst_change; /* by how much, relative */
} uf_reference_pool;

/* ratio_sd is the wells' standard deviation over the root of their number from three wells on; below that, the spread
 * within fields as it is, since one or two wells cannot tell how wells differ. Units whose ratio is no positive number are left
 * out. 0 when none is left. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_reference_pool_units(uf_work *work, const uf_reference_unit *units, int count,
                                              uf_reference_pool *pool, uf_error *error);

/* What a film shows. */
typedef struct uf_film_ratio {
    double ratio;  /* median over blocks of the ratio of their medians */
    double spread; /* robust relative sd of the blocks' ratios: uneven light that no flat took out, or film */
    double near_adu, wide_adu; /* medians above the background */
    double saturated_fraction;
    int blocks;
} uf_film_ratio;

enum { UF_FILM_BLOCK_PX = 32 };

/*
 * Near over wide of an even film that fills the field, blank images of its background (data NULL: none) taken off, in blocks of 32 x 32 px so that specks and
 * bubbles drop out twice over; blocks with saturated pixels do not count. Blocks whose wide light is not above 0 neither.
 * blocks is 0 when none is left. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_film_ratio_of(uf_work *work, uf_plane near, uf_plane wide, uf_mask near_saturated,
                                       uf_mask wide_saturated, uf_plane near_blank, uf_plane wide_blank,
                                       uf_film_ratio *film, uf_error *error);

#endif
