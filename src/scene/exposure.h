/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The bench around the light: lamps that shine unevenly, and a camera that counts. */
#ifndef UF_SCENE_EXPOSURE_H
#define UF_SCENE_EXPOSURE_H

#include "image/plane.h"
#include "scene/random.h"

typedef struct uf_scene_camera {
    double offset_adu, gain_e_per_adu, read_noise_e;
} uf_scene_camera;

/* Fills `flat` with illumination of mean 1 that falls as a parabola about a point off centre by
 * (right, down), in shares of the width and height. `fall` is the relative drop over the distance from the
 * image's centre to its corner; 0 is even. It depends on nothing random: one bench, one flat. */
void uf_scene_illuminate(uf_plane flat, double fall, double right, double down);

/*
 * Turns light (expected ADU above the offset, background included; below 0 counts as 0) into what a camera
 * writes, in place: Poisson electrons, Gaussian read noise, gain, offset, whole counts in 0 .. 65535. Away
 * from both ends the variance is (mean - offset) / gain + (read_noise / gain)^2 + 1/12 ADU^2, the photon
 * transfer relation (Janesick 2007, Photon Transfer, SPIE Press) with the rounding added.
 */
void uf_scene_expose(uf_plane light_adu, const uf_scene_camera *camera, uf_random *random);

#endif
