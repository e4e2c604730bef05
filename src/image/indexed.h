/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A picture of 8-bit palette indices, what overlays and plots are drawn on. */
#ifndef UF_IMAGE_INDEXED_H
#define UF_IMAGE_INDEXED_H

#include <stdint.h>

typedef struct uf_indexed {
    uint8_t *data; /* row y starts at data + y * width */
    int width, height;
    uint8_t palette[256][3]; /* red, green, blue (sRGB) */
    int colours;             /* entries in use, 1 .. 256 */
} uf_indexed;

#endif
