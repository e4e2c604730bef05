/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Raw frames of a list of files, every page of a file being a frame, in their order. */
#ifndef UF_RUN_FRAMES_H
#define UF_RUN_FRAMES_H

#include "run/read_channel.h"

typedef struct uf_frame_list {
    const char *const *paths;
    int count;
    const char *role; /* "dark frame", for the list of inputs */
} uf_frame_list;

/* Where the next frame is. Zeroed it stands before the first. */
typedef struct uf_frame_place {
    int file, page, pages; /* pages of that file, once known */
    char name[512];        /* of the frame read last, for messages: "dark.tif, page 3" or "dark.tif" */
} uf_frame_place;

/* The next frame into a plane of the arena; *found is 0 after the last one. UF_INPUT as uf_image_read. */
UF_MUST_USE uf_status uf_next_frame(uf_reader *reader, const uf_frame_list *list, uf_frame_place *place,
                                    uf_plane *frame, int *found, uf_error *error);

#endif
