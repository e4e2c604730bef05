/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What unpaired and blocked contrasts share. For use inside src/stats. */
#ifndef UF_STATS_CONTRAST_PARTS_H
#define UF_STATS_CONTRAST_PARTS_H

#include "stats/contrast.h"

/* No values yet: everything NaN. */
uf_contrast uf_contrast_empty(uf_scale scale);

/* Fills estimate and effect, and interval, t and p unless the notes forbid them or nothing scatters. */
void uf_contrast_finish(uf_contrast *c, double estimate, double standard_error, double df, double level);

/* Fills Hedges' g from a t and the standard error's size in standard deviations. */
void uf_contrast_set_g(uf_contrast *c, double t, double df, double unit, double level);

#endif
