/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/linear.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <math.h>

void uf_linear_add(uf_linear *sums, const double *x, double y, double w)
{
    if (!(w > 0))
        return;
    sums->rows++;
    sums->weight += w;
    sums->yy += w * y * y;
    for (int j = 0; j < sums->parameters; j++) {
        sums->xy[j] += w * x[j] * y;
        for (int k = 0; k <= j; k++)
            sums->xx[j][k] += w * x[j] * x[k];
    }
}

/* The inverse of the normal matrix into `inverse`; 0 when it has none. */
static int invert(const uf_linear *sums, double *inverse)
{
    size_t n = (size_t)sums->parameters;
    gsl_matrix_view view = gsl_matrix_view_array(inverse, n, n);
    for (size_t j = 0; j < n; j++)
        for (size_t k = 0; k < n; k++)
            inverse[j * n + k] = j >= k ? sums->xx[j][k] : sums->xx[k][j];
    gsl_set_error_handler_off();
    if (gsl_linalg_cholesky_decomp1(&view.matrix) != GSL_SUCCESS)
        return 0;
    for (size_t j = 0; j < n;
         j++) /* what is left of a column after the others: next to nothing when it repeats them */
        if (!(inverse[j * n + j] * inverse[j * n + j] > 1e-12 * sums->xx[j][j]))
            return 0;
    return gsl_linalg_cholesky_invert(&view.matrix) == GSL_SUCCESS;
}

int uf_linear_solve(const uf_linear *sums, uf_linear_fit *fit)
{
    double inverse[UF_LINEAR_LIMIT * UF_LINEAR_LIMIT], explained = 0;
    int n = sums->parameters;
    if (sums->rows <= n || !invert(sums, inverse))
        return 0;
    for (int j = 0; j < n; j++) {
        fit->value[j] = 0;
        for (int k = 0; k < n; k++)
            fit->value[j] += inverse[j * n + k] * sums->xy[k];
        explained += fit->value[j] * sums->xy[j];
    }
    /* The mean weight takes the place of 1, so that the scale of the weights does not matter. */
    double variance = fmax(0, sums->yy - explained) / (sums->rows - n);
    fit->residual_sd = sqrt(variance * sums->rows / sums->weight);
    for (int j = 0; j < n; j++)
        fit->sd[j] = sqrt(variance * inverse[j * n + j]);
    return 1;
}
