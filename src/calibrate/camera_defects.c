/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The map of pixels that lie. Those of the dark frames are found in camera_dark.c, where they are left out of all
 * figures; this adds those that answer light unlike their neighbours. */
#include <math.h>

#include "calibrate/camera_parts.h"

/* A flat corrects what differs by less: at four fifths of the light a pixel's noise is an eighth larger, no more.
 * And six robust sd of all pixels' departures, noise included, so that dim or few flats do not condemn good
 * pixels. */
static const double response_share = 0.2, response_sigma = 6;

/* More is no map of defects but the wrong frames. */
static const double share_most = 0.1;

enum { REACH = 2, NEIGHBOURS = (2 * REACH + 1) * (2 * REACH + 1) };

typedef struct comparing {
    const uf_dark *dark;
    const uf_response *response;
    float *departure; /* response over that of the neighbours, less 1; 0 where there is nothing to compare with */
} comparing;

/* The median of the good pixels around: a bad neighbour, or a few, do not move it, and dust is wider. */
static double around(const comparing *c, int x, int y)
{
    const uf_response *r = c->response;
    float values[NEIGHBOURS];
    size_t n = 0;
    for (int v = y - REACH; v <= y + REACH; v++)
        for (int u = x - REACH; u <= x + REACH; u++) {
            int inside = u >= 0 && v >= 0 && u < r->width && v < r->height && !(u == x && v == y);
            if (inside && !uf_mask_row(c->dark->defects, v)[u])
                values[n++] = (float)(r->signal[(size_t)v * (size_t)r->width + (size_t)u]);
        }
    return uf_median_float(values, n);
}

static void compare_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    const comparing *c = context;
    size_t width = (size_t)c->response->width;
    for (int y = y0; y < y1; y++)
        for (size_t x = 0; x < width; x++) {
            double near = around(c, (int)x, y), own = c->response->signal[(size_t)y * width + x];
            c->departure[(size_t)y * width + x] = near > 0 ? (float)(own / near - 1) : 0.0f;
        }
}

/* Marks pixels of unlike response in `map`, which holds those of the dark frames. */
static uf_status mark_response(uf_work *work, comparing *c, uf_plane map, uf_error *error)
{
    size_t pixels = (size_t)map.width * (size_t)map.height;
    float *scratch;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, pixels, sizeof(float), "the map of defects", &c->departure, error);
    if (status == UF_OK)
        status = uf_take(work, pixels, sizeof(float), "the map of defects", &scratch, error);
    if (status == UF_OK) {
        uf_rows_run(work, map.height, compare_rows, c);
        for (size_t k = 0; k < pixels; k++)
            scratch[k] = fabsf(c->departure[k]);
        double sd = UF_MAD_TO_SD * uf_median_float(scratch, pixels), most = fmax(response_share, response_sigma * sd);
        for (int y = 0; y < map.height; y++)
            for (int x = 0; x < map.width; x++)
                if ((double)fabsf(c->departure[(size_t)y * (size_t)map.width + (size_t)x]) > most)
                    uf_plane_row(map, y)[x] += (float)UF_DEFECT_RESPONSE;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

static void count_defects(uf_plane map, uf_defect_counts *counts)
{
    *counts = (uf_defect_counts){0};
    for (int y = 0; y < map.height; y++)
        for (int x = 0; x < map.width; x++) {
            int bits = (int)uf_plane_row(map, y)[x];
            counts->dark += (bits & UF_DEFECT_DARK) != 0;
            counts->noise += (bits & UF_DEFECT_NOISE) != 0;
            counts->response += (bits & UF_DEFECT_RESPONSE) != 0;
            counts->any += bits != 0;
        }
}

uf_status uf_camera_defects(uf_work *work, const uf_dark *dark, const uf_response *response, uf_plane map,
                            uf_defect_counts *counts, uf_error *error)
{
    comparing c = {.dark = dark, .response = response};
    uf_status status = UF_OK;
    if (map.width != dark->frames->width || map.height != dark->frames->height)
        return uf_fail(error, UF_INPUT,
                       "the map of defects is %d x %d pixels, the dark frames %d x %d; it needs their size",
                       map.width, map.height, dark->frames->width, dark->frames->height);
    for (int y = 0; y < map.height; y++)
        for (int x = 0; x < map.width; x++)
            uf_plane_row(map, y)[x] = (float)uf_mask_row(dark->defects, y)[x];
    if (response && response->pairs > 0)
        status = mark_response(work, &c, map, error);
    if (status != UF_OK)
        return status;
    count_defects(map, counts);
    double pixels = (double)map.width * map.height;
    if ((double)counts->any > share_most * pixels)
        return uf_fail(
            error, UF_INPUT,
            "%.0f of %.0f pixels would be bad (%lld hot, %lld noisy, %lld of unlike response); that is no map of "
            "defects: were the frames dark, the flats even and in focus on nothing?",
            (double)counts->any, pixels, (long long)counts->dark, (long long)counts->noise,
            (long long)counts->response);
    return UF_OK;
}
