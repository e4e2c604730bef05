/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/image_decode.h"

#include <png.h>
#include <stdio.h>
#include <string.h>

/* Lives in the caller of setjmp, so that a jump out of libpng loses nothing. */
typedef struct png_reading {
    const uf_text *bytes;
    size_t at;
    png_structp png;
    png_infop info;
    char complaint[200];
} png_reading;

static void reading_failed(png_structp png, png_const_charp message)
{
    png_reading *r = png_get_error_ptr(png);
    (void)snprintf(r->complaint, sizeof r->complaint, "%s", message);
    png_longjmp(png, 1);
}

static void reading_warned(png_structp png, png_const_charp message)
{
    (void)png;
    (void)message;
}

static void next_bytes(png_structp png, png_bytep to, size_t count)
{
    png_reading *r = png_get_io_ptr(png);
    if (count > r->bytes->length - r->at)
        png_error(png, "it is cut short");
    memcpy(to, r->bytes->bytes + r->at, count);
    r->at += count;
}

/* Owns nothing: libpng may leave it by longjmp at any call. */
static bool read_head(png_reading *r, int most_side, uf_indexed *picture)
{
    png_colorp palette;
    int colours = 0;
    if (setjmp(png_jmpbuf(r->png)))
        return false;
    png_set_read_fn(r->png, r, next_bytes);
    png_set_user_limits(r->png, (png_uint_32)most_side, (png_uint_32)most_side);
    png_read_info(r->png, r->info);
    if (png_get_color_type(r->png, r->info) != PNG_COLOR_TYPE_PALETTE || png_get_bit_depth(r->png, r->info) != 8 ||
        png_get_interlace_type(r->png, r->info) != PNG_INTERLACE_NONE ||
        !png_get_PLTE(r->png, r->info, &palette, &colours))
        png_error(r->png, "expected 8-bit palette indices");
    picture->width = (int)png_get_image_width(r->png, r->info);
    picture->height = (int)png_get_image_height(r->png, r->info);
    picture->colours = colours;
    for (int k = 0; k < colours; k++) {
        picture->palette[k][0] = palette[k].red;
        picture->palette[k][1] = palette[k].green;
        picture->palette[k][2] = palette[k].blue;
    }
    return true;
}

static bool read_rows(png_reading *r, const uf_indexed *picture)
{
    size_t count = (size_t)picture->width * (size_t)picture->height;
    if (setjmp(png_jmpbuf(r->png)))
        return false;
    for (int y = 0; y < picture->height; y++)
        png_read_row(r->png, picture->data + (size_t)y * (size_t)picture->width, NULL);
    png_read_end(r->png, NULL);
    for (size_t k = 0; k < count; k++)
        if (picture->data[k] >= picture->colours)
            png_error(r->png, "an index beyond the palette");
    return true;
}

uf_status uf_decode_indexed_png(uf_work *work, const uf_text *bytes, int most_side, uf_indexed *picture,
                                uf_error *error)
{
    png_reading r = {.bytes = bytes};
    uf_status status = UF_OK;
    bool good = false;
    *picture = (uf_indexed){0};
    r.png = png_create_read_struct(PNG_LIBPNG_VER_STRING, &r, reading_failed, reading_warned);
    if (r.png)
        r.info = png_create_info_struct(r.png);
    if (r.info)
        good = read_head(&r, most_side, picture);
    if (good)
        status =
            uf_take(work, (size_t)picture->width * (size_t)picture->height, 1, "a picture", &picture->data, error);
    if (good && status == UF_OK)
        good = read_rows(&r, picture);
    png_destroy_read_struct(&r.png, &r.info, NULL);
    if (status == UF_OK && !good && r.complaint[0])
        return uf_fail(error, UF_INPUT, "a PNG image cannot be read (libpng: %s)", r.complaint);
    return status == UF_OK && !good ? uf_fail_memory(error, "a picture") : status;
}
