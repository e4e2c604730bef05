/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/distribution.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

double uf_t_factor(double level, double df)
{
    return df > 0 ? gsl_cdf_tdist_Pinv(0.5 + level / 2, df) : (double)NAN;
}
