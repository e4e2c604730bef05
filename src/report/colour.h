/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Colours are made in OKLab: lightness L from 0 to 1, a and b across, or chroma and hue around (OKLCh). Steps
 * of L look even, which a ramp in sRGB would not. Source: B. Ottosson, "A perceptual color space for image
 * processing", 2020, with its matrices; the curve of sRGB is that of IEC 61966-2-1.
 */
#ifndef UF_REPORT_COLOUR_H
#define UF_REPORT_COLOUR_H

#include <stdint.h>

typedef struct uf_oklab {
    double L, a, b;
} uf_oklab;

uf_oklab uf_colour_lch(double L, double chroma, double hue_deg);

/* Grey of sRGB value v, 0 to 1. */
uf_oklab uf_colour_grey(double v);

/* `share` of the way from one colour to another. */
uf_oklab uf_colour_mix(uf_oklab from, uf_oklab to, double share);

/* Into 8 bits of red, green and blue. Rounding leaves no trace of a machine's libm: what lies within a millionth of
 * halfway goes up. */
void uf_colour_put(uint8_t colour[3], uf_oklab c);

#endif
