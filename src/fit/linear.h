/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Weighted linear least squares of few parameters, fed row by row. */
#ifndef UF_FIT_LINEAR_H
#define UF_FIT_LINEAR_H

enum { UF_LINEAR_LIMIT = 6 };

/* Sums of the normal equations. Zeroed but for `parameters` it is empty. Regressors should be of order one, or the
 * equations lose digits. */
typedef struct uf_linear {
    int parameters; /* 1 .. UF_LINEAR_LIMIT */
    double rows, weight;
    double xx[UF_LINEAR_LIMIT][UF_LINEAR_LIMIT], xy[UF_LINEAR_LIMIT], yy;
} uf_linear;

typedef struct uf_linear_fit {
    double value[UF_LINEAR_LIMIT];
    double sd[UF_LINEAR_LIMIT]; /* from the scatter of the residuals */
    double residual_sd;         /* of a row of weight 1 */
} uf_linear_fit;

/* Adds one row: regressors x, response y, weight w >= 0. */
void uf_linear_add(uf_linear *sums, const double *x, double y, double w);

/* Solves by Cholesky's decomposition. 0 when there are too few rows or they do not tell the parameters apart. */
int uf_linear_solve(const uf_linear *sums, uf_linear_fit *fit);

#endif
