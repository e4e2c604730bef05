/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the inputs' uncertainties do to a gap. */
#ifndef UF_OPTICS_SYSTEMATIC_H
#define UF_OPTICS_SYSTEMATIC_H

#include "optics/plan.h"

/*
 * Fills plan->optics_sd_nm: 1 sigma of a gap by angle (or measured depth), indices and, with layered, the cell's index, at
 * gaps 0, 10 .. 300 nm. Each input is moved up and down by its sd, the decay rebuilt, and what the plan's own table then
 * reads where the truth is `gap` noted, both referred to the same reference gap z0:
 *
 *   ln decay(reading) = ln decay'(gap) - ln decay'(z0) + ln decay(z0)
 *
 * Half the difference of the two readings is the input's part; parts add in squares. For a plain exponential that is (gap -
 * z0) times the relative sd of the depth. Where a move leaves total reflection the other one counts twice.
 */
void uf_optics_sd_fill(uf_plan *plan);

/* 1 sigma of a gap by all that is common to many cells: the above, the reference's ratio and gap, and the normalisation. */
double uf_systematic_nm(const uf_plan *plan, double gap_nm);

#endif
