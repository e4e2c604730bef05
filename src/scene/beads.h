/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Images of beads on the substrate, for depth calibration, with known truth. The light is summed over points spread evenly
 * over the spheres, each excited at its own height: no projected density, no radial profile, nothing of what calibrate
 * uses.
 */
#ifndef UF_SCENE_BEADS_H
#define UF_SCENE_BEADS_H

#include <stdint.h>

#include "image/plane.h"

typedef struct uf_bead_scene {
    uint64_t seed;
    int width, height;
    double pixel_size_um;
    int beads;                       /* wanted; fewer when they do not fit */
    double radius_um, radius_spread; /* the latter relative, 1 sigma, from bead to bead */
    int immersed;                    /* dye in the medium around clear beads, not on their surface */
    double depth_nm, scattered_fraction, scattered_depth_nm; /* of the excitation, share at height 0 */
    double psf_sigma_um;
    double peak_adu;     /* signal of a flat dyed membrane (or of deep dyed medium) at height 0 */
    double label_spread; /* of the dye's density, relative, 1 sigma, from bead to bead */
    double floating;     /* share of beads that lie higher */
    double floating_nm;  /* by this */
    double background_adu, offset_adu, full_scale_adu, gain_e_per_adu, read_noise_e;
} uf_bead_scene;

enum { UF_BEAD_SCENE_LIMIT = 400 };

typedef struct uf_bead_truth {
    int count;
    double x_px[UF_BEAD_SCENE_LIMIT], y_px[UF_BEAD_SCENE_LIMIT];
    int floats[UF_BEAD_SCENE_LIMIT];
} uf_bead_truth;

/* Camera counts into a plane of the arena. UF_MEMORY. */
UF_MUST_USE uf_status uf_scene_beads(uf_work *work, const uf_bead_scene *scene, uf_plane *counts,
                                     uf_bead_truth *truth, uf_error *error);

#endif
