/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/structure.h"

#include <math.h>

#include "fit/robust.h"
#include "image/smooth.h"

static const double smooth_px = 2;

static double slope2(uf_plane image, int x, int y)
{
    double across = (double)uf_plane_row(image, y)[x + 1] - (double)uf_plane_row(image, y)[x - 1];
    double down = (double)uf_plane_row(image, y + 1)[x] - (double)uf_plane_row(image, y - 1)[x];
    return across * across + down * down;
}

/* Rises to 1 over the outer sixteenth of each side. */
static double window(int i, int n)
{
    double edge = fmax(1, n / 16.0), from = fmin(i + 0.5, n - i - 0.5);
    return from < edge ? from / edge : 1;
}

uf_status uf_structure_centre(uf_work *work, uf_plane image, double *x_centre, double *y_centre, uf_error *error)
{
    uf_plane smooth;
    double *slopes, sum = 0, sum_x = 0, sum_y = 0;
    size_t count = 0;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_plane_take(work, image.width, image.height, &smooth, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)image.width * (size_t)image.height, sizeof *slopes, "edges", &slopes, error);
    if (status == UF_OK)
        status = uf_smooth(work, image, smooth_px, smooth, error);
    *x_centre = (image.width - 1) / 2.0;
    *y_centre = (image.height - 1) / 2.0;
    for (int y = 1; status == UF_OK && y < image.height - 1; y++)
        for (int x = 1; x < image.width - 1; x++)
            slopes[count++] = slope2(smooth, x, y);
    double usual = status == UF_OK ? uf_median(slopes, count) : 0;
    for (int y = 1; status == UF_OK && y < image.height - 1; y++)
        for (int x = 1; x < image.width - 1; x++) {
            double weight =
                fmax(0, slope2(smooth, x, y) - 3 * usual) * window(x, image.width) * window(y, image.height);
            sum += weight;
            sum_x += weight * x;
            sum_y += weight * y;
        }
    if (sum > 0) {
        *x_centre = sum_x / sum;
        *y_centre = sum_y / sum;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
