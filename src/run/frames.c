/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/frames.h"

#include <stdio.h>

uf_status uf_next_frame(uf_reader *reader, const uf_frame_list *list, uf_frame_place *place, uf_plane *frame,
                        int *found, uf_error *error)
{
    uf_image_info info;
    uf_status status;
    *found = 0;
    if (place->page > 0 && place->page == place->pages) {
        place->file++;
        place->page = 0;
    }
    if (place->file >= list->count)
        return UF_OK;
    const char *path = list->paths[place->file];
    if (place->page == 0) {
        status = uf_read_image(reader, list->role, path, frame, &info, error);
        place->pages = status == UF_OK ? info.pages : 1;
    } else
        status = uf_image_read(reader->work, path, place->page, NULL, frame, NULL, error);
    place->page++;
    if (place->pages > 1)
        (void)snprintf(place->name, sizeof place->name, "%.400s, page %d", path, place->page);
    else
        (void)snprintf(place->name, sizeof place->name, "%.400s", path);
    *found = status == UF_OK;
    return status;
}
