/* SPDX-License-Identifier: GPL-3.0-or-later */
/* libtiff writing into a uf_text, with its complaints kept instead of printed. */
#ifndef UF_IO_TIFF_MEMORY_H
#define UF_IO_TIFF_MEMORY_H

#include <stdarg.h>
#include <stdint.h>
#include <tiffio.h>

#include "base/text.h"

/* The first error libtiff reported, printable ASCII on one line; empty when there was none. Warnings count
 * only while `warnings_too` is set. */
typedef struct uf_tiff_complaint {
    bool warnings_too;
    char text[240];
} uf_tiff_complaint;

/* Open options that send errors to `complaint`: nothing is printed and no handler of the process is touched.
 * `max_bytes` bounds any single allocation, 0 leaves it open. NULL without memory; free with
 * TIFFOpenOptionsFree as soon as the file is open. */
TIFFOpenOptions *uf_tiff_options(uf_tiff_complaint *complaint, uint64_t max_bytes);

/* A file in memory: it begins where `out` ended when this was made. */
typedef struct uf_tiff_memory {
    uf_text *out;
    size_t base;
    size_t at;
} uf_tiff_memory;

/* Opens `memory` for libtiff ("w" and its letters); close with TIFFClose. NULL with a complaint. */
TIFF *uf_tiff_memory_open(uf_tiff_memory *memory, const char *mode, TIFFOpenOptions *options);

#endif
