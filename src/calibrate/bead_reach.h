/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which pixels of a bead are looked at. */
#ifndef UF_CALIBRATE_BEAD_REACH_H
#define UF_CALIBRATE_BEAD_REACH_H

#include "calibrate/bead.h"

/* Distances from the centre. Inside `inner` the lower side is at most 1.2 um high and not yet steep; the ring beyond the
 * bead tells the background; between them the rim, blurred by its height, is left out. A fit without stray light sees only
 * heights of a few depths, where what stray light there is hardly changes and counts as background; no ring then. */
typedef struct uf_bead_reach {
    double blur_um;       /* of point spread function and pixel */
    double core_um;       /* where the lower side is two depths high */
    double core_sigma_um; /* of the Gaussian exp(-r^2 / 2 R d), which a core is near its middle, through the blur */
    double inner_um, ring_from_um, ring_to_um;
} uf_bead_reach;

uf_bead_reach uf_bead_reach_of(const uf_bead_setup *setup);

#endif
