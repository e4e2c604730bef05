/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/chi_square.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <math.h>

double uf_chi_square_quantile(double p, double degrees)
{
    gsl_set_error_handler_off();
    return gsl_cdf_chisq_Pinv(p, degrees);
}

double uf_chi_square_upper_quantile(double p_above, double degrees)
{
    gsl_set_error_handler_off();
    return gsl_cdf_chisq_Qinv(p_above, degrees);
}

double uf_chi_square_above(double value, double degrees)
{
    gsl_set_error_handler_off();
    return degrees > 0 ? gsl_cdf_chisq_Q(fmax(0, value), degrees) : (double)NAN;
}
