/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/beads.h"

#include <math.h>
#include <string.h>

#include "base/constants.h"
#include "scene/exposure.h"
#include "scene/psf.h"
#include "scene/random.h"

/* Fine pixels a pixel, points a bead, and how often a place for a bead is tried. */
enum { FINE = 4, POINTS = 300000, TRIES = 200 };

/* ---- where beads lie ------------------------------------------------------------------------- */

static int is_free(const uf_bead_truth *truth, double x, double y, double apart_px)
{
    for (int k = 0; k < truth->count; k++)
        if (hypot(truth->x_px[k] - x, truth->y_px[k] - y) < apart_px)
            return 0;
    return 1;
}

static void lay_out(const uf_bead_scene *s, uf_random *random, uf_bead_truth *truth)
{
    double radius_px = s->radius_um / s->pixel_size_um, margin = radius_px + 4;
    truth->count = 0;
    for (int k = 0; k < s->beads && k < UF_BEAD_SCENE_LIMIT; k++)
        for (int tries = 0; tries < TRIES; tries++) {
            double x = uf_random_between(random, margin, s->width - 1 - margin);
            double y = uf_random_between(random, margin, s->height - 1 - margin);
            if (!is_free(truth, x, y, 2.2 * radius_px + 6))
                continue;
            truth->x_px[truth->count] = x;
            truth->y_px[truth->count] = y;
            truth->floats[truth->count++] = uf_random_uniform(random) < s->floating;
            break;
        }
}

/* ---- light ----------------------------------------------------------------------------------- */

static double excitation(const uf_bead_scene *s, double height_nm)
{
    return (1 - s->scattered_fraction) * exp(-height_nm / s->depth_nm) +
           s->scattered_fraction * exp(-height_nm / s->scattered_depth_nm);
}

/* All excitation above a height, nm. */
static double excitation_above(const uf_bead_scene *s, double height_nm)
{
    return (1 - s->scattered_fraction) * s->depth_nm * exp(-height_nm / s->depth_nm) +
           s->scattered_fraction * s->scattered_depth_nm * exp(-height_nm / s->scattered_depth_nm);
}

/* Shares one point's light among the four fine pixels around it. */
static void deposit(uf_plane fine, double x, double y, double light)
{
    int x0 = (int)floor(x), y0 = (int)floor(y);
    double right = x - x0, down = y - y0;
    if (x0 < 0 || y0 < 0 || x0 + 1 >= fine.width || y0 + 1 >= fine.height)
        return;
    float *row = uf_plane_row(fine, y0) + x0, *next = uf_plane_row(fine, y0 + 1) + x0;
    row[0] += (float)(light * (1 - right) * (1 - down));
    row[1] += (float)(light * right * (1 - down));
    next[0] += (float)(light * (1 - right) * down);
    next[1] += (float)(light * right * down);
}

typedef struct place {
    double x_px, y_px, radius_um, lift_nm, density; /* density: signal of a flat membrane at height 0 */
} place;

/* Centre of pixel p in fine pixels. */
static double fine_of(double p)
{
    return (p + 0.5) * FINE - 0.5;
}

/* Dye on the surface: a spiral of points whose heights are denser near the substrate (height = 2 R u^2), each standing for the
 * area it holds there (Archimedes: area 2 pi R dheight). */
static void add_surface(const uf_bead_scene *s, const place *bead, uf_plane fine)
{
    static const double golden_turn = 2.39996322972865332; /* pi (3 - sqrt 5) */
    double px = s->pixel_size_um, radius = bead->radius_um;
    for (int k = 0; k < POINTS; k++) {
        double u = (k + 0.5) / POINTS, height = 2 * radius * u * u, turn = golden_turn * k;
        double area_um2 = 2 * UF_PI * radius * 4 * radius * u / POINTS;
        double across = sqrt(height * (2 * radius - height)) / px;
        double light = bead->density * area_um2 / (px * px) * excitation(s, height * 1000 + bead->lift_nm);
        deposit(fine, fine_of(bead->x_px + across * cos(turn)), fine_of(bead->y_px + across * sin(turn)),
                light * FINE * FINE);
    }
}

/* Dye around the bead: every fine pixel loses what the bead takes the place of. */
static void take_out_of_medium(const uf_bead_scene *s, const place *bead, uf_plane fine)
{
    double whole = excitation_above(s, 0), radius_nm = bead->radius_um * 1000;
    double reach = bead->radius_um / s->pixel_size_um + 1, nm = s->pixel_size_um * 1000 / FINE;
    for (int y = (int)fine_of(bead->y_px - reach); y <= (int)fine_of(bead->y_px + reach); y++)
        for (int x = (int)fine_of(bead->x_px - reach); x <= (int)fine_of(bead->x_px + reach); x++) {
            double r = nm * hypot(x - fine_of(bead->x_px), y - fine_of(bead->y_px));
            if (r >= radius_nm || x < 0 || y < 0 || x >= fine.width || y >= fine.height)
                continue;
            double half = sqrt(radius_nm * radius_nm - r * r), low = radius_nm - half + bead->lift_nm;
            double lost = excitation_above(s, low) - excitation_above(s, low + 2 * half);
            uf_plane_row(fine, y)[x] -= (float)(bead->density * lost / whole);
        }
}

static void fill(uf_plane plane, double value)
{
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            uf_plane_row(plane, y)[x] = (float)value;
}

static void draw(const uf_bead_scene *s, const uf_bead_truth *truth, uf_random *random, uf_plane fine)
{
    fill(fine, s->immersed ? s->peak_adu : 0);
    for (int k = 0; k < truth->count; k++) {
        place bead = {.x_px = truth->x_px[k],
                      .y_px = truth->y_px[k],
                      .radius_um = s->radius_um * (1 + s->radius_spread * uf_random_normal(random)),
                      .lift_nm = truth->floats[k] ? s->floating_nm : 0,
                      .density = s->peak_adu};
        if (s->immersed) {
            take_out_of_medium(s, &bead, fine);
            continue;
        }
        bead.density *= exp(s->label_spread * uf_random_normal(random));
        add_surface(s, &bead, fine);
    }
}

/* ---- camera ---------------------------------------------------------------------------------- */

/* A pixel takes the mean of its fine pixels. */
static void bin(uf_plane fine, double background_adu, uf_plane image)
{
    for (int y = 0; y < image.height; y++)
        for (int x = 0; x < image.width; x++) {
            double sum = 0;
            for (int j = 0; j < FINE; j++)
                for (int i = 0; i < FINE; i++)
                    sum += (double)uf_plane_row(fine, y * FINE + j)[x * FINE + i];
            uf_plane_row(image, y)[x] = (float)(sum / (FINE * FINE) + background_adu);
        }
}

static void cut_at_full_scale(uf_plane counts, double full_scale_adu)
{
    for (int y = 0; y < counts.height; y++)
        for (int x = 0; x < counts.width; x++)
            uf_plane_row(counts, y)[x] = fminf(uf_plane_row(counts, y)[x], (float)full_scale_adu);
}

/* The blur's own interpolation is a triangle of variance 1/6, and so is sharing a point's light among four pixels, which
 * only dye on surfaces does. */
static double blur_left(const uf_bead_scene *s)
{
    double sigma = s->psf_sigma_um / s->pixel_size_um * FINE, already = s->immersed ? 1.0 / 6 : 1.0 / 3;
    return sqrt(fmax(sigma * sigma - already, 0));
}

uf_status uf_scene_beads(uf_work *work, const uf_bead_scene *s, uf_plane *counts, uf_bead_truth *truth,
                         uf_error *error)
{
    uf_random layout, traits, camera;
    uf_random_start(&layout, s->seed, UF_STREAM_BEADS);
    uf_random_start(&traits, s->seed, UF_STREAM_TRAITS);
    uf_random_start(&camera, s->seed, UF_STREAM_NEAR_CAMERA);
    uf_status status = uf_plane_take(work, s->width, s->height, counts, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_plane fine;
    if (status == UF_OK)
        status = uf_plane_take(work, s->width * FINE, s->height * FINE, &fine, error);
    if (status == UF_OK) {
        lay_out(s, &layout, truth);
        draw(s, truth, &traits, fine);
        status = uf_psf_blur(work, fine, blur_left(s), 0, 0, fine, error);
    }
    if (status == UF_OK) {
        uf_scene_camera c = {s->offset_adu, s->gain_e_per_adu, s->read_noise_e};
        bin(fine, s->background_adu, *counts);
        uf_scene_expose(*counts, &c, &camera);
        cut_at_full_scale(*counts, s->full_scale_adu);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
