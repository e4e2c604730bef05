/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What a bead on the substrate looks like: intensity against distance from its centre, through a blur.
 *
 * A sphere of radius R that touches the substrate is h(r) = R - sqrt(R^2 - r^2) high above it at distance r (paraxially
 * r^2 / 2R), its upper side 2R - h(r). Excitation falls as a sum of exponentials; each gives, for a depth d,
 *
 *   dye on the surface:   R / sqrt(R^2 - r^2) (exp(-h/d) + exp(-(2R - h)/d))       for r < R, else 0
 *   dye in the medium:    d (1 - exp(-h/d) + exp(-(2R - h)/d)) / 1 nm               for r < R, else d / 1 nm
 *
 * where R / sqrt(R^2 - r^2) is the area of sphere above a unit of substrate (Mattheyses and Axelrod 2006, J. Biomed. Opt.
 * 11:014006; reviewed by Oheim et al. 2019, Biophys. J. 117:795; volume and page from memory). The blur is a Gaussian: the
 * point spread function and the pixel's own width (variance 1/12). The upper side is taken to be as sharp as the lower; it
 * is seen through stray light only. In polar coordinates with r = R sin t the pole at r = R is gone, and the blur of
 * something round is
 *
 *   g(r) = integral f(q) q / b^2 exp(-(r - q)^2 / 2 b^2) I0e(r q / b^2) dq
 */
#ifndef UF_CALIBRATE_BEAD_PROFILE_H
#define UF_CALIBRATE_BEAD_PROFILE_H

#include "base/status.h"

typedef enum uf_bead_dye { UF_DYE_SURFACE, UF_DYE_IMMERSED } uf_bead_dye;

/* Tables against distance 0, step_um, 2 step_um ... for beads of one size, dye and blur. Zeroed it is empty. */
typedef struct uf_bead_profile {
    uf_bead_dye dye;
    double radius_um, step_um;
    int rows, nodes;
    double *node_um;    /* distance of each node from the axis, ascending */
    double *measure;    /* q dq of each */
    double *weight;     /* of the nodes that row k sees, from place[k] on */
    int *first, *count; /* those nodes */
    long *place;
    double *values; /* room for the nodes */
} uf_bead_profile;

/* Height above the substrate of the lower side, nm; NaN beyond the radius. */
double uf_bead_height_nm(double radius_um, double r_um);

/* For distances up to farthest_um. blur_um above 0, at most a third of the radius. UF_MEMORY. */
UF_MUST_USE uf_status uf_bead_profile_init(uf_bead_profile *profile, uf_bead_dye dye, double radius_um,
                                           double blur_um, double farthest_um, uf_error *error);
void uf_bead_profile_free(uf_bead_profile *profile);

/* The profile of one exponential into table[0 .. rows - 1]. */
void uf_bead_profile_of(const uf_bead_profile *profile, double depth_nm, double *table);

/* Between the table's rows, straight. 0 <= r_um <= farthest_um. */
double uf_bead_profile_at(const uf_bead_profile *profile, const double *table, double r_um);

#endif
