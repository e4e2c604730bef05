/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Files in: opened once, with care, and text files read whole. */
#ifndef UF_IO_INPUT_H
#define UF_IO_INPUT_H

#include <stdint.h>

#include "base/text.h"

/* Opens a regular file for reading and says how long it is. Folders, pipes and devices are UF_INPUT, and a
 * pipe nobody writes to does not hang the program. The caller closes the descriptor. */
UF_MUST_USE uf_status uf_input_open(const char *path, int *descriptor, uint64_t *bytes, uf_error *error);

/* Reads all of a regular file of at most `max_bytes` into `out` (emptied first). UF_INPUT names the path. */
UF_MUST_USE uf_status uf_input_read(uf_text *out, const char *path, size_t max_bytes, uf_error *error);

/* XXH3 64 of a run of bytes. */
uint64_t uf_fingerprint(const void *bytes, size_t count);

/* The same of an open file from its first byte on, read through `buffer` of `size` bytes; it does not move
 * the descriptor's position. `path` is for the error. */
UF_MUST_USE uf_status uf_input_fingerprint(int descriptor, const char *path, void *buffer, size_t size,
                                           uint64_t *fingerprint, uf_error *error);

/* What tells cheaply whether a file is still the one that was read: its size (-1: there is none) and when it was changed. */
typedef struct uf_input_facts {
    int64_t bytes, changed_ns;
} uf_input_facts;

uf_input_facts uf_input_facts_of(const char *path);

/* Asks the system to fetch the file from the disk meanwhile. Nothing is wrong when it cannot. */
void uf_input_expect(const char *path);

#endif
