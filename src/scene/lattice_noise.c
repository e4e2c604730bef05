/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/lattice_noise.h"

#include <math.h>

/* What one row or column needs: its first lattice point and the weights of four. */
typedef struct knot {
    int first;
    float weight[4];
} knot;

static knot knot_at(double position)
{
    knot k = {.first = (int)floor(position)};
    double t = position - k.first, s = 1 - t;
    double w[4] = {s * s * s / 6, (4 - 6 * t * t + 3 * t * t * t) / 6, (4 - 6 * s * s + 3 * s * s * s) / 6,
                   t * t * t / 6};
    double norm = sqrt(w[0] * w[0] + w[1] * w[1] + w[2] * w[2] + w[3] * w[3]);
    for (int i = 0; i < 4; i++)
        k.weight[i] = (float)(w[i] / norm);
    return k;
}

typedef struct lattice {
    int width, height;
    float *value;
    float *line; /* one lattice row, joined along y */
    knot *column;
} lattice;

static uf_status take_lattice(uf_work *work, double spacing, uf_plane out, lattice *l, uf_error *error)
{
    static const char what[] = "the scene's random variation";
    l->width = (int)floor((out.width - 1) / spacing) + 4;
    l->height = (int)floor((out.height - 1) / spacing) + 4;
    size_t width = (size_t)l->width;
    uf_status status = uf_take(work, width * (size_t)l->height, sizeof(float), what, &l->value, error);
    if (!status)
        status = uf_take(work, width, sizeof(float), what, &l->line, error);
    if (!status)
        status = uf_take(work, (size_t)out.width, sizeof(knot), what, &l->column, error);
    return status;
}

static void join_row(const lattice *l, knot down, float *row, int width)
{
    const float *above = l->value + (ptrdiff_t)down.first * l->width;
    for (int i = 0; i < l->width; i++) {
        float sum = 0;
        for (int k = 0; k < 4; k++)
            sum += down.weight[k] * above[(ptrdiff_t)k * l->width + i];
        l->line[i] = sum;
    }
    for (int x = 0; x < width; x++) {
        const float *w = l->column[x].weight, *v = l->line + l->column[x].first;
        row[x] = w[0] * v[0] + w[1] * v[1] + w[2] * v[2] + w[3] * v[3];
    }
}

uf_status uf_lattice_noise(uf_work *work, uf_random *random, double spacing_px, uf_plane out, uf_error *error)
{
    double spacing = spacing_px > 1 ? spacing_px : 1;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    lattice l = {0};
    uf_status status = take_lattice(work, spacing, out, &l, error);
    if (!status) {
        for (ptrdiff_t i = 0; i < (ptrdiff_t)l.width * l.height; i++)
            l.value[i] = (float)uf_random_normal(random);
        for (int x = 0; x < out.width; x++)
            l.column[x] = knot_at(x / spacing);
        for (int y = 0; y < out.height; y++)
            join_row(&l, knot_at(y / spacing), uf_plane_row(out, y), out.width);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
