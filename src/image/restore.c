/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/restore.h"

#include <math.h>
#include <stdlib.h>

#include "image/smooth.h"

typedef struct restoring {
    uf_plane smooth, out; /* out holds the plane smoothed twice */
    float gain;
} restoring;

static void restore_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    const restoring *r = context;
    for (int y = y0; y < y1; y++) {
        const float *smooth = uf_plane_row(r->smooth, y);
        float *out = uf_plane_row(r->out, y);
        for (int x = 0; x < r->out.width; x++)
            out[x] = smooth[x] + r->gain * (smooth[x] - out[x]);
    }
}

uf_status uf_restore(uf_work *work, uf_plane smooth, double sigma_px, double gain, uf_plane out, uf_error *error)
{
    restoring r = {smooth, out, (float)gain};
    uf_status status = uf_smooth(work, smooth, sigma_px, out, error);
    if (status == UF_OK)
        uf_rows_run(work, out.height, restore_rows, &r);
    return status;
}

/* A tap of the Gaussian, as uf_smooth cuts and normalises it. */
static double tap(int k, double sigma, double sum)
{
    return abs(k) > (int)(4.0 * sigma + 0.5) ? 0 : exp(-0.5 * k * k / (sigma * sigma)) / sum;
}

double uf_restore_variance(double sigma_px, double gain)
{
    if (!(sigma_px > 0))
        return 1;
    int radius = (int)(4.0 * sigma_px + 0.5);
    double sum = 0, once_once = 0, once_twice = 0, twice_twice = 0;
    for (int k = -radius; k <= radius; k++)
        sum += exp(-0.5 * k * k / (sigma_px * sigma_px));
    for (int k = -2 * radius; k <= 2 * radius; k++) {
        double once = tap(k, sigma_px, sum), twice = 0;
        for (int j = -radius; j <= radius; j++)
            twice += tap(j, sigma_px, sum) * tap(k - j, sigma_px, sum);
        once_once += once * once;
        once_twice += once * twice;
        twice_twice += twice * twice;
    }
    /* Both Gaussians are products of a row and a column, so their sums over the plane are squares. */
    return (1 + gain) * (1 + gain) * once_once * once_once - 2 * gain * (1 + gain) * once_twice * once_twice +
           gain * gain * twice_twice * twice_twice;
}
