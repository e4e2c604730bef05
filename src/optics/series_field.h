/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A series of angles: one page each, I_k = power_k A T_k(gap), with A what the dye and the camera make of it and
 * T_k the absolute field of page k. Two unknowns a pixel, so that a gap needs no reference: it lies in how
 * differently the pages fall (Wagner, Weber, Baumann and Schneckenburger 2012, J. Vis. Exp. 68:e4133).
 */
#ifndef UF_OPTICS_SERIES_FIELD_H
#define UF_OPTICS_SERIES_FIELD_H

#include "image/channel.h"
#include "optics/decay.h"

enum { UF_SERIES_MOST = 32, UF_SERIES_FARTHEST_NM = 500, UF_SERIES_GAPS = 31, UF_SERIES_GAP_STEP_NM = 10 };

typedef struct uf_series {
    int count;  /* of pages; 0: no series */
    int widest; /* page of the smallest angle, whose field reaches farthest: it stands for the near channel */
    double na_effective[UF_SERIES_MOST], power[UF_SERIES_MOST];
    double farthest_nm;                   /* the search for a gap ends here */
    double systematic_nm[UF_SERIES_GAPS]; /* 1 sigma of a gap by angle and indices, at gaps 0, 10 .. 300 nm */
} uf_series;

/* The field in force, all but the angle. */
typedef struct uf_field_kind {
    const uf_bench *bench;
    uf_field_model model;
    uf_stray stray;
} uf_field_kind;

/*
 * Absolute excitation at a gap of at least 0, per unit incident intensity: interface intensity times exponential, or
 * the layered field, F; with stray light (1 - s) F(gap) + s F(0) exp(-gap / D).
 */
double uf_absolute_excitation(const uf_field_kind *kind, double na_effective, double gap_nm);

/* power_k T_k(gap) of every page, and its derivative by the gap (a nm). Below 0 its logarithm goes on as a
 * straight line, so that noise may take a gap there. */
void uf_series_field(const uf_series *series, const uf_field_kind *kind, double gap_nm, double *field, double *slope);

/*
 * The gap up to which a larger gap makes the pages less alike to those at contact, at most 500 nm. Beyond it, where
 * stray light outshines the field, they grow alike again, and a far gap looks like a near one: no series
 * can tell them by shape.
 */
double uf_series_farthest(const uf_series *series, const uf_field_kind *kind);

/*
 * What a small change of each page's signal does to the fitted gap, nm, for A = 1 (else divide by A): with weights w
 * and the least-squares conditions linearised around the fit,
 *   d gap / d I_k = w_k (a T'_k - b T_k) / (a c - b^2), a = sum w T T, b = sum w T T', c = sum w T' T'.
 * 0 where the pages cannot tell the gap.
 */
void uf_series_gain(int count, const double *field, const double *slope, const double *weight, double *gain_nm);

/*
 * Gap of one set of signals, with A profiled out: minimises sum w (I - A T(gap))^2. Starts from the slope of
 * ln(I / T(0)) against 1 / depth, which is -gap for an exponential field. NaN where a signal is not above 0.
 * reduced_chi_square (may be NULL): the sum over count - 2, NaN for two pages.
 */
double uf_series_fit(const uf_series *series, const uf_field_kind *kind, const double *signal, const double *weight,
                     double *reduced_chi_square);

/* The start of uf_series_fit alone: the gap by the straight line, all points alike. */
double uf_series_line(const uf_series *series, const uf_field_kind *kind, const double *signal);

/* 1 sigma of one pixel's gap at `gap_nm` where the widest page's signal is near_adu above background, from the
 * pages' noise; and from their backgrounds' uncertainty, which moves all pixels together. The other pages
 * are taken to have the widest one's camera, background and its sd. NaN where near_adu is not above 0. */
double uf_series_noise_nm(const uf_series *series, const uf_field_kind *kind, const uf_channel *widest,
                          double near_adu, double gap_nm);
double uf_series_background_nm(const uf_series *series, const uf_field_kind *kind, const uf_channel *widest,
                               double near_adu, double gap_nm);

/* systematic_nm at a gap, by straight lines; beyond its ends their values. */
double uf_series_systematic(const uf_series *series, double gap_nm);

#endif
