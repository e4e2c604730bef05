/* SPDX-License-Identifier: GPL-3.0-or-later */
/* An interval that supposes no distribution: replicates are drawn again, then wells within them. */
#ifndef UF_STATS_BOOTSTRAP_H
#define UF_STATS_BOOTSTRAP_H

#include <stddef.h>
#include <stdint.h>

#include "base/status.h"
#include "stats/notes.h"

/* Percentiles of fewer replicates than this hold far less than their level. */
enum { UF_BOOTSTRAP_LEAST = 10 };

/* One well's value (mean over its cells); replicates of an arm are numbered from 0. */
typedef struct uf_boot_well {
    double value;
    int replicate;
} uf_boot_well;

typedef struct uf_boot_arm {
    const uf_boot_well *wells;
    size_t count;
    int replicates;
} uf_boot_arm;

typedef struct uf_bootstrap {
    double effect, low, high; /* difference, or ratio of geometric means of replicate values */
    int draws;                /* that had a value */
    unsigned notes;
} uf_bootstrap;

/*
 * Percentile interval of the effect by a cluster bootstrap (Davison and Hinkley 1997, Bootstrap Methods and their
 * Application, 3.8 and 5.3.1): each draw takes as many replicates as there are, with replacement, in each of them as
 * many wells, and forms replicate values as unweighted means of wells. `paired`: replicates are blocks of the same
 * number in both arms and drawn once for both; blocks that lack an arm are left out. The same seed gives the same
 * interval on every machine.
 *
 * Interval NaN below UF_BOOTSTRAP_LEAST replicates in an arm, or blocks (UF_NOTE_TOO_FEW). Drawing at both levels
 * counts the spread of wells once more than it was there: intervals are a little wide where wells, not replicates,
 * make the scatter. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_bootstrap_effect(uf_boot_arm treated, uf_boot_arm control, int paired, uf_scale scale,
                                          double level, int draws, uint64_t seed, uf_bootstrap *result,
                                          uf_error *error);

#endif
