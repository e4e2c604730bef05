/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The evanescent field of an interface: angles, depth, intensities. Indices are relative to vacuum, angles
 * from the normal in the substrate, intensities per unit incident intensity in the substrate.
 */
#ifndef UF_OPTICS_EVANESCENT_H
#define UF_OPTICS_EVANESCENT_H

#include "base/status.h"

/* What is polarized how: fractions of the intensity in s and p add up to 1. */
typedef struct uf_bench {
    double wavelength_nm;
    double substrate_n, medium_n, cell_n;
    double substrate_n_sd, medium_n_sd, cell_n_sd;
    double na_effective; /* n sin(angle), the same in every layer */
    double na_effective_sd;
    double depth_sd_nm; /* NaN unless the depth itself was measured: then it stands for the angle's part */
    double p_fraction;  /* share of p polarization: 0 for s, 1 for p, 0.5 for mixed */
    double coating_n;   /* thin layer on the substrate; only read when coating_nm is above 0 */
    double coating_nm;
    double objective_na; /* NaN for a prism */
} uf_bench;

/* n sin(angle); NaN for an angle outside 0 .. 90 degrees. */
double uf_na_from_angle(double angle_deg, double index);

/* n sin(angle) of a measured depth: sqrt(medium_n^2 + (wavelength / (4 pi depth))^2). */
double uf_na_from_depth(double depth_nm, double wavelength_nm, double medium_n);

/* Angle in an index; NaN where na_effective exceeds it. */
double uf_angle_from_na(double na_effective, double index);

/* Intensity at the interface of two media, s and p polarized (Axelrod, Burghardt and Thompson 1984, Annu. Rev.
 * Biophys. Bioeng. 13:247, eqs 5 to 8), with n = medium/substrate and t the angle in the substrate:
 *   I_s = 4 cos^2 t / (1 - n^2)
 *   I_p = 4 cos^2 t (2 sin^2 t - n^2) / (n^4 cos^2 t + sin^2 t - n^2)
 * NaN where na_effective is below medium_n or above substrate_n. */
double uf_interface_s(double na_effective, double substrate_n, double medium_n);
double uf_interface_p(double na_effective, double substrate_n, double medium_n);

/* |E|^2 on top of the coating (bare: of the substrate) with medium alone above it, in the bench's polarization. */
double uf_interface_intensity(const uf_bench *bench);

/* |E|^2 at the cell's side of substrate | coating | medium of thickness gap | cell, in the bench's polarization: Fresnel
 * coefficients summed over all passes, layer by layer (Born and Wolf, Principles of Optics, section 1.6). This is the
 * transfer matrices' product arranged so that only decaying exponentials occur: no gap is too large for it. gap_nm at
 * least 0. */
double uf_layered_intensity(const uf_bench *bench, double gap_nm);

/* Whether the set-up is totally reflected at all, against the medium; UF_INPUT says by how much not and
 * gives the smallest angle and n sin(angle) that would be. A set-up that is, but not against the cell, is
 * no error here: uf_bench_leaks_into_cell tells. */
UF_MUST_USE uf_status uf_bench_check(const uf_bench *bench, uf_error *error);

/* True when light may pass into the cell where it touches: na_effective <= cell_n + 2 sd. */
int uf_bench_leaks_into_cell(const uf_bench *bench);

/* 1 sigma of the depth (nm) from the sd of angle, substrate and medium index, by moving each. */
double uf_depth_sd(const uf_bench *bench);

#endif
