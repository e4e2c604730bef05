/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/refractive.h"

#include <math.h>

static double squared(double x)
{
    return x * x;
}

/* ---- water ----------------------------------------------------------------------------------- */

double uf_water_n(double wavelength_nm, double temperature_c, double density_kg_per_m3)
{
    static const double a[] = {0.244257733,   9.74634476e-3, -3.73234996e-3, 2.68678472e-4,
                               1.58920570e-3, 2.45934259e-3, 0.900704920,    -1.66626219e-2};
    static const double ultraviolet = 0.2292020, infrared = 5.432937;
    double delta = density_kg_per_m3 / 1000, tau = (temperature_c + 273.15) / 273.15;
    double lambda2 = squared(wavelength_nm / 589);
    double refractivity = a[0] + a[1] * delta + a[2] * tau + a[3] * lambda2 * tau + a[4] / lambda2 +
                          a[5] / (lambda2 - squared(ultraviolet)) + a[6] / (lambda2 - squared(infrared)) +
                          a[7] * squared(delta);
    /* (n^2 - 1) / (n^2 + 2) is the refractivity times the density: Lorentz and Lorenz. */
    double share = refractivity * delta;
    return sqrt((1 + 2 * share) / (1 - share));
}

double uf_water_density(double temperature_c)
{
    static const double a[] = {999.83952, 16.945176, -7.9870401e-3, -46.170461e-6, 105.56302e-9, -280.54253e-12};
    double t = temperature_c, sum = 0;
    for (int k = 5; k >= 0; k--)
        sum = sum * t + a[k];
    return sum / (1 + 16.879850e-3 * t);
}

/* ---- glass ----------------------------------------------------------------------------------- */

double uf_air_n(double wavelength_nm)
{
    static const double formula_temperature_k = 288.15, catalogue_temperature_k = 293.15;
    double wave_number2 = squared(1000 / wavelength_nm);
    double excess = 1e-8 * (5792105 / (238.0185 - wave_number2) + 167917 / (57.362 - wave_number2));
    return 1 + excess * formula_temperature_k / catalogue_temperature_k;
}

double uf_glass_n_in_air(uf_glass glass, double wavelength_nm)
{
    static const double sellmeier[UF_GLASSES][6] = {
        [UF_GLASS_COVERGLASS] = {1.23795755, 0.00863080926, 0.0466468888, 0.0469074501, 2.46700556, 264.146296},
        [UF_GLASS_BK7] = {1.03961212, 0.00600069867, 0.231792344, 0.0200179144, 1.01046945, 103.560653},
        /* Malitson prints the roots of C. */
        [UF_GLASS_FUSED_SILICA] = {0.6961663, 0.0684043 * 0.0684043, 0.4079426, 0.1162414 * 0.1162414, 0.8974794,
                                   9.896161 * 9.896161}};
    double lambda2 = squared(wavelength_nm / 1000), sum = 1;
    for (int k = 0; k < 6; k += 2)
        sum += sellmeier[glass][k] * lambda2 / (lambda2 - sellmeier[glass][k + 1]);
    return sqrt(sum);
}

double uf_glass_n(uf_glass glass, double wavelength_nm)
{
    return uf_glass_n_in_air(glass, wavelength_nm) * uf_air_n(wavelength_nm);
}

/* ---- media ----------------------------------------------------------------------------------- */

double uf_medium_n(uf_medium medium, double wavelength_nm, double temperature_c)
{
    static const double dissolved[UF_MEDIA] = {[UF_MEDIUM_CULTURE] = 0.0035, [UF_MEDIUM_PBS] = 0.0016};
    return uf_water_n(wavelength_nm, temperature_c, uf_water_density(temperature_c)) + dissolved[medium];
}

double uf_medium_n_sd(uf_medium medium)
{
    static const double spread[UF_MEDIA] = {[UF_MEDIUM_CULTURE] = 0.001, [UF_MEDIUM_PBS] = 0.0003};
    return spread[medium];
}
