/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "correct/correct.h"
#include "correct/pixels.h"

/* ---- flat ------------------------------------------------------------------------------------ */

static uf_status flat_mean(uf_plane flat, const char *name, double *mean, uf_error *error)
{
    double sum = 0;
    for (int y = 0; y < flat.height; y++) {
        const float *row = uf_plane_row(flat, y);
        double row_sum = 0;
        for (int x = 0; x < flat.width; x++) {
            if (!(row[x] > 0.0f))
                return uf_fail(error, UF_INPUT,
                               "the %s flat is not above 0 at x %d, y %d; a flat is the positive image of an even "
                               "sample",
                               name, x, y);
            row_sum += (double)row[x];
        }
        sum += row_sum;
    }
    *mean = sum / ((double)flat.width * flat.height);
    return UF_OK;
}

/* ---- counts to image ------------------------------------------------------------------------- */

/* Pixels at either end of the camera's range. */
typedef struct fault_counts {
    int64_t saturated, clipped;
} fault_counts;

typedef struct correction {
    const uf_raw_channel *raw;
    double flat_mean;
    float *scratch;       /* two rows a hand */
    fault_counts *counts; /* one a hand */
} correction;

/* A count of 0 is what a camera writes for anything darker; float images have no such floor. */
static void note_faults(const float *values, double full_scale, uint8_t *fault, int n, fault_counts *counts)
{
    float top = (float)full_scale, bottom = isfinite(full_scale) ? 0.0f : -INFINITY;
    int saturated = 0, clipped = 0;
    for (int x = 0; x < n; x++) {
        int full = values[x] >= top, empty = values[x] <= bottom;
        fault[x] = (uint8_t)(full ? UF_PIXEL_SATURATED : empty ? UF_PIXEL_CLIPPED : UF_PIXEL_FINE);
        saturated += full;
        clipped += empty;
    }
    counts->saturated += saturated;
    counts->clipped += clipped;
}

static void correct_rows(void *context, int hand, int y0, int y1)
{
    correction *c = context;
    const uf_raw_channel *raw = c->raw;
    int width = raw->counts.width;
    float *offset = c->scratch + (size_t)hand * 2 * (size_t)width, *gain = offset + width;
    for (int x = 0; x < width; x++) {
        offset[x] = (float)raw->camera->offset_adu;
        gain[x] = 1.0f;
    }
    fault_counts found = {0};
    for (int y = y0; y < y1; y++) {
        float *counts = uf_plane_row(raw->counts, y);
        note_faults(counts, raw->full_scale_adu, uf_mask_row(raw->saturated, y), width, &found);
        const float *dark = raw->dark.data ? uf_plane_row(raw->dark, y) : offset;
        if (raw->flat.data) {
            const float *flat = uf_plane_row(raw->flat, y);
            float mean = (float)c->flat_mean;
            for (int x = 0; x < width; x++)
                gain[x] = mean / flat[x];
        }
        for (int x = 0; x < width; x++)
            counts[x] = (counts[x] - dark[x]) * gain[x];
    }
    c->counts[hand].saturated += found.saturated;
    c->counts[hand].clipped += found.clipped;
}

/* ---- bad pixels ------------------------------------------------------------------------------ */

float uf_neighbour_median(uf_plane image, uf_plane defects, int x, int y, int reach)
{
    float values[24];
    int count = 0;
    for (int v = y - reach; v <= y + reach; v++)
        for (int u = x - reach; u <= x + reach; u++) {
            if ((u == x && v == y) || u < 0 || v < 0 || u >= image.width || v >= image.height)
                continue;
            if (defects.data && uf_plane_row(defects, v)[u] != 0.0f)
                continue;
            float value = uf_plane_row(image, v)[u];
            int k = count++;
            for (; k > 0 && values[k - 1] > value; k--)
                values[k] = values[k - 1];
            values[k] = value;
        }
    if (!count)
        return NAN;
    return count % 2 ? values[count / 2] : (values[count / 2 - 1] + values[count / 2]) / 2.0f;
}

static uf_status replace_mapped(uf_plane image, uf_plane defects, const char *name, int64_t *replaced,
                                uf_error *error)
{
    for (int y = 0; y < image.height; y++) {
        const float *bad = uf_plane_row(defects, y);
        for (int x = 0; x < image.width; x++) {
            if (bad[x] == 0.0f)
                continue;
            float value = uf_neighbour_median(image, defects, x, y, 1);
            if (isnan(value))
                value = uf_neighbour_median(image, defects, x, y, 2);
            if (isnan(value))
                return uf_fail(error, UF_INPUT,
                               "the %s defect map has no good pixel around x %d, y %d; it marks too much (0 is good)",
                               name, x, y);
            uf_plane_row(image, y)[x] = value;
            ++*replaced;
        }
    }
    return UF_OK;
}

/* ---- display-scaled images ------------------------------------------------------------------- */

/* 8-bit values whose histogram was stretched: both ends in use and pixels piled up at 255. */
static int looks_display_scaled(const uf_raw_channel *raw)
{
    if (raw->full_scale_adu != 255)
        return 0;
    int64_t at_top = 0, at_bottom = 0;
    for (int y = 0; y < raw->counts.height; y++) {
        const float *row = uf_plane_row(raw->counts, y);
        for (int x = 0; x < raw->counts.width; x++) {
            at_top += row[x] >= 255.0f;
            at_bottom += row[x] <= 0.0f;
        }
    }
    double pixels = (double)raw->counts.width * raw->counts.height;
    return (double)at_top > 1e-4 * pixels && (double)at_bottom > 1e-4 * pixels;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status take_scratch(uf_work *work, correction *c, int width, uf_error *error)
{
    size_t hands = (size_t)uf_hands(work);
    uf_status status = uf_take(work, hands * 2 * (size_t)width, sizeof(float), "correction", &c->scratch, error);
    if (status == UF_OK)
        status = uf_take(work, hands, sizeof *c->counts, "correction", &c->counts, error);
    for (size_t k = 0; status == UF_OK && k < hands; k++)
        c->counts[k] = (fault_counts){0};
    return status;
}

static uf_noise noise_of_camera(const uf_camera_settings *camera)
{
    double gain = camera->gain_e_per_adu;
    return (uf_noise){.gain_e_per_adu = gain,
                      .read_adu = isnan(gain) ? 0.0 : camera->read_noise_e / gain,
                      .excess2 = camera->excess_noise * camera->excess_noise};
}

uf_status uf_correct_channel(uf_work *work, const uf_raw_channel *raw, uf_channel *channel, uf_error *error)
{
    int width = raw->counts.width, height = raw->counts.height;
    correction c = {.raw = raw, .flat_mean = 1.0};
    *channel = (uf_channel){.image = raw->counts, .noise = noise_of_camera(raw->camera)};
    channel->display_scaled = looks_display_scaled(raw);
    uf_status status = UF_OK;
    if (raw->flat.data)
        status = flat_mean(raw->flat, raw->name, &c.flat_mean, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (status == UF_OK)
        status = take_scratch(work, &c, width, error);
    if (status != UF_OK)
        return status;
    uf_rows_run(work, height, correct_rows, &c);
    fault_counts all = {0};
    for (size_t k = 0; k < (size_t)uf_hands(work); k++) {
        all.saturated += c.counts[k].saturated;
        all.clipped += c.counts[k].clipped;
    }
    uf_arena_back(&work->arena, mark);
    channel->saturated_fraction = (double)all.saturated / ((double)width * height);
    channel->clipped_fraction = (double)all.clipped / ((double)width * height);
    if (all.saturated || all.clipped)
        channel->saturated = raw->saturated;
    if (raw->defects.data)
        status = replace_mapped(channel->image, raw->defects, raw->name, &channel->replaced, error);
    return status;
}
