/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From settings to the numbers of a run. */
#ifndef UF_RUN_PLAN_H
#define UF_RUN_PLAN_H

#include "optics/plan.h"
#include "settings/settings.h"

/* The optics of an instrument file, checked: UF_INPUT when the set-up is not totally reflected, names what to
 * change. Needs wavelength, substrate_n, medium_n and an angle. */
UF_MUST_USE uf_status uf_bench_make(const uf_settings *settings, uf_bench *bench, uf_error *error);

/* The same without an angle: na_effective is NaN, total reflection not checked. */
UF_MUST_USE uf_status uf_bench_without_angle(const uf_settings *settings, uf_bench *bench, uf_error *error);

/* Sigma of the near image's point spread function, taken to be a Gaussian: 0.21 emission wavelength / NA. */
double uf_psf_sigma_um(const uf_settings *settings);

/* What a reference ratio is multiplied by when this run's exposures differ from the reference's: counts go with exposure.
 * 1 where either is not told. */
double uf_exposure_factor(const uf_settings *settings);

/* All of the plan. `image_pixel_um` is what the image file says (NaN: nothing); the instrument file wins. */
UF_MUST_USE uf_status uf_plan_make(const uf_settings *settings, double image_pixel_um, uf_plan *plan,
                                   uf_error *error);

#endif
