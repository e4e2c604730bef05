/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A camera from dark frames and pairs of flats, by photon transfer (EMVA Standard 1288, release 3.1; Janesick 2007,
 * Photon Transfer, SPIE Press).
 *
 * Light arrives as single photons, so its variance in electrons is its mean in electrons; in counts
 *
 *     variance - dark variance = excess^2 / gain x (mean - offset)
 *
 * and the slope of variance against mean tells how many electrons a count is. The variance is taken over time, never
 * over the pixels of one frame: half the variance of the difference of two frames of the same light, in which
 * whatever is the same in both (fixed pattern, dust, uneven light) falls out.
 *
 * How to call: uf_dark_start, uf_dark_add for each dark frame, uf_dark_finish; uf_photon_pair for each pair of
 * flats; uf_photon_transfer_fit over the points; uf_camera_defects. Only one pair is needed in memory at a time.
 * Frames are planes of raw counts as the file has them. Dark frames are best taken at the exposure of the flats, or
 * dark current counts as light.
 *
 * Memory, taken from work's arena: 16 bytes a pixel for dark frames, 8 for a response, 1 for the mask. What
 * uf_dark_start, uf_dark_finish and uf_response_start take must live on while it is used; everything else is
 * scratch and is given back.
 *
 * Messages name dark frames by number from 1, pairs and flats not at all: the caller puts their names before them
 * (uf_fail_in).
 */
#ifndef UF_CALIBRATE_CAMERA_H
#define UF_CALIBRATE_CAMERA_H

#include "calibrate/counts.h"

/* Bits of a pixel in a map of defects; 0 is good. */
enum { UF_DEFECT_DARK = 1, UF_DEFECT_NOISE = 2, UF_DEFECT_RESPONSE = 4 };

/* ---- dark frames ----------------------------------------------------------------------------- */

enum { UF_DARK_FRAMES_MOST = 1000 };

/* Frames seen so far. To the caller only `count`, `width` and `height` matter. */
typedef struct uf_dark_frames {
    int width, height, count;
    double *mean_adu;      /* of each pixel, row by row without gaps, less level_adu */
    double *squares_adu2;  /* sum of squared departures from it (Welford 1962, Technometrics 4:419) */
    double *shift_adu;     /* level of each frame against the mean of those before it */
    double *scatter_adu;   /* sd of that difference inside tiles */
    uint64_t *fingerprint; /* of each frame, to see one that is given twice */
    double level_adu;      /* to be added to mean_adu: mean of the frames' shifts */
    double at_zero;        /* counts that are 0, the darkest a camera can write */
    uf_count_step step;
} uf_dark_frames;

/* Takes memory for frames of one size. UF_MEMORY. */
UF_MUST_USE uf_status uf_dark_start(uf_work *work, int width, int height, uf_dark_frames *frames, uf_error *error);

/*
 * Adds a frame. Its level may wander from frame to frame (the median over tiles of its difference from the others):
 * that part is taken out of the pixels' variances and reported as drift. UF_INPUT: another size, the same frame as an
 * earlier one, more than UF_DARK_FRAMES_MOST.
 */
UF_MUST_USE uf_status uf_dark_add(uf_work *work, uf_dark_frames *frames, uf_plane frame, uf_error *error);

/* What dark frames tell. Shares are of all pixels. */
typedef struct uf_dark {
    const uf_dark_frames *frames;
    double step_adu;      /* between neighbouring counts: 16 for 12 bits shifted into 16; 0: not whole numbers */
    double offset_adu;    /* median over tiles of their pixels' mean */
    double offset_sd_adu; /* of it: the frames' drift, the pixels' noise; step / root 12 where rounding hides both */
    double drift_adu;     /* sd of the frames' levels: how far the offset of a single image wanders */
    double pattern_adu;   /* sd over ordinary pixels of their mean, from their tile's; the noise taken out */
    double variance_adu2; /* mean temporal variance of ordinary pixels, rounding still in */
    double variance_sd_adu2; /* of that mean */
    double noise_adu;        /* temporal sd of a typical pixel (median; see below), rounding taken out */
    double noise_sd_adu;
    double noise_rms_adu; /* root of the ordinary pixels' mean variance, rounding taken out */
    int noise_is_bound;   /* variance below 0.24 step^2: both noises are an upper limit, 0.40 steps */
    double noisy_share;   /* pixels with more than 3 times the ordinary noise, beyond chance */
    double hot_share;     /* pixels whose mean lies far from their neighbours' */
    double clipped_share; /* of counts, at 0: above 0.001 offset and noise are wrong */
    uf_mask defects;      /* UF_DEFECT_ bits of each pixel; photon transfer uses those without any */
    double ordinary_pixels;
} uf_dark;

/*
 * The median over pixels of a sample variance is below the variance; it is divided by the median of chi-square /
 * degrees. With fewer than UF_MEDIAN_NOISE_FRAMES frames a pixel's variance takes too few values for a median:
 * noise_adu is then noise_rms_adu. Rounding to whole steps adds step^2 / 12, which is subtracted; below a variance
 * of 0.24 step^2 that no longer holds, and only a bound is known (EMVA 1288, release 3.1).
 *
 * UF_INPUT: fewer than 2 frames; a frame whose level lies far from the others' (it saw light), by its number; all
 * pixels without any noise. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_dark_finish(uf_work *work, const uf_dark_frames *frames, uf_dark *dark, uf_error *error);

enum { UF_MEDIAN_NOISE_FRAMES = 8 };

/* The mean of all dark frames as an image of their size (the instrument file's `dark`). */
void uf_dark_image(const uf_dark_frames *frames, uf_plane out);

/* ---- pairs of flats -------------------------------------------------------------------------- */

/* Two frames of one exposure and one lamp differ by less than this share of their light. */
#define UF_FLICKER_MOST 0.3

/* Sum of the flats' signals per pixel: how pixels respond. */
typedef struct uf_response {
    int width, height, pairs;
    double *signal;
} uf_response;

UF_MUST_USE uf_status uf_response_start(uf_work *work, int width, int height, uf_response *response, uf_error *error);

/* One pair of flats. Figures are of ordinary pixels that are no outliers, the same for mean and variance. */
typedef struct uf_photon_point {
    double exposure_ms;        /* as the caller gave it; NaN: unknown */
    double mean_adu;           /* mean of the counts of both frames */
    double signal_adu;         /* the same above the dark mean of each pixel */
    double variance_adu2;      /* half the variance of the difference at their common level; rounding still in */
    double variance_sd_adu2;   /* from fourth moments: for normal values sqrt(2 / pixels) of the variance */
    double pixels;             /* how many */
    double rejected_fraction;  /* outliers: blinking pixels, particle hits */
    double saturated_fraction; /* of ordinary pixels, at or above full scale in either frame */
    double saturation_adu;     /* full scale as given, or the highest count where pixels pile up; NaN: not reached */
    double highest_adu;        /* highest count of an ordinary pixel */
    double flicker;            /* signal of the first frame over the second's, less 1; NaN without light */
    double low_adu, high_adu;  /* signal of the 5th and 95th percentile of tiles: how uneven the light was */
    double correlation_x;      /* of the differences of neighbours along rows, */
    double correlation_y;      /* and down columns: 0 for a camera whose pixels know nothing of each other */
} uf_photon_point;

/*
 * Measures one pair. Both frames have the dark mean subtracted and are scaled to their common mean, so that a
 * lamp that flickers leaves no fixed pattern in the difference; what flickering adds to the variance is taken
 * out. Differences are looked at in tiles of 32 x 32 pixels: the tile's mean difference goes out, and differences
 * beyond 6 sigma, so that hot and blinking pixels do not count. Uneven light does no harm: each pixel lies on the
 * same straight line, and the mean of points of a straight line lies on it (up to saturation). Limit: behind a
 * multiplying register the long tails of less than 2 electrons a pixel lose some per cent to the 6 sigma.
 *
 * `full_scale_adu`: count of a saturated pixel, NaN where unknown. `response` may be NULL; pairs with saturated
 * pixels, or without light, are not added to it. exposure_ms NaN or above 0. UF_INPUT: another size than the dark
 * frames, the same frame twice, flats darker than the dark frames, frames of unlike light (by more than
 * UF_FLICKER_MOST). A pair that is saturated throughout is no error here: it is a point that is left out.
 */
UF_MUST_USE uf_status uf_photon_pair(uf_work *work, const uf_dark *dark, uf_plane a, uf_plane b, double exposure_ms,
                                     double full_scale_adu, uf_response *response, uf_photon_point *point,
                                     uf_error *error);

/* ---- the line -------------------------------------------------------------------------------- */

enum { UF_PHOTON_POINTS_MOST = 500 };

/* Why a point is not in the fit. */
typedef enum uf_point_use {
    UF_POINT_USED,
    UF_POINT_SATURATED,    /* more than 0.1 % of its pixels are at full scale */
    UF_POINT_PAST_THE_TOP, /* its variance is lower than that of a darker point */
    UF_POINT_NEAR_FULL,    /* above 70 % of a saturation that was seen (EMVA 1288's range) */
    UF_POINT_NO_LIGHT      /* no signal: it lies at the foot of the line and tells nothing of its slope */
} uf_point_use;

/* A point beside the fit; NaN where it does not apply. */
typedef struct uf_point_fit {
    uf_point_use use;
    double departure;       /* of the variance from the line, relative to the line above the dark variance */
    double departure_sigma; /* the same over its sd */
    double linearity;       /* of the signal from the straight line against exposure, relative to that line */
} uf_point_fit;

typedef enum uf_full_scale_from {
    UF_FULL_SCALE_UNSEEN,   /* no pair came near it: full_scale_adu is NaN */
    UF_FULL_SCALE_PILED_UP, /* pixels pile up at that count */
    UF_FULL_SCALE_TOP       /* the mean where the variance is largest: pixels fill before the converter does */
} uf_full_scale_from;

typedef enum uf_linear_from { UF_LINEAR_BY_EXPOSURE, UF_LINEAR_BY_VARIANCE } uf_linear_from;

/* What a careful person would say beside the numbers; bits of uf_photon_transfer.notes. */
enum {
    UF_CAMERA_ROUNDING = 1,     /* the dark noise drowns in rounding: read_noise_e is an upper limit */
    UF_CAMERA_DARK_CLIPPED = 2, /* dark counts are cut off at 0: offset and read noise are wrong */
    UF_CAMERA_CORRELATED = 4,   /* neighbours are correlated (smoothed, compressed, resized): the gain is too high */
    UF_CAMERA_LINE_BENDS = 8,   /* chi-square improbable (p < 0.001) and some used point more than 2 % off the line */
    UF_CAMERA_OFFSETS_DISAGREE = 16, /* the line does not point at the dark offset: other exposure, stray light */
    UF_CAMERA_NARROW_RANGE = 32,     /* the brightest used point has less than 3 times the signal of the darkest */
    UF_CAMERA_FLICKER = 64,          /* the two frames of some pair differ by more than 5 % in light */
    UF_CAMERA_LOW_SIGNAL = 128,      /* no used point has twice the dark variance: the read noise hides the light's */
    UF_CAMERA_FEW_DARKS = 256 /* fewer than 8 dark frames: noisy pixels are not all seen, and no median noise */
};

typedef struct uf_photon_transfer {
    double offset_adu, offset_sd_adu;
    double slope_adu, slope_sd_adu;             /* variance over signal, ADU^2 / ADU */
    double excess_noise, excess_noise_sd;       /* as given, or 1 */
    double gain_e_per_adu, gain_sd_e_per_adu;   /* excess^2 / slope */
    double read_noise_e, read_noise_sd_e;       /* uf_dark.noise_adu x gain */
    double read_noise_rms_e;                    /* uf_dark.noise_rms_adu x gain */
    double line_offset_adu, line_offset_sd_adu; /* where a line of free intercept meets the dark variance; NaN below
                                                   3 points */
    int points_used;
    double chi_square;   /* of points_used - 1 degrees of freedom */
    double chi_square_p; /* chance of a larger one; NaN for one point */
    uf_full_scale_from full_scale_from;
    double full_scale_adu; /* for the instrument file; NaN: not seen */
    double full_scale_e;   /* (full_scale_adu - offset_adu) x gain: electrons, before multiplication */
    uf_linear_from linear_from;
    double linear_to_adu;                       /* largest mean up to which every point departs by less than 1 % */
    double linear_departure;                    /* the largest departure up to there */
    double rate_adu_per_ms, rate_sd_adu_per_ms; /* signal against exposure; NaN without at least 2 exposures */
    double correlation; /* of neighbours, mean over the points used: along rows or down columns, the larger */
    unsigned notes;
} uf_photon_transfer;

/*
 * Fits the line through the dark frames' foot (where rounding hides their noise: through a foot of its own) by
 * weighted least squares. A point's weight is one over its variance's own variance, taken at the fitted line and
 * iterated (at the measured variances, low ones would weigh more). slope_sd_adu contains the scatter about the
 * line where that is larger than expected, and the uncertainties of the dark frames. `points` in any order;
 * `fits` has room for `count`, in the same order, and may be NULL.
 *
 * linear_to_adu: with at least 4 different exposures, the straight line of signal against exposure (relative
 * weights; the intercept is what a shutter takes) through as many points from below as it misses none of by more
 * than 1 %; a lamp that drifts during the series looks like a camera that is not linear. Else up to where the
 * variance leaves its line by 1 % and 2 of its sd. NaN where not even 3 exposures, or the darkest point, lie on a
 * line.
 *
 * `excess_noise`: factor by which multiplication raises the noise's sd: sqrt 2 for long electron-multiplying
 * registers (Robbins and Hadwen 2003, IEEE Trans. Electron Devices 50:1227), 1 for others. One set of points cannot
 * tell it from the gain.
 *
 * UF_INPUT: no light in any pair; all saturated; all at one level (slope not determined).
 */
UF_MUST_USE uf_status uf_photon_transfer_fit(const uf_dark *dark, const uf_photon_point *points, int count,
                                             double excess_noise, uf_photon_transfer *transfer, uf_point_fit *fits,
                                             uf_error *error);

typedef struct uf_excess {
    double noise, noise_sd;                   /* excess noise factor (of the sd) */
    double multiplication;                    /* counts for the same light, with over without */
    double gain_e_per_adu, gain_sd_e_per_adu; /* electrons before multiplication per count with it */
} uf_excess;

/*
 * The excess noise from two sets of the same light, with multiplication and without: the set without tells the
 * electrons of a count, the ratio of the rates (signal against exposure) what a count with multiplication stands
 * for, and the slope with it what is left over: excess^2 = slope_with / slope_without x rate_without / rate_with.
 * Exposures may differ. UF_INPUT: a set without exposures, a result clearly below 1 (the sets are not of the same
 * light).
 */
UF_MUST_USE uf_status uf_excess_noise(const uf_photon_transfer *with, const uf_photon_transfer *without,
                                      uf_excess *excess, uf_error *error);

/* Puts an excess noise and its sd into a fit made without: gain, read noise, full scale and their sds follow. */
void uf_photon_transfer_set_excess(uf_photon_transfer *transfer, const uf_dark *dark, double excess_noise, double sd);

/* ---- defects --------------------------------------------------------------------------------- */

typedef struct uf_defect_counts {
    int64_t dark, noise, response, any;
} uf_defect_counts;

/*
 * Writes the map of defects (the instrument file's `defects`): pixels whose dark mean, temporal noise in the dark,
 * or response against their neighbours lies far outside. Thresholds and their reasons stand in camera_defects.c.
 * `response` may be NULL, or without pairs: that part is then left out. UF_INPUT when more than a tenth of the
 * pixels would be bad.
 */
UF_MUST_USE uf_status uf_camera_defects(uf_work *work, const uf_dark *dark, const uf_response *response, uf_plane map,
                                        uf_defect_counts *counts, uf_error *error);

#endif
