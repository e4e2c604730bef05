/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/counts.h"

#include <math.h>
#include <xxhash.h>

#include "fit/robust.h"

uint64_t uf_plane_fingerprint(uf_plane plane)
{
    uint64_t hash = 0;
    for (int y = 0; y < plane.height; y++)
        hash = XXH3_64bits_withSeed(uf_plane_row(plane, y), (size_t)plane.width * sizeof(float), hash);
    return hash;
}

int uf_plane_is_constant(uf_plane plane)
{
    float first = uf_plane_row(plane, 0)[0];
    for (int y = 0; y < plane.height; y++) {
        const float *row = uf_plane_row(plane, y);
        for (int x = 0; x < plane.width; x++)
            if (row[x] != first)
                return 0;
    }
    return 1;
}

static int64_t common_divisor(int64_t a, int64_t b)
{
    while (b) {
        int64_t rest = a % b;
        a = b;
        b = rest;
    }
    return a;
}

static int is_count(float value)
{
    return fabsf(value) < 1e9f && value == floorf(value);
}

void uf_count_step_add(uf_count_step *step, uf_plane frame)
{
    if (!step->started && !is_count(uf_plane_row(frame, 0)[0]))
        step->broken = 1;
    if (!step->started && !step->broken)
        step->first = (int64_t)uf_plane_row(frame, 0)[0];
    step->started = 1;
    for (int y = 0; y < frame.height && !step->broken; y++) {
        const float *row = uf_plane_row(frame, y);
        for (int x = 0; x < frame.width; x++) {
            if (!is_count(row[x])) {
                step->broken = 1;
                break;
            }
            int64_t difference = (int64_t)row[x] - step->first;
            if (step->divisor != 1 && difference)
                step->divisor = common_divisor(difference < 0 ? -difference : difference, step->divisor);
        }
    }
}

double uf_count_step_adu(const uf_count_step *step)
{
    return step->broken ? 0.0 : (double)step->divisor;
}

double uf_median_float(float *values, size_t n)
{
    return n ? (double)uf_select(values, n, (n - 1) / 2) : (double)NAN;
}
