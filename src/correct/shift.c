/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "correct/shift.h"

#include <fftw3.h>
#include <math.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

#include "image/smooth.h"

/* Planning is the one part of FFTW that may not run in two threads at once. */
static pthread_mutex_t planner = PTHREAD_MUTEX_INITIALIZER;

static const double trusted_score = 1.3;

/* ---- edges ----------------------------------------------------------------------------------- */

/* sqrt of the signal above background: shot noise then has the same size everywhere. */
static void square_root(const uf_channel *channel, uf_plane out)
{
    float background = (float)(channel->background_adu - 2.0 * channel->noise_adu);
    for (int y = 0; y < out.height; y++) {
        const float *in = uf_plane_row(channel->image, y);
        float *row = uf_plane_row(out, y);
        for (int x = 0; x < out.width; x++) {
            float v = in[x] - background;
            row[x] = v > 0.0f ? sqrtf(v) : 0.0f;
        }
    }
}

/* Falls to 0 over the outer sixteenth on each side, or the border itself would be the strongest edge. */
static float taper(int i, int n)
{
    int from_end = i < n - 1 - i ? i : n - 1 - i;
    int width = n / 16 > 1 ? n / 16 : 1;
    return from_end >= width ? 1.0f : ((float)from_end + 0.5f) / (float)width;
}

enum { WIDE_STEP = 2 };

/* out -= its blur over 4 px, made on a grid of half the resolution, which a blur that wide does not miss. */
static uf_status subtract_wide_blur(uf_work *work, uf_plane image, uf_plane out, uf_error *error)
{
    int width = (image.width + WIDE_STEP - 1) / WIDE_STEP, height = (image.height + WIDE_STEP - 1) / WIDE_STEP;
    uf_plane coarse;
    uf_expand_column *columns;
    float *row;
    uf_status status = uf_plane_take(work, width, height, &coarse, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)image.width, sizeof *columns, "the shift", &columns, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)image.width, sizeof *row, "the shift", &row, error);
    if (status != UF_OK)
        return status;
    uf_reduce(work, image, WIDE_STEP, coarse);
    status = uf_smooth(work, coarse, 4.0 / WIDE_STEP, coarse, error);
    uf_expand_columns(width, WIDE_STEP, image.width, columns);
    for (int y = 0; status == UF_OK && y < out.height; y++) {
        float *edges = uf_plane_row(out, y), down = taper(y, out.height);
        uf_expand_row(coarse, WIDE_STEP, y, columns, row, out.width);
        for (int x = 0; x < out.width; x++)
            edges[x] = (edges[x] - row[x]) * down * taper(x, out.width);
    }
    return status;
}

static uf_status find_edges(uf_work *work, const uf_channel *channel, uf_plane out, uf_error *error)
{
    uf_plane image;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_plane_take(work, out.width, out.height, &image, error);
    if (status == UF_OK) {
        square_root(channel, image);
        status = uf_smooth(work, image, 1.0, out, error);
    }
    if (status == UF_OK)
        status = subtract_wide_blur(work, image, out, error);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- correlation ----------------------------------------------------------------------------- */

/* The next length with only small prime factors: FFTW is several times slower on others. */
static int fast_length(int n)
{
    for (;; n++) {
        int rest = n;
        for (int p = 2; p <= 5; p++)
            while (rest % p == 0)
                rest /= p;
        if (rest == 1 && n % 2 == 0)
            return n;
    }
}

typedef struct correlation {
    int width, height; /* of the padded arrays */
    float *near, *wide;
    fftwf_complex *near_spectrum, *wide_spectrum;
} correlation;

static uf_status take_arrays(uf_work *work, correlation *c, uf_error *error)
{
    size_t reals = (size_t)c->width * (size_t)c->height;
    size_t complexes = ((size_t)c->width / 2 + 1) * (size_t)c->height;
    uf_status status = uf_take(work, reals, sizeof(float), "the shift", &c->near, error);
    if (status == UF_OK)
        status = uf_take(work, reals, sizeof(float), "the shift", &c->wide, error);
    if (status == UF_OK)
        status = uf_take(work, complexes, sizeof(fftwf_complex), "the shift", &c->near_spectrum, error);
    if (status == UF_OK)
        status = uf_take(work, complexes, sizeof(fftwf_complex), "the shift", &c->wide_spectrum, error);
    return status;
}

static void pad(uf_plane in, float *out, int width, int height)
{
    memset(out, 0, (size_t)width * (size_t)height * sizeof *out);
    for (int y = 0; y < in.height; y++)
        memcpy(out + (size_t)y * (size_t)width, uf_plane_row(in, y), (size_t)in.width * sizeof *out);
}

/* a := conjugate(b) a. Without <complex.h> FFTW's complex numbers are pairs. */
static void times_conjugate(float *a, const float *b)
{
    float re = b[0] * a[0] + b[1] * a[1], im = b[0] * a[1] - b[1] * a[0];
    a[0] = re;
    a[1] = im;
}

/* near := correlation of near and wide: value at (dx, dy), wrapped, is the sum of near(x) wide(x + d). */
static int correlate(correlation *c)
{
    pthread_mutex_lock(&planner);
    fftwf_plan near = fftwf_plan_dft_r2c_2d(c->height, c->width, c->near, c->near_spectrum, FFTW_ESTIMATE);
    fftwf_plan wide = fftwf_plan_dft_r2c_2d(c->height, c->width, c->wide, c->wide_spectrum, FFTW_ESTIMATE);
    fftwf_plan back = fftwf_plan_dft_c2r_2d(c->height, c->width, c->wide_spectrum, c->near, FFTW_ESTIMATE);
    pthread_mutex_unlock(&planner);
    int planned = near && wide && back;
    if (planned) {
        fftwf_execute(near);
        fftwf_execute(wide);
        size_t count = ((size_t)c->width / 2 + 1) * (size_t)c->height;
        for (size_t k = 0; k < count; k++)
            times_conjugate(c->wide_spectrum[k], c->near_spectrum[k]);
        fftwf_execute(back);
    }
    pthread_mutex_lock(&planner);
    fftwf_destroy_plan(near);
    fftwf_destroy_plan(wide);
    fftwf_destroy_plan(back);
    pthread_mutex_unlock(&planner);
    return planned;
}

static double at_shift(const correlation *c, int dx, int dy)
{
    int x = dx < 0 ? dx + c->width : dx, y = dy < 0 ? dy + c->height : dy;
    return (double)c->near[(size_t)y * (size_t)c->width + (size_t)x];
}

/* ---- the peak -------------------------------------------------------------------------------- */

/* FFTW's last bits differ from processor to processor, so it only says which whole-pixel shifts are highest;
 * every number that is used is summed here, in a fixed order. */
static double correlation_at(uf_plane near, uf_plane wide, int dx, int dy)
{
    enum { LANES = 8 };
    double total = 0;
    int x0 = dx < 0 ? -dx : 0, x1 = dx > 0 ? near.width - dx : near.width;
    for (int y = dy < 0 ? -dy : 0; y < (dy > 0 ? near.height - dy : near.height); y++) {
        const float *a = uf_plane_row(near, y), *b = uf_plane_row(wide, y + dy) + dx;
        double lane[LANES] = {0};
        int x = x0;
        for (; x + LANES <= x1; x += LANES)
            for (int k = 0; k < LANES; k++)
                lane[k] += (double)(a[x + k] * b[x + k]);
        for (; x < x1; x++)
            lane[0] += (double)(a[x] * b[x]);
        for (int k = 0; k < LANES; k++)
            total += lane[k];
    }
    return total;
}

typedef struct place {
    int dx, dy;
} place;

enum { NEIGHBOURHOOD = 6 };

/* The highest shift within `range`, leaving out the neighbourhood of `besides` (NULL: nothing). */
static place highest(const correlation *c, int range, const place *besides)
{
    place best = {0, 0};
    double height = -INFINITY;
    for (int dy = -range; dy <= range; dy++)
        for (int dx = -range; dx <= range; dx++) {
            if (besides && abs(dx - besides->dx) <= NEIGHBOURHOOD && abs(dy - besides->dy) <= NEIGHBOURHOOD)
                continue;
            if (at_shift(c, dx, dy) > height) {
                height = at_shift(c, dx, dy);
                best = (place){dx, dy};
            }
        }
    return best;
}

/*
 * f = a + b x + c y + d x^2 + e xy + g y^2 by least squares on the 3 x 3 values around the peak (closed
 * form), and where its gradient vanishes; no further than a pixel away.
 */
static void refine(uf_plane near, uf_plane wide, place p, double height, double *x, double *y)
{
    double sum = 0, sx = 0, sy = 0, sxx = 0, syy = 0, sxy = 0;
    for (int v = -1; v <= 1; v++)
        for (int u = -1; u <= 1; u++) {
            double f = correlation_at(near, wide, p.dx + u, p.dy + v) / height;
            sum += f;
            sx += u * f;
            sy += v * f;
            sxx += u * u * f;
            syy += v * v * f;
            sxy += u * v * f;
        }
    double bx = sx / 6, by = sy / 6, e = sxy / 4;
    double dxx = sxx / 2 - sum / 3, dyy = syy / 2 - sum / 3;
    double determinant = 4 * dxx * dyy - e * e;
    double ux = (e * by - 2 * dyy * bx) / determinant, uy = (e * bx - 2 * dxx * by) / determinant;
    int sane = dxx < 0 && dyy < 0 && determinant > 0 && fabs(ux) <= 1 && fabs(uy) <= 1;
    *x = p.dx + (sane ? ux : 0);
    *y = p.dy + (sane ? uy : 0);
}

static void judge(const correlation *c, uf_plane near, uf_plane wide, int range, int factor,
                  uf_shift_estimate *estimate)
{
    place best = highest(c, range, NULL), second = highest(c, range, &best);
    double height = correlation_at(near, wide, best.dx, best.dy);
    double elsewhere = correlation_at(near, wide, second.dx, second.dy);
    double x = 0, y = 0;
    if (height > 0)
        refine(near, wide, best, height, &x, &y);
    estimate->dx_px = x * factor;
    estimate->dy_px = y * factor;
    estimate->score = height <= 0 ? 1.0 : elsewhere > 0.01 * height ? height / elsewhere : 100.0;
    estimate->trusted = estimate->score >= trusted_score && abs(best.dx) < range && abs(best.dy) < range;
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* A copy of the channel's image reduced by `factor`, as a channel. */
static uf_status reduced_channel(uf_work *work, const uf_channel *in, int factor, uf_channel *out, uf_error *error)
{
    int width = (in->image.width + factor - 1) / factor, height = (in->image.height + factor - 1) / factor;
    *out = *in;
    if (factor == 1)
        return UF_OK;
    uf_status status = uf_plane_take(work, width, height, &out->image, error);
    if (status == UF_OK)
        uf_reduce(work, in->image, factor, out->image);
    out->noise_adu = in->noise_adu / factor;
    return status;
}

static uf_status edges_of(uf_work *work, const uf_channel *in, int factor, uf_plane *out, uf_error *error)
{
    uf_channel reduced;
    uf_status status = reduced_channel(work, in, factor, &reduced, error);
    if (status == UF_OK)
        status = uf_plane_take(work, reduced.image.width, reduced.image.height, out, error);
    if (status == UF_OK)
        status = find_edges(work, &reduced, *out, error);
    return status;
}

uf_status uf_shift_find(uf_work *work, const uf_channel *near, const uf_channel *wide, uf_shift_estimate *estimate,
                        uf_error *error)
{
    int width = near->image.width, height = near->image.height, longer = width > height ? width : height;
    int factor = (longer + 1535) / 1536; /* one pixel is enough up to here; larger fields have pixels to spare */
    int shorter = (width < height ? width : height) / factor, range = shorter / 8 < 64 ? shorter / 8 : 64;
    *estimate = (uf_shift_estimate){.score = 1.0};
    if (range <= NEIGHBOURHOOD)
        return UF_OK; /* too small a field to tell */
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_plane near_edges, wide_edges;
    correlation c = {0};
    uf_status status = edges_of(work, near, factor, &near_edges, error);
    if (status == UF_OK)
        status = edges_of(work, wide, factor, &wide_edges, error);
    if (status == UF_OK) {
        c.width = fast_length(near_edges.width + range);
        c.height = fast_length(near_edges.height + range);
        status = take_arrays(work, &c, error);
    }
    if (status == UF_OK) {
        pad(near_edges, c.near, c.width, c.height);
        pad(wide_edges, c.wide, c.width, c.height);
        if (correlate(&c))
            judge(&c, near_edges, wide_edges, range, factor, estimate);
        else
            status = uf_fail_memory(error, "the Fourier transform");
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
