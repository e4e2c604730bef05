/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a series of angles to the gap of every pixel, without a reference. */
#ifndef UF_GAP_SERIES_H
#define UF_GAP_SERIES_H

#include "image/channel.h"
#include "optics/plan.h"

enum { UF_SERIES_NODES = 601, UF_SERIES_FIRST_NM = -100, UF_SERIES_COARSE_STEP = 20 };
enum { UF_SERIES_COARSE = (UF_SERIES_NODES - 1) / UF_SERIES_COARSE_STEP + 1 };

/* Field and slope of every page at gaps -100, -99 .. 500 nm, the range that is searched. */
typedef struct uf_series_table {
    int count;
    double last_nm; /* end of the search: 500, or the series' farthest */
    double field[UF_SERIES_NODES][UF_SERIES_MOST], slope[UF_SERIES_NODES][UF_SERIES_MOST];
    float coarse[UF_SERIES_COARSE][UF_SERIES_MOST]; /* every 20th field, for the search's start */
} uf_series_table;

void uf_series_tabulate(const uf_series *series, const uf_field_kind *kind, uf_series_table *table);

/*
 * Fits n pixels: signal[k][x] is page k, background subtracted, weight[k][x] one over its variance, on any common scale.
 * For each pixel the gap that minimises chi2 = sum w (I - A T(gap))^2 with A profiled out, that is, maximises
 * (sum w I T)^2 / sum w T^2: the best of a coarse grid, then steps of Gauss and Newton kept between its neighbours
 * (halving where a step would leave). Gaps outside the search's range end at it. NaN where no A is above 0.
 */
void uf_series_fit_row(const uf_series_table *table, const float *const *signal, const float *const *weight, int n,
                       float *gap_nm);

/* chi2 / (count - 1) of n pixels at given gaps, A profiled out; NaN where the gap is, and for two
 * pages, which any gap fits. */
void uf_series_chi_square_row(const uf_series_table *table, const float *const *signal, const float *const *weight,
                              int n, const float *gap_nm, float *chi_square);

/*
 * The map of a field. pages[0 .. series.count - 1] are overwritten (background subtracted); the widest one is the near
 * channel and becomes map->near_adu.
 *
 * Gaps are fitted to the pages smoothed to the point spread function, gap_nm and smooth_gap_nm alike: a series has
 * some five times the noise of a ratio, and that smoothing takes most of it for little detail. Weights come
 * from the noise model at the smoothed signals. A saturated pixel of a page has no weight unless fewer than two pages are
 * left. chi_square is of the pages as they are, at that gap.
 *
 * A pixel is unresolved when the widest page's signal, smoothed, is below detection_sigma times its noise, or when its gap
 * lies at the end of the search; and, where stray light ends the search early (uf_series_farthest), when it is darker
 * than the field's own reference lets a pixel be at that end. The limit is that of the ratio method
 * (optics/detection.h) with the field's own reference: the median, over pixels well above detection, of near / dye / decay(gap),
 * which is put into plan->reference_ratio. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_gap_find_series(uf_work *work, uf_plan *plan, double detection_sigma, uf_channel *pages,
                                         const uf_channel *wide, const uf_cell_map *cells, uf_gap_map *map,
                                         uf_error *error);

#endif
