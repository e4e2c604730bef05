/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The depth of the evanescent field from beads of known radius: their round shape turns distance from the centre into
 * height (calibrate/bead_profile.h), so that the near image of one bead is a decay curve.
 *
 *   1. uf_beads_find: beads of each image by the size of their bright (immersed: dark) core, with the pixels they are
 *      judged by. Beads that cannot be used are kept with the reason.
 *   2. uf_beads_fit: each bead's centre; then all beads together: one decay, and each bead's own amplitude and
 *      background; beads unlike the rest are left out; the spread over beads gives the uncertainty.
 */
#ifndef UF_CALIBRATE_BEAD_H
#define UF_CALIBRATE_BEAD_H

#include "calibrate/bead_profile.h"
#include "image/channel.h"

typedef struct uf_bead_setup {
    uf_bead_dye dye;
    int with_stray; /* fit stray light: its share, and its depth where the beads tell it */
    double radius_um, pixel_size_um, psf_sigma_um;
    double expected_depth_nm;  /* where the search begins */
    double scattered_depth_nm; /* where it begins, and what is taken where the beads cannot tell */
} uf_bead_setup;

typedef enum uf_bead_state {
    UF_BEAD_USED,
    UF_BEAD_AT_EDGE,     /* cut by the image's edge */
    UF_BEAD_SATURATED,   /* pixels at full scale in its core */
    UF_BEAD_OVERLAPPING, /* closer to another one than two beads on a plane can be */
    UF_BEAD_DIM,         /* much dimmer than the rest: off the substrate, or hardly dyed */
    UF_BEAD_OUTLIER,     /* its depth is unlike the rest's */
    UF_BEAD_STATES
} uf_bead_state;

typedef struct uf_bead_pixel {
    float x_px, y_px, value_adu;
} uf_bead_pixel;

typedef struct uf_bead {
    int image;                   /* 0 .. */
    double x_px, y_px, core_adu; /* core: height of the core over its surroundings */
    uf_bead_state state;
    uf_bead_pixel *pixels;
    int pixel_count;
    double amplitude_adu, background_adu; /* signal = amplitude * decay profile + background */
    double depth_nm; /* of this bead alone, the stray light as of all; NaN where it was not fitted */
    double misfit;   /* reduced chi-square of its profile, 1 for noise alone */
} uf_bead;

/* Zeroed it is empty and may be freed. */
typedef struct uf_bead_set {
    uf_bead *beads;
    int count, capacity, images;
    uf_noise noise; /* of the last image */
} uf_bead_set;

/* Adds the beads of one image. The image may be given back afterwards. UF_MEMORY. */
UF_MUST_USE uf_status uf_beads_find(uf_work *work, const uf_bead_setup *setup, const uf_channel *image,
                                    uf_bead_set *set, uf_error *error);
void uf_bead_set_free(uf_bead_set *set);

int uf_beads_in_state(const uf_bead_set *set, uf_bead_state state);

/* A figure, its standard error over beads (delete-one jackknife: Quenouille 1956, Biometrika 43:353; Tukey 1958), and a 95 %
 * interval by Student's t. */
typedef struct uf_bead_figure {
    double value, sd, low, high;
} uf_bead_figure;

enum { UF_BEAD_PLOT_BINS = 60, UF_BEADS_LEAST = 5 };

typedef struct uf_bead_result {
    int used, images_used;
    uf_bead_figure depth_nm, scattered_fraction, scattered_depth_nm;
    int scattered_depth_fitted; /* 0: taken from the setup */
    double bead_to_bead;        /* relative 1 sigma of single beads' depths */
    double depth_per_psf_nm;    /* change of the depth when the blur's sigma is a tenth larger */
    double misfit;              /* reduced chi-square over all beads */
    double core_share;          /* evanescent share of the light at the centre, over its standard error */
    /* Mean profile of the used beads, each scaled to amplitude 1 and background 0: for the plot. */
    int bins;
    double bin_um[UF_BEAD_PLOT_BINS], bin_height_nm[UF_BEAD_PLOT_BINS], bin_value[UF_BEAD_PLOT_BINS],
        bin_sd[UF_BEAD_PLOT_BINS], bin_model[UF_BEAD_PLOT_BINS], bin_evanescent[UF_BEAD_PLOT_BINS];
} uf_bead_result;

/*
 * Least squares by Levenberg and Marquardt (fit/nonlinear.h) over ln depth, the logit of the stray share and ln of the stray
 * depth; amplitudes and backgrounds are linear and solved for inside (variable projection: Golub and Pereyra 1973, SIAM J.
 * Numer. Anal. 10:413). Weights from the noise model at the fitted light.
 *
 * UF_INPUT says what to do when beads are too few (under UF_BEADS_LEAST), saturated, disagree, show no evanescent core, or
 * the fit does not settle.
 */
UF_MUST_USE uf_status uf_beads_fit(uf_work *work, const uf_bead_setup *setup, uf_bead_set *set,
                                   uf_bead_result *result, uf_error *error);

#endif
