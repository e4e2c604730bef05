/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Pictures of the program's own read back. */
#ifndef UF_IO_IMAGE_DECODE_H
#define UF_IO_IMAGE_DECODE_H

#include "base/text.h"
#include "base/work.h"
#include "image/indexed.h"

/* An 8-bit palette PNG of at most `most_side` pixels a side, its indices and palette as they are; the data lie in `work`'s
 * arena. UF_INPUT for anything else, or for bytes that are cut short or spoilt. */
UF_MUST_USE uf_status uf_decode_indexed_png(uf_work *work, const uf_text *bytes, int most_side, uf_indexed *picture,
                                            uf_error *error);

#endif
