/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/evanescent.h"

#include <complex.h>
#include <math.h>

#include "base/constants.h"

static double degrees(double radians)
{
    return radians * 180.0 / UF_PI;
}

double uf_critical_angle_deg(double substrate_n, double medium_n)
{
    return medium_n > 0 && medium_n < substrate_n ? degrees(asin(medium_n / substrate_n)) : (double)NAN;
}

double uf_depth_nm(double wavelength_nm, double na_effective, double medium_n)
{
    double decay = na_effective * na_effective - medium_n * medium_n;
    return decay > 0 && wavelength_nm > 0 ? wavelength_nm / (4.0 * UF_PI * sqrt(decay)) : (double)NAN;
}

double uf_na_from_angle(double angle_deg, double index)
{
    return angle_deg >= 0 && angle_deg <= 90 ? index * sin(angle_deg * UF_PI / 180.0) : (double)NAN;
}

double uf_na_from_depth(double depth_nm, double wavelength_nm, double medium_n)
{
    double decay = wavelength_nm / (4.0 * UF_PI * depth_nm);
    return depth_nm > 0 ? sqrt(medium_n * medium_n + decay * decay) : (double)NAN;
}

double uf_angle_from_na(double na_effective, double index)
{
    return na_effective >= 0 && na_effective <= index ? degrees(asin(na_effective / index)) : (double)NAN;
}

static int totally_reflected(double na_effective, double substrate_n, double medium_n)
{
    return na_effective >= medium_n && na_effective <= substrate_n && medium_n < substrate_n;
}

double uf_interface_s(double na_effective, double substrate_n, double medium_n)
{
    if (!totally_reflected(na_effective, substrate_n, medium_n))
        return (double)NAN;
    double n = medium_n / substrate_n, sine = na_effective / substrate_n;
    return 4.0 * (1.0 - sine * sine) / (1.0 - n * n);
}

double uf_interface_p(double na_effective, double substrate_n, double medium_n)
{
    if (!totally_reflected(na_effective, substrate_n, medium_n))
        return (double)NAN;
    double n2 = medium_n * medium_n / (substrate_n * substrate_n);
    double sine2 = na_effective * na_effective / (substrate_n * substrate_n), cosine2 = 1.0 - sine2;
    return 4.0 * cosine2 * (2.0 * sine2 - n2) / (n2 * n2 * cosine2 + sine2 - n2);
}

/* ---- substrate | coating | medium | cell ----------------------------------------------------- */

/* Normal component of the wave vector in units of the vacuum wave number; its imaginary part, where there
 * is one, is positive, so that the wave decays away from the substrate. */
static double complex normal_component(double n, double na)
{
    double k2 = n * n - na * na;
    return k2 >= 0 ? (double complex)sqrt(k2) : I * sqrt(-k2);
}

/* Fresnel's amplitude coefficients from medium a to medium b. */
typedef struct fresnel {
    double complex r, t;
} fresnel;

static fresnel fresnel_s(double complex ka, double complex kb)
{
    return (fresnel){(ka - kb) / (ka + kb), 2.0 * ka / (ka + kb)};
}

static fresnel fresnel_p(double complex ka, double na, double complex kb, double nb)
{
    double complex a = ka * nb * nb, b = kb * na * na;
    return (fresnel){(a - b) / (a + b), 2.0 * na * nb * ka / (a + b)};
}

static double square(double complex z)
{
    return creal(z) * creal(z) + cimag(z) * cimag(z);
}

typedef struct layer {
    double n, thickness_nm;
} layer;

/* |E|^2 at the far side of the last interface, from the far end to the substrate: what lies beyond an interface is one
 * mirror of amplitude `reflected`, and `passed` of what reaches it comes out at the far end. */
static double far_side_intensity(const uf_bench *bench, const layer *layers, int count, int p_polarized)
{
    double na = bench->na_effective, last_n = layers[count - 1].n;
    double complex k_far = normal_component(last_n, na), reflected = 0, passed = 1;
    for (int j = count - 2; j >= 0; j--) {
        double complex k = normal_component(layers[j].n, na), k_next = normal_component(layers[j + 1].n, na);
        fresnel f = p_polarized ? fresnel_p(k, layers[j].n, k_next, layers[j + 1].n) : fresnel_s(k, k_next);
        double thickness = j + 2 < count ? layers[j + 1].thickness_nm : 0;
        double complex phase = cexp(I * k_next * (2.0 * UF_PI * thickness / bench->wavelength_nm));
        double complex echo = reflected * phase * phase;
        passed *= f.t * phase / (1.0 + f.r * echo);
        reflected = (f.r + echo) / (1.0 + f.r * echo);
    }
    /* The p field has a part along the interface and one across it. */
    double parts = p_polarized ? (square(k_far) + na * na) / (last_n * last_n) : 1;
    return square(passed) * parts;
}

static double in_polarization(const uf_bench *bench, const layer *layers, int count)
{
    return (1.0 - bench->p_fraction) * far_side_intensity(bench, layers, count, 0) +
           bench->p_fraction * far_side_intensity(bench, layers, count, 1);
}

/* Substrate and coating, where there is one; returns how many layers. */
static int lay_substrate(const uf_bench *bench, layer *layers)
{
    layers[0] = (layer){bench->substrate_n, 0};
    if (!(bench->coating_nm > 0))
        return 1;
    layers[1] = (layer){bench->coating_n, bench->coating_nm};
    return 2;
}

double uf_interface_intensity(const uf_bench *bench)
{
    layer layers[3];
    int count = lay_substrate(bench, layers);
    layers[count++] = (layer){bench->medium_n, 0};
    return in_polarization(bench, layers, count);
}

double uf_layered_intensity(const uf_bench *bench, double gap_nm)
{
    layer layers[4];
    int count = lay_substrate(bench, layers);
    layers[count++] = (layer){bench->medium_n, gap_nm};
    layers[count++] = (layer){bench->cell_n, 0};
    return in_polarization(bench, layers, count);
}

/* ---- verdicts -------------------------------------------------------------------------------- */

uf_status uf_bench_check(const uf_bench *bench, uf_error *error)
{
    double na = bench->na_effective;
    if (bench->medium_n >= bench->substrate_n)
        return uf_fail(error, UF_INPUT,
                       "medium_n %.4f is not below substrate_n %.4f: no angle is totally reflected; check the two "
                       "indices",
                       bench->medium_n, bench->substrate_n);
    if (na > bench->medium_n && na < bench->substrate_n) {
        if (na <= bench->objective_na || isnan(bench->objective_na))
            return UF_OK;
        return uf_fail(error, UF_INPUT,
                       "n sin(angle) is %.4f, more than the objective's aperture of %.4f: the beam cannot leave the "
                       "objective at this angle; check angle_deg, angle_n and objective_na",
                       na, bench->objective_na);
    }
    if (na >= bench->substrate_n)
        return uf_fail(error, UF_INPUT,
                       "n sin(angle) is %.4f, not below substrate_n %.4f: no light enters at 90 deg or beyond; check "
                       "angle_deg, angle_n and na_effective",
                       na, bench->substrate_n);
    return uf_fail(error, UF_INPUT,
                   "n sin(angle) is %.4f (%.2f deg in the substrate): not totally reflected. Needed against the "
                   "medium: more than %.4f (%.2f deg); to stay evanescent in the cell too: more than %.4f (%.2f deg)",
                   na, uf_angle_from_na(na, bench->substrate_n), bench->medium_n,
                   uf_critical_angle_deg(bench->substrate_n, bench->medium_n), bench->cell_n,
                   uf_critical_angle_deg(bench->substrate_n, bench->cell_n));
}

int uf_bench_leaks_into_cell(const uf_bench *bench)
{
    return bench->na_effective <= bench->cell_n + 2.0 * bench->cell_n_sd;
}

/* Half the difference of the depth with one input moved up and down by its sd; where moving down leaves
 * total reflection, the difference upwards. */
static double moved(const uf_bench *bench, double na_sd, double medium_sd)
{
    double d = uf_depth_nm(bench->wavelength_nm, bench->na_effective, bench->medium_n);
    double up = uf_depth_nm(bench->wavelength_nm, bench->na_effective + na_sd, bench->medium_n + medium_sd);
    double down = uf_depth_nm(bench->wavelength_nm, bench->na_effective - na_sd, bench->medium_n - medium_sd);
    if (isnan(up))
        return fabs(d - down);
    return isnan(down) ? fabs(up - d) : fabs(up - down) / 2.0;
}

double uf_depth_sd(const uf_bench *bench)
{
    double medium = moved(bench, 0, bench->medium_n_sd);
    if (!isnan(bench->depth_sd_nm))
        return bench->depth_sd_nm; /* measured in this medium: its index is in the figure already */
    double angle = moved(bench, bench->na_effective_sd, 0);
    return sqrt(angle * angle + medium * medium);
}
