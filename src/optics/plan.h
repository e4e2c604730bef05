/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What is fixed for a whole run before the first pixel: the numbers that turn intensity into gap, with their
 * uncertainties. Built once (run/plan.c), rounded to 12 digits, and only read afterwards. */
#ifndef UF_OPTICS_PLAN_H
#define UF_OPTICS_PLAN_H

#include "optics/decay.h"
#include "optics/series_field.h"

/* What tells the gap: near over wide, or near alone, where the wide image does not stand for the dye above the gap. */
typedef enum uf_signal { UF_SIGNAL_RATIO, UF_SIGNAL_NEAR } uf_signal;

enum { UF_OPTICS_SD_GAPS = 31, UF_OPTICS_SD_STEP_NM = 10 };

typedef struct uf_plan {
    uf_bench bench;
    uf_decay decay;
    uf_decay_law law;
    uf_series
        series; /* count 0: gaps come from the ratio. Else bench, decay, depth are those of its smallest angle, and
                         the reference ratio is not known before the field is (NaN) */
    double pixel_size_um;
    double psf_sigma_um;     /* of the near image: 0.21 emission wavelength / NA */
    double restore_gain;     /* for uf_restore on a plane smoothed by psf_sigma_um */
    double restore_variance; /* of a pixel's noise after that */
    double depth_nm, depth_sd_nm;
    double optics_sd_nm[UF_OPTICS_SD_GAPS]; /* of a gap, by angle and indices (optics/systematic.h) */
    uf_signal signal;
    int has_gap;             /* 0: gaps are only a scale to look for spots on, and are not reported */
    int is_relative;         /* the reference is assumed, not measured */
    int reference_from_cell; /* each cell's own closest part is its reference */
    double reference_ratio;  /* near / wide (or near) that stands for gap 0; of a field where each cell has its own */
    double reference_gap_nm; /* gap it was measured at: a depth error is a gap error around this gap */
    double reference_gap_sd_nm;
    double reference_sd;      /* relative 1 sigma of the ratio */
    double normalisation_sd;  /* relative, from cell to cell */
    double layered_effect_nm; /* exponential minus layered at the contact cutoff; 0 when layered is in force */
} uf_plan;

#endif
