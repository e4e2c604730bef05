/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How sure a cell's numbers are. Internal to measure. */
#ifndef UF_MEASURE_INTERVALS_H
#define UF_MEASURE_INTERVALS_H

#include "measure/measure.h"

/* Resolved pixels of the cell with a gap under `gap_nm`, from its histogram, linear within a bin. */
double uf_area_under(const uf_cell *row, double gap_nm);

/*
 * Fills gap_random_nm, gap_systematic_nm and the 95 % intervals of contact area and attachment fraction. The
 * row's shape, gaps, contact and histogram must be there.
 *
 * Random: photon and read noise of the cell's pixels in the median (standard error of a median, 1.2533 sigma /
 * sqrt n), and both backgrounds, which move all of it. Systematic: the reference ratio and the
 * normalisation move every gap by d gap / d ln times their relative sd; a depth error scales the distance to
 * the reference's gap. Outline: 0.03 um of the perimeter, what half a step of the middle level is worth.
 * The interval of contact moves the cutoff by 1.96 systematic sigma each way and adds the others in squares.
 */
void uf_fill_intervals(const uf_measure_input *in, uf_cell *row);

#endif
