/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Text from an embedded bitmap font (font_data.c): proportional, 7 grey levels, printable ASCII and the signs
 * that units need. Text is UTF-8; a character the font does not have, or a byte that is no UTF-8, is drawn as
 * a small box.
 */
#ifndef UF_REPORT_FONT_H
#define UF_REPORT_FONT_H

#include "report/canvas.h"

enum { UF_FONT_LEVELS = 7 };

typedef enum uf_font { UF_FONT_SMALL, UF_FONT_LARGE, UF_FONT_SIZES } uf_font;

/* One character: its pixels start at number `first` of the face's pixels, row by row without padding. */
typedef struct uf_glyph {
    uint16_t code; /* Unicode; 0 is the box for what is missing */
    uint16_t first;
    uint8_t width, height;
    int8_t left, top; /* of the first pixel: right of the pen, rows above the baseline */
    uint8_t advance;
} uf_glyph;

typedef struct uf_font_face {
    const uf_glyph *glyphs; /* the missing box, ASCII 32 .. 126 in order, then others */
    int glyph_count;
    const uint32_t *pixels; /* eight to a word, the first in the highest four bits; 0 .. UF_FONT_LEVELS */
    int ascent, descent;    /* rows above and below the baseline that text may take */
    int cap_height;         /* rows of a capital letter */
} uf_font_face;

extern const uf_font_face uf_font_faces[UF_FONT_SIZES];

/* Rows from one baseline to the next. */
int uf_font_line_height(uf_font font);

/* Pixels that the pen moves over `text`. */
int uf_font_width(uf_font font, const char *text);

/* Bytes of the longest beginning of `text` that is at most `width` pixels wide; whole characters only. */
size_t uf_font_fit(uf_font font, const char *text, int width);

/* Draws with the pen starting at x on the baseline y (the first row below capital letters). Grey level k, 1
 * .. UF_FONT_LEVELS, becomes index ink + k - 1; level 0 leaves what is there. Returns where the pen ends. */
int uf_font_draw(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t ink);

/* The same turned a quarter to the left: the text reads upwards, its baseline the column x, its pen starting at y and
 * moving up. Returns where the pen ends. */
int uf_font_draw_up(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t ink);

/* The first, for `count` bytes only. */
int uf_font_draw_bytes(uf_canvas canvas, uf_font font, int x, int y, const char *text, size_t count, uint8_t ink);

/* Puts index `halo` on the text's pixels and their eight neighbours: drawn first, it keeps text readable on
 * any ground. */
void uf_font_halo(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t halo);

#endif
