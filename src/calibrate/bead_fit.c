/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One decay for all beads, by variable projection; its uncertainty from the spread over beads. */
#include <math.h>
#include <stdlib.h>

#include "calibrate/bead.h"
#include "calibrate/bead_reach.h"
#include "fit/distribution.h"
#include "fit/nonlinear.h"
#include "fit/robust.h"

enum { ROUNDS = 3, MOST_REJECTIONS = 8 };

/* A bead's profile is averaged over rings this wide, in pixels: too narrow to bend within. */
static const double ring_px = 0.25;

/* An amplitude under this share of the median is a bead off the substrate; a depth this many sigma (robust) and at least
 * this far from the median one is no bead like the others. */
static const double least_amplitude = 0.4, most_sigmas = 4, least_departure = 0.04;

/* The stray light's depth is fitted when its share is this many standard errors above 0, and believed when it is known to
 * within this, relative. */
static const double stray_sigmas = 5, stray_depth_known = 0.4;

/* ---- the decay and the data -------------------------------------------------------------------- */

typedef struct decay_law {
    double depth_nm, share, stray_depth_nm;
} decay_law;

/* One bead's rings, nearest first. */
typedef struct curve {
    int bead, count;
    double *r_um, *value, *root_weight;
} curve;

typedef struct fit_job {
    uf_work *work;
    const uf_bead_setup *setup;
    uf_bead_set *set;
    uf_bead_reach reach;
    uf_bead_profile profile;
    double *evanescent, *mixed; /* tables of the profile */
    decay_law law;
    curve *curves;
    int curve_count;
    int left_out, only; /* a curve, or -1 */
    int fits_stray_depth;
} fit_job;

static void make_table(fit_job *job, const decay_law *law)
{
    uf_bead_profile_of(&job->profile, law->depth_nm, job->mixed);
    if (!job->setup->with_stray)
        return;
    uf_bead_profile_of(&job->profile, law->stray_depth_nm, job->evanescent);
    for (int k = 0; k < job->profile.rows; k++)
        job->mixed[k] = (1 - law->share) * job->mixed[k] + law->share * job->evanescent[k];
}

/* ---- amplitude and background -------------------------------------------------------------------- */

/* Weighted straight line value = amplitude * model + background, fed point by point. */
typedef struct line_sums {
    double w, wm, wy, wmm, wmy;
} line_sums;

static void line_add(line_sums *s, double model, double value, double weight)
{
    s->w += weight;
    s->wm += weight * model;
    s->wy += weight * value;
    s->wmm += weight * model * model;
    s->wmy += weight * model * value;
}

static void line_solve(const line_sums *s, double *amplitude, double *background)
{
    double below = s->w * s->wmm - s->wm * s->wm;
    *amplitude = below > 0 ? (s->w * s->wmy - s->wm * s->wy) / below : 0;
    *background = s->w > 0 ? (s->wy - *amplitude * s->wm) / s->w : 0;
}

/* ---- one bead's pixels ----------------------------------------------------------------------------- */

static double pixel_r_um(const fit_job *job, const uf_bead_pixel *pixel, double x, double y)
{
    double r = job->setup->pixel_size_um * hypot((double)pixel->x_px - x, (double)pixel->y_px - y);
    return fmin(r, job->reach.ring_to_um + 1);
}

static double pixel_model(const fit_job *job, const uf_bead_pixel *pixel, double x, double y)
{
    return uf_bead_profile_at(&job->profile, job->mixed, pixel_r_um(job, pixel, x, y));
}

static double variance_at(const fit_job *job, const uf_bead *bead, double model)
{
    double variance = uf_noise_variance(&job->set->noise, bead->amplitude_adu * model + bead->background_adu);
    return variance > 0 ? variance : 1;
}

static void solve_bead(const fit_job *job, uf_bead *bead, int weighted)
{
    line_sums sums = {0};
    for (int k = 0; k < bead->pixel_count; k++) {
        double model = pixel_model(job, &bead->pixels[k], bead->x_px, bead->y_px);
        line_add(&sums, model, (double)bead->pixels[k].value_adu, weighted ? 1 / variance_at(job, bead, model) : 1);
    }
    line_solve(&sums, &bead->amplitude_adu, &bead->background_adu);
}

/* ---- centres --------------------------------------------------------------------------------------- */

typedef struct centre_job {
    const fit_job *fit;
    const uf_bead *bead;
    double *root_weight, *model;
} centre_job;

static void centre_residuals(void *context, const double *p, double *r)
{
    const centre_job *job = context;
    const uf_bead *bead = job->bead;
    double amplitude, background;
    line_sums sums = {0};
    for (int k = 0; k < bead->pixel_count; k++) {
        job->model[k] = pixel_model(job->fit, &bead->pixels[k], bead->x_px + p[0], bead->y_px + p[1]);
        line_add(&sums, job->model[k], (double)bead->pixels[k].value_adu, job->root_weight[k] * job->root_weight[k]);
    }
    line_solve(&sums, &amplitude, &background);
    for (int k = 0; k < bead->pixel_count; k++)
        r[k] = job->root_weight[k] * (amplitude * job->model[k] + background - (double)bead->pixels[k].value_adu);
}

static uf_status find_centre(const fit_job *fit, uf_bead *bead, uf_error *error)
{
    centre_job job = {fit, bead, NULL, NULL};
    uf_arena_mark mark = uf_arena_now(&fit->work->arena);
    size_t count = (size_t)bead->pixel_count;
    uf_status status = uf_take(fit->work, count, sizeof *job.root_weight, "beads", &job.root_weight, error);
    if (status == UF_OK)
        status = uf_take(fit->work, count, sizeof *job.model, "beads", &job.model, error);
    if (status == UF_OK) {
        uf_nonlinear problem = {2, count, centre_residuals, NULL, &job};
        uf_nonlinear_fit result = {.value = {0, 0}};
        for (size_t k = 0; k < count; k++)
            job.root_weight[k] =
                1 / sqrt(variance_at(fit, bead, pixel_model(fit, &bead->pixels[k], bead->x_px, bead->y_px)));
        status = uf_nonlinear_solve(&problem, &result, error);
        double most_px = fit->reach.core_sigma_um / fit->setup->pixel_size_um;
        if (status == UF_OK && result.converged && hypot(result.value[0], result.value[1]) < most_px) {
            bead->x_px += result.value[0];
            bead->y_px += result.value[1];
        }
    }
    uf_arena_back(&fit->work->arena, mark);
    return status;
}

/* ---- rings ----------------------------------------------------------------------------------------- */

static uf_status make_curve(fit_job *job, int index, curve *c, uf_error *error)
{
    uf_bead *bead = &job->set->beads[index];
    double width_um = ring_px * job->setup->pixel_size_um;
    size_t rings = (size_t)((job->reach.ring_to_um + 1) / width_um) + 2;
    *c = (curve){.bead = index};
    uf_status status = uf_take(job->work, rings, sizeof *c->r_um, "beads", &c->r_um, error);
    if (status == UF_OK)
        status = uf_take(job->work, rings, sizeof *c->value, "beads", &c->value, error);
    if (status == UF_OK)
        status = uf_take(job->work, rings, sizeof *c->root_weight, "beads", &c->root_weight, error);
    if (status != UF_OK)
        return status;
    for (size_t k = 0; k < rings; k++)
        c->r_um[k] = c->value[k] = c->root_weight[k] = 0;
    for (int k = 0; k < bead->pixel_count; k++) {
        double r = pixel_r_um(job, &bead->pixels[k], bead->x_px, bead->y_px);
        double w = 1 / variance_at(job, bead, uf_bead_profile_at(&job->profile, job->mixed, r));
        size_t ring = (size_t)(r / width_um);
        c->r_um[ring] += w * r * r;
        c->value[ring] += w * (double)bead->pixels[k].value_adu;
        c->root_weight[ring] += w;
    }
    for (size_t k = 0; k < rings; k++) {
        if (!(c->root_weight[k] > 0))
            continue;
        c->r_um[c->count] = sqrt(c->r_um[k] / c->root_weight[k]);
        c->value[c->count] = c->value[k] / c->root_weight[k];
        c->root_weight[c->count++] = sqrt(c->root_weight[k]);
    }
    return UF_OK;
}

static uf_status make_curves(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    job->curve_count = 0;
    for (int k = 0; status == UF_OK && k < job->set->count; k++)
        if (job->set->beads[k].state == UF_BEAD_USED)
            status = make_curve(job, k, &job->curves[job->curve_count++], error);
    return status;
}

/* ---- the decay ------------------------------------------------------------------------------------- */

static int is_in(const fit_job *job, int curve_index)
{
    return curve_index != job->left_out && (job->only < 0 || curve_index == job->only);
}

static size_t rows_of(const fit_job *job)
{
    size_t rows = 0;
    for (int k = 0; k < job->curve_count; k++)
        rows += is_in(job, k) ? (size_t)job->curves[k].count : 0;
    return rows;
}

/* Residuals of one curve with its own best amplitude and background, kept in the bead. */
static int curve_residuals(fit_job *job, const curve *c, double *r)
{
    uf_bead *bead = &job->set->beads[c->bead];
    line_sums sums = {0};
    for (int k = 0; k < c->count; k++) {
        r[k] = uf_bead_profile_at(&job->profile, job->mixed, c->r_um[k]);
        line_add(&sums, r[k], c->value[k], c->root_weight[k] * c->root_weight[k]);
    }
    line_solve(&sums, &bead->amplitude_adu, &bead->background_adu);
    for (int k = 0; k < c->count; k++)
        r[k] = c->root_weight[k] * (bead->amplitude_adu * r[k] + bead->background_adu - c->value[k]);
    return c->count;
}

static decay_law law_at(const fit_job *job, const double *p)
{
    decay_law law = job->law;
    law.depth_nm = exp(p[0]);
    if (job->only >= 0)
        return law;
    if (job->setup->with_stray)
        law.share = p[1];
    if (job->fits_stray_depth)
        law.stray_depth_nm = exp(p[2]);
    return law;
}

static void decay_residuals(void *context, const double *p, double *r)
{
    fit_job *job = context;
    decay_law law = law_at(job, p);
    make_table(job, &law);
    for (int k = 0; k < job->curve_count; k++)
        if (is_in(job, k))
            r += curve_residuals(job, &job->curves[k], r);
}

/* From job->law. A single bead is fitted for its depth alone. */
static uf_status fit_decay(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    int count = job->only >= 0 || !job->setup->with_stray ? 1 : job->fits_stray_depth ? 3 : 2;
    uf_nonlinear problem = {count, rows_of(job), decay_residuals, NULL, job};
    *fit = (uf_nonlinear_fit){.value = {log(job->law.depth_nm), job->law.share, log(job->law.stray_depth_nm)}};
    return uf_nonlinear_solve(&problem, fit, error);
}

static uf_status refine(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    uf_status status = fit_decay(job, fit, error);
    if (status == UF_OK && fit->converged)
        job->law = law_at(job, fit->value);
    return status;
}

/* ---- which beads ------------------------------------------------------------------------------------- */

static double median_over_beads(const fit_job *job, double *scratch, double (*value)(const uf_bead *), double about)
{
    size_t count = 0;
    for (int k = 0; k < job->set->count; k++)
        if (job->set->beads[k].state == UF_BEAD_USED)
            scratch[count++] = isnan(about) ? value(&job->set->beads[k]) : fabs(value(&job->set->beads[k]) - about);
    return uf_median(scratch, count);
}

static double amplitude_of(const uf_bead *bead)
{
    return bead->amplitude_adu;
}

static double ln_depth_of(const uf_bead *bead)
{
    return log(bead->depth_nm);
}

static void mark_dim(fit_job *job, double *scratch)
{
    double usual = median_over_beads(job, scratch, amplitude_of, (double)NAN);
    for (int k = 0; k < job->set->count; k++) {
        uf_bead *bead = &job->set->beads[k];
        if (bead->state == UF_BEAD_USED && bead->amplitude_adu < least_amplitude * usual)
            bead->state = UF_BEAD_DIM;
    }
}

static uf_status fit_single_beads(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < job->curve_count; k++) {
        uf_bead *bead = &job->set->beads[job->curves[k].bead];
        uf_nonlinear_fit fit;
        job->only = k;
        status = fit_decay(job, &fit, error);
        bead->depth_nm = fit.converged ? exp(fit.value[0]) : (double)NAN;
        bead->misfit = fit.residual_sd * fit.residual_sd;
        if (!fit.converged)
            bead->state = UF_BEAD_OUTLIER;
    }
    job->only = -1;
    return status;
}

/* How many were thrown out. */
static int mark_outliers(fit_job *job, double *scratch)
{
    int marked = 0;
    double middle = median_over_beads(job, scratch, ln_depth_of, (double)NAN);
    double sd = 1.4826 * median_over_beads(job, scratch, ln_depth_of, middle);
    for (int k = 0; k < job->set->count; k++) {
        uf_bead *bead = &job->set->beads[k];
        double away = fabs(log(bead->depth_nm) - middle);
        if (bead->state != UF_BEAD_USED || !(away > fmax(most_sigmas * sd, least_departure)))
            continue;
        bead->state = UF_BEAD_OUTLIER;
        marked++;
    }
    return marked;
}

static const char *mend_for(const uf_bead_set *set)
{
    if (set->count == 0)
        return "no cores of the size that the radius gives: check radius, pixel size and channel";
    if (2 * uf_beads_in_state(set, UF_BEAD_SATURATED) > set->count)
        return "expose less";
    if (2 * uf_beads_in_state(set, UF_BEAD_OVERLAPPING) > set->count)
        return "cores lie closer than beads of this radius can: check the radius (not diameter), the pixel size, "
               "where the "
               "dye is, and that the beads touch the substrate";
    return "add images, with beads apart from each other and from the edge";
}

static uf_status too_few(const uf_bead_set *set, uf_error *error)
{
    int used = uf_beads_in_state(set, UF_BEAD_USED);
    return uf_fail(
        error, UF_INPUT,
        "%d bead%s can be used of %d found, expected at least %d, better 12 (%d saturated, %d at the edge, %d "
        "overlapping, %d dim, %d unlike the rest): %s",
        used, used == 1 ? "" : "s", set->count, UF_BEADS_LEAST, uf_beads_in_state(set, UF_BEAD_SATURATED),
        uf_beads_in_state(set, UF_BEAD_AT_EDGE), uf_beads_in_state(set, UF_BEAD_OVERLAPPING),
        uf_beads_in_state(set, UF_BEAD_DIM), uf_beads_in_state(set, UF_BEAD_OUTLIER), mend_for(set));
}

static int enough(const uf_bead_set *set)
{
    return uf_beads_in_state(set, UF_BEAD_USED) >= UF_BEADS_LEAST;
}

/* ---- the order of things ------------------------------------------------------------------------------- */

static uf_status find_centres(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    make_table(job, &job->law);
    for (int k = 0; status == UF_OK && k < job->set->count; k++) {
        uf_bead *bead = &job->set->beads[k];
        if (bead->state != UF_BEAD_USED)
            continue;
        status = find_centre(job, bead, error);
        solve_bead(job, bead, 1);
    }
    return status;
}

static uf_status start(fit_job *job, double *scratch, uf_error *error)
{
    make_table(job, &job->law);
    for (int k = 0; k < job->set->count; k++)
        if (job->set->beads[k].state == UF_BEAD_USED) {
            solve_bead(job, &job->set->beads[k], 0);
            solve_bead(job, &job->set->beads[k], 1);
        }
    mark_dim(job, scratch);
    return enough(job->set) ? UF_OK : too_few(job->set, error);
}

static uf_status settle(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    uf_status status = UF_OK;
    for (int round = 0; status == UF_OK && round < ROUNDS; round++) {
        status = find_centres(job, error);
        if (status == UF_OK)
            status = make_curves(job, error);
        if (status == UF_OK)
            status = refine(job, fit, error);
    }
    if (status == UF_OK && !fit->converged)
        return uf_fail(
            error, UF_INPUT,
            "no decay fits the %d beads: is --radius-nm their radius (not diameter), the pixel size right, the "
            "dye where --dye says?",
            job->curve_count);
    return status;
}

static uf_status reject(fit_job *job, uf_nonlinear_fit *fit, double *scratch, uf_error *error)
{
    int used = job->curve_count;
    for (int round = 0; round < MOST_REJECTIONS; round++) {
        uf_status status = fit_single_beads(job, error);
        int marked = status == UF_OK ? mark_outliers(job, scratch) : 0;
        if (status == UF_OK && !enough(job->set))
            return too_few(job->set, error);
        if (status == UF_OK && 3 * (used - uf_beads_in_state(job->set, UF_BEAD_USED)) > used)
            return uf_fail(
                error, UF_INPUT,
                "%d of %d beads are unlike the rest: the beads do not tell one depth; look for clumps, and for an "
                "uneven near image (calibrate flat)",
                used - uf_beads_in_state(job->set, UF_BEAD_USED), used);
        if (status == UF_OK && marked)
            status = make_curves(job, error);
        if (status == UF_OK && marked)
            status = refine(job, fit, error);
        if (status != UF_OK || !marked)
            return status;
    }
    return UF_OK;
}

/* The depth of the stray light too, where it can be told. */
static uf_status try_stray_depth(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    decay_law before = job->law;
    uf_nonlinear_fit more;
    double share_sd = fit->residual_sd * sqrt(fit->covariance[1][1]);
    if (!job->setup->with_stray || !(fit->value[1] > stray_sigmas * share_sd))
        return UF_OK;
    job->fits_stray_depth = 1;
    uf_status status = refine(job, &more, error);
    if (status != UF_OK)
        return status;
    double relative = more.residual_sd * sqrt(more.covariance[2][2]), nm = exp(more.value[2]);
    if (more.converged && relative < stray_depth_known && nm > 3 * exp(more.value[0]) && nm < 20000)
        *fit = more;
    else {
        job->fits_stray_depth = 0;
        job->law = before;
    }
    return UF_OK;
}

/* ---- uncertainty ----------------------------------------------------------------------------------------- */

static void take_figure(uf_bead_figure *figure, double value, double sum, double sum2, int n)
{
    double mean = sum / n, spread = fmax(0, sum2 - n * mean * mean);
    figure->value = value;
    figure->sd = sqrt((n - 1.0) / n * spread);
    double half = uf_t_factor(0.95, n - 1) * figure->sd;
    figure->low = value - half;
    figure->high = value + half;
}

/* An interval of a logarithm, back. */
static void take_exponential(uf_bead_figure *figure)
{
    double sd = figure->sd;
    *figure = (uf_bead_figure){exp(figure->value), exp(figure->value) * sd, exp(figure->low), exp(figure->high)};
}

/* Each bead left out once; differences to the whole are summed, so that squares lose no digits. */
static uf_status jackknife(fit_job *job, const uf_nonlinear_fit *whole, uf_bead_result *result, uf_error *error)
{
    double sum[3] = {0}, sum2[3] = {0};
    int n = job->curve_count;
    for (int k = 0; k < n; k++) {
        uf_nonlinear_fit part;
        job->left_out = k;
        uf_status status = fit_decay(job, &part, error);
        if (status != UF_OK)
            return status;
        for (int i = 0; i < 3; i++) {
            double away = part.converged ? part.value[i] - whole->value[i] : 0;
            sum[i] += away;
            sum2[i] += away * away;
        }
    }
    job->left_out = -1;
    take_figure(&result->depth_nm, whole->value[0], sum[0], sum2[0], n);
    take_exponential(&result->depth_nm);
    result->scattered_fraction = (uf_bead_figure){0, 0, 0, 0};
    result->scattered_depth_nm = (uf_bead_figure){job->law.stray_depth_nm, (double)NAN, (double)NAN, (double)NAN};
    if (job->setup->with_stray)
        take_figure(&result->scattered_fraction, whole->value[1], sum[1], sum2[1], n);
    if (job->fits_stray_depth) {
        take_figure(&result->scattered_depth_nm, whole->value[2], sum[2], sum2[2], n);
        take_exponential(&result->scattered_depth_nm);
    }
    return UF_OK;
}

/* The same rings through a blur a tenth wider. */
static uf_status try_wider_blur(fit_job *job, double depth_nm, uf_bead_result *result, uf_error *error)
{
    uf_bead_profile kept = job->profile;
    decay_law law = job->law;
    uf_nonlinear_fit fit;
    double psf = 1.1 * job->setup->psf_sigma_um, px = job->setup->pixel_size_um;
    uf_status status = uf_bead_profile_init(&job->profile, job->setup->dye, job->setup->radius_um,
                                            sqrt(psf * psf + px * px / 12), job->reach.ring_to_um + 1, error);
    if (status == UF_OK)
        status = fit_decay(job, &fit, error);
    result->depth_per_psf_nm = status == UF_OK && fit.converged ? exp(fit.value[0]) - depth_nm : (double)NAN;
    uf_bead_profile_free(&job->profile);
    job->profile = kept;
    job->law = law;
    return status;
}

/* ---- for the plot ------------------------------------------------------------------------------------------ */

static int plot_bin(const fit_job *job, double r)
{
    int bin = (int)(r / job->reach.inner_um * UF_BEAD_PLOT_BINS);
    return r > job->reach.inner_um ? -1 : bin < UF_BEAD_PLOT_BINS ? bin : UF_BEAD_PLOT_BINS - 1;
}

static void add_to_bins(const fit_job *job, const curve *c, double *weight, uf_bead_result *result)
{
    const uf_bead *bead = &job->set->beads[c->bead];
    for (int k = 0; k < c->count; k++) {
        int bin = plot_bin(job, c->r_um[k]);
        double root = c->root_weight[k] * bead->amplitude_adu, w = root * root;
        if (bin < 0)
            continue;
        weight[bin] += w;
        result->bin_um[bin] += w * c->r_um[k];
        result->bin_value[bin] += w * (c->value[k] - bead->background_adu) / bead->amplitude_adu;
    }
}

/* Amplitudes and backgrounds at the law in force: fits of other laws have left theirs. */
static uf_status settle_amplitudes(fit_job *job, uf_error *error)
{
    double *residuals;
    uf_status status = uf_take(job->work, rows_of(job), sizeof *residuals, "beads", &residuals, error);
    make_table(job, &job->law);
    for (int k = 0; status == UF_OK && k < job->curve_count; k++)
        (void)curve_residuals(job, &job->curves[k], residuals);
    return status;
}

static void fill_bins(fit_job *job, uf_bead_result *result)
{
    double weight[UF_BEAD_PLOT_BINS] = {0};
    for (int k = 0; k < UF_BEAD_PLOT_BINS; k++)
        result->bin_um[k] = result->bin_value[k] = 0;
    for (int k = 0; k < job->curve_count; k++)
        add_to_bins(job, &job->curves[k], weight, result);
    make_table(job, &job->law);
    uf_bead_profile_of(&job->profile, job->law.depth_nm, job->evanescent);
    result->bins = 0;
    for (int k = 0; k < UF_BEAD_PLOT_BINS; k++) {
        if (!(weight[k] > 0))
            continue;
        int at = result->bins++;
        double r = result->bin_um[k] / weight[k];
        result->bin_um[at] = r;
        result->bin_height_nm[at] = uf_bead_height_nm(job->setup->radius_um, r);
        result->bin_value[at] = result->bin_value[k] / weight[k];
        result->bin_sd[at] = 1 / sqrt(weight[k]);
        result->bin_model[at] = uf_bead_profile_at(&job->profile, job->mixed, r);
        result->bin_evanescent[at] = (1 - job->law.share) * uf_bead_profile_at(&job->profile, job->evanescent, r);
    }
}

static int images_used(const uf_bead_set *set)
{
    int count = 0, last = -1;
    for (int k = 0; k < set->count; k++)
        if (set->beads[k].state == UF_BEAD_USED && set->beads[k].image != last) {
            last = set->beads[k].image;
            count++;
        }
    return count;
}

static double bead_to_bead(const fit_job *job, double *scratch)
{
    double middle = median_over_beads(job, scratch, ln_depth_of, (double)NAN);
    return 1.4826 * median_over_beads(job, scratch, ln_depth_of, middle);
}

/* ---- all of it ------------------------------------------------------------------------------------------------ */

static uf_status check_core(const uf_bead_result *r, uf_error *error)
{
    if (r->core_share > 5 && r->scattered_fraction.value < 0.7)
        return UF_OK;
    return uf_fail(
        error, UF_INPUT,
        "the beads show no evanescent core: %.0f %% of the light is stray; do they touch the substrate, and is "
        "the beam beyond the critical angle?",
        100 * fmin(1, r->scattered_fraction.value));
}

static uf_status fit_in(fit_job *job, double *scratch, uf_bead_result *result, uf_error *error)
{
    uf_nonlinear_fit fit;
    uf_status status = start(job, scratch, error);
    if (status == UF_OK)
        status = settle(job, &fit, error);
    if (status == UF_OK)
        status = reject(job, &fit, scratch, error);
    if (status == UF_OK)
        status = try_stray_depth(job, &fit, error);
    if (status == UF_OK)
        status = jackknife(job, &fit, result, error);
    if (status != UF_OK)
        return status;
    result->used = job->curve_count;
    result->images_used = images_used(job->set);
    result->scattered_depth_fitted = job->fits_stray_depth;
    result->misfit = fit.residual_sd * fit.residual_sd;
    result->core_share = (1 - result->scattered_fraction.value) / fmax(result->scattered_fraction.sd, 1e-9);
    status = fit_single_beads(job, error);
    result->bead_to_bead = bead_to_bead(job, scratch);
    if (status == UF_OK)
        status = try_wider_blur(job, result->depth_nm.value, result, error);
    if (status == UF_OK)
        status = settle_amplitudes(job, error);
    if (status != UF_OK)
        return status;
    fill_bins(job, result);
    return check_core(result, error);
}

uf_status uf_beads_fit(uf_work *work, const uf_bead_setup *setup, uf_bead_set *set, uf_bead_result *result,
                       uf_error *error)
{
    fit_job job = {.work = work,
                   .setup = setup,
                   .set = set,
                   .reach = uf_bead_reach_of(setup),
                   .law = {setup->expected_depth_nm, setup->with_stray ? 0.1 : 0, setup->scattered_depth_nm},
                   .left_out = -1,
                   .only = -1};
    double *scratch = NULL;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t beads = (size_t)set->count + 1;
    *result = (uf_bead_result){0};
    if (!enough(set))
        return too_few(set, error);
    uf_status status = uf_bead_profile_init(&job.profile, setup->dye, setup->radius_um, job.reach.blur_um,
                                            job.reach.ring_to_um + 1, error);
    size_t rows = (size_t)job.profile.rows + 64;
    if (status == UF_OK)
        status = uf_take(work, rows, sizeof *job.mixed, "beads", &job.mixed, error);
    if (status == UF_OK)
        status = uf_take(work, rows, sizeof *job.evanescent, "beads", &job.evanescent, error);
    if (status == UF_OK)
        status = uf_take(work, beads, sizeof *job.curves, "beads", &job.curves, error);
    if (status == UF_OK)
        status = uf_take(work, beads, sizeof *scratch, "beads", &scratch, error);
    if (status == UF_OK)
        status = fit_in(&job, scratch, result, error);
    uf_bead_profile_free(&job.profile);
    uf_arena_back(&work->arena, mark);
    return status;
}
