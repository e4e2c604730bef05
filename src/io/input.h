/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Text files in, whole. */
#ifndef UF_IO_INPUT_H
#define UF_IO_INPUT_H

#include <stdint.h>

#include "base/text.h"

/* Reads all of a regular file of at most `max_bytes` into `out` (emptied first). UF_INPUT names the path. */
UF_MUST_USE uf_status uf_input_read(uf_text *out, const char *path, size_t max_bytes, uf_error *error);

/* XXH3 64 of a run of bytes. */
uint64_t uf_fingerprint(const void *bytes, size_t count);

#endif
