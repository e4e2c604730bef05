/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "correct/halo.h"

#include <math.h>
#include <string.h>

#include "base/text.h"
#include "fit/linear.h"
#include "image/smooth.h"

/* Where the first of these fits best, the light is no halo but the dorsal membrane's, a little out of focus: it belongs to
 * the cell and to the reference, and stays. */
static const double blurs_um[] = {1.2, 1.7, 2.4, 3.4, 4.8, 6.8};
enum { BLURS = sizeof blurs_um / sizeof blurs_um[0], ROUNDS = 3, LEAST_BLOCKS = 200, MOST_BLOCKS = 20000 };

static const double clear_um = 3.0;      /* beyond the reach of sharp light */
static const double least_share = 0.002; /* less is of no consequence: a quarter of a nanometre */
static const double least_sigmas = 4;
static const double outlier_sigmas = 3.5;

enum { LEVEL, ACROSS, DOWN, BOW_ACROSS, BOW_DOWN, SHARE, PARAMETERS };

typedef struct halo_job {
    const uf_cell_map *cells;
    double clear_px;
    uf_plane target;    /* the channel on the coarse grid */
    uf_plane light;     /* of the cells, nothing outside */
    uf_plane blurred;   /* that, at the blur in hand */
    double light_scale; /* brings the regressor to order one */
    int stride;         /* every so many blocks are fitted: MOST_BLOCKS tell as much as all */
    int parameters;     /* PARAMETERS, or SHARE: without a halo */
    uf_linear_fit fit;
    double rows;          /* that the fit stood on */
    double share_by_blur; /* 1 sigma of the share by that of the blur */
} halo_job;

/* ---- the fit at one blur --------------------------------------------------------------------- */

static void regressors(const halo_job *job, int x, int y, double *out)
{
    out[LEVEL] = 1;
    out[ACROSS] = (x + 0.5) / job->target.width - 0.5;
    out[DOWN] = (y + 0.5) / job->target.height - 0.5;
    out[BOW_ACROSS] = out[ACROSS] * out[ACROSS];
    out[BOW_DOWN] = out[DOWN] * out[DOWN];
    out[SHARE] = (double)uf_plane_row(job->blurred, y)[x] / job->light_scale;
}

static double fitted_at(const halo_job *job, int x, int y)
{
    double regressor[PARAMETERS], sum = 0;
    regressors(job, x, y, regressor);
    for (int k = 0; k < job->parameters; k++)
        sum += job->fit.value[k] * regressor[k];
    return sum;
}

/* One pass of least squares over the blocks outside; those further than `limit` from the last fit are left out. */
static int fit_once(halo_job *job, double limit)
{
    uf_linear sums = {.parameters = job->parameters};
    double regressor[PARAMETERS];
    for (int y = 0; y < job->target.height; y += job->stride)
        for (int x = 0; x < job->target.width; x += job->stride) {
            double value = (double)uf_plane_row(job->target, y)[x];
            if ((double)uf_plane_row(job->cells->outside_px, y)[x] < job->clear_px)
                continue;
            regressors(job, x, y, regressor);
            uf_linear_add(&sums, regressor, value, fabs(value - fitted_at(job, x, y)) <= limit);
        }
    job->rows = sums.rows;
    return sums.rows >= LEAST_BLOCKS && uf_linear_solve(&sums, &job->fit);
}

/* Least squares, outliers left out in the later rounds; 0 when the field does not tell. */
static int fit_rounds(halo_job *job, int parameters)
{
    double limit = (double)INFINITY;
    job->parameters = parameters;
    job->fit = (uf_linear_fit){0};
    for (int round = 0; round < ROUNDS; round++) {
        if (!fit_once(job, limit))
            return 0;
        limit = outlier_sigmas * job->fit.residual_sd;
    }
    return 1;
}

/* ---- the light of the cells ------------------------------------------------------------------ */

/* Mean over each block of the source above its background, counted as 0 outside outlines. */
static void reduce_inside(const uf_channel *source, const uf_cell_map *cells, uf_plane light)
{
    int factor = cells->factor;
    float background = (float)source->background_adu;
    for (int y = 0; y < light.height; y++)
        memset(uf_plane_row(light, y), 0, (size_t)light.width * sizeof(float));
    for (int y = 0; y < source->image.height; y++) {
        const float *image = uf_plane_row(source->image, y);
        const int32_t *labels = uf_labels_row(cells->labels, y);
        float *out = uf_plane_row(light, y / factor);
        for (int x = 0; x < source->image.width; x++)
            if (labels[x])
                out[x / factor] += image[x] - background;
    }
    float per_block = 1.0f / (float)(factor * factor);
    for (int y = 0; y < light.height; y++)
        for (int x = 0; x < light.width; x++)
            uf_plane_row(light, y)[x] *= per_block;
}

/* A wide image's own light holds its halo already: takes it out again. Once is enough: share times light is the same
 * product before and after. */
static void take_halo_from_light(halo_job *job)
{
    float share = (float)(job->fit.value[SHARE] / job->light_scale);
    for (int y = 0; y < job->light.height; y++) {
        float *light = uf_plane_row(job->light, y);
        const float *blurred = uf_plane_row(job->blurred, y);
        for (int x = 0; x < job->light.width; x++)
            if (light[x] > 0.0f)
                light[x] = fmaxf(0.0f, light[x] - share * blurred[x]);
    }
}

static double largest(uf_plane plane)
{
    float most = 0.0f;
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            most = fmaxf(most, uf_plane_row(plane, y)[x]);
    return (double)most;
}

/* ---- choosing the blur ----------------------------------------------------------------------- */

/* A wide blur needs no fine grid: it is done on one of about two fifths of its sigma and read back between the points. */
static uf_status blur_coarsely(uf_work *work, halo_job *job, double sigma, int step, uf_error *error)
{
    int width = job->light.width, height = job->light.height;
    uf_plane coarse;
    uf_expand_column *columns;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_plane_take(work, (width + step - 1) / step, (height + step - 1) / step, &coarse, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)width, sizeof *columns, "the halo", &columns, error);
    if (status == UF_OK) {
        uf_reduce(work, job->light, step, coarse);
        status = uf_smooth(work, coarse, sigma / step, coarse, error);
    }
    if (status == UF_OK) {
        uf_expand_columns(coarse.width, step, width, columns);
        for (int y = 0; y < height; y++)
            uf_expand_row(coarse, step, y, columns, uf_plane_row(job->blurred, y), width);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

static uf_status blur_light(uf_work *work, halo_job *job, double blur_px, uf_error *error)
{
    double sigma = blur_px / job->cells->factor;
    int step = (int)(sigma / 2.5);
    return step > 1 ? blur_coarsely(work, job, sigma, step, error)
                    : uf_smooth(work, job->light, sigma, job->blurred, error);
}

static int is_told(const halo_job *job)
{
    double share = job->fit.value[SHARE], sd = job->fit.sd[SHARE];
    return share > least_sigmas * sd && share > least_share * job->light_scale;
}

/* What a blur leaves of scatter, as a variance, and the share it gives; NaN when no halo is told. */
typedef struct trial {
    double scatter, share;
} trial;

static uf_status try_blur(uf_work *work, halo_job *job, double pixel_size_um, double blur_um, trial *out,
                          uf_error *error)
{
    uf_status status = blur_light(work, job, blur_um / pixel_size_um, error);
    int told = status == UF_OK && fit_rounds(job, PARAMETERS) && is_told(job);
    out->scatter = told ? job->fit.residual_sd * job->fit.residual_sd : (double)NAN;
    out->share = told ? job->fit.value[SHARE] : (double)NAN;
    return status;
}

enum { FINE = 3 };
static const double fine_step = 1.0 / 12;

/* The bottom of a parabola through the scatter at steps -FINE .. FINE, as a step; the middle when there is none. Where the
 * sum of squares has risen by one residual variance the blur is one sigma off, and the share with it. */
static double bottom(halo_job *job, const trial *trials)
{
    uf_linear sums = {.parameters = 3};
    uf_linear_fit fit;
    for (int k = -FINE; k <= FINE; k++) {
        const double x[] = {1, k, k * k};
        if (!isnan(trials[k + FINE].scatter))
            uf_linear_add(&sums, x, trials[k + FINE].scatter / trials[FINE].scatter, 1);
    }
    if (isnan(trials[FINE].scatter) || !uf_linear_solve(&sums, &fit) || !(fit.value[2] > 0))
        return 0;
    double sd_steps = fmin(FINE, 1 / sqrt(job->rows * fit.value[2]));
    double per_step = (trials[FINE + 1].share - trials[FINE - 1].share) / 2;
    job->share_by_blur = isnan(per_step) ? 0 : fabs(per_step) * sd_steps;
    return fmin(fmax(-fit.value[1] / (2 * fit.value[2]), -FINE), FINE);
}

/* The blur that leaves the least scatter, first of the list, then between its neighbours; 0 when there is no halo to
 * tell. */
static uf_status choose_blur(uf_work *work, halo_job *job, double pixel_size_um, double *blur_um, uf_error *error)
{
    double least = (double)INFINITY;
    trial trials[2 * FINE + 1];
    int best = 0;
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < BLURS; k++) {
        trial here;
        status = try_blur(work, job, pixel_size_um, blurs_um[k], &here, error);
        if (here.scatter < least) {
            least = here.scatter;
            best = k;
        }
    }
    *blur_um = 0;
    if (status != UF_OK || best == 0)
        return status;
    for (int k = -FINE; status == UF_OK && k <= FINE; k++)
        status = try_blur(work, job, pixel_size_um, blurs_um[best] * (1 + k * fine_step), &trials[k + FINE], error);
    *blur_um = uf_round_digits(blurs_um[best] * (1 + bottom(job, trials) * fine_step), 9);
    return status;
}

/* Finds the halo of `job`; with `own` the light is the channel's own and is cleaned once and fitted again. */
static uf_status find_halo(uf_work *work, halo_job *job, double pixel_size_um, int own, uf_halo *halo,
                           uf_error *error)
{
    uf_status status = choose_blur(work, job, pixel_size_um, &halo->blur_um, error);
    for (int round = 0; status == UF_OK && halo->blur_um > 0 && round < (own ? 2 : 1); round++) {
        if (round)
            take_halo_from_light(job);
        status = blur_light(work, job, halo->blur_um / pixel_size_um, error);
        if (status == UF_OK && !(fit_rounds(job, PARAMETERS) && is_told(job)))
            halo->blur_um = 0;
    }
    if (status != UF_OK || !(halo->blur_um > 0))
        return status;
    halo->share = uf_round_digits(job->fit.value[SHARE] / job->light_scale, 9);
    halo->share_sd = uf_round_digits(hypot(job->fit.sd[SHARE], job->share_by_blur) / job->light_scale, 9);
    return UF_OK;
}

/* ---- taking it out --------------------------------------------------------------------------- */

/* Everything fitted but the level, on the coarse grid, in the place of `blurred`. */
static void lay_out(halo_job *job)
{
    double level = job->fit.value[LEVEL];
    for (int y = 0; y < job->blurred.height; y++)
        for (int x = 0; x < job->blurred.width; x++)
            uf_plane_row(job->blurred, y)[x] = (float)(fitted_at(job, x, y) - level);
}

static uf_status subtract(uf_work *work, uf_plane coarse, int factor, uf_plane image, uf_error *error)
{
    uf_expand_column *columns;
    float *row;
    uf_status status = uf_take(work, (size_t)image.width, sizeof *columns, "the halo", &columns, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)image.width, sizeof *row, "the halo", &row, error);
    if (status != UF_OK)
        return status;
    uf_expand_columns(coarse.width, factor, image.width, columns);
    for (int y = 0; y < image.height; y++) {
        float *out = uf_plane_row(image, y);
        uf_expand_row(coarse, factor, y, columns, row, image.width);
        for (int x = 0; x < image.width; x++)
            out[x] -= row[x];
    }
    return UF_OK;
}

/* Whether slopes or bows of the background can be told from noise. */
static int slope_is_told(const halo_job *job)
{
    const uf_linear_fit *fit = &job->fit;
    for (int k = ACROSS; k <= BOW_DOWN; k++)
        if (fabs(fit->value[k]) > least_sigmas * fit->sd[k] && fabs(fit->value[k]) > fit->residual_sd)
            return 1;
    return 0;
}

/* Highest minus lowest of slope t + bow t^2 over t = -1/2 .. 1/2. */
static double change_along(double slope, double bow)
{
    double left = -slope / 2 + bow / 4, right = slope / 2 + bow / 4, turn = bow != 0 ? -slope / (2 * bow) : 1;
    double inside = fabs(turn) < 0.5 ? slope * turn + bow * turn * turn : left;
    return fmax(fmax(left, right), inside) - fmin(fmin(left, right), inside);
}

static void settle_background(const halo_job *job, const uf_halo *halo, uf_channel *channel)
{
    double within = halo->share_sd * job->light_scale; /* what an error of the share leaves inside cells */
    channel->background_adu = uf_round_digits(job->fit.value[LEVEL], 12);
    channel->background_sd_adu = job->fit.sd[LEVEL];
    channel->halo_sd_adu = within;
    channel->noise_adu = sqrt(uf_noise_variance(&channel->noise, channel->background_adu));
}

static uf_status take_planes(uf_work *work, halo_job *job, uf_error *error)
{
    int width = job->cells->outside_px.width, height = job->cells->outside_px.height;
    uf_status status = uf_plane_take(work, width, height, &job->target, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &job->light, error);
    return status == UF_OK ? uf_plane_take(work, width, height, &job->blurred, error) : status;
}

static uf_status remove_halo(uf_work *work, halo_job *job, const uf_channel *source, double pixel_size_um,
                             uf_channel *channel, uf_halo *halo, uf_error *error)
{
    uf_status status = take_planes(work, job, error);
    if (status != UF_OK)
        return status;
    job->stride = 1 + (int)sqrt((double)job->target.width * job->target.height / MOST_BLOCKS);
    uf_reduce(work, channel->image, job->cells->factor, job->target);
    reduce_inside(source, job->cells, job->light);
    job->light_scale = fmax(1, largest(job->light));
    status = find_halo(work, job, pixel_size_um, source == channel, halo, error);
    if (status != UF_OK)
        return status;
    if (halo->share == 0 && !(fit_rounds(job, SHARE) && slope_is_told(job)))
        return UF_OK;
    double steepest = fmax(change_along(job->fit.value[ACROSS], job->fit.value[BOW_ACROSS]),
                           change_along(job->fit.value[DOWN], job->fit.value[BOW_DOWN]));
    halo->slope = slope_is_told(job) && job->fit.value[LEVEL] > 0 ? steepest / job->fit.value[LEVEL] : 0;
    lay_out(job);
    settle_background(job, halo, channel);
    return subtract(work, job->blurred, job->cells->factor, channel->image, error);
}

uf_status uf_halo_remove(uf_work *work, const uf_channel *source, const uf_cell_map *cells, double pixel_size_um,
                         uf_channel *channel, uf_halo *halo, uf_error *error)
{
    halo_job job = {.cells = cells, .clear_px = clear_um / pixel_size_um};
    *halo = (uf_halo){0};
    if (!cells->labels.count)
        return UF_OK;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = remove_halo(work, &job, source, pixel_size_um, channel, halo, error);
    uf_arena_back(&work->arena, mark);
    return status;
}
