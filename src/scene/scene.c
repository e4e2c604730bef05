/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From cells to camera counts: labels -> gap -> dye -> light of both channels -> blur, uneven light, shift -> counts. */
#include "scene/scene.h"

#include <math.h>

#include "scene/cell_layout.h"
#include "scene/exposure.h"
#include "scene/lattice_noise.h"
#include "scene/psf.h"
#include "scene/topography.h"

/* The dorsal membrane is out of focus: its share of the wide light and its blur (common practice, no source). */
static const double dorsal_share = 0.45, dorsal_sigma_um = 0.5;
static const double haze_sigma_um = 2.5;
static const double dye_unevenness = 0.08, dye_spread = 0.25;

uf_scene_settings uf_scene_defaults(void)
{
    return (uf_scene_settings){.seed = 1,
                               .width = 512,
                               .height = 512,
                               .pixel_size_um = 0.11,
                               .cells = 9,
                               .radius_min_um = 5,
                               .radius_max_um = 8,
                               .touching = 0.2,
                               .wavelength_nm = 488,
                               .substrate_n = 1.518,
                               .medium_n = 1.337,
                               .angle_deg = 70,
                               .base_gap_nm = 95,
                               .gap_sd_nm = 20,
                               .patch_gap_nm = 32,
                               .patch_fraction = 0.35,
                               .spot_gap_nm = 12,
                               .spots_min = 8,
                               .spots_max = 24,
                               .near_peak_adu = 9000,
                               .wide_peak_adu = 6000,
                               .near_background_adu = 250,
                               .wide_background_adu = 500,
                               .offset_adu = 100,
                               .gain_e_per_adu = 2.17,
                               .read_noise_e = 1.6,
                               .cell_n = 1.37,
                               .scattered_depth_nm = 1200,
                               .psf_sigma_um = 0.115,
                               .near_unevenness = 0.12,
                               .wide_unevenness = 0.18};
}

/* 1/e depth of the evanescent intensity: wavelength over 4 pi times the root of (n sin angle)^2 - n_medium^2. */
static double evanescent_depth_nm(const uf_scene_settings *s)
{
    double sine = sin(s->angle_deg * 3.14159265358979323846 / 180);
    double along = s->substrate_n * sine;
    return s->wavelength_nm / (4 * 3.14159265358979323846 * sqrt(along * along - s->medium_n * s->medium_n));
}

/* Decay constants of the field amplitude, per nm, in a medium of index n. */
static double field_decay(const uf_scene_settings *s, double n)
{
    double along = s->substrate_n * sin(s->angle_deg * 3.14159265358979323846 / 180);
    return 2 * 3.14159265358979323846 / s->wavelength_nm * sqrt(along * along - n * n);
}

double uf_scene_layered(const uf_scene_settings *s, double gap_nm)
{
    double cosine = cos(s->angle_deg * 3.14159265358979323846 / 180);
    double across = 2 * 3.14159265358979323846 / s->wavelength_nm * s->substrate_n * cosine;
    double medium = field_decay(s, s->medium_n), cell = field_decay(s, s->cell_n);
    double even = cosh(medium * gap_nm), odd = sinh(medium * gap_nm);
    double field = even + cell / medium * odd, slope = medium * odd + cell * even;
    return 4 / (field * field + slope * slope / (across * across));
}

/* ---- dye ------------------------------------------------------------------------------------- */

static uf_status make_dye(uf_work *work, const uf_scene_settings *s, uf_labels labels, uf_plane dye, uf_error *error)
{
    uf_random random;
    double *amount;
    uf_random_start(&random, s->seed, UF_STREAM_DYE);
    uf_status status = uf_lattice_noise(work, &random, 3.6 / s->pixel_size_um, dye, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)labels.count + 1, sizeof *amount, "dye", &amount, error);
    if (status != UF_OK)
        return status;
    amount[0] = 0;
    for (int k = 1; k <= labels.count; k++)
        amount[k] = exp(dye_spread * uf_random_normal(&random));
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            float *at = &uf_plane_row(dye, y)[x];
            *at = (float)(exp(dye_unevenness * (double)*at) * amount[uf_labels_row(labels, y)[x]]);
        }
    return UF_OK;
}

/* ---- light ----------------------------------------------------------------------------------- */

/* Blur of what is in focus. */
static double focus_sigma_um(const uf_scene_settings *s)
{
    return hypot(s->psf_sigma_um, s->defocus_um);
}

static void near_light(const uf_scene_settings *s, double depth_nm, uf_plane dye, uf_plane gap_nm, uf_plane out)
{
    double at_contact = s->layered ? uf_scene_layered(s, 0) : 1;
    for (int y = 0; y < out.height; y++)
        for (int x = 0; x < out.width; x++) {
            double gap = (double)uf_plane_row(gap_nm, y)[x], light = 0;
            if (!isnan(gap)) {
                double field = s->layered ? uf_scene_layered(s, gap) / at_contact : exp(-gap / depth_nm);
                double scattered = s->scattered_fraction > 0 ? exp(-gap / s->scattered_depth_nm) : 0;
                light = (1 - s->scattered_fraction) * field + s->scattered_fraction * scattered;
            }
            uf_plane_row(out, y)[x] = (float)(s->near_peak_adu * (double)uf_plane_row(dye, y)[x] * light);
        }
}

static void add_scaled(uf_plane out, uf_plane other, double share)
{
    for (int y = 0; y < out.height; y++)
        for (int x = 0; x < out.width; x++)
            uf_plane_row(out, y)[x] += (float)(share * (double)uf_plane_row(other, y)[x]);
}

static void scale(uf_plane plane, double factor)
{
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            uf_plane_row(plane, y)[x] = (float)(factor * (double)uf_plane_row(plane, y)[x]);
}

/* Ventral membrane in focus, dorsal membrane out of it, haze far out of it; moved by the shift. */
static uf_status wide_light(uf_work *work, const uf_scene_settings *s, uf_plane dye, uf_plane out, uf_error *error)
{
    double px = s->pixel_size_um, dx = s->shift_dx_px, dy = s->shift_dy_px;
    uf_plane blurred;
    uf_status status = uf_plane_take(work, out.width, out.height, &blurred, error);
    if (status == UF_OK)
        status = uf_psf_blur(work, dye, focus_sigma_um(s) / px, dx, dy, out, error);
    if (status == UF_OK)
        status = uf_psf_blur(work, dye, hypot(dorsal_sigma_um, s->defocus_um) / px, dx, dy, blurred, error);
    if (status != UF_OK)
        return status;
    scale(out, 1 - dorsal_share);
    add_scaled(out, blurred, dorsal_share);
    if (s->haze > 0) {
        status = uf_psf_blur(work, dye, haze_sigma_um / px, dx, dy, blurred, error);
        if (status == UF_OK)
            add_scaled(out, blurred, s->haze);
    }
    scale(out, s->wide_peak_adu);
    return status;
}

/* One speck, far out of focus: a soft disc that shines in both channels, or takes light from both. */
static void add_speck(const uf_scene_settings *s, uf_scene *scene, uf_random *random, int dark)
{
    double radius = uf_random_between(random, 1.2, 3.5) / s->pixel_size_um;
    double x0 = uf_random_between(random, 0, s->width), y0 = uf_random_between(random, 0, s->height);
    double strength = dark ? uf_random_between(random, 0.3, 0.7) : uf_random_between(random, 0.4, 2.0);
    int reach = (int)(2 * radius) + 1;
    for (int y = (int)fmax(0, y0 - reach); y < fmin(s->height, y0 + reach); y++)
        for (int x = (int)fmax(0, x0 - reach); x < fmin(s->width, x0 + reach); x++) {
            double disc = strength / (1 + exp((hypot(x - x0, y - y0) - radius) / (0.12 * radius)));
            float *near = &uf_plane_row(scene->near_adu, y)[x], *wide = &uf_plane_row(scene->wide_adu, y)[x];
            *near = (float)(dark ? (double)*near * (1 - disc) : (double)*near + 0.05 * disc * s->near_peak_adu);
            *wide = (float)(dark ? (double)*wide * (1 - disc) : (double)*wide + disc * s->wide_peak_adu);
        }
}

static void add_dust(const uf_scene_settings *s, uf_scene *scene)
{
    uf_random random;
    uf_random_start(&random, s->seed, UF_STREAM_DUST);
    for (int k = 0; k < s->dust; k++)
        add_speck(s, scene, &random, k % 2);
}

/* Background, uneven light, camera. */
static void expose(const uf_scene_settings *s, uf_plane light, uf_plane flat, double background_adu,
                   uf_scene_stream stream)
{
    uf_random random;
    uf_scene_camera camera = {s->offset_adu, s->gain_e_per_adu, s->read_noise_e};
    for (int y = 0; y < light.height; y++)
        for (int x = 0; x < light.width; x++) {
            float *at = &uf_plane_row(light, y)[x];
            *at = (*at + (float)background_adu) * uf_plane_row(flat, y)[x];
        }
    uf_random_start(&random, s->seed, stream);
    uf_scene_expose(light, &camera, &random);
}

static uf_status make_images(uf_work *work, const uf_scene_settings *s, uf_scene *scene, uf_error *error)
{
    uf_plane dye;
    uf_status status = uf_plane_take(work, s->width, s->height, &dye, error);
    if (status == UF_OK)
        status = make_dye(work, s, scene->labels, dye, error);
    if (status != UF_OK)
        return status;
    near_light(s, scene->depth_nm, dye, scene->gap_nm, scene->near_adu);
    status = uf_psf_blur(work, scene->near_adu, focus_sigma_um(s) / s->pixel_size_um, 0, 0, scene->near_adu, error);
    if (status == UF_OK)
        status = wide_light(work, s, dye, scene->wide_adu, error);
    if (status != UF_OK)
        return status;
    add_dust(s, scene);
    uf_scene_illuminate(scene->near_flat, s->near_unevenness, 0.05, -0.03);
    uf_scene_illuminate(scene->wide_flat, s->wide_unevenness, -0.02, 0.04);
    expose(s, scene->near_adu, scene->near_flat, s->near_background_adu, UF_STREAM_NEAR_CAMERA);
    expose(s, scene->wide_adu, scene->wide_flat, s->wide_background_adu, UF_STREAM_WIDE_CAMERA);
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

uf_status uf_scene_make(uf_work *work, const uf_scene_settings *s, uf_scene *scene, uf_error *error)
{
    *scene = (uf_scene){.depth_nm = evanescent_depth_nm(s), .reference_ratio = s->near_peak_adu / s->wide_peak_adu};
    uf_plane *planes[] = {&scene->near_adu, &scene->wide_adu, &scene->near_flat, &scene->wide_flat, &scene->gap_nm};
    uf_status status = uf_labels_take(work, s->width, s->height, &scene->labels, error);
    for (size_t k = 0; status == UF_OK && k < sizeof planes / sizeof planes[0]; k++)
        status = uf_plane_take(work, s->width, s->height, planes[k], error);
    if (status == UF_OK)
        status = uf_scene_lay_cells(work, s, &scene->labels, error);
    if (status == UF_OK)
        status = uf_scene_topography(work, s, scene, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (status == UF_OK)
        status = make_images(work, s, scene, error);
    uf_arena_back(&work->arena, mark);
    return status;
}
