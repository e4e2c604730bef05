/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The demo's maker of image pairs with known truth: a physical model from gap topography to camera counts.
 * It knows nothing of the measuring code (layers.txt): not its optics, not its gap, not its outlines.
 */
#ifndef UF_SCENE_SCENE_H
#define UF_SCENE_SCENE_H

#include <stdint.h>

#include "image/plane.h"

typedef struct uf_scene_settings {
    uint64_t seed;
    int width, height;
    double pixel_size_um;
    int cells;                           /* wanted; fewer when they do not fit */
    double radius_min_um, radius_max_um; /* of a cell's equivalent disc */
    double touching;                     /* chance that a cell is put against another */
    double border;                       /* chance that a cell is cut by the image's edge */
    double wavelength_nm, substrate_n, medium_n, angle_deg;
    double base_gap_nm, gap_sd_nm;       /* of the membrane away from contacts */
    double patch_gap_nm, patch_fraction; /* broad contact patches */
    double spot_gap_nm;                  /* focal spots */
    int spots_min, spots_max;            /* per cell */
    double lifted;                       /* share of cells that hardly hold on */
    double near_peak_adu, wide_peak_adu; /* signal at gap 0; of a full membrane */
    double near_background_adu, wide_background_adu, offset_adu;
    double gain_e_per_adu, read_noise_e;
    int layered; /* the field under a cell of cell_n (s polarized), not exp(-gap / depth) */
    double cell_n;
    double scattered_fraction, scattered_depth_nm; /* stray light in the excitation, share at gap 0 */
    double psf_sigma_um;
    double defocus_um;                       /* sigma of more blur in both channels: the stage stood wrong */
    int dust;                                /* specks, every other one dark */
    double haze;                             /* share of widely blurred light added to the wide image */
    double shift_dx_px, shift_dy_px;         /* of the wide image relative to the near image */
    double near_unevenness, wide_unevenness; /* fall of illumination to the corner, relative */
} uf_scene_settings;

typedef struct uf_scene {
    uf_plane near_adu, wide_adu;   /* camera counts, whole numbers in 0 .. 65535 */
    uf_plane near_flat, wide_flat; /* illumination, mean 1 */
    uf_labels labels;              /* true cells */
    uf_plane gap_nm;               /* true gap; NaN outside cells */
    int spots;
    float *spot_x_px, *spot_y_px;
    int32_t *spot_cell;
    double depth_nm;        /* of the evanescent intensity */
    double reference_ratio; /* near / wide at gap 0 after flat fields of mean 1 */
} uf_scene;

/*
 * |E|^2 per unit incident intensity at the cell's side of substrate | medium of thickness gap | cell, s polarized, both
 * evanescent. Tangential fields are continuous: inside the gap the field is that at the cell times cosh(m z) + (c / m)
 * sinh(m z), z up from the cell's side, m and c the decay constants in medium and cell; at the substrate it meets the
 * incident and the reflected wave of normal wave number k, which leaves 4 / (F^2 + (F' / k)^2).
 */
double uf_scene_layered(const uf_scene_settings *settings, double gap_nm);

/* A reasonable bench and a dozen spread cells at 512 x 512. */
uf_scene_settings uf_scene_defaults(void);

/* Makes the scene in memory of `work`'s arena; the same settings give the same bytes. UF_MEMORY. */
UF_MUST_USE uf_status uf_scene_make(uf_work *work, const uf_scene_settings *settings, uf_scene *scene,
                                    uf_error *error);

#endif
