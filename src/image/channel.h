/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What steps hand on: a corrected channel, and the cells found in a field. Plain data; planes live in the
 * arena of the worker that made them. */
#ifndef UF_IMAGE_CHANNEL_H
#define UF_IMAGE_CHANNEL_H

#include "image/plane.h"

/* Camera noise: variance (ADU^2) of a signal = excess2 * signal / gain + read_adu^2, the background included
 * in the signal (EMVA 1288's photon transfer model). */
typedef struct uf_noise {
    double gain_e_per_adu;
    double read_adu;
    double excess2;
} uf_noise;

/* A count that says only that the light was at least, or at most, so strong. */
typedef enum uf_pixel_fault { UF_PIXEL_FINE, UF_PIXEL_SATURATED, UF_PIXEL_CLIPPED } uf_pixel_fault;

typedef struct uf_channel {
    uf_plane image;    /* ADU, offset subtracted, flat-fielded, bad pixels replaced; background still in */
    uf_mask saturated; /* uf_pixel_fault of each pixel; data NULL when there is none */
    uf_noise noise;
    double background_adu;
    double background_sd_adu; /* 1 sigma of background_adu */
    double halo_sd_adu;       /* 1 sigma of what taking out a halo left inside cells */
    double noise_adu;         /* 1 sigma noise of a pixel at the background level */
    double saturated_fraction, clipped_fraction;
    int64_t replaced;   /* bad pixels replaced */
    int display_scaled; /* looks contrast-stretched to 8 bits */
} uf_channel;

static inline double uf_noise_variance(const uf_noise *noise, double signal_adu)
{
    double shot = signal_adu > 0 ? noise->excess2 * signal_adu / noise->gain_e_per_adu : 0.0;
    return shot + noise->read_adu * noise->read_adu;
}

/* The cells of a field. The coarse planes have one pixel for factor x factor image pixels. */
typedef struct uf_cell_map {
    uf_labels labels;
    uf_plane distance_px;      /* distance to the nearest pixel outside the own cell, 0 outside cells */
    uf_plane to_background_px; /* distance to the nearest pixel outside all cells */
    int factor;
    uf_plane plateau_adu; /* coarse: wide level just inside the nearest outline, background included */
    uf_plane outside_adu; /* coarse: wide level just outside it */
    uf_plane outside_px;  /* coarse: distance from the nearest cell in image pixels, 0 inside */
} uf_cell_map;

/* What is known of one pixel's gap. */
typedef enum uf_gap_state {
    UF_GAP_OUTSIDE, /* not in a cell */
    UF_GAP_RESOLVED,
    UF_GAP_UNRESOLVED /* near or wide too weak: the gap is at least what the map holds */
} uf_gap_state;

typedef struct uf_gap_map {
    uf_plane gap_nm;        /* signed; the detection limit where unresolved; NaN outside cells */
    uf_mask state;          /* uf_gap_state */
    uf_plane near_adu;      /* near signal, background subtracted: the near channel's own image, in its place */
    uf_plane dye_adu;       /* wide signal that stands for dye density: background subtracted, the fall of the wide
                           blur towards outlines taken out */
    uf_plane chi_square;    /* reduced chi-square of a series' fit; data NULL without a series */
    uf_plane smooth_gap_nm; /* at the scale of the point spread function, for spots; UF_GAP_NOWHERE outside */
} uf_gap_map;

/* Value of smooth_gap_nm where there is no gap: lower than any gap, so that an outside neighbour never
 * counts as a higher surrounding. */
#define UF_GAP_NOWHERE (-1e6f)

#endif
