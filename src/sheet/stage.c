/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/stage.h"

#include <math.h>

double uf_well_pitch_um(uf_vessel vessel)
{
    return vessel.wells == 96 ? 9000 : vessel.wells == 384 ? 4500 : vessel.wells == 1536 ? 2250 : (double)NAN;
}

/* The well of a point when the axes run as signs say; row -1 for none. */
static uf_well well_at(const uf_stage_point *p, double a1_x_um, double a1_y_um, int sign_x, int sign_y,
                       uf_vessel vessel)
{
    const double farthest = 0.4;
    double pitch = uf_well_pitch_um(vessel);
    double column = sign_x * (p->x_um - a1_x_um) / pitch, row = sign_y * (p->y_um - a1_y_um) / pitch;
    const uf_well none = {-1, -1};
    if (!(fabs(column - round(column)) <= farthest) || !(fabs(row - round(row)) <= farthest))
        return none;
    if (!(row > -0.5 && row < vessel.rows - 0.5 && column > -0.5 && column < vessel.columns - 0.5))
        return none;
    return (uf_well){(int)round(row), (int)round(column)};
}

/* How many points fit, from the first on, before one does not. */
static int fitting(const uf_stage_point *points, int count, double x, double y, int way, uf_vessel vessel)
{
    int k = 0;
    while (k < count && well_at(&points[k], x, y, way & 1 ? -1 : 1, way & 2 ? -1 : 1, vessel).row >= 0)
        k++;
    return k;
}

uf_status uf_stage_find(uf_stage_point *points, int count, double a1_x_um, double a1_y_um, uf_vessel vessel,
                        uf_error *error)
{
    int good = 0, way = 0, most = 0;
    if (isnan(uf_well_pitch_um(vessel)))
        return uf_fail(
            error, UF_USAGE,
            "coordinates are turned into wells on plates of 96, 384 and 1536 wells, whose distances are standard; "
            "give the wells themselves in a column well");
    for (int k = 0; k < 4; k++) {
        int fit = fitting(points, count, a1_x_um, a1_y_um, k, vessel);
        good += fit == count;
        way = fit == count ? k : way;
        most = fit > most ? fit : most;
    }
    if (good == 0)
        return uf_fail(error, UF_INPUT,
                       "position %d, at x %.1f um and y %.1f um, is in no well, whichever way the axes run from A1 "
                       "at %.1f, %.1f; "
                       "check --a1 and --vessel",
                       most + 1, points[most].x_um, points[most].y_um, a1_x_um, a1_y_um);
    if (good > 1)
        return uf_fail(
            error, UF_INPUT,
            "the positions fit the plate whichever way the stage counts; give the wells themselves in a column well");
    for (int k = 0; k < count; k++)
        points[k].well = well_at(&points[k], a1_x_um, a1_y_um, way & 1 ? -1 : 1, way & 2 ? -1 : 1, vessel);
    return UF_OK;
}
