/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A flat from its pixels: smoothed, filled, normalised, and how sure and how even it is. */
#include "calibrate/flat.h"

#include <math.h>

#include "base/constants.h"
#include "calibrate/flat_parts.h"
#include "fit/chi_square.h"
#include "fit/robust.h"

/* Shares of an image at full scale that make it useless: it flattens what it should show. Cells that are
 * saturated do not count anyway, as long as they are few. */
static const double saturated_most = 0.001, saturated_cells_most = 0.05;

/* The background is found as long as it is among the lowest values of every pixel. In simulated fields that holds
 * up to half of them covered, with twelve background values a pixel on average; with nine, some pixels have too
 * few by chance, and at 63 % whole places are cells while nothing else says so. A film of which a fifth does not
 * agree is not even. */
static const double rejected_cells_most = 0.5, background_least = 12, rejected_most = 0.2;

/* ---- saturation ------------------------------------------------------------------------------ */

typedef struct top_counts {
    double highest, at, next; /* highest count, pixels there, pixels at the next lower count that occurs */
} top_counts;

/* Row y of image k; bad pixels are given the lowest value there is. */
static void row_of_good(const uf_flat_stack *stack, uf_plane defects, int k, int y, float *row)
{
    uf_flat_row(stack, k, y, row);
    for (int x = 0; defects.data && x < stack->width; x++)
        if (uf_plane_row(defects, y)[x] != 0.0f)
            row[x] = -INFINITY;
}

static top_counts look_at_top(const uf_flat_stack *stack, const uf_flat_request *request, int k, float *row)
{
    float highest = -INFINITY, second = -INFINITY;
    for (int y = 0; y < stack->height; y++) {
        row_of_good(stack, request->defects, k, y, row);
        for (int x = 0; x < stack->width; x++) {
            if (row[x] <= second || row[x] == highest)
                continue;
            second = row[x] > highest ? highest : row[x];
            highest = row[x] > highest ? row[x] : highest;
        }
    }
    top_counts top = {.highest = (double)highest};
    double level = top.highest >= request->full_scale_adu ? request->full_scale_adu : top.highest;
    for (int y = 0; y < stack->height; y++) {
        row_of_good(stack, request->defects, k, y, row);
        for (int x = 0; x < stack->width; x++) {
            top.at += (double)row[x] >= level;
            top.next += row[x] == second;
        }
    }
    return top;
}

/* Fewer pixels at the highest count are chance. */
enum { LEAST_AT_CEILING = 10 };

/* At full scale as given, or where counts pile up: twice as many at the highest as at the next lower one. */
static uf_status check_saturation(const uf_flat_stack *stack, const uf_flat_request *request, float *row,
                                  uf_error *error)
{
    double most = request->sample == UF_FLAT_CELLS ? saturated_cells_most : saturated_most;
    for (int k = 0; k < stack->count; k++) {
        top_counts top = look_at_top(stack, request, k, row);
        int full = top.highest >= request->full_scale_adu || (top.at >= LEAST_AT_CEILING && top.at > 2 * top.next);
        double share = top.at / ((double)stack->width * stack->height);
        if (full && share > most)
            return uf_fail(
                error, UF_INPUT,
                "image %d is saturated: %.2g %% of its pixels are at %.6g ADU, %.2g %% are allowed; expose "
                "shorter or use less light",
                k + 1, 100 * share, top.highest, 100 * most);
    }
    return UF_OK;
}

/* ---- how sure -------------------------------------------------------------------------------- */

/* Median of a plane's values times `scale`; those that are missing do not count. */
static double median_of_plane(uf_plane plane, float *scratch)
{
    size_t n = 0;
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            if (!isnan(uf_plane_row(plane, y)[x]))
                scratch[n++] = uf_plane_row(plane, y)[x];
    return uf_median_float(scratch, n);
}

/* Robust sd of the halves' difference relative to the flat. What both halves differ by as a whole is a level and
 * no noise of the flat. */
static double noise_of_halves(uf_plane difference, uf_plane flat, float *scratch)
{
    for (int y = 0; y < flat.height; y++)
        for (int x = 0; x < flat.width; x++)
            uf_plane_row(difference, y)[x] /= uf_plane_row(flat, y)[x];
    float middle = (float)median_of_plane(difference, scratch);
    for (int y = 0; y < flat.height; y++)
        for (int x = 0; x < flat.width; x++)
            uf_plane_row(difference, y)[x] = fabsf(uf_plane_row(difference, y)[x] - middle);
    return UF_MAD_TO_SD * median_of_plane(difference, scratch);
}

/* What would make a flat good enough that is not. */
static void tell_the_mend(const uf_flat_request *request, uf_flat *flat)
{
    double excess = flat->noise_halves / UF_FLAT_NOISE_MOST;
    flat->too_noisy = excess > 1;
    if (!flat->too_noisy)
        return;
    flat->images_wanted = (int)fmin(1e9, ceil(flat->images * excess * excess));
    double sigma = request->smooth_px > 0 ? request->smooth_px * excess : excess / (2 * sqrt(UF_PI));
    sigma = fmax(sigma, 0.5); /* narrower ones hardly smooth */
    flat->smooth_wanted_px = sigma <= UF_FLAT_SMOOTH_MOST ? ceil(10 * sigma) / 10 : (double)NAN;
}

/* ---- how even -------------------------------------------------------------------------------- */

static uf_status normalise(uf_plane image, uf_error *error)
{
    double sum = 0;
    for (int y = 0; y < image.height; y++) {
        double row_sum = 0;
        for (int x = 0; x < image.width; x++) {
            float value = uf_plane_row(image, y)[x];
            if (isnan(value))
                return uf_fail(
                    error, UF_INPUT,
                    "there is no good pixel around x %d, y %d to take the flat from; the defect map marks too much "
                    "(0 is good), or smooth the flat",
                    x, y);
            row_sum += (double)value;
        }
        sum += row_sum;
    }
    double mean = sum / ((double)image.width * image.height);
    if (!(mean > 0))
        return uf_fail(error, UF_INPUT, "the flat has a mean of %.3g; check the dark image or offset", mean);
    for (int y = 0; y < image.height; y++)
        for (int x = 0; x < image.width; x++)
            uf_plane_row(image, y)[x] = (float)((double)uf_plane_row(image, y)[x] / mean);
    return UF_OK;
}

static void find_extremes(uf_flat *flat, float *scratch)
{
    static const double q[] = {0.01, 0.99};
    double ends[2];
    size_t n = 0;
    flat->lowest = INFINITY;
    flat->highest = -INFINITY;
    for (int y = 0; y < flat->image.height; y++)
        for (int x = 0; x < flat->image.width; x++) {
            double value = (double)uf_plane_row(flat->image, y)[x];
            scratch[n++] = (float)value;
            flat->highest = fmax(flat->highest, value);
            if (value < flat->lowest) {
                flat->lowest = value;
                flat->lowest_x = x;
                flat->lowest_y = y;
            }
        }
    uf_quantiles(scratch, n, n, q, ends, 2);
    flat->unevenness = ends[0] > 0 ? ends[1] / ends[0] : (double)NAN;
}

/* A place as dark as this multiplies noise by twenty; a few pixels are defects, a region is a corner. */
static uf_status check_lowest(const uf_flat *flat, uf_error *error)
{
    double low = 0, pixels = (double)flat->image.width * flat->image.height;
    if (flat->lowest > UF_FLAT_LOWEST)
        return UF_OK;
    for (int y = 0; y < flat->image.height; y++)
        for (int x = 0; x < flat->image.width; x++)
            low += (double)uf_plane_row(flat->image, y)[x] <= UF_FLAT_LOWEST;
    return uf_fail(
        error, UF_INPUT, "the flat falls to %.3g of its mean at x %d, y %d (%.0f pixels are at or below %g); %s",
        flat->lowest, flat->lowest_x, flat->lowest_y, low, UF_FLAT_LOWEST,
        low > 1e-3 * pixels ? "crop the images to what the light reaches, or check the dark image or offset"
                            : "these look like dead pixels: give a defect map, or smooth the flat");
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status check_request(const uf_flat_stack *stack, const uf_flat_request *request, uf_error *error)
{
    const uf_plane planes[] = {request->dark, request->defects};
    static const char *const names[] = {"dark image", "defect map"};
    if (stack->count < UF_FLAT_IMAGES_LEAST)
        return uf_fail(
            error, UF_INPUT,
            "%d image%s; a flat needs at least %d, so that what lies on the sample can be told from the light (10 or "
            "more are better, for cells 30)",
            stack->count, stack->count == 1 ? "" : "s", UF_FLAT_IMAGES_LEAST);
    for (int k = 0; k < 2; k++)
        if (planes[k].data && (planes[k].width != stack->width || planes[k].height != stack->height))
            return uf_fail(error, UF_INPUT, "the %s is %d x %d pixels, the images %d x %d; it needs their size",
                           names[k], planes[k].width, planes[k].height, stack->width, stack->height);
    if (!(request->smooth_px >= 0 && request->smooth_px <= UF_FLAT_SMOOTH_MOST))
        return uf_fail(error, UF_INPUT, "smoothing by %g pixels; it is 0 to %g", request->smooth_px,
                       UF_FLAT_SMOOTH_MOST);
    return UF_OK;
}

typedef struct flat_scratch {
    uf_flat_smoother smoother;
    uf_flat_pixels pixels;
    float *values;
} flat_scratch;

static uf_status take_results(uf_work *work, const uf_flat_stack *stack, uf_flat *flat, uf_error *error)
{
    uf_status status = uf_plane_take(work, stack->width, stack->height, &flat->image, error);
    if (status == UF_OK)
        status = uf_plane_take(work, stack->width, stack->height, &flat->noise, error);
    if (status == UF_OK)
        status = uf_plane_take(work, stack->width, stack->height, &flat->count, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)stack->count, sizeof(double), "a flat", &flat->level_adu, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)stack->count, sizeof(double), "a flat", &flat->unlikeness, error);
    return status;
}

static uf_status take_scratch(uf_work *work, const uf_flat_stack *stack, flat_scratch *s, uf_error *error)
{
    size_t pixels = (size_t)stack->width * (size_t)stack->height;
    uf_status status = uf_plane_take(work, stack->width, stack->height, &s->smoother.values, error);
    if (status == UF_OK)
        status = uf_plane_take(work, stack->width, stack->height, &s->smoother.weights, error);
    if (status == UF_OK)
        status = uf_plane_take(work, stack->width, stack->height, &s->pixels.half_difference, error);
    if (status == UF_OK)
        status = uf_take(work, pixels, sizeof(float), "a flat", &s->values, error);
    return status;
}

/* Noise, gaps and rejected values of the flat as found, before it is smoothed. */
static void describe_pixels(const uf_flat_stack *stack, const flat_scratch *s, uf_flat *flat)
{
    double missing = 0, pixels = (double)stack->width * stack->height, degrees = stack->count - 1;
    for (int y = 0; y < stack->height; y++)
        for (int x = 0; x < stack->width; x++)
            missing += isnan(uf_plane_row(flat->image, y)[x]) ? 1 : 0;
    flat->never_kept_share = missing / pixels;
    flat->rejected_share = 1 - s->pixels.kept / (fmax(1, pixels - missing) * stack->count);
    /* the median of sample sds is below the sd: by the root of the median of chi-square over its degrees */
    flat->noise_pixel =
        median_of_plane(flat->noise, s->values) / sqrt(uf_chi_square_quantile(0.5, degrees) / degrees);
}

static uf_status check_rejected(const uf_flat_request *request, const uf_flat *flat, uf_error *error)
{
    double left = (1 - flat->rejected_share) * flat->images, percent = 100 * flat->rejected_share;
    if (request->sample != UF_FLAT_CELLS && flat->rejected_share > rejected_most)
        return uf_fail(
            error, UF_INPUT,
            "%.0f %% of the values stand out from the others at their pixel; is the sample even, and what lies on it "
            "elsewhere in each image? (fields of cells are another kind of sample)",
            percent);
    if (request->sample == UF_FLAT_CELLS && (flat->rejected_share > rejected_cells_most || left < background_least))
        return uf_fail(
            error, UF_INPUT,
            "cells cover %.0f %% of the %d fields, which leaves %.1f values of background a pixel; at least %.0f, "
            "and %.0f %% of the area, are needed: take more fields, sparser ones, or a film",
            percent, flat->images, left, background_least, 100 * (1 - rejected_cells_most));
    return UF_OK;
}

/* What smoothing once more would change is about what it has changed. */
static uf_status find_bias(uf_work *work, flat_scratch *s, uf_flat *flat, uf_error *error)
{
    static const double q = 0.99;
    uf_plane again = s->pixels.half_difference;
    size_t n = 0;
    if (!(s->smoother.sigma_px > 0))
        return UF_OK;
    uf_status status = uf_flat_smooth(work, &s->smoother, flat->image, again, error);
    for (int y = 0; status == UF_OK && y < again.height; y++)
        for (int x = 0; x < again.width; x++)
            s->values[n++] = fabsf(uf_plane_row(again, y)[x] / uf_plane_row(flat->image, y)[x] - 1.0f);
    if (status == UF_OK)
        uf_quantiles(s->values, n, n, &q, &flat->smooth_bias, 1);
    return status;
}

static uf_status make(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request, flat_scratch *s,
                      uf_flat *flat, uf_error *error)
{
    uf_flat_levels levels = {.level_adu = flat->level_adu, .unlikeness = flat->unlikeness};
    uf_status status = check_saturation(stack, request, s->values, error);
    if (status == UF_OK)
        status = uf_flat_find_levels(work, stack, request, &levels, error);
    if (status == UF_OK)
        status = uf_flat_find_pixels(work, stack, request, &levels, &s->pixels, error);
    if (status != UF_OK)
        return status;
    describe_pixels(stack, s, flat);
    status = check_rejected(request, flat, error);
    if (status == UF_OK)
        status = uf_flat_smooth(work, &s->smoother, flat->image, flat->image, error);
    if (status == UF_OK)
        status = uf_flat_smooth(work, &s->smoother, s->pixels.half_difference, s->pixels.half_difference, error);
    if (status == UF_OK) {
        flat->noise_halves = noise_of_halves(s->pixels.half_difference, flat->image, s->values);
        flat->noise_expected = flat->noise_pixel * uf_flat_narrowing(request->smooth_px);
        status = normalise(flat->image, error);
    }
    if (status != UF_OK)
        return status;
    find_extremes(flat, s->values);
    tell_the_mend(request, flat);
    status = check_lowest(flat, error);
    return status == UF_OK ? find_bias(work, s, flat, error) : status;
}

uf_status uf_flat_make(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request, uf_flat *flat,
                       uf_error *error)
{
    flat_scratch s = {.smoother.sigma_px = request->smooth_px};
    *flat = (uf_flat){.images = stack->count};
    uf_status status = check_request(stack, request, error);
    if (status != UF_OK)
        return status;
    uf_arena_mark start = uf_arena_now(&work->arena);
    status = take_results(work, stack, flat, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (status == UF_OK)
        status = take_scratch(work, stack, &s, error);
    s.pixels.image = flat->image;
    s.pixels.noise = flat->noise;
    s.pixels.count = flat->count;
    if (status == UF_OK)
        status = make(work, stack, request, &s, flat, error);
    uf_arena_back(&work->arena, status == UF_OK ? mark : start);
    if (status != UF_OK)
        *flat = (uf_flat){0};
    return status;
}
