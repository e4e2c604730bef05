/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A flat field from several images of something even: a dye film, a dye solution, or many fields of cells.
 *
 * Each image is (image - dark) = level of the image x flat + things that do not belong there (dust that moves,
 * bubbles, cells). Levels and flat are found together on a lattice of pixels by medians in turn, then the flat of
 * each pixel from its values over all images, without those that stand out.
 *
 * How to call: zero a uf_flat_stack, uf_flat_add for each image, uf_flat_make, uf_flat_stack_free.
 *
 * Memory: the stack keeps every image, at 2 bytes a pixel for whole counts up to 65535 (100 images of 2048 x 2048:
 * 0.84 GB) and 4 for others, in an arena of its own. uf_flat_make takes 12 bytes a pixel of results from work's
 * arena, and gives some 16 bytes a pixel of scratch back.
 */
#ifndef UF_CALIBRATE_FLAT_H
#define UF_CALIBRATE_FLAT_H

#include "calibrate/counts.h"

typedef enum uf_flat_sample {
    UF_FLAT_FILM,
    UF_FLAT_SOLUTION,
    UF_FLAT_CELLS /* the background between cells is what is even; cells are brighter and elsewhere in each image */
} uf_flat_sample;

enum { UF_FLAT_IMAGES_LEAST = 3, UF_FLAT_IMAGES_MOST = 1000 };

/* Images kept. Zeroed it is empty and may be freed. */
typedef struct uf_flat_stack {
    int width, height, count;
    uf_count_step step; /* between neighbouring counts */
    uf_arena arena;
    struct uf_flat_image *images; /* UF_FLAT_IMAGES_MOST, from the arena */
} uf_flat_stack;

void uf_flat_stack_free(uf_flat_stack *stack);

/* Keeps a copy of raw counts. UF_INPUT: another size than the first, the same image as an earlier one, too many. */
UF_MUST_USE uf_status uf_flat_add(uf_flat_stack *stack, uf_plane image, uf_error *error);

typedef struct uf_flat_request {
    uf_flat_sample sample;
    uf_plane dark; /* counts in the dark; data NULL: offset_adu */
    double offset_adu;
    uf_plane defects;      /* not 0: bad pixel, taken from its neighbours; data NULL: none known */
    double full_scale_adu; /* count of a saturated pixel; NaN: where counts pile up at the highest */
    double smooth_px; /* Gaussian sigma; 0: as it is. Above 0 the flat knows light but no single pixel's response */
} uf_flat_request;

/* Largest noise (relative, 1 sigma) a flat may have without saying so: 1 % of a ratio is about 1 nm of gap at a depth
 * of 100 nm, as much as the other sources of a calibrated bench together are hoped to leave. */
#define UF_FLAT_NOISE_MOST 0.01

/* A pixel below this share of the mean has no flat worth dividing by. */
#define UF_FLAT_LOWEST 0.05

typedef struct uf_flat {
    uf_plane image;          /* mean 1, all above UF_FLAT_LOWEST */
    uf_plane noise;          /* relative 1 sigma of each pixel before smoothing, from the scatter over images */
    uf_plane count;          /* images that were kept at each pixel */
    double noise_pixel;      /* a typical `noise` */
    double noise_halves;     /* of `image`, smoothed as it is: from the difference of odd and even images' flats */
    double noise_expected;   /* the same if each pixel's noise were its own: noise_pixel narrowed by the smoothing */
    double smooth_bias;      /* 99th percentile of what smoothing has changed, relative; 0 without smoothing */
    int too_noisy;           /* noise_halves above UF_FLAT_NOISE_MOST */
    int images_wanted;       /* how many images of this kind would do; 0 when it is good enough */
    double smooth_wanted_px; /* or how much smoothing; 0 when good enough, NaN when above UF_FLAT_SMOOTH_MOST */
    double rejected_share;   /* of all values of good pixels */
    double never_kept_share; /* pixels without a value of their own: defects */
    double unevenness;       /* 99th over 1st percentile of `image` */
    double lowest, highest;  /* of `image` */
    int lowest_x, lowest_y;
    int images;
    double *level_adu;  /* of each image, above the dark */
    double *unlikeness; /* of each image: 75th percentile, over 8 x 8 tiles, of its relative departures from the flat
                           (cells: to the dark side only) */
} uf_flat;

#define UF_FLAT_SMOOTH_MOST 100.0

/*
 * Film and solution: the mean of the values within 3.5 robust sd of the median. Cells: from the lowest quarter of
 * the values upwards, those within 2.5 sd (of their lower quartile) of the median, until nothing changes, and the
 * mean of these: the background. Light that cells scatter around them stays in, and a place that cells always
 * cover is wrong. With 3 or 4 images nothing can be told to stand out: the median.
 *
 * The noise of the flat is given twice. noise_expected assumes that what differs between images differs from
 * pixel to pixel; noise_halves does not, and is larger where smooth things moved (cells, haze, a lamp that
 * wanders): trust it. images_wanted and smooth_wanted_px are what noise_halves would need to come down to
 * UF_FLAT_NOISE_MOST: the square of the ratio times more images, or the ratio times more smoothing.
 *
 * UF_INPUT: fewer than 3 images; one that is saturated (more than 0.1 % of its pixels; cells: 5 %), or hardly
 * brighter than the dark, or much unlike the rest, by its number from 1; more values that stand out than there
 * may be (a fifth; cells: half, or fewer than 12 background values a pixel on average); a flat with places at or
 * below UF_FLAT_LOWEST, with the worst; planes of another size; smooth_px out of 0 .. UF_FLAT_SMOOTH_MOST;
 * defects too large to be filled. UF_MEMORY. After a failure work's arena stands where it stood.
 */
UF_MUST_USE uf_status uf_flat_make(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request,
                                   uf_flat *flat, uf_error *error);

#endif
