/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Plots: panels side by side, each with two axes, lines, marks, bands, and a legend below. No series is told from
 * another by colour alone: line patterns and marks differ too, and the inks differ in lightness, so that a grey
 * print and colour-blind eyes can follow.
 */
#ifndef UF_REPORT_PLOT_H
#define UF_REPORT_PLOT_H

#include "image/indexed.h"
#include "image/plane.h"

typedef enum uf_plot_ink { UF_PLOT_DARK, UF_PLOT_BLUE, UF_PLOT_AMBER, UF_PLOT_PINE, UF_PLOT_INKS } uf_plot_ink;
typedef enum uf_plot_line { UF_LINE_NONE, UF_LINE_SOLID, UF_LINE_DASHED, UF_LINE_DOTTED } uf_plot_line;
typedef enum uf_plot_mark {
    UF_MARK_NONE,
    UF_MARK_DISC,
    UF_MARK_RING,
    UF_MARK_SQUARE,
    UF_MARK_DIAMOND,
    UF_MARK_TRIANGLE,
    UF_MARK_AROUND /* a wide ring around another mark */
} uf_plot_mark;
typedef enum uf_plot_spread { UF_SPREAD_NONE, UF_SPREAD_BARS, UF_SPREAD_BAND } uf_plot_spread;

/* Points in order; NaN breaks the line. */
typedef struct uf_plot_series {
    const char *name; /* for the legend, NULL: not in it */
    int count;
    const double *x, *y;
    const double *low, *high; /* of the spread */
    uf_plot_ink ink;
    uf_plot_line line;
    uf_plot_mark mark;
    uf_plot_spread spread;
} uf_plot_series;

typedef struct uf_plot_axis {
    const char *title; /* with its unit */
    double from, to;   /* NaN: from the data, with a margin, to round numbers */
    int log10;
} uf_plot_axis;

/* A line across the panel at a value of x, its label along it. */
typedef struct uf_plot_rule {
    double x;
    const char *label;
} uf_plot_rule;

/* A shaded range of x, its label in it. */
typedef struct uf_plot_zone {
    double from, to;
    const char *label;
} uf_plot_zone;

typedef struct uf_plot_panel {
    const char *title;
    uf_plot_axis x, y;
    const uf_plot_series *series;
    int series_count;
    const uf_plot_rule *rules;
    int rule_count;
    const uf_plot_zone *zones;
    int zone_count;
} uf_plot_panel;

enum { UF_PLOT_PANELS = 6 };

/* Where a panel's plotting area lies in the picture, and what its borders stand for. */
typedef struct uf_plot_frame {
    uf_box box;
    double x_from, x_to, y_from, y_to;
    int x_log10, y_log10;
} uf_plot_frame;

/* Pixel (not rounded) of a value. */
double uf_plot_x(const uf_plot_frame *frame, double x);
double uf_plot_y(const uf_plot_frame *frame, double y);

/* The step of 1, 2 or 5 times a power of ten that cuts `range` (above 0) into at most `most` pieces. */
double uf_plot_step(double range, int most);

/* Draws into a picture whose data is taken from `work`'s arena: `width` x `height` pixels, 1 to UF_PLOT_PANELS panels.
 * `frames` (one a panel) may be NULL. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_plot_draw(uf_work *work, const uf_plot_panel *panels, int count, int width, int height,
                                   uf_indexed *picture, uf_plot_frame *frames, uf_error *error);

/* The same in rows of `columns` panels, `height` pixels high in all. */
UF_MUST_USE uf_status uf_plot_rows(uf_work *work, const uf_plot_panel *panels, int count, int columns, int width,
                                   int height, uf_indexed *picture, uf_plot_frame *frames, uf_error *error);

#endif
