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

/* ---- many files: group commits --------------------------------------------------------------- */

enum { UF_BATCH_FILES = 256, UF_BATCH_FOLDERS = 8 };

/*
 * Files that were written but may not survive a power cut yet. Each fsync costs milliseconds, so that many are made sure of at
 * once: files that are only data get their names at once, a record, which says that the data of its field are there, gets its
 * name only after all of them are on the disk. Zeroed it is empty; one thread at a time may use it.
 */
typedef struct uf_output_batch {
    int descriptors[UF_BATCH_FILES], count;
    const char *folders[UF_BATCH_FOLDERS]; /* touched; string constants */
    int folder_count;
    struct {
        const char *folder;
        char name[256];
    } records[UF_BATCH_FILES];
    int record_count;
} uf_output_batch;

/* As uf_output_write, but on the disk for sure only after uf_output_batch_commit. `folder` must outlive the batch. A full batch
 * is committed first. */
UF_MUST_USE uf_status uf_output_write_soon(const uf_output *output, uf_output_batch *batch, const char *folder,
                                           const char *name, const void *bytes, size_t count, uf_error *error);

/* The same for a record: it has its name only after the commit. */
UF_MUST_USE uf_status uf_output_record_soon(const uf_output *output, uf_output_batch *batch, const char *folder,
                                            const char *name, const void *bytes, size_t count, uf_error *error);

UF_MUST_USE uf_status uf_output_batch_commit(const uf_output *output, uf_output_batch *batch, uf_error *error);

/* Closes what is open without committing. */
void uf_output_batch_drop(uf_output_batch *batch);

/* ---- long files ------------------------------------------------------------------------------- */

/* A file in the making, too long to be held: it has its name only when it is finished. Zeroed it is closed. */
typedef struct uf_output_stream {
    int open, descriptor, folder;
    char name[256];
    uf_text waiting;
} uf_output_stream;

UF_MUST_USE uf_status uf_stream_open(uf_output_stream *stream, const uf_output *output, const char *name,
                                     uf_error *error);
/* Text to append through: what waits in stream->waiting is written now and then by uf_stream_flush, at the latest at the end. */
UF_MUST_USE uf_status uf_stream_flush(uf_output_stream *stream, const uf_output *output, uf_error *error);
UF_MUST_USE uf_status uf_stream_finish(uf_output_stream *stream, const uf_output *output, uf_error *error);
void uf_stream_drop(uf_output_stream *stream);

/* ---- one run at a time ------------------------------------------------------------------------ */

/* Takes the lock file `name` for as long as the descriptor is open (whatever becomes of the process), and writes `who` into
 * it. UF_OUTPUT with what the holder wrote when another process has it. */
UF_MUST_USE uf_status uf_output_lock(const uf_output *output, const char *name, const char *who, int *descriptor,
                                     uf_error *error);

/* Reads `folder/name` below the output into `bytes`, empty when it is not there. UF_INPUT when it cannot be read. */
UF_MUST_USE uf_status uf_output_read(const uf_output *output, const char *folder, const char *name, uf_text *bytes,
                                     uf_error *error);

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
