/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Image files in: TIFF and BigTIFF, grey, 8- and 16-bit unsigned and 32-bit float, strips or tiles, both
 * byte orders, the lossless codecs of the system's libtiff, one page of possibly many.
 *
 * A file is untrusted. It is never mapped (a file cut short meanwhile would be a SIGBUS), its header is
 * checked before memory is taken: colour, palette, more pixels than `max_pixels` or than the stored bytes
 * could hold at the codec's best ratio, strips outside the file, sparse strips. A strip that does not
 * decode is an error, not a black stripe. Grey means 0 is black and row 0 is on top: an inverted or a turned
 * image is refused, not converted behind the user's back. The whole file is read for its fingerprint.
 */
#ifndef UF_IO_IMAGE_FILE_H
#define UF_IO_IMAGE_FILE_H

#include "base/text.h"
#include "image/plane.h"

typedef struct uf_image_info {
    int width, height;
    int pages; /* pages in the file */
    int bits;  /* 8, 16 or 32 (float) */
    int is_float;
    double pixel_size_x_um; /* from OME-XML, else from the resolution tags; NaN when they say nothing, or a
                                placeholder: no unit, above 20 um (72 and 300 pixels an inch are), below 1e-4 um */
    double pixel_size_y_um;
    uint64_t file_bytes;
    uint64_t fingerprint; /* XXH3 64 of the file's bytes */
} uf_image_info;

typedef struct uf_image_limits {
    double max_pixels; /* per page; NULL limits mean 1e9 */
} uf_image_limits;

/* Reads page `page` (from 0; messages count pages from 1) of `path` into a plane of raw values taken from
 * `work`'s arena: counts as they stand in the file, float values as they are (NaN and infinities are refused:
 * UF_INPUT with the first one's place). Fills `info` (may be NULL: then no fingerprint is taken either).
 * UF_INPUT names the path and the page; after a failure the arena stands where it stood and the plane is
 * empty. */
UF_MUST_USE uf_status uf_image_read(uf_work *work, const char *path, int page, const uf_image_limits *limits,
                                    uf_plane *plane, uf_image_info *info, uf_error *error);

/* A page to look at, and what was found. */
typedef struct uf_page_probe {
    int page; /* from 0; to be filled in */
    uf_status status;
    uf_error error;     /* where the status is not UF_OK */
    uf_image_info info; /* without a fingerprint (0) */
} uf_page_probe;

/* What the pages of a file (in ascending order) say of themselves, without their pixels: the file is opened once. The same
 * refusals as uf_image_read but for what only pixels show. `description` (may be NULL) gets the first page's. */
void uf_image_probe_pages(const char *path, const uf_image_limits *limits, uf_page_probe *probes, int count,
                          uf_text *description);

#endif
