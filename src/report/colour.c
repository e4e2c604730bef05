/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/colour.h"

#include <math.h>

uf_oklab uf_colour_lch(double L, double chroma, double hue_deg)
{
    double hue = hue_deg * (acos(-1.0) / 180.0);
    return (uf_oklab){L, chroma * cos(hue), chroma * sin(hue)};
}

uf_oklab uf_colour_grey(double v)
{
    double linear = v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4);
    return (uf_oklab){cbrt(linear), 0.0, 0.0};
}

uf_oklab uf_colour_mix(uf_oklab from, uf_oklab to, double share)
{
    return (uf_oklab){from.L + share * (to.L - from.L), from.a + share * (to.a - from.a),
                      from.b + share * (to.b - from.b)};
}

static uint8_t srgb(double linear)
{
    double value = linear <= 0.0031308 ? 12.92 * linear : 1.055 * pow(linear, 1.0 / 2.4) - 0.055;
    double level = 255.0 * (value < 0.0 ? 0.0 : value > 1.0 ? 1.0 : value);
    return (uint8_t)(level + 0.5 + 1e-6);
}

void uf_colour_put(uint8_t colour[3], uf_oklab c)
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
