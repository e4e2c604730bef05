/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a bead's pixels to its centre and its rings. */
#include <math.h>

#include "calibrate/bead_parts.h"

/* A bead's profile is averaged over rings this wide, in pixels: too narrow to bend within. */
static const double ring_px = 0.25;

void uf_bead_make_table(fit_job *job, const decay_law *law)
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

void uf_bead_solve(const fit_job *job, uf_bead *bead, int weighted)
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

uf_status uf_bead_find_centres(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    uf_bead_make_table(job, &job->law);
    for (int k = 0; status == UF_OK && k < job->set->count; k++) {
        uf_bead *bead = &job->set->beads[k];
        if (bead->state != UF_BEAD_USED)
            continue;
        status = find_centre(job, bead, error);
        uf_bead_solve(job, bead, 1);
    }
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

uf_status uf_bead_make_curves(fit_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    job->curve_count = 0;
    for (int k = 0; status == UF_OK && k < job->set->count; k++)
        if (job->set->beads[k].state == UF_BEAD_USED)
            status = make_curve(job, k, &job->curves[job->curve_count++], error);
    return status;
}

/* Residuals of one curve with its own best amplitude and background, kept in the bead. */
int uf_bead_curve_residuals(fit_job *job, const curve *c, double *r)
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
