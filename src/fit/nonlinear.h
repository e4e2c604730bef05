/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Nonlinear least squares of few parameters by Levenberg and Marquardt's method (GSL's trust region, with More's scaling). */
#ifndef UF_FIT_NONLINEAR_H
#define UF_FIT_NONLINEAR_H

#include <stddef.h>

#include "base/status.h"

enum { UF_NONLINEAR_LIMIT = 8 };

/* r[k] = (model - measured) / sd of row k at parameters p. Must be finite wherever the fit may step: bounded parameters
 * are best fitted by their logarithm or logit. */
typedef void uf_residuals(void *context, const double *p, double *r);

/* j[k * parameters + i] = d r[k] / d p[i]. */
typedef void uf_residual_slopes(void *context, const double *p, double *j);

typedef struct uf_nonlinear {
    int parameters; /* 1 .. UF_NONLINEAR_LIMIT */
    size_t rows;    /* at least as many */
    uf_residuals *residuals;
    uf_residual_slopes *slopes; /* NULL: central differences */
    void *context;
} uf_nonlinear;

typedef struct uf_nonlinear_fit {
    double value[UF_NONLINEAR_LIMIT];
    double covariance[UF_NONLINEAR_LIMIT][UF_NONLINEAR_LIMIT]; /* of rows whose sd is 1: inverse of J'J */
    double sum_of_squares;
    double residual_sd; /* sqrt(sum of squares / (rows - parameters)); NaN without a degree of freedom */
    int steps;
    int converged; /* 0: stopped after many steps; value is where */
} uf_nonlinear_fit;

/* Starts at fit->value. Ends when a step moves no parameter by more than 1e-10 of itself or the slope vanishes.
 * Standard error i is residual_sd * sqrt(covariance[i][i]) where the rows' scatter tells their sd. UF_MEMORY is the only
 * failure; a start where residuals are not finite does not converge. */
UF_MUST_USE uf_status uf_nonlinear_solve(const uf_nonlinear *problem, uf_nonlinear_fit *fit, uf_error *error);

#endif
