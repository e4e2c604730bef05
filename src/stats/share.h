/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shares of cells (attached, with any contact) and their intervals. */
#ifndef UF_STATS_SHARE_H
#define UF_STATS_SHARE_H

#include <stddef.h>

#include "stats/notes.h"

typedef struct uf_share {
    double share, low, high; /* NaN without a trial */
} uf_share;

/* Wilson's score interval (1927, J. Am. Stat. Assoc. 22:209, without continuity correction) for `hits` of `trials`
 * independent cells, each as likely a hit: right for one well looked at by itself. Neither need be whole. */
uf_share uf_wilson(double hits, double trials, double level);

/* The same with a given quantile in place of the normal's: Student's t where the trials' worth was estimated. */
uf_share uf_wilson_by(double hits, double trials, double quantile);

/* Clopper and Pearson's interval (1934, Biometrika 26:404) by beta quantiles: holds at least its level always, and
 * is wider. */
uf_share uf_clopper_pearson(double hits, double trials, double level);

/* A share over wells that differ more than chance. */
typedef struct uf_wells_share {
    uf_share share;
    double design_effect; /* at least 1 */
    double effective_n;   /* trials / design_effect */
    unsigned notes;
} uf_wells_share;

/*
 * Share of all cells over wells, with the wells as what was sampled (Rao and Scott 1992, Biometrics 48:577): the
 * variance of the ratio sum hits / sum trials between wells, over the binomial one, is the design effect; hits and
 * trials are divided by it and go into Wilson's interval, with Student's quantile of wells - 1 degrees (Korn and
 * Graubard 1998, Surv. Methodol. 24:193). It supposes no distribution of the wells' shares. The interval is never
 * narrower than that of independent cells, and a design effect below 1 is shown as 1: wells do not differ less than
 * chance, they only happen to.
 *
 * Interval NaN below UF_REPLICATES_LEAST wells with cells (UF_NOTE_TOO_FEW). Where all cells are hits, or none,
 * nothing tells how wells differ: the design effect is taken as 1 and UF_NOTE_DISPERSION_UNKNOWN set; the interval is
 * then too narrow if they do.
 */
uf_wells_share uf_share_of_wells(const double *hits, const double *trials, size_t wells, double level);

#endif
