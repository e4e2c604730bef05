/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tests by ranks, which suppose no normal distribution, and the shifts that belong to them. */
#ifndef UF_STATS_RANKS_H
#define UF_STATS_RANKS_H

#include <stddef.h>

#include "base/status.h"
#include "stats/contrast.h"

enum {
    UF_RANKS_LEAST = 4,       /* values an arm, or pairs, for a p: three against three can never reach 5 % */
    UF_RANKS_EXACT_MOST = 100 /* values in both arms together, or pairs, up to which permutations are counted */
};

/*
 * The shift is a difference in the values' unit, or a ratio; NaN only without values. p is NaN below the count the
 * caller asks for (UF_NOTE_TOO_FEW), and when all values are alike (UF_NOTE_NO_SPREAD).
 */
typedef struct uf_rank_test {
    size_t n_treated, n_control; /* pairs in both for signed ranks, pairs without difference included */
    double statistic;            /* Mann and Whitney's U of the treated, or Wilcoxon's sum of positive ranks */
    double expected, sd;         /* of the statistic when nothing differs, ties taken into account */
    double p, p_above, p_below;  /* two-sided; the treated larger; smaller */
    int exact;                   /* counted; 0: normal, with continuity and ties corrected (UF_NOTE_NORMAL) */
    double shift, shift_low, shift_high;
    double coverage; /* what the interval really holds: at least the level asked for; NaN unless counted */
    unsigned notes;
} uf_rank_test;

/*
 * Mann and Whitney's test (1947, Ann. Math. Stat. 18:50). Ties share their mean rank, and the exact p counts the
 * permutations of those midranks (Lehmann 1975, Nonparametrics, 1.4): two-sided all whose rank sum lies at least as
 * far from its expectation. The shift is Hodges and Lehmann's (1963, Ann. Math. Stat. 34:598), the median of all
 * differences treated - control, or of ratios; its interval takes the differences at the ends that U without ties
 * allows (Hollander and Wolfe 1973, 4.3), which holds at least its level with ties too. Below `least` in an arm
 * (UF_RANKS_LEAST as a rule) p and interval are NaN. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_mann_whitney(uf_arm treated, uf_arm control, uf_scale scale, double level, size_t least,
                                      uf_rank_test *test, uf_error *error);

/*
 * Wilcoxon's signed ranks (1945, Biometrics Bull. 1:80) of pairs: `treated` and `control` hold one value a block, NaN
 * where there is none. Pairs without difference leave the test (Wilcoxon) but not the shift; ties share their mean
 * rank, and all 2^n changes of sign are counted. The shift is the median of all means of two differences, one with
 * itself included (Hodges and Lehmann 1963), with the interval that belongs to it (Hollander and Wolfe 1973, 3.3).
 * UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_signed_rank(const double *treated, const double *control, size_t pairs, uf_scale scale,
                                     double level, size_t least, uf_rank_test *test, uf_error *error);

#endif
