/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How much closer each place is than its surroundings, on both sides of it. Internal to measure. */
#ifndef UF_MEASURE_CONTRAST_H
#define UF_MEASURE_CONTRAST_H

#include "image/channel.h"

/*
 * The gap at each pixel is compared with the gap some way off on either side along a line; the lower of the two
 * contrasts counts.
 *
 *   narrow: along the best of eight directions, within 0.7 um. The rim of a wide patch is low on one side and
 *           has none, nor has its middle; a dip inside a patch has one.
 *   closed: along the worst of eight directions, within 1.8 um. A tongue of a patch is low along itself. A side
 *           that lies outside the cell or the image asks nothing. Found only in stretches of rows where `narrow`
 *           somewhere reaches `least_nm`, elsewhere -1e9: no spot can be there.
 *
 * `gap_nm` holds UF_GAP_NOWHERE outside cells. Contrasts in nm; narrow is at least 0. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_contrast_find(uf_work *work, uf_plane gap_nm, double pixel_size_um, double least_nm,
                                       uf_plane narrow, uf_plane closed, uf_error *error);

#endif
