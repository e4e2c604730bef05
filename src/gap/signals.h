/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What ratio and series share. Internal to gap. */
#ifndef UF_GAP_SIGNALS_H
#define UF_GAP_SIGNALS_H

#include "image/channel.h"
#include "optics/plan.h"

/* Takes the map's planes and fills near_adu (in the near image's place) and dye_adu: backgrounds subtracted, the fall
 * of the wide blur towards outlines divided out. UF_MEMORY. */
UF_MUST_USE uf_status uf_gap_signals(uf_work *work, uf_plan *plan, uf_channel *near, const uf_channel *wide,
                                     const uf_cell_map *cells, uf_gap_map *map, uf_error *error);

#endif
