/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "io/image_encode.h"

#include <assert.h>
#include <math.h>
#include <png.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/tiff_memory.h"

/* ---- TIFF ------------------------------------------------------------------------------------ */

enum { STRIP_BYTES = 65536 };

/* Puts row y of the source into `to`, in stored form; false with the column of a value that does not fit. */
typedef bool put_row(void *to, const void *source, int y, int *x);

typedef struct tiff_page {
    int width, height;
    uint16_t bits;
    uint16_t format;
    uint16_t compression;
    uint16_t predictor;
    double pixel_size_um;
    const char *description;
    put_row *put;
    const void *source;
} tiff_page;

static bool set_resolution(TIFF *tiff, double size_um)
{
    if (!(size_um > 0) || !isfinite(size_um))
        return true;
    return TIFFSetField(tiff, TIFFTAG_RESOLUTIONUNIT, RESUNIT_CENTIMETER) &&
           TIFFSetField(tiff, TIFFTAG_XRESOLUTION, 1e4 / size_um) &&
           TIFFSetField(tiff, TIFFTAG_YRESOLUTION, 1e4 / size_um);
}

static bool set_compression(TIFF *tiff, const tiff_page *page)
{
    if (!TIFFSetField(tiff, TIFFTAG_COMPRESSION, page->compression))
        return false;
    if (page->compression == COMPRESSION_NONE)
        return true;
    return TIFFSetField(tiff, TIFFTAG_PREDICTOR, page->predictor) && TIFFSetField(tiff, TIFFTAG_ZIPQUALITY, 1);
}

static size_t row_bytes(const tiff_page *page)
{
    return (size_t)page->width * (size_t)(page->bits / 8);
}

static int rows_per_strip(const tiff_page *page)
{
    size_t rows = STRIP_BYTES / row_bytes(page);
    return rows < 1 ? 1 : rows > (size_t)page->height ? page->height : (int)rows;
}

static bool set_tags(TIFF *tiff, const tiff_page *page)
{
    return TIFFSetField(tiff, TIFFTAG_IMAGEWIDTH, (uint32_t)page->width) &&
           TIFFSetField(tiff, TIFFTAG_IMAGELENGTH, (uint32_t)page->height) &&
           TIFFSetField(tiff, TIFFTAG_BITSPERSAMPLE, page->bits) &&
           TIFFSetField(tiff, TIFFTAG_SAMPLEFORMAT, page->format) && TIFFSetField(tiff, TIFFTAG_SAMPLESPERPIXEL, 1) &&
           TIFFSetField(tiff, TIFFTAG_PHOTOMETRIC, PHOTOMETRIC_MINISBLACK) &&
           TIFFSetField(tiff, TIFFTAG_PLANARCONFIG, PLANARCONFIG_CONTIG) &&
           TIFFSetField(tiff, TIFFTAG_ORIENTATION, ORIENTATION_TOPLEFT) &&
           TIFFSetField(tiff, TIFFTAG_ROWSPERSTRIP, (uint32_t)rows_per_strip(page)) &&
           TIFFSetField(tiff, TIFFTAG_SOFTWARE, "Underfoot") && set_compression(tiff, page) &&
           set_resolution(tiff, page->pixel_size_um) &&
           (!page->description || TIFFSetField(tiff, TIFFTAG_IMAGEDESCRIPTION, page->description));
}

/* What went wrong is told by `out` (memory), by libtiff, or by *x >= 0: a value that does not fit. */
static bool write_strips(TIFF *tiff, const tiff_page *page, unsigned char *strip, int *x, int *y)
{
    int rows = rows_per_strip(page);
    for (int y0 = 0; y0 < page->height; y0 += rows) {
        size_t filled = 0;
        for (*y = y0; *y < page->height && *y < y0 + rows; ++*y, filled += row_bytes(page))
            if (!page->put(strip + filled, page->source, *y, x))
                return false;
        *x = -1;
        if (TIFFWriteEncodedStrip(tiff, (uint32_t)(y0 / rows), strip, (tmsize_t)filled) < 0)
            return false;
    }
    return TIFFWriteDirectory(tiff) == 1;
}

/*
 * Mode letters: l for the same byte order on every machine, 8 for BigTIFF, where the plain format's 4 GiB
 * could be too few.
 */
static uf_status encode_tiff(uf_text *out, const tiff_page *page, uf_error *error)
{
    double bytes = (double)row_bytes(page) * page->height;
    uf_tiff_complaint complaint = {0};
    uf_tiff_memory memory = {.out = out, .base = out->length};
    int x = -1, y = 0;
    TIFF *tiff = NULL;
    unsigned char *strip = malloc((size_t)rows_per_strip(page) * row_bytes(page));
    TIFFOpenOptions *options = strip ? uf_tiff_options(&complaint, 0) : NULL;
    if (options) {
        tiff = uf_tiff_memory_open(&memory, bytes > 4e9 ? "wl8" : "wl", options);
        TIFFOpenOptionsFree(options);
    }
    bool good = tiff && set_tags(tiff, page) && write_strips(tiff, page, strip, &x, &y);
    if (tiff)
        TIFFClose(tiff);
    free(strip);
    if (good && !out->failed && !complaint.text[0])
        return UF_OK;
    if (x >= 0)
        return uf_fail(error, UF_USAGE,
                       "the value at x = %d, y = %d cannot be stored as a count, expected 0 .. 65535", x, y);
    if (complaint.text[0] && !out->failed)
        return uf_fail(error, UF_OUTPUT, "a TIFF image cannot be encoded (libtiff: %s)", complaint.text);
    return uf_fail_memory(error, "an encoded image");
}

/* NaN has many bit patterns and processors differ in which they make; one of them is written. */
static bool put_floats(void *to, const void *source, int y, int *x)
{
    const uf_plane *plane = source;
    const float *row = uf_plane_row(*plane, y);
    const uint32_t quiet_nan = 0x7fc00000u;
    unsigned char *bytes = to;
    (void)x;
    for (int k = 0; k < plane->width; k++) {
        uint32_t word;
        memcpy(&word, &row[k], sizeof word);
        word = isnan(row[k]) ? quiet_nan : word;
        memcpy(bytes + 4 * (size_t)k, &word, sizeof word);
    }
    return true;
}

static bool put_counts(void *to, const void *source, int y, int *x)
{
    const uf_plane *plane = source;
    const float *row = uf_plane_row(*plane, y);
    uint16_t *words = to;
    for (int k = 0; k < plane->width; k++) {
        float value = rintf(row[k]);
        if (!(value >= 0 && value <= 65535)) {
            *x = k;
            return false;
        }
        words[k] = (uint16_t)value;
    }
    return true;
}

static bool put_labels16(void *to, const void *source, int y, int *x)
{
    const uf_labels *labels = source;
    const int32_t *row = uf_labels_row(*labels, y);
    uint16_t *words = to;
    (void)x;
    for (int k = 0; k < labels->width; k++)
        words[k] = (uint16_t)row[k];
    return true;
}

static bool put_labels32(void *to, const void *source, int y, int *x)
{
    const uf_labels *labels = source;
    (void)x;
    memcpy(to, uf_labels_row(*labels, y), (size_t)labels->width * sizeof(int32_t));
    return true;
}

uf_status uf_encode_float_tiff(uf_text *out, uf_plane plane, double pixel_size_um, const char *description,
                               uf_error *error)
{
    const tiff_page page = {.width = plane.width,
                            .height = plane.height,
                            .bits = 32,
                            .format = SAMPLEFORMAT_IEEEFP,
                            .compression = COMPRESSION_ADOBE_DEFLATE,
                            .predictor = PREDICTOR_NONE,
                            .pixel_size_um = pixel_size_um,
                            .description = description,
                            .put = put_floats,
                            .source = &plane};
    return encode_tiff(out, &page, error);
}

uf_status uf_encode_label_tiff(uf_text *out, uf_labels labels, double pixel_size_um, const char *description,
                               uf_error *error)
{
    bool wide = labels.count > 65535;
    const tiff_page page = {.width = labels.width,
                            .height = labels.height,
                            .bits = wide ? 32 : 16,
                            .format = SAMPLEFORMAT_UINT,
                            .compression = COMPRESSION_ADOBE_DEFLATE,
                            .predictor = PREDICTOR_HORIZONTAL,
                            .pixel_size_um = pixel_size_um,
                            .description = description,
                            .put = wide ? put_labels32 : put_labels16,
                            .source = &labels};
    return encode_tiff(out, &page, error);
}

/* Uncompressed, as cameras write: photon noise leaves little to gain. */
uf_status uf_encode_count_tiff(uf_text *out, uf_plane plane, double pixel_size_um, const char *description,
                               uf_error *error)
{
    const tiff_page page = {.width = plane.width,
                            .height = plane.height,
                            .bits = 16,
                            .format = SAMPLEFORMAT_UINT,
                            .compression = COMPRESSION_NONE,
                            .pixel_size_um = pixel_size_um,
                            .description = description,
                            .put = put_counts,
                            .source = &plane};
    return encode_tiff(out, &page, error);
}

/* ---- PNG ------------------------------------------------------------------------------------- */

/* Lives in the caller of setjmp, so that a jump out of libpng loses nothing. */
typedef struct png_job {
    uf_text *out;
    png_structp png;
    png_infop info;
    char complaint[200];
} png_job;

static void png_failed(png_structp png, png_const_charp message)
{
    png_job *job = png_get_error_ptr(png);
    (void)snprintf(job->complaint, sizeof job->complaint, "%s", message);
    png_longjmp(png, 1);
}

static void png_warned(png_structp png, png_const_charp message)
{
    (void)png;
    (void)message;
}

static void png_append(png_structp png, png_bytep bytes, size_t count)
{
    png_job *job = png_get_io_ptr(png);
    uf_text_bytes(job->out, bytes, count);
    if (job->out->failed)
        png_error(png, "no memory");
}

/* Nothing to do: the bytes are in memory already. */
static void png_flushed(png_structp png)
{
    (void)png;
}

static void write_header(png_job *job, const uf_indexed *image)
{
    png_color palette[256];
    for (int k = 0; k < image->colours; k++)
        palette[k] = (png_color){image->palette[k][0], image->palette[k][1], image->palette[k][2]};
    png_set_write_fn(job->png, job, png_append, png_flushed);
    png_set_user_limits(job->png, PNG_UINT_31_MAX, PNG_UINT_31_MAX);
    png_set_compression_level(job->png, 1);
    png_set_filter(job->png, PNG_FILTER_TYPE_BASE, PNG_FILTER_NONE);
    png_set_IHDR(job->png, job->info, (png_uint_32)image->width, (png_uint_32)image->height, 8,
                 PNG_COLOR_TYPE_PALETTE, PNG_INTERLACE_NONE, PNG_COMPRESSION_TYPE_DEFAULT, PNG_FILTER_TYPE_DEFAULT);
    png_set_sRGB(job->png, job->info, PNG_sRGB_INTENT_PERCEPTUAL);
    png_set_PLTE(job->png, job->info, palette, image->colours);
    png_write_info(job->png, job->info);
}

/* Owns nothing: libpng may leave it by longjmp at any call. */
static bool write_png(png_job *job, const uf_indexed *image)
{
    if (setjmp(png_jmpbuf(job->png)))
        return false;
    write_header(job, image);
    for (int y = 0; y < image->height; y++)
        png_write_row(job->png, image->data + (size_t)y * (size_t)image->width);
    png_write_end(job->png, job->info);
    return true;
}

static int largest_index(const uf_indexed *image)
{
    size_t count = (size_t)image->width * (size_t)image->height;
    int largest = 0;
    for (size_t k = 0; k < count; k++)
        largest = image->data[k] > largest ? image->data[k] : largest;
    return largest;
}

uf_status uf_encode_indexed_png(uf_text *out, const uf_indexed *image, uf_error *error)
{
    png_job job = {.out = out};
    bool good = false;
    assert(image->colours >= 1 && image->colours <= 256);
    assert(largest_index(image) < image->colours);
    job.png = png_create_write_struct(PNG_LIBPNG_VER_STRING, &job, png_failed, png_warned);
    if (job.png)
        job.info = png_create_info_struct(job.png);
    if (job.info)
        good = write_png(&job, image);
    png_destroy_write_struct(&job.png, &job.info);
    if (good)
        return UF_OK;
    if (job.complaint[0] && !out->failed)
        return uf_fail(error, UF_OUTPUT, "a PNG image cannot be encoded (libpng: %s)", job.complaint);
    return uf_fail_memory(error, "an encoded picture");
}
