/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "segment/part.h"

#include <math.h>
#include <string.h>

#include "image/basins.h"
#include "image/smooth.h"
#include "segment/flood.h"

static const double coarse_um = 0.25;
static const double slightest_neck = 0.93;
static const float core_share = 0.75f;       /* of a part's greatest depth */
static const double level_difference = 0.08; /* relative, between neighbours that are two cells */
static const double ridge_ratio = 2.2;       /* relief along the border over the relief inside */
static const double inside_um = 1.5;         /* beyond the fall of the blur towards the outside */

/* `coarse` has one point for step x step pixels; its distances are in pixels of the image. */
typedef struct part_job {
    uf_work *work;
    const uf_channel *wide;
    uf_plane smooth, distance;
    const uf_part_settings *settings;
    uf_labels labels; /* pieces, at full resolution */
    int step;
    uf_flood_grid coarse;
    float *depth;     /* of each part, greatest distance */
    int *piece_parts; /* how many parts each piece has */
} part_job;

/* ---- parts ----------------------------------------------------------------------------------- */

/* The pixel that stands for a coarse point. */
static int fine_of(int i, int step, int size)
{
    int at = i * step + step / 2;
    return at < size ? at : size - 1;
}

static int piece_at(const part_job *job, int x, int y)
{
    int v = fine_of(y, job->step, job->labels.height);
    return uf_labels_row(job->labels, v)[fine_of(x, job->step, job->labels.width)];
}

static uf_status make_coarse(part_job *job, uf_error *error)
{
    uf_flood_grid *grid = &job->coarse;
    int step = job->step, width = (job->labels.width + step - 1) / step,
        height = (job->labels.height + step - 1) / step;
    uf_status status = uf_labels_take(job->work, width, height, &grid->labels, error);
    if (status == UF_OK)
        status = uf_plane_take(job->work, width, height, &grid->distance_px, error);
    if (status == UF_OK)
        status = uf_plane_take(job->work, width, height, &grid->image_adu, error);
    if (status != UF_OK)
        return status;
    uf_reduce(job->work, job->wide->image, step, grid->image_adu);
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++) {
            int v = fine_of(y, step, job->labels.height), u = fine_of(x, step, job->labels.width);
            uf_labels_row(grid->labels, y)[x] = uf_labels_row(job->labels, v)[u];
            uf_plane_row(grid->distance_px, y)[x] = uf_plane_row(job->distance, v)[u];
        }
    grid->labels.count = job->labels.count;
    grid->background_adu = (float)job->wide->background_adu;
    grid->least_adu = (float)(3.0 * job->wide->noise_adu);
    grid->pixel_um = job->settings->pixel_size_um * step;
    return UF_OK;
}

static void find_depths(part_job *job)
{
    uf_flood_grid *grid = &job->coarse;
    memset(job->depth, 0, ((size_t)grid->labels.count + 1) * sizeof *job->depth);
    grid->deepest_px = 1.0f;
    for (int y = 0; y < grid->labels.height; y++)
        for (int x = 0; x < grid->labels.width; x++) {
            float distance = uf_plane_row(grid->distance_px, y)[x];
            float *depth = &job->depth[uf_labels_row(grid->labels, y)[x]];
            *depth = fmaxf(*depth, distance);
            grid->deepest_px = fmaxf(grid->deepest_px, distance);
        }
}

/* Counts the parts of each piece; a part is counted where its first point is met. Returns the pieces of several. */
static int count_parts(part_job *job, uint8_t *met)
{
    int several = 0;
    memset(job->piece_parts, 0, ((size_t)job->labels.count + 1) * sizeof *job->piece_parts);
    memset(met, 0, (size_t)job->coarse.labels.count + 1);
    for (int y = 0; y < job->coarse.labels.height; y++)
        for (int x = 0; x < job->coarse.labels.width; x++) {
            int part = uf_labels_row(job->coarse.labels, y)[x];
            if (!part || met[part])
                continue;
            met[part] = 1;
            several += ++job->piece_parts[piece_at(job, x, y)] == 2;
        }
    return several;
}

static uf_status find_parts(part_job *job, int *several, uf_error *error)
{
    const uf_part_settings *s = job->settings;
    uint8_t *met;
    uf_status status = make_coarse(job, error);
    if (status == UF_OK)
        status =
            uf_basins(job->work, job->coarse.distance_px, fmax(s->neck, slightest_neck), &job->coarse.labels, error);
    if (status == UF_OK)
        status =
            uf_labels_tidy(job->work, s->min_pixels / 4 / (job->step * job->step), 1e18, &job->coarse.labels, error);
    size_t parts = (size_t)job->coarse.labels.count + 1, pieces = (size_t)job->labels.count + 1;
    if (status == UF_OK)
        status = uf_take(job->work, pieces, sizeof *job->piece_parts, "segmentation", &job->piece_parts, error);
    if (status == UF_OK)
        status = uf_take(job->work, parts, sizeof *job->depth, "segmentation", &job->depth, error);
    if (status == UF_OK)
        status = uf_take(job->work, parts, sizeof *met, "segmentation", &met, error);
    if (status != UF_OK)
        return status;
    find_depths(job);
    *several = count_parts(job, met);
    return UF_OK;
}

/* Mean relief well inside cells: what the dye's own unevenness makes. */
static float usual_relief(const part_job *job)
{
    const uf_flood_grid *grid = &job->coarse;
    float inside = (float)(inside_um / job->settings->pixel_size_um);
    double sum = 0, count = 0;
    for (int y = 0; y < grid->labels.height; y++)
        for (int x = 0; x < grid->labels.width; x++)
            if (uf_plane_row(grid->distance_px, y)[x] >= inside) {
                sum += (double)uf_flood_relief(grid, x, y);
                count++;
            }
    return count > 0 ? (float)(sum / count) : 0.0f;
}

/* ---- parts from nuclei ----------------------------------------------------------------------- */

static int nucleus_at(const part_job *job, int x, int y)
{
    int v = fine_of(y, job->step, job->labels.height);
    return uf_labels_row(job->settings->nuclei, v)[fine_of(x, job->step, job->labels.width)];
}

/* Counts the nuclei of each piece. Returns the pieces of several. */
static int count_nuclei(part_job *job, int *piece_of)
{
    int several = 0;
    memset(job->piece_parts, 0, ((size_t)job->labels.count + 1) * sizeof *job->piece_parts);
    memset(piece_of, 0, ((size_t)job->settings->nuclei.count + 1) * sizeof *piece_of);
    for (int y = 0; y < job->coarse.labels.height; y++)
        for (int x = 0; x < job->coarse.labels.width; x++) {
            int piece = uf_labels_row(job->coarse.labels, y)[x], nucleus = nucleus_at(job, x, y);
            if (!piece || !nucleus || piece_of[nucleus])
                continue;
            piece_of[nucleus] = piece;
            several += ++job->piece_parts[piece] == 2;
        }
    return several;
}

/* Coarse points take the number of their nucleus, or wait for one; a piece without any is a part of its own. */
static void seed_nuclei(part_job *job, const int *piece_of)
{
    int nuclei = job->settings->nuclei.count;
    for (int y = 0; y < job->coarse.labels.height; y++) {
        int32_t *row = uf_labels_row(job->coarse.labels, y);
        for (int x = 0; x < job->coarse.labels.width; x++) {
            int piece = row[x], nucleus = piece ? nucleus_at(job, x, y) : 0;
            if (piece)
                row[x] = nucleus && piece_of[nucleus] == piece ? nucleus
                         : job->piece_parts[piece]             ? -1
                                                               : nuclei + piece;
        }
    }
    job->coarse.labels.count = nuclei + job->labels.count;
}

static uf_status part_by_nuclei(part_job *job, int *several, uf_error *error)
{
    size_t nuclei = (size_t)job->settings->nuclei.count + 1, pieces = (size_t)job->labels.count + 1;
    int *piece_of;
    uf_status status = make_coarse(job, error);
    if (status == UF_OK)
        status = uf_take(job->work, pieces, sizeof *job->piece_parts, "segmentation", &job->piece_parts, error);
    if (status == UF_OK)
        status = uf_take(job->work, pieces + nuclei, sizeof *job->depth, "segmentation", &job->depth, error);
    if (status == UF_OK)
        status = uf_take(job->work, nuclei, sizeof *piece_of, "segmentation", &piece_of, error);
    if (status != UF_OK)
        return status;
    find_depths(job);
    *several = count_nuclei(job, piece_of);
    seed_nuclei(job, piece_of);
    for (size_t k = 0; k < pieces + nuclei; k++)
        job->depth[k] = INFINITY; /* no point is sure of its cell by depth alone */
    job->coarse.usual = usual_relief(job);
    return uf_flood_run(job->work, &job->coarse, error);
}

static void keep_cores(part_job *job)
{
    for (int y = 0; y < job->coarse.labels.height; y++) {
        int32_t *row = uf_labels_row(job->coarse.labels, y);
        const float *distance = uf_plane_row(job->coarse.distance_px, y);
        for (int x = 0; x < job->coarse.labels.width; x++)
            if (row[x] && distance[x] < core_share * job->depth[row[x]])
                row[x] = -1;
    }
}

/* ---- what lies between neighbours ------------------------------------------------------------ */

typedef struct part {
    int parent;
    double pixels, level, relief; /* sums, of what lies well inside */
    float depth;
} part;

typedef struct border {
    int a, b; /* parts, a < b */
    double length, relief;
    float saddle; /* greatest distance to the outside along it */
} border;

typedef struct graph {
    part *parts;
    border *borders;
    int count, limit, last;
} graph;

static int root_of(const part *parts, int k)
{
    while (parts[k].parent != k)
        k = parts[k].parent;
    return k;
}

/* The border of two parts, made when new; NULL when there is no room for more (then they stay apart). */
static border *border_of(graph *g, int a, int b)
{
    int low = a < b ? a : b, high = a < b ? b : a;
    if (g->count && g->borders[g->last].a == low && g->borders[g->last].b == high)
        return &g->borders[g->last];
    for (int k = 0; k < g->count; k++)
        if (g->borders[k].a == low && g->borders[k].b == high) {
            g->last = k;
            return &g->borders[k];
        }
    if (g->count == g->limit)
        return NULL;
    g->last = g->count;
    g->borders[g->count] = (border){.a = low, .b = high};
    return &g->borders[g->count++];
}

/* What a walk along the borders notes of two neighbouring points. */
typedef void border_note(const uf_flood_grid *grid, border *between, int x, int y, int u, int v);

static void note_saddle(const uf_flood_grid *grid, border *between, int x, int y, int u, int v)
{
    float here = uf_plane_row(grid->distance_px, y)[x], there = uf_plane_row(grid->distance_px, v)[u];
    between->saddle = fmaxf(between->saddle, fminf(here, there));
}

static void note_relief(const uf_flood_grid *grid, border *between, int x, int y, int u, int v)
{
    between->length++;
    between->relief += (double)fmaxf(uf_flood_relief(grid, x, y), uf_flood_relief(grid, u, v));
}

static void look_across(const uf_flood_grid *grid, graph *g, border_note *note, int x, int y, int u, int v)
{
    int a = uf_labels_row(grid->labels, y)[x], b = uf_labels_row(grid->labels, v)[u];
    border *between = a > 0 && b > 0 && a != b ? border_of(g, a, b) : NULL;
    if (between)
        note(grid, between, x, y, u, v);
}

static void walk_borders(const uf_flood_grid *grid, graph *g, border_note *note)
{
    for (int y = 0; y < grid->labels.height; y++)
        for (int x = 0; x < grid->labels.width; x++) {
            if (x + 1 < grid->labels.width)
                look_across(grid, g, note, x, y, x + 1, y);
            if (y + 1 < grid->labels.height)
                look_across(grid, g, note, x, y, x, y + 1);
        }
}

static void sum_parts(const part_job *job, graph *g)
{
    const uf_flood_grid *grid = &job->coarse;
    float inside = (float)(inside_um / job->settings->pixel_size_um);
    for (int y = 0; y < grid->labels.height; y++)
        for (int x = 0; x < grid->labels.width; x++) {
            int k = uf_labels_row(grid->labels, y)[x];
            if (k <= 0 || uf_plane_row(grid->distance_px, y)[x] < inside)
                continue;
            part *p = &g->parts[k];
            p->pixels++;
            p->level += (double)(uf_plane_row(grid->image_adu, y)[x] - grid->background_adu);
            p->relief += (double)uf_flood_relief(grid, x, y);
        }
}

/* ---- joining --------------------------------------------------------------------------------- */

static int differ_in_brightness(const part *a, const part *b, const border *between)
{
    if (!(a->pixels > 0) || !(b->pixels > 0))
        return 0;
    double level_a = a->level / a->pixels, level_b = b->level / b->pixels;
    double inside = (a->relief + b->relief) / (a->pixels + b->pixels);
    return fabs(level_a - level_b) > level_difference * (level_a + level_b) / 2 && between->length > 0 &&
           between->relief > ridge_ratio * inside * between->length;
}

/* The border between two roots, summed over all borders between their parts. */
static border whole_border(const graph *g, int a, int b)
{
    border sum = {.a = a, .b = b};
    for (int k = 0; k < g->count; k++) {
        int ra = root_of(g->parts, g->borders[k].a), rb = root_of(g->parts, g->borders[k].b);
        if (!((ra == a && rb == b) || (ra == b && rb == a)))
            continue;
        sum.length += g->borders[k].length;
        sum.relief += g->borders[k].relief;
        sum.saddle = fmaxf(sum.saddle, g->borders[k].saddle);
    }
    return sum;
}

/* The pair of roots with the widest neck that nothing holds apart, as a border; saddle 0 when there is none. */
static border best_pair(const graph *g, double neck)
{
    border best = {0};
    double widest = 0;
    for (int k = 0; k < g->count; k++) {
        int a = root_of(g->parts, g->borders[k].a), b = root_of(g->parts, g->borders[k].b);
        if (a == b)
            continue;
        border between = whole_border(g, a, b);
        double narrower = (double)fminf(g->parts[a].depth, g->parts[b].depth);
        double width = (double)between.saddle / narrower;
        if (width <= widest || width < neck || differ_in_brightness(&g->parts[a], &g->parts[b], &between))
            continue;
        widest = width;
        best = between;
    }
    return best;
}

static void join_alike(graph *g, double neck)
{
    for (;;) {
        border pair = best_pair(g, neck);
        if (!(pair.saddle > 0.0f))
            return;
        part *a = &g->parts[pair.a], *b = &g->parts[pair.b];
        b->parent = pair.a;
        a->pixels += b->pixels;
        a->level += b->level;
        a->relief += b->relief;
        a->depth = fmaxf(a->depth, b->depth);
    }
}

static uf_status take_graph(part_job *job, graph *g, uf_error *error)
{
    size_t places = (size_t)job->coarse.labels.count + 1;
    *g = (graph){.limit = 16 * job->coarse.labels.count + 16};
    uf_status status = uf_take(job->work, places, sizeof *g->parts, "segmentation", &g->parts, error);
    if (status == UF_OK)
        status = uf_take(job->work, (size_t)g->limit, sizeof *g->borders, "segmentation", &g->borders, error);
    for (int k = 0; status == UF_OK && k < (int)places; k++)
        g->parts[k] = (part){.parent = k, .depth = job->depth[k]};
    return status;
}

/* Coarse labels become cells: the roots of their parts. */
static uf_status join_parts(part_job *job, uf_error *error)
{
    graph g;
    uf_flood_grid *grid = &job->coarse;
    uf_status status = take_graph(job, &g, error);
    if (status != UF_OK)
        return status;
    /* Necks are those of the shape, before brightness moves the borders. */
    walk_borders(grid, &g, note_saddle);
    grid->usual = usual_relief(job);
    keep_cores(job);
    status = uf_flood_run(job->work, grid, error);
    if (status != UF_OK)
        return status;
    walk_borders(grid, &g, note_relief);
    sum_parts(job, &g);
    join_alike(&g, job->settings->neck);
    for (int y = 0; y < grid->labels.height; y++) {
        int32_t *row = uf_labels_row(grid->labels, y);
        for (int x = 0; x < grid->labels.width; x++)
            row[x] = row[x] > 0 ? root_of(g.parts, row[x]) : 0;
    }
    for (int k = 1; k <= grid->labels.count; k++)
        job->depth[k] = g.parts[root_of(g.parts, k)].depth;
    return UF_OK;
}

/* ---- borders in full resolution -------------------------------------------------------------- */

/* Whether a coarse point and all around it are of one cell. */
static int amid_one_cell(uf_labels cells, int x, int y)
{
    int here = uf_labels_row(cells, y)[x];
    for (int v = y - 1; v <= y + 1; v++)
        for (int u = x - 1; u <= x + 1; u++) {
            if (u < 0 || v < 0 || u >= cells.width || v >= cells.height)
                continue;
            int other = uf_labels_row(cells, v)[u];
            if (other && other != here)
                return 0;
        }
    return here != 0;
}

/* Coarse points that are sure of their cell keep its number, others become 0. The deepest ones always are. */
static void keep_sure(part_job *job, uf_labels sure)
{
    uf_labels cells = job->coarse.labels;
    for (int y = 0; y < cells.height; y++)
        for (int x = 0; x < cells.width; x++) {
            int cell = uf_labels_row(cells, y)[x];
            float distance = uf_plane_row(job->coarse.distance_px, y)[x];
            uf_labels_row(sure, y)[x] =
                cell && (amid_one_cell(cells, x, y) || distance >= core_share * job->depth[cell]) ? cell : 0;
        }
}

/* Pieces of one part keep a number of their own; in the others a pixel takes its point's cell, or waits. */
static void seed_pixels(part_job *job, uf_labels sure)
{
    for (int y = 0; y < job->labels.height; y++) {
        int32_t *row = uf_labels_row(job->labels, y);
        const int32_t *points = uf_labels_row(sure, y / job->step);
        for (int x = 0; x < job->labels.width; x++) {
            if (!row[x])
                continue;
            int cell = points[x / job->step];
            row[x] = job->piece_parts[row[x]] < 2 ? job->coarse.labels.count + row[x] : cell ? cell : -1;
        }
    }
}

static uf_status draw_borders(part_job *job, uf_error *error)
{
    uf_labels sure;
    uf_flood_grid fine = job->coarse;
    uf_status status = uf_labels_take(job->work, job->coarse.labels.width, job->coarse.labels.height, &sure, error);
    if (status != UF_OK)
        return status;
    keep_sure(job, sure);
    seed_pixels(job, sure);
    fine.labels = job->labels;
    fine.distance_px = job->distance;
    fine.image_adu = job->smooth;
    fine.pixel_um = job->settings->pixel_size_um;
    return uf_flood_run(job->work, &fine, error);
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* What no flood reached (a piece whose only points are too thin for the coarse grid) is nobody's. */
static void drop_waiting(uf_labels labels)
{
    for (int y = 0; y < labels.height; y++) {
        int32_t *row = uf_labels_row(labels, y);
        for (int x = 0; x < labels.width; x++)
            row[x] = row[x] > 0 ? row[x] : 0;
    }
}

uf_status uf_part_cells(uf_work *work, const uf_channel *wide, uf_plane smooth_adu, uf_plane distance_px,
                        const uf_part_settings *settings, uf_labels *labels, uf_error *error)
{
    int several = 0, step = (int)(coarse_um / settings->pixel_size_um + 0.5);
    part_job job = {.work = work,
                    .wide = wide,
                    .smooth = smooth_adu,
                    .distance = distance_px,
                    .settings = settings,
                    .labels = *labels,
                    .step = step < 1 ? 1 : step};
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = UF_OK;
    int by_nuclei = settings->nuclei.data != NULL;
    if (by_nuclei && labels->count)
        status = part_by_nuclei(&job, &several, error);
    else if (settings->neck > 0 && labels->count)
        status = find_parts(&job, &several, error);
    if (status == UF_OK && several && !by_nuclei)
        status = join_parts(&job, error);
    if (status == UF_OK && several)
        status = draw_borders(&job, error);
    if (status == UF_OK && several) {
        drop_waiting(job.labels);
        labels->count += job.coarse.labels.count;
    }
    uf_arena_back(&work->arena, mark);
    return status == UF_OK ? uf_labels_tidy(work, settings->min_pixels, settings->max_pixels, labels, error) : status;
}
