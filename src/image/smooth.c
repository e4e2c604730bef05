/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/smooth.h"

#include <math.h>
#include <string.h>

#include "base/text.h"
#include "image/kernels.h"

enum { BAND = 64, LARGEST_RADIUS = 512 };

/* Index mirrored into 0 .. n-1 with the border pixel repeated, however far outside. */
static int mirror(int i, int n)
{
    int period = 2 * n;
    i %= period;
    if (i < 0)
        i += period;
    return i < n ? i : period - 1 - i;
}

static int clamp(int i, int n)
{
    return i < 0 ? 0 : i >= n ? n - 1 : i;
}

/* ---- Gaussian -------------------------------------------------------------------------------- */

typedef struct smoothing {
    const uf_kernels *kernels;
    uf_plane in, out;
    float taps[LARGEST_RADIUS + 1];
    int radius;
    float *padded; /* a row with its borders, one a hand */
    float *band;   /* rows of a band, and the radius above and below, convolved along the rows; one a hand */
    size_t padded_length, band_length;
} smoothing;

static void make_taps(smoothing *s, double sigma)
{
    s->radius = (int)(4.0 * sigma + 0.5);
    if (s->radius > LARGEST_RADIUS)
        s->radius = LARGEST_RADIUS;
    double taps[LARGEST_RADIUS + 1], sum = 0;
    for (int k = 0; k <= s->radius; k++) {
        taps[k] = exp(-0.5 * k * k / (sigma * sigma));
        sum += k ? 2 * taps[k] : taps[k];
    }
    for (int k = 0; k <= s->radius; k++)
        s->taps[k] = (float)uf_round_digits(taps[k] / sum, 12);
}

static void smooth_row(const smoothing *s, int y, float *padded, float *out)
{
    int width = s->in.width, radius = s->radius;
    const float *row = uf_plane_row(s->in, mirror(y, s->in.height));
    memcpy(padded + radius, row, (size_t)width * sizeof *row);
    for (int k = 1; k <= radius; k++) {
        padded[radius - k] = row[mirror(-k, width)];
        padded[radius + width - 1 + k] = row[mirror(width - 1 + k, width)];
    }
    s->kernels->convolve_row(out, padded + radius, s->taps, radius, width);
}

/* A band at a time, along the rows and then down the columns, while it is in the cache. */
static void smooth_band(void *context, int hand, int y0, int y1)
{
    const smoothing *s = context;
    int radius = s->radius, width = s->in.width;
    float *padded = s->padded + (size_t)hand * s->padded_length;
    float *band = s->band + (size_t)hand * s->band_length;
    const float *rows[BAND + 2 * LARGEST_RADIUS];
    for (int k = 0; k < y1 - y0 + 2 * radius; k++) {
        smooth_row(s, y0 - radius + k, padded, band + (size_t)k * (size_t)width);
        rows[k] = band + (size_t)k * (size_t)width;
    }
    for (int y = y0; y < y1; y++)
        s->kernels->convolve_column(uf_plane_row(s->out, y), rows + (y - y0), s->taps, radius, width);
}

static void copy_plane(uf_plane in, uf_plane out)
{
    for (int y = 0; y < in.height; y++)
        memmove(uf_plane_row(out, y), uf_plane_row(in, y), (size_t)in.width * sizeof(float));
}

/* Bands read rows of their neighbours, so a plane smoothed onto itself is copied first. */
static uf_status copy_when_same(uf_work *work, uf_plane *in, uf_plane out, uf_error *error)
{
    uf_plane copy;
    if (in->data != out.data)
        return UF_OK;
    uf_status status = uf_plane_take(work, in->width, in->height, &copy, error);
    if (status != UF_OK)
        return status;
    copy_plane(*in, copy);
    *in = copy;
    return UF_OK;
}

uf_status uf_smooth(uf_work *work, uf_plane in, double sigma_px, uf_plane out, uf_error *error)
{
    smoothing s = {.kernels = uf_kernels_in_use(), .in = in, .out = out};
    if (!(sigma_px > 0)) {
        copy_plane(in, out);
        return UF_OK;
    }
    make_taps(&s, sigma_px);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t hands = (size_t)uf_hands(work);
    s.padded_length = (size_t)(in.width + 2 * s.radius);
    s.band_length = (size_t)(BAND + 2 * s.radius) * (size_t)in.width;
    uf_status status = copy_when_same(work, &s.in, out, error);
    if (status == UF_OK)
        status = uf_take(work, hands * s.padded_length, sizeof(float), "smoothing", &s.padded, error);
    if (status == UF_OK)
        status = uf_take(work, hands * s.band_length, sizeof(float), "smoothing", &s.band, error);
    if (status == UF_OK)
        uf_rows_run(work, in.height, smooth_band, &s);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- coarse grid ----------------------------------------------------------------------------- */

typedef struct reduction {
    uf_plane in, out;
    int factor;
} reduction;

enum { CHUNK = 512 };

/* Sums of the rows top .. bottom - 1 at columns from .. to - 1. */
static void sum_rows(uf_plane in, int top, int bottom, int from, int to, double *sums)
{
    for (int x = from; x < to; x++)
        sums[x - from] = 0;
    for (int y = top; y < bottom; y++) {
        const float *row = uf_plane_row(in, y);
        for (int x = from; x < to; x++)
            sums[x - from] += (double)row[x];
    }
}

static void reduce_row(const reduction *r, int y)
{
    int factor = r->factor, per_chunk = CHUNK / factor;
    int top = y * factor, bottom = top + factor < r->in.height ? top + factor : r->in.height;
    float *out = uf_plane_row(r->out, y);
    double sums[CHUNK];
    for (int x0 = 0; x0 < r->out.width; x0 += per_chunk) {
        int x1 = x0 + per_chunk < r->out.width ? x0 + per_chunk : r->out.width;
        int from = x0 * factor, to = x1 * factor < r->in.width ? x1 * factor : r->in.width;
        sum_rows(r->in, top, bottom, from, to, sums);
        for (int x = x0; x < x1; x++) {
            int left = x * factor, right = left + factor < r->in.width ? left + factor : r->in.width;
            double sum = 0;
            for (int u = left; u < right; u++)
                sum += sums[u - from];
            out[x] = (float)(sum / ((bottom - top) * (right - left)));
        }
    }
}

static void reduce_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    for (int y = y0; y < y1; y++)
        reduce_row(context, y);
}

void uf_reduce(const uf_work *work, uf_plane in, int factor, uf_plane out)
{
    reduction r = {in, out, factor};
    uf_rows_run(work, out.height, reduce_rows, &r);
}

/* Where a full-resolution index lies between two coarse ones. */
static uf_expand_column between(int i, int factor, int coarse_size)
{
    float at = ((float)i + 0.5f) / (float)factor - 0.5f;
    int left = at < 0.0f ? 0 : (int)at;
    left = left > coarse_size - 2 ? coarse_size - 2 : left;
    left = left < 0 ? 0 : left;
    float part = at - (float)left;
    return (uf_expand_column){left, part < 0.0f || coarse_size < 2 ? 0.0f : part > 1.0f ? 1.0f : part};
}

void uf_expand_columns(int coarse_width, int factor, int width, uf_expand_column *columns)
{
    for (int x = 0; x < width; x++)
        columns[x] = between(x, factor, coarse_width);
}

void uf_expand_row(uf_plane coarse, int factor, int y, const uf_expand_column *columns, float *out, int width)
{
    uf_expand_column v = between(y, factor, coarse.height);
    const float *upper = uf_plane_row(coarse, v.left);
    const float *lower = coarse.height > 1 ? uf_plane_row(coarse, v.left + 1) : upper;
    int step = coarse.width > 1;
    for (int x = 0; x < width; x++) {
        int left = columns[x].left;
        float a = upper[left] + v.part * (lower[left] - upper[left]);
        float b = upper[left + step] + v.part * (lower[left + step] - upper[left + step]);
        out[x] = a + columns[x].part * (b - a);
    }
}

/* ---- shift ----------------------------------------------------------------------------------- */

enum { POINTS = 6, BEFORE = 2 }; /* points at -2 .. 3 around the whole part */

typedef struct shifting {
    const uf_kernels *kernels;
    uf_plane in, half, out;
    float taps_x[POINTS], taps_y[POINTS];
    int whole_x, whole_y;
    float *padded;
    size_t padded_length;
} shifting;

/* Lagrange's weights of the points -2 .. 3 at fraction t of the way from 0 to 1. */
static void lagrange(double t, float *taps)
{
    for (int j = 0; j < POINTS; j++) {
        double weight = 1;
        for (int k = 0; k < POINTS; k++)
            if (k != j)
                weight *= (t - (k - BEFORE)) / (j - k);
        taps[j] = (float)weight;
    }
}

static void shift_rows(void *context, int hand, int y0, int y1)
{
    shifting *s = context;
    int width = s->in.width;
    float *padded = s->padded + (size_t)hand * s->padded_length;
    for (int y = y0; y < y1; y++) {
        const float *row = uf_plane_row(s->in, y);
        for (int x = 0; x < width + POINTS; x++)
            padded[x] = row[clamp(x + s->whole_x - BEFORE, width)];
        s->kernels->six_taps(uf_plane_row(s->half, y), padded, s->taps_x, width);
    }
}

static void shift_columns(void *context, int hand, int y0, int y1)
{
    (void)hand;
    shifting *s = context;
    const float *rows[POINTS];
    for (int y = y0; y < y1; y++) {
        for (int k = 0; k < POINTS; k++)
            rows[k] = uf_plane_row(s->half, clamp(y + s->whole_y - BEFORE + k, s->half.height));
        s->kernels->six_rows(uf_plane_row(s->out, y), rows, s->taps_y, s->out.width);
    }
}

uf_status uf_shift(uf_work *work, uf_plane in, double dx, double dy, uf_plane out, uf_error *error)
{
    shifting s = {.kernels = uf_kernels_in_use(), .in = in, .out = out};
    s.whole_x = (int)floor(dx);
    s.whole_y = (int)floor(dy);
    lagrange(dx - s.whole_x, s.taps_x);
    lagrange(dy - s.whole_y, s.taps_y);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    s.padded_length = (size_t)in.width + POINTS;
    uf_status status =
        uf_take(work, (size_t)uf_hands(work) * s.padded_length, sizeof(float), "the shift", &s.padded, error);
    if (status == UF_OK)
        status = uf_plane_take(work, in.width, in.height, &s.half, error);
    if (status == UF_OK) {
        uf_rows_run(work, in.height, shift_rows, &s);
        uf_rows_run(work, in.height, shift_columns, &s);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
