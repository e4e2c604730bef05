/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Axes of a plot in numbers: ranges that end on round values, ticks, labels. */
#ifndef UF_REPORT_PLOT_SCALE_H
#define UF_REPORT_PLOT_SCALE_H

#include "base/text.h"
#include "report/plot.h"

enum { PLOT_TICKS = 64 };

typedef struct plot_tick {
    double at;
    int labelled;
    char label[UF_NUMBER_TEXT];
} plot_tick;

/* Range of an axis: what it asks for, the rest from the data (`least`, `most`; NaN when there are none) widened to
 * whole steps; never empty. At most `pieces` steps. */
void plot_range(const uf_plot_axis *axis, double least, double most, int pieces, double *from, double *to);

/* Ticks within from .. to; returns how many, at most PLOT_TICKS. Decades with 2 .. 9 between them when `log10`; less
 * than two decades get labels at 2 and 5 too. */
int plot_ticks(double from, double to, int log10, int pieces, plot_tick *ticks);

#endif
