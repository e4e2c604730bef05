/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the parts of the photon transfer fit hand on. */
#ifndef UF_CALIBRATE_PHOTON_PARTS_H
#define UF_CALIBRATE_PHOTON_PARTS_H

#include "calibrate/camera_parts.h"

typedef struct uf_photon_fitting {
    const uf_dark *dark;
    const uf_photon_point *points;
    int count;
    int order[UF_PHOTON_POINTS_MOST]; /* by signal, upwards */
    uf_point_fit *fits;
    double top_signal, top_mean; /* of the point of the largest variance, when others lie past it; else NaN */
    double scale;                /* largest signal used: regressors are of order one */
    double foot_adu2;            /* variance where there is no light */
} uf_photon_fitting;

/* Sorts the points, says of each whether it is used, finds the top and the scale. UF_INPUT when no slope is
 * determined. */
UF_MUST_USE uf_status uf_photon_choose_points(uf_photon_fitting *f, uf_error *error);

/* Least and largest signal of the points in use; returns how many there are. */
int uf_photon_range_used(const uf_photon_fitting *f, double *least, double *most);

/* The lowest count at which any point saturates; NaN when none does. */
double uf_photon_lowest_saturation(const uf_photon_fitting *f);

/* Rate, linear range, and each point's departure from the straight line of signal against exposure; the
 * departures from the variance line are known by then. */
void uf_photon_find_linear_range(uf_photon_fitting *f, uf_photon_transfer *t);

#endif
