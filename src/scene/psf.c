/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/psf.h"

#include <math.h>
#include <string.h>

static const double root_half = 0.70710678118654752440;        /* 1 / sqrt(2) */
static const double root_inverse_2pi = 0.39894228040143267794; /* 1 / sqrt(2 pi) */

/* Taps for displacements first .. first + count - 1. */
typedef struct taps {
    int first, count;
    float *weight;
} taps;

static double ramp(double u, double sigma)
{
    if (sigma <= 0)
        return u > 0 ? u : 0;
    double z = u / sigma;
    return u * 0.5 * erfc(-z * root_half) + sigma * root_inverse_2pi * exp(-0.5 * z * z);
}

static uf_status take_taps(uf_work *work, double sigma, double shift, taps *t, uf_error *error)
{
    int half = (int)ceil(4 * sigma) + 1;
    t->first = (int)floor(shift) - half;
    t->count = 2 * half + 2;
    double *exact;
    uf_status status = uf_take(work, (size_t)t->count, sizeof *exact, "a blur", &exact, error);
    if (!status)
        status = uf_take(work, (size_t)t->count, sizeof *t->weight, "a blur", &t->weight, error);
    if (status)
        return status;
    double sum = 0;
    for (int i = 0; i < t->count; i++) {
        double u = t->first + i - shift;
        exact[i] = ramp(u + 1, sigma) - 2 * ramp(u, sigma) + ramp(u - 1, sigma);
        sum += exact[i];
    }
    for (int i = 0; i < t->count; i++)
        t->weight[i] = (float)(exact[i] / sum);
    return UF_OK;
}

/* Reflection at the outer edges of the first and last pixel, as often as it takes. */
static int mirrored(int i, int size)
{
    int period = 2 * size;
    i %= period;
    if (i < 0)
        i += period;
    return i < size ? i : period - 1 - i;
}

static void add_scaled(float *restrict sum, const float *restrict from, float weight, int count)
{
    for (int x = 0; x < count; x++)
        sum[x] += weight * from[x];
}

/* `padded` holds width + count - 1 pixels, so that the taps never ask where the row ends. */
static void blur_row(const float *in, const taps *t, float *padded, float *out, int width)
{
    int last = t->first + t->count - 1;
    for (int j = 0; j < width + t->count - 1; j++)
        padded[j] = in[mirrored(j - last, width)];
    memset(out, 0, (size_t)width * sizeof *out);
    for (int i = 0; i < t->count; i++)
        add_scaled(out, padded + (t->count - 1 - i), t->weight[i], width);
}

static void blur_column_row(uf_plane in, const taps *t, int y, float *out)
{
    memset(out, 0, (size_t)in.width * sizeof *out);
    for (int i = 0; i < t->count; i++) {
        const float *from = uf_plane_row(in, mirrored(y - (t->first + i), in.height));
        add_scaled(out, from, t->weight[i], in.width);
    }
}

uf_status uf_psf_blur(uf_work *work, uf_plane in, double sigma_px, double dx_px, double dy_px, uf_plane out,
                      uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    taps across = {0}, down = {0};
    uf_plane half_done;
    float *padded = NULL;
    uf_status status = take_taps(work, sigma_px, dx_px, &across, error);
    if (!status)
        status = take_taps(work, sigma_px, dy_px, &down, error);
    if (!status)
        status = uf_plane_take(work, in.width, in.height, &half_done, error);
    if (!status)
        status = uf_take(work, (size_t)(in.width + across.count), sizeof *padded, "a blur", &padded, error);
    if (!status) {
        for (int y = 0; y < in.height; y++)
            blur_row(uf_plane_row(in, y), &across, padded, uf_plane_row(half_done, y), in.width);
        for (int y = 0; y < in.height; y++)
            blur_column_row(half_done, &down, y, uf_plane_row(out, y));
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
