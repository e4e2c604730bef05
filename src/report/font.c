/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/font.h"

#include <string.h>

/* Takes one character off the front of text[0 .. count); 0xfffd for bytes that are no UTF-8. Only what the
 * font could hold (up to U+FFFF) is told apart. */
static uint32_t next_character(const char *text, size_t count, size_t *used)
{
    const unsigned char *b = (const unsigned char *)text;
    int more = b[0] < 0x80 ? 0 : b[0] < 0xc2 ? -1 : b[0] < 0xe0 ? 1 : b[0] < 0xf0 ? 2 : b[0] < 0xf5 ? 3 : -1;
    *used = 1;
    if (more < 0 || (size_t)more >= count)
        return 0xfffd;
    uint32_t code = more ? b[0] & (0x3fu >> more) : b[0];
    for (int k = 1; k <= more; k++) {
        if ((b[k] & 0xc0) != 0x80)
            return 0xfffd;
        code = code << 6 | (b[k] & 0x3fu);
    }
    *used = (size_t)more + 1;
    return code;
}

static const uf_glyph *find_glyph(const uf_font_face *face, uint32_t code)
{
    if (code >= 32 && code < 127)
        return &face->glyphs[1 + code - 32];
    if (code == 0x3bc) /* the Greek letter mu, which some keyboards give for the micro sign */
        code = 0xb5;
    for (int k = 96; k < face->glyph_count; k++)
        if (face->glyphs[k].code == code)
            return &face->glyphs[k];
    return &face->glyphs[0];
}

static int level_at(const uf_font_face *face, const uf_glyph *glyph, int x, int y)
{
    unsigned at = glyph->first + (unsigned)(y * glyph->width + x);
    return (int)(face->pixels[at / 8] >> (28 - 4 * (at % 8)) & 0xfu);
}

int uf_font_line_height(uf_font font)
{
    return uf_font_faces[font].ascent + uf_font_faces[font].descent + 2;
}

int uf_font_width(uf_font font, const char *text)
{
    return uf_font_draw((uf_canvas){0}, font, 0, 0, text, 0);
}

size_t uf_font_fit(uf_font font, const char *text, int width)
{
    size_t length = strlen(text), fits = 0, used;
    for (int x = 0; fits < length; fits += used) {
        x += find_glyph(&uf_font_faces[font], next_character(text + fits, length - fits, &used))->advance;
        if (x > width)
            break;
    }
    return fits;
}

/* `up` turns the glyph a quarter to the left about the pen. */
static void draw_glyph(uf_canvas canvas, const uf_font_face *face, const uf_glyph *glyph, int x, int y, int up,
                       uint8_t ink)
{
    for (int row = 0; row < glyph->height; row++)
        for (int column = 0; column < glyph->width; column++) {
            int level = level_at(face, glyph, column, row);
            int right = glyph->left + column, down = row - glyph->top;
            if (level)
                uf_canvas_put(canvas, up ? x + down : x + right, up ? y - right : y + down,
                              (uint8_t)(ink + level - 1));
        }
}

int uf_font_draw_bytes(uf_canvas canvas, uf_font font, int x, int y, const char *text, size_t count, uint8_t ink)
{
    const uf_font_face *face = &uf_font_faces[font];
    size_t used;
    for (size_t at = 0; at < count; at += used) {
        const uf_glyph *glyph = find_glyph(face, next_character(text + at, count - at, &used));
        if (canvas.data)
            draw_glyph(canvas, face, glyph, x, y, 0, ink);
        x += glyph->advance;
    }
    return x;
}

int uf_font_draw(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t ink)
{
    return uf_font_draw_bytes(canvas, font, x, y, text, strlen(text), ink);
}

int uf_font_draw_up(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t ink)
{
    const uf_font_face *face = &uf_font_faces[font];
    size_t length = strlen(text), used;
    for (size_t at = 0; at < length; at += used) {
        const uf_glyph *glyph = find_glyph(face, next_character(text + at, length - at, &used));
        if (canvas.data)
            draw_glyph(canvas, face, glyph, x, y, 1, ink);
        y -= glyph->advance;
    }
    return y;
}

/* Faint levels get no halo, or the halo would be wider where a stroke happens to fall between pixels. */
enum { HALO_FROM_LEVEL = 2 };

static void halo_glyph(uf_canvas canvas, const uf_font_face *face, const uf_glyph *glyph, int x, int y, uint8_t halo)
{
    for (int row = 0; row < glyph->height; row++)
        for (int column = 0; column < glyph->width; column++) {
            if (level_at(face, glyph, column, row) < HALO_FROM_LEVEL)
                continue;
            int px = x + glyph->left + column, py = y - glyph->top + row;
            uf_canvas_fill(canvas, (uf_box){px - 1, py - 1, px + 2, py + 2}, halo);
        }
}

void uf_font_halo(uf_canvas canvas, uf_font font, int x, int y, const char *text, uint8_t halo)
{
    const uf_font_face *face = &uf_font_faces[font];
    size_t length = strlen(text), used;
    for (size_t at = 0; at < length; at += used) {
        const uf_glyph *glyph = find_glyph(face, next_character(text + at, length - at, &used));
        halo_glyph(canvas, face, glyph, x, y, halo);
        x += glyph->advance;
    }
}
