/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The plot of `optics`: depth against angle, and the decay curves of the set-up. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "run/optics_numbers.h"
#include "run/report_parts.h"

enum { POINTS = 241, WIDTH = 1160, HEIGHT = 560 };
static const double farthest_nm = 300, deepest_nm = 400;

typedef struct curves {
    double angle_deg[POINTS], depth_nm[POINTS], depth_with_cell_n_nm[POINTS];
    double gap_nm[POINTS], exponential[POINTS], layered[POINTS], third[POINTS];
} curves;

static double last_angle(const uf_optics_numbers *n)
{
    double last = isnan(n->objective_limit_deg) ? 86 : n->objective_limit_deg + 3;
    return fmin(90, ceil(fmax(last, n->angle_deg + 2)));
}

static void fill_depths(const uf_optics_numbers *n, curves *c)
{
    const uf_bench *b = &n->bench;
    double first = floor(n->critical_medium_deg) - 1, step = (last_angle(n) - first) / (POINTS - 1);
    for (int k = 0; k < POINTS; k++) {
        c->angle_deg[k] = first + k * step;
        double na = uf_na_from_angle(c->angle_deg[k], b->substrate_n);
        c->depth_nm[k] = uf_depth_nm(b->wavelength_nm, na, b->medium_n);
        c->depth_with_cell_n_nm[k] = uf_depth_nm(b->wavelength_nm, na, b->cell_n);
    }
}

static void fill_decays(const uf_optics_numbers *n, curves *c)
{
    uf_decay_law exponential = {.model = UF_FIELD_EXPONENTIAL}, layered = {.model = UF_FIELD_LAYERED}, third = n->law;
    if (n->law.model != UF_FIELD_TABLE && !(n->law.stray.fraction > 0))
        third.stray = uf_usual_stray;
    for (int k = 0; k < POINTS; k++) {
        double gap = farthest_nm * k / (POINTS - 1);
        c->gap_nm[k] = gap;
        c->exponential[k] = uf_relative_excitation(&n->bench, &exponential, gap);
        c->layered[k] = uf_relative_excitation(&n->bench, &layered, gap);
        c->third[k] = uf_relative_excitation(&n->bench, &third, gap);
    }
}

static void name_third(const uf_optics_numbers *n, char *name, size_t size)
{
    int in_force = n->law.stray.fraction > 0;
    if (n->law.model == UF_FIELD_TABLE)
        (void)snprintf(name, size, "in force (measured table)");
    else
        (void)snprintf(name, size, "%s %.3g %% stray light", in_force ? "in force, with" : "with, say,",
                       100 * (in_force ? n->law.stray.fraction : uf_usual_stray.fraction));
}

static uf_status draw(const uf_optics_numbers *n, const curves *c, const char *path, uf_error *error)
{
    char third[64], cutoff[64], cell[64];
    double low = n->depth_nm - n->depth_sd_nm, high = n->depth_nm + n->depth_sd_nm, none = (double)NAN;
    name_third(n, third, sizeof third);
    (void)snprintf(cutoff, sizeof cutoff, "contact cutoff %.4g nm", n->cutoff_nm);
    (void)snprintf(cell, sizeof cell, "critical against the cell, %.1f\u00b0", n->critical_cell_deg);
    const uf_plot_series depths[] = {{"with medium in the gap", POINTS, c->angle_deg, c->depth_nm, NULL, NULL,
                                      UF_PLOT_DARK, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE},
                                     {"with the cell's index (a slip)", POINTS, c->angle_deg, c->depth_with_cell_n_nm,
                                      NULL, NULL, UF_PLOT_AMBER, UF_LINE_DASHED, UF_MARK_NONE, UF_SPREAD_NONE},
                                     {"this set-up, 1 sd", 1, &n->angle_deg, &n->depth_nm, &low, &high, UF_PLOT_BLUE,
                                      UF_LINE_NONE, UF_MARK_DISC, UF_SPREAD_BARS}};
    const uf_plot_zone zones[] = {{0, n->critical_medium_deg, "no total reflection"},
                                  {n->objective_limit_deg, 90, "beyond the objective"}};
    const uf_plot_rule rules[] = {{n->critical_cell_deg, cell}}, at_cutoff[] = {{n->cutoff_nm, cutoff}};
    const uf_plot_series decays[] = {
        {"exponential", POINTS, c->gap_nm, c->exponential, NULL, NULL, UF_PLOT_DARK, UF_LINE_SOLID, UF_MARK_NONE,
         UF_SPREAD_NONE},
        {"layered", POINTS, c->gap_nm, c->layered, NULL, NULL, UF_PLOT_AMBER, UF_LINE_DASHED, UF_MARK_NONE,
         UF_SPREAD_NONE},
        {third, POINTS, c->gap_nm, c->third, NULL, NULL, UF_PLOT_BLUE, UF_LINE_DOTTED, UF_MARK_NONE, UF_SPREAD_NONE}};
    const uf_plot_panel panels[] = {
        {"Depth of the evanescent field",
         {"angle of incidence in the substrate (\u00b0)", c->angle_deg[0], c->angle_deg[POINTS - 1], 0},
         {"1/e depth of the intensity (nm)", 0, deepest_nm, 0},
         depths,
         3,
         rules,
         !isnan(n->critical_cell_deg),
         zones,
         1 + !isnan(n->objective_limit_deg)},
        {"Decay of the excitation",
         {"gap (nm)", 0, farthest_nm, 0},
         {"excitation relative to gap 0", 0, none, 0},
         decays,
         3,
         at_cutoff,
         n->cutoff_nm < farthest_nm,
         NULL,
         0}};
    return uf_plot_file(panels, 2, WIDTH, HEIGHT, path, error);
}

uf_status uf_optics_plot(const uf_optics_numbers *numbers, const char *path, uf_error *error)
{
    curves *c = malloc(sizeof *c);
    if (!c)
        return uf_fail_memory(error, "a plot");
    fill_depths(numbers, c);
    fill_decays(numbers, c);
    uf_status status = draw(numbers, c, path, error);
    free(c);
    return status;
}
