/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How the wide signal falls towards outlines. Internal to gap. */
#ifndef UF_GAP_EDGE_FALL_H
#define UF_GAP_EDGE_FALL_H

#include "image/channel.h"

enum { UF_EDGE_FALL_STEPS = 128 };

/* Fall of the wide over that of the near signal at distance (k + 0.5) / per_px pixels from the outline. */
typedef struct uf_edge_fall {
    double per_px;
    float relative[UF_EDGE_FALL_STEPS + 1];
    int steps; /* beyond them the fall is 1 */
} uf_edge_fall;

/* Measures the fall over all outlines of the field. psf_px is the near image's sigma. UF_MEMORY. */
UF_MUST_USE uf_status uf_edge_fall_measure(uf_work *work, const uf_channel *wide, const uf_cell_map *cells,
                                           double pixel_size_um, double psf_px, uf_edge_fall *fall, uf_error *error);

/* The factor at a distance as uf_distance gives it (outline at half a pixel). */
static inline float uf_edge_fall_at(const uf_edge_fall *fall, float distance_px)
{
    float at = (distance_px - 0.5f) * (float)fall->per_px - 0.5f;
    if (at >= (float)(fall->steps - 1))
        return 1.0f;
    at = at < 0.0f ? 0.0f : at;
    int k = (int)at;
    return fall->relative[k] + (at - (float)k) * (fall->relative[k + 1] - fall->relative[k]);
}

#endif
