/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "correct/noise.h"

#include <math.h>
#include <stdlib.h>

#include "base/text.h"
#include "fit/linear.h"
#include "fit/robust.h"

enum { SAMPLE = 1 << 15, BINS = 16, LEAST_IN_BIN = 64 };

typedef struct place {
    double mean, difference;
} place;

static int by_mean(const void *a, const void *b)
{
    const place *p = a, *q = b;
    if (p->mean != q->mean)
        return p->mean < q->mean ? -1 : 1;
    return (p->difference > q->difference) - (p->difference < q->difference);
}

static place look_at(uf_plane image, int x, int y)
{
    static const double kernel[3][3] = {{1, -2, 1}, {-2, 4, -2}, {1, -2, 1}};
    place p = {0, 0};
    for (int v = -1; v <= 1; v++)
        for (int u = -1; u <= 1; u++) {
            double value = (double)uf_plane_row(image, y + v)[x + u];
            p.mean += value / 9;
            p.difference += kernel[v + 1][u + 1] * value;
        }
    p.difference = fabs(p.difference);
    return p;
}

static size_t sample(uf_plane image, place *places)
{
    int step = 1 + (int)sqrt((double)image.width * image.height / SAMPLE);
    size_t count = 0;
    for (int y = 1; y + 1 < image.height; y += step)
        for (int x = 1; x + 1 < image.width && count < SAMPLE; x += step)
            places[count++] = look_at(image, x, y);
    return count;
}

/* One point of the line a bin: its mean signal and its variance, weighed by how well a variance is known. */
static void add_bin(const place *places, size_t count, double scale, double *scratch, uf_linear *sums)
{
    double mean = 0;
    for (size_t k = 0; k < count; k++) {
        mean += places[k].mean / (double)count;
        scratch[k] = places[k].difference;
    }
    double sigma = uf_median(scratch, count) / 0.6744897501960817 / 6, variance = sigma * sigma;
    const double x[] = {1, mean / scale};
    if (variance > 0)
        uf_linear_add(sums, x, variance, (double)count / (variance * variance));
}

int uf_noise_from_image(uf_work *work, uf_channel *channel, uf_status *status, uf_error *error)
{
    place *places;
    double *scratch;
    int told = 0;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    *status = uf_take(work, SAMPLE, sizeof *places, "the noise", &places, error);
    if (*status == UF_OK)
        *status = uf_take(work, SAMPLE, sizeof *scratch, "the noise", &scratch, error);
    if (*status == UF_OK) {
        size_t count = sample(channel->image, places), in_bin = count / BINS;
        uf_linear sums = {.parameters = 2};
        uf_linear_fit line;
        qsort(places, count, sizeof *places, by_mean);
        double scale = count ? fmax(1, fabs(places[count - 1].mean)) : 1;
        for (int k = 0; in_bin >= LEAST_IN_BIN && k < BINS; k++)
            add_bin(places + (size_t)k * in_bin, in_bin, scale, scratch, &sums);
        told = uf_linear_solve(&sums, &line) && line.value[1] > 3 * line.sd[1];
        if (told) {
            channel->noise.gain_e_per_adu = uf_round_digits(scale / line.value[1], 9);
            channel->noise.excess2 = 1;
            channel->noise.read_adu = uf_round_digits(sqrt(fmax(0, line.value[0])), 9);
        }
    }
    uf_arena_back(&work->arena, mark);
    return told;
}
