/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How bright each image is, and whether it shows the same as the others: on a lattice of pixels, since a level
 * needs no more than some ten thousand of them. */
#include <math.h>

#include "calibrate/flat_parts.h"
#include "fit/robust.h"

/* Levels and shape hold each other after a few rounds: medians move less each time. */
enum { LATTICE = 1 << 14, ROUNDS = 4, TILES = 8 };

/* A pixel with less signal than half its noise says nothing about a flat, and an image with a tenth of the light
 * of the others was taken by accident. */
static const double least_signal = 0.5, least_of_median = 0.1;

/* Departures over tiles that make an image unlike the rest: by 5 %, and five times what is usual among them. */
static const double unlike_share = 0.05, unlike_times = 5;

typedef struct lattice {
    const uf_flat_stack *stack;
    const uf_flat_request *request;
    int step, across, down;
    size_t points;
    int images;
    float *value;   /* [image][point]: signal */
    float *shape;   /* [point]: the flat there, NaN where there is none */
    float *scratch; /* as many as images or points, whichever is more */
    double *noise;  /* [image]: sd of its values from its level */
    uf_flat_levels *levels;
} lattice;

static float *values_of(const lattice *l, int image)
{
    return l->value + (size_t)image * l->points;
}

static void fill(lattice *l, float *row)
{
    for (int k = 0; k < l->images; k++) {
        float *value = values_of(l, k);
        for (int j = 0; j < l->down; j++) {
            uf_flat_signal_row(l->stack, l->request, k, j * l->step, row);
            for (int i = 0; i < l->across; i++)
                *value++ = row[i * l->step];
        }
    }
}

/* Defects have no shape and so count for nothing. */
static void mask_defects(lattice *l)
{
    uf_plane defects = l->request->defects;
    for (size_t p = 0; p < l->points; p++) {
        int x = (int)(p % (size_t)l->across) * l->step, y = (int)(p / (size_t)l->across) * l->step;
        int bad = defects.data && uf_plane_row(defects, y)[x] != 0.0f;
        l->shape[p] = bad ? NAN : 1.0f;
    }
}

/* The middle of an image's values over the shape: its level, and the noise about it (in the first round, when the
 * shape is 1 everywhere, its unevenness too). */
static uf_middle level_of(const lattice *l, int image)
{
    const float *value = values_of(l, image);
    size_t n = 0;
    for (size_t p = 0; p < l->points; p++)
        if (l->shape[p] > 0.0f)
            l->scratch[n++] = value[p] / l->shape[p];
    if (!n)
        return (uf_middle){.median = (double)NAN};
    return uf_flat_middle(l->request->sample, l->scratch, n, 0);
}

static void find_levels(lattice *l)
{
    for (int k = 0; k < l->images; k++) {
        uf_middle middle = level_of(l, k);
        l->levels->level_adu[k] = middle.median;
        l->noise[k] = middle.sd;
    }
}

/* The shape from all images at their levels. */
static void find_shape(lattice *l)
{
    for (size_t p = 0; p < l->points; p++) {
        size_t n = 0;
        if (isnan(l->shape[p]))
            continue;
        for (int k = 0; k < l->images; k++)
            l->scratch[n++] = (float)((double)values_of(l, k)[p] / l->levels->level_adu[k]);
        l->shape[p] = (float)uf_flat_middle(l->request->sample, l->scratch, n, l->levels->typical_sd).median;
    }
}

/* Noise of a value where the flat is 1, from each image's thousands of pixels and not from the few values of one;
 * shot noise grows with the root of the light. */
static double typical_noise(const lattice *l, double *scratch)
{
    double rounding = uf_count_step_adu(&l->stack->step) / sqrt(12);
    for (int k = 0; k < l->images; k++) {
        const float *value = values_of(l, k);
        size_t n = 0;
        for (size_t p = 0; p < l->points; p++)
            if (l->shape[p] > 0.0f) {
                double shape = (double)l->shape[p];
                l->scratch[n++] = (float)(((double)value[p] / l->levels->level_adu[k] - shape) / sqrt(shape));
            }
        scratch[k] = n ? uf_flat_spread(l->request->sample, l->scratch, n, rounding / l->levels->level_adu[k]) : 0;
    }
    return uf_median(scratch, (size_t)l->images);
}

/* ---- images that do not belong --------------------------------------------------------------- */

static uf_status check_light(const lattice *l, double signal, double *scratch, uf_error *error)
{
    const double *level = l->levels->level_adu;
    for (int k = 0; k < l->images; k++)
        scratch[k] = level[k];
    double middle = uf_median(scratch, (size_t)l->images);
    for (int k = 0; k < l->images; k++) {
        if (level[k] > fmax(0, fmax(least_of_median * middle, signal * l->noise[k])))
            continue;
        return uf_fail(
            error, UF_INPUT,
            "image %d is hardly brighter than the dark: %.4g ADU above it, with noise of %.3g and %.4g ADU in the "
            "middle one of the %d images; expose longer, or check the dark image or offset",
            k + 1, level[k], l->noise[k], middle, l->images);
    }
    return UF_OK;
}

/* How an image departs from the flat over tiles; the tiles' middles leave single things out. Cells may fill tiles, so
 * there only what is darker counts: cells never are. */
static double unlikeness_of(const lattice *l, int image, double *departures)
{
    const float *value = values_of(l, image);
    size_t count = 0;
    for (int tile = 0; tile < TILES * TILES; tile++) {
        int i0 = tile % TILES * l->across / TILES, i1 = (tile % TILES + 1) * l->across / TILES;
        int j0 = tile / TILES * l->down / TILES, j1 = (tile / TILES + 1) * l->down / TILES;
        size_t n = 0;
        for (int j = j0; j < j1; j++)
            for (int i = i0; i < i1; i++) {
                size_t p = (size_t)j * (size_t)l->across + (size_t)i;
                if (l->shape[p] > 0.0f)
                    l->scratch[n++] = (float)((double)(value[p] / l->shape[p]) / l->levels->level_adu[image] - 1);
            }
        if (!n)
            continue;
        double departure = uf_flat_middle(l->request->sample, l->scratch, n, 0).median;
        departures[count++] = l->request->sample == UF_FLAT_CELLS ? fmax(0, -departure) : fabs(departure);
    }
    uf_sort(departures, count);
    return uf_sorted_quantile(departures, count, 0.75);
}

static uf_status check_likeness(const lattice *l, double *scratch, uf_error *error)
{
    double *unlike = l->levels->unlikeness, departures[TILES * TILES];
    int worst = 0;
    for (int k = 0; k < l->images; k++) {
        scratch[k] = unlike[k] = unlikeness_of(l, k, departures);
        worst = unlike[k] > unlike[worst] ? k : worst;
    }
    double usual = uf_median(scratch, (size_t)l->images);
    if (unlike[worst] <= fmax(unlike_share, unlike_times * usual))
        return UF_OK;
    return uf_fail(
        error, UF_INPUT,
        "image %d is unlike the rest: over most of the field it departs from the flat of all by %.1f %%, the others "
        "by %.1f %%; leave it out, or make two flats if the light was changed",
        worst + 1, 100 * unlike[worst], 100 * usual);
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status find(lattice *l, double *scratch, uf_error *error)
{
    uf_flat_levels *levels = l->levels;
    mask_defects(l);
    find_levels(l);
    uf_status status = check_light(l, 0, scratch, error);
    for (int round = 0; status == UF_OK && round < ROUNDS; round++) {
        find_shape(l);
        find_levels(l);
        levels->typical_sd = typical_noise(l, scratch);
    }
    if (status == UF_OK)
        status = check_light(l, least_signal, scratch, error);
    return status == UF_OK ? check_likeness(l, scratch, error) : status;
}

uf_status uf_flat_find_levels(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request,
                              uf_flat_levels *levels, uf_error *error)
{
    lattice l = {.stack = stack, .request = request, .images = stack->count, .levels = levels, .step = 1};
    while ((double)stack->width * stack->height > (double)LATTICE * l.step * l.step)
        l.step++;
    l.across = (stack->width - 1) / l.step + 1;
    l.down = (stack->height - 1) / l.step + 1;
    l.points = (size_t)l.across * (size_t)l.down;
    size_t longest = l.points > (size_t)l.images ? l.points : (size_t)l.images;
    float *row = NULL;
    double *scratch = NULL;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, l.points * (size_t)l.images, sizeof(float), "a flat's levels", &l.value, error);
    if (status == UF_OK)
        status = uf_take(work, l.points, sizeof(float), "a flat's levels", &l.shape, error);
    if (status == UF_OK)
        status = uf_take(work, longest, sizeof(float), "a flat's levels", &l.scratch, error);
    if (status == UF_OK)
        status = uf_take(work, longest, sizeof(double), "a flat's levels", &scratch, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)l.images, sizeof(double), "a flat's levels", &l.noise, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)stack->width, sizeof(float), "a flat's levels", &row, error);
    if (status == UF_OK) {
        fill(&l, row);
        status = find(&l, scratch, error);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
