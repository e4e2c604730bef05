/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "segment/part.h"

#include <math.h>
#include <string.h>

#include "image/basins.h"
#include "image/smooth.h"

static const double slightest_neck = 0.93;
static const double core_share = 0.75;      /* of a part's greatest depth */
static const double relief_smooth_um = 0.15;
static const double shape_weight = 0.15;    /* relief of a vanishing neck, 1/um */
static const double level_difference = 0.08; /* relative, between neighbours that are two cells */
static const double ridge_ratio = 2.2;      /* relief along the border over the relief inside */
static const double unevenness_ratio = 2.5; /* relief up to this many times the usual is the dye's own unevenness */

typedef struct part_job {
    uf_work *work;
    const uf_channel *wide;
    uf_plane distance, relief; /* relief in 1/um */
    uf_labels labels;
    double px_um;
    float *depth; /* of each part, greatest distance */
    float deepest; /* of all parts */
    float usual;   /* mean relief well inside cells */
} part_job;

/* ---- relief ------------------------------------------------------------------------------------------------ */

static void relief_rows(void *context, int y0, int y1)
{
    part_job *job = context;
    int width = job->labels.width, height = job->labels.height;
    float background = (float)job->wide->background_adu, least = (float)(3.0 * job->wide->noise_adu);
    float per_um = (float)(0.5 / job->px_um);
    for (int y = y0; y < y1; y++) {
        const float *here = uf_plane_row(job->wide->image, y);
        const float *above = uf_plane_row(job->wide->image, y ? y - 1 : y);
        const float *below = uf_plane_row(job->wide->image, y + 1 < height ? y + 1 : y);
        float *out = uf_plane_row(job->relief, y);
        for (int x = 0; x < width; x++) {
            float dx = here[x + 1 < width ? x + 1 : x] - here[x ? x - 1 : x], dy = below[x] - above[x];
            float level = here[x] - background;
            level = level > least ? level : least;
            out[x] = sqrtf(dx * dx + dy * dy) * per_um / level;
        }
    }
}

static uf_status make_relief(part_job *job, uf_error *error)
{
    uf_channel smooth = *job->wide;
    uf_arena_mark mark = uf_arena_now(&job->work->arena);
    uf_status status = uf_plane_take(job->work, job->labels.width, job->labels.height, &smooth.image, error);
    if (status == UF_OK)
        status = uf_smooth(job->work, job->wide->image, relief_smooth_um / job->px_um, smooth.image, error);
    if (status == UF_OK) {
        const uf_channel *wide = job->wide;
        job->wide = &smooth;
        uf_rows_run(job->work, job->labels.height, relief_rows, job);
        job->wide = wide;
    }
    uf_arena_back(&job->work->arena, mark);
    return status;
}

/* ---- flood from the cores ------------------------------------------------------------------------------------ */

enum { LEVELS = 4096 };
static const float levels_per_relief = 1000.0f;

/* Pixels waiting at each level, first come first served. */
typedef struct queue {
    int32_t head[LEVELS], tail[LEVELS], *next;
    int lowest;
} queue;

static void push(queue *q, int32_t pixel, int level)
{
    q->next[pixel] = -1;
    if (q->head[level] < 0)
        q->head[level] = pixel;
    else
        q->next[q->tail[level]] = pixel;
    q->tail[level] = pixel;
    q->lowest = level < q->lowest ? level : q->lowest;
}

static int32_t pop(queue *q)
{
    while (q->lowest < LEVELS && q->head[q->lowest] < 0)
        q->lowest++;
    if (q->lowest == LEVELS)
        return -1;
    int32_t pixel = q->head[q->lowest];
    q->head[q->lowest] = q->next[pixel];
    return pixel;
}

/* The same for every part, or a shallow part would run over a deep one as soon as it passes the neck. */
static int level_of(const part_job *job, int x, int y)
{
    float shape = 1.0f - uf_plane_row(job->distance, y)[x] / job->deepest;
    float ridge = uf_plane_row(job->relief, y)[x] - (float)unevenness_ratio * job->usual;
    float level = ((ridge > 0.0f ? ridge : 0.0f) + (float)shape_weight * shape) * levels_per_relief;
    return level < (float)(LEVELS - 1) ? (int)level : LEVELS - 1;
}

/* Outside the cores labels become -1: to be flooded. */
static void keep_cores(part_job *job)
{
    for (int y = 0; y < job->labels.height; y++) {
        int32_t *row = uf_labels_row(job->labels, y);
        const float *distance = uf_plane_row(job->distance, y);
        for (int x = 0; x < job->labels.width; x++)
            if (row[x] && distance[x] < (float)core_share * job->depth[row[x]])
                row[x] = -1;
    }
}

/* Gives the waiting neighbours of a labelled pixel its label and queues them. */
static void flood_neighbours(part_job *job, queue *q, int x, int y)
{
    static const int dx[] = {-1, 1, 0, 0}, dy[] = {0, 0, -1, 1};
    int part = uf_labels_row(job->labels, y)[x];
    for (int k = 0; k < 4; k++) {
        int u = x + dx[k], v = y + dy[k];
        if (u < 0 || v < 0 || u >= job->labels.width || v >= job->labels.height)
            continue;
        int32_t *label = &uf_labels_row(job->labels, v)[u];
        if (*label != -1)
            continue;
        *label = part;
        int level = level_of(job, u, v);
        /* Water does not run back down past the level already reached. */
        push(q, v * job->labels.width + u, level > q->lowest ? level : q->lowest);
    }
}

static uf_status flood(part_job *job, uf_error *error)
{
    queue *q;
    size_t pixels = (size_t)job->labels.width * (size_t)job->labels.height;
    uf_arena_mark mark = uf_arena_now(&job->work->arena);
    uf_status status = uf_take(job->work, 1, sizeof *q, "segmentation", &q, error);
    if (status == UF_OK)
        status = uf_take(job->work, pixels, sizeof *q->next, "segmentation", &q->next, error);
    if (status == UF_OK) {
        for (int k = 0; k < LEVELS; k++)
            q->head[k] = -1;
        q->lowest = 0;
        keep_cores(job);
        for (int y = 0; y < job->labels.height; y++)
            for (int x = 0; x < job->labels.width; x++)
                if (uf_labels_row(job->labels, y)[x] > 0)
                    push(q, y * job->labels.width + x, 0);
        for (int32_t pixel; (pixel = pop(q)) >= 0;)
            flood_neighbours(job, q, pixel % job->labels.width, pixel / job->labels.width);
    }
    uf_arena_back(&job->work->arena, mark);
    return status;
}

/* ---- what lies between neighbours ------------------------------------------------------------------------------ */

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

/* What a pass over the borders notes. */
typedef void border_note(part_job *job, border *between, int x, int y, int u, int v);

static void note_saddle(part_job *job, border *between, int x, int y, int u, int v)
{
    float near = uf_plane_row(job->distance, y)[x], far = uf_plane_row(job->distance, v)[u];
    float lower = near < far ? near : far;
    between->saddle = lower > between->saddle ? lower : between->saddle;
}

static void note_relief(part_job *job, border *between, int x, int y, int u, int v)
{
    between->length++;
    between->relief += (double)fmaxf(uf_plane_row(job->relief, y)[x], uf_plane_row(job->relief, v)[u]);
}

static void look_across(part_job *job, graph *g, border_note *note, int x, int y, int u, int v)
{
    int a = uf_labels_row(job->labels, y)[x], b = uf_labels_row(job->labels, v)[u];
    border *between = a > 0 && b > 0 && a != b ? border_of(g, a, b) : NULL;
    if (between)
        note(job, between, x, y, u, v);
}

static void walk_borders(part_job *job, graph *g, border_note *note)
{
    for (int y = 0; y < job->labels.height; y++)
        for (int x = 0; x < job->labels.width; x++) {
            if (x + 1 < job->labels.width)
                look_across(job, g, note, x, y, x + 1, y);
            if (y + 1 < job->labels.height)
                look_across(job, g, note, x, y, x, y + 1);
        }
}

/* Beyond the fall of the blur towards the outside. */
static float inside_px(const part_job *job)
{
    return (float)(1.5 / job->px_um);
}

static void sum_parts(part_job *job, graph *g)
{
    for (int y = 0; y < job->labels.height; y++)
        for (int x = 0; x < job->labels.width; x++) {
            int k = uf_labels_row(job->labels, y)[x];
            if (k <= 0 || uf_plane_row(job->distance, y)[x] < inside_px(job))
                continue;
            part *p = &g->parts[k];
            p->pixels++;
            p->level += (double)uf_plane_row(job->wide->image, y)[x] - job->wide->background_adu;
            p->relief += (double)uf_plane_row(job->relief, y)[x];
        }
}

static float usual_relief(part_job *job)
{
    double sum = 0, count = 0;
    for (int y = 0; y < job->labels.height; y += 2)
        for (int x = 0; x < job->labels.width; x += 2)
            if (uf_plane_row(job->distance, y)[x] >= inside_px(job)) {
                sum += (double)uf_plane_row(job->relief, y)[x];
                count++;
            }
    return count > 0 ? (float)(sum / count) : 0.0f;
}

/* ---- joining --------------------------------------------------------------------------------------------------- */

static int differ_in_brightness(const part *a, const part *b, const border *between)
{
    if (!(a->pixels > 0) || !(b->pixels > 0))
        return 0;
    double level_a = a->level / a->pixels, level_b = b->level / b->pixels;
    double inside = (a->relief + b->relief) / (a->pixels + b->pixels);
    return fabs(level_a - level_b) > level_difference * (level_a + level_b) / 2 &&
           between->length > 0 && between->relief > ridge_ratio * inside * between->length;
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
    size_t places = (size_t)job->labels.count + 1;
    *g = (graph){.limit = 16 * job->labels.count + 16};
    uf_status status = uf_take(job->work, places, sizeof *g->parts, "segmentation", &g->parts, error);
    if (status == UF_OK)
        status = uf_take(job->work, (size_t)g->limit, sizeof *g->borders, "segmentation", &g->borders, error);
    for (int k = 0; status == UF_OK && k < (int)places; k++)
        g->parts[k] = (part){.parent = k, .depth = job->depth[k]};
    return status;
}

static void relabel(part_job *job, const graph *g)
{
    for (int y = 0; y < job->labels.height; y++) {
        int32_t *row = uf_labels_row(job->labels, y);
        for (int x = 0; x < job->labels.width; x++)
            row[x] = row[x] > 0 ? root_of(g->parts, row[x]) : 0;
    }
}

/* ---- all of it --------------------------------------------------------------------------------------------------- */

static uf_status find_depths(part_job *job, uf_error *error)
{
    size_t places = (size_t)job->labels.count + 1;
    uf_status status = uf_take(job->work, places, sizeof *job->depth, "segmentation", &job->depth, error);
    if (status != UF_OK)
        return status;
    memset(job->depth, 0, places * sizeof *job->depth);
    for (int y = 0; y < job->labels.height; y++) {
        const int32_t *row = uf_labels_row(job->labels, y);
        const float *distance = uf_plane_row(job->distance, y);
        for (int x = 0; x < job->labels.width; x++)
            job->depth[row[x]] = distance[x] > job->depth[row[x]] ? distance[x] : job->depth[row[x]];
    }
    job->deepest = 1.0f;
    for (size_t k = 1; k < places; k++)
        job->deepest = fmaxf(job->deepest, job->depth[k]);
    return UF_OK;
}

uf_status uf_part_cells(uf_work *work, const uf_channel *wide, uf_plane distance_px, double pixel_size_um,
                        double neck, double min_pixels, double max_pixels, uf_labels *labels, uf_error *error)
{
    int pieces = labels->count;
    if (!(neck > 0))
        return uf_labels_tidy(work, min_pixels, max_pixels, labels, error);
    uf_status status =
        uf_basins(work, distance_px, neck > slightest_neck ? neck : slightest_neck, min_pixels / 4, 1e18, labels, error);
    if (status != UF_OK || labels->count == 0 || pieces == 0)
        return status;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    part_job job = {.work = work, .wide = wide, .distance = distance_px, .labels = *labels, .px_um = pixel_size_um};
    status = uf_plane_take(work, labels->width, labels->height, &job.relief, error);
    if (status == UF_OK)
        status = make_relief(&job, error);
    if (status == UF_OK)
        status = find_depths(&job, error);
    graph g;
    if (status == UF_OK)
        status = take_graph(&job, &g, error);
    if (status == UF_OK) {
        /* Necks are those of the shape, before brightness moves the borders. */
        walk_borders(&job, &g, note_saddle);
        job.usual = usual_relief(&job);
        status = flood(&job, error);
    }
    if (status == UF_OK) {
        walk_borders(&job, &g, note_relief);
        sum_parts(&job, &g);
        join_alike(&g, neck);
        relabel(&job, &g);
    }
    uf_arena_back(&work->arena, mark);
    return status == UF_OK ? uf_labels_tidy(work, min_pixels, max_pixels, labels, error) : status;
}
