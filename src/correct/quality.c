/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "correct/quality.h"

#include <math.h>

#include "base/constants.h"
#include "base/text.h"
#include "image/smooth.h"

enum { STRIPS = 4, STRIP_ROWS = 64, WHOLE_UP_TO = 512, SCALES = 3 };
static const double least_sigma_px = 0.7;

/* Sums of squares over the coarse pixels of cells. */
typedef struct band_sums {
    double fine, coarse, signal, pixels;
} band_sums;

/* Planes of half the strip's size: smoothed by s, 2 s and 4 s. */
static void add_strip(uf_labels labels, int y0, const uf_plane *smooth, band_sums *sums)
{
    for (int y = 0; y < smooth[0].height; y++) {
        const int32_t *label = uf_labels_row(labels, y0 + 2 * y);
        const float *a = uf_plane_row(smooth[0], y), *b = uf_plane_row(smooth[1], y), *c = uf_plane_row(smooth[2], y);
        for (int x = 0; x < smooth[0].width; x++) {
            if (!label[2 * x])
                continue;
            double fine = (double)(a[x] - b[x]), coarse = (double)(b[x] - c[x]);
            sums->fine += fine * fine;
            sums->coarse += coarse * coarse;
            sums->signal += (double)a[x];
            sums->pixels++;
        }
    }
}

/* Variance of white noise of variance 1 in the difference of two Gaussians: in the plane the product of Gaussians of
 * sigma a and b integrates to 1 / (2 pi (a^2 + b^2)). Halving the grid averages four pixels: 1/4 px^2 more of each. */
static double band_noise(double a, double b)
{
    double a2 = a * a + 0.25, b2 = b * b + 0.25;
    return 1 / (4 * UF_PI * a2) + 1 / (4 * UF_PI * b2) - 1 / (UF_PI * (a2 + b2));
}

static uf_status look_at(uf_work *work, const uf_channel *channel, uf_labels labels, int y0, int rows, double sigma,
                         band_sums *sums, uf_error *error)
{
    uf_plane strip = channel->image, fine, smooth[SCALES];
    int width = (strip.width + 1) / 2, height = (rows + 1) / 2;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    strip.data = uf_plane_row(channel->image, y0);
    strip.height = rows;
    uf_status status = uf_plane_take(work, strip.width, rows, &fine, error);
    for (int k = 0; status == UF_OK && k < SCALES; k++)
        status = uf_plane_take(work, width, height, &smooth[k], error);
    if (status == UF_OK)
        status = uf_smooth(work, strip, sigma, fine, error);
    if (status == UF_OK)
        uf_reduce(work, fine, 2, smooth[0]);
    /* From s to 2 s is sqrt 3 s more, to 4 s sqrt 15 s, in pixels of half the grid. */
    if (status == UF_OK)
        status = uf_smooth(work, smooth[0], sqrt(3.0) * sigma / 2, smooth[1], error);
    if (status == UF_OK)
        status = uf_smooth(work, smooth[0], sqrt(15.0) * sigma / 2, smooth[2], error);
    if (status == UF_OK)
        add_strip(labels, y0, smooth, sums);
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_focus_of(uf_work *work, const uf_channel *channel, uf_labels labels, double psf_px, double *focus,
                      uf_error *error)
{
    int height = labels.height, strips = height > WHOLE_UP_TO ? STRIPS : 1;
    int rows = strips > 1 ? STRIP_ROWS : height;
    double sigma = fmax(2 * psf_px, least_sigma_px);
    band_sums sums = {0};
    uf_status status = UF_OK;
    *focus = (double)NAN;
    for (int k = 0; status == UF_OK && labels.count && k < strips; k++)
        status =
            look_at(work, channel, labels, (2 * k + 1) * height / (2 * strips) - rows / 2, rows, sigma, &sums, error);
    if (status != UF_OK || !(sums.pixels > 0))
        return status;
    double noise = uf_noise_variance(&channel->noise, sums.signal / sums.pixels);
    double fine = sums.fine / sums.pixels - noise * band_noise(sigma, 2 * sigma);
    double coarse = sums.coarse / sums.pixels - noise * band_noise(2 * sigma, 4 * sigma);
    if (coarse > 0.5 * noise * band_noise(2 * sigma, 4 * sigma))
        *focus = uf_round_digits(sqrt(fmax(0, 16 * fine / coarse - 1) / 15), 9);
    return UF_OK;
}
