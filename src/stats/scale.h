/* SPDX-License-Identifier: GPL-3.0-or-later */
/* To the scale that is compared (logarithms for ratios) and back. For use inside src/stats. */
#ifndef UF_STATS_SCALE_H
#define UF_STATS_SCALE_H

#include <math.h>

#include "stats/notes.h"

/* NaN where a ratio is asked of what has no logarithm. */
static inline double uf_to_scale(uf_scale scale, double value)
{
    if (scale == UF_SCALE_DIFFERENCE)
        return value;
    return value > 0 ? log(value) : (double)NAN;
}

static inline double uf_from_scale(uf_scale scale, double estimate)
{
    return scale == UF_SCALE_DIFFERENCE ? estimate : exp(estimate);
}

#endif
