/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From camera counts to a corrected channel: offset or dark, flat, bad pixels, saturation, background, noise. */
#ifndef UF_CORRECT_CORRECT_H
#define UF_CORRECT_CORRECT_H

#include "image/channel.h"
#include "settings/settings.h"

/* One channel's raw counts and what corrects them; planes whose data is NULL are not there, the others are
 * of the raw image's size. */
typedef struct uf_raw_channel {
    uf_plane counts;
    uf_plane dark;     /* counts in the dark; else camera->offset_adu */
    uf_plane flat;     /* illumination, any scale */
    uf_plane defects;  /* not 0: bad pixel */
    uf_mask saturated; /* room for where the camera was at full scale */
    double full_scale_adu;
    const uf_camera_settings *camera;
    const char *name; /* "near" or "wide", for messages */
} uf_raw_channel;

/*
 * image = (counts - dark) * mean(flat) / flat. Pixels that the defect map names, and isolated ones far above
 * all eight neighbours (no point spread function is that narrow), take the median of their good neighbours.
 * counts is overwritten and becomes channel->image; saturated becomes channel->saturated. UF_INPUT for a flat with
 * values not above 0, or a map that leaves no good pixel somewhere; UF_MEMORY.
 */
UF_MUST_USE uf_status uf_correct_channel(uf_work *work, const uf_raw_channel *raw, uf_channel *channel,
                                         uf_error *error);

/*
 * A first background: the mode of the pixel values (of a lattice of them), since empty substrate is the narrowest peak
 * of the histogram even in crowded fields: the narrowest twentieth of the sample, and its half-sample mode. Sets background_adu, its sd,
 * noise_adu, and the noise model where the camera keys do not give it (correct/noise.h, else from the spread at the
 * background, taken to be shot noise).
 */
UF_MUST_USE uf_status uf_background_first(uf_work *work, uf_channel *channel, uf_error *error);

/* The background once cells are known: the median of pixels at least `clear_px` away from all cells, or of
 * the farthest hundredth of the field where there are fewer. Keeps the first estimate when the field has no
 * pixel outside cells. */
UF_MUST_USE uf_status uf_background_refine(uf_work *work, const uf_cell_map *cells, double clear_px,
                                           uf_channel *channel, uf_error *error);

#endif
