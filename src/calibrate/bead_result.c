/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the fit is worth: jackknife over beads, and the mean profile for the plot. */
#include <math.h>

#include "calibrate/bead_parts.h"
#include "fit/distribution.h"

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
uf_status uf_bead_jackknife(fit_job *job, const uf_nonlinear_fit *whole, uf_bead_result *result, uf_error *error)
{
    double sum[3] = {0}, sum2[3] = {0};
    int n = job->curve_count;
    for (int k = 0; k < n; k++) {
        uf_nonlinear_fit part;
        job->left_out = k;
        uf_status status = uf_bead_fit_decay(job, &part, error);
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
uf_status uf_bead_try_wider_blur(fit_job *job, double depth_nm, uf_bead_result *result, uf_error *error)
{
    uf_bead_profile kept = job->profile;
    decay_law law = job->law;
    uf_nonlinear_fit fit;
    double psf = 1.1 * job->setup->psf_sigma_um, px = job->setup->pixel_size_um;
    uf_status status = uf_bead_profile_init(&job->profile, job->setup->dye, job->setup->radius_um,
                                            sqrt(psf * psf + px * px / 12), job->reach.ring_to_um + 1, error);
    if (status == UF_OK)
        status = uf_bead_fit_decay(job, &fit, error);
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
    uf_status status = uf_take(job->work, uf_bead_rows(job), sizeof *residuals, "beads", &residuals, error);
    uf_bead_make_table(job, &job->law);
    for (int k = 0; status == UF_OK && k < job->curve_count; k++)
        (void)uf_bead_curve_residuals(job, &job->curves[k], residuals);
    return status;
}

static void fill_bins(fit_job *job, uf_bead_result *result)
{
    double weight[UF_BEAD_PLOT_BINS] = {0};
    for (int k = 0; k < UF_BEAD_PLOT_BINS; k++)
        result->bin_um[k] = result->bin_value[k] = 0;
    for (int k = 0; k < job->curve_count; k++)
        add_to_bins(job, &job->curves[k], weight, result);
    uf_bead_make_table(job, &job->law);
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

int uf_bead_images_used(const uf_bead_set *set)
{
    int count = 0, last = -1;
    for (int k = 0; k < set->count; k++)
        if (set->beads[k].state == UF_BEAD_USED && set->beads[k].image != last) {
            last = set->beads[k].image;
            count++;
        }
    return count;
}

uf_status uf_bead_fill_profile(fit_job *job, uf_bead_result *result, uf_error *error)
{
    uf_status status = settle_amplitudes(job, error);
    if (status == UF_OK)
        fill_bins(job, result);
    return status;
}
