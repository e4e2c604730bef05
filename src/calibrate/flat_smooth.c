/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "calibrate/flat_parts.h"
#include "fit/linear.h"
#include "image/smooth.h"

/* Gaps of a flat that is not smoothed are filled over this distance; wider ones have no neighbours to be filled
 * from. */
static const double fill_px = 1.5;

/* With less weight than this around it a place has no value. */
static const double least_weight = 1e-3;

/* a + b u + c v + d u^2 + e u v + f v^2 with u and v from -1 to 1 across the image. */
typedef struct surface {
    int width, height;
    double value[UF_LINEAR_LIMIT];
} surface;

static void terms_at(const surface *s, int x, int y, double *terms)
{
    double u = s->width > 1 ? 2.0 * x / (s->width - 1) - 1 : 0, v = s->height > 1 ? 2.0 * y / (s->height - 1) - 1 : 0;
    const double all[UF_LINEAR_LIMIT] = {1, u, v, u * u, u * v, v * v};
    for (int k = 0; k < UF_LINEAR_LIMIT; k++)
        terms[k] = all[k];
}

static double height_at(const surface *s, int x, int y)
{
    double terms[UF_LINEAR_LIMIT], sum = 0;
    terms_at(s, x, y, terms);
    for (int k = 0; k < UF_LINEAR_LIMIT; k++)
        sum += s->value[k] * terms[k];
    return sum;
}

/* By least squares; flat at 0 where there are too few pixels to tell it. */
static surface fit_surface(uf_plane plane)
{
    surface s = {.width = plane.width, .height = plane.height};
    uf_linear sums = {.parameters = UF_LINEAR_LIMIT};
    uf_linear_fit fit;
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++) {
            double terms[UF_LINEAR_LIMIT], value = (double)uf_plane_row(plane, y)[x];
            terms_at(&s, x, y, terms);
            if (!isnan(value))
                uf_linear_add(&sums, terms, value, 1);
        }
    if (uf_linear_solve(&sums, &fit))
        for (int k = 0; k < UF_LINEAR_LIMIT; k++)
            s.value[k] = fit.value[k];
    return s;
}

uf_status uf_flat_smooth(uf_work *work, const uf_flat_smoother *s, uf_plane in, uf_plane out, uf_error *error)
{
    double sigma = s->sigma_px > 0 ? s->sigma_px : fill_px;
    surface trend = fit_surface(in);
    for (int y = 0; y < in.height; y++)
        for (int x = 0; x < in.width; x++) {
            double value = (double)uf_plane_row(in, y)[x];
            uf_plane_row(s->values, y)[x] = isnan(value) ? 0.0f : (float)(value - height_at(&trend, x, y));
            uf_plane_row(s->weights, y)[x] = isnan(value) ? 0.0f : 1.0f;
        }
    uf_status status = uf_smooth(work, s->values, sigma, s->values, error);
    if (status == UF_OK)
        status = uf_smooth(work, s->weights, sigma, s->weights, error);
    for (int y = 0; status == UF_OK && y < in.height; y++)
        for (int x = 0; x < in.width; x++) {
            float value = uf_plane_row(in, y)[x];
            double weight = (double)uf_plane_row(s->weights, y)[x], smooth = (double)NAN;
            if (weight > least_weight)
                smooth = height_at(&trend, x, y) + (double)uf_plane_row(s->values, y)[x] / weight;
            uf_plane_row(out, y)[x] = s->sigma_px > 0 || isnan(value) ? (float)smooth : value;
        }
    return status;
}

/* The root of the sum of squared weights, the same along both directions. Far above one pixel it is
 * 1 / (2 root(pi) sigma). */
double uf_flat_narrowing(double sigma_px)
{
    double sum = 0, squares = 0;
    if (!(sigma_px > 0))
        return 1;
    for (int k = -(int)(4 * sigma_px + 0.5); k <= (int)(4 * sigma_px + 0.5); k++) {
        double weight = exp(-0.5 * k * k / (sigma_px * sigma_px));
        sum += weight;
        squares += weight * weight;
    }
    return squares / (sum * sum);
}
