/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/nonlinear.h"

#include <gsl/gsl_blas.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_multifit_nlinear.h>
#include <math.h>
#include <stdlib.h>

enum { MOST_STEPS = 400 };
static const double step_tolerance = 1e-10, slope_tolerance = 1e-14;

/* A cube root of the machine's precision: what central differences lose least at. */
static const double difference_step = 6e-6;

static int all_finite(const double *values, size_t count)
{
    for (size_t k = 0; k < count; k++)
        if (!isfinite(values[k]))
            return 0;
    return 1;
}

/* What the solver hands round: the problem, and room for two rows of residuals where slopes are differences. */
typedef struct fit_job {
    const uf_nonlinear *problem;
    double *above, *below;
} fit_job;

static int gsl_residuals(const gsl_vector *p, void *context, gsl_vector *r)
{
    const uf_nonlinear *problem = ((const fit_job *)context)->problem;
    problem->residuals(problem->context, p->data, r->data);
    return all_finite(r->data, r->size) ? GSL_SUCCESS : GSL_EDOM;
}

static void slopes_by_differences(const fit_job *job, const double *at, double *j)
{
    const uf_nonlinear *problem = job->problem;
    double p[UF_NONLINEAR_LIMIT];
    int count = problem->parameters;
    for (int i = 0; i < count; i++)
        p[i] = at[i];
    for (int i = 0; i < count; i++) {
        double step = difference_step * (at[i] != 0 ? fabs(at[i]) : 1);
        p[i] = at[i] + step;
        problem->residuals(problem->context, p, job->above);
        p[i] = at[i] - step;
        problem->residuals(problem->context, p, job->below);
        p[i] = at[i];
        for (size_t k = 0; k < problem->rows; k++)
            j[k * (size_t)count + (size_t)i] = (job->above[k] - job->below[k]) / (2 * step);
    }
}

static int gsl_slopes(const gsl_vector *p, void *context, gsl_matrix *j)
{
    const fit_job *job = context;
    if (job->problem->slopes)
        job->problem->slopes(job->problem->context, p->data, j->data);
    else
        slopes_by_differences(job, p->data, j->data);
    return all_finite(j->data, j->size1 * j->size2) ? GSL_SUCCESS : GSL_EDOM;
}

static void take_result(const uf_nonlinear *problem, gsl_multifit_nlinear_workspace *space, uf_nonlinear_fit *fit)
{
    double covariance[UF_NONLINEAR_LIMIT * UF_NONLINEAR_LIMIT] = {0};
    size_t count = (size_t)problem->parameters;
    gsl_matrix_view c = gsl_matrix_view_array(covariance, count, count);
    int has_covariance = gsl_multifit_nlinear_covar(gsl_multifit_nlinear_jac(space), 0.0, &c.matrix) == GSL_SUCCESS;
    for (size_t i = 0; i < count; i++) {
        fit->value[i] = gsl_vector_get(gsl_multifit_nlinear_position(space), i);
        for (size_t k = 0; k < count; k++)
            fit->covariance[i][k] = has_covariance ? gsl_matrix_get(&c.matrix, i, k) : (double)NAN;
    }
    double size = gsl_blas_dnrm2(gsl_multifit_nlinear_residual(space));
    fit->sum_of_squares = size * size;
    if (problem->rows > count)
        fit->residual_sd = size / sqrt((double)(problem->rows - count));
    fit->steps = (int)gsl_multifit_nlinear_niter(space);
}

static void solve_in(fit_job *job, gsl_multifit_nlinear_workspace *space, uf_nonlinear_fit *fit)
{
    const uf_nonlinear *problem = job->problem;
    size_t count = (size_t)problem->parameters;
    gsl_multifit_nlinear_fdf fdf = {
        .f = gsl_residuals, .df = gsl_slopes, .n = problem->rows, .p = count, .params = job};
    gsl_vector_const_view start = gsl_vector_const_view_array(fit->value, count);
    int why = 0;
    if (gsl_multifit_nlinear_init(&start.vector, &fdf, space) != GSL_SUCCESS)
        return;
    int ended =
        gsl_multifit_nlinear_driver(MOST_STEPS, step_tolerance, slope_tolerance, 0.0, NULL, NULL, &why, space);
    /* Where no step lowers the sum any more the bottom is reached to the last digit; at the very first step the driver calls
     * that too many steps. */
    fit->converged = ended == GSL_SUCCESS || ended == GSL_ENOPROG || (ended == GSL_EMAXITER && why == GSL_ENOPROG);
    take_result(problem, space, fit);
}

uf_status uf_nonlinear_solve(const uf_nonlinear *problem, uf_nonlinear_fit *fit, uf_error *error)
{
    gsl_multifit_nlinear_parameters how = gsl_multifit_nlinear_default_parameters();
    fit->converged = 0;
    fit->steps = 0;
    fit->residual_sd = fit->sum_of_squares = (double)NAN;
    gsl_set_error_handler_off(); /* for good: another thread may be in GSL as well */
    gsl_multifit_nlinear_workspace *space =
        gsl_multifit_nlinear_alloc(gsl_multifit_nlinear_trust, &how, problem->rows, (size_t)problem->parameters);
    fit_job job = {problem, malloc(problem->rows * sizeof(double)), malloc(problem->rows * sizeof(double))};
    int has_room = space && job.above && job.below;
    if (has_room)
        solve_in(&job, space, fit);
    gsl_multifit_nlinear_free(space);
    free(job.above);
    free(job.below);
    return has_room ? UF_OK : uf_fail_memory(error, "a fit");
}
