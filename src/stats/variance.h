/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where the scatter comes from: between replicates, wells or cells. */
#ifndef UF_STATS_VARIANCE_H
#define UF_STATS_VARIANCE_H

#include <stddef.h>

#include "base/status.h"
#include "stats/notes.h"

/* ---- one level -------------------------------------------------------------------------------- */

typedef struct uf_one_way {
    size_t count, groups; /* values, and groups that have any */
    double ms_between, ms_within, df_between, df_within;
    double f, p; /* does any group differ? */
    double r_squared, residual_sd;
    double group_size; /* what stands for the size where sizes differ: (N - sum n^2 / N) / (groups - 1) */
    double icc;        /* shown as 0 where it came out below (UF_NOTE_NEGATIVE_AS_ZERO) */
    double icc_signed, icc_low, icc_high; /* as it came out, and its interval, which may reach below 0 */
    unsigned notes;
} uf_one_way;

/*
 * One-way analysis of variance of values in groups 0 .. groups-1 (NaN takes no part), about means in two passes, and
 * the intraclass correlation ICC(1) = (MSB - MSW) / (MSB + (m - 1) MSW) with its interval by F (Shrout and Fleiss
 * 1979, Psychol. Bull. 86:420; exact for like sizes, else with the mean size m of Donner 1986, Int. Stat. Rev.
 * 54:67). NaN where a mean square has no degree of freedom (UF_NOTE_TOO_FEW). UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_one_way_fit(const double *values, const int *group, size_t count, int groups, double level,
                                     uf_one_way *fit, uf_error *error);

/* ---- three levels ----------------------------------------------------------------------------- */

/* One cell: any whole numbers name its treatment, replicate and well. */
typedef struct uf_nested_row {
    double value;
    int treatment, replicate, well;
} uf_nested_row;

/* The three strata, from the widest. */
enum { UF_STRATUM_REPLICATE, UF_STRATUM_WELL, UF_STRATUM_CELL, UF_STRATA };

/*
 * Mean squares of replicates within treatments, wells within replicates, cells within wells; what they are expected
 * to be; and the variances that follow. Replicates of different treatments count as different ones even when they
 * bear one name.
 */
typedef struct uf_components {
    size_t cells, wells, replicates, treatments;
    double mean;                                  /* of all cells */
    double mean_square[UF_STRATA], df[UF_STRATA]; /* NaN without a degree of freedom */
    double well_size;                             /* E MS(wells) = cell + well_size * well */
    double replicate_well_size,
        replicate_size;         /* E MS(replicates) = cell + replicate_well_size * well + replicate_size *
                                                 * replicate */
    double variance[UF_STRATA]; /* in squared units of the values; below 0 shown as 0 (UF_NOTE_NEGATIVE_AS_ZERO) */
    double variance_signed[UF_STRATA]; /* as they came out */
    double icc_replicate;              /* correlation of two cells of a replicate in different wells */
    double icc_well;                   /* and in one well */
    double design_effect;              /* variance of the mean of all cells over that of as many independent ones */
    double effective_n;                /* cells / design_effect: for planning, no degrees of freedom */
    unsigned notes;
} uf_components;

/*
 * Nested analysis of variance with unequal sizes, pooled within treatment: expected mean squares by the sizes'
 * coefficients (Searle, Casella and McCulloch 1992, Variance Components, 3.6 and appendix F; Sokal and Rohlf 1995,
 * Biometry, 10.3). The design effect is Kish's (1965, Survey Sampling, 5.4) with both levels: 1 - icc_well +
 * (icc_well - icc_replicate) sum n_well^2 / N + icc_replicate sum n_replicate^2 / N, which is 1 + (m - 1) ICC for one
 * level of like sizes.
 *
 * With one well in each replicate, wells and replicates cannot be told apart: the variance of wells is NaN, counted
 * into replicates, and icc_well = icc_replicate. Without a second replicate in any treatment, or a second cell in any
 * well, what hangs on it is NaN (UF_NOTE_TOO_FEW). UF_MEMORY is the only failure. Rows whose value is NaN take no
 * part.
 */
UF_MUST_USE uf_status uf_components_fit(const uf_nested_row *rows, size_t count, uf_components *components,
                                        uf_error *error);

/* 1 + (m - 1) ICC for clusters of m (Kish 1965). */
double uf_design_effect(double cluster_size, double icc);

/* Variance of the mean of one replicate that has `wells` wells of `cells` cells each, and its degrees of freedom by
 * Satterthwaite's rule on the mean squares it is made of (Searle, Casella and McCulloch 1992, 3.5; at least 1). *df
 * may be NULL. */
double uf_replicate_variance(const uf_components *components, double wells, double cells, double *df);

#endif
