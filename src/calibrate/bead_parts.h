/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the parts of the bead fit share: the data as rings, the decay in force, and the fits of it. */
#ifndef UF_CALIBRATE_BEAD_PARTS_H
#define UF_CALIBRATE_BEAD_PARTS_H

#include "calibrate/bead.h"
#include "calibrate/bead_reach.h"
#include "fit/nonlinear.h"

typedef struct decay_law {
    double depth_nm, share, stray_depth_nm;
} decay_law;

/* One bead's rings, nearest first. */
typedef struct curve {
    int bead, count;
    double *r_um, *value, *root_weight;
} curve;

typedef struct fit_job {
    uf_work *work;
    const uf_bead_setup *setup;
    uf_bead_set *set;
    uf_bead_reach reach;
    uf_bead_profile profile;
    double *evanescent, *mixed; /* tables of the profile */
    decay_law law;
    curve *curves;
    int curve_count;
    int left_out, only; /* a curve, or -1 */
    int fits_stray_depth;
} fit_job;

/* ---- bead_rings.c: pixels, centres, rings -------------------------------------------------------- */

/* Fills the mixed table: evanescent and stray light by the law's share. */
void uf_bead_make_table(fit_job *job, const decay_law *law);

/* Amplitude and background of a bead from its pixels, by weights of the noise model or alike. */
void uf_bead_solve(const fit_job *job, uf_bead *bead, int weighted);

/* Centres of all beads in use, at the law in force. UF_MEMORY. */
UF_MUST_USE uf_status uf_bead_find_centres(fit_job *job, uf_error *error);

/* Rings of all beads in use, into job->curves. UF_MEMORY. */
UF_MUST_USE uf_status uf_bead_make_curves(fit_job *job, uf_error *error);

/* Residuals of one curve, over their sds, with its own best amplitude and background, which the bead keeps. How many. */
int uf_bead_curve_residuals(fit_job *job, const curve *c, double *r);

/* ---- bead_decay.c: the decay, and which beads obey it ---------------------------------------------- */

size_t uf_bead_rows(const fit_job *job);

/* One fit from job->law; with job->only a single bead's depth alone. UF_MEMORY. */
UF_MUST_USE uf_status uf_bead_fit_decay(fit_job *job, uf_nonlinear_fit *fit, uf_error *error);

/* The same, and what it finds becomes job->law. */
UF_MUST_USE uf_status uf_bead_refine(fit_job *job, uf_nonlinear_fit *fit, uf_error *error);

/* Each bead's own depth, the rest as in job->law. */
UF_MUST_USE uf_status uf_bead_fit_single(fit_job *job, uf_error *error);

void uf_bead_mark_dim(fit_job *job, double *scratch);
/* How many were thrown out. */
int uf_bead_mark_outliers(fit_job *job, double *scratch);

/* Robust relative sd of single beads' depths. */
double uf_bead_to_bead(const fit_job *job, double *scratch);

int uf_bead_enough(const uf_bead_set *set);
uf_status uf_bead_too_few(const uf_bead_set *set, uf_error *error);

/* ---- bead_result.c: uncertainty and the mean profile ----------------------------------------------- */

UF_MUST_USE uf_status uf_bead_jackknife(fit_job *job, const uf_nonlinear_fit *whole, uf_bead_result *result,
                                        uf_error *error);
UF_MUST_USE uf_status uf_bead_try_wider_blur(fit_job *job, double depth_nm, uf_bead_result *result, uf_error *error);
UF_MUST_USE uf_status uf_bead_fill_profile(fit_job *job, uf_bead_result *result, uf_error *error);
int uf_bead_images_used(const uf_bead_set *set);

#endif
