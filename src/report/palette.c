/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/palette.h"

/* Chroma is as high in the middle as the sRGB gamut allows along this path, and low at both ends. */
uf_oklab uf_ramp_colour(double t)
{
    const double top = 0.6;
    double off = t < top ? (top - t) / top : (t - top) / (1.0 - top);
    double end = t < top ? 0.035 : 0.05;
    return uf_colour_lch(0.97 - 0.75 * t, 0.15 - (0.15 - end) * off * off, 190.0 + 185.0 * t);
}

/* Nearly the grey it covers, so that brightness can still be read, but plainly blue, the hue of the ramp about the
 * cutoff, and one that red-green blindness leaves apart from grey. */
static uf_oklab contact_colour(uf_oklab level)
{
    return uf_colour_lch(0.14 + 0.80 * level.L, 0.04 + 0.06 * level.L, 240.0);
}

static void put_ramps(uint8_t palette[256][3])
{
    for (int k = 0; k < UF_NEAR_LEVELS; k++) {
        uf_oklab level = uf_colour_grey((double)k / (UF_NEAR_LEVELS - 1));
        uf_colour_put(palette[UF_INK_NEAR + k], level);
        uf_colour_put(palette[UF_INK_CONTACT + k], contact_colour(level));
    }
    for (int k = 0; k < UF_GAP_LEVELS; k++)
        uf_colour_put(palette[UF_INK_GAP + k], uf_ramp_colour((double)k / (UF_GAP_LEVELS - 1)));
}

void uf_palette_fill(uf_indexed *picture)
{
    uint8_t(*palette)[3] = picture->palette;
    const uf_oklab page = uf_colour_grey(1.0), text = uf_colour_grey(0.10), halo = uf_colour_grey(0.08),
                   number = uf_colour_grey(1.0);
    picture->colours = UF_INK_COUNT;
    put_ramps(palette);
    uf_colour_put(palette[UF_INK_PAGE], page);
    uf_colour_put(palette[UF_INK_HALO], halo);
    for (int k = 0; k < UF_FONT_LEVELS; k++) {
        double share = (k + 1.0) / UF_FONT_LEVELS;
        uf_colour_put(palette[UF_INK_TEXT + k], uf_colour_mix(page, text, share));
        uf_colour_put(palette[UF_INK_NUMBER + k], uf_colour_mix(halo, number, share));
    }
    uf_colour_put(palette[UF_INK_OUTSIDE], uf_colour_grey(0.50));
    uf_colour_put(palette[UF_INK_NO_GAP], uf_colour_grey(0.72));
    uf_colour_put(palette[UF_INK_OUTLINE], uf_colour_lch(0.74, 0.17, 55.0));
    uf_colour_put(palette[UF_INK_SPOT], uf_colour_lch(0.88, 0.19, 108.0));
    uf_colour_put(palette[UF_INK_LINE], uf_colour_grey(0.10));
    uf_colour_put(palette[UF_INK_CUTOFF], uf_colour_lch(0.55, 0.20, 30.0));
}
