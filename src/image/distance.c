/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/distance.h"

#include <math.h>
#include <string.h>

/* ---- first pass: down and up the columns ----------------------------------------------------- */

/* Steps along the column to the nearest other label, UF_FAR when there is none. Rows are walked whole, so
 * that neighbouring columns share cache lines. */
static void column_distances(uf_labels labels, uf_plane steps)
{
    int width = labels.width, height = labels.height;
    for (int x = 0; x < width; x++)
        uf_plane_row(steps, 0)[x] = UF_FAR;
    for (int y = 1; y < height; y++) {
        const int32_t *above = uf_labels_row(labels, y - 1), *here = uf_labels_row(labels, y);
        const float *before = uf_plane_row(steps, y - 1);
        float *row = uf_plane_row(steps, y);
        for (int x = 0; x < width; x++)
            row[x] = above[x] != here[x] ? 1.0f : before[x] < UF_FAR ? before[x] + 1.0f : UF_FAR;
    }
    for (int y = height - 2; y >= 0; y--) {
        const int32_t *below = uf_labels_row(labels, y + 1), *here = uf_labels_row(labels, y);
        const float *after = uf_plane_row(steps, y + 1);
        float *row = uf_plane_row(steps, y);
        for (int x = 0; x < width; x++) {
            float up = below[x] != here[x] ? 1.0f : after[x] < UF_FAR ? after[x] + 1.0f : UF_FAR;
            row[x] = up < row[x] ? up : row[x];
        }
    }
}

/* ---- second pass: along the rows ------------------------------------------------------------- */

/* Parabolas of the lower envelope: parabola k is lowest from start[k] to start[k + 1]. */
typedef struct parabola {
    double lift; /* height + centre^2: what comparing two of them needs */
    float start, height;
    int centre;
} parabola;

typedef struct envelope {
    parabola *list;
    int count;
} envelope;

static void add_parabola(envelope *e, int centre, float height)
{
    float at = -INFINITY;
    double lift = (double)height + (double)centre * centre;
    while (e->count) {
        const parabola *last = &e->list[e->count - 1];
        int apart = centre - last->centre;
        /* Next neighbours are the usual case and need no division. */
        at = (float)(apart == 1 ? (lift - last->lift) * 0.5 : (lift - last->lift) / (2.0 * apart));
        if (at > last->start)
            break;
        e->count--;
    }
    e->list[e->count] = (parabola){lift, e->count ? at : -INFINITY, height, centre};
    e->count++;
}

static void read_envelope(const envelope *e, int from, int to, float *out)
{
    int x = from;
    for (int k = 0; k < e->count; k++) {
        float until = k + 1 < e->count ? e->list[k + 1].start : INFINITY;
        int end = until >= (float)to ? to : until < (float)from ? from : (int)until + 1;
        float height = e->list[k].height;
        int centre = e->list[k].centre;
        for (; x < end; x++) {
            float dx = (float)(x - centre);
            out[x] = sqrtf(dx * dx + height);
        }
    }
    for (; x < to; x++)
        out[x] = UF_FAR;
}

/* One run of equal label, from .. to-1; a neighbour beyond either end is another label, at height 0. */
static void run_distances(envelope *e, const float *steps, int from, int to, int width, float *out)
{
    e->count = 0;
    if (from > 0)
        add_parabola(e, from - 1, 0.0f);
    for (int x = from; x < to; x++)
        if (steps[x] < UF_FAR)
            add_parabola(e, x, steps[x] * steps[x]);
    if (to < width)
        add_parabola(e, to, 0.0f);
    read_envelope(e, from, to, out);
}

typedef struct distance_job {
    uf_labels labels;
    uf_plane steps, out;
    const uint8_t *wanted;
    parabola *parabolas; /* width + 2 a hand */
} distance_job;

static void distance_rows(void *context, int hand, int y0, int y1)
{
    distance_job *job = context;
    int width = job->labels.width;
    size_t offset = (size_t)hand * (size_t)(width + 2);
    envelope e = {job->parabolas + offset, 0};
    for (int y = y0; y < y1; y++) {
        const int32_t *labels = uf_labels_row(job->labels, y);
        float *out = uf_plane_row(job->out, y);
        for (int from = 0, to; from < width; from = to) {
            for (to = from + 1; to < width && labels[to] == labels[from]; to++)
                ;
            if (!job->wanted || job->wanted[labels[from]])
                run_distances(&e, uf_plane_row(job->steps, y), from, to, width, out);
        }
    }
}

uf_status uf_distance(uf_work *work, uf_labels labels, const uint8_t *wanted, uf_plane distance_px, uf_error *error)
{
    distance_job job = {.labels = labels, .out = distance_px, .wanted = wanted};
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t length = (size_t)uf_hands(work) * (size_t)(labels.width + 2);
    uf_status status = uf_plane_take(work, labels.width, labels.height, &job.steps, error);
    if (status == UF_OK)
        status = uf_take(work, length, sizeof *job.parabolas, "distances", &job.parabolas, error);
    if (status == UF_OK) {
        column_distances(labels, job.steps);
        uf_rows_run(work, labels.height, distance_rows, &job);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_distance_inside(uf_work *work, uf_labels labels, uf_plane distance_px, uf_error *error)
{
    uint8_t *wanted;
    size_t places = (size_t)labels.count + 1;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, places, 1, "distances", &wanted, error);
    if (status == UF_OK) {
        memset(wanted, 1, places);
        wanted[0] = 0;
        for (int y = 0; y < labels.height; y++)
            memset(uf_plane_row(distance_px, y), 0, (size_t)labels.width * sizeof(float));
        status = uf_distance(work, labels, wanted, distance_px, error);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
