/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "gap/series.h"

#include <math.h>
#include <string.h>

#include "base/text.h"
#include "fit/robust.h"
#include "gap/signals.h"
#include "image/smooth.h"
#include "optics/detection.h"

/* ---- the table ------------------------------------------------------------------------------- */

void uf_series_tabulate(const uf_series *series, const uf_field_kind *kind, uf_series_table *table)
{
    table->count = series->count;
    table->last_nm = fmin(UF_SERIES_FIRST_NM + UF_SERIES_NODES - 1, series->farthest_nm);
    for (int j = 0; j < UF_SERIES_NODES; j++) {
        uf_series_field(series, kind, UF_SERIES_FIRST_NM + j, table->field[j], table->slope[j]);
        for (int k = 0; k < series->count; k++) {
            table->field[j][k] = uf_round_digits(table->field[j][k], 12);
            table->slope[j][k] = uf_round_digits(table->slope[j][k], 9);
            if (j % UF_SERIES_COARSE_STEP == 0)
                table->coarse[j / UF_SERIES_COARSE_STEP][k] = (float)table->field[j][k];
        }
    }
}

/* Fields and slopes between nodes: the slope by a straight line, the field by its integral. */
static void look_up(const uf_series_table *table, double gap_nm, double *field, double *slope)
{
    double at = gap_nm - UF_SERIES_FIRST_NM;
    int j = (int)at;
    j = j > UF_SERIES_NODES - 2 ? UF_SERIES_NODES - 2 : j;
    double part = at - j;
    for (int k = 0; k < table->count; k++) {
        double bend = part * (table->slope[j + 1][k] - table->slope[j][k]);
        field[k] = table->field[j][k] + part * (table->slope[j][k] + bend / 2);
        slope[k] = table->slope[j][k] + bend;
    }
}

/* ---- the coarse start ------------------------------------------------------------------------ */

enum { BLOCK = 64 };

/* Pixels of one stretch, signals times weights beside the weights. */
typedef struct stretch {
    int n;
    float weighted[UF_SERIES_MOST][BLOCK], weight[UF_SERIES_MOST][BLOCK];
} stretch;

/* best[x] is the coarse node with the largest (sum w I T)^2 / sum w T^2 of those with a positive sum w I T; -1: none. */
static void coarse_start(const uf_series_table *table, const stretch *s, int *best)
{
    float most[BLOCK], along[BLOCK], square[BLOCK];
    for (int x = 0; x < BLOCK; x++) {
        most[x] = 0.0f;
        best[x] = -1;
    }
    int last = (int)((table->last_nm - UF_SERIES_FIRST_NM) / UF_SERIES_COARSE_STEP);
    for (int j = 0; j <= last; j++) {
        memset(along, 0, sizeof along);
        memset(square, 0, sizeof square);
        for (int k = 0; k < table->count; k++) {
            float field = table->coarse[j][k], field2 = field * field;
            for (int x = 0; x < BLOCK; x++) {
                along[x] += s->weighted[k][x] * field;
                square[x] += s->weight[k][x] * field2;
            }
        }
        for (int x = 0; x < BLOCK; x++) {
            float up = along[x] > 0.0f ? along[x] : 0.0f, gain = up * up / square[x];
            best[x] = gain > most[x] ? j : best[x];
            most[x] = gain > most[x] ? gain : most[x];
        }
    }
}

/* ---- one pixel ------------------------------------------------------------------------------- */

typedef struct pixel {
    int count;
    double signal[UF_SERIES_MOST], weight[UF_SERIES_MOST];
} pixel;

/* Sums of a pixel at one gap: with t the field, s its slope, i the signal. */
typedef struct sums {
    double it, is, tt, ts, ss;
} sums;

static sums sums_at(const uf_series_table *table, const pixel *p, double gap_nm)
{
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST];
    sums m = {0};
    look_up(table, gap_nm, field, slope);
    for (int k = 0; k < p->count; k++) {
        double w = p->weight[k], wi = w * p->signal[k], wt = w * field[k];
        m.it += wi * field[k];
        m.is += wi * slope[k];
        m.tt += wt * field[k];
        m.ts += wt * slope[k];
        m.ss += w * slope[k] * slope[k];
    }
    return m;
}

/* The step of Gauss and Newton in the gap, A profiled out: its sign is that of the falling chi-square. */
static double step_of(const sums *m)
{
    double a = m->it / m->tt, across = m->tt * m->ss - m->ts * m->ts;
    return a > 0 && across > 0 ? (m->tt * m->is - m->ts * m->it) / (a * across) : 0;
}

static double fit_pixel(const uf_series_table *table, const pixel *p, int coarse)
{
    enum { MOST_TURNS = 20 };
    const double close_nm = 2e-3;
    double start = UF_SERIES_FIRST_NM + (double)UF_SERIES_COARSE_STEP * coarse, gap = start;
    double low = fmax(UF_SERIES_FIRST_NM, start - UF_SERIES_COARSE_STEP);
    double high = fmin(table->last_nm, start + UF_SERIES_COARSE_STEP);
    for (int turn = 0;; turn++) {
        sums m = sums_at(table, p, gap);
        double step = step_of(&m);
        if (fabs(step) < close_nm || high - low < close_nm || turn == MOST_TURNS)
            return gap;
        if (step > 0)
            low = gap;
        else
            high = gap;
        double next = gap + step;
        gap = next > low && next < high ? next : (low + high) / 2;
    }
}

/* One stretch of n pixels from `from` on; the tail of the block repeats its last pixel, so that loops stay whole. */
static void load(stretch *s, int count, const float *const *signal, const float *const *weight, int from, int n)
{
    s->n = n;
    for (int k = 0; k < count; k++)
        for (int x = 0; x < BLOCK; x++) {
            int inside = from + (x < n ? x : n - 1);
            s->weight[k][x] = weight[k][inside];
            s->weighted[k][x] = weight[k][inside] * signal[k][inside];
        }
}

void uf_series_fit_row(const uf_series_table *table, const float *const *signal, const float *const *weight, int n,
                       float *gap_nm)
{
    stretch s;
    int best[BLOCK];
    pixel p = {.count = table->count};
    for (int from = 0; from < n; from += BLOCK) {
        load(&s, table->count, signal, weight, from, n - from < BLOCK ? n - from : BLOCK);
        coarse_start(table, &s, best);
        for (int x = 0; x < s.n; x++) {
            for (int k = 0; k < p.count; k++) {
                p.signal[k] = (double)signal[k][from + x];
                p.weight[k] = (double)s.weight[k][x];
            }
            gap_nm[from + x] = best[x] < 0 ? NAN : (float)fit_pixel(table, &p, best[x]);
        }
    }
}

void uf_series_chi_square_row(const uf_series_table *table, const float *const *signal, const float *const *weight,
                              int n, const float *gap_nm, float *chi_square)
{
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST];
    for (int x = 0; x < n; x++) {
        double ii = 0, it = 0, tt = 0;
        chi_square[x] = NAN;
        if (isnan(gap_nm[x]) || table->count < 3)
            continue;
        look_up(table, (double)gap_nm[x], field, slope);
        for (int k = 0; k < table->count; k++) {
            double i = (double)signal[k][x], w = (double)weight[k][x];
            ii += w * i * i;
            it += w * i * field[k];
            tt += w * field[k] * field[k];
        }
        chi_square[x] = (float)((ii - it * it / tt) / (table->count - 1));
    }
}

/* ---- the field's pixels ---------------------------------------------------------------------- */

typedef struct series_job {
    const uf_plan *plan;
    const uf_channel *pages, *near, *wide;
    const uf_cell_map *cells;
    uf_gap_map *map;
    uf_series_table *table;
    uf_plane smooth[UF_SERIES_MOST], dye_smooth;
    float *weights; /* a row of each page a hand */
    double detection_sigma;
} series_job;

static void subtract_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    series_job *job = context;
    for (int k = 0; k < job->plan->series.count; k++) {
        float background = (float)job->pages[k].background_adu;
        if (k == job->plan->series.widest)
            continue; /* near_adu, done with the dye */
        for (int y = y0; y < y1; y++) {
            float *row = uf_plane_row(job->pages[k].image, y);
            for (int x = 0; x < job->pages[k].image.width; x++)
                row[x] -= background;
        }
    }
}

/* One over the variance that the noise model gives a page's pixel, by its smoothed signal: a pixel's own would give
 * more weight to those that noise made dark. */
static void weigh_row(const uf_channel *page, const float *smooth, int n, float *weight)
{
    float background = (float)page->background_adu, read2 = (float)(page->noise.read_adu * page->noise.read_adu);
    float per_adu = (float)(page->noise.excess2 / page->noise.gain_e_per_adu);
    float least = (float)fmax(1e-6, page->noise_adu * page->noise_adu);
    for (int x = 0; x < n; x++) {
        float variance = (background + smooth[x]) * per_adu + read2;
        weight[x] = 1.0f / (variance > least ? variance : least);
    }
}

/* Takes the weight of saturated pixels away, where two good pages are left. */
static void drop_saturated(const series_job *job, int y, int from, int n, float *const *weight)
{
    int count = job->plan->series.count;
    for (int x = 0; x < n; x++) {
        int good = count;
        for (int k = 0; k < count; k++)
            good -= job->pages[k].saturated.data && uf_mask_row(job->pages[k].saturated, y)[from + x];
        for (int k = 0; k < count && good >= 2 && good < count; k++)
            if (job->pages[k].saturated.data && uf_mask_row(job->pages[k].saturated, y)[from + x])
                weight[k][x] = 0.0f;
    }
}

static void fit_span(const series_job *job, int hand, int y, int from, int n)
{
    const float *signal[UF_SERIES_MOST], *smooth[UF_SERIES_MOST];
    float *weight[UF_SERIES_MOST];
    int count = job->plan->series.count, width = job->near->image.width, any_saturated = 0;
    for (int k = 0; k < count; k++) {
        signal[k] = uf_plane_row(job->pages[k].image, y) + from;
        smooth[k] = uf_plane_row(job->smooth[k], y) + from;
        weight[k] = job->weights + ((size_t)hand * (size_t)count + (size_t)k) * (size_t)width;
        weigh_row(&job->pages[k], smooth[k], n, weight[k]);
        any_saturated |= job->pages[k].saturated.data != NULL;
    }
    if (any_saturated)
        drop_saturated(job, y, from, n, weight);
    const float *const *w = (const float *const *)weight;
    float *gap = uf_plane_row(job->map->smooth_gap_nm, y) + from;
    uf_series_fit_row(job->table, smooth, w, n, gap);
    uf_series_chi_square_row(job->table, signal, w, n, gap, uf_plane_row(job->map->chi_square, y) + from);
}

/* Runs of pixels in cells, each fitted; the rest of the row has no gap. */
static void fit_row(const series_job *job, int hand, int y)
{
    const int32_t *labels = uf_labels_row(job->cells->labels, y);
    float *smooth = uf_plane_row(job->map->smooth_gap_nm, y), *chi_square = uf_plane_row(job->map->chi_square, y);
    int width = job->cells->labels.width;
    for (int x = 0; x < width;) {
        int from = x;
        for (; x < width && !labels[x]; x++) {
            chi_square[x] = NAN;
            smooth[x] = UF_GAP_NOWHERE;
        }
        for (from = x; x < width && labels[x];)
            x++;
        if (x > from)
            fit_span(job, hand, y, from, x - from);
    }
}

static void fit_rows(void *context, int hand, int y0, int y1)
{
    series_job *job = context;
    float least = (float)(job->detection_sigma * uf_smoothed_sd(job->plan, job->near, 0));
    float last = (float)job->table->last_nm - 0.5f;
    for (int y = y0; y < y1; y++) {
        const int32_t *labels = uf_labels_row(job->cells->labels, y);
        const float *near = uf_plane_row(job->smooth[job->plan->series.widest], y);
        float *smooth = uf_plane_row(job->map->smooth_gap_nm, y), *gap = uf_plane_row(job->map->gap_nm, y);
        uint8_t *state = uf_mask_row(job->map->state, y);
        fit_row(job, hand, y);
        for (int x = 0; x < job->cells->labels.width; x++) {
            int seen = labels[x] && near[x] > least && smooth[x] < last; /* NaN: not seen */
            state[x] = !labels[x] ? UF_GAP_OUTSIDE : seen ? UF_GAP_RESOLVED : UF_GAP_UNRESOLVED;
            gap[x] = labels[x] ? smooth[x] : NAN;
        }
    }
}

/* ---- the field's own reference, for limits ----------------------------------------------------- */

enum { SAMPLE = 1 << 14 };

static int sample_step(uf_labels labels)
{
    int step = (int)ceil(sqrt((double)labels.width * labels.height / SAMPLE));
    return step < 1 ? 1 : step;
}

/* Room for what a lattice of pixels says. */
typedef struct lattice {
    double *reference, *dye;
    size_t references, dyes;
} lattice;

/* near / dye / decay(gap) of the lattice's pixels well above detection, since chance alone lifts some just above it; and
 * the dye of all. */
static void collect(const series_job *job, double near_least, lattice *found)
{
    uf_labels labels = job->cells->labels;
    int step = sample_step(labels);
    double dye_least = job->detection_sigma * uf_smoothed_sd(job->plan, job->wide, 0);
    for (int y = step / 2; y < labels.height; y += step)
        for (int x = step / 2; x < labels.width && found->dyes < SAMPLE; x += step) {
            double dye = (double)uf_plane_row(job->dye_smooth, y)[x];
            double near = (double)uf_plane_row(job->smooth[job->plan->series.widest], y)[x];
            double gap = (double)uf_plane_row(job->map->smooth_gap_nm, y)[x];
            if (!uf_labels_row(labels, y)[x] || !(dye > dye_least))
                continue;
            found->dye[found->dyes++] = dye;
            if (uf_mask_row(job->map->state, y)[x] == UF_GAP_RESOLVED && near > near_least)
                found->reference[found->references++] = near / dye * exp(-uf_decay_ln(&job->plan->decay, gap));
        }
}

/* Where no pixel tells, the reference is what makes the detection limit of a typical pixel a gap of 0: nothing was
 * seen there. */
static uf_status own_reference(uf_work *work, const series_job *job, double *ratio, uf_error *error)
{
    lattice found = {0};
    uf_status status = uf_take(work, SAMPLE, sizeof(double), "gaps", &found.reference, error);
    if (status == UF_OK)
        status = uf_take(work, SAMPLE, sizeof(double), "gaps", &found.dye, error);
    if (status != UF_OK)
        return status;
    double least = job->detection_sigma * uf_smoothed_sd(job->plan, job->near, 0);
    collect(job, 3 * least, &found);
    *ratio = 1;
    if (found.references)
        *ratio = uf_median(found.reference, found.references);
    else if (found.dyes)
        *ratio = least / uf_median(found.dye, found.dyes);
    return UF_OK;
}

/* Beyond the search's end a pixel must be darker, over its dye, than the field's reference at that end. */
static float darkest_at_end(const series_job *job)
{
    int to_the_table_end = job->table->last_nm >= UF_SERIES_FIRST_NM + UF_SERIES_NODES - 1;
    double relative = exp(uf_decay_ln(&job->plan->decay, job->table->last_nm));
    return to_the_table_end ? -1.0f : (float)(job->plan->reference_ratio * relative);
}

static void limit_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    series_job *job = context;
    float darkest = darkest_at_end(job);
    for (int y = y0; y < y1; y++) {
        uint8_t *state = uf_mask_row(job->map->state, y);
        const float *dye = uf_plane_row(job->dye_smooth, y);
        const float *near = uf_plane_row(job->smooth[job->plan->series.widest], y);
        float *gap = uf_plane_row(job->map->gap_nm, y), *smooth = uf_plane_row(job->map->smooth_gap_nm, y);
        for (int x = 0; x < job->cells->labels.width; x++) {
            if (state[x] == UF_GAP_RESOLVED && near[x] < darkest * dye[x])
                state[x] = UF_GAP_UNRESOLVED;
            if (state[x] != UF_GAP_UNRESOLVED)
                continue;
            gap[x] = smooth[x] =
                (float)uf_gap_limit_nm(job->plan, job->detection_sigma, job->near, job->wide, (double)dye[x]);
        }
    }
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status smooth_all(uf_work *work, series_job *job, double psf_px, uf_error *error)
{
    int width = job->near->image.width, height = job->near->image.height;
    uf_status status = uf_plane_take(work, width, height, &job->dye_smooth, error);
    if (status == UF_OK)
        status = uf_smooth(work, job->map->dye_adu, psf_px, job->dye_smooth, error);
    for (int k = 0; status == UF_OK && k < job->plan->series.count; k++) {
        status = uf_plane_take(work, width, height, &job->smooth[k], error);
        if (status == UF_OK)
            status = uf_smooth(work, job->pages[k].image, psf_px, job->smooth[k], error);
    }
    return status;
}

static uf_status fit_field(uf_work *work, series_job *job, uf_plan *plan, uf_error *error)
{
    size_t row = (size_t)plan->series.count * (size_t)job->near->image.width;
    uf_field_kind kind = {&plan->bench, plan->law.model, plan->law.stray};
    uf_status status = uf_take(work, 1, sizeof *job->table, "gaps", &job->table, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)uf_hands(work) * row, sizeof(float), "gaps", &job->weights, error);
    if (status == UF_OK)
        status = smooth_all(work, job, plan->psf_sigma_um / plan->pixel_size_um, error);
    if (status != UF_OK)
        return status;
    uf_series_tabulate(&plan->series, &kind, job->table);
    uf_rows_run(work, job->near->image.height, fit_rows, job);
    double ratio = 1;
    status = own_reference(work, job, &ratio, error);
    plan->reference_ratio = uf_round_digits(ratio, 9);
    uf_rows_run(work, job->near->image.height, limit_rows, job);
    return status;
}

uf_status uf_gap_find_series(uf_work *work, uf_plan *plan, double detection_sigma, uf_channel *pages,
                             const uf_channel *wide, const uf_cell_map *cells, uf_gap_map *map, uf_error *error)
{
    uf_channel *near = &pages[plan->series.widest];
    series_job job = {.plan = plan,
                      .pages = pages,
                      .near = near,
                      .wide = wide,
                      .cells = cells,
                      .map = map,
                      .detection_sigma = detection_sigma};
    uf_status status = uf_gap_signals(work, plan, near, wide, cells, map, error);
    if (status == UF_OK)
        status = uf_plane_take(work, near->image.width, near->image.height, &map->chi_square, error);
    if (status != UF_OK)
        return status;
    uf_rows_run(work, near->image.height, subtract_rows, &job);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = fit_field(work, &job, plan, error);
    uf_arena_back(&work->arena, mark);
    return status;
}
