/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/palette.h"

#include <math.h>

/*
 * Colours are made in OKLab: lightness L from 0 to 1, a and b across, or chroma and hue around (OKLCh). Steps
 * of L look even, which a ramp in sRGB would not. Source: B. Ottosson, "A perceptual color space for image
 * processing", 2020, with its matrices; the curve of sRGB is that of IEC 61966-2-1. Rounding to 8 bits leaves
 * no trace of a machine's libm: what lies within a millionth of halfway goes up.
 */
typedef struct oklab {
    double L, a, b;
} oklab;

static oklab lch(double L, double chroma, double hue_deg)
{
    double hue = hue_deg * (acos(-1.0) / 180.0);
    return (oklab){L, chroma * cos(hue), chroma * sin(hue)};
}

static oklab mix(oklab from, oklab to, double share)
{
    return (oklab){from.L + share * (to.L - from.L), from.a + share * (to.a - from.a),
                   from.b + share * (to.b - from.b)};
}

static uint8_t srgb(double linear)
{
    double value = linear <= 0.0031308 ? 12.92 * linear : 1.055 * pow(linear, 1.0 / 2.4) - 0.055;
    double level = 255.0 * (value < 0.0 ? 0.0 : value > 1.0 ? 1.0 : value);
    return (uint8_t)(level + 0.5 + 1e-6);
}

static void put(uint8_t colour[3], oklab c)
{
    double l = c.L + 0.3963377774 * c.a + 0.2158037573 * c.b;
    double m = c.L - 0.1055613458 * c.a - 0.0638541728 * c.b;
    double s = c.L - 0.0894841775 * c.a - 1.2914855480 * c.b;
    l = l * l * l;
    m = m * m * m;
    s = s * s * s;
    colour[0] = srgb(+4.0767416621 * l - 3.3077115913 * m + 0.2309699292 * s);
    colour[1] = srgb(-1.2684380046 * l + 2.6097574011 * m - 0.3413193965 * s);
    colour[2] = srgb(-0.0041960863 * l - 0.7034186147 * m + 1.7076147010 * s);
}

/* Grey of sRGB value v, 0 to 1. */
static oklab grey(double v)
{
    double linear = v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4);
    return (oklab){cbrt(linear), 0.0, 0.0};
}

/* Chroma is as high in the middle as the sRGB gamut allows along this path, and low at both ends. */
static oklab gap_colour(double t)
{
    const double top = 0.6;
    double off = t < top ? (top - t) / top : (t - top) / (1.0 - top);
    double end = t < top ? 0.035 : 0.05;
    return lch(0.97 - 0.75 * t, 0.15 - (0.15 - end) * off * off, 190.0 + 185.0 * t);
}

/* Nearly the grey it covers, so that brightness can still be read, but plainly aqua: chroma close to what the
 * gamut allows in the dark, and half of it in the light. */
static oklab contact_colour(oklab level)
{
    return lch(0.14 + 0.80 * level.L, 0.022 + 0.040 * level.L, 190.0);
}

static void put_ramps(uint8_t palette[256][3])
{
    for (int k = 0; k < UF_NEAR_LEVELS; k++) {
        oklab level = grey((double)k / (UF_NEAR_LEVELS - 1));
        put(palette[UF_INK_NEAR + k], level);
        put(palette[UF_INK_CONTACT + k], contact_colour(level));
    }
    for (int k = 0; k < UF_GAP_LEVELS; k++)
        put(palette[UF_INK_GAP + k], gap_colour((double)k / (UF_GAP_LEVELS - 1)));
}

void uf_palette_fill(uf_indexed *picture)
{
    uint8_t(*palette)[3] = picture->palette;
    const oklab page = grey(1.0), text = grey(0.10), halo = grey(0.08), number = grey(1.0);
    picture->colours = UF_INK_COUNT;
    put_ramps(palette);
    put(palette[UF_INK_PAGE], page);
    put(palette[UF_INK_HALO], halo);
    for (int k = 0; k < UF_FONT_LEVELS; k++) {
        double share = (k + 1.0) / UF_FONT_LEVELS;
        put(palette[UF_INK_TEXT + k], mix(page, text, share));
        put(palette[UF_INK_NUMBER + k], mix(halo, number, share));
    }
    put(palette[UF_INK_OUTSIDE], grey(0.50));
    put(palette[UF_INK_NO_GAP], grey(0.72));
    put(palette[UF_INK_OUTLINE], lch(0.74, 0.17, 55.0));
    put(palette[UF_INK_SPOT], lch(0.70, 0.24, 350.0));
    put(palette[UF_INK_LINE], grey(0.10));
    put(palette[UF_INK_CUTOFF], lch(0.55, 0.20, 30.0));
}
