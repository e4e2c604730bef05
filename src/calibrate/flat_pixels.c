/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The flat of each pixel from its values over all images. */
#include <math.h>

#include "calibrate/flat_parts.h"

/* With fewer images than this the value is the median, whose sd is so many times the mean's (order statistics of
 * 3 and 4 normal values: variances 0.4487 and 0.2982 of one, against 1/3 and 1/4). */
enum { LEAST_FOR_MEAN = 5 };
static const double median_of_three = 1.160, median_of_four = 1.092;

typedef struct finding {
    const uf_flat_stack *stack;
    const uf_flat_request *request;
    const uf_flat_levels *levels;
    uf_flat_pixels *pixels;
    float *row;       /* one a hand */
    float *values;    /* [pixel of the row][image] at their levels, a hand */
    float *reordered; /* one pixel's, a hand */
    int64_t *kept;    /* values kept, a hand */
} finding;

/* One row of all images, turned so that a pixel's values lie together. */
static void gather_row(const finding *f, int y, float *row, float *values)
{
    int width = f->stack->width;
    size_t images = (size_t)f->stack->count;
    for (size_t k = 0; k < images; k++) {
        double scale = 1 / f->levels->level_adu[k];
        uf_flat_signal_row(f->stack, f->request, (int)k, y, row);
        for (int x = 0; x < width; x++)
            values[(size_t)x * images + k] = (float)((double)row[x] * scale);
    }
}

/* Mean and squares of the kept values, all and by halves (images 1, 3, 5.. and 2, 4, 6..). */
typedef struct kept_values {
    double count, mean, squares;
    double half_count[2], half_mean[2];
} kept_values;

static kept_values mean_of_kept(const float *values, int n, const uf_middle *middle)
{
    kept_values kept = {0};
    double half[2] = {0, 0};
    for (int k = 0; k < n; k++)
        if ((double)values[k] >= middle->low && (double)values[k] <= middle->high) {
            half[k % 2] += (double)values[k];
            kept.half_count[k % 2]++;
        }
    kept.count = kept.half_count[0] + kept.half_count[1];
    kept.mean = (half[0] + half[1]) / kept.count;
    for (int h = 0; h < 2; h++)
        kept.half_mean[h] = half[h] / kept.half_count[h];
    for (int k = 0; k < n; k++)
        if ((double)values[k] >= middle->low && (double)values[k] <= middle->high)
            kept.squares += ((double)values[k] - kept.mean) * ((double)values[k] - kept.mean);
    return kept;
}

static void write_pixel(const finding *f, int x, int y, const kept_values *kept, const uf_middle *middle)
{
    const uf_flat_pixels *out = f->pixels;
    int n = f->stack->count;
    double value = n < LEAST_FOR_MEAN ? middle->median : kept->mean;
    double sd = kept->count > 1 ? sqrt(kept->squares / (kept->count - 1) / kept->count) : (double)NAN;
    double as_median = n == 3 ? median_of_three : n == 4 ? median_of_four : 1;
    double a = kept->half_count[0], b = kept->half_count[1];
    /* Half the difference has the variance (1/a + 1/b) / 4 of one value, the mean 1 / (a + b). */
    double half = (kept->half_mean[0] - kept->half_mean[1]) / 2 * sqrt(4 * a * b) / (a + b) * as_median;
    uf_plane_row(out->image, y)[x] = (float)value;
    uf_plane_row(out->noise, y)[x] = value > 0 ? (float)(sd * as_median / value) : NAN;
    uf_plane_row(out->count, y)[x] = (float)kept->count;
    uf_plane_row(out->half_difference, y)[x] = a > 0 && b > 0 ? (float)half : NAN;
}

static void write_nothing(const uf_flat_pixels *out, int x, int y)
{
    uf_plane_row(out->image, y)[x] = uf_plane_row(out->noise, y)[x] = uf_plane_row(out->half_difference, y)[x] = NAN;
    uf_plane_row(out->count, y)[x] = 0;
}

static void find_rows(void *context, int hand, int y0, int y1)
{
    finding *f = context;
    int width = f->stack->width, n = f->stack->count;
    size_t images = (size_t)n;
    float *row = f->row + (size_t)hand * (size_t)width;
    float *values = f->values + (size_t)hand * (size_t)width * images,
          *reordered = f->reordered + (size_t)hand * images;
    for (int y = y0; y < y1; y++) {
        gather_row(f, y, row, values);
        const float *bad = f->request->defects.data ? uf_plane_row(f->request->defects, y) : NULL;
        for (int x = 0; x < width; x++) {
            if (bad && bad[x] != 0.0f) {
                write_nothing(f->pixels, x, y);
                continue;
            }
            const float *own = values + (size_t)x * images;
            for (size_t k = 0; k < images; k++)
                reordered[k] = own[k];
            uf_middle middle = uf_flat_middle(f->request->sample, reordered, images, f->levels->typical_sd);
            kept_values kept = mean_of_kept(own, n, &middle);
            write_pixel(f, x, y, &kept, &middle);
            f->kept[hand] += (int64_t)kept.count;
        }
    }
}

uf_status uf_flat_find_pixels(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request,
                              const uf_flat_levels *levels, uf_flat_pixels *pixels, uf_error *error)
{
    finding f = {.stack = stack, .request = request, .levels = levels, .pixels = pixels};
    size_t hands = (size_t)uf_hands(work), width = (size_t)stack->width, images = (size_t)stack->count;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, hands * width, sizeof(float), "a flat", &f.row, error);
    if (status == UF_OK)
        status = uf_take(work, hands * width * images, sizeof(float), "a flat", &f.values, error);
    if (status == UF_OK)
        status = uf_take(work, hands * images, sizeof(float), "a flat", &f.reordered, error);
    if (status == UF_OK)
        status = uf_take(work, hands, sizeof *f.kept, "a flat", &f.kept, error);
    if (status == UF_OK) {
        for (size_t h = 0; h < hands; h++)
            f.kept[h] = 0;
        uf_rows_run(work, stack->height, find_rows, &f);
        pixels->kept = 0;
        for (size_t h = 0; h < hands; h++)
            pixels->kept += (double)f.kept[h];
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
