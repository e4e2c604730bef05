/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Image files out: encoded into memory, so that one writer (io/output.h) makes every file atomic. The bytes
 * are a pure function of the arguments (and of the versions of libtiff, zlib and libpng): no dates, no host.
 * Bytes are appended to `out`; after a failure what it holds is of no use. */
#ifndef UF_IO_IMAGE_ENCODE_H
#define UF_IO_IMAGE_ENCODE_H

#include "base/text.h"
#include "image/indexed.h"
#include "image/plane.h"

/* A 32-bit float grey TIFF, deflate without predictor (readers without extra codecs must open it). NaN is
 * kept, as one bit pattern whatever the processor made; resolution tags where pixel_size_um is a number.
 * `description` goes into ImageDescription (NULL: none). */
UF_MUST_USE uf_status uf_encode_float_tiff(uf_text *out, uf_plane plane, double pixel_size_um,
                                           const char *description, uf_error *error);

/* A 16-bit unsigned grey TIFF of labels, 32-bit when there are more than 65535. */
UF_MUST_USE uf_status uf_encode_label_tiff(uf_text *out, uf_labels labels, double pixel_size_um,
                                           const char *description, uf_error *error);

/* A 16-bit unsigned grey TIFF of counts, uncompressed (the demo's images): values are rounded and must lie in
 * 0 .. 65535; UF_USAGE names the place of one that does not. */
UF_MUST_USE uf_status uf_encode_count_tiff(uf_text *out, uf_plane plane, double pixel_size_um,
                                           const char *description, uf_error *error);

/* An 8-bit palette PNG, compression level 1 (on palette images with ordered indices it is as small as
 * needed and ten times as fast as the default). */
UF_MUST_USE uf_status uf_encode_indexed_png(uf_text *out, const uf_indexed *image, uf_error *error);

#endif
