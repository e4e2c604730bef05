/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The order of the fit: centres and decay in turn, beads unlike the rest thrown out, the stray light's depth, uncertainty. */
#include <math.h>

#include "calibrate/bead_parts.h"

enum { ROUNDS = 3, MOST_REJECTIONS = 8 };

/* The stray light's depth is fitted when its share is this many standard errors above 0, and believed when it is known to
 * within this, relative. */
static const double stray_sigmas = 5, stray_depth_known = 0.4;

/* ---- the order of things ------------------------------------------------------------------------------- */

static uf_status start(fit_job *job, double *scratch, uf_error *error)
{
    uf_bead_make_table(job, &job->law);
    for (int k = 0; k < job->set->count; k++)
        if (job->set->beads[k].state == UF_BEAD_USED) {
            uf_bead_solve(job, &job->set->beads[k], 0);
            uf_bead_solve(job, &job->set->beads[k], 1);
        }
    uf_bead_mark_dim(job, scratch);
    return uf_bead_enough(job->set) ? UF_OK : uf_bead_too_few(job->set, error);
}

static uf_status settle(fit_job *job, uf_nonlinear_fit *fit, uf_error *error)
{
    uf_status status = UF_OK;
    for (int round = 0; status == UF_OK && round < ROUNDS; round++) {
        status = uf_bead_find_centres(job, error);
        if (status == UF_OK)
            status = uf_bead_make_curves(job, error);
        if (status == UF_OK)
            status = uf_bead_refine(job, fit, error);
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
        uf_status status = uf_bead_fit_single(job, error);
        int marked = status == UF_OK ? uf_bead_mark_outliers(job, scratch) : 0;
        if (status == UF_OK && !uf_bead_enough(job->set))
            return uf_bead_too_few(job->set, error);
        if (status == UF_OK && 3 * (used - uf_beads_in_state(job->set, UF_BEAD_USED)) > used)
            return uf_fail(
                error, UF_INPUT,
                "%d of %d beads are unlike the rest: the beads do not tell one depth; look for clumps, and for an "
                "uneven near image (calibrate flat)",
                used - uf_beads_in_state(job->set, UF_BEAD_USED), used);
        if (status == UF_OK && marked)
            status = uf_bead_make_curves(job, error);
        if (status == UF_OK && marked)
            status = uf_bead_refine(job, fit, error);
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
    uf_status status = uf_bead_refine(job, &more, error);
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
        status = uf_bead_jackknife(job, &fit, result, error);
    if (status != UF_OK)
        return status;
    result->used = job->curve_count;
    result->images_used = uf_bead_images_used(job->set);
    result->scattered_depth_fitted = job->fits_stray_depth;
    result->misfit = fit.residual_sd * fit.residual_sd;
    result->core_share = (1 - result->scattered_fraction.value) / fmax(result->scattered_fraction.sd, 1e-9);
    status = uf_bead_fit_single(job, error);
    result->bead_to_bead = uf_bead_to_bead(job, scratch);
    if (status == UF_OK)
        status = uf_bead_try_wider_blur(job, result->depth_nm.value, result, error);
    if (status == UF_OK)
        status = uf_bead_fill_profile(job, result, error);
    return status == UF_OK ? check_core(result, error) : status;
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
    if (!uf_bead_enough(set))
        return uf_bead_too_few(set, error);
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
