/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Refractive indices by name, relative to vacuum. Glass catalogues print indices relative to air; water's
 * formulation is relative to vacuum. Mixing the two moves the critical angle by 0.03 degrees, so that what
 * comes from a catalogue is brought to vacuum here.
 */
#ifndef UF_OPTICS_REFRACTIVE_H
#define UF_OPTICS_REFRACTIVE_H

typedef enum uf_glass { UF_GLASS_COVERGLASS, UF_GLASS_BK7, UF_GLASS_FUSED_SILICA, UF_GLASSES } uf_glass;
typedef enum uf_medium { UF_MEDIUM_WATER, UF_MEDIUM_CULTURE, UF_MEDIUM_PBS, UF_MEDIA } uf_medium;

/* Index of water: IAPWS R9-97 (Release on the refractive index of ordinary water substance, 1997; Harvey, Gallagher
 * and Levelt Sengers 1998, J. Phys. Chem. Ref. Data 27:761). 200 .. 1100 nm, -12 .. 500 deg C. */
double uf_water_n(double wavelength_nm, double temperature_c, double density_kg_per_m3);

/* Density of water at one atmosphere, kg/m^3 (Kell 1975, J. Chem. Eng. Data 20:97; coefficients from memory, held to
 * the IAPWS-95 densities in the tests). 0 .. 100 deg C. */
double uf_water_density(double temperature_c);

/* Index of air of 20 deg C and one atmosphere: Ciddor 1996, Appl. Opt. 35:1566, dry air, scaled by temperature. */
double uf_air_n(double wavelength_nm);

/* Catalogue index, relative to air, by Sellmeier's formula n^2 - 1 = sum B_i L^2 / (L^2 - C_i), L in um. 300 .. 2000
 * nm. Cover glass is a borosilicate of the cover-glass family with n_e 1.5256 (ISO 8255-1 asks for 1.5255 +/- 0.0015;
 * value from memory), BK7 a crown glass (published dispersion data, n_d 1.5168, V_d 64.17), fused silica Malitson 1965, J. Opt. Soc. Am.
 * 55:1205. */
double uf_glass_n_in_air(uf_glass glass, double wavelength_nm);

/* The same relative to vacuum. */
double uf_glass_n(uf_glass glass, double wavelength_nm);

/* Index of a named medium at a temperature, one atmosphere: water plus what is dissolved in it, a constant: 0.0016
 * for phosphate-buffered saline, 0.0035 for culture medium with serum (common practice: 1.335 to 1.338 at 589 nm, no
 * source). */
double uf_medium_n(uf_medium medium, double wavelength_nm, double temperature_c);

/* 1 sigma of that index: what one recipe differs from another (common practice, no source). */
double uf_medium_n_sd(uf_medium medium);

#endif
