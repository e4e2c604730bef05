/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Results out. A folder is opened once and files are made under its descriptor; every file goes to a
 * temporary name (".NAME.part"), is synced, and renamed, so that a failure leaves whole files or none. No
 * symbolic link below OUT is followed.
 */
#ifndef UF_IO_OUTPUT_H
#define UF_IO_OUTPUT_H

#include "base/text.h"

/* Zeroed it is closed and may be closed again. */
typedef struct uf_output {
    int open; /* 1 when descriptor is valid */
    int descriptor;
    char *path; /* as the user typed it, for messages */
} uf_output;

/* Makes `path` (and missing parents) and opens it. UF_OUTPUT names the path, why, and the mend. */
UF_MUST_USE uf_status uf_output_open(uf_output *output, const char *path, uf_error *error);
void uf_output_close(uf_output *output);

/* Writes `bytes` as `folder/name` below the output; folder may be NULL and is made when missing. `name` is
 * one path component of at most 249 bytes (uf_output_key makes one from anything), and so is folder. On
 * UF_OUTPUT the file that was there before is still there. */
UF_MUST_USE uf_status uf_output_write(const uf_output *output, const char *folder, const char *name,
                                      const void *bytes, size_t count, uf_error *error);

/* Writes one file where `path` says, in the same way; its folder is made when missing. */
UF_MUST_USE uf_status uf_output_file(const char *path, const void *bytes, size_t count, uf_error *error);

/* Removes `folder/name` where it exists; a file that is not there is no error. */
UF_MUST_USE uf_status uf_output_remove(const uf_output *output, const char *folder, const char *name,
                                       uf_error *error);

/* Appends `key` as one safe file name: ASCII letters, digits, '_', '-' and inner '.' stay, every other byte
 * becomes "=XX" in hexadecimal; the empty key becomes "=". A name of more than 200 bytes is cut and ends in a
 * 128-bit hash of the key. Different keys give different names, on file systems that tell a from A. */
void uf_output_key(uf_text *out, const char *key);

#endif
