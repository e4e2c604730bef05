/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One decay for all beads, by variable projection, and which beads obey it. */
#include <math.h>

#include "calibrate/bead_parts.h"
#include "fit/robust.h"

/* An amplitude under this share of the median is a bead off the substrate; a depth this many sigma (robust) and at least
 * this far from the median one is no bead like the others. */
static const double least_amplitude = 0.4, most_sigmas = 4, least_departure = 0.04;

/* ---- the decay ------------------------------------------------------------------------------------- */

static int is_in(const fit_job *job, int curve_index)
{
    return curve_index != job->left_out && (job->only < 0 || curve_index == job->only);
}

size_t uf_bead_rows(const fit_job *job)
{
    size_t rows = 0;
    for (int k = 0; k < job->curve_count; k++)
        rows += is_in(job, k) ? (size_t)job->curves[k].count : 0;
    return rows;
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
    uf_bead_make_table(job, &law);
    for (int k = 0; k < job->curve_count; k++)
        if (is_in(job, k))
            r += uf_bead_curve_residuals(job, &job->curves[k], r);
}

/* From job->law. A single bead is fitted for its depth alone. */
uf_status uf_bead_fit_decay(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    int count = job->only >= 0 || !job->setup->with_stray ? 1 : job->fits_stray_depth ? 3 : 2;
    uf_nonlinear problem = {count, uf_bead_rows(job), decay_residuals, NULL, job};
    *fit = (uf_nonlinear_fit){.value = {log(job->law.depth_nm), job->law.share, log(job->law.stray_depth_nm)}};
    return uf_nonlinear_solve(&problem, fit, error);
}

uf_status uf_bead_refine(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    uf_status status = uf_bead_fit_decay(job, fit, error);
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

void uf_bead_mark_dim(fit_job *job, double *scratch)
{
    double usual = median_over_beads(job, scratch, amplitude_of, (double)NAN);
    for (int k = 0; k < job->set->count; k++) {
        uf_bead *bead = &job->set->beads[k];
        if (bead->state == UF_BEAD_USED && bead->amplitude_adu < least_amplitude * usual)
            bead->state = UF_BEAD_DIM;
    }
}

uf_status uf_bead_fit_single(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < job->curve_count; k++) {
        uf_bead *bead = &job->set->beads[job->curves[k].bead];
        uf_nonlinear_fit fit;
        job->only = k;
        status = uf_bead_fit_decay(job, &fit, error);
        bead->depth_nm = fit.converged ? exp(fit.value[0]) : (double)NAN;
        bead->misfit = fit.residual_sd * fit.residual_sd;
        if (!fit.converged)
            bead->state = UF_BEAD_OUTLIER;
    }
    job->only = -1;
    return status;
}

/* How many were thrown out. */
int uf_bead_mark_outliers(fit_job *job, double *scratch)
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

uf_status uf_bead_too_few(const uf_bead_set *set, uf_error *error)
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

int uf_bead_enough(const uf_bead_set *set)
{
    return uf_beads_in_state(set, UF_BEAD_USED) >= UF_BEADS_LEAST;
}

double uf_bead_to_bead(const fit_job *job, double *scratch)
{
    double middle = median_over_beads(job, scratch, ln_depth_of, (double)NAN);
    return 1.4826 * median_over_beads(job, scratch, ln_depth_of, middle);
}
