/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Image files of a bench, read and corrected as its settings say, and the list of what was read. */
#ifndef UF_RUN_READ_CHANNEL_H
#define UF_RUN_READ_CHANNEL_H

#include "image/channel.h"
#include "io/image_file.h"
#include "run/run_json.h"

extern const char *const uf_channel_names[UF_CHANNELS];

/* Zeroed but for work and settings it has read nothing. Paths and roles are kept as they are, not copied. */
typedef struct uf_reader {
    uf_work *work;
    const uf_settings *settings;
    uf_run_input *inputs; /* in the order of reading, each file once a role */
    int count;
} uf_reader;

void uf_reader_free(uf_reader *reader);

/* Adds to the list what was read in another way. UF_MEMORY. */
UF_MUST_USE uf_status uf_note_input(uf_reader *reader, uf_run_input input, uf_error *error);

/* The first page of an image file, as it is. */
UF_MUST_USE uf_status uf_read_image(uf_reader *reader, const char *role, const char *path, uf_plane *plane,
                                    uf_image_info *info, uf_error *error);

/* An image of one page that goes with another and must have its size; a path of NULL leaves the plane empty. */
UF_MUST_USE uf_status uf_read_companion(uf_reader *reader, const char *role, const char *path, uf_plane like,
                                        uf_plane *plane, uf_error *error);

/* Reads the pages of one channel and corrects them by the settings' dark, flat and defects, which are given back to the
 * arena. `page` from 1 is the one page wanted of a file of any number; 0: the file has `count` pages, more than one for the
 * near channel of a series only. *pixel_um is what the file says, NaN when nothing. */
UF_MUST_USE uf_status uf_read_channel(uf_reader *reader, uf_channel_name which, const char *path, int page,
                                      uf_channel *pages, int count, double *pixel_um, uf_error *error);

#endif
