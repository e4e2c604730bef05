/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A camera whose every figure is known: Poisson electrons, excess noise, normal read noise, fixed pattern,
 * rounding to whole steps, a floor at 0 and a ceiling. Include after <cmocka.h>. */
#ifndef TESTS_CALIBRATE_SIMULATED_CAMERA_H
#define TESTS_CALIBRATE_SIMULATED_CAMERA_H

#include <math.h>

#include "image/plane.h"
#include "scene/random.h"

typedef struct simulated_camera {
    int width, height;
    double offset_adu, gain_e_per_adu, read_e;
    double step_adu;       /* 0: not rounded */
    double full_scale_adu; /* ceiling of the converter */
    double well_e;         /* electrons a pixel holds; 0: no limit */
    double excess_noise;   /* 0 or 1: none */
    double pattern_adu;    /* sd over pixels of the offset */
    double response_sd;    /* sd over pixels of the response */
    double unevenness;     /* light at the right edge over that at the left, 0: even */
    uint64_t seed;
    uint64_t frames; /* made so far: each draws from its own stream */
} simulated_camera;

/* The same for a pixel in every frame. */
static inline double pattern_of(const simulated_camera *c, int x, int y, uint64_t what)
{
    uf_random dice;
    uf_random_start(&dice, c->seed + 1000003 * what, (uint64_t)(y * c->width + x));
    return uf_random_normal(&dice);
}

static inline double light_at(const simulated_camera *c, int x)
{
    double t = c->width > 1 ? (double)x / (c->width - 1) : 0.5;
    return c->unevenness > 0 ? 2 * (1 + t * (c->unevenness - 1)) / (1 + c->unevenness) : 1;
}

static inline double electrons_of(const simulated_camera *c, double mean, uf_random *dice)
{
    double electrons = uf_random_poisson(dice, mean);
    if (c->excess_noise > 1) /* multiplication adds (excess^2 - 1) times the electrons to the variance */
        electrons += sqrt(electrons * (c->excess_noise * c->excess_noise - 1)) * uf_random_normal(dice);
    return c->well_e > 0 && electrons > c->well_e ? c->well_e : electrons;
}

/* Fills `plane` with a frame of `light_e` electrons a pixel on average. */
static inline void expose_into(simulated_camera *c, double light_e, uf_plane plane)
{
    uf_random dice;
    uf_random_start(&dice, c->seed, ++c->frames);
    for (int y = 0; y < c->height; y++)
        for (int x = 0; x < c->width; x++) {
            double response = c->response_sd > 0 ? 1 + c->response_sd * pattern_of(c, x, y, 1) : 1;
            double offset = c->offset_adu + (c->pattern_adu > 0 ? c->pattern_adu * pattern_of(c, x, y, 2) : 0);
            double electrons = electrons_of(c, light_e * light_at(c, x) * response, &dice);
            double counts = offset + (electrons + c->read_e * uf_random_normal(&dice)) / c->gain_e_per_adu;
            if (c->step_adu > 0)
                counts = c->step_adu * floor(counts / c->step_adu + 0.5);
            counts = c->full_scale_adu > 0 && counts > c->full_scale_adu ? c->full_scale_adu : counts;
            uf_plane_row(plane, y)[x] = (float)(counts < 0 && c->step_adu > 0 ? 0 : counts);
        }
}

static inline uf_plane expose(uf_work *work, simulated_camera *c, double light_e)
{
    uf_plane plane;
    assert_int_equal(uf_plane_take(work, c->width, c->height, &plane, NULL), UF_OK);
    expose_into(c, light_e, plane);
    return plane;
}

#endif
