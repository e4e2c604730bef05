/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Reading goes from the outside in, and nothing is believed before it is checked: the file (regular, not
 * empty, begins like a TIFF), the chain of pages, the page's header (grey, a format we know, a lossless
 * codec), its pieces (strips or tiles: inside the file, and holding enough bytes for the pixels they
 * promise). Only then is memory taken, and each piece is decoded straight into its place.
 */
#include "io/image_file.h"

#include <limits.h>
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "io/input.h"
#include "io/ome_xml.h"
#include "io/tiff_memory.h"

static const double default_max_pixels = 1e9;

typedef struct reader {
    const char *path;
    int page; /* from 0 */
    int pages;
    int descriptor;
    uint64_t file_bytes;
    TIFF *tiff;
    uf_tiff_complaint complaint;
} reader;

/* What a page's header promises. A piece is a tile, or a strip: as wide as the image, the last one lower. */
typedef struct layout {
    int width, height;
    int bits;
    int is_float;
    double best_ratio;
    int tiled;
    uint32_t piece_width, piece_height;
    uint32_t pieces;
} layout;

/* ---- messages -------------------------------------------------------------------------------- */

/* UF_INPUT with "PATH, page N: " before the line; people count pages from 1. */
static uf_status refuse(const reader *r, uf_error *error, const char *format, ...) UF_PRINTF(3, 4);

static uf_status refuse(const reader *r, uf_error *error, const char *format, ...)
{
    char line[UF_ERROR_TEXT - 440];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(line, sizeof line, format, arguments);
    va_end(arguments);
    return uf_fail(error, UF_INPUT, "%.400s, page %.0f: %s", r->path, r->page + 1.0, line);
}

/* For faults of the file itself: what does not work, what libtiff said about it, and the one mend. */
static uf_status damaged(const reader *r, uf_error *error, const char *what)
{
    const char *said = r->complaint.text;
    return refuse(r, error, "%s%s%s%s; the file is damaged: copy it again from the microscope", what,
                  said[0] ? " (libtiff: " : "", said, said[0] ? ")" : "");
}

/* ---- the file -------------------------------------------------------------------------------- */

/* The four signatures of TIFF 6.0 (version 42) and BigTIFF (version 43). */
static bool begins_like_tiff(const unsigned char *first)
{
    static const unsigned char known[4][4] = {
        {'I', 'I', 42, 0}, {'M', 'M', 0, 42}, {'I', 'I', 43, 0}, {'M', 'M', 0, 43}};
    for (int k = 0; k < 4; k++)
        if (memcmp(first, known[k], 4) == 0)
            return true;
    return false;
}

static uf_status check_signature(const reader *r, uf_error *error)
{
    unsigned char first[4] = {0};
    if (r->file_bytes == 0)
        return uf_fail(error, UF_INPUT,
                       "%.400s: is empty (0 bytes), expected a TIFF image; copy it again from the microscope",
                       r->path);
    ssize_t count = pread(r->descriptor, first, sizeof first, 0);
    if (count == (ssize_t)sizeof first && begins_like_tiff(first))
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "%.400s: is not a TIFF file (it begins with the bytes %02X %02X %02X %02X); save the raw "
                   "grey image as TIFF",
                   r->path, first[0], first[1], first[2], first[3]);
}

/*
 * The bound on one allocation inside libtiff: a stored piece, a table of offsets (2 bytes in the file are 8
 * in memory) or a decoded row. A header that claims more than the file could need is refused by libtiff.
 */
static uint64_t libtiff_memory(uint64_t file_bytes)
{
    return ((uint64_t)64 << 20) + 4 * file_bytes;
}

/* Mode letters: m never maps the file, c leaves a single long strip whole instead of chopping it up. */
static uf_status open_tiff(reader *r, uf_error *error)
{
    TIFFOpenOptions *options = uf_tiff_options(&r->complaint, libtiff_memory(r->file_bytes));
    if (!options)
        return uf_fail_memory(error, r->path);
    r->tiff = TIFFFdOpenExt(r->descriptor, "file", "rmc", options);
    TIFFOpenOptionsFree(options);
    return r->tiff ? UF_OK : damaged(r, error, "cannot be read");
}

static uf_status no_such_page(const reader *r, uf_error *error)
{
    return uf_fail(error, UF_INPUT,
                   "%.400s: has %d page%s, page %.0f was asked for (counted from 1); ask for one that is there",
                   r->path, r->pages, r->pages == 1 ? "" : "s", r->page + 1.0);
}

/* libtiff walks the chain of pages and remembers where it has been: a loose end is an error, a loop only a
 * warning, after which it would go on as if the chain ended there. */
static uf_status find_page(reader *r, uf_error *error)
{
    r->complaint.text[0] = '\0';
    r->complaint.warnings_too = true;
    tdir_t pages = TIFFNumberOfDirectories(r->tiff);
    r->complaint.warnings_too = false;
    if (r->complaint.text[0] || pages == 0 || pages > INT_MAX)
        return damaged(r, error, "the chain of pages is broken");
    r->pages = (int)pages;
    if (r->page < 0 || r->page >= r->pages)
        return no_such_page(r, error);
    if (r->page > 0 && !TIFFSetDirectory(r->tiff, (tdir_t)r->page))
        return damaged(r, error, "the page's header cannot be read");
    return UF_OK;
}

/* ---- the header ------------------------------------------------------------------------------ */

static uint16_t short_tag(const reader *r, uint32_t tag, uint16_t otherwise)
{
    uint16_t value = otherwise;
    return TIFFGetField(r->tiff, tag, &value) ? value : otherwise;
}

static const char *photometric_name(uint16_t photometric)
{
    switch (photometric) {
    case PHOTOMETRIC_MINISWHITE:
        return "grey with 0 as white";
    case PHOTOMETRIC_RGB:
        return "colour (RGB)";
    case PHOTOMETRIC_PALETTE:
        return "colour (palette)";
    case PHOTOMETRIC_MASK:
        return "a transparency mask";
    case PHOTOMETRIC_SEPARATED:
        return "colour (CMYK)";
    case PHOTOMETRIC_YCBCR:
        return "colour (YCbCr)";
    case PHOTOMETRIC_CFA:
        return "colour (raw filter array)";
    default:
        return "of a kind it does not name";
    }
}

static const char *format_name(uint16_t format)
{
    switch (format) {
    case SAMPLEFORMAT_UINT:
    case SAMPLEFORMAT_VOID:
        return "unsigned";
    case SAMPLEFORMAT_INT:
        return "signed";
    case SAMPLEFORMAT_IEEEFP:
        return "floating-point";
    default:
        return "complex";
    }
}

static uf_status check_colour(const reader *r, uf_error *error)
{
    enum { UNNAMED = 0xffff };
    uint16_t samples = short_tag(r, TIFFTAG_SAMPLESPERPIXEL, 1);
    uint16_t photometric = short_tag(r, TIFFTAG_PHOTOMETRIC, UNNAMED);
    if (photometric == PHOTOMETRIC_MINISWHITE && samples == 1)
        return refuse(r, error, "is %s, expected 0 as black; save the raw grey image, not an inverted one",
                      photometric_name(photometric));
    if (photometric != PHOTOMETRIC_MINISBLACK || samples != 1)
        return refuse(r, error,
                      "is %s with %u value%s a pixel, expected grey with one; save the raw grey image, not a "
                      "coloured rendering",
                      photometric == PHOTOMETRIC_MINISBLACK ? "grey" : photometric_name(photometric), samples,
                      samples == 1 ? "" : "s");
    return UF_OK;
}

/* TIFF 6.0, section 19: data of undefined format is read as if the tag were not there, as unsigned. */
static uf_status check_format(const reader *r, layout *l, uf_error *error)
{
    uint16_t bits = short_tag(r, TIFFTAG_BITSPERSAMPLE, 1);
    uint16_t format = short_tag(r, TIFFTAG_SAMPLEFORMAT, SAMPLEFORMAT_UINT);
    bool is_unsigned = format == SAMPLEFORMAT_UINT || format == SAMPLEFORMAT_VOID;
    l->bits = bits;
    l->is_float = format == SAMPLEFORMAT_IEEEFP;
    if ((is_unsigned && (bits == 8 || bits == 16)) || (l->is_float && bits == 32))
        return UF_OK;
    return refuse(r, error,
                  "holds %u-bit %s values, expected 8- or 16-bit unsigned or 32-bit floating-point; export "
                  "the raw counts without conversion",
                  bits, format_name(format));
}

static uf_status check_orientation(const reader *r, uf_error *error)
{
    uint16_t orientation = short_tag(r, TIFFTAG_ORIENTATION, ORIENTATION_TOPLEFT);
    uint32_t depth = 1;
    if (orientation != ORIENTATION_TOPLEFT)
        return refuse(r, error,
                      "is stored turned or mirrored (orientation %u), expected row 0 on top and column 0 on "
                      "the left (orientation 1); save it without rotation",
                      orientation);
    if (TIFFGetField(r->tiff, TIFFTAG_IMAGEDEPTH, &depth) && depth != 1)
        return refuse(r, error, "is a volume of %u layers, expected a flat image; save one layer a page",
                      (unsigned)depth);
    return UF_OK;
}

/*
 * The lossless codecs, each with the most bytes that one stored byte can stand for. A header that promises
 * more than its bytes could hold is a lie, and is caught before memory is taken for it.
 */
typedef struct codec {
    uint16_t scheme;
    double best_ratio;
} codec;

static const codec codecs[] = {
    {COMPRESSION_NONE, 1},
    /* 2 bytes are a run of at most 128 (TIFF 6.0, section 9). */
    {COMPRESSION_PACKBITS, 64},
    /* A 12-bit code stands for no more bytes than its table has entries: 4096, and libtiff's 1024 spare. */
    {COMPRESSION_LZW, 5120 * 8 / 12.0},
    /* 258 bytes for 2 bits (zlib's technical notes: 1032 to 1). */
    {COMPRESSION_ADOBE_DEFLATE, 1032},
    {COMPRESSION_DEFLATE, 1032},
    /* The longest match, 273 bytes, takes 14 binary decisions of at least log2(2048 / 2017) bits each. */
    {COMPRESSION_LZMA, 7100},
    /* A block of 128 KiB in a 3-byte header and one byte (RFC 8878, section 3.1.1.2). */
    {COMPRESSION_ZSTD, 32768},
};

static uf_status check_codec(const reader *r, layout *l, uf_error *error)
{
    uint16_t scheme = short_tag(r, TIFFTAG_COMPRESSION, COMPRESSION_NONE);
    const TIFFCodec *known = TIFFFindCODEC(scheme);
    const char *name = known ? known->name : "unknown";
    for (size_t k = 0; k < sizeof codecs / sizeof codecs[0]; k++) {
        if (codecs[k].scheme != scheme)
            continue;
        l->best_ratio = codecs[k].best_ratio;
        if (TIFFIsCODECConfigured(scheme))
            return UF_OK;
        return refuse(r, error,
                      "is compressed with %s, which this machine's libtiff cannot decode; save it "
                      "uncompressed, or with LZW or deflate",
                      name);
    }
    return refuse(r, error,
                  "is compressed with %s (scheme %u), expected none, LZW, deflate, PackBits, LZMA or "
                  "Zstandard, which keep every count; save the raw image again with one of these",
                  name, scheme);
}

static uf_status check_size(const reader *r, layout *l, double max_pixels, uf_error *error)
{
    uint32_t width = 0, height = 0;
    (void)TIFFGetField(r->tiff, TIFFTAG_IMAGEWIDTH, &width);
    (void)TIFFGetField(r->tiff, TIFFTAG_IMAGELENGTH, &height);
    if (width == 0 || height == 0)
        return damaged(r, error, "says no width or no height");
    if ((double)width * height > max_pixels || width > INT_MAX || height > INT_MAX)
        return refuse(r, error, "claims %u x %u pixels, more than the limit of %.0f; cut the image into fields",
                      (unsigned)width, (unsigned)height, max_pixels);
    l->width = (int)width;
    l->height = (int)height;
    return UF_OK;
}

/* ---- the pieces ------------------------------------------------------------------------------ */

static uint32_t least(uint32_t a, uint32_t b)
{
    return a < b ? a : b;
}

static uf_status read_pieces(const reader *r, layout *l, double max_pixels, uf_error *error)
{
    uint32_t width = (uint32_t)l->width, height = (uint32_t)l->height;
    l->tiled = TIFFIsTiled(r->tiff);
    if (l->tiled) {
        (void)TIFFGetField(r->tiff, TIFFTAG_TILEWIDTH, &l->piece_width);
        (void)TIFFGetField(r->tiff, TIFFTAG_TILELENGTH, &l->piece_height);
        l->pieces = TIFFNumberOfTiles(r->tiff);
    } else {
        uint32_t rows = height;
        (void)TIFFGetFieldDefaulted(r->tiff, TIFFTAG_ROWSPERSTRIP, &rows);
        l->piece_width = width;
        l->piece_height = least(rows, height);
        l->pieces = TIFFNumberOfStrips(r->tiff);
    }
    uint64_t w = l->piece_width, h = l->piece_height;
    if (w == 0 || h == 0 || (double)w * (double)h > max_pixels ||
        l->pieces != ((width + w - 1) / w) * ((height + h - 1) / h))
        return damaged(r, error, "has strips or tiles of an impossible size");
    return UF_OK;
}

/* Bytes of one piece once decoded. Tiles are stored whole; the last strip ends with the image. */
static size_t decoded_bytes(const layout *l, uint32_t piece)
{
    uint32_t rows = l->piece_height;
    if (!l->tiled)
        rows = least(rows, (uint32_t)l->height - piece * l->piece_height);
    return (size_t)l->piece_width * rows * (size_t)(l->bits / 8);
}

/* A piece without bytes (sparse files) would be a black stripe that nobody measured. */
static uf_status check_pieces(const reader *r, const layout *l, uf_error *error)
{
    const char *kind = l->tiled ? "tile" : "strip";
    for (uint32_t k = 0; k < l->pieces; k++) {
        int failed = 0;
        uint64_t offset = TIFFGetStrileOffset(r->tiff, k);
        uint64_t count = TIFFGetStrileByteCountWithErr(r->tiff, k, &failed);
        unsigned number = (unsigned)k + 1;
        if (failed)
            return damaged(r, error, "the table of strips or tiles cannot be read");
        if (offset == 0 || count == 0)
            return refuse(r, error, "%s %u of %u has no stored pixels (a sparse file); save the whole image again",
                          kind, number, (unsigned)l->pieces);
        if (offset > r->file_bytes || count > r->file_bytes - offset)
            return refuse(r, error,
                          "%s %u of %u lies beyond the end of the file (%.0f bytes): it was cut short; copy "
                          "it again from the microscope",
                          kind, number, (unsigned)l->pieces, (double)r->file_bytes);
        if ((double)decoded_bytes(l, k) > l->best_ratio * (double)count)
            return refuse(r, error,
                          "%s %u of %u promises %zu bytes of pixels, more than its %.0f stored bytes can "
                          "hold; the file is damaged: copy it again from the microscope",
                          kind, number, (unsigned)l->pieces, decoded_bytes(l, k), (double)count);
    }
    return UF_OK;
}

static uf_status read_layout(const reader *r, layout *l, double max_pixels, uf_error *error)
{
    uf_status status = check_colour(r, error);
    if (!status)
        status = check_format(r, l, error);
    if (!status)
        status = check_orientation(r, error);
    if (!status)
        status = check_codec(r, l, error);
    if (!status)
        status = check_size(r, l, max_pixels, error);
    if (!status)
        status = read_pieces(r, l, max_pixels, error);
    if (!status)
        status = check_pieces(r, l, error);
    return status;
}

/* ---- the pixels ------------------------------------------------------------------------------ */

/* Copies a block at a time, so that the loops see plain arrays and become vectors. `from` may be the far end
 * of the memory of `to`: a block is read before it is written, and writing never overtakes reading. */
static void widen(float *to, const unsigned char *from, size_t count, int bits)
{
    enum { BLOCK = 1024 };
    uint16_t words[BLOCK];
    unsigned char bytes[BLOCK];
    for (size_t done = 0; done < count; done += BLOCK) {
        size_t n = count - done < BLOCK ? count - done : BLOCK;
        if (bits == 8) {
            memcpy(bytes, from + done, n);
            for (size_t k = 0; k < n; k++)
                to[done + k] = bytes[k];
        } else {
            memcpy(words, from + 2 * done, 2 * n);
            for (size_t k = 0; k < n; k++)
                to[done + k] = words[k];
        }
    }
}

/* A strip is whole rows, so it is decoded into the far end of its own rows and widened from there. */
static bool read_strip(reader *r, const layout *l, uint32_t strip, uf_plane plane)
{
    size_t bytes = decoded_bytes(l, strip), count = bytes / (size_t)(l->bits / 8);
    float *to = uf_plane_row(plane, (int)(strip * l->piece_height));
    unsigned char *stored = (unsigned char *)(to + count) - bytes;
    if (TIFFReadEncodedStrip(r->tiff, strip, stored, (tmsize_t)bytes) != (tmsize_t)bytes)
        return false;
    if (!l->is_float)
        widen(to, stored, count, l->bits);
    return true;
}

static bool read_tile(reader *r, const layout *l, uint32_t tile, uf_plane plane, unsigned char *scratch)
{
    size_t bytes = decoded_bytes(l, tile), size = (size_t)(l->bits / 8);
    uint32_t across = ((uint32_t)l->width + l->piece_width - 1) / l->piece_width;
    uint32_t x0 = tile % across * l->piece_width, y0 = tile / across * l->piece_height;
    uint32_t columns = least(l->piece_width, (uint32_t)l->width - x0);
    uint32_t rows = least(l->piece_height, (uint32_t)l->height - y0);
    if (TIFFReadEncodedTile(r->tiff, tile, scratch, (tmsize_t)bytes) != (tmsize_t)bytes)
        return false;
    for (uint32_t y = 0; y < rows; y++) {
        float *to = uf_plane_row(plane, (int)(y0 + y)) + x0;
        const unsigned char *from = scratch + y * l->piece_width * size;
        if (l->is_float)
            memcpy(to, from, columns * size);
        else
            widen(to, from, columns, l->bits);
    }
    return true;
}

static uf_status read_pixels(reader *r, const layout *l, uf_work *work, uf_plane plane, uf_error *error)
{
    unsigned char *scratch = NULL;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (l->tiled) {
        uf_status status = uf_take(work, decoded_bytes(l, 0), 1, "a tile", &scratch, error);
        if (status)
            return status;
    }
    r->complaint.text[0] = '\0';
    bool good = true;
    for (uint32_t k = 0; good && k < l->pieces; k++) {
        good = l->tiled ? read_tile(r, l, k, plane, scratch) : read_strip(r, l, k, plane);
        good = good && !r->complaint.text[0];
    }
    uf_arena_back(&work->arena, mark);
    return good ? UF_OK : damaged(r, error, "cannot be decoded");
}

/* An exponent of all ones is NaN or an infinity. The test has no branch, so a row is one vector loop. */
static bool row_is_finite(const float *row, int width)
{
    const uint32_t exponent = 0x7f800000u;
    uint32_t found = 0;
    for (int x = 0; x < width; x++) {
        uint32_t word;
        memcpy(&word, &row[x], sizeof word);
        found |= (word & exponent) == exponent;
    }
    return !found;
}

static uf_status check_finite(const reader *r, uf_plane plane, uf_error *error)
{
    for (int y = 0; y < plane.height; y++) {
        const float *row = uf_plane_row(plane, y);
        int x = 0;
        if (row_is_finite(row, plane.width))
            continue;
        while (isfinite(row[x]))
            x++;
        return refuse(r, error,
                      "the value at x = %d, y = %d is %s, expected a number in every pixel; export the raw "
                      "counts without conversion",
                      x, y, isnan(row[x]) ? "not a number" : "infinite");
    }
    return UF_OK;
}

/* ---- what the file says about itself --------------------------------------------------------- */

/*
 * Programs that know no pixel size write a placeholder (1, 72, 96, 300 pixels an inch), which would be tens
 * of micrometres; no objective gives more than 20, and none less than 0.1 nm. libtiff keeps the tag as a
 * float: six digits are what it says, the rest is its rounding.
 */
static double pixel_size_um(const reader *r, uint32_t tag)
{
    float per_unit = 0;
    uint16_t unit = RESUNIT_INCH;
    (void)TIFFGetFieldDefaulted(r->tiff, TIFFTAG_RESOLUTIONUNIT, &unit);
    if (!TIFFGetField(r->tiff, tag, &per_unit) || !(per_unit > 0))
        return NAN;
    if (unit != RESUNIT_CENTIMETER && unit != RESUNIT_INCH)
        return NAN;
    double size_um = (unit == RESUNIT_CENTIMETER ? 1e4 : 25.4e3) / (double)per_unit;
    return size_um >= 1e-4 && size_um <= 20 ? uf_round_digits(size_um, 6) : NAN;
}

static uf_status fingerprint_of(const reader *r, uf_work *work, uint64_t *fingerprint, uf_error *error)
{
    enum { BUFFER = 1 << 20 };
    void *buffer;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, BUFFER, 1, "a checksum", &buffer, error);
    if (!status)
        status = uf_input_fingerprint(r->descriptor, r->path, buffer, BUFFER, fingerprint, error);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* The first page's description; NULL when it has none. It lives until another page is chosen. */
static const char *description_of(const reader *r)
{
    char *text = NULL;
    if (TIFFCurrentDirectory(r->tiff) != 0 && !TIFFSetDirectory(r->tiff, 0))
        return NULL;
    return TIFFGetField(r->tiff, TIFFTAG_IMAGEDESCRIPTION, &text) ? text : NULL;
}

/* What the first page's OME-XML says; empty where there is none. An XML that cannot be read says nothing: making a sheet
 * tells why. Afterwards the first page is the one in hand. */
static uf_ome read_ome(const reader *r)
{
    uf_ome ome = {0};
    const char *text = description_of(r);
    if (uf_ome_is(text) && uf_ome_parse(&ome, text, strlen(text), r->path, NULL) != UF_OK)
        ome = (uf_ome){0};
    return ome;
}

/* Of the image whose plane the page holds. */
static void take_ome_pixel_size(const uf_ome *ome, int page, uf_image_info *info)
{
    const uf_ome_image *image = uf_ome_image_of(ome, page);
    if (!image || !(image->pixel_size_x_um > 0) || !(image->pixel_size_y_um > 0))
        return;
    info->pixel_size_x_um = image->pixel_size_x_um;
    info->pixel_size_y_um = image->pixel_size_y_um;
}

/* What the page in hand says of itself. */
static void describe(const reader *r, const layout *l, uf_image_info *info)
{
    *info = (uf_image_info){.width = l->width,
                            .height = l->height,
                            .pages = r->pages,
                            .bits = l->bits,
                            .is_float = l->is_float,
                            .pixel_size_x_um = pixel_size_um(r, TIFFTAG_XRESOLUTION),
                            .pixel_size_y_um = pixel_size_um(r, TIFFTAG_YRESOLUTION),
                            .file_bytes = r->file_bytes};
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* The file is read twice, for its fingerprint and for its pixels; both must have seen the same bytes. */
static uf_status check_unchanged(const reader *r, const struct stat *before, uf_error *error)
{
    struct stat now;
    if (fstat(r->descriptor, &now) == 0 && now.st_size == before->st_size &&
        now.st_mtim.tv_sec == before->st_mtim.tv_sec && now.st_mtim.tv_nsec == before->st_mtim.tv_nsec)
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "%.400s: changed while it was being read; wait until the microscope has written it", r->path);
}

static uf_status read_page(reader *r, uf_work *work, double max_pixels, uf_plane *plane, uf_image_info *info,
                           uf_error *error)
{
    layout l = {0};
    uf_status status = open_tiff(r, error);
    if (!status)
        status = find_page(r, error);
    if (!status)
        status = read_layout(r, &l, max_pixels, error);
    if (!status)
        status = uf_plane_take(work, l.width, l.height, plane, error);
    if (!status)
        status = read_pixels(r, &l, work, *plane, error);
    if (!status && l.is_float)
        status = check_finite(r, *plane, error);
    if (!status && info) {
        describe(r, &l, info);
        uf_ome ome = read_ome(r);
        take_ome_pixel_size(&ome, r->page, info);
        uf_ome_free(&ome);
        status = fingerprint_of(r, work, &info->fingerprint, error);
    }
    return status;
}

uf_status uf_image_read(uf_work *work, const char *path, int page, const uf_image_limits *limits, uf_plane *plane,
                        uf_image_info *info, uf_error *error)
{
    reader r = {.path = path, .page = page};
    uf_arena_mark mark = uf_arena_now(&work->arena);
    struct stat before;
    *plane = (uf_plane){0};
    uf_status status = uf_input_open(path, &r.descriptor, &r.file_bytes, error);
    if (status)
        return status;
    if (fstat(r.descriptor, &before) != 0)
        before = (struct stat){0}; /* equals nothing: check_unchanged will say so */
    status = check_signature(&r, error);
    if (!status)
        status = read_page(&r, work, limits ? limits->max_pixels : default_max_pixels, plane, info, error);
    if (!status)
        status = check_unchanged(&r, &before, error);
    if (r.tiff)
        TIFFCleanup(r.tiff); /* frees; the descriptor is ours to close */
    (void)close(r.descriptor);
    if (status) {
        uf_arena_back(&work->arena, mark);
        *plane = (uf_plane){0};
    }
    return status;
}

/* ---- without pixels -------------------------------------------------------------------------- */

/* Goes forward to a page, directory by directory: choosing one by its number would walk the chain from its start. */
static uf_status go_to_page(reader *r, int page, int *at, uf_error *error)
{
    r->page = page;
    if (page < 0 || page >= r->pages)
        return no_such_page(r, error);
    r->complaint.text[0] = '\0';
    for (; *at < page; ++*at)
        if (!TIFFReadDirectory(r->tiff))
            return damaged(r, error, "the page's header cannot be read");
    return UF_OK;
}

static uf_status probe_page(reader *r, double max_pixels, const uf_ome *ome, int *at, uf_page_probe *probe)
{
    layout l = {0};
    uf_status status = go_to_page(r, probe->page, at, &probe->error);
    if (!status)
        status = read_layout(r, &l, max_pixels, &probe->error);
    if (status)
        return status;
    describe(r, &l, &probe->info);
    take_ome_pixel_size(ome, probe->page, &probe->info);
    return UF_OK;
}

static void probe_pages(reader *r, double max_pixels, uf_page_probe *probes, int count, uf_text *description)
{
    uf_ome ome = read_ome(r);
    int at = 0;
    const char *text = description ? description_of(r) : NULL;
    if (text)
        uf_text_add(description, text);
    for (int k = 0; k < count; k++)
        probes[k].status = probe_page(r, max_pixels, &ome, &at, &probes[k]);
    uf_ome_free(&ome);
}

static uf_status open_for_probe(reader *r, uf_error *error)
{
    uf_status status = uf_input_open(r->path, &r->descriptor, &r->file_bytes, error);
    if (status)
        return status;
    status = check_signature(r, error);
    if (!status)
        status = open_tiff(r, error);
    return status ? status : find_page(r, error);
}

void uf_image_probe_pages(const char *path, const uf_image_limits *limits, uf_page_probe *probes, int count,
                          uf_text *description)
{
    reader r = {.path = path, .descriptor = -1};
    uf_error error = {0};
    if (description)
        description->length = 0;
    for (int k = 0; k < count; k++)
        probes[k].info = (uf_image_info){0};
    uf_status status = open_for_probe(&r, &error);
    if (!status)
        probe_pages(&r, limits ? limits->max_pixels : default_max_pixels, probes, count, description);
    for (int k = 0; status && k < count; k++) {
        probes[k].status = status;
        probes[k].error = error;
    }
    if (r.tiff)
        TIFFCleanup(r.tiff);
    if (r.descriptor >= 0)
        (void)close(r.descriptor);
}
