/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Beads in an image: compact cores of the size that radius and depth give. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "calibrate/bead.h"
#include "calibrate/bead_reach.h"
#include "fit/robust.h"
#include "image/smooth.h"

/* A core counts from this many sigma of the filtered image's noise, and from this share of the usual core. */
static const double least_sigmas = 8, least_of_usual = 0.1, weak_of_usual = 0.4;

/* Nearer to a brighter core than this many radii a core of less than half its height is that bead's own rim. */
static const double rim_radii = 1.25, rim_height = 0.5;

/* Two beads on a plane are two radii apart; what is nearer lies on top of another. */
static const double closest_radii = 1.8;

enum { NOISE_SAMPLE = 1 << 15 };

uf_bead_reach uf_bead_reach_of(const uf_bead_setup *s)
{
    static const double highest_nm = 1200, highest_depths = 3.5, largest_share = 0.9, core_depths = 2, ring_um = 0.7,
                        blurs_beyond = 3;
    double px2 = s->pixel_size_um * s->pixel_size_um, radius = s->radius_um;
    double high_um = (s->with_stray ? highest_nm : highest_depths * s->expected_depth_nm) / 1000;
    uf_bead_reach reach = {.blur_um = sqrt(s->psf_sigma_um * s->psf_sigma_um + px2 / 12)};
    double core_um = core_depths * s->expected_depth_nm / 1000;
    double at_highest = high_um < radius ? sqrt(2 * radius * high_um - high_um * high_um) : radius;
    reach.inner_um = fmin(largest_share * radius, at_highest);
    reach.core_um = core_um < radius ? sqrt(2 * radius * core_um - core_um * core_um) : radius;
    reach.ring_from_um = radius + blurs_beyond * reach.blur_um;
    reach.ring_to_um = s->with_stray ? reach.ring_from_um + ring_um : reach.inner_um;
    reach.core_sigma_um = sqrt(radius * s->expected_depth_nm / 1000 + reach.blur_um * reach.blur_um);
    return reach;
}

/* ---- cores ------------------------------------------------------------------------------------- */

typedef struct core {
    double x, y, height;
} core;

/* A band of the image at the size of a core: smoothed by it, minus smoothed by twice that. */
static uf_status filter(uf_work *work, const uf_bead_setup *setup, uf_plane image, uf_plane band, uf_error *error)
{
    double sigma = uf_bead_reach_of(setup).core_sigma_um / setup->pixel_size_um;
    uf_plane wide;
    uf_status status = uf_plane_take(work, image.width, image.height, &wide, error);
    if (status == UF_OK)
        status = uf_smooth(work, image, sigma, band, error);
    if (status == UF_OK)
        status = uf_smooth(work, image, 2 * sigma, wide, error);
    float sign = setup->dye == UF_DYE_SURFACE ? 1.0f : -1.0f;
    for (int y = 0; status == UF_OK && y < image.height; y++) {
        float *row = uf_plane_row(band, y);
        const float *other = uf_plane_row(wide, y);
        for (int x = 0; x < image.width; x++)
            row[x] = sign * (row[x] - other[x]);
    }
    return status;
}

/* 1 sigma of the band's noise by the median of its absolute values over a lattice: beads cover the lesser part. */
static uf_status noise_of(uf_work *work, uf_plane band, double *sd, uf_error *error)
{
    double *sample;
    int step = 1;
    while ((int64_t)(band.width / step + 1) * (band.height / step + 1) > NOISE_SAMPLE)
        step++;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, NOISE_SAMPLE, sizeof *sample, "beads", &sample, error);
    size_t count = 0;
    for (int y = 0; status == UF_OK && y < band.height; y += step)
        for (int x = 0; x < band.width; x += step)
            sample[count++] = fabs((double)uf_plane_row(band, y)[x]);
    if (status == UF_OK)
        *sd = 1.4826 * uf_median(sample, count);
    uf_arena_back(&work->arena, mark);
    return status;
}

static int is_peak(uf_plane band, int x, int y)
{
    float here = uf_plane_row(band, y)[x];
    for (int v = -1; v <= 1; v++)
        for (int u = -1; u <= 1; u++) {
            float there = uf_plane_row(band, y + v)[x + u];
            /* Of equal neighbours the last one is the peak. */
            if (there > here || (there == here && (v > 0 || (v == 0 && u > 0))))
                return 0;
        }
    return 1;
}

/* Where the parabola through three values has its top, from the middle one; at most half a pixel away. */
static double top_of(float before, float here, float after)
{
    double bend = (double)before - 2 * (double)here + (double)after;
    return bend < 0 ? fmax(-0.5, fmin(0.5, 0.5 * ((double)before - (double)after) / bend)) : 0;
}

static int by_height(const void *a, const void *b)
{
    const core *p = a, *q = b;
    if (p->height != q->height)
        return p->height > q->height ? -1 : 1;
    if (p->y != q->y)
        return p->y < q->y ? -1 : 1;
    return (p->x > q->x) - (p->x < q->x);
}

static int find_peaks(uf_plane band, double least, core *cores, int limit)
{
    int count = 0;
    for (int y = 1; y < band.height - 1; y++) {
        const float *row = uf_plane_row(band, y);
        for (int x = 1; x < band.width - 1; x++) {
            if ((double)row[x] < least || !is_peak(band, x, y))
                continue;
            if (count == limit)
                return count;
            cores[count++] = (core){x + top_of(row[x - 1], row[x], row[x + 1]),
                                    y + top_of(uf_plane_row(band, y - 1)[x], row[x], uf_plane_row(band, y + 1)[x]),
                                    (double)row[x]};
        }
    }
    return count;
}

/* Median of those at least a quarter as high as the highest but two, a speck or a pair: rims are lower. */
static double usual_height(const core *cores, int count)
{
    double top = cores[count > 2 ? 2 : count - 1].height;
    int strong = 0;
    while (strong < count && cores[strong].height > top / 4)
        strong++;
    return cores[strong / 2].height;
}

/* A bead off the substrate shows its rim as much as its core: of weak peaks within about one bead's width the highest is kept. */
static int merge_weak(core *cores, int count, double usual, double radius_px)
{
    int kept = 0;
    for (int k = 0; k < count; k++) {
        int is_same = 0;
        for (int j = 0; j < kept && !is_same; j++)
            is_same = cores[k].height < weak_of_usual * usual &&
                      hypot(cores[j].x - cores[k].x, cores[j].y - cores[k].y) < 2.2 * radius_px;
        if (!is_same)
            cores[kept++] = cores[k];
    }
    return kept;
}

/* Highest first; what is another core's rim is dropped. */
static int keep_cores(core *cores, int count, double radius_px)
{
    int kept = 0;
    qsort(cores, (size_t)count, sizeof *cores, by_height);
    for (int k = 0; k < count; k++) {
        int is_rim = 0;
        for (int j = 0; j < kept && !is_rim; j++)
            is_rim = hypot(cores[j].x - cores[k].x, cores[j].y - cores[k].y) < rim_radii * radius_px &&
                     cores[k].height < rim_height * cores[j].height;
        if (!is_rim)
            cores[kept++] = cores[k];
    }
    double usual = kept ? usual_height(cores, kept) : 0;
    kept = merge_weak(cores, kept, usual, radius_px);
    while (kept && cores[kept - 1].height < least_of_usual * usual)
        kept--;
    return kept;
}

/* ---- pixels ------------------------------------------------------------------------------------ */

typedef struct gathering {
    const uf_bead_setup *setup;
    const uf_channel *image;
    uf_bead_reach reach;
    const uf_bead *beads; /* of this image */
    int count;
} gathering;

static double distance_um(const gathering *g, const uf_bead *bead, int x, int y)
{
    return g->setup->pixel_size_um * hypot(x - bead->x_px, y - bead->y_px);
}

static int is_another_beads(const gathering *g, const uf_bead *bead, int x, int y)
{
    for (int k = 0; k < g->count; k++)
        if (&g->beads[k] != bead && distance_um(g, &g->beads[k], x, y) < g->reach.ring_from_um)
            return 1;
    return 0;
}

/* Saturated in the core: what the depth is read from is missing. */
static void take_pixel(const gathering *g, uf_bead *bead, int x, int y)
{
    double r = distance_um(g, bead, x, y);
    int inside = r <= g->reach.inner_um, in_ring = r >= g->reach.ring_from_um && r <= g->reach.ring_to_um;
    if ((!inside && !in_ring) || (in_ring && is_another_beads(g, bead, x, y)))
        return;
    if (g->image->saturated.data && uf_mask_row(g->image->saturated, y)[x] == UF_PIXEL_SATURATED) {
        if (r <= g->reach.core_um)
            bead->state = UF_BEAD_SATURATED;
        return;
    }
    bead->pixels[bead->pixel_count++] = (uf_bead_pixel){(float)x, (float)y, uf_plane_row(g->image->image, y)[x]};
}

static uf_status gather(const gathering *g, uf_bead *bead, uf_error *error)
{
    uf_plane image = g->image->image;
    double reach = g->reach.ring_to_um / g->setup->pixel_size_um, inner = g->reach.inner_um / g->setup->pixel_size_um;
    if (bead->x_px < inner + 1 || bead->y_px < inner + 1 || bead->x_px > image.width - 2 - inner ||
        bead->y_px > image.height - 2 - inner)
        bead->state = UF_BEAD_AT_EDGE;
    int x0 = (int)fmax(0, bead->x_px - reach), x1 = (int)fmin(image.width - 1, bead->x_px + reach + 1);
    int y0 = (int)fmax(0, bead->y_px - reach), y1 = (int)fmin(image.height - 1, bead->y_px + reach + 1);
    bead->pixels = malloc((size_t)(x1 - x0 + 1) * (size_t)(y1 - y0 + 1) * sizeof *bead->pixels);
    if (!bead->pixels)
        return uf_fail_memory(error, "beads");
    for (int y = y0; y <= y1; y++)
        for (int x = x0; x <= x1; x++)
            take_pixel(g, bead, x, y);
    return UF_OK;
}

/* ---- the set ----------------------------------------------------------------------------------- */

static uf_status make_room(uf_bead_set *set, int more, uf_error *error)
{
    int wanted = set->count + more;
    if (wanted <= set->capacity)
        return UF_OK;
    uf_bead *grown = realloc(set->beads, (size_t)wanted * sizeof *grown);
    if (!grown)
        return uf_fail_memory(error, "beads");
    set->beads = grown;
    set->capacity = wanted;
    return UF_OK;
}

static void mark_overlaps(uf_bead *beads, int count, double closest_px)
{
    for (int k = 0; k < count; k++)
        for (int j = 0; j < count; j++)
            if (j != k && hypot(beads[j].x_px - beads[k].x_px, beads[j].y_px - beads[k].y_px) < closest_px)
                beads[k].state = UF_BEAD_OVERLAPPING;
}

static uf_status add_beads(const uf_bead_setup *setup, const uf_channel *image, const core *cores, int count,
                           uf_bead_set *set, uf_error *error)
{
    uf_status status = make_room(set, count, error);
    if (status != UF_OK)
        return status;
    uf_bead *first = set->beads + set->count;
    for (int k = 0; k < count; k++)
        first[k] = (uf_bead){.image = set->images,
                             .x_px = cores[k].x,
                             .y_px = cores[k].y,
                             .core_adu = cores[k].height,
                             .depth_nm = (double)NAN,
                             .misfit = (double)NAN};
    gathering g = {setup, image, uf_bead_reach_of(setup), first, count};
    for (int k = 0; status == UF_OK && k < count; k++, set->count++)
        status = gather(&g, &first[k], error);
    mark_overlaps(first, count, closest_radii * setup->radius_um / setup->pixel_size_um);
    return status;
}

uf_status uf_beads_find(uf_work *work, const uf_bead_setup *setup, const uf_channel *image, uf_bead_set *set,
                        uf_error *error)
{
    enum { MOST_PEAKS = 1 << 16 };
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_plane band;
    core *cores;
    double sd = 0;
    uf_status status = uf_plane_take(work, image->image.width, image->image.height, &band, error);
    if (status == UF_OK)
        status = uf_take(work, MOST_PEAKS, sizeof *cores, "beads", &cores, error);
    if (status == UF_OK)
        status = filter(work, setup, image->image, band, error);
    if (status == UF_OK)
        status = noise_of(work, band, &sd, error);
    if (status == UF_OK) {
        int count = find_peaks(band, least_sigmas * sd, cores, MOST_PEAKS);
        count = keep_cores(cores, count, setup->radius_um / setup->pixel_size_um);
        status = add_beads(setup, image, cores, count, set, error);
        set->noise = image->noise;
        set->images++;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

void uf_bead_set_free(uf_bead_set *set)
{
    for (int k = 0; k < set->count; k++)
        free(set->beads[k].pixels);
    free(set->beads);
    *set = (uf_bead_set){0};
}

int uf_beads_in_state(const uf_bead_set *set, uf_bead_state state)
{
    int count = 0;
    for (int k = 0; k < set->count; k++)
        count += set->beads[k].state == state;
    return count;
}
